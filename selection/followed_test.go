package selection

import (
	"fmt"
	"reflect"
	"strings"
	"testing"
)

// judgePairs judges 30 pairs in which candidate 0 of 100 is always chosen.
func judgePairs(t *testing.T, bound BoundName, bootstrap bool) *Judgement {
	t.Helper()
	p := Predictors{Names: make([]string, 100), Deviations: make([]float64, 100)}
	for i := range p.Names {
		p.Names[i] = fmt.Sprint("x", i)
	}
	draws := make([]Draw, 60)
	for i := range draws {
		draws[i] = Draw{Number: i, First: 0, Last: 1, Complete: true,
			Entries: []Entry{{0, 1, false}}, Coefs: []Coef{{Step: 1, Predictor: 0, Value: 1}}}
	}
	j, err := Judge(draws, bootstrap, p, Decision{Region: Cap, Bound: bound, Threshold: 0.8, Selected: 2})
	if err != nil {
		t.Fatal(err)
	}
	return j
}

// TestNumberFollowed: a number of draws that followed from the data leaves the
// worst-case bound alone (STATISTICS 6, last item) and changes no row.
func TestNumberFollowed(t *testing.T) {
	for _, bound := range []BoundName{WorstCase, Unimodal, RConcave} {
		before, j := judgePairs(t, bound, false), judgePairs(t, bound, false)
		for _, b := range before.Bounds {
			if b.FalseSelections == nil {
				t.Fatalf("%s is missing before, so there is nothing to take back: %s", b.Name, b.Why)
			}
		}
		j.NumberFollowed("the number was raised from 20 to 60")
		for i, b := range j.Bounds {
			switch {
			case b.Name == WorstCase && (b.FalseSelections == nil || *b.FalseSelections != *before.Bounds[i].FalseSelections):
				t.Errorf("%s: the worst-case bound changed", bound)
			case b.Name != WorstCase && (b.FalseSelections != nil || !strings.Contains(b.Why, "raised from 20 to 60")):
				t.Errorf("%s: %s is %v, %q", bound, b.Name, b.FalseSelections, b.Why)
			}
		}
		if has := j.Decision.FalseSelections != nil; has != (bound == WorstCase) {
			t.Errorf("%s: the decision has a bound: %v", bound, has)
		}
		if text := strings.Join(j.Warnings, "\n"); !strings.Contains(text, "carries over") ||
			strings.Contains(text, "no bound any more") != (bound != WorstCase) {
			t.Errorf("%s: warnings %q", bound, text)
		}
		if !reflect.DeepEqual(j.Rows, before.Rows) || j.Need != before.Need {
			t.Errorf("%s: rows changed", bound)
		}
	}
}

// TestNumberFollowedBootstrap: bootstrap draws have no bound to take back.
func TestNumberFollowedBootstrap(t *testing.T) {
	before, j := judgePairs(t, Unimodal, true), judgePairs(t, Unimodal, true)
	j.NumberFollowed("the number was raised")
	if !reflect.DeepEqual(j, before) {
		t.Errorf("the judgement changed")
	}
}
