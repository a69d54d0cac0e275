package retrofit

import (
	"runtime"
	"sync"
	"testing"
	"time"

	"lampward/calc/loading"
)

// downlightTree is a circuit with five remote drivers of four downlights each; with bad the first of them is overloaded.
func downlightTree(bad bool) *loading.System {
	gear := &loading.Gear{
		Key: loading.Key{1}, Name: "driver", Kind: loading.LEDConstantVoltage, OutputForm: loading.OutputDC, OutputV: f64(12),
		MinLoadW: f64(0), MaxLoadW: f64(60), InputMinV: f64(220), InputMaxV: f64(240), InputDC: yes(), TaC: f64(50), TcC: f64(85),
		Separation: "selv", PowerFactor: f64(0.95), Efficiency: f64(0.9), InrushA: f64(20), InrushUS: f64(200), LeakageMA: f64(0.2),
		Dimming: []string{}, FactSource: loading.SeenOnNameplate,
	}
	lamp := &loading.Lamp{
		Key: loading.Key{2}, Name: "lamp", Technology: loading.LEDLamp, Cap: "GU5.3", Supply: loading.SupplyELVACDC, RatedV: f64(12),
		PowerW: f64(7), PowerFactor: f64(0.9), HighFrequency: no(), Approval: yes(), SuitableEnclosed: yes(), Dimming: []string{},
		FactSource: loading.DataSheet,
	}
	fitting := &loading.Fitting{
		Key: loading.Key{3}, Name: "downlight", Holders: integer(1), MaxLampW: f64(35), Gear: "remote", Class: "III", IP: "IP20",
		Enclosed: no(), FireRated: no(), InsulationRated: no(), Discharge: no(), Emergency: no(), FactSource: loading.SeenOnNameplate,
	}
	s := &loading.System{Supply: loading.Supply{MainsV: f64(230), MainsHz: f64(50), WiringRules: loading.IEC60364}}
	s.Circuits = []loading.Circuit{{CircuitFacts: loading.CircuitFacts{
		NominalV: f64(230), Phases: integer(1), Curve: "C", RatingA: f64(10), RCD: "none", Neutral: "own", CentralBattery: "none",
	}}}
	for d := range 5 {
		s.Drivers = append(s.Drivers, loading.Driver{
			DriverFacts: loading.DriverFacts{CableM: f64(1.5), CableMM2: f64(1.5), CableClass: "5", CableRatedA: f64(16), TerminalRatedA: f64(16), Segregated: yes(), TouchableLive: no()},
			Model:       gear, Circuit: 0, FactSource: loading.SeenOnNameplate,
		})
		for range 4 {
			count := 1
			if bad && d == 0 {
				count = 3
			}
			s.Fixtures = append(s.Fixtures, loading.Fixture{
				FixtureFacts: loading.FixtureFacts{Zone: "dry", Conversion: "none", EmergencyMode: "none", TouchableLive: no()},
				Model:        fitting, Driver: d, Circuit: 0, FactSource: loading.SeenOnNameplate,
				Lamps: []loading.LampGroup{{Model: lamp, Count: count, HoursFitted: f64(3000)}},
			})
		}
	}
	return s
}

// sixLampDriver is one driver with six luminaires of one lamp.
func sixLampDriver() *loading.System {
	s := downlightTree(false)
	s.Drivers = s.Drivers[:1]
	for range 2 {
		s.Fixtures = append(s.Fixtures[:4:4], s.Fixtures[:2]...)
	}
	s.Fixtures = s.Fixtures[:6]
	return s
}

// BenchmarkDriverWithSixLamps is the full check of a driver with six lamps where nothing is found.
func BenchmarkDriverWithSixLamps(b *testing.B) {
	s := sixLampDriver()
	var c Checker
	if r := c.Check(s); len(r.Findings) != 0 {
		b.Fatalf("found %v", r.Findings[0].Sentence)
	}
	b.ReportAllocs()
	for b.Loop() {
		c.Check(s)
	}
}

// BenchmarkSixLampsInOneLuminaire is the same with one luminaire of six lamps.
func BenchmarkSixLampsInOneLuminaire(b *testing.B) {
	s := sixLampDriver()
	s.Fixtures = s.Fixtures[:1]
	s.Fixtures[0].Lamps[0].Count = 6
	var c Checker
	b.ReportAllocs()
	for b.Loop() {
		c.Check(s)
	}
}

// BenchmarkDriverUnread is the driver with six luminaires where half of what matters has not been read: it asks.
func BenchmarkDriverUnread(b *testing.B) {
	s := sixLampDriver()
	d := &s.Drivers[0]
	g := *d.Model
	g.MinLoadW, g.InputMinV, g.OutputV = nil, nil, nil
	d.Model, d.CableM, d.CableMM2 = &g, nil, nil
	l := *s.Fixtures[0].Lamps[0].Model
	l.Approval, l.SuitableEnclosed = nil, nil
	for i := range s.Fixtures {
		s.Fixtures[i].Lamps = []loading.LampGroup{{Model: &l, Count: 1}}
	}
	var c Checker
	if r := c.Check(s); len(r.Questions) < 5 {
		b.Fatalf("asked %v", r.Questions)
	}
	b.ReportAllocs()
	for b.Loop() {
		c.Check(s)
	}
}

// BenchmarkEstate is 250,000 drivers with 1,000,000 luminaires in trees of 20, one in twenty trees with an overloaded
// driver, on two goroutines.
func BenchmarkEstate(b *testing.B) {
	const trees = 50_000
	estate := make([]*loading.System, trees)
	for i := range estate {
		estate[i] = downlightTree(i%20 == 0)
	}
	runtime.GC()
	b.ReportAllocs()
	for b.Loop() {
		start := time.Now()
		var wait sync.WaitGroup
		found := make([]int, 2)
		for half := range 2 {
			wait.Go(func() {
				var c Checker
				for i := half; i < trees; i += 2 {
					found[half] += len(c.Check(estate[i]).Findings)
				}
			})
		}
		wait.Wait()
		if found[0]+found[1] < trees/20 {
			b.Fatalf("found %d", found[0]+found[1])
		}
		b.ReportMetric(time.Since(start).Seconds(), "s/estate")
	}
}
