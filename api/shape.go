package api

import (
	"encoding"
	"encoding/json"
	"reflect"
	"strconv"
	"strings"
	"sync"
	"time"
)

// form is how a JSON value must look for a Go type.
type form uint8

const (
	anyForm form = iota
	textForm
	boolForm
	intForm
	uintForm
	floatForm
	numberForm // json.Number: any number, kept as written
	objectForm
	mapForm
	listForm
	selfForm // the type reads its own text or JSON
	timeForm
)

// shape is what a Go type accepts as JSON. It is worked out once for each type.
type shape struct {
	form    form
	bits    int                // of a number
	length  int                // of an array, 0 for a slice
	members map[string]*member // of an object
	elem    *shape             // of a list or map
	typ     reflect.Type
}

// member is one field of an object.
type member struct {
	shape *shape
	index int  // among the members of its object
	lines bool // line feeds and tabs are allowed in its text
}

// prose are the fields that people write in sentences: line feeds and tabs are allowed there, nowhere else.
var prose = map[string]bool{"note": true, "notes": true, "reason": true, "description": true, "address": true, "text": true}

var (
	shapeMutex sync.Mutex
	shapes     = map[reflect.Type]*shape{}

	textType   = reflect.TypeFor[encoding.TextUnmarshaler]()
	selfType   = reflect.TypeFor[json.Unmarshaler]()
	timeType   = reflect.TypeFor[time.Time]()
	rawType    = reflect.TypeFor[json.RawMessage]()
	numberType = reflect.TypeFor[json.Number]()
)

// shapeOf returns the shape of a type.
func shapeOf(t reflect.Type) *shape {
	shapeMutex.Lock()
	defer shapeMutex.Unlock()
	return shapeFor(t)
}

func shapeFor(t reflect.Type) *shape {
	for t.Kind() == reflect.Pointer {
		t = t.Elem()
	}
	if s, ok := shapes[t]; ok {
		return s
	}
	s := &shape{typ: t}
	shapes[t] = s // before its parts, so that a type may hold itself
	switch {
	case t == timeType:
		s.form = timeForm
		return s
	case t == rawType:
		s.form = anyForm
		return s
	case t == numberType:
		s.form = numberForm
		return s
	case reflect.PointerTo(t).Implements(selfType), reflect.PointerTo(t).Implements(textType):
		s.form = selfForm
		return s
	}
	switch t.Kind() {
	case reflect.String:
		s.form = textForm
	case reflect.Bool:
		s.form = boolForm
	case reflect.Int, reflect.Int8, reflect.Int16, reflect.Int32, reflect.Int64:
		s.form, s.bits = intForm, t.Bits()
	case reflect.Uint, reflect.Uint8, reflect.Uint16, reflect.Uint32, reflect.Uint64:
		s.form, s.bits = uintForm, t.Bits()
	case reflect.Float32, reflect.Float64:
		s.form, s.bits = floatForm, t.Bits()
	case reflect.Slice:
		if t.Elem().Kind() == reflect.Uint8 {
			s.form = selfForm // base64 text, read by encoding/json
			return s
		}
		s.form, s.elem = listForm, shapeFor(t.Elem())
	case reflect.Array:
		s.form, s.length, s.elem = listForm, t.Len(), shapeFor(t.Elem())
	case reflect.Map:
		s.form, s.elem = mapForm, shapeFor(t.Elem())
	case reflect.Struct:
		s.form, s.members = objectForm, map[string]*member{}
		addMembers(s, t)
		n := 0
		for _, m := range s.members {
			m.index = n
			n++
		}
	default:
		s.form = anyForm
	}
	return s
}

// addMembers gathers the JSON fields of struct t; a field of an embedded struct gives way to one of the outer.
func addMembers(s *shape, t reflect.Type) {
	var embedded []reflect.Type
	for i := range t.NumField() {
		f := t.Field(i)
		name, _, _ := strings.Cut(f.Tag.Get("json"), ",")
		if name == "-" {
			continue
		}
		ft := f.Type
		for ft.Kind() == reflect.Pointer {
			ft = ft.Elem()
		}
		if f.Anonymous && name == "" && ft.Kind() == reflect.Struct {
			embedded = append(embedded, ft)
			continue
		}
		if !f.IsExported() {
			continue
		}
		if name == "" {
			name = f.Name
		}
		if _, outer := s.members[name]; outer {
			continue
		}
		s.members[name] = &member{shape: shapeFor(f.Type), lines: prose[name]}
	}
	for _, e := range embedded {
		addMembers(s, e)
	}
}

// want says what s accepts, for a message.
func (s *shape) want() string {
	switch s.form {
	case textForm:
		return "text in double quotes"
	case boolForm:
		return "true or false"
	case intForm:
		limit := uint64(1)<<(s.bits-1) - 1
		return "a whole number from -" + strconv.FormatUint(limit+1, 10) + " to " + strconv.FormatUint(limit, 10)
	case uintForm:
		return "a whole number from 0 to " + strconv.FormatUint(^uint64(0)>>(64-s.bits), 10)
	case floatForm, numberForm:
		return "a number"
	case objectForm, mapForm:
		return "an object"
	case listForm:
		if s.length > 0 {
			return "a list of " + strconv.Itoa(s.length)
		}
		return "a list"
	case timeForm:
		return "a time with its offset, such as 2026-03-01T08:30:00Z (RFC 3339)"
	}
	return "a value of its own form"
}

func (s *shape) parseSelf(raw []byte) error {
	return json.Unmarshal(raw, reflect.New(s.typ).Interface())
}
