package review

import (
	"slices"
	"time"

	"lampward/calc/loading"
	"lampward/calc/retrofit"
	"lampward/domain"
	"lampward/domain/plant"
)

// Counts says how much was looked at.
type Counts struct {
	Buildings int `json:"buildings"`
	Spaces    int `json:"spaces"`
	Circuits  int `json:"circuits"`
	Dimmers   int `json:"dimmers"`
	Drivers   int `json:"drivers"` // gear inside luminaires included
	Fixtures  int `json:"fixtures"`
	Lamps     int `json:"lamps"`
}

// A Report is the review of records that are in no database.
type Report struct {
	Counts    Counts              `json:"counts"`
	Coverage  float64             `json:"coverage"` // share of luminaires whose gear kind, ratings and feed are known
	Findings  []ComputedFinding   `json:"findings"`
	Questions []retrofit.Question `json:"questions"`
}

// A ComputedFinding is a finding with the label of its subject.
type ComputedFinding struct {
	retrofit.Finding
	Label string    `json:"label"` // tag of the place, or board and way of the circuit
	ID    domain.ID `json:"-"`
}

// Compute judges records with the models of cat as of at, without a database. Findings come worst first; questions
// are summed over the trees, the most useful first.
func Compute(cat *plant.Catalogue, recs *plant.Records, at time.Time) (Report, error) {
	rep := Report{Findings: []ComputedFinding{}, Questions: []retrofit.Question{}}
	rep.Counts = Counts{Buildings: 1, Spaces: len(recs.Spaces), Circuits: len(recs.Circuits), Dimmers: len(recs.Dimmers), Fixtures: len(recs.Fixtures)}
	trees, err := Trees(cat, recs, at)
	if err != nil {
		return rep, err
	}
	labels := Labels(recs)
	var checker retrofit.Checker
	var known, places int
	type about struct {
		field retrofit.Field
		kind  string
		key   domain.ID
		with  domain.ID
	}
	byAbout := map[about]int{}
	boards := map[domain.ID]*plant.Circuit{} // circuit -> first of its board
	first := map[string]*plant.Circuit{}
	for i := range recs.Circuits {
		k := &recs.Circuits[i]
		if first[k.Board] == nil {
			first[k.Board] = k
		}
		boards[k.ID] = first[k.Board]
	}
	for i := range trees {
		t := &trees[i]
		res := t.Check(&checker)
		known += res.Coverage.Known
		places += res.Coverage.Places
		rep.Counts.Drivers += len(t.System.Drivers)
		for _, f := range t.System.Fixtures {
			for _, g := range f.Lamps {
				rep.Counts.Lamps += g.Count
			}
		}
		for _, f := range res.Findings {
			id := domain.ID(f.Subject.Key)
			rep.Findings = append(rep.Findings, ComputedFinding{Finding: f, Label: labels[id], ID: id})
		}
		for _, q := range res.Questions {
			if first, ok := boards[domain.ID(q.About.Key)]; ok && (q.Field == retrofit.FieldCircuitRCD || q.Field == retrofit.FieldCircuitRCDMA) {
				// Asked once a board: whoever opens it sees all its ways.
				q.About.Kind, q.About.Key, q.About.Name = "board", loading.Key(first.ID), first.Board
			}
			k := about{q.Field, q.About.Kind, domain.ID(q.About.Key), domain.ID(q.About.With)}
			if j, ok := byAbout[k]; ok {
				have := &rep.Questions[j]
				have.Places += q.Places
				if q.Severity.Rank() > have.Severity.Rank() {
					have.Severity, have.Rule = q.Severity, q.Rule
				}
				continue
			}
			byAbout[k] = len(rep.Questions)
			if q.About.Name == "" {
				q.About.Name = labels[domain.ID(q.About.Key)]
			}
			rep.Questions = append(rep.Questions, q)
		}
	}
	if places > 0 {
		rep.Coverage = float64(known) / float64(places)
	}
	slices.SortStableFunc(rep.Findings, func(a, b ComputedFinding) int {
		return retrofit.Weight(b.Severity, b.Lamps) - retrofit.Weight(a.Severity, a.Lamps)
	})
	retrofit.SortQuestions(rep.Questions)
	return rep, nil
}

// Labels returns what people call each place and circuit: its tag, or its board and way.
func Labels(recs *plant.Records) map[domain.ID]string {
	out := map[domain.ID]string{}
	for i := range recs.Circuits {
		out[recs.Circuits[i].ID] = recs.Circuits[i].Board + "/" + recs.Circuits[i].Way
	}
	for i := range recs.Dimmers {
		out[recs.Dimmers[i].ID] = recs.Dimmers[i].Tag
	}
	for i := range recs.Drivers {
		out[recs.Drivers[i].ID] = recs.Drivers[i].Tag
	}
	for i := range recs.Fixtures {
		out[recs.Fixtures[i].ID] = recs.Fixtures[i].Tag
	}
	return out
}
