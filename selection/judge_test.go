package selection

import (
	"errors"
	"math"
	"slices"
	"strings"
	"testing"
)

// reef is a case small enough to be judged by hand: four candidates, one
// always-in column, two pairs, at most two predictors per draw.
//
//	draw 0: step 1 a, step 2 b and c (three: too many), so the region ends at 1
//	draw 1: step 2 a, step 3 b, the path ends at 4; a has left again by then
//	draw 2: step 0 b (minus), ends at 3, not certified after that
//	draw 3: nothing enters; c does not vary
func reef() ([]Draw, Predictors) {
	draws := []Draw{
		{Number: 0, First: 0, Last: 2,
			Entries: []Entry{{0, 1, false}, {1, 2, false}, {2, 2, true}},
			Coefs:   []Coef{{Step: 1, Predictor: 0, Value: 0.5}, {Step: 2, Predictor: 0, Value: 0.75}, {Step: 2, Predictor: 1, Value: 0.1}, {Step: 2, Predictor: 2, Value: -0.1}},
			Always:  []float64{1, 2, 3}},
		{Number: 1, First: 1, Last: 4, Complete: true,
			Entries: []Entry{{0, 2, false}, {1, 3, false}},
			Coefs:   []Coef{{Step: 2, Predictor: 0, Value: 0.2}, {Step: 3, Predictor: 0, Value: 0.1}, {Step: 3, Predictor: 1, Value: 0.3}, {Step: 4, Predictor: 1, Value: 0.6}},
			Always:  []float64{10, 11, 12, 13}},
		{Number: 2, First: -1, Last: 3, Uncertified: true,
			Entries: []Entry{{1, 0, true}},
			Coefs:   []Coef{{Step: 0, Predictor: 1, Value: -1}, {Step: 1, Predictor: 1, Value: -2}, {Step: 2, Predictor: 1, Value: -2.5}, {Step: 3, Predictor: 1, Value: -3}},
			Always:  []float64{20, 21, 22, 23, 24}},
		{Number: 3, First: 0, Last: 4, Complete: true, Still: []int32{2}, Always: []float64{30, 31, 32, 33, 34}},
	}
	p := Predictors{Names: []string{"a", "b", "c", "d"}, Deviations: []float64{2, 1, 1, 1},
		Always: []string{"tank"}, AlwaysDeviations: []float64{10}}
	return draws, p
}

func judgeReef(t *testing.T, region Region, selected int) *Judgement {
	t.Helper()
	draws, p := reef()
	j, err := Judge(draws, false, p, Decision{Region: region, Bound: WorstCase, Threshold: 0.7, Selected: selected})
	if err != nil {
		t.Fatal(err)
	}
	return j
}

func rowOf(t *testing.T, j *Judgement, name string) Row {
	t.Helper()
	for _, r := range j.Rows {
		if r.Predictor == name {
			return r
		}
	}
	t.Fatalf("no row %q", name)
	return Row{}
}

func order(j *Judgement) string {
	var names []string
	for _, r := range j.Rows {
		names = append(names, r.Predictor)
	}
	return strings.Join(names, "")
}

// By hand. Counts: a in draws 0 and 1 (one pair, both halves), b in 1 and 2, c
// and d never: in draw 0 the region ends before c. Need: ceil(4 * 0.7) = 3.
func TestJudgeCapByHand(t *testing.T) {
	j := judgeReef(t, Cap, 2)
	if order(j) != "abcd" || j.Need != 3 || j.Attained != 0.75 || j.Stable != 0 || j.MostStable != 2*4/3 {
		t.Errorf("order %s, need %d, attained %g, stable %d, at most %d", order(j), j.Need, j.Attained, j.Stable, j.MostStable)
	}
	if j.CapBinding != 1 || j.MeanSelected != 1 || !slices.Equal(j.Uncertified, []int{2}) || j.CommonEnd != nil || len(j.EmptyRegion) != 0 {
		t.Errorf("binding %d, mean %g, uncertified %v", j.CapBinding, j.MeanSelected, j.Uncertified)
	}
	a := rowOf(t, j, "a")
	if a.Count != 2 || a.Frequency != 0.5 || *a.BothHalves != 0.5 || *a.PositiveShare != 1 || a.Stable {
		t.Errorf("a: %+v", a)
	}
	// a at the regions' ends: 0.5, 0 (left again), not chosen, not chosen:
	// type 7 of 0 0 0 .5 at .975 is 2.925 steps in, .4625.
	if a.Coef.Low != 0 || a.Coef.Median != 0 || !near(a.Coef.High, 0.4625) {
		t.Errorf("a: quantiles %g, %g, %g over all draws", a.Coef.Low, a.Coef.Median, a.Coef.High)
	}
	if !near(a.Selected.Low, 0.0125) || !near(a.Selected.Median, 0.25) || !near(a.Selected.High, 0.4875) {
		t.Errorf("a: quantiles %g, %g, %g where chosen", a.Selected.Low, a.Selected.Median, a.Selected.High)
	}
	b := rowOf(t, j, "b")
	if b.Count != 2 || *b.BothHalves != 0 || *b.PositiveShare != 0.5 || !near(b.Coef.Low, -2.775) || !near(b.Coef.High, 0.555) {
		t.Errorf("b: %+v", b)
	}
	c := rowOf(t, j, "c")
	if c.Count != 0 || c.PositiveShare != nil || c.Selected != nil || c.Ceiling != 0.75 || c.Varied != 3 {
		t.Errorf("c: %+v", c)
	}
	// tank at the ends 1, 4, 3 and 4: 2, 13, 24, 34.
	if w := j.Always[0]; w.Draws != 4 || !near(w.Coef.Median, 18.5) || !near(w.Coef.Low, 2.825) || !near(w.Coef.High, 33.25) {
		t.Errorf("always: %+v", w)
	}
	// q^2/((2 tau - 1) p) at the attained 0.75: with all four 4/2, with the
	// three that vary in 95 % of the draws 4/1.5; the larger counts.
	if v := *j.Bounds.Of(WorstCase).FalseSelections; !near(v, 4/1.5) || *j.Decision.FalseSelections != v {
		t.Errorf("worst case: %g, want %g", v, 4/1.5)
	}
	for _, want := range []string{"1 of 4 draws a fit could not be certified", `1 of 4 candidates vary in less than 95 %`, "the 3 candidates left"} {
		if !strings.Contains(strings.Join(j.Warnings, "\n"), want) {
			t.Errorf("no warning with %q in %q", want, j.Warnings)
		}
	}
}

// By hand. Distinct predictors on average by step: -1: 0, 0: 1/4, 1: 2/4,
// 2: 5/4 (draw 0 ends there). With q = 1 the range ends at 1, with q = 2 at 2.
func TestJudgeCommonByHand(t *testing.T) {
	for _, c := range []struct {
		selected, end, a, b, c int
		mean                   float64
		order                  string
		tank                   float64
	}{{1, 1, 1, 1, 0, 0.5, "abcd", 16}, {2, 2, 2, 2, 1, 1.25, "abcd", 17}} {
		j := judgeReef(t, Common, c.selected)
		if *j.CommonEnd != c.end || j.MeanSelected != c.mean || order(j) != c.order || j.CapBinding != 0 {
			t.Errorf("q=%d: end %d, mean %g, order %s", c.selected, *j.CommonEnd, j.MeanSelected, order(j))
		}
		if rowOf(t, j, "a").Count != c.a || rowOf(t, j, "b").Count != c.b || rowOf(t, j, "c").Count != c.c {
			t.Errorf("q=%d: counts %d, %d, %d, want %d, %d, %d", c.selected, rowOf(t, j, "a").Count, rowOf(t, j, "b").Count, rowOf(t, j, "c").Count, c.a, c.b, c.c)
		}
		// q=1: tank at step 1 in the four draws: 2, 10, 22, 31; q=2: 3, 11, 23, 32.
		if j.Always[0].Coef.Median != c.tank {
			t.Errorf("q=%d: median of tank %g, want %g", c.selected, j.Always[0].Coef.Median, c.tank)
		}
		if !strings.Contains(strings.Join(j.Warnings, "\n"), "selected is estimated") {
			t.Errorf("q=%d: warnings %q", c.selected, j.Warnings)
		}
	}
}

// A draw that entered with more than q predictors at once contributes nothing:
// whole steps, whatever the order of the columns.
func TestJudgeWholeSteps(t *testing.T) {
	draws := []Draw{
		{Number: 1, Last: 3, Entries: []Entry{{0, 2, false}, {1, 2, false}}, Coefs: []Coef{{Step: 2, Predictor: 0, Value: 1}, {Step: 2, Predictor: 1, Value: 1}}},
		{Number: 0, Last: 3, Complete: true, Entries: []Entry{{1, 3, false}}, Coefs: []Coef{{Step: 3, Predictor: 1, Value: 1}}},
	}
	j, err := Judge(draws, false, plain(2), Decision{Region: Cap, Bound: WorstCase, Threshold: 1, Selected: 1})
	if err != nil {
		t.Fatal(err)
	}
	if !slices.Equal(j.EmptyRegion, []int{1}) || j.CapBinding != 1 || j.Rows[0].Predictor != "x1" || j.Rows[0].Count != 1 || j.Rows[1].Count != 0 {
		t.Errorf("empty %v, binding %d, rows %+v", j.EmptyRegion, j.CapBinding, j.Rows)
	}
}

// A draw without any fit contributes nothing and does not stop the judgement.
func TestJudgeDrawsWithoutSteps(t *testing.T) {
	draws := []Draw{
		{Number: 0, First: 5, Last: 4, Uncertified: true},
		{Number: 1, First: 0, Last: 6, Complete: true, Entries: []Entry{{0, 3, false}, {1, 6, false}}, Coefs: []Coef{{Step: 3, Predictor: 0, Value: 1}, {Step: 6, Predictor: 1, Value: 1}}},
		{Number: 2, First: 0, Last: -1, Complete: true},
		{Number: 3, First: 0, Last: 6, Complete: true},
	}
	for _, region := range []Region{Cap, Common} {
		j, err := Judge(draws, false, plain(2), Decision{Region: region, Bound: Unimodal, Threshold: 0.8, Selected: 2})
		if err != nil {
			t.Fatal(err)
		}
		want := 1
		if region == Common {
			want = 0 // what draw 0 would have chosen from step 5 on is not known
			if *j.CommonEnd != 4 {
				t.Errorf("common end %d, want 4", *j.CommonEnd)
			}
		}
		if rowOf(t, j, "x0").Count != 1 || rowOf(t, j, "x1").Count != want {
			t.Errorf("%s: %+v", region, j.Rows)
		}
	}
	all, err := Judge(draws[2:3:3], true, plain(2), Decision{Region: Common, Bound: Unimodal, Threshold: 0.8, Selected: 2})
	if err != nil || all.Rows[0].Count != 0 {
		t.Errorf("nothing at all: %+v, %v", all, err)
	}
}

func TestJudgeBootstrap(t *testing.T) {
	draws, p := reef()
	j, err := Judge(draws[:3], true, p, Decision{Region: Cap, Bound: Unimodal, Threshold: 0.6, Selected: 2})
	if err != nil {
		t.Fatal(err)
	}
	a := rowOf(t, j, "a")
	lo, hi, _ := Wilson(2, 3, 0.95)
	if a.BothHalves != nil || a.Low != lo || a.High != hi || !a.Stable || j.Need != 2 || j.Decision.FalseSelections != nil {
		t.Errorf("need %d, a: %+v", j.Need, a)
	}
	for _, b := range j.Bounds {
		if b.FalseSelections != nil || b.Why == "" {
			t.Errorf("bootstrap draws have a bound: %+v", b)
		}
	}
}

func TestJudgeReportsDrawsThatDoNotHoldTogether(t *testing.T) {
	for want, change := range map[string]func(d []Draw) []Draw{
		"draw 1: is there twice":           func(d []Draw) []Draw { d[2].Number = 1; return d },
		"draw 3: its other half, draw 2":   func(d []Draw) []Draw { d[2].Number = 4; return d },
		"draw -1: numbers":                 func(d []Draw) []Draw { d[2].Number = -1; return d },
		"draws: 3: must be even":           func(d []Draw) []Draw { return d[:3] },
		"draws: 0":                         func(d []Draw) []Draw { return nil },
		"predictor 7 of 4":                 func(d []Draw) []Draw { d[0].Entries[0].Predictor = 7; return d },
		"entry 0 is at step 9":             func(d []Draw) []Draw { d[0].Entries[0].Step = 9; return d },
		"entry 2 is out of order":          func(d []Draw) []Draw { d[0].Entries[2].Predictor = 1; return d },
		"predictor 0 enters twice":         func(d []Draw) []Draw { d[0].Entries[2].Predictor, d[0].Entries[1].Predictor = 1, 0; return d },
		"coefficient 1 is not finite":      func(d []Draw) []Draw { d[0].Coefs[1].Value = math.NaN(); return d },
		"coefficient 1 is out of order":    func(d []Draw) []Draw { d[0].Coefs[1].Step = 1; return d },
		"coefficient 0 is at step -1":      func(d []Draw) []Draw { d[0].Coefs[0].Step = -1; return d },
		"coefficient 0 names predictor -1": func(d []Draw) []Draw { d[0].Coefs[0].Predictor = -1; return d },
		"predictor 3 has a coefficient":    func(d []Draw) []Draw { d[0].Coefs[0].Predictor = 3; return d },
		"2 always-in coefficients, not 3":  func(d []Draw) []Draw { d[0].Always = d[0].Always[:2]; return d },
		"always-in coefficient 0":          func(d []Draw) []Draw { d[0].Always[0] = math.Inf(1); return d },
		"no step":                          func(d []Draw) []Draw { d[0].Last = -1; return d },
		"predictor 9 of 4 is said":         func(d []Draw) []Draw { d[0].Still = []int32{9}; return d },
		"do not vary are out of order":     func(d []Draw) []Draw { d[0].Still = []int32{2, 2}; return d },
		"path stopped after 1 predictors":  func(d []Draw) []Draw { d[2].Uncertified = false; return d },
	} {
		draws, p := reef()
		_, err := Judge(change(draws), false, p, Decision{Region: Cap, Bound: WorstCase, Threshold: 0.7, Selected: 2})
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%v, want %q", err, want)
		}
		var e *DrawError
		if strings.HasPrefix(want, "predictor") && !errors.As(err, &e) {
			t.Errorf("%v is no DrawError", err)
		}
	}
}

func TestJudgeMisuse(t *testing.T) {
	good := Decision{Region: Cap, Bound: WorstCase, Threshold: 0.7, Selected: 2}
	for want, change := range map[string]func(p *Predictors, d *Decision){
		"region":                  func(_ *Predictors, d *Decision) { d.Region = 0 },
		"bound":                   func(_ *Predictors, d *Decision) { d.Bound = 9 },
		"selected: 0":             func(_ *Predictors, d *Decision) { d.Selected = 0 },
		"selected: 5":             func(_ *Predictors, d *Decision) { d.Selected = 5 },
		"threshold: NaN":          func(_ *Predictors, d *Decision) { d.Threshold = math.NaN() },
		"one per term":            func(p *Predictors, _ *Decision) { p.Deviations = nil },
		"one per always-in":       func(p *Predictors, _ *Decision) { p.AlwaysDeviations = nil },
		"always-in coefficients,": func(p *Predictors, _ *Decision) { p.Always, p.AlwaysDeviations = nil, nil },
		"candidates: 0":           func(p *Predictors, _ *Decision) { p.Names, p.Deviations = nil, nil },
	} {
		draws, p := reef()
		d := good
		change(&p, &d)
		if _, err := Judge(draws, false, p, d); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%v, want %q", err, want)
		}
	}
}

func TestPerSD(t *testing.T) {
	j := judgeReef(t, Cap, 2)
	s := j.PerSD()
	a, b := rowOf(t, j, "a"), rowOf(t, s, "a")
	if b.Coef.High != 2*a.Coef.High || b.Selected.Median != 2*a.Selected.Median || b.Count != a.Count {
		t.Errorf("a: %+v, per standard deviation %+v", a, b)
	}
	if s.Always[0].Coef.Median != 10*j.Always[0].Coef.Median {
		t.Errorf("tank: %g, per standard deviation %g", j.Always[0].Coef.Median, s.Always[0].Coef.Median)
	}
	if a.Coef.High != rowOf(t, judgeReef(t, Cap, 2), "a").Coef.High {
		t.Error("PerSD changed the judgement that it was called on")
	}
}

// By hand: draw 2 starts at -1, draw 0 ends at 2, draw 2 at 3. b enters in draw 2
// at 0, in 0 at 2, in 1 at 3; from step 3 on draw 0 does not count any more.
func TestPathsByHand(t *testing.T) {
	type point struct {
		step      int
		name      string
		frequency float64
		reached   int
	}
	want := []point{
		{0, "b", 0.25, 4},
		{1, "a", 0.25, 4}, {1, "b", 0.25, 4},
		{2, "a", 0.5, 4}, {2, "b", 0.5, 4}, {2, "c", 0.25, 4},
		{3, "a", 1.0 / 3, 3}, {3, "b", 2.0 / 3, 3},
		{4, "a", 0.5, 2}, {4, "b", 0.5, 2},
	}
	var got []point
	j := judgeReef(t, Cap, 2)
	for r := range j.Paths() {
		got = append(got, point{r.Step, r.Predictor, r.Frequency, r.DrawsReached})
		if j.names.Names[r.Index] != r.Predictor {
			t.Errorf("%+v: index and name differ", r)
		}
	}
	if !slices.Equal(got, want) {
		t.Errorf("got  %v\nwant %v", got, want)
	}
	for range j.Paths() {
		break // stopping early must be allowed
	}
}
