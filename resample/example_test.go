package resample_test

import (
	"context"
	"fmt"

	"holdfast/resample"
	"holdfast/solver"
)

// counter stands for a solver: it reports how many tanks a draw holds.
type counter struct{}

func (counter) FitBlock(_ context.Context, samples []*solver.Sample, progress func(int)) ([]solver.Path, error) {
	paths := make([]solver.Path, len(samples))
	for i, s := range samples {
		paths[i].Last = s.Len()
		progress(1)
	}
	return paths, nil
}

// printer stands for a run directory.
type printer struct{}

func (printer) Put(draws []int, paths []solver.Path) error {
	for i, p := range paths {
		fmt.Printf("draw %d: %d tanks\n", draws[i], p.Last)
	}
	return nil
}

// Nine tanks of larvae: four in each half, one left over.
func Example() {
	plan, err := resample.NewPlan(resample.Plan{Rows: 9, Design: resample.Halves, Number: 4, Seed: 1})
	if err != nil {
		fmt.Println(err)
		return
	}
	err = resample.Run(context.Background(), plan, counter{}, printer{}, resample.Options{Workers: 2})
	fmt.Println(err)
	// Unordered output:
	// draw 0: 4 tanks
	// draw 1: 4 tanks
	// draw 2: 4 tanks
	// draw 3: 4 tanks
	// <nil>
}

// The rows of a draw, so that anyone can check a frequency.
func ExampleDrawn() {
	plan, err := resample.NewPlan(resample.Plan{Rows: 5, Design: resample.Bootstrap, Number: 1, Seed: 1})
	if err != nil {
		fmt.Println(err)
		return
	}
	total := 0
	for _, count := range resample.Drawn(plan.Sample(0)) {
		total += count
	}
	fmt.Println(total, "rows drawn in all")
	// Output: 5 rows drawn in all
}

// Tanks of three sites, drawn within each; a half needs two tanks that lost
// their larvae (the first three rows), or the pair is drawn anew.
func ExamplePlan_Draw() {
	plan, err := resample.NewPlan(resample.Plan{
		Rows: 9, Number: 2, Seed: 3,
		Within: []int32{0, 0, 0, 0, 1, 1, 1, 1, 2},
		Jitter: 0.5, Keys: []string{"ph", "salinity"},
	})
	if err != nil {
		fmt.Println(err)
		return
	}
	plan.Fit = func(s *solver.Sample) error {
		if lost := s.Weight(0) + s.Weight(1) + s.Weight(2); lost < 2 {
			return fmt.Errorf("%v with larvae lost, and at least 2 are needed", lost)
		}
		return nil
	}
	fmt.Println("in each half:", plan.Half(), "sites of one tank:", plan.Lone())
	fmt.Println(plan.Check())
	_, redraws, err := plan.Draw(1)
	fmt.Println(redraws, err)
	// Output:
	// in each half: 4 sites of one tank: [2]
	// resample: none of 105 pairs of halves that were tried can be fitted: 1 with larvae lost, and at least 2 are needed
	// 20 1 with larvae lost, and at least 2 are needed
}
