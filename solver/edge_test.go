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
