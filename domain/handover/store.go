package handover

import (
	"context"
	"crypto/sha256"
	"errors"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"lampward/domain"
	"lampward/domain/event"
	"lampward/domain/plant"
	"lampward/domain/review"
	"lampward/domain/site"
)

// Options say how a register is stored.
type Options struct {
	By       domain.Actor
	At       time.Time
	Building domain.ID // to store it in; where zero, the building with the register's code, which is made if there is none
	DryRun   bool      // tell what would become of it and store nothing
	GoodRows bool      // take the rows that can be taken; otherwise one that cannot refuses all
	File     []byte    // as it came, to be told from others
	Progress func(done, total int)
}

// A Result is what became of a register.
type Result struct {
	BuildingID domain.ID `json:"building_id"`
	DryRun     bool      `json:"dry_run"`
	Models     int       `json:"models_new"`
	plant.BulkCounts
	Refused int      `json:"refused"` // rows
	Opened  int      `json:"opened"`  // findings
	Cleared int      `json:"cleared"`
	Cells   []Cell   `json:"cells"` // not taken as they stand, the first 1,000
	CellN   int      `json:"cell_count"`
	Told    []string `json:"told"`
}

// errDry ends a dry run's transaction without storing it.
var errDry = errors.New("handover: a dry run")

// A Refusal is a register with rows that cannot be taken: nothing was stored.
type Refusal struct{ Result Result }

// Error says how many rows, and where they are told.
func (r *Refusal) Error() string {
	return fmt.Sprintf("%d rows cannot be taken, so nothing is stored; correct them, or take the good rows", r.Result.Refused)
}

// Store writes a register through the one door in one transaction: its models, its building where that is new, its
// records. A second run of the same file changes nothing. It fails with a *Refusal where rows cannot be taken and the good
// ones were not asked for.
func Store(ctx context.Context, db *pgxpool.Pool, r *Register, o Options) (Result, error) {
	out := Result{DryRun: o.DryRun, Refused: r.Refused(), Cells: []Cell{}, CellN: len(r.Cells), Told: r.Told}
	out.Cells = append(out.Cells, r.Cells[:min(len(r.Cells), mostCells)]...)
	if out.Told == nil {
		out.Told = []string{}
	}
	if out.Refused > 0 && !o.GoodRows {
		return out, &Refusal{out}
	}
	base := out
	err := domain.In(ctx, db, domain.ID{}, o.By, o.At, func(c domain.Scope) error {
		out = base
		// Records may be settled more than once; what was parsed stays as it was.
		w := &writer{ctx: ctx, central: c, r: r, o: o, out: &out, ids: map[domain.ID]domain.ID{}}
		if err := w.building(); err != nil {
			return err
		}
		if err := w.models(); err != nil {
			return err
		}
		if err := domain.Within(ctx, c, out.BuildingID, w.records); err != nil {
			return err
		}
		if err := w.run(); err != nil {
			return err
		}
		if o.DryRun {
			return errDry
		}
		return nil
	})
	if errors.Is(err, errDry) {
		err = nil
	}
	return out, err
}

// writer is one try at storing a register.
type writer struct {
	ctx     context.Context
	central domain.Scope
	r       *Register
	o       Options
	out     *Result
	fresh   bool // the building is new
	ids     map[domain.ID]domain.ID
}

// building finds the building, or makes it.
func (w *writer) building() error {
	if !w.o.Building.IsZero() {
		w.out.BuildingID = w.o.Building
		return nil
	}
	b, err := site.BuildingByCode(w.ctx, w.central, w.r.Building.Code)
	if err == nil {
		w.out.BuildingID = b.ID
		return nil
	}
	if domain.KindOf(err) != domain.NotFound {
		return err
	}
	w.out.BuildingID, w.fresh = domain.NewID(), true
	return nil
}

// models stores the models that the catalogue lacks. One that it has under the same code is taken as it stands there: what
// it says was confirmed by somebody.
func (w *writer) models() error {
	for _, store := range []func() (int, error){
		func() (int, error) { return storeModels(w, plant.LampModels, "lamp_model", w.r.Lamps) },
		func() (int, error) { return storeModels(w, plant.DriverModels, "driver_model", w.r.Drivers) },
		func() (int, error) { return storeModels(w, plant.DimmerModels, "dimmer_model", w.r.Dimmers) },
		func() (int, error) { return storeModels(w, plant.FixtureModels, "fixture_model", w.r.Fixtures) },
	} {
		n, err := store()
		if err != nil {
			return err
		}
		w.out.Models += n
	}
	return nil
}

func storeModels[T any, P interface {
	*T
	CatalogueHead() *domain.CatalogueRow
	Head() *plant.ModelHead
	Validate() error
}](w *writer, t *domain.Table[T], kind string, rows []T) (int, error) {
	if len(rows) == 0 {
		return 0, nil
	}
	codes := make([]string, len(rows))
	for i := range rows {
		codes[i] = P(&rows[i]).Head().Code
	}
	known := map[string]domain.ID{}
	err := t.Each(w.ctx, w.central, func(row *T) error {
		h := P(row).Head()
		id := h.ID
		if h.MergedInto != nil {
			id = *h.MergedInto
		}
		if _, there := known[h.Code]; !there || h.RetiredAt == nil {
			known[h.Code] = id
		}
		return nil
	}, `WHERE code = ANY($1)`, codes)
	if err != nil {
		return 0, err
	}
	made := 0
	for i := range rows {
		row := rows[i]
		h := P(&row).Head()
		if id, there := known[h.Code]; there {
			w.ids[h.ID] = id
			continue
		}
		if f, ok := any(&row).(*plant.FixtureModel); ok {
			f.DriverModelID = w.settled(f.DriverModelID)
		}
		if err := plant.CreateModel[T, P](w.ctx, w.central, t, &row, kind); err != nil {
			return made, fmt.Errorf("%s %s: %w", kind, h.Code, err)
		}
		made++
	}
	return made, nil
}

// settled returns the identifier a model goes by in the catalogue.
func (w *writer) settled(id *domain.ID) *domain.ID {
	if id == nil {
		return nil
	}
	if to, ok := w.ids[*id]; ok {
		return &to
	}
	return id
}

// records stores the building and its records, in pieces of what one bulk takes.
func (w *writer) records(s domain.Scope) error {
	if w.fresh {
		b := w.r.Building
		if err := site.CreateBuilding(w.ctx, s, &b); err != nil {
			return err
		}
	} else if err := w.change(s); err != nil {
		return err
	}
	if err := w.known(s); err != nil {
		return err
	}
	pieces := w.pieces()
	total, done := w.r.Bulk.Rows(), 0
	// A reviewer of its own: the catalogue it reads is that of this transaction, which others must not see.
	reviewer := review.New()
	for _, piece := range pieces {
		var n plant.BulkCounts
		out, err := reviewer.Change(w.ctx, s, review.Touch{}, func(e *plant.Edit) (err error) {
			b := piece.Clone()
			n, err = e.Upsert(w.ctx, &b)
			return err
		})
		if err != nil {
			return err
		}
		w.out.New += n.New
		w.out.Changed += n.Changed
		w.out.Unchanged += n.Unchanged
		w.out.Opened += len(out.Opened)
		w.out.Cleared += len(out.Cleared)
		done += piece.Rows()
		if w.o.Progress != nil {
			w.o.Progress(done, total)
		}
	}
	return nil
}

// change brings a known building to what the file says of it, where the file says anything.
func (w *writer) change(s domain.Scope) error {
	if w.r.Form != SurveyForm {
		return nil
	}
	before, err := site.GetBuilding(w.ctx, s, s.Building)
	if err != nil {
		return err
	}
	after := w.r.Building
	after.CatalogueRow = before.CatalogueRow
	if site.Buildings.Same(&before, &after) {
		return nil
	}
	return site.UpdateBuilding(w.ctx, s, &after)
}

// known finds the records that are there already by what people call them, so that rows may name them by identifier.
func (w *writer) known(s domain.Scope) error {
	if w.fresh {
		return nil
	}
	note := func(kind string, id domain.ID, name string) {
		if given, ok := w.r.ids[key(kind, name)]; ok {
			w.ids[given] = id
		}
	}
	const inUse = `WHERE building_id = $1 AND retired_at IS NULL`
	if err := site.Spaces.Each(w.ctx, s, func(p *site.Space) error {
		note("space", p.ID, spaceName(p.Level, p.Name))
		if w.r.Form == COBieForm {
			note("space", p.ID, p.Name)
		}
		return nil
	}, inUse, s.Building); err != nil {
		return err
	}
	if err := plant.Circuits.Each(w.ctx, s, func(k *plant.Circuit) error { note("circuit", k.ID, k.Board+"/"+k.Way); return nil }, inUse, s.Building); err != nil {
		return err
	}
	if err := plant.MakeUps.Each(w.ctx, s, func(m *plant.MakeUp) error { note("make_up", m.ID, m.Name); return nil }, inUse, s.Building); err != nil {
		return err
	}
	return plant.Fixtures.Each(w.ctx, s, func(f *plant.Fixture) error { note("place", f.ID, f.Tag); return nil }, inUse, s.Building)
}

// pieces divides the records into bulks, what is named before what names it.
func (w *writer) pieces() []plant.Bulk {
	all := w.r.Bulk.Clone()
	for i := range all.Spaces {
		p := &all.Spaces[i]
		p.ID = *w.settled(&p.ID)
	}
	for i := range all.Circuits {
		k := &all.Circuits[i]
		k.ID, k.SpaceID = *w.settled(&k.ID), w.settled(k.SpaceID)
	}
	for i := range all.MakeUps {
		m := &all.MakeUps[i]
		m.ID = *w.settled(&m.ID)
		m.LampModelID, m.DriverModelID, m.DimmerModelID, m.FixtureModelID = w.settled(m.LampModelID), w.settled(m.DriverModelID), w.settled(m.DimmerModelID), w.settled(m.FixtureModelID)
	}
	place := func(h *plant.PlaceHead) {
		h.ID = *w.settled(&h.ID)
		h.SpaceID, h.MakeUpID, h.FedByCircuitID, h.FedByPlaceID = w.settled(h.SpaceID), w.settled(h.MakeUpID), w.settled(h.FedByCircuitID), w.settled(h.FedByPlaceID)
	}
	for i := range all.Dimmers {
		place(&all.Dimmers[i].PlaceHead)
		all.Dimmers[i].DimmerModelID = w.settled(all.Dimmers[i].DimmerModelID)
	}
	for i := range all.Drivers {
		place(&all.Drivers[i].PlaceHead)
		all.Drivers[i].DriverModelID = w.settled(all.Drivers[i].DriverModelID)
	}
	for i := range all.Fixtures {
		f := &all.Fixtures[i]
		place(&f.PlaceHead)
		f.LampModelID, f.DriverModelID, f.FixtureModelID = w.settled(f.LampModelID), w.settled(f.DriverModelID), w.settled(f.FixtureModelID)
	}
	for i := range all.Feeds {
		f := &all.Feeds[i]
		f.PlaceID, f.FromCircuitID, f.FromPlaceID = *w.settled(&f.PlaceID), w.settled(f.FromCircuitID), w.settled(f.FromPlaceID)
	}
	for i := range all.Controls {
		l := &all.Controls[i]
		l.DimmerID, l.PlaceID, l.CircuitID = *w.settled(&l.DimmerID), w.settled(l.PlaceID), w.settled(l.CircuitID)
	}
	var out []plant.Bulk
	var b plant.Bulk
	room := func() {
		if b.Rows() == plant.MaxBulk {
			out = append(out, b)
			b = plant.Bulk{}
		}
	}
	for i := range all.Spaces {
		room()
		b.Spaces = append(b.Spaces, all.Spaces[i])
	}
	for i := range all.MakeUps {
		room()
		b.MakeUps = append(b.MakeUps, all.MakeUps[i])
	}
	for i := range all.Circuits {
		room()
		b.Circuits = append(b.Circuits, all.Circuits[i])
	}
	for i := range all.Dimmers {
		room()
		b.Dimmers = append(b.Dimmers, all.Dimmers[i])
	}
	for i := range all.Drivers {
		room()
		b.Drivers = append(b.Drivers, all.Drivers[i])
	}
	for i := range all.Fixtures {
		room()
		b.Fixtures = append(b.Fixtures, all.Fixtures[i])
	}
	for i := range all.Feeds {
		room()
		b.Feeds = append(b.Feeds, all.Feeds[i])
	}
	for i := range all.Controls {
		room()
		b.Controls = append(b.Controls, all.Controls[i])
	}
	if b.Rows() > 0 {
		out = append(out, b)
	}
	return out
}

// run notes that the file was stored.
func (w *writer) run() error {
	sum := sha256.Sum256(w.o.File)
	_, err := w.central.Exec(w.ctx, `
		INSERT INTO import_run (id, building_id, file_name, file_hash, form, rows_read, rows_new, rows_changed, rows_refused, by_kind, by_id, created_at)
		VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12)`,
		domain.NewID(), w.out.BuildingID, line(w.r.Building.Name), sum[:], w.r.Form, w.r.Bulk.Rows()+w.out.Refused, w.out.New, w.out.Changed, w.out.Refused,
		w.o.By.Kind, w.o.By.ID, w.o.At)
	return domain.Classify(err, "import")
}

// BadRows returns the rows of a book that were refused, each sheet with its headers and one more column that says why:
// the file to correct and send again.
func (r *Register) BadRows(b *Book) []Table {
	why := map[string]map[int]string{}
	for _, c := range r.Cells {
		if c.refuses {
			if why[c.Sheet] == nil {
				why[c.Sheet] = map[int]string{}
			}
			text := c.Column + " " + c.Problem
			if before := why[c.Sheet][c.Row]; before != "" {
				text = before + "; " + text
			}
			why[c.Sheet][c.Row] = text
		}
	}
	var out []Table
	for _, name := range b.order {
		rows := b.sheets[name]
		if why[name] == nil || len(rows) == 0 {
			continue
		}
		t := Table{Name: name, Header: append(append([]string{}, rows[0]...), "why it was not taken")}
		for i, row := range rows {
			if text := why[name][i+1]; text != "" {
				cells := make([]string, len(t.Header))
				copy(cells, row)
				cells[len(cells)-1] = text
				t.Rows = append(t.Rows, cells)
			}
		}
		out = append(out, t)
	}
	return out
}

// KeepMatching keeps a matching for the next file with the same headers.
func KeepMatching(ctx context.Context, db *pgxpool.Pool, by domain.Actor, at time.Time, m *Matching) error {
	if err := m.Validate(); err != nil {
		return err
	}
	return domain.In(ctx, db, domain.ID{}, by, at, func(s domain.Scope) error {
		id := domain.NewID()
		_, err := s.Exec(ctx, `
			INSERT INTO column_match (id, version, created_at, updated_at, name, header_hash, columns, words)
			VALUES ($1, 1, $2, $2, $3, $4, $5, $6)
			    ON CONFLICT (header_hash) DO UPDATE
			   SET version = column_match.version + 1, updated_at = excluded.updated_at, columns = excluded.columns, words = excluded.words`,
			id, s.At, line(m.Sheet), m.Hash(), m.Columns, m.Words)
		if err != nil {
			return domain.Classify(err, "matching")
		}
		event.Record(s, event.Act{Action: "column_match.kept", Kind: "column_match", ID: id, Body: m})
		return nil
	})
}

// KeptMatching returns the matching that was kept for the headers of a book; ok is false where there is none.
func KeptMatching(ctx context.Context, db domain.Queryer, b *Book) (m *Matching, ok bool, err error) {
	m, err = Propose(b)
	if err != nil {
		return nil, false, err
	}
	err = db.QueryRow(ctx, `SELECT columns, words FROM column_match WHERE header_hash = $1 AND retired_at IS NULL`, m.Hash()).Scan(&m.Columns, &m.Words)
	if errors.Is(err, pgx.ErrNoRows) {
		return m, false, nil
	}
	return m, err == nil, domain.Classify(err, "matching")
}
