package domain

import (
	"encoding/base64"
	"encoding/json"
)

// Page asks for one page of a list: at most Limit rows after the row whose key Cursor holds.
type Page struct {
	Limit  int    // 1..1000
	Cursor string // as the previous page gave it; empty for the first
}

// MaxPage is the most rows a page holds.
const MaxPage = 1000

// Rows returns how many rows the page may hold: Limit, brought into 1..MaxPage.
func (p Page) Rows() int { return min(max(p.Limit, 1), MaxPage) }

// EncodeCursor makes an opaque cursor of the last row's key.
func EncodeCursor(key ...any) string {
	b, err := json.Marshal(key)
	if err != nil {
		panic(err) // a key is made of strings, numbers and ids
	}
	return base64.RawURLEncoding.EncodeToString(b)
}

// DecodeCursor reads a cursor into the parts of a key. It fails with Invalid for a cursor this service did not make.
func DecodeCursor(cursor string, key ...any) error {
	bad := &Error{Kind: Invalid, Msg: "the cursor is not one this list gave", Fields: []Field{{"/cursor", "must be taken from a previous page's next link"}}}
	b, err := base64.RawURLEncoding.DecodeString(cursor)
	if err != nil {
		return bad
	}
	var parts []json.RawMessage
	if json.Unmarshal(b, &parts) != nil || len(parts) != len(key) {
		return bad
	}
	for i := range key {
		if string(parts[i]) == "null" || json.Unmarshal(parts[i], key[i]) != nil {
			return bad
		}
	}
	return nil
}
