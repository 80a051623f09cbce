package kernel

import "math"

// ln2 in two parts: the first has 32 trailing zeros, so that a small integer
// times it is exact.
const (
	ln2High = 0x1.62e42feep-1
	ln2Low  = 0x1.a39ef35793c76p-33
)

// inverseFactorial of 13 down to 2: the Taylor coefficients of exp.
var inverseFactorial = [...]float64{
	1.0 / 6227020800, 1.0 / 479001600, 1.0 / 39916800, 1.0 / 3628800, 1.0 / 362880, 1.0 / 40320,
	1.0 / 5040, 1.0 / 720, 1.0 / 120, 1.0 / 24, 1.0 / 6, 1.0 / 2,
}

// Exp returns e^x to within about one unit in the last place, with the same bits
// on every machine: the library's function has other bits where the processor
// fuses multiplication and addition.
func Exp(x float64) float64 {
	switch {
	case math.IsNaN(x):
		return x
	case x > 709.782712893384:
		return math.Inf(1)
	case x < -745.2:
		return 0
	}
	k := math.Floor(float64(x*math.Log2E) + 0.5)
	r := math.FMA(-k, ln2Low, math.FMA(-k, ln2High, x))
	p := inverseFactorial[0]
	for _, c := range inverseFactorial[1:] {
		p = math.FMA(p, r, c)
	}
	return math.Ldexp(math.FMA(float64(p*r), r, r)+1, int(k))
}

// Log returns the natural logarithm of x to within about one unit in the last
// place, with the same bits on every machine: 2 artanh(s), s = (f-1)/(f+1), for
// f = x/2^k between sqrt(1/2) and sqrt(2).
func Log(x float64) float64 {
	switch {
	case math.IsNaN(x), math.IsInf(x, 1):
		return x
	case x < 0:
		return math.NaN()
	case x == 0:
		return math.Inf(-1)
	}
	f, k := math.Frexp(x)
	if f < math.Sqrt2/2 {
		f, k = 2*f, k-1
	}
	return math.FMA(float64(k), ln2High, math.FMA(float64(k), ln2Low, log1p(f-1)))
}

// Log1p returns log(1 + x) without the loss of what 1 + x rounds away.
func Log1p(x float64) float64 {
	if x > -0.29 && x < 0.41 {
		return log1p(x)
	}
	return Log(1 + x)
}

// log1p sums the series of artanh: for x in (-0.3, 0.42), s^2 is under 0.031 and
// what follows the thirteenth term is below the rounding.
func log1p(x float64) float64 {
	s := x / (2 + x)
	z := float64(s * s)
	p := 0.0
	for k := 25; k >= 3; k -= 2 {
		p = math.FMA(p, z, 1/float64(k))
	}
	// 2s = x - s x, and s x + 2 s z p is small beside x.
	return x - float64(s*(x-float64(2*float64(z*p))))
}
