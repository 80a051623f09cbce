package shape

import (
	"fmt"

	"holdfast/solver"
)

// Problem is the lasso of a table, down to floor times lambda_max. It centres
// the columns in place; every column is a candidate.
func (s Shape) Problem(t Table, ratio, floor float64) solver.Problem {
	p := solver.Problem{
		Family: s.Family, Outcome: t.Outcome, Mix: 1, Ratio: ratio, Floor: floor,
		Centre: make([]float64, s.Cols), Names: make([]string, s.Cols),
	}
	switch s.Family {
	case solver.Multinomial:
		p.Classes = classes
	case solver.Cox:
		p.Outcome, p.Survival = nil, t.survival()
	}
	for j, c := range t.Columns {
		p.Centre[j] = centre(c)
		p.Candidates = append(p.Candidates, int32(j))
		p.Names[j] = fmt.Sprintf("x%d", j)
	}
	p.Design = solver.NewDense(s.Rows, t.Columns, nil)
	return p
}

// survival is the outcome of the Cox model, ties by Efron as a study's are.
func (t Table) survival() *solver.Survival {
	events := make([]bool, len(t.Event))
	for i, e := range t.Event {
		events[i] = e == 1
	}
	return &solver.Survival{Time: t.Outcome, Event: events}
}

func centre(x []float64) float64 {
	mean := 0.0
	for _, v := range x {
		mean += v
	}
	mean /= float64(len(x))
	for i := range x {
		x[i] -= mean
	}
	return mean
}
