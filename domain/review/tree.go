// Package review is the one door to what loads what: it locks the trees a change touches, makes the change, judges
// the trees by the rules and stores what was found, all in one transaction. It also judges what is only proposed,
// and reviews a whole building.
package review

import (
	"bytes"
	"slices"
	"time"

	"lampward/calc/loading"
	"lampward/calc/retrofit"
	"lampward/domain"
	"lampward/domain/plant"
)

// A Tree is everything one finding can depend on, ready to be judged.
type Tree struct {
	ID        domain.ID
	System    loading.System
	RecheckAt *time.Time // when time alone changes what is found; nil: never
	Members   []Member   // records whose tree this is
}

// A Member is a place or circuit of a tree.
type Member struct {
	ID      domain.ID
	Circuit bool
	Stored  domain.ID // the tree the record names now
}

// hoursAYear turns burning hours a year into hours of the calendar: 365.25 days.
const hoursAYear = 8766

// builder puts records together into trees.
type builder struct {
	cat  *plant.Catalogue
	recs *plant.Records
	at   time.Time

	node   map[domain.ID]int // place or circuit -> node
	parent []int
	ids    []domain.ID

	circuit map[domain.ID]*plant.Circuit
	dimmer  map[domain.ID]*plant.Dimmer
	driver  map[domain.ID]*plant.Driver
	fixture map[domain.ID]*plant.Fixture
}

// Trees groups the records into trees and makes each ready to be judged with the models of cat as of at. It fails with
// Invalid where feeds make a circle or a control in the power path does not share the circuit it switches.
func Trees(cat *plant.Catalogue, recs *plant.Records, at time.Time) ([]Tree, error) {
	b := &builder{cat: cat, recs: recs, at: at,
		node:    make(map[domain.ID]int, len(recs.Circuits)+len(recs.Dimmers)+len(recs.Drivers)+len(recs.Fixtures)),
		circuit: make(map[domain.ID]*plant.Circuit, len(recs.Circuits)), dimmer: make(map[domain.ID]*plant.Dimmer, len(recs.Dimmers)),
		driver: make(map[domain.ID]*plant.Driver, len(recs.Drivers)), fixture: make(map[domain.ID]*plant.Fixture, len(recs.Fixtures))}
	for i := range recs.Circuits {
		k := &recs.Circuits[i]
		b.circuit[k.ID] = k
		b.add(k.ID)
	}
	for i := range recs.Dimmers {
		d := &recs.Dimmers[i]
		b.dimmer[d.ID] = d
		b.add(d.ID)
	}
	for i := range recs.Drivers {
		d := &recs.Drivers[i]
		b.driver[d.ID] = d
		b.add(d.ID)
	}
	for i := range recs.Fixtures {
		f := &recs.Fixtures[i]
		b.fixture[f.ID] = f
		b.add(f.ID)
	}
	b.join()
	return b.build()
}

func (b *builder) add(id domain.ID) {
	b.node[id] = len(b.parent)
	b.parent = append(b.parent, len(b.parent))
	b.ids = append(b.ids, id)
}

func (b *builder) root(i int) int {
	for b.parent[i] != i {
		b.parent[i] = b.parent[b.parent[i]]
		i = b.parent[i]
	}
	return i
}

// link joins two records where both are known; a link to a record outside (retired meanwhile) joins nothing.
func (b *builder) link(x domain.ID, y *domain.ID) {
	if y == nil {
		return
	}
	i, ok := b.node[x]
	j, ok2 := b.node[*y]
	if ok && ok2 {
		b.parent[b.root(i)] = b.root(j)
	}
}

// join links all that feeds, controls and residual-current devices join.
func (b *builder) join() {
	for id := range b.node {
		if h := b.head(id); h != nil {
			b.link(id, h.FedByCircuitID)
			b.link(id, h.FedByPlaceID)
		}
	}
	for i := range b.recs.Feeds {
		f := &b.recs.Feeds[i]
		b.link(f.PlaceID, f.FromCircuitID)
		b.link(f.PlaceID, f.FromPlaceID)
	}
	for i := range b.recs.Controls {
		c := &b.recs.Controls[i]
		b.link(c.DimmerID, c.PlaceID)
		b.link(c.DimmerID, c.CircuitID)
	}
	type device struct{ board, name string }
	first := map[device]domain.ID{}
	for i := range b.recs.Circuits {
		k := &b.recs.Circuits[i]
		if k.RCD == "" || k.RCD == "none" {
			continue
		}
		d := device{k.Board, k.RCD}
		if id, ok := first[d]; ok {
			b.link(k.ID, &id)
		} else {
			first[d] = k.ID
		}
	}
}

// head returns what the place with this id has in common with others; nil for a circuit.
func (b *builder) head(id domain.ID) *plant.PlaceHead {
	if f := b.fixture[id]; f != nil {
		return &f.PlaceHead
	}
	if d := b.driver[id]; d != nil {
		return &d.PlaceHead
	}
	if d := b.dimmer[id]; d != nil {
		return &d.PlaceHead
	}
	return nil
}

// build makes one Tree of every component.
func (b *builder) build() ([]Tree, error) {
	at := map[int]int{} // root -> position in out
	var out []Tree
	tree := func(id domain.ID) *Tree {
		root := b.root(b.node[id])
		i, ok := at[root]
		if !ok {
			i = len(out)
			at[root] = i
			out = append(out, Tree{System: loading.System{Supply: b.recs.Building.Supply, Pairings: b.cat.Pairings}})
		}
		return &out[i]
	}
	x := newIndex(b)
	for i := range b.recs.Circuits {
		k := &b.recs.Circuits[i]
		t := tree(k.ID)
		t.Members = append(t.Members, Member{k.ID, true, k.TreeID})
		x.circuit[k.ID] = len(t.System.Circuits)
		t.System.Circuits = append(t.System.Circuits, b.makeCircuit(k, x, t))
	}
	for i := range b.recs.Dimmers {
		d := &b.recs.Dimmers[i]
		t := tree(d.ID)
		t.Members = append(t.Members, Member{d.ID, false, d.TreeID})
		x.dimmer[d.ID] = len(t.System.Dimmers)
		t.System.Dimmers = append(t.System.Dimmers, b.makeDimmer(d, x, t))
	}
	if err := b.sources(x); err != nil {
		return nil, err
	}
	for i := range b.recs.Dimmers {
		d := &b.recs.Dimmers[i]
		tree(d.ID).System.Dimmers[x.dimmer[d.ID]].Circuit = x.circuitOf(d.ID)
	}
	for i := range b.recs.Drivers {
		d := &b.recs.Drivers[i]
		t := tree(d.ID)
		t.Members = append(t.Members, Member{d.ID, false, d.TreeID})
		x.driver[d.ID] = len(t.System.Drivers)
		t.System.Drivers = append(t.System.Drivers, b.makeDriver(d, x, t))
	}
	for i := range b.recs.Fixtures {
		f := &b.recs.Fixtures[i]
		t := tree(f.ID)
		t.Members = append(t.Members, Member{f.ID, false, f.TreeID})
		b.addFixture(f, x, t)
	}
	if err := b.checkControls(x); err != nil {
		return nil, err
	}
	for i := range out {
		out[i].ID = identity(out[i].Members)
	}
	slices.SortFunc(out, func(a, c Tree) int { return bytes.Compare(a.ID[:], c.ID[:]) })
	return out, nil
}

// identity returns the id a tree is known by: that of its first circuit, else of its first place.
func identity(members []Member) domain.ID {
	best := members[0]
	for _, m := range members[1:] {
		if m.Circuit != best.Circuit {
			if m.Circuit {
				best = m
			}
			continue
		}
		if bytes.Compare(m.ID[:], best.ID[:]) < 0 {
			best = m
		}
	}
	return best.ID
}

// sooner keeps the earlier of the tree's recheck and t, where t lies ahead.
func (t *Tree) sooner(when, now time.Time) {
	if when.After(now) && (t.RecheckAt == nil || when.Before(*t.RecheckAt)) {
		t.RecheckAt = &when
	}
}

// since is one entry of what happened at a place in the last twelve months, or is still open.
type happened struct {
	part, mode string
	holder     int
	at         time.Time
	open       bool
}

// index finds records by id while trees are built.
type index struct {
	b        *builder
	circuit  map[domain.ID]int // position in its own system
	dimmer   map[domain.ID]int
	driver   map[domain.ID]int
	source   map[domain.ID]source
	odd      map[domain.ID][]plant.OddLamp
	failed   map[domain.ID][]happened
	trips    map[domain.ID][]time.Time
	tests    map[domain.ID][]*plant.EmergencyTest
	feeds    map[domain.ID]int
	controls map[domain.ID][]*plant.ControlLink // by the place or circuit acted on
}

// source is what is found going up a place's normal feed.
type source struct {
	driver  domain.ID   // nearest control gear; zero: none
	output  int         // of that gear
	circuit domain.ID   // at the far end; zero: unknown
	through []domain.ID // dimmers the feed passes on its way to the circuit or the gear
}

func newIndex(b *builder) *index {
	x := &index{b: b, circuit: map[domain.ID]int{}, dimmer: map[domain.ID]int{}, driver: map[domain.ID]int{},
		source: make(map[domain.ID]source, len(b.node)), odd: map[domain.ID][]plant.OddLamp{}, failed: map[domain.ID][]happened{},
		trips: map[domain.ID][]time.Time{}, tests: map[domain.ID][]*plant.EmergencyTest{}, feeds: map[domain.ID]int{},
		controls: map[domain.ID][]*plant.ControlLink{}}
	for _, o := range b.recs.Odd {
		x.odd[o.PlaceID] = append(x.odd[o.PlaceID], o)
	}
	for _, f := range b.recs.Failures {
		x.failed[f.PlaceID] = append(x.failed[f.PlaceID], happened{f.Part, f.Mode, f.Holder, f.NoticedAt, f.Open})
	}
	for _, t := range b.recs.Trips {
		x.trips[t.CircuitID] = append(x.trips[t.CircuitID], t.TrippedAt)
	}
	for i := range b.recs.Tests {
		t := &b.recs.Tests[i]
		x.tests[t.PlaceID] = append(x.tests[t.PlaceID], t)
	}
	for i := range b.recs.Feeds {
		x.feeds[b.recs.Feeds[i].PlaceID]++
	}
	for i := range b.recs.Controls {
		c := &b.recs.Controls[i]
		switch {
		case c.PlaceID != nil:
			x.controls[*c.PlaceID] = append(x.controls[*c.PlaceID], c)
		case c.CircuitID != nil:
			x.controls[*c.CircuitID] = append(x.controls[*c.CircuitID], c)
		}
	}
	return x
}

func (x *index) circuitOf(place domain.ID) int {
	if i, ok := x.circuit[x.source[place].circuit]; ok {
		return i
	}
	return -1
}

// sources follows every place's feed up to its circuit. It fails with Invalid where feeds make a circle.
func (b *builder) sources(x *index) error {
	for id := range b.node {
		h := b.head(id)
		if h == nil {
			continue
		}
		var s source
		if h.FedOutput != nil {
			s.output = *h.FedOutput
		}
		for steps := 0; h != nil; steps++ {
			if steps > len(b.node) {
				return &domain.Error{Kind: domain.Invalid, Msg: "the feeds make a circle: " + h.Tag + " is fed by itself in the end",
					Fields: []domain.Field{{Pointer: "/fed_by_place_id", Detail: "must not lead back to the place itself"}}}
			}
			if h.FedByCircuitID != nil {
				if b.circuit[*h.FedByCircuitID] != nil {
					s.circuit = *h.FedByCircuitID
				}
				break
			}
			if h.FedByPlaceID == nil {
				break
			}
			up := *h.FedByPlaceID
			switch {
			case b.dimmer[up] != nil:
				s.through = append(s.through, up)
			case b.driver[up] != nil && s.driver.IsZero() && b.fixture[id] != nil:
				s.driver = up
			}
			h = b.head(up)
		}
		x.source[id] = s
	}
	return nil
}

// checkControls refuses a control in the power path of something on another circuit.
func (b *builder) checkControls(x *index) error {
	for i := range b.recs.Controls {
		c := &b.recs.Controls[i]
		if c.Path != loading.PowerPath {
			continue
		}
		own := x.source[c.DimmerID].circuit
		other := domain.ID{}
		if c.CircuitID != nil {
			other = *c.CircuitID
		} else {
			other = x.source[*c.PlaceID].circuit
		}
		if !own.IsZero() && !other.IsZero() && own != other {
			tag := c.DimmerID.String()
			if d := b.dimmer[c.DimmerID]; d != nil {
				tag = d.Tag
			}
			return &domain.Error{Kind: domain.Invalid, Msg: "dimmer " + tag + " cannot carry a load of another circuit than its own; a control line is a signal",
				Fields: []domain.Field{{Pointer: "/path", Detail: "must be signal where the circuits differ"}}}
		}
	}
	return nil
}

// Check judges a tree with c.
func (t *Tree) Check(c *retrofit.Checker) retrofit.Result { return c.Check(&t.System) }
