package loading

const (
	// LeakageShare is the share of a residual-current device's rating that standing leakage may use (BS 7671:2018
	// regulation 531.3.2).
	LeakageShare = 0.30
	// LeakageShareCautious is the stricter share of a contractors' fact sheet.
	LeakageShareCautious = 0.25
	// ResidualTripShare is the share of its rating from which a device may trip (from memory of its standard).
	ResidualTripShare = 0.5
)

// LeakageMA returns the standing leakage of count units, mA.
func LeakageMA(count int, eachMA float64) (float64, error) {
	if err := within("count", float64(count), 0, 1e6); err != nil {
		return 0, err
	}
	if err := notNegative("leakage_ma", eachMA); err != nil {
		return 0, err
	}
	return float64(count) * eachMA, nil
}

// LeakageUnits returns how many units of a leakage fit under a share of a residual-current device's rating.
func LeakageUnits(ratedMA, share, eachMA float64) (int, error) {
	if err := notNegative("rcd_ma", ratedMA); err != nil {
		return 0, err
	}
	if err := within("share", share, 0, 1); err != nil {
		return 0, err
	}
	if err := positive("leakage_ma", eachMA); err != nil {
		return 0, err
	}
	return whole(share * ratedMA / eachMA), nil
}

// LeakageSteps shows the leakage of everything behind one residual-current device against its limit.
func LeakageSteps(totalMA, ratedMA float64, units int) []Step {
	limit := LeakageShare * ratedMA
	return []Step{{
		What: "standing leakage of all ways behind the device",
		Sum: Figure(float64(units)) + " units, together " + Figure(totalMA) + " mA; limit 30 % × " + Figure(ratedMA) + " mA = " +
			Figure(limit) + " mA",
		Basis: "BS 7671:2018 regulation 531.3.2",
	}}
}
