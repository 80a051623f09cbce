package table

import "math"

// twoSum returns s = fl(a+b) and e with a + b = s + e exactly
// (Knuth, The Art of Computer Programming vol. 2, section 4.2.2, theorem B).
func twoSum(a, b float64) (s, e float64) {
	s = a + b
	bb := s - a
	return s, (a - (s - bb)) + (b - bb)
}

// meanOf returns the mean of the values of v times scale that are not NaN,
// with smallest and largest value and their number. The sum runs from first
// to last row and is compensated.
func meanOf(v []float64, scale float64) (mean, lo, hi float64, count int) {
	lo, hi = math.Inf(1), math.Inf(-1)
	var sum, lost float64
	for _, x := range v {
		if x != x {
			continue
		}
		count++
		lo, hi = min(lo, x), max(hi, x)
		var e float64
		sum, e = twoSum(sum, float64(x*scale))
		lost += e
	}
	return (sum + lost) / float64(count), lo, hi, count
}

// centreOf returns what is subtracted from a column: its mean over the filled
// cells, and for a column that does not vary exactly its one value. ok is false if float64 cannot hold the distance
// of a value from it.
func centreOf(v []float64) (c float64, ok bool) {
	c, lo, hi, count := meanOf(v, 1)
	switch {
	case count == 0:
		return 0, true
	case c != c || math.IsInf(c, 0): // the sum is too large
		c, _, _, _ = meanOf(v, 0x1p-40)
		c *= 0x1p40
	}
	// The mean of numbers lies between them; rounding must not take it out. A
	// column that does not vary is then centred at its value.
	c = min(max(c, lo), hi)
	return c, !math.IsInf(hi-c, 0) && !math.IsInf(lo-c, 0)
}

// centre subtracts c from every value. Where a value is missing it stores 0
// and sets the row's bit in the mask returned; nil if none is missing.
func centre(v []float64, c float64) (holes []uint64) {
	for i, x := range v {
		if x != x {
			if holes == nil {
				holes = make([]uint64, (len(v)+63)/64)
			}
			holes[i>>6] |= 1 << (i & 63)
			v[i] = 0
			continue
		}
		v[i] = x - c
	}
	return holes
}

// deviation returns the standard deviation, divisor n, of a centred column:
// the second pass of two, with the rest of the mean taken off (Chan, Golub and
// LeVeque 1983, equation 1.7). Values whose squares float64 cannot hold are
// scaled by a power of two first.
func deviation(v []float64) float64 {
	largest := 0.0
	for _, x := range v {
		largest = max(largest, math.Abs(x))
	}
	if largest == 0 {
		return 0
	}
	scale := 1.0
	if largest > 0x1p+480 || largest < 0x1p-480 {
		_, e := math.Frexp(largest)
		scale = math.Ldexp(1, -e)
	}
	var sum, sumLost, square, squareLost float64
	for _, x := range v {
		var e float64
		x = float64(x * scale)
		sum, e = twoSum(sum, x)
		sumLost += e
		square, e = twoSum(square, float64(x*x))
		squareLost += e
	}
	n := float64(len(v))
	rest := sum + sumLost
	variance := (square + squareLost - float64(rest*rest)/n) / n
	return math.Sqrt(max(variance, 0)) / scale
}
