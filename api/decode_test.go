package api

import (
	"encoding/json"
	"errors"
	"reflect"
	"slices"
	"strings"
	"testing"

	"lampward/domain"
)

type everything struct {
	Text   string             `json:"text"`
	Line   string             `json:"line"`
	Small  int8               `json:"small"`
	Whole  int64              `json:"whole"`
	Count  uint16             `json:"count"`
	Number float64            `json:"number"`
	Narrow float32            `json:"narrow"`
	Kept   json.Number        `json:"kept"`
	Yes    bool               `json:"yes"`
	ID     domain.ID          `json:"id"`
	Maybe  *int               `json:"maybe,omitempty"`
	List   []string           `json:"list"`
	Pair   [2]float64         `json:"pair"`
	Rows   []maker            `json:"rows"`
	ByName map[string]float64 `json:"by_name"`
	Any    any                `json:"any"`
	Raw    json.RawMessage    `json:"raw"`
	Deep   *everything        `json:"deep,omitempty"`
	Hidden string             `json:"-"`
	beacon
}

// TestDecode lists what is refused and where; the pointers follow RFC 6901.
func TestDecode(t *testing.T) {
	t.Parallel()
	tests := []struct {
		name, body string
		want       []string // pointer and a part of the detail
	}{
		{"nothing wrong", `{"text":"a\nb","line":"é 😀 \ud83d\ude00 \"\\\/","small":-128,"whole":9223372036854775807,"count":65535,
			"number":1e300,"narrow":1.5,"kept":1.50,"yes":true,"id":"0192F0C1-2345-7abc-8def-0123456789ab","maybe":0,"list":[],"pair":[1,2],
			"rows":[{"town":"x","year":1}],"by_name":{"a":1},"any":{"b":[null,true,1,"x"]},"raw":null,"deep":{"line":"x"},"tag":"T","note":"x\ty"}`, nil},
		{"empty object", ` { } `, nil},
		{"list", `[]`, []string{` must be an object, not a list`}},
		{"null", `null`, []string{` must be an object, not null`}},
		{"text", `"x"`, []string{` must be an object, not text`}},
		{"unknown fields", `{"a":1,"deep":{"b":{"c":[1,"}"]}},"rows":[{},{"d~/":2}],"Text":"case matters","Hidden":"x","-":1}`,
			[]string{"/a is not a field", "/deep/b is not a field", "/rows/1/d~0~1 is not a field", "/Text is not a field", "/Hidden is not", "/- is not"}},
		{"wrong types", `{"text":1,"line":{},"small":"1","number":[],"yes":"true","list":{},"rows":[1],"by_name":[],"deep":true,"seen_at":5,"tag":null,"maybe":null}`,
			[]string{"/text must be text", "/line must be text", "/small must be a whole number from -128 to 127", "/number must be a number, not a list",
				"/yes must be true or false", "/list must be a list", "/rows/0 must be an object", "/by_name must be an object", "/deep must be an object",
				"/seen_at must be a time", "/tag must be text in double quotes, not null; leave it out", "/maybe must be a whole number"}},
		{"out of range", `{"small":128,"whole":9223372036854775808,"count":-1,"number":1e400,"narrow":1e39,"kept":-1e999,"any":1e400,"pair":[1],"maybe":1.5}`,
			[]string{"/small ", "/whole ", "/count must be a whole number from 0 to 65535", "/number is too large", "/narrow is too large", "/kept is too large",
				"/any is too large", "/pair must be a list of 2", "/maybe "}},
		{"too small to be told from 0", `{"number":1e-400,"kept":0.0e-999}`, []string{"/number is too close to 0"}},
		{"long number", `{"number":` + strings.Repeat("1", 65) + `}`, []string{"/number must be a number of at most 64"}},
		{"whole numbers are written whole", `{"whole":1.0,"small":1e1}`, []string{"/whole ", "/small "}},
		{"twice", `{"line":"a","text":"b","line":"c","by_name":{"x":1,"x":2},"any":{"y":1,"\u0079":2}}`,
			[]string{"/line is named twice", "/by_name/x is named twice", "/any/y is named twice"}},
		{"control characters", `{"line":"a\u0000","tag":"a\u001b[2J","list":["a\u0085","\u007f"],"colour":"a\rb","text":"a\rb","note":"a\u000bb","any":["\b"]}`,
			[]string{"/line holds a control", "/tag holds a control", "/list/0 holds a control", "/list/1 holds a control", "/colour holds a control",
				"/text holds a control", "/note holds a control", "/any/0 holds a control"}},
		{"lines only in prose", `{"line":"a\nb","tag":"a\tb","text":"a\nb\tc","note":"a\nb"}`, []string{"/line must be one line", "/tag must be one line"}},
		{"marks that turn text", "{\"line\":\"a\u202eb\",\"tag\":\"\\u2066\",\"note\":\"\u200f\",\"by_name\":{\"a\\u202e\":1}}",
			[]string{"/line holds a mark", "/tag holds a mark", "/note holds a mark", "/by_name holds a field whose name"}},
		{"half a pair", `{"line":"\ud800","tag":"\ud83dx","note":"\udc00","text":"\ud800\ud800"}`,
			[]string{"/line holds half", "/tag holds half", "/note holds half", "/text holds half"}},
		{"not UTF-8", "{\"line\":\"a\xff\",\"note\":\"\xed\xa0\x80\"}", []string{"/line is not UTF-8", "/note is not UTF-8"}},
		{"identifiers and times", `{"id":"x","keeper_id":7,"seen_at":"2026-03-01 08:30","created_at":"2026-03-01T08:30:00"}`,
			[]string{`/id "x" is not a UUID`, "/keeper_id ", "/seen_at must be a time", "/created_at must be a time"}},
		{"too deep", `{"any":` + strings.Repeat("[", 40) + strings.Repeat("]", 40) + `}`,
			[]string{"/any" + strings.Repeat("/0", 31) + " is nested too deeply"}},
		{"fields of an embedded row", `{"building_id":"x","version":"1"}`, []string{`/building_id "x"`, "/version must be a whole number"}},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			t.Parallel()
			_, err := decodeJSON[everything]([]byte(tt.body))
			var got []string
			if e, ok := errors.AsType[*domain.Error](err); ok && e.Kind == domain.Invalid {
				for _, f := range e.Fields {
					got = append(got, f.Pointer+" "+f.Detail)
				}
			} else if err != nil {
				t.Fatal(err)
			}
			if len(got) != len(tt.want) {
				t.Fatalf("told %q, want %q", got, tt.want)
			}
			for i := range got {
				if !strings.HasPrefix(got[i], tt.want[i]) {
					t.Errorf("told %q, want %q", got[i], tt.want[i])
				}
			}
		})
	}
	v, err := decodeJSON[everything]([]byte(tests[0].body))
	if err != nil || v.Line != "é 😀 😀 \"\\/" || v.Kept != "1.50" || v.Tag != "T" || v.Deep.Line != "x" || *v.Maybe != 0 || v.Maybe == nil {
		t.Errorf("decoded as %+v: %v", v, err)
	}
}

func TestDecodeSyntax(t *testing.T) {
	t.Parallel()
	for body, want := range map[string]string{
		"":                        "the body is empty",
		" \n":                     "the body is empty",
		`{"tag":`:                 "line 1, column 7",
		"{\n  \"tag\": nope\n}":   "line 2, column 11",
		`{"tag":1} {"tag":2}`:     "line 1, column 11",
		`{"tag":NaN}`:             "line 1, column 8",
		`{"lamps":-Infinity}`:     "line 1, column 11",
		`{'tag':1}`:               "line 1, column 2",
		`{"tag":01}`:              "line 1, column 9",
		"{\"tag\":\"a\tb\"}":      "line 1, column 10",
		strings.Repeat("[", 20e3): "the body is not JSON",
	} {
		_, err := decodeJSON[beacon]([]byte(body))
		r, ok := errors.AsType[*refusal](err)
		if !ok || r.kind != malformed || !strings.Contains(r.msg, want) {
			t.Errorf("%.40q gives %v, want %q", body, err, want)
		}
	}
}

// TestDecodeTellsAtMost holds that a hostile body cannot make an answer much larger than itself.
func TestDecodeTellsAtMost(t *testing.T) {
	t.Parallel()
	_, err := decodeJSON[[]int]([]byte("[" + strings.Repeat(`"x",`, 5000) + `1]`))
	e, ok := errors.AsType[*domain.Error](err)
	if !ok || len(e.Fields) != mostTold || !strings.Contains(e.Msg, "stopped after 100") {
		t.Errorf("%v", err)
	}
}

// TestMergePatch holds the algorithm to the examples of RFC 7396 appendix A.
func TestMergePatch(t *testing.T) {
	t.Parallel()
	for _, tt := range [][3]string{
		{`{"a":"b"}`, `{"a":"c"}`, `{"a":"c"}`},
		{`{"a":"b"}`, `{"b":"c"}`, `{"a":"b","b":"c"}`},
		{`{"a":"b"}`, `{"a":null}`, `{}`},
		{`{"a":"b","b":"c"}`, `{"a":null}`, `{"b":"c"}`},
		{`{"a":["b"]}`, `{"a":"c"}`, `{"a":"c"}`},
		{`{"a":"c"}`, `{"a":["b"]}`, `{"a":["b"]}`},
		{`{"a":{"b":"c"}}`, `{"a":{"b":"d","c":null}}`, `{"a":{"b":"d"}}`},
		{`{"a":[{"b":"c"}]}`, `{"a":[1]}`, `{"a":[1]}`},
		{`["a","b"]`, `["c","d"]`, `["c","d"]`},
		{`{"a":"b"}`, `["c"]`, `["c"]`},
		{`{"a":"foo"}`, `null`, `null`},
		{`{"a":"foo"}`, `"bar"`, `"bar"`},
		{`{"e":null}`, `{"a":1}`, `{"a":1,"e":null}`},
		{`[1,2]`, `{"a":"b","c":null}`, `{"a":"b"}`},
		{`{}`, `{"a":{"bb":{"ccc":null}}}`, `{"a":{"bb":{}}}`},
		// Not of the RFC: digits stay as they were written.
		{`{"a":1}`, `{"b":12345678901234567890.10}`, `{"a":1,"b":12345678901234567890.10}`},
	} {
		got, err := mergePatch([]byte(tt[0]), []byte(tt[1]))
		if err != nil || string(got) != tt[2] {
			t.Errorf("%s patched with %s gives %s (%v), want %s", tt[0], tt[1], got, err, tt[2])
		}
	}
}

func TestPatchRow(t *testing.T) {
	t.Parallel()
	reach := 3.0
	row := beacon{Tag: "T", ReachM: &reach, Permits: []string{}}
	for body, want := range map[string]string{
		`{"tag":5,"reach_m":null,"nope":null}`: "/tag must be text; /nope is not a field",
		`{"permits":[null]}`:                   "/permits/0 must be text",
		`null`:                                 " must be an object, not null",
		`[1]`:                                  " must be an object, not a list",
		`{"maker":{"year":1e99}}`:              "/maker/year must be a whole number",
	} {
		err := checkPatch[beacon]([]byte(body))
		e, ok := errors.AsType[*domain.Error](err)
		parts := strings.Split(want, "; ")
		if !ok || len(e.Fields) != len(parts) {
			t.Errorf("%s gives %v, want %s", body, err, want)
			continue
		}
		for i, f := range e.Fields {
			if !strings.HasPrefix(f.Pointer+" "+f.Detail, parts[i]) {
				t.Errorf("%s gives %v, want %s", body, err, want)
			}
		}
	}
	got, err := patch(row, []byte(`{"reach_m":null,"maker":{"town":"x"}}`))
	if err != nil || got.ReachM != nil || got.Tag != "T" || got.Permits == nil || got.Maker.Town != "x" {
		t.Errorf("%+v: %v", got, err)
	}
}

func TestMatch(t *testing.T) {
	t.Parallel()
	tests := []struct {
		header        []string
		strong, loose []int64 // of 1 to 9
		bad           bool
	}{
		{header: []string{`"v7"`}, strong: []int64{7}, loose: []int64{7}},
		{header: []string{`"v7-gzip"`}, strong: []int64{7}, loose: []int64{7}},
		{header: []string{`"v1", "v2-zstd" ,W/"v3"`}, strong: []int64{1, 2}, loose: []int64{1, 2, 3}},
		{header: []string{`"v1"`, `"v2"`}, strong: []int64{1, 2}, loose: []int64{1, 2}},
		{header: []string{`*`}, strong: []int64{1, 2, 3, 4, 5, 6, 7, 8, 9}, loose: []int64{1, 2, 3, 4, 5, 6, 7, 8, 9}},
		{header: []string{`"7", "v07", "v-1", "v", "", "v1-br", "v99999999999999999999"`}},
		{header: []string{""}},
		{header: nil},
		{header: []string{"v7"}, bad: true},
		{header: []string{`"v7`}, bad: true},
		{header: []string{`"v7" "v8"`}, bad: true},
		{header: []string{`w/"v7"`}, bad: true},
		{header: []string{`"v 7"`}, bad: true},
		{header: []string{`*, "v7"`}, bad: true},
	}
	for _, tt := range tests {
		m, err := parseMatch("If-Match", tt.header)
		if (err != nil) != tt.bad {
			t.Errorf("%q: %v", tt.header, err)
			continue
		}
		var strong, loose []int64
		for v := int64(1); v < 10; v++ {
			if m.strong(v) {
				strong = append(strong, v)
			}
			if m.loose(v) {
				loose = append(loose, v)
			}
		}
		if !slices.Equal(strong, tt.strong) || !slices.Equal(loose, tt.loose) {
			t.Errorf("%q names %v strongly and %v loosely", tt.header, strong, loose)
		}
	}
}

func TestPreferred(t *testing.T) {
	t.Parallel()
	offers := []string{"application/json", "application/x-ndjson", "text/csv"}
	for header, want := range map[string]int{
		"":                                0,
		"*/*":                             0,
		"application/json":                0,
		"text/csv":                        2,
		"TEXT/CSV":                        2,
		"text/*;q=0.2, application/*;q=1": 0,
		"text/html, text/csv;q=0.9, application/json;q=0.1": 2,
		"*/*, application/json;q=0":                         1,
		"application/*;q=0.5, application/json;q=0.1":       1,
		"image/png": -1,
		"application/json;q=0, application/*;q=0, text/csv;q=0": -1,
		"application/json;q=nonsense":                           -1,
		"application/json;charset=utf-8":                        0,
		"text/csv;q=0.001":                                      2,
	} {
		got, ok := preferred(header, offers)
		if !ok {
			got = -1
		}
		if got != want {
			t.Errorf("%q chooses %d, want %d", header, got, want)
		}
	}
}

func FuzzDecode(f *testing.F) {
	f.Add([]byte(`{"tag":"a\u0000","lamps":1e400,"maker":{"town":[]},"rows":[{"x":1,"x":2}]}`))
	f.Add([]byte("{\"note\":\"\u202e\xff\",\"any\":[[[[1]]]]}"))
	f.Add([]byte(`{"id":"0192f0c1-2345-7abc-8def-0123456789ab","seen_at":"2026-03-01T08:30:00Z","pair":[1,2],"deep":{"deep":{}}}`))
	f.Fuzz(func(t *testing.T, data []byte) {
		v, err := decodeJSON[everything](data)
		if err != nil {
			if _, ok := errors.AsType[*refusal](err); !ok && domain.KindOf(err) != domain.Invalid {
				t.Fatalf("an error that is not told: %v", err)
			}
			return
		}
		// What is accepted is held: it comes out as it went in.
		out, err := json.Marshal(v)
		if err != nil {
			t.Fatal(err)
		}
		var w everything
		if err := json.Unmarshal(out, &w); err != nil {
			t.Fatal(err)
		}
		if again, err := json.Marshal(w); err != nil || string(again) != string(out) {
			t.Fatalf("%s became %s (%v)", out, again, err)
		}
	})
}

func FuzzMergePatch(f *testing.F) {
	f.Add([]byte(`{"a":{"b":"c"}}`), []byte(`{"a":{"b":"d","c":null}}`))
	f.Add([]byte(`[1,2]`), []byte(`{"a":"b","c":null}`))
	f.Fuzz(func(t *testing.T, target, p []byte) {
		if syntax(target) != nil || syntax(p) != nil {
			return
		}
		once, err := mergePatch(target, p)
		if err != nil {
			t.Fatal(err)
		}
		// A merge patch applied twice changes nothing more, and applied to nothing leaves no null that it named.
		twice, err := mergePatch(once, p)
		if err != nil || string(twice) != string(once) {
			t.Fatalf("%s, patched again with %s, gives %s (%v)", once, p, twice, err)
		}
		var asked, got any
		if json.Unmarshal(p, &asked) != nil || json.Unmarshal(once, &got) != nil {
			t.Fatal("the result is not JSON")
		}
		if want, ok := asked.(map[string]any); ok {
			for name, v := range want {
				has, there := got.(map[string]any)[name]
				if v == nil && there {
					t.Fatalf("%q is still in %s", name, once)
				}
				if _, object := v.(map[string]any); v != nil && !object && !reflect.DeepEqual(has, v) {
					t.Fatalf("%q is %v in %s", name, has, once)
				}
			}
		}
	})
}

func FuzzMatch(f *testing.F) {
	for _, s := range []string{`"v7"`, `*`, `W/"v1", "v2-gzip"`, `"`, `"a,b", "v3"`} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, header string) {
		m, err := parseMatch("If-Match", []string{header})
		if err != nil {
			return
		}
		for _, v := range m.versions {
			if n, err := parseMatch("If-Match", []string{etag(v)}); err != nil || !n.strong(v) || v < 1 {
				t.Fatalf("%q names version %d, whose own tag does not", header, v)
			}
		}
	})
}

func FuzzCursor(f *testing.F) {
	f.Add(domain.EncodeCursor(buildingA))
	f.Add("WyIwMTkyIl0")
	f.Add("!")
	f.Fuzz(func(t *testing.T, cursor string) {
		var id domain.ID
		err := domain.DecodeCursor(cursor, &id)
		if err != nil && domain.KindOf(err) != domain.Invalid {
			t.Fatal(err)
		}
		if err == nil {
			var again domain.ID
			if err := domain.DecodeCursor(domain.EncodeCursor(id), &again); err != nil || again != id {
				t.Fatalf("%q reads as %s and comes back as %s (%v)", cursor, id, again, err)
			}
		}
	})
}

// FuzzAccept: any header of a caller finds an offer or none.
func FuzzAccept(f *testing.F) {
	for _, s := range []string{"", "*/*", "text/csv;q=0.5, application/json", "application/*;q=2", "gzip;q=0, *", ";;,,=q"} {
		f.Add(s)
	}
	offers := []string{"application/json", "text/csv", "application/x-ndjson"}
	f.Fuzz(func(t *testing.T, header string) {
		if i, ok := preferred(header, offers); ok && (i < 0 || i >= len(offers)) {
			t.Errorf("%q prefers %d", header, i)
		}
		if q := quality(header); !(q >= 0 && q <= 1) {
			t.Errorf("%q has quality %g", header, q)
		}
	})
}
