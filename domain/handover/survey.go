package handover

import (
	"fmt"
	"reflect"
	"slices"
	"strconv"
	"strings"

	"lampward/domain"
	"lampward/domain/plant"
	"lampward/domain/site"
)

// Names of the sheets of our survey workbook.
const (
	buildingSheet = "Building"
	lampsSheet    = "Lamp models"
	gearSheet     = "Driver models"
	controlsSheet = "Dimmer models"
	fittingsSheet = "Fixture models"
	spacesSheet   = "Spaces"
	circuitsSheet = "Circuits"
	makeUpsSheet  = "Make-ups"
	dimmersSheet  = "Dimmers"
	driversSheet  = "Drivers"
	fixturesSheet = "Fixtures"
	feedsSheet    = "Feeds"
	linksSheet    = "Controls"

	quantityColumn = "quantity"
	maxQuantity    = 2000
)

// surveyForms are the sheets of the survey workbook in the order in which they are read: what is named comes before
// what names it.
var surveyForms = []sheetForm{
	formOf[site.Building](buildingSheet, false),
	formOf[plant.LampModel](lampsSheet, false),
	formOf[plant.DriverModel](gearSheet, false),
	formOf[plant.DimmerModel](controlsSheet, false),
	formOf[plant.FixtureModel](fittingsSheet, false),
	formOf[site.Space](spacesSheet, false),
	formOf[plant.Circuit](circuitsSheet, false),
	formOf[plant.MakeUp](makeUpsSheet, false),
	formOf[plant.Dimmer](dimmersSheet, false),
	formOf[plant.Driver](driversSheet, false),
	formOf[plant.Fixture](fixturesSheet, false),
	formOf[plant.Feed](feedsSheet, true),
	formOf[plant.ControlLink](linksSheet, true),
}

func form(name string) *sheetForm {
	i := slices.IndexFunc(surveyForms, func(f sheetForm) bool { return f.name == name })
	return &surveyForms[i]
}

func parseSurvey(b *Book) (*Register, error) {
	r := newRegister(SurveyForm)
	buildings := rowsOf[site.Building](r, b, buildingSheet, nil)
	if len(buildings) != 1 {
		return nil, errUnusable(b.Name, "its sheet %s must hold one row and has %d", buildingSheet, len(buildings))
	}
	r.Building = buildings[0].row
	r.judge(buildingSheet, buildings[0].number, r.Building.Validate())
	r.Lamps = models(r, b, lampsSheet, "lamp_model", func(m *plant.LampModel) (*plant.ModelHead, error) { return &m.ModelHead, m.Validate() })
	r.Drivers = models(r, b, gearSheet, "driver_model", func(m *plant.DriverModel) (*plant.ModelHead, error) { return &m.ModelHead, m.Validate() })
	r.Dimmers = models(r, b, controlsSheet, "dimmer_model", func(m *plant.DimmerModel) (*plant.ModelHead, error) { return &m.ModelHead, m.Validate() })
	r.Fixtures = models(r, b, fittingsSheet, "fixture_model", func(m *plant.FixtureModel) (*plant.ModelHead, error) { return &m.ModelHead, m.Validate() })
	r.Bulk.Spaces = records(r, b, spacesSheet, "space", func(p *site.Space) (*domain.Row, string, error) {
		return &p.Row, spaceName(p.Level, p.Name), p.Validate()
	})
	r.Bulk.Circuits = records(r, b, circuitsSheet, "circuit", func(k *plant.Circuit) (*domain.Row, string, error) {
		return &k.Row, k.Board + "/" + k.Way, k.Validate()
	})
	r.Bulk.MakeUps = records(r, b, makeUpsSheet, "make_up", func(m *plant.MakeUp) (*domain.Row, string, error) { return &m.Row, m.Name, m.Validate() })
	r.places(b)
	r.Bulk.Feeds = records(r, b, feedsSheet, "feed", func(f *plant.Feed) (*domain.Row, string, error) { return &f.Row, "", f.Validate() })
	r.Bulk.Controls = records(r, b, linksSheet, "control", func(l *plant.ControlLink) (*domain.Row, string, error) { return &l.Row, "", l.Validate() })
	return r, nil
}

// places reads dimmers, drivers and luminaires: their labels are taken first, because they may feed each other in any
// order of rows.
func (r *Register) places(b *Book) {
	for _, sheet := range []string{dimmersSheet, driversSheet, fixturesSheet} {
		header, rows := b.table(sheet)
		at := header["tag"]
		for _, row := range rows {
			if tag := cell(row.cells, at); tag != "" && quantityOf(row.cells, header) == 1 {
				if _, fresh := r.name("place", tag); !fresh {
					r.tell(sheet, row.number, "tag", "is the label of another row too", true)
				}
			}
		}
	}
	place := func(h *plant.PlaceHead, validate func() error) (*domain.Row, string, error) {
		tag := h.Tag
		if tag == "" {
			h.Tag = "-" // given when it is stored
		}
		err := validate()
		h.Tag = tag
		return &h.Row, tag, err
	}
	r.Bulk.Dimmers = records(r, b, dimmersSheet, "place", func(d *plant.Dimmer) (*domain.Row, string, error) { return place(&d.PlaceHead, d.Validate) })
	r.Bulk.Drivers = records(r, b, driversSheet, "place", func(d *plant.Driver) (*domain.Row, string, error) { return place(&d.PlaceHead, d.Validate) })
	r.Bulk.Fixtures = records(r, b, fixturesSheet, "place", func(f *plant.Fixture) (*domain.Row, string, error) { return place(&f.PlaceHead, f.Validate) })
}

// numbered is a row of a sheet with the number a person knows it by.
type numbered struct {
	cells  []string
	number int
}

// table returns where each header of a sheet is, by its name in lower case, and the rows below it that hold anything.
func (b *Book) table(sheet string) (map[string]int, []numbered) {
	rows := b.sheet(sheet)
	header := map[string]int{}
	if len(rows) == 0 {
		return header, nil
	}
	for i, h := range rows[0] {
		h = strings.ToLower(h)
		if _, twice := header[h]; h != "" && !twice {
			header[h] = i + 1 // 0: there is no such column
		}
	}
	var out []numbered
	for i, cells := range rows[1:] {
		if slices.ContainsFunc(cells, func(c string) bool { return c != "" }) {
			out = append(out, numbered{cells, i + 2})
		}
	}
	return header, out
}

// cell returns the text under a header's position, empty where there is none.
func cell(cells []string, at int) string {
	if at == 0 || at > len(cells) {
		return ""
	}
	return cells[at-1]
}

func quantityOf(cells []string, header map[string]int) int {
	text := cell(cells, header[quantityColumn])
	if text == "" {
		return 1
	}
	n, err := strconv.Atoi(text)
	if err != nil {
		return 0
	}
	return n
}

type parsed[T any] struct {
	row      T
	number   int
	quantity int
}

// rowsOf reads the rows of a sheet into records; what cannot be read is told and left absent.
func rowsOf[T any](r *Register, b *Book, sheet string, find func(kind, name string) (domain.ID, error)) []parsed[T] {
	f := form(sheet)
	header, rows := b.table(sheet)
	known := map[string]bool{quantityColumn: sheet == fixturesSheet}
	for _, c := range f.columns {
		known[c.name] = true
	}
	if rows := b.sheet(sheet); len(rows) > 0 {
		for _, h := range rows[0] {
			if h != "" && !known[strings.ToLower(h)] {
				r.tell(sheet, 1, h, "is no column of this sheet; it is not read", false)
			}
		}
	}
	var out []parsed[T]
	for _, row := range rows {
		p := parsed[T]{number: row.number, quantity: quantityOf(row.cells, header)}
		v := reflect.ValueOf(&p.row).Elem()
		for i := range f.columns {
			c := &f.columns[i]
			if err := c.read(v.FieldByIndex(c.path), cell(row.cells, header[c.name]), find); err != nil {
				r.tell(sheet, row.number, c.name, err.Error(), true)
			}
		}
		if p.quantity < 1 || p.quantity > maxQuantity {
			r.tell(sheet, row.number, quantityColumn, fmt.Sprintf("must be a whole number from 1 to %d", maxQuantity), true)
		}
		out = append(out, p)
	}
	return out
}

// judge tells the fields of a record that break its rules, at the columns of its row.
func (r *Register) judge(sheet string, row int, err error) {
	for _, f := range domain.FieldsOf(err) {
		name, _, _ := strings.Cut(strings.TrimPrefix(f.Pointer, "/"), "/")
		if ref, ok := refNames[name]; ok {
			name = ref.header
		}
		r.tell(sheet, row, name, f.Detail, true)
	}
}

// models reads a sheet of models; their codes name them.
func models[T any](r *Register, b *Book, sheet, kind string, head func(*T) (*plant.ModelHead, error)) []T {
	var out []T
	for _, p := range rowsOf[T](r, b, sheet, r.find) {
		h, err := head(&p.row)
		r.judge(sheet, p.number, err)
		id, fresh := r.name(kind, h.Code)
		if !fresh {
			r.tell(sheet, p.number, "code", "is the code of another row too", true)
			continue
		}
		h.ID = id
		if !r.bad[sheet][p.number] {
			out = append(out, p.row)
		}
	}
	return out
}

// records reads a sheet of a building's records. head returns a record's head, what people call it (places have theirs
// already), and what is wrong with it.
func records[T any](r *Register, b *Book, sheet, kind string, head func(*T) (*domain.Row, string, error)) []T {
	var out []T
	for _, p := range rowsOf[T](r, b, sheet, r.find) {
		for n := range max(p.quantity, 1) {
			row := p.row
			h, name, err := head(&row)
			if n == 0 {
				r.judge(sheet, p.number, err)
			}
			switch {
			case kind == "place" && name != "" && p.quantity == 1:
				h.ID = r.ids[key(kind, name)]
			case name != "" && kind != "place":
				id, fresh := r.name(kind, name)
				if !fresh {
					r.tell(sheet, p.number, "name", "has the name of another row too", true)
				}
				h.ID = id
			case h.ID.IsZero():
				h.ID = domain.NewID()
			}
			if p.quantity > 1 {
				if f, ok := any(&row).(*plant.Fixture); ok && f.Tag != "" {
					f.Tag = fmt.Sprintf("%s-%d", f.Tag, n+1)
				}
			}
			if !r.bad[sheet][p.number] {
				out = append(out, row)
			}
		}
	}
	return out
}
