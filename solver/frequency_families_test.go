package solver_test

import (
	"slices"
	"strings"
	"testing"

	"holdfast/solver"
)

// TestFamilyFrequencies holds the entries of every draw, and the counts within
// the cap region, against those of other programs on the same rows
// (testdata/tools/frequencies_families.py): breast cancer (Street, Wolberg &
// Mangasarian 1993) as yes-no and wine (Forina et al., PARVUS) as classes by
// scikit-learn's logistic lasso, insurance claims with holders as exposure
// (Baxter, Coutts & Ross 1980) and veteran (Kalbfleisch & Prentice 1980) under
// Efron ties, without and with strata, by scipy's bounded minimiser. The sets
// there are proven by Newton's method with margins above 1e-7, so agreement
// must be exact.
func TestFamilyFrequencies(t *testing.T) {
	for _, name := range []string{"breast_cancer", "wine", "insurance", "veteran", "veteran_strata"} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			compareFrequencies(t, name)
		})
	}
}

// problem reads the table as the file says; without a family the outcome is a
// number. A predictor COLUMN=LEVEL is the indicator of a level.
func (f frequencies) problem(t *testing.T, tab table) solver.Problem {
	t.Helper()
	var x [][]float64
	for _, name := range f.Predictors {
		if column, level, is := strings.Cut(name, "="); is {
			x = append(x, tab.ones(column, level))
		} else {
			x = append(x, tab.numbers(t, name))
		}
	}
	p := problemOf(x, make([]float64, tab.rows))
	p.Outcome = nil
	f.setOutcome(t, tab, &p)
	if f.Offset != "" {
		p.Offset = tab.numbers(t, f.Offset)
	}
	return p
}

func (f frequencies) setOutcome(t *testing.T, tab table, p *solver.Problem) {
	t.Helper()
	switch f.Family {
	case "":
		p.Outcome = tab.numbers(t, f.Outcome)
	case "binomial":
		p.Family, p.Outcome = solver.Binomial, tab.numbers(t, f.Outcome)
	case "poisson":
		p.Family, p.Outcome = solver.Poisson, tab.numbers(t, f.Outcome)
	case "multinomial":
		p.Family, p.Classes = solver.Multinomial, len(f.Classes)
		for _, code := range codes(tab.column[f.Outcome], f.Classes) {
			p.Outcome = append(p.Outcome, float64(code))
		}
	case "cox":
		p.Family, p.Survival = solver.Cox, f.survival(t, tab)
	default:
		t.Fatalf("family %q", f.Family)
	}
}

func (f frequencies) survival(t *testing.T, tab table) *solver.Survival {
	t.Helper()
	if f.Ties != "efron" {
		t.Fatalf("ties %q", f.Ties)
	}
	s := &solver.Survival{Time: tab.numbers(t, f.Outcome), Ties: solver.Efron}
	for _, v := range tab.numbers(t, f.Event) {
		s.Event = append(s.Event, v == 1)
	}
	if f.Strata != "" {
		levels := slices.Compact(slices.Sorted(slices.Values(tab.column[f.Strata])))
		s.Stratum = codes(tab.column[f.Strata], levels)
	}
	return s
}

// codes gives each cell the position of its level.
func codes(cells, levels []string) []int32 {
	out := make([]int32, len(cells))
	for i, cell := range cells {
		out[i] = int32(slices.Index(levels, cell))
	}
	return out
}
