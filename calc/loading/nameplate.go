package loading

// Key identifies a model or a place to the caller. The arithmetic only compares keys; the zero Key is "no model".
type Key = [16]byte

// Technologies of a lamp.
const (
	Halogen      = "halogen"
	Incandescent = "incandescent"
	CFL          = "cfl"
	Fluorescent  = "fluorescent"
	MetalHalide  = "metal_halide"
	Sodium       = "sodium"
	LEDLamp      = "led_lamp"
	LEDTube      = "led_tube"
	LEDModule    = "led_module"
)

// Supplies a lamp needs.
const (
	SupplyMainsAC         = "mains_ac"         // straight on the mains
	SupplyELVAC           = "elv_ac"           // extra-low voltage, ac only
	SupplyELVDC           = "elv_dc"           // extra-low voltage, dc only
	SupplyELVACDC         = "elv_ac_dc"        // extra-low voltage, ac or dc
	SupplyConstantCurrent = "constant_current" // bare modules in series
	SupplyGear            = "gear"             // a ballast or discharge gear
)

// Kinds of control gear.
const (
	ElectronicTransformer = "electronic_transformer"
	MagneticTransformer   = "magnetic_transformer"
	LEDConstantVoltage    = "led_constant_voltage"
	LEDConstantCurrent    = "led_constant_current"
	ElectronicBallast     = "electronic_ballast"
	MagneticBallast       = "magnetic_ballast"
	HIDGearWithIgnitor    = "hid_gear_with_ignitor"
	EmergencyPack         = "emergency_pack"
)

// Forms of a gear's output.
const (
	OutputHFAC    = "hf_ac"    // high-frequency ac
	OutputMainsAC = "mains_ac" // ac at the mains frequency
	OutputDC      = "dc"
)

// Kinds of control: everything that dims or switches a circuit.
const (
	LeadingEdge      = "leading_edge"
	TrailingEdge     = "trailing_edge"
	UniversalPhase   = "universal_phase"
	Analogue1to10V   = "analogue_1_10v"
	Analogue0to10V   = "analogue_0_10v"
	DALI             = "dali"
	PWMDC            = "pwm_dc"
	SwitchContact    = "switch_contact"
	SwitchElectronic = "switch_electronic" // two-wire electronic switch
	Detector         = "detector"
	Photocell        = "photocell"
	TimeSwitch       = "time_switch"
	Contactor        = "contactor"
)

// PhaseCut in a list of dimming accepted means "dimmable on a phase-cut dimmer", the edge not named.
const PhaseCut = "phase_cut"

// Roles on an analogue control pair.
const (
	Sinks   = "sinks"
	Sources = "sources"
)

// Sources of a checked fact, from the strongest to the weakest. Empty means that nobody said where it came from and
// counts as assumed.
const (
	SeenOnNameplate = "seen_on_nameplate"
	DataSheet       = "data_sheet"
	Drawing         = "drawing"
	HandedOver      = "handed_over"
	SaidByPerson    = "said_by_person"
	Assumed         = "assumed"
)

// Lamp is what a lamp model states about itself.
type Lamp struct {
	Key               Key      `json:"-" db:"-"`
	Name              string   `json:"name"`
	Technology        string   `json:"technology,omitempty"`          // Halogen ... LEDModule
	Cap               string   `json:"cap,omitempty"`                 // IEC 60061 designation, e.g. GU5.3
	ILCOS             string   `json:"ilcos,omitempty"`               // IEC 61231 code
	Supply            string   `json:"supply,omitempty"`              // SupplyMainsAC ... SupplyGear
	RatedV            *float64 `json:"rated_v,omitempty"`             // V
	MaxV              *float64 `json:"max_v,omitempty"`               // highest stated voltage, V
	NominalMA         *float64 `json:"nominal_ma,omitempty"`          // module current, mA
	MaxMA             *float64 `json:"max_ma,omitempty"`              // highest module current, mA
	PowerW            *float64 `json:"power_w,omitempty"`             // input power of the lamp itself, W
	PowerFactor       *float64 `json:"power_factor,omitempty"`        // 0..1
	ForwardV          *float64 `json:"forward_v,omitempty"`           // module voltage running hot, typical, V
	ForwardVCold      *float64 `json:"forward_v_cold,omitempty"`      // highest module voltage at a cold start, V
	ForwardVHot       *float64 `json:"forward_v_hot,omitempty"`       // lowest module voltage hot, V
	Bridge            *bool    `json:"bridge,omitempty"`              // has its own bridge rectifier: polarity does not matter
	HighFrequency     *bool    `json:"high_frequency,omitempty"`      // stated suitable (or unsuitable) for a high-frequency supply
	FluxLM            *float64 `json:"flux_lm,omitempty"`             // lm
	ColourK           *float64 `json:"colour_k,omitempty"`            // K
	CRI               *float64 `json:"cri,omitempty"`                 // 0..100
	BeamDeg           *float64 `json:"beam_deg,omitempty"`            // degrees
	RatedLifeH        *float64 `json:"rated_life_h,omitempty"`        // h
	LifeBasis         string   `json:"life_basis,omitempty"`          // B50, L70B50 ...
	SwitchingCycles   *float64 `json:"switching_cycles,omitempty"`    // stated starts
	Dimming           []string `json:"dimming,omitzero"`              // what it accepts: LeadingEdge, TrailingEdge, PhaseCut ...; empty: not dimmable
	RepetitivePeakA   *float64 `json:"repetitive_peak_a,omitempty"`   // current spike each half cycle, A
	InrushA           *float64 `json:"inrush_a,omitempty"`            // peak, A
	InrushUS          *float64 `json:"inrush_us,omitempty"`           // half-value width, us
	SuitableEnclosed  *bool    `json:"suitable_enclosed,omitempty"`   // marked for enclosed fittings
	TubeWiring        string   `json:"tube_wiring,omitempty"`         // single_ended, double_ended, gear_fed, external_driver
	HIDGearCompatible *bool    `json:"hid_gear_compatible,omitempty"` // an LED lamp made for discharge gear left in circuit
	HazardousContent  string   `json:"hazardous_content,omitempty"`   // none, mercury ...
	MassG             *float64 `json:"mass_g,omitempty"`              // g
	Approval          *bool    `json:"approval,omitempty"`            // carries a safety approval
	WarrantyMonths    *float64 `json:"warranty_months,omitempty"`     // months
	WarrantyH         *float64 `json:"warranty_h,omitempty"`          // burning hours
	FactSource        string   `json:"fact_source,omitempty"`         // SeenOnNameplate ... Assumed
}

// CurvePoint is one point of a derating curve: the share of the rated load allowed at an air temperature.
type CurvePoint struct {
	AirC     float64 `json:"air_c"`     // degC
	SharePct float64 `json:"share_pct"` // % of the rated load
}

// PulsePoint is one point of a breaker's pulse curve: the peak current it carries without tripping at a pulse width.
type PulsePoint struct {
	WidthUS float64 `json:"width_us"` // half-value width, us
	PeakA   float64 `json:"peak_a"`   // A
}

// Gear is what a model of control gear of any kind states about itself.
type Gear struct {
	Key                Key          `json:"-" db:"-"`
	Name               string       `json:"name"`
	Kind               string       `json:"kind,omitempty"`                  // ElectronicTransformer ... EmergencyPack
	Toroid             *bool        `json:"toroid,omitempty"`                // a wound transformer on a toroid
	InputMinV          *float64     `json:"input_min_v,omitempty"`           // V
	InputMaxV          *float64     `json:"input_max_v,omitempty"`           // V
	InputMinHz         *float64     `json:"input_min_hz,omitempty"`          // Hz
	InputMaxHz         *float64     `json:"input_max_hz,omitempty"`          // Hz
	InputDC            *bool        `json:"input_dc,omitempty"`              // dc allowed at the input
	OutputForm         string       `json:"output_form,omitempty"`           // OutputHFAC, OutputMainsAC, OutputDC
	OutputV            *float64     `json:"output_v,omitempty"`              // rms or dc at full load, V
	OutputPeakV        *float64     `json:"output_peak_v,omitempty"`         // V
	NoLoadV            *float64     `json:"no_load_v,omitempty"`             // V
	Outputs            *int         `json:"outputs,omitempty"`               // count
	OutputMaxW         *float64     `json:"output_max_w,omitempty"`          // highest load of one output of several, W
	OutputMinMA        *float64     `json:"output_min_ma,omitempty"`         // constant current: lowest setting, mA
	OutputMaxMA        *float64     `json:"output_max_ma,omitempty"`         // constant current: highest setting, mA
	CurrentTolerance   *float64     `json:"current_tolerance_pct,omitempty"` // %
	ComplianceMinV     *float64     `json:"compliance_min_v,omitempty"`      // constant current: voltage window, V
	ComplianceMaxV     *float64     `json:"compliance_max_v,omitempty"`      // V
	MinLoadW           *float64     `json:"min_load_w,omitempty"`            // W; 0: none stated on the gear
	MaxLoadW           *float64     `json:"max_load_w,omitempty"`            // W
	MaxLoadVA          *float64     `json:"max_load_va,omitempty"`           // VA
	LEDMaxLoadW        *float64     `json:"led_max_load_w,omitempty"`        // separate rating for LED lamps, W
	LEDMaxCount        *int         `json:"led_max_count,omitempty"`         // separate rating for LED lamps, count
	RegulationPct      *float64     `json:"regulation_pct,omitempty"`        // (no-load V - full-load V) / full-load V, %
	Efficiency         *float64     `json:"efficiency,omitempty"`            // 0..1
	NoLoadW            *float64     `json:"no_load_w,omitempty"`             // W
	PowerFactor        *float64     `json:"power_factor,omitempty"`          // 0..1
	InrushA            *float64     `json:"inrush_a,omitempty"`              // peak, A
	InrushUS           *float64     `json:"inrush_us,omitempty"`             // half-value width, us
	LeakageMA          *float64     `json:"leakage_ma,omitempty"`            // protective-conductor current, mA
	UnitsPerBreaker    *int         `json:"units_per_breaker,omitempty"`     // maker's count ...
	UnitsBreakerA      *float64     `json:"units_breaker_a,omitempty"`       // ... on a breaker of this rating, A
	UnitsBreakerCurve  string       `json:"units_breaker_curve,omitempty"`   // ... and curve: B, C, D
	OutputLeadM        *float64     `json:"output_lead_m,omitempty"`         // longest marked output lead, m
	TaC                *float64     `json:"ta_c,omitempty"`                  // highest rated ambient, degC
	TcC                *float64     `json:"tc_c,omitempty"`                  // highest rated case temperature, degC
	Derating           []CurvePoint `json:"derating,omitzero"`               // load allowed against air temperature
	RatedLifeH         *float64     `json:"rated_life_h,omitempty"`          // h at tc
	LifeBasis          string       `json:"life_basis,omitempty"`            // B10 ...
	Dimming            []string     `json:"dimming,omitzero"`                // what it accepts; empty: not dimmable, or found unmarked
	AnalogueRole       string       `json:"analogue_role,omitempty"`         // Sinks or Sources on its control pair
	ZeroVOff           *bool        `json:"zero_v_off,omitempty"`            // 0 V means off
	Separation         string       `json:"separation,omitempty"`            // selv, none
	ThermalProtection  *bool        `json:"thermal_protection,omitempty"`
	InsulationCovering *bool        `json:"insulation_covering,omitempty"` // may be covered by thermal insulation
	PCBFree            *bool        `json:"pcb_free,omitempty"`            // marked free of PCB
	MadeYear           *int         `json:"made_year,omitempty"`
	WarrantyMonths     *float64     `json:"warranty_months,omitempty"` // months
	WarrantyH          *float64     `json:"warranty_h,omitempty"`      // energised hours
	FactSource         string       `json:"fact_source,omitempty"`
}

// Control is what a model of dimmer or switch states about itself.
type Control struct {
	Key             Key      `json:"-" db:"-"`
	Name            string   `json:"name"`
	Kind            string   `json:"kind,omitempty"`              // LeadingEdge ... Contactor
	Marking         string   `json:"marking,omitempty"`           // IEC 60669-2-1 letters: some of R, L, C
	MinLoadW        *float64 `json:"min_load_w,omitempty"`        // W; 0: none stated
	MaxLoadW        *float64 `json:"max_load_w,omitempty"`        // filament (R) rating, W
	MaxLoadVA       *float64 `json:"max_load_va,omitempty"`       // wound-transformer (L) rating, VA
	CapacitiveMaxW  *float64 `json:"capacitive_max_w,omitempty"`  // electronic-transformer (C) rating, W
	LEDMinLoadW     *float64 `json:"led_min_load_w,omitempty"`    // W
	LEDMaxLoadW     *float64 `json:"led_max_load_w,omitempty"`    // W
	LEDMaxCount     *int     `json:"led_max_count,omitempty"`     // lamps
	ChannelMaxA     *float64 `json:"channel_max_a,omitempty"`     // A per channel
	TotalMaxA       *float64 `json:"total_max_a,omitempty"`       // A over all channels
	RepetitivePeakA *float64 `json:"repetitive_peak_a,omitempty"` // A
	Toroids         *bool    `json:"toroids,omitempty"`           // toroids allowed
	NeedsNeutral    *bool    `json:"needs_neutral,omitempty"`     // false: two-wire
	ContactA        *float64 `json:"contact_a,omitempty"`         // resistive contact rating, A
	CapacitiveA     *float64 `json:"capacitive_a,omitempty"`      // contact rating for LED and electronic gear, A
	CapacitiveCount *int     `json:"capacitive_count,omitempty"`  // stated count of LED or electronic gear
	AnalogueRole    string   `json:"analogue_role,omitempty"`     // Sinks or Sources
	SignalMaxUnits  *int     `json:"signal_max_units,omitempty"`  // gear one control pair may carry
	SignalMaxMA     *float64 `json:"signal_max_ma,omitempty"`     // mA
	WarrantyMonths  *float64 `json:"warranty_months,omitempty"`
	FactSource      string   `json:"fact_source,omitempty"`
}

// Fitting is what a luminaire model states about itself.
type Fitting struct {
	Key             Key      `json:"-" db:"-"`
	Name            string   `json:"name"`
	Holders         *int     `json:"holders,omitempty"`         // count
	Cap             string   `json:"cap,omitempty"`             // IEC 60061 designation of its holders
	Shunted         *bool    `json:"shunted,omitempty"`         // tube holders with joined contacts
	MaxLampMassG    *float64 `json:"max_lamp_mass_g,omitempty"` // g
	MaxLampW        *float64 `json:"max_lamp_w,omitempty"`      // label, W a holder
	Gear            string   `json:"gear,omitempty"`            // integral, remote, none
	Class           string   `json:"class,omitempty"`           // I, II, III
	IP              string   `json:"ip,omitempty"`              // IP code, e.g. IP65
	Enclosed        *bool    `json:"enclosed,omitempty"`
	InsulationRated *bool    `json:"insulation_rated,omitempty"` // may be in contact with insulation
	FireRated       *bool    `json:"fire_rated,omitempty"`
	Discharge       *bool    `json:"discharge,omitempty"`       // made for a high-intensity discharge lamp
	Emergency       *bool    `json:"emergency,omitempty"`       // emergency version
	Category        string   `json:"category,omitempty"`        // luminaire category A to G, CIE 97
	Replaceable     string   `json:"replaceable,omitempty"`     // light source: yes, by_professional, no
	MassG           *float64 `json:"mass_g,omitempty"`          // g
	ListedRetrofit  *bool    `json:"listed_retrofit,omitempty"` // rewiring is covered by a listed kit
	WarrantyMonths  *float64 `json:"warranty_months,omitempty"`
	FactSource      string   `json:"fact_source,omitempty"`
}

// PairingKey names two or three models that are stated to work together; an absent member is the zero Key.
type PairingKey struct{ Lamp, Gear, Control Key }

// Pairing is what is stated of models that work together.
type Pairing struct {
	LeastLamps *int // count; nil: not stated
	MostLamps  *int // count; nil: not stated
}
