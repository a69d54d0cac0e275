package domain

import (
	"encoding/json"
	"testing"
)

// FuzzID: what is taken as an identifier is written as it was read.
func FuzzID(f *testing.F) {
	for _, s := range []string{"01a231ab-b157-700a-8c66-d3382e3ec618", "01A231AB-B157-700A-8C66-D3382E3EC618", "", "01a231ab", "{01a231ab-b157-700a-8c66-d3382e3ec618}"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		id, err := ParseID(text)
		if err != nil {
			return
		}
		again, err := ParseID(id.String())
		if err != nil || again != id {
			t.Errorf("%q is %s, which reads as %s: %v", text, id, again, err)
		}
	})
}

// FuzzDecimal: an amount that is taken keeps its digits through JSON and through the database's form.
func FuzzDecimal(f *testing.F) {
	for _, s := range []string{`"4.50"`, `"-0"`, `"1e9"`, `4.5`, `"00012.340"`, `""`, `"٣"`} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, raw []byte) {
		var d Decimal
		if json.Unmarshal(raw, &d) != nil || !d.Valid() {
			return
		}
		n, err := d.NumericValue()
		if err != nil {
			t.Fatalf("%s: %v", d, err)
		}
		var back Decimal
		if err := back.ScanNumeric(n); err != nil || back != d.plain() {
			t.Errorf("%s comes back as %s: %v", d, back, err)
		}
	})
}
