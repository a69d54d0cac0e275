// Package plant holds what is fitted to what: the catalogue of models, the circuits, and the places where dimmers,
// drivers and luminaires stand, with the units, failures and tests of their life. What changes a load is written only
// through an Edit, which the review package alone makes.
package plant

import (
	"lampward/calc/loading"
	"lampward/domain"
)

// ModelHead is what every model of the catalogue has beside its nameplate.
type ModelHead struct {
	domain.CatalogueRow
	Code        string     `json:"code"`                   // unique among the models of its kind
	AlsoKnownAs []string   `json:"also_known_as,omitzero"` // other codes it is sold or listed under
	Provisional bool       `json:"provisional"`            // added from the box on a shift; waits for a planner to confirm or merge
	MergedInto  *domain.ID `json:"merged_into,omitempty"`  // reads follow it
	Note        string     `json:"note,omitempty"`
}

// Head returns the model's head, so that code for any model can reach it.
func (h *ModelHead) Head() *ModelHead { return h }

// A LampModel is a lamp as a maker lists it.
type LampModel struct {
	ModelHead
	loading.Lamp
}

// A DriverModel is control gear of any kind as a maker lists it.
type DriverModel struct {
	ModelHead
	loading.Gear
}

// A DimmerModel is a dimmer or switch of any kind as a maker lists it.
type DimmerModel struct {
	ModelHead
	loading.Control
}

// A FixtureModel is a luminaire as a maker lists it.
type FixtureModel struct {
	ModelHead
	DriverModelID *domain.ID `json:"driver_model_id,omitempty"` // the gear inside, where it is integral
	loading.Fitting
}

// Kinds of model, and of the place a model is fitted in.
const (
	KindLamp    = "lamp"
	KindDriver  = "driver"
	KindDimmer  = "dimmer"
	KindFixture = "fixture"
	KindBattery = "battery"
)

// Tables of the catalogue.
var (
	LampModels    = domain.NewTable[LampModel]("lamp_model", "lamp model")
	DriverModels  = domain.NewTable[DriverModel]("driver_model", "driver model")
	DimmerModels  = domain.NewTable[DimmerModel]("dimmer_model", "dimmer model")
	FixtureModels = domain.NewTable[FixtureModel]("fixture_model", "fixture model")
	Pairings      = domain.NewTable[Pairing]("pairing", "pairing")
	Prices        = domain.NewTable[Price]("price", "price")
)

// A Pairing says that two or three models are stated to work together.
type Pairing struct {
	domain.CatalogueRow
	LampModelID   *domain.ID   `json:"lamp_model_id,omitempty"`
	DriverModelID *domain.ID   `json:"driver_model_id,omitempty"`
	DimmerModelID *domain.ID   `json:"dimmer_model_id,omitempty"`
	LeastLamps    *int         `json:"least_lamps,omitempty"`
	MostLamps     *int         `json:"most_lamps,omitempty"`
	StatedBy      string       `json:"stated_by"`           // who states it: a list, a letter, a test
	StatedOn      *domain.Date `json:"stated_on,omitempty"` // date, YYYY-MM-DD
	Note          string       `json:"note,omitempty"`
}

// A Price is what one piece of a model costs from a date on.
type Price struct {
	domain.CatalogueRow
	ModelKind string         `json:"model_kind"` // lamp, driver, dimmer, fixture
	ModelID   domain.ID      `json:"model_id"`
	FromDate  domain.Date    `json:"from_date"` // YYYY-MM-DD
	Amount    domain.Decimal `json:"amount"`    // per piece
	Currency  string         `json:"currency"`  // ISO 4217
	Source    string         `json:"source,omitempty"`
}
