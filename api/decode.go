package api

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"reflect"
	"strconv"
	"strings"
	"time"
	"unicode/utf8"

	"lampward/domain"
)

const (
	deepest       = 32  // levels of a body
	longestNumber = 64  // characters of a number
	mostTold      = 100 // field errors gathered from one body before reading gives up
)

// decodeJSON reads one JSON value into a T and is strict about it: every field that is unknown, named twice, of the
// wrong type or out of range, and every text with characters that no record may hold, is told at once by its pointer.
// It fails with malformed where data is not JSON and with Invalid otherwise.
func decodeJSON[T any](data []byte) (T, error) {
	var v T
	if err := syntax(data); err != nil {
		return v, err
	}
	if err := inspect(data, shapeOf(reflect.TypeFor[T]()), false); err != nil {
		return v, err
	}
	if err := json.Unmarshal(data, &v); err != nil {
		return v, unexpected(err)
	}
	inUTC(reflect.ValueOf(&v).Elem())
	return v, nil
}

// inUTC turns every time in v into UTC at the database's precision, as it will be read again: the same request sent
// twice then compares equal, and the first answer is what later ones say.
func inUTC(v reflect.Value) {
	switch v.Kind() {
	case reflect.Pointer:
		if !v.IsNil() {
			inUTC(v.Elem())
		}
	case reflect.Slice:
		if k := v.Type().Elem().Kind(); k != reflect.Struct && k != reflect.Pointer {
			return
		}
		for i := range v.Len() {
			inUTC(v.Index(i))
		}
	case reflect.Struct:
		if t, ok := v.Addr().Interface().(*time.Time); ok {
			*t = t.UTC().Truncate(time.Microsecond)
			return
		}
		for i := range v.NumField() {
			if f := v.Field(i); f.CanSet() {
				inUTC(f)
			}
		}
	}
}

// unexpected tells of a value that inspect let pass and encoding/json did not.
func unexpected(err error) error {
	bad := &domain.Error{Kind: domain.Invalid, Msg: "the body is not valid", Err: err}
	if t, ok := errors.AsType[*json.UnmarshalTypeError](err); ok {
		bad.Fields = []domain.Field{{Pointer: "/" + strings.ReplaceAll(t.Field, ".", "/"), Detail: "is of the wrong type"}}
	}
	return bad
}

// syntax fails with malformed where data is not exactly one JSON value.
func syntax(data []byte) error {
	if json.Valid(data) {
		return nil
	}
	if len(bytes.TrimSpace(data)) == 0 {
		return refuse(malformed, "the body is empty; a JSON value is needed")
	}
	var raw json.RawMessage
	err := json.Unmarshal(data, &raw)
	at := len(data)
	if s, ok := errors.AsType[*json.SyntaxError](err); ok {
		at = int(s.Offset)
	}
	before := data[:min(max(at-1, 0), len(data))]
	line := bytes.Count(before, []byte("\n")) + 1
	column := len(before) - bytes.LastIndexByte(before, '\n')
	r := refuse(malformed, "the body is not JSON: reading stopped at line %d, column %d", line, column)
	r.err = err
	return r
}

// inspect walks data, which is known to be JSON, beside the shape it must have. In a merge patch null may stand
// anywhere: it removes the member.
func inspect(data []byte, s *shape, patch bool) error {
	w := walker{data: data, patch: patch}
	w.value(s, false)
	if len(w.bad) == 0 {
		return nil
	}
	msg := "the body is not valid: " + strconv.Itoa(len(w.bad)) + " fields are wrong"
	if len(w.bad) == 1 {
		msg = "the body is not valid: one field is wrong"
	}
	if len(w.bad) >= mostTold {
		msg = "the body is not valid: reading stopped after " + strconv.Itoa(mostTold) + " wrong fields"
	}
	return &domain.Error{Kind: domain.Invalid, Msg: msg, Fields: w.bad}
}

type walker struct {
	data  []byte
	at    int
	depth int
	path  []byte
	bad   []domain.Field
	patch bool
}

func (w *walker) tell(format string, a ...any) {
	if len(w.bad) < mostTold {
		w.bad = append(w.bad, domain.Field{Pointer: string(w.path), Detail: fmt.Sprintf(format, a...)})
	}
}

func (w *walker) full() bool { return len(w.bad) >= mostTold }

func (w *walker) space() {
	for w.at < len(w.data) {
		switch w.data[w.at] {
		case ' ', '\t', '\n', '\r':
			w.at++
		default:
			return
		}
	}
}

var anyShape = &shape{form: anyForm}

// value checks one value and moves past it.
func (w *walker) value(s *shape, lines bool) {
	w.space()
	start := w.at
	switch c := w.data[w.at]; c {
	case 'n':
		w.at += len("null")
		switch {
		case s.form == anyForm, w.patch && w.depth > 0:
		case w.depth > 0:
			w.tell("must be %s, not null; leave it out where nobody knows it", s.want())
		default:
			w.tell("must be %s, not null", s.want())
		}
	case 't', 'f':
		if c == 't' {
			w.at += len("true")
		} else {
			w.at += len("false")
		}
		switch s.form {
		case boolForm, anyForm:
		case selfForm:
			w.self(s, w.data[start:w.at])
		default:
			w.tell("must be %s, not true or false", s.want())
		}
	case '"':
		w.text(s, lines)
	case '{':
		w.object(s)
	case '[':
		w.list(s, lines)
	default:
		w.number(s)
	}
}

// skip moves past the value that starts here without looking into it.
func (w *walker) skip() {
	depth := 0
	for {
		w.space()
		switch w.data[w.at] {
		case '{', '[':
			depth++
			w.at++
		case '}', ']':
			depth--
			w.at++
		case '"':
			w.literal()
		case ',', ':':
			w.at++
		default:
			for w.at < len(w.data) && !strings.ContainsRune(" \t\r\n,:]}", rune(w.data[w.at])) {
				w.at++
			}
		}
		if depth == 0 {
			return
		}
	}
}

// literal moves past a string and returns it with its quotes.
func (w *walker) literal() []byte {
	start := w.at
	for w.at++; ; w.at++ {
		switch w.data[w.at] {
		case '\\':
			w.at++
		case '"':
			w.at++
			return w.data[start:w.at]
		}
	}
}

func (w *walker) text(s *shape, lines bool) {
	lit := w.literal()
	if why := forbidden(lit[1:len(lit)-1], lines); why != "" {
		w.tell("%s", why)
		return
	}
	switch s.form {
	case textForm, anyForm:
	case timeForm:
		t, err := time.Parse(time.RFC3339Nano, unquote(lit))
		if err != nil || t.Year() < 1 || t.Year() > 9999 {
			w.tell("must be %s", s.want())
		}
	case selfForm:
		w.self(s, lit)
	default:
		w.tell("must be %s, not text", s.want())
	}
}

func unquote(lit []byte) string {
	if bytes.IndexByte(lit, '\\') < 0 {
		return string(lit[1 : len(lit)-1])
	}
	var v string
	if json.Unmarshal(lit, &v) != nil {
		return "" // not reached: the literal is valid JSON
	}
	return v
}

// self lets the type judge its own text; only a domain.Error of it is fit to be shown.
func (w *walker) self(s *shape, raw []byte) {
	err := s.parseSelf(raw)
	if err == nil {
		return
	}
	if e, ok := errors.AsType[*domain.Error](err); ok && e.Kind != domain.Internal {
		if len(e.Fields) == 0 {
			w.tell("%s", e.Msg)
		}
		for _, f := range e.Fields {
			if len(w.bad) < mostTold {
				w.bad = append(w.bad, domain.Field{Pointer: string(w.path) + f.Pointer, Detail: f.Detail})
			}
		}
		return
	}
	w.tell("does not have the form this field needs")
}

func (w *walker) number(s *shape) {
	start := w.at
	for w.at < len(w.data) && strings.IndexByte("+-.0123456789eE", w.data[w.at]) >= 0 {
		w.at++
	}
	lit := string(w.data[start:w.at])
	if len(lit) > longestNumber {
		w.tell("must be a number of at most %d characters", longestNumber)
		return
	}
	switch s.form {
	case anyForm:
		w.float(lit, 64)
	case floatForm:
		w.float(lit, s.bits)
	case numberForm:
		w.float(lit, 64)
	case intForm:
		if _, err := strconv.ParseInt(lit, 10, s.bits); err != nil {
			w.tell("must be %s", s.want())
		}
	case uintForm:
		if _, err := strconv.ParseUint(lit, 10, s.bits); err != nil {
			w.tell("must be %s", s.want())
		}
	case selfForm:
		w.self(s, []byte(lit))
	default:
		w.tell("must be %s, not a number", s.want())
	}
}

// float refuses what would be stored as infinite, or as zero although it is not.
func (w *walker) float(lit string, bits int) {
	v, err := strconv.ParseFloat(lit, bits)
	if err != nil || math.IsInf(v, 0) {
		w.tell("is too large to be a number here")
		return
	}
	digits, _, _ := strings.Cut(strings.ToLower(lit), "e")
	if v == 0 && strings.ContainsAny(digits, "123456789") {
		w.tell("is too close to 0 to be a number here")
	}
}

// enter goes one level down; it skips the value and returns false where that is too deep.
func (w *walker) enter() bool {
	if w.depth == deepest {
		w.tell("is nested too deeply: at most %d levels", deepest)
		w.skip()
		return false
	}
	w.depth++
	return true
}

// more moves past the comma or the closing bracket after an element and reports whether another element follows.
func (w *walker) more() bool {
	w.space()
	w.at++
	return w.data[w.at-1] == ','
}

func (w *walker) object(s *shape) {
	var elem *shape
	switch s.form {
	case objectForm:
	case mapForm:
		elem = s.elem
	case anyForm:
		elem = anyShape
	case selfForm:
		start := w.at
		w.object(anyShape)
		w.self(s, w.data[start:w.at])
		return
	default:
		w.tell("must be %s, not an object", s.want())
		w.skip()
		return
	}
	if !w.enter() {
		return
	}
	defer func() { w.depth-- }()
	w.at++
	w.space()
	if w.data[w.at] == '}' {
		w.at++
		return
	}
	var seen [4]uint64 // by member index; a struct of more than 256 fields would need more words
	names := map[string]bool(nil)
	for {
		w.space()
		lit := w.literal()
		name := unquote(lit)
		w.space()
		w.at++ // the colon
		kept := len(w.path)
		w.path = append(w.path, '/')
		w.path = escapePointer(w.path, name)
		switch m := s.members[name]; {
		case w.full():
			w.skip()
		case forbidden(lit[1:len(lit)-1], false) != "":
			w.path = w.path[:kept]
			w.tell("holds a field whose name has characters that are not allowed")
			w.skip()
		case elem != nil:
			if names == nil {
				names = map[string]bool{}
			}
			if names[name] {
				w.tell("is named twice")
				w.skip()
				break
			}
			names[name] = true
			w.value(elem, false)
		case m == nil:
			w.tell("is not a field here")
			w.skip()
		case seen[m.index>>6&3]&(1<<(m.index&63)) != 0:
			w.tell("is named twice")
			w.skip()
		default:
			seen[m.index>>6&3] |= 1 << (m.index & 63)
			w.value(m.shape, m.lines)
		}
		w.path = w.path[:kept]
		if !w.more() {
			return
		}
	}
}

func (w *walker) list(s *shape, lines bool) {
	var elem *shape
	switch s.form {
	case listForm:
		elem = s.elem
	case anyForm:
		elem = anyShape
	case selfForm:
		start := w.at
		w.list(anyShape, false)
		w.self(s, w.data[start:w.at])
		return
	default:
		w.tell("must be %s, not a list", s.want())
		w.skip()
		return
	}
	if !w.enter() {
		return
	}
	defer func() { w.depth-- }()
	w.at++
	w.space()
	n := 0
	if w.data[w.at] == ']' {
		w.at++
	} else {
		// A list is replaced whole by a merge patch, so null is no removal inside it.
		patch := w.patch
		w.patch = false
		for more := true; more; more = w.more() {
			kept := len(w.path)
			w.path = append(w.path, '/')
			w.path = strconv.AppendInt(w.path, int64(n), 10)
			if w.full() {
				w.skip()
			} else {
				w.value(elem, lines)
			}
			w.path = w.path[:kept]
			n++
		}
		w.patch = patch
	}
	if s.length > 0 && n != s.length {
		w.tell("must be %s", s.want())
	}
}

// escapePointer appends name as one reference token of RFC 6901.
func escapePointer(to []byte, name string) []byte {
	for i := range len(name) {
		switch name[i] {
		case '~':
			to = append(to, '~', '0')
		case '/':
			to = append(to, '~', '1')
		default:
			to = append(to, name[i])
		}
	}
	return to
}

// forbidden says why the inside of a JSON string may not be stored, or nothing: control characters, marks that turn
// the direction of the text around them (a tag could be made to read as another), halves of surrogate pairs and bytes
// that are not UTF-8.
func forbidden(s []byte, lines bool) string {
	plain := true
	for _, c := range s {
		if c == '\\' || c >= 0x7f {
			plain = false
			break
		}
	}
	if plain {
		return "" // JSON itself allows no raw control character
	}
	for i := 0; i < len(s); {
		r, n := rune(s[i]), 1
		switch {
		case s[i] == '\\' && s[i+1] == 'u':
			r, n = hex4(s[i+2:]), 6
			if r >= 0xd800 && r < 0xe000 {
				if r >= 0xdc00 || len(s) < i+12 || s[i+6] != '\\' || s[i+7] != 'u' {
					return "holds half of a surrogate pair"
				}
				low := hex4(s[i+8:])
				if low < 0xdc00 || low >= 0xe000 {
					return "holds half of a surrogate pair"
				}
				r, n = 0x10000+(r-0xd800)<<10+(low-0xdc00), 12
			}
		case s[i] == '\\':
			n = 2
			switch s[i+1] {
			case 'n':
				r = '\n'
			case 't':
				r = '\t'
			case 'b', 'f', 'r':
				r = 0x1f
			default:
				r = rune(s[i+1])
			}
		case s[i] >= utf8.RuneSelf:
			r, n = utf8.DecodeRune(s[i:])
			if r == utf8.RuneError && n == 1 {
				return "is not UTF-8"
			}
		}
		switch {
		case (r == '\n' || r == '\t') && lines:
		case r == '\n' || r == '\t':
			return "must be one line without tabs"
		case r < 0x20 || r >= 0x7f && r < 0xa0:
			return "holds a control character"
		case turns(r):
			return "holds a mark that changes the direction of text"
		}
		i += n
	}
	return ""
}

// turns reports whether r is an invisible mark of the bidirectional algorithm (UAX #9).
func turns(r rune) bool {
	return r == 0x61c || r == 0x200e || r == 0x200f || r >= 0x202a && r <= 0x202e || r >= 0x2066 && r <= 0x2069
}

func hex4(s []byte) (r rune) {
	for _, c := range s[:4] {
		r <<= 4
		switch {
		case c <= '9':
			r |= rune(c - '0')
		case c <= 'F':
			r |= rune(c - 'A' + 10)
		default:
			r |= rune(c - 'a' + 10)
		}
	}
	return r
}
