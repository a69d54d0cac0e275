package handover

import (
	"errors"
	"fmt"
	"math"
	"reflect"
	"strconv"
	"strings"
	"time"

	"lampward/domain"
)

// A sheetForm is how the records of one kind lie in a sheet: one row each, columns named as the fields are in the
// interface, unit in the name. Where a record names another, the column holds what people call that: the label of a place,
// board/way of a circuit, level/name of a space, the code of a model.
type sheetForm struct {
	name    string
	columns []column
}

type column struct {
	name string // header
	path []int
	typ  reflect.Type
	ref  string // kind of record that an identifier names, empty for plain values
}

// refNames are the identifiers that are shown by name, and what they name.
var refNames = map[string]struct{ header, kind string }{
	"space_id": {"space", "space"}, "make_up_id": {"make_up", "make_up"}, "fed_by_circuit_id": {"fed_by_circuit", "circuit"},
	"fed_by_place_id": {"fed_by_place", "place"}, "lamp_model_id": {"lamp_model", "lamp_model"}, "driver_model_id": {"driver_model", "driver_model"},
	"dimmer_model_id": {"dimmer_model", "dimmer_model"}, "fixture_model_id": {"fixture_model", "fixture_model"}, "place_id": {"place", "place"},
	"from_circuit_id": {"from_circuit", "circuit"}, "from_place_id": {"from_place", "place"}, "dimmer_id": {"dimmer", "place"}, "circuit_id": {"circuit", "circuit"},
}

// left are fields that no sheet has: the service sets them, or they say nothing outside it.
var left = map[string]bool{"building_id": true, "version": true, "created_at": true, "updated_at": true, "retired_at": true, "merged_into": true, "provisional": true}

// formOf makes the form of a record from its fields. withID keeps the identifier, for records that have no name.
func formOf[T any](name string, withID bool) sheetForm {
	f := sheetForm{name: name}
	f.walk(reflect.TypeFor[T](), nil, withID)
	return f
}

func (f *sheetForm) walk(typ reflect.Type, path []int, withID bool) {
	for i := range typ.NumField() {
		field := typ.Field(i)
		at := append(append([]int{}, path...), i)
		tag, _, _ := strings.Cut(field.Tag.Get("json"), ",")
		if field.Anonymous && tag == "" {
			f.walk(field.Type, at, withID)
			continue
		}
		if tag == "" || tag == "-" || left[tag] || tag == "id" && !withID {
			continue
		}
		c := column{name: tag, path: at, typ: field.Type}
		if r, ok := refNames[tag]; ok {
			c.name, c.ref = r.header, r.kind
		}
		f.columns = append(f.columns, c)
	}
}

var (
	timeType = reflect.TypeFor[time.Time]()
	dateType = reflect.TypeFor[domain.Date]()
	idType   = reflect.TypeFor[domain.ID]()
)

// none is how a sheet says "somebody looked and there is none" for a list.
const none = "none"

// write returns the text of a value; the empty text is absent.
func (c *column) write(v reflect.Value, name func(kind string, id domain.ID) string) string {
	if v.Kind() == reflect.Pointer {
		if v.IsNil() {
			return ""
		}
		v = v.Elem()
	}
	switch {
	case v.Type() == idType:
		id := v.Interface().(domain.ID)
		if id.IsZero() {
			return ""
		}
		if c.ref != "" {
			return name(c.ref, id)
		}
		return id.String()
	case v.Type() == timeType:
		t := v.Interface().(time.Time)
		if t.IsZero() {
			return ""
		}
		return t.UTC().Format(time.RFC3339Nano)
	case v.Kind() == reflect.String:
		return v.String()
	case v.Kind() == reflect.Bool:
		if v.Bool() {
			return "yes"
		}
		return "no"
	case v.CanInt():
		return strconv.FormatInt(v.Int(), 10)
	case v.CanFloat():
		return strconv.FormatFloat(v.Float(), 'g', -1, 64)
	case v.Kind() == reflect.Slice:
		if v.IsNil() {
			return ""
		}
		if v.Len() == 0 {
			return none
		}
		parts := make([]string, v.Len())
		for i := range parts {
			e := v.Index(i)
			if e.Kind() == reflect.Struct { // a point of a curve: both numbers
				var nums []string
				for k := range e.NumField() {
					nums = append(nums, strconv.FormatFloat(e.Field(k).Float(), 'g', -1, 64))
				}
				parts[i] = strings.Join(nums, ":")
			} else {
				parts[i] = c.write(e, name)
			}
		}
		return strings.Join(parts, "; ")
	}
	return ""
}

// errExpected says what a cell should hold.
func errExpected(format string, a ...any) error {
	return errors.New("must be " + fmt.Sprintf(format, a...))
}

// read sets a value from the text of a cell. An empty cell and "n/a" leave it absent.
func (c *column) read(v reflect.Value, text string, find func(kind, name string) (domain.ID, error)) error {
	if text == "" || strings.EqualFold(text, "n/a") {
		return nil
	}
	if v.Kind() == reflect.Pointer {
		p := reflect.New(v.Type().Elem())
		if err := c.read(p.Elem(), text, find); err != nil {
			return err
		}
		v.Set(p)
		return nil
	}
	switch {
	case v.Type() == idType:
		var id domain.ID
		var err error
		if c.ref != "" {
			id, err = find(c.ref, text)
		} else if id, err = domain.ParseID(text); err != nil {
			err = errExpected("an identifier (UUID)")
		}
		if err != nil {
			return err
		}
		v.Set(reflect.ValueOf(id))
	case v.Type() == timeType:
		t, err := readTime(text)
		if err != nil {
			return err
		}
		v.Set(reflect.ValueOf(t))
	case v.Type() == dateType:
		if !domain.Date(text).Valid() {
			return errExpected("a date such as 2026-03-31")
		}
		v.SetString(text)
	case v.Kind() == reflect.String:
		v.SetString(text)
	case v.Kind() == reflect.Bool:
		b, err := readBool(text)
		if err != nil {
			return err
		}
		v.SetBool(b)
	case v.CanInt():
		n, err := strconv.ParseInt(text, 10, 32)
		if err != nil {
			f, ferr := readNumber(text)
			if ferr != nil || f != math.Trunc(f) || math.Abs(f) > 1e9 {
				return errExpected("a whole number")
			}
			n = int64(f)
		}
		v.SetInt(n)
	case v.CanFloat():
		f, err := readNumber(text)
		if err != nil {
			return err
		}
		v.SetFloat(f)
	case v.Kind() == reflect.Slice:
		return c.readList(v, text, find)
	}
	return nil
}

func (c *column) readList(v reflect.Value, text string, find func(kind, name string) (domain.ID, error)) error {
	v.Set(reflect.MakeSlice(v.Type(), 0, 4))
	if strings.EqualFold(text, none) {
		return nil
	}
	for part := range strings.SplitSeq(strings.ReplaceAll(text, ",", ";"), ";") {
		part = strings.TrimSpace(part)
		if part == "" {
			continue
		}
		e := reflect.New(v.Type().Elem()).Elem()
		if e.Kind() == reflect.Struct {
			nums := strings.Split(part, ":")
			if len(nums) != e.NumField() {
				return errExpected("pairs of numbers such as 40:100; 60:50")
			}
			for k, n := range nums {
				f, err := readNumber(strings.TrimSpace(n))
				if err != nil {
					return err
				}
				e.Field(k).SetFloat(f)
			}
		} else if err := c.read(e, part, find); err != nil {
			return err
		}
		v.Set(reflect.Append(v, e))
	}
	return nil
}

func readNumber(text string) (float64, error) {
	t := text
	if strings.Count(t, ",") == 1 && !strings.Contains(t, ".") {
		t = strings.Replace(t, ",", ".", 1)
	}
	f, err := strconv.ParseFloat(t, 64)
	if err != nil || math.IsNaN(f) || math.IsInf(f, 0) {
		return 0, errExpected("a number")
	}
	return f, nil
}

func readBool(text string) (bool, error) {
	switch strings.ToLower(text) {
	case "yes", "true", "1", "y":
		return true, nil
	case "no", "false", "0", "n":
		return false, nil
	}
	return false, errExpected("yes or no")
}

// readTime reads a time with its offset, a day, or the local form of a hand-over workbook, taken as UTC.
func readTime(text string) (time.Time, error) {
	for _, form := range []string{time.RFC3339Nano, "2006-01-02T15:04:05", time.DateOnly} {
		if t, err := time.Parse(form, text); err == nil {
			if t.Year() < 1900 || t.Year() > 2200 {
				break
			}
			return t.UTC(), nil
		}
	}
	return time.Time{}, errExpected("a time such as 2026-03-31T08:30:00Z")
}
