package domain

import (
	"context"
	"errors"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"
	"github.com/jackc/pgx/v5/pgxpool"
)

// Queryer is a pool or a transaction.
type Queryer interface {
	Exec(ctx context.Context, sql string, args ...any) (pgconn.CommandTag, error)
	Query(ctx context.Context, sql string, args ...any) (pgx.Rows, error)
	QueryRow(ctx context.Context, sql string, args ...any) pgx.Row
	CopyFrom(ctx context.Context, table pgx.Identifier, columns []string, src pgx.CopyFromSource) (int64, error)
	SendBatch(ctx context.Context, b *pgx.Batch) pgx.BatchResults
}

// Actor is who acts: a person, an api_key, a command on the machine, or a job. Records keep the id only.
type Actor struct {
	Kind string `json:"kind"` // person, api_key, command, job
	ID   ID     `json:"id"`   // zero for a command or a job
}

// Scope ties a connection to one building, an actor and a time. Every query on a building's rows takes a Scope and
// names Building, so each statement stays on the one shard that holds that building. SQL uses At, never now().
// An estate act has the zero Building.
type Scope struct {
	Queryer
	Building ID
	By       Actor
	At       time.Time

	end *ending
}

// ending is what is done last in a transaction, once each.
type ending struct {
	kept map[any]any
	do   []func(context.Context, Scope) error
}

// On returns a scope for reading outside a transaction.
func On(db Queryer, building ID, by Actor, at time.Time) Scope {
	return Scope{Queryer: db, Building: building, By: by, At: at.UTC()}
}

// In runs f in a transaction on one building and commits if f returns nil. It starts over, at most five times, where
// the database broke a deadlock, so f must set what it returns afresh each time.
func In(ctx context.Context, db *pgxpool.Pool, building ID, by Actor, at time.Time, f func(Scope) error) error {
	var err error
	for range 5 {
		err = pgx.BeginFunc(ctx, db, func(tx pgx.Tx) error {
			s := Scope{Queryer: tx, Building: building, By: by, At: at.UTC().Truncate(time.Microsecond), end: &ending{kept: map[any]any{}}}
			if err := f(s); err != nil {
				return err
			}
			return s.finish(ctx)
		})
		pg, ok := errors.AsType[*pgconn.PgError](err)
		if !ok || (pg.Code != "40P01" && pg.Code != "40001") {
			break
		}
	}
	return Classify(err, "record")
}

// Within runs f on another building in s's transaction. What f records is written to that building's chain when f ends;
// what s records, at the end of the transaction.
func Within(ctx context.Context, s Scope, building ID, f func(Scope) error) error {
	inner := s
	inner.Building, inner.end = building, &ending{kept: map[any]any{}}
	if err := f(inner); err != nil {
		return err
	}
	return inner.finish(ctx)
}

// Writable reports whether s belongs to a transaction opened by In.
func (s Scope) Writable() bool { return s.end != nil }

// Keep returns the value kept under key for the length of the transaction, making it the first time. atEnd, if not
// nil, then runs once, just before the commit: rows that must be written last (audit, events, the building's head)
// are gathered in the value and written there.
func Keep[T any](s Scope, key any, make func() *T, atEnd func(context.Context, Scope, *T) error) *T {
	if v, ok := s.end.kept[key]; ok {
		return v.(*T)
	}
	v := make()
	s.end.kept[key] = v
	if atEnd != nil {
		s.end.do = append(s.end.do, func(ctx context.Context, s Scope) error { return atEnd(ctx, s, v) })
	}
	return v
}

func (s Scope) finish(ctx context.Context) error {
	for i := 0; i < len(s.end.do); i++ {
		if err := s.end.do[i](ctx, s); err != nil {
			return err
		}
	}
	return nil
}
