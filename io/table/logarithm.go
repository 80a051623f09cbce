package table

import "math"

// ln2 in two parts: the first has so many zeros at its end that a binary
// exponent times it is exact.
const (
	ln2Head = 0x1.62e42fefp-1
	ln2Tail = math.Ln2 - ln2Head
)

// logarithm returns the natural logarithm of a finite x > 0 to within about
// half a unit in the last place, with the same bits on every machine: math.Log
// has other bits where the processor fuses products and sums, and an offset is
// stored. It is 2 artanh(s) with s = (f-1)/(f+1), x = f 2^k and f next to 1, by
// the series s + s^3/3 + s^5/5 + ... (Abramowitz & Stegun 1964, 4.1.27).
func logarithm(x float64) float64 {
	f, k := math.Frexp(x)
	if f < math.Sqrt2/2 {
		f, k = 2*f, k-1
	}
	u := f - 1 // exact (Sterbenz)
	sum := 2 + u
	s := u / sum
	rest := (math.FMA(-s, sum, u) - float64(s*(u-(sum-2)))) / sum // what s has lost
	square, twice := float64(s*s), s+s
	series := 0.0 // of s^2/3 + s^4/5 + ...; |s| < 0.172: term 11 is below 2^-59
	for j := 11; j >= 1; j-- {
		series = math.FMA(series, square, 1/float64(2*j+1))
	}
	series = float64(series * square)
	tail := math.FMA(float64(k), ln2Tail, math.FMA(twice, series, rest+rest))
	head := float64(float64(k) * ln2Head)
	lead := head + twice
	return lead + (twice - (lead - head) + tail)
}
