package loading

import "testing"

func TestLeakage(t *testing.T) {
	t.Parallel()
	// 30 mA at 30 % (BS 7671:2018 regulation 531.3.2): 9 mA; 18 fittings of 0.5 mA, 12 of 0.7 mA, 22 of 0.4 mA.
	// At 25 % (Electrical Contractors' Association fact sheet): 7.5 mA, 15 of 0.5 mA.
	if limit := LeakageShare * 30.0; !near(limit, 9, 1e-9) {
		t.Errorf("limit = %v mA, want 9", limit)
	}
	for _, tt := range []struct {
		share, each float64
		want        int
	}{{LeakageShare, 0.5, 18}, {LeakageShare, 0.7, 12}, {LeakageShare, 0.4, 22}, {LeakageShareCautious, 0.5, 15}} {
		n := must(LeakageUnits(30, tt.share, tt.each))(t)
		if n != tt.want {
			t.Errorf("LeakageUnits(30, %v, %v) = %d, want %d", tt.share, tt.each, n, tt.want)
		}
		// One more than the count passes the limit, the count does not.
		at, over := must(LeakageMA(n, tt.each))(t), must(LeakageMA(n+1, tt.each))(t)
		if Above(at, tt.share*30) || !Above(over, tt.share*30) {
			t.Errorf("%d × %v = %v mA, one more %v mA, limit %v mA", n, tt.each, at, over, tt.share*30)
		}
	}
	// 24 × 0.4 = 9.6 mA: above.
	if got := must(LeakageMA(24, 0.4))(t); !near(got, 9.6, 0.05) || !Above(got, 9) {
		t.Errorf("24 × 0.4 mA = %v, want 9.6", got)
	}
	// A device may trip from half its rating: 15 mA of 30.
	if got := ResidualTripShare * 30; got != 15 {
		t.Errorf("may trip from %v mA, want 15", got)
	}
	if got := LeakageSteps(9.6, 30, 24)[0].Sum; got != "24 units, together 9.6 mA; limit 30 % × 30 mA = 9 mA" {
		t.Errorf("LeakageSteps = %q", got)
	}
}
