package handover

import (
	"fmt"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"time"

	"lampward/calc/loading"
	"lampward/domain"
	"lampward/domain/plant"
	"lampward/domain/site"
)

// lightingClass is how an OmniClass category of lighting begins (table 23, 23-80 70). Numbers are matched, never the
// text: it is misspelt in real files.
const lightingClass = "23-80 70"

// fixtureObject is the object that authoring software exports luminaires as.
const fixtureObject = "IfcLightFixtureType"

// parseCOBie reads a COBie 2.4 workbook: spaces, the types of luminaires with their attributes, and the luminaires. A
// type is a luminaire where its category is lighting *and* it was exported as a light fixture: switches and boards carry
// one of the two, loose medical and table lamps the other. Records are joined by names with their blanks trimmed.
func parseCOBie(b *Book) (*Register, error) {
	r := newRegister(COBieForm)
	r.facility(b)
	r.cobieSpaces(b)
	types := r.cobieTypes(b)
	r.cobieComponents(b, types)
	r.cobieTimes(b)
	return r, nil
}

// given returns a cell's text, empty where the file says that it has none.
func given(cells []string, at int) string {
	c := cell(cells, at)
	if strings.EqualFold(c, "n/a") {
		return ""
	}
	return c
}

// line makes a text of a file fit for a record's line.
func line(text string) string {
	text = strings.Join(strings.Fields(strings.Map(func(c rune) rune {
		if c < ' ' || c >= 0x7F && c < 0xA0 || c >= 0x200B && c <= 0x200F || c >= 0x202A && c <= 0x202E || c >= 0x2060 && c <= 0x206F || c == 0xFEFF || c == 0x061C {
			return ' '
		}
		return c
	}, text)), " ")
	if r := []rune(text); len(r) > domain.MaxLine {
		text = strings.TrimSpace(string(r[:domain.MaxLine]))
	}
	return text
}

var notCode = regexp.MustCompile(`[^A-Za-z0-9._/-]+`)

// codeOf makes a code of a name: it keeps its letters and digits, and is told apart by number where two names give one.
func (r *Register) codeOf(kind, name string) string {
	code := strings.Trim(notCode.ReplaceAllString(name, "-"), "-._/")
	if code == "" {
		code = "X"
	}
	if len(code) > 36 {
		code = strings.Trim(code[:36], "-._/")
	}
	for n := 1; ; n++ {
		try := code
		if n > 1 {
			try = fmt.Sprintf("%s-%d", code, n)
		}
		if _, taken := r.ids[key(kind, try)]; !taken {
			return try
		}
	}
}

func (r *Register) facility(b *Book) {
	header, rows := b.table("Facility")
	name := strings.TrimSuffix(b.Name, ".xlsx")
	if len(rows) > 0 {
		if n := given(rows[0].cells, header["name"]); n != "" {
			name = n
		}
		if len(rows) > 1 {
			r.tell("Facility", rows[1].number, "Name", "only the first facility of a file is taken", false)
		}
	}
	r.Building = site.Building{Code: r.codeOf("building", name), Name: line(name), TimeZone: "Etc/UTC", Note: "From the hand-over workbook " + line(b.Name)}
	r.Told = append(r.Told, "The workbook says neither time zone, mains nor wiring rules: set them on the building.")
}

func (r *Register) cobieSpaces(b *Book) {
	header, rows := b.table("Space")
	for _, row := range rows {
		name := given(row.cells, header["name"])
		if name == "" {
			r.tell("Space", row.number, "Name", "must not be empty", true)
			continue
		}
		id, fresh := r.name("space", name)
		if !fresh {
			r.tell("Space", row.number, "Name", "has the name of another row too", true)
			continue
		}
		p := site.Space{Level: line(given(row.cells, header["floorname"])), Name: line(name), Use: "", ExternalID: line(given(row.cells, header["extidentifier"])),
			FactSource: loading.HandedOver, Note: line(given(row.cells, header["description"]))}
		p.ID = id
		if area := given(row.cells, header["netarea"]); area != "" {
			if v, err := readNumber(area); err != nil || v < 0 {
				r.tell("Space", row.number, "NetArea", "must be a number of at least 0", false)
			} else if strings.Contains(strings.ToLower(r.unit(b, "areaunits")), "square meter") || strings.Contains(strings.ToLower(r.unit(b, "areaunits")), "squaremeter") {
				p.AreaM2 = &v
			}
		}
		r.Bulk.Spaces = append(r.Bulk.Spaces, p)
	}
}

func (r *Register) unit(b *Book, column string) string {
	header, rows := b.table("Facility")
	if len(rows) == 0 {
		return ""
	}
	return given(rows[0].cells, header[column])
}

// cobieType is a type of luminaire with what its attributes say.
type cobieType struct {
	fixture   domain.ID
	lamp      *domain.ID
	lamps     *int
	emergency bool
}

// cobieTypes returns the types that are luminaires, by name, and nil for those that look like it and are not.
func (r *Register) cobieTypes(b *Book) map[string]*cobieType {
	header, rows := b.table("Type")
	attributes := r.cobieAttributes(b)
	out := map[string]*cobieType{}
	for _, row := range rows {
		name := given(row.cells, header["name"])
		lighting := strings.HasPrefix(given(row.cells, header["category"]), lightingClass)
		exported := strings.EqualFold(given(row.cells, header["extobject"]), fixtureObject)
		if name == "" || !lighting {
			continue
		}
		if _, twice := out[strings.ToLower(name)]; twice {
			r.tell("Type", row.number, "Name", "has the name of another row too", true)
			continue
		}
		if !exported {
			out[strings.ToLower(name)] = nil
			continue
		}
		t := &cobieType{}
		out[strings.ToLower(name)] = t
		a := attributes[strings.ToLower(name)]
		m := plant.FixtureModel{ModelHead: plant.ModelHead{Code: r.codeOf("fixture_model", name), Provisional: true, Note: line(given(row.cells, header["description"]))}}
		m.Name, m.FactSource = line(name), loading.HandedOver
		m.ID, _ = r.name("fixture_model", m.Code)
		t.fixture = m.ID
		if backup := a["battery backup"]; backup.text != "" {
			if yes, err := readBool(backup.text); err != nil {
				r.tell("Attribute", backup.row, "Value", "must be yes or no", false)
			} else {
				m.Emergency, t.emergency = &yes, yes
			}
		}
		if n := a["lamp number"]; n.text != "" {
			if v, err := strconv.Atoi(n.text); err != nil || v < 0 || v > 1000 {
				r.tell("Attribute", n.row, "Value", "is no count of lamps: "+line(n.text)+"; it is left unknown", false)
			} else {
				t.lamps = &v
			}
		}
		r.Fixtures = append(r.Fixtures, m)
		t.lamp = r.cobieLamp(a)
	}
	return out
}

type attribute struct {
	text string
	row  int
}

// cobieAttributes returns what the attribute sheet says of types, by type and attribute in lower case.
func (r *Register) cobieAttributes(b *Book) map[string]map[string]attribute {
	header, rows := b.table("Attribute")
	out := map[string]map[string]attribute{}
	for _, row := range rows {
		if !strings.EqualFold(given(row.cells, header["sheetname"]), "Type") {
			continue
		}
		of := strings.ToLower(given(row.cells, header["rowname"]))
		if out[of] == nil {
			out[of] = map[string]attribute{}
		}
		out[of][strings.ToLower(given(row.cells, header["name"]))] = attribute{given(row.cells, header["value"]), row.number}
	}
	return out
}

// cobieLamp makes the lamp model of a type from its attributes, one for each different lamp. A wattage that is no number
// is told and left unknown.
func (r *Register) cobieLamp(a map[string]attribute) *domain.ID {
	kind, power, flux := a["lamp type"], a["lamp power"], a["lamp lumens"]
	if kind.text == "" && power.text == "" {
		return nil
	}
	m := plant.LampModel{ModelHead: plant.ModelHead{Provisional: true}}
	m.FactSource = loading.HandedOver
	m.Technology = technologyOf(kind.text)
	name := kind.text
	if name == "" {
		name = "Lamp of unknown kind"
	}
	if power.text != "" {
		if w, err := readNumber(power.text); err != nil || w < 0.01 || w > 5000 {
			r.tell("Attribute", power.row, "Value", "is no power in W: "+line(power.text)+"; it is left unknown", false)
		} else {
			m.PowerW = &w
			name += fmt.Sprintf(", %g W", w)
		}
	}
	if flux.text != "" {
		if lm, err := readNumber(flux.text); err != nil || lm < 0 || lm > 1e6 {
			r.tell("Attribute", flux.row, "Value", "is no flux in lm: "+line(flux.text)+"; it is left unknown", false)
		} else if lm > 0 {
			m.FluxLM = &lm
			name += fmt.Sprintf(", %g lm", lm)
		}
	}
	m.Name = line(name)
	if id, known := r.ids[key("lamp name", m.Name)]; known {
		return &id
	}
	m.Code = r.codeOf("lamp_model", m.Name)
	m.ID, _ = r.name("lamp_model", m.Code)
	r.ids[key("lamp name", m.Name)] = m.ID
	r.Lamps = append(r.Lamps, m)
	return &m.ID
}

// technologyOf reads the kind of a lamp from free text, misspelt as it is; empty where it says none.
func technologyOf(text string) string {
	t := strings.ToLower(text)
	for _, w := range []struct{ word, technology string }{
		{"led tube", loading.LEDTube}, {"led strip", loading.LEDModule}, {"led module", loading.LEDModule}, {"led", loading.LEDLamp},
		{"compact", loading.CFL}, {"cfl", loading.CFL}, {"fluor", loading.Fluorescent}, {"flour", loading.Fluorescent}, {"t5", loading.Fluorescent}, {"t8", loading.Fluorescent},
		{"metal halide", loading.MetalHalide}, {"halide", loading.MetalHalide}, {"sodium", loading.Sodium}, {"halogen", loading.Halogen}, {"incandescent", loading.Incandescent},
	} {
		if strings.Contains(t, w.word) {
			return w.technology
		}
	}
	return ""
}

func (r *Register) cobieComponents(b *Book, types map[string]*cobieType) {
	header, rows := b.table("Component")
	loose := map[string]int{}
	var looseNames []string
	for _, row := range rows {
		typeName := given(row.cells, header["typename"])
		t, lighting := types[strings.ToLower(typeName)]
		if !lighting {
			continue
		}
		if t == nil {
			if loose[typeName]++; loose[typeName] == 1 {
				looseNames = append(looseNames, typeName)
			}
			continue
		}
		name := given(row.cells, header["name"])
		if name == "" {
			r.tell("Component", row.number, "Name", "must not be empty", true)
			continue
		}
		id, fresh := r.name("place", name)
		if !fresh {
			r.tell("Component", row.number, "Name", "has the name of another row too", true)
			continue
		}
		f := plant.Fixture{FixtureModelID: &t.fixture, LampModelID: t.lamp, LampCount: t.lamps}
		f.ID, f.Tag, f.FactSource = id, line(name), loading.HandedOver
		f.ExternalID = line(given(row.cells, header["extidentifier"]))
		f.Note = line(given(row.cells, header["description"]))
		if where := given(row.cells, header["space"]); where != "" {
			if space, err := r.find("space", where); err != nil {
				r.tell("Component", row.number, "Space", "names no space of this file: "+line(where), false)
			} else {
				f.SpaceID = &space
			}
		}
		if at := given(row.cells, header["installationdate"]); at != "" {
			if when, err := readTime(at); err != nil {
				r.tell("Component", row.number, "InstallationDate", err.Error()+"; it is left unknown", false)
			} else {
				f.FittedAt = &when
			}
		}
		if !t.emergency {
			f.EmergencyMode = ""
		}
		r.Bulk.Fixtures = append(r.Bulk.Fixtures, f)
	}
	n := 0
	for _, name := range looseNames {
		n += loose[name]
	}
	if n > 0 {
		slices.Sort(looseNames)
		r.Told = append(r.Told, fmt.Sprintf("%d components of %d types are classed as lighting but were not exported as luminaires, and are not taken: %s.", n, len(looseNames), strings.Join(looseNames, "; ")))
	}
}

// cobieTimes tells of times that cannot be in sheets that are otherwise not read, so that whoever made the file hears of
// them once.
func (r *Register) cobieTimes(b *Book) {
	header, rows := b.table("System")
	for _, row := range rows {
		if text := given(row.cells, header["createdon"]); text != "" {
			if _, err := time.Parse("2006-01-02T15:04:05", text); err != nil {
				if _, err := readTime(text); err != nil {
					r.tell("System", row.number, "CreatedOn", "is no time: "+line(text)+"; nothing of this sheet is taken", false)
				}
			}
		}
	}
}
