package rundir_test

import (
	"fmt"
	"os"
	"path/filepath"

	"holdfast/io/rundir"
	"holdfast/selection"
	"holdfast/solver"
)

// A run directory is created, decided, filled with draws and read again.
func Example() {
	folder, err := os.MkdirTemp("", "hatchery")
	if err != nil {
		panic(err)
	}
	defer os.RemoveAll(folder)
	d, err := rundir.Create(filepath.Join(folder, "hatchery.run"), rundir.Identity{
		Fingerprint: "5e1f", Outcome: "survival_d21", Kind: "number", Missing: "refuse",
		Candidates: []string{"salinity", "ph"},
		Penalty:    rundir.Penalty{Mix: 1, Scale: "draw", Ratio: 0.95, Floor: 0.005},
		Draws:      rundir.Draws{Design: "halves", Seed: 1},
	}, []byte("[table]\npath = \"hatchery.parquet\"\n"), rundir.Meta{
		Tool: "holdfast", Kernel: "portable", TableRows: 240, Rows: 240, Number: 2,
		LambdaMax: 0.4, LastStep: 103, Centre: []float64{31, 8}, Deviation: []float64{2, 0.1},
	})
	if err != nil {
		panic(err)
	}
	err = d.SetDecision(selection.Decision{Region: selection.Cap, Bound: selection.Unimodal, Threshold: 0.8, Selected: 1})
	if err != nil {
		panic(err)
	}
	chosen := solver.Path{First: 3, Last: 3, Intercepts: []float64{70},
		Entries: []solver.Entry{{Candidate: 1, Step: 3, Negative: true}},
		Coefs:   []solver.Coef{{Candidate: 1, Step: 3, Value: -0.5}}}
	if err := d.Put([]int{0, 1}, []solver.Path{chosen, {First: 3, Last: 3, Intercepts: []float64{71}}}); err != nil {
		panic(err)
	}

	again, err := rundir.Open(d.Path())
	if err != nil {
		panic(err)
	}
	draws, err := again.Draws()
	if err != nil {
		panic(err)
	}
	for _, draw := range draws {
		fmt.Printf("draw %d: %d entries\n", draw.Number, len(draw.Entries))
	}
	// Output:
	// draw 0: 1 entries
	// draw 1: 0 entries
}
