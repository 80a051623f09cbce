package selection

import (
	"encoding/json"
	"errors"
	"math"
	"os"
	"path/filepath"
	"testing"
)

// reference holds the sections of testdata/bounds.json that this package
// answers to. The file comes with the team's statistics sheet and was computed
// there, independently of this code, to 10 digits.
type reference struct {
	Grid []struct {
		P, Q, Tau    float64
		B, Need      int
		WorstCase    float64  `json:"worst_case"`
		Attained     float64  `json:"worst_case_attained"`
		Unimodal     *float64 `json:"unimodal"`
		Pairs        float64  `json:"d_pairs"`
		Freq         float64  `json:"d_freq"`
		RConcave     float64  `json:"r_concave"`
		RConcaveAt50 float64  `json:"r_concave_b50"`
	} `json:"grid"`
	Need []struct {
		Tau     float64
		B, Need int
	} `json:"need"`
	D []struct {
		Eta, T, R, Value float64
		B                int
		SupportEnd       *int `json:"support_end"`
	} `json:"d_values"`
	Solve []struct {
		Ask, Bound string
		P, Q, Tau  float64
		EV         float64 `json:"ev"`
		B          int
		Need       *int
	} `json:"solve"`
	Interval []struct {
		N0, N1, N2   int
		Level, Freq  float64
		NEff         float64 `json:"n_eff"`
		Lower, Upper float64
	} `json:"frequency_interval"`
	Bad []struct {
		Call, Because, Bound string
		Tau, Q, P            float64
		EV                   float64  `json:"ev"`
		SmallestEV           *float64 `json:"smallest_ev"`
		Eta, T, R            float64
		B                    int
	} `json:"bad_arguments"`
}

func readReference(t *testing.T) reference {
	t.Helper()
	text, err := os.ReadFile(filepath.Join("..", "testdata", "bounds.json"))
	if err != nil {
		t.Fatal(err)
	}
	var r reference
	if err := json.Unmarshal(text, &r); err != nil {
		t.Fatal(err)
	}
	return r
}

// referenceTolerance is the relative agreement that the file asks for.
const referenceTolerance = 1e-8

func agrees(got, want float64) bool {
	return got == want || math.Abs(got-want) <= referenceTolerance*math.Abs(want)
}

// wordsOfFile maps the file's names of bounds to ours.
var wordsOfFile = map[string]BoundName{"worst_case": WorstCase, "unimodal": Unimodal, "r_concave": RConcave}

func TestReferenceNeed(t *testing.T) {
	for _, c := range readReference(t).Need {
		if got, err := Need(c.Tau, 2*c.B); err != nil || got != c.Need {
			t.Errorf("Need(%g, %d) = %d, %v, want %d", c.Tau, 2*c.B, got, err, c.Need)
		}
	}
}

// The grid checks Meinshausen and Buhlmann (2010), Theorem 1, and Shah and
// Samworth (2013), Theorem 2 and the r-concave bound.
func TestReferenceGrid(t *testing.T) {
	grid := readReference(t).Grid
	if len(grid) != 432 {
		t.Fatalf("%d cells, not 432", len(grid))
	}
	for _, c := range grid {
		check := func(name string, got float64, err error, want float64) {
			t.Helper()
			if err != nil || !agrees(got, want) {
				t.Errorf("p=%g q=%g tau=%g B=%d: %s = %.12g, %v, want %.10g", c.P, c.Q, c.Tau, c.B, name, got, err, want)
			}
		}
		if need, err := Need(c.Tau, 2*c.B); err != nil || need != c.Need {
			t.Errorf("Need(%g, %d) = %d, %v, want %d", c.Tau, 2*c.B, need, err, c.Need)
		}
		v, err := WorstCaseBound(c.Q, c.P, c.Tau)
		check("worst case", v, err, c.WorstCase)
		v, err = WorstCase.at(c.Q, c.P, c.Need, c.B)
		check("worst case attained", v, err, c.Attained)
		v, err = UnimodalBound(c.Q, c.P, c.Need, c.B)
		if c.Unimodal == nil {
			if !errors.Is(err, ErrNoBound) {
				t.Errorf("p=%g q=%g tau=%g B=%d: unimodal = %g, %v, want ErrNoBound", c.P, c.Q, c.Tau, c.B, v, err)
			}
		} else {
			check("unimodal", v, err, *c.Unimodal)
		}
		theta := c.Q / c.P
		v, err = DValue(theta*theta, float64(c.Need)/float64(c.B)-1, c.B, -0.5)
		check("D of pairs", v, err, c.Pairs)
		v, err = DValue(theta, float64(c.Need)/float64(2*c.B), 2*c.B, -0.25)
		check("D of frequencies", v, err, c.Freq)
		check("r-concave, no limit", rConcave(c.Q, c.P, c.Need, c.B), nil, c.RConcave)
		v, err = RConcaveBound(c.Q, c.P, c.Need, c.B)
		check("r-concave", v, err, c.RConcaveAt50)
	}
}

func TestReferenceD(t *testing.T) {
	for _, c := range readReference(t).D {
		if got, err := DValue(c.Eta, c.T, c.B, c.R); err != nil || !agrees(got, c.Value) {
			t.Errorf("DValue(%g, %g, %d, %g) = %.12g, %v, want %.10g", c.Eta, c.T, c.B, c.R, got, err, c.Value)
		}
	}
}

func TestReferenceSolve(t *testing.T) {
	for _, c := range readReference(t).Solve {
		b := wordsOfFile[c.Bound]
		if c.Ask == "q" {
			got, _, err := solveSelected(b, c.P, c.EV, *c.Need, c.B)
			if need, _ := Need(c.Tau, 2*c.B); err != nil || need != *c.Need || !agrees(got, c.Q) {
				t.Errorf("%s p=%g tau=%g ev=%g B=%d: q = %.12g at need %d, %v, want %.10g", b, c.P, c.Tau, c.EV, c.B, got, need, err, c.Q)
			}
			continue
		}
		got, err := solveNeed(b, c.Q, c.P, c.EV, c.B)
		switch {
		case c.Need == nil && !errors.Is(err, ErrNoSolution):
			t.Errorf("%s p=%g q=%g ev=%g B=%d: need = %d, %v, want ErrNoSolution", b, c.P, c.Q, c.EV, c.B, got, err)
		case c.Need != nil && (err != nil || got != *c.Need):
			t.Errorf("%s p=%g q=%g ev=%g B=%d: need = %d, %v, want %d", b, c.P, c.Q, c.EV, c.B, got, err, *c.Need)
		}
	}
}

func TestReferenceInterval(t *testing.T) {
	for _, c := range readReference(t).Interval {
		lo, hi, neff, err := WilsonPairs(c.N0, c.N1, c.N2, c.Level)
		if err != nil || !agrees(lo, c.Lower) || !agrees(hi, c.Upper) || !agrees(neff, c.NEff) {
			t.Errorf("WilsonPairs(%d, %d, %d, %g) = %.12g, %.12g, %.12g, %v, want %.10g, %.10g, %.10g",
				c.N0, c.N1, c.N2, c.Level, lo, hi, neff, err, c.Lower, c.Upper, c.NEff)
		}
	}
}

// nameOfFile maps the file's argument names to those of the errors.
var nameOfFile = map[string]string{"tau": "threshold", "q": "selected", "p": "candidates", "B": "pairs", "ev": "false_selections", "eta": "eta", "r": "r"}

func TestReferenceBadArguments(t *testing.T) {
	seen := 0
	for _, c := range readReference(t).Bad {
		var errs []error
		switch c.Call {
		case "bound":
			errs = boundErrors(c.Q, c.P, c.Tau, c.B)
		case "solve_threshold":
			errs = []error{solveThresholdError(int(c.P), c.Q, c.EV, 2*c.B, wordsOfFile[c.Bound])}
		case "D":
			_, err := DValue(c.Eta, c.T, c.B, c.R)
			errs = []error{err}
		default:
			continue // the stability of a whole selection is not this package's
		}
		seen++
		for _, err := range errs {
			if c.Because == "infeasible" {
				var e *ImpossibleError
				if !errors.As(err, &e) || e.Change != "false_selections" || !agrees(e.Nearest, *c.SmallestEV) {
					t.Errorf("%+v: %v does not state %g", c, err, *c.SmallestEV)
				}
				continue
			}
			var e *ArgumentError
			if !errors.As(err, &e) || e.Name != nameOfFile[c.Because] {
				t.Errorf("%+v: %v does not name %s", c, err, nameOfFile[c.Because])
			}
		}
	}
	if seen != 11 {
		t.Errorf("%d cases seen, not 11", seen)
	}
}

// boundErrors are the errors of the public ways to a bound.
func boundErrors(q, p, tau float64, b int) []error {
	need, err := Need(tau, 2*b)
	if tau <= 0.5 || tau > 1 {
		_, other := WorstCaseBound(q, p, tau)
		return []error{err, other}
	}
	_, e1 := UnimodalBound(q, p, need, b)
	_, e2 := RConcaveBound(q, p, need, b)
	if b < 1 {
		return []error{e1, e2}
	}
	_, e3 := WorstCaseBound(q, p, tau)
	_, e4 := SolveBudget(Request{Candidates: int(p), Draws: 2 * b, Threshold: &tau, Selected: &q})
	return []error{e1, e2, e3, e4}
}

func solveThresholdError(p int, q, ev float64, draws int, b BoundName) error {
	_, err := Decide(Ask{Bound: b, Selected: &q, FalseSelections: &ev}, p, draws, false, 0)
	return err
}
