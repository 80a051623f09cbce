package selection

import (
	"fmt"
	"slices"
	"sort"
)

// Spread is quantiles of 2.5, 50 and 97.5 % of a coefficient over draws, of
// type 7.
type Spread struct{ Low, Median, High float64 }

// times returns the spread in other units; that of nothing is nothing.
func (s *Spread) times(by float64) *Spread {
	if s == nil {
		return nil
	}
	return &Spread{s.Low * by, s.Median * by, s.High * by}
}

// gathered holds the coefficients at the regions' ends that are not 0, by
// predictor, term and class, each list ascending.
type gathered struct {
	first   []int // position of a predictor's first term among all terms
	classes int
	starts  []int // list i: values[starts[i]:starts[i+1]]
	values  []float64
}

// list is the position of a coefficient's list.
func (g *gathered) list(predictor, term, class int) int {
	return (g.first[predictor]+term)*g.classes + class
}

// gather collects, in the draws that chose a predictor, its coefficients at the
// region's end. A coefficient that had left again is not among them: it counts
// as 0.
func (t *tally) gather(p Predictors) (*gathered, error) {
	if err := t.checkCoefs(); err != nil {
		return nil, err
	}
	g := &gathered{first: p.firstTerms(), classes: p.classes()}
	g.starts = make([]int, g.first[len(p.Names)]*g.classes+1)
	for i, d := range t.draws {
		for _, c := range coefsAt(d, t.regions[i].end) {
			g.starts[g.list(int(c.Predictor), int(c.Term), int(c.Class))+1]++
		}
	}
	for i := 1; i < len(g.starts); i++ {
		g.starts[i] += g.starts[i-1]
	}
	g.fill(t)
	return g, nil
}

// fill puts the values into their lists.
func (g *gathered) fill(t *tally) {
	g.values = make([]float64, g.starts[len(g.starts)-1])
	next := slices.Clone(g.starts)
	for i, d := range t.draws {
		for _, c := range coefsAt(d, t.regions[i].end) {
			list := g.list(int(c.Predictor), int(c.Term), int(c.Class))
			g.values[next[list]] = c.Value
			next[list]++
		}
	}
	for i := range len(g.starts) - 1 {
		slices.Sort(g.values[g.starts[i]:g.starts[i+1]])
	}
}

// checkCoefs finds a coefficient at a region's end whose predictor has not
// entered by it.
func (t *tally) checkCoefs() error {
	last := make([]int32, len(t.counts)) // 1 + the last draw whose region it entered
	for i, d := range t.draws {
		stamp := int32(i) + 1
		for _, e := range d.Entries[:t.regions[i].entered] {
			last[e.Predictor] = stamp
		}
		for _, c := range coefsAt(d, t.regions[i].end) {
			if last[c.Predictor] != stamp {
				return &DrawError{d.Number, fmt.Sprintf("predictor %d has a coefficient at step %d but has not entered by it", c.Predictor, c.Step)}
			}
		}
	}
	return nil
}

// coefsAt returns the coefficients at a step.
func coefsAt(d *Draw, step int32) []Coef {
	from := sort.Search(len(d.Coefs), func(i int) bool { return d.Coefs[i].Step >= step })
	to := from
	for to < len(d.Coefs) && d.Coefs[to].Step == step {
		to++
	}
	return d.Coefs[from:to]
}

// spreads returns the spread of a coefficient over all draws, and over the
// draws that chose its predictor; nil if none did.
func (g *gathered) spreads(predictor, term, class, chosen, draws int) (all, selected *Spread) {
	i := g.list(predictor, term, class)
	values := g.values[g.starts[i]:g.starts[i+1]]
	all = newSparse(values, draws).spread()
	if chosen > 0 {
		selected = newSparse(values, chosen).spread()
	}
	return all, selected
}
