package review

import (
	"context"

	"lampward/calc/loading"
	"lampward/calc/retrofit"
	"lampward/domain"
)

// Load is one line of the picture "load against window".
type Load = retrofit.Load

// A FeedTree is what hangs on a circuit, step by step, with the load at each.
type FeedTree struct {
	CircuitID domain.ID  `json:"circuit_id"`
	Label     string     `json:"label"` // board and way
	Loads     []Load     `json:"loads"`
	Children  []TreeNode `json:"children"`
}

// A TreeNode is a dimmer, a driver or a luminaire on a circuit.
type TreeNode struct {
	Kind     string      `json:"kind"`
	ID       domain.ID   `json:"id"`
	Label    string      `json:"label"`
	SpaceID  *domain.ID  `json:"space_id,omitempty"`
	Model    string      `json:"model,omitempty"` // absent: nobody looked
	Lamps    []TreeLamps `json:"lamps,omitempty"`
	Loads    []Load      `json:"loads"`
	Children []TreeNode  `json:"children"`
}

// TreeLamps is a number of lamps of one model in a luminaire.
type TreeLamps struct {
	Model  string   `json:"model,omitempty"`
	Count  int      `json:"count"`
	PowerW *float64 `json:"power_w,omitempty"` // of one
}

// Feeds returns the tree of one circuit in s's building. It fails with NotFound where there is none in use.
func (r *Reviewer) Feeds(ctx context.Context, s domain.Scope, circuit domain.ID) (FeedTree, error) {
	cat, err := r.Shelf.At(ctx, s)
	if err != nil {
		return FeedTree{}, err
	}
	t, recs, err := treeWith(ctx, s, cat, circuit)
	if err != nil {
		return FeedTree{}, err
	}
	f := feeder{sys: &t.System, labels: Labels(recs), spaces: map[domain.ID]*domain.ID{}, loads: map[retrofit.Subject][]Load{}}
	at := -1
	for i := range f.sys.Circuits {
		if domain.ID(f.sys.Circuits[i].Key) == circuit {
			at = i
		}
	}
	if at < 0 {
		return FeedTree{}, domain.NotFoundf("there is no such circuit in use")
	}
	for i := range recs.Dimmers {
		f.spaces[recs.Dimmers[i].ID] = recs.Dimmers[i].SpaceID
	}
	for i := range recs.Drivers {
		f.spaces[recs.Drivers[i].ID] = recs.Drivers[i].SpaceID
	}
	for i := range recs.Fixtures {
		f.spaces[recs.Fixtures[i].ID] = recs.Fixtures[i].SpaceID
	}
	for _, l := range retrofit.Loads(f.sys) {
		f.loads[l.Subject] = append(f.loads[l.Subject], l)
	}
	return FeedTree{CircuitID: circuit, Label: f.labels[circuit],
		Loads: f.loadsOf(retrofit.Subject{Kind: retrofit.OnCircuit, Index: at, Key: f.sys.Circuits[at].Key}), Children: f.under(at)}, nil
}

// feeder draws the tree of a circuit.
type feeder struct {
	sys    *loading.System
	labels map[domain.ID]string
	spaces map[domain.ID]*domain.ID
	loads  map[retrofit.Subject][]Load
}

func (f *feeder) loadsOf(s retrofit.Subject) []Load {
	if l := f.loads[s]; l != nil {
		return l
	}
	return []Load{}
}

// dimmedBy is the first dimmer in the power path of some controls, -1 if there is none.
func dimmedBy(controls []loading.Controlled) int {
	for _, c := range controls {
		if c.Path == loading.PowerPath {
			return c.Dimmer
		}
	}
	return -1
}

// under gathers what hangs on a circuit: dimmers with what they pass on, then what hangs on it directly.
func (f *feeder) under(circuit int) []TreeNode {
	out := []TreeNode{}
	for i := range f.sys.Dimmers {
		if d := &f.sys.Dimmers[i]; d.Circuit == circuit {
			n := f.node("dimmer", d.Key)
			if d.Model != nil {
				n.Model = d.Model.Name
			}
			n.Loads = f.loadsOf(retrofit.Subject{Kind: retrofit.OnDimmer, Index: i, Key: d.Key})
			n.Children = f.behind(circuit, i)
			out = append(out, n)
		}
	}
	return append(out, f.behind(circuit, -1)...)
}

// behind gathers the gear and luminaires of a circuit that a dimmer passes its power to; -1: those without one.
func (f *feeder) behind(circuit, dimmer int) []TreeNode {
	out := []TreeNode{}
	for i := range f.sys.Drivers {
		d := &f.sys.Drivers[i]
		if d.Integral || d.Circuit != circuit || dimmedBy(d.Controls) != dimmer {
			continue
		}
		n := f.node("driver", d.Key)
		if d.Model != nil {
			n.Model = d.Model.Name
		}
		n.Loads = f.loadsOf(retrofit.Subject{Kind: retrofit.OnDriver, Index: i, Key: d.Key})
		for j := range f.sys.Fixtures {
			if f.sys.Fixtures[j].Driver == i {
				n.Children = append(n.Children, f.fixture(j))
			}
		}
		out = append(out, n)
	}
	for j := range f.sys.Fixtures {
		x := &f.sys.Fixtures[j]
		if x.Circuit != circuit || x.Driver >= 0 && !f.sys.Drivers[x.Driver].Integral {
			continue
		}
		controls := x.Controls
		if x.Driver >= 0 {
			controls = f.sys.Drivers[x.Driver].Controls
		}
		if dimmedBy(controls) == dimmer {
			out = append(out, f.fixture(j))
		}
	}
	return out
}

func (f *feeder) fixture(j int) TreeNode {
	x := &f.sys.Fixtures[j]
	n := f.node("fixture", x.Key)
	if x.Model != nil {
		n.Model = x.Model.Name
	}
	if x.Driver >= 0 && f.sys.Drivers[x.Driver].Integral {
		n.Loads = f.loadsOf(retrofit.Subject{Kind: retrofit.OnDriver, Index: x.Driver, Key: f.sys.Drivers[x.Driver].Key})
	}
	for _, g := range x.Lamps {
		l := TreeLamps{Count: g.Count}
		if g.Model != nil {
			l.Model, l.PowerW = g.Model.Name, g.Model.PowerW
		}
		n.Lamps = append(n.Lamps, l)
	}
	return n
}

func (f *feeder) node(kind string, key loading.Key) TreeNode {
	id := domain.ID(key)
	return TreeNode{Kind: kind, ID: id, Label: f.labels[id], SpaceID: f.spaces[id], Loads: []Load{}, Children: []TreeNode{}}
}
