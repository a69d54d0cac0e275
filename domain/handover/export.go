package handover

import (
	"archive/zip"
	"context"
	"encoding/csv"
	"fmt"
	"io"
	"reflect"
	"slices"
	"strings"

	"github.com/xuri/excelize/v2"

	"lampward/domain"
	"lampward/domain/plant"
	"lampward/domain/site"
)

// A Table is one sheet on its way out.
type Table struct {
	Name   string
	Header []string
	Rows   [][]string
}

// namer knows what people call the records of a building.
type namer map[string]string

func (n namer) of(kind string, id domain.ID) string { return n[kind+"\x00"+id.String()] }

func (n namer) add(kind string, id domain.ID, name string) { n[kind+"\x00"+id.String()] = name }

// Export returns the records in use of s's building as the sheets of the survey workbook, with the models they name.
func Export(ctx context.Context, s domain.Scope, cat *plant.Catalogue) ([]Table, error) {
	const inUse = `WHERE building_id = $1 AND retired_at IS NULL ORDER BY `
	b, err := site.GetBuilding(ctx, s, s.Building)
	if err != nil {
		return nil, err
	}
	spaces, err := site.Spaces.Select(ctx, s, inUse+`level, name`, s.Building)
	if err != nil {
		return nil, err
	}
	circuits, err := plant.Circuits.Select(ctx, s, inUse+`board, way`, s.Building)
	if err != nil {
		return nil, err
	}
	makeUps, err := plant.MakeUps.Select(ctx, s, inUse+`name`, s.Building)
	if err != nil {
		return nil, err
	}
	const places = `WHERE building_id = $1 AND retired_at IS NULL AND kind = $2 ORDER BY tag`
	dimmers, err := plant.Dimmers.Select(ctx, s, places, s.Building, plant.KindDimmer)
	if err != nil {
		return nil, err
	}
	drivers, err := plant.Drivers.Select(ctx, s, places, s.Building, plant.KindDriver)
	if err != nil {
		return nil, err
	}
	fixtures, err := plant.Fixtures.Select(ctx, s, places, s.Building, plant.KindFixture)
	if err != nil {
		return nil, err
	}
	feeds, err := plant.Feeds.Select(ctx, s, inUse+`id`, s.Building)
	if err != nil {
		return nil, err
	}
	controls, err := plant.Controls.Select(ctx, s, inUse+`id`, s.Building)
	if err != nil {
		return nil, err
	}
	n := namer{}
	for i := range spaces {
		n.add("space", spaces[i].ID, spaceName(spaces[i].Level, spaces[i].Name))
	}
	for i := range circuits {
		n.add("circuit", circuits[i].ID, circuits[i].Board+"/"+circuits[i].Way)
	}
	for i := range makeUps {
		n.add("make_up", makeUps[i].ID, makeUps[i].Name)
	}
	for i := range dimmers {
		n.add("place", dimmers[i].ID, dimmers[i].Tag)
	}
	for i := range drivers {
		n.add("place", drivers[i].ID, drivers[i].Tag)
	}
	for i := range fixtures {
		n.add("place", fixtures[i].ID, fixtures[i].Tag)
	}
	for id, m := range cat.Lamps {
		n.add("lamp_model", id, m.Code)
	}
	for id, m := range cat.Drivers {
		n.add("driver_model", id, m.Code)
	}
	for id, m := range cat.Dimmers {
		n.add("dimmer_model", id, m.Code)
	}
	for id, m := range cat.Fixtures {
		n.add("fixture_model", id, m.Code)
	}
	u := used{}
	for i := range makeUps {
		m := &makeUps[i]
		u.note(m.LampModelID, m.DriverModelID, m.DimmerModelID, m.FixtureModelID)
	}
	for i := range dimmers {
		u.note(dimmers[i].DimmerModelID)
	}
	for i := range drivers {
		u.note(drivers[i].DriverModelID)
	}
	for i := range fixtures {
		f := &fixtures[i]
		u.note(f.LampModelID, f.DriverModelID, f.FixtureModelID)
		if f.FixtureModelID != nil {
			if m := cat.Fixtures[*f.FixtureModelID]; m != nil {
				u.note(m.DriverModelID)
			}
		}
	}
	return []Table{
		tableOf(buildingSheet, []site.Building{b}, n),
		tableOf(lampsSheet, usedModels(cat.Lamps, u), n),
		tableOf(gearSheet, usedModels(cat.Drivers, u), n),
		tableOf(controlsSheet, usedModels(cat.Dimmers, u), n),
		tableOf(fittingsSheet, usedModels(cat.Fixtures, u), n),
		tableOf(spacesSheet, spaces, n),
		tableOf(circuitsSheet, circuits, n),
		tableOf(makeUpsSheet, makeUps, n),
		tableOf(dimmersSheet, dimmers, n),
		tableOf(driversSheet, drivers, n),
		tableOf(fixturesSheet, fixtures, n),
		tableOf(feedsSheet, feeds, n),
		tableOf(linksSheet, controls, n),
	}, nil
}

// used are the models that the records of a building name.
type used map[domain.ID]bool

func (u used) note(ids ...*domain.ID) {
	for _, id := range ids {
		if id != nil {
			u[*id] = true
		}
	}
}

// usedModels returns the models that are named, each under the code it goes by now, in the order of codes.
func usedModels[T any, P interface {
	*T
	Head() *plant.ModelHead
}](models map[domain.ID]P, u used) []T {
	seen := map[domain.ID]bool{}
	var out []T
	for id := range u {
		if m := models[id]; m != nil && !seen[m.Head().ID] {
			seen[m.Head().ID] = true
			out = append(out, *m)
		}
	}
	slices.SortFunc(out, func(a, b T) int { return strings.Compare(P(&a).Head().Code, P(&b).Head().Code) })
	return out
}

func tableOf[T any](sheet string, rows []T, n namer) Table {
	f := form(sheet)
	t := Table{Name: sheet, Header: f.header()}
	for i := range rows {
		v := reflect.ValueOf(&rows[i]).Elem()
		cells := make([]string, len(f.columns))
		for k := range f.columns {
			cells[k] = f.columns[k].write(v.FieldByIndex(f.columns[k].path), n.of)
		}
		t.Rows = append(t.Rows, cells)
	}
	return t
}

func (f *sheetForm) header() []string {
	out := make([]string, len(f.columns))
	for i := range f.columns {
		out[i] = f.columns[i].name
	}
	return out
}

// WriteXLSX writes tables as a workbook. Every cell is text, so that nothing is taken for a formula or a date.
func WriteXLSX(w io.Writer, tables []Table) error {
	f := excelize.NewFile()
	defer f.Close() // removes parts kept on disk
	bold, err := f.NewStyle(&excelize.Style{Font: &excelize.Font{Bold: true}, Alignment: &excelize.Alignment{WrapText: true, Vertical: "top"}})
	if err != nil {
		return err
	}
	for i, t := range tables {
		if i == 0 {
			err = f.SetSheetName("Sheet1", t.Name)
		} else {
			_, err = f.NewSheet(t.Name)
		}
		if err != nil {
			return err
		}
		sw, err := f.NewStreamWriter(t.Name)
		if err != nil {
			return err
		}
		if err := sw.SetColWidth(1, max(len(t.Header), 1), 18); err != nil {
			return err
		}
		if err := sw.SetPanes(&excelize.Panes{Freeze: true, YSplit: 1, TopLeftCell: "A2", ActivePane: "bottomLeft"}); err != nil {
			return err
		}
		for n, row := range append([][]string{t.Header}, t.Rows...) {
			at, err := excelize.CoordinatesToCellName(1, n+1)
			if err != nil {
				return err
			}
			cells := make([]any, len(row))
			for k, c := range row {
				if n == 0 {
					cells[k] = excelize.Cell{StyleID: bold, Value: c}
				} else {
					cells[k] = c
				}
			}
			if err := sw.SetRow(at, cells); err != nil {
				return err
			}
		}
		if err := sw.Flush(); err != nil {
			return err
		}
	}
	return f.Write(w)
}

// WriteCSV writes tables as a zip file of csv sheets (RFC 4180). A text that a spreadsheet would take for a formula has an
// apostrophe in front.
func WriteCSV(w io.Writer, tables []Table) error {
	z := zip.NewWriter(w)
	for _, t := range tables {
		part, err := z.Create(t.Name + ".csv")
		if err != nil {
			return err
		}
		c := csv.NewWriter(part)
		for _, row := range append([][]string{t.Header}, t.Rows...) {
			out := make([]string, len(row))
			for i, v := range row {
				if v != "" && strings.ContainsRune("=+-@", rune(v[0])) {
					if _, err := readNumber(v); err != nil {
						v = "'" + v
					}
				}
				out[i] = v
			}
			if err := c.Write(out); err != nil {
				return err
			}
		}
		if c.Flush(); c.Error() != nil {
			return c.Error()
		}
	}
	return z.Close()
}

// Template returns the empty sheets of the survey workbook, with a sheet that says what each column holds.
func Template() []Table {
	guide := Table{Name: "Read me", Header: []string{"sheet", "column", "what it holds"}}
	say := func(sheet, column, what string) { guide.Rows = append(guide.Rows, []string{sheet, column, what}) }
	say("", "", "One row for each record. Leave a cell empty where nobody has looked; write none where somebody looked and there is none. Units are in the column's name.")
	say("", "", "Lists are separated by semicolons; points of a curve are pairs such as 40:100; 60:50. yes and no answer yes-or-no columns.")
	say("", "", "A record is named by its label (tag), a circuit by board/way, a space by level/name, a model by its code. "+buildingSheet+" has one row.")
	out := []Table{}
	for i := range surveyForms {
		f := &surveyForms[i]
		t := Table{Name: f.name, Header: f.header()}
		if f.name == fixturesSheet {
			t.Header = append(t.Header, quantityColumn)
			say(f.name, quantityColumn, fmt.Sprintf("a row may stand for so many alike luminaires, 1 to %d; labels are numbered", maxQuantity))
		}
		for k := range f.columns {
			c := &f.columns[k]
			say(f.name, c.name, c.describe())
		}
		out = append(out, t)
	}
	return append([]Table{guide}, out...)
}

// describe says what a column holds.
func (c *column) describe() string {
	typ := c.typ
	for typ.Kind() == reflect.Pointer {
		typ = typ.Elem()
	}
	if c.ref != "" {
		return map[string]string{"space": "level/name of a space", "circuit": "board/way of a circuit", "place": "label of a place", "make_up": "name of a make-up"}[c.ref] +
			map[bool]string{true: "code of a " + strings.ReplaceAll(c.ref, "_", " ")}[strings.HasSuffix(c.ref, "_model")]
	}
	switch {
	case typ == timeType:
		return "a time with its offset, or a day"
	case typ == dateType:
		return "a day, 2026-03-31"
	case typ.Kind() == reflect.Bool:
		return "yes or no"
	case typ.Kind() == reflect.Slice && typ.Elem().Kind() == reflect.Struct:
		return "pairs of numbers, 40:100; 60:50"
	case typ.Kind() == reflect.Slice:
		return "a list, separated by semicolons"
	case typ.Kind() == reflect.Float64:
		return "a number"
	case typ.Kind() == reflect.Int:
		return "a whole number"
	}
	if words := pickList(c.name); words != nil {
		return "one of " + strings.Join(words, ", ")
	}
	return "text"
}

// pickList are the words of a column that takes only some, asked of the records' own rules: a word that cannot be is
// refused with those that can.
func pickList(name string) []string {
	const cannot = "\x01"
	try := func(v any, validate func() error) []string {
		f := reflect.ValueOf(v).Elem()
		var walk func(f reflect.Value) bool
		walk = func(f reflect.Value) bool {
			for i := range f.NumField() {
				tag, _, _ := strings.Cut(f.Type().Field(i).Tag.Get("json"), ",")
				if f.Type().Field(i).Anonymous && tag == "" {
					if walk(f.Field(i)) {
						return true
					}
				} else if tag == name && f.Field(i).Kind() == reflect.String && f.Field(i).CanSet() {
					f.Field(i).SetString(cannot)
					return true
				}
			}
			return false
		}
		if !walk(f) {
			return nil
		}
		for _, bad := range domain.FieldsOf(validate()) {
			if words, ok := strings.CutPrefix(bad.Detail, "must be one of "); ok && bad.Pointer == "/"+name {
				return strings.Split(words, ", ")
			}
		}
		return nil
	}
	var l plant.LampModel
	var g plant.DriverModel
	var d plant.DimmerModel
	var f plant.FixtureModel
	var sp site.Space
	var k plant.Circuit
	var pd plant.Dimmer
	var pg plant.Driver
	var pf plant.Fixture
	var fe plant.Feed
	var co plant.ControlLink
	var b site.Building
	for _, t := range []struct {
		v        any
		validate func() error
	}{{&b, b.Validate}, {&l, l.Validate}, {&g, g.Validate}, {&d, d.Validate}, {&f, f.Validate}, {&sp, sp.Validate}, {&k, k.Validate}, {&pd, pd.Validate}, {&pg, pg.Validate},
		{&pf, pf.Validate}, {&fe, fe.Validate}, {&co, co.Validate}} {
		if words := try(t.v, t.validate); words != nil {
			return words
		}
	}
	return nil
}
