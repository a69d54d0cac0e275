package domaintest

import (
	"context"
	"fmt"
	"testing"
	"time"

	"github.com/jackc/pgx/v5/pgxpool"

	"lampward/calc/loading"
	"lampward/domain"
	"lampward/domain/plant"
	"lampward/domain/site"
)

// Tester is who acts in tests.
var Tester = domain.Actor{Kind: "command"}

// Noon is when tests act: 2026-03-02 12:00 UTC.
var Noon = time.Date(2026, 3, 2, 12, 0, 0, 0, time.UTC)

// Of returns a pointer to v, for fields that may be unknown.
func Of[T any](v T) *T { return &v }

// Building stores an invented building on 230 V, 50 Hz under IEC 60364 and returns it.
func Building(t testing.TB, db *pgxpool.Pool, code string) site.Building {
	t.Helper()
	b := site.Building{Code: code, Name: "Invented building " + code, TimeZone: "Europe/Dublin",
		Supply: loading.Supply{MainsV: Of(230.0), MainsHz: Of(50.0), WiringRules: loading.IEC60364}}
	err := domain.In(context.Background(), db, domain.NewID(), Tester, Noon, func(s domain.Scope) error {
		return site.CreateBuilding(context.Background(), s, &b)
	})
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// Models is a small invented catalogue.
type Models struct {
	Halogen35, LED7, LED7DC, MainsLED9 plant.LampModel
	Electronic105, Electronic60        plant.DriverModel // electronic transformers, least load 35 W and 20 W
	Wound100                           plant.DriverModel
	LeadingEdge, TrailingEdge          plant.DimmerModel
	Downlight                          plant.FixtureModel
}

// Catalogue stores an invented catalogue and returns it.
func Catalogue(t testing.TB, db *pgxpool.Pool) Models {
	t.Helper()
	var m Models
	lamp := func(code, name, technology, supply string, volts, watts float64) plant.LampModel {
		return plant.LampModel{ModelHead: plant.ModelHead{Code: code}, Lamp: loading.Lamp{Name: name, Technology: technology, Cap: "GU5.3",
			Supply: supply, RatedV: Of(volts), PowerW: Of(watts), FactSource: loading.SeenOnNameplate}}
	}
	m.Halogen35 = lamp("H35-12", "35 W halogen reflector", loading.Halogen, loading.SupplyELVACDC, 12, 35)
	m.LED7 = lamp("L7-12", "7 W LED reflector", loading.LEDLamp, loading.SupplyELVACDC, 12, 7)
	m.LED7DC = lamp("L7-12DC", "7 W LED reflector for dc", loading.LEDLamp, loading.SupplyELVDC, 12, 7)
	m.MainsLED9 = lamp("L9-230", "9 W LED lamp", loading.LEDLamp, loading.SupplyMainsAC, 230, 9)
	m.MainsLED9.Cap = "E27"
	gear := func(code, name, kind, form string, least, most float64) plant.DriverModel {
		return plant.DriverModel{ModelHead: plant.ModelHead{Code: code}, Gear: loading.Gear{Name: name, Kind: kind, OutputForm: form,
			OutputV: Of(12.0), InputMinV: Of(207.0), InputMaxV: Of(253.0), MinLoadW: Of(least), MaxLoadW: Of(most), MaxLoadVA: Of(most),
			Separation: "selv", ThermalProtection: Of(true), Dimming: []string{}, FactSource: loading.SeenOnNameplate}}
	}
	m.Electronic105 = gear("ET105", "105 W electronic transformer", loading.ElectronicTransformer, loading.OutputHFAC, 35, 105)
	m.Electronic60 = gear("ET60", "60 W electronic transformer", loading.ElectronicTransformer, loading.OutputHFAC, 20, 60)
	m.Wound100 = gear("WT100", "100 VA wound transformer", loading.MagneticTransformer, loading.OutputMainsAC, 0, 100)
	m.Wound100.RegulationPct, m.Wound100.Toroid = Of(10.0), Of(false)
	m.LeadingEdge = plant.DimmerModel{ModelHead: plant.ModelHead{Code: "LE400"}, Control: loading.Control{Name: "400 W leading-edge dimmer",
		Kind: loading.LeadingEdge, Marking: "RL", MinLoadW: Of(40.0), MaxLoadW: Of(400.0), FactSource: loading.SeenOnNameplate}}
	m.TrailingEdge = plant.DimmerModel{ModelHead: plant.ModelHead{Code: "TE250"}, Control: loading.Control{Name: "250 W trailing-edge dimmer",
		Kind: loading.TrailingEdge, Marking: "RC", MinLoadW: Of(10.0), MaxLoadW: Of(250.0), CapacitiveMaxW: Of(250.0), FactSource: loading.SeenOnNameplate}}
	m.Downlight = plant.FixtureModel{ModelHead: plant.ModelHead{Code: "DL1"}, Fitting: loading.Fitting{Name: "Downlight, one lamp",
		Holders: Of(1), Cap: "GU5.3", MaxLampW: Of(50.0), Gear: "remote", Class: "III", IP: "IP20", Enclosed: Of(false), FactSource: loading.SeenOnNameplate}}
	ctx := context.Background()
	err := domain.In(ctx, db, domain.ID{}, Tester, Noon, func(s domain.Scope) error {
		for _, l := range []*plant.LampModel{&m.Halogen35, &m.LED7, &m.LED7DC, &m.MainsLED9} {
			if err := plant.CreateModel(ctx, s, plant.LampModels, l, "lamp_model"); err != nil {
				return err
			}
		}
		for _, d := range []*plant.DriverModel{&m.Electronic105, &m.Electronic60, &m.Wound100} {
			if err := plant.CreateModel(ctx, s, plant.DriverModels, d, "driver_model"); err != nil {
				return err
			}
		}
		for _, d := range []*plant.DimmerModel{&m.LeadingEdge, &m.TrailingEdge} {
			if err := plant.CreateModel(ctx, s, plant.DimmerModels, d, "dimmer_model"); err != nil {
				return err
			}
		}
		return plant.CreateModel(ctx, s, plant.FixtureModels, &m.Downlight, "fixture_model")
	})
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// Tag returns the nth label of a kind, e.g. L-007.
func Tag(letter string, n int) string { return fmt.Sprintf("%s-%03d", letter, n) }
