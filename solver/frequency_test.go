package solver_test

import (
	"context"
	"encoding/csv"
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"testing"

	"holdfast/selection"
	"holdfast/solver"
)

// frequencies is a file of testdata/frequencies: selection counts made by
// other programs on listed rows (testdata/SOURCES.md), of a numeric outcome by
// scikit-learn 1.2.1's lasso (bench/peer/frequencies.py).
type frequencies struct {
	Table      string       `json:"table"`
	Outcome    string       `json:"outcome"`
	Rows       string       `json:"rows"`
	Draws      int          `json:"draws"`
	Ratio      float64      `json:"ratio"`
	Floor      float64      `json:"floor"`
	StopAfter  int          `json:"stop_after"`
	Family     string       `json:"family"` // the rest of these are of frequency_families_test.go
	Classes    []string     `json:"classes"`
	Offset     string       `json:"offset"`
	Event      string       `json:"event"`
	Ties       string       `json:"ties"`
	Strata     string       `json:"strata"`
	LambdaMax  float64      `json:"lambda_max"`
	Predictors []string     `json:"predictors"`
	Regions    []capRegion  `json:"regions"`
	Entries    [][][3]int32 `json:"entries"` // per draw: predictor, step, sign
}

type capRegion struct {
	Selected   int   `json:"selected"`
	Counts     []int `json:"counts"`
	BothHalves []int `json:"both_halves"`
	CapBinding int   `json:"cap_binding"`
}

func readFrequencies(t *testing.T, name string) frequencies {
	t.Helper()
	text, err := os.ReadFile(filepath.Join("..", "testdata", "frequencies", name+".json"))
	if err != nil {
		t.Fatal(err)
	}
	var f frequencies
	if err := json.Unmarshal(text, &f); err != nil {
		t.Fatalf("%s: %v", name, err)
	}
	if f.Draws == 0 || len(f.Entries) != f.Draws || len(f.Regions) == 0 {
		t.Fatalf("%s: %d draws, entries of %d, %d regions", name, f.Draws, len(f.Entries), len(f.Regions))
	}
	return f
}

// samples reads the rows of every draw (header draw,row).
func (f frequencies) samples(t *testing.T, rows int) []*solver.Sample {
	t.Helper()
	file, err := os.Open(filepath.Join("..", "testdata", f.Rows))
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	records, err := csv.NewReader(file).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	drawn := make([][]int32, f.Draws)
	for _, r := range records[1:] {
		d, derr := strconv.Atoi(r[0])
		row, rerr := strconv.Atoi(r[1])
		if derr != nil || rerr != nil {
			t.Fatalf("%s: %q", f.Rows, r)
		}
		drawn[d] = append(drawn[d], int32(row))
	}
	out := make([]*solver.Sample, f.Draws)
	for d, r := range drawn {
		out[d] = solver.NewSample(rows, r)
	}
	return out
}

// TestFrequencies holds the entries of every draw, and the counts within the
// cap region, against those of scikit-learn's lasso on the same rows of
// diabetes (Efron et al. 2004) and gasoline (Kalivas 1997). The sets there
// are proven with margins above 1e-7, so agreement must be exact.
func TestFrequencies(t *testing.T) {
	for _, name := range []string{"diabetes", "gasoline"} {
		t.Run(name, func(t *testing.T) { compareFrequencies(t, name) })
	}
}

func compareFrequencies(t *testing.T, name string) {
	f := readFrequencies(t, name)
	paths := f.fit(t)
	f.compareEntries(t, paths)
	draws := f.draws(paths)
	for _, want := range f.Regions {
		f.compareCounts(t, draws, want)
		f.compareJudgement(t, draws, want)
	}
}

// fit fits the listed draws with our solver, sixteen at a time.
func (f frequencies) fit(t *testing.T) []solver.Path {
	t.Helper()
	tab := readTable(t, filepath.Join("..", "testdata", f.Table))
	p := f.problem(t, tab)
	p.Names, p.Ratio, p.Floor, p.StopAfter = f.Predictors, f.Ratio, f.Floor, f.StopAfter
	model, err := solver.NewModel(context.Background(), p)
	if err != nil {
		t.Fatal(err)
	}
	if d := math.Abs(model.LambdaMax() - f.LambdaMax); d > 1e-12*f.LambdaMax {
		t.Fatalf("lambda_max %.17g, the other program's columns give %.17g", model.LambdaMax(), f.LambdaMax)
	}
	var paths []solver.Path
	for block := range slices.Chunk(f.samples(t, tab.rows), 16) {
		part, err := model.FitBlock(context.Background(), block, nil)
		if err != nil {
			t.Fatal(err)
		}
		paths = append(paths, part...)
	}
	return paths
}

func (f frequencies) compareEntries(t *testing.T, paths []solver.Path) {
	t.Helper()
	if len(paths) != f.Draws {
		t.Fatalf("%d paths for %d draws", len(paths), f.Draws)
	}
	for d, path := range paths {
		if path.Stop == solver.StopUncertified {
			t.Errorf("draw %d is not certified: %s", d, path.Why)
		}
		var got [][3]int32
		for _, e := range path.Entries {
			sign := int32(1)
			if e.Negative {
				sign = -1
			}
			got = append(got, [3]int32{e.Candidate, e.Step, sign})
		}
		if !slices.Equal(got, f.Entries[d]) {
			t.Errorf("draw %d: entries (predictor, step, sign)\n%v, the other program\n%v", d, got, f.Entries[d])
		}
	}
}

// draws puts paths into the words of package selection.
func (f frequencies) draws(paths []solver.Path) []selection.Draw {
	out := make([]selection.Draw, len(paths))
	for d, p := range paths {
		out[d] = selection.Draw{Number: d, First: p.First, Last: p.Last, Complete: p.Stop == solver.StopFloor, Still: p.Still,
			Uncertified: p.Stop == solver.StopUncertified}
		for _, e := range p.Entries {
			out[d].Entries = append(out[d].Entries, selection.Entry{Predictor: e.Candidate, Step: e.Step, Negative: e.Negative})
		}
		for _, c := range p.Coefs {
			out[d].Coefs = append(out[d].Coefs, selection.Coef{Step: c.Step, Predictor: c.Candidate, Term: c.Term, Class: c.Class, Value: c.Value})
		}
	}
	return out
}

// compareCounts counts within the cap by a function of this test's own.
func (f frequencies) compareCounts(t *testing.T, draws []selection.Draw, want capRegion) {
	t.Helper()
	counts, both := make([]int, len(f.Predictors)), make([]int, len(f.Predictors))
	last := map[int32]int{}
	for d, draw := range draws {
		for _, j := range withinCap(draw.Entries, want.Selected) {
			counts[j]++
			if at, ok := last[j]; ok && d%2 == 1 && at == d-1 {
				both[j]++
			}
			last[j] = d
		}
	}
	for j, name := range f.Predictors {
		if counts[j] != want.Counts[j] || both[j] != want.BothHalves[j] {
			t.Errorf("q %d: %s in %d draws and %d pairs, the other program %d and %d", want.Selected, name, counts[j], both[j], want.Counts[j], want.BothHalves[j])
		}
	}
}

// withinCap returns the predictors of the longest first part of a path over
// which at most q have entered: whole steps only.
func withinCap(entries []selection.Entry, q int) []int32 {
	var chosen []int32
	for i := 0; i < len(entries); {
		next := i
		for next < len(entries) && entries[next].Step == entries[i].Step {
			next++
		}
		if next > q {
			break
		}
		for ; i < next; i++ {
			chosen = append(chosen, entries[i].Predictor)
		}
	}
	return chosen
}

// compareJudgement asks package selection for the same counts.
func (f frequencies) compareJudgement(t *testing.T, draws []selection.Draw, want capRegion) {
	t.Helper()
	selected, threshold := float64(want.Selected), 0.9
	decision, err := selection.Decide(selection.Ask{Selected: &selected, Threshold: &threshold}, len(f.Predictors), f.Draws, false, f.StopAfter)
	if err != nil {
		t.Fatal(err)
	}
	predictors := selection.Predictors{Names: f.Predictors, Classes: f.Classes, Deviations: ones(len(f.Predictors))}
	judged, err := selection.Judge(draws, false, predictors, decision)
	if err != nil {
		t.Fatal(err)
	}
	if judged.CapBinding != want.CapBinding {
		t.Errorf("q %d: cap binding in %d draws, the other program %d", want.Selected, judged.CapBinding, want.CapBinding)
	}
	for _, row := range judged.Rows {
		if row.BothHalves == nil {
			t.Fatalf("q %d: %s has no share of pairs", want.Selected, row.Predictor)
		}
		pairs := float64(want.BothHalves[row.Index]) / float64(f.Draws/2)
		if row.Count != want.Counts[row.Index] || *row.BothHalves != pairs {
			t.Errorf("q %d: %s chosen in %d draws, both halves %v; the other program %d, %v", want.Selected, row.Predictor, row.Count, *row.BothHalves, want.Counts[row.Index], pairs)
		}
	}
}
