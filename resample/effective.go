package resample

import "holdfast/solver"

// EffectiveSize is what case weights leave of the rows of a draw: (sum w)^2 / sum
// w^2, that of as many rows of equal weight (Kish 1965, Survey Sampling, section
// 11.7). Rows drawn twice count twice.
func EffectiveSize(s *solver.Sample) float64 {
	var sum, squares float64
	for row, count := range Drawn(s) {
		w, n := 1.0, float64(count)
		if s.Case != nil {
			w = s.Case[row]
		}
		sum += float64(n * w)
		squares += float64(float64(n*w) * w)
	}
	return sum * sum / squares
}
