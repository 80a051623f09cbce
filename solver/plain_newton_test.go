package solver_test

import (
	"math"

	"holdfast/solver"
)

// ascent is Newton's method on the likelihood of some columns without penalty,
// with a Hessian from differences of the score: slow, and only good for telling
// whether there is a maximum.
type ascent struct {
	v     *plainView
	cols  [][]float64 // a constant, and columns in units of their deviation
	gamma [][]float64 // per class
}

func (v *plainView) ascent(cols []int32) *ascent {
	a := &ascent{v: v}
	if v.q.family != solver.Cox {
		a.cols = append(a.cols, plainOnes(len(v.row)))
	}
	for _, j := range cols {
		if v.still[j] {
			continue
		}
		z := make([]float64, len(v.row))
		for k := range z {
			z[k] = (v.x[j][k] - v.mean[j]) / v.sd[j]
		}
		a.cols = append(a.cols, z)
	}
	for range v.q.classCount() {
		a.gamma = append(a.gamma, make([]float64, len(a.cols)))
	}
	return a
}

// An ascent that comes to a linear predictor of 30 without an end of its steps has
// fitted chances within 1e-13 of 0 or 1; from about 20 on rounding stops it. One
// that ends below 12 has found a maximum.
const settled = 12

// climb takes the ascent to its end and returns it with the largest linear
// predictor, offset and what is common to the classes not counted.
func (v *plainView) climb(cols []int32) (a *ascent, far float64) {
	a = v.ascent(cols)
	for range 30 {
		length := a.step()
		if far = a.far(); far > 100 || length < 1e-6 {
			break
		}
	}
	return a, far
}

// farthest is the largest linear predictor that an ascent comes to.
func (v *plainView) farthest(cols []int32) float64 {
	_, far := v.climb(cols)
	return far
}

func (a *ascent) far() float64 {
	eta, start, far := a.eta(), a.v.eta(a.v.q.nothing()), 0.0
	for class := range eta {
		for k := range eta[class] {
			eta[class][k] -= start[class][k]
		}
	}
	if len(eta) > 1 {
		lessCommon(eta)
	}
	for _, e := range eta {
		for k := range e {
			far = max(far, math.Abs(e[k]))
		}
	}
	return far
}

func (a *ascent) eta() [][]float64 {
	eta := a.v.eta(a.v.q.nothing())
	for class := range eta {
		for k := range eta[class] {
			for j := range a.cols {
				eta[class][k] += a.cols[j][k] * a.gamma[class][j]
			}
		}
	}
	return eta
}

func (a *ascent) at() (loss float64, gradient []float64) {
	loss, score := a.v.loss(a.eta())
	for class := range score {
		for _, z := range a.cols {
			g := 0.0
			for k := range z {
				g += z[k] * score[class][k] / a.v.total
			}
			gradient = append(gradient, g)
		}
	}
	return loss / a.v.total, gradient
}

// step is one Newton step, halved until the loss does not rise; it returns its
// length.
func (a *ascent) step() float64 {
	loss, g := a.at()
	n, width := len(g), len(a.cols)
	if n == 0 {
		return 0
	}
	h := make([][]float64, n)
	for i := range n {
		old := a.gamma[i/width][i%width]
		a.gamma[i/width][i%width] = old + 1e-6
		_, moved := a.at()
		a.gamma[i/width][i%width] = old
		h[i] = make([]float64, n)
		for k := range n {
			h[i][k] = (g[k] - moved[k]) / 1e-6
		}
		for k := i % width; k < n && n > width; k += width {
			h[i][k]++ // what is common to the classes is pinned
		}
		h[i][i] += 1e-12
	}
	d := solvePlain(h, g)
	for size := 1.0; size > 1e-4; size /= 2 {
		a.move(d, size)
		if now, _ := a.at(); now <= loss+1e-14 {
			return size * math.Sqrt(squares(d))
		}
		a.move(d, -size)
	}
	return 0
}

func squares(v []float64) float64 {
	s := 0.0
	for _, x := range v {
		s += x * x
	}
	return s
}

func (a *ascent) move(d []float64, size float64) {
	width := len(a.cols)
	for i := range d {
		a.gamma[i/width][i%width] += size * d[i]
	}
}

// solvePlain is Gaussian elimination with partial pivoting.
func solvePlain(a [][]float64, b []float64) []float64 {
	n := len(b)
	x := append([]float64(nil), b...)
	for c := range n {
		p := c
		for r := c; r < n; r++ {
			if math.Abs(a[r][c]) > math.Abs(a[p][c]) {
				p = r
			}
		}
		a[c], a[p], x[c], x[p] = a[p], a[c], x[p], x[c]
		for r := c + 1; r < n; r++ {
			f := a[r][c] / a[c][c]
			for k := c; k < n; k++ {
				a[r][k] -= f * a[c][k]
			}
			x[r] -= f * x[c]
		}
	}
	for c := n - 1; c >= 0; c-- {
		for k := c + 1; k < n; k++ {
			x[c] -= a[c][k] * x[k]
		}
		x[c] /= a[c][c]
	}
	return x
}
