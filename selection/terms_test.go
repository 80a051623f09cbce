package selection

import (
	"fmt"
	"math/rand/v2"
	"reflect"
	"slices"
	"strings"
	"testing"
)

// reefTerms is reef with a group and classes: b has the terms b1 and b2, and
// every term a coefficient for each of two classes. A coefficient that draw d
// has at a step becomes, for term t and class c, (1 + t) times as much for the
// first class and minus that for the second; but the second class of b2 is 0 in
// draw 1.
func reefTerms() ([]Draw, Predictors) {
	draws, p := reef()
	p.Terms = [][]string{nil, {"b1", "b2"}, {}, nil}
	p.Classes = []string{"lost", "alive"}
	p.Deviations = []float64{2, 3, 5, 1, 1}
	for i := range draws {
		var coefs []Coef
		for _, c := range draws[i].Coefs {
			for t := range int32(p.termsOf(int(c.Predictor))) {
				v := c.Value * float64(1+t)
				coefs = append(coefs, Coef{c.Step, c.Predictor, t, 0, v})
				if i != 1 || t == 0 {
					coefs = append(coefs, Coef{c.Step, c.Predictor, t, 1, -v})
				}
			}
		}
		var always []float64
		for _, v := range draws[i].Always {
			always = append(always, v, -v)
		}
		draws[i].Coefs, draws[i].Always = coefs, always
	}
	return draws, p
}

func judgeReefTerms(t *testing.T) *Judgement {
	t.Helper()
	draws, p := reefTerms()
	j, err := Judge(draws, false, p, Decision{Region: Cap, Bound: WorstCase, Threshold: 0.7, Selected: 2})
	if err != nil {
		t.Fatal(err)
	}
	return j
}

// Choosing has nothing to do with terms and classes: counts, intervals, bounds
// and paths are those of reef. No row has a coefficient or a sign.
func TestTermsChangeNoCount(t *testing.T) {
	plain, terms := judgeReef(t, Cap, 2), judgeReefTerms(t)
	for i, r := range terms.Rows {
		want := plain.Rows[i]
		if r.Coef != nil || r.Selected != nil || r.PositiveShare != nil {
			t.Errorf("%s has a coefficient or a sign: %+v", r.Predictor, r)
		}
		want.Coef, want.Selected, want.PositiveShare = nil, nil, nil
		if !reflect.DeepEqual(r, want) {
			t.Errorf("%+v, want %+v", r, want)
		}
	}
	if !reflect.DeepEqual(plain.Bounds, terms.Bounds) || !reflect.DeepEqual(plain.Warnings, terms.Warnings) {
		t.Error("bounds or warnings differ")
	}
	if !slices.Equal(slices.Collect(plain.Paths()), slices.Collect(terms.Paths())) {
		t.Error("the paths differ")
	}
}

// By hand. At the regions' ends (1, 4, 3, 4) a of class "lost" is 0.5, 0 (left
// again), and not chosen twice; b1 is not chosen, 0.6, -3, not chosen, b2 twice
// that; b2 of "alive" is 0 in draw 1 and 6 in draw 2. tank is 2, 13, 24 and 34.
func TestTermsByHand(t *testing.T) {
	j := judgeReefTerms(t)
	want := []struct {
		predictor, term, class      string
		low, high                   float64 // over the four draws
		selectedLow, selectedMiddle float64
	}{
		{"a", "a", "lost", 0, 0.4625, 0.0125, 0.25},
		{"a", "a", "alive", -0.4625, 0, -0.4875, -0.25},
		{"b", "b1", "lost", -2.775, 0.555, -2.91, -1.2},
		{"b", "b1", "alive", -0.555, 2.775, -0.51, 1.2},
		{"b", "b2", "lost", -5.55, 1.11, -5.82, -2.4},
		{"b", "b2", "alive", 0, 5.55, 0.15, 3},
	}
	rows := slices.Collect(j.Terms())
	if len(rows) != 10 {
		t.Fatalf("%d rows, not 5 terms times 2 classes", len(rows))
	}
	for i, w := range want {
		r := rows[i]
		if r.Predictor != w.predictor || r.Term != w.term || r.Class != w.class || r.Index != min(1, i/2) {
			t.Errorf("row %d: %+v", i, r)
		}
		if !near(r.Coef.Low, w.low) || !near(r.Coef.High, w.high) || !near(r.Selected.Low, w.selectedLow) || !near(r.Selected.Median, w.selectedMiddle) {
			t.Errorf("%s, %s, %s: %+v over all, %+v where chosen, want %+v", r.Predictor, r.Term, r.Class, *r.Coef, *r.Selected, w)
		}
	}
	for _, r := range rows[6:] { // c and d, never chosen
		if r.Selected != nil || *r.Coef != (Spread{}) {
			t.Errorf("%+v", r)
		}
	}
	for i, class := range []string{"lost", "alive"} {
		sign := 1 - 2*float64(i)
		if a := j.Always[i]; a.Predictor != "tank" || a.Class != class || a.Draws != 4 || !near(a.Coef.Median, sign*18.5) {
			t.Errorf("always: %+v, %+v", a, a.Coef)
		}
	}
	for range j.Terms() {
		break // stopping early must be allowed
	}
	var ofB []TermRow
	for r := range j.TermsOf(&j.Rows[1]) {
		ofB = append(ofB, r)
	}
	if !reflect.DeepEqual(ofB, rows[2:6]) {
		t.Errorf("terms of b: %+v", ofB)
	}
}

// A category of two levels has one term; its row has no coefficient either
// (DESIGN 7: for categories both are null). Single columns beside it keep theirs.
func TestOneTermIsATerm(t *testing.T) {
	draws, p := reef()
	p.Terms = [][]string{nil, {"b=old"}, nil, nil}
	j, err := Judge(draws, false, p, Decision{Region: Cap, Bound: WorstCase, Threshold: 0.7, Selected: 2})
	if err != nil {
		t.Fatal(err)
	}
	plain := judgeReef(t, Cap, 2)
	for i, r := range j.Rows {
		if (r.Coef == nil) != (r.Predictor == "b") || (r.PositiveShare == nil) != (r.Predictor != "a") {
			t.Errorf("%+v", r)
		}
		if r.Predictor != "b" && !reflect.DeepEqual(r, plain.Rows[i]) {
			t.Errorf("%+v, want %+v", r, plain.Rows[i])
		}
	}
	rows := slices.Collect(j.Terms())
	b := rowOf(t, plain, "b")
	if len(rows) != 1 || rows[0].Term != "b=old" || rows[0].Class != "" || *rows[0].Coef != *b.Coef || *rows[0].Selected != *b.Selected || !j.HasTerms() {
		t.Errorf("%+v", rows)
	}
	if plain.HasTerms() || len(slices.Collect(plain.Terms())) != 0 || len(slices.Collect(plain.TermsOf(&plain.Rows[0]))) != 0 {
		t.Error("single columns have terms")
	}
}

func TestPerSDOfTerms(t *testing.T) {
	j := judgeReefTerms(t)
	s := j.PerSD()
	sd := map[string]float64{"a": 2, "b1": 3, "b2": 5, "c": 1, "d": 1}
	want := slices.Collect(j.Terms())
	for i, r := range slices.Collect(s.Terms()) {
		if w := want[i]; r.Coef.High != w.Coef.High*sd[w.Term] || w.Selected != nil && r.Selected.Median != w.Selected.Median*sd[w.Term] {
			t.Errorf("%s: %+v, per standard deviation %+v", w.Term, w.Coef, r.Coef)
		}
	}
	if s.Always[1].Coef.Median != 10*j.Always[1].Coef.Median || s.PerSD() != s {
		t.Errorf("tank: %+v, per standard deviation %+v", j.Always[1].Coef, s.Always[1].Coef)
	}
}

// withTerms gives random draws random terms and classes: a coefficient becomes
// some of those of its terms and classes, at least one.
func withTerms(rng *rand.Rand, draws []Draw, p Predictors) {
	for i := range draws {
		var coefs []Coef
		for _, c := range draws[i].Coefs {
			from := len(coefs)
			for t := range int32(p.termsOf(int(c.Predictor))) {
				for class := range int32(p.classes()) {
					if rng.IntN(3) > 0 {
						coefs = append(coefs, Coef{c.Step, c.Predictor, t, class, rng.NormFloat64()})
					}
				}
			}
			if len(coefs) == from {
				coefs = append(coefs, c)
			}
		}
		draws[i].Coefs, draws[i].Always = coefs, nil
		for range max(0, draws[i].Last-draws[i].First+1) * len(p.Always) * p.classes() {
			draws[i].Always = append(draws[i].Always, rng.NormFloat64())
		}
	}
}

func randomPredictors(rng *rand.Rand, n int) Predictors {
	p := plain(n)
	p.Always, p.AlwaysDeviations = []string{"z0", "z1"}, []float64{1, 1}
	for range rng.IntN(2) * (2 + rng.IntN(3)) {
		p.Classes = append(p.Classes, fmt.Sprint("c", len(p.Classes)))
	}
	p.Terms = make([][]string, n)
	for k := range p.Terms {
		for i := range rng.IntN(4) {
			p.Terms[k] = append(p.Terms[k], fmt.Sprint(p.Names[k], ".", i))
		}
	}
	p.Deviations = slices.Repeat([]float64{1}, p.terms())
	return p
}

// Every term's spread equals that of a plain loop over all draws and steps, and
// the rest of the judgement does not depend on terms.
func TestTermsEqualSlowTerms(t *testing.T) {
	for seed := range uint64(80) {
		rng := rand.New(rand.NewPCG(seed, 4))
		n, k := 2*(1+rng.IntN(6)), 1+rng.IntN(8)
		draws := randomDraws(rng, n, k, 0)
		p := randomPredictors(rng, k)
		withTerms(rng, draws, p)
		region, q := Cap+Region(rng.IntN(2)), 1+rng.IntN(k)
		j, err := Judge(draws, false, p, Decision{Region: region, Bound: WorstCase, Threshold: 0.75, Selected: q})
		if err != nil {
			t.Fatalf("seed %d: %v", seed, err)
		}
		seen := 0
		for r := range j.Terms() {
			class := max(0, slices.Index(p.Classes, r.Class))
			all, chosen := slowTerm(draws, region, q, r.Index, r.TermIndex, class)
			got, want := fmt.Sprint(*r.Coef, r.Selected != nil), fmt.Sprint(slowSpread(all), len(chosen) > 0)
			if len(chosen) > 0 {
				got += fmt.Sprint(*r.Selected)
				want += fmt.Sprint(slowSpread(chosen))
			}
			if got != want {
				t.Errorf("seed %d: %+v:\ngot  %s\nwant %s", seed, r, got, want)
			}
			seen++
		}
		want := 0
		for i := range p.Names {
			if len(p.Terms[i]) > 0 || p.Classes != nil {
				want += p.termsOf(i) * p.classes()
			}
		}
		if seen != want {
			t.Errorf("seed %d: %d terms, want %d", seed, seen, want)
		}
		for i, a := range j.Always {
			if a.Predictor != p.Always[i/p.classes()] || a.Class != p.className(i%p.classes()) {
				t.Errorf("seed %d: always %d is %+v", seed, i, a)
			}
		}
	}
}

func slowSpread(sorted []float64) Spread {
	return Spread{slowQuantile(sorted, 25), slowQuantile(sorted, 500), slowQuantile(sorted, 975)}
}

// slowTerm lists a term's coefficient in all draws and in those that chose its
// predictor.
func slowTerm(draws []Draw, region Region, q, k, term, class int) (all, chosen []float64) {
	for _, d := range draws {
		end := slowEnd(draws, d, region, q)
		in, v := false, 0.0
		for _, e := range d.Entries {
			in = in || int(e.Predictor) == k && int(e.Step) <= end
		}
		for _, c := range d.Coefs {
			if in && c == (Coef{int32(end), int32(k), int32(term), int32(class), c.Value}) {
				v = c.Value
			}
		}
		all = append(all, v)
		if in {
			chosen = append(chosen, v)
		}
	}
	slices.Sort(all)
	slices.Sort(chosen)
	return all, chosen
}

func TestDrawsWithTermsThatDoNotHoldTogether(t *testing.T) {
	for want, change := range map[string]func(d []Draw){
		"coefficient 0 names term 1 of 1":      func(d []Draw) { d[0].Coefs[0].Term = 1 },
		"coefficient 0 names term -1 of 2":     func(d []Draw) { d[2].Coefs[0].Term = -1 },
		"coefficient 1 names class 2 of 2":     func(d []Draw) { d[0].Coefs[1].Class = 2 },
		"coefficient 0 names class -1 of 2":    func(d []Draw) { d[0].Coefs[0].Class = -1 },
		"coefficient 1 is out of order":        func(d []Draw) { d[0].Coefs[1].Class = 0 },
		"coefficient 2 is out of order":        func(d []Draw) { d[2].Coefs[2].Term = 0 },
		"3 always-in coefficients, not 6":      func(d []Draw) { d[0].Always = d[0].Always[:3] },
		"2 deviances for 3 steps":              func(d []Draw) { d[0].Deviance = []float64{1, 2} },
		"draw 3: it was made anew -1 times":    func(d []Draw) { d[3].Redraws = -1 },
		"predictor 1 has a coefficient at ste": func(d []Draw) { d[0].Coefs[0].Predictor = 1; d[0].Coefs[1].Predictor = 1 },
	} {
		draws, p := reefTerms()
		change(draws)
		_, err := Judge(draws, false, p, Decision{Region: Cap, Bound: WorstCase, Threshold: 0.7, Selected: 2})
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%v, want %q", err, want)
		}
	}
}

func TestPredictorsMisuse(t *testing.T) {
	for want, change := range map[string]func(p *Predictors){
		"terms: 3: must be a list per candidate, 4":          func(p *Predictors) { p.Terms = p.Terms[:3] },
		"classes: 1: must be at least 2":                     func(p *Predictors) { p.Classes = p.Classes[:1] },
		"deviations: 4: must be one per term of a candidate": func(p *Predictors) { p.Deviations = p.Deviations[:4] },
	} {
		draws, p := reefTerms()
		change(&p)
		if _, err := Judge(draws, false, p, Decision{Region: Cap, Bound: WorstCase, Threshold: 0.7, Selected: 2}); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%v, want %q", err, want)
		}
	}
}

// The deviance of the rows left out travels with the draws and moves nothing.
func TestDevianceChangesNothing(t *testing.T) {
	draws, p := reef()
	for i := range draws {
		draws[i].Deviance, draws[i].NullDeviance = make([]float64, draws[i].Last-draws[i].First+1), 3
	}
	j, err := Judge(draws, false, p, Decision{Region: Cap, Bound: WorstCase, Threshold: 0.7, Selected: 2})
	if err != nil || !reflect.DeepEqual(j.Rows, judgeReef(t, Cap, 2).Rows) {
		t.Errorf("%v", err)
	}
}

// Draws made anew are counted, a pair as one, and said.
func TestRedrawsAreSaid(t *testing.T) {
	decision := Decision{Region: Cap, Bound: Unimodal, Threshold: 0.8, Selected: 1}
	j, w := warnings(t, decision, 10, func(i int, d *Draw) {
		if i/2 == 3 || i/2 == 7 {
			d.Redraws = i / 2
		}
	})
	if !slices.Equal(j.Redrawn, []int{6, 7, 14, 15}) || j.MostRedraws != 7 || !strings.Contains(w, "2 of 20 pairs of halves were drawn anew (up to 7 times), because their rows could not be fitted; the frequencies hold for rows that can be fitted") {
		t.Errorf("%v, %d, %q", j.Redrawn, j.MostRedraws, w)
	}
	draws, p := reef()
	draws[1].Redraws = 1
	j, err := Judge(draws[:3], true, p, Decision{Region: Cap, Bound: Unimodal, Threshold: 0.6, Selected: 2})
	if w := strings.Join(j.Warnings, "\n"); err != nil || !strings.Contains(w, "1 of 3 draws was drawn anew (once), because its rows") {
		t.Errorf("%q, %v", w, err)
	}
	draws[0].Redraws = 1
	j, err = Judge(draws[:3], true, p, Decision{Region: Cap, Bound: Unimodal, Threshold: 0.6, Selected: 2})
	if w := strings.Join(j.Warnings, "\n"); err != nil || !strings.Contains(w, "2 of 3 draws were drawn anew (once each), because their rows") {
		t.Errorf("%q, %v", w, err)
	}
}
