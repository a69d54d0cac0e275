package handover

import (
	"fmt"
	"strings"

	"lampward/domain"
	"lampward/domain/plant"
	"lampward/domain/site"
)

// A Register is one building as a file tells it. Records name each other by identifiers that the register gave; models
// are known by their codes.
type Register struct {
	Form     string // COBieForm, SurveyForm or SheetForm
	Building site.Building
	Lamps    []plant.LampModel
	Drivers  []plant.DriverModel
	Dimmers  []plant.DimmerModel
	Fixtures []plant.FixtureModel
	Bulk     plant.Bulk
	Cells    []Cell   // not taken as they stand
	Told     []string // what a person should know of the file

	bad map[string]map[int]bool // rows that cannot be taken, by sheet
	ids map[string]domain.ID    // by kind and name in lower case
}

func newRegister(form string) *Register {
	return &Register{Form: form, bad: map[string]map[int]bool{}, ids: map[string]domain.ID{}}
}

// tell notes a cell that cannot be taken. refuses says that its row cannot.
func (r *Register) tell(sheet string, row int, column, problem string, refuses bool) {
	r.Cells = append(r.Cells, Cell{sheet, row, column, problem, refuses})
	if refuses {
		if r.bad[sheet] == nil {
			r.bad[sheet] = map[int]bool{}
		}
		r.bad[sheet][row] = true
	}
}

// Refused returns how many rows cannot be taken.
func (r *Register) Refused() int {
	n := 0
	for _, rows := range r.bad {
		n += len(rows)
	}
	return n
}

func key(kind, name string) string { return kind + "\x00" + strings.ToLower(strings.TrimSpace(name)) }

// name gives a record its identifier under what people call it; false where the name is taken.
func (r *Register) name(kind, name string) (domain.ID, bool) {
	k := key(kind, name)
	if id, taken := r.ids[k]; taken {
		return id, false
	}
	id := domain.NewID()
	r.ids[k] = id
	return id, true
}

// find returns the record of a kind that has a name.
func (r *Register) find(kind, name string) (domain.ID, error) {
	if id, ok := r.ids[key(kind, name)]; ok {
		return id, nil
	}
	return domain.ID{}, fmt.Errorf("names no %s of this file: %.60q", strings.ReplaceAll(kind, "_", " "), name)
}

func spaceName(level, name string) string {
	if level == "" {
		return name
	}
	return level + "/" + name
}

// Forms of a file.
const (
	COBieForm  = "cobie"
	SurveyForm = "survey"
	SheetForm  = "sheet" // anybody's
)

// FormOf returns the form that a book has.
func FormOf(b *Book) string {
	switch {
	case b.sheet("Component") != nil && b.sheet("Type") != nil:
		return COBieForm
	case b.sheet(fixturesSheet) != nil && b.sheet(buildingSheet) != nil:
		return SurveyForm
	}
	return SheetForm
}

// Parse turns a book into a register: a COBie hand-over workbook, our own survey workbook, or else anybody's sheet with the
// matching given (a proposed one where nil).
func Parse(b *Book, m *Matching) (*Register, error) {
	switch form := FormOf(b); {
	case m == nil && form == COBieForm:
		return parseCOBie(b)
	case m == nil && form == SurveyForm:
		return parseSurvey(b)
	}
	if m == nil {
		proposed, err := Propose(b)
		if err != nil {
			return nil, err
		}
		m = proposed
	}
	return parseSheet(b, m)
}
