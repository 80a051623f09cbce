package main

import (
	"math"
	"testing"
)

// Exact probabilities of U from Mann & Whitney (1947), Annals of Mathematical
// Statistics 18, table I (from memory; each is also a count that can be made
// by hand, such as 1 arrangement of 70 for U = 0 with 4 and 4 values).
func TestMannWhitney(t *testing.T) {
	for _, c := range []struct {
		a, b []float64
		want float64
	}{
		{[]float64{1, 2, 3, 4}, []float64{5, 6, 7, 8}, 2.0 / 70},
		{[]float64{1, 2, 3, 5}, []float64{4, 6, 7, 8}, 4.0 / 70}, // U = 1
		{[]float64{1, 2, 4, 5}, []float64{3, 6, 7, 8}, 8.0 / 70}, // U = 2: 1 + 1 + 2
		{[]float64{5, 6, 7}, []float64{1, 2, 3}, 2.0 / 20},
		{[]float64{1, 4}, []float64{2, 3}, 1},
	} {
		if got := mannWhitney(c.a, c.b); math.Abs(got-c.want) > 1e-12 {
			t.Errorf("%v against %v: p %g, want %g", c.a, c.b, got, c.want)
		}
	}
}

// The order statistics that cover the median with at least 95 %: the range
// for six values (96.9 %), second and ninth of ten (97.9 %); Conover (1999),
// Practical Nonparametric Statistics, section 3.2.
func TestInterval(t *testing.T) {
	for _, c := range []struct {
		n         int
		low, high float64
	}{{4, 1, 4}, {6, 1, 6}, {8, 1, 8}, {9, 2, 8}, {10, 2, 9}, {20, 6, 15}} {
		x := make([]float64, c.n)
		for i := range x {
			x[i] = float64((i*7)%c.n + 1) // 7 is coprime to every n here
		}
		low, high := interval(x)
		if low != c.low || high != c.high {
			t.Errorf("%d values: [%g, %g], want [%g, %g]", c.n, low, high, c.low, c.high)
		}
	}
}

func TestShareOf(t *testing.T) {
	listing := []byte(`File: engine
Type: cpu
Showing nodes accounting for 2s, 100% of 2s total
      flat  flat%   sum%        cum   cum%
     1.20s 60.00% 60.00%      1.20s 60.00%  holdfast/solver/kernel.Products (inline)
     0.60s 30.00% 90.00%      1.90s 95.00%  holdfast/solver.(*Model).screen
     0.20s 10.00%   100%      0.20s 10.00%  holdfast/solver/kernel.dot
`)
	got, err := shareOf(listing, kernelPrefix)
	if err != nil || math.Abs(got-0.7) > 1e-12 {
		t.Errorf("share %g, %v; want 0.7", got, err)
	}
	if _, err := shareOf([]byte("nothing"), kernelPrefix); err == nil {
		t.Error("an empty listing has a share")
	}
}
