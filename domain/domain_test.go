package domain_test

import (
	"encoding/json"
	"math"
	"math/big"
	"strings"
	"testing"
	"time"

	"github.com/jackc/pgx/v5/pgtype"

	"lampward/domain"
)

func FuzzParseID(f *testing.F) {
	for _, seed := range []string{"0192f0c1-2345-7abc-8def-0123456789ab", "0192F0C1-2345-7ABC-8DEF-0123456789AB", "", strings.Repeat("-", 36), "0192f0c123457abc8def0123456789ab"} {
		f.Add(seed)
	}
	f.Fuzz(func(t *testing.T, text string) {
		id, err := domain.ParseID(text)
		if err != nil {
			if domain.KindOf(err) != domain.Invalid || !id.IsZero() {
				t.Fatalf("%q gives %v and %v", text, id, err)
			}
			return
		}
		if id.String() != strings.ToLower(text) {
			t.Fatalf("%q reads as %s", text, id)
		}
		if again, err := domain.ParseID(id.String()); err != nil || again != id {
			t.Fatalf("%s reads as %v, %v", id, again, err)
		}
	})
}

func FuzzDate(f *testing.F) {
	for _, seed := range []string{"2026-03-31", "2026-02-29", "0000-01-01", "9999-12-31", "2026-3-1", "2026-03-31T00:00:00Z"} {
		f.Add(seed)
	}
	f.Fuzz(func(t *testing.T, text string) {
		d := domain.Date(text)
		v, err := d.DateValue()
		if (err == nil) != d.Valid() {
			t.Fatalf("%q: valid %v, but its value gives %v", text, d.Valid(), err)
		}
		c := domain.NewCheck("record")
		c.Date("/day", &d)
		if err != nil {
			if c.Err() == nil {
				t.Fatalf("%q passes as a date", text)
			}
			return
		}
		var back domain.Date
		if err := back.ScanDate(v); err != nil || back != d {
			t.Fatalf("%q reads back as %q, %v", text, back, err)
		}
	})
}

func FuzzDecimal(f *testing.F) {
	for _, seed := range []string{"4.5", "0010.50", "-0", "-0.0001", "100000", "9999999999.9999", "1e9", "1/3", ".5", "5."} {
		f.Add(seed)
	}
	f.Fuzz(func(t *testing.T, text string) {
		quoted, err := json.Marshal(text)
		if err != nil {
			t.Fatal(err)
		}
		var d domain.Decimal
		if err := json.Unmarshal(quoted, &d); err != nil {
			t.Fatalf("%q: %v", text, err)
		}
		if !d.Valid() {
			if _, err := d.NumericValue(); domain.KindOf(err) != domain.Invalid {
				t.Fatalf("%q is no decimal, but its value gives %v", text, err)
			}
			return
		}
		want, ok := new(big.Rat).SetString(text) // a valid decimal is ASCII: JSON left it as it was
		got, ok2 := new(big.Rat).SetString(string(d))
		if !ok || !ok2 || want.Cmp(got) != 0 {
			t.Fatalf("%q reads as %q", text, d)
		}
		n, err := d.NumericValue()
		if err != nil {
			t.Fatalf("%q: %v", d, err)
		}
		var back domain.Decimal
		if err := back.ScanNumeric(n); err != nil || back != d {
			t.Fatalf("%q is %q before it is stored and %q after (%v)", text, d, back, err)
		}
	})
}

func FuzzMoney(f *testing.F) {
	f.Add("4.50", "EUR")
	f.Add("1/3", "eur")
	f.Add("1e999999999", "EURO")
	f.Fuzz(func(t *testing.T, amount, currency string) {
		m := domain.Money{Amount: amount, Currency: currency}
		bad := m.Check("")
		_, ok := m.Rat()
		wrong := false
		for _, b := range bad {
			wrong = wrong || b.Pointer == "/amount"
		}
		if ok == wrong {
			t.Fatalf("%+v: a fraction %v, told %v", m, ok, bad)
		}
	})
}

func FuzzCursor(f *testing.F) {
	f.Add(domain.EncodeCursor(domain.NewID()))
	f.Add("W251bGxd") // [null]
	f.Add("W10")      // []
	f.Add("")
	f.Fuzz(func(t *testing.T, cursor string) {
		var id domain.ID
		err := domain.DecodeCursor(cursor, &id)
		if err != nil {
			if domain.KindOf(err) != domain.Invalid {
				t.Fatalf("%q: %v", cursor, err)
			}
			return
		}
		var again domain.ID
		if err := domain.DecodeCursor(domain.EncodeCursor(id), &again); err != nil || again != id {
			t.Fatalf("%q reads as %v and then as %v, %v", cursor, id, again, err)
		}
	})
}

func TestCursorNull(t *testing.T) {
	t.Parallel()
	id := domain.NewID()
	if err := domain.DecodeCursor("W251bGxd", &id); domain.KindOf(err) != domain.Invalid { // base64 of [null]
		t.Errorf("a cursor without a key gives %v", err)
	}
}

// A decimal is the same text before it is stored and after.
func TestDecimalPlain(t *testing.T) {
	t.Parallel()
	for _, c := range []struct{ in, want string }{
		{"4.5", "4.50"}, {"04.5000", "4.50"}, {"0010", "10.00"}, {"-0", "0.00"}, {"-0.0000", "0.00"}, {"-00.5", "-0.50"},
		{"0.0001", "0.0001"}, {"100000", "100000.00"}, {"9999999999.9999", "9999999999.9999"},
		{"12345678901", "12345678901"}, {"1e3", "1e3"}, {"", ""}, // no decimals: left alone
	} {
		var d domain.Decimal
		if err := json.Unmarshal([]byte(`"`+c.in+`"`), &d); err != nil || string(d) != c.want {
			t.Errorf("%q reads as %q, %v; want %q", c.in, d, err, c.want)
		}
	}
	var d domain.Decimal
	if err := d.ScanNumeric(pgtype.Numeric{Int: big.NewInt(10), Exp: 4, Valid: true}); err != nil || d != "100000.00" {
		t.Errorf("10 times ten to the 4th reads as %q, %v", d, err)
	}
}

func TestMoneyRat(t *testing.T) {
	t.Parallel()
	for _, amount := range []string{"1/3", "1e9", "0x10", "", "Inf"} {
		if r, ok := (domain.Money{Amount: amount, Currency: "EUR"}).Rat(); ok {
			t.Errorf("%q is the amount %v", amount, r)
		}
	}
	if r, ok := (domain.Money{Amount: "-4.50"}).Rat(); !ok || r.Cmp(big.NewRat(-9, 2)) != 0 {
		t.Errorf("-4.50 is %v, %v", r, ok)
	}
}

// fields returns the pointers a check told of.
func fields(c *domain.Check) string {
	var out []string
	for _, f := range domain.FieldsOf(c.Err()) {
		out = append(out, f.Pointer)
	}
	return strings.Join(out, " ")
}

func TestCheckLine(t *testing.T) {
	t.Parallel()
	for name, v := range map[string]string{
		"NUL":                    "L\x00 1",
		"line feed":              "L\n1",
		"delete":                 "L\x7f1",
		"C1 control":             "L\u00851",
		"right-to-left override": "L\u202e1",
		"isolate":                "L\u20661",
		"Arabic letter mark":     "L\u061c1",
		"zero-width space":       "L\u200b1",
		"zero-width joiner":      "L\u200d1",
		"word joiner":            "L\u20601",
		"byte order mark":        "L\ufeff1",
		"soft hyphen":            "L\u00ad1",
		"line separator":         "L\u20281",
		"tag character":          "L\U000e00411",
		"not UTF-8":              "L\xff1",
		"blank in front":         " L1",
		"blank behind":           "L1\u00a0",
		"too long":               strings.Repeat("é", 201),
	} {
		c := domain.NewCheck("record")
		c.Line("/tag", v, true)
		if fields(c) != "/tag" {
			t.Errorf("a label with %s passes", name)
		}
	}
	for _, v := range []string{"L-1", "Büro 2.14", "灯 1", "כניסה", "a b", strings.Repeat("é", 200), "'; DROP TABLE place; --"} {
		c := domain.NewCheck("record")
		c.Line("/tag", v, true)
		if err := c.Err(); err != nil {
			t.Errorf("%q: %v", v, err)
		}
	}
	c := domain.NewCheck("record")
	c.Text("/note", "first\n\tsecond می\u200cخواهم")
	if err := c.Err(); err != nil {
		t.Errorf("a note of two lines: %v", err)
	}
	c.Text("/note", "a\u202eb")
	if fields(c) != "/note" {
		t.Error("a note with a right-to-left override passes")
	}
}

func TestCheckNumbers(t *testing.T) {
	t.Parallel()
	for _, v := range []float64{math.NaN(), math.Inf(1), math.Inf(-1), -0.001, 100.001, 1e300} {
		c := domain.NewCheck("record")
		c.Range("/w", &v, 0, 100, "W")
		if fields(c) != "/w" {
			t.Errorf("%g W passes for 0 to 100 W", v)
		}
	}
	for _, v := range []float64{0, 100, math.Copysign(0, -1)} {
		c := domain.NewCheck("record")
		c.Range("/w", &v, 0, 100, "W")
		if err := c.Err(); err != nil {
			t.Errorf("%g W: %v", v, err)
		}
	}
}

// A time beyond the year 9999 could be stored but never be shown again; one before electric light is a slip.
func TestCheckTime(t *testing.T) {
	t.Parallel()
	for text, good := range map[string]bool{
		"1900-01-01T00:00:00Z": true, "2199-12-31T23:59:59Z": true,
		"1899-12-31T23:59:59Z": false, "2200-01-01T00:00:00Z": false, "9999-12-31T23:59:59-23:00": false, "0001-01-01T00:00:00Z": false,
	} {
		at, err := time.Parse(time.RFC3339, text)
		if err != nil {
			t.Fatal(err)
		}
		c := domain.NewCheck("record")
		c.Time("/at", &at)
		if (c.Err() == nil) != good {
			t.Errorf("%s: %v", text, c.Err())
		}
		day := domain.Date(text[:10])
		if text[:4] == "9999" || text[11:] != "00:00:00Z" {
			continue
		}
		c = domain.NewCheck("record")
		c.Date("/day", &day)
		if (c.Err() == nil) != good {
			t.Errorf("%s: %v", day, c.Err())
		}
	}
}

func TestPageRows(t *testing.T) {
	t.Parallel()
	for limit, want := range map[int]int{-1: 1, 0: 1, 1: 1, 1000: 1000, 1001: 1000} {
		if got := (domain.Page{Limit: limit}).Rows(); got != want {
			t.Errorf("a page of %d holds %d rows, want %d", limit, got, want)
		}
	}
}
