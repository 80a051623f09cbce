package solver

import "math"

// lattice is the set of lambdas top*ratio^k over all integers k.
type lattice struct{ top, ratio float64 }

// Lambda returns the lambda of a lattice step, top*ratio^step, with the bits that
// a Model of that lambda_max and ratio uses.
func Lambda(top, ratio float64, step int) float64 { return lattice{top, ratio}.at(step) }

// at returns top*ratio^k by repeated squaring, each product rounded once, so
// that the same step has the same bits on every machine.
func (l lattice) at(k int) float64 {
	base, n := l.ratio, k
	if k < 0 {
		n = -k
	}
	power := 1.0
	for ; n > 0; n >>= 1 {
		if n&1 != 0 {
			power = float64(power * base)
		}
		base = float64(base * base)
	}
	if k < 0 {
		return l.top / power
	}
	return float64(l.top * power)
}

// lastAbove returns the largest k whose lambda is at least floor*(1-1e-9):
// the tolerance of DESIGN 4 for a floor that is a lattice point itself.
func (l lattice) lastAbove(floor float64) int {
	least := floor * (1 - 1e-9)
	k := int(math.Floor(math.Log(floor/l.top) / math.Log(l.ratio)))
	for l.at(k) < least {
		k--
	}
	for l.at(k+1) >= least {
		k++
	}
	return k
}

// lastEmpty returns the largest k at which a draw whose largest gauge over
// lambda is top has no candidate: top/lambda - 1 within the border.
func (l lattice) lastEmpty(top float64) int {
	k := int(math.Floor(math.Log(top/l.top) / math.Log(l.ratio)))
	for !isOut(top / l.at(k)) {
		k--
	}
	for isOut(top / l.at(k+1)) {
		k++
	}
	return k
}
