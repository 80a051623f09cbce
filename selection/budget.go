package selection

import (
	"bytes"
	"encoding/json"
	"errors"
	"strings"
)

// BoundValue is one bound in a budget or a judgement. What is nil does not
// exist here; Why then says why.
type BoundValue struct {
	Name            BoundName
	FalseSelections *float64 // expected number of false selections, uncapped
	Threshold       *float64 // solved for: need/draws
	Selected        *float64 // solved for
	Need            *int     // count at which the bound is stated
	Why             string
	asked           string // threshold or selected where one is solved for
}

// MarshalJSON implements json.Marshaler. The number that was solved for is
// written even where it is null.
func (v BoundValue) MarshalJSON() ([]byte, error) {
	var w fields
	w.add("false_selections", v.FalseSelections)
	if v.asked == "threshold" || v.Threshold != nil {
		w.add("threshold", v.Threshold)
	}
	if v.asked == "selected" || v.Selected != nil {
		w.add("selected", v.Selected)
	}
	if v.Need != nil {
		w.add("need", v.Need)
	}
	if v.Why != "" {
		w.add("why", v.Why)
	}
	return w.object()
}

// Bounds holds the three bounds in the order worst-case, unimodal, r-concave.
type Bounds [3]BoundValue

// Of returns the bound of that name.
func (b Bounds) Of(name BoundName) BoundValue {
	for _, v := range b {
		if v.Name == name {
			return v
		}
	}
	return BoundValue{Name: name, Why: "no bound was named"}
}

// MarshalJSON writes an object with the bounds' names as keys, in order.
func (b Bounds) MarshalJSON() ([]byte, error) {
	var w fields
	for _, v := range b {
		w.add(v.Name.String(), v)
	}
	return w.object()
}

// Request is what a budget is asked: two of Threshold, Selected and
// FalseSelections are given, the nil one is solved for.
type Request struct {
	Candidates int  // p, at least 1
	Draws      int  // even, unless Bootstrap
	Bootstrap  bool // bootstrap draws have no bound

	Threshold       *float64 // in (1/2, 1]
	Selected        *float64 // q, above 0, at most Candidates; may be fractional
	FalseSelections *float64 // above 0
}

// Budget is the answer to a Request. Threshold, Need, Attained and Selected are
// nil where threshold or selected is solved for: each bound has its own.
type Budget struct {
	Candidates, Draws int
	Threshold         *float64
	Selected          *float64
	FalseSelections   *float64 // as given; nil where it is the one solved for
	Need              *int     // smallest count that is stable
	Attained          *float64 // Need/Draws
	Bounds            Bounds   // at Attained, or at the bound's own count
}

// MarshalJSON writes the object of `budget --json`, in its order.
func (b *Budget) MarshalJSON() ([]byte, error) {
	var w fields
	w.add("candidates", b.Candidates)
	w.add("draws", b.Draws)
	w.add("threshold", b.Threshold)
	w.add("selected", b.Selected)
	if b.FalseSelections != nil {
		w.add("false_selections", b.FalseSelections)
	}
	w.add("need", b.Need)
	w.add("attained", b.Attained)
	w.add("bounds", b.Bounds)
	return w.object()
}

// SolveBudget solves for the one of threshold, selected and false selections
// that is not given, for all three bounds. Bounds are stated at the attained
// threshold and not capped. The error is ErrNoSolution where no bound has an
// answer, and then says what to change; otherwise a bound without an answer
// carries its reason.
func SolveBudget(r Request) (*Budget, error) {
	if err := r.check(); err != nil {
		return nil, err
	}
	b := &Budget{Candidates: r.Candidates, Draws: r.Draws, FalseSelections: r.FalseSelections}
	var errs [3]error
	switch {
	case r.FalseSelections == nil:
		errs = b.solveFalseSelections(r)
	case r.Threshold == nil:
		errs = b.solveThreshold(r)
	default:
		errs = b.solveSelected(r)
	}
	if err := noneSolved(errs); err != nil {
		return nil, err
	}
	return b, nil
}

func (r Request) check() error {
	if err := checkGiven(r.Threshold, r.Selected, r.FalseSelections, r.Candidates); err != nil {
		return err
	}
	if err := checkDraws(r.Draws, r.Bootstrap); err != nil {
		return err
	}
	names := given(r.Threshold, r.Selected, r.FalseSelections)
	switch {
	case len(names) == 3:
		return &ArgumentError{Name: "budget", Value: strings.Join(names, ", "), Why: "all three are given; leave out the one to be solved for"}
	case len(names) == 1:
		return &ArgumentError{Name: "budget", Value: names[0], Why: "one more is needed; give two of threshold, selected and false_selections"}
	case len(names) == 0:
		return &ArgumentError{Name: "budget", Value: "nothing given", Why: "give two of threshold, selected and false_selections"}
	case r.Bootstrap:
		return &ImpossibleError{What: "bootstrap draws have no bound", Advice: "use complementary halves to have a budget"}
	}
	return nil
}

// given names those of the three numbers that are there.
func given(threshold, selected, falseSelections *float64) []string {
	var names []string
	if threshold != nil {
		names = append(names, "threshold")
	}
	if selected != nil {
		names = append(names, "selected")
	}
	if falseSelections != nil {
		names = append(names, "false_selections")
	}
	return names
}

// checkGiven checks the values of those of the three numbers that are there.
func checkGiven(threshold, selected, falseSelections *float64, candidates int) error {
	if err := checkCandidates(float64(candidates)); err != nil {
		return err
	}
	if threshold != nil {
		if err := checkThreshold(*threshold); err != nil {
			return err
		}
	}
	if selected != nil {
		if err := checkSelected(*selected, float64(candidates)); err != nil {
			return err
		}
	}
	if falseSelections != nil {
		return checkFalseSelections(*falseSelections)
	}
	return nil
}

func checkDraws(draws int, bootstrap bool) error {
	switch {
	case draws > mostDraws:
		return badCount("draws", draws, "must be at most a thousand million")
	case bootstrap && draws < 1:
		return badCount("draws", draws, "must be at least 1")
	case !bootstrap && draws < 2:
		return badCount("draws", draws, "must be at least 2, one pair of halves")
	case !bootstrap && draws%2 == 1:
		return badCount("draws", draws, "must be even, since halves come in pairs; "+show(float64(draws+1))+" is")
	}
	return nil
}

func (b *Budget) solveFalseSelections(r Request) (errs [3]error) {
	need, _ := Need(*r.Threshold, r.Draws)
	attained := float64(need) / float64(r.Draws)
	b.Threshold, b.Selected, b.Need, b.Attained = r.Threshold, r.Selected, &need, &attained
	b.Bounds, errs = boundsAt(*r.Selected, float64(r.Candidates), need, r.Draws/2)
	return errs
}

// boundsAt states the three bounds at a count.
func boundsAt(q, p float64, need, pairs int) (bounds Bounds, errs [3]error) {
	for i, name := range boundNames {
		bounds[i].Name = name
		v, err := name.at(q, p, need, pairs)
		if err != nil {
			bounds[i].Why, errs[i] = why(err), err
			continue
		}
		bounds[i].FalseSelections = &v
	}
	return bounds, errs
}

func (b *Budget) solveThreshold(r Request) (errs [3]error) {
	q, p, pairs := *r.Selected, float64(r.Candidates), r.Draws/2
	b.Selected = r.Selected
	for i, name := range boundNames {
		v := BoundValue{Name: name, asked: "threshold"}
		need, err := solveNeed(name, q, p, *r.FalseSelections, pairs)
		if err != nil {
			v.Why, errs[i] = why(err), err
		} else {
			v.state(q, p, need, pairs)
			t := float64(need) / float64(r.Draws)
			v.Threshold = &t
		}
		b.Bounds[i] = v
	}
	return errs
}

func (b *Budget) solveSelected(r Request) (errs [3]error) {
	p, pairs := float64(r.Candidates), r.Draws/2
	need, _ := Need(*r.Threshold, r.Draws)
	b.Threshold = r.Threshold
	for i, name := range boundNames {
		v := BoundValue{Name: name, asked: "selected"}
		q, _, err := solveSelected(name, p, *r.FalseSelections, need, pairs)
		if err == nil && q == 0 {
			err = &noBound{"no number of predictors above 0 meets false_selections"}
		}
		if err != nil {
			v.Why, errs[i] = why(err), err
		} else {
			v.state(q, p, need, pairs)
			v.Selected = &q
		}
		b.Bounds[i] = v
	}
	return errs
}

// state fills in the count and the bound there.
func (v *BoundValue) state(q, p float64, need, pairs int) {
	v.Need = &need
	if e, err := v.Name.at(q, p, need, pairs); err == nil {
		v.FalseSelections = &e
	}
}

// noneSolved returns the error of the bound that comes nearest if no bound has
// an answer, else nil.
func noneSolved(errs [3]error) error {
	var nearest *ImpossibleError
	for _, err := range errs {
		if err == nil {
			return nil
		}
		var e *ImpossibleError
		if errors.As(err, &e) && e.Change == "false_selections" && (nearest == nil || e.Nearest < nearest.Nearest) {
			nearest = e
		}
	}
	if nearest == nil {
		return errs[0]
	}
	return nearest
}

// fields collects the members of a JSON object in a fixed order.
type fields struct {
	buf bytes.Buffer
	err error
}

func (w *fields) add(key string, value any) {
	text, err := json.Marshal(value)
	if err != nil {
		w.err = errors.Join(w.err, err)
		return
	}
	if w.buf.Len() > 0 {
		w.buf.WriteByte(',')
	}
	name, _ := json.Marshal(key)
	w.buf.Write(name)
	w.buf.WriteByte(':')
	w.buf.Write(text)
}

func (w *fields) object() ([]byte, error) {
	if w.err != nil {
		return nil, w.err
	}
	return []byte("{" + w.buf.String() + "}"), nil
}
