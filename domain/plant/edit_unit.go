package plant

import (
	"context"
	"time"

	"lampward/domain"
)

// A Swap is one unit out and another in, or only one of the two, as somebody did it.
type Swap struct {
	PlaceID   domain.ID    `json:"place_id"`
	Part      string       `json:"part"`             // lamp, driver, dimmer, fixture, battery
	Holder    int          `json:"holder,omitempty"` // from 1; 0: the only one
	ModelID   *domain.ID   `json:"model_id,omitempty"`
	Emptied   bool         `json:"emptied,omitempty"` // taken out and nothing put in
	Unknown   bool         `json:"unknown,omitempty"` // something was fitted and nobody read what
	DoneAt    time.Time    `json:"done_at"`
	Why       string       `json:"why,omitempty"`    // of the unit taken out: failed, group_relamp, retrofit, damaged, taken_out
	Mode      string       `json:"mode,omitempty"`   // how it failed, where why is failed
	Serial    string       `json:"serial,omitempty"` // of the new unit
	Batch     string       `json:"batch,omitempty"`  //
	Supplier  string       `json:"supplier,omitempty"`
	Battery   string       `json:"battery,omitempty"` // marking of a new battery
	Temporary *domain.Date `json:"temporary_until,omitempty"`
	Hours     *float64     `json:"hours,omitempty"` // burning hours of the unit taken out
	Note      string       `json:"note,omitempty"`
}

// removedWhys are the reasons a unit leaves its holder.
var removedWhys = []string{"failed", "group_relamp", "retrofit", "damaged", "taken_out"}

// Validate reports every field of w that breaks a rule.
func (w *Swap) Validate(now time.Time) error {
	c := domain.NewCheck("swap")
	c.OneOf("/part", w.Part, parts...)
	if w.Part == "" {
		c.Add("/part", "must be lamp, driver, dimmer, fixture or battery")
	}
	c.Count("/holder", &w.Holder, 0, 1000)
	c.OneOf("/why", w.Why, removedWhys...)
	c.OneOf("/mode", w.Mode, FailureModes...)
	if w.Mode != "" && w.Why != "failed" {
		c.Add("/mode", "belongs to a unit that failed")
	}
	n := 0
	for _, given := range []bool{w.ModelID != nil, w.Emptied, w.Unknown} {
		if given {
			n++
		}
	}
	switch {
	case w.Part == KindBattery && (w.ModelID != nil || n > 1):
		c.Add("/model_id", "must be absent for a battery, which is known by its marking; emptied or unknown may be true")
	case w.Part != KindBattery && n != 1:
		c.Add("/model_id", "must be given, or emptied or unknown must be true: exactly one of them")
	}
	if w.Battery != "" && (w.Part != KindBattery || n > 0) {
		c.Add("/battery", "belongs to a battery that was put in")
	}
	if w.DoneAt.IsZero() {
		c.Add("/done_at", "must say when it was done")
	} else if w.DoneAt.After(now.Add(5 * time.Minute)) {
		c.Add("/done_at", "must not lie more than 5 minutes ahead")
	} else {
		c.Time("/done_at", &w.DoneAt)
	}
	for at, v := range map[string]string{"/serial": w.Serial, "/batch": w.Batch, "/supplier": w.Supplier, "/battery": w.Battery} {
		c.Line(at, v, false)
	}
	c.Text("/note", w.Note)
	c.Date("/temporary_until", w.Temporary)
	c.Range("/hours", w.Hours, 0, 1e6, "h")
	return c.Err()
}

// Fit records that a unit was changed: what stood in the holder leaves with its reason, a failure is recorded where
// it failed, what was put in begins its stay, and the place carries the new model. What was fitted is never refused
// for what it is. It fails with Conflict where a later unit already stands in the holder.
func (e *Edit) Fit(ctx context.Context, w Swap) (Unit, error) {
	if err := w.Validate(e.At); err != nil {
		return Unit{}, err
	}
	trees, err := e.reach(ctx, []domain.ID{w.PlaceID}, nil)
	if err != nil {
		return Unit{}, err
	}
	if _, ok := trees[w.PlaceID]; !ok {
		return Unit{}, domain.NotFoundf("there is no such place in use")
	}
	var r references
	r.name("/model_id", w.Part+"_model", w.ModelID)
	c := domain.NewCheck("swap")
	if err := r.check(ctx, e.Scope, c); err != nil {
		return Unit{}, err
	}
	if err := c.Err(); err != nil {
		return Unit{}, err
	}
	holders, err := e.holders(ctx, w)
	if err != nil {
		return Unit{}, err
	}
	if w.Holder == 0 {
		w.Holder = 1
	}
	if w.Why == "" {
		w.Why = "taken_out"
	}
	if err := e.begin(ctx, w, holders); err != nil {
		return Unit{}, err
	}
	out, err := e.takeOut(ctx, w)
	if err != nil {
		return Unit{}, err
	}
	if err := e.failed(ctx, w, out, holders); err != nil {
		return Unit{}, err
	}
	in, err := e.putIn(ctx, w)
	if err != nil {
		return Unit{}, err
	}
	if err := e.carry(ctx, w, holders); err != nil {
		return Unit{}, err
	}
	e.record("place.refitted", "place", w.PlaceID, w)
	return in, nil
}

// holders returns how many of a part the place holds: for lamps as recorded, else as many as the model of the luminaire
// has holders, else one where the swap says that it is the only one. It is nil where nobody knows.
func (e *Edit) holders(ctx context.Context, w Swap) (*int, error) {
	one := 1
	if w.Part != KindLamp {
		return &one, nil
	}
	var count *int
	err := e.QueryRow(ctx, `
		SELECT coalesce(p.lamp_count, into_.holders, m.holders)
		  FROM place p
		  LEFT JOIN fixture_model m ON m.id = p.fixture_model_id
		  LEFT JOIN fixture_model into_ ON into_.id = m.merged_into
		 WHERE p.building_id = $1 AND p.id = $2`, e.Building, w.PlaceID).Scan(&count)
	if err == nil && count == nil && w.Holder == 0 {
		count = &one
	}
	return count, domain.Classify(err, "place")
}

// begin puts on record the units that stand in the place and were never told one by one, so that each keeps its own
// history from here on: fitted when the place says, of the model the place says. Where nobody knows how many there
// are, only the one in the swap's holder is sure.
func (e *Edit) begin(ctx context.Context, w Swap, holders *int) error {
	var model *domain.ID
	var at *time.Time
	err := e.QueryRow(ctx, `
		SELECT CASE $3 WHEN 'lamp' THEN lamp_model_id WHEN 'driver' THEN driver_model_id WHEN 'dimmer' THEN dimmer_model_id
		               WHEN 'fixture' THEN fixture_model_id END,
		       CASE WHEN $3 = 'lamp' THEN lamps_fitted_at WHEN $3 = kind THEN fitted_at END
		  FROM place
		 WHERE building_id = $1 AND id = $2`, e.Building, w.PlaceID, w.Part).Scan(&model, &at)
	if err != nil {
		return domain.Classify(err, "place")
	}
	if model == nil {
		return nil
	}
	if at != nil && at.After(w.DoneAt) {
		at = nil
	}
	taken := map[int]bool{}
	units, err := e.standing(ctx, w.PlaceID, w.Part)
	if err != nil {
		return err
	}
	for _, u := range units {
		taken[u.Holder] = true
	}
	first, untold := w.Holder, 1
	if holders != nil {
		first, untold = 1, *holders-len(units)
	} else if taken[w.Holder] {
		untold = 0
	}
	for h := first; untold > 0; h++ {
		if taken[h] {
			continue
		}
		untold--
		u := Unit{PlaceID: w.PlaceID, Part: w.Part, Holder: h, FittedAt: at}
		if field := u.model(w.Part); field != nil {
			*field = model
		}
		u.ID, u.BuildingID, u.Version, u.CreatedAt, u.UpdatedAt = domain.NewID(), e.Building, 1, e.At, e.At
		if err := Units.Insert(ctx, e.Scope, &u); err != nil {
			return err
		}
	}
	return nil
}

// standing returns the units of a part that stand in a place now, by holder.
func (e *Edit) standing(ctx context.Context, place domain.ID, part string) ([]Unit, error) {
	return Units.Select(ctx, e.Scope, `
		WHERE building_id = $1 AND place_id = $2 AND part = $3 AND removed_at IS NULL AND retired_at IS NULL
		ORDER BY holder`, e.Building, place, part)
}

// takeOut ends the stay of the unit in the holder, if one is on record.
func (e *Edit) takeOut(ctx context.Context, w Swap) (*Unit, error) {
	units, err := Units.Select(ctx, e.Scope, `
		WHERE building_id = $1 AND place_id = $2 AND part = $3 AND holder = $4 AND removed_at IS NULL AND retired_at IS NULL
		  FOR NO KEY UPDATE`, e.Building, w.PlaceID, w.Part, w.Holder)
	if err != nil || len(units) == 0 {
		return nil, err
	}
	out := units[0]
	if out.FittedAt != nil && out.FittedAt.After(w.DoneAt) {
		return nil, domain.Conflictf("another unit was fitted there at %s, after the time given", out.FittedAt.Format(time.RFC3339))
	}
	out.RemovedAt, out.RemovedWhy, out.Odd, out.UpdatedAt = &w.DoneAt, w.Why, false, e.At
	if w.Hours != nil {
		out.RemovedHours, out.RemovedHoursLow, out.RemovedHoursHigh = w.Hours, w.Hours, w.Hours
	}
	return &out, Units.Update(ctx, e.Scope, &out)
}

// failed ends the failures that the swap has dealt with: what was noticed of the unit that left by the time it left.
// Where it failed and nobody had told, its failure is recorded. A report that names no holder is dealt with where the
// luminaire has one lamp, or where a lamp was changed because it failed.
func (e *Edit) failed(ctx context.Context, w Swap, out *Unit, holders *int) error {
	told, err := e.openFailures(ctx, w.PlaceID, w.Part, w.Holder)
	if err != nil {
		return err
	}
	var open []Failure
	for _, f := range told {
		mine := f.Holder == w.Holder || w.Why == "failed" || holders != nil && *holders <= 1
		if mine && !f.NoticedAt.After(w.DoneAt) {
			open = append(open, f)
		}
	}
	if w.Why == "failed" && len(open) == 0 {
		f := Failure{PlaceID: &w.PlaceID, Part: w.Part, Holder: w.Holder, Mode: w.Mode, NoticedAt: w.DoneAt, Hours: w.Hours, Note: w.Note}
		if f.Mode == "" {
			f.Mode = "dark"
		}
		if err := e.insertFailure(ctx, &f); err != nil {
			return err
		}
		open = append(open, f)
	}
	for _, f := range open {
		f.ClearedAt, f.UpdatedAt = &w.DoneAt, e.At
		if f.UnitID == nil && out != nil {
			f.UnitID = &out.ID
		}
		if f.Hours == nil {
			f.Hours = w.Hours
		}
		if err := Failures.Update(ctx, e.Scope, &f); err != nil {
			return err
		}
	}
	return nil
}

// putIn begins the stay of the new unit. It returns the zero Unit where the holder was left empty.
func (e *Edit) putIn(ctx context.Context, w Swap) (Unit, error) {
	if w.Emptied {
		return Unit{}, nil
	}
	in := Unit{PlaceID: w.PlaceID, Part: w.Part, Holder: w.Holder, Serial: w.Serial, Batch: w.Batch, Supplier: w.Supplier,
		FittedAt: &w.DoneAt, TemporaryUntil: w.Temporary, Note: w.Note}
	if field := in.model(w.Part); field != nil {
		*field = w.ModelID
	}
	in.ID, in.BuildingID, in.Version, in.CreatedAt, in.UpdatedAt = domain.NewID(), e.Building, 1, e.At, e.At
	return in, Units.Insert(ctx, e.Scope, &in)
}

// model returns where a unit keeps the model of a part; a battery has none.
func (u *Unit) model(part string) **domain.ID {
	switch part {
	case KindLamp:
		return &u.LampModelID
	case KindDriver:
		return &u.DriverModelID
	case KindDimmer:
		return &u.DimmerModelID
	case KindFixture:
		return &u.FixtureModelID
	}
	return nil
}

// carry writes what was fitted on the place itself.
func (e *Edit) carry(ctx context.Context, w Swap, holders *int) error {
	switch w.Part {
	case KindLamp:
		return e.carryLamp(ctx, w, holders)
	case KindBattery:
		if w.Emptied {
			w.Battery = "none" // somebody looked
		}
		return e.set(ctx, w, `
			UPDATE place
			   SET battery = $3, version = version + 1, updated_at = $4
			 WHERE building_id = $1 AND id = $2 AND kind = 'fixture'`, w.Battery, e.At)
	case KindDriver:
		before, err := e.separationBefore(ctx, w)
		if err != nil {
			return err
		}
		return e.set(ctx, w, `
			UPDATE place
			   SET driver_model_id = $3, version = version + 1, updated_at = $4,
			       set_ma = NULL, -- it was set on the gear that left; nobody has looked at this one
			       fitted_at = CASE WHEN kind = 'driver' THEN $5 ELSE fitted_at END,
			       separation_before = CASE WHEN kind = 'driver' AND $6 <> '' THEN $6 ELSE separation_before END,
			       gear = CASE WHEN kind = 'fixture' AND gear = 'none' AND NOT $7 THEN 'integral' ELSE gear END
			 WHERE building_id = $1 AND id = $2 AND (kind = 'driver' OR kind = 'fixture' AND gear <> 'remote')`,
			w.ModelID, e.At, w.DoneAt, before, w.Emptied)
	case KindDimmer:
		return e.set(ctx, w, `
			UPDATE place
			   SET dimmer_model_id = $3, version = version + 1, updated_at = $4, fitted_at = $5
			 WHERE building_id = $1 AND id = $2 AND kind = 'dimmer'`, w.ModelID, e.At, w.DoneAt)
	default:
		if err := e.newLuminaire(ctx, w); err != nil {
			return err
		}
		return e.set(ctx, w, `
			UPDATE place
			   SET fixture_model_id = $3, version = version + 1, updated_at = $4, fitted_at = $5
			 WHERE building_id = $1 AND id = $2 AND kind = 'fixture'`, w.ModelID, e.At, w.DoneAt)
	}
}

// separationBefore returns how the output of the gear that leaves was separated from the mains, empty where its model does
// not say or is the one that comes: what hangs on it was chosen for that.
func (e *Edit) separationBefore(ctx context.Context, w Swap) (string, error) {
	var before string
	err := e.QueryRow(ctx, `
		SELECT coalesce(m.separation, '')
		  FROM place p
		  LEFT JOIN driver_model m ON m.id = p.driver_model_id AND p.driver_model_id IS DISTINCT FROM $3
		 WHERE p.building_id = $1 AND p.id = $2`, e.Building, w.PlaceID, w.ModelID).Scan(&before)
	return before, domain.Classify(err, "place")
}

// newLuminaire forgets what was inside the luminaire that left where one of another model comes: its lamps, gear and
// battery left with it, and nobody has told what is in the new one. Its place, its feeds and its part on an escape route
// stay. A luminaire of the same model is taken to be lamped as the one before.
func (e *Edit) newLuminaire(ctx context.Context, w Swap) error {
	tag, err := e.Exec(ctx, `
		UPDATE place
		   SET lamp_model_id = NULL, lamp_count = NULL, lamps_fitted_at = NULL, driver_model_id = NULL, gear = '', strings = NULL,
		       fed_ends = '', starter = '', conversion = '', conversion_label = NULL, conversion_papers = NULL, shunted_here = NULL,
		       battery = '', self_test = NULL
		 WHERE building_id = $1 AND id = $2 AND kind = 'fixture' AND fixture_model_id IS DISTINCT FROM $3`, e.Building, w.PlaceID, w.ModelID)
	if err != nil || tag.RowsAffected() == 0 {
		return domain.Classify(err, "place")
	}
	_, err = e.Exec(ctx, `
		UPDATE unit
		   SET removed_at = greatest(fitted_at, $3), removed_why = 'taken_out', odd = false, version = version + 1, updated_at = $4
		 WHERE building_id = $1 AND place_id = $2 AND part IN ('lamp', 'driver', 'battery') AND removed_at IS NULL AND retired_at IS NULL`,
		e.Building, w.PlaceID, w.DoneAt, e.At)
	if err != nil {
		return domain.Classify(err, "unit")
	}
	_, err = e.Exec(ctx, `
		UPDATE failure
		   SET cleared_at = $3, version = version + 1, updated_at = $4
		 WHERE building_id = $1 AND place_id = $2 AND part IN ('lamp', 'driver', 'battery') AND cleared_at IS NULL AND retired_at IS NULL
		   AND noticed_at <= $3`, e.Building, w.PlaceID, w.DoneAt, e.At)
	return domain.Classify(err, "failure")
}

// set changes one place by a statement whose first arguments are the building and the place.
func (e *Edit) set(ctx context.Context, w Swap, sql string, args ...any) error {
	tag, err := e.Exec(ctx, sql, append([]any{e.Building, w.PlaceID}, args...)...)
	if err != nil {
		return domain.Classify(err, "place")
	}
	if tag.RowsAffected() == 0 {
		return domain.Conflictf("a %s cannot be fitted there: the place is of another kind, or has its gear in a place of its own", w.Part)
	}
	return nil
}

// carryLamp settles a luminaire after one of its lamps changed: its lamp model is the one in all holders, or stays
// with the odd unit marked; its count follows what was taken out or put in, and stays unknown where it was.
func (e *Edit) carryLamp(ctx context.Context, w Swap, holders *int) error {
	f, err := Fixtures.Lock(ctx, e.Scope, w.PlaceID)
	if err != nil {
		return err
	}
	if f.Kind != KindFixture {
		return domain.Conflictf("a lamp cannot be fitted there: the place is a %s", f.Kind)
	}
	units, err := e.standing(ctx, w.PlaceID, KindLamp)
	if err != nil {
		return err
	}
	if holders != nil {
		count := max(*holders, len(units))
		if w.Emptied {
			count = max(*holders-1, len(units)) // emptied twice is emptied once
		}
		alike := len(units) == count && count > 0
		for _, u := range units {
			alike = alike && same(u.LampModelID, units[0].LampModelID)
		}
		if alike {
			f.LampModelID = units[0].LampModelID
		}
		f.LampCount = &count
	}
	f.UpdatedAt = e.At
	if !w.Emptied && (f.LampsFittedAt == nil || f.LampsFittedAt.Before(w.DoneAt)) {
		f.LampsFittedAt = &w.DoneAt
	}
	if err := Fixtures.Update(ctx, e.Scope, &f); err != nil {
		return err
	}
	_, err = e.Exec(ctx, `
		UPDATE unit
		   SET odd = (lamp_model_id IS DISTINCT FROM $3), updated_at = $4
		 WHERE building_id = $1 AND place_id = $2 AND part = 'lamp' AND removed_at IS NULL AND retired_at IS NULL
		   AND odd <> (lamp_model_id IS DISTINCT FROM $3)`, e.Building, f.ID, f.LampModelID, e.At)
	return domain.Classify(err, "unit")
}

func (e *Edit) openFailures(ctx context.Context, place domain.ID, part string, holder int) ([]Failure, error) {
	return Failures.Select(ctx, e.Scope, `
		WHERE building_id = $1 AND place_id = $2 AND part = $3 AND (holder = $4 OR holder = 0 OR $4 = 0)
		  AND cleared_at IS NULL AND retired_at IS NULL
		ORDER BY noticed_at
		  FOR NO KEY UPDATE`, e.Building, place, part, holder)
}

func (e *Edit) insertFailure(ctx context.Context, f *Failure) error {
	f.ID, f.BuildingID, f.Version, f.CreatedAt, f.UpdatedAt = orNew(f.ID), e.Building, 1, e.At, e.At
	f.Reports, f.ByKind, f.ByID = 1, e.By.Kind, e.By.ID
	return Failures.Insert(ctx, e.Scope, f)
}

func orNew(id domain.ID) domain.ID {
	if id.IsZero() {
		return domain.NewID()
	}
	return id
}

// Validate reports every field of f that breaks a rule, as of now.
func (f *Failure) Validate(now time.Time) error {
	c := domain.NewCheck("failure")
	if (f.PlaceID == nil) == (f.MakeUpID == nil) {
		c.Add("", "must name one of place_id and make_up_id")
	}
	c.OneOf("/part", f.Part, parts...)
	c.OneOf("/mode", f.Mode, FailureModes...)
	if f.Part == "" {
		c.Add("/part", "must be lamp, driver, dimmer, fixture or battery")
	}
	if f.Mode == "" {
		c.Add("/mode", "must say how it failed")
	}
	c.Count("/holder", &f.Holder, 0, 1000)
	c.Line("/cause", f.Cause, false)
	c.Text("/note", f.Note)
	c.Range("/hours", f.Hours, 0, 1e6, "h")
	if f.NoticedAt.IsZero() {
		c.Add("/noticed_at", "must say when it was noticed")
	} else if f.NoticedAt.After(now.Add(5 * time.Minute)) {
		c.Add("/noticed_at", "must not lie more than 5 minutes ahead")
	} else {
		c.Time("/noticed_at", &f.NoticedAt)
	}
	c.Time("/last_good_at", f.LastGoodAt)
	if f.LastGoodAt != nil && f.LastGoodAt.After(f.NoticedAt) {
		c.Add("/last_good_at", "must not lie after noticed_at")
	}
	return c.Err()
}

// Report records a failure. A second report of the same failing of the same unit counts as one failure told twice:
// the first is returned with its count raised. A report that comes late, of a unit that has left meanwhile, is of that
// unit and is over with it.
func (e *Edit) Report(ctx context.Context, f *Failure) error {
	if err := f.Validate(e.At); err != nil {
		return err
	}
	if err := checkReferences(ctx, e.Scope, "failure", f, nil); err != nil {
		return err
	}
	f.UnitID, f.ClearedAt, f.RetiredAt = nil, nil, nil
	if f.MakeUpID != nil {
		if err := e.insertFailure(ctx, f); err != nil {
			return err
		}
		e.record("failure.reported", "failure", f.ID, f)
		return nil
	}
	trees, err := e.reach(ctx, []domain.ID{*f.PlaceID}, nil)
	if err != nil {
		return err
	}
	if _, ok := trees[*f.PlaceID]; !ok {
		return domain.NotFoundf("there is no such place in use")
	}
	if err := e.bears(ctx, *f.PlaceID, f.Part); err != nil {
		return err
	}
	unit, left, err := e.stay(ctx, f)
	if err != nil {
		return err
	}
	known, err := e.told(ctx, f, unit, left)
	if err != nil {
		return err
	}
	if known != nil {
		known.Reports++
		known.UpdatedAt = e.At
		if f.NoticedAt.Before(known.NoticedAt) {
			known.NoticedAt = f.NoticedAt
		}
		if f.LastGoodAt != nil && (known.LastGoodAt == nil || f.LastGoodAt.After(*known.LastGoodAt)) && !f.LastGoodAt.After(known.NoticedAt) {
			known.LastGoodAt = f.LastGoodAt
		}
		if known.LastGoodAt != nil && known.LastGoodAt.After(known.NoticedAt) {
			known.LastGoodAt = nil // somebody noticed it before
		}
		if err := Failures.Update(ctx, e.Scope, known); err != nil {
			return err
		}
		*f = *known
		e.record("failure.reported_again", "failure", f.ID, nil)
		return nil
	}
	if unit != nil {
		f.UnitID = &unit.ID
	}
	f.ClearedAt = left
	if err := e.insertFailure(ctx, f); err != nil {
		return err
	}
	e.record("failure.reported", "failure", f.ID, f)
	return nil
}

// bears fails with Invalid where a place is of a kind that has no such part.
func (e *Edit) bears(ctx context.Context, place domain.ID, part string) error {
	var kind string
	if err := e.QueryRow(ctx, `SELECT kind FROM place WHERE building_id = $1 AND id = $2`, e.Building, place).Scan(&kind); err != nil {
		return domain.Classify(err, "place")
	}
	if kind == part || kind == KindFixture && part != KindDimmer {
		return nil
	}
	return &domain.Error{Kind: domain.Invalid, Msg: "the failure is not valid",
		Fields: []domain.Field{{Pointer: "/part", Detail: "is no part of a " + kind}}}
}

// onlyHolder is the holder of every part of which a place has one.
const onlyHolder = 1

// stay returns the unit that stood in the holder of a failure when it was noticed, nil where none is on record, and when
// that stay ended, nil where it has not.
func (e *Edit) stay(ctx context.Context, f *Failure) (*Unit, *time.Time, error) {
	holder := f.Holder
	if f.Part != KindLamp {
		holder = onlyHolder
	}
	if holder == 0 {
		return nil, nil, nil
	}
	units, err := Units.Select(ctx, e.Scope, `
		WHERE building_id = $1 AND place_id = $2 AND part = $3 AND holder = $4 AND retired_at IS NULL
		ORDER BY fitted_at NULLS FIRST, removed_at NULLS LAST, id`, e.Building, f.PlaceID, f.Part, holder)
	if err != nil {
		return nil, nil, err
	}
	for i := range units {
		u := &units[i]
		if u.FittedAt != nil && u.FittedAt.After(f.NoticedAt) {
			return nil, u.FittedAt, nil // what stood there before
		}
		if u.RemovedAt == nil || u.RemovedAt.After(f.NoticedAt) {
			return u, u.RemovedAt, nil
		}
	}
	return nil, nil, nil
}

// told returns the failure on record that a report tells of again: the same failing in the same stay. It is nil where
// there is none.
func (e *Edit) told(ctx context.Context, f *Failure, unit *Unit, left *time.Time) (*Failure, error) {
	list, err := Failures.Select(ctx, e.Scope, `
		WHERE building_id = $1 AND place_id = $2 AND part = $3 AND mode = $4 AND (holder = $5 OR part <> 'lamp') AND retired_at IS NULL
		ORDER BY noticed_at
		  FOR NO KEY UPDATE`, e.Building, f.PlaceID, f.Part, f.Mode, f.Holder)
	if err != nil {
		return nil, err
	}
	for i := range list {
		k := &list[i]
		switch {
		case k.UnitID != nil && (unit == nil || *k.UnitID != unit.ID):
		case left == nil && k.ClearedAt == nil,
			left != nil && k.ClearedAt != nil && k.ClearedAt.Equal(*left):
			return k, nil
		}
	}
	return nil, nil
}

// Clear ends an open failure without a swap: it works again, or it was none.
func (e *Edit) Clear(ctx context.Context, id domain.ID, version int64, at time.Time, cause string) (Failure, error) {
	c := domain.NewCheck("failure")
	c.Line("/cause", cause, false)
	if err := c.Err(); err != nil {
		return Failure{}, err
	}
	f, err := Failures.Lock(ctx, e.Scope, id)
	if err != nil {
		return f, err
	}
	if f.PlaceID != nil {
		if _, err := e.reach(ctx, []domain.ID{*f.PlaceID}, nil); err != nil {
			return f, err
		}
	}
	if f.ClearedAt != nil {
		return f, domain.Conflictf("the failure is already cleared")
	}
	if at.Before(f.NoticedAt) || at.After(e.At.Add(5*time.Minute)) {
		return f, &domain.Error{Kind: domain.Invalid, Msg: "the time is not possible",
			Fields: []domain.Field{{Pointer: "/cleared_at", Detail: "must lie between noticed_at and now"}}}
	}
	f.Version, f.ClearedAt, f.UpdatedAt = version, &at, e.At
	if cause != "" {
		f.Cause = cause
	}
	if err := Failures.Update(ctx, e.Scope, &f); err != nil {
		return f, err
	}
	e.record("failure.cleared", "failure", id, nil)
	return f, nil
}

// Test records a function or duration test of an emergency luminaire, with what was fitted then.
func (e *Edit) Test(ctx context.Context, t *EmergencyTest) error {
	c := domain.NewCheck("emergency test")
	c.OneOf("/test", t.Test, "function", "duration")
	if t.Test == "" {
		c.Add("/test", "must be function or duration")
	}
	c.Range("/minutes_achieved", t.MinutesAchieved, 0, 1440, "min")
	c.Line("/defect", t.Defect, false)
	c.Text("/note", t.Note)
	c.Date("/next_due", t.NextDue)
	if t.TestedAt.IsZero() || t.TestedAt.After(e.At.Add(5*time.Minute)) {
		c.Add("/tested_at", "must say when it was done, at most 5 minutes ahead")
	} else {
		c.Time("/tested_at", &t.TestedAt)
	}
	if t.Test == "duration" && t.MinutesAchieved == nil {
		c.Add("/minutes_achieved", "must be given for a duration test")
	}
	if err := c.Err(); err != nil {
		return err
	}
	trees, err := e.reach(ctx, []domain.ID{t.PlaceID}, nil)
	if err != nil {
		return err
	}
	if _, ok := trees[t.PlaceID]; !ok {
		return domain.NotFoundf("there is no such place in use")
	}
	f, err := Fixtures.Lock(ctx, e.Scope, t.PlaceID)
	if err != nil {
		return err
	}
	if f.Kind != KindFixture || f.EmergencyMode == "none" {
		return domain.Conflictf("the place is not an emergency luminaire")
	}
	t.LampModelID, t.DriverModelID, t.Battery, t.RetiredAt = f.LampModelID, f.DriverModelID, f.Battery, nil
	if t.DriverModelID == nil && f.FixtureModelID != nil {
		// The gear inside is the luminaire model's where nobody saw another.
		if err := e.QueryRow(ctx, `SELECT driver_model_id FROM fixture_model WHERE id = $1`, f.FixtureModelID).Scan(&t.DriverModelID); err != nil {
			return domain.Classify(err, "fixture model")
		}
	}
	t.ID, t.BuildingID, t.Version, t.CreatedAt, t.UpdatedAt = orNew(t.ID), e.Building, 1, e.At, e.At
	if err := EmergencyTests.Insert(ctx, e.Scope, t); err != nil {
		return err
	}
	e.record("emergency_test.recorded", "emergency_test", t.ID, t)
	return nil
}

// Tripped records that a circuit's breaker or residual-current device was found off.
func (e *Edit) Tripped(ctx context.Context, t *Trip) error {
	c := domain.NewCheck("trip")
	c.Text("/note", t.Note)
	if t.TrippedAt.IsZero() || t.TrippedAt.After(e.At.Add(5*time.Minute)) {
		c.Add("/tripped_at", "must say when it was found, at most 5 minutes ahead")
	} else {
		c.Time("/tripped_at", &t.TrippedAt)
	}
	if err := c.Err(); err != nil {
		return err
	}
	trees, err := e.reach(ctx, nil, []domain.ID{t.CircuitID})
	if err != nil {
		return err
	}
	if _, ok := trees[t.CircuitID]; !ok {
		return domain.NotFoundf("there is no such circuit in use")
	}
	t.ID, t.BuildingID, t.Version, t.CreatedAt, t.UpdatedAt, t.RetiredAt = orNew(t.ID), e.Building, 1, e.At, e.At, nil
	if err := Trips.Insert(ctx, e.Scope, t); err != nil {
		return err
	}
	e.record("circuit.tripped", "circuit", t.CircuitID, t)
	return nil
}
