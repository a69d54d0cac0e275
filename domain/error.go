package domain

import (
	"context"
	"errors"
	"fmt"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"
)

// Kind says what sort of failure an Error is. The zero Kind is Internal: its message is never shown.
type Kind int

// Kinds of failure.
const (
	Internal    Kind = iota
	Invalid          // the request itself is wrong; Fields say where
	NotFound         // there is no such record, or none the caller may know of
	Conflict         // the record's state, or another record, forbids it
	Stale            // somebody else changed it first
	Denied           // the caller's role is too small
	Unavailable      // try again later
	Unsafe           // a proposal that would create or worsen a blocking finding
)

// Field names one wrong value by its JSON pointer (RFC 6901) and says what was expected.
type Field struct {
	Pointer string `json:"pointer"`
	Detail  string `json:"detail"`
}

// Error is a failure with a message that may be shown to a person. Err, if any, is for the log only.
type Error struct {
	Kind   Kind
	Msg    string
	Fields []Field
	More   any // shown beside the message: findings and options of an Unsafe proposal
	Err    error
}

// Error returns the message and the cause.
func (e *Error) Error() string {
	s := e.Msg
	for _, f := range e.Fields {
		s += "; " + f.Pointer + " " + f.Detail
	}
	if e.Err != nil {
		s += ": " + e.Err.Error()
	}
	return s
}

// Unwrap returns the cause.
func (e *Error) Unwrap() error { return e.Err }

// Invalidf returns an Invalid error.
func Invalidf(format string, a ...any) *Error {
	return &Error{Kind: Invalid, Msg: fmt.Sprintf(format, a...)}
}

// NotFoundf returns a NotFound error.
func NotFoundf(format string, a ...any) *Error {
	return &Error{Kind: NotFound, Msg: fmt.Sprintf(format, a...)}
}

// Conflictf returns a Conflict error.
func Conflictf(format string, a ...any) *Error {
	return &Error{Kind: Conflict, Msg: fmt.Sprintf(format, a...)}
}

// KindOf returns the kind of the first Error in err's chain, Internal if there is none.
func KindOf(err error) Kind {
	if e, ok := errors.AsType[*Error](err); ok {
		return e.Kind
	}
	return Internal
}

// Classify turns an error of the database into an Error by its SQLSTATE alone: names of constraints are not
// reliable on a distributed table. what names the record in words.
func Classify(err error, what string) error {
	if err == nil {
		return nil
	}
	if _, ok := errors.AsType[*Error](err); ok {
		return err
	}
	if errors.Is(err, pgx.ErrNoRows) {
		return &Error{Kind: NotFound, Msg: "there is no such " + what}
	}
	if errors.Is(err, context.Canceled) || errors.Is(err, context.DeadlineExceeded) {
		return &Error{Kind: Unavailable, Msg: "the request was given up before it was done", Err: err}
	}
	pg, ok := errors.AsType[*pgconn.PgError](err)
	if !ok {
		if pgconn.Timeout(err) {
			return &Error{Kind: Unavailable, Msg: "the database did not answer in time", Err: err}
		}
		if _, ok := errors.AsType[*pgconn.ConnectError](err); ok {
			return &Error{Kind: Unavailable, Msg: "the database cannot be reached", Err: err}
		}
		return fmt.Errorf("%s: %w", what, err)
	}
	switch {
	case pg.Code == "23505":
		return &Error{Kind: Conflict, Msg: "another " + what + " already has this identifier, tag or code", Err: err}
	case pg.Code == "23503":
		return &Error{Kind: Invalid, Msg: what + " names a record that does not exist here, or is still in use", Err: err}
	case pg.Code == "23514", pg.Code == "23502", pg.Code == "22003", pg.Code == "22P02", pg.Code == "22P05", pg.Code == "22001", pg.Code == "22021", pg.Code == "22007", pg.Code == "22008":
		return &Error{Kind: Invalid, Msg: what + " holds a value that is outside what the record allows", Err: err}
	case pg.Code == "40001", pg.Code == "40P01":
		return &Error{Kind: Conflict, Msg: "others were changing the same records; try again", Err: err}
	case pg.Code == "55P03", pg.Code == "57014", pg.Code[:2] == "53", pg.Code[:2] == "08", pg.Code[:3] == "57P":
		return &Error{Kind: Unavailable, Msg: "the database is busy; try again", Err: err}
	}
	return fmt.Errorf("%s: %w", what, err)
}

// FieldsOf returns the wrong fields that the first Error in err's chain names.
func FieldsOf(err error) []Field {
	if e, ok := errors.AsType[*Error](err); ok {
		return e.Fields
	}
	return nil
}
