package selection

import "math"

// Wilson is the interval of Wilson (1927) for count successes in n independent
// trials at the given level, in (0,1). It is the Monte-Carlo interval of a
// frequency over bootstrap draws.
func Wilson(count, n int, level float64) (lo, hi float64, err error) {
	switch {
	case n < 1:
		return 0, 0, badCount("draws", n, "must be at least 1")
	case count < 0 || count > n:
		return 0, 0, badCount("count", count, "must lie between 0 and the number of draws")
	}
	z, err := normalHalfWidth(level)
	if err != nil {
		return 0, 0, err
	}
	lo, hi = wilson(count, n, float64(n), z)
	return lo, hi, nil
}

// WilsonPairs is the Monte-Carlo interval of a frequency over complementary
// pairs, of which n0, n1 and n2 chose the predictor in no, one and both halves.
// The two halves of a pair depend on each other, so Wilson's interval is taken
// at the effective size
//
//	neff = clip(B f (1-f) / s^2, B, 2B),
//
// s^2 the sample variance of the pair averages; f of 0 or 1: B; s^2 = 0
// otherwise: 2B; one pair: 1 (STATISTICS 6).
func WilsonPairs(n0, n1, n2 int, level float64) (lo, hi, neff float64, err error) {
	switch {
	case n0 < 0 || n1 < 0 || n2 < 0:
		return 0, 0, 0, badCount("pairs", min(n0, n1, n2), "counts of pairs must not be negative")
	case n0+n1+n2 == 0:
		return 0, 0, 0, badCount("pairs", 0, "must be at least 1")
	}
	z, err := normalHalfWidth(level)
	if err != nil {
		return 0, 0, 0, err
	}
	neff = effectiveSize(n0, n1, n2)
	lo, hi = wilson(n1+2*n2, 2*(n0+n1+n2), neff, z)
	return lo, hi, neff, nil
}

// effectiveSize works on integers: with c selections in B pairs,
// f = c/(2B) and s^2 = (B(n1+4 n2) - c^2) / (4B(B-1)).
func effectiveSize(n0, n1, n2 int) float64 {
	b := n0 + n1 + n2
	c := n1 + 2*n2
	spread := b*(n1+4*n2) - c*c
	switch {
	case b == 1:
		return 1
	case c == 0 || c == 2*b:
		return float64(b)
	case spread == 0:
		return float64(2 * b)
	}
	size := float64(c) * float64(2*b-c) * float64(b-1) / float64(spread)
	return math.Min(math.Max(size, float64(b)), float64(2*b))
}

// normalHalfWidth is the two-sided normal quantile of a level.
func normalHalfWidth(level float64) (float64, error) {
	if !(level > 0 && level < 1) {
		return 0, badNumber("level", level, "must lie between 0 and 1")
	}
	return math.Sqrt2 * math.Erfinv(level), nil
}

// wilson is the interval for count of n at an effective size and quantile z.
func wilson(count, n int, size, z float64) (lo, hi float64) {
	f := float64(count) / float64(n)
	shrink := 1 + z*z/size
	centre := (f + z*z/(2*size)) / shrink
	half := float64(z / shrink * math.Sqrt(float64(f*(1-f))/size+z*z/(4*size*size)))
	lo, hi = math.Max(0, centre-half), math.Min(1, centre+half)
	if count == 0 {
		lo = 0
	}
	if count == n {
		hi = 1
	}
	return lo, hi
}
