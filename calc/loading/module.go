package loading

import "math"

// ForwardV returns the forward voltage, V, of a module of junctions in series at a junction temperature:
//
//	V(T) = V₂₅ · k_bin + TC · N · (T − 25)
//
// v25 is the module's voltage at 25 degC, binFactor its bin about typical (1 = typical), mVPerK the coefficient of
// one junction (about −2 for white LED, −4..−1; from memory of data sheets).
func ForwardV(v25, binFactor, mVPerK float64, junctions int, junctionC float64) (float64, error) {
	if err := positive("forward_v", v25); err != nil {
		return 0, err
	}
	if err := within("bin_factor", binFactor, 0.5, 2); err != nil {
		return 0, err
	}
	if err := within("mv_per_k", mVPerK, -10, 10); err != nil {
		return 0, err
	}
	if err := within("junctions", float64(junctions), 1, 1e6); err != nil {
		return 0, err
	}
	if err := within("junction_c", junctionC, -60, 200); err != nil {
		return 0, err
	}
	return max(0, v25*binFactor+mVPerK/1000*float64(junctions)*(junctionC-25)), nil
}

// LeastModules returns the fewest modules in series whose lowest (hot) voltage still reaches the driver's window:
// ceil(V_min / V_hot).
func LeastModules(windowMinV, hotV float64) (int, error) {
	if err := notNegative("compliance_min_v", windowMinV); err != nil {
		return 0, err
	}
	if err := positive("forward_v_hot", hotV); err != nil {
		return 0, err
	}
	return int(math.Ceil(math.Min(windowMinV/hotV*(1-slack), 1e6))), nil
}

// MostModules returns the most modules in series whose highest (cold) voltage the driver's window still holds:
// floor(V_max / V_cold).
func MostModules(windowMaxV, coldV float64) (int, error) {
	if err := notNegative("compliance_max_v", windowMaxV); err != nil {
		return 0, err
	}
	if err := positive("forward_v_cold", coldV); err != nil {
		return 0, err
	}
	return whole(windowMaxV / coldV), nil
}

// MostModulesByPower returns the most modules in series the driver's power carries: floor(P_max / (I · V_run)). The
// running voltage is that of a warm module with its bin tolerance; a cold start lasts seconds and is judged against
// the voltage window only.
func MostModulesByPower(maxW, currentA, runV float64) (int, error) {
	if err := notNegative("max_load_w", maxW); err != nil {
		return 0, err
	}
	if err := positive("current_a", currentA); err != nil {
		return 0, err
	}
	if err := positive("forward_v", runV); err != nil {
		return 0, err
	}
	return whole(maxW / (currentA * runV)), nil
}

// StringPowerW returns the power, W, of n modules in series at a current.
func StringPowerW(currentA, runV float64, n int) (float64, error) {
	if err := notNegative("current_a", currentA); err != nil {
		return 0, err
	}
	if err := notNegative("forward_v", runV); err != nil {
		return 0, err
	}
	if err := within("modules", float64(n), 0, 1e6); err != nil {
		return 0, err
	}
	return currentA * runV * float64(n), nil
}

// StringCurrentMA returns the current, mA, of each of several equal parallel strings on one constant-current driver.
func StringCurrentMA(driverMA float64, strings int) (float64, error) {
	if err := notNegative("driver_ma", driverMA); err != nil {
		return 0, err
	}
	if err := within("strings", float64(strings), 1, 1e6); err != nil {
		return 0, err
	}
	return driverMA / float64(strings), nil
}

// CascadeMA returns the current, mA, of each string that is left once one of several parallel strings has opened. It
// needs two strings or more.
func CascadeMA(driverMA float64, strings int) (float64, error) {
	if err := within("strings", float64(strings), 2, 1e6); err != nil {
		return 0, err
	}
	return StringCurrentMA(driverMA, strings-1)
}

// WindowSteps shows a string against a constant-current driver's voltage window. A voltage of 0 leaves its line out.
func WindowSteps(n int, hotV, coldV, windowMinV, windowMaxV float64, basis string) []Step {
	steps := make([]Step, 0, 2)
	if hotV > 0 {
		steps = append(steps, Step{
			What: "lowest string voltage, hot",
			Sum: Figure(float64(n)) + " × " + Figure(hotV) + " V = " + Figure(float64(n)*hotV) + " V; the window begins at " +
				Figure(windowMinV) + " V",
			Basis: basis,
		})
	}
	if coldV > 0 {
		steps = append(steps, Step{
			What: "highest string voltage, cold start",
			Sum: Figure(float64(n)) + " × " + Figure(coldV) + " V = " + Figure(float64(n)*coldV) + " V; the window ends at " +
				Figure(windowMaxV) + " V",
			Basis: basis,
		})
	}
	return steps
}

// StringPowerSteps shows the running power of a string against the driver's highest power.
func StringPowerSteps(currentMA, runV float64, n int, maxW float64, basis string) []Step {
	p := currentMA / 1000 * runV * float64(n)
	return []Step{{
		What: "running power of the string",
		Sum: Figure(currentMA/1000) + " A × " + Figure(float64(n)) + " × " + Figure(runV) + " V = " + Figure(p) + " W; " +
			Figure(p) + " / " + Figure(maxW) + " = " + Percent(p/maxW),
		Basis: basis,
	}}
}

// StringCurrentSteps shows the current of one string against a limit, mA.
func StringCurrentSteps(driverMA, tolerancePct float64, strings int, limitMA float64, what, basis string) []Step {
	high := driverMA * (1 + tolerancePct/100) / float64(strings)
	line := Figure(driverMA) + " mA"
	if tolerancePct != 0 {
		line += " × " + Figure(1+tolerancePct/100)
	}
	if strings != 1 {
		line += " / " + Figure(float64(strings))
	}
	if tolerancePct != 0 || strings != 1 {
		line += " = " + Figure(high) + " mA"
	}
	return []Step{{
		What:  what,
		Sum:   line + "; " + Figure(high) + " / " + Figure(limitMA) + " = " + Percent(high/limitMA),
		Basis: basis,
	}}
}
