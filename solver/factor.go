package solver

import (
	"math"

	"holdfast/solver/kernel"
)

const (
	// dependent is the share of a column's own square that must remain after
	// projecting it on others for it to count as independent of them. Rounding
	// leaves about 1e-15 of a dependent one.
	dependent = 1e-13
	// breakdown is the share below which a factor of columns that passed that
	// test, perhaps in another order, holds no digits any more.
	breakdown = dependent / 100
)

// factor is a lower Cholesky factor held row by row.
type factor struct {
	row [][]float64 // row i has i+1 entries
}

func (f *factor) size() int { return len(f.row) }

func (f *factor) truncate(n int) { f.row = f.row[:n] }

// push appends the row of a new column: products with the columns already in,
// then its own square. It reports false, and leaves f alone, where less than
// the share least of the square remains.
func (f *factor) push(products []float64, square, least float64) bool {
	n := len(f.row)
	r := f.spare(n)
	for i := range n {
		r[i] = (products[i] - kernel.Dot(f.row[i][:i], r[:i])) / f.row[i][i]
	}
	rest := square - kernel.Dot(r[:n], r[:n])
	if !(rest > least*square) || rest <= 0 {
		return false
	}
	r[n] = math.Sqrt(rest)
	f.row = append(f.row, r)
	return true
}

// spare returns room for row n, reusing what a truncation left behind.
func (f *factor) spare(n int) []float64 {
	if n < cap(f.row) {
		if r := f.row[:n+1][n]; cap(r) >= n+1 {
			return r[:n+1]
		}
	}
	return make([]float64, n+1, n+17)
}

// remove takes column k out by Givens rotations (Golub & Van Loan, section
// 6.5.2): deleting a row leaves one superdiagonal, which they clear.
func (f *factor) remove(k int) {
	n := len(f.row)
	gone := f.row[k]
	copy(f.row[k:], f.row[k+1:])
	f.row[n-1] = gone
	for c := k; c < n-1; c++ {
		f.rotate(c, n-1)
	}
	for i := k; i < n-1; i++ {
		f.row[i] = f.row[i][:i+1]
	}
	f.row = f.row[:n-1]
}

// rotate clears entry (c, c+1) of rows that are one entry too long.
func (f *factor) rotate(c, n int) {
	a, b := f.row[c][c], f.row[c][c+1]
	h := math.Sqrt(float64(a*a) + float64(b*b))
	cos, sin := a/h, b/h
	f.row[c][c] = h
	for i := c + 1; i < n; i++ {
		r := f.row[i]
		x, y := r[c], r[c+1]
		r[c] = float64(cos*x) + float64(sin*y)
		r[c+1] = float64(cos*y) - float64(sin*x)
	}
}

// solve overwrites b with the solution of L L' x = b.
func (f *factor) solve(b []float64) {
	for i, r := range f.row {
		b[i] = (b[i] - kernel.Dot(r[:i], b[:i])) / r[i]
	}
	for i := len(f.row) - 1; i >= 0; i-- {
		r := f.row[i]
		b[i] /= r[i]
		kernel.AddScaled(-b[i], r[:i], b[:i])
	}
}

// inverseDiagonal returns entry (k,k) of the inverse of L L': the square
// length of the k-th column of the inverse of L.
func (f *factor) inverseDiagonal(k int) float64 {
	n := len(f.row)
	x := make([]float64, n)
	for i := k; i < n; i++ {
		r := f.row[i]
		e := 0.0
		if i == k {
			e = 1
		}
		x[i] = (e - kernel.Dot(r[k:i], x[k:i])) / r[i]
	}
	return kernel.Dot(x, x)
}
