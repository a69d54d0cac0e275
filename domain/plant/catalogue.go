package plant

import (
	"context"
	"slices"
	"sync/atomic"

	"github.com/jackc/pgx/v5"

	"lampward/calc/loading"
	"lampward/domain"
	"lampward/domain/event"
	"lampward/domain/site"
)

// A Catalogue is every model, pairing and use as they stood at one sequence. It is never changed once made. A model
// that was merged into another is found under its own id and is the other.
type Catalogue struct {
	Seq      int64
	Lamps    map[domain.ID]*LampModel
	Drivers  map[domain.ID]*DriverModel
	Dimmers  map[domain.ID]*DimmerModel
	Fixtures map[domain.ID]*FixtureModel
	Pairings map[loading.PairingKey]loading.Pairing
	Uses     map[string]site.SpaceUse
}

// NewCatalogue gathers models that come from no database.
func NewCatalogue(lamps []*LampModel, drivers []*DriverModel, dimmers []*DimmerModel, fixtures []*FixtureModel, pairings []Pairing) *Catalogue {
	c := &Catalogue{Lamps: map[domain.ID]*LampModel{}, Drivers: map[domain.ID]*DriverModel{}, Dimmers: map[domain.ID]*DimmerModel{},
		Fixtures: map[domain.ID]*FixtureModel{}, Pairings: map[loading.PairingKey]loading.Pairing{}, Uses: map[string]site.SpaceUse{}}
	for _, m := range lamps {
		m.Key = m.ID
		c.Lamps[m.ID] = m
	}
	for _, m := range drivers {
		m.Key = m.ID
		c.Drivers[m.ID] = m
	}
	for _, m := range dimmers {
		m.Key = m.ID
		c.Dimmers[m.ID] = m
	}
	for _, m := range fixtures {
		m.Key = m.ID
		c.Fixtures[m.ID] = m
	}
	follow(c.Lamps)
	follow(c.Drivers)
	follow(c.Dimmers)
	follow(c.Fixtures)
	for _, p := range pairings {
		if p.RetiredAt == nil {
			c.Pairings[c.pairingKey(p)] = loading.Pairing{LeastLamps: p.LeastLamps, MostLamps: p.MostLamps}
		}
	}
	return c
}

// follow puts in the place of every merged model the one it was merged into.
func follow[T any, P interface {
	*T
	Head() *ModelHead
}](models map[domain.ID]P) {
	for id, m := range models {
		for range len(models) {
			into := m.Head().MergedInto
			if into == nil || models[*into] == nil {
				break
			}
			m = models[*into]
		}
		models[id] = m
	}
}

func (c *Catalogue) pairingKey(p Pairing) loading.PairingKey {
	var k loading.PairingKey
	if p.LampModelID != nil && c.Lamps[*p.LampModelID] != nil {
		k.Lamp = c.Lamps[*p.LampModelID].ID
	}
	if p.DriverModelID != nil && c.Drivers[*p.DriverModelID] != nil {
		k.Gear = c.Drivers[*p.DriverModelID].ID
	}
	if p.DimmerModelID != nil && c.Dimmers[*p.DimmerModelID] != nil {
		k.Control = c.Dimmers[*p.DimmerModelID].ID
	}
	return k
}

// LoadCatalogue reads the whole catalogue.
func LoadCatalogue(ctx context.Context, db domain.Queryer) (*Catalogue, error) {
	var lamps []LampModel
	var drivers []DriverModel
	var dimmers []DimmerModel
	var fixtures []FixtureModel
	var pairings []Pairing
	var uses []site.SpaceUse
	var seq int64
	var batch pgx.Batch
	// The sequence is read first: what is read after it may only be newer, and a Change checks it again at its end.
	batch.Queue(`SELECT seq FROM catalogue_head WHERE id = 1`).QueryRow(func(row pgx.Row) error { return row.Scan(&seq) })
	batch.Queue(`SELECT ` + LampModels.List("") + ` FROM lamp_model`).Query(collect(LampModels, &lamps))
	batch.Queue(`SELECT ` + DriverModels.List("") + ` FROM driver_model`).Query(collect(DriverModels, &drivers))
	batch.Queue(`SELECT ` + DimmerModels.List("") + ` FROM dimmer_model`).Query(collect(DimmerModels, &dimmers))
	batch.Queue(`SELECT ` + FixtureModels.List("") + ` FROM fixture_model`).Query(collect(FixtureModels, &fixtures))
	batch.Queue(`SELECT ` + Pairings.List("") + ` FROM pairing ORDER BY id`).Query(collect(Pairings, &pairings))
	batch.Queue(`SELECT ` + site.SpaceUses.List("") + ` FROM space_use`).Query(collect(site.SpaceUses, &uses))
	if err := db.SendBatch(ctx, &batch).Close(); err != nil {
		return nil, domain.Classify(err, "catalogue")
	}
	c := NewCatalogue(pointers(lamps), pointers(drivers), pointers(dimmers), pointers(fixtures), pairings)
	c.Seq = seq
	for _, u := range uses {
		if u.RetiredAt == nil {
			c.Uses[u.Use] = u
		}
	}
	return c, nil
}

func pointers[T any](s []T) []*T {
	out := make([]*T, len(s))
	for i := range s {
		out[i] = &s[i]
	}
	return out
}

// A Shelf keeps the newest catalogue read, for all who ask in one program.
type Shelf struct{ now atomic.Pointer[Catalogue] }

// At returns the catalogue as it stands, reading it again only where its sequence moved.
func (sh *Shelf) At(ctx context.Context, db domain.Queryer) (*Catalogue, error) {
	seq, err := CatalogueSeq(ctx, db)
	if err != nil {
		return nil, err
	}
	if c := sh.now.Load(); c != nil && c.Seq == seq {
		return c, nil
	}
	c, err := LoadCatalogue(ctx, db)
	if err != nil {
		return nil, err
	}
	sh.now.Store(c)
	return c, nil
}

// CatalogueSeq returns the number of changes the catalogue has seen.
func CatalogueSeq(ctx context.Context, db domain.Queryer) (int64, error) {
	var seq int64
	err := db.QueryRow(ctx, `SELECT seq FROM catalogue_head WHERE id = 1`).Scan(&seq)
	return seq, domain.Classify(err, "catalogue")
}

// catalogued is a record of the catalogue that knows its own rules.
type catalogued[T any] interface {
	*T
	CatalogueHead() *domain.CatalogueRow
	Validate() error
}

// CreateModel stores a new record of the catalogue: a model of any kind, a pairing or a price. kind is its word in
// the audit. s must have no building.
func CreateModel[T any, P catalogued[T]](ctx context.Context, s domain.Scope, t *domain.Table[T], row P, kind string) error {
	h := row.CatalogueHead()
	if h.ID.IsZero() {
		h.ID = domain.NewID()
	}
	h.Version, h.CreatedAt, h.UpdatedAt, h.RetiredAt = 1, s.At, s.At, nil
	if m, ok := any(row).(interface{ Head() *ModelHead }); ok && m.Head().MergedInto != nil {
		return mergedOnlyByMerging(t.What)
	}
	if err := valid(ctx, s, t.What, row); err != nil {
		return err
	}
	if err := t.Insert(ctx, s, (*T)(row)); err != nil {
		return err
	}
	event.Record(s, event.Act{Action: kind + ".created", Kind: kind, ID: h.ID, Body: row})
	switch any(row).(type) {
	case *LampModel, *DriverModel, *DimmerModel, *FixtureModel:
		return bump(ctx, s) // nothing holds a new model: no review is owed
	}
	return raise(ctx, s, kind, row)
}

// valid holds a record of the catalogue against its own rules, then against the models it names.
func valid(ctx context.Context, s domain.Scope, what string, row interface{ Validate() error }) error {
	if err := row.Validate(); err != nil {
		return err
	}
	type name struct {
		field, table string
		id           *domain.ID
	}
	var names []name
	switch r := row.(type) {
	case *Pairing:
		names = []name{{"lamp_model_id", LampModels.Name, r.LampModelID}, {"driver_model_id", DriverModels.Name, r.DriverModelID},
			{"dimmer_model_id", DimmerModels.Name, r.DimmerModelID}}
	case *Price:
		names = []name{{"model_id", r.ModelKind + "_model", &r.ModelID}}
	case *FixtureModel:
		names = []name{{"driver_model_id", DriverModels.Name, r.DriverModelID}}
	}
	c := domain.NewCheck(what)
	for _, n := range names {
		if n.id == nil {
			continue
		}
		var there bool
		if err := s.QueryRow(ctx, `SELECT EXISTS (SELECT FROM `+n.table+` WHERE id = $1)`, *n.id).Scan(&there); err != nil {
			return domain.Classify(err, what)
		}
		if !there {
			c.Add("/"+n.field, "names no model of this kind")
		}
	}
	return c.Err()
}

// UpdateModel stores a changed record of the catalogue if the stored version is still its own, and asks for a review
// of the trees that hold it or held it before. Whether a model is provisional or merged is not changed here.
func UpdateModel[T any, P catalogued[T]](ctx context.Context, s domain.Scope, t *domain.Table[T], row P, kind string) error {
	h := row.CatalogueHead()
	before, err := t.Lock(ctx, s, h.ID)
	if err != nil {
		return err
	}
	was := P(&before).CatalogueHead()
	h.CreatedAt, h.UpdatedAt, h.RetiredAt = was.CreatedAt, s.At, was.RetiredAt
	if m, ok := any(row).(interface{ Head() *ModelHead }); ok {
		old := any(P(&before)).(interface{ Head() *ModelHead }).Head()
		if old.MergedInto != nil {
			return domain.Conflictf("the %s was merged into another one; change that one", t.What)
		}
		if m.Head().MergedInto != nil {
			return mergedOnlyByMerging(t.What)
		}
		m.Head().Provisional = old.Provisional
	}
	if err := valid(ctx, s, t.What, row); err != nil {
		return err
	}
	if err := t.Update(ctx, s, (*T)(row)); err != nil {
		return err
	}
	event.Record(s, event.Act{Action: kind + ".changed", Kind: kind, ID: h.ID, Body: event.Changed(&before, row)})
	return raise(ctx, s, kind, P(&before), row)
}

func mergedOnlyByMerging(what string) error {
	return &domain.Error{Kind: domain.Invalid, Msg: "the " + what + " is not valid",
		Fields: []domain.Field{{Pointer: "/merged_into", Detail: "is set by merging: leave it out"}}}
}

// RetireModel takes a record of the catalogue out of the lists people choose from, or back in where restore is true.
// Places that carry the model keep it.
func RetireModel[T any, P catalogued[T]](ctx context.Context, s domain.Scope, t *domain.Table[T], id domain.ID, version int64, restore bool, kind string) (T, error) {
	row, err := t.Lock(ctx, s, id)
	if err != nil {
		return row, err
	}
	h := P(&row).CatalogueHead()
	if (h.RetiredAt == nil) == restore {
		return row, domain.Conflictf("the %s is already in that state", t.What)
	}
	h.Version, h.UpdatedAt, h.RetiredAt = version, s.At, &s.At
	action := kind + ".retired"
	if m, ok := any(P(&row)).(interface{ Head() *ModelHead }); ok && m.Head().MergedInto != nil {
		return row, domain.Conflictf("the %s was merged into another one and goes by that one's name for good", t.What)
	}
	if restore {
		h.RetiredAt, action = nil, kind+".restored"
	}
	if err := t.Update(ctx, s, &row); err != nil {
		return row, err
	}
	event.Record(s, event.Act{Action: action, Kind: kind, ID: id})
	return row, raise(ctx, s, kind, P(&row))
}

// raise counts a change of the catalogue and asks for the reviews it makes necessary: of what holds the record as it
// stands now and, where it was changed, as it stood before. A price is no part of what is judged: it makes neither.
func raise(ctx context.Context, s domain.Scope, kind string, rows ...any) error {
	if _, ok := rows[0].(*Price); ok {
		return nil
	}
	if err := bump(ctx, s); err != nil {
		return err
	}
	type holder struct {
		kind  string
		model domain.ID
	}
	owed := map[holder]bool{}
	for _, row := range rows {
		var h holder
		switch m := row.(type) {
		case *site.SpaceUse:
			// Its hours are those of every space of that use, in any building.
			if len(rows) == 2 && sameHours(rows[0].(*site.SpaceUse), rows[1].(*site.SpaceUse)) {
				return nil
			}
			return event.ReviewDue(ctx, s, event.Due{Why: kind + " changed"})
		case *Pairing:
			h = holder{KindDriver, domain.ID{}}
			if m.LampModelID != nil {
				h = holder{KindLamp, *m.LampModelID}
			} else if m.DriverModelID != nil {
				h.model = *m.DriverModelID
			}
		case *LampModel:
			h = holder{KindLamp, m.ID}
		case *DriverModel:
			h = holder{KindDriver, m.ID}
		case *DimmerModel:
			h = holder{KindDimmer, m.ID}
		case *FixtureModel:
			h = holder{KindFixture, m.ID}
		}
		if owed[h] {
			continue
		}
		owed[h] = true
		if err := event.ReviewDue(ctx, s, event.Due{ModelKind: h.kind, Model: &h.model, Why: kind + " changed"}); err != nil {
			return err
		}
	}
	return nil
}

// bump says that the catalogue is another one.
func bump(ctx context.Context, s domain.Scope) error {
	_, err := s.Exec(ctx, `UPDATE catalogue_head SET seq = seq + 1 WHERE id = 1`)
	return domain.Classify(err, "catalogue")
}

func sameHours(a, b *site.SpaceUse) bool {
	return a.Use == b.Use && (a.YearlyHours == nil) == (b.YearlyHours == nil) && (a.YearlyHours == nil || *a.YearlyHours == *b.YearlyHours)
}

// MergeModel marks a model as being another one: reads follow it at once, places are pointed to it by a job.
func MergeModel[T any, P interface {
	catalogued[T]
	Head() *ModelHead
}](ctx context.Context, s domain.Scope, t *domain.Table[T], id, into domain.ID, version int64, kind string) (T, error) {
	row, err := t.Lock(ctx, s, id)
	if err != nil {
		return row, err
	}
	target, err := t.Lock(ctx, s, into)
	if err != nil {
		return row, &domain.Error{Kind: domain.Invalid, Msg: "there is no such model to merge into", Err: err,
			Fields: []domain.Field{{Pointer: "/into", Detail: "names no " + t.What}}}
	}
	if id == into || P(&target).Head().MergedInto != nil {
		return row, domain.Conflictf("a model is merged into another one that is not merged itself")
	}
	h := P(&row).Head()
	if h.MergedInto != nil {
		return row, domain.Conflictf("the %s is already merged", t.What)
	}
	var followers int
	if err := s.QueryRow(ctx, `SELECT count(*) FROM `+t.Name+` WHERE merged_into = $1`, id).Scan(&followers); err != nil {
		return row, domain.Classify(err, t.What)
	}
	if followers > 0 {
		return row, domain.Conflictf("%d models are merged into this one; merge them elsewhere first", followers)
	}
	h.Version, h.UpdatedAt, h.MergedInto, h.Provisional, h.RetiredAt = version, s.At, &into, false, &s.At
	if err := t.Update(ctx, s, &row); err != nil {
		return row, err
	}
	event.Record(s, event.Act{Action: kind + ".merged", Kind: kind, ID: id, Body: map[string]any{"into": into}})
	return row, raise(ctx, s, kind, P(&row))
}

// ConfirmModel ends a model's being provisional.
func ConfirmModel[T any, P interface {
	catalogued[T]
	Head() *ModelHead
}](ctx context.Context, s domain.Scope, t *domain.Table[T], id domain.ID, version int64, kind string) (T, error) {
	row, err := t.Lock(ctx, s, id)
	if err != nil {
		return row, err
	}
	h := P(&row).Head()
	if !h.Provisional {
		return row, domain.Conflictf("the %s is not provisional", t.What)
	}
	h.Version, h.UpdatedAt, h.Provisional = version, s.At, false
	if err := t.Update(ctx, s, &row); err != nil {
		return row, err
	}
	event.Record(s, event.Act{Action: kind + ".confirmed", Kind: kind, ID: id})
	return row, raise(ctx, s, kind, P(&row))
}

// Also returns every id under which a model is known, its own and those merged into it, and the id it goes by now.
func (c *Catalogue) Also(kind string, model domain.ID) (ids []domain.ID, into domain.ID) {
	switch kind {
	case KindLamp:
		return also(c.Lamps, model)
	case KindDriver:
		return also(c.Drivers, model)
	case KindDimmer:
		return also(c.Dimmers, model)
	case KindFixture:
		return also(c.Fixtures, model)
	}
	return []domain.ID{model}, model
}

func also[T any, P interface {
	*T
	Head() *ModelHead
}](models map[domain.ID]P, model domain.ID) ([]domain.ID, domain.ID) {
	into := model
	if m := models[model]; m != nil {
		into = m.Head().ID
	}
	ids := []domain.ID{into}
	for id, m := range models {
		if id != into && m.Head().ID == into {
			ids = append(ids, id)
		}
	}
	return ids, into
}

// FixturesWith returns the fixture models that are, or hold inside, one of the models.
func (c *Catalogue) FixturesWith(kind string, ids []domain.ID) []domain.ID {
	if kind == KindFixture {
		return ids
	}
	out := []domain.ID{}
	if kind != KindDriver {
		return out
	}
	for id, m := range c.Fixtures {
		if m.DriverModelID != nil && slices.Contains(ids, *m.DriverModelID) {
			out = append(out, id)
		}
	}
	return out
}

// Repoint names a model by the id it goes by now wherever the building's places and units still name one that was
// merged into it. It changes no load: reads follow a merge from the moment it is made.
func Repoint(ctx context.Context, s domain.Scope, kind string, ids []domain.ID, into domain.ID) error {
	column, ok := map[string]string{KindLamp: "lamp_model_id", KindDriver: "driver_model_id", KindDimmer: "dimmer_model_id", KindFixture: "fixture_model_id"}[kind]
	if !ok {
		return domain.Invalidf("%q is no kind of model", kind)
	}
	for _, table := range []string{"place", "unit", "make_up"} {
		if _, err := s.Exec(ctx, `
			UPDATE `+table+`
			   SET `+column+` = $3, version = version + 1, updated_at = $4
			 WHERE building_id = $1 AND `+column+` = ANY($2) AND `+column+` <> $3`, s.Building, domain.IDs(ids), into, s.At); err != nil {
			return domain.Classify(err, table)
		}
	}
	return nil
}

// PricesOn returns the price of each model in force on a day: the latest from a date that has come. A model with
// prices in several currencies has the one whose date is latest, and the first by code where they tie. Models that were
// merged are one: the latest price of any of them is found under the id of each.
func PricesOn(ctx context.Context, s domain.Scope, day domain.Date) (map[domain.ID]Price, error) {
	rows, err := s.Query(ctx, `
		SELECT id, merged_into FROM lamp_model WHERE merged_into IS NOT NULL
		 UNION ALL
		SELECT id, merged_into FROM driver_model WHERE merged_into IS NOT NULL
		 UNION ALL
		SELECT id, merged_into FROM dimmer_model WHERE merged_into IS NOT NULL
		 UNION ALL
		SELECT id, merged_into FROM fixture_model WHERE merged_into IS NOT NULL`)
	if err != nil {
		return nil, domain.Classify(err, "price")
	}
	into := map[domain.ID]domain.ID{}
	var id, target domain.ID
	if _, err := pgx.ForEachRow(rows, []any{&id, &target}, func() error { into[id] = target; return nil }); err != nil {
		return nil, domain.Classify(err, "price")
	}
	out := map[domain.ID]Price{}
	// Of two of one date and currency, the one stated for the model itself stays.
	err = Prices.Each(ctx, s, func(p *Price) error {
		model := p.ModelID
		if t, merged := into[model]; merged {
			if have, ok := out[t]; ok && have.FromDate == p.FromDate && have.Currency == p.Currency && have.ModelID == t {
				return nil
			}
			model = t
		}
		out[model] = *p
		return nil
	}, `
		WHERE from_date <= $1 AND retired_at IS NULL
		ORDER BY from_date, currency DESC, id`, day)
	for from, t := range into {
		if p, ok := out[t]; ok {
			out[from] = p
		}
	}
	return out, err
}
