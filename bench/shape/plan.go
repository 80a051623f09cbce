package shape

import (
	"holdfast/resample"
	"holdfast/solver"
)

// Plan is the draws of a table: complementary halves, balanced by class or event
// as a study's are.
func (s Shape) Plan(t Table, draws int, seed uint64) (resample.Plan, error) {
	return resample.NewPlan(resample.Plan{Rows: s.Rows, Number: draws, Seed: seed, Within: s.within(t)})
}

// within is the stratum of each row; nil where the outcome has no classes.
func (s Shape) within(t Table) []int32 {
	var of []float64
	switch s.Family {
	case solver.Binomial, solver.Multinomial:
		of = t.Outcome
	case solver.Cox:
		of = t.Event
	default:
		return nil
	}
	codes := make([]int32, len(of))
	for i, v := range of {
		codes[i] = int32(v)
	}
	return codes
}

// KeepDraws writes the rows of the draws of a table that Keep wrote, for the
// other side.
func (s Shape) KeepDraws(dir string, draws int, seed uint64) error {
	t, err := s.readOutcome(dir)
	if err != nil {
		return err
	}
	plan, err := s.Plan(t, draws, seed)
	if err != nil {
		return err
	}
	rows := make([][]int32, draws)
	for d := range rows {
		for row := range resample.Drawn(plan.Sample(d)) {
			rows[d] = append(rows[d], int32(row))
		}
	}
	return WriteDraws(s.In(dir).Draws, rows)
}
