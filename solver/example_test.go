package solver_test

import (
	"context"
	"fmt"

	"holdfast/solver"
)

// Six batches of oyster larvae, two readings each, already centred. Which
// reading explains survival, and from which lambda on?
func ExampleModel_FitPath() {
	salinity := []float64{-5, -3, -1, 1, 3, 5}
	feed := []float64{1, -1, 0, 0, -1, 1}
	p := solver.Problem{
		Design:     solver.NewDense(6, [][]float64{salinity, feed}, nil),
		Candidates: []int32{0, 1},
		Centre:     []float64{28, 2},
		Names:      []string{"salinity", "feed"},
		Outcome:    []float64{40, 44, 50, 51, 56, 61},
		Mix:        1,
		Ratio:      0.5,
		Floor:      0.2,
	}
	m, err := solver.NewModel(context.Background(), p)
	if err != nil {
		fmt.Println(err)
		return
	}
	fits, err := m.FitPath(context.Background(), solver.AllRows(6))
	if err != nil {
		fmt.Println(err)
		return
	}
	for _, f := range fits {
		fmt.Printf("step %d: lambda %.3f, salinity %.3f, feed %.3f, certified %v\n", f.Step, f.Lambda, f.Coef[0], f.Coef[1], f.Certified)
	}
	// Output:
	// step 0: lambda 6.929, salinity 0.000, feed 0.000, certified true
	// step 1: lambda 3.464, salinity 1.014, feed 0.000, certified true
	// step 2: lambda 1.732, salinity 1.521, feed 0.000, certified true
}
