package selection

import (
	"fmt"
	"math"
	"sort"
)

// solveNeed returns the smallest count of 2*pairs draws, above half, at which
// the bound is at most target. All three bounds fall as the count grows.
func solveNeed(b BoundName, q, p, target float64, pairs int) (int, error) {
	meets := func(need int) bool {
		v, err := b.at(q, p, need, pairs)
		return err == nil && within(v, target)
	}
	first := pairs + 1
	need := first + sort.Search(pairs, func(i int) bool { return meets(first + i) })
	if need <= 2*pairs {
		return need, nil
	}
	return 0, needImpossible(b, q, p, target, pairs)
}

// needImpossible says that even all draws are not enough, and what would be.
func needImpossible(b BoundName, q, p, target float64, pairs int) error {
	e := &ImpossibleError{Change: "false_selections"}
	join := ", or "
	least, err := b.at(q, p, 2*pairs, pairs)
	if err != nil {
		e.Change = "selected"
		e.What = fmt.Sprintf("selected = %s gives no %s bound at any threshold", show(q), b)
		e.Advice = why(err)
		join = "; "
	} else {
		e.Nearest = roundUp(least)
		e.What = fmt.Sprintf("with selected = %s of %s candidates the %s bound is %s even at threshold 1, above false_selections = %s",
			show(q), show(p), b, show(e.Nearest), show(target))
		e.Advice = fmt.Sprintf("raise false_selections to %s", show(e.Nearest))
	}
	if most, _, err := solveSelected(b, p, target, 2*pairs, pairs); err == nil && roundDown(most) > 0 {
		if e.Change == "selected" {
			e.Nearest = roundDown(most)
		}
		e.Advice += join + "lower selected to " + show(roundDown(most))
	}
	return e
}

// solveSelected returns the largest q, at most p, at which the bound is at most
// target for a count of need; limited tells that the side conditions of the
// bound, not the target, set the limit.
func solveSelected(b BoundName, p, target float64, need, pairs int) (q float64, limited bool, err error) {
	switch b {
	case Unimodal:
		return unimodalSelected(p, target, need, pairs)
	case RConcave:
		return rConcaveSelected(p, target, need, pairs), false, nil
	}
	return math.Min(p, math.Sqrt(target*p*float64(need-pairs)/float64(pairs))), false, nil
}

func unimodalSelected(p, target float64, need, pairs int) (float64, bool, error) {
	if need-pairs < 2 {
		return 0, false, unimodalExists(0, need, pairs)
	}
	q := math.Min(p, math.Sqrt(target*p/unimodalFactor(need, pairs)))
	if unimodalExists(q/p, need, pairs) == nil {
		return q, false, nil
	}
	q = lastWhere(q, func(q float64) bool { return unimodalExists(q/p, need, pairs) == nil })
	return q, true, nil
}

func rConcaveSelected(p, target float64, need, pairs int) float64 {
	need, pairs = rConcaveAt(need, pairs)
	if within(rConcave(p, p, need, pairs), target) {
		return p
	}
	return lastWhere(p, func(q float64) bool { return rConcave(q, p, need, pairs) <= target })
}

// lastWhere returns the largest q in (0, high) for which ok holds, to 14
// digits; ok holds near 0 and fails at high.
func lastWhere(high float64, ok func(float64) bool) float64 {
	low := 0.0
	for high-low > 1e-14*high {
		mid := low + float64((high-low)/2)
		if mid == low || mid == high {
			break
		}
		if ok(mid) {
			low = mid
		} else {
			high = mid
		}
	}
	return low
}
