package retrofit

import "lampward/calc/loading"

// A Quantity is what a load is measured in.
type Quantity string

// Quantities.
const (
	Watts    Quantity = "W"
	VoltAmps Quantity = "VA"
	Amps     Quantity = "A"
)

// A Load is what hangs on a driver, a dimmer or a circuit against its window, for showing beside each other. What is
// not known is nil; nothing is assumed in its place.
type Load struct {
	Subject    Subject  `json:"subject"`
	Quantity   Quantity `json:"quantity"`
	Present    *float64 `json:"present,omitempty"`     // lamps believed working
	Design     *float64 `json:"design,omitempty"`      // all lamps
	AfterLoss  *float64 `json:"after_loss,omitempty"`  // the largest working lamp out
	Min        *float64 `json:"min,omitempty"`         // least load stated; 0: none stated on the gear
	Max        *float64 `json:"max,omitempty"`         // rating
	DeratedMax *float64 `json:"derated_max,omitempty"` // at the air temperature recorded, where a curve is on file
	Pct        *float64 `json:"pct,omitempty"`         // present load, % of the maximum in force
}

// total sums lamps; unknown turns a sum into nil.
type total struct {
	w, va, working, largest float64
	noW, noVA               bool
	led, lamps              int
}

func (t *total) add(g *loading.LampGroup) {
	t.lamps += g.Count
	if g.Model == nil || g.Model.PowerW == nil {
		t.noW, t.noVA = t.noW || g.Count > 0, t.noVA || g.Count > 0
		return
	}
	p := *g.Model.PowerW
	working := max(g.Count-g.Dark, 0)
	t.w += float64(g.Count) * p
	t.working += float64(working) * p
	if working > 0 {
		t.largest = max(t.largest, p)
	}
	switch classOf(g.Model) {
	case filament:
		t.va += float64(g.Count) * p
	case led:
		t.led += g.Count
		fallthrough
	default:
		if g.Model.PowerFactor == nil || *g.Model.PowerFactor <= 0 {
			t.noVA = true
		} else {
			t.va += float64(g.Count) * p / *g.Model.PowerFactor
		}
	}
}

func (t *total) lampsOf(f *loading.Fixture) {
	t.noW = t.noW || f.LampsUnknown
	t.noVA = t.noVA || f.LampsUnknown
	for i := range f.Lamps {
		t.add(&f.Lamps[i])
	}
}

func unlessUnknown(v float64, unknown bool) *float64 {
	if unknown {
		return nil
	}
	return &v
}

// Loads returns the load of every driver in W and, where it is rated so, in VA; of every dimmer and switch in W of
// lamps; and of every circuit in A. The order is that of the system.
func Loads(sys *loading.System) []Load {
	drivers := make([]total, len(sys.Drivers))
	dimmers := make([]total, len(sys.Dimmers))
	circuits := make([]current, len(sys.Circuits))
	on := func(list []loading.Controlled, f *loading.Fixture, seen map[int]bool) {
		for _, c := range list {
			if c.Path == loading.PowerPath && c.Dimmer >= 0 && c.Dimmer < len(dimmers) && !seen[c.Dimmer] {
				seen[c.Dimmer] = true
				dimmers[c.Dimmer].lampsOf(f)
			}
		}
	}
	for i := range sys.Fixtures {
		f := &sys.Fixtures[i]
		seen := map[int]bool{}
		on(f.Controls, f, seen)
		if f.Driver >= 0 && f.Driver < len(drivers) {
			drivers[f.Driver].lampsOf(f)
			on(sys.Drivers[f.Driver].Controls, f, seen)
		} else if f.Circuit >= 0 && f.Circuit < len(circuits) {
			var t total
			t.lampsOf(f)
			circuits[f.Circuit].add(t.va, t.noVA || !f.GearNone)
		}
	}
	var out []Load
	for i := range sys.Drivers {
		d := &sys.Drivers[i]
		t := &drivers[i]
		subject := Subject{OnDriver, i, d.Key}
		w := Load{Subject: subject, Quantity: Watts, Present: unlessUnknown(t.working, t.noW), Design: unlessUnknown(t.w, t.noW),
			AfterLoss: unlessUnknown(t.working-t.largest, t.noW || t.lamps < 2)}
		if d.Model != nil {
			w.Min, w.Max = d.Model.MinLoadW, d.Model.MaxLoadW
			if t.led == t.lamps && t.led > 0 && d.Model.LEDMaxLoadW != nil {
				w.Max = d.Model.LEDMaxLoadW
			}
			if w.Max != nil && d.AirC != nil && len(d.Model.Derating) > 0 {
				if share, err := loading.AllowedShare(d.Model.Derating, *d.AirC); err == nil {
					w.DeratedMax = unlessUnknown(*w.Max*share, false)
				}
			}
		}
		w.percent()
		out = append(out, w)
		if d.Model != nil && d.Model.MaxLoadVA != nil {
			va := Load{Subject: subject, Quantity: VoltAmps, Present: unlessUnknown(t.va, t.noVA), Design: unlessUnknown(t.va, t.noVA), Max: d.Model.MaxLoadVA}
			va.percent()
			out = append(out, va)
		}
		if d.Circuit >= 0 && d.Circuit < len(circuits) {
			input, unknown := inputVA(d.Model, t)
			circuits[d.Circuit].add(input, unknown)
		}
	}
	for i := range sys.Dimmers {
		d := &sys.Dimmers[i]
		t := &dimmers[i]
		l := Load{Subject: Subject{OnDimmer, i, d.Key}, Quantity: Watts, Present: unlessUnknown(t.working, t.noW), Design: unlessUnknown(t.w, t.noW),
			AfterLoss: unlessUnknown(t.working-t.largest, t.noW || t.lamps < 2)}
		if d.Model != nil {
			l.Min, l.Max = d.Model.MinLoadW, d.Model.MaxLoadW
			if t.led == t.lamps && t.led > 0 {
				l.Max = d.Model.LEDMaxLoadW
				if d.Model.LEDMinLoadW != nil {
					l.Min = d.Model.LEDMinLoadW
				}
			}
		}
		l.percent()
		out = append(out, l)
	}
	for i := range sys.Circuits {
		c := &sys.Circuits[i]
		volts := c.NominalV
		if volts == nil {
			volts = sys.MainsV
		}
		l := Load{Subject: Subject{OnCircuit, i, c.Key}, Quantity: Amps, Max: c.RatingA}
		if volts != nil && *volts > 0 {
			phases := 1.0
			if c.Phases != nil && *c.Phases > 1 {
				phases = float64(*c.Phases)
			}
			l.Present = unlessUnknown(circuits[i].va / *volts / phases, circuits[i].unknown)
			l.Design = l.Present
		}
		if l.Max != nil && sys.WiringRules == loading.NFPA70 && (c.Listed100 == nil || !*c.Listed100) {
			l.DeratedMax = unlessUnknown(*l.Max*0.8, false)
		}
		l.percent()
		out = append(out, l)
	}
	return out
}

// current sums what a circuit carries, in VA.
type current struct {
	va      float64
	unknown bool
}

func (c *current) add(va float64, unknown bool) {
	c.va += va
	c.unknown = c.unknown || unknown
}

// inputVA is what gear with a load draws: its output over its efficiency and power factor.
func inputVA(g *loading.Gear, t *total) (va float64, unknown bool) {
	if g == nil || t.noW || g.Efficiency == nil || *g.Efficiency <= 0 {
		return 0, true
	}
	pf := g.PowerFactor
	if pf == nil && kindOf(g) == electronicTransformer && t.led == 0 {
		// A filament load seen through gear that keeps no charge draws as a resistor does.
		one := 1.0
		pf = &one
	}
	if pf == nil || *pf <= 0 {
		return 0, true
	}
	return t.w / *g.Efficiency / *pf, false
}

func (l *Load) percent() {
	limit := l.Max
	if l.DeratedMax != nil {
		limit = l.DeratedMax
	}
	if l.Present != nil && limit != nil && *limit > 0 {
		l.Pct = unlessUnknown(100 * *l.Present / *limit, false)
	}
}
