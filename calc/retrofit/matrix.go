package retrofit

import (
	"slices"
	"strings"

	"lampward/calc/loading"
)

// A Compatibility is what the matrix says of a load on a control.
type Compatibility string

// Compatibilities of the matrix.
const (
	Compatible   Compatibility = "ok"
	Conditional  Compatibility = "conditional" // only under the condition of the cell
	Incompatible Compatibility = "no"
)

// A Cell is one load on one kind of control.
type Cell struct {
	Load      string        `json:"load"`
	Control   string        `json:"control"`
	Answer    Compatibility `json:"answer"`
	Condition string        `json:"condition,omitempty"`
}

// loadRow is a row of the matrix: what hangs on a control.
type loadRow uint8

const (
	rowFilament loadRow = iota
	rowWound
	rowTrailingTransformer
	rowBothTransformer
	rowFixedTransformer
	rowLED
	rowFixedLED
	rowLEDOnWound
	rowLEDOnElectronic
	rowPhaseVoltage
	rowPhaseCurrent
	rowAnalogue
	rowDALI
	rowFixedVoltage
	rowFixedFluorescent
)

var loadNames = [...]string{
	rowFilament:            "mains filament or halogen lamp",
	rowWound:               "magnetic transformer",
	rowTrailingTransformer: "electronic transformer marked C (trailing edge)",
	rowBothTransformer:     "electronic transformer marked R, L, C or for both edges",
	rowFixedTransformer:    "electronic transformer not dimmable, or found unmarked",
	rowLED:                 "mains LED lamp marked dimmable",
	rowFixedLED:            "mains LED lamp not dimmable",
	rowLEDOnWound:          "12 V LED lamp on a magnetic transformer",
	rowLEDOnElectronic:     "12 V LED lamp on an electronic transformer",
	rowPhaseVoltage:        "constant-voltage LED driver for phase-cut dimming",
	rowPhaseCurrent:        "constant-current LED driver for phase-cut dimming",
	rowAnalogue:            "LED driver with a 0-10 V or 1-10 V input",
	rowDALI:                "LED driver with a DALI input",
	rowFixedVoltage:        "constant-voltage LED driver not dimmable, with strip",
	rowFixedFluorescent:    "fluorescent lamp without dimmable gear",
}

// controlColumn is a column of the matrix.
type controlColumn uint8

const (
	columnLeadingR controlColumn = iota
	columnLeadingRL
	columnTrailing
	columnUniversal
	columnAnalogue
	columnDALI
	columnPWM
	columnSwitch
	columns
)

var controlNames = [columns]string{
	columnLeadingR:  "leading-edge dimmer marked R",
	columnLeadingRL: "leading-edge dimmer marked R, L",
	columnTrailing:  "trailing-edge dimmer marked R, C",
	columnUniversal: "universal dimmer",
	columnAnalogue:  "0-10 V or 1-10 V control",
	columnDALI:      "DALI control",
	columnPWM:       "dc pulse-width dimmer",
	columnSwitch:    "switch",
}

// Conditions of cells, by number.
const (
	conditionEdge       = 1
	conditionInrush     = 2
	conditionNamesLE    = 3
	conditionNamesEdge  = 4
	conditionTwoWire    = 5
	conditionNamedAll   = 6
	conditionDownstream = 7
	conditionRole       = 8
	conditionCurrent    = 9
	conditionToroid     = 10
)

const matrixBasis = "compatibility of loads and dimmers, common practice of the trade; R, L, C marks of IEC 60669-2-1"

// Letters of IEC 60669-2-1.
const (
	inductiveLetter  = 'L' // wound transformers
	capacitiveLetter = 'C' // electronic transformers
)

var conditionTexts = [...]string{
	conditionEdge:       "set or learned to the right edge, and never inductive and capacitive loads on one output",
	conditionInrush:     "the contact's inrush rating covers switching the transformer on",
	conditionNamesLE:    "only if the gear names leading edge",
	conditionNamesEdge:  "the data of the lamp or driver name the edge, and least and highest load are met; a tested pair is better",
	conditionTwoWire:    "on a two-wire electronic switch only if leakage and least load are covered",
	conditionNamedAll:   "transformer, lamp and dimmer are all three named for each other",
	conditionDownstream: "only between a constant-voltage driver and its load, never on the driver's mains side",
	conditionRole:       "sourcing and sinking, and 0-10 V and 1-10 V, must match",
	conditionCurrent:    "channel and total current within the dimmer's rating",
	conditionToroid:     "a toroid only if the dimmer allows toroids",
}

// cell is an answer with the number of its condition, 0 for none.
type cell struct {
	answer    Compatibility
	condition uint8
}

var (
	fits  = cell{answer: Compatible}
	never = cell{answer: Incompatible}
)

func only(condition uint8) cell { return cell{Conditional, condition} }

// matrix is the compatibility of each load with each control.
var matrix = [...][columns]cell{
	rowFilament:            {fits, fits, fits, fits, never, never, never, fits},
	rowWound:               {never, {Compatible, conditionToroid}, never, only(conditionEdge), never, never, never, only(conditionInrush)},
	rowTrailingTransformer: {never, never, fits, only(conditionEdge), never, never, never, fits},
	rowBothTransformer:     {only(conditionNamesLE), only(conditionNamesLE), fits, only(conditionEdge), never, never, never, fits},
	rowFixedTransformer:    {never, never, never, never, never, never, never, fits},
	rowLED: {only(conditionNamesEdge), only(conditionNamesEdge), only(conditionNamesEdge), only(conditionNamesEdge),
		never, never, never, only(conditionTwoWire)},
	rowFixedLED:   {never, never, never, never, never, never, never, only(conditionTwoWire)},
	rowLEDOnWound: {never, only(conditionNamedAll), never, only(conditionNamedAll), never, never, never, only(conditionInrush)},
	rowLEDOnElectronic: {only(conditionNamedAll), only(conditionNamedAll), only(conditionNamedAll), only(conditionNamedAll),
		never, never, never, only(conditionNamedAll)},
	rowPhaseVoltage: {only(conditionNamesEdge), only(conditionNamesEdge), only(conditionNamesEdge), only(conditionNamesEdge),
		never, never, only(conditionDownstream), fits},
	rowPhaseCurrent: {only(conditionNamesEdge), only(conditionNamesEdge), only(conditionNamesEdge), only(conditionNamesEdge),
		never, never, never, fits},
	rowAnalogue:         {never, never, never, never, {Compatible, conditionRole}, never, never, fits},
	rowDALI:             {never, never, never, never, never, fits, never, fits},
	rowFixedVoltage:     {never, never, never, never, never, never, only(conditionCurrent), fits},
	rowFixedFluorescent: {never, never, never, never, never, never, never, only(conditionTwoWire)},
}

// Matrix returns the compatibility of every load with every kind of control, row by row. A control whose kind or a
// load whose marking is unknown has no cell: it is asked for.
func Matrix() []Cell {
	out := make([]Cell, 0, len(matrix)*int(columns))
	for r := range matrix {
		for c := range matrix[r] {
			x := matrix[r][c]
			out = append(out, Cell{loadNames[r], controlNames[c], x.answer, conditionTexts[x.condition]})
		}
	}
	return out
}

// phaseCut reports whether a control cuts the phase of the load's supply.
func phaseCut(m *loading.Control) bool {
	return m.Kind == loading.LeadingEdge || m.Kind == loading.TrailingEdge || m.Kind == loading.UniversalPhase
}

// analogue reports whether a control speaks 0-10 V or 1-10 V.
func analogue(m *loading.Control) bool {
	return m.Kind == loading.Analogue1to10V || m.Kind == loading.Analogue0to10V
}

// signalKind reports whether a control acts through a pair or bus.
func signalKind(m *loading.Control) bool { return analogue(m) || m.Kind == loading.DALI }

// switches reports whether a control only switches.
func switches(m *loading.Control) bool {
	switch m.Kind {
	case loading.SwitchContact, loading.SwitchElectronic, loading.Detector, loading.Photocell, loading.TimeSwitch, loading.Contactor:
		return true
	}
	return false
}

// controlWord names a control in a sentence.
func controlWord(m *loading.Control) string {
	switch m.Kind {
	case loading.LeadingEdge:
		return "leading-edge dimmer"
	case loading.TrailingEdge:
		return "trailing-edge dimmer"
	case loading.UniversalPhase:
		return "universal dimmer"
	case loading.Analogue1to10V:
		return "1-10 V control"
	case loading.Analogue0to10V:
		return "0-10 V control"
	case loading.DALI:
		return "DALI control"
	case loading.PWMDC:
		return "pulse-width dimmer"
	case loading.SwitchContact:
		return "switch"
	case loading.SwitchElectronic:
		return "electronic switch"
	case loading.Detector:
		return "detector"
	case loading.Photocell:
		return "photocell"
	case loading.TimeSwitch:
		return "time switch"
	case loading.Contactor:
		return "contactor"
	}
	return "control"
}

// marked reports whether a dimmer's marking holds a letter of IEC 60669-2-1.
func marked(m *loading.Control, letter rune) bool { return strings.ContainsRune(m.Marking, letter) }

// accepts is what a nameplate says of dimming.
type accepts struct {
	known              bool // somebody looked
	leading, trailing  bool
	edgeless           bool // phase-cut, the edge not named
	analogue1          bool
	analogue0          bool
	dali, pwm, nothing bool
}

// acceptsOf reads a nameplate's list. Nil is unknown, an empty list says "not dimmable".
func acceptsOf(list []string) accepts {
	a := accepts{known: list != nil, nothing: list != nil && len(list) == 0}
	a.leading = slices.Contains(list, loading.LeadingEdge)
	a.trailing = slices.Contains(list, loading.TrailingEdge)
	if slices.Contains(list, loading.UniversalPhase) {
		a.leading, a.trailing = true, true
	}
	a.edgeless = !a.leading && !a.trailing && slices.Contains(list, loading.PhaseCut)
	a.analogue1 = slices.Contains(list, loading.Analogue1to10V)
	a.analogue0 = slices.Contains(list, loading.Analogue0to10V)
	a.dali = slices.Contains(list, loading.DALI)
	a.pwm = slices.Contains(list, loading.PWMDC)
	return a
}

func (a accepts) phase() bool  { return a.leading || a.trailing || a.edgeless }
func (a accepts) signal() bool { return a.analogue0 || a.analogue1 || a.dali }

// words say what a nameplate accepts, in a sentence.
func (a accepts) words() string {
	var w []string
	for _, x := range []struct {
		is   bool
		word string
	}{
		{a.leading, "leading edge"}, {a.trailing, "trailing edge"}, {a.edgeless, "phase-cut dimming, edge not named"},
		{a.analogue1, "1-10 V"}, {a.analogue0, "0-10 V"}, {a.dali, "DALI"}, {a.pwm, "pulse-width dimming of its output"},
	} {
		if x.is {
			w = append(w, x.word)
		}
	}
	if len(w) == 0 {
		return "no dimming"
	}
	return strings.Join(w, ", ")
}

// A verdict is a cell with its condition worked out as far as the record allows.
type verdict struct {
	answer Compatibility // Conditional: not met by name, and another rule judges it
	ask    Field         // what decides, if the record does not; empty if it does
	about  About
}

func asking(f Field, about About) verdict { return verdict{ask: f, about: about} }

func verdictOf(good bool) verdict {
	if good {
		return verdict{answer: Compatible}
	}
	return verdict{answer: Incompatible}
}

// better returns the verdict that lets more pass: a load that takes two kinds of control is judged by the one it gets.
func better(a, b verdict) verdict {
	rank := func(v verdict) int {
		switch {
		case v.ask != "":
			return 1
		case v.answer == Incompatible:
			return 0
		case v.answer == Conditional:
			return 2
		}
		return 3
	}
	if rank(b) > rank(a) {
		return b
	}
	return a
}

// A load on a control is what a verdict is about: its nameplate's list, and where to ask for it.
type judgedLoad struct {
	accepts
	field  Field
	about  About
	driver *driverView // nil for lamps straight on the mains
}

// column returns the column of the control; ok is false for a control of unknown kind.
func (v *dimmerView) column() (c controlColumn, ok bool) {
	switch {
	case v.m.Kind == loading.LeadingEdge && marked(v.m, inductiveLetter):
		return columnLeadingRL, true
	case v.m.Kind == loading.LeadingEdge:
		return columnLeadingR, true
	case v.m.Kind == loading.TrailingEdge:
		return columnTrailing, true
	case v.m.Kind == loading.UniversalPhase:
		return columnUniversal, true
	case analogue(v.m):
		return columnAnalogue, true
	case v.m.Kind == loading.DALI:
		return columnDALI, true
	case v.m.Kind == loading.PWMDC:
		return columnPWM, true
	case switches(v.m):
		return columnSwitch, true
	}
	return 0, false
}

// judge works out one cell for a load.
func (v *dimmerView) judge(row loadRow, l *judgedLoad) verdict {
	c, known := v.column()
	if !known {
		return asking(v.kindField())
	}
	if c == columnLeadingR && v.m.Marking == "" && matrix[row][c] != matrix[row][columnLeadingRL] {
		return asking(FieldDimmerMarking, aboutControl(v.m))
	}
	return v.judgeIn(row, c, l)
}

// kindField is what to ask for where nobody knows what a control is.
func (v *dimmerView) kindField() (Field, About) {
	if v.d.Model == nil {
		return FieldDimmerModel, v.aboutPlace()
	}
	return FieldDimmerKind, aboutControl(v.m)
}

func (v *dimmerView) judgeIn(row loadRow, c controlColumn, l *judgedLoad) verdict {
	x := matrix[row][c]
	switch x.condition {
	case conditionToroid:
		return v.onToroid(l.driver)
	case conditionEdge:
		return v.onSetEdge(row, l)
	case conditionNamesLE:
		if l.edgeless {
			return asking(l.field, l.about)
		}
		return verdictOf(l.leading)
	case conditionNamesEdge:
		return v.onNamedEdge(c, l)
	case conditionNamedAll:
		return verdict{answer: Conditional}
	case conditionInrush, conditionTwoWire, conditionDownstream, conditionRole, conditionCurrent:
		return verdict{answer: Compatible} // each has a rule of its own
	}
	return verdict{answer: x.answer}
}

// onToroid lets a toroid pass only where the dimmer allows them.
func (v *dimmerView) onToroid(d *driverView) verdict {
	switch {
	case is(v.m.Toroids) || isNot(d.g.Toroid):
		return verdict{answer: Compatible}
	case d.g.Toroid == nil:
		return asking(FieldGearToroid, aboutGear(d.g))
	case v.m.Toroids == nil:
		return asking(FieldDimmerToroids, aboutControl(v.m))
	}
	return verdict{answer: Incompatible}
}

// onSetEdge judges a universal dimmer by the edge it is set to or has learned; where nobody knows which, by both.
func (v *dimmerView) onSetEdge(row loadRow, l *judgedLoad) verdict {
	switch v.d.SetEdge {
	case loading.LeadingEdge:
		return v.judgeIn(row, columnLeadingRL, l)
	case loading.TrailingEdge:
		return v.judgeIn(row, columnTrailing, l)
	}
	a, b := v.judgeIn(row, columnLeadingRL, l), v.judgeIn(row, columnTrailing, l)
	if a == b {
		return a
	}
	return asking(FieldDimmerSetEdge, v.aboutPlace())
}

// onNamedEdge asks of a nameplate that it names the dimmer's edge. One that says "phase-cut" and no edge is neither
// right nor wrong.
func (v *dimmerView) onNamedEdge(c controlColumn, l *judgedLoad) verdict {
	switch {
	case !l.phase():
		return verdict{answer: Incompatible}
	case l.edgeless:
		return verdict{Conditional, l.field, l.about}
	case l.leading && l.trailing:
		return verdict{answer: Compatible}
	}
	if c == columnUniversal {
		switch v.d.SetEdge {
		case loading.LeadingEdge:
			c = columnLeadingRL
		case loading.TrailingEdge:
			c = columnTrailing
		default:
			return asking(FieldDimmerSetEdge, v.aboutPlace())
		}
	}
	return verdictOf(c == columnTrailing && l.trailing || c != columnTrailing && l.leading)
}

// onGear is the verdict on a driver.
func (v *dimmerView) onGear(d *driverView) verdict {
	if d.kind == gearUnknown || d.kind == emergencyPack || switches(v.m) || v.listedGear(d) {
		// What gear it is, is asked elsewhere; an emergency pack is not on the dimmed side.
		return verdict{answer: Compatible}
	}
	l := judgedLoad{accepts: acceptsOf(d.g.Dimming), field: FieldGearDimming, about: aboutGear(d.g), driver: d}
	if d.kind == magneticTransformer {
		return v.judge(rowWound, &l)
	}
	if v.m.Kind == loading.PWMDC && (d.kind == constantVoltage || l.pwm) {
		return v.judgeIn(rowFixedVoltage, columnPWM, &l)
	}
	if !l.known {
		return asking(l.field, l.about)
	}
	out := verdict{answer: Incompatible}
	rows, n := gearRows(d.kind, l.accepts)
	for _, row := range rows[:n] {
		out = better(out, v.judge(row, &l))
	}
	return out
}

// gearRows are the rows that the nameplate of electronic gear or a ballast stands in: one for each kind of control it
// takes. The first n of rows count.
func gearRows(k gearKind, a accepts) (rows [4]loadRow, n int) {
	add := func(r loadRow) {
		rows[n] = r
		n++
	}
	switch {
	case a.nothing && k == electronicTransformer:
		add(rowFixedTransformer)
	case a.nothing && k == constantVoltage, a.pwm && k == constantVoltage:
		add(rowFixedVoltage)
	case a.nothing:
		add(rowFixedFluorescent)
	}
	if a.phase() {
		switch {
		case k == electronicTransformer && a.trailing && !a.leading:
			add(rowTrailingTransformer)
		case k == electronicTransformer && (a.trailing || a.edgeless):
			add(rowBothTransformer)
		case k == electronicTransformer, k == constantVoltage:
			add(rowPhaseVoltage)
		default:
			add(rowPhaseCurrent)
		}
	}
	if a.analogue0 || a.analogue1 {
		add(rowAnalogue)
	}
	if a.dali {
		add(rowDALI)
	}
	return rows, n
}

// onLamp is the verdict on mains lamps straight on the dimmer.
func (v *dimmerView) onLamp(l *lampLoad) verdict {
	if switches(v.m) || l.model == nil || v.listed(l.model.Key, loading.Key{}, v.sameLamps(l.model)) {
		return verdict{answer: Compatible}
	}
	if l.class == classUnknown {
		return asking(FieldLampTechnology, aboutLamp(l.model))
	}
	x := judgedLoad{accepts: acceptsOf(l.model.Dimming), field: FieldLampDimming, about: aboutLamp(l.model)}
	switch {
	case l.class == filament:
		return v.judge(rowFilament, &x)
	case !x.known:
		return asking(x.field, x.about)
	case x.nothing && l.class == led:
		return v.judge(rowFixedLED, &x)
	case x.nothing:
		return v.judge(rowFixedFluorescent, &x)
	case x.signal() && signalKind(v.m), x.pwm && v.m.Kind == loading.PWMDC:
		return verdict{answer: Compatible} // control gear of its own inside the lamp
	}
	return v.judge(rowLED, &x)
}

// listed reports whether a pairing names a lamp, gear (zero for none) and this dimmer for each other, for this many
// lamps.
func (v *dimmerView) listed(lamp, gear loading.Key, lamps int) bool {
	if v.m.Key == (loading.Key{}) {
		return false
	}
	p, ok := v.by.sys.Pairings[loading.PairingKey{Lamp: lamp, Gear: gear, Control: v.m.Key}]
	return ok && (p.LeastLamps == nil || lamps >= *p.LeastLamps) && (p.MostLamps == nil || lamps <= *p.MostLamps)
}

// listedGear reports whether gear is named with this dimmer, alone or with each of the lamps on it.
func (v *dimmerView) listedGear(d *driverView) bool {
	if d.g.Key == (loading.Key{}) || len(v.by.sys.Pairings) == 0 {
		return false
	}
	if v.listed(loading.Key{}, d.g.Key, d.load.count) {
		return true
	}
	for i := range d.lamps {
		l := &d.lamps[i]
		if l.model == nil || !v.listed(l.model.Key, d.g.Key, l.count) {
			return false
		}
	}
	return len(d.lamps) > 0
}
