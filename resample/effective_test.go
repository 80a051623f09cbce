package resample

import (
	"math"
	"testing"

	"holdfast/solver"
)

// TestEffectiveSize: equal weights count every row, two of three rows of weight 0
// leave one, and Kish's formula by hand: weights 1, 2 (drawn twice) and 3 give
// (1+2+2+3)^2 / (1+4+4+9) = 64/18.
func TestEffectiveSize(t *testing.T) {
	s := solver.AllRows(3)
	if got := EffectiveSize(s); got != 3 {
		t.Errorf("without weights: %g, want 3", got)
	}
	s.Case = []float64{0, 5, 0}
	if got := EffectiveSize(s); got != 1 {
		t.Errorf("one weight: %g, want 1", got)
	}
	s.Case, s.Count = []float64{1, 2, 3}, []uint8{1, 2, 1}
	if got := EffectiveSize(s); math.Abs(got-64.0/18) > 1e-15 {
		t.Errorf("counts and weights: %g, want %g", got, 64.0/18)
	}
}
