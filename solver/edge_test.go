package solver

import (
	"context"
	"math"
	"strings"
	"testing"
)

func fitAll(t *testing.T, p Problem) ([]Fit, *Model) {
	t.Helper()
	m := mustModel(t, p)
	n, _ := p.Design.Dims()
	fits, err := m.FitPath(context.Background(), AllRows(n))
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range fits {
		if !f.Certified {
			t.Fatalf("lambda %g: %s", f.Lambda, f.Why)
		}
	}
	return fits, m
}

// TestOnePredictor: for one column the lasso is soft thresholding of the
// correlation (Tibshirani 1996, section 2.2).
func TestOnePredictor(t *testing.T) {
	cols, y := invented(30, 1, 1)
	fits, m := fitAll(t, problemOf(cols, y))
	sd := math.Sqrt(m.table[0])
	for _, f := range fits {
		if want := m.LambdaMax() - f.Lambda; math.Abs(math.Abs(f.Coef[0])*sd-max(want, 0)) > 1e-13 {
			t.Errorf("lambda %g: |b| sd = %g, want %g", f.Lambda, math.Abs(f.Coef[0])*sd, want)
		}
	}
}

// TestFourRows: the smallest table that halves can be drawn from. In a half of
// two rows all columns that vary coincide, so that all enter together.
func TestFourRows(t *testing.T) {
	cols, y := invented(4, 6, 2)
	p := problemOf(cols, y)
	p.Floor = 0.001
	for k, path := range mustFit(t, mustModel(t, p), halves(4, 6, 1)) {
		if path.Stop != StopFloor {
			t.Errorf("draw %d: %v %s", k, path.Stop, path.Why)
		}
		for step := path.First + 1; step <= path.Last; step++ {
			if n := supportSize(path, step); n != 6 {
				t.Fatalf("draw %d: %d of 6 coinciding columns selected", k, n)
			}
		}
	}
}

func supportSize(p Path, step int) int {
	n := 0
	for _, c := range p.Coefs {
		if int(c.Step) == step {
			n++
		}
	}
	return n
}

// TestRankLimit: deep down a wide table the support reaches the rank of the
// draw, members are exchanged, and every step is still certified.
func TestRankLimit(t *testing.T) {
	n := 60
	cols, y := invented(n, 300, 3)
	p := problemOf(cols, y)
	p.Floor = 1e-4
	largest := 0
	for k, path := range mustFit(t, mustModel(t, p), halves(n, 3, 2)) {
		if path.Stop != StopFloor || path.Violation > certified {
			t.Errorf("draw %d: %v %s, violation %g", k, path.Stop, path.Why, path.Violation)
		}
		largest = max(largest, supportSize(path, path.Last))
	}
	if largest < n/2-3 {
		t.Errorf("supports went only up to %d of %d", largest, n/2-1)
	}
}

// TestNearCopies: columns that differ in the tenth digit are neither merged
// nor do they break the certificate.
func TestNearCopies(t *testing.T) {
	n := 50
	cols, y := invented(n, 20, 4)
	for j := 10; j < 20; j++ {
		for i := range cols[j] {
			cols[j][i] = cols[j-10][i] + 1e-5*cols[j][i]
		}
	}
	for k, path := range mustFit(t, mustModel(t, problemOf(cols, y)), halves(n, 3, 2)) {
		if path.Stop != StopFloor || path.Violation > certified || path.Twins != 0 {
			t.Errorf("draw %d: %v %s, violation %g, twins %d", k, path.Stop, path.Why, path.Violation, path.Twins)
		}
	}
}

// TestTwinsShare: two columns that coincide in a draw, and there only, enter
// together and share the coefficient; their opposite enters with the other
// sign.
func TestTwinsShare(t *testing.T) {
	n := 40
	cols, y := invented(n, 3, 5)
	for i := range n {
		cols[1][i], cols[2][i] = cols[0][i], -3*cols[0][i]
		if i >= n/2 {
			cols[1][i] += float64(i)
			cols[2][i] -= float64(i * i)
		}
	}
	rows := make([]int32, n/2)
	for i := range rows {
		rows[i] = int32(i)
	}
	path := mustFit(t, mustModel(t, problemOf(cols, y)), []*Sample{NewSample(n, rows)})[0]
	if len(path.Entries) != 3 || path.Entries[0].Step != path.Entries[2].Step {
		t.Fatalf("entries %v: all three belong together", path.Entries)
	}
	a, b, c := path.Coefs[0].Value, path.Coefs[1].Value, path.Coefs[2].Value
	if a != b || math.Abs(c+a/3) > 1e-12*math.Abs(a) {
		t.Errorf("coefficients %g %g %g: want equal parts, the third over -3", a, b, c)
	}
}

// TestConstants: a column that does not vary in a draw is never selected
// there; an outcome that does not vary in a draw leaves it without selections.
func TestConstants(t *testing.T) {
	n := 40
	cols, y := invented(n, 5, 6)
	for i := range n {
		cols[2][i] = 0.1
		if i >= n/2 {
			cols[2][i] += y[i]
		}
	}
	first := make([]int32, n/2)
	for i := range first {
		first[i] = int32(i)
	}
	path := mustFit(t, mustModel(t, problemOf(cols, y)), []*Sample{NewSample(n, first)})[0]
	if len(path.Still) != 1 || path.Still[0] != 2 {
		t.Errorf("still: %v, want candidate 2", path.Still)
	}
	for _, e := range path.Entries {
		if e.Candidate == 2 {
			t.Error("a constant column entered")
		}
	}
	flat := append([]float64(nil), y...)
	for i := range n / 2 {
		flat[i] = 0.3
	}
	m := mustModel(t, problemOf(cols, flat))
	path = mustFit(t, m, []*Sample{NewSample(n, first)})[0]
	if len(path.Entries) != 0 || path.Stop != StopFloor || path.Last != m.LastStep() {
		t.Errorf("a constant outcome gave %v, %v", path.Entries, path.Stop)
	}
}

// TestTimestamps: a column far from its table mean within the draw, where raw
// one-pass sums would lose its standard deviation. As long as the centred
// column holds the digits the fit is that of the column moved back; where it
// does not, the path ends and says so.
func TestTimestamps(t *testing.T) {
	n := 40
	cols, y := invented(n, 4, 7)
	plain := append([]float64(nil), cols[1]...)
	rows := make([]int32, n/2)
	for i := range rows {
		rows[i] = int32(i)
	}
	s := []*Sample{NewSample(n, rows)}
	away := func(by float64) (*Model, Path) {
		cols[1] = append([]float64(nil), plain...)
		for i := n / 2; i < n; i++ {
			cols[1][i] += by
		}
		m := mustModel(t, problemOf(cols, y))
		return m, mustFit(t, m, s)[0]
	}
	m, got := away(1e5)
	cols[1] = plain
	m2 := mustModel(t, problemOf(cols, y))
	m2.lattice, m2.last = m.lattice, m.last
	want := mustFit(t, m2, s)[0]
	got.Intercepts = want.Intercepts
	if d := difference(want, got, 1e-8); d != "" {
		t.Errorf("other %s: %d..%d %v %s, want %d..%d", d, got.First, got.Last, got.Stop, got.Why, want.First, want.Last)
	}
	if _, lost := away(1e9); lost.Stop != StopUncertified || !strings.Contains(lost.Why, "not resolvable") {
		t.Errorf("digits lost in the table went unnoticed: %v %s", lost.Stop, lost.Why)
	}
}

// TestRefusals: what cannot be fitted is an error that says what is wrong.
func TestRefusals(t *testing.T) {
	cols, y := invented(20, 4, 8)
	for name, c := range map[string]struct {
		change func(*Problem)
		says   string
	}{
		"outcome":   {func(p *Problem) { p.Outcome = append([]float64{math.NaN()}, y[1:]...) }, "row 0"},
		"constant":  {func(p *Problem) { p.Outcome = make([]float64, 20) }, "same in all rows"},
		"candidate": {func(p *Problem) { p.Candidates = nil }, "no candidate"},
		"mix":       {func(p *Problem) { p.Mix = 0 }, "mix is 0"},
		"relative":  {func(p *Problem) { p.Relative = []float64{1, -1, 1, 1} }, "x1"},
		"weights":   {func(p *Problem) { p.Case = make([]float64, 20) }, "positive case weight"},
	} {
		p := problemOf(cols, y)
		c.change(&p)
		if _, err := NewModel(context.Background(), p); err == nil || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s: error %v does not say %q", name, err, c.says)
		}
	}
	m := mustModel(t, problemOf(cols, y))
	if _, err := m.FitAt(context.Background(), AllRows(20), []float64{-1}); err == nil {
		t.Error("lambda -1 was taken")
	}
	wide, y2 := invented(10, 30, 8)
	if _, err := mustModel(t, problemOf(wide, y2)).FitAt(context.Background(), AllRows(10), []float64{0}); err == nil || !strings.Contains(err.Error(), "full column rank") {
		t.Errorf("lambda 0 with p > n: %v", err)
	}
}

// TestExamine finds constants and copies, also shifted, scaled and mirrored.
func TestExamine(t *testing.T) {
	n := 50
	cols, y := invented(n, 30, 9)
	for i := range n {
		cols[7][i] = 4.2
		cols[12][i] = 3 - 2*cols[5][i]
		cols[20][i] = 100 * cols[5][i]
		cols[21][i] = cols[6][i]
		cols[25][i] = cols[6][i] + 1e-3*cols[9][i]
	}
	p := problemOf(cols, y)
	e, err := Examine(context.Background(), p.Design, p.Candidates)
	if err != nil {
		t.Fatal(err)
	}
	want := []Copy{{12, 5}, {20, 5}, {21, 6}}
	if len(e.Constant) != 1 || e.Constant[0] != 7 || len(e.Copies) != 3 {
		t.Fatalf("constant %v, copies %v", e.Constant, e.Copies)
	}
	for i, c := range e.Copies {
		if c != want[i] {
			t.Errorf("copy %v, want %v", c, want[i])
		}
	}
}

// TestCancelled: a cancelled context ends a block with its error.
func TestCancelled(t *testing.T) {
	cols, y := invented(60, 200, 10)
	m := mustModel(t, problemOf(cols, y))
	ctx, cancel := context.WithCancel(context.Background())
	steps := 0
	_, err := m.FitBlock(ctx, halves(60, 2, 1), func(int) {
		if steps++; steps == 5 {
			cancel()
		}
	})
	if err != context.Canceled || steps > 20 {
		t.Errorf("error %v after %d steps", err, steps)
	}
}

// markedPairs is every pair of five marked rows: {1,2}+{3,4} = {1,3}+{2,4}, so
// that many coefficients give the same fit.
func markedPairs() Problem {
	n := 40
	var cols [][]float64
	for a := range 5 {
		for b := range a {
			c := make([]float64, n)
			c[a], c[b] = 1, 1
			cols = append(cols, c)
		}
	}
	_, y := invented(n, 1, 1)
	for i := range 5 {
		y[i] += 3
	}
	return problemOf(cols, y)
}

// TestWayDoesNotMatter: where the optimum is not unique, a single fit selects
// what the path selects at the same lambda.
func TestWayDoesNotMatter(t *testing.T) {
	for name, p := range map[string]Problem{"pairs": markedPairs(), "rare": rareMarks(60, 90, ScaleDraw, func(v float64) float64 { return v })} {
		m := mustModel(t, p)
		n, _ := p.Design.Dims()
		path := mustFit(t, m, []*Sample{AllRows(n)})[0]
		if path.Twins == 0 {
			t.Errorf("%s: the case does not occur", name)
		}
		for step := path.First; step <= path.Last; step += 7 {
			fit, err := m.FitAt(context.Background(), AllRows(n), []float64{m.Lambda(step)})
			if err != nil {
				t.Fatal(err)
			}
			if fit[0].Selected != supportSize(path, step) {
				t.Errorf("%s: step %d: path selects %d, single fit %d", name, step, supportSize(path, step), fit[0].Selected)
			}
			for _, c := range path.Coefs {
				if int(c.Step) == step && math.Abs(fit[0].Coef[c.Candidate]-c.Value) > 1e-9 {
					t.Errorf("%s: step %d: candidate %d is %g on the path, %g alone", name, step, c.Candidate, c.Value, fit[0].Coef[c.Candidate])
				}
			}
		}
	}
}

// TestLeastSquares: among the optima the one with the least sum of squares is
// taken, which the elastic net comes to as mix goes to 1 (Zou & Hastie 2005,
// section 2.2, for the strict convexity that makes it unique).
func TestLeastSquares(t *testing.T) {
	p := markedPairs()
	lasso := mustModel(t, p)
	p.Mix = 1 - 1e-7
	net := mustModel(t, p)
	at := []float64{lasso.LambdaMax() / 10}
	a, err := lasso.FitAt(context.Background(), AllRows(40), at)
	if err != nil {
		t.Fatal(err)
	}
	b, err := net.FitAt(context.Background(), AllRows(40), at)
	if err != nil {
		t.Fatal(err)
	}
	for c, v := range a[0].Coef {
		if math.Abs(v-b[0].Coef[c]) > 1e-4 {
			t.Errorf("candidate %d: %g, the elastic net's %g", c, v, b[0].Coef[c])
		}
	}
}

// TestSmallUnits: the elastic net's ridge is in the outcome's units; where it
// is lost in rounding, coinciding columns share all the same.
func TestSmallUnits(t *testing.T) {
	for _, unit := range []float64{1, 1e-9, 1e-12} {
		p := rareMarks(60, 90, ScaleDraw, func(v float64) float64 { return v * unit })
		p.Mix, p.Ratio = 0.5, 0.9
		for k, path := range mustFit(t, mustModel(t, p), halves(60, 3, 3)) {
			if path.Stop == StopUncertified {
				t.Errorf("outcome in units of %g: draw %d: %s", unit, k, path.Why)
			}
		}
	}
}

// TestHopelessDraw: a draw whose always-in columns leave nothing ends its own
// path, not the block.
func TestHopelessDraw(t *testing.T) {
	cols, y := invented(20, 20, 4)
	p := problemOf(cols, y)
	p.Always, p.Candidates = p.Candidates[:8], p.Candidates[8:]
	few := make([]int32, 9)
	for i := range few {
		few[i] = int32(i)
	}
	paths := mustFit(t, mustModel(t, p), []*Sample{NewSample(20, few), AllRows(20)})
	if paths[0].Stop != StopUncertified || !strings.Contains(paths[0].Why, "leave nothing") || len(paths[0].Entries) != 0 {
		t.Errorf("the hopeless draw: %v %s", paths[0].Stop, paths[0].Why)
	}
	if paths[1].Stop != StopFloor {
		t.Errorf("the other draw: %v %s", paths[1].Stop, paths[1].Why)
	}
}

// TestLargeAlways: an always-in column a million times as large as the rest
// does not drown it.
func TestLargeAlways(t *testing.T) {
	n := 60
	cols, y := invented(n, 20, 5)
	want := mustFit(t, mustModel(t, alwaysFirst(cols, y)), halves(n, 2, 1))
	large := make([]float64, n)
	for i := range y {
		large[i] = y[i] + 1e6*cols[0][i]
	}
	for k, got := range mustFit(t, mustModel(t, alwaysFirst(cols, large)), halves(n, 2, 1)) {
		for i := range got.Always {
			got.Always[i] -= 1e6
		}
		if d := difference(want[k], got, 1e-7); d != "" {
			t.Errorf("draw %d: other %s: %v %s", k, d, got.Stop, got.Why)
		}
	}
}

func alwaysFirst(cols [][]float64, y []float64) Problem {
	p := problemOf(cols, y)
	p.Always, p.Candidates = p.Candidates[:1], p.Candidates[1:]
	return p
}

// TestFarCandidate: a candidate whose gradient cannot be resolved is not left
// out in silence where it might belong in.
func TestFarCandidate(t *testing.T) {
	n := 400
	cols, y := invented(n, 2, 6)
	rows := make([]int32, n/2)
	for i := range n {
		if i < n/2 {
			rows[i] = int32(i)
		} else {
			cols[1][i] += 1e10 // a clock that was set between the halves
		}
	}
	p := problemOf(cols, y)
	p.Relative = []float64{100, 1}
	m := mustModel(t, p)
	s := NewSample(n, rows)
	f := m.fitting()
	if err := f.start(s); err != nil {
		t.Fatal(err)
	}
	f.work.add(f, []int32{1})
	knot := math.Abs(f.gradient(int(f.work.place[1]), 0, f.rec.u))
	fits, err := m.FitAt(context.Background(), s, []float64{knot * (1 - 1e-9), knot * (1 + 1e-9), 3 * knot})
	if err != nil {
		t.Fatal(err)
	}
	for k, certified := range []bool{false, false, true} {
		if fits[k].Certified != certified {
			t.Errorf("at %g of the knot: certified %v %s", fits[k].Lambda/knot, fits[k].Certified, fits[k].Why)
		}
	}
}

// TestNotFinite: a cell that is not finite is named, not passed on.
func TestNotFinite(t *testing.T) {
	cols, y := invented(20, 4, 8)
	cols[2][3] = math.NaN()
	if _, err := NewModel(context.Background(), problemOf(cols, y)); err == nil || !strings.Contains(err.Error(), "x2") {
		t.Errorf("error %v does not name the column", err)
	}
}

// TestCopiesOfCopies: every copy is listed under a column that stays.
func TestCopiesOfCopies(t *testing.T) {
	n := 50
	for seed := range uint64(30) {
		noise, base := invented(n, 12, seed)
		for j := range noise {
			for i := range base {
				noise[j][i] = base[i] + 1e-6*noise[j][i]
			}
		}
		p := problemOf(noise, base)
		e, err := Examine(context.Background(), p.Design, p.Candidates)
		if err != nil {
			t.Fatal(err)
		}
		gone := make(map[int32]bool)
		for _, c := range e.Copies {
			gone[c.Col] = true
		}
		for _, c := range e.Copies {
			if gone[c.Of] {
				t.Fatalf("seed %d: column %d is listed under %d, which is a copy itself", seed, c.Col, c.Of)
			}
		}
	}
}
