package review

import (
	"context"
	"time"

	"lampward/calc/retrofit"
	"lampward/domain"
)

// Answers to "may I fit this here?".
const (
	Fits       = string(retrofit.Fit)
	FitsOnlyIf = string(retrofit.FitOnlyIf)
	DoesNotFit = string(retrofit.DoNotFit)
)

// A Rule is an entry of the table of rules as it is shown.
type Rule struct {
	ID       string   `json:"id"`
	Severity string   `json:"severity"`
	Blocks   bool     `json:"blocks"`
	Trigger  string   `json:"trigger"`
	Why      string   `json:"why"`
	Basis    string   `json:"basis"`
	Remedy   string   `json:"remedy"`
	Cautions []string `json:"cautions"`
	Asks     []string `json:"asks"`
}

// Rules returns the table in its order.
func Rules() []Rule {
	table := retrofit.Rules()
	out := make([]Rule, len(table))
	for i, r := range table {
		out[i] = Rule{ID: r.ID, Severity: string(r.Severity), Blocks: r.Blocks, Trigger: r.Trigger, Why: r.Why, Basis: r.Basis, Remedy: r.Remedy,
			Cautions: append([]string{}, r.Cautions...), Asks: []string{}}
		for _, f := range r.Asks {
			out[i].Asks = append(out[i].Asks, string(f))
		}
	}
	return out
}

// Severities are the words for how bad a finding is, the worst first.
func Severities() []string {
	return []string{string(retrofit.Danger), string(retrofit.High), string(retrofit.Medium), string(retrofit.Low)}
}

// Surenesses are the words for what a finding rests on.
func Surenesses() []string {
	return []string{string(retrofit.Recorded), string(retrofit.OnRange), string(retrofit.Screening)}
}

// SubjectKinds are the words for what a finding is about.
func SubjectKinds() []string {
	return []string{string(retrofit.OnCircuit), string(retrofit.OnDimmer), string(retrofit.OnDriver), string(retrofit.OnFixture)}
}

// State says whether the findings of a building are those of its records as they stand.
type State struct {
	Pending   bool       `json:"pending"`
	Owed      int        `json:"reviews_owed"`         // of the whole building, of a tree or of a model's places
	Since     *time.Time `json:"owed_since,omitempty"` // the oldest
	RuleSet   int        `json:"rule_set"`
	RecheckAt *time.Time `json:"recheck_at,omitempty"` // when time alone may next change them
}

// StateOf returns the state of s's building.
func StateOf(ctx context.Context, s domain.Scope) (State, error) {
	out := State{RuleSet: RuleSet}
	err := s.QueryRow(ctx, `SELECT count(*), min(created_at) FROM review_due WHERE building_id IS NULL OR building_id = $1`, s.Building).Scan(&out.Owed, &out.Since)
	if err != nil {
		return out, domain.Classify(err, "review")
	}
	out.Pending = out.Owed > 0
	err = s.QueryRow(ctx, `SELECT min(recheck_at) FROM tree WHERE building_id = $1`, s.Building).Scan(&out.RecheckAt)
	return out, domain.Classify(err, "review")
}

// WaiversOf lists the waivers of s's building that nobody withdrew, in the order they were made.
func WaiversOf(ctx context.Context, s domain.Scope, page domain.Page) ([]Waiver, string, error) {
	list, next, err := Waivers.Page(ctx, s, page, domain.Match{Column: "retired_at"})
	if err != nil {
		return nil, "", err
	}
	day, err := Today(ctx, s)
	if err != nil {
		return nil, "", err
	}
	for i := range list {
		w := &list[i]
		var f Finding
		open, err := Findings.Select(ctx, s, `WHERE building_id = $1 AND subject_id = $2 AND rule = $3 AND cleared_at IS NULL`, s.Building, w.SubjectID, w.Rule)
		if err != nil {
			return nil, "", err
		}
		for _, f = range open {
			if w.covers(&f, day) {
				w.InEffect = true
			} else if string(w.InputHash) == string(f.InputHash) && w.RuleSet < f.RuleSet {
				w.Confirm = true
			}
		}
	}
	return list, next, nil
}

// CautionsAt returns what people must know before they work at a place or circuit.
func (r *Reviewer) CautionsAt(ctx context.Context, s domain.Scope, id domain.ID) ([]Caution, error) {
	cat, err := r.Shelf.At(ctx, s)
	if err != nil {
		return nil, err
	}
	t, err := treeOf(ctx, s, cat, id)
	if err != nil {
		return nil, err
	}
	out := retrofit.JobCautions(&t.System, t.subject(id), retrofit.Job{})
	if out == nil {
		out = []Caution{}
	}
	return out, nil
}

// subject finds a place or circuit in the tree's system.
func (t *Tree) subject(id domain.ID) retrofit.Subject {
	for i := range t.System.Drivers {
		if d := &t.System.Drivers[i]; domain.ID(d.Key) == id && !d.Integral {
			return retrofit.Subject{Kind: retrofit.OnDriver, Index: i, Key: d.Key}
		}
	}
	for i := range t.System.Dimmers {
		if d := &t.System.Dimmers[i]; domain.ID(d.Key) == id {
			return retrofit.Subject{Kind: retrofit.OnDimmer, Index: i, Key: d.Key}
		}
	}
	for i := range t.System.Circuits {
		if k := &t.System.Circuits[i]; domain.ID(k.Key) == id {
			return retrofit.Subject{Kind: retrofit.OnCircuit, Index: i, Key: k.Key}
		}
	}
	i := max(t.fixture(id), 0)
	return retrofit.Subject{Kind: retrofit.OnFixture, Index: i, Key: t.System.Fixtures[i].Key}
}
