package solver_test

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"slices"
	"testing"

	"holdfast/solver"
)

// followed is a path with its fits in plain form.
type followed struct {
	q    *plain
	v    *plainView
	m    *solver.Model
	p    solver.Path
	fits []plainFit
}

// follow fits the path of a draw, which must end for a reason other than the
// certificate.
func follow(t *testing.T, q *plain, d plainDraw) *followed {
	t.Helper()
	m, err := solver.NewModel(context.Background(), q.problem())
	if err != nil {
		t.Fatal(err)
	}
	paths, err := m.FitBlock(context.Background(), []*solver.Sample{d.sample()}, nil)
	if err != nil {
		t.Fatal(err)
	}
	if p := paths[0]; p.Stop == solver.StopUncertified {
		t.Fatalf("%v: not certified after step %d: %s", q.family, p.Last, p.Why)
	}
	fits, err := q.ofPath(&paths[0], m)
	if err != nil {
		t.Fatal(err)
	}
	return &followed{q: q, v: q.view(d.count, d.weight), m: m, p: paths[0], fits: fits}
}

// reading says how the second of two equivalent problems is read as the first.
type reading struct {
	row    func(int) int     // row of the first table; nil: the same
	unit   []int32           // candidate of the first problem; nil: the same
	eta    func([][]float64) // changes the second's linear predictors, per class, in place
	lambda float64           // the first's lambda over the second's; 0: 1
	open   bool              // the signs of entries are not comparable
}

// tolerances of two ways to the same optimum: each is certified to 1e-8 (1e-10)
// of its penalty.
func (a *followed) tolerance() float64 {
	if a.q.family == solver.Gaussian {
		return 1e-8
	}
	return 1e-6
}

// differs says how b, read as a, is another path: lambdas, entries, linear
// predictors at every row and step, scores.
func (a *followed) differs(b *followed, as reading) string {
	factor := as.lambda
	if factor == 0 {
		factor = 1
	}
	if a.p.First != b.p.First || a.p.Last != b.p.Last {
		return fmt.Sprintf("steps %d to %d and %d to %d", a.p.First, a.p.Last, b.p.First, b.p.Last)
	}
	if x, y := a.m.LambdaMax(), factor*b.m.LambdaMax(); !nearly(x/y, 1, 1e-7) {
		return fmt.Sprintf("lambda_max %g and %g", x, y)
	}
	if x, y := entriesOf(a.p, reading{open: as.open}), entriesOf(b.p, as); x != y {
		return fmt.Sprintf("entries\n%s\n%s", x, y)
	}
	for i := range a.fits {
		if off := a.apart(b, i, as); !(off <= a.tolerance()) {
			return fmt.Sprintf("linear predictors at step %d of %d to %d: %g apart", a.p.First+i, a.p.First, a.p.Last, off)
		}
	}
	return a.scoresDiffer(b)
}

func (a *followed) scoresDiffer(b *followed) string {
	if len(a.p.Deviance) != len(b.p.Deviance) {
		return fmt.Sprintf("%d and %d scores", len(a.p.Deviance), len(b.p.Deviance))
	}
	for i := range a.p.Deviance {
		if x, y := a.p.Deviance[i], b.p.Deviance[i]; !nearly(x, y, 100*a.tolerance()) {
			return fmt.Sprintf("deviance at step %d: %g and %g", a.p.First+i, x, y)
		}
	}
	if x, y := a.p.NullDeviance, b.p.NullDeviance; !nearly(x, y, 1e-7) {
		return fmt.Sprintf("null deviance: %g and %g", x, y)
	}
	return ""
}

func entriesOf(p solver.Path, as reading) string {
	list := slices.Clone(p.Entries)
	for i := range list {
		if as.unit != nil {
			list[i].Candidate = as.unit[list[i].Candidate]
		}
		if as.open {
			list[i].Negative = false
		}
	}
	slices.SortFunc(list, func(a, b solver.Entry) int {
		return cmp.Or(cmp.Compare(a.Step, b.Step), cmp.Compare(a.Candidate, b.Candidate))
	})
	return fmt.Sprint(list)
}

// apart is the largest difference of the linear predictors at a step, relative
// to the largest of them or 1. Cox does not see a constant, and classes do not see
// what is common to them; the coefficients' share of that is checked by sums.
func (a *followed) apart(b *followed, i int, as reading) float64 {
	x, y := a.v.eta(a.fits[i]), b.v.eta(b.fits[i])
	if as.eta != nil {
		as.eta(y)
	}
	switch a.q.family {
	case solver.Cox:
		a.v.centre(x[0])
		b.v.centre(y[0])
	case solver.Multinomial:
		lessCommon(x)
		lessCommon(y)
	}
	at := map[int]int{}
	for k, row := range a.v.row {
		at[row] = k
	}
	worst, size := 0.0, 1.0
	for class := range x {
		for k, row := range b.v.row {
			if as.row != nil {
				row = as.row(row)
			}
			e := x[class][at[row]]
			worst, size = max(worst, math.Abs(e-y[class][k])), max(size, math.Abs(e))
		}
	}
	return worst / size
}

func lessCommon(eta [][]float64) {
	for k := range eta[0] {
		mean := 0.0
		for c := range eta {
			mean += eta[c][k] / float64(len(eta))
		}
		for c := range eta {
			eta[c][k] -= mean
		}
	}
}

func (v *plainView) centre(eta []float64) {
	mean := 0.0
	for k, w := range v.w {
		mean += w * eta[k] / v.total
	}
	for k := range eta {
		eta[k] -= mean
	}
}

// clone copies a problem deeply enough that each of its slices can be changed.
func (q *plain) clone() *plain {
	c := *q
	c.cols, c.units, c.named = slices.Clone(q.cols), slices.Clone(q.units), slices.Clone(q.named)
	for j := range c.cols {
		c.cols[j] = slices.Clone(q.cols[j])
	}
	c.always, c.outcome, c.offset = slices.Clone(q.always), slices.Clone(q.outcome), slices.Clone(q.offset)
	c.weight, c.relative = slices.Clone(q.weight), slices.Clone(q.relative)
	if q.surv != nil {
		s := *q.surv
		s.Time, s.Event = slices.Clone(s.Time), slices.Clone(s.Event)
		s.Entry, s.Stratum = slices.Clone(s.Entry), slices.Clone(s.Stratum)
		c.surv = &s
	}
	return &c
}

// rowsAt returns the problem of the given rows, in that order, some perhaps
// more than once, with the draw along.
func (q *plain) rowsAt(rows []int, d plainDraw) (*plain, plainDraw) {
	c := q.clone()
	for j := range c.cols {
		c.cols[j] = at(q.cols[j], rows)
	}
	c.outcome, c.offset, c.weight = at(q.outcome, rows), at(q.offset, rows), at(q.weight, rows)
	if q.surv != nil {
		c.surv.Time, c.surv.Event = at(q.surv.Time, rows), at(q.surv.Event, rows)
		c.surv.Entry, c.surv.Stratum = at(q.surv.Entry, rows), at(q.surv.Stratum, rows)
	}
	return c, plainDraw{count: at(d.count, rows), left: at(d.left, rows), weight: at(d.weight, rows), jitter: d.jitter}
}

// at picks elements of a slice; nil stays nil.
func at[T any](v []T, rows []int) []T {
	if v == nil {
		return nil
	}
	out := make([]T, len(rows))
	for k, i := range rows {
		out[k] = v[i]
	}
	return out
}

// families calls do for a few random problems of each family.
func families(t *testing.T, count int, do func(t *testing.T, q *plain, d plainDraw, seed uint64)) {
	for family := solver.Gaussian; family <= solver.Cox; family++ {
		t.Run(family.String(), func(t *testing.T) { seeds(t, family, 1000, count, do) })
	}
}

// seeds calls do for random problems of a family that can be fitted; a failure
// names the seed.
func seeds(t *testing.T, family solver.Family, first uint64, count int, do func(t *testing.T, q *plain, d plainDraw, seed uint64)) {
	for seed := range uint64(count) {
		t.Run(fmt.Sprint(first+seed), func(t *testing.T) {
			q, d := inventPlain(family, first+seed)
			m, err := solver.NewModel(context.Background(), q.problem())
			if err != nil {
				t.Fatal(err)
			}
			if m.Fittable(d.sample()) == nil {
				do(t, q, d, seed)
			}
		})
	}
}
