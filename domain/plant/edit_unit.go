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
	for _, given := range []bool{w.ModelID != nil, w.Emptied, w.Unknown, w.Part == KindBattery} {
		if given {
			n++
		}
	}
	if n != 1 {
		c.Add("/model_id", "must be given, or emptied or unknown must be true: exactly one of them")
	}
	if w.DoneAt.IsZero() {
		c.Add("/done_at", "must say when it was done")
	} else if w.DoneAt.After(now.Add(5 * time.Minute)) {
		c.Add("/done_at", "must not lie more than 5 minutes ahead")
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
	if w.Holder == 0 {
		w.Holder = 1
	}
	if w.Why == "" {
		w.Why = "taken_out"
	}
	if err := e.begin(ctx, w); err != nil {
		return Unit{}, err
	}
	out, err := e.takeOut(ctx, w)
	if err != nil {
		return Unit{}, err
	}
	if w.Why == "failed" {
		if err := e.failed(ctx, w, out); err != nil {
			return Unit{}, err
		}
	}
	in, err := e.putIn(ctx, w)
	if err != nil {
		return Unit{}, err
	}
	if err := e.carry(ctx, w); err != nil {
		return Unit{}, err
	}
	e.record("place.refitted", "place", w.PlaceID, w)
	return in, nil
}

// begin puts on record the units that stand in the place and were never told one by one, so that each keeps its own
// history from here on: fitted when the place says, of the model the place says.
func (e *Edit) begin(ctx context.Context, w Swap) error {
	var model *domain.ID
	var at *time.Time
	var count int
	err := e.QueryRow(ctx, `
		SELECT CASE $3 WHEN 'lamp' THEN lamp_model_id WHEN 'driver' THEN driver_model_id WHEN 'dimmer' THEN dimmer_model_id
		               WHEN 'fixture' THEN fixture_model_id END,
		       CASE WHEN $3 = 'lamp' THEN lamps_fitted_at WHEN $3 = kind THEN fitted_at END,
		       CASE WHEN $3 = 'lamp' THEN coalesce(lamp_count, 1) ELSE 1 END
		  FROM place
		 WHERE building_id = $1 AND id = $2`, e.Building, w.PlaceID, w.Part).Scan(&model, &at, &count)
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
	units, err := Units.Select(ctx, e.Scope, `
		WHERE building_id = $1 AND place_id = $2 AND part = $3 AND removed_at IS NULL AND retired_at IS NULL`, e.Building, w.PlaceID, w.Part)
	if err != nil {
		return err
	}
	for _, u := range units {
		taken[u.Holder] = true
	}
	for h := 1; h <= count; h++ {
		if taken[h] {
			continue
		}
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

// failed clears the open failures of the holder, recording one first where none is open.
func (e *Edit) failed(ctx context.Context, w Swap, out *Unit) error {
	open, err := e.openFailures(ctx, w.PlaceID, w.Part, w.Holder)
	if err != nil {
		return err
	}
	if len(open) == 0 {
		f := Failure{PlaceID: &w.PlaceID, Part: w.Part, Holder: w.Holder, Mode: w.Mode, NoticedAt: w.DoneAt, Hours: w.Hours, Note: w.Note}
		if f.Mode == "" {
			f.Mode = "dark"
		}
		if out != nil {
			f.UnitID = &out.ID
		}
		if err := e.insertFailure(ctx, &f); err != nil {
			return err
		}
		open = append(open, f)
	}
	for _, f := range open {
		f.ClearedAt, f.UpdatedAt = &w.DoneAt, e.At
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
func (e *Edit) carry(ctx context.Context, w Swap) error {
	switch w.Part {
	case KindLamp:
		return e.carryLamp(ctx, w)
	case KindBattery:
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
			       separation_before = CASE WHEN kind = 'driver' AND $6 <> '' THEN $6 ELSE separation_before END
			 WHERE building_id = $1 AND id = $2 AND kind IN ('driver', 'fixture')`, w.ModelID, e.At, w.DoneAt, before)
	case KindDimmer:
		return e.set(ctx, w, `
			UPDATE place
			   SET dimmer_model_id = $3, version = version + 1, updated_at = $4, fitted_at = $5
			 WHERE building_id = $1 AND id = $2 AND kind = 'dimmer'`, w.ModelID, e.At, w.DoneAt)
	default:
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

// set changes one place by a statement whose first arguments are the building and the place.
func (e *Edit) set(ctx context.Context, w Swap, sql string, args ...any) error {
	tag, err := e.Exec(ctx, sql, append([]any{e.Building, w.PlaceID}, args...)...)
	if err != nil {
		return domain.Classify(err, "place")
	}
	if tag.RowsAffected() == 0 {
		return domain.Conflictf("a %s cannot be fitted there: the place is of another kind", w.Part)
	}
	return nil
}

// carryLamp settles a luminaire after one of its lamps changed: its lamp model is the one in all holders, or stays
// with the odd unit marked; its count follows what was taken out or put in.
func (e *Edit) carryLamp(ctx context.Context, w Swap) error {
	f, err := Fixtures.Lock(ctx, e.Scope, w.PlaceID)
	if err != nil {
		return err
	}
	if f.Kind != KindFixture {
		return domain.Conflictf("a lamp cannot be fitted there: the place is a %s", f.Kind)
	}
	units, err := Units.Select(ctx, e.Scope, `
		WHERE building_id = $1 AND place_id = $2 AND part = 'lamp' AND removed_at IS NULL AND retired_at IS NULL
		ORDER BY holder`, e.Building, w.PlaceID)
	if err != nil {
		return err
	}
	count := 1
	if f.LampCount != nil {
		count = *f.LampCount
	}
	switch {
	case w.Emptied:
		count = max(count-1, 0)
	case count < max(len(units), w.Holder):
		count = max(len(units), w.Holder)
	}
	alike := len(units) == count
	for _, u := range units {
		alike = alike && same(u.LampModelID, units[0].LampModelID)
	}
	if alike && len(units) > 0 {
		f.LampModelID = units[0].LampModelID
	}
	f.LampCount, f.UpdatedAt = &count, e.At
	if !w.Emptied {
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
	}
	if f.LastGoodAt != nil && f.LastGoodAt.After(f.NoticedAt) {
		c.Add("/last_good_at", "must not lie after noticed_at")
	}
	return c.Err()
}

// Report records a failure. A second report of the same failing of the same unit counts as one failure told twice:
// the first is returned with its count raised.
func (e *Edit) Report(ctx context.Context, f *Failure) error {
	if err := f.Validate(e.At); err != nil {
		return err
	}
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
	open, err := e.openFailures(ctx, *f.PlaceID, f.Part, f.Holder)
	if err != nil {
		return err
	}
	for _, known := range open {
		if known.Mode != f.Mode || known.Holder != f.Holder {
			continue
		}
		known.Reports++
		known.UpdatedAt = e.At
		if f.NoticedAt.Before(known.NoticedAt) {
			known.NoticedAt = f.NoticedAt
		}
		if f.LastGoodAt != nil && (known.LastGoodAt == nil || f.LastGoodAt.After(*known.LastGoodAt)) && !f.LastGoodAt.After(known.NoticedAt) {
			known.LastGoodAt = f.LastGoodAt
		}
		if err := Failures.Update(ctx, e.Scope, &known); err != nil {
			return err
		}
		*f = known
		e.record("failure.reported_again", "failure", f.ID, nil)
		return nil
	}
	if f.Holder > 0 {
		err := e.QueryRow(ctx, `
			SELECT (SELECT id FROM unit
			         WHERE building_id = $1 AND place_id = $2 AND part = $3 AND holder = $4 AND removed_at IS NULL AND retired_at IS NULL)`,
			e.Building, f.PlaceID, f.Part, f.Holder).Scan(&f.UnitID)
		if err != nil {
			return domain.Classify(err, "unit")
		}
	}
	if err := e.insertFailure(ctx, f); err != nil {
		return err
	}
	e.record("failure.reported", "failure", f.ID, f)
	return nil
}

// Clear ends an open failure without a swap: it works again, or it was none.
func (e *Edit) Clear(ctx context.Context, id domain.ID, version int64, at time.Time, cause string) (Failure, error) {
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
	t.LampModelID, t.DriverModelID, t.Battery = f.LampModelID, f.DriverModelID, f.Battery
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
	t.ID, t.BuildingID, t.Version, t.CreatedAt, t.UpdatedAt = orNew(t.ID), e.Building, 1, e.At, e.At
	if err := Trips.Insert(ctx, e.Scope, t); err != nil {
		return err
	}
	e.record("circuit.tripped", "circuit", t.CircuitID, t)
	return nil
}
