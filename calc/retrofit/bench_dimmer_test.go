package retrofit

import (
	"testing"

	"lampward/calc/loading"
)

// BenchmarkCheckDimmedDriver checks everything of one driver with six lamps on a dimmer and a circuit, nothing found.
func BenchmarkCheckDimmedDriver(b *testing.B) {
	b.ReportAllocs()
	r := newRig()
	way := r.way(complete())
	d := r.control(with(trailingDimmer(), func(m *loading.Control) { m.LEDMaxLoadW = some(250.0) }), way)
	r.gear(ledDriver(100, bothEdge), way, by(d), of(6, strip24(10)))
	var c Checker
	if got := c.Check(&r.System); len(got.Findings) != 0 {
		b.Fatal(ids(got.Findings))
	}
	for b.Loop() {
		if got := c.Check(&r.System); len(got.Findings) != 0 {
			b.Fatal(ids(got.Findings))
		}
	}
}
