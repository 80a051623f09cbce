package solver

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
