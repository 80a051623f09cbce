package solver

import "fmt"

// Design is the immutable table of numeric columns that every fit shares.
// Column values are centred: x - c with c the column's mean over the table
// (over its filled cells where cells are missing). A Design is read by many
// goroutines at once and never written after it was made.
type Design interface {
	// Dims returns the number of rows and columns.
	Dims() (rows, cols int)
	// Panel returns, for each column named, its rows r0 to r1-1. The slices
	// are views that must not be written; a Design that computes columns
	// fills scratch instead, which holds at least len(cols)*(r1-r0) values.
	Panel(cols []int32, r0, r1 int, scratch []float64) [][]float64
	// Holes returns the rows of a column that were missing and take the
	// draw's mean, as a bit mask (bit i&63 of word i>>6), or nil if none.
	// The stored value of such a cell is 0.
	Holes(col int32) []uint64
}

// Dense is a Design held in memory, one slice per column.
type Dense struct {
	rows  int
	cols  [][]float64
	holes map[int32][]uint64
}

// NewDense makes a Design of columns that are already centred. It keeps the
// slices. holes maps a column to the mask of its missing rows; nil if the
// table is complete. Columns of unequal length panic.
func NewDense(rows int, cols [][]float64, holes map[int32][]uint64) *Dense {
	for j, c := range cols {
		if len(c) != rows {
			panic(fmt.Sprintf("solver: column %d has %d rows, not %d", j, len(c), rows))
		}
	}
	return &Dense{rows: rows, cols: cols, holes: holes}
}

// Dims implements Design.
func (d *Dense) Dims() (rows, cols int) { return d.rows, len(d.cols) }

// Panel implements Design; it returns views and leaves scratch alone.
func (d *Dense) Panel(cols []int32, r0, r1 int, _ []float64) [][]float64 {
	views := make([][]float64, len(cols))
	for i, j := range cols {
		views[i] = d.cols[j][r0:r1]
	}
	return views
}

// Holes implements Design.
func (d *Dense) Holes(col int32) []uint64 { return d.holes[col] }
