package selection

import (
	"fmt"
	"math"
	"strings"
)

// What a study gets that names nothing (DESIGN 7, "Two of three").
const (
	DefaultThreshold       = 0.8
	DefaultFalseSelections = 1.0
)

// Ask is what a study, or a second look, asks of a decision. What is zero or
// nil is not given. At most two of the three numbers may be given.
type Ask struct {
	Region          Region    // default Cap
	Bound           BoundName // default Unimodal
	Threshold       *float64  // in (1/2, 1]
	Selected        *float64  // q, a whole number of at least 1
	FalseSelections *float64  // above 0
}

// Decision is the rule by which draws are judged.
type Decision struct {
	Region    Region    `json:"region"`
	Bound     BoundName `json:"bound"`     // whose budget it is; kept, but without effect, for bootstrap draws
	Threshold float64   `json:"threshold"` // as given, or need/draws where it was solved for
	Selected  int       `json:"selected"`  // q
	// FalseSelections is the value of Bound at Selected and the attained
	// threshold: what is reached, not what was asked. Nil where there is none.
	FalseSelections *float64 `json:"false_selections"`
	// SelectedAsked is q before it was rounded down or lowered.
	SelectedAsked float64  `json:"selected_asked"`
	Notes         []string `json:"notes,omitempty"` // what was changed on the way, for the user
}

// Same reports whether two decisions judge alike: same region, bound,
// threshold and selected. Another one is "explored after seeing the result".
func (d Decision) Same(e Decision) bool {
	return d.Region == e.Region && d.Bound == e.Bound && d.Threshold == e.Threshold && d.Selected == e.Selected
}

// StopAfter is the number of distinct predictors after which a path stops where
// the study leaves it open: four times q, at most the units in a half less 2
// and the always-in columns, at least 1. Decide with stopAfter 0 first, then
// again with this number, which may lower q.
func StopAfter(selected, unitsInHalf, always int) int {
	return max(1, min(4*selected, unitsInHalf-2-always))
}

// frame is what a decision must fit: the run.
type frame struct {
	candidates, draws int
	bootstrap         bool
	stopAfter         int
}

// mostSelected is the largest q whose region every path covers. A path that
// stops after as many predictors as there are candidates never stops.
func (f frame) mostSelected() int {
	if f.stopAfter > 0 && f.stopAfter < f.candidates {
		return f.stopAfter
	}
	return f.candidates
}

// Decide makes the decision of a study. Of threshold, selected and false
// selections at most two are given: none means 0.8 and 1; threshold alone,
// false selections 1; one of the others alone, threshold 0.8. The third is
// solved for with the bound that is asked. A derived q is rounded down to a
// whole number and lowered to stopAfter (0: none), with a note. Bootstrap draws
// need selected, and have no bound.
func Decide(a Ask, candidates, draws int, bootstrap bool, stopAfter int) (Decision, error) {
	f := frame{candidates, draws, bootstrap, stopAfter}
	if err := f.check(a); err != nil {
		return Decision{}, err
	}
	if a.Region == 0 {
		a.Region = Cap
	}
	if a.Bound == 0 {
		a.Bound = Unimodal
	}
	d := Decision{Region: a.Region, Bound: a.Bound}
	var err error
	switch {
	case bootstrap:
		err = d.withoutBound(a)
	default:
		err = d.solve(a, f)
	}
	return d, err
}

// Change makes another decision for draws that exist. Threshold alone, or
// selected alone, keeps the other and shows what false selections become; false
// selections alone keeps the threshold; two solve for the third; region or
// bound alone keep threshold and selected.
func (d Decision) Change(c Ask, candidates, draws int, bootstrap bool, stopAfter int) (Decision, error) {
	if c.Region == 0 {
		c.Region = d.Region
	}
	if c.Bound == 0 {
		c.Bound = d.Bound
	}
	names := given(c.Threshold, c.Selected, c.FalseSelections)
	kept := float64(d.Selected)
	if len(names) <= 1 && c.Threshold == nil {
		c.Threshold = &d.Threshold
	}
	if len(names) <= 1 && c.Selected == nil && c.FalseSelections == nil {
		c.Selected = &kept
	}
	return Decide(c, candidates, draws, bootstrap, stopAfter)
}

func (f frame) check(a Ask) error {
	if err := checkGiven(a.Threshold, a.Selected, a.FalseSelections, f.candidates); err != nil {
		return err
	}
	if err := checkDraws(f.draws, f.bootstrap); err != nil {
		return err
	}
	if names := given(a.Threshold, a.Selected, a.FalseSelections); len(names) == 3 {
		return &ArgumentError{Name: "decision", Value: strings.Join(names, ", "), Why: "each two of them fix the third; give at most two"}
	}
	return f.checkSelected(a.Selected)
}

// checkSelected checks a q that was given, not derived.
func (f frame) checkSelected(q *float64) error {
	switch most := f.mostSelected(); {
	case q == nil:
		return nil
	case *q < 1 || *q != math.Floor(*q):
		return badNumber("selected", *q, fmt.Sprintf("must be a whole number of at least 1 here; try %d", max(1, int(*q))))
	case *q > float64(most):
		return &ImpossibleError{
			Change: "selected", Nearest: float64(most),
			What:   fmt.Sprintf("selected = %s is more than stop_after = %d, where the paths end", show(*q), most),
			Advice: fmt.Sprintf("lower selected to %d, or run again with a larger stop_after", most),
		}
	}
	return nil
}

// withoutBound decides for bootstrap draws.
func (d *Decision) withoutBound(a Ask) error {
	switch {
	case a.FalseSelections != nil:
		return &ArgumentError{Name: "false_selections", Value: show(*a.FalseSelections),
			Why: "bootstrap draws have no bound on false selections; give selected and threshold, or use halves"}
	case a.Selected == nil:
		return &ArgumentError{Name: "selected", Value: "not given",
			Why: "bootstrap draws have no bound to derive it from; give the number of predictors a draw may contribute, or use halves"}
	}
	d.Threshold = DefaultThreshold
	if a.Threshold != nil {
		d.Threshold = *a.Threshold
	}
	d.Selected, d.SelectedAsked = int(*a.Selected), *a.Selected
	d.Notes = append(d.Notes, noBootstrapBound)
	return nil
}

const noBootstrapBound = "bootstrap draws overlap, so there is no bound on the number of false selections"

// solve fills in the number that is not given.
func (d *Decision) solve(a Ask, f frame) error {
	threshold, target := DefaultThreshold, DefaultFalseSelections
	if a.Threshold != nil {
		threshold = *a.Threshold
	}
	if a.FalseSelections != nil {
		target = *a.FalseSelections
	}
	switch {
	case a.Selected == nil:
		d.Threshold = threshold
		if err := d.deriveSelected(target, f); err != nil {
			return err
		}
	case a.FalseSelections != nil:
		d.Selected, d.SelectedAsked = int(*a.Selected), *a.Selected
		if err := d.deriveThreshold(target, f); err != nil {
			return err
		}
	default:
		d.Threshold = threshold
		d.Selected, d.SelectedAsked = int(*a.Selected), *a.Selected
	}
	d.statePromise(f)
	return nil
}

// deriveSelected solves for q, a whole number no larger than the paths allow.
func (d *Decision) deriveSelected(target float64, f frame) error {
	need, err := Need(d.Threshold, f.draws)
	if err != nil {
		return err
	}
	p, pairs := float64(f.candidates), f.draws/2
	q, limited, err := solveSelected(d.Bound, p, target, need, pairs)
	if err != nil {
		return d.boundMissing(err, f)
	}
	d.SelectedAsked = q
	if d.Selected = int(floorSnap(q)); d.Selected < 1 {
		return d.selectedBelowOne(target, need, f)
	}
	switch most := f.mostSelected(); {
	case d.Selected > most:
		d.note("selected is lowered from %d to %d, where the paths end (stop_after)", d.Selected, most)
		d.Selected = most
	case limited:
		d.note("selected is %d: with more the %s bound does not exist at threshold %s", d.Selected, d.Bound, show(d.Threshold))
	}
	return nil
}

// boundMissing says that the bound does not exist at the threshold for any q.
func (d *Decision) boundMissing(err error, f frame) error {
	e := &ImpossibleError{What: fmt.Sprintf("threshold = %s", show(d.Threshold)), Advice: why(err) + `; use bound = "worst-case" or more draws`}
	if need := f.draws/2 + 2; need <= f.draws {
		e.Change, e.Nearest = "threshold", roundUp(float64(need)/float64(f.draws))
		e.Advice = why(err) + fmt.Sprintf(`; raise threshold to %s, or use bound = "worst-case"`, show(e.Nearest))
	}
	return e
}

// selectedBelowOne says what false selections a single predictor needs.
func (d *Decision) selectedBelowOne(target float64, need int, f frame) error {
	e := &ImpossibleError{What: fmt.Sprintf("with %d candidates at threshold %s the %s bound allows less than one predictor per draw for false_selections = %s",
		f.candidates, show(d.Threshold), d.Bound, show(target))}
	v, err := d.Bound.at(1, float64(f.candidates), need, f.draws/2)
	if err == nil {
		e.Change, e.Nearest = "false_selections", roundUp(v)
		e.Advice = fmt.Sprintf("raise false_selections to %s, which is what selected = 1 needs", show(e.Nearest))
		return e
	}
	e.Advice = why(err)
	if v, err := WorstCase.at(1, float64(f.candidates), need, f.draws/2); err == nil {
		e.Advice += fmt.Sprintf(`; with bound = "worst-case" selected = 1 needs false_selections = %s`, show(roundUp(v)))
	}
	return e
}

// deriveThreshold solves for the smallest count of draws.
func (d *Decision) deriveThreshold(target float64, f frame) error {
	need, err := solveNeed(d.Bound, float64(d.Selected), float64(f.candidates), target, f.draws/2)
	if err != nil {
		return err
	}
	d.Threshold = float64(need) / float64(f.draws)
	return nil
}

// statePromise states the bound that the decision reaches, or why there is none.
func (d *Decision) statePromise(f frame) {
	need, _ := Need(d.Threshold, f.draws) // both were checked
	v, err := d.Bound.at(float64(d.Selected), float64(f.candidates), need, f.draws/2)
	if err != nil {
		d.note("there is no %s bound for this decision: %s", d.Bound, why(err))
		return
	}
	d.FalseSelections = &v
}

func (d *Decision) note(format string, args ...any) {
	d.Notes = append(d.Notes, fmt.Sprintf(format, args...))
}
