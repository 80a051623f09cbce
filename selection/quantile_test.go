package selection

import (
	"math/rand/v2"
	"slices"
	"testing"
)

// Quantiles of type 7 by numpy 1.24.2, np.quantile(x, [.025, .5, .975]), whose
// default is Hyndman and Fan's (1996) type 7. Zeros are left out of values.
func TestQuantileAgainstNumpy(t *testing.T) {
	for _, c := range []struct {
		values []float64
		n      int
		want   [3]float64
	}{
		{[]float64{-1.5, 0.25, 2, 3, 3, 7.5}, 8, [3]float64{-1.2375, 1.125, 6.7125}},
		{[]float64{-1.5, 0, 0.25, 2, 3, 3, 7.5}, 8, [3]float64{-1.2375, 1.125, 6.7125}},
		{[]float64{1, 2}, 2, [3]float64{1.025, 1.5, 1.975}},
		{[]float64{4}, 1, [3]float64{4, 4, 4}},
		{[]float64{-1.5, 0.1, 0.25, 2, 3, 3, 7.5}, 9, [3]float64{-1.2, 0.25, 6.6}},
		{nil, 5, [3]float64{}},
	} {
		s := newSparse(c.values, c.n).spread()
		if !near(s.Low, c.want[0]) || !near(s.Median, c.want[1]) || !near(s.High, c.want[2]) {
			t.Errorf("%v of %d: %+v, want %v", c.values, c.n, *s, c.want)
		}
	}
}

// Leaving out zeros changes nothing.
func TestSparseEqualsDense(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 8))
	for range 500 {
		n := 1 + rng.IntN(30)
		var some []float64
		all := make([]float64, n)
		for i := range all {
			if rng.IntN(2) == 0 {
				all[i] = rng.NormFloat64()
				some = append(some, all[i])
			}
		}
		slices.Sort(some)
		slices.Sort(all)
		a, b := newSparse(some, n), newSparse(all, n)
		for mille := 0; mille <= 1000; mille += 25 {
			if a.quantile(mille) != b.quantile(mille) {
				t.Fatalf("%v of %d at %d: %g, dense %g", some, n, mille, a.quantile(mille), b.quantile(mille))
			}
		}
	}
}
