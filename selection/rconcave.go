package selection

import "math"

// DValue is the function D of the r-concave bound (Shah and Samworth
// 2013): the largest P(X >= t) over all X on {0, 1/n, ..., 1} with mean
// at most eta whose probability mass function f is r-concave, that is f^r is
// convex on the support and the support has no gaps. It takes eta in [0,1],
// n >= 1 and r < 0.
//
// The maximum is exact, found among the mass functions for which f^r is affine
// on {0, ..., k} and zero above: an extreme point of the set has no kink, the
// mean must be used up, and starting above 0 never helps.
func DValue(eta, t float64, n int, r float64) (float64, error) {
	switch {
	case !(eta >= 0 && eta <= 1):
		return 0, badNumber("eta", eta, "must lie in 0..1")
	case math.IsNaN(t):
		return 0, badNumber("t", t, "must be a number")
	case n < 1:
		return 0, badCount("n", n, "must be at least 1")
	case !(r < 0) || math.IsInf(r, 0):
		return 0, badNumber("r", r, "must be below 0")
	}
	x := math.Max(-1, math.Min(float64(n)*t, float64(n)+1)) // outside, the answer is 1 or 0 anyway
	return tailMax(eta, int(ceilSnap(x)), n, r), nil
}

// tailMax is D with the tail given as a count j: the largest P(nX >= j).
func tailMax(eta float64, j, n int, r float64) float64 {
	mean := float64(n) * eta
	switch {
	case j <= 0 || float64(j) <= mean:
		return 1
	case j > n || eta == 0:
		return 0
	}
	best := 0.0
	for k := j; k <= n; k++ { // the value is not monotone in k: all are tried
		best = math.Max(best, affine{k, r}.tail(j, mean))
	}
	return best
}

// affine is the family of mass functions f on {0..k} with f^r affine: weights
// (((k-i) + rho i)/k)^(1/r), rho > 0. The mean falls in rho, from k to 0.
type affine struct {
	k int
	r float64
}

// tail returns P(i >= j) for the member whose mean is given, 0 < mean < j <= k.
func (a affine) tail(j int, mean float64) float64 {
	wide := math.Min(60*math.Max(1, -2*a.r), -600*a.r) // the weights then span e^-120 to e^120, and never overflow
	lo, hi := -wide, wide                              // of log rho
	for hi-lo > 1e-15*math.Max(wide/60, math.Abs(lo+hi)/2) {
		mid := (lo + hi) / 2
		if mid == lo || mid == hi {
			break
		}
		if m, _ := a.moments(mid, j); m > mean {
			lo = mid
		} else {
			hi = mid
		}
	}
	_, tail := a.moments((lo+hi)/2, j)
	return tail
}

// moments returns the mean and P(i >= j) at log rho = u.
func (a affine) moments(u float64, j int) (mean, tail float64) {
	rho := math.Exp(u)
	var sum, first, above float64
	for i := 0; i <= a.k; i++ {
		w := a.weight(float64(i), u, rho)
		sum += w
		first += float64(w * float64(i))
		if i >= j {
			above += w
		}
	}
	return first / sum, above / sum
}

// weight is ((k-i) + rho i)^(1/r) at rho = e^u, up to a factor that all i share:
// without a logarithm for the two exponents in use, else by logarithms, since
// rho can then be too large or small for a float64.
func (a affine) weight(i, u, rho float64) float64 {
	k := float64(a.k)
	x := k - i + float64(rho*i)
	switch a.r {
	case -0.5:
		return 1 / (x * x)
	case -0.25:
		x *= x
		return 1 / (x * x)
	}
	return math.Exp(logMix(i/k, u) / a.r)
}

// logMix is log(1 - s + s e^u) for s in [0,1].
func logMix(s, u float64) float64 {
	switch {
	case s == 0:
		return 0
	case s == 1:
		return u
	case u <= 0:
		return math.Log1p(s * math.Expm1(u))
	}
	return u + math.Log(s+float64((1-s)*math.Exp(-u)))
}
