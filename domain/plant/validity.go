package plant

import (
	"fmt"
	"slices"
	"strings"

	"lampward/calc/loading"
	"lampward/domain"
)

// Words a record may hold. The empty word is always allowed: nobody looked.
var (
	technologies = []string{loading.Halogen, loading.Incandescent, loading.CFL, loading.Fluorescent, loading.MetalHalide,
		loading.Sodium, loading.LEDLamp, loading.LEDTube, loading.LEDModule}
	supplies = []string{loading.SupplyMainsAC, loading.SupplyELVAC, loading.SupplyELVDC, loading.SupplyELVACDC,
		loading.SupplyConstantCurrent, loading.SupplyGear}
	gearKinds = []string{loading.ElectronicTransformer, loading.MagneticTransformer, loading.LEDConstantVoltage,
		loading.LEDConstantCurrent, loading.ElectronicBallast, loading.MagneticBallast, loading.HIDGearWithIgnitor,
		loading.EmergencyPack}
	controlKinds = []string{loading.LeadingEdge, loading.TrailingEdge, loading.UniversalPhase, loading.Analogue1to10V,
		loading.Analogue0to10V, loading.DALI, loading.PWMDC, loading.SwitchContact, loading.SwitchElectronic,
		loading.Detector, loading.Photocell, loading.TimeSwitch, loading.Contactor}
	dimmings = []string{loading.LeadingEdge, loading.TrailingEdge, loading.PhaseCut, loading.Analogue1to10V,
		loading.Analogue0to10V, loading.DALI, loading.PWMDC}
	zones = []string{"dry", "damp", "wet", "outdoor", "bath_0", "bath_1", "bath_2", "pool_0", "pool_1", "pool_2"}
	parts = []string{KindLamp, KindDriver, KindDimmer, KindFixture, KindBattery}
)

func (h *ModelHead) check(c *domain.Check, name string) {
	c.Code("/code", h.Code)
	c.Line("/name", name, true)
	c.Text("/note", h.Note)
	c.Items("/also_known_as", len(h.AlsoKnownAs))
	for i, code := range h.AlsoKnownAs {
		c.Line(fmt.Sprintf("/also_known_as/%d", i), code, true)
	}
}

func dimming(c *domain.Check, accepted []string) {
	c.Items("/dimming", len(accepted))
	for i, d := range accepted {
		if !slices.Contains(dimmings, d) {
			c.Add(fmt.Sprintf("/dimming/%d", i), "must be one of %s", strings.Join(dimmings, ", "))
		}
	}
}

func ordered(c *domain.Check, pointer string, low, high *float64, what string) {
	if low != nil && high != nil && *low > *high {
		c.Add(pointer, "must not be below %s", what)
	}
}

// Validate reports every field of m that breaks a rule.
func (m *LampModel) Validate() error {
	c := domain.NewCheck("lamp model")
	m.check(c, m.Name)
	c.OneOf("/technology", m.Technology, technologies...)
	c.OneOf("/supply", m.Supply, supplies...)
	c.OneOf("/tube_wiring", m.TubeWiring, "single_ended", "double_ended", "gear_fed", "external_driver")
	c.Source("/fact_source", m.FactSource)
	for at, v := range map[string]string{"/cap": m.Cap, "/ilcos": m.ILCOS, "/life_basis": m.LifeBasis, "/hazardous_content": m.HazardousContent} {
		c.Line(at, v, false)
	}
	c.Range("/rated_v", m.RatedV, 0.5, 1000, "V")
	c.Range("/max_v", m.MaxV, 0.5, 1500, "V")
	c.Range("/nominal_ma", m.NominalMA, 1, 20000, "mA")
	c.Range("/max_ma", m.MaxMA, 1, 20000, "mA")
	c.Range("/power_w", m.PowerW, 0.01, 5000, "W")
	c.Range("/power_factor", m.PowerFactor, 0.05, 1, "")
	c.Range("/forward_v", m.ForwardV, 0.5, 1000, "V")
	c.Range("/forward_v_cold", m.ForwardVCold, 0.5, 1000, "V")
	c.Range("/forward_v_hot", m.ForwardVHot, 0.5, 1000, "V")
	ordered(c, "/forward_v_cold", m.ForwardVHot, m.ForwardVCold, "forward_v_hot")
	ordered(c, "/max_ma", m.NominalMA, m.MaxMA, "nominal_ma")
	c.Range("/flux_lm", m.FluxLM, 0, 1e6, "lm")
	c.Range("/colour_k", m.ColourK, 1000, 25000, "K")
	c.Range("/cri", m.CRI, -100, 100, "")
	c.Range("/beam_deg", m.BeamDeg, 0.1, 360, "degrees")
	c.Range("/rated_life_h", m.RatedLifeH, 1, 1e6, "h")
	c.Range("/switching_cycles", m.SwitchingCycles, 1, 1e8, "starts")
	c.Range("/repetitive_peak_a", m.RepetitivePeakA, 0, 1000, "A")
	c.Range("/inrush_a", m.InrushA, 0, 10000, "A")
	c.Range("/inrush_us", m.InrushUS, 0.1, 1e6, "us")
	c.Range("/mass_g", m.MassG, 0.1, 50000, "g")
	c.Range("/warranty_months", m.WarrantyMonths, 0, 600, "months")
	c.Range("/warranty_h", m.WarrantyH, 0, 1e6, "h")
	dimming(c, m.Dimming)
	return c.Err()
}

// Validate reports every field of m that breaks a rule.
func (m *DriverModel) Validate() error {
	c := domain.NewCheck("driver model")
	m.check(c, m.Name)
	c.OneOf("/kind", m.Kind, gearKinds...)
	c.OneOf("/output_form", m.OutputForm, loading.OutputHFAC, loading.OutputMainsAC, loading.OutputDC)
	c.OneOf("/separation", m.Separation, "selv", "none")
	c.OneOf("/analogue_role", m.AnalogueRole, loading.Sinks, loading.Sources)
	c.OneOf("/units_breaker_curve", m.UnitsBreakerCurve, "B", "C", "D")
	c.Source("/fact_source", m.FactSource)
	c.Line("/life_basis", m.LifeBasis, false)
	c.Range("/input_min_v", m.InputMinV, 1, 1000, "V")
	c.Range("/input_max_v", m.InputMaxV, 1, 1000, "V")
	ordered(c, "/input_max_v", m.InputMinV, m.InputMaxV, "input_min_v")
	c.Range("/input_min_hz", m.InputMinHz, 0, 1000, "Hz")
	c.Range("/input_max_hz", m.InputMaxHz, 0, 1000, "Hz")
	ordered(c, "/input_max_hz", m.InputMinHz, m.InputMaxHz, "input_min_hz")
	c.Range("/output_v", m.OutputV, 0.5, 1000, "V")
	c.Range("/output_peak_v", m.OutputPeakV, 0.5, 10000, "V")
	c.Range("/no_load_v", m.NoLoadV, 0.5, 10000, "V")
	c.Count("/outputs", m.Outputs, 1, 64)
	c.Range("/output_max_w", m.OutputMaxW, 0.1, 10000, "W")
	c.Range("/output_min_ma", m.OutputMinMA, 1, 20000, "mA")
	c.Range("/output_max_ma", m.OutputMaxMA, 1, 20000, "mA")
	ordered(c, "/output_max_ma", m.OutputMinMA, m.OutputMaxMA, "output_min_ma")
	c.Range("/current_tolerance_pct", m.CurrentTolerance, 0, 50, "%")
	c.Range("/compliance_min_v", m.ComplianceMinV, 0, 1000, "V")
	c.Range("/compliance_max_v", m.ComplianceMaxV, 0.5, 1000, "V")
	ordered(c, "/compliance_max_v", m.ComplianceMinV, m.ComplianceMaxV, "compliance_min_v")
	c.Range("/min_load_w", m.MinLoadW, 0, 10000, "W")
	c.Range("/max_load_w", m.MaxLoadW, 0.1, 10000, "W")
	c.Range("/max_load_va", m.MaxLoadVA, 0.1, 10000, "VA")
	ordered(c, "/max_load_w", m.MinLoadW, m.MaxLoadW, "min_load_w")
	c.Range("/led_max_load_w", m.LEDMaxLoadW, 0, 10000, "W")
	c.Count("/led_max_count", m.LEDMaxCount, 0, 1000)
	c.Range("/regulation_pct", m.RegulationPct, 0, 100, "%")
	c.Range("/efficiency", m.Efficiency, 0.1, 1, "")
	c.Range("/no_load_w", m.NoLoadW, 0, 1000, "W")
	c.Range("/power_factor", m.PowerFactor, 0.05, 1, "")
	c.Range("/inrush_a", m.InrushA, 0, 10000, "A")
	c.Range("/inrush_us", m.InrushUS, 0.1, 1e6, "us")
	c.Range("/leakage_ma", m.LeakageMA, 0, 100, "mA")
	c.Count("/units_per_breaker", m.UnitsPerBreaker, 1, 10000)
	c.Range("/units_breaker_a", m.UnitsBreakerA, 1, 1000, "A")
	c.Range("/output_lead_m", m.OutputLeadM, 0.1, 1000, "m")
	c.Range("/ta_c", m.TaC, -40, 150, "degC")
	c.Range("/tc_c", m.TcC, 0, 200, "degC")
	c.Items("/derating", len(m.Derating))
	for i, p := range m.Derating {
		c.Range(fmt.Sprintf("/derating/%d/air_c", i), &p.AirC, -60, 200, "degC")
		c.Range(fmt.Sprintf("/derating/%d/share_pct", i), &p.SharePct, 0, 100, "%")
		if i > 0 && m.Derating[i-1].AirC >= p.AirC {
			c.Add(fmt.Sprintf("/derating/%d/air_c", i), "must be above the point before")
		}
	}
	c.Range("/rated_life_h", m.RatedLifeH, 1, 1e6, "h")
	c.Count("/made_year", m.MadeYear, 1900, 2200)
	c.Range("/warranty_months", m.WarrantyMonths, 0, 600, "months")
	c.Range("/warranty_h", m.WarrantyH, 0, 1e6, "h")
	dimming(c, m.Dimming)
	return c.Err()
}

// Validate reports every field of m that breaks a rule.
func (m *DimmerModel) Validate() error {
	c := domain.NewCheck("dimmer model")
	m.check(c, m.Name)
	c.OneOf("/kind", m.Kind, controlKinds...)
	c.OneOf("/analogue_role", m.AnalogueRole, loading.Sinks, loading.Sources)
	c.Source("/fact_source", m.FactSource)
	if strings.Trim(m.Marking, "RLC") != "" || len(m.Marking) > 3 {
		c.Add("/marking", "must be some of the letters R, L, C")
	}
	c.Range("/min_load_w", m.MinLoadW, 0, 100000, "W")
	c.Range("/max_load_w", m.MaxLoadW, 0, 100000, "W")
	ordered(c, "/max_load_w", m.MinLoadW, m.MaxLoadW, "min_load_w")
	c.Range("/max_load_va", m.MaxLoadVA, 0, 100000, "VA")
	c.Range("/capacitive_max_w", m.CapacitiveMaxW, 0, 100000, "W")
	c.Range("/led_min_load_w", m.LEDMinLoadW, 0, 100000, "W")
	c.Range("/led_max_load_w", m.LEDMaxLoadW, 0, 100000, "W")
	ordered(c, "/led_max_load_w", m.LEDMinLoadW, m.LEDMaxLoadW, "led_min_load_w")
	c.Count("/led_max_count", m.LEDMaxCount, 0, 10000)
	c.Range("/channel_max_a", m.ChannelMaxA, 0, 1000, "A")
	c.Range("/total_max_a", m.TotalMaxA, 0, 1000, "A")
	c.Range("/repetitive_peak_a", m.RepetitivePeakA, 0, 10000, "A")
	c.Range("/contact_a", m.ContactA, 0, 1000, "A")
	c.Range("/capacitive_a", m.CapacitiveA, 0, 1000, "A")
	c.Count("/capacitive_count", m.CapacitiveCount, 0, 10000)
	c.Count("/signal_max_units", m.SignalMaxUnits, 0, 10000)
	c.Range("/signal_max_ma", m.SignalMaxMA, 0, 10000, "mA")
	c.Range("/warranty_months", m.WarrantyMonths, 0, 600, "months")
	return c.Err()
}

// Validate reports every field of m that breaks a rule.
func (m *FixtureModel) Validate() error {
	c := domain.NewCheck("fixture model")
	m.check(c, m.Name)
	c.Count("/holders", m.Holders, 0, 1000)
	c.OneOf("/gear", m.Gear, "integral", "remote", "none")
	c.OneOf("/class", m.Class, "I", "II", "III")
	c.OneOf("/replaceable", m.Replaceable, "yes", "by_professional", "no")
	c.OneOf("/category", m.Category, "A", "B", "C", "D", "E", "F", "G")
	c.Source("/fact_source", m.FactSource)
	c.Line("/cap", m.Cap, false)
	if m.IP != "" && !validIP(m.IP) {
		c.Add("/ip", "must be an IP code such as IP20 or IP65")
	}
	c.Range("/max_lamp_mass_g", m.MaxLampMassG, 1, 50000, "g")
	c.Range("/max_lamp_w", m.MaxLampW, 0.1, 5000, "W")
	c.Range("/mass_g", m.MassG, 1, 1e6, "g")
	c.Range("/warranty_months", m.WarrantyMonths, 0, 600, "months")
	if m.DriverModelID != nil && m.Gear != "" && m.Gear != "integral" {
		c.Add("/driver_model_id", "belongs to a fixture whose gear is integral")
	}
	return c.Err()
}

// validIP reports whether code is an IP code of IEC 60529: two digits or X, letters may follow.
func validIP(code string) bool {
	if len(code) < 4 || len(code) > 6 || code[:2] != "IP" {
		return false
	}
	return strings.IndexByte("0123456X", code[2]) >= 0 && strings.IndexByte("0123456789X", code[3]) >= 0 &&
		strings.Trim(code[4:], "ABCDKHMSW") == ""
}

// Validate reports every field of p that breaks a rule.
func (p *Pairing) Validate() error {
	c := domain.NewCheck("pairing")
	n := 0
	for _, id := range []*domain.ID{p.LampModelID, p.DriverModelID, p.DimmerModelID} {
		if id != nil {
			n++
		}
	}
	if n < 2 {
		c.Add("", "must name at least two of lamp_model_id, driver_model_id, dimmer_model_id")
	}
	c.Count("/least_lamps", p.LeastLamps, 1, 1000)
	c.Count("/most_lamps", p.MostLamps, 1, 1000)
	if p.LeastLamps != nil && p.MostLamps != nil && *p.LeastLamps > *p.MostLamps {
		c.Add("/most_lamps", "must not be below least_lamps")
	}
	c.Line("/stated_by", p.StatedBy, true)
	c.Date("/stated_on", p.StatedOn)
	c.Text("/note", p.Note)
	return c.Err()
}

// Validate reports every field of p that breaks a rule.
func (p *Price) Validate() error {
	c := domain.NewCheck("price")
	c.OneOf("/model_kind", p.ModelKind, KindLamp, KindDriver, KindDimmer, KindFixture)
	if p.ModelKind == "" {
		c.Add("/model_kind", "must be lamp, driver, dimmer or fixture")
	}
	c.Date("/from_date", &p.FromDate)
	if !p.Amount.Valid() || strings.HasPrefix(string(p.Amount), "-") {
		c.Add("/amount", "must be a decimal of at least 0 with at most ten digits and four places, e.g. 4.50")
	}
	for _, f := range (domain.Money{Amount: "0", Currency: p.Currency}).Check("") {
		c.Add(f.Pointer, "%s", f.Detail)
	}
	c.Line("/source", p.Source, false)
	return c.Err()
}

// Validate reports every field of k that breaks a rule.
func (k *Circuit) Validate() error {
	c := domain.NewCheck("circuit")
	c.Line("/board", k.Board, true)
	c.Line("/way", k.Way, true)
	c.Line("/rcd", k.RCD, false)
	c.Line("/external_id", k.ExternalID, false)
	c.Text("/note", k.Note)
	c.Range("/nominal_v", k.NominalV, 5, 1000, "V")
	c.Count("/phases", k.Phases, 1, 3)
	c.OneOf("/curve", k.Curve, "B", "C", "D")
	c.Range("/rating_a", k.RatingA, 0.5, 1000, "A")
	c.Range("/rcd_ma", k.RCDMA, 1, 3000, "mA")
	c.OneOf("/rcd_type", k.RCDType, "AC", "A", "F", "B")
	c.Range("/cable_mm2", k.CableMM2, 0.1, 1000, "mm2")
	c.Range("/cable_m", k.CableM, 0, 10000, "m")
	c.OneOf("/neutral", k.Neutral, "own", "common", "borrowed")
	c.OneOf("/central_battery", k.CentralBattery, "none", "ac", "dc")
	c.Source("/fact_source", k.FactSource)
	c.Items("/pulse_curve", len(k.PulseCurve))
	for i, p := range k.PulseCurve {
		c.Range(fmt.Sprintf("/pulse_curve/%d/width_us", i), &p.WidthUS, 0.1, 1e6, "us")
		c.Range(fmt.Sprintf("/pulse_curve/%d/peak_a", i), &p.PeakA, 0.1, 1e6, "A")
	}
	return c.Err()
}

func (h *PlaceHead) check(c *domain.Check) {
	c.Line("/tag", h.Tag, true)
	c.Line("/position", h.Position, false)
	c.Line("/external_id", h.ExternalID, false)
	c.Text("/note", h.Note)
	c.Source("/fact_source", h.FactSource)
	c.Count("/fed_output", h.FedOutput, 1, 64)
	c.Time("/fitted_at", h.FittedAt)
	if h.FedByCircuitID != nil && h.FedByPlaceID != nil {
		c.Add("/fed_by_place_id", "must be absent where fed_by_circuit_id is given: a place has one normal feed")
	}
	if h.FedByPlaceID != nil && *h.FedByPlaceID == h.ID {
		c.Add("/fed_by_place_id", "must not be the place itself")
	}
}

// Validate reports every field of d that breaks a rule.
func (d *Dimmer) Validate() error {
	c := domain.NewCheck("dimmer")
	d.check(c)
	c.OneOf("/set_edge", d.SetEdge, loading.LeadingEdge, loading.TrailingEdge)
	return c.Err()
}

// Validate reports every field of d that breaks a rule.
func (d *Driver) Validate() error {
	c := domain.NewCheck("driver")
	d.check(c)
	c.Range("/set_ma", d.SetMA, 1, 20000, "mA")
	c.OneOf("/polarity", d.Polarity, "right", "reversed")
	c.Range("/cable_m", d.CableM, 0, 1000, "m")
	c.Range("/cable_mm2", d.CableMM2, 0.1, 100, "mm2")
	c.OneOf("/cable_class", d.CableClass, "1", "2", "5", "6")
	c.Items("/cable_taps_m", len(d.CableTapsM))
	for i, m := range d.CableTapsM {
		c.Range(fmt.Sprintf("/cable_taps_m/%d", i), &m, 0, 1000, "m")
	}
	c.Range("/cable_rated_a", d.CableRatedA, 0.1, 1000, "A")
	c.Range("/terminal_rated_a", d.TerminalRatedA, 0.1, 1000, "A")
	c.Range("/air_c", d.AirC, -60, 150, "degC")
	c.OneOf("/separation_before", d.SeparationBefore, "selv", "class_ii", "none")
	return c.Err()
}

// Validate reports every field of f that breaks a rule.
func (f *Fixture) Validate() error {
	c := domain.NewCheck("fixture")
	f.check(c)
	c.OneOf("/gear", f.Gear, "integral", "remote", "none")
	if f.DriverModelID != nil && f.Gear != "" && f.Gear != "integral" {
		c.Add("/driver_model_id", "belongs to a fixture whose gear is integral; other gear is a driver of its own")
	}
	c.Count("/lamp_count", f.LampCount, 0, 1000)
	c.Time("/lamps_fitted_at", f.LampsFittedAt)
	c.Line("/switch_group", f.SwitchGroup, false)
	c.Count("/strings", f.Strings, 1, 1000)
	c.OneOf("/fed_ends", f.FedEnds, "one", "both", "gear")
	c.OneOf("/starter", f.Starter, "none", "glow", "electronic", "dummy")
	c.OneOf("/conversion", f.Conversion, "none", "gear_bypassed", "gear_removed", "external_driver")
	c.OneOf("/zone", f.Zone, zones...)
	c.OneOf("/emergency_mode", f.EmergencyMode, "none", "maintained", "non_maintained")
	c.OneOf("/emergency_source", f.EmergencySource, "own_battery", "central")
	c.Range("/emergency_min", f.EmergencyMin, 0, 1440, "min")
	c.Line("/battery", f.Battery, false)
	c.Line("/escape_route", f.EscapeRoute, false)
	return c.Err()
}

// Validate reports every field of f that breaks a rule.
func (f *Feed) Validate() error {
	c := domain.NewCheck("feed")
	c.Line("/input", f.Input, false)
	c.Text("/note", f.Note)
	if (f.FromCircuitID == nil) == (f.FromPlaceID == nil) {
		c.Add("", "must name one of from_circuit_id and from_place_id")
	}
	if f.FromPlaceID != nil && *f.FromPlaceID == f.PlaceID {
		c.Add("/from_place_id", "must not be the place itself")
	}
	c.OneOf("/purpose", f.Purpose, "normal", "permanent_live", "emergency_supply")
	if f.Purpose == "" {
		c.Add("/purpose", "must be normal, permanent_live or emergency_supply")
	}
	return c.Err()
}

// Validate reports every field of l that breaks a rule.
func (l *ControlLink) Validate() error {
	c := domain.NewCheck("control")
	if (l.PlaceID == nil) == (l.CircuitID == nil) {
		c.Add("", "must name one of place_id and circuit_id")
	}
	if l.PlaceID != nil && *l.PlaceID == l.DimmerID {
		c.Add("/place_id", "must not be the dimmer itself")
	}
	c.Count("/position", &l.Position, 1, 100)
	c.OneOf("/path", l.Path, loading.PowerPath, loading.Signal)
	if l.Path == "" {
		c.Add("/path", "must be power_path or signal")
	}
	c.OneOf("/voltage_found", l.VoltageFound, "none", "elv", "mains")
	c.Text("/note", l.Note)
	return c.Err()
}

// Validate reports every field of m that breaks a rule.
func (m *MakeUp) Validate() error {
	c := domain.NewCheck("make-up")
	c.Line("/name", m.Name, true)
	c.OneOf("/gear", m.Gear, "integral", "remote", "none")
	c.Count("/lamp_count", m.LampCount, 0, 1000)
	c.Count("/fixtures_per_driver", m.FixturesPerDriver, 1, 1000)
	c.Range("/cable_m", m.CableM, 0, 1000, "m")
	c.Range("/cable_mm2", m.CableMM2, 0.1, 100, "mm2")
	c.OneOf("/cable_class", m.CableClass, "1", "2", "5", "6")
	if m.DriverModelID != nil && m.Gear == "none" {
		c.Add("/driver_model_id", "must be absent where gear is none")
	}
	if m.FixturesPerDriver != nil && m.Gear != "" && m.Gear != "remote" {
		c.Add("/fixtures_per_driver", "belongs to a make-up whose gear is remote")
	}
	c.Source("/fact_source", m.FactSource)
	c.Text("/note", m.Note)
	return c.Err()
}
