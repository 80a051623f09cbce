package resample

import (
	"cmp"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"holdfast/solver"
)

// What the bounds rest on (STATISTICS 1): on tables without any signal the two
// halves of a pair choose a predictor independently, E(U V) = theta^2. The
// selector takes the q candidates of the largest |correlation with the outcome|
// times W. All candidates are alike, so theta = q/p exactly, and the mean over
// candidates of U V is |A and B|/p.
const (
	nullRows       = 40
	nullCandidates = 30
	nullSelected   = 3
	nullTables     = 8000
)

// nullTable is a table of noise: candidates by row, and an outcome of two classes
// of unequal size.
type nullTable struct {
	columns [][]float64
	outcome []float64
	classes []int32
}

func signalless(r *rand.Rand) nullTable {
	t := nullTable{columns: make([][]float64, nullCandidates), outcome: make([]float64, nullRows), classes: make([]int32, nullRows)}
	for j := range t.columns {
		t.columns[j] = make([]float64, nullRows)
		for i := range t.columns[j] {
			t.columns[j][i] = r.NormFloat64()
		}
	}
	for i, at := range r.Perm(nullRows) {
		if i < nullRows/4 {
			t.outcome[at], t.classes[at] = 1, 1
		}
	}
	return t
}

// choose marks the candidates that a draw selects.
func (t nullTable) choose(s *solver.Sample) (chosen [nullCandidates]bool) {
	var score [nullCandidates]float64
	order := make([]int, nullCandidates)
	for j := range order {
		order[j] = j
		score[j] = math.Abs(correlationWith(t.columns[j], t.outcome, s))
		if s.Jitter != nil {
			score[j] *= s.Jitter[j]
		}
	}
	slices.SortFunc(order, func(a, b int) int { return cmp.Compare(score[b], score[a]) })
	for _, j := range order[:nullSelected] {
		chosen[j] = true
	}
	return chosen
}

// correlationWith is Pearson's, over the rows of a draw.
func correlationWith(x, y []float64, s *solver.Sample) float64 {
	var n, sx, sy, sxx, syy, sxy float64
	for row, count := range Drawn(s) {
		w := float64(count)
		n, sx, sy = n+w, sx+w*x[row], sy+w*y[row]
		sxx, syy, sxy = sxx+w*x[row]*x[row], syy+w*y[row]*y[row], sxy+w*x[row]*y[row]
	}
	return (sxy - sx*sy/n) / math.Sqrt((sxx-sx*sx/n)*(syy-sy*sy/n))
}

// together is E(U V)/theta^2 over many tables, and its standard error: one pair
// of each table, so that the values are independent.
func together(pair func(t nullTable, seed uint64) [2]*solver.Sample) (ratio, se float64) {
	r := rand.New(rand.NewPCG(19, 4))
	sum, squares := 0.0, 0.0
	for table := range nullTables {
		t := signalless(r)
		p := pair(t, uint64(table))
		a, b := t.choose(p[0]), t.choose(p[1])
		both := 0.0
		for j := range a {
			if a[j] && b[j] {
				both++
			}
		}
		v := both * nullCandidates / (nullSelected * nullSelected)
		sum, squares = sum+v, squares+v*v
	}
	ratio = sum / nullTables
	return ratio, math.Sqrt((squares/nullTables - ratio*ratio) / nullTables)
}

// nullPair draws the first pair of a plan for a table.
func nullPair(design Plan, strata bool, fit func(t nullTable) func(*solver.Sample) error) func(nullTable, uint64) [2]*solver.Sample {
	return func(t nullTable, seed uint64) [2]*solver.Sample {
		p := design
		p.Rows, p.Number, p.Seed = nullRows, 2, seed
		if strata {
			p.Within = t.classes
		}
		p, err := NewPlan(p)
		if err != nil {
			panic(err)
		}
		if fit != nil {
			p.Fit = fit(t)
		}
		a, _, _ := p.Draw(0)
		b, _, _ := p.Draw(1)
		return [2]*solver.Sample{a, b}
	}
}

// balanced refuses halves that hold fewer than 5 of the 10 rows of class 1: both
// pass in about a third of the attempts.
func balanced(t nullTable) func(*solver.Sample) error {
	return func(s *solver.Sample) error {
		if n := tallyOf(s, t.classes)[1]; n < 5 {
			return fmt.Errorf("%d rows of class 1", n)
		}
		return nil
	}
}

// Strata of the outcome's class, W of each half's own, and pairs made anew as a
// whole: E(U V)/theta^2 is 1 within its error in all of them. STATISTICS 4
// measured 0.94 to 1.01 for W of each half's own.
func TestHalvesChooseIndependently(t *testing.T) {
	jitter := Plan{Jitter: 0.2, Keys: gauges(nullCandidates)}
	for name, pair := range map[string]func(nullTable, uint64) [2]*solver.Sample{
		"halves":           nullPair(Plan{}, false, nil),
		"strata":           nullPair(Plan{}, true, nil),
		"jitter":           nullPair(jitter, false, nil),
		"jitter in strata": nullPair(jitter, true, nil),
		"redraws":          nullPair(Plan{}, false, balanced),
		"redraws, jitter":  nullPair(jitter, false, balanced),
	} {
		ratio, se := together(pair)
		if math.Abs(ratio-1) > 3.5*se || se > 0.025 {
			t.Errorf("%s: E(UV)/theta^2 = %.3f, standard error %.3f", name, ratio, se)
		}
		t.Logf("%s: E(UV)/theta^2 = %.3f, standard error %.3f", name, ratio, se)
	}
}

// What makes halves dependent is seen: one W for both (STATISTICS 4 measured 1.9
// to 2.6), and halves that share rows.
func TestDependentHalvesAreCaught(t *testing.T) {
	jitter := Plan{Jitter: 0.2, Keys: gauges(nullCandidates)}
	shared := func(t nullTable, seed uint64) [2]*solver.Sample {
		p := nullPair(jitter, false, nil)(t, seed)
		p[1].Jitter = p[0].Jitter
		return p
	}
	overlapping := func(t nullTable, seed uint64) [2]*solver.Sample {
		draw := nullPair(Plan{}, false, nil)
		return [2]*solver.Sample{draw(t, seed)[0], draw(t, seed+nullTables)[0]}
	}
	for name, pair := range map[string]func(nullTable, uint64) [2]*solver.Sample{"one W for both": shared, "shared rows": overlapping} {
		ratio, se := together(pair)
		if ratio-1 < 6*se {
			t.Errorf("%s: E(UV)/theta^2 = %.3f, standard error %.3f: the check did not see it", name, ratio, se)
		}
		t.Logf("%s: E(UV)/theta^2 = %.3f, standard error %.3f", name, ratio, se)
	}
}
