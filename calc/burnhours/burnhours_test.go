package burnhours

import (
	"encoding/json"
	"errors"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"
	"time"
)

var zero = time.Date(2024, 1, 1, 0, 0, 0, 0, time.UTC)

func hours(h float64) time.Time { return zero.Add(time.Duration(h * float64(time.Hour))) }

func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if math.IsNaN(got) || math.Abs(got-want) > tol {
		t.Errorf("%s is %.10g, want %.10g", what, got, want)
	}
}

// sane holds what is true of every interval: bounds in order and inside the time that passed.
func sane(t *testing.T, is []Interval) {
	t.Helper()
	for k, i := range is {
		if !(0 <= i.LowH && i.LowH <= i.BurnH && i.BurnH <= i.HighH && i.HighH <= i.LengthH()+1e-9) {
			t.Errorf("interval %d: %+v", k, i)
		}
		if k > 0 && !i.From.Equal(is[k-1].To) {
			t.Errorf("interval %d does not follow the one before", k)
		}
	}
}

// TestCounterWorked: derivation by hand. Readings every 720 h; a counter that was reset stands at 120 after 720 h, so
// the light burned at least 120 h. Clean: 350 + 360 of 1440 h = 0.49306; with 720 h of prior 0.5: (710+360)/2160 =
// 0.49537, so the reset interval takes 356.667 h.
func TestCounterWorked(t *testing.T) {
	t.Parallel()
	c := Counter{ModulusH: 100000, ToleranceH: 1}
	is, d, err := c.Intervals([]Reading{{hours(0), 8000}, {hours(720), 8350}, {hours(1440), 120}, {hours(2160), 480}}, Prior{0.5, 720})
	if err != nil {
		t.Fatal(err)
	}
	sane(t, is)
	if is[1].Kind != Reset || is[1].LowH != 120 || is[1].HighH != 720 {
		t.Errorf("%+v", is[1])
	}
	near(t, "reset", is[1].BurnH, 1070.0/2160*720, 1e-9)
	near(t, "duty", *d.Ratio, 710.0/1440, 1e-12)
	near(t, "shrunk", d.Shrunk, 1070.0/2160, 1e-12)
	near(t, "total", Total(is).PointH, 710+1070.0/3, 1e-9)
}

// TestCounterGolden reproduces the published cases of counters: plain, rollover, reset, jump and swap, one reading.
func TestCounterGolden(t *testing.T) {
	t.Parallel()
	raw, err := os.ReadFile(filepath.Join("..", "..", "..", "shared", "reference", "life", "golden", "duty_from_counter.json"))
	if errors.Is(err, os.ErrNotExist) {
		t.Skip("the reference files beside the checkout are absent: golden counters not compared")
	}
	if err != nil {
		t.Fatal(err)
	}
	var file struct {
		Cases map[string]struct {
			Readings []struct {
				T float64 `json:"t_hours"`
				V float64 `json:"value"`
			}
			Modulus   *float64
			Tolerance float64 `json:"tolerance_h"`
			Prior     float64 `json:"prior_ratio"`
			Exposure  float64 `json:"prior_exposure_h"`
			Intervals []struct {
				Kind             Kind
				Low, High, Point float64
			}
			Duty struct {
				N      int      `json:"clean_intervals"`
				Ratio  *float64 `json:"duty_ratio"`
				SE     *float64 `json:"se_ratio"`
				Shrunk float64  `json:"shrunk_ratio"`
			}
			Total struct{ Point, Lower, Upper float64 } `json:"burn_hours_total"`
			After struct {
				Ahead float64  `json:"ahead_calendar_h"`
				Point float64  `json:"point"`
				SE    *float64 `json:"se_extrapolation"`
			} `json:"burn_hours_after_last_reading"`
		}
	}
	if err := json.Unmarshal(raw, &file); err != nil {
		t.Fatal(err)
	}
	if len(file.Cases) < 5 {
		t.Fatalf("%d cases", len(file.Cases))
	}
	for name, g := range file.Cases {
		c := Counter{ToleranceH: g.Tolerance}
		if g.Modulus != nil {
			c.ModulusH = *g.Modulus
		}
		var rs []Reading
		for _, r := range g.Readings {
			rs = append(rs, Reading{hours(r.T), r.V})
		}
		is, d, err := c.Intervals(rs, Prior{g.Prior, g.Exposure})
		if err != nil || len(is) != len(g.Intervals) || d.CleanIntervals != g.Duty.N {
			t.Fatalf("%s: %v, %d intervals, %d clean", name, err, len(is), d.CleanIntervals)
		}
		sane(t, is)
		for k, want := range g.Intervals {
			if is[k].Kind != want.Kind {
				t.Errorf("%s %d is %s, want %s", name, k, is[k].Kind, want.Kind)
			}
			near(t, name+" point", is[k].BurnH, want.Point, 1e-6)
			near(t, name+" low", is[k].LowH, want.Low, 1e-9)
			near(t, name+" high", is[k].HighH, want.High, 1e-9)
		}
		optional(t, name+" ratio", d.Ratio, g.Duty.Ratio)
		optional(t, name+" se", d.SE, g.Duty.SE)
		near(t, name+" shrunk", d.Shrunk, g.Duty.Shrunk, 1e-9)
		sum := Total(is)
		near(t, name+" total", sum.PointH, g.Total.Point, 1e-6)
		near(t, name+" total low", sum.LowH, g.Total.Lower, 1e-6)
		near(t, name+" total high", sum.HighH, g.Total.Upper, 1e-6)
		after, se := d.Ahead(sum, g.After.Ahead)
		near(t, name+" after", after.PointH, g.After.Point, 1e-6)
		optional(t, name+" se after", se, g.After.SE)
	}
}

func optional(t *testing.T, what string, got, want *float64) {
	t.Helper()
	if (got == nil) != (want == nil) {
		t.Errorf("%s: known %t, want %t", what, got != nil, want != nil)
		return
	}
	if want != nil {
		near(t, what, *got, *want, 1e-8)
	}
}

// TestCounterSteps: a counter of whole hours, read every quarter while the light burns all the time, rises by 1 once
// in four readings. The excess is carried: nothing is a jump, and 10 h give 10 h. Two hours at once are a jump.
func TestCounterSteps(t *testing.T) {
	t.Parallel()
	var rs []Reading
	for q := 0; q <= 40; q++ {
		rs = append(rs, Reading{hours(float64(q) / 4), math.Floor(float64(q)/4 + 0.5)})
	}
	for _, c := range []Counter{{ToleranceH: 1}, {ToleranceH: 1, StepH: 1}} {
		is, _, err := c.Intervals(rs, Prior{0.5, 1})
		if err != nil {
			t.Fatal(err)
		}
		sane(t, is)
		for k, i := range is {
			if i.Kind != OK {
				t.Errorf("%+v: interval %d is %s", c, k, i.Kind)
			}
		}
		near(t, "total", Total(is).PointH, 10, 0.51)
	}
	is, _, err := Counter{ToleranceH: 1}.Intervals([]Reading{{hours(0), 5}, {hours(0.5), 7}}, Prior{0.5, 1})
	if err != nil || is[0].Kind != Jump {
		t.Errorf("%+v %v", is, err)
	}
	// The tolerance is of the sum: a meter that always counts a tenth too fast is found out in the end.
	rs = rs[:0]
	for k := range 40 {
		rs = append(rs, Reading{hours(float64(k)), 1.1 * float64(k)})
	}
	is, _, err = Counter{ToleranceH: 1}.Intervals(rs, Prior{0.5, 1})
	if err != nil {
		t.Fatal(err)
	}
	jumps := 0
	for _, i := range is {
		if i.Kind == Jump {
			jumps++
		}
	}
	if jumps == 0 {
		t.Error("a counter that runs a tenth too fast is never told")
	}
	sane(t, is)
}

func TestRefused(t *testing.T) {
	t.Parallel()
	ok := []Reading{{hours(0), 1}, {hours(1), 2}}
	for name, rs := range map[string][]Reading{
		"nan":      {{hours(0), math.NaN()}},
		"infinite": {{hours(0), math.Inf(1)}},
		"negative": {{hours(0), -1}},
	} {
		if _, _, err := (Counter{}).Intervals(rs, Prior{}); !errors.Is(err, ErrNumber) {
			t.Errorf("%s: %v", name, err)
		}
	}
	for name, rs := range map[string][]Reading{
		"backwards": {{hours(1), 1}, {hours(0), 2}},
		"twice":     {{hours(1), 1}, {hours(1), 2}},
	} {
		if _, _, err := (Counter{}).Intervals(rs, Prior{}); !errors.Is(err, ErrOrder) {
			t.Errorf("%s: %v", name, err)
		}
		if _, _, err := States(rs, time.Hour, Prior{}); !errors.Is(err, ErrOrder) {
			t.Errorf("%s: %v", name, err)
		}
	}
	for _, c := range []Counter{{ToleranceH: -1}, {ModulusH: math.NaN()}, {StepH: math.Inf(1)}} {
		if _, _, err := c.Intervals(ok, Prior{}); !errors.Is(err, ErrOption) {
			t.Errorf("%+v: %v", c, err)
		}
	}
	if _, _, err := (Counter{}).Intervals(ok, Prior{Ratio: 1.1}); !errors.Is(err, ErrOption) {
		t.Error(err)
	}
	if _, _, err := States([]Reading{{hours(0), 0.5}}, time.Hour, Prior{}); !errors.Is(err, ErrNumber) {
		t.Error(err)
	}
	if _, _, err := Energy(ok, 0, time.Hour, Prior{}); !errors.Is(err, ErrOption) {
		t.Error(err)
	}
}

// TestStates: on at 8 h for 9 h, twice; then silence for 48 h with at most 24 h allowed. Burning 18 h of 48 h clean;
// the silence adds between 0 and 48 h.
func TestStates(t *testing.T) {
	t.Parallel()
	rs := []Reading{{hours(0), 0}, {hours(8), 1}, {hours(17), 0}, {hours(32), 1}, {hours(41), 0}, {hours(48), 0}, {hours(96), 1}}
	is, d, err := States(rs, 24*time.Hour, Prior{Ratio: 0.3, ExposureH: 0})
	if err != nil {
		t.Fatal(err)
	}
	sane(t, is)
	near(t, "duty", *d.Ratio, 18.0/48, 1e-12)
	sum := Total(is)
	near(t, "low", sum.LowH, 18, 1e-12)
	near(t, "high", sum.HighH, 66, 1e-12)
	near(t, "point", sum.PointH, 18+18, 1e-12)
	days := Days(is, time.UTC)
	if len(days) != 4 {
		t.Fatalf("%d days", len(days))
	}
	near(t, "first day", days[0].Hours.PointH, 9, 1e-9)
	near(t, "second day", days[1].Hours.PointH, 9, 1e-9)
	near(t, "third day low", days[2].Hours.LowH, 0, 1e-9)
	near(t, "third day high", days[2].Hours.HighH, 24, 1e-9)
	starts := 0
	for _, d := range days {
		starts += d.Starts
	}
	if starts != 3 || days[0].Starts != 1 {
		t.Errorf("%d starts, %d on the first day", starts, days[0].Starts)
	}
}

// TestEnergy: 400 W of light for 8 of 24 h over 4 W of standby, read every quarter for 10 days: 80 h of burning. The
// standby of 16 h a day is none.
func TestEnergy(t *testing.T) {
	t.Parallel()
	rs := []Reading{{hours(0), 100}}
	kwh := 100.0
	for q := 1; q <= 960; q++ {
		w := 4.0
		if h := (q - 1) / 4 % 24; h >= 9 && h < 17 {
			w = 400
		}
		kwh += w / 4 / 1000
		rs = append(rs, Reading{hours(float64(q) / 4), kwh})
	}
	on, ok, err := LearnOnW(rs)
	if err != nil || !ok || on < 100 || on > 300 {
		t.Fatalf("learned %g W, %t, %v", on, ok, err)
	}
	is, d, err := Energy(rs, on, time.Hour, Prior{0.5, 0})
	if err != nil {
		t.Fatal(err)
	}
	sane(t, is)
	near(t, "total", Total(is).PointH, 80, 1e-9)
	near(t, "duty", *d.Ratio, 1.0/3, 1e-9)

	// What never changes has no threshold, and neither has noise of one level.
	if _, ok, _ := LearnOnW(rs[:20]); ok {
		t.Error("learned from 20 readings of standby")
	}
	r := rand.New(rand.NewPCG(1, 2))
	flat := []Reading{{hours(0), 0}}
	for q := 1; q < 400; q++ {
		flat = append(flat, Reading{hours(float64(q)), flat[q-1].Value + 0.1 + 0.05*r.Float64()})
	}
	if on, ok, _ := LearnOnW(flat); ok {
		t.Errorf("learned %g W from one level", on)
	}
	// A counter that falls says nothing of the interval.
	is, _, err = Energy([]Reading{{hours(0), 100}, {hours(1), 1}}, 50, 2*time.Hour, Prior{0.5, 1})
	if err != nil || is[0].Kind != Reset || is[0].LowH != 0 || is[0].HighH != 1 {
		t.Errorf("%+v %v", is, err)
	}
}

func zone(t *testing.T, name string) *time.Location {
	t.Helper()
	loc, err := time.LoadLocation(name)
	if err != nil {
		t.Fatal(err)
	}
	return loc
}

// TestDays: a light that burns without a pause from 30 March to 1 April 2024 in a zone where the clock skips an hour
// on the 31st burned 23 h that day; on 27 October 25 h (rules of the European Union: last Sundays, 01:00 UTC). In
// Beirut the clock skips midnight itself on 31 March 2024.
func TestDays(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		zone    string
		y, m, d int
		want    float64
	}{
		{"Europe/Vienna", 2024, 3, 31, 23}, {"Europe/Vienna", 2024, 10, 27, 25}, {"Europe/Vienna", 2024, 6, 1, 24},
		{"America/New_York", 2024, 3, 10, 23}, {"America/New_York", 2024, 11, 3, 25},
		{"Asia/Beirut", 2024, 3, 31, 23}, {"Australia/Lord_Howe", 2024, 4, 7, 24.5}, {"UTC", 2024, 2, 29, 24},
	} {
		loc := zone(t, c.zone)
		from := time.Date(c.y, time.Month(c.m), c.d-1, 12, 0, 0, 0, loc)
		to := time.Date(c.y, time.Month(c.m), c.d+1, 12, 0, 0, 0, loc)
		is, _, err := States([]Reading{{from, 1}, {to, 1}}, 100*time.Hour, Prior{})
		if err != nil {
			t.Fatal(err)
		}
		days := Days(is, loc)
		if len(days) != 3 {
			t.Fatalf("%s: %d days", c.zone, len(days))
		}
		near(t, c.zone, days[1].Hours.PointH, c.want, 1e-9)
		near(t, c.zone+" length", days[1].LengthH, c.want, 1e-9)
		near(t, c.zone+" covered", days[1].CoveredH, c.want, 1e-9)
		sum := 0.0
		for _, d := range days {
			sum += d.Hours.PointH
		}
		near(t, c.zone+" sum", sum, to.Sub(from).Hours(), 1e-9)
	}
}

func TestLocal(t *testing.T) {
	t.Parallel()
	loc := zone(t, "Europe/Vienna")
	wall := func(m, d, h, min int) time.Time { return time.Date(2024, time.Month(m), d, h, min, 0, 0, time.UTC) }
	if _, err := Local(wall(3, 31, 2, 30), loc); !errors.Is(err, ErrSkipped) {
		t.Error(err)
	}
	if _, err := Local(wall(10, 27, 2, 30), loc); !errors.Is(err, ErrDoubled) {
		t.Error(err)
	}
	if got, err := Local(wall(7, 1, 12, 0), loc); err != nil || !got.Equal(wall(7, 1, 10, 0)) {
		t.Error(got, err)
	}
	if _, err := Local(time.Date(2024, 4, 7, 1, 45, 0, 0, time.UTC), zone(t, "Australia/Lord_Howe")); !errors.Is(err, ErrDoubled) {
		t.Error(err)
	}
}

// TestBank: bytes made by hand from the fields of IEC 62386-253. 0x00DBBA00 s = 14,400,000 s = 4,000 h.
func TestBank(t *testing.T) {
	t.Parallel()
	data := make([]byte, 0x21-4)
	copy(data[0x0A-4:], []byte{0xFF, 0xFF, 0xFF, 0xFF, 0x00, 0xDB, 0xBA, 0x00})
	copy(data[0x12-4:], []byte{0x00, 0x78})
	data[0x17-4], data[0x19-4], data[0x20-4] = 0xFD, 0xFE, 0x55
	vs, err := Bank(206, 4, data)
	if err != nil || len(vs) != len(banks[206]) {
		t.Fatalf("%d fields, %v", len(vs), err)
	}
	of := map[string]Value{}
	for _, v := range vs {
		of[v.Name] = v
	}
	if of["LightSourceOnTimeResettable"].Value != nil || of["LightSourceShortCircuitCounter"].Value != nil {
		t.Error("what the gear does not know has a value")
	}
	near(t, "on time", *of["LightSourceOnTime"].Value/3600, 4000, 0)
	near(t, "voltage", *of["LightSourceVoltage"].Value, 12, 1e-12)
	near(t, "temperature", *of["LightSourceTemperature"].Value, 25, 0)
	if c := of["LightSourceOverallFailureConditionCounter"]; *c.Value != 253 || !c.AtLeast {
		t.Errorf("%+v", c)
	}
	// A field cut by the end of what was read, an unknown bank, and more than the standard allows.
	if _, err := Bank(206, 4, data[:9]); !errors.Is(err, ErrField) {
		t.Error(err)
	}
	if _, err := Bank(204, 4, data); !errors.Is(err, ErrBank) {
		t.Error(err)
	}
	if _, err := Bank(205, 0x0E, []byte{101}); !errors.Is(err, ErrField) {
		t.Error(err)
	}
	if vs, err := Bank(207, 4, []byte{50}); err != nil || *vs[0].Value != 50000 || vs[0].Unit != "h" {
		t.Error(vs, err)
	}
}

func TestSeconds(t *testing.T) {
	t.Parallel()
	if h, known, err := SecondsToHours(7200); err != nil || !known || h != 2 {
		t.Error(h, known, err)
	}
	for _, raw := range []float64{math.MaxUint32, math.MaxUint32 - 1} {
		if _, known, err := SecondsToHours(raw); err != nil || known {
			t.Error(raw, known, err)
		}
	}
	for _, raw := range []float64{-1, math.NaN(), math.Inf(1), 1.5, math.MaxUint32 + 1} {
		if _, _, err := SecondsToHours(raw); !errors.Is(err, ErrNumber) {
			t.Error(raw, err)
		}
	}
	if e, _ := (StatusFlags{Overridden: true}).Evidence(0); e {
		t.Error("an overridden value is evidence")
	}
	if e, failed := (StatusFlags{Fault: true}).Evidence(16); !e || !failed {
		t.Error("a lamp failure is not told")
	}
}

// FuzzCounter holds the bounds of every interval for any counter.
func FuzzCounter(f *testing.F) {
	f.Add(uint64(1), 100000.0, 1.0, 0.0)
	f.Add(uint64(2), 0.0, 0.0, 2.0)
	f.Fuzz(func(t *testing.T, seed uint64, modulus, tolerance, step float64) {
		r := rand.New(rand.NewPCG(seed, 7))
		var rs []Reading
		at := zero
		for range 30 {
			at = at.Add(time.Duration(1 + r.Int64N(int64(100*time.Hour))))
			rs = append(rs, Reading{at, r.Float64() * 200})
		}
		is, d, err := Counter{ModulusH: modulus, ToleranceH: tolerance, StepH: step}.Intervals(rs, Prior{0.5, 10})
		if err != nil {
			return
		}
		sane(t, is)
		if d.Shrunk < 0 || d.Shrunk > 1 {
			t.Errorf("duty %g", d.Shrunk)
		}
		whole := Total(is)
		sum := Hours{}
		for _, day := range Days(is, time.UTC) {
			sum = sum.Add(day.Hours)
			if day.Hours.PointH > day.LengthH+1e-9 || day.Hours.HighH > day.LengthH+1e-9 {
				t.Errorf("a day of %g h has %+v", day.LengthH, day.Hours)
			}
		}
		near(t, "days", sum.PointH, whole.PointH, 1e-6)
		if sum.LowH > whole.LowH+1e-6 || sum.HighH < whole.HighH-1e-6 {
			t.Errorf("days say %+v, the whole %+v", sum, whole)
		}
	})
}

// BenchmarkCounter: a year of hourly readings.
func BenchmarkCounter(b *testing.B) {
	var rs []Reading
	for h := range 8760 {
		rs = append(rs, Reading{hours(float64(h)), float64(h) / 3})
	}
	b.ReportAllocs()
	for b.Loop() {
		is, _, err := Counter{ToleranceH: 1}.Intervals(rs, Prior{0.5, 720})
		if err != nil || len(Days(is, time.UTC)) == 0 {
			b.Fatal(err)
		}
	}
}
