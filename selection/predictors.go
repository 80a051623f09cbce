package selection

import "fmt"

// Predictors names what could be chosen, in the order of Entry.Predictor.
//
// A predictor is a single column, or it has terms: the columns of a group, or
// the indicators of a category's levels. It is chosen or not as a whole, and
// what has terms has no single coefficient and no sign, be it one term only.
type Predictors struct {
	Names   []string
	Terms   [][]string // per predictor the names of its terms, empty for a single column; nil: all are single
	Classes []string   // levels of an outcome of classes: each term has a coefficient for each; nil: none

	// Deviations is the standard deviation over the table of each term,
	// predictor by predictor, a single column having one; for PerSD.
	Deviations       []float64
	Always           []string  // always-in columns; the indicators of a category one by one
	AlwaysDeviations []float64 // one per always-in column
}

func (p Predictors) check() error {
	switch {
	case p.Terms != nil && len(p.Terms) != len(p.Names):
		return badCount("terms", len(p.Terms), fmt.Sprintf("must be a list per candidate, %d", len(p.Names)))
	case len(p.Classes) == 1:
		return badCount("classes", 1, "must be at least 2, or none")
	case len(p.Deviations) != p.terms():
		return badCount("deviations", len(p.Deviations), fmt.Sprintf("must be one per term of a candidate, %d", p.terms()))
	case len(p.AlwaysDeviations) != len(p.Always):
		return badCount("deviations", len(p.AlwaysDeviations), fmt.Sprintf("must be one per always-in column, %d", len(p.Always)))
	}
	return checkCandidates(float64(len(p.Names)))
}

// termsOf is the number of terms of predictor k, 1 for a single column.
func (p Predictors) termsOf(k int) int {
	if p.Terms == nil || len(p.Terms[k]) == 0 {
		return 1
	}
	return len(p.Terms[k])
}

// terms is the number of terms of all predictors.
func (p Predictors) terms() int {
	n := 0
	for k := range p.Names {
		n += p.termsOf(k)
	}
	return n
}

// firstTerms is the position of each predictor's first term, and behind the
// last the number of all.
func (p Predictors) firstTerms() []int {
	first := make([]int, len(p.Names)+1)
	for k := range p.Names {
		first[k+1] = first[k] + p.termsOf(k)
	}
	return first
}

// several tells whether predictor k has coefficients that only its terms can
// show: it has terms, or the outcome has classes.
func (p Predictors) several(k int) bool {
	return p.classes() > 1 || p.Terms != nil && len(p.Terms[k]) > 0
}

// classes is the number of coefficients of a term.
func (p Predictors) classes() int { return max(1, len(p.Classes)) }

// termName names term i of predictor k; a single column is its own.
func (p Predictors) termName(k, i int) string {
	if p.Terms == nil || len(p.Terms[k]) == 0 {
		return p.Names[k]
	}
	return p.Terms[k][i]
}

// className names class c; empty where the outcome has none.
func (p Predictors) className(c int) string {
	if len(p.Classes) == 0 {
		return ""
	}
	return p.Classes[c]
}
