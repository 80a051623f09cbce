package solver

import "holdfast/solver/kernel"

// curvature turns a gathered column into vectors a (and b, which may be empty) for
// one lane, so that the curvature of the loss between two of them is a'a - b'b over
// N, the first product only where their lanes are the same.
type curvature interface {
	carry(z []float64, lane int) (a, b []float64)
}

// hessian is the Hessian of the loss at one point, made as far as it is asked for.
// An entry depends on the point and its two coefficients alone, so whoever asks
// first, and for what else, changes no bit.
type hessian struct {
	f     *fitting
	at    curvature
	lanes int
	index map[int]int // of a coefficient, place*lanes + lane
	list  []int       // coefficients in order of joining
	a, b  [][]float64
	row   [][]float64 // row[i][j] for j <= i
}

func (c *curved) newHessian(at curvature) *hessian {
	return &hessian{f: c.f, at: at, lanes: c.lanes, index: make(map[int]int)}
}

// place returns the position of a coefficient, which it brings in if needed.
func (h *hessian) place(i int) int {
	if k, ok := h.index[i]; ok {
		return k
	}
	k := len(h.list)
	a, b := h.at.carry(h.f.work.z[i/h.lanes], i%h.lanes)
	h.index[i] = k
	h.list, h.a, h.b = append(h.list, i), append(h.a, a), append(h.b, b)
	row := make([]float64, k+1)
	for j := range row {
		row[j] = h.entry(k, j)
	}
	h.row = append(h.row, row)
	return k
}

// entry is a'a where the lanes are the same, less b'b.
func (h *hessian) entry(k, j int) float64 {
	v := 0.0
	if h.list[k]%h.lanes == h.list[j]%h.lanes {
		v = kernel.Dot(h.a[k], h.a[j])
	}
	if len(h.b[k]) > 0 {
		v -= kernel.Dot(h.b[k], h.b[j])
	}
	return v / h.f.d.total
}

// between returns one entry.
func (h *hessian) between(i, j int) float64 {
	a, b := h.place(i), h.place(j)
	return h.row[max(a, b)][min(a, b)]
}

// extend brings out, the Hessian among the first coefficients of a list, up to all
// of it.
func (h *hessian) extend(list []int, out *symmetric) {
	row, at := make([]float64, len(list)), make([]int, len(list))
	for k, i := range list {
		at[k] = h.place(i)
	}
	for k := len(out.row); k < len(list); k++ {
		for j := range k + 1 {
			row[j] = h.row[max(at[k], at[j])][min(at[k], at[j])]
		}
		out.append(row[:k+1])
	}
}
