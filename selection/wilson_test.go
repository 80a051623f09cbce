package selection

import (
	"math"
	"testing"
)

// The interval of Wilson (1927) solves |f - p| = z sqrt(p(1-p)/n) for p: both
// sides of the identity are compared.
func TestWilsonSolvesItsEquation(t *testing.T) {
	z := 1.9599639845400536 // normal quantile of 0.975 (Python 3.11, statistics.NormalDist)
	for _, n := range []int{1, 2, 10, 200} {
		for c := 0; c <= n; c += 1 + n/20 {
			lo, hi, err := Wilson(c, n, 0.95)
			if err != nil {
				t.Fatal(err)
			}
			f := float64(c) / float64(n)
			for _, p := range []float64{lo, hi} {
				if math.Abs(math.Abs(f-p)-z*math.Sqrt(p*(1-p)/float64(n))) > 1e-9 {
					t.Errorf("Wilson(%d, %d): end %g does not solve the equation", c, n, p)
				}
			}
			if lo > f || hi < f || lo < 0 || hi > 1 {
				t.Errorf("Wilson(%d, %d) = %g, %g does not hold %g", c, n, lo, hi, f)
			}
		}
	}
}

// coverage is the exact chance that the pair-aware interval holds pi, where two
// halves of a pair choose with chance pi each and correlation rho; ok is false
// where no such law exists.
func coverage(ends [][2]float64, counts [][3]int, logs []float64, pi, rho float64) (share float64, ok bool) {
	cov := rho * pi * (1 - pi)
	p2, p0 := pi*pi+cov, (1-pi)*(1-pi)+cov
	p1 := 1 - p2 - p0
	if p2 < -1e-12 || p0 < -1e-12 || p1 < -1e-12 {
		return 0, false
	}
	l := [3]float64{math.Log(math.Max(p0, 0)), math.Log(math.Max(p1, 0)), math.Log(math.Max(p2, 0))}
	for i, n := range counts {
		if pi < ends[i][0] || pi > ends[i][1] {
			continue
		}
		log := logs[i]
		for k, m := range n {
			if m > 0 {
				log += float64(m) * l[k]
			}
		}
		share += math.Exp(log)
	}
	return share, true
}

// outcomes enumerates all outcomes of b pairs with their intervals and the
// logarithms of their multinomial coefficients.
func outcomes(t *testing.T, b int) (ends [][2]float64, counts [][3]int, logs []float64) {
	t.Helper()
	lf := func(n int) float64 { v, _ := math.Lgamma(float64(n + 1)); return v }
	for n1 := 0; n1 <= b; n1++ {
		for n2 := 0; n1+n2 <= b; n2++ {
			n0 := b - n1 - n2
			lo, hi, _, err := WilsonPairs(n0, n1, n2, 0.95)
			if err != nil {
				t.Fatal(err)
			}
			counts = append(counts, [3]int{n0, n1, n2})
			ends = append(ends, [2]float64{lo, hi})
			logs = append(logs, lf(b)-lf(n0)-lf(n1)-lf(n2))
		}
	}
	return ends, counts, logs
}

// STATISTICS 6 measured, by exact enumeration over chances of .02 to .98 and
// correlations of -.9 to .9, a least coverage of .924, .936 and .946. Chances in
// steps of .05 with both ends give those numbers to the last digit; in steps of
// .01 it is a little less (scipy 1.10.1 gives the same .9220, .9299, .9324).
func TestWilsonPairsCoverage(t *testing.T) {
	for _, c := range []struct {
		pairs        int
		coarse, fine float64
	}{{25, 0.924, 0.922}, {50, 0.936, 0.930}, {100, 0.946, 0.932}} {
		ends, counts, logs := outcomes(t, c.pairs)
		coarse, fine := 1.0, 1.0
		for pi := 2; pi <= 98; pi++ {
			for rho := -9; rho <= 9; rho++ {
				cover, ok := coverage(ends, counts, logs, float64(pi)/100, float64(rho)/10)
				if !ok {
					continue
				}
				fine = math.Min(fine, cover)
				if pi%5 == 0 || pi == 2 || pi == 98 {
					coarse = math.Min(coarse, cover)
				}
			}
		}
		if math.Abs(coarse-c.coarse) > 0.0005 || math.Abs(fine-c.fine) > 0.0005 {
			t.Errorf("%d pairs: least coverage %.4f, in steps of .01 %.4f, want %.3f and %.3f", c.pairs, coarse, fine, c.coarse, c.fine)
		}
	}
}

func TestWilsonMisuse(t *testing.T) {
	for _, c := range [][3]int{{0, 0, 0}, {-1, 2, 3}, {1, -1, 1}, {1, 1, -1}} {
		if _, _, _, err := WilsonPairs(c[0], c[1], c[2], 0.95); err == nil {
			t.Errorf("WilsonPairs%v: no error", c)
		}
	}
	for _, level := range []float64{0, 1, -1, 2, math.NaN()} {
		if _, _, _, err := WilsonPairs(1, 1, 1, level); err == nil {
			t.Errorf("level %g: no error", level)
		}
	}
	if _, _, err := Wilson(3, 2, 0.95); err == nil {
		t.Error("3 of 2: no error")
	}
	if _, _, neff, err := WilsonPairs(0, 1, 0, 0.95); err != nil || neff != 1 {
		t.Errorf("one pair: effective size %g, %v, want 1", neff, err)
	}
}
