package shape

import (
	"context"
	"math"
	"testing"

	"gonum.org/v1/gonum/stat"

	"holdfast/resample"
	"holdfast/solver"
)

// many is enough rows for the moments below, and few columns.
var many = Shape{Rows: 40_000, Cols: 20, Signals: 5, SNR: 2}

func of(family solver.Family) (Shape, Table) {
	s := many
	s.Family = family
	return s, s.Make(11)
}

func TestAboveMedian(t *testing.T) {
	_, got := of(solver.Binomial)
	_, number := of(solver.Gaussian)
	if ones := count(got.Outcome, 1); ones != many.Rows/2 || count(got.Outcome, 0) != many.Rows-ones {
		t.Errorf("%d ones of %d rows, want half", ones, many.Rows)
	}
	highest, lowest := math.Inf(-1), math.Inf(1) // of the zeros, of the ones
	for i, y := range got.Outcome {
		if y == 0 {
			highest = max(highest, number.Outcome[i])
		} else {
			lowest = min(lowest, number.Outcome[i])
		}
	}
	if highest >= lowest {
		t.Errorf("a row at %g is 0 and one at %g is 1", highest, lowest)
	}
}

// TestCounts: a lognormal mean m e^(s Z - s^2/2) has expectation m; the counts'
// variance is m + m^2 (e^(s^2) - 1), here 2 + 4. 6 standard errors of heavy tails.
func TestCounts(t *testing.T) {
	_, got := of(solver.Poisson)
	mean, variance := stat.MeanVariance(got.Outcome, nil)
	if math.Abs(mean-2) > 0.1 || math.Abs(variance-6) > 0.9 {
		t.Errorf("mean %g, variance %g; want 2, 6", mean, variance)
	}
	for _, y := range got.Outcome {
		if y < 0 || y != math.Floor(y) {
			t.Fatalf("%v is no count", y)
		}
	}
}

func TestClasses(t *testing.T) {
	_, got := of(solver.Multinomial)
	for c := range classes { // not equal shares: the scores have other signals
		if n := count(got.Outcome, float64(c)); n < many.Rows/5 || n > many.Rows/2 {
			t.Errorf("class %d in %d of %d rows", c, n, many.Rows)
		}
	}
}

// TestTimes: hazard e^eta against 1 ends in the event with chance 1/2 where eta
// is symmetric about 0 (the logistic function is odd about it).
func TestTimes(t *testing.T) {
	_, got := of(solver.Cox)
	if share := float64(count(got.Event, 1)) / float64(many.Rows); math.Abs(share-0.5) > 0.02 {
		t.Errorf("the event is seen in %g of the rows, want a half", share)
	}
	seen := map[float64]int{}
	for _, v := range got.Outcome {
		if v < 1 || v != math.Floor(v) {
			t.Fatalf("time %v: want whole days", v)
		}
		seen[v]++
	}
	if len(seen) == many.Rows {
		t.Error("no two times coincide")
	}
}

// TestHalves: a half holds half of each class or event status.
func TestHalves(t *testing.T) {
	for _, family := range []solver.Family{solver.Binomial, solver.Multinomial, solver.Cox} {
		s, table := of(family)
		plan, err := s.Plan(table, 2, 1)
		if err != nil {
			t.Fatal(err)
		}
		of := table.Outcome
		if family == solver.Cox {
			of = table.Event
		}
		var drawn []float64
		for row := range resample.Drawn(plan.Sample(1)) {
			drawn = append(drawn, of[row])
		}
		for level := range 3 {
			if got, want := count(drawn, float64(level)), count(of, float64(level))/2; got != want {
				t.Errorf("%v: level %d in %d rows of a half, want %d", family, level, got, want)
			}
		}
	}
}

// TestProblem fits every kind down to its last lambda.
func TestProblem(t *testing.T) {
	for family := solver.Gaussian; family <= solver.Cox; family++ {
		s := Shape{Rows: 400, Cols: 20, Signals: 3, SNR: 2, Family: family, Lambdas: 5}
		m, err := solver.NewModel(context.Background(), s.Problem(s.Make(2), s.Ratio(0.3, 0), 0.3))
		if err != nil {
			t.Fatal(err)
		}
		if m.LastStep() != 4 {
			t.Errorf("%v: last step %d, want 4 for 5 lambdas", family, m.LastStep())
		}
		paths, err := m.FitBlock(context.Background(), []*solver.Sample{solver.AllRows(s.Rows)}, nil)
		if err != nil {
			t.Fatal(err)
		}
		if p := paths[0]; p.Last != 4 || len(p.Entries) == 0 {
			t.Errorf("%v: %d entries down to step %d: %s", family, len(p.Entries), p.Last, p.Why)
		}
	}
}

func count(values []float64, of float64) int {
	n := 0
	for _, v := range values {
		if v == of {
			n++
		}
	}
	return n
}
