// Package retrofit holds the hazard rules: what makes a lamp, its control gear, its dimmer, its luminaire or its
// circuit unsafe or unsuitable, and what may be fitted instead.
//
// Each rule is one entry of one table with its severity, why it matters, what it rests on and what to do. Check
// evaluates all of them on a loading.System and answers with findings (each with a plain sentence and the
// arithmetic), with questions where a fact is missing that could change the outcome, and with a coverage figure.
//
// A missing rating never passes a check and is never silently replaced. Where a plausible range for it is stated
// (Ranges), the rule is worked out at both ends: neither fails, nothing is said; both fail, the finding is raised
// and says that it rests on the range; they differ, it becomes a question.
//
// To add a rule: write its entry in the table of its family (driver_rule.go, tube_rule.go ...) with a check on a
// driver, a luminaire, a dimmer or a circuit that calls found or ask; raise RuleSet; add a case that trips it and one
// that just does not. The view a check gets holds all that hangs on the place; spans carry what is only known between
// two ends through the arithmetic, and above and below judge them.
package retrofit
