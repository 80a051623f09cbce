package kernel

import "math"

// Lanes multiplies columns with k lanes: out[c*k+l] = sum over rows i of
// cols[c][i] * u[i*k+l], each in the lane order. u is row-major with k values
// a row, 1 <= k <= MaxLanes; every column has len(u)/k rows. out is
// overwritten.
func Lanes(cols [][]float64, u []float64, k int, out []float64) {
	if k < 1 || k > MaxLanes || len(out) < len(cols)*k {
		panic("kernel: Lanes: wrong number of lanes or a short output")
	}
	rows := len(u) / k
	clear(out[:len(cols)*k])
	for r0 := 0; r0 < rows; r0 += Chunk {
		r1 := min(r0+Chunk, rows)
		for c, x := range cols {
			lanesChunk(x[r0:r1], u[r0*k:r1*k], k, out[c*k:c*k+k])
		}
	}
}

func lanesChunk(x, u []float64, k int, out []float64) {
	l := 0
	for ; l+4 <= k; l += 4 {
		lanes4(x, u[l:], k, out[l:l+4])
	}
	for ; l < k; l++ {
		s := 0.0
		for i, v := range x {
			s = math.FMA(v, u[i*k+l], s)
		}
		out[l] += s
	}
}

func lanes4(x, u []float64, k int, out []float64) {
	var s0, s1, s2, s3 float64
	for i, v := range x {
		q := u[i*k : i*k+4 : i*k+4]
		s0 = math.FMA(v, q[0], s0)
		s1 = math.FMA(v, q[1], s1)
		s2 = math.FMA(v, q[2], s2)
		s3 = math.FMA(v, q[3], s3)
	}
	out[0] += s0
	out[1] += s1
	out[2] += s2
	out[3] += s3
}

// DotRows returns the sum of x[rows[k]]*u[k]: the gradient of one column in
// one draw without reading the rows that were not drawn. Four partial sums,
// element k to sum k mod 4, added as (0+1)+(2+3), chunk by chunk.
func DotRows(x []float64, rows []int32, u []float64) float64 {
	total := 0.0
	for len(rows) > 0 {
		n := min(len(rows), Chunk)
		total += dotRowsChunk(x, rows[:n], u[:n])
		rows, u = rows[n:], u[n:]
	}
	return total
}

func dotRowsChunk(x []float64, rows []int32, u []float64) float64 {
	var s0, s1, s2, s3 float64
	for len(rows) >= 8 && len(u) >= 8 {
		r, v := rows[:8:8], u[:8:8]
		s0 += float64(x[r[0]] * v[0])
		s1 += float64(x[r[1]] * v[1])
		s2 += float64(x[r[2]] * v[2])
		s3 += float64(x[r[3]] * v[3])
		s0 += float64(x[r[4]] * v[4])
		s1 += float64(x[r[5]] * v[5])
		s2 += float64(x[r[6]] * v[6])
		s3 += float64(x[r[7]] * v[7])
		rows, u = rows[8:], u[8:]
	}
	s := [4]float64{s0, s1, s2, s3}
	for k, r := range rows {
		s[k&3] += float64(x[r] * u[k])
	}
	return (s[0] + s[1]) + (s[2] + s[3])
}

// Moments returns, over the rows of a draw, the weighted sums of x, x*x and
// x*y: sum w[k]*x[rows[k]], sum w[k]*x[rows[k]]^2, sum x[rows[k]]*wy[k], with
// wy[k] = w[k]*y[k] given by the caller. w nil means 1. Chunk by chunk.
func Moments(x []float64, rows []int32, w, wy []float64) (sx, sxx, sxy float64) {
	for len(rows) > 0 {
		n := min(len(rows), Chunk)
		var a, b, c float64
		if w == nil {
			a, b, c = momentsChunk(x, rows[:n], wy[:n])
		} else {
			a, b, c = weightedMomentsChunk(x, rows[:n], w[:n], wy[:n])
			w = w[n:]
		}
		sx, sxx, sxy = sx+a, sxx+b, sxy+c
		rows, wy = rows[n:], wy[n:]
	}
	return sx, sxx, sxy
}

func momentsChunk(x []float64, rows []int32, wy []float64) (sx, sxx, sxy float64) {
	var tx, txx, txy float64
	for len(rows) >= 2 && len(wy) >= 2 {
		r, q := rows[:2:2], wy[:2:2]
		v, z := x[r[0]], x[r[1]]
		sx += v
		tx += z
		sxx += float64(v * v)
		txx += float64(z * z)
		sxy += float64(v * q[0])
		txy += float64(z * q[1])
		rows, wy = rows[2:], wy[2:]
	}
	for k, r := range rows {
		v := x[r]
		sx += v
		sxx += float64(v * v)
		sxy += float64(v * wy[k])
	}
	return sx + tx, sxx + txx, sxy + txy
}

func weightedMomentsChunk(x []float64, rows []int32, w, wy []float64) (sx, sxx, sxy float64) {
	for k, r := range rows {
		v := x[r]
		t := float64(w[k] * v)
		sx += t
		sxx += float64(t * v)
		sxy += float64(v * wy[k])
	}
	return sx, sxx, sxy
}

// SquaredDistance returns the sum of (x[i]-y[i])^2, four partial sums a chunk.
func SquaredDistance(x, y []float64) float64 {
	if len(x) != len(y) {
		panic("kernel: SquaredDistance of slices of unequal length")
	}
	total := 0.0
	for len(x) > 0 {
		n := min(len(x), Chunk)
		total += distanceChunk(x[:n], y[:n])
		x, y = x[n:], y[n:]
	}
	return total
}

func distanceChunk(x, y []float64) float64 {
	var s0, s1, s2, s3 float64
	for len(x) >= 4 && len(y) >= 4 {
		a, b := x[:4:4], y[:4:4]
		d0, d1, d2, d3 := a[0]-b[0], a[1]-b[1], a[2]-b[2], a[3]-b[3]
		s0 += float64(d0 * d0)
		s1 += float64(d1 * d1)
		s2 += float64(d2 * d2)
		s3 += float64(d3 * d3)
		x, y = x[4:], y[4:]
	}
	for i, v := range x {
		d := v - y[i]
		s0 += float64(d * d)
	}
	return (s0 + s1) + (s2 + s3)
}
