package solver

import "math/rand/v2"

// whim makes a model take another history than it would by itself: other
// columns looked at, other orders, other windows, another way to a product.
// Tests set it to show that no recorded bit depends on any of it.
type whim struct {
	r    *rand.Rand
	skip bool // false: no gradient is ever taken as known
}

func (w *whim) coin() bool { return w.r.IntN(2) == 0 }

// alsoNeed asks for the gradients of columns that no one needs.
func (w *whim) alsoNeed(need []uint16, inverse []float64, bit uint16) {
	for c := range need {
		if inverse[c] != 0 && (!w.skip || w.r.IntN(3) == 0) {
			need[c] |= bit
		}
	}
}

// disturb shuffles units that are about to join the working set, and adds some
// that have no reason to.
func (w *whim) disturb(units []int32, inverse []float64) []int32 {
	for range w.r.IntN(3) {
		if c := w.r.IntN(len(inverse)); inverse[c] != 0 {
			units = append(units, int32(c))
		}
	}
	w.r.Shuffle(len(units), func(i, j int) { units[i], units[j] = units[j], units[i] })
	return units
}

// window returns how many lattice steps to look ahead.
func (w *whim) window() int { return 1 + w.r.IntN(9) }
