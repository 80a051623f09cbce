package resample

import (
	"math"
	"slices"
	"strings"
	"testing"

	"holdfast/solver"
)

// mustPlan is NewPlan for plans that are known to be good.
func mustPlan(t testing.TB, p Plan) Plan {
	t.Helper()
	made, err := NewPlan(p)
	if err != nil {
		t.Fatal(err)
	}
	return made
}

// rowsOf lists the rows of a draw.
func rowsOf(s *solver.Sample) []int {
	rows := []int{}
	for row := range Drawn(s) {
		rows = append(rows, row)
	}
	return rows
}

// countsOf returns how often each row is in a draw.
func countsOf(p Plan, draw int) []int {
	counts := make([]int, p.Rows)
	for row, count := range Drawn(p.Sample(draw)) {
		counts[row] += count
	}
	return counts
}

func TestNewPlanRefuses(t *testing.T) {
	ones := func(n int) []float64 { return slices.Repeat([]float64{1}, n) }
	with := func(n, at int, w float64) []float64 { c := ones(n); c[at] = w; return c }
	for name, c := range map[string]struct {
		plan Plan
		says string
	}{
		"odd number":      {Plan{Rows: 10, Number: 7}, "take 8"},
		"no draws":        {Plan{Rows: 10, Number: 0}, "at least 2"},
		"negative number": {Plan{Rows: 10, Number: -2, Design: Bootstrap}, "at least 1"},
		"three rows":      {Plan{Rows: 3, Number: 2}, "at least 4"},
		"no rows":         {Plan{Rows: 0, Number: 2}, "rows 0"},
		"too many rows":   {Plan{Rows: math.MaxInt32 + 1, Number: 2}, "2147483647"},
		"unknown design":  {Plan{Rows: 10, Number: 2, Design: 9}, "halves or bootstrap"},
		"weights short":   {Plan{Rows: 10, Number: 2, Case: ones(9)}, "9 case weights for 10 rows"},
		"weight negative": {Plan{Rows: 10, Number: 2, Case: with(10, 3, -1)}, "row 3 is -1"},
		"weight NaN":      {Plan{Rows: 10, Number: 2, Case: with(10, 4, math.NaN())}, "row 4 is NaN"},
		"weight infinite": {Plan{Rows: 10, Number: 2, Case: with(10, 5, math.Inf(1))}, "row 5 is +Inf"},
		"weights all but": {Plan{Rows: 4, Number: 2, Case: with(4, 0, 0)}, "3 rows with a weight"},
	} {
		_, err := NewPlan(c.plan)
		if err == nil {
			t.Errorf("%s: accepted", name)
		} else if !strings.Contains(err.Error(), c.says) || !strings.HasPrefix(err.Error(), "resample: ") {
			t.Errorf("%s: %q does not say %q", name, err, c.says)
		}
	}
}

func TestNewPlanAccepts(t *testing.T) {
	for name, p := range map[string]Plan{
		"four rows":     {Rows: 4, Number: 2},
		"one bootstrap": {Rows: 4, Number: 1, Design: Bootstrap},
		"odd bootstrap": {Rows: 9, Number: 7, Design: Bootstrap},
		"tiny weights":  {Rows: 4, Number: 2, Case: []float64{1e-300, 1, 2, 3}},
	} {
		if _, err := NewPlan(p); err != nil {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// Misuse that no file can cause panics.
func TestSamplePanicsOnMisuse(t *testing.T) {
	for name, call := range map[string]func(){
		"negative draw":  func() { mustPlan(t, Plan{Rows: 10, Number: 2}).Sample(-1) },
		"unchecked plan": func() { Plan{Rows: 10, Number: 2}.Sample(0) },
	} {
		if guard(func() error { call(); return nil }) == nil {
			t.Errorf("%s: no panic", name)
		}
	}
}

func TestHalvesAreDisjointAndEqual(t *testing.T) {
	for _, n := range []int{4, 5, 63, 64, 65, 128, 129, 1000} {
		p := mustPlan(t, Plan{Rows: n, Number: 40, Seed: 3})
		for k := range 20 {
			a, b := p.Sample(2*k), p.Sample(2*k+1)
			if a.Len() != n/2 || b.Len() != n/2 {
				t.Fatalf("n %d pair %d: halves of %d and %d", n, k, a.Len(), b.Len())
			}
			for i := range a.Rows {
				if a.Rows[i]&b.Rows[i] != 0 {
					t.Fatalf("n %d pair %d: halves share rows", n, k)
				}
			}
			if got := rowsOf(b); got[len(got)-1] >= n {
				t.Fatalf("n %d pair %d: row %d is outside", n, k, got[len(got)-1])
			}
		}
	}
}

// Rows of weight 0 are removed first (DESIGN 6), and the others keep their
// weight.
func TestRowsWithoutWeightAreOutside(t *testing.T) {
	weights := []float64{0, 2, 0, 1, 0.5, 3, 0, 1, 1, 0}
	for _, design := range []Design{Halves, Bootstrap} {
		p := mustPlan(t, Plan{Rows: 10, Number: 100, Design: design, Case: weights})
		if p.Units() != 6 || p.Half() != 3 {
			t.Fatalf("%v: %d units, half %d", design, p.Units(), p.Half())
		}
		for d := range p.Number {
			s := p.Sample(d)
			for row, count := range Drawn(s) {
				if got, want := s.Weight(row), float64(count)*weights[row]; weights[row] == 0 || got != want {
					t.Fatalf("%v draw %d row %d: weight %v, want %v", design, d, row, got, want)
				}
			}
		}
	}
}

// A draw depends on the seed and its number: not on the order of asking, nor
// on how many draws there are, nor on the block it is made in.
func TestSameDrawHoweverAsked(t *testing.T) {
	for _, design := range []Design{Halves, Bootstrap} {
		long := mustPlan(t, Plan{Rows: 37, Number: 20, Design: design, Seed: 5})
		short := mustPlan(t, Plan{Rows: 37, Number: 2, Design: design, Seed: 5})
		var backward [20]*solver.Sample
		for d := len(backward) - 1; d >= 0; d-- {
			backward[d] = short.Sample(d)
		}
		for first := 0; first < 20; first += 3 { // odd starts split pairs on purpose
			for _, draws := range [][]int{upTo(first, min(first+3, 20)), {first, 19}} {
				for i, s := range long.block(draws).samples {
					if !sameSample(s, backward[draws[i]]) {
						t.Errorf("%v: draw %d differs", design, draws[i])
					}
				}
			}
		}
	}
}

// upTo lists the numbers first to last-1.
func upTo(first, last int) []int {
	var list []int
	for d := first; d < last; d++ {
		list = append(list, d)
	}
	return list
}

func sameSample(a, b *solver.Sample) bool {
	return slices.Equal(a.Rows, b.Rows) && slices.Equal(a.Count, b.Count) && slices.Equal(a.Case, b.Case)
}

func TestSeedsAndDesignsDiffer(t *testing.T) {
	base := mustPlan(t, Plan{Rows: 100, Number: 2, Seed: 1}).Sample(0)
	other := mustPlan(t, Plan{Rows: 100, Number: 2, Seed: 2}).Sample(0)
	if sameSample(base, other) {
		t.Error("seeds 1 and 2 give the same draw")
	}
	a, b := newGenerator("halves", 0, 1, 0), newGenerator("bootstrap", 0, 1, 0)
	if a.Uint64() == b.Uint64() {
		t.Error("two labels give the same stream")
	}
}

func TestDrawnStopsWhenTold(t *testing.T) {
	seen := 0
	for range Drawn(mustPlan(t, Plan{Rows: 10, Number: 2}).Sample(0)) {
		if seen++; seen == 2 {
			break
		}
	}
	if seen != 2 {
		t.Errorf("saw %d rows after stopping at 2", seen)
	}
}

func TestDesignWords(t *testing.T) {
	for _, d := range []Design{Halves, Bootstrap} {
		if got, err := ParseDesign(d.String()); err != nil || got != d {
			t.Errorf("%v reads back as %v, %v", d, got, err)
		}
	}
	if _, err := ParseDesign("thirds"); err == nil || !strings.Contains(err.Error(), "halves or bootstrap") {
		t.Errorf("thirds: %v", err)
	}
}

func TestBlockSize(t *testing.T) {
	for _, c := range []struct{ draws, workers, lanes, want int }{
		{200, 1, 16, 16}, // 50 draws a quarter: the lanes bound it
		{200, 4, 16, 12}, // 200/16 = 12.5
		{200, 7, 16, 6},  // 7.1, made even
		{200, 64, 16, 2}, // never less than a pair
		{2, 8, 16, 2},
		{100, 1, 5, 4},
		{0, 0, 0, 2},
		{64, -3, 16, 16},
	} {
		if got := BlockSize(c.draws, c.workers, c.lanes); got != c.want {
			t.Errorf("BlockSize(%d, %d, %d) = %d, want %d", c.draws, c.workers, c.lanes, got, c.want)
		}
	}
}
