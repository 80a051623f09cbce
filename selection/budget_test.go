package selection

import (
	"encoding/json"
	"errors"
	"math"
	"regexp"
	"strconv"
	"strings"
	"testing"
)

func budgetJSON(t *testing.T, r Request) string {
	t.Helper()
	b, err := SolveBudget(r)
	if err != nil {
		t.Fatal(err)
	}
	text, err := json.Marshal(b)
	if err != nil {
		t.Fatal(err)
	}
	return string(text)
}

// The example of DESIGN 7.
func TestBudgetJSONForFalseSelections(t *testing.T) {
	got := budgetJSON(t, Request{Candidates: 1000, Draws: 100, Threshold: value(0.9), Selected: value(28.2842712474619)})
	const want = `^\{"candidates":1000,"draws":100,"threshold":0\.9,"selected":28\.2842712474619,"need":90,"attained":0\.9,` +
		`"bounds":\{"worst-case":\{"false_selections":([0-9.]+)\},"unimodal":\{"false_selections":[0-9.]+\},"r-concave":\{"false_selections":[0-9.]+\}\}\}$`
	m := regexp.MustCompile(want).FindStringSubmatch(got)
	if m == nil {
		t.Fatalf("got %s", got)
	}
	if v, err := strconv.ParseFloat(m[1], 64); err != nil || !near(v, 1) {
		t.Errorf("worst case: %s, want 1", m[1])
	}
}

type jsonBudget struct {
	Threshold, Selected, Attained *float64
	Need                          *int
	FalseSelections               *float64 `json:"false_selections"`
	Bounds                        map[string]map[string]any
}

func readBudget(t *testing.T, text string) jsonBudget {
	t.Helper()
	var b jsonBudget
	if err := json.Unmarshal([]byte(text), &b); err != nil {
		t.Fatal(err)
	}
	if len(b.Bounds) != 3 {
		t.Fatalf("%s: %d bounds", text, len(b.Bounds))
	}
	return b
}

// Cases of the reference file's section `solve`: p=1000, q=30, target 0.1.
func TestBudgetJSONForThreshold(t *testing.T) {
	text := budgetJSON(t, Request{Candidates: 1000, Draws: 100, Selected: value(30.0), FalseSelections: value(0.1)})
	for _, null := range []string{`"threshold":null,"selected":30,"false_selections":0.1,`, `"need":null,"attained":null,`, `"worst-case":{"false_selections":null,"threshold":null,"why":"`} {
		if !strings.Contains(text, null) {
			t.Errorf("%s: no %s", text, null)
		}
	}
	b := readBudget(t, text)
	if b.Bounds["unimodal"]["threshold"] != 0.99 || b.Bounds["r-concave"]["threshold"] != 0.85 {
		t.Errorf("%s: want thresholds 0.99 and 0.85", text)
	}
	if v := b.Bounds["unimodal"]["false_selections"].(float64); v > 0.1 {
		t.Errorf("unimodal bound %g above its target", v)
	}
	whole := readBudget(t, budgetJSON(t, Request{Candidates: 1000, Draws: 100, Selected: value(28.284271247461902), FalseSelections: value(1.0)}))
	if whole.Bounds["worst-case"]["threshold"] != 0.9 {
		t.Errorf("worst case: threshold %v, want need/draws = 0.9", whole.Bounds["worst-case"]["threshold"])
	}
}

func TestBudgetJSONForSelected(t *testing.T) {
	text := budgetJSON(t, Request{Candidates: 1000, Draws: 100, Threshold: value(0.9), FalseSelections: value(1.0)})
	for _, null := range []string{`"threshold":0.9,"selected":null,`, `"need":null,"attained":null,`} {
		if !strings.Contains(text, null) {
			t.Errorf("%s: no %s", text, null)
		}
	}
	for name, want := range map[string]float64{"worst-case": 28.28427125, "unimodal": 48.14750064, "r-concave": 113.4851006} {
		if got := readBudget(t, text).Bounds[name]["selected"].(float64); !agrees(got, want) {
			t.Errorf("%s: selected = %.10g, want %.10g", name, got, want)
		}
	}
	half := budgetJSON(t, Request{Candidates: 100, Draws: 100, Threshold: value(0.505), FalseSelections: value(1.0)})
	if !strings.Contains(half, `"unimodal":{"false_selections":null,"selected":null,"why":"`) {
		t.Errorf("%s: no reason at a count of one more than half", half)
	}
}

// Where side conditions, not the target, limit q, the answer lies inside them.
func TestBudgetSelectedStaysInsideConditions(t *testing.T) {
	b, err := SolveBudget(Request{Candidates: 100, Draws: 100, Threshold: value(0.55), FalseSelections: value(5000.0)})
	if err != nil {
		t.Fatal(err)
	}
	q := *b.Bounds.Of(Unimodal).Selected
	if _, err := UnimodalBound(q, 100, 55, 50); err != nil {
		t.Errorf("at the q that was solved for: %v", err)
	}
	if _, err := UnimodalBound(q*(1+1e-9), 100, 55, 50); !errors.Is(err, ErrNoBound) {
		t.Errorf("just above: %v, want ErrNoBound", err)
	}
	if *b.Bounds.Of(RConcave).Selected != 100 || *b.Bounds.Of(WorstCase).Selected != 100 {
		t.Errorf("the others give %g and %g, want all 100", *b.Bounds.Of(RConcave).Selected, *b.Bounds.Of(WorstCase).Selected)
	}
}

// What an error advises, works.
func TestBudgetImpossible(t *testing.T) {
	r := Request{Candidates: 10, Draws: 10, Selected: value(9.0), FalseSelections: value(0.001)}
	_, err := SolveBudget(r)
	var e *ImpossibleError
	if !errors.As(err, &e) || !errors.Is(err, ErrNoSolution) || e.Change != "false_selections" {
		t.Fatalf("%v", err)
	}
	for _, b := range boundNames {
		if v, err := b.at(9, 10, 10, 5); err == nil && v < e.Nearest*0.999 {
			t.Errorf("%s reaches %g, less than the advised %g", b, v, e.Nearest)
		}
	}
	r.FalseSelections = &e.Nearest
	if _, err := SolveBudget(r); err != nil {
		t.Errorf("after the advice: %v", err)
	}
}

func TestBudgetMisuse(t *testing.T) {
	ok := Request{Candidates: 100, Draws: 100, Threshold: value(0.9), Selected: value(5.0)}
	for name, change := range map[string]func(*Request){
		"all three are given":    func(r *Request) { r.FalseSelections = value(1.0) },
		"one more is needed":     func(r *Request) { r.Selected = nil },
		"nothing given":          func(r *Request) { r.Selected, r.Threshold = nil, nil },
		"must be even":           func(r *Request) { r.Draws = 101 },
		"thousand million":       func(r *Request) { r.Draws = 1 << 60 },
		"draws: 0":               func(r *Request) { r.Draws = 0 },
		"candidates: 0":          func(r *Request) { r.Candidates = 0 },
		"threshold: NaN":         func(r *Request) { r.Threshold = value(math.NaN()) },
		"selected: NaN":          func(r *Request) { r.Selected = value(math.NaN()) },
		"selected: 101":          func(r *Request) { r.Selected = value(101.0) },
		"false_selections: +Inf": func(r *Request) { r.FalseSelections, r.Selected = value(math.Inf(1)), nil },
		"false_selections: -1":   func(r *Request) { r.FalseSelections, r.Selected = value(-1.0), nil },
		"no bound":               func(r *Request) { r.Bootstrap = true },
	} {
		r := ok
		change(&r)
		if b, err := SolveBudget(r); err == nil || b != nil || !strings.Contains(err.Error(), name) {
			t.Errorf("%+v, %v: want an error with %q", b, err, name)
		}
	}
}

func FuzzSolveBudget(f *testing.F) {
	f.Add(100, 50, 0.9, 5.0, 1.0, uint8(0))
	f.Add(3, 1, 0.6, 1.5, 1e-9, uint8(1))
	f.Add(7, 3, 0.51, 7.0, 1e9, uint8(2))
	f.Fuzz(func(t *testing.T, p, pairs int, threshold, q, ev float64, ask uint8) {
		if pairs > 60 {
			pairs = pairs%60 + 1
		}
		r := Request{Candidates: p, Draws: 2 * pairs, Threshold: &threshold, Selected: &q, FalseSelections: &ev}
		*[]**float64{&r.Threshold, &r.Selected, &r.FalseSelections}[ask%3] = nil
		b, err := SolveBudget(r)
		if err != nil {
			return
		}
		if _, err := json.Marshal(b); err != nil {
			t.Fatal(err)
		}
		for _, v := range b.Bounds {
			if r.FalseSelections != nil && v.FalseSelections != nil && !within(*v.FalseSelections, ev*(1+1e-9)) {
				t.Errorf("%s: %g exceeds the target %g", v.Name, *v.FalseSelections, ev)
			}
			if v.FalseSelections == nil && v.Why == "" {
				t.Errorf("%s: missing without a reason", v.Name)
			}
		}
	})
}
