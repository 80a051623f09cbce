package solver_test

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"holdfast/solver"
)

// TestOrderOfColumns: candidates, the columns of a group, and always-in columns
// may come in any order.
func TestOrderOfColumns(t *testing.T) {
	families(t, 12, func(t *testing.T, q *plain, d plainDraw, seed uint64) {
		r := rand.New(rand.NewPCG(seed, 51))
		perm := r.Perm(len(q.units))
		other, e := q.clone(), d
		other.units, other.named, other.relative = at(q.units, perm), at(q.named, perm), at(q.relative, perm)
		e.jitter = at(d.jitter, perm)
		back := make([]int32, len(perm))
		for c, u := range perm {
			back[c] = int32(u)
			other.units[c] = slices.Clone(other.units[c])
			r.Shuffle(len(other.units[c]), func(i, k int) {
				g := other.units[c]
				g[i], g[k] = g[k], g[i]
			})
		}
		slices.Reverse(other.always)
		wants(t, follow(t, q, d), follow(t, other, e), reading{unit: back})
	})
}

// TestOrderOfRows: the rows of the table may come in any order.
func TestOrderOfRows(t *testing.T) {
	families(t, 12, func(t *testing.T, q *plain, d plainDraw, seed uint64) {
		rows := rand.New(rand.NewPCG(seed, 52)).Perm(q.rows())
		other, e := q.rowsAt(rows, d)
		wants(t, follow(t, q, d), follow(t, other, e), reading{row: func(i int) int { return rows[i] }})
	})
}

// TestUnitsOfColumns: with the scale of the draw or of the table a column's
// unit and origin do not matter.
func TestUnitsOfColumns(t *testing.T) {
	families(t, 12, func(t *testing.T, q *plain, d plainDraw, seed uint64) {
		r := rand.New(rand.NewPCG(seed, 53))
		if q.scale == solver.ScaleNone {
			q.scale = solver.ScaleTable
		}
		other := q.clone()
		for _, x := range other.cols {
			stretch := math.Pow(10, float64(r.IntN(5)-2))
			shift := 2 * r.NormFloat64()
			for i := range x {
				x[i] = stretch * (x[i] + shift)
			}
		}
		wants(t, follow(t, q, d), follow(t, other, d), reading{})
	})
}

// TestWeightsScale: case weights matter only up to a factor.
func TestWeightsScale(t *testing.T) {
	families(t, 12, func(t *testing.T, q *plain, d plainDraw, _ uint64) {
		if q.weight == nil {
			return
		}
		d.left = nil // Cox scores are sums
		other := q.clone()
		for i := range other.weight {
			other.weight[i] *= 8
		}
		wants(t, follow(t, q, d), follow(t, other, d), reading{})
	})
}

// TestConstantOffset: the intercept takes up a constant offset; Cox does not
// see it.
func TestConstantOffset(t *testing.T) {
	families(t, 12, func(t *testing.T, q *plain, d plainDraw, _ uint64) {
		if q.family == solver.Multinomial {
			return
		}
		other := q.clone()
		other.offset = make([]float64, q.rows())
		for i := range other.offset {
			other.offset[i] = 2
			if q.offset != nil {
				other.offset[i] += q.offset[i]
			}
		}
		wants(t, follow(t, q, d), follow(t, other, d), reading{})
	})
}

// TestClockDoesNotMatter: the partial likelihood sees only the order of times
// and entries.
func TestClockDoesNotMatter(t *testing.T) {
	seeds(t, solver.Cox, 8000, 20, func(t *testing.T, q *plain, d plainDraw, _ uint64) {
		other := q.clone()
		clock := func(times []float64) {
			for i, x := range times {
				times[i] = math.Exp(x/3) + x
			}
		}
		clock(other.surv.Time)
		clock(other.surv.Entry)
		if !q.usable(d) {
			return
		}
		a, b := follow(t, q, d), follow(t, other, d)
		if fmt.Sprint(a.p) != fmt.Sprint(b.p) {
			t.Error("other bits")
		}
	})
}

// TestStrataAreApart: strata whose times are moved apart, by entries that keep
// their risk sets apart, are one stratum.
func TestStrataAreApart(t *testing.T) {
	seeds(t, solver.Cox, 9000, 20, func(t *testing.T, q *plain, d plainDraw, seed uint64) {
		r := rand.New(rand.NewPCG(seed, 54))
		s := q.surv
		s.Stratum = make([]int32, q.rows())
		for i := range s.Stratum {
			s.Stratum[i] = int32(r.IntN(3))
		}
		other := q.clone()
		o := other.surv
		if o.Entry == nil {
			o.Entry = make([]float64, q.rows())
			for i := range o.Entry {
				o.Entry[i] = -1
			}
		}
		for i, k := range s.Stratum {
			o.Time[i] += 1000 * float64(k)
			o.Entry[i] += 1000 * float64(k)
		}
		o.Stratum = nil
		if !q.usable(d) {
			return
		}
		wants(t, follow(t, q, d), follow(t, other, d), reading{})
	})
}

// TestTogetherOrAlone: a path has the same bits whatever block it is fitted in.
func TestTogetherOrAlone(t *testing.T) {
	families(t, 12, func(t *testing.T, q *plain, _ plainDraw, seed uint64) {
		samples := q.manyDraws(seed)
		m, err := solver.NewModel(context.Background(), q.problem())
		if err != nil {
			t.Fatal(err)
		}
		want, err := m.FitBlock(context.Background(), samples, nil)
		if err != nil {
			t.Fatal(err)
		}
		again, err := solver.NewModel(context.Background(), q.problem())
		if err != nil {
			t.Fatal(err)
		}
		for k, s := range slices.Backward(samples) {
			got, err := again.FitBlock(context.Background(), []*solver.Sample{s}, nil)
			if err != nil {
				t.Fatal(err)
			}
			if fmt.Sprint(got[0]) != fmt.Sprint(want[k]) {
				t.Errorf("draw %d: other bits alone:\n%v\n%v", k, got[0], want[k])
			}
		}
	})
}

// manyDraws makes draws of every kind for a problem.
func (q *plain) manyDraws(seed uint64) []*solver.Sample {
	v := &invention{r: rand.New(rand.NewPCG(seed, 55)), q: q, n: q.rows()}
	var out []*solver.Sample
	for tries := 0; len(out) < 9 && tries < 200; tries++ {
		if d := v.draw(); q.drawable(d) {
			out = append(out, d.sample())
		}
	}
	return out
}

// TestUnequalHistories: fits at lambdas asked alone, in another order, or after
// others have the same bits as along a descent from the same start.
func TestUnequalHistories(t *testing.T) {
	families(t, 8, func(t *testing.T, q *plain, d plainDraw, _ uint64) {
		m, err := solver.NewModel(context.Background(), q.problem())
		if err != nil {
			t.Fatal(err)
		}
		top, s := m.LambdaMax(), d.sample()
		a, err := m.FitAt(context.Background(), s, []float64{0.5 * top, 0.2 * top, 0.7 * top})
		if err != nil {
			t.Fatal(err)
		}
		b, err := m.FitAt(context.Background(), s, []float64{0.7 * top, 0.5 * top, 0.2 * top})
		if err != nil {
			t.Fatal(err)
		}
		for k, i := range []int{2, 0, 1} {
			a[i].Step, b[k].Step = 0, 0
			if fmt.Sprint(a[i]) != fmt.Sprint(b[k]) {
				t.Errorf("lambda %g: other bits in another order", b[k].Lambda)
			}
		}
	})
}
