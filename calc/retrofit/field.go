package retrofit

// A Field is the column of the record that a question asks for.
type Field string

// Fields of lamp models.
const (
	FieldLampPower       Field = "lamp_model.power_w"
	FieldLampPowerFactor Field = "lamp_model.power_factor"
	FieldLampTechnology  Field = "lamp_model.technology"
	FieldLampSupply      Field = "lamp_model.supply"
	FieldLampRatedV      Field = "lamp_model.rated_v"
	FieldLampHighFreq    Field = "lamp_model.high_frequency"
	FieldLampNominalMA   Field = "lamp_model.nominal_ma"
	FieldLampMaxMA       Field = "lamp_model.max_ma"
	FieldForwardV        Field = "lamp_model.forward_v"
	FieldForwardVHot     Field = "lamp_model.forward_v_hot"
	FieldForwardVCold    Field = "lamp_model.forward_v_cold"
	FieldLampBridge      Field = "lamp_model.bridge"
	FieldLampApproval    Field = "lamp_model.approval"
	FieldLampEnclosed    Field = "lamp_model.suitable_enclosed"
	FieldTubeWiring      Field = "lamp_model.tube_wiring"
	FieldLampHIDGear     Field = "lamp_model.hid_gear_compatible"
	FieldLampMass        Field = "lamp_model.mass_g"
	FieldLampDimming     Field = "lamp_model.dimming"
	FieldLampPeak        Field = "lamp_model.repetitive_peak_a"
	FieldLampInrush      Field = "lamp_model.inrush_a"
)

// Fields of driver models.
const (
	FieldGearKind         Field = "driver_model.kind"
	FieldGearInputV       Field = "driver_model.input_max_v"
	FieldGearInputHz      Field = "driver_model.input_max_hz"
	FieldGearInputDC      Field = "driver_model.input_dc"
	FieldGearOutputForm   Field = "driver_model.output_form"
	FieldGearOutputV      Field = "driver_model.output_v"
	FieldGearOutputMaxW   Field = "driver_model.output_max_w"
	FieldGearOutputMA     Field = "driver_model.output_max_ma"
	FieldCurrentTolerance Field = "driver_model.current_tolerance_pct"
	FieldComplianceMin    Field = "driver_model.compliance_min_v"
	FieldComplianceMax    Field = "driver_model.compliance_max_v"
	FieldGearMinLoad      Field = "driver_model.min_load_w"
	FieldGearMaxLoad      Field = "driver_model.max_load_w"
	FieldGearMaxVA        Field = "driver_model.max_load_va"
	FieldGearLEDMaxLoad   Field = "driver_model.led_max_load_w"
	FieldRegulation       Field = "driver_model.regulation_pct"
	FieldEfficiency       Field = "driver_model.efficiency"
	FieldGearPowerFactor  Field = "driver_model.power_factor"
	FieldGearTa           Field = "driver_model.ta_c"
	FieldGearTc           Field = "driver_model.tc_c"
	FieldGearThermal      Field = "driver_model.thermal_protection"
	FieldGearSeparation   Field = "driver_model.separation"
	FieldGearDimming      Field = "driver_model.dimming"
	FieldGearRole         Field = "driver_model.analogue_role"
	FieldGearInrush       Field = "driver_model.inrush_a"
	FieldGearLeakage      Field = "driver_model.leakage_ma"
	FieldGearToroid       Field = "driver_model.toroid"
)

// Fields of dimmer models.
const (
	FieldDimmerKind       Field = "dimmer_model.kind"
	FieldDimmerMarking    Field = "dimmer_model.marking"
	FieldDimmerMinLoad    Field = "dimmer_model.min_load_w"
	FieldDimmerMaxLoad    Field = "dimmer_model.max_load_w"
	FieldDimmerMaxVA      Field = "dimmer_model.max_load_va"
	FieldDimmerCapacitive Field = "dimmer_model.capacitive_max_w"
	FieldDimmerLEDMinLoad Field = "dimmer_model.led_min_load_w"
	FieldDimmerLEDMaxLoad Field = "dimmer_model.led_max_load_w"
	FieldDimmerChannel    Field = "dimmer_model.channel_max_a"
	FieldDimmerToroids    Field = "dimmer_model.toroids"
	FieldDimmerNeutral    Field = "dimmer_model.needs_neutral"
	FieldDimmerContact    Field = "dimmer_model.capacitive_a"
	FieldDimmerRole       Field = "dimmer_model.analogue_role"
)

// Fields of fixture models.
const (
	FieldFittingGear     Field = "fixture_model.gear"
	FieldFittingDriver   Field = "fixture_model.driver_model_id"
	FieldFittingMaxW     Field = "fixture_model.max_lamp_w"
	FieldFittingEnclosed Field = "fixture_model.enclosed"
	FieldFittingShunted  Field = "fixture_model.shunted"
	FieldFittingMass     Field = "fixture_model.max_lamp_mass_g"
	FieldFittingClass    Field = "fixture_model.class"
	FieldFittingIP       Field = "fixture_model.ip"
)

// Fields of places.
const (
	FieldFixtureModel      Field = "fixture.fixture_model_id"
	FieldFixtureLamps      Field = "fixture.lamps"
	FieldFixtureFeed       Field = "fixture.feed"
	FieldFixtureOutput     Field = "fixture.output"
	FieldFixtureStrings    Field = "fixture.strings"
	FieldFixtureFedEnds    Field = "fixture.fed_ends"
	FieldFixtureStarter    Field = "fixture.starter"
	FieldFixtureEarth      Field = "fixture.earth"
	FieldFixtureConversion Field = "fixture.conversion"
	FieldFixtureLabel      Field = "fixture.conversion_label"
	FieldFixturePapers     Field = "fixture.conversion_papers"
	FieldFixtureShunted    Field = "fixture.shunted_here"
	FieldFixtureZone       Field = "fixture.zone"
	FieldDriverModel       Field = "driver.driver_model_id"
	FieldDriverSetMA       Field = "driver.set_ma"
	FieldDriverCable       Field = "driver.cable_m"
	FieldDriverCableMM2    Field = "driver.cable_mm2"
	FieldDriverCableClass  Field = "driver.cable_class"
	FieldDriverCableA      Field = "driver.cable_rated_a"
	FieldDriverAir         Field = "driver.air_c"
	FieldDriverTouchable   Field = "driver.touchable_live"
	FieldDimmerModel       Field = "dimmer.dimmer_model_id"
	FieldDimmerSetEdge     Field = "dimmer.set_edge"
	FieldDimmerWired       Field = "dimmer.neutral_wired"
	FieldCircuitV          Field = "circuit.nominal_v"
	FieldCircuitRating     Field = "circuit.rating_a"
	FieldCircuitCurve      Field = "circuit.curve"
	FieldCircuitRCD        Field = "circuit.rcd"
	FieldCircuitRCDMA      Field = "circuit.rcd_ma"
	FieldCircuitNeutral    Field = "circuit.neutral"
	FieldCircuitBattery    Field = "circuit.central_battery"
	FieldCircuitListed     Field = "circuit.listed_100"
	FieldWiringRules       Field = "building.wiring_rules"
	FieldPairing           Field = "pairing.states"
)

// A FieldText is how a field is asked for: the short word of the method, and what to look for on site.
type FieldText struct {
	Short string `json:"short"`
	Ask   string `json:"ask"`
}

var fieldTexts = map[Field]FieldText{
	FieldLampPower:       {"lamp_watts", "the power printed on the lamp, W"},
	FieldLampPowerFactor: {"lamp_pf", "the lamp's power factor, on the lamp or its data sheet"},
	FieldLampTechnology:  {"lamp_kind", "what kind of lamp it is"},
	FieldLampSupply:      {"lamp_supply", "the supply printed on the lamp: mains, 12 V ac, 12 V dc, ac and dc, or a current in mA"},
	FieldLampRatedV:      {"lamp_v", "the voltage printed on the lamp, V"},
	FieldLampHighFreq:    {"lamp_hf", "whether the lamp is stated suitable for electronic transformers"},
	FieldLampNominalMA:   {"i_nom", "the module's nominal current, mA"},
	FieldLampMaxMA:       {"i_max", "the module's highest current, mA"},
	FieldForwardV:        {"vf", "the module's voltage, V"},
	FieldForwardVHot:     {"vf", "the module's lowest voltage when hot, V"},
	FieldForwardVCold:    {"vf", "the module's highest voltage at a cold start, V"},
	FieldLampBridge:      {"bridge", "whether the lamp works at either polarity"},
	FieldLampApproval:    {"approval", "whether the lamp carries a safety approval mark"},
	FieldLampEnclosed:    {"lamp_enclosed", "whether the lamp is marked for enclosed fittings or against them"},
	FieldTubeWiring:      {"tube_wiring", "how the tube is fed: at one end, at both ends, by the ballast, by a driver of its own"},
	FieldLampHIDGear:     {"lamp_hid", "whether the lamp is made for discharge gear left in circuit"},
	FieldLampMass:        {"mass", "the lamp's mass, g"},
	FieldLampDimming:     {"dimmable", "whether the lamp is marked dimmable, and on which edge"},
	FieldLampPeak:        {"lamp_peak", "the lamp's repetitive peak current, A"},
	FieldLampInrush:      {"inrush", "the lamp's inrush current, A, and its width"},

	FieldGearKind:         {"gear_kind", "what kind of control gear it is"},
	FieldGearInputV:       {"input_v", "the input voltage range printed on the gear, V"},
	FieldGearInputHz:      {"input_v", "the input frequency printed on the gear, Hz"},
	FieldGearInputDC:      {"supply_kind", "whether the gear may be fed with dc"},
	FieldGearOutputForm:   {"gear_type", "whether the output is ac or dc"},
	FieldGearOutputV:      {"v_out", "the output voltage printed on the gear, V"},
	FieldGearOutputMaxW:   {"gear_max", "the highest load of one output, W"},
	FieldGearOutputMA:     {"i_out", "the output current printed on the driver, mA"},
	FieldCurrentTolerance: {"i_tol", "the tolerance of the driver's current, %"},
	FieldComplianceMin:    {"window", "the lower end of the driver's output voltage, V"},
	FieldComplianceMax:    {"window", "the upper end of the driver's output voltage, V"},
	FieldGearMinLoad:      {"gear_min", "the minimum load printed on the gear, W; 0 if none is stated"},
	FieldGearMaxLoad:      {"gear_max", "the maximum load printed on the gear, W"},
	FieldGearMaxVA:        {"gear_max", "the rating printed on the gear, VA"},
	FieldGearLEDMaxLoad:   {"gear_led_rating", "the separate rating for LED lamps, W; 0 if none is stated"},
	FieldRegulation:       {"regulation", "the transformer's regulation, %, or its voltage without load"},
	FieldEfficiency:       {"efficiency", "the gear's efficiency"},
	FieldGearPowerFactor:  {"pf", "the gear's power factor"},
	FieldGearTa:           {"ta", "the ta mark, the highest rated ambient temperature, °C"},
	FieldGearTc:           {"tc", "the tc mark, the highest rated case temperature, °C"},
	FieldGearThermal:      {"thermal", "whether the transformer has thermal protection"},
	FieldGearSeparation:   {"isolation", "whether the output is separated from the mains (SELV)"},
	FieldGearDimming:      {"gear_mark", "whether the gear is marked dimmable, and on which edge or signal"},
	FieldGearRole:         {"protocol", "whether the gear sources or sinks the control current"},
	FieldGearInrush:       {"inrush", "the gear's inrush current, A, and its width"},
	FieldGearLeakage:      {"leakage", "the gear's protective-conductor current, mA"},
	FieldGearToroid:       {"toroid", "whether the transformer is wound on a toroid"},

	FieldDimmerKind:       {"dimmer_edge", "what kind of dimmer or switch it is"},
	FieldDimmerMarking:    {"edges", "the letters R, L, C on the dimmer"},
	FieldDimmerMinLoad:    {"dim_min", "the dimmer's minimum load, W"},
	FieldDimmerMaxLoad:    {"dim_max", "the dimmer's maximum load, W"},
	FieldDimmerMaxVA:      {"dim_max", "the dimmer's rating for wound transformers, VA"},
	FieldDimmerCapacitive: {"dim_max", "the dimmer's rating for electronic transformers, W"},
	FieldDimmerLEDMinLoad: {"dim_min", "the dimmer's minimum LED load, W"},
	FieldDimmerLEDMaxLoad: {"led_rating", "the dimmer's rating for LED lamps, W"},
	FieldDimmerChannel:    {"dim_max", "the dimmer's rating a channel, A"},
	FieldDimmerToroids:    {"edges", "whether the dimmer allows toroids"},
	FieldDimmerNeutral:    {"neutral", "whether the switch or dimmer takes a neutral"},
	FieldDimmerContact:    {"switch_rating", "the contact rating for LED and electronic gear, A"},
	FieldDimmerRole:       {"protocol", "whether the control sources or sinks the control current"},

	FieldFittingGear:     {"gear_kind", "whether the luminaire has control gear: inside it, apart from it, or none"},
	FieldFittingDriver:   {"gear_kind", "the control gear inside the luminaire"},
	FieldFittingMaxW:     {"fixture_max", "the highest lamp power on the luminaire's label, W"},
	FieldFittingEnclosed: {"fixture_enclosed", "whether the luminaire encloses the lamp"},
	FieldFittingShunted:  {"shunted", "whether the contacts of the tube holders are joined"},
	FieldFittingMass:     {"mass", "the heaviest lamp the holder may carry, g"},
	FieldFittingClass:    {"earth", "the luminaire's protection class"},
	FieldFittingIP:       {"zone", "the luminaire's IP code"},

	FieldFixtureModel:      {"fixture", "what luminaire it is"},
	FieldFixtureLamps:      {"lamps", "what lamps are in the luminaire"},
	FieldFixtureFeed:       {"gear_kind", "what feeds the luminaire"},
	FieldFixtureOutput:     {"output", "which output of the driver feeds the luminaire"},
	FieldFixtureStrings:    {"strings", "how many parallel strings of modules there are"},
	FieldFixtureFedEnds:    {"fed_ends", "how the tube holders are wired now: live at one end, at both, or through the gear"},
	FieldFixtureStarter:    {"ballast", "which starter is fitted"},
	FieldFixtureEarth:      {"earth", "whether the protective earth is connected"},
	FieldFixtureConversion: {"gear_removed", "whether the old gear was removed or bypassed"},
	FieldFixtureLabel:      {"label", "whether the warning label of the conversion is fitted"},
	FieldFixturePapers:     {"papers", "whether the kit listing or the converter's declaration is on file"},
	FieldFixtureShunted:    {"shunted", "whether the contacts of the tube holders are joined"},
	FieldFixtureZone:       {"zone", "how wet the place is, and in which zone of a bath or pool"},
	FieldDriverModel:       {"gear_kind", "what control gear is fitted"},
	FieldDriverSetMA:       {"i_out", "the current the driver is set to, mA"},
	FieldDriverCable:       {"lead_len", "the length of the output cable to the furthest lamp, m"},
	FieldDriverCableMM2:    {"cable_size", "the section of the output cable, mm²"},
	FieldDriverCableClass:  {"cable", "whether the output cable is solid, stranded or flexible"},
	FieldDriverCableA:      {"cable", "the current rating of the output cable and its terminals, A"},
	FieldDriverAir:         {"air", "the air temperature at the gear, °C"},
	FieldDriverTouchable:   {"isolation", "whether live parts of the output can be touched"},
	FieldDimmerModel:       {"dimmer_edge", "what dimmer or switch is fitted"},
	FieldDimmerSetEdge:     {"edges", "which edge the dimmer is set to"},
	FieldDimmerWired:       {"neutral", "whether a neutral is connected to the switch or dimmer"},
	FieldCircuitV:          {"input_v", "the circuit's voltage, V"},
	FieldCircuitRating:     {"amps", "the breaker's rating, A"},
	FieldCircuitCurve:      {"inrush", "the breaker's curve"},
	FieldCircuitRCD:        {"rcd", "whether a residual-current device protects the way, and which"},
	FieldCircuitRCDMA:      {"rcd", "the rated residual current, mA"},
	FieldCircuitNeutral:    {"neutral", "whether the way has a neutral of its own"},
	FieldCircuitBattery:    {"supply_kind", "what feeds the circuit when the mains are lost"},
	FieldCircuitListed:     {"amps", "whether the breaker is listed for 100 % continuous load"},
	FieldWiringRules:       {"amps", "which wiring rules apply to the building"},
	FieldPairing:           {"ballast", "whether the tube's maker lists this ballast"},
}

// aside are the fields that nobody sees from a ladder and that seldom turn an answer about a place that is not on record:
// they are told as to be confirmed.
var aside = map[Field]bool{
	FieldLampApproval: true, FieldLampPeak: true, FieldLampInrush: true,
	FieldGearInrush: true, FieldGearLeakage: true,
	FieldFittingMaxW: true, FieldFittingEnclosed: true, FieldFittingClass: true, FieldFittingIP: true,
	FieldFixtureModel: true, FieldFixtureEarth: true, FieldFixtureLabel: true, FieldFixturePapers: true, FieldFixtureZone: true,
	FieldDriverCable: true, FieldDriverCableMM2: true, FieldDriverCableClass: true, FieldDriverCableA: true, FieldDriverAir: true, FieldDriverTouchable: true,
	FieldCircuitV: true, FieldCircuitRating: true, FieldCircuitCurve: true, FieldCircuitRCD: true, FieldCircuitRCDMA: true,
	FieldCircuitNeutral: true, FieldCircuitBattery: true, FieldCircuitListed: true, FieldWiringRules: true,
}

// decides reports whether an answer to the question could turn a verdict. Nobody has recorded anything about a bare place.
func (q *Question) decides(bare bool) bool {
	switch {
	case bare:
		return !aside[q.Field] && (q.Blocks || q.Severity != Low)
	default:
		// Silence about approval is no sign of danger: a person has to have recorded that there is none.
		return q.Field != FieldLampApproval && (q.Blocks || q.Severity != Low)
	}
}

// Text returns how the field is asked for; a field without an entry is asked for by its name.
func (f Field) Text() FieldText {
	if t, ok := fieldTexts[f]; ok {
		return t
	}
	return FieldText{string(f), string(f)}
}
