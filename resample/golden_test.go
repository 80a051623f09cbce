package resample

import (
	"slices"
	"testing"
)

// The draws below were made by testdata/first_draws.py, a separate program
// written from the specification of the stream (C2SP, chacha8rand), Lemire
// (2019) and Knuth's algorithm P. A run directory names its draws by number
// and seed only, so if this test fails, every run directory in the world is
// void: mend the generator, not the test.
func TestFirstDrawsAreThoseOfTheSpecification(t *testing.T) {
	halves := [][]int{
		{0, 4, 6, 9, 13, 14, 18, 20, 21, 22, 23, 24},
		{1, 2, 5, 7, 8, 10, 11, 12, 15, 16, 17, 19},
		{0, 1, 4, 6, 8, 10, 14, 17, 19, 20, 21, 22},
		{2, 3, 5, 7, 9, 11, 12, 13, 15, 16, 23, 24},
	}
	p := mustPlan(t, Plan{Rows: 25, Number: 4, Seed: 1})
	for draw, want := range halves {
		if got := rowsOf(p.Sample(draw)); !slices.Equal(got, want) {
			t.Errorf("half %d: rows %v, want %v", draw, got, want)
		}
	}
	bootstrap := [][]int{ // how often each of the 12 rows was drawn
		{1, 2, 1, 0, 4, 1, 1, 0, 1, 0, 1, 0},
		{2, 0, 0, 3, 0, 1, 1, 1, 1, 1, 1, 1},
		{0, 1, 2, 1, 2, 1, 0, 0, 1, 2, 0, 2},
	}
	p = mustPlan(t, Plan{Rows: 12, Number: 3, Seed: 1, Design: Bootstrap})
	for draw, want := range bootstrap {
		if got := countsOf(p, draw); !slices.Equal(got, want) {
			t.Errorf("bootstrap draw %d: counts %v, want %v", draw, got, want)
		}
	}
}

// The far end of seed and number, more than one round of the stream: the
// sums of the row numbers of both halves, by the same program.
func TestLargeSeedAndNumber(t *testing.T) {
	p := mustPlan(t, Plan{Rows: 1000, Number: 2, Seed: 1<<64 - 1})
	for half, want := range []int{252016, 247484} {
		sum := 0
		for row := range Drawn(p.Sample(1<<33 + half)) {
			sum += row
		}
		if sum != want {
			t.Errorf("half %d of pair 2^32: rows add up to %d, want %d", half, sum, want)
		}
	}
}
