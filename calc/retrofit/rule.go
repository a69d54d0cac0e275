package retrofit

import "slices"

// RuleSet is the version of the table of rules. It rises whenever a rule, a limit or a range changes, so that
// stored findings can be told from those of an older table.
const RuleSet = 1

// Thresholds in time. The caller compares them with its clock; sentences tell only the side of the threshold.
const (
	ProvenHours   = 2000 // burning hours without a recorded failure after which a pair counts as proven in use, h
	FailureMonths = 12   // failures and trips older than this are not counted, months
)

// Severity of a finding.
type Severity string

// Severities, the worst first.
const (
	Danger Severity = "danger" // a person can be hurt: shock, fire, burn, falling part, escape lighting lost
	High   Severity = "high"   // gear destroyed or failing early, or non-compliance
	Medium Severity = "medium" // nuisance, flicker, short life
	Low    Severity = "low"    // record or taste
)

// Rank is 4 for Danger down to 1 for Low, 0 for anything else.
func (s Severity) Rank() int {
	switch s {
	case Danger:
		return 4
	case High:
		return 3
	case Medium:
		return 2
	case Low:
		return 1
	}
	return 0
}

// Sureness says what a finding rests on.
type Sureness string

// Degrees of sureness, the surest first.
const (
	Recorded  Sureness = "recorded"  // recorded facts and stated limits
	OnRange   Sureness = "on_range"  // both ends of the plausible range of an unknown fail
	Screening Sureness = "screening" // the limit is a rule of thumb, no rating on file
)

// Kind of a subject.
type Kind string

// Kinds of subject, by the slice of loading.System they index.
const (
	OnFixture Kind = "fixture"
	OnDriver  Kind = "driver"
	OnDimmer  Kind = "dimmer"
	OnCircuit Kind = "circuit"
)

// A Rule is one entry of the table.
type Rule struct {
	ID       string   `json:"id"`
	Severity Severity `json:"severity"` // the usual one; a finding carries its own where the trigger has bands
	Blocks   bool     `json:"blocks"`   // can refuse a proposal; a finding says whether it does
	Subject  Kind     `json:"subject"`  // what it looks at
	Trigger  string   `json:"trigger"`
	Why      string   `json:"why"`
	Basis    string   `json:"basis"`
	Remedy   string   `json:"remedy"`
	Cautions []string `json:"cautions,omitempty"` // ids of Cautions
	Asks     []Field  `json:"asks,omitempty"`     // what it may ask for
	Hides    []string `json:"hides,omitempty"`    // rules not shown on the same gear when this one is

	// A rule has the functions of the levels it looks at.
	driver  func(*driverView)
	fixture func(*fixtureView)
	dimmer  func(*dimmerView)
	circuit func(*circuitView)

	only trait // luminaires it can concern, by any of these traits; 0: all

	number int    // place in the table
	hides  uint64 // rules hidden, by number
}

// A trait is something few luminaires have; rules that concern only these skip the rest.
type trait uint8

const (
	tubes        trait = 1 << iota // holds tubes or fluorescent lamps
	rewired                        // its gear was bypassed, removed or replaced by a driver of its own
	forDischarge                   // made for discharge lamps, or on discharge gear
	forEmergency                   // has an emergency function
	wet                            // in a place that is not dry, or proposed
	straight                       // on the circuit without control gear
)

// rules is the table; byDriver and so on are the entries that look at one level.
var (
	rules                                    []Rule
	byDriver, byFixture, byDimmer, byCircuit []*Rule
)

func init() {
	rules = slices.Concat(
		driverLoadRules,
		outputRules,
		moduleRules,
		cableRules,
		ledTransformerRules,
		fittingRules,
		tubeRules,
		dischargeRules,
		emergencyRules,
		protectionRules,
		failureRules,
		dimmerRules,
		switchRules,
		circuitRules,
	)
	if len(rules) > 64 {
		panic("retrofit: Rule.hides has room for 64 rules")
	}
	number := make(map[string]int, len(rules))
	for i := range rules {
		number[rules[i].ID] = i
	}
	for i := range rules {
		r := &rules[i]
		r.number = i
		for _, id := range r.Hides {
			if n, ok := number[id]; ok {
				r.hides |= 1 << n
			}
		}
		if r.driver != nil {
			byDriver = append(byDriver, r)
		}
		if r.fixture != nil {
			byFixture = append(byFixture, r)
		}
		if r.dimmer != nil {
			byDimmer = append(byDimmer, r)
		}
		if r.circuit != nil {
			byCircuit = append(byCircuit, r)
		}
	}
}

// Rules returns the table in its fixed order. The caller owns the slice; what the entries point to is shared and
// must not be changed.
func Rules() []Rule { return slices.Clone(rules) }

// RuleOf returns the entry with the given id.
func RuleOf(id string) (Rule, bool) {
	for i := range rules {
		if rules[i].ID == id {
			return rules[i], true
		}
	}
	return Rule{}, false
}
