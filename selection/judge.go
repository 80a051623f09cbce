package selection

import (
	"cmp"
	"fmt"
	"math"
	"slices"
)

// Level is the level of the Monte-Carlo interval of a frequency.
const Level = 0.95

// Judge applies a decision to draws, in any order: complementary halves in
// whole pairs, or bootstrap draws. Its time and memory grow with the number of
// candidates and with what the draws hold, not with their product. The draws
// are checked first; a *DrawError names one that does not hold together. The
// Judgement keeps draws and names and changes neither.
func Judge(draws []Draw, bootstrap bool, p Predictors, d Decision) (*Judgement, error) {
	if err := p.check(); err != nil {
		return nil, err
	}
	if err := d.check(len(p.Names)); err != nil {
		return nil, err
	}
	if err := checkDraws(len(draws), bootstrap); err != nil {
		return nil, err
	}
	need, err := Need(d.Threshold, len(draws))
	if err != nil {
		return nil, err
	}
	t, err := count(draws, bootstrap, p, d)
	if err != nil {
		return nil, err
	}
	j := &Judgement{
		Draws: len(draws), Bootstrap: bootstrap, Candidates: len(p.Names), Decision: d,
		Need: need, Attained: float64(need) / float64(len(draws)), MostStable: d.Selected * len(draws) / need,
		draws: t.draws, names: p, coefs: t.coefs,
	}
	j.fill(t)
	j.bound(t)
	j.warn()
	return j, nil
}

func (d Decision) check(candidates int) error {
	switch {
	case d.Region != Cap && d.Region != Common:
		return &ArgumentError{Name: "region", Value: "none", Why: `must be "cap" or "common"`}
	case d.Bound < WorstCase || d.Bound > RConcave:
		return &ArgumentError{Name: "bound", Value: "none", Why: "must be one of the three bounds"}
	case d.Selected < 1:
		return badCount("selected", d.Selected, "must be at least 1")
	}
	return checkSelected(float64(d.Selected), float64(candidates))
}

// tally holds the counts of all draws.
type tally struct {
	draws       []*Draw // by number
	regions     []reach // one per draw
	counts      []int32 // per predictor: draws that chose it
	negatives   []int32 // of those: entered with a minus sign
	both        []int32 // pairs in which both halves chose it
	still       []int32 // draws in which it did not vary
	coefs       *gathered
	commonEnd   int
	selectedSum int
}

// count checks the draws and counts what entered within the region.
func count(draws []Draw, bootstrap bool, p Predictors, d Decision) (*tally, error) {
	byNumber, err := ordered(draws, bootstrap)
	if err != nil {
		return nil, err
	}
	k := len(p.Names)
	c := checker{predictors: p, seen: make([]int32, k)}
	for i, dr := range byNumber {
		if err := c.check(i, dr); err != nil {
			return nil, err
		}
	}
	t := &tally{
		draws: byNumber, regions: make([]reach, len(draws)),
		counts: make([]int32, k), negatives: make([]int32, k), both: make([]int32, k), still: make([]int32, k),
	}
	if err := t.setRegions(d); err != nil {
		return nil, err
	}
	t.countEntries(bootstrap)
	t.coefs, err = t.gather(p)
	return t, err
}

// setRegions finds where each draw's region ends.
func (t *tally) setRegions(d Decision) error {
	if d.Region == Common {
		t.commonEnd = commonEnd(t.draws, d.Selected)
		for i, dr := range t.draws {
			end := int32(min(t.commonEnd, dr.Last))
			t.regions[i] = reach{end: end, entered: enteredBy(dr, end)}
		}
		return nil
	}
	for i, dr := range t.draws {
		t.regions[i] = capRegion(dr, d.Selected)
		if !t.regions[i].bound && !dr.Complete && !dr.Uncertified {
			return &DrawError{dr.Number, fmt.Sprintf("its path stopped after %d predictors, so it is not known which would come next; lower selected to less than %d",
				len(dr.Entries), len(dr.Entries))}
		}
	}
	return nil
}

// countEntries counts entries, signs, pairs and columns that did not vary.
func (t *tally) countEntries(bootstrap bool) {
	firstHalf := make([]int32, len(t.counts)) // 1 + the pair whose first half chose it last
	for i, d := range t.draws {
		pair := int32(i/2) + 1
		for _, e := range d.Entries[:t.regions[i].entered] {
			t.counts[e.Predictor]++
			if e.Negative {
				t.negatives[e.Predictor]++
			}
			switch {
			case bootstrap:
			case i%2 == 0:
				firstHalf[e.Predictor] = pair
			case firstHalf[e.Predictor] == pair:
				t.both[e.Predictor]++
			}
		}
		t.selectedSum += t.regions[i].entered
		for _, k := range d.Still {
			t.still[k]++
		}
	}
}

// fill makes the rows and the numbers that stand with them.
func (j *Judgement) fill(t *tally) {
	z, _ := normalHalfWidth(Level) // a constant that is in range
	j.Rows = make([]Row, j.Candidates)
	for k := range j.Rows {
		j.Rows[k] = j.row(t, k, z)
	}
	slices.SortFunc(j.Rows, func(a, b Row) int {
		return cmp.Or(cmp.Compare(b.Count, a.Count), cmp.Compare(a.Index, b.Index))
	})
	for i, r := range j.Rows {
		if r.Stable {
			j.Stable++
		}
		if r.CouldChange {
			j.CouldChange++
		}
		if 100*r.Varied < 95*j.Draws {
			j.LowCeiling = append(j.LowCeiling, i)
		}
	}
	for i := range j.names.Always {
		for class := range j.names.classes() {
			j.Always = append(j.Always, j.alwaysRow(t, i, class))
		}
	}
	j.MeanSelected = float64(t.selectedSum) / float64(j.Draws)
	if j.Decision.Region == Common {
		j.CommonEnd = &t.commonEnd
	}
	j.listDraws(t)
}

// listDraws lists the draws that need a word.
func (j *Judgement) listDraws(t *tally) {
	for i, d := range t.draws {
		r := t.regions[i]
		if r.bound {
			j.CapBinding++
		}
		if r.bound && r.entered == 0 {
			j.EmptyRegion = append(j.EmptyRegion, d.Number)
			if d.Twins > 0 {
				j.emptyTwins++
			}
		}
		if d.Uncertified {
			j.Uncertified = append(j.Uncertified, d.Number)
		}
		if d.Redraws > 0 {
			j.Redrawn, j.MostRedraws = append(j.Redrawn, d.Number), max(j.MostRedraws, d.Redraws)
		}
	}
}

// row judges candidate k.
func (j *Judgement) row(t *tally, k int, z float64) Row {
	n, varied := int(t.counts[k]), j.Draws-int(t.still[k])
	r := Row{
		Predictor: j.names.Names[k], Index: k, Count: n, Varied: varied,
		Frequency: float64(n) / float64(j.Draws),
		Ceiling:   float64(varied) / float64(j.Draws),
		Stable:    n >= j.Need,
	}
	size := float64(j.Draws)
	if !j.Bootstrap {
		pairs, both := j.Draws/2, int(t.both[k])
		share := float64(both) / float64(pairs)
		r.BothHalves = &share
		one := n - 2*both
		size = effectiveSize(pairs-one-both, one, both)
	}
	r.Low, r.High = wilson(n, j.Draws, size, z)
	r.CouldChange = r.Low <= j.Attained*(1+snap) && j.Attained <= r.High*(1+snap)
	if j.names.several(k) {
		return r
	}
	r.Coef, r.Selected = t.coefs.spreads(k, 0, 0, n, j.Draws)
	if n > 0 {
		positive := float64(n-int(t.negatives[k])) / float64(n)
		r.PositiveShare = &positive
	}
	return r
}

// alwaysRow is the spread of the coefficient of always-in column i for a class.
func (j *Judgement) alwaysRow(t *tally, i, class int) AlwaysRow {
	columns, classes := len(j.names.Always), j.names.classes()
	var values []float64
	for d, draw := range t.draws {
		if step, ok := alwaysStep(draw, int(t.regions[d].end)); ok {
			values = append(values, draw.Always[((step-draw.First)*columns+i)*classes+class])
		}
	}
	row := AlwaysRow{Predictor: j.names.Always[i], Class: j.names.className(class), Draws: len(values), Index: i}
	if len(values) > 0 {
		slices.Sort(values)
		row.Coef = newSparse(values, len(values)).spread()
	}
	return row
}

// alwaysStep is the recorded step that holds the always-in coefficients at the
// region's end. Before the first candidate enters they do not change, so a
// region that ends before the draw's first step has those of that step.
func alwaysStep(d *Draw, end int) (int, bool) {
	if d.Last < d.First {
		return 0, false
	}
	if end >= d.First {
		return min(end, d.Last), true
	}
	return d.First, len(d.Entries) == 0 || int(d.Entries[0].Step) > d.First
}

// bound states the bounds for p, and for p without the candidates that often
// did not vary; the larger one counts.
func (j *Judgement) bound(t *tally) {
	if j.Bootstrap {
		for i, name := range boundNames {
			j.Bounds[i] = BoundValue{Name: name, Why: noBootstrapBound}
		}
		j.Decision.FalseSelections = nil
		return
	}
	q, pairs := float64(j.Decision.Selected), j.Draws/2
	j.Bounds, _ = boundsAt(q, float64(j.Candidates), j.Need, pairs)
	if len(j.LowCeiling) > 0 {
		j.Bounds = j.Bounds.larger(boundsWithout(q, j.Candidates-len(j.LowCeiling), j.Need, pairs))
	}
	j.Decision.FalseSelections = j.Bounds.Of(j.Decision.Bound).FalseSelections
}

// boundsWithout states the bounds for the p candidates that are left. With q
// above p there is none.
func boundsWithout(q float64, p, need, pairs int) Bounds {
	if float64(p) >= q && p >= 1 {
		b, _ := boundsAt(q, float64(p), need, pairs)
		return b
	}
	var b Bounds
	for i, name := range boundNames {
		b[i] = BoundValue{Name: name, Why: fmt.Sprintf("only %d candidates vary in at least 95 %% of the draws, fewer than selected = %s", p, show(q))}
	}
	return b
}

// larger takes for each bound the larger one; a bound that is missing on either
// side is missing.
func (b Bounds) larger(c Bounds) Bounds {
	for i := range b {
		switch {
		case b[i].FalseSelections == nil:
		case c[i].FalseSelections == nil:
			b[i].FalseSelections, b[i].Why = nil, c[i].Why
		default:
			v := math.Max(*b[i].FalseSelections, *c[i].FalseSelections)
			b[i].FalseSelections = &v
		}
	}
	return b
}
