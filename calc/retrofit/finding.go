package retrofit

import (
	"cmp"
	"slices"

	"lampward/calc/loading"
)

// A Subject is the place a finding is about.
type Subject struct {
	Kind  Kind        `json:"kind"`
	Index int         `json:"index"` // in the slice of loading.System
	Key   loading.Key `json:"-"`     // of the place, for the caller
}

// A Finding is one rule that fires on one subject.
type Finding struct {
	Rule     string         `json:"rule"`
	Severity Severity       `json:"severity"`
	Blocks   bool           `json:"blocks"`   // refuses a proposal that brings or worsens it
	Sureness Sureness       `json:"sureness"` // what it rests on
	Source   string         `json:"source"`   // the weakest source of the facts it rests on
	Subject  Subject        `json:"subject"`
	Lamp     loading.Key    `json:"-"`                  // cause: the lamp model, zero if the finding is not about one
	Gear     loading.Key    `json:"-"`                  // cause: the gear model
	Control  loading.Key    `json:"-"`                  // cause: the dimmer model
	Lamps    int            `json:"lamps"`              // lamps affected
	Excess   float64        `json:"excess,omitempty"`   // how many times the limit, on the side that favours the gear; 0: no number
	Proposed bool           `json:"proposed,omitempty"` // something proposed has part in it
	Sentence string         `json:"sentence"`
	Steps    []loading.Step `json:"steps,omitempty"`
	Remedy   string         `json:"remedy"`
	Basis    string         `json:"basis"`
	Cautions []string       `json:"cautions,omitempty"`

	rule  *Rule
	level Kind // what the rule looked at; an integral driver's finding is shown on its luminaire
	link  links
	lamp  *loading.Lamp
}

// links are the indices of what a finding touches at each level, -1 where it touches none.
type links struct{ fixture, driver, dimmer, circuit int32 }

var noLinks = links{-1, -1, -1, -1}

func (l links) at(k Kind) int32 {
	switch k {
	case OnFixture:
		return l.fixture
	case OnDriver:
		return l.driver
	case OnDimmer:
		return l.dimmer
	case OnCircuit:
		return l.circuit
	}
	return -1
}

// touches reports whether two findings are about the same gear: one of them sits at a place the other touches, and
// they do not name two different lamps.
func touches(a links, aLevel Kind, aLamp *loading.Lamp, b links, bLevel Kind, bLamp *loading.Lamp) bool {
	if aLamp != nil && bLamp != nil && aLamp != bLamp && (aLamp.Key != bLamp.Key || aLamp.Key == loading.Key{}) {
		return false
	}
	if i := a.at(aLevel); i >= 0 && b.at(aLevel) == i {
		return true
	}
	i := b.at(bLevel)
	return i >= 0 && a.at(bLevel) == i
}

// About says what a question is about: a model, a pair of models or a place.
type About struct {
	Kind  string      `json:"kind"`           // lamp_model, driver_model, dimmer_model, fixture_model, pairing; circuit, dimmer, driver, fixture
	Key   loading.Key `json:"-"`              // of the model (the lamp of a pairing) or place
	With  loading.Key `json:"-"`              // the gear of a pairing
	Index int         `json:"index"`          // of a place in loading.System; -1 for a model
	Name  string      `json:"name,omitempty"` // of the model
}

// Kinds a question can be about besides the kinds of Subject.
const (
	AboutLamp    = "lamp_model"
	AboutGear    = "driver_model"
	AboutControl = "dimmer_model"
	AboutFitting = "fixture_model"
	AboutPairing = "pairing"
)

// A Question names a fact that nobody has recorded and that could change the outcome of a rule.
type Question struct {
	Field    Field    `json:"field"`
	About    About    `json:"about"`
	Rule     string   `json:"rule"`               // the rule with the most at stake
	Severity Severity `json:"severity"`           // at stake
	Blocks   bool     `json:"blocks"`             // a rule that can refuse a proposal waits for it
	Places   int      `json:"places"`             // places the answer settles
	Proposed bool     `json:"proposed,omitempty"` // something proposed waits for it

	last Subject // the last place counted
}

// Coverage is how much of the record can be judged at all.
type Coverage struct {
	Places int `json:"places"` // luminaires
	Known  int `json:"known"`  // of these with gear kind, ratings and feed on record
}

// Result is what Check answers.
type Result struct {
	Findings  []Finding  `json:"findings"`
	Questions []Question `json:"questions"`
	Coverage  Coverage   `json:"coverage"`
	Sum       string     `json:"sum,omitempty"` // of a proposal: the load it makes, in one line

	marked bool // something is marked as proposed
}

// Weight orders what needs attention: severity times the number affected, everything that can hurt a person
// before everything else.
func Weight(s Severity, affected int) int {
	w := s.Rank() * min(max(affected, 1), 1<<40)
	if s == Danger {
		w += 1 << 48
	}
	return w
}

// SortQuestions puts the most useful question first: severity at stake times places settled, models before single
// places, then by name of the field.
func SortQuestions(q []Question) {
	slices.SortStableFunc(q, func(a, b Question) int {
		return cmp.Or(
			cmp.Compare(Weight(b.Severity, b.Places), Weight(a.Severity, a.Places)),
			cmp.Compare(min(a.About.Index, 0), min(b.About.Index, 0)),
			cmp.Compare(a.Field, b.Field),
			slices.Compare(a.About.Key[:], b.About.Key[:]),
			cmp.Compare(a.About.Index, b.About.Index),
		)
	})
}

// MergeQuestions makes one list of the questions of many systems: places of the same model, or the same place, add up.
func MergeQuestions(lists ...[]Question) []Question {
	at := make(map[questionKey]int)
	var out []Question
	for _, list := range lists {
		for _, q := range list {
			k := questionKey{q.Field, q.About}
			if q.About.Key != (loading.Key{}) {
				k.about.Index = 0 // a place has another index in another system
			}
			n, ok := at[k]
			if !ok {
				at[k] = len(out)
				out = append(out, q)
				continue
			}
			m := &out[n]
			m.Places += q.Places
			if q.Severity.Rank() > m.Severity.Rank() {
				m.Severity, m.Rule = q.Severity, q.Rule
			}
			m.Blocks, m.Proposed = m.Blocks || q.Blocks, m.Proposed || q.Proposed
		}
	}
	SortQuestions(out)
	return out
}

// A Cause is one group of findings with the same rule, lamp, gear and control.
type Cause struct {
	Rule     string      `json:"rule"`
	Lamp     loading.Key `json:"-"`
	Gear     loading.Key `json:"-"`
	Control  loading.Key `json:"-"`
	Severity Severity    `json:"severity"` // the worst of the group
	Blocks   bool        `json:"blocks"`   // any of the group
	Places   int         `json:"places"`
	Lamps    int         `json:"lamps"`
	Findings []int       `json:"-"` // their positions in the slice grouped
	age      float64
}

// Group gathers findings by cause and puts first what can hurt a person, then severity times lamps affected, then
// the oldest. Age[i] is how long findings[i] has been open, in any unit; nil where not known.
func Group(findings []Finding, age []float64) []Cause {
	type key struct {
		rule                string
		lamp, gear, control loading.Key
	}
	at := make(map[key]int)
	var out []Cause
	for i := range findings {
		f := &findings[i]
		k := key{f.Rule, f.Lamp, f.Gear, f.Control}
		n, ok := at[k]
		if !ok {
			n = len(out)
			at[k] = n
			out = append(out, Cause{Rule: f.Rule, Lamp: f.Lamp, Gear: f.Gear, Control: f.Control})
		}
		c := &out[n]
		if f.Severity.Rank() > c.Severity.Rank() {
			c.Severity = f.Severity
		}
		c.Blocks = c.Blocks || f.Blocks
		c.Places++
		c.Lamps += f.Lamps
		c.Findings = append(c.Findings, i)
		if i < len(age) {
			c.age = max(c.age, age[i])
		}
	}
	slices.SortStableFunc(out, func(a, b Cause) int {
		return cmp.Or(
			cmp.Compare(Weight(b.Severity, b.Lamps), Weight(a.Severity, a.Lamps)),
			cmp.Compare(b.age, a.age),
		)
	})
	return out
}

// Compare returns the blocking findings of after that before does not have, or has less badly: a higher severity,
// more lamps affected, a larger excess, or not blocking until now. Both results must be of the same places in the
// same order; places only after has are new.
func Compare(before, after Result) []Finding {
	type key struct {
		rule    string
		subject Subject
	}
	type state struct {
		rank, lamps int
		excess      float64
	}
	gather := func(findings []Finding) map[key]state {
		m := make(map[key]state)
		for _, f := range findings {
			if !f.Blocks {
				continue
			}
			k := key{f.Rule, f.Subject}
			s := m[k]
			m[k] = state{max(s.rank, f.Severity.Rank()), s.lamps + f.Lamps, max(s.excess, f.Excess)}
		}
		return m
	}
	was, is := gather(before.Findings), gather(after.Findings)
	var out []Finding
	for _, f := range after.Findings {
		if !f.Blocks {
			continue
		}
		k := key{f.Rule, f.Subject}
		b, had := was[k]
		a := is[k]
		if !had || a.rank > b.rank || a.lamps > b.lamps || a.excess > b.excess*(1+tolerance) {
			out = append(out, f)
		}
	}
	return out
}
