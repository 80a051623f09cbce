package kernel

import "math"

// reduce adds eight partial sums in the written order.
func reduce(s *[8]float64) float64 {
	return ((s[0] + s[4]) + (s[2] + s[6])) + ((s[1] + s[5]) + (s[3] + s[7]))
}

// Sum returns the sum of x in the record order.
func Sum(x []float64) float64 {
	total := 0.0
	for len(x) > 0 {
		n := min(len(x), Chunk)
		total += sumChunk(x[:n])
		x = x[n:]
	}
	return total
}

func sumChunk(x []float64) float64 {
	var s [8]float64
	for i, v := range x {
		s[i&7] += v
	}
	return reduce(&s)
}

// Dot returns the sum of x[i]*y[i] in the record order. It is symmetric to
// the bit: Dot(x, y) == Dot(y, x).
func Dot(x, y []float64) float64 {
	if len(x) != len(y) {
		panic("kernel: Dot of slices of unequal length")
	}
	total := 0.0
	for len(x) > 0 {
		n := min(len(x), Chunk)
		total += dotChunk(x[:n], y[:n])
		x, y = x[n:], y[n:]
	}
	return total
}

func dotChunk(x, y []float64) float64 {
	var s0, s1, s2, s3, s4, s5, s6, s7 float64
	for len(x) >= 8 && len(y) >= 8 {
		a, b := x[:8:8], y[:8:8]
		s0 = math.FMA(a[0], b[0], s0)
		s1 = math.FMA(a[1], b[1], s1)
		s2 = math.FMA(a[2], b[2], s2)
		s3 = math.FMA(a[3], b[3], s3)
		s4 = math.FMA(a[4], b[4], s4)
		s5 = math.FMA(a[5], b[5], s5)
		s6 = math.FMA(a[6], b[6], s6)
		s7 = math.FMA(a[7], b[7], s7)
		x, y = x[8:], y[8:]
	}
	s := [8]float64{s0, s1, s2, s3, s4, s5, s6, s7}
	for i, v := range x {
		s[i] = math.FMA(v, y[i], s[i])
	}
	return reduce(&s)
}

// AddScaled adds a*x[i] to y[i] by one fused multiply-add each.
func AddScaled(a float64, x, y []float64) {
	y = y[:len(x)]
	for i, v := range x {
		y[i] = math.FMA(a, v, y[i])
	}
}

// AddScaled4 adds a[0]*x0[i], then a[1]*x1[i], a[2]*x2[i], a[3]*x3[i] to y[i],
// one fused multiply-add after the other: the same bits as four calls of
// AddScaled, with one pass over y.
func AddScaled4(a *[4]float64, x0, x1, x2, x3, y []float64) {
	n := len(y)
	x0, x1, x2, x3 = x0[:n], x1[:n], x2[:n], x3[:n]
	for i, v := range y {
		v = math.FMA(a[0], x0[i], v)
		v = math.FMA(a[1], x1[i], v)
		v = math.FMA(a[2], x2[i], v)
		y[i] = math.FMA(a[3], x3[i], v)
	}
}

// Gather sets dst[k] = (x[rows[k]] - shift) * scale.
func Gather(dst, x []float64, rows []int32, shift, scale float64) {
	dst = dst[:len(rows)]
	for k, r := range rows {
		dst[k] = (x[r] - shift) * scale
	}
}
