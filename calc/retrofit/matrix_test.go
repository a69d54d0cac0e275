package retrofit

import (
	"strings"
	"testing"

	"lampward/calc/loading"
)

// The matrix as printed in the trade's compatibility table: OK, NO, or the number of a condition. The columns are LE (R),
// LE (R,L), TE (R,C), universal, 0/1-10 V, DALI, PWM dc, switch.
const printedMatrix = `
OK OK OK OK NO NO NO OK
NO OK10 NO 1 NO NO NO 2
NO NO OK 1 NO NO NO OK
3 3 OK 1 NO NO NO OK
NO NO NO NO NO NO NO OK
4 4 4 4 NO NO NO 5
NO NO NO NO NO NO NO 5
NO 6 NO 6 NO NO NO 2
6 6 6 6 NO NO NO 6
4 4 4 4 NO NO 7 OK
4 4 4 4 NO NO NO OK
NO NO NO NO OK8 NO NO OK
NO NO NO NO NO OK NO OK
NO NO NO NO NO NO 9 OK
NO NO NO NO NO NO NO 5`

func TestMatrix(t *testing.T) {
	t.Parallel()
	cells := Matrix()
	i := 0
	for line := range strings.Lines(strings.TrimSpace(printedMatrix)) {
		for _, want := range strings.Fields(line) {
			c := cells[i]
			i++
			answer, condition := Conditional, want
			if rest, is := strings.CutPrefix(want, "OK"); is {
				answer, condition = Compatible, rest
			} else if want == "NO" {
				answer, condition = Incompatible, ""
			}
			if c.Answer != answer || (c.Condition != "") != (condition != "") {
				t.Errorf("%s on a %s: %s (%q), printed %s", c.Load, c.Control, c.Answer, c.Condition, want)
			}
			if n := condition; n != "" && c.Condition != conditionTexts[atoi(n)] {
				t.Errorf("%s on a %s: condition %q, printed number %s", c.Load, c.Control, c.Condition, n)
			}
		}
	}
	if i != len(cells) || i != 15*8 {
		t.Errorf("%d cells, want 15 rows of 8", i)
	}
	// A plain contact never says no.
	for _, c := range cells {
		if c.Control == controlNames[columnSwitch] && c.Answer == Incompatible {
			t.Errorf("%s on a switch says no", c.Load)
		}
	}
}

func atoi(s string) int {
	n := 0
	for _, r := range s {
		n = 10*n + int(r-'0')
	}
	return n
}

// TestMatrixWorkedOut gives each kind of load each kind of dimmer and compares the rule's word with the printed cell.
func TestMatrixWorkedOut(t *testing.T) {
	t.Parallel()
	edges := []string{loading.LeadingEdge, loading.TrailingEdge}
	controls := []loading.Control{
		{Kind: loading.LeadingEdge, Marking: "R"},
		{Kind: loading.LeadingEdge, Marking: "R,L"},
		{Kind: loading.TrailingEdge, Marking: "R,C"},
		{Kind: loading.Analogue1to10V},
		{Kind: loading.DALI},
		{Kind: loading.PWMDC},
		{Kind: loading.SwitchContact},
	}
	loads := []struct {
		name string
		gear *loading.Gear
		lamp loading.Lamp
		want string // a letter for each control: y nothing found, n dimmer_wrong_for_gear, d not_dimmable_on_dimmer
	}{
		{"mains halogen", nil, mainsHalogen(40), "yyynnny"},
		{"wound transformer", some(wound(60)), halogen12(35), "nynnnny"},
		{"electronic transformer, trailing edge", some(electronic(60, []string{loading.TrailingEdge})), halogen12(35), "nnynnny"},
		{"electronic transformer, both edges", some(electronic(60, edges)), halogen12(35), "yyynnny"},
		{"electronic transformer, not dimmable", some(electronic(60, []string{})), halogen12(35), "dddnnny"},
		{"mains LED lamp, both edges", nil, mainsLED(7, edges), "yyynnny"},
		{"mains LED lamp, leading edge", nil, mainsLED(7, []string{loading.LeadingEdge}), "yynnnny"},
		{"mains LED lamp, not dimmable", nil, mainsLED(7, []string{}), "dddnndy"},
		{"LED driver, both edges", some(ledDriver(60, edges)), strip24(30), "yyynnyy"},
		{"LED driver, 1-10 V", some(ledDriver(60, []string{loading.Analogue1to10V})), strip24(30), "nnnysyy"},
		{"LED driver, DALI", some(ledDriver(60, []string{loading.DALI})), strip24(30), "nnnsyyy"},
		{"LED driver, not dimmable", some(ledDriver(60, []string{})), strip24(30), "dddnnyy"},
	}
	for _, load := range loads {
		for i, control := range controls {
			t.Run(load.name+" on "+controlWord(&control)+" "+control.Marking, func(t *testing.T) {
				t.Parallel()
				r := newRig()
				way := r.way(loading.CircuitFacts{})
				m := control
				m.AnalogueRole = loading.Sinks
				on := by(r.control(m, way))
				if signalKind(&m) {
					on = over(0)
				}
				if load.gear != nil {
					g := *load.gear
					g.AnalogueRole = loading.Sources
					r.gear(g, way, on, of(1, load.lamp))
				} else {
					r.straight(way, on, of(1, load.lamp))
				}
				got := "y"
				for _, f := range Check(&r.System).Findings {
					switch f.Rule {
					case "dimmer_wrong_for_gear":
						got = "n"
					case "not_dimmable_on_dimmer":
						got = "d"
					case "control_signal_mismatch":
						got = "s"
					}
				}
				if want := string(load.want[i]); got != want {
					t.Errorf("got %s, want %s", got, want)
				}
			})
		}
	}
}
