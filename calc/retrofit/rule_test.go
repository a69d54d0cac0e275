package retrofit

import (
	"slices"
	"strings"
	"testing"
	"unicode"
)

// every rule of the table, in the order of the method's text.
var everyRule = []string{
	"driver_overloaded",
	"supply_outside_input_range",
	"driver_underloaded",
	"driver_underloaded_on_lamp_loss",
	"driver_too_hot",
	"driver_highly_loaded",
	"module_overcurrent",
	"module_undercurrent",
	"string_above_voltage_window",
	"string_below_voltage_window",
	"string_over_driver_power",
	"parallel_string_cascade",
	"output_voltage_mismatch",
	"dc_lamp_on_ac",
	"ac_load_on_dc",
	"wound_transformer_on_dc",
	"reversed_polarity",
	"current_module_on_voltage_supply",
	"voltage_strip_on_current_supply",
	"output_voltage_drop",
	"high_frequency_lead_too_long",
	"output_cable_overloaded",
	"lamp_overvoltage",
	"dimmer_wrong_for_gear",
	"dimmer_overloaded",
	"dimmer_underloaded",
	"dimmer_mixed_loads",
	"not_dimmable_on_dimmer",
	"control_signal_mismatch",
	"mains_on_control_pair",
	"no_neutral_glow",
	"switch_unsuitable",
	"circuit_overloaded",
	"circuit_inrush",
	"circuit_leakage",
	"neutral_shared_between_circuits",
	"shared_neutral_harmonics",
	"led_on_electronic_transformer",
	"led_underloads_electronic_transformer",
	"led_and_halogen_mixed",
	"dc_led_on_electronic_transformer",
	"led_overvoltage_on_magnetic_transformer",
	"dimmed_magnetic_transformer_after_retrofit",
	"transformer_inrush_on_switch",
	"mains_led_on_unmatched_dimmer",
	"exposed_live_parts",
	"enclosed_fitting_lamp_not_rated",
	"fitting_over_max_lamp_power",
	"insulation_over_gear",
	"single_ended_tube_in_shunted_holders",
	"tube_wiring_differs",
	"converted_without_label",
	"tube_gear_not_listed",
	"conversion_papers_missing",
	"led_in_hid_fitting_with_ignitor",
	"heavy_lamp_in_hid_fitting",
	"emergency_fitting_altered",
	"isolation_lost",
	"earth_lost",
	"zone_unsuitable",
	"repeat_failure",
}

func TestEveryRuleIsThereOnce(t *testing.T) {
	t.Parallel()
	if len(everyRule) != 61 {
		t.Fatalf("%d rules in the list, want 61", len(everyRule))
	}
	var have []string
	for _, r := range Rules() {
		have = append(have, r.ID)
	}
	slices.Sort(have)
	want := slices.Sorted(slices.Values(everyRule))
	if !slices.Equal(have, want) {
		t.Errorf("rules are %v, want %v", have, want)
	}
	if !slices.EqualFunc(Rules(), Rules(), func(a, b Rule) bool { return a.ID == b.ID }) {
		t.Error("the order is not fixed")
	}
}

// TestEntriesAreWhole: a rule is data that a person reads.
func TestEntriesAreWhole(t *testing.T) {
	t.Parallel()
	for _, r := range Rules() {
		if r.Severity.Rank() == 0 || r.Subject == "" {
			t.Errorf("%s: severity %q, subject %q", r.ID, r.Severity, r.Subject)
		}
		for what, text := range map[string]string{"trigger": r.Trigger, "why": r.Why, "basis": r.Basis, "remedy": r.Remedy} {
			if strings.TrimSpace(text) == "" || text != strings.TrimSpace(text) {
				t.Errorf("%s: its %s is %q", r.ID, what, text)
			}
		}
		for _, text := range []string{r.Why, r.Remedy} {
			if !unicode.IsUpper([]rune(text)[0]) || !strings.HasSuffix(text, ".") {
				t.Errorf("%s: %q is not a sentence", r.ID, text)
			}
		}
		for _, id := range r.Cautions {
			if _, ok := CautionOf(id); !ok {
				t.Errorf("%s: caution %s does not exist", r.ID, id)
			}
		}
		for _, id := range r.Hides {
			if _, ok := RuleOf(id); !ok || id == r.ID {
				t.Errorf("%s hides %s", r.ID, id)
			}
		}
		for _, f := range r.Asks {
			if _, ok := fieldTexts[f]; !ok {
				t.Errorf("%s asks for %s, which has no words", r.ID, f)
			}
		}
		if r.driver == nil && r.fixture == nil && r.dimmer == nil && r.circuit == nil {
			t.Errorf("%s looks at nothing", r.ID)
		}
	}
}

// TestRulesHide is the precedence of the method's text.
func TestRulesHide(t *testing.T) {
	t.Parallel()
	strings := []string{"module_overcurrent", "module_undercurrent", "string_above_voltage_window", "string_below_voltage_window", "string_over_driver_power",
		"parallel_string_cascade", "output_voltage_mismatch"}
	want := map[string][]string{
		"dc_led_on_electronic_transformer":           {"led_on_electronic_transformer", "led_underloads_electronic_transformer", "dc_lamp_on_ac", "led_and_halogen_mixed"},
		"led_underloads_electronic_transformer":      {"driver_underloaded"},
		"driver_underloaded":                         {"driver_underloaded_on_lamp_loss"},
		"not_dimmable_on_dimmer":                     {"dimmer_wrong_for_gear", "mains_led_on_unmatched_dimmer", "dimmed_magnetic_transformer_after_retrofit"},
		"dimmer_wrong_for_gear":                      {"mains_led_on_unmatched_dimmer", "dimmed_magnetic_transformer_after_retrofit"},
		"dimmed_magnetic_transformer_after_retrofit": {"dimmer_underloaded"},
		"output_voltage_mismatch":                    {"lamp_overvoltage", "led_overvoltage_on_magnetic_transformer"},
		"dc_lamp_on_ac":                              {"led_overvoltage_on_magnetic_transformer"},
		"current_module_on_voltage_supply":           strings,
		"voltage_strip_on_current_supply":            strings,
		"wound_transformer_on_dc":                    {"ac_load_on_dc"},
		"single_ended_tube_in_shunted_holders":       {"tube_wiring_differs"},
	}
	for _, r := range Rules() {
		have, expect := slices.Sorted(slices.Values(r.Hides)), slices.Sorted(slices.Values(want[r.ID]))
		if !slices.Equal(have, expect) {
			t.Errorf("%s hides %v, want %v", r.ID, have, expect)
		}
	}
}
