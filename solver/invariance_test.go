package solver

import (
	"context"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// mapCandidates renames the candidates of a path and puts it in order again.
func mapCandidates(p Path, to []int32) Path {
	q := p
	q.Entries, q.Coefs = slices.Clone(p.Entries), slices.Clone(p.Coefs)
	for i := range q.Entries {
		q.Entries[i].Candidate = to[q.Entries[i].Candidate]
	}
	for i := range q.Coefs {
		q.Coefs[i].Candidate = to[q.Coefs[i].Candidate]
	}
	slices.SortFunc(q.Entries, func(a, b Entry) int {
		if a.Step != b.Step {
			return int(a.Step - b.Step)
		}
		return int(a.Candidate - b.Candidate)
	})
	slices.SortFunc(q.Coefs, func(a, b Coef) int {
		if a.Step != b.Step {
			return int(a.Step - b.Step)
		}
		return int(a.Candidate - b.Candidate)
	})
	q.Still = slices.Clone(p.Still)
	for i := range q.Still {
		q.Still[i] = to[q.Still[i]]
	}
	slices.Sort(q.Still)
	return q
}

// TestColumnOrder: the order of the columns does not matter, also where
// columns coincide within draws.
func TestColumnOrder(t *testing.T) {
	n, p := 60, 90
	for _, name := range []string{"lasso", "elastic net", "twins", "rare marks", "near copies"} {
		q := settings(n, p)[name]()
		samples := halves(n, 4, 9)
		want := mustFit(t, mustModel(t, q), samples)
		perm := rand.New(rand.NewPCG(8, 8)).Perm(p)
		r := q
		r.Candidates = make([]int32, p)
		to := make([]int32, p)
		for c, j := range perm {
			r.Candidates[c], to[c] = int32(j), int32(j)
		}
		for k, got := range mustFit(t, mustModel(t, r), samples) {
			if d := difference(want[k], mapCandidates(got, to), 1e-9); d != "" {
				t.Errorf("%s: draw %d: other %s", name, k, d)
			}
		}
	}
}

// TestRowOrder: the order of the table's rows does not matter.
func TestRowOrder(t *testing.T) {
	n, p := 61, 40
	cols, y := invented(n, p, 12)
	want := mustFit(t, mustModel(t, problemOf(cols, y)), halves(n, 3, 5))
	perm := rand.New(rand.NewPCG(6, 6)).Perm(n)
	at := make([]int32, n)
	cols2, y2 := make([][]float64, p), make([]float64, n)
	for j := range cols2 {
		cols2[j] = make([]float64, n)
	}
	for i, k := range perm {
		at[i] = int32(k)
		y2[k] = y[i]
		for j := range cols {
			cols2[j][k] = cols[j][i]
		}
	}
	var moved []*Sample
	for _, s := range halves(n, 3, 5) {
		var rows []int32
		for i := range n {
			if s.Weight(i) > 0 {
				rows = append(rows, at[i])
			}
		}
		moved = append(moved, NewSample(n, rows))
	}
	for k, got := range mustFit(t, mustModel(t, problemOf(cols2, y2)), moved) {
		if d := difference(want[k], got, 1e-9); d != "" {
			t.Errorf("draw %d: other %s", k, d)
		}
	}
}

// TestShiftAndScale: columns moved by 1e8 standard deviations and stretched
// give the same selections; coefficients agree as far as the moved column
// still holds the digits (about 8 of 16).
func TestShiftAndScale(t *testing.T) {
	n, p := 80, 30
	cols, y := invented(n, p, 13)
	samples := halves(n, 3, 6)
	want := mustFit(t, mustModel(t, problemOf(cols, y)), samples)
	stretch := func(j int) float64 { return math.Pow(10, float64(j%7-3)) }
	scaled := make([][]float64, p)
	moved := make([][]float64, p)
	for j, x := range cols {
		scaled[j], moved[j] = make([]float64, n), make([]float64, n)
		for i, v := range x {
			scaled[j][i] = v * stretch(j)
			moved[j][i] = v*stretch(j) + 1e8*stretch(j)
		}
	}
	for name, c := range map[string]struct {
		cols      [][]float64
		tolerance float64
	}{"scaled": {scaled, 1e-9}, "moved": {moved, 1e-5}} {
		for k, got := range mustFit(t, mustModel(t, problemOf(c.cols, y)), samples) {
			for i := range got.Coefs {
				got.Coefs[i].Value *= stretch(int(got.Coefs[i].Candidate))
			}
			got.Intercepts = want[k].Intercepts // 1e8 away, no digits to compare
			if d := difference(want[k], got, c.tolerance); d != "" {
				t.Errorf("%s: draw %d: other %s", name, k, d)
			}
		}
	}
}

// TestWeights: weight 0 is a deleted row, weight 2 a doubled one.
func TestWeights(t *testing.T) {
	n, p := 50, 20
	cols, y := invented(n, p, 14)
	pick := func(rows []int) Problem {
		c2, y2 := make([][]float64, p), []float64{}
		for _, i := range rows {
			y2 = append(y2, y[i])
		}
		for j := range cols {
			for _, i := range rows {
				c2[j] = append(c2[j], cols[j][i])
			}
		}
		return problemOf(c2, y2)
	}
	var kept, doubled []int
	zero, two := make([]float64, n), make([]float64, n)
	for i := range n {
		zero[i], two[i] = 1, 1
		if i%7 == 3 {
			zero[i] = 0
		} else {
			kept = append(kept, i)
		}
		doubled = append(doubled, i)
		if i%5 == 0 {
			two[i] = 2
			doubled = append(doubled, i)
		}
	}
	for name, c := range map[string]struct {
		weights []float64
		rows    []int
	}{"zero": {zero, kept}, "two": {two, doubled}} {
		q := problemOf(cols, y)
		q.Case = c.weights
		weighted := mustModel(t, q)
		plain := mustModel(t, pick(c.rows))
		if a, b := weighted.LambdaMax(), plain.LambdaMax(); math.Abs(a-b) > 1e-12*a {
			t.Errorf("%s: lambda_max %g and %g", name, a, b)
		}
		a := mustFit(t, weighted, []*Sample{AllRows(n)})[0]
		b := mustFit(t, plain, []*Sample{AllRows(len(c.rows))})[0]
		if d := difference(a, b, 1e-9); d != "" {
			t.Errorf("%s: other %s", name, d)
		}
	}
}

// TestFinerLattice: twice as many lambdas leave the shared ones as they were.
func TestFinerLattice(t *testing.T) {
	n := 60
	for name, make := range settings(n, 90) {
		coarse := make()
		coarse.Ratio, coarse.StopAfter = 0.9, 0
		fine := make()
		fine.Ratio, fine.StopAfter = math.Sqrt(0.9), 0
		samples := halves(n, 2, 5)
		a, b := mustFit(t, mustModel(t, coarse), samples), mustFit(t, mustModel(t, fine), samples)
		for k := range a {
			if d := sharedSteps(a[k], b[k]); d != "" {
				t.Errorf("%s: draw %d: %s", name, k, d)
			}
		}
	}
}

// sharedSteps compares a path with every second step of a finer one.
func sharedSteps(coarse, fine Path) string {
	at := make(map[[2]int32]float64)
	for _, c := range fine.Coefs {
		at[[2]int32{c.Step, c.Candidate}] = c.Value
	}
	count, largest := 0, 0.0
	for _, c := range coarse.Coefs {
		largest = max(largest, math.Abs(c.Value))
	}
	for _, c := range coarse.Coefs {
		v, ok := at[[2]int32{2 * c.Step, c.Candidate}]
		if !ok {
			return "a candidate is missing at a shared lambda"
		}
		if math.Abs(v-c.Value) > 1e-8*largest {
			return "other coefficients at a shared lambda"
		}
		count++
	}
	for _, c := range fine.Coefs {
		if c.Step%2 == 0 && int(c.Step/2) <= coarse.Last {
			count--
		}
	}
	if count != 0 {
		return "other supports at shared lambdas"
	}
	return ""
}

// TestAtLambdaMax: at lambda_max and above nothing is selected and the fit is
// the mean; just below something is (common practice).
func TestAtLambdaMax(t *testing.T) {
	cols, y := invented(40, 60, 15)
	m := mustModel(t, problemOf(cols, y))
	top := m.LambdaMax()
	fits, err := m.FitAt(context.Background(), AllRows(40), []float64{2 * top, top, top * (1 - 1e-6)})
	if err != nil {
		t.Fatal(err)
	}
	mean := 0.0
	for _, v := range y {
		mean += v / 40
	}
	for k, want := range []int{0, 0, 1} {
		if fits[k].Selected != want || !fits[k].Certified {
			t.Errorf("at %g lambda_max: %d selected, certified %v; want %d", fits[k].Lambda/top, fits[k].Selected, fits[k].Certified, want)
		}
		if want == 0 && math.Abs(fits[k].Intercept[0]-mean) > 1e-12 {
			t.Errorf("intercept %g is not the mean %g", fits[k].Intercept[0], mean)
		}
	}
}

// TestFillMean: filling by the algebra on the shared matrix equals filling
// each draw's own copy by hand, at few and at many missing cells.
func TestFillMean(t *testing.T) {
	n, p := 70, 30
	cols, y := invented(n, p, 16)
	for _, share := range []float64{0.05, 0.6} {
		q, masks := holed(cols, y, share)
		samples := halves(n, 4, 7)
		for k, got := range mustFit(t, mustModel(t, q), samples) {
			copied := filledCopy(cols, y, masks, samples[k])
			m := mustModel(t, copied)
			m.lattice, m.last = mustModel(t, q).lattice, mustModel(t, q).last // the same lambdas
			want := mustFit(t, m, []*Sample{AllRows(n / 2)})[0]
			if d := difference(want, got, 1e-9); d != "" {
				t.Errorf("%g missing: draw %d: other %s", share, k, d)
			}
		}
	}
}

// filledCopy copies the drawn rows, missing cells filled with the mean of the
// draw's filled ones.
func filledCopy(cols [][]float64, y []float64, masks map[int32][]uint64, s *Sample) Problem {
	var c2 [][]float64
	var y2 []float64
	for i := range y {
		if s.Weight(i) > 0 {
			y2 = append(y2, y[i])
		}
	}
	for j, x := range cols {
		mask := masks[int32(j)]
		var v []float64
		var missing []int
		mean, filled := 0.0, 0.0
		for i := range y {
			if s.Weight(i) == 0 {
				continue
			}
			if mask != nil && isHole(mask, int32(i)) {
				missing = append(missing, len(v))
				v = append(v, 0)
				continue
			}
			v = append(v, x[i])
			mean += x[i]
			filled++
		}
		for _, i := range missing {
			v[i] = mean / filled
		}
		c2 = append(c2, v)
	}
	return problemOf(c2, y2)
}
