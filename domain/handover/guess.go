package handover

import (
	"crypto/sha256"
	"fmt"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"lampward/calc/loading"
	"lampward/domain"
	"lampward/domain/plant"
	"lampward/domain/site"
)

// Fields that a column of anybody's sheet may hold.
var sheetFields = []string{"tag", "level", "space", "use", "area_m2", "fixture", "lamp", "lamp_power_w", "lamp_count", "technology", "quantity", "board", "way", "driver", "dimmer",
	"mounting_m", "note", "ignore"}

// A Matching says which column of a sheet holds which field, and what the words in some cells mean. A person corrects
// what was proposed; it is kept for the next file with the same headers.
type Matching struct {
	Sheet   string            `json:"sheet"`
	Header  int               `json:"header_row"` // as a person counts
	Columns map[string]string `json:"columns"`    // header: field, "ignore" for none; several columns may be the note
	Words   map[string]string `json:"words"`      // text of a technology cell: our word
}

// Hash names the headers a matching is for.
func (m *Matching) Hash() []byte {
	names := make([]string, 0, len(m.Columns))
	for h := range m.Columns {
		names = append(names, strings.ToLower(h))
	}
	slices.Sort(names)
	sum := sha256.Sum256([]byte(strings.Join(names, "\x00")))
	return sum[:]
}

// synonyms are words of headers, the more telling first; a header that holds one is taken for the field.
var synonyms = []struct{ word, field string }{
	{"luminaire id", "tag"}, {"asset", "tag"}, {"tag", "tag"}, {"label", "tag"}, {"fitting no", "tag"}, {"luminaire no", "tag"},
	{"quantity", "quantity"}, {"qty", "quantity"}, {"no. of fittings", "quantity"}, {"no of fittings", "quantity"}, {"number of fittings", "quantity"}, {"fittings", "quantity"}, {"count of lum", "quantity"},
	{"lamps per", "lamp_count"}, {"no. of lamps", "lamp_count"}, {"number of lamps", "lamp_count"}, {"lamp qty", "lamp_count"},
	{"lamp power", "lamp_power_w"}, {"wattage", "lamp_power_w"}, {"watts", "lamp_power_w"}, {"power (w)", "lamp_power_w"}, {"power", "lamp_power_w"},
	{"technology", "technology"}, {"lamp type", "lamp"}, {"light source", "lamp"}, {"lamp", "lamp"}, {"bulb", "lamp"},
	{"board", "board"}, {"panel", "board"}, {"circuit", "way"}, {"way", "way"},
	{"ballast", "driver"}, {"transformer", "driver"}, {"driver", "driver"}, {"gear", "driver"}, {"dimmer", "dimmer"}, {"control", "dimmer"},
	{"floor", "level"}, {"level", "level"}, {"storey", "level"}, {"room", "space"}, {"space", "space"}, {"area (m", "area_m2"}, {"location", "space"}, {"area", "space"}, {"use", "use"},
	{"mounting", "mounting_m"}, {"height", "mounting_m"}, {"luminaire", "fixture"}, {"fitting", "fixture"}, {"fixture", "fixture"}, {"type", "fixture"}, {"description", "fixture"},
	{"remark", "note"}, {"comment", "note"}, {"note", "note"},
}

// Propose guesses the matching of a book: the sheet and row whose headers say most, each column by the words in its
// header. It fails with Invalid where no sheet has a row of headers.
func Propose(b *Book) (*Matching, error) {
	var best *Matching
	most := 0
	for _, name := range b.order {
		rows := b.sheets[name]
		for i := range min(len(rows), 15) {
			m := &Matching{Sheet: name, Header: i + 1, Columns: map[string]string{}, Words: map[string]string{}}
			found := 0
			taken := map[string]bool{}
			for _, h := range rows[i] {
				if h == "" || m.Columns[h] != "" {
					continue
				}
				field := guessField(h, taken)
				m.Columns[h] = field
				if field != "note" {
					taken[field] = true
					found++
				}
			}
			if found > most && len(m.Columns) >= 2 {
				best, most = m, found
			}
		}
	}
	if best == nil {
		return nil, errUnusable(b.Name, "no sheet has a row of headers that say what its columns hold; save the columns to be matched with --columns and correct them")
	}
	for _, row := range b.sheets[best.Sheet][best.Header:] {
		for i, h := range b.sheets[best.Sheet][best.Header-1] {
			if f := best.Columns[h]; (f == "technology") && i < len(row) && row[i] != "" {
				if t := technologyOf(row[i]); t != "" {
					best.Words[row[i]] = t
				}
			}
		}
	}
	return best, nil
}

func guessField(header string, taken map[string]bool) string {
	h := strings.ToLower(header)
	for _, s := range synonyms {
		if strings.Contains(h, s.word) && !taken[s.field] {
			return s.field
		}
	}
	return "note"
}

// Validate reports what is wrong with a matching.
func (m *Matching) Validate() error {
	c := domain.NewCheck("matching")
	if m.Header < 1 || m.Header > 1000 {
		c.Add("/header_row", "must be from 1 to 1000")
	}
	if len(m.Columns) == 0 {
		c.Add("/columns", "must say what the columns hold")
	}
	seen := map[string]string{}
	for h, f := range m.Columns {
		if !slices.Contains(sheetFields, f) {
			c.Add("/columns", "%.60q must hold one of %s", h, strings.Join(sheetFields, ", "))
		}
		if other, twice := seen[f]; twice && f != "note" && f != "ignore" {
			c.Add("/columns", "%.60q and %.60q both hold %s", min(h, other), max(h, other), f)
		}
		seen[f] = h
	}
	return c.Err()
}

// lampsText finds "2x58 W", "2 x 58W", "58W" and the like in free text.
var lampsText = regexp.MustCompile(`(?i)(?:(\d{1,3})\s*[x×*]\s*)?(\d{1,4}(?:[.,]\d{1,2})?)\s*w(?:att)?s?\b`)

// parseSheet reads anybody's sheet with a matching: one row a luminaire, or a number of alike ones. Text that no field
// takes goes to the note; a wattage that says two things is told and left unknown.
func parseSheet(b *Book, m *Matching) (*Register, error) {
	if err := m.Validate(); err != nil {
		return nil, err
	}
	rows := b.sheet(m.Sheet)
	if len(rows) < m.Header {
		return nil, errUnusable(b.Name, "it has no sheet %.60q with headers in row %d", m.Sheet, m.Header)
	}
	r := newRegister(SheetForm)
	name := strings.TrimSuffix(strings.TrimSuffix(b.Name, ".xlsx"), ".csv")
	r.Building = site.Building{Code: r.codeOf("building", name), Name: line(name), TimeZone: "Etc/UTC", Note: "From the sheet " + line(b.Name)}
	r.Told = append(r.Told, "The sheet says neither time zone, mains nor wiring rules: set them on the building.")
	header := rows[m.Header-1]
	for i, cells := range rows[m.Header:] {
		if !slices.ContainsFunc(cells, func(c string) bool { return c != "" }) {
			continue
		}
		s := &sheetRow{r: r, sheet: m.Sheet, number: m.Header + 1 + i, text: map[string]string{}, column: map[string]string{}, words: m.Words}
		for k, h := range header {
			if k >= len(cells) || cells[k] == "" {
				continue
			}
			switch f := m.Columns[h]; f {
			case "", "ignore":
			case "note":
				s.notes = append(s.notes, h+": "+cells[k])
			default:
				s.text[f], s.column[f] = cells[k], h
			}
		}
		s.take()
	}
	if len(r.Bulk.Fixtures) == 0 && len(r.Cells) == 0 {
		return nil, errUnusable(b.Name, "its sheet %.60q has no rows below its headers", m.Sheet)
	}
	return r, nil
}

// sheetRow is one row on its way into the register.
type sheetRow struct {
	r      *Register
	sheet  string
	number int
	text   map[string]string // by field
	column map[string]string // header, by field
	words  map[string]string
	notes  []string
}

func (s *sheetRow) tell(field, problem string, refuses bool) {
	s.r.tell(s.sheet, s.number, s.column[field], problem, refuses)
}

// count reads a whole number of a field, def where it is empty.
func (s *sheetRow) count(field string, def, most int) (int, bool) {
	text := s.text[field]
	if text == "" {
		return def, true
	}
	f, err := readNumber(text)
	n := int(f)
	if err != nil || float64(n) != f || n < 0 || n > most {
		s.tell(field, fmt.Sprintf("must be a whole number from 0 to %d", most), true)
		return def, false
	}
	return n, true
}

func (s *sheetRow) take() {
	quantity, ok := s.count("quantity", 1, maxQuantity)
	if !ok {
		return
	}
	if quantity == 0 {
		s.tell("quantity", "says that there is none; the row is not taken", false)
		return
	}
	f := plant.Fixture{}
	f.FactSource = loading.HandedOver
	f.SpaceID = s.space()
	f.FedByCircuitID = s.circuit()
	lampText := s.text["lamp"]
	fixtureText := s.text["fixture"]
	f.FixtureModelID = s.fixtureModel(fixtureText)
	f.LampModelID, f.LampCount = s.lamp(lampText, fixtureText)
	for _, field := range []string{"driver", "dimmer"} {
		if t := s.text[field]; t != "" {
			s.notes = append(s.notes, s.column[field]+": "+t)
		}
	}
	f.Note = line(strings.Join(s.notes, "; "))
	tag := line(s.text["tag"])
	for n := range quantity {
		one := f
		one.Tag = tag
		if tag != "" && quantity > 1 {
			one.Tag = fmt.Sprintf("%s-%d", tag, n+1)
		}
		if one.Tag == "" {
			one.ID = domain.NewID()
		} else {
			id, fresh := s.r.name("place", one.Tag)
			if !fresh {
				s.tell("tag", "is the label of another row too", true)
				return
			}
			one.ID = id
		}
		s.r.Bulk.Fixtures = append(s.r.Bulk.Fixtures, one)
	}
}

func (s *sheetRow) space() *domain.ID {
	level, name := line(s.text["level"]), line(s.text["space"])
	if name == "" {
		if level == "" {
			return nil
		}
		name = level
	}
	id, fresh := s.r.name("space", spaceName(level, name))
	if fresh {
		p := site.Space{Level: level, Name: name, Use: line(s.text["use"]), FactSource: loading.HandedOver}
		p.ID = id
		if v, err := readNumber(s.text["mounting_m"]); err == nil && v > 0 && v <= 200 {
			p.MountingM = &v
		}
		if v, err := readNumber(s.text["area_m2"]); err == nil && v > 0 && v <= 1e6 {
			p.AreaM2 = &v
		}
		s.r.Bulk.Spaces = append(s.r.Bulk.Spaces, p)
	}
	return &id
}

func (s *sheetRow) circuit() *domain.ID {
	board, way := line(s.text["board"]), line(s.text["way"])
	if way == "" {
		return nil
	}
	if b, w, both := strings.Cut(way, "/"); board == "" && both {
		board, way = b, w
	}
	if board == "" {
		s.notes = append(s.notes, s.column["way"]+": "+way)
		return nil
	}
	id, fresh := s.r.name("circuit", board+"/"+way)
	if fresh {
		k := plant.Circuit{Board: board, Way: way}
		k.ID, k.FactSource = id, loading.HandedOver
		s.r.Bulk.Circuits = append(s.r.Bulk.Circuits, k)
	}
	return &id
}

func (s *sheetRow) fixtureModel(text string) *domain.ID {
	text = line(text)
	if text == "" {
		return nil
	}
	if id, known := s.r.ids[key("fixture name", text)]; known {
		return &id
	}
	m := plant.FixtureModel{ModelHead: plant.ModelHead{Code: s.r.codeOf("fixture_model", text), Provisional: true}}
	m.Name, m.FactSource = text, loading.HandedOver
	m.ID, _ = s.r.name("fixture_model", m.Code)
	s.r.ids[key("fixture name", text)] = m.ID
	s.r.Fixtures = append(s.r.Fixtures, m)
	return &m.ID
}

// lamp finds the lamp and how many there are, from its own columns or from "2x58 W" in the text of the lamp or luminaire.
func (s *sheetRow) lamp(lampText, fixtureText string) (*domain.ID, *int) {
	var watts *float64
	var count *int
	if n, ok := s.count("lamp_count", -1, 1000); ok && n >= 0 {
		count = &n
	}
	if t := s.text["lamp_power_w"]; t != "" {
		all := lampsText.FindAllStringSubmatch(t, -1)
		if w, err := readNumber(t); err == nil && w > 0 && w <= 5000 {
			watts = &w
		} else if len(all) == 1 {
			watts, count = oneText(all[0], count)
		} else {
			s.tell("lamp_power_w", "is no power in W: "+line(t)+"; it is left unknown", false)
		}
	}
	for _, t := range []string{lampText, fixtureText} {
		all := lampsText.FindAllStringSubmatch(t, -1)
		if watts != nil || len(all) == 0 {
			continue
		}
		if len(all) > 1 {
			s.r.tell(s.sheet, s.number, s.column["lamp"], "says several powers: "+line(t)+"; it is left unknown", false)
			break
		}
		watts, count = oneText(all[0], count)
	}
	technology := s.words[s.text["technology"]]
	for _, t := range []string{s.text["technology"], lampText, fixtureText} {
		if technology == "" {
			technology = technologyOf(t)
		}
	}
	if technology == "" && watts == nil && lampText == "" {
		return nil, count
	}
	name := line(lampsText.ReplaceAllString(lampText, ""))
	if name == "" {
		name = strings.ReplaceAll(technology, "_", " ")
	}
	if name == "" {
		name = "Lamp of unknown kind"
	}
	if watts != nil {
		name += fmt.Sprintf(", %g W", *watts)
	}
	name = line(name)
	if id, known := s.r.ids[key("lamp name", name)]; known {
		return &id, count
	}
	m := plant.LampModel{ModelHead: plant.ModelHead{Code: s.r.codeOf("lamp_model", name), Provisional: true}}
	m.Name, m.Technology, m.PowerW, m.FactSource = name, technology, watts, loading.HandedOver
	m.ID, _ = s.r.name("lamp_model", m.Code)
	s.r.ids[key("lamp name", name)] = m.ID
	s.r.Lamps = append(s.r.Lamps, m)
	return &m.ID, count
}

// oneText reads a match of lampsText; a count that is known already stays.
func oneText(match []string, count *int) (*float64, *int) {
	w, err := strconv.ParseFloat(strings.Replace(match[2], ",", ".", 1), 64)
	if err != nil || w <= 0 || w > 5000 {
		return nil, count
	}
	if n, err := strconv.Atoi(match[1]); err == nil && count == nil {
		count = &n
	}
	return &w, count
}
