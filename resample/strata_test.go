package resample

import (
	"fmt"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"holdfast/solver"
)

// mixedStrata gives the codes of strata of some sizes, neither dense nor in
// order, with the rows mixed.
func mixedStrata(r *rand.Rand, sizes ...int) (codes []int32) {
	for s, size := range sizes {
		code := int32(1000 - 37*s*s)
		codes = append(codes, slices.Repeat([]int32{code}, size)...)
	}
	r.Shuffle(len(codes), func(i, j int) { codes[i], codes[j] = codes[j], codes[i] })
	return codes
}

// tallyOf counts the rows of a draw in each stratum.
func tallyOf(s *solver.Sample, codes []int32) map[int32]int {
	count := make(map[int32]int)
	for row, times := range Drawn(s) {
		count[codes[row]] += times
	}
	return count
}

// DESIGN 6: floor(n_s/2) of each stratum in either half, halves disjoint, one
// row of each odd stratum left over.
func TestHalvesAreEqualInEveryStratum(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 9))
	for _, sizes := range [][]int{{4}, {2, 2}, {1, 4, 1}, {3, 5, 7, 2}, {64, 65, 1, 130}, slices.Repeat([]int{2}, 50), slices.Repeat([]int{3}, 41)} {
		codes := mixedStrata(r, sizes...)
		p := mustPlan(t, Plan{Rows: len(codes), Number: 20, Seed: 3, Within: codes})
		whole, half := make(map[int32]int), 0
		for _, c := range codes {
			whole[c]++
		}
		for _, n := range whole {
			half += n / 2
		}
		if p.Half() != half {
			t.Errorf("strata of %v: half %d, want %d", sizes, p.Half(), half)
		}
		for k := range 10 {
			a, b := p.Sample(2*k), p.Sample(2*k+1)
			inA, inB := tallyOf(a, codes), tallyOf(b, codes)
			for code, n := range whole {
				if inA[code] != n/2 || inB[code] != n/2 {
					t.Fatalf("strata of %v, pair %d: %d and %d of the %d rows of one", sizes, k, inA[code], inB[code], n)
				}
			}
			for w := range a.Rows {
				if a.Rows[w]&b.Rows[w] != 0 {
					t.Fatalf("strata of %v, pair %d: halves share rows", sizes, k)
				}
			}
		}
	}
}

// Rows of weight 0 are no units: they neither make a stratum larger nor enter.
func TestStrataAreOfRowsWithWeight(t *testing.T) {
	codes := []int32{1, 1, 1, 1, 2, 2, 2, 3, 3}
	weights := []float64{1, 1, 1, 1, 0, 2, 0, 0, 0}
	p := mustPlan(t, Plan{Rows: 9, Number: 20, Within: codes, Case: weights})
	if p.Units() != 5 || p.Half() != 2 || fmt.Sprint(p.Lone()) != "[2]" {
		t.Fatalf("%d units, half %d, lone %v", p.Units(), p.Half(), p.Lone())
	}
	for d := range p.Number {
		if got := tallyOf(p.Sample(d), codes); got[1] != 2 || len(got) != 1 {
			t.Errorf("draw %d: %v", d, got)
		}
	}
}

// Bootstrap draws take n_s of n_s.
func TestBootstrapTakesAsManyAsAStratumHas(t *testing.T) {
	codes := mixedStrata(rand.New(rand.NewPCG(4, 4)), 1, 2, 7, 300)
	p := mustPlan(t, Plan{Rows: len(codes), Number: 50, Design: Bootstrap, Within: codes})
	whole := make(map[int32]int)
	for _, c := range codes {
		whole[c]++
	}
	for d := range p.Number {
		if got := tallyOf(p.Sample(d), codes); fmt.Sprint(got) != fmt.Sprint(whole) {
			t.Errorf("draw %d: %v rows, want %v", d, got, whole)
		}
	}
	if p.Lone() != nil {
		t.Errorf("lone strata %v: a bootstrap draws them", p.Lone())
	}
}

func TestLoneStrataAreListed(t *testing.T) {
	codes := []int32{7, 3, 7, -2, 7, 3, 7, 40, 5}
	p := mustPlan(t, Plan{Rows: 9, Number: 200, Within: codes})
	if got := fmt.Sprint(p.Lone()); got != "[-2 5 40]" {
		t.Errorf("lone strata %s", got)
	}
	for d := range p.Number {
		for row := range Drawn(p.Sample(d)) {
			if row == 3 || row == 7 || row == 8 {
				t.Fatalf("draw %d holds row %d, alone in its stratum", d, row)
			}
		}
	}
	if got := mustPlan(t, Plan{Rows: 9, Number: 2}).Lone(); got != nil {
		t.Errorf("without strata: %v", got)
	}
}

// A draw depends on which rows are together, not on their codes; one stratum of
// all rows is a draw without strata, to the bit.
func TestCodesDoNotMatter(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 1))
	codes := mixedStrata(r, 5, 9, 4, 1)
	other := make([]int32, len(codes))
	for i, c := range codes {
		other[i] = c%97*31 + 5 // another order, still four
	}
	for _, design := range []Design{Halves, Bootstrap} {
		base := Plan{Rows: len(codes), Number: 20, Seed: 2, Design: design}
		with := func(within []int32) Plan { p := base; p.Within = within; return mustPlan(t, p) }
		a, b := with(codes), with(other)
		one, none := with(slices.Repeat([]int32{6}, len(codes))), with(nil)
		differ := false
		for d := range base.Number {
			if !sameSample(a.Sample(d), b.Sample(d)) {
				t.Errorf("%v draw %d depends on the codes", design, d)
			}
			if !sameSample(one.Sample(d), none.Sample(d)) {
				t.Errorf("%v draw %d: one stratum is not none", design, d)
			}
			differ = differ || !sameSample(a.Sample(d), none.Sample(d))
		}
		if !differ {
			t.Errorf("%v: strata change nothing", design)
		}
	}
}

// What no draw can hold is refused before one is made.
func TestImpossibleStrataAreRefused(t *testing.T) {
	alone := []int32{1, 2, 3, 4, 5, 6}
	for name, c := range map[string]struct {
		plan Plan
		says string
	}{
		"all alone":         {Plan{Rows: 6, Number: 2, Within: alone}, "in no half"},
		"alone, bootstrap":  {Plan{Rows: 6, Number: 1, Within: alone, Design: Bootstrap}, "whole table"},
		"one pair only":     {Plan{Rows: 6, Number: 2, Within: []int32{1, 1, 3, 4, 5, 6}}, "one row for each half"},
		"one triple only":   {Plan{Rows: 6, Number: 2, Within: []int32{1, 1, 1, 4, 5, 6}}, "all but one of the 4 strata"},
		"alone by weight":   {Plan{Rows: 6, Number: 2, Within: []int32{1, 1, 2, 2, 3, 4}, Case: []float64{1, 0, 1, 0, 1, 1}}, "in no half"},
		"codes too few":     {Plan{Rows: 7, Number: 2, Within: alone}, "strata of 6 rows for 7"},
		"codes, none given": {Plan{Rows: 7, Number: 2, Within: []int32{}}, "strata of 0 rows for 7"},
	} {
		_, err := NewPlan(c.plan)
		if err == nil {
			t.Errorf("%s: accepted", name)
		} else if !strings.Contains(err.Error(), c.says) || !strings.HasPrefix(err.Error(), "resample: ") {
			t.Errorf("%s: %q does not say %q", name, err, c.says)
		}
	}
	for name, p := range map[string]Plan{
		"two pairs":          {Rows: 6, Number: 2, Within: []int32{1, 1, 2, 2, 5, 6}},
		"one pair bootstrap": {Rows: 6, Number: 2, Within: []int32{1, 1, 3, 4, 5, 6}, Design: Bootstrap},
	} {
		if _, err := NewPlan(p); err != nil {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// What is left of a half is its partner; of a bootstrap draw the units that it
// did not draw, and nothing where there are none.
func TestLeft(t *testing.T) {
	weights := slices.Repeat([]float64{1}, 70)
	weights[66], weights[3] = 0, 0
	codes := mixedStrata(rand.New(rand.NewPCG(4, 4)), 30, 39, 1)
	p := mustPlan(t, Plan{Rows: 70, Number: 10, Case: weights, Within: codes})
	for d := range p.Number {
		if s := p.Sample(d); !slices.Equal(s.Left.Rows, p.Sample(d^1).Rows) {
			t.Errorf("half %d: its partner is not left", d)
		}
	}
	p = mustPlan(t, Plan{Rows: 70, Number: 10, Case: weights, Within: codes, Design: Bootstrap})
	for d := range p.Number {
		s := p.Sample(d)
		for row := range 70 {
			bit := uint64(1) << (row & 63)
			in, left := s.Rows[row>>6]&bit != 0, s.Left.Rows[row>>6]&bit != 0
			if want := weights[row] > 0 && !in; left != want {
				t.Errorf("bootstrap draw %d row %d: left %v, want %v", d, row, left, want)
			}
		}
	}
	// Four rows in two pairs: a quarter of the bootstrap draws holds them all.
	p = mustPlan(t, Plan{Rows: 4, Number: 1000, Within: []int32{0, 0, 1, 1}, Design: Bootstrap})
	whole := 0
	for d := range p.Number {
		s := p.Sample(d)
		if (s.Left == nil) != (s.Len() == 4) {
			t.Fatalf("draw %d of %d rows: left %v", d, s.Len(), s.Left)
		}
		if s.Left == nil {
			whole++
		}
	}
	if prob := twoSided(float64(whole), 1000, 0.25); prob < rare {
		t.Errorf("%d of 1000 draws hold every row: p = %.2g", whole, prob)
	}
}
