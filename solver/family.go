package solver

import "holdfast/solver/kernel"

// family supplies what the engine needs to know of an outcome: its score
// vector, its curvature and its loss. Everything is on the draw's own rows, in
// root-weighted form: a gathered column holds sqrt(w_i) z_i, fitted holds
// sqrt(w_i) times the linear predictor, and a score sqrt(w_i) times the
// derivative, so that a column's gradient is its plain product with the score
// divided by N. A family whose curvature moves with the fit re-adds its
// Hessian whenever the engine asks.
type family interface {
	// lanes is the number of score vectors of one fit at one lambda.
	lanes() int
	// score overwrites u with the score at fitted.
	score(d *drawn, fitted, u []float64)
	// addHessian appends to h the rows from..len(z)-1 of the curvature of the
	// loss in the gathered columns z, divided by N.
	addHessian(d *drawn, z [][]float64, from int, h *symmetric)
	// loss returns the mean loss from the score at a fit.
	loss(d *drawn, u []float64) float64
}

// gaussian is the numeric outcome: loss (1/2)(y - eta)^2.
type gaussian struct{}

func (gaussian) lanes() int { return 1 }

func (gaussian) score(d *drawn, fitted, u []float64) {
	for i, y := range d.y {
		u[i] = y - fitted[i]
	}
}

func (gaussian) addHessian(d *drawn, z [][]float64, from int, h *symmetric) {
	for i := from; i < len(z); i++ {
		row := make([]float64, i+1)
		for j := range row {
			row[j] = kernel.Dot(z[i], z[j]) / d.total
		}
		h.append(row)
	}
}

func (gaussian) loss(d *drawn, u []float64) float64 {
	return kernel.Dot(u, u) / (2 * d.total)
}

// symmetric is a growing symmetric matrix, held in full so that every column
// is contiguous.
type symmetric struct{ row [][]float64 }

// append adds one row and column: the products with all earlier ones, then
// the diagonal.
func (h *symmetric) append(row []float64) {
	k := len(h.row)
	for i := range k {
		h.row[i] = append(h.row[i], row[i])
	}
	full := make([]float64, k+1, 2*k+32)
	copy(full, row)
	h.row = append(h.row, full)
}

func (h *symmetric) reset() { h.row = h.row[:0] }
