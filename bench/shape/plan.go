package shape

import "holdfast/resample"

// Plan is the draws of a shape: complementary halves.
func (s Shape) Plan(draws int, seed uint64) (resample.Plan, error) {
	return resample.NewPlan(resample.Plan{Rows: s.Rows, Number: draws, Seed: seed})
}

// KeepDraws writes the rows of the plan's draws for the other side.
func (s Shape) KeepDraws(dir string, draws int, seed uint64) error {
	plan, err := s.Plan(draws, seed)
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
