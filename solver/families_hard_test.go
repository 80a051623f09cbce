package solver_test

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"holdfast/solver"
)

// simple is a problem of p independent normal candidates and n rows, nothing
// else; outcomes are set by the test.
func simple(family solver.Family, n, p int, seed uint64) *plain {
	v := &invention{r: rand.New(rand.NewPCG(seed, 91)), n: n}
	v.q = &plain{family: family, mix: 1, luck: 0.1, ratio: 0.8, floor: 0.05}
	for range p {
		x := make([]float64, n)
		for i := range x {
			x[i] = v.r.NormFloat64()
		}
		v.q.cols = append(v.q.cols, x)
		v.q.units, v.q.named = append(v.q.units, []int32{int32(len(v.q.cols) - 1)}), append(v.q.named, false)
	}
	v.outcome()
	v.q.offset = nil
	return v.q
}

// alwaysIn adds a column that is in every model.
func (q *plain) alwaysIn(x []float64) {
	q.cols = append(q.cols, x)
	q.always = append(q.always, int32(len(q.cols)-1))
}

// certifiedSteps fits a path and holds every step of it to the plain check;
// it returns the path, which may end early where the test allows it.
func certifiedSteps(t *testing.T, q *plain, d plainDraw, mayEnd bool) solver.Path {
	t.Helper()
	m, err := solver.NewModel(context.Background(), q.problem())
	if err != nil {
		t.Fatal(err)
	}
	paths, err := m.FitBlock(context.Background(), []*solver.Sample{d.sample()}, nil)
	if err != nil {
		t.Fatal(err)
	}
	p := paths[0]
	if p.Stop == solver.StopUncertified && (!mayEnd || p.Why == "") {
		t.Fatalf("%v: not certified after step %d: %q", q.family, p.Last, p.Why)
	}
	if p.Last < p.First {
		return p
	}
	fits, err := q.ofPath(&p, m)
	if err != nil {
		t.Fatal(err)
	}
	c := newCheck(q, d)
	for i, f := range fits {
		if r := c.state(f).verdict(); !(r.excess() <= q.tolerance()) {
			t.Errorf("%v: step %d: violation %g (rounding %g) at %s", q.family, p.First+i, r.violation, r.rounding, r.where)
		}
	}
	return p
}

// refusal is the error of NewModel, which must be there and hold the words.
func refusal(t *testing.T, q *plain, words ...string) {
	t.Helper()
	_, err := solver.NewModel(context.Background(), q.problem())
	holdsWords(t, err, words...)
}

func holdsWords(t *testing.T, err error, words ...string) {
	t.Helper()
	if err == nil {
		t.Error("no error")
		return
	}
	for _, w := range words {
		if !strings.Contains(err.Error(), w) {
			t.Errorf("the error does not say %q: %v", w, err)
		}
	}
	if strings.Contains(err.Error(), "NaN") || strings.Contains(err.Error(), "Inf") {
		t.Errorf("the error speaks of its arithmetic: %v", err)
	}
}

// TestSeparated: a candidate that tells the classes apart has no finite
// unpenalised coefficient. Down to tiny lambdas the path holds what it can
// certify, says why it ended, and has no infinity; lambda 0 is refused.
func TestSeparated(t *testing.T) {
	for _, family := range []solver.Family{solver.Binomial, solver.Multinomial, solver.Poisson, solver.Cox} {
		t.Run(family.String(), func(t *testing.T) {
			q := simple(family, 40, 3, 1)
			q.floor, q.ratio = 1e-9, 0.5
			q.separate()
			p := certifiedSteps(t, q, q.everyRow(), true)
			if p.Last-p.First < 5 {
				t.Errorf("only steps %d to %d: %s", p.First, p.Last, p.Why)
			}
			m, err := solver.NewModel(context.Background(), q.problem())
			if err != nil {
				t.Fatal(err)
			}
			fits, err := m.FitAt(context.Background(), q.everyRow().sample(), []float64{0})
			if err == nil && fits[0].Certified {
				t.Errorf("a fit at lambda 0: %v", fits[0].Coef)
			}
			for _, fit := range fits {
				for _, b := range fit.Coef {
					if math.IsNaN(b) || math.IsInf(b, 0) || math.Abs(b) > 1e6 {
						t.Errorf("coefficient %g", b)
					}
				}
			}
		})
	}
}

// separate makes the first candidate tell the outcome: its sign is the class,
// whether there are counts, or the order of the events.
func (q *plain) separate() {
	r := rand.New(rand.NewPCG(5, 5))
	for i, x := range q.cols[0] {
		switch q.family {
		case solver.Binomial, solver.Multinomial:
			q.outcome[i] = 0
			if x > 0 {
				q.outcome[i] = 1
			}
			if q.family == solver.Multinomial {
				q.classes = 3
				if x > 1 {
					q.outcome[i] = 2
				}
			}
		case solver.Poisson:
			q.cols[0][i] = math.Trunc(math.Abs(x)) // 0 or more; counts only where it is 0
			if q.outcome[i] = float64(r.IntN(4)); q.cols[0][i] > 0 {
				q.outcome[i] = 0
			}
		case solver.Cox:
			q.surv.Time[i], q.surv.Event[i] = math.Exp(-x), true
			if q.surv.Entry != nil {
				q.surv.Entry[i] = 0
			}
		}
	}
	if q.surv != nil {
		q.surv.Stratum = nil
	}
}

// separator is an always-in column that leaves the fit without candidates
// without a maximum: a mark on some rows, whose outcome has no other value.
func (q *plain) separator() []float64 {
	x := make([]float64, q.rows())
	for i := range x {
		if i%4 == 0 {
			x[i] = 1
		}
	}
	for i := range x {
		if x[i] == 0 {
			continue
		}
		switch q.family {
		case solver.Binomial:
			q.outcome[i] = 1
		case solver.Multinomial:
			if q.outcome[i] == 0 {
				q.outcome[i] = 1
			}
		case solver.Poisson:
			q.outcome[i] = 0
		case solver.Cox:
			q.surv.Event[i] = false
		}
	}
	return x
}

// TestSeparatedByAlways: an always-in column that tells the outcome is an error
// that names it.
func TestSeparatedByAlways(t *testing.T) {
	for _, family := range []solver.Family{solver.Binomial, solver.Multinomial, solver.Poisson, solver.Cox} {
		t.Run(family.String(), func(t *testing.T) {
			q := simple(family, 60, 4, 2)
			q.alwaysIn(q.separator())
			other := make([]float64, q.rows()) // an innocent one beside it
			for i := range other {
				other[i] = math.Sin(float64(i))
			}
			q.alwaysIn(other)
			p := q.problem()
			p.Names[q.always[0]], p.Names[q.always[1]] = "site=north", "depth"
			_, err := solver.NewModel(context.Background(), p)
			holdsWords(t, err, "site=north")
			if err != nil && strings.Contains(err.Error(), "depth") {
				t.Errorf("it names the innocent: %v", err)
			}
		})
	}
}

// TestSeparatedTogether: two always-in columns neither of which tells the
// classes apart, but a combination of them does.
func TestSeparatedTogether(t *testing.T) {
	q := simple(solver.Binomial, 80, 4, 3)
	r := rand.New(rand.NewPCG(8, 8))
	a, b := make([]float64, 80), make([]float64, 80)
	for i := range a {
		a[i], b[i] = r.NormFloat64(), r.NormFloat64()
		if q.outcome[i] = 0; a[i]+2*b[i] > 0.1 {
			q.outcome[i] = 1
		}
	}
	q.alwaysIn(a)
	q.alwaysIn(b)
	refusal(t, q)
}

// TestSeparatedInADraw: Fittable refuses a draw in which an always-in column
// tells the outcome, FitBlock gives an empty path that says why, and the other
// draws of the block are as they are alone.
func TestSeparatedInADraw(t *testing.T) {
	for _, family := range []solver.Family{solver.Binomial, solver.Multinomial, solver.Poisson, solver.Cox} {
		t.Run(family.String(), func(t *testing.T) {
			q := simple(family, 80, 4, 4)
			if q.surv != nil {
				q.surv.Entry, q.surv.Stratum = nil, nil
			}
			before := q.clone()
			x := q.separator()
			for i := 40; i < 80; i++ { // only the first half is separated
				if q.surv != nil {
					q.surv.Event[i] = before.surv.Event[i]
				} else {
					q.outcome[i] = before.outcome[i]
				}
			}
			q.alwaysIn(x)
			good, bad := q.everyRow(), q.everyRow()
			for i := range 40 {
				good.count[i], bad.count[40+i] = 0, 0
			}
			m, err := solver.NewModel(context.Background(), q.problem())
			if err != nil {
				t.Fatal(err)
			}
			if err := m.Fittable(good.sample()); err != nil {
				t.Errorf("the good half is refused: %v", err)
			}
			holdsWords(t, m.Fittable(bad.sample()))
			refusedInBlock(t, m, good.sample(), bad.sample())
		})
	}
}

// refusedInBlock fits a good draw beside one that cannot be fitted.
func refusedInBlock(t *testing.T, m *solver.Model, good, bad *solver.Sample) {
	t.Helper()
	alone, err := m.FitBlock(context.Background(), []*solver.Sample{good}, nil)
	if err != nil {
		t.Fatal(err)
	}
	both, err := m.FitBlock(context.Background(), []*solver.Sample{bad, good}, nil)
	if err != nil {
		t.Fatal(err)
	}
	if p := both[0]; p.Stop != solver.StopUncertified || p.Why == "" || p.Last >= p.First || len(p.Coefs) > 0 {
		t.Errorf("the bad draw: steps %d to %d, %v, %q, %d coefficients", p.First, p.Last, p.Stop, p.Why, len(p.Coefs))
	}
	if fmt.Sprint(alone[0]) != fmt.Sprint(both[1]) {
		t.Error("the good draw has other bits beside the bad one")
	}
	if _, err := m.FitAt(context.Background(), bad, []float64{m.LambdaMax() / 2}); err == nil {
		if fits, _ := m.FitAt(context.Background(), bad, []float64{m.LambdaMax() / 2}); fits[0].Certified {
			t.Error("FitAt certifies a fit on the bad draw")
		}
	}
}

// TestNothingToFit: a table, or a draw, without what its kind of outcome needs.
func TestNothingToFit(t *testing.T) {
	for name, spoil := range map[string]struct {
		family solver.Family
		do     func(q *plain, i int)
	}{
		"one class of two":   {solver.Binomial, func(q *plain, i int) { q.outcome[i] = 1 }},
		"no success":         {solver.Binomial, func(q *plain, i int) { q.outcome[i] = 0 }},
		"a class is missing": {solver.Multinomial, func(q *plain, i int) { q.outcome[i] = float64(int(q.outcome[i]) / 2) }},
		"all counts 0":       {solver.Poisson, func(q *plain, i int) { q.outcome[i] = 0 }},
		"no events":          {solver.Cox, func(q *plain, i int) { q.surv.Event[i] = false }},
		"four events":        {solver.Cox, func(q *plain, i int) { q.surv.Event[i] = i%10 == 0 }},
	} {
		t.Run(name, func(t *testing.T) {
			q := simple(spoil.family, 80, 5, 6)
			if spoil.family == solver.Multinomial {
				q.classes = 4
				for i := range q.outcome {
					q.outcome[i] = float64(i % 4)
				}
			}
			if q.surv != nil {
				q.surv.Entry, q.surv.Stratum = nil, nil
			}
			for i := range 40 {
				spoil.do(q, i)
			}
			m, err := solver.NewModel(context.Background(), q.problem())
			if err != nil {
				t.Fatal(err)
			}
			good, bad := q.everyRow(), q.everyRow()
			for i := range 40 {
				good.count[i], bad.count[40+i] = 0, 0
			}
			if err := m.Fittable(good.sample()); err != nil {
				t.Errorf("the good half is refused: %v", err)
			}
			holdsWords(t, m.Fittable(bad.sample()))
			if name != "four events" { // few, but there is a fit
				refusedInBlock(t, m, good.sample(), bad.sample())
				for i := range 80 {
					spoil.do(q, i)
				}
				refusal(t, q)
			}
		})
	}
}

// TestWeightZeroIsGone: rows of weight 0 do not count as a class or as events.
func TestWeightZeroIsGone(t *testing.T) {
	q := simple(solver.Binomial, 40, 4, 7)
	q.weight = make([]float64, 40)
	for i := range q.weight {
		q.weight[i] = 1 - q.outcome[i] // successes weigh nothing
	}
	refusal(t, q)
	q = simple(solver.Cox, 40, 4, 8)
	q.weight = make([]float64, 40)
	for i := range q.weight {
		if !q.surv.Event[i] {
			q.weight[i] = 1
		}
	}
	refusal(t, q)
}

// TestCopiesInADraw: columns that coincide in a draw, one of them turned and
// stretched, enter together in every family.
func TestCopiesInADraw(t *testing.T) {
	for family := solver.Gaussian; family <= solver.Cox; family++ {
		q := simple(family, 80, 6, 9)
		d := q.everyRow()
		for i := range 80 {
			if d.count[i] = 1; i < 40 {
				d.count[i] = 0
			} else {
				q.cols[3][i], q.cols[5][i] = q.cols[0][i], 7-4*q.cols[0][i]
			}
		}
		p := certifiedSteps(t, q, d, false)
		step := map[int32]int32{}
		for _, e := range p.Entries {
			step[e.Candidate] = e.Step + 1
		}
		if step[0] != step[3] || step[0] != step[5] || step[0] == 0 {
			t.Errorf("%v: coinciding candidates enter at %d, %d, %d", family, step[0], step[3], step[5])
		}
	}
}

// TestRedundantAlways: always-in columns that others make up, or that do not vary
// in the draw, change nothing; they are dropped in table order.
func TestRedundantAlways(t *testing.T) {
	for family := solver.Gaussian; family <= solver.Cox; family++ {
		q := simple(family, 80, 5, 19)
		d := q.everyRow()
		a, b := make([]float64, 80), make([]float64, 80)
		sum, late := make([]float64, 80), make([]float64, 80)
		for i := range 80 {
			a[i], b[i] = math.Sin(3*float64(i)), math.Cos(5*float64(i))
			sum[i] = 2*a[i] - b[i] + 7
			if i < 40 {
				d.count[i], late[i] = 0, float64(i)
			}
		}
		q.alwaysIn(a)
		q.alwaysIn(b)
		more := q.clone()
		more.alwaysIn(sum)
		more.alwaysIn(late) // it varies in the table, so that lambda_max is another
		want, got := follow(t, q, d), follow(t, more, d)
		lambdas := []float64{0.6 * want.m.LambdaMax(), 0.2 * want.m.LambdaMax()}
		compareAt(t, want, d, got, d, lambdas, reading{})
		certifiedSteps(t, more, d, false)
		for _, f := range got.fits {
			for class := range f.always[2] {
				if f.always[2][class] != 0 || f.always[3][class] != 0 {
					t.Fatalf("%v: redundant always-in columns have coefficients %v %v", family, f.always[2], f.always[3])
				}
			}
		}
	}
}

// TestFewEvents: five events, or two rows of a class, beside many candidates.
func TestFewEvents(t *testing.T) {
	for _, family := range []solver.Family{solver.Binomial, solver.Poisson, solver.Multinomial, solver.Cox} {
		for seed := range uint64(5) {
			q := simple(family, 60, 25, 100+seed)
			for i := range 60 {
				switch few := i%12 == 3; {
				case q.surv != nil:
					q.surv.Event[i] = few
				case family == solver.Multinomial:
					q.outcome[i] = float64(i % (q.classes - 1))
					if i%30 == 3 {
						q.outcome[i] = float64(q.classes - 1)
					}
				default:
					q.outcome[i] = 0
					if i%30 == 3 {
						q.outcome[i] = 1
					}
				}
			}
			if family == solver.Multinomial && q.classes == 2 {
				continue
			}
			certifiedSteps(t, q, q.everyRow(), false)
		}
	}
}

// TestWideTables: many more candidates than rows, lasso and elastic net, single
// columns and groups.
func TestWideTables(t *testing.T) {
	for family := solver.Gaussian; family <= solver.Cox; family++ {
		for _, mix := range []float64{1, 0.5} {
			for _, size := range []int{1, 3} {
				q := simple(family, 60, 240, 10)
				q.mix, q.floor = mix, 0.1
				q.units, q.named = nil, nil
				for j := 0; j < 240; j += size {
					g := make([]int32, size)
					for i := range g {
						g[i] = int32(j + i)
					}
					q.units, q.named = append(q.units, g), append(q.named, size > 1)
				}
				p := certifiedSteps(t, q, q.everyRow(), false)
				if len(p.Entries) < 10 {
					t.Errorf("%v: only %d candidates entered", family, len(p.Entries))
				}
			}
		}
	}
}

// TestWideExposure: exposures over twelve orders of magnitude.
func TestWideExposure(t *testing.T) {
	for seed := range uint64(10) {
		q := simple(solver.Poisson, 80, 6, 20+seed)
		r := rand.New(rand.NewPCG(seed, 92))
		q.offset = make([]float64, 80)
		for i := range q.offset {
			q.offset[i] = math.Log(10) * (12*r.Float64() - 6)
			q.outcome[i] = math.Floor(math.Exp(q.offset[i]+0.5*q.cols[0][i]) * r.ExpFloat64())
		}
		certifiedSteps(t, q, q.everyRow(), false)
	}
}

// TestWideWeights: case weights over eight orders of magnitude.
func TestWideWeights(t *testing.T) {
	for family := solver.Gaussian; family <= solver.Cox; family++ {
		for seed := range uint64(6) {
			q := simple(family, 80, 6, 40+seed)
			r := rand.New(rand.NewPCG(seed, 93))
			q.weight = make([]float64, 80)
			for i := range q.weight {
				q.weight[i] = math.Pow(10, 8*r.Float64()-4)
			}
			certifiedSteps(t, q, q.everyRow(), false)
		}
	}
}

// TestWideUnits: columns in units of 1e8 and 1e-8 in one table, singles and in a
// group.
func TestWideUnits(t *testing.T) {
	for family := solver.Gaussian; family <= solver.Cox; family++ {
		q := simple(family, 80, 8, 11)
		for j, x := range q.cols {
			for i := range x {
				x[i] *= math.Pow(1e8, float64(j%3-1))
			}
		}
		q.units = [][]int32{{0}, {1}, {2}, {3}, {4}, {5, 6, 7}}
		q.named = []bool{false, false, false, false, false, true}
		certifiedSteps(t, q, q.everyRow(), false)
	}
}

// TestLargeCounts: counts up to a million beside zeros.
func TestLargeCounts(t *testing.T) {
	for seed := range uint64(6) {
		q := simple(solver.Poisson, 60, 6, 60+seed)
		for i, x := range q.cols[0] {
			q.outcome[i] = math.Floor(math.Exp(5 * x))
		}
		certifiedSteps(t, q, q.everyRow(), false)
	}
}

// TestGroupsThatCoincide: groups that span the same, one that holds another, a
// column that is in a group's span, groups that lose their rank in the draw.
// Those that span the same enter together.
func TestGroupsThatCoincide(t *testing.T) {
	for family := solver.Gaussian; family <= solver.Cox; family++ {
		for _, mix := range []float64{1, 0.6} {
			q := simple(family, 80, 10, 12)
			q.mix = mix
			d := q.everyRow()
			for i := range 80 {
				if i < 40 {
					d.count[i] = 0
					continue
				}
				x := q.cols
				x[2][i], x[3][i] = x[0][i]+x[1][i], x[0][i]-2*x[1][i] // the span of 0 and 1
				x[5][i] = x[4][i]                                     // rank 1 in the draw
				x[7][i] = 3                                           // constant in the draw
				x[9][i] = x[8][i] - x[0][i]                           // 0 is in the span of 8 and 9
			}
			q.units = [][]int32{{0, 1}, {2, 3}, {4, 5}, {6, 7}, {8, 9}}
			q.named = []bool{true, true, true, true, true}
			p := certifiedSteps(t, q, d, false)
			step := map[int32]int32{}
			for _, e := range p.Entries {
				step[e.Candidate] = e.Step + 1
			}
			if step[0] != step[1] {
				t.Errorf("%v, mix %g: groups of one span enter at %d and %d", family, mix, step[0], step[1])
			}
		}
	}
}

// TestStillGroup: a group none of whose columns varies in the draw is still.
func TestStillGroup(t *testing.T) {
	for family := solver.Gaussian; family <= solver.Cox; family++ {
		q := simple(family, 80, 6, 13)
		d := q.everyRow()
		for i := range 80 {
			if i < 40 {
				d.count[i] = 0
			} else {
				q.cols[1][i], q.cols[2][i], q.cols[4][i] = 0.1, 5, 2
			}
		}
		q.units = [][]int32{{0}, {1, 2}, {3}, {4, 5}}
		q.named = []bool{false, true, false, true}
		p := certifiedSteps(t, q, d, false)
		if fmt.Sprint(p.Still) != "[1]" {
			t.Errorf("%v: still %v, want [1]", family, p.Still)
		}
	}
}

// TestOddRiskSets: one event time for all; an event that nobody else was at
// risk for; entries after which no event comes; a stratum of one row.
func TestOddRiskSets(t *testing.T) {
	for _, ties := range []solver.Ties{solver.Efron, solver.Breslow} {
		q := simple(solver.Cox, 60, 5, 14)
		q.surv = &solver.Survival{Ties: ties, Time: make([]float64, 60), Event: make([]bool, 60), Entry: make([]float64, 60), Stratum: make([]int32, 60)}
		for i := range 60 {
			q.surv.Time[i], q.surv.Event[i], q.surv.Entry[i] = 1, i%3 > 0, 0
			switch {
			case i < 10: // after everybody else, event by event
				q.surv.Time[i], q.surv.Entry[i] = float64(10+i), float64(9+i)
			case i < 15: // enters when the last event has been
				q.surv.Time[i], q.surv.Entry[i], q.surv.Event[i] = 50, 40, false
			case i == 20:
				q.surv.Stratum[i], q.surv.Event[i] = 7, true
			}
		}
		certifiedSteps(t, q, q.everyRow(), false)
	}
	q := simple(solver.Cox, 30, 3, 15) // everybody a stratum of their own: nothing to compare
	q.surv.Stratum = make([]int32, 30)
	for i := range q.surv.Stratum {
		q.surv.Stratum[i] = int32(i)
	}
	refusal(t, q)
}

// TestLateHighRisk: rows that enter late with a risk e^16 or e^22 times that of the
// others. Their hazard is what comes after their entry: as a difference of sums from
// the start of time it would hold none of its digits.
func TestLateHighRisk(t *testing.T) {
	for _, ties := range []solver.Ties{solver.Efron, solver.Breslow} {
		for _, high := range []float64{0, 16, 22} {
			q := simple(solver.Cox, 60, 4, 18)
			q.offset = make([]float64, 60)
			q.surv = &solver.Survival{Ties: ties, Time: make([]float64, 60), Event: make([]bool, 60), Entry: make([]float64, 60)}
			for i := range 60 {
				q.surv.Time[i], q.surv.Event[i], q.surv.Entry[i] = float64(1+i/2), i%3 > 0, 0
				if i >= 40 {
					q.surv.Entry[i], q.offset[i] = 20, high
				}
			}
			certifiedSteps(t, q, q.everyRow(), false)
		}
	}
}

// TestJumpDown: a fit far below lambda_max asked for alone, with no path to it, for
// a mark of which few rows are left: the curvature at the start says little about
// that at the optimum.
func TestJumpDown(t *testing.T) {
	for family := solver.Gaussian; family <= solver.Cox; family++ {
		for _, marks := range []int{1, 2} {
			for seed := range uint64(12) {
				q := simple(family, 30, 1, 80+seed)
				r := rand.New(rand.NewPCG(seed, 94))
				q.cols[0] = make([]float64, 30)
				for i := range marks {
					q.cols[0][i] = 1
				}
				q.weight = make([]float64, 30)
				for i := range q.weight {
					q.weight[i] = 0.3 + 3*r.Float64()
				}
				jump(t, q)
			}
		}
	}
	q := simple(solver.Cox, 6, 1, 1) // six rows that once could not be fitted
	q.surv = &solver.Survival{Time: []float64{0.08578, 2.763, 3.657, 3.657, 11.69, 11.69}, Event: []bool{true, true, true, true, true, true}, Ties: solver.Breslow}
	q.weight = []float64{0.3593, 1.635, 0.6032, 0.6032, 2.716, 2.716}
	q.cols[0] = []float64{1, 0, 0, 0, 0, 0}
	jump(t, q)
}

// jump fits lambdas far below lambda_max, each alone.
func jump(t *testing.T, q *plain) {
	t.Helper()
	m, err := solver.NewModel(context.Background(), q.problem())
	if err != nil {
		t.Fatal(err)
	}
	c := newCheck(q, q.everyRow())
	for _, part := range []float64{0.7, 0.4, 0.2, 0.1, 0.03, 0.01} {
		fits, err := m.FitAt(context.Background(), q.everyRow().sample(), []float64{part * m.LambdaMax()})
		if err != nil {
			t.Fatal(err)
		}
		if !fits[0].Certified {
			t.Errorf("%v: %g lambda_max: not certified: %s", q.family, part, fits[0].Why)
			continue
		}
		f, err := q.ofFit(fits[0])
		if err != nil {
			t.Fatal(err)
		}
		if r := c.state(f).verdict(); !(r.excess() <= q.tolerance()) {
			t.Errorf("%v: %g lambda_max: violation %g at %s", q.family, part, r.violation, r.where)
		}
	}
}

// TestWrongValues: values that are no outcome of their kind are errors that
// name the row.
func TestWrongValues(t *testing.T) {
	for name, c := range map[string]struct {
		family solver.Family
		spoil  func(q *plain)
	}{
		"half a success":    {solver.Binomial, func(q *plain) { q.outcome[17] = 0.5 }},
		"a negative count":  {solver.Poisson, func(q *plain) { q.outcome[17] = -1 }},
		"no class":          {solver.Multinomial, func(q *plain) { q.outcome[17] = float64(q.classes) }},
		"part of a class":   {solver.Multinomial, func(q *plain) { q.outcome[17] = 0.5 }},
		"no time":           {solver.Cox, func(q *plain) { q.surv.Time[17] = math.NaN() }},
		"entry after time":  {solver.Cox, func(q *plain) { q.surv.Entry = make([]float64, 40); q.surv.Entry[17] = 1e9 }},
		"offset no number":  {solver.Binomial, func(q *plain) { q.offset = make([]float64, 40); q.offset[17] = math.NaN() }},
		"offset infinite":   {solver.Poisson, func(q *plain) { q.offset = make([]float64, 40); q.offset[17] = math.Inf(-1) }},
		"weight below zero": {solver.Cox, func(q *plain) { q.weight = plainOnes(40); q.weight[17] = -1 }},
	} {
		t.Run(name, func(t *testing.T) {
			q := simple(c.family, 40, 3, 16)
			c.spoil(q)
			_, err := solver.NewModel(context.Background(), q.problem())
			if err == nil || !strings.Contains(err.Error(), "17") {
				t.Errorf("want an error that names row 17: %v", err)
			}
		})
	}
}

// TestWrongShapes: what does not fit together is an error, not a panic.
func TestWrongShapes(t *testing.T) {
	for name, c := range map[string]struct {
		family solver.Family
		spoil  func(p *solver.Problem)
	}{
		"no survival":        {solver.Cox, func(p *solver.Problem) { p.Survival = nil }},
		"short times":        {solver.Cox, func(p *solver.Problem) { p.Survival.Time = p.Survival.Time[:5] }},
		"short events":       {solver.Cox, func(p *solver.Problem) { p.Survival.Event = p.Survival.Event[:5] }},
		"short entries":      {solver.Cox, func(p *solver.Problem) { p.Survival.Entry = make([]float64, 3) }},
		"short strata":       {solver.Cox, func(p *solver.Problem) { p.Survival.Stratum = make([]int32, 3) }},
		"short offset":       {solver.Poisson, func(p *solver.Problem) { p.Offset = make([]float64, 3) }},
		"offset for classes": {solver.Multinomial, func(p *solver.Problem) { p.Offset = make([]float64, 40) }},
		"one class":          {solver.Multinomial, func(p *solver.Problem) { p.Classes = 1 }},
		"no outcome":         {solver.Binomial, func(p *solver.Problem) { p.Outcome = nil }},
		"short groups":       {solver.Binomial, func(p *solver.Problem) { p.Groups = [][]int32{{0, 1}} }},
		"overlapping groups": {solver.Binomial, func(p *solver.Problem) { p.Groups = [][]int32{{0, 1}, nil, nil} }},
		"a column twice":     {solver.Binomial, func(p *solver.Problem) { p.Candidates, p.Groups = p.Candidates[:1], [][]int32{{0, 0}} }},
		"an empty group":     {solver.Binomial, func(p *solver.Problem) { p.Groups = [][]int32{{}, nil, nil} }},
		"group and always": {solver.Binomial, func(p *solver.Problem) {
			p.Candidates, p.Groups, p.Always = p.Candidates[:1], [][]int32{{0, 1}}, []int32{1}
		}},
		"luck no number": {solver.Gaussian, func(p *solver.Problem) {
			p.Candidates, p.Groups, p.Luck = p.Candidates[:1], [][]int32{{0, 1}}, math.NaN()
		}},
	} {
		t.Run(name, func(t *testing.T) {
			q := simple(c.family, 40, 3, 17)
			p := q.problem()
			c.spoil(&p)
			if _, err := solver.NewModel(context.Background(), p); err == nil {
				t.Error("no error")
			}
		})
	}
}
