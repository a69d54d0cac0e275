package postgres

import (
	"context"
	"errors"
	"fmt"
	"runtime"
	"strconv"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgtype"
	"github.com/jackc/pgx/v5/pgxpool"
)

// PoolOptions are the limits of a connection pool. A zero value takes the default named beside it, and what the
// connection URL itself says (pool_max_conns, application_name, statement_timeout ...) goes before both.
// A negative timeout leaves the server's own, and sends none: behind a connection pooler that refuses such settings.
type PoolOptions struct {
	ApplicationName string // shown by the server for each connection; "lampward"
	MaxConns        int32  // 4 a processor, at least 8 and at most 50
	MinConns        int32  // kept open when idle; 0

	StatementTimeout         time.Duration // 30 s
	LockTimeout              time.Duration // 10 s
	IdleInTransactionTimeout time.Duration // 60 s

	// MaxConnLifetime bounds how long a connection may stay on a server that has become a standby, or keep a node out
	// of a balanced set: 5 minutes, spread by up to half a minute so that not all are renewed at once.
	MaxConnLifetime time.Duration

	// Tracer, when set, sees every query.
	Tracer pgx.QueryTracer
}

// Open makes a pool of connections to the database and tries one. The pool opens further ones as they are needed and
// is to be closed by the caller. An error names host and database, never the password.
func Open(ctx context.Context, url string, o PoolOptions) (*pgxpool.Pool, error) {
	config, err := o.config(url)
	if err != nil {
		return nil, err
	}
	pool, err := pgxpool.NewWithConfig(ctx, config)
	if err != nil {
		return nil, fmt.Errorf("open the database: %w", err)
	}
	if err := pool.Ping(ctx); err != nil {
		pool.Close()
		return nil, fmt.Errorf("open the database: %w", err)
	}
	return pool, nil
}

// config merges the URL, the options and the defaults.
func (o PoolOptions) config(url string) (*pgxpool.Config, error) {
	config, err := parseURL(url)
	if err != nil {
		return nil, err
	}
	says := func(key string) bool { return strings.Contains(url, key+"=") }
	if !says("pool_max_conns") {
		config.MaxConns = o.MaxConns
		if config.MaxConns == 0 {
			config.MaxConns = min(max(8, int32(4*runtime.GOMAXPROCS(0))), 50)
		}
	}
	if !says("pool_min_conns") {
		config.MinConns = min(o.MinConns, config.MaxConns)
	}
	if !says("pool_max_conn_lifetime") {
		config.MaxConnLifetime = o.MaxConnLifetime
		if config.MaxConnLifetime == 0 {
			config.MaxConnLifetime = 5 * time.Minute
		}
		config.MaxConnLifetimeJitter = config.MaxConnLifetime / 10
	}
	if !says("pool_max_conn_idle_time") {
		config.MaxConnIdleTime = 2 * time.Minute
	}
	if config.ConnConfig.ConnectTimeout == 0 || !says("connect_timeout") {
		config.ConnConfig.ConnectTimeout = 5 * time.Second
	}
	config.ConnConfig.Tracer = o.Tracer
	// Times read are UTC on every machine, as they are written, whatever its own zone is.
	config.AfterConnect = func(_ context.Context, conn *pgx.Conn) error {
		conn.TypeMap().RegisterType(&pgtype.Type{Name: "timestamptz", OID: pgtype.TimestamptzOID, Codec: &pgtype.TimestamptzCodec{ScanLocation: time.UTC}})
		return nil
	}

	params := config.ConnConfig.RuntimeParams
	if params["application_name"] == "" {
		params["application_name"] = o.ApplicationName
		if o.ApplicationName == "" {
			params["application_name"] = "lampward"
		}
	}
	for _, t := range []struct {
		name            string
		given, standard time.Duration
	}{
		{"statement_timeout", o.StatementTimeout, 30 * time.Second},
		{"lock_timeout", o.LockTimeout, 10 * time.Second},
		{"idle_in_transaction_session_timeout", o.IdleInTransactionTimeout, time.Minute},
	} {
		if t.given == 0 {
			t.given = t.standard
		}
		if _, ok := params[t.name]; !ok && t.given > 0 {
			// Below a millisecond would become 0, which means no limit.
			params[t.name] = strconv.FormatInt(max(1, t.given.Milliseconds()), 10)
		}
	}
	return config, nil
}

// parseURL reads a connection URL, or "key=value" pairs, with the pool's own keys in it.
func parseURL(url string) (*pgxpool.Config, error) {
	if strings.TrimSpace(url) == "" {
		return nil, errors.New("no database URL given")
	}
	config, err := pgxpool.ParseConfig(url)
	if err != nil {
		return nil, fmt.Errorf("database URL: %w", err)
	}
	return config, nil
}
