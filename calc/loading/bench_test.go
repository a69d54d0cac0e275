package loading

import "testing"

// BenchmarkCheckLoad sums six lamps and judges them against a complete window: the core of checking one driver.
func BenchmarkCheckLoad(b *testing.B) {
	b.ReportAllocs()
	w := Window{MinW: ptr(20.0), MaxW: ptr(105.0), MaxVA: ptr(105.0)}
	for b.Loop() {
		var l Load
		for range 6 {
			if err := l.Add(1, 7, LEDPowerFactorLow, LEDPowerFactorHigh); err != nil {
				b.Fatal(err)
			}
		}
		if c := CheckLoad(l, w); c.Over != Passes || c.Under != Passes {
			b.Fatalf("42 W on 20 to 105 W: %+v", c)
		}
	}
}
