package loading

// Wiring rules of a building.
const (
	IEC60364   = "iec_60364"
	NFPA70     = "nfpa_70"
	OtherRules = "other"
)

// Supply is what a building says of its mains.
type Supply struct {
	MainsV      *float64 `json:"mains_v,omitempty"`      // nominal, V
	MainsHz     *float64 `json:"mains_hz,omitempty"`     // Hz
	WiringRules string   `json:"wiring_rules,omitempty"` // IEC60364, NFPA70, OtherRules
}

// CircuitFacts is what somebody saw of a final circuit at its board.
type CircuitFacts struct {
	NominalV       *float64     `json:"nominal_v,omitempty"`       // V; the building's mains where absent
	Phases         *int         `json:"phases,omitempty"`          // 1 or 3
	Curve          string       `json:"curve,omitempty"`           // B, C, D
	RatingA        *float64     `json:"rating_a,omitempty"`        // breaker, A
	Listed100      *bool        `json:"listed_100,omitempty"`      // breaker listed for 100 % continuous load
	PulseCurve     []PulsePoint `json:"pulse_curve,omitzero"`      // of the breaker
	RCD            string       `json:"rcd,omitempty"`             // none, or a name shared by the ways behind one device
	RCDMA          *float64     `json:"rcd_ma,omitempty"`          // rated residual current, mA
	RCDType        string       `json:"rcd_type,omitempty"`        // AC, A, F, B
	CableMM2       *float64     `json:"cable_mm2,omitempty"`       // conductor section, mm2
	CableM         *float64     `json:"cable_m,omitempty"`         // length to the furthest point, m
	Neutral        string       `json:"neutral,omitempty"`         // own, common, borrowed
	CentralBattery string       `json:"central_battery,omitempty"` // none, ac, dc: what feeds it when the mains are lost
	FactSource     string       `json:"fact_source,omitempty"`
}

// DimmerFacts is what somebody saw of a dimmer or switch where it is fitted.
type DimmerFacts struct {
	SetEdge string `json:"set_edge,omitempty"` // universal dimmer: LeadingEdge or TrailingEdge it is set to or has learned
	Neutral *bool  `json:"neutral_wired,omitempty"`
}

// DriverFacts is what somebody saw of control gear where it is fitted.
type DriverFacts struct {
	SetMA            *float64  `json:"set_ma,omitempty"`            // constant current: the current it is set to, mA
	Polarity         string    `json:"polarity,omitempty"`          // right, reversed
	CableM           *float64  `json:"cable_m,omitempty"`           // output cable, one way to the furthest lamp, m
	CableMM2         *float64  `json:"cable_mm2,omitempty"`         // section, mm2
	CableClass       string    `json:"cable_class,omitempty"`       // conductor class of IEC 60228: 1, 2, 5, 6
	CableTapsM       []float64 `json:"cable_taps_m,omitzero"`       // distance of each lamp along one run, m
	CableRatedA      *float64  `json:"cable_rated_a,omitempty"`     // A
	TerminalRatedA   *float64  `json:"terminal_rated_a,omitempty"`  // A
	Segregated       *bool     `json:"segregated,omitempty"`        // mains and extra-low voltage kept apart
	TouchableLive    *bool     `json:"touchable_live,omitempty"`    // live parts of its output can be touched
	AirC             *float64  `json:"air_c,omitempty"`             // air at the gear, degC
	InsulationOver   *bool     `json:"insulation_over,omitempty"`   // covered by thermal insulation or a hood
	InEnclosure      *bool     `json:"in_enclosure,omitempty"`      // in an enclosed void
	SeparationBefore string    `json:"separation_before,omitempty"` // separation of the gear that stood here before: selv, class_ii, none
}

// FixtureFacts is what somebody saw of a luminaire where it hangs.
type FixtureFacts struct {
	SwitchGroup     string   `json:"switch_group,omitempty"`
	Strings         *int     `json:"strings,omitempty"`           // parallel strings of modules
	FedEnds         string   `json:"fed_ends,omitempty"`          // tube fittings as wired now: one, both, gear
	Starter         string   `json:"starter,omitempty"`           // none, glow, electronic, dummy
	Earth           *bool    `json:"earth,omitempty"`             // protective earth connected
	Conversion      string   `json:"conversion,omitempty"`        // none, gear_bypassed, gear_removed, external_driver
	ConversionLabel *bool    `json:"conversion_label,omitempty"`  // warning label fitted
	ConversionPaper *bool    `json:"conversion_papers,omitempty"` // kit listing or converter's declaration on file
	Shunted         *bool    `json:"shunted_here,omitempty"`      // holders seen here: contacts joined
	TouchableLive   *bool    `json:"touchable_live,omitempty"`    // live parts can be touched
	InsulationOver  *bool    `json:"insulation_over,omitempty"`   // insulation or a hood over the fitting
	InEnclosure     *bool    `json:"in_enclosure,omitempty"`      // closed, whatever the model says
	Zone            string   `json:"zone,omitempty"`              // dry, damp, wet, outdoor, bath_0, bath_1, bath_2, pool_0, pool_1, pool_2
	EmergencyMode   string   `json:"emergency_mode,omitempty"`    // none, maintained, non_maintained
	EmergencySource string   `json:"emergency_source,omitempty"`  // own_battery, central
	EmergencyMin    *float64 `json:"emergency_min,omitempty"`     // stated duration, min
	Battery         string   `json:"battery,omitempty"`           // as marked
	SelfTest        *bool    `json:"self_test,omitempty"`
	EscapeRoute     string   `json:"escape_route,omitempty"` // name of the route it lights
}

// A Circuit is one way of a board.
type Circuit struct {
	CircuitFacts
	Key         Key
	TripsInYear int // recorded in the last 12 months
}

// Paths of a control.
const (
	PowerPath = "power_path" // the load's current flows through it
	Signal    = "signal"     // a control pair or bus
)

// A Controlled is one control on a place or a whole circuit.
type Controlled struct {
	Dimmer       int    // index in System.Dimmers
	Path         string // PowerPath or Signal
	VoltageFound string // on a signal pair: none, elv, mains; empty: nobody measured
}

// A Dimmer is a dimmer or switch in its place.
type Dimmer struct {
	DimmerFacts
	Key         Key
	Model       *Control // nil: unknown
	Circuit     int      // index in System.Circuits; -1: unknown
	WeldsInYear int      // contact_welded failures in the last 12 months
	Proposed    bool     // would be fitted: a proposal, not a fact
	FactSource  string
}

// A Driver is control gear in its place, or inside a luminaire (Integral).
type Driver struct {
	DriverFacts
	Key            Key
	Model          *Gear // nil: unknown
	Circuit        int   // index in System.Circuits; -1: unknown
	Controls       []Controlled
	Integral       bool // inside the one fixture that names it: findings are the fixture's
	HeatFailure    bool // an `overheats` failure is on record
	FailuresInYear int  // of the gear itself, last 12 months
	Proposed       bool // would be fitted: a proposal, not a fact
	FactSource     string
}

// A LampGroup is the lamps of one model in a fixture.
type LampGroup struct {
	Model        *Lamp    // nil: unknown
	Count        int      // lamps fitted
	Dark         int      // of these believed not working: open `dark` failures
	HoursFitted  *float64 // burning hours since fitted; nil: unknown
	FailureKnown bool     // a failure of any mode, flicker and noise included, is on record since it was fitted
	Proposed     bool     // would be fitted: a proposal, not a fact
}

// EmergencyRecord is what the last function test of an emergency luminaire was made with.
type EmergencyRecord struct {
	Tested       bool // a test is on record
	Lamp, Gear   Key  // fitted then
	Battery      string
	ChangedLater bool // a lamp, driver or battery was changed after the last function test
}

// A Fixture is a luminaire in its place.
type Fixture struct {
	FixtureFacts
	Key            Key
	Model          *Fitting // nil: unknown
	GearNone       bool     // somebody looked: no control gear, the lamps are straight on the circuit
	Driver         int      // index in System.Drivers; -1: none known
	Output         int      // of a driver with several outputs, from 1; 0: not stated
	Circuit        int      // index in System.Circuits of its normal feed; -1: unknown
	FurtherFeeds   int      // supplies besides the normal one
	Controls       []Controlled
	Lamps          []LampGroup
	LampsUnknown   bool // holders nobody has looked at
	Emergency      EmergencyRecord
	FailuresInYear int // most failures in one of its holders in the last 12 months
	FactSource     string
}

// System is everything one finding can depend on: the circuits, controls, gear and luminaires joined by power feeds,
// controls and shared residual-current devices. Slices refer to each other by index.
type System struct {
	Supply
	Circuits []Circuit
	Dimmers  []Dimmer
	Drivers  []Driver
	Fixtures []Fixture
	Pairings map[PairingKey]Pairing
	Proposal bool // judge as a proposal: rules marked "proposals only" apply, blocking rules refuse
}

// A Step is one line of arithmetic behind a result.
type Step struct {
	What  string `json:"what"`  // what is worked out, in words
	Sum   string `json:"sum"`   // the arithmetic with numbers and units
	Basis string `json:"basis"` // where the formula or limit comes from
}
