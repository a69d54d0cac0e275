package main

import (
	"context"
	"encoding/json"
	"fmt"

	"lampward/calc/loading"
	"lampward/domain/review"
)

type fitCheckCommand struct {
	Lamp  lampFlags  `embed:"" prefix:"lamp-"`
	Lamps int        `help:"How many of them hang on the gear."`
	Gear  string     `help:"Kind of gear: electronic_transformer, magnetic_transformer, led_constant_voltage, led_constant_current, electronic_ballast, magnetic_ballast, hid_gear_with_ignitor, or none."`
	Plate plateFlags `embed:""`

	Dimmer     string   `help:"Kind of dimmer or switch: leading_edge, trailing_edge, universal_phase, switch_contact ..., or none."`
	DimmerMinW *float64 `name:"dimmer-min-w" help:"Its least load, W."`
	DimmerMaxW *float64 `name:"dimmer-max-w" help:"Its greatest load, W."`

	MainsV *float64 `name:"mains-v" help:"Mains voltage, V."`
	Format string   `enum:"text,json" default:"text" help:"text or json."`
}

type lampFlags struct {
	Technology string   `help:"halogen, incandescent, cfl, fluorescent, metal_halide, sodium, led_lamp, led_tube, led_module."`
	Supply     string   `help:"What it needs: mains_ac, elv_ac, elv_dc, elv_ac_dc, constant_current, gear."`
	W          *float64 `help:"Its power, W."`
	V          *float64 `help:"Its voltage, V."`
	Cap        string   `help:"Its cap, e.g. GU5.3."`
	Dimmable   *bool    `help:"Marked dimmable."`
	HF         *bool    `name:"hf" help:"Stated suitable for a high-frequency supply."`
}

type plateFlags struct {
	RatedW  *float64 `name:"rated-w" help:"Greatest load printed on the gear, W."`
	MinW    *float64 `name:"min-w" help:"Least load printed on the gear, W; 0 where none is printed."`
	OutputV *float64 `name:"output-v" help:"Output voltage printed on the gear, V."`
	TaC     *float64 `name:"ta-c" help:"ta printed on the gear, degC."`
}

// Help shows examples.
func (fitCheckCommand) Help() string {
	return `Examples:
  lampward fit-check --gear electronic_transformer --rated-w 105 --min-w 35 \
      --lamp-w 7 --lamp-technology led_lamp --lamp-supply elv_ac_dc --lamps 3 --dimmer none
  lampward fit-check --gear none --lamp-technology led_lamp --lamp-supply mains_ac --lamp-w 9 --lamps 4 --dimmer leading_edge

Four things can be seen on a ladder: what gear there is, what is printed on it, how many lamps hang on it, and whether
there is a dimmer. What is left out is asked for, the most useful first. The exit status is 1 where the answer is no.`
}

// Run answers.
func (c *fitCheckCommand) Run(_ context.Context, s *streams) error {
	a, err := review.FitCheck(nil, loading.Supply{MainsV: c.MainsV}, c.request())
	if err != nil {
		return err
	}
	if c.Format == "json" {
		enc := json.NewEncoder(s.out)
		enc.SetIndent("", "  ")
		enc.SetEscapeHTML(false)
		err = enc.Encode(a)
	} else {
		s.answer(a)
	}
	if err == nil && a.Answer == review.DoesNotFit {
		return exit(1)
	}
	return err
}

func (c *fitCheckCommand) request() *review.FitRequest {
	q := &review.FitRequest{Lamps: c.Lamps}
	q.Lamp = &loading.Lamp{Technology: c.Lamp.Technology, Supply: c.Lamp.Supply, PowerW: c.Lamp.W, RatedV: c.Lamp.V, Cap: c.Lamp.Cap, HighFrequency: c.Lamp.HF,
		FactSource: loading.SeenOnNameplate}
	switch {
	case c.Lamp.Dimmable == nil:
	case *c.Lamp.Dimmable:
		q.Lamp.Dimming = []string{loading.PhaseCut}
	default:
		q.Lamp.Dimming = []string{}
	}
	switch c.Gear {
	case "":
	case "none":
		q.GearNone = true
	default:
		q.Gear = &loading.Gear{Kind: c.Gear, MaxLoadW: c.Plate.RatedW, MinLoadW: c.Plate.MinW, OutputV: c.Plate.OutputV, TaC: c.Plate.TaC, FactSource: loading.SeenOnNameplate}
	}
	switch c.Dimmer {
	case "":
	case "none":
		q.DimmerNone = true
	default:
		q.Dimmer = &loading.Control{Kind: c.Dimmer, MinLoadW: c.DimmerMinW, MaxLoadW: c.DimmerMaxW, FactSource: loading.SeenOnNameplate}
	}
	return q
}

// answer writes an answer for people.
func (s *streams) answer(a review.FitAnswer) {
	fmt.Fprintf(s.out, "%s\n", map[string]string{review.Fits: "FIT", review.DoesNotFit: "DO NOT FIT", review.FitsOnlyIf: "FIT ONLY IF"}[a.Answer])
	if a.Sum != "" {
		fmt.Fprintf(s.out, "  %s\n", a.Sum)
	}
	for _, f := range a.Findings {
		fmt.Fprintf(s.out, "\n  %s: %s\n", f.Severity, f.Sentence)
		for _, step := range f.Steps {
			fmt.Fprintf(s.out, "      %s: %s  (%s)\n", step.What, step.Sum, step.Basis)
		}
		fmt.Fprintf(s.out, "      what to do: %s\n", f.Remedy)
	}
	s.asks("still to find out, the most useful first", a.Missing)
	s.asks("to confirm", a.Confirm)
	fmt.Fprintf(s.out, "\nA screening estimate. Local codes and licensed practice decide.\n")
}

// asks writes a list of facts that are not known.
func (s *streams) asks(title string, list []review.MissingFact) {
	if len(list) == 0 {
		return
	}
	fmt.Fprintf(s.out, "\n  %s:\n", title)
	for _, m := range list {
		about := ""
		if m.About != "" {
			about = " (" + m.About + ")"
		}
		fmt.Fprintf(s.out, "    - %s%s\n", m.Ask, about)
	}
}
