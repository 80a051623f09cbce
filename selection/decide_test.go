package selection

import (
	"encoding/json"
	"errors"
	"math"
	"strings"
	"testing"
)

// decide runs Decide on 1,000 candidates and 100 draws with the worst-case
// bound, whose budget can be solved by hand: at threshold 0.8, q^2 = 600 E; at
// 0.9, q^2 = 800 E.
func decide(t *testing.T, a Ask, stopAfter int) Decision {
	t.Helper()
	if a.Bound == 0 {
		a.Bound = WorstCase
	}
	d, err := Decide(a, 1000, 100, false, stopAfter)
	if err != nil {
		t.Fatal(err)
	}
	return d
}

// isDecision compares threshold, q and the bound of a decision.
func isDecision(t *testing.T, what string, d Decision, threshold float64, q int, ev float64) {
	t.Helper()
	if d.FalseSelections == nil {
		t.Errorf("%s: no bound", what)
	} else if d.Threshold != threshold || d.Selected != q || !near(*d.FalseSelections, ev) {
		t.Errorf("%s: threshold %g, selected %d, false selections %g, want %g, %d, %g",
			what, d.Threshold, d.Selected, *d.FalseSelections, threshold, q, ev)
	}
}

// "Two of three" of DESIGN 7, in every direction of the study.
func TestDecideTwoOfThree(t *testing.T) {
	isDecision(t, "nothing", decide(t, Ask{}, 0), 0.8, 24, 576.0/600)
	isDecision(t, "threshold", decide(t, Ask{Threshold: value(0.9)}, 0), 0.9, 28, 784.0/800)
	isDecision(t, "selected", decide(t, Ask{Selected: value(12.0)}, 0), 0.8, 12, 144.0/600)
	isDecision(t, "false selections", decide(t, Ask{FalseSelections: value(6.0)}, 0), 0.8, 60, 6)
	isDecision(t, "threshold and selected", decide(t, Ask{Threshold: value(0.9), Selected: value(20.0)}, 0), 0.9, 20, 0.5)
	isDecision(t, "threshold and false selections", decide(t, Ask{Threshold: value(0.9), FalseSelections: value(2.0)}, 0), 0.9, 40, 2)
	isDecision(t, "selected and false selections", decide(t, Ask{Selected: value(30.0), FalseSelections: value(1.0)}, 0), 0.95, 30, 1)
	d := decide(t, Ask{}, 0)
	if d.Region != Cap || !near(d.SelectedAsked, math.Sqrt(600)) {
		t.Errorf("nothing asked: region %s, q asked %g, want cap and sqrt(600)", d.Region, d.SelectedAsked)
	}
	if d, err := Decide(Ask{}, 1000, 200, false, 0); err != nil || d.Bound != Unimodal {
		t.Errorf("nothing asked: bound %s, %v, want unimodal", d.Bound, err)
	}
}

// The rules of a second look, from a decision of threshold 0.8 and 24.
func TestChangeTwoOfThree(t *testing.T) {
	first := decide(t, Ask{}, 0)
	change := func(c Ask) Decision {
		t.Helper()
		d, err := first.Change(c, 1000, 100, false, 0)
		if err != nil {
			t.Fatal(err)
		}
		return d
	}
	isDecision(t, "nothing", change(Ask{}), 0.8, 24, 0.96)
	isDecision(t, "threshold", change(Ask{Threshold: value(0.9)}), 0.9, 24, 0.72)
	isDecision(t, "selected", change(Ask{Selected: value(12.0)}), 0.8, 12, 0.24)
	isDecision(t, "false selections", change(Ask{FalseSelections: value(6.0)}), 0.8, 60, 6)
	isDecision(t, "threshold and selected", change(Ask{Threshold: value(0.9), Selected: value(20.0)}), 0.9, 20, 0.5)
	isDecision(t, "threshold and false selections", change(Ask{Threshold: value(0.9), FalseSelections: value(2.0)}), 0.9, 40, 2)
	isDecision(t, "selected and false selections", change(Ask{Selected: value(30.0), FalseSelections: value(1.0)}), 0.95, 30, 1)
	if !first.Same(change(Ask{})) || first.Same(change(Ask{Threshold: value(0.9)})) {
		t.Error("Same does not tell the first decision from another")
	}
	u := change(Ask{Bound: Unimodal})
	if want, _ := UnimodalBound(24, 1000, 80, 50); u.Bound != Unimodal || u.Threshold != 0.8 || u.Selected != 24 || !near(*u.FalseSelections, want) {
		t.Errorf("bound alone: %+v, want threshold and selected kept and %g", u, want)
	}
	if r := change(Ask{Region: Common}); r.Region != Common || r.Selected != 24 || r.Bound != WorstCase {
		t.Errorf("region alone: %+v", r)
	}
	three := Ask{Threshold: value(0.9), Selected: value(20.0), FalseSelections: value(1.0)}
	if _, err := first.Change(three, 1000, 100, false, 0); err == nil || !strings.Contains(err.Error(), "threshold, selected, false_selections") {
		t.Errorf("three at once: %v", err)
	}
	if _, err := Decide(three, 1000, 100, false, 0); err == nil || !strings.Contains(err.Error(), "threshold, selected, false_selections") {
		t.Errorf("three at once in a study: %v", err)
	}
}

func TestDecideLowersToStopAfter(t *testing.T) {
	d := decide(t, Ask{}, 10)
	isDecision(t, "derived", d, 0.8, 10, 100.0/600)
	if len(d.Notes) != 1 || !strings.Contains(d.Notes[0], "from 24 to 10") {
		t.Errorf("notes %q do not say that selected was lowered", d.Notes)
	}
	_, err := Decide(Ask{Bound: WorstCase, Selected: value(11.0)}, 1000, 100, false, 10)
	var e *ImpossibleError
	if !errors.As(err, &e) || e.Change != "selected" || e.Nearest != 10 {
		t.Errorf("selected above stop_after: %v, want the largest possible, 10", err)
	}
	if d, err := Decide(Ask{Bound: WorstCase, Selected: value(5.0)}, 5, 100, false, 5); err != nil || d.Selected != 5 {
		t.Errorf("stop_after at the candidates never stops a path: %v", err)
	}
}

// An error names the number to change, and what it names works.
func TestDecideSelectedBelowOne(t *testing.T) {
	for _, b := range boundNames {
		for _, p := range []int{2, 5, 100, 100000} {
			a := Ask{Bound: b, FalseSelections: value(1e-7)}
			_, err := Decide(a, p, 200, false, 0)
			var e *ImpossibleError
			if !errors.As(err, &e) || e.Change != "false_selections" {
				t.Errorf("%s, p=%d: %v does not say what selected = 1 needs", b, p, err)
				continue
			}
			if v, _ := b.at(1, float64(p), 160, 100); e.Nearest < v || e.Nearest > v*1.001 {
				t.Errorf("%s, p=%d: advises %g, selected = 1 needs %g", b, p, e.Nearest, v)
			}
			a.FalseSelections = &e.Nearest
			if d, err := Decide(a, p, 200, false, 0); err != nil || d.Selected != 1 {
				t.Errorf("%s, p=%d, after the advice %g: %+v, %v", b, p, e.Nearest, d, err)
			}
		}
	}
	if _, err := Decide(Ask{}, 1, 200, false, 0); err == nil || !strings.Contains(err.Error(), `bound = "worst-case" selected = 1 needs false_selections = 1.667`) {
		t.Errorf("one candidate, no unimodal bound: %v", err)
	}
}

func TestDecideNoThreshold(t *testing.T) {
	a := Ask{Bound: Unimodal, Selected: value(20.0), FalseSelections: value(0.05)}
	_, err := Decide(a, 200, 50, false, 0)
	var e *ImpossibleError
	if !errors.As(err, &e) || e.Change != "false_selections" {
		t.Fatalf("%v", err)
	}
	a.FalseSelections = &e.Nearest
	if d, err := Decide(a, 200, 50, false, 0); err != nil || d.Threshold != 1 {
		t.Errorf("after the advice: %+v, %v", d, err)
	}
	half := Ask{Threshold: value(0.505), FalseSelections: value(1.0)}
	if _, err := Decide(half, 200, 100, false, 0); !errors.As(err, &e) || e.Change != "threshold" {
		t.Fatalf("no unimodal bound one above half: %v", err)
	}
	half.Threshold = &e.Nearest
	if _, err := Decide(half, 200, 100, false, 0); err != nil {
		t.Errorf("after the advice: %v", err)
	}
}

// A decision without its bound is made, and says so.
func TestDecideWithoutBound(t *testing.T) {
	d, err := Decide(Ask{Threshold: value(0.505), Selected: value(3.0)}, 200, 100, false, 0)
	if err != nil || d.FalseSelections != nil || len(d.Notes) != 1 {
		t.Errorf("%+v, %v: want no bound and a note", d, err)
	}
}

func TestDecideBootstrap(t *testing.T) {
	if _, err := Decide(Ask{}, 100, 101, true, 0); err == nil || !strings.Contains(err.Error(), "selected") {
		t.Errorf("bootstrap without selected: %v", err)
	}
	if _, err := Decide(Ask{Selected: value(5.0), FalseSelections: value(1.0)}, 100, 101, true, 0); err == nil || !strings.Contains(err.Error(), "false_selections") {
		t.Errorf("bootstrap with false selections: %v", err)
	}
	d, err := Decide(Ask{Selected: value(5.0)}, 100, 101, true, 0)
	if err != nil || d.Selected != 5 || d.Threshold != 0.8 || d.FalseSelections != nil {
		t.Errorf("%+v, %v", d, err)
	}
	e, err := d.Change(Ask{Threshold: value(0.9)}, 100, 101, true, 0)
	if err != nil || e.Selected != 5 || e.Threshold != 0.9 {
		t.Errorf("%+v, %v", e, err)
	}
}

func TestDecideMisuse(t *testing.T) {
	for want, a := range map[string]Ask{
		"selected: 2.5":         {Selected: value(2.5)},
		"selected: 0.5":         {Selected: value(0.5)},
		"selected: 1001":        {Selected: value(1001.0)},
		"threshold: 0.5":        {Threshold: value(0.5)},
		"false_selections: 0":   {FalseSelections: value(0.0)},
		"false_selections: NaN": {FalseSelections: value(math.NaN())},
	} {
		if _, err := Decide(a, 1000, 100, false, 0); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%v, want %q", err, want)
		}
	}
}

func TestStopAfter(t *testing.T) {
	for _, c := range []struct{ q, units, always, want int }{
		{10, 100, 0, 40}, {10, 30, 3, 25}, {10, 2, 0, 1}, {1, 100, 2, 4},
	} {
		if got := StopAfter(c.q, c.units, c.always); got != c.want {
			t.Errorf("StopAfter(%d, %d, %d) = %d, want %d", c.q, c.units, c.always, got, c.want)
		}
	}
}

func TestDecisionRoundTrip(t *testing.T) {
	d := decide(t, Ask{Region: Common}, 10)
	text, err := json.Marshal(d)
	if err != nil {
		t.Fatal(err)
	}
	var back Decision
	if err := json.Unmarshal(text, &back); err != nil || !d.Same(back) || *back.FalseSelections != *d.FalseSelections {
		t.Errorf("%s came back as %+v, %v", text, back, err)
	}
	if err := json.Unmarshal([]byte(`{"region":"capped"}`), &back); err == nil || !strings.Contains(err.Error(), `"cap" or "common"`) {
		t.Errorf("unknown region: %v", err)
	}
}
