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
	for _, want := range []string{"14 of 40 draws a fit could not be certified", "0, 3, 6, 9, 12, 15, 18, 21, 24, 27 and 4 more", "2 of 40 draws more than 1 predictor entered", "(a penalty.ratio nearer to 1 separates them): 0, 1"} {
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

// Predictors that enter together coincide within the draw only where the fit
// found them to.
func TestEmptyRegionSaysWhy(t *testing.T) {
	together := func(twins ...int) string {
		_, w := warnings(t, Decision{Region: Cap, Bound: Unimodal, Threshold: 0.8, Selected: 1}, 10, func(i int, d *Draw) {
			if i < len(twins) {
				d.Entries = append(d.Entries, Entry{Predictor: 1, Step: 1})
				d.Twins = twins[i]
			}
		})
		return w
	}
	for want, twins := range map[string][]int{
		"(a penalty.ratio nearer to 1 separates them): 0, 1":                                               {0, 0},
		"(columns coincide within these draws): 0, 1":                                                      {2, 2},
		"(columns coincide within 1 of them; in the others a penalty.ratio nearer to 1 separates them): 0": {2, 0},
	} {
		if w := together(twins...); !strings.Contains(w, want) {
			t.Errorf("twins %v: %q, want %q", twins, w, want)
		}
	}
}

// The reason why there is no bound is given once, and nothing speaks of a
// bound that is not there.
func TestNoBoundIsSaidOnce(t *testing.T) {
	for _, region := range []Region{Cap, Common} {
		threshold, selected := 0.51, 1.0
		ask := Ask{Region: region, Threshold: &threshold, Selected: &selected}
		d, err := Decide(ask, 10, 40, false, 0)
		if err != nil {
			t.Fatal(err)
		}
		j, w := warnings(t, d, 10, func(int, *Draw) {})
		all := w + "\n" + strings.Join(j.Decision.Notes, "\n")
		if strings.Count(all, j.Bounds.Of(Unimodal).Why) != 1 || strings.Contains(all, "bound is an estimate") {
			t.Errorf("%s region: %q", region, all)
		}
		ask.Threshold = nil
		if d, err = Decide(ask, 10, 40, true, 0); err != nil {
			t.Fatal(err)
		}
		draws := make([]Draw, 40)
		for i := range draws {
			draws[i] = Draw{Number: i, Last: 1, Complete: true, Entries: []Entry{{Predictor: 0, Step: 1}}}
		}
		if j, err = Judge(draws, true, plain(10), d); err != nil {
			t.Fatal(err)
		}
		all = strings.Join(append(j.Warnings, j.Decision.Notes...), "\n")
		if strings.Count(all, noBootstrapBound) != 1 || strings.Contains(all, "bound is an estimate") {
			t.Errorf("bootstrap, %s region: %q", region, all)
		}
	}
}

// Where the paths limit selected, what the bound would allow is of no use; and
// what an error asks for can be had.
func TestMessagesThatCanBeMet(t *testing.T) {
	threshold, luck := 0.8, 5.0
	d, err := Decide(Ask{Threshold: &threshold, FalseSelections: &luck}, 7, 10, false, 2)
	if err != nil || len(d.Notes) != 1 || !strings.Contains(d.Notes[0], "lowered from 3 to 2") {
		t.Errorf("%v, %q", err, d.Notes)
	}
	if _, err := UnimodalBound(1, 10, 2, 1); err == nil || strings.Contains(err.Error(), "3 of 2") {
		t.Errorf("one pair: %v", err)
	}
	luck, selected := 0.1, 900.0
	_, err = Decide(Ask{Selected: &selected, FalseSelections: &luck}, 1000, 200, false, 0)
	if err == nil || !strings.Contains(err.Error(), "it is 0.9; lower selected to ") {
		t.Errorf("%v", err)
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
