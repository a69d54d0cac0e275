package loading

import (
	"math"
	"testing"
)

// FuzzNumbers gives every function free numbers: each either names the number it cannot use or answers with finite
// numbers.
func FuzzNumbers(f *testing.F) {
	f.Add(12.0, 50.0, 0.9, 20.0, 3)
	f.Add(230.0, 400.0, 0.5, 85.0, 1)
	f.Add(0.0, -1.0, math.Inf(1), math.NaN(), 0)
	f.Add(1e308, 5e-324, 1.0, -1e308, math.MaxInt)
	f.Add(1e9, 1e-9, 1e-9, 1e9, 1000000)
	f.Add(40.0, 100.0, 1.0, 105.0, math.MinInt)
	f.Fuzz(func(t *testing.T, a, b, c, d float64, n int) {
		got := func(name string, err error, vs ...float64) {
			t.Helper()
			if err != nil {
				if err.Error() == "" {
					t.Errorf("%s: an error without words", name)
				}
				return
			}
			for _, v := range vs {
				if math.IsNaN(v) || math.IsInf(v, 0) {
					t.Errorf("%s(%v, %v, %v, %v, %d) = %v", name, a, b, c, d, n, vs)
				}
			}
		}
		one := func(name string) func(float64, error) {
			return func(v float64, err error) { t.Helper(); got(name, err, v) }
		}
		count := func(name string) func(int, error) {
			return func(v int, err error) {
				t.Helper()
				if err == nil && (v < 0 || v > 1e6) {
					t.Errorf("%s counts %d", name, v)
				}
			}
		}

		var l Load
		got("Add", l.Add(n, b, c, c), l.W, l.VALow, l.VAHigh, l.LargestW)
		got("Add", l.Add(1, d, c, 1), l.W, l.VALow, l.VAHigh)
		got("AddUnknown", l.AddUnknown(n))
		check := CheckLoad(l, Window{MinW: &a, MaxW: &b, MaxVA: &d})
		if check.Over < Open || check.Over > Fails {
			t.Errorf("verdict %v", check.Over)
		}
		one("SmallestDriverW")(SmallestDriverW(b, c))

		one("BurstsPerSecond")(BurstsPerSecond(a))
		peak, pp, err := BurstPeakV(a, c)
		got("BurstPeakV", err, peak, pp)
		one("LateStartPeakV")(LateStartPeakV(a, d))
		one("WoundOutputV")(WoundOutputV(a, b, c, d))
		one("SmoothedDCV")(SmoothedDCV(a))
		low, high, err := InputLimitsV(a, b)
		got("InputLimitsV", err, low, high)

		one("ForwardV")(ForwardV(a, c, d, n, b))
		count("LeastModules")(LeastModules(a, b))
		count("MostModules")(MostModules(a, b))
		count("MostModulesByPower")(MostModulesByPower(a, b, c))
		one("StringPowerW")(StringPowerW(a, b, n))
		one("StringCurrentMA")(StringCurrentMA(a, n))
		one("CascadeMA")(CascadeMA(a, n))

		one("CaseC")(CaseC(a, b, d, c))
		one("AllowedShare")(AllowedShare([]CurvePoint{{a, b}, {c, d}}, b))
		one("TenKelvinFactor")(TenKelvinFactor(a, b))
		h, _, err := CapacitorLifeH(a, b, d, c)
		got("CapacitorLifeH", err, h)
		one("ArrheniusFactor")(ArrheniusFactor(c, a, b))

		one("CopperFactor")(CopperFactor(a))
		one("ResistanceOhmPerKM")(ResistanceOhmPerKM(a, "5", b))
		one("TinnedOhmPerKM")(TinnedOhmPerKM(a, b))
		mm, mm2, r, err := Gauge(n, a)
		got("Gauge", err, mm, mm2, r)
		one("CurrentA")(CurrentA(a, b, c))
		one("DropV")(DropV(a, b, d))
		drops, err := AppendTapDropsV(nil, []float64{a, b}, []float64{c, d}, b)
		got("AppendTapDropsV", err, drops...)
		v, i, err := FilamentAtEndV(a, b, c, d)
		got("FilamentAtEndV", err, v, i)
		v, i, err = ConstantPowerAtEndV(a, b, d)
		got("ConstantPowerAtEndV", err, v, i)
		one("LongestRunM")(LongestRunM(c, a, b, d))

		one("SkinDepthMM")(SkinDepthMM(a))
		one("SkinFactor")(SkinFactor(a, b))
		one("PairInductanceUHPerM")(PairInductanceUHPerM(a, b))
		one("ReactanceOhmPerM")(ReactanceOhmPerM(a, b))
		one("SectionDiameterMM")(SectionDiameterMM(a))
		one("HighFrequencyLampV")(HighFrequencyLampV(a, b, c, d))

		for _, law := range []FilamentLaw{GeneralFilament, HalogenFilament} {
			s, err := law.At(c)
			got("At", err, s.Light, s.Power, s.Current, s.Life, s.Colour)
		}

		one("WoundInputVA")(WoundInputVA(a, c))
		low, high, err = ScreeningLEDW(a)
		got("ScreeningLEDW", err, low, high)
		one("HoldingW")(HoldingW(a, b))
		one("RepetitivePeakA")(RepetitivePeakA(n, a))
		one("BusMA")(BusMA(n, a))
		low, high, err = FlickerLimitsPct(a)
		got("FlickerLimitsPct", err, low, high)
		one("CapacitiveMA")(CapacitiveMA(a, b, d))

		one("FittingCurrentA")(FittingCurrentA(a, c, b, c))
		count("SteadyUnits")(SteadyUnits(a, c, b))
		low, high, err = ContinuousBreakerA(a)
		got("ContinuousBreakerA", err, low, high)
		one("PulseFactor")(PulseFactor(a))
		one("InrushLimitA")(InrushLimitA("C", a, b))
		one("PulseLimitA")(PulseLimitA([]PulsePoint{{a, b}, {c, d}}, b))
		count("InrushUnits")(InrushUnits(a, b))
		one("ProspectivePeakA")(ProspectivePeakA(a, b))
		count("ScaledCount")(ScaledCount(n, "B", a, "D", b))

		one("LeakageMA")(LeakageMA(n, a))
		count("LeakageUnits")(LeakageUnits(a, c, b))

		if Above(a, b) && Below(a, b) {
			t.Errorf("%v is both above and below %v", a, b)
		}
		if Figure(a) == "" {
			t.Errorf("Figure(%v) is empty", a)
		}
	})
}
