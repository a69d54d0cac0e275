package main

import (
	"context"
	"fmt"
	"math/rand/v2"
	"runtime"
	"time"

	"github.com/jackc/pgx/v5/pgxpool"
	"golang.org/x/sync/errgroup"

	"lampward/calc/loading"
	"lampward/domain"
	"lampward/domain/plant"
	"lampward/domain/review"
	"lampward/domain/site"
)

// estateOptions says how large an estate is drawn.
type estateOptions struct {
	Fixtures int                   // luminaires, about; 0: a few hundred in four buildings
	At       time.Time             // when it is drawn: what happened lies before
	Progress func(done, total int) // told of buildings; may be nil
}

// estateSummary is what was drawn.
type estateSummary struct {
	Buildings, Spaces, Circuits, Dimmers, Drivers, Fixtures int
	Made                                                    int // buildings that were not there before
}

// ours is who draws the estate.
var ours = domain.Actor{Kind: "command"}

// perBuilding is how many luminaires a building of a large estate has.
const perBuilding = 2000

// invented are the first buildings; those of a large estate after them are numbered.
var invented = []struct{ code, name, address string }{
	{"ALDER", "Alder Street School (invented)", "1 Alder Street, Nowhere"},
	{"BIRCH", "Birch Lane Health Centre (invented)", "12 Birch Lane, Nowhere"},
	{"CEDAR", "Cedar Square Library (invented)", "3 Cedar Square, Nowhere"},
	{"DOGWOOD", "Town Hall, Dogwood Place (invented)", "Dogwood Place, Nowhere"},
}

// loadEstate stores the invented catalogue and the buildings that are not there yet. The same options draw the same
// records; a second run changes nothing.
func loadEstate(ctx context.Context, pool *pgxpool.Pool, reviewer *review.Reviewer, o estateOptions) (estateSummary, error) {
	var sum estateSummary
	if err := storeCatalogue(ctx, pool, o.At); err != nil {
		return sum, fmt.Errorf("the invented catalogue: %w", err)
	}
	// What the catalogue owes is owed by the buildings that stand already, not by those that are drawn with it.
	if err := drain(ctx, pool, reviewer, func() time.Time { return o.At }); err != nil {
		return sum, err
	}
	n := len(invented)
	if o.Fixtures > 0 {
		n = max(1, (o.Fixtures+perBuilding-1)/perBuilding)
	}
	made := make([]estateSummary, n)
	group, gctx := errgroup.WithContext(ctx)
	group.SetLimit(max(2, runtime.GOMAXPROCS(0)))
	done := make(chan struct{}, n)
	for i := range n {
		group.Go(func() error {
			k := drawBuilding(i, o)
			var err error
			made[i], err = k.store(gctx, pool, reviewer, i, o.At)
			done <- struct{}{}
			if err != nil {
				return fmt.Errorf("building %s: %w", k.code, err)
			}
			return nil
		})
	}
	finished := make(chan error, 1)
	go func() { finished <- group.Wait() }() // ends with the group
	for count := 0; ; {
		select {
		case <-done:
			if count++; o.Progress != nil {
				o.Progress(count, n)
			}
			continue
		case err := <-finished:
			for _, m := range made {
				sum.add(m)
			}
			if o.Progress != nil && err == nil {
				o.Progress(n, n)
			}
			return sum, err
		}
	}
}

func (s *estateSummary) add(o estateSummary) {
	s.Buildings += o.Buildings
	s.Spaces += o.Spaces
	s.Circuits += o.Circuits
	s.Dimmers += o.Dimmers
	s.Drivers += o.Drivers
	s.Fixtures += o.Fixtures
	s.Made += o.Made
}

// drawBuilding draws the building with a number. The four of a small estate hold every scene between them; those of a
// large one are mostly sound, with one driver in twenty or so that is not.
func drawBuilding(i int, o estateOptions) *sketch {
	if o.Fixtures == 0 {
		k := newSketch(invented[i].code)
		rooms := []struct {
			name, use, reach string
			height           float64
		}{{"Entrance hall", "hall", "tower", 5.5}, {"Corridor", "corridor", "steps", 2.9}, {"Room 1", "classroom", "steps", 3.0}, {"Reading room", "reading room", "tower", 4.2},
			{"Office", "office", "steps", 2.7}, {"Workshop", "workshop", "lift", 6.0}, {"Washroom", "washroom", "steps", 2.6}, {"Stair", "stair", "steps", 3.5}}
		at := 0
		next := func() {
			r := rooms[at%len(rooms)]
			k.room(fmt.Sprint(at/len(rooms)), r.name, r.use, r.reach, r.height)
			at++
		}
		for n, s := range sound {
			if n%2 == 0 {
				next()
			}
			s.draw(k)
		}
		for n, s := range faulty {
			if n%len(invented) == i {
				next()
				s.draw(k)
			}
		}
		for n, s := range sound {
			if n%2 == 1 {
				next()
			}
			s.draw(k)
		}
		return k
	}
	k := newSketch(fmt.Sprintf("SITE-%04d", i+1))
	r := rand.New(rand.NewPCG(uint64(i)+1, 2026))
	want := min(perBuilding, o.Fixtures-i*perBuilding)
	for room := 0; k.lit < want; room++ {
		k.room(fmt.Sprint(room/40), fmt.Sprintf("Room %d", room%40+1), []string{"office", "corridor", "classroom", "store"}[room%4], "steps", 3.0)
		for n := 0; n < 6 && k.lit < want; n++ {
			if r.Float64() < 0.10 {
				faulty[r.IntN(8)].draw(k)
			} else {
				sound[[]int{0, 0, 1, 3, 4, 6}[r.IntN(6)]].draw(k)
			}
		}
	}
	return k
}

// store writes what was drawn through the one door: the building, its records in one bulk, then what happened.
func (k *sketch) store(ctx context.Context, pool *pgxpool.Pool, reviewer *review.Reviewer, i int, at time.Time) (estateSummary, error) {
	sum := estateSummary{Buildings: 1, Spaces: len(k.bulk.Spaces), Circuits: len(k.bulk.Circuits), Dimmers: len(k.bulk.Dimmers), Drivers: len(k.bulk.Drivers), Fixtures: len(k.bulk.Fixtures)}
	id := idOf("building", k.code)
	there, err := site.Exists(ctx, pool, id)
	if err != nil || there {
		return sum, err
	}
	b := site.Building{Code: k.code, Name: fmt.Sprintf("Site %d (invented)", i+1), Address: "Nowhere", TimeZone: "Europe/Dublin", Cleanliness: "normal", Note: inventedNote,
		Supply: loading.Supply{MainsV: of(230.0), MainsHz: of(50.0), WiringRules: loading.IEC60364}}
	if i < len(invented) && k.code == invented[i].code {
		b.Name, b.Address = invented[i].name, invented[i].address
	}
	began := at.AddDate(-2, 0, 0)
	err = domain.In(ctx, pool, id, ours, began, func(s domain.Scope) error {
		fresh := b
		if err := site.CreateBuilding(ctx, s, &fresh); err != nil {
			return err
		}
		rate := site.Rate{Rate: site.EnergyRate, FromDate: "2024-01-01", Amount: "0.28", Currency: "EUR", Source: "invented"}
		rate.ID = k.id("rate", rate.Rate)
		if err := site.CreateRate(ctx, s, &rate); err != nil {
			return err
		}
		_, err := reviewer.Change(ctx, s, review.Touch{}, func(e *plant.Edit) error {
			sent := k.bulk.Clone()
			_, err := e.Upsert(ctx, &sent)
			return err
		})
		return err
	})
	if err != nil {
		return sum, err
	}
	t := telling{ctx: ctx, pool: pool, reviewer: reviewer, building: id, at: at}
	for _, tell := range k.events {
		if err := tell(&t); err != nil {
			return sum, err
		}
	}
	sum.Made = 1
	return sum, nil
}

// telling tells what happened in a building, each thing as of now.
type telling struct {
	ctx      context.Context
	pool     *pgxpool.Pool
	reviewer *review.Reviewer
	building domain.ID
	at       time.Time
}

func (t *telling) change(f func(*plant.Edit) error) error {
	return domain.In(t.ctx, t.pool, t.building, ours, t.at, func(s domain.Scope) error {
		_, err := t.reviewer.Change(t.ctx, s, review.Touch{}, f)
		return err
	})
}

func (t *telling) swap(w plant.Swap) error {
	return t.change(func(e *plant.Edit) error { _, err := e.Fit(t.ctx, w); return err })
}

func (t *telling) failure(f plant.Failure) error {
	return t.change(func(e *plant.Edit) error { sent := f; return e.Report(t.ctx, &sent) })
}

func (t *telling) test(x plant.EmergencyTest) error {
	return t.change(func(e *plant.Edit) error { sent := x; return e.Test(t.ctx, &sent) })
}

func (t *telling) trip(circuit domain.ID, at time.Time) error {
	return t.change(func(e *plant.Edit) error {
		return e.Tripped(t.ctx, &plant.Trip{CircuitID: circuit, TrippedAt: at})
	})
}

// storeCatalogue writes the invented models that are not there yet.
func storeCatalogue(ctx context.Context, pool *pgxpool.Pool, at time.Time) error {
	m := inventedModels()
	return domain.In(ctx, pool, domain.ID{}, ours, at, func(s domain.Scope) error {
		if err := storeMissing(ctx, s, plant.LampModels, "lamp_model", m.lamps); err != nil {
			return err
		}
		if err := storeMissing(ctx, s, plant.DriverModels, "driver_model", m.drivers); err != nil {
			return err
		}
		if err := storeMissing(ctx, s, plant.DimmerModels, "dimmer_model", m.dimmers); err != nil {
			return err
		}
		if err := storeMissing(ctx, s, plant.FixtureModels, "fixture_model", m.fixtures); err != nil {
			return err
		}
		if err := storeMissing(ctx, s, plant.Pairings, "pairing", m.pairings); err != nil {
			return err
		}
		if err := storeMissing(ctx, s, plant.Prices, "price", m.prices); err != nil {
			return err
		}
		return storeMissing(ctx, s, site.SpaceUses, "space_use", m.uses)
	})
}

func storeMissing[T any, P interface {
	*T
	CatalogueHead() *domain.CatalogueRow
	Validate() error
}](ctx context.Context, s domain.Scope, t *domain.Table[T], kind string, rows []P) error {
	for _, row := range rows {
		if _, err := t.Get(ctx, s, row.CatalogueHead().ID); err == nil {
			continue
		} else if domain.KindOf(err) != domain.NotFound {
			return err
		}
		if err := plant.CreateModel[T, P](ctx, s, t, row, kind); err != nil {
			return fmt.Errorf("%s: %w", kind, err)
		}
	}
	return nil
}

// drain makes the reviews that are owed.
func drain(ctx context.Context, pool *pgxpool.Pool, reviewer *review.Reviewer, now func() time.Time) error {
	for {
		if did, err := reviewer.DrainOne(ctx, pool, now); err != nil || !did {
			return err
		}
	}
}
