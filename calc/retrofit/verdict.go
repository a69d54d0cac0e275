package retrofit

import (
	"cmp"
	"slices"
)

// An Answer is the answer to "may I fit this here?".
type Answer string

// Answers.
const (
	Fit       Answer = "fit"
	FitOnlyIf Answer = "fit_only_if" // something is not known, or has to be put right
	DoNotFit  Answer = "do_not_fit"
)

// Advice is the answer with its reasons.
type Advice struct {
	Answer    Answer     `json:"answer"`
	Sum       string     `json:"sum"`                  // the answer's arithmetic in one line
	Findings  []Finding  `json:"findings,omitempty"`   // what the proposal brings or has part in, the worst first
	Missing   []Question `json:"missing,omitempty"`    // facts that could change the answer, the most useful first
	ToConfirm []Question `json:"to_confirm,omitempty"` // facts not known that seldom change it
}

// Verdict answers "may I fit this here?" from a check of the places as they are and one of them as proposed, with what
// would be fitted marked as proposed. Before may be empty for a place nobody has recorded.
//
// It says no where the proposal brings or worsens a blocking finding, or has part in one; yes only where nothing above
// Low comes of it and nothing that could turn the answer is unknown. What is unknown and seldom matters is told as to be
// confirmed: of a place nobody has recorded that is all that cannot be seen from a ladder.
func Verdict(before, after Result) Advice {
	concerns := newOrProposed(before, after)
	a := Advice{Answer: Fit, Sum: after.Sum}
	refused := false
	worse := Compare(before, after)
	for i := range after.Findings {
		f := &after.Findings[i]
		brought := f.Blocks && slices.ContainsFunc(worse, func(w Finding) bool {
			return w.Rule == f.Rule && w.Subject == f.Subject && w.Lamp == f.Lamp && w.Sentence == f.Sentence
		})
		if !brought && !concerns(f) {
			continue
		}
		a.Findings = append(a.Findings, *f)
		refused = refused || f.Blocks
		if f.Severity != Low {
			a.Answer = FitOnlyIf
		}
	}
	slices.SortStableFunc(a.Findings, func(x, y Finding) int {
		// Of two that weigh the same, the one with a number says more.
		return cmp.Or(boolCompare(y.Blocks, x.Blocks), cmp.Compare(Weight(y.Severity, y.Lamps), Weight(x.Severity, x.Lamps)), cmp.Compare(y.Excess, x.Excess))
	})
	bare := before.Coverage.Places == 0 && len(before.Findings) == 0 && len(before.Questions) == 0
	for _, q := range missing(before, after) {
		if q.decides(bare) {
			a.Missing = append(a.Missing, q)
		} else {
			a.ToConfirm = append(a.ToConfirm, q)
		}
	}
	if len(a.Missing) > 0 || after.Coverage.Places == 0 {
		a.Answer = FitOnlyIf
	}
	if refused {
		a.Answer = DoNotFit
	}
	switch {
	case len(a.Findings) > 0 && a.Findings[0].Severity != Low || refused:
		a.Sum = a.Findings[0].Sentence
	case a.Sum == "" && len(a.Missing) > 0:
		a.Sum = "Not known: " + a.Missing[0].Field.Text().Ask + "."
	case a.Sum == "":
		a.Sum = "Nothing is on record that could be judged."
	}
	return a
}

func boolCompare(a, b bool) int {
	switch {
	case a == b:
		return 0
	case a:
		return 1
	}
	return -1
}

// newOrProposed tells which findings of after concern the proposal: it has part in them, or they were not there
// before.
func newOrProposed(before, after Result) func(*Finding) bool {
	type key struct {
		rule    string
		subject Subject
	}
	was := make(map[key]Severity)
	for i := range before.Findings {
		f := &before.Findings[i]
		k := key{f.Rule, f.Subject}
		if f.Severity.Rank() > was[k].Rank() {
			was[k] = f.Severity
		}
	}
	return func(f *Finding) bool {
		s, had := was[key{f.Rule, f.Subject}]
		return f.Proposed || !had || f.Severity.Rank() > s.Rank()
	}
}

// missing are the questions the proposal waits for: it has part in them, or they were not asked before. Where nothing
// is marked as proposed all of them count.
func missing(before, after Result) []Question {
	asked := make(map[questionKey]bool)
	for i := range before.Questions {
		asked[questionKey{before.Questions[i].Field, before.Questions[i].About}] = true
	}
	var out []Question
	for _, q := range after.Questions {
		if q.Proposed || !after.marked || !asked[questionKey{q.Field, q.About}] {
			out = append(out, q)
		}
	}
	// One place: what can refuse comes first, then by severity at stake.
	slices.SortStableFunc(out, func(x, y Question) int {
		return cmp.Or(boolCompare(y.Blocks, x.Blocks), cmp.Compare(y.Severity.Rank(), x.Severity.Rank()))
	})
	return out
}
