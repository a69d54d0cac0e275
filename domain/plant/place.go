package plant

import (
	"time"

	"lampward/calc/loading"
	"lampward/domain"
)

// A Circuit is one way of a distribution board.
type Circuit struct {
	domain.Row
	Board      string     `json:"board"`
	Way        string     `json:"way"` // unique on its board
	SpaceID    *domain.ID `json:"space_id,omitempty"`
	ExternalID string     `json:"external_id,omitempty"`
	Note       string     `json:"note,omitempty"`
	TreeID     domain.ID  `json:"-" db:"tree_id"`
	loading.CircuitFacts
}

// PlaceHead is what a dimmer, a driver and a luminaire have in common: a place with a label, in a space, with its
// normal feed. Further feeds are records of their own (Feed).
type PlaceHead struct {
	domain.Row
	Tag            string     `json:"tag"` // the label; unique among the unretired places of the building
	SpaceID        *domain.ID `json:"space_id,omitempty"`
	Position       string     `json:"position,omitempty"`          // where in the space; in_room until a label is scanned
	FedByCircuitID *domain.ID `json:"fed_by_circuit_id,omitempty"` // normal feed: from a circuit ...
	FedByPlaceID   *domain.ID `json:"fed_by_place_id,omitempty"`   // ... or from a driver
	FedOutput      *int       `json:"fed_output,omitempty"`        // which output of that driver, from 1
	MakeUpID       *domain.ID `json:"make_up_id,omitempty"`
	FittedAt       *time.Time `json:"fitted_at,omitempty"` // when the present dimmer, driver or luminaire was fitted
	ExternalID     string     `json:"external_id,omitempty"`
	FactSource     string     `json:"fact_source,omitempty"`
	Note           string     `json:"note,omitempty"`
	Kind           string     `json:"-" db:"kind"`
	TreeID         domain.ID  `json:"-" db:"tree_id"`
}

// Place returns the head, so that code for any place can reach it.
func (h *PlaceHead) Place() *PlaceHead { return h }

// A Dimmer is the place of a dimmer or switch of any kind.
type Dimmer struct {
	PlaceHead
	DimmerModelID *domain.ID `json:"dimmer_model_id,omitempty"` // absent: nobody looked
	loading.DimmerFacts
}

// A Driver is the place of control gear that stands outside a luminaire.
type Driver struct {
	PlaceHead
	DriverModelID *domain.ID `json:"driver_model_id,omitempty"`
	loading.DriverFacts
}

// A Fixture is the place of a luminaire with its lamps.
type Fixture struct {
	PlaceHead
	FixtureModelID *domain.ID `json:"fixture_model_id,omitempty"`
	Gear           string     `json:"gear,omitempty"`            // as seen here: integral, remote, none; the model's where absent
	DriverModelID  *domain.ID `json:"driver_model_id,omitempty"` // integral gear fitted now; the model's where absent
	LampModelID    *domain.ID `json:"lamp_model_id,omitempty"`   // in all holders, or in all but those with an odd unit
	LampCount      *int       `json:"lamp_count,omitempty"`      // lamps fitted; 0: holders seen empty
	LampsFittedAt  *time.Time `json:"lamps_fitted_at,omitempty"`
	loading.FixtureFacts
}

// A Feed is a supply of a place besides its normal one.
type Feed struct {
	domain.Row
	PlaceID       domain.ID  `json:"place_id"`
	Input         string     `json:"input,omitempty"` // terminal or input of the place
	FromCircuitID *domain.ID `json:"from_circuit_id,omitempty"`
	FromPlaceID   *domain.ID `json:"from_place_id,omitempty"`
	Purpose       string     `json:"purpose"` // normal, permanent_live, emergency_supply
	Note          string     `json:"note,omitempty"`
}

// A ControlLink says that a dimmer or switch acts on a place or on a whole circuit.
type ControlLink struct {
	domain.Row
	DimmerID     domain.ID  `json:"dimmer_id"`
	PlaceID      *domain.ID `json:"place_id,omitempty"`   // what it acts on: a place ...
	CircuitID    *domain.ID `json:"circuit_id,omitempty"` // ... or a whole circuit
	Position     int        `json:"position"`             // order along the path, from 1
	Path         string     `json:"path"`                 // power_path, signal
	VoltageFound string     `json:"voltage_found,omitempty"`
	Note         string     `json:"note,omitempty"`
}

// A MakeUp is a set that is put in many places in one act: a survey row with its quantity.
type MakeUp struct {
	domain.Row
	Name              string     `json:"name"`
	FixtureModelID    *domain.ID `json:"fixture_model_id,omitempty"`
	Gear              string     `json:"gear,omitempty"` // integral, remote, none
	LampModelID       *domain.ID `json:"lamp_model_id,omitempty"`
	LampCount         *int       `json:"lamp_count,omitempty"`          // lamps a luminaire
	DriverModelID     *domain.ID `json:"driver_model_id,omitempty"`     // integral or remote gear
	FixturesPerDriver *int       `json:"fixtures_per_driver,omitempty"` // remote gear: luminaires on one
	DimmerModelID     *domain.ID `json:"dimmer_model_id,omitempty"`
	CableM            *float64   `json:"cable_m,omitempty"`
	CableMM2          *float64   `json:"cable_mm2,omitempty"`
	CableClass        string     `json:"cable_class,omitempty"`
	FactSource        string     `json:"fact_source,omitempty"`
	Note              string     `json:"note,omitempty"`
}

// A Unit is a physical lamp, driver, dimmer, luminaire or battery during its stay in one holder of one place.
type Unit struct {
	domain.Row
	PlaceID          domain.ID    `json:"place_id"`
	Part             string       `json:"part"`   // lamp, driver, dimmer, fixture, battery
	Holder           int          `json:"holder"` // from 1
	LampModelID      *domain.ID   `json:"lamp_model_id,omitempty"`
	DriverModelID    *domain.ID   `json:"driver_model_id,omitempty"`
	DimmerModelID    *domain.ID   `json:"dimmer_model_id,omitempty"`
	FixtureModelID   *domain.ID   `json:"fixture_model_id,omitempty"`
	Serial           string       `json:"serial,omitempty"`
	Batch            string       `json:"batch,omitempty"`
	Supplier         string       `json:"supplier,omitempty"`
	FittedAt         *time.Time   `json:"fitted_at,omitempty"`
	FittedHours      *float64     `json:"fitted_hours,omitempty"` // burning hours it had when fitted
	RemovedAt        *time.Time   `json:"removed_at,omitempty"`
	RemovedHours     *float64     `json:"removed_hours,omitempty"` // burning hours in this stay, with limits
	RemovedHoursLow  *float64     `json:"removed_hours_low,omitempty"`
	RemovedHoursHigh *float64     `json:"removed_hours_high,omitempty"`
	RemovedWhy       string       `json:"removed_why,omitempty"` // failed, group_relamp, retrofit, damaged, taken_out
	TemporaryUntil   *domain.Date `json:"temporary_until,omitempty"`
	WarrantyUntil    *domain.Date `json:"warranty_until,omitempty"`
	Odd              bool         `json:"-" db:"odd"` // a lamp that differs from the fixture's lamp_model_id
	Note             string       `json:"note,omitempty"`
}

// Modes of a failure.
var FailureModes = []string{"dark", "flicker", "dim", "colour_shift", "noise", "trips_breaker", "contact_welded",
	"overheats", "intermittent", "damage"}

// A Failure is a thing that stopped working as it should. Two reports are one failure only while the same unit stays.
type Failure struct {
	domain.Row
	PlaceID    *domain.ID `json:"place_id,omitempty"`
	MakeUpID   *domain.ID `json:"make_up_id,omitempty"` // "one of the sixty", where nobody knows which
	UnitID     *domain.ID `json:"unit_id,omitempty"`
	Part       string     `json:"part"`   // lamp, driver, dimmer, fixture, battery
	Holder     int        `json:"holder"` // 0: not said
	Mode       string     `json:"mode"`
	Cause      string     `json:"cause,omitempty"`
	NoticedAt  time.Time  `json:"noticed_at"`
	LastGoodAt *time.Time `json:"last_good_at,omitempty"` // last seen working
	Hours      *float64   `json:"hours,omitempty"`        // burning hours at the failure
	Reports    int        `json:"reports"`                // how many people told of it
	ClearedAt  *time.Time `json:"cleared_at,omitempty"`
	ByKind     string     `json:"by_kind"`
	ByID       domain.ID  `json:"by_id"`
	Note       string     `json:"note,omitempty"`
}

// An EmergencyTest is a function or duration test of an emergency luminaire.
type EmergencyTest struct {
	domain.Row
	PlaceID         domain.ID    `json:"place_id"`
	Test            string       `json:"test"` // function, duration
	TestedAt        time.Time    `json:"tested_at"`
	MinutesAchieved *float64     `json:"minutes_achieved,omitempty"`
	Passed          bool         `json:"passed"`
	Defect          string       `json:"defect,omitempty"`
	LampModelID     *domain.ID   `json:"lamp_model_id,omitempty"` // fitted then; written by the service
	DriverModelID   *domain.ID   `json:"driver_model_id,omitempty"`
	Battery         string       `json:"battery,omitempty"`
	NextDue         *domain.Date `json:"next_due,omitempty"` // date
	Note            string       `json:"note,omitempty"`
}

// A Trip is a breaker or residual-current device found off.
type Trip struct {
	domain.Row
	CircuitID domain.ID `json:"circuit_id"`
	TrippedAt time.Time `json:"tripped_at"`
	Note      string    `json:"note,omitempty"`
}

// Tables of a building.
var (
	Circuits       = domain.NewTable[Circuit]("circuit", "circuit")
	Dimmers        = domain.NewTable[Dimmer]("place", "dimmer")
	Drivers        = domain.NewTable[Driver]("place", "driver")
	Fixtures       = domain.NewTable[Fixture]("place", "fixture")
	Feeds          = domain.NewTable[Feed]("feed", "feed")
	Controls       = domain.NewTable[ControlLink]("control", "control")
	MakeUps        = domain.NewTable[MakeUp]("make_up", "make-up")
	Units          = domain.NewTable[Unit]("unit", "unit")
	Failures       = domain.NewTable[Failure]("failure", "failure")
	EmergencyTests = domain.NewTable[EmergencyTest]("emergency_test", "emergency test")
	Trips          = domain.NewTable[Trip]("trip", "trip")
)
