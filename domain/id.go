// Package domain holds what every room of the records needs: identifiers, errors that are safe to show, a scope that
// ties a transaction to one building, and tables that map a struct to its columns.
package domain

import (
	"encoding/hex"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5/pgtype"
)

// ID is a UUIDv7 (RFC 9562). The zero ID means "none given".
type ID [16]byte

// NewID returns a new identifier; identifiers made later in one process sort later.
func NewID() ID { return ID(uuid.Must(uuid.NewV7())) }

// ParseID reads the canonical 36-character form in either case. It fails with Invalid for anything else.
func ParseID(s string) (ID, error) {
	var id ID
	if err := id.UnmarshalText([]byte(s)); err != nil {
		return ID{}, err
	}
	return id, nil
}

// IsZero reports whether id is "none given".
func (id ID) IsZero() bool { return id == ID{} }

// String returns the canonical lower-case form.
func (id ID) String() string {
	b := id.text()
	return string(b[:])
}

// MarshalText writes the canonical lower-case form.
func (id ID) MarshalText() ([]byte, error) {
	b := id.text()
	return b[:], nil
}

func (id ID) text() (b [36]byte) {
	hex.Encode(b[0:8], id[0:4])
	hex.Encode(b[9:13], id[4:6])
	hex.Encode(b[14:18], id[6:8])
	hex.Encode(b[19:23], id[8:10])
	hex.Encode(b[24:36], id[10:16])
	b[8], b[13], b[18], b[23] = '-', '-', '-', '-'
	return b
}

// UnmarshalText reads the canonical form. It fails with Invalid for anything else.
func (id *ID) UnmarshalText(b []byte) error {
	bad := func() error {
		return Invalidf("%.40q is not a UUID such as 0192f0c1-2345-7abc-8def-0123456789ab", b)
	}
	if len(b) != 36 || b[8] != '-' || b[13] != '-' || b[18] != '-' || b[23] != '-' {
		return bad()
	}
	var out ID
	at := 0
	for _, part := range [5][2]int{{0, 8}, {9, 13}, {14, 18}, {19, 23}, {24, 36}} {
		n, err := hex.Decode(out[at:], b[part[0]:part[1]])
		if err != nil {
			return bad()
		}
		at += n
	}
	*id = out
	return nil
}

// UUIDValue lets pgx write an ID without reflection.
func (id ID) UUIDValue() (pgtype.UUID, error) { return pgtype.UUID{Bytes: id, Valid: true}, nil }

// ScanUUID lets pgx read an ID without reflection; NULL reads as the zero ID.
func (id *ID) ScanUUID(v pgtype.UUID) error {
	*id = v.Bytes
	return nil
}

// IDs turns identifiers into the form pgx sends as an array fastest.
func IDs(ids []ID) []pgtype.UUID {
	out := make([]pgtype.UUID, len(ids))
	for i, id := range ids {
		out[i] = pgtype.UUID{Bytes: id, Valid: true}
	}
	return out
}
