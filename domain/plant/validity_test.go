package plant_test

import (
	"fmt"
	"math"
	"reflect"
	"slices"
	"strings"
	"testing"
	"time"

	"lampward/domain"
	"lampward/domain/plant"
	"lampward/domain/site"
)

// leaf is a field of a record that a client may fill, by its pointer.
type leaf struct {
	pointer string
	v       reflect.Value
}

// leaves returns the fields of v that JSON shows, one item of each list included.
func leaves(v reflect.Value, at string) (out []leaf) {
	switch v.Kind() {
	case reflect.Struct:
		if v.Type() == reflect.TypeFor[time.Time]() {
			return []leaf{{at, v}}
		}
		for i := range v.NumField() {
			f := v.Type().Field(i)
			name, _, _ := strings.Cut(f.Tag.Get("json"), ",")
			switch {
			case f.Type == reflect.TypeFor[domain.Row]() || f.Type == reflect.TypeFor[domain.CatalogueRow](), name == "-":
			case f.Anonymous && name == "":
				out = append(out, leaves(v.Field(i), at)...)
			case name != "" && f.IsExported():
				out = append(out, leaves(v.Field(i), at+"/"+name)...)
			}
		}
		return out
	case reflect.Pointer:
		v.Set(reflect.New(v.Type().Elem()))
		return append(out, leaves(v.Elem(), at)...)
	case reflect.Slice:
		if v.Type().Elem().Kind() == reflect.Uint8 {
			return nil
		}
		v.Set(reflect.MakeSlice(v.Type(), 1, 1))
		return leaves(v.Index(0), at+"/0")
	}
	return []leaf{{at, v}}
}

// records are empty ones of every kind that knows its own rules.
func records() map[string]func() interface{ Validate() error } {
	return map[string]func() interface{ Validate() error }{
		"lamp model":    func() interface{ Validate() error } { return &plant.LampModel{} },
		"driver model":  func() interface{ Validate() error } { return &plant.DriverModel{} },
		"dimmer model":  func() interface{ Validate() error } { return &plant.DimmerModel{} },
		"fixture model": func() interface{ Validate() error } { return &plant.FixtureModel{} },
		"pairing":       func() interface{ Validate() error } { return &plant.Pairing{} },
		"price":         func() interface{ Validate() error } { return &plant.Price{} },
		"circuit":       func() interface{ Validate() error } { return &plant.Circuit{} },
		"dimmer":        func() interface{ Validate() error } { return &plant.Dimmer{} },
		"driver":        func() interface{ Validate() error } { return &plant.Driver{} },
		"fixture":       func() interface{ Validate() error } { return &plant.Fixture{} },
		"feed":          func() interface{ Validate() error } { return &plant.Feed{} },
		"control":       func() interface{ Validate() error } { return &plant.ControlLink{} },
		"make-up":       func() interface{ Validate() error } { return &plant.MakeUp{} },
		"space":         func() interface{ Validate() error } { return &site.Space{} },
		"building":      func() interface{ Validate() error } { return &site.Building{} },
		"use":           func() interface{ Validate() error } { return &site.SpaceUse{} },
		"rate":          func() interface{ Validate() error } { return &site.Rate{} },
	}
}

// Every field of every record is held to something: no text with what cannot be seen, no number that is none or absurd,
// no time that cannot be, and each is told by its own pointer.
func TestEveryFieldIsChecked(t *testing.T) {
	t.Parallel()
	spoil := func(v reflect.Value) []any {
		switch v.Interface().(type) {
		case time.Time:
			return []any{time.Date(10000, 1, 1, 0, 0, 0, 0, time.UTC), time.Date(1, 1, 2, 0, 0, 0, 0, time.UTC)}
		}
		switch v.Kind() {
		case reflect.String:
			return []any{"a\x00b", "a\u202eb", "a\u200bb", strings.Repeat("a", 5000), "\xff"}
		case reflect.Float64:
			return []any{math.NaN(), math.Inf(1), math.Inf(-1), 1e300, -1e300}
		case reflect.Int:
			return []any{-1, math.MaxInt32, math.MinInt32}
		}
		return nil // an identifier or a yes and no: every value is one
	}
	for name, empty := range records() {
		count := len(leaves(reflect.ValueOf(empty()).Elem(), ""))
		if count < 3 {
			t.Fatalf("%s has %d fields", name, count)
		}
		for i := range count {
			probe := leaves(reflect.ValueOf(empty()).Elem(), "")[i]
			for _, bad := range spoil(probe.v) {
				row := empty()
				l := leaves(reflect.ValueOf(row).Elem(), "")[i]
				l.v.Set(reflect.ValueOf(bad).Convert(l.v.Type()))
				told := domain.FieldsOf(row.Validate())
				if !slices.ContainsFunc(told, func(f domain.Field) bool { return f.Pointer == l.pointer }) {
					t.Errorf("%s: %s passes with %.20q", name, l.pointer, fmt.Sprint(bad))
				}
			}
		}
	}
}

// A list within a record has an end.
func TestListsEnd(t *testing.T) {
	t.Parallel()
	for name, empty := range records() {
		v := reflect.ValueOf(empty()).Elem()
		for i := range v.NumField() {
			f := v.Field(i)
			holders := []reflect.Value{v}
			if v.Type().Field(i).Anonymous {
				holders = append(holders, f)
			}
			for _, h := range holders {
				for j := range h.NumField() {
					tag, _, _ := strings.Cut(h.Type().Field(j).Tag.Get("json"), ",")
					if h.Field(j).Kind() != reflect.Slice || tag == "" || tag == "-" {
						continue
					}
					h.Field(j).Set(reflect.MakeSlice(h.Field(j).Type(), domain.MostItems+1, domain.MostItems+1))
					told := domain.FieldsOf(v.Addr().Interface().(interface{ Validate() error }).Validate())
					if !slices.ContainsFunc(told, func(f domain.Field) bool { return f.Pointer == "/"+tag }) {
						t.Errorf("%s: /%s has no end", name, tag)
					}
				}
			}
		}
	}
}
