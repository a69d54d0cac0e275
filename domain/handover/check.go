package handover

import (
	"time"

	"lampward/domain"
	"lampward/domain/plant"
	"lampward/domain/review"
)

// A Report is what a check of a file says, without a database.
type Report struct {
	Counts    review.Counts   `json:"counts"`
	Coverage  float64         `json:"coverage"` // share of luminaires that can be judged
	Findings  []ReportFinding `json:"findings"`
	Questions []ReportAsk     `json:"questions"`
	Cells     []Cell          `json:"cells"`

	Told      []string `json:"-"`
	Asked     int      `json:"-"` // questions in all; at most 20 are shown
	CellCount int      `json:"-"` // cells in all; at most 1,000 are shown
}

// A ReportFinding is a finding of a file.
type ReportFinding struct {
	Rule     string        `json:"rule"`
	Severity string        `json:"severity"`
	Subject  string        `json:"subject"` // label of the place, or board/way
	Sentence string        `json:"sentence"`
	Steps    []review.Step `json:"steps"`
	Basis    string        `json:"basis"`
	Remedy   string        `json:"remedy"`
}

// A ReportAsk is a question of a file.
type ReportAsk struct {
	Field   string `json:"field"`
	About   string `json:"about"`
	Settles int    `json:"settles"` // places

	Ask string `json:"-"`
}

// Check judges a register as it stands, without a database.
func (r *Register) Check(at time.Time) (Report, error) {
	cat := plant.NewCatalogue(pointers(r.Lamps), pointers(r.Drivers), pointers(r.Dimmers), pointers(r.Fixtures), nil)
	recs := &plant.Records{Building: r.Building, Spaces: map[domain.ID]plant.SpaceFacts{}, Circuits: r.Bulk.Circuits, Dimmers: r.Bulk.Dimmers, Drivers: r.Bulk.Drivers,
		Fixtures: r.Bulk.Fixtures, Feeds: r.Bulk.Feeds, Controls: r.Bulk.Controls}
	for i := range r.Bulk.Spaces {
		p := &r.Bulk.Spaces[i]
		recs.Spaces[p.ID] = plant.SpaceFacts{YearlyHours: p.YearlyHours, Use: p.Use}
	}
	for i := range recs.Dimmers {
		recs.Dimmers[i].Kind = plant.KindDimmer
	}
	for i := range recs.Drivers {
		recs.Drivers[i].Kind = plant.KindDriver
	}
	for i := range recs.Fixtures {
		recs.Fixtures[i].Kind = plant.KindFixture
	}
	done, err := review.Compute(cat, recs, at)
	if err != nil {
		return Report{}, err
	}
	out := Report{Counts: done.Counts, Coverage: done.Coverage, Findings: []ReportFinding{}, Questions: []ReportAsk{}, Cells: []Cell{}, Told: r.Told,
		Asked: len(done.Questions), CellCount: len(r.Cells)}
	for i := range done.Findings {
		f := &done.Findings[i]
		steps := f.Steps
		if steps == nil {
			steps = []review.Step{}
		}
		out.Findings = append(out.Findings, ReportFinding{f.Rule, string(f.Severity), f.Label, f.Sentence, steps, f.Basis, f.Remedy})
	}
	for _, q := range done.Questions[:min(len(done.Questions), review.MostQuestions)] {
		out.Questions = append(out.Questions, ReportAsk{string(q.Field), q.About.Name, q.Places, q.Field.Text().Ask})
	}
	out.Cells = append(out.Cells, r.Cells[:min(len(r.Cells), mostCells)]...)
	return out, nil
}

func pointers[T any](s []T) []*T {
	out := make([]*T, len(s))
	for i := range s {
		out[i] = &s[i]
	}
	return out
}
