package solver

import (
	"fmt"
	"math"
	"math/rand/v2"
	"runtime"
	"strings"
	"testing"
)

// TestWorkspace: the estimate is within 25 % of the live memory of a block's
// fits at their end, as the runtime counts it, on tables of very different
// shapes.
func TestWorkspace(t *testing.T) {
	for _, c := range []struct {
		rows, candidates, stop, draws int
		floor                         float64
	}{
		{240, 1200, 60, 16, .005},
		{500, 5000, 40, 6, .005},
		{500, 3000, 100, 6, .01},
		{1000, 1500, 160, 4, .005},
		{10_000, 300, 60, 4, .005},
		{100_000, 60, 24, 2, .005},
	} {
		t.Run(fmt.Sprintf("rows=%d/candidates=%d", c.rows, c.candidates), func(t *testing.T) {
			m := randomModel(t, c.rows, c.candidates, c.stop, c.floor)
			got := liveBytes(t, m, c.draws)
			want := m.Shape(c.rows / 2).Workspace(c.draws)
			t.Logf("live %d, estimated %d", got, want)
			if ratio := float64(want) / float64(got); !(ratio > 0.75 && ratio < 1.25) {
				t.Errorf("%d bytes are live, the estimate is %d: %.2f of it", got, want, ratio)
			}
		})
	}
}

// TestCurvedWorkspace: the same for the other kinds of outcome and for groups,
// within a factor of 2, since how many Hessians are held depends on the data.
func TestCurvedWorkspace(t *testing.T) {
	for _, c := range []struct {
		rows, candidates, stop, draws int
	}{
		{400, 2000, 40, 4},
		{2000, 300, 40, 2},
	} {
		base := randomModel(t, c.rows, c.candidates, c.stop, 0.05).p
		for kind, q := range kindsOf(base) {
			if strings.Contains(kind, "equal groups") {
				continue // a dozen candidates, all of which enter: memory is no question
			}
			q.Floor, q.Ratio = 0.05, 0.9
			m := mustModel(t, q)
			got := liveBytes(t, m, c.draws)
			want := m.Shape(c.rows / 2).Workspace(c.draws)
			most := 2.0
			if strings.Contains(kind, "groups") {
				most = 4 // few groups have entered at this floor
			}
			if ratio := float64(want) / float64(got); !(ratio > 0.5 && ratio < most) {
				t.Errorf("%v %s: %d bytes are live, the estimate is %d: %.2f of it", c, kind, got, want, ratio)
			}
		}
	}
}

// randomModel has neighbouring columns correlated and a signal in a few.
func randomModel(t *testing.T, rows, candidates, stop int, floor float64) *Model {
	t.Helper()
	rng := rand.New(rand.NewPCG(1, uint64(rows)))
	const signals = 15
	cols, outcome := make([][]float64, candidates), make([]float64, rows)
	names, list := make([]string, candidates), make([]int32, candidates)
	for j := range cols {
		cols[j], names[j], list[j] = make([]float64, rows), fmt.Sprint(j), int32(j)
		for i := range cols[j] {
			cols[j][i] = rng.NormFloat64()
			if j > 0 {
				cols[j][i] = .5*cols[j-1][i] + math.Sqrt(.75)*cols[j][i]
			}
			if j < signals {
				outcome[i] += cols[j][i]
			}
		}
	}
	for i := range outcome {
		outcome[i] += 3 * rng.NormFloat64()
	}
	m, err := NewModel(t.Context(), Problem{
		Design: NewDense(rows, cols, nil), Candidates: list, Centre: make([]float64, candidates),
		Names: names, Outcome: outcome, Mix: 1, Ratio: .95, Floor: floor, StopAfter: stop,
	})
	if err != nil {
		t.Fatal(err)
	}
	m.seedFrom(t.Context())
	return m
}

// liveBytes fits a block of random halves and returns what its fittings hold
// at the end.
func liveBytes(t *testing.T, m *Model, draws int) int64 {
	t.Helper()
	rng := rand.New(rand.NewPCG(2, 2))
	before := heapInUse()
	paths, fits := make([]Path, draws), make([]*fitting, draws)
	for k := range fits {
		s := AllRows(m.rows)
		for w := range s.Rows {
			s.Rows[w] &= rng.Uint64()
		}
		fits[k] = m.newFitting()
		if err := fits[k].start(s); err != nil {
			t.Fatal(err)
		}
		fits[k].record(&paths[k], nil)
	}
	if err := m.lockstep(t.Context(), fits); err != nil {
		t.Fatal(err)
	}
	live := heapInUse() - before
	runtime.KeepAlive(fits)
	return live
}

func heapInUse() int64 {
	for range 3 { // the pool lets go of what it holds at the second
		runtime.GC()
	}
	var s runtime.MemStats
	runtime.ReadMemStats(&s)
	return int64(s.HeapAlloc)
}

// TestWorkspaceGrows: the estimate rises with everything that costs memory,
// and a block of twice the draws takes twice as much.
func TestWorkspaceGrows(t *testing.T) {
	base := Shape{Rows: 1000, DrawRows: 500, Candidates: 2000, Always: 2, Steps: 100, StopAfter: 40}
	for name, more := range map[string]Shape{
		"rows":       {Rows: 2000, DrawRows: 1000, Candidates: 2000, Always: 2, Steps: 100, StopAfter: 40},
		"candidates": {Rows: 1000, DrawRows: 500, Candidates: 4000, Always: 2, Steps: 100, StopAfter: 40},
		"always":     {Rows: 1000, DrawRows: 500, Candidates: 2000, Always: 20, Steps: 100, StopAfter: 40},
		"steps":      {Rows: 1000, DrawRows: 500, Candidates: 2000, Always: 2, Steps: 200, StopAfter: 40},
		"stop after": {Rows: 1000, DrawRows: 500, Candidates: 2000, Always: 2, Steps: 100, StopAfter: 80},
		"groups":     {Rows: 1000, DrawRows: 500, Candidates: 2000, Always: 2, Steps: 100, StopAfter: 40, Columns: 5000},
		"classes":    {Rows: 1000, DrawRows: 500, Candidates: 2000, Always: 2, Steps: 100, StopAfter: 40, Classes: 3, Curved: true},
		"curved":     {Rows: 1000, DrawRows: 500, Candidates: 2000, Always: 2, Steps: 100, StopAfter: 40, Curved: true},
		"no stop":    {Rows: 1000, DrawRows: 500, Candidates: 2000, Always: 2, Steps: 100},
	} {
		if more.Workspace(2) <= base.Workspace(2) {
			t.Errorf("%s: %d bytes, not more than %d", name, more.Workspace(2), base.Workspace(2))
		}
	}
	if one, two := base.Workspace(2), base.Workspace(4); two < 2*one-2 || two > 2*one+2 {
		t.Errorf("2 draws: %d bytes, 4 draws: %d", one, two)
	}
}

// TestSteps: from 1 down to 0.005 by 0.95 there are 104 steps, the first
// included (0.95^103 = 0.00507, 0.95^104 = 0.00482).
func TestSteps(t *testing.T) {
	if got := Steps(0.95, 0.005); got != 104 {
		t.Errorf("%d steps, want 104", got)
	}
}
