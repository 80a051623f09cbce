package solver_test

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"holdfast/solver"
)

// wants fails where b, read as a, is another path.
func wants(t *testing.T, a, b *followed, as reading) {
	t.Helper()
	if d := a.differs(b, as); d != "" {
		t.Errorf("other %s", d)
	}
}

// TestWeightsAreCopies: a row of case weight 3 is three rows, one of weight 0 is
// none. Efron's form with case weights takes the mean weight of tied events and
// knows no copies (DESIGN 4), so survival is by Breslow's here.
func TestWeightsAreCopies(t *testing.T) {
	families(t, 12, func(t *testing.T, q *plain, _ plainDraw, seed uint64) {
		r := rand.New(rand.NewPCG(seed, 31))
		if q.surv != nil {
			q.surv.Ties = solver.Breslow
		}
		q.weight = make([]float64, q.rows())
		var rows []int
		for i := range q.weight {
			q.weight[i] = float64(r.IntN(4))
			for range int(q.weight[i]) {
				rows = append(rows, i)
			}
		}
		d := q.everyRow()
		if !q.usable(d) {
			return
		}
		copies, e := q.rowsAt(rows, d)
		copies.weight = nil
		wants(t, follow(t, q, d), follow(t, copies, e), reading{row: func(i int) int { return rows[i] }})
	})
}

// TestCountsAreCopies: a row drawn twice is two rows, in Efron's form too.
func TestCountsAreCopies(t *testing.T) {
	families(t, 12, func(t *testing.T, q *plain, _ plainDraw, seed uint64) {
		r := rand.New(rand.NewPCG(seed, 32))
		d := q.everyRow()
		var rows []int
		for i := range d.count {
			d.count[i] = 1 + r.IntN(3)
			for range d.count[i] {
				rows = append(rows, i)
			}
		}
		if q.scale == solver.ScaleTable { // the copies are another table
			q.scale = solver.ScaleDraw
		}
		if !q.usable(d) {
			return
		}
		copies, _ := q.rowsAt(rows, d)
		a, b := follow(t, q, d), follow(t, copies, copies.everyRow())
		at := []float64{a.m.LambdaMax() * 0.7, a.m.LambdaMax() * 0.2}
		compareAt(t, a, d, b, copies.everyRow(), at, reading{row: func(i int) int { return rows[i] }})
	})
}

// usable reports whether a changed problem is still one: every candidate
// varies, all classes are there, always-in columns do not tell them apart.
func (q *plain) usable(d plainDraw) bool {
	whole := q.whole()
	for _, cols := range q.units {
		for _, j := range cols {
			if whole.still[j] {
				return false
			}
		}
	}
	if !q.drawable(d) {
		return false
	}
	m, err := solver.NewModel(context.Background(), q.problem())
	return err == nil && m.Fittable(d.sample()) == nil
}

// compareAt compares fits of two problems at the same lambdas.
func compareAt(t *testing.T, a *followed, d plainDraw, b *followed, e plainDraw, lambdas []float64, as reading) {
	t.Helper()
	x, y := *a, *b
	x.fits, y.fits = fitsAt(t, a, d, lambdas), fitsAt(t, b, e, lambdas)
	for k := range lambdas {
		if off := x.apart(&y, k, as); !(off <= a.tolerance()) {
			t.Errorf("lambda %g: linear predictors %g apart", lambdas[k], off)
		}
	}
}

func fitsAt(t *testing.T, a *followed, d plainDraw, lambdas []float64) []plainFit {
	t.Helper()
	fits, err := a.m.FitAt(context.Background(), d.sample(), lambdas)
	if err != nil {
		t.Fatal(err)
	}
	var out []plainFit
	for _, fit := range fits {
		if !fit.Certified {
			t.Fatalf("lambda %g: not certified: %s", fit.Lambda, fit.Why)
		}
		f, err := a.q.ofFit(fit)
		if err != nil {
			t.Fatal(err)
		}
		out = append(out, f)
	}
	return out
}

// TestGroupOfOne: the norm of a block of one column is |s b|, and it pays 1 by
// either rule, so that it is a single column.
func TestGroupOfOne(t *testing.T) {
	families(t, 12, func(t *testing.T, q *plain, d plainDraw, seed uint64) {
		for u := range q.units {
			q.units[u], q.named[u] = q.units[u][:1], false
		}
		ones := q.clone()
		for u := range ones.named {
			ones.named[u] = (seed+uint64(u))%3 != 0
		}
		wants(t, follow(t, q, d), follow(t, ones, d), reading{})
	})
}

// TestReferenceLevel: which level of a category has no indicator, or whether
// all of them have one, does not matter to the fitted values. (A level that is
// not in the draw has no estimate, and its rows' scores hang on the coding.)
func TestReferenceLevel(t *testing.T) {
	families(t, 12, func(t *testing.T, q *plain, d plainDraw, seed uint64) {
		r := rand.New(rand.NewPCG(seed, 33))
		levels := 3 + r.IntN(3)
		code := make([]int, q.rows())
		for i := range code {
			code[i] = (i + r.IntN(2)) % levels
		}
		seen := map[int]bool{}
		for _, i := range q.view(d.count, d.weight).row {
			seen[code[i]] = true
		}
		if len(seen) < levels {
			return
		}
		as := func(leave int) *plain {
			c := q.clone()
			var g []int32
			for l := range levels {
				if l == leave {
					continue
				}
				x := make([]float64, q.rows())
				for i := range x {
					if code[i] == l {
						x[i] = 1
					}
				}
				c.cols, g = append(c.cols, x), append(g, int32(len(c.cols)))
			}
			c.units[0], c.named[0] = g, true
			return c
		}
		want := follow(t, as(0), d)
		for _, leave := range []int{1, levels - 1, -1} {
			wants(t, want, follow(t, as(leave), d), reading{})
		}
	})
}

// TestRotatedGroup: a group's block times any matrix that can be inverted gives
// the same fitted values (Simon & Tibshirani 2012).
func TestRotatedGroup(t *testing.T) {
	families(t, 12, func(t *testing.T, q *plain, d plainDraw, seed uint64) {
		r := rand.New(rand.NewPCG(seed, 34))
		c, changed := q.clone(), false
		for u, cols := range q.units {
			if q.isGroup(u) && q.complete(cols) {
				c.rotate(cols, r)
				changed = true
			}
		}
		if changed && c.usable(d) {
			wants(t, follow(t, q, d), follow(t, c, d), reading{})
		}
	})
}

func (q *plain) complete(cols []int32) bool {
	for _, j := range cols {
		for _, x := range q.cols[j] {
			if math.IsNaN(x) {
				return false
			}
		}
	}
	return true
}

// rotate replaces columns by combinations of them, in units of their deviation.
func (q *plain) rotate(cols []int32, r *rand.Rand) {
	whole, old := q.whole(), make([][]float64, len(cols))
	for i, j := range cols {
		old[i] = make([]float64, q.rows())
		for k, x := range q.cols[j] {
			old[i][k] = (x - whole.mean[j]) / whole.sd[j]
		}
	}
	for i, j := range cols {
		x := make([]float64, q.rows())
		for l := range cols {
			b := 0.4 * r.NormFloat64()
			if l == i {
				b += 2
			}
			for k := range x {
				x[k] += b * old[l][k]
			}
		}
		q.cols[j] = x
	}
}

// TestTwoClasses: with two classes the loss sees only beta = b_1 - b_0, and the
// penalty |b_0| + |b_1| is least at |beta|: the lasso of classes is that of
// yes-no at the same lambda, each class with half of the coefficient. With a
// ridge, (b_0^2 + b_1^2)/2 is least at beta^2/4, half of yes-no's: classes at
// (lambda, mix) are yes-no at lambda (1+mix)/2 and mix 2 mix/(1+mix), since then
// lambda mix and lambda (1-mix)/2 are the same. The norm of a group is as |.|.
func TestTwoClasses(t *testing.T) {
	seeds(t, solver.Binomial, 3000, 20, func(t *testing.T, q *plain, d plainDraw, _ uint64) {
		q.offset = nil
		two := q.clone()
		two.family, two.classes = solver.Multinomial, 2
		q.mix = 2 * two.mix / (1 + two.mix)
		if !q.usable(d) {
			return
		}
		factor := (1 + two.mix) / 2
		a, b := follow(t, q, d), follow(t, two, d)
		if d := a.differs(b, reading{
			lambda: factor, open: true,
			eta: func(eta [][]float64) {
				for k := range eta[0] {
					if s := eta[0][k] + eta[1][k]; math.Abs(s) > 1e-6*(1+math.Abs(eta[1][k])) {
						t.Fatalf("the classes' linear predictors add up to %g", s)
					}
					eta[0][k] = eta[1][k] - eta[0][k]
				}
			},
		}); d != "" {
			t.Errorf("other %s", d)
		}
	})
}

// TestNoTies: without ties and weights the forms of Efron and Breslow are one.
func TestNoTies(t *testing.T) {
	seeds(t, solver.Cox, 4000, 20, func(t *testing.T, q *plain, d plainDraw, _ uint64) {
		q.weight, q.surv.Ties = nil, solver.Breslow
		for i := range q.surv.Time {
			q.surv.Time[i] += 1e-3 * float64(i)
			d.count[i] = min(d.count[i], 1)
		}
		if !q.usable(d) {
			return
		}
		efron := q.clone()
		efron.surv.Ties = solver.Efron
		wants(t, follow(t, q, d), follow(t, efron, d), reading{})
	})
}

// TestEqualWeights: Efron's form with the same case weight on every row is the
// one without weights.
func TestEqualWeights(t *testing.T) {
	families(t, 12, func(t *testing.T, q *plain, d plainDraw, _ uint64) {
		q.weight = nil
		if !q.usable(d) {
			return
		}
		heavy := q.clone()
		for range q.rows() {
			heavy.weight = append(heavy.weight, 2.5)
		}
		a, b := follow(t, q, d), follow(t, heavy, d)
		if q.family == solver.Cox && d.left != nil {
			b.unweigh(d.left, 2.5)
		}
		wants(t, a, b, reading{})
	})
}

// unweigh takes an equal case weight w out of the scores of a Cox path: every
// event's term is w times that of weight 1, and log w more.
func (a *followed) unweigh(left []int, w float64) {
	events := 0.0
	for i, c := range left {
		if c > 0 && a.q.surv.Event[i] {
			events += float64(c)
		}
	}
	plainly := func(d float64) float64 { return d/w - 2*events*math.Log(w) }
	for i, d := range a.p.Deviance {
		a.p.Deviance[i] = plainly(d)
	}
	a.p.NullDeviance = plainly(a.p.NullDeviance)
}

// TestSplitRows: (entry, time] as two rows (entry, t1] and (t1, time] leaves the
// partial likelihood as it is, with any ties. N doubles, so lambda halves.
func TestSplitRows(t *testing.T) {
	seeds(t, solver.Cox, 5000, 20, func(t *testing.T, q *plain, d plainDraw, seed uint64) {
		r := rand.New(rand.NewPCG(seed, 35))
		var rows []int
		for i := range q.rows() {
			rows = append(rows, i, i)
		}
		split, e := q.rowsAt(rows, d)
		s := split.surv
		if s.Entry == nil {
			s.Entry = make([]float64, len(rows))
		}
		for i := 0; i < len(rows); i += 2 {
			from := s.Entry[i]
			middle := from + (0.05+0.9*r.Float64())*(s.Time[i]-from)
			if tie := q.surv.Time[r.IntN(q.rows())]; r.IntN(3) == 0 && from < tie && tie < s.Time[i] {
				middle = tie // at another row's time
			}
			s.Time[i], s.Event[i] = middle, false
			s.Entry[i+1] = middle
		}
		if !q.usable(d) {
			return
		}
		a, b := follow(t, q, d), follow(t, split, e)
		wants(t, a, b, reading{lambda: 2, row: func(i int) int { return i / 2 }})
	})
}

// TestOffsetIsSubtracted: for numbers an offset is the outcome less it.
func TestOffsetIsSubtracted(t *testing.T) {
	seeds(t, solver.Gaussian, 6000, 20, func(t *testing.T, q *plain, d plainDraw, seed uint64) {
		r := rand.New(rand.NewPCG(seed, 36))
		q.offset = make([]float64, q.rows())
		less := q.clone()
		less.offset = nil
		for i := range q.offset {
			q.offset[i] = 2 * r.NormFloat64()
			less.outcome[i] -= q.offset[i]
		}
		a, b := follow(t, q, d), follow(t, less, d)
		wants(t, a, b, reading{eta: func(eta [][]float64) {
			for k, i := range b.v.row {
				eta[0][k] += q.offset[i]
			}
		}})
	})
}

// TestClassOrder: other numbers for the classes permute the coefficients.
func TestClassOrder(t *testing.T) {
	seeds(t, solver.Multinomial, 7000, 20, func(t *testing.T, q *plain, d plainDraw, seed uint64) {
		perm := rand.New(rand.NewPCG(seed, 37)).Perm(q.classes)
		other := q.clone()
		for i, y := range q.outcome {
			other.outcome[i] = float64(perm[int(y)])
		}
		if !q.usable(d) {
			return
		}
		wants(t, follow(t, q, d), follow(t, other, d), reading{eta: func(eta [][]float64) {
			old := append([][]float64(nil), eta...)
			for c := range eta {
				eta[c] = old[perm[c]]
			}
		}})
	})
}

// TestJitterScales: the penalty |b|/W is that of the column times W, its
// coefficient over W (Meinshausen & Buhlmann 2010, section 3.1), at mix 1 and
// scaled by the draw: the columns are standardised over the draw's rows, then
// multiplied, and fitted in those units.
func TestJitterScales(t *testing.T) {
	families(t, 12, func(t *testing.T, q *plain, d plainDraw, seed uint64) {
		r := rand.New(rand.NewPCG(seed, 38))
		q.mix, q.scale, d.jitter, q.stopAfter = 1, solver.ScaleDraw, nil, 0
		for u := range q.units {
			q.units[u], q.named[u] = q.units[u][:1], false
			d.jitter = append(d.jitter, 0.2+0.8*r.Float64())
		}
		v := q.view(d.count, d.weight)
		scaled, e := q.clone(), d
		scaled.scale, e.jitter = solver.ScaleNone, nil
		for u, cols := range q.units {
			j := cols[0]
			if v.still[j] {
				continue
			}
			for i := range scaled.cols[j] {
				scaled.cols[j][i] *= d.jitter[u] / v.sd[j]
			}
		}
		a, b := follow(t, q, d), follow(t, scaled, e)
		compareJitter(t, a, d, b, e)
	})
}

// compareJitter compares fits at the same lambdas: the two tables' lambda_max
// are not the same, nor is their lattice.
func compareJitter(t *testing.T, a *followed, d plainDraw, b *followed, e plainDraw) {
	t.Helper()
	var lambdas []float64
	for k := a.p.First; k <= a.p.Last; k++ {
		lambdas = append(lambdas, a.m.Lambda(k))
	}
	x, y := fitsAt(t, a, d, lambdas), fitsAt(t, b, e, lambdas)
	for k := range lambdas {
		for u := range x[k].coef {
			if in, want := chosenIn(y[k], u), chosenIn(x[k], u); in != want {
				t.Fatalf("lambda %g: candidate %d: with jitter %v, scaled %v", lambdas[k], u, want, in)
			}
		}
	}
	compareAt(t, a, d, b, e, lambdas, reading{})
}

func chosenIn(f plainFit, u int) bool {
	for _, term := range f.coef[u] {
		for _, b := range term {
			if b != 0 {
				return true
			}
		}
	}
	return false
}

// TestJitterIsRelative: for groups, ridges and classes too, 1/W is a relative
// penalty.
func TestJitterIsRelative(t *testing.T) {
	families(t, 12, func(t *testing.T, q *plain, d plainDraw, seed uint64) {
		r := rand.New(rand.NewPCG(seed, 39))
		d.jitter = nil
		for range q.units {
			d.jitter = append(d.jitter, 0.2+0.8*r.Float64())
		}
		other, e := q.clone(), d
		e.jitter, other.relative = nil, nil
		for u, w := range d.jitter {
			v := 1.0
			if q.relative != nil {
				v = q.relative[u]
			}
			other.relative = append(other.relative, v/w)
		}
		a, b := follow(t, q, d), follow(t, other, e)
		compareJitter(t, a, d, b, e)
	})
}
