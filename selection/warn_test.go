package selection

import (
	"fmt"
	"math"
	"strings"
	"testing"
)

// warnings judges draws in which candidate 0 is chosen at once, and joins the
// footnotes.
func warnings(t *testing.T, d Decision, p int, change func(i int, d *Draw)) (*Judgement, string) {
	t.Helper()
	draws := make([]Draw, 40)
	for i := range draws {
		draws[i] = Draw{Number: i, Last: 1, Complete: true, Entries: []Entry{{Predictor: 0, Step: 1}}}
		change(i, &draws[i])
	}
	j, err := Judge(draws, false, plain(p), d)
	if err != nil {
		t.Fatal(err)
	}
	return j, strings.Join(j.Warnings, "\n")
}

func TestWarnings(t *testing.T) {
	decision := Decision{Region: Cap, Bound: Unimodal, Threshold: 0.8, Selected: 1}
	if _, w := warnings(t, decision, 10, func(int, *Draw) {}); w != "" {
		t.Errorf("nothing to say, but %q", w)
	}
	_, w := warnings(t, decision, 10, func(i int, d *Draw) {
		d.Uncertified = i%3 == 0
		if i < 2 {
			d.Entries = append(d.Entries, Entry{Predictor: 1, Step: 1})
		}
	})
	for _, want := range []string{"14 of 40 draws a fit could not be certified", "0, 3, 6, 9, 12, 15, 18, 21, 24, 27 and 4 more", "2 of 40 draws more than 1 predictors", ": 0, 1"} {
		if !strings.Contains(w, want) {
			t.Errorf("%q, want %q", w, want)
		}
	}
	j, w := warnings(t, decision, 100, func(i int, d *Draw) {
		for k := int32(80); k < 92; k++ {
			if i < 3 || k < 83 && i < 20 {
				d.Still = append(d.Still, k)
			}
		}
	})
	for _, want := range []string{"12 of 100 candidates vary in less than 95 %", `"x80", "x81"`, `"x89" and 2 more`, "3 of them vary in fewer than 32 draws and cannot be stable", "the 88 candidates left"} {
		if !strings.Contains(w, want) {
			t.Errorf("%q, want %q", w, want)
		}
	}
	if want, _ := UnimodalBound(1, 88, 32, 20); *j.Decision.FalseSelections != want {
		t.Errorf("bound %g, want that of 88 candidates, %g", *j.Decision.FalseSelections, want)
	}
	decision.Threshold = 0.51
	if _, w = warnings(t, decision, 10, func(int, *Draw) {}); !strings.Contains(w, "this decision has no bound: the unimodal bound needs") {
		t.Errorf("%q does not say why there is no bound", w)
	}
}

// Candidate 0 is chosen in 80 % of the draws, which is the threshold: it could
// change sides. Never chosen and always chosen could not.
func TestCouldChangeSides(t *testing.T) {
	j, _ := warnings(t, Decision{Region: Cap, Bound: Unimodal, Threshold: 0.8, Selected: 2}, 3, func(i int, d *Draw) {
		if i%5 == 0 {
			d.Entries[0].Predictor = 2
			d.Entries = append([]Entry{{Predictor: 1, Step: 1}}, d.Entries...)
		} else {
			d.Entries = append(d.Entries, Entry{Predictor: 1, Step: 1})
		}
	})
	if j.CouldChange != 1 || rowOf(t, j, "x0").CouldChange != true || j.Stable != 2 || rowOf(t, j, "x1").CouldChange {
		t.Errorf("%d could change: %+v", j.CouldChange, j.Rows)
	}
	if names := fmt.Sprint(j.StableNames()); names != "[x1 x0]" {
		t.Errorf("stable: %s", names)
	}
}

// Every bound says what it assumes and what is left without it, and the two
// that assume a shape name it.
func TestBoundsExplainThemselves(t *testing.T) {
	for _, b := range boundNames {
		back, err := ParseBound(b.String())
		if err != nil || back != b || b.Assumes() == "" || b.Without() == "" || b.Label() == "" {
			t.Errorf("%s: %v, %q, %q, %q", b, err, b.Assumes(), b.Without(), b.Label())
		}
		if !strings.Contains(b.Assumes(), "only if every predictor without effect is of that kind") {
			t.Errorf("%s does not say when its number speaks of false selections", b)
		}
	}
	if !strings.Contains(Unimodal.Assumes(), "one-hump") || !strings.Contains(Unimodal.Without(), "worst-case") || strings.Contains(WorstCase.Assumes(), "hump") {
		t.Error("the one-hump assumption belongs to the unimodal bound")
	}
	if _, err := ParseBound("uni"); err == nil || !strings.Contains(err.Error(), `"worst-case", "unimodal", "r-concave"`) {
		t.Errorf("unknown bound: %v", err)
	}
}

// Advice is never on the wrong side of the number it stands for.
func TestAdviceRounds(t *testing.T) {
	for x := 1e-12; x < 1e12; x *= 1.00317 {
		up, down := roundUp(x), roundDown(x)
		if up < x || down > x || up > x*1.0011 || down < x*0.9989 || len(show(up)) > 12 {
			t.Fatalf("%g rounds up to %s and down to %s", x, show(up), show(down))
		}
	}
	if roundUp(0.25) != 0.25 || roundDown(0.25) != 0.25 || roundUp(0) != 0 || !math.IsInf(roundUp(math.Inf(1)), 1) {
		t.Error("numbers that need no rounding are changed")
	}
}
