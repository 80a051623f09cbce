package rundir

import (
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"holdfast/selection"
	"holdfast/solver"
)

// kinds are invented runs of every form that a draw can have.
func kinds() map[string]Identity {
	mixed := func(change func(*Identity)) Identity {
		id := hatcheryIdentity()
		id.Candidates = []string{"salinity", "feed", "ph", "sensors", "pump"}
		id.Always = []string{"site", "tank_volume"}
		id.Terms = map[string][]string{
			"feed": {"feed=oats", "feed=wheat"}, "sensors": {"temp.1", "temp.2", "temp.3"}, "pump": {"pump=true"},
			"site": {"site=bay", "site=cove", "site=strait"},
		}
		id.Reference = map[string]string{"feed": "algae", "site": "arm", "pump": "false"}
		id.Penalty.GroupWeight, id.Penalty.Luck, id.Penalty.Jitter = "even", 0.1, 0.5
		change(&id)
		return id
	}
	return map[string]Identity{
		"number": hatcheryIdentity(),
		"yes-no": mixed(func(id *Identity) {
			id.Kind, id.Outcome, id.Success, id.Draws.Within = "yes-no", "batch_lost", "lost", []string{"outcome"}
		}),
		"count": mixed(func(id *Identity) {
			id.Kind, id.Outcome, id.Exposure, id.Penalty.GroupWeight, id.Penalty.Luck = "count", "settled", "larvae", "sqrt", 0
		}),
		"classes": mixed(func(id *Identity) {
			id.Kind, id.Outcome, id.Classes = "classes", "grade", []string{"half shell", "shucked", "spat"}
		}),
		"classes of single columns": func() Identity {
			id := hatcheryIdentity()
			id.Kind, id.Outcome, id.Classes = "classes", "grade", []string{"1", "2"}
			return id
		}(),
		"survival": mixed(func(id *Identity) {
			id.Kind, id.Outcome, id.Time, id.Event, id.Entry = "survival", "", "days", "settled", "from_day"
			id.Strata, id.Ties = []string{"season"}, "breslow"
		}),
	}
}

func metaOf(id *Identity, number int) Meta {
	m := hatcheryMeta(number)
	m.Centre, m.Deviation = nil, nil
	for j := range len(id.CandidateColumns()) + len(id.AlwaysColumns()) {
		m.Centre = append(m.Centre, float64(10+j))
		m.Deviation = append(m.Deviation, 0.5+float64(j))
	}
	return m
}

// runOf creates a decided run directory of an identity.
func runOf(t testing.TB, id Identity, number int) *Dir {
	t.Helper()
	d, err := Create(t.TempDir(), id, nil, metaOf(&id, number))
	if err != nil {
		t.Fatal(err)
	}
	if err := d.SetDecision(hatcheryDecision()); err != nil {
		t.Fatal(err)
	}
	return d
}

// form is what a kind's draws look like, written out by hand.
type form struct {
	terms      []int32
	always     int
	classes    int
	intercepts int
}

var forms = map[string]form{
	"number":                    {[]int32{1, 1, 1, 1, 1, 1}, 2, 1, 1},
	"yes-no":                    {[]int32{1, 2, 1, 3, 1}, 4, 1, 1},
	"count":                     {[]int32{1, 2, 1, 3, 1}, 4, 1, 1},
	"classes":                   {[]int32{1, 2, 1, 3, 1}, 4, 3, 3},
	"classes of single columns": {[]int32{1, 1, 1, 1, 1, 1}, 2, 2, 2},
	"survival":                  {[]int32{1, 2, 1, 3, 1}, 4, 1, 0},
}

// eachKind runs a test for every form of a draw.
func eachKind(t *testing.T, test func(t *testing.T, id Identity, f form)) {
	for name, id := range kinds() {
		t.Run(name, func(t *testing.T) { test(t, id, forms[name]) })
	}
}

// randomPath makes a path that obeys the rules of solver.Path, with odd values.
func (f form) randomPath(r *rand.Rand) solver.Path {
	p := solver.Path{First: r.IntN(6) - 3, Stop: solver.Stop(r.IntN(3)), Borderline: r.IntN(2), Twins: r.IntN(3), Redraws: r.IntN(3)}
	p.Last = p.First + r.IntN(12) - 1
	p.Violation, p.Gap = r.Float64()*1e-11, r.Float64()*1e-11
	if p.Stop == solver.StopUncertified {
		p.Why = "violation 3e-7 at \"ph\""
	}
	entered := map[int32]bool{}
	scored := r.IntN(2) == 0
	if scored {
		p.NullDeviance = value(r)
	}
	for step := p.First; step <= p.Last; step++ {
		p.Intercepts = appendValues(r, p.Intercepts, f.intercepts)
		p.Always = appendValues(r, p.Always, f.always*f.classes)
		if scored {
			p.Deviance = append(p.Deviance, value(r))
		}
		for j := range int32(len(f.terms)) {
			if r.IntN(3) == 0 {
				f.choose(r, &p, step, j, entered)
			}
		}
	}
	for j := range int32(len(f.terms)) {
		if r.IntN(4) == 0 {
			p.Still = append(p.Still, j)
		}
	}
	return p
}

// choose gives a predictor some coefficients at a step.
func (f form) choose(r *rand.Rand, p *solver.Path, step int, j int32, entered map[int32]bool) {
	if !entered[j] {
		entered[j] = true
		e := solver.Entry{Candidate: j, Step: int32(step)}
		e.Negative = f.terms[j] == 1 && f.classes == 1 && r.IntN(2) == 0
		p.Entries = append(p.Entries, e)
	}
	for term := range f.terms[j] {
		for class := range int32(f.classes) {
			if f.terms[j] == 1 && f.classes == 1 || r.IntN(5) > 0 {
				p.Coefs = append(p.Coefs, solver.Coef{Step: int32(step), Candidate: j, Term: term, Class: class, Value: value(r)})
			}
		}
	}
}

func appendValues(r *rand.Rand, list []float64, n int) []float64 {
	for range n {
		list = append(list, value(r))
	}
	return list
}

func (f form) randomPaths(r *rand.Rand, n int) []solver.Path {
	paths := make([]solver.Path, n)
	for i := range paths {
		paths[i] = f.randomPath(r)
	}
	return paths
}

// What the identity says about the form of a draw is what was written by hand.
func TestShapeOfEveryKind(t *testing.T) {
	eachKind(t, func(t *testing.T, id Identity, f form) {
		s := id.shape()
		got := form{nil, s.always, s.classes, s.intercepts}
		for j := range int32(s.candidates) {
			got.terms = append(got.terms, s.termsOf(j))
			if want := f.terms[j] == 1 && f.classes == 1; s.signed(j) != want {
				t.Errorf("predictor %d: signed %v", j, !want)
			}
		}
		if !reflect.DeepEqual(got, f) {
			t.Errorf("%+v, not %+v", got, f)
		}
	})
}

// Every kind goes to disk and back, to the bit, and what is judged holds terms,
// classes, deviances and redraws.
func TestEveryKindIsReadBackAndJudged(t *testing.T) {
	eachKind(t, func(t *testing.T, id Identity, f form) {
		r := source(t)
		d := runOf(t, id, 30)
		paths := f.randomPaths(r, 30)
		for first := 0; first < 30; first += 5 {
			if err := d.Put(upTo(first, first+5), paths[first:first+5]); err != nil {
				t.Fatal(err)
			}
		}
		again, err := Open(d.Path())
		if err != nil {
			t.Fatal(err)
		}
		got, err := again.ReadPaths()
		if err != nil {
			t.Fatal(err)
		}
		draws, err := again.Draws()
		if err != nil {
			t.Fatal(err)
		}
		for i := range paths {
			if !sameBits(got[i], paths[i]) {
				t.Errorf("draw %d: read %+v, written %+v", i, got[i], paths[i])
			}
			if !sameBits(pathFrom(&draws[i], &paths[i]), paths[i]) {
				t.Errorf("draw %d: to be judged %+v, written %+v", i, draws[i], paths[i])
			}
		}
	})
}

// pathFrom puts what is judged of a draw in the place of that in its record.
func pathFrom(d *selection.Draw, p *solver.Path) solver.Path {
	out := *p
	out.First, out.Last, out.Twins, out.Redraws = d.First, d.Last, d.Twins, d.Redraws
	out.Always, out.Still, out.Deviance, out.NullDeviance = d.Always, d.Still, d.Deviance, d.NullDeviance
	out.Entries, out.Coefs = nil, nil
	for _, e := range d.Entries {
		out.Entries = append(out.Entries, solver.Entry{Candidate: e.Predictor, Step: e.Step, Negative: e.Negative})
	}
	for _, c := range d.Coefs {
		out.Coefs = append(out.Coefs, solver.Coef{Step: c.Step, Candidate: c.Predictor, Term: c.Term, Class: c.Class, Value: c.Value})
	}
	return out
}

// The names and deviations that a judgement is given follow the table's order,
// term by term; the judgement accepts draws of every kind with them.
func TestPredictorsOfARun(t *testing.T) {
	run := runOf(t, kinds()["classes"], 2).Run()
	want := selection.Predictors{
		Names:      []string{"salinity", "feed", "ph", "sensors", "pump"},
		Terms:      [][]string{nil, {"feed=oats", "feed=wheat"}, nil, {"temp.1", "temp.2", "temp.3"}, {"pump=true"}},
		Classes:    []string{"half shell", "shucked", "spat"},
		Deviations: []float64{0.5, 1.5, 2.5, 3.5, 4.5, 5.5, 6.5, 7.5},
		Always:     []string{"site=bay", "site=cove", "site=strait", "tank_volume"}, AlwaysDeviations: []float64{8.5, 9.5, 10.5, 11.5},
	}
	if got := run.Predictors(); !reflect.DeepEqual(got, want) {
		t.Errorf("%+v, not %+v", got, want)
	}
	plain := hatcheryRun(t, 2).Run()
	if p := plain.Predictors(); p.Terms != nil || p.Classes != nil || !reflect.DeepEqual(p.Names, hatcheryNames) || len(p.Deviations) != 6 || len(p.AlwaysDeviations) != 2 {
		t.Errorf("of single columns: %+v", p)
	}
	eachKind(t, func(t *testing.T, id Identity, f form) {
		run := runOf(t, id, 4).Run()
		var draws []selection.Draw
		for n, p := range f.randomPaths(source(t), 4) {
			p.Stop = solver.StopUncertified // it counts with what it has
			for i := range p.Coefs {
				p.Coefs[i].Value = 1 // odd values are for the format, not for a judgement
			}
			for i := range p.Always {
				p.Always[i] = 1
			}
			found := &Finished{}
			draws = append(draws, *found.add(&numbered{n, p}, 20, true))
		}
		decision := hatcheryDecision()
		if _, err := selection.Judge(draws, false, run.Predictors(), decision); err != nil {
			t.Error(err)
		}
	})
}

// A run of single columns pays for nothing but its deviances: the size of a
// draw in its block, from the Parquet format's own plain encoding.
func TestSizeOfADraw(t *testing.T) {
	const steps, support = 40, 6
	for name, extra := range map[string]int{"number": 0, "yes-no": 4, "classes": 8, "classes of single columns": 4} {
		id, f := kinds()[name], forms[name]
		run := Run{Format: Format, Digest: id.Digest(), Identity: id}
		path := solver.Path{First: 0, Last: steps - 1, Stop: solver.StopFloor}
		coefs := 0
		for step := range int32(steps) {
			path.Intercepts = append(path.Intercepts, make([]float64, f.intercepts)...)
			path.Always = append(path.Always, make([]float64, f.always*f.classes)...)
			for j := range min(support, int32(len(f.terms))) {
				path.Coefs = append(path.Coefs, solver.Coef{Step: step, Candidate: j, Value: 1})
				coefs++
			}
		}
		blockSize := func(draws int, deviances bool) int {
			p := path
			if deviances {
				p.Deviance = make([]float64, steps)
			}
			paths := make([]solver.Path, draws)
			for i := range paths {
				paths[i] = p
			}
			return len(encoded(t, run, numberedFrom(0, paths)))
		}
		without := blockSize(200, false) - blockSize(100, false)
		with := blockSize(200, true) - blockSize(100, true)
		// draw, first, last, borderline, twins, redraws; violation, gap, null
		// deviance; the texts "floor" and "".
		fixed := 6*4 + 3*8 + (4 + 5) + 4
		values := 8*(len(path.Intercepts)+len(path.Always)) + (16+extra)*coefs
		// Levels are runs: of each list a few bytes a draw.
		const runs = 80
		if most := 100 * (fixed + values + runs); without > most || without < 100*(fixed+values) {
			t.Errorf("%s: 100 draws take %d bytes, at most %d", name, without, most)
		}
		if most := 100 * (8*steps + 8); with-without > most {
			t.Errorf("%s: deviances of 100 draws take %d bytes, at most %d", name, with-without, most)
		}
	}
}

// A draw of one form is none of another.
func TestDrawsOfAnotherFormAreRefused(t *testing.T) {
	cases := map[string]struct {
		kind  string
		spoil func(*solver.Path)
	}{
		"term beyond the group":            {"yes-no", func(p *solver.Path) { p.Coefs[1].Term = 2 }},
		"term of a single column":          {"number", func(p *solver.Path) { p.Coefs[0].Term = 1 }},
		"negative term":                    {"yes-no", func(p *solver.Path) { p.Coefs[0].Term = -1 }},
		"class where there are none":       {"yes-no", func(p *solver.Path) { p.Coefs[1].Class = 1 }},
		"class beyond the last":            {"classes", func(p *solver.Path) { p.Coefs[1].Class = 3 }},
		"negative class":                   {"classes", func(p *solver.Path) { p.Coefs[0].Class = -1 }},
		"terms out of order":               {"yes-no", func(p *solver.Path) { p.Coefs[0], p.Coefs[1] = p.Coefs[1], p.Coefs[0] }},
		"term twice":                       {"yes-no", func(p *solver.Path) { p.Coefs[1] = p.Coefs[0] }},
		"classes out of order":             {"classes", func(p *solver.Path) { p.Coefs[0].Class, p.Coefs[1].Term = 2, 0 }},
		"sign of a group":                  {"yes-no", func(p *solver.Path) { p.Entries[0].Negative = true }},
		"sign where there are classes":     {"classes of single columns", func(p *solver.Path) { p.Entries[0].Negative = true }},
		"one intercept for three classes":  {"classes", func(p *solver.Path) { p.Intercepts = p.Intercepts[:1] }},
		"intercept of survival":            {"survival", func(p *solver.Path) { p.Intercepts = []float64{1} }},
		"always-in without its categories": {"survival", func(p *solver.Path) { p.Always = p.Always[:2] }},
		"always-in without classes":        {"classes", func(p *solver.Path) { p.Always = p.Always[:4] }},
		"deviance short":                   {"number", func(p *solver.Path) { p.Last = 1; p.Deviance = []float64{1} }},
		"deviance without a step":          {"survival", func(p *solver.Path) { p.Deviance = []float64{1, 2} }},
		"redraws below none":               {"yes-no", func(p *solver.Path) { p.Redraws = -1 }},
		"redraws without end":              {"yes-no", func(p *solver.Path) { p.Redraws = maxRedraws + 1 }},
	}
	for name, c := range cases {
		id, f := kinds()[c.kind], forms[c.kind]
		good := func() *numbered {
			p := solver.Path{Entries: []solver.Entry{{Candidate: 1}}, NullDeviance: 2, Deviance: []float64{1}}
			p.Intercepts, p.Always = make([]float64, f.intercepts), make([]float64, f.always*f.classes)
			p.Coefs = []solver.Coef{{Candidate: 1, Value: 1}}
			if f.terms[1] > 1 {
				p.Coefs = append(p.Coefs, solver.Coef{Candidate: 1, Term: 1, Value: 2})
			}
			return &numbered{0, p}
		}
		n := good()
		if err := id.shape().checkPath(n); err != nil {
			t.Fatalf("%s: the good path: %v", name, err)
		}
		if c.spoil(&n.path); id.shape().checkPath(n) == nil {
			t.Errorf("%s: accepted", name)
		}
	}
}

// The bytes that hold term and class are under the digests as the others are,
// and a block of one form is not read as one of another.
func TestFormsAreNotConfused(t *testing.T) {
	r := source(t)
	for name, id := range kinds() {
		run := runOf(t, id, 4).Run()
		text := encoded(t, run, numberedFrom(0, forms[name].randomPaths(r, 4)))
		for other, wrong := range kinds() {
			s, same := wrong.shape(), id.shape()
			if (s.terms == nil) == (same.terms == nil) && (s.classes > 1) == (same.classes > 1) {
				continue
			}
			reader := Run{Format: Format, Digest: run.Digest, Identity: wrong}
			if _, err := decodeBytes(&reader, text); err == nil || !strings.Contains(err.Error(), "its columns are not those of a block") {
				t.Errorf("%s read as %s: %v", name, other, err)
			}
		}
	}
}
