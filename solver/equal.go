package solver

import (
	"context"
	"math"

	"holdfast/solver/kernel"
)

// EqualGroups finds groups of columns that span the same space over the rows of a
// table, and so are the same predictor: a category and its recoding, a code and its
// name. It returns pairs of positions in groups, the later as a copy of the first of
// its kind, in the order asked. It takes time in proportion to the columns and to the
// pairs that agree in two projections.
func EqualGroups(ctx context.Context, d Design, groups [][]int32) ([]Copy, error) {
	rows, _ := d.Dims()
	m := &Model{p: Problem{Design: d, Groups: groups}, rows: rows}
	var all drawn
	all.draw(AllRows(rows), rows)
	directions := [2][]float64{probe(rows, 1), probe(rows, 2)}
	marks, widths := make([][2]float64, len(groups)), make([]int, len(groups))
	block := func(g int) [][]float64 {
		_, b := all.whiten(m, int32(g), func() []float64 { return nil })
		return b
	}
	same := make([]bool, len(groups)) // as an earlier one
	var out []Copy
	for g := range groups {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		own := block(g)
		widths[g] = len(own)
		for k, v := range directions {
			marks[g][k] = projected(own, v)
		}
		for first := range g {
			if !same[first] && widths[first] == widths[g] && alike(marks[first], marks[g]) && spans(block(first), own, all.total) {
				out = append(out, Copy{int32(g), int32(first)})
				same[g] = true
				break
			}
		}
	}
	return out, nil
}

// projected is the square of a direction's length in the space of a block.
func projected(block [][]float64, direction []float64) float64 {
	sum := 0.0
	for _, z := range block {
		a := kernel.Dot(z, direction)
		sum += float64(a * a)
	}
	return sum
}

// alike reports whether two spaces may be one by their projections.
func alike(a, b [2]float64) bool {
	for k := range a {
		if math.Abs(a[k]-b[k]) > 1e-9*max(a[k], b[k]) {
			return false
		}
	}
	return true
}

// spans reports whether the columns of b lie in the space of a.
func spans(a, b [][]float64, total float64) bool {
	if len(a) == 0 {
		return false
	}
	for _, v := range b {
		inside := 0.0
		for _, z := range a {
			p := kernel.Dot(z, v) / total
			inside += float64(p * p)
		}
		if math.Abs(inside-1) > coincide*float64(len(a)) {
			return false
		}
	}
	return true
}
