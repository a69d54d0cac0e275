//go:build unix

package postgres

import (
	"strings"
	"testing"
	"time"
)

func TestOpen(t *testing.T) {
	t.Parallel()
	s := start(t, Options{Dir: ready(t), NoFsync: true})
	tests := []struct {
		name    string
		params  string
		options PoolOptions
		want    map[string]string // of SHOW
		conns   int32
		life    time.Duration
	}{
		{"defaults", "", PoolOptions{}, map[string]string{
			"application_name": "lampward", "statement_timeout": "30s", "lock_timeout": "10s",
			"idle_in_transaction_session_timeout": "1min",
		}, 0, 5 * time.Minute},
		{"options", "", PoolOptions{
			ApplicationName: "plan", MaxConns: 3, StatementTimeout: 2 * time.Second, LockTimeout: time.Nanosecond,
			IdleInTransactionTimeout: 90 * time.Second, MaxConnLifetime: time.Hour,
		}, map[string]string{
			"application_name": "plan", "statement_timeout": "2s", "lock_timeout": "1ms",
			"idle_in_transaction_session_timeout": "90s",
		}, 3, time.Hour},
		{"the URL goes first", "&application_name=url&pool_max_conns=2&statement_timeout=7000&pool_max_conn_lifetime=1m",
			PoolOptions{ApplicationName: "plan", MaxConns: 3, StatementTimeout: time.Second, MaxConnLifetime: time.Hour},
			map[string]string{"application_name": "url", "statement_timeout": "7s", "lock_timeout": "10s"}, 2, time.Minute},
		{"none sent", "", PoolOptions{StatementTimeout: -1, LockTimeout: -1, IdleInTransactionTimeout: -1}, map[string]string{
			"statement_timeout": "0", "lock_timeout": "0", "idle_in_transaction_session_timeout": "0",
		}, 0, 5 * time.Minute},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			t.Parallel()
			pool, err := Open(t.Context(), s.URL()+tt.params, tt.options)
			if err != nil {
				t.Fatal(err)
			}
			defer pool.Close()
			for name, want := range tt.want {
				var got string
				if err := pool.QueryRow(t.Context(), "SHOW "+name).Scan(&got); err != nil {
					t.Fatal(err)
				}
				if got != want {
					t.Errorf("%s = %s, want %s", name, got, want)
				}
			}
			config := pool.Config()
			if tt.conns != 0 && config.MaxConns != tt.conns {
				t.Errorf("MaxConns = %d, want %d", config.MaxConns, tt.conns)
			}
			if config.MaxConns < 2 || config.MaxConns > 50 {
				t.Errorf("MaxConns = %d, want 2 to 50", config.MaxConns)
			}
			if config.MaxConnLifetime != tt.life {
				t.Errorf("MaxConnLifetime = %v, want %v", config.MaxConnLifetime, tt.life)
			}
		})
	}
}

func TestOpenFailureHoldsNoPassword(t *testing.T) {
	t.Parallel()
	s := start(t, Options{Dir: ready(t), NoFsync: true})
	for name, url := range map[string]string{
		"no URL":         "",
		"not a URL":      "postgres://lampward:s3cret@[host/db",
		"bad option":     s.URL() + "&pool_max_conns=many",
		"wrong password": strings.Replace(s.URL(), s.password, "s3cret", 1),
		"no database":    s.DatabaseURL("elsewhere"),
		"no server":      strings.Replace(s.URL(), "port=5432", "port=5433", 1),
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			pool, err := Open(t.Context(), url, PoolOptions{})
			if err == nil {
				pool.Close()
				t.Fatal("it opens")
			}
			for _, secret := range []string{"s3cret", s.password} {
				if strings.Contains(err.Error(), secret) {
					t.Errorf("error %q holds the password", err)
				}
			}
		})
	}
}
