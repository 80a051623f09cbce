package solver

import (
	"context"
	"math/rand/v2"
	"slices"
	"testing"
)

// TestEqualGroups: a category is the same with another reference level and other
// names, and rotated; not with two levels swapped in a row, nor merged, nor finer.
func TestEqualGroups(t *testing.T) {
	const n = 90
	r := rand.New(rand.NewPCG(5, 5))
	level := make([]int, n)
	for i := range level {
		level[i] = r.IntN(4)
	}
	mark := func(level []int, l int) []float64 {
		c := make([]float64, n)
		for i, v := range level {
			if v == l {
				c[i] = 1
			}
		}
		return c
	}
	other := slices.Clone(level)
	other[0] = (other[0] + 1) % 4
	mixed := make([]float64, n)
	for i := range mixed {
		mixed[i] = 2*mark(level, 1)[i] - mark(level, 3)[i]
	}
	cols := [][]float64{
		mark(level, 1), mark(level, 2), mark(level, 3), // the first
		mark(level, 0), mark(level, 3), mark(level, 2), // another reference
		mark(other, 1), mark(other, 2), mark(other, 3), // one row differs
		mark(level, 1), mark(level, 2), // two levels merged
		mixed, mark(level, 2), mark(level, 1), // rotated
	}
	groups := [][]int32{{0, 1, 2}, {3, 4, 5}, {6, 7, 8}, {9, 10}, {11, 12, 13}}
	q := problemOf(cols, make([]float64, n))
	got, err := EqualGroups(context.Background(), q.Design, groups)
	if err != nil {
		t.Fatal(err)
	}
	if want := []Copy{{1, 0}, {4, 0}}; !slices.Equal(got, want) {
		t.Errorf("%v, want %v", got, want)
	}
}
