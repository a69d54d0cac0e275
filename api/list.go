package api

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"fmt"
	"io"
	"net/url"
	"reflect"
	"slices"
	"strconv"
	"strings"
	"time"

	"lampward/domain"
)

var listMedia = []string{jsonMedia, ndjsonMedia, csvMedia}

const (
	defaultPage = 100
	// piece is how many rows of a streamed list are read and sent at a time. Between pieces no connection to the
	// database is held, so a slow reader holds up nobody; a row changed meanwhile is shown as it is when reached.
	piece = domain.MaxPage
)

// filterKind says how the text of a filter is read.
type filterKind uint8

const (
	textFilter filterKind = iota
	idFilter
	boolFilter
	intFilter
	timeFilter
	dateFilter
)

// filter narrows a list by the query parameter Name.
type filter struct {
	Name   string
	Kind   filterKind
	Column string   // Name where empty
	Op     string   // as in domain.Match; "absent" takes true or false and asks whether the column is empty
	Words  []string // the only texts allowed, where given
}

// query is what the parameters of a list ask for.
type query struct {
	page    domain.Page
	limited bool // a limit was given
	matches []domain.Match
	fields  []string // of ?fields=; all where nil
}

// parseQuery reads the parameters of a list. Every wrong one is told at once.
func parseQuery(values url.Values, filters []filter, columns []projected, retires bool) (query, error) {
	q := query{page: domain.Page{Limit: defaultPage}}
	var bad []domain.Field
	tell := func(name, format string, a ...any) {
		bad = append(bad, domain.Field{Pointer: "/" + name, Detail: fmt.Sprintf(format, a...)})
	}
	withRetired := false
	names := make([]string, 0, len(values))
	for name := range values {
		names = append(names, name)
	}
	slices.Sort(names)
	for _, name := range names {
		given := values[name]
		if len(given) != 1 {
			tell(name, "must be given once")
			continue
		}
		v := given[0]
		switch name {
		case "limit":
			n, err := strconv.Atoi(v)
			if err != nil || n < 1 || n > domain.MaxPage {
				tell(name, "must be a whole number from 1 to %d", domain.MaxPage)
			}
			q.page.Limit, q.limited = n, true
			continue
		case "cursor":
			q.page.Cursor = v
			continue
		case "fields":
			for f := range strings.SplitSeq(v, ",") {
				if !slices.ContainsFunc(columns, func(p projected) bool { return p.name == f }) {
					tell(name, "%.60q is not a field here", f)
				}
				q.fields = append(q.fields, f)
			}
			continue
		case "with_retired":
			if retires {
				var ok bool
				if withRetired, ok = parseBool(v); !ok {
					tell(name, "must be true or false")
				}
				continue
			}
		}
		i := slices.IndexFunc(filters, func(f filter) bool { return f.Name == name })
		if i < 0 {
			tell(name, "is not a parameter of this list")
			continue
		}
		m, why := filters[i].match(v)
		if why != "" {
			tell(name, "%s", why)
			continue
		}
		q.matches = append(q.matches, m)
	}
	if retires && !withRetired {
		q.matches = append(q.matches, domain.Match{Column: "retired_at"})
	}
	if bad != nil {
		return q, &domain.Error{Kind: domain.Invalid, Msg: "the query is not valid", Fields: bad}
	}
	return q, nil
}

func parseBool(v string) (value, ok bool) { return v == "true", v == "true" || v == "false" }

// match reads one value; why says what is wrong with it.
func (f filter) match(v string) (m domain.Match, why string) {
	m = domain.Match{Column: f.Column, Op: f.Op}
	if m.Column == "" {
		m.Column = f.Name
	}
	switch f.Kind {
	case idFilter:
		id, err := domain.ParseID(v)
		if err != nil {
			return m, "must be an identifier (UUID)"
		}
		m.Value = id
	case boolFilter:
		b, ok := parseBool(v)
		if !ok {
			return m, "must be true or false"
		}
		m.Value = b
	case intFilter:
		n, err := strconv.ParseInt(v, 10, 64)
		if err != nil {
			return m, "must be a whole number"
		}
		m.Value = n
	case timeFilter:
		t, err := time.Parse(time.RFC3339Nano, v)
		if err != nil {
			return m, "must be a time with its offset, such as 2026-03-01T08:30:00Z"
		}
		m.Value = t
	case dateFilter:
		d := domain.Date(v)
		if !d.Valid() {
			return m, "must be a date such as 2026-03-31"
		}
		m.Value = d
	default:
		quoted, err := json.Marshal(v)
		if err != nil || forbidden(quoted[1:len(quoted)-1], false) != "" || !strings.EqualFold(strings.ToValidUTF8(v, ""), v) {
			return m, "holds characters that no record holds"
		}
		if f.Words != nil && !slices.Contains(f.Words, v) {
			return m, "must be one of " + strings.Join(f.Words, ", ")
		}
		m.Value = v
	}
	return m, ""
}

// list answers one page, or (as NDJSON or CSV, without a limit) the whole list piece by piece.
func (r *resource[T]) list(c *call) (reply, error) {
	values, err := url.ParseQuery(c.r.URL.RawQuery)
	if err != nil {
		return reply{}, refuse(malformed, "the query of the address is not formed as application/x-www-form-urlencoded")
	}
	q, err := parseQuery(values, r.Filters, r.columns, r.Retire != nil)
	if err != nil {
		return reply{}, err
	}
	if c.media != jsonMedia && !q.limited {
		q.page.Limit = piece
	}
	var rows []T
	var next string
	fetch := func() error {
		return c.within(func() (err error) {
			rows, next, err = r.List(c, c.read(), q.page, q.matches)
			return err
		})
	}
	if err := fetch(); err != nil {
		return reply{}, err
	}
	w := rowWriter{columns: chosen(r.columns, q.fields), all: q.fields == nil, media: c.media}
	var b bytes.Buffer
	if err := writeRows(&w, &b, rows, true); err != nil {
		return reply{}, err
	}
	out := reply{media: c.media}
	if c.media == csvMedia {
		out.media = "text/csv; charset=utf-8; header=present"
	}
	if next == "" || c.media == jsonMedia || q.limited {
		w.end(&b)
		out.raw = b.Bytes()
		if next != "" {
			values.Set("cursor", next)
			values.Set("limit", strconv.Itoa(q.page.Limit))
			out.header = append(out.header, [2]string{"Link", "<" + c.r.URL.EscapedPath() + "?" + values.Encode() + `>; rel="next"`})
		}
		return out, nil
	}
	out.stream = func(to io.Writer) error {
		for {
			if _, err := to.Write(b.Bytes()); err != nil {
				return err
			}
			if next == "" {
				return nil
			}
			if f, ok := to.(flusher); ok {
				if err := f.Flush(); err != nil {
					return err
				}
			}
			if err := c.ctx.Err(); err != nil {
				return err
			}
			b.Reset()
			q.page.Cursor = next
			if err := fetch(); err != nil {
				return err
			}
			if err := writeRows(&w, &b, rows, false); err != nil {
				return err
			}
		}
	}
	return out, nil
}

// projected is one member of a row's JSON, or one column of its CSV.
type projected struct {
	name  string
	path  []int
	empty bool // left out of JSON where it is empty (omitempty)
	zero  bool // left out of JSON where it is its zero value (omitzero): an empty list is not
	head  bool // always shown
}

var headNames = map[string]bool{"building_id": true, "id": true, "version": true, "created_at": true, "updated_at": true, "retired_at": true}

// projectedOf lists the JSON members of T, embedded structs included, in their order.
func projectedOf[T any]() []projected {
	var out []projected
	var add func(t reflect.Type, path []int)
	add = func(t reflect.Type, path []int) {
		for i := range t.NumField() {
			f := t.Field(i)
			at := append(slices.Clone(path), i)
			name, options, _ := strings.Cut(f.Tag.Get("json"), ",")
			if f.Anonymous && name == "" {
				add(f.Type, at)
				continue
			}
			if name == "-" || name == "" {
				continue
			}
			out = append(out, projected{name, at, strings.Contains(options, "omitempty"), strings.Contains(options, "omitzero"), headNames[name]})
		}
	}
	add(reflect.TypeFor[T](), nil)
	return out
}

// chosen keeps the columns that were asked for, and the head.
func chosen(columns []projected, fields []string) []projected {
	if fields == nil {
		return columns
	}
	var out []projected
	for _, p := range columns {
		if p.head || slices.Contains(fields, p.name) {
			out = append(out, p)
		}
	}
	return out
}

// rowWriter writes rows in one of the forms of a list.
type rowWriter struct {
	columns []projected
	all     bool
	media   string
	csv     *csv.Writer
	cells   []string
	some    bool
}

func writeRows[T any](w *rowWriter, b *bytes.Buffer, rows []T, first bool) error {
	switch {
	case w.media == csvMedia:
		w.csv = csv.NewWriter(b)
		w.csv.UseCRLF = true // RFC 4180
		if first {
			w.cells = make([]string, len(w.columns))
			for i, p := range w.columns {
				w.cells[i] = p.name
			}
			if err := w.csv.Write(w.cells); err != nil {
				return err
			}
		}
	case w.media == jsonMedia && first:
		b.WriteString(`{"items":[`)
	}
	for i := range rows {
		if err := w.row(b, reflect.ValueOf(&rows[i]).Elem()); err != nil {
			return err
		}
	}
	if w.csv != nil {
		w.csv.Flush()
		return w.csv.Error()
	}
	return nil
}

func (w *rowWriter) end(b *bytes.Buffer) {
	if w.media == jsonMedia {
		b.WriteString("]}\n")
	}
}

func (w *rowWriter) row(b *bytes.Buffer, v reflect.Value) error {
	if w.csv != nil {
		for i, p := range w.columns {
			cell, err := cellOf(v.FieldByIndex(p.path))
			if err != nil {
				return err
			}
			w.cells[i] = cell
		}
		return w.csv.Write(w.cells)
	}
	if w.media == jsonMedia && w.some {
		b.WriteByte(',')
	}
	w.some = true
	if w.all {
		enc := json.NewEncoder(b)
		enc.SetEscapeHTML(false)
		if err := enc.Encode(v.Addr().Interface()); err != nil {
			return err
		}
		if w.media == jsonMedia {
			b.Truncate(b.Len() - 1) // the encoder's line feed
		}
		return nil
	}
	b.WriteByte('{')
	some := false
	for _, p := range w.columns {
		f := v.FieldByIndex(p.path)
		if p.empty && empty(f) || p.zero && f.IsZero() {
			continue
		}
		raw, err := json.Marshal(f.Interface())
		if err != nil {
			return err
		}
		if some {
			b.WriteByte(',')
		}
		some = true
		b.WriteByte('"')
		b.WriteString(p.name)
		b.WriteString(`":`)
		b.Write(raw)
	}
	b.WriteByte('}')
	if w.media == ndjsonMedia {
		b.WriteByte('\n')
	}
	return nil
}

// empty is what omitempty leaves out: a struct never is.
func empty(v reflect.Value) bool {
	switch v.Kind() {
	case reflect.Slice, reflect.Map:
		return v.Len() == 0
	case reflect.Struct, reflect.Array:
		return false
	}
	return v.IsZero()
}

// cellOf is a value as a cell: text as it is, numbers and times as in JSON, nothing where absent, and JSON for what
// has parts. Text that a spreadsheet would take for a formula gets an apostrophe in front.
func cellOf(v reflect.Value) (string, error) {
	for v.Kind() == reflect.Pointer {
		if v.IsNil() {
			return "", nil
		}
		v = v.Elem()
	}
	if (v.Kind() == reflect.Slice || v.Kind() == reflect.Map) && v.IsNil() {
		return "", nil
	}
	if v.Kind() == reflect.String {
		s := v.String()
		if s != "" && strings.IndexByte("=+-@", s[0]) >= 0 && !number(s) {
			return "'" + s, nil
		}
		return s, nil
	}
	raw, err := json.Marshal(v.Interface())
	if err != nil {
		return "", err
	}
	var s string
	if len(raw) > 0 && raw[0] == '"' && json.Unmarshal(raw, &s) == nil {
		return s, nil
	}
	return string(raw), nil
}

func number(s string) bool {
	_, err := strconv.ParseFloat(s, 64)
	return err == nil
}
