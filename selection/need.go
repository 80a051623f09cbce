package selection

import "math"

// snap is the relative distance within which a computed number is taken for
// the integer beside it, and within which a bound may exceed its target. It is
// far above rounding error (2*100*0.55 is 110.00000000000001) and far below
// anything that matters.
const snap = 1e-9

// mostDraws keeps products of two counts inside an int64.
const mostDraws = 1_000_000_000

// nearInt returns the integer beside x and whether x is within snap of it.
func nearInt(x float64) (float64, bool) {
	r := math.Round(x)
	return r, math.Abs(x-r) <= snap*math.Max(1, math.Abs(x))
}

// ceilSnap is the ceiling of x after snapping.
func ceilSnap(x float64) float64 {
	if r, ok := nearInt(x); ok {
		return r
	}
	return math.Ceil(x)
}

// floorSnap is the floor of x after snapping.
func floorSnap(x float64) float64 {
	if r, ok := nearInt(x); ok {
		return r
	}
	return math.Floor(x)
}

// within reports whether a bound meets its target.
func within(bound, target float64) bool { return bound <= target*(1+snap) }

// Need returns the smallest count, out of the given number of draws, that makes
// a predictor stable at the threshold: draws*threshold, snapped to an integer
// within 1e-9 and rounded up. It is always more than half of the draws.
// The threshold lies in (1/2, 1]; draws is at least 1.
func Need(threshold float64, draws int) (int, error) {
	if err := checkThreshold(threshold); err != nil {
		return 0, err
	}
	if err := checkDraws(draws, true); err != nil {
		return 0, err
	}
	return max(int(ceilSnap(float64(draws)*threshold)), draws/2+1), nil
}

func checkThreshold(threshold float64) error {
	if !(threshold > 0.5 && threshold <= 1) {
		return badNumber("threshold", threshold, "must be above 0.5 and at most 1")
	}
	return nil
}

func checkCandidates(p float64) error {
	if !(p >= 1) || math.IsInf(p, 0) {
		return badNumber("candidates", p, "must be at least 1")
	}
	return nil
}

func checkSelected(q, p float64) error {
	if !(q > 0) {
		return badNumber("selected", q, "must be above 0")
	}
	if q > p {
		return badNumber("selected", q, "must be at most the number of candidates, "+show(p))
	}
	return nil
}

func checkFalseSelections(v float64) error {
	if !(v > 0) || math.IsInf(v, 0) {
		return badNumber("false_selections", v, "must be a finite number above 0")
	}
	return nil
}

func checkPairs(need, pairs int) error {
	if pairs < 1 || pairs > mostDraws/2 {
		return badCount("pairs", pairs, "must be at least 1 and at most 500 million")
	}
	if need <= pairs || need > 2*pairs {
		return badCount("need", need, "must be above half of the draws and at most all of them")
	}
	return nil
}
