package review

import (
	"context"
	"crypto/sha256"
	"encoding/binary"
	"time"

	"github.com/jackc/pgx/v5"

	"lampward/calc/loading"
	"lampward/calc/retrofit"
	"lampward/domain"
	"lampward/domain/event"
)

// Step is one line of arithmetic behind a finding.
type Step = loading.Step

// RuleSet is the version of the rules this program judges by.
const RuleSet = retrofit.RuleSet

// A Finding is a rule that fires on a place or circuit, from when it opened until it cleared.
type Finding struct {
	BuildingID    domain.ID  `json:"building_id"`
	ID            domain.ID  `json:"id"`
	TreeID        domain.ID  `json:"-" db:"tree_id"`
	Rule          string     `json:"rule"`
	Severity      string     `json:"severity"` // danger, high, medium, low
	Sureness      string     `json:"sureness"` // recorded, on_range, screening
	Blocks        bool       `json:"blocks"`   // refuses a proposal that brings or worsens it
	FactSource    string     `json:"fact_source"`
	SubjectKind   string     `json:"subject_kind"`
	SubjectID     domain.ID  `json:"subject_id"`
	LampModelID   *domain.ID `json:"lamp_model_id,omitempty"` // the cause
	DriverModelID *domain.ID `json:"driver_model_id,omitempty"`
	DimmerModelID *domain.ID `json:"dimmer_model_id,omitempty"`
	Lamps         int        `json:"lamps"` // lamps affected
	Sentence      string     `json:"sentence"`
	Steps         []Step     `json:"steps"`
	Excess        float64    `json:"excess"` // how many times the limit; 0: no number
	RuleSet       int        `json:"rule_set"`
	InputHash     []byte     `json:"-" db:"input_hash"`
	OpenedAt      time.Time  `json:"opened_at"`
	UpdatedAt     time.Time  `json:"updated_at"`
	ClearedAt     *time.Time `json:"cleared_at,omitempty"`

	Why      string   `json:"why" db:"-"`
	Basis    string   `json:"basis" db:"-"`
	Remedy   string   `json:"remedy" db:"-"`
	Cautions []string `json:"cautions" db:"-"`
	Tag      string   `json:"tag,omitempty" db:"-"`    // label of the subject, where it was asked for
	Waiver   *Waiver  `json:"waiver,omitempty" db:"-"` // in effect now
}

// Findings is the table of findings.
var Findings = domain.NewTable[Finding]("finding", "finding")

// explain adds what the rule itself says.
func (f *Finding) explain() {
	if r, ok := retrofit.RuleOf(f.Rule); ok {
		f.Why, f.Basis, f.Remedy, f.Cautions = r.Why, r.Basis, r.Remedy, r.Cautions
	}
	if f.Cautions == nil {
		f.Cautions = []string{}
	}
}

// findingKey tells findings of one subject apart.
type findingKey struct {
	rule            string
	kind            string
	subject         domain.ID
	lamp, gear, dim domain.ID
}

func (f *Finding) key() findingKey {
	return findingKey{f.Rule, f.SubjectKind, f.SubjectID, zeroOr(f.LampModelID), zeroOr(f.DriverModelID), zeroOr(f.DimmerModelID)}
}

func zeroOr(id *domain.ID) domain.ID {
	if id == nil {
		return domain.ID{}
	}
	return *id
}

func keyOrNil(k loading.Key) *domain.ID {
	if k == (loading.Key{}) {
		return nil
	}
	id := domain.ID(k)
	return &id
}

// newFinding turns a result of the arithmetic into a record.
func newFinding(s domain.Scope, tree domain.ID, f *retrofit.Finding) Finding {
	out := Finding{BuildingID: s.Building, TreeID: tree, Rule: f.Rule, Severity: string(f.Severity), Sureness: string(f.Sureness),
		Blocks: f.Blocks, FactSource: f.Source, SubjectKind: string(f.Subject.Kind), SubjectID: domain.ID(f.Subject.Key),
		LampModelID: keyOrNil(f.Lamp), DriverModelID: keyOrNil(f.Gear), DimmerModelID: keyOrNil(f.Control), Lamps: f.Lamps,
		Sentence: f.Sentence, Steps: f.Steps, Excess: f.Excess, RuleSet: RuleSet, OpenedAt: s.At, UpdatedAt: s.At,
		Basis: f.Basis, Remedy: f.Remedy, Cautions: f.Cautions}
	if out.Steps == nil {
		out.Steps = []Step{}
	}
	out.InputHash = inputHash(&out)
	return out
}

// inputHash covers what the finding rests on: the rule, how it came out, the models and the numbers of its arithmetic.
// A label or a name may change without ending a waiver.
func inputHash(f *Finding) []byte {
	h := sha256.New()
	put := func(s string) {
		var n [4]byte
		binary.BigEndian.PutUint32(n[:], uint32(len(s)))
		h.Write(n[:])
		h.Write([]byte(s))
	}
	put(f.Rule)
	put(f.Severity)
	put(f.Sureness)
	for _, id := range []*domain.ID{f.LampModelID, f.DriverModelID, f.DimmerModelID} {
		v := zeroOr(id)
		h.Write(v[:])
	}
	for _, step := range f.Steps {
		put(step.Sum)
	}
	return h.Sum(nil)
}

// A question as it is stored: one field, asked about one model or place, in one tree.
type asked struct {
	BuildingID domain.ID `json:"building_id"`
	ID         domain.ID `json:"id"`
	TreeID     domain.ID `json:"tree_id"`
	Field      string    `json:"field"`
	AboutKind  string    `json:"about_kind"`
	AboutID    domain.ID `json:"about_id"`
	WithID     domain.ID `json:"with_id"`
	Rule       string    `json:"rule"`
	Severity   string    `json:"severity"`
	Blocks     bool      `json:"blocks"`
	Places     int       `json:"places"`
	AskedAt    time.Time `json:"asked_at"`
}

var questions = domain.NewTable[asked]("question", "question")

type questionKey struct {
	tree        domain.ID
	field, kind string
	about, with domain.ID
}

func (q *asked) key() questionKey {
	return questionKey{q.TreeID, q.Field, q.AboutKind, q.AboutID, q.WithID}
}

// wanted is what a review says should stand, before it is compared with what does.
type wanted struct {
	s         domain.Scope
	findings  map[findingKey]*Finding
	order     []findingKey
	questions map[questionKey]*asked
	trees     map[domain.ID]*noted
}

// noted is what a review notes of a tree.
type noted struct {
	places, known int
	recheck       *time.Time
}

func (n *noted) same(o *noted) bool {
	return n.places == o.places && n.known == o.known &&
		(n.recheck == nil && o.recheck == nil || n.recheck != nil && o.recheck != nil && n.recheck.Equal(*o.recheck))
}

func newWanted(s domain.Scope) *wanted {
	return &wanted{s: s, findings: map[findingKey]*Finding{}, questions: map[questionKey]*asked{}, trees: map[domain.ID]*noted{}}
}

func (w *wanted) add(t *Tree, res retrofit.Result) {
	for i := range res.Findings {
		f := newFinding(w.s, t.ID, &res.Findings[i])
		k := f.key()
		if have := w.findings[k]; have != nil {
			// Two findings of one rule on one subject with one cause are told once, the worse of the two.
			if retrofit.Severity(have.Severity).Rank() >= retrofit.Severity(f.Severity).Rank() {
				continue
			}
		} else {
			w.order = append(w.order, k)
		}
		w.findings[k] = &f
	}
	for i := range res.Questions {
		q := &res.Questions[i]
		a := asked{BuildingID: w.s.Building, TreeID: t.ID, Field: string(q.Field), AboutKind: q.About.Kind, AboutID: domain.ID(q.About.Key),
			WithID: domain.ID(q.About.With), Rule: q.Rule, Severity: string(q.Severity), Blocks: q.Blocks, Places: q.Places, AskedAt: w.s.At}
		if have := w.questions[a.key()]; have != nil {
			have.Places += a.Places
			continue
		}
		w.questions[a.key()] = &a
	}
	n := &noted{places: res.Coverage.Places, known: res.Coverage.Known}
	if t.RecheckAt != nil {
		at := t.RecheckAt.Truncate(time.Microsecond)
		n.recheck = &at
	}
	if n.places > 0 || n.recheck != nil {
		w.trees[t.ID] = n
	}
}

// store compares with what stands for the given trees and writes the difference. A finding of a newer rule set than
// this program's is left alone, and its tree is noted for those who know the newer one.
func (w *wanted) store(ctx context.Context, s domain.Scope, trees []domain.ID) (Outcome, error) {
	ids := domain.IDs(trees)
	var findings []Finding
	var open []asked
	known := map[domain.ID]*noted{}
	var read pgx.Batch
	read.Queue(`SELECT `+Findings.List("")+` FROM finding WHERE building_id = $1 AND tree_id = ANY($2) AND cleared_at IS NULL`, s.Building, ids).
		Query(func(rows pgx.Rows) error {
			return Findings.Scan(rows, func(f *Finding) error { findings = append(findings, *f); return nil })
		})
	read.Queue(`SELECT `+questions.List("")+` FROM question WHERE building_id = $1 AND tree_id = ANY($2)`, s.Building, ids).
		Query(func(rows pgx.Rows) error {
			return questions.Scan(rows, func(q *asked) error { open = append(open, *q); return nil })
		})
	read.Queue(`SELECT tree_id, places, known, recheck_at FROM tree WHERE building_id = $1 AND tree_id = ANY($2)`, s.Building, ids).
		Query(func(rows pgx.Rows) error {
			for rows.Next() {
				var id domain.ID
				var n noted
				if err := rows.Scan(&id, &n.places, &n.known, &n.recheck); err != nil {
					return err
				}
				known[id] = &n
			}
			return rows.Err()
		})
	if err := s.SendBatch(ctx, &read).Close(); err != nil {
		return Outcome{}, domain.Classify(err, "finding")
	}
	out := Outcome{Opened: []Finding{}, Changed: []Finding{}, Cleared: []Finding{}}
	var write pgx.Batch
	if err := w.storeFindings(ctx, s, findings, &write, &out); err != nil {
		return Outcome{}, err
	}
	if err := w.storeQuestions(ctx, s, open, &write); err != nil {
		return Outcome{}, err
	}
	w.storeTrees(s, known, &write)
	if write.Len() == 0 {
		return out, nil
	}
	return out, domain.Classify(s.SendBatch(ctx, &write).Close(), "finding")
}

func (w *wanted) storeFindings(ctx context.Context, s domain.Scope, standing []Finding, write *pgx.Batch, out *Outcome) error {
	newer := map[domain.ID]bool{}
	kept := map[findingKey]bool{}
	for i := range standing {
		was := &standing[i]
		k := was.key()
		want := w.findings[k]
		switch {
		case was.RuleSet > RuleSet:
			newer[was.TreeID] = true
			kept[k] = true
		case want == nil || kept[k]:
			was.ClearedAt, was.UpdatedAt = &s.At, s.At
			write.Queue(`UPDATE finding SET cleared_at = $3, updated_at = $3 WHERE building_id = $1 AND id = $2`, s.Building, was.ID, s.At)
			was.explain()
			out.Cleared = append(out.Cleared, *was)
			event.Record(s, event.Act{Action: "finding.cleared", Kind: "finding", ID: was.ID, Body: was, Only: "event"})
		default:
			kept[k] = true
			if string(was.InputHash) == string(want.InputHash) && was.RuleSet == RuleSet && was.TreeID == want.TreeID &&
				was.Blocks == want.Blocks && was.Lamps == want.Lamps && was.Sentence == want.Sentence && was.FactSource == want.FactSource {
				continue
			}
			want.ID, want.OpenedAt = was.ID, was.OpenedAt
			write.Queue(`
				UPDATE finding
				   SET tree_id = $3, severity = $4, sureness = $5, blocks = $6, fact_source = $7, lamps = $8, sentence = $9,
				       steps = $10, excess = $11, rule_set = $12, input_hash = $13, updated_at = $14
				 WHERE building_id = $1 AND id = $2`, s.Building, was.ID, want.TreeID, want.Severity, want.Sureness, want.Blocks,
				want.FactSource, want.Lamps, want.Sentence, want.Steps, want.Excess, want.RuleSet, want.InputHash, s.At)
			if string(was.InputHash) != string(want.InputHash) {
				want.explain()
				out.Changed = append(out.Changed, *want)
				event.Record(s, event.Act{Action: "finding.changed", Kind: "finding", ID: want.ID, Body: want, Only: "event"})
			}
		}
	}
	var opened []*Finding
	for _, k := range w.order {
		if !kept[k] {
			f := w.findings[k]
			f.ID = domain.NewID()
			f.explain()
			opened = append(opened, f)
			out.Opened = append(out.Opened, *f)
			event.Record(s, event.Act{Action: "finding.opened", Kind: "finding", ID: f.ID, Body: f, Only: "event"})
		}
	}
	for tree := range newer {
		if err := event.ReviewDue(ctx, s, event.Due{Building: &s.Building, Tree: &tree, Why: "judged by a newer rule set"}); err != nil {
			return err
		}
	}
	if len(opened) == 0 {
		return nil
	}
	return Findings.Copy(ctx, s, len(opened), func(i int) *Finding { return opened[i] })
}

func (w *wanted) storeQuestions(ctx context.Context, s domain.Scope, open []asked, write *pgx.Batch) error {
	var gone []domain.ID
	for i := range open {
		was := &open[i]
		want := w.questions[was.key()]
		if want == nil {
			gone = append(gone, was.ID)
			continue
		}
		if want.Rule != was.Rule || want.Severity != was.Severity || want.Places != was.Places || want.Blocks != was.Blocks {
			write.Queue(`UPDATE question SET rule = $3, severity = $4, places = $5, blocks = $6 WHERE building_id = $1 AND id = $2`,
				s.Building, was.ID, want.Rule, want.Severity, want.Places, want.Blocks)
		}
		delete(w.questions, was.key())
	}
	if gone != nil {
		write.Queue(`DELETE FROM question WHERE building_id = $1 AND id = ANY($2)`, s.Building, domain.IDs(gone))
	}
	fresh := make([]*asked, 0, len(w.questions))
	for _, q := range w.questions {
		q.ID = domain.NewID()
		fresh = append(fresh, q)
	}
	if len(fresh) == 0 {
		return nil
	}
	return questions.Copy(ctx, s, len(fresh), func(i int) *asked { return fresh[i] })
}

func (w *wanted) storeTrees(s domain.Scope, standing map[domain.ID]*noted, write *pgx.Batch) {
	var gone, ids []domain.ID
	var places, known []int
	var recheck []*time.Time
	for id := range standing {
		if w.trees[id] == nil {
			gone = append(gone, id)
		}
	}
	for id, n := range w.trees {
		if was := standing[id]; was == nil || !was.same(n) {
			ids, places, known, recheck = append(ids, id), append(places, n.places), append(known, n.known), append(recheck, n.recheck)
		}
	}
	if gone != nil {
		write.Queue(`DELETE FROM tree WHERE building_id = $1 AND tree_id = ANY($2)`, s.Building, domain.IDs(gone))
	}
	if ids != nil {
		write.Queue(`
			INSERT INTO tree (building_id, tree_id, places, known, recheck_at)
			SELECT $1, n.tree_id, n.places, n.known, n.recheck_at
			  FROM unnest($2::uuid[], $3::int[], $4::int[], $5::timestamptz[]) AS n (tree_id, places, known, recheck_at)
			    ON CONFLICT (building_id, tree_id) DO UPDATE
			   SET places = excluded.places, known = excluded.known, recheck_at = excluded.recheck_at`,
			s.Building, domain.IDs(ids), places, known, recheck)
	}
}
