package study

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"holdfast/selection"
)

// numbers shows three numbers, - where not given.
func numbers(d Decision) string {
	show := func(x *float64) string {
		if x == nil {
			return "-"
		}
		return fmt.Sprintf("%g", *x)
	}
	return show(d.Threshold) + " " + show(d.Selected) + " " + show(d.FalseSelections)
}

// DESIGN section 7, "Two of three". Order: threshold, selected, false
// selections.
func TestTwoOfThree(t *testing.T) {
	for _, c := range []struct{ file, want string }{
		{"", "0.8 - 1"},
		{"threshold = 0.7", "0.7 - 1"},
		{"selected = 9", "0.8 9 -"},
		{"false_selections = 2", "0.8 - 2"},
		{"threshold = 0.7\nselected = 9", "0.7 9 -"},
		{"threshold = 0.7\nfalse_selections = 2", "0.7 - 2"},
		{"selected = 9\nfalse_selections = 2", "- 9 2"},
	} {
		s := parse(t, small+"[decision]\n"+c.file+"\n")
		if got := numbers(s.Decision); got != c.want || s.Decision.Replace != nil {
			t.Errorf("%q: got %s, want %s", c.file, got, c.want)
		}
	}
}

// --set replaces as judge does: a threshold alone keeps selected, the others
// alone keep the threshold, two stand for themselves. With the worst-case
// bound the kept number is known in closed form (Meinshausen and Buhlmann
// 2010, Theorem 1): q = sqrt(V p (2 threshold - 1)), threshold = (1 + q^2/(p V))/2.
// p = 1000: at 0.8 and V = 1 q is sqrt(600), 24; at 0.7 and V = 2 sqrt(800), 28;
// q = 20 and V = 1 give 0.7.
func TestSetReplacesAsJudge(t *testing.T) {
	for _, c := range []struct {
		file, sets, want string
		luck             float64
	}{
		{"", "threshold=0.9", "0.9 24 -", 576 / 800.},
		{"threshold = 0.7\nfalse_selections = 2", "threshold=0.9", "0.9 28 -", 784 / 800.},
		{"threshold = 0.7\nselected = 9", "threshold=0.9", "0.9 9 -", 81 / 800.},
		{"selected = 20\nfalse_selections = 1", "threshold=0.9", "0.9 20 -", 400 / 800.},
		{"", "false_selections=2", "0.8 - 2", 34 * 34 / 600.},
		{"threshold = 0.7\nselected = 9", "false_selections=2", "0.7 - 2", 784 / 400.},
		{"selected = 20\nfalse_selections = 1", "false_selections=2", "0.7 28 -", 784 / 400.},
		{"", "selected=5", "0.8 5 -", 25 / 600.},
		{"threshold = 0.7\nselected = 9", "selected=5", "0.7 5 -", 25 / 400.},
		{"selected = 20\nfalse_selections = 1", "selected=5", "0.7 5 -", 25 / 400.},
		{"threshold = 0.7\nselected = 9", "selected=5 false_selections=2", "- 5 2", 25 / 20.},
		{"threshold = 0.7\nselected = 9", "threshold=0.9 selected=5", "0.9 5 -", 25 / 800.},
		{"threshold = 0.7\nselected = 9", "threshold=0.9 false_selections=2", "0.9 - 2", 1600 / 800.},
	} {
		var sets []string
		for _, f := range strings.Fields(c.sets) {
			sets = append(sets, "decision."+f)
		}
		s := parse(t, small+"[decision]\nbound = \"worst-case\"\n"+c.file+"\n", sets...)
		settled, d, err := s.Settle(1000, 400, 0)
		if err != nil {
			t.Errorf("%q --set %s: %v", c.file, c.sets, err)
			continue
		}
		if got := numbers(settled.Decision); got != c.want || settled.Decision.Replace != nil {
			t.Errorf("%q --set %s: got %s, want %s", c.file, c.sets, got, c.want)
		}
		if math.Abs(*d.FalseSelections-c.luck) > 1e-9*c.luck {
			t.Errorf("%q --set %s: false selections %v, want %v", c.file, c.sets, *d.FalseSelections, c.luck)
		}
	}
}

func TestSetOfAllThree(t *testing.T) {
	ps := problems(t, small, "decision.threshold=0.9", "decision.selected=3", "decision.false_selections=1")
	if !strings.Contains(ps.Error(), "threshold, selected and false_selections") {
		t.Errorf("got %v", ps)
	}
}

// A number that waits is checked like any other.
func TestReplacementIsChecked(t *testing.T) {
	ps := problems(t, small, "decision.threshold=0.4")
	if ps[0].Set != "decision.threshold=0.4" || ps[0].Value != "0.4" {
		t.Errorf("got %v", ps)
	}
}

func TestBootstrap(t *testing.T) {
	boot := small + "[draws]\ndesign = \"bootstrap\"\nnumber = 25\n[decision]\n"
	for _, sets := range [][]string{nil, {"decision.threshold=0.9"}, {"decision.false_selections=1"}, {"decision.selected=4", "decision.false_selections=1"}} {
		problems(t, boot, sets...)
	}
	problems(t, boot+"selected = 4\nfalse_selections = 1\n")
	for _, s := range []*Study{
		parse(t, boot+"selected = 4\n"),
		parse(t, boot, "decision.selected=4"),
		parse(t, designed, "draws.design=bootstrap", "decision.selected=4"),
	} {
		if got := numbers(s.Decision); got != "0.8 4 -" {
			t.Errorf("got %s", got)
		}
		if _, d, err := s.Settle(100, 20, 0); err != nil || d.FalseSelections != nil {
			t.Errorf("got %+v, %v", d, err)
		}
	}
}

// DESIGN section 7: stop_after 0 is four times q, at most units in a half - 2 -
// always-in, at least 1; a number given is taken as it stands.
func TestResolveStopAfter(t *testing.T) {
	for _, c := range []struct{ given, selected, units, always, want int }{
		{0, 10, 100, 0, 40},
		{0, 30, 100, 0, 98},
		{0, 30, 100, 5, 93},
		{0, 30, 3, 0, 1},
		{0, 30, 2, 4, 1},
		{7, 30, 100, 0, 7},
		{500, 30, 100, 0, 500},
	} {
		p := Penalty{StopAfter: c.given}
		if got := p.ResolveStopAfter(c.selected, c.units, c.always); got != c.want {
			t.Errorf("%+v: got %d", c, got)
		}
	}
}

func TestSettle(t *testing.T) {
	s := parse(t, small+"[decision]\nbound = \"worst-case\"\n")
	settled, d, err := s.Settle(1000, 400, 0)
	if err != nil || d.Selected != 24 || settled.Penalty.StopAfter != 96 || s.Penalty.StopAfter != 0 {
		t.Errorf("got %+v, stop %d, %v", d, settled.Penalty.StopAfter, err)
	}
	// A half of 12 rows with 2 columns always in stops at 8, and so does q.
	settled, d, err = s.Settle(1000, 12, 2)
	if err != nil || d.Selected != 8 || settled.Penalty.StopAfter != 8 || len(d.Notes) == 0 {
		t.Errorf("got %+v, stop %d, %v", d, settled.Penalty.StopAfter, err)
	}
	s = parse(t, small+"[penalty]\nstop_after = 5\n[decision]\nselected = 6\n")
	if _, _, err := s.Settle(1000, 400, 0); err == nil || !strings.Contains(err.Error(), "5") {
		t.Errorf("a selected above stop_after gives %v", err)
	}
	if _, _, err := parse(t, small).Settle(3, 400, 0); err != nil {
		t.Errorf("3 candidates: %v", err)
	}
}

// Settling twice changes nothing, so that a run directory can be settled again.
func TestSettleTwice(t *testing.T) {
	for _, sets := range [][]string{nil, {"decision.threshold=0.9"}, {"decision.selected=3"}, {"decision.bound=r-concave"}} {
		once, d, err := parse(t, small, sets...).Settle(500, 60, 1)
		if err != nil {
			t.Fatal(err)
		}
		twice, e, err := once.Settle(500, 60, 1)
		if err != nil || !d.Same(e) || numbers(once.Decision) != numbers(twice.Decision) || once.Penalty.StopAfter != twice.Penalty.StopAfter {
			t.Errorf("%q: %+v then %+v, %v", sets, d, e, err)
		}
	}
}

func TestDecisionWords(t *testing.T) {
	s := parse(t, small, "decision.region=common", "decision.bound=r-concave")
	if s.Decision.Region != selection.Common || s.Decision.Bound != selection.RConcave {
		t.Errorf("got %v %v", s.Decision.Region, s.Decision.Bound)
	}
}
