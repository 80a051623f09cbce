package selection

import (
	"fmt"
	"math"
)

// WorstCaseBound is the bound of Meinshausen and Buhlmann (2010), Theorem 1, on
// the expected number of false selections:
//
//	E(V) <= q^2 / ((2 tau - 1) p)
//
// for q selected out of p candidates and a threshold tau in (1/2, 1]. It needs
// no assumption on shapes and holds for every number of complementary pairs
// that was fixed beforehand (Shah and Samworth 2013).
func WorstCaseBound(q, p, tau float64) (float64, error) {
	if err := checkThreshold(tau); err != nil {
		return 0, err
	}
	if err := checkBudget(q, p); err != nil {
		return 0, err
	}
	return q * q / ((2*tau - 1) * p), nil
}

// UnimodalBound is the bound of Shah and Samworth (2013), Theorem 2, for
// predictors that are stable from a count of need on, out of 2*pairs draws. It
// assumes that the share of pairs in which both halves choose a predictor has
// a unimodal distribution. Where its side conditions do not hold it does not
// exist: the error then is ErrNoBound, since beyond them the formula is too
// small.
func UnimodalBound(q, p float64, need, pairs int) (float64, error) {
	if err := checkBound(q, p, need, pairs); err != nil {
		return 0, err
	}
	if err := unimodalExists(q/p, need, pairs); err != nil {
		return 0, err
	}
	return unimodalFactor(need, pairs) * (q / p) * q, nil
}

// RConcaveBound is the r-concave bound of Shah and Samworth (2013) for
// predictors that are stable from a count of need on, out of 2*pairs draws:
//
//	p * min( D(theta^2, 2 tau - 1, B, -1/2), D(theta, tau, 2B, -1/4) ), theta = q/p.
//
// Beyond 50 pairs it is stated at 50, with the threshold rounded down to a
// count of 100: with more pairs the shape that it assumes was seen to fail.
func RConcaveBound(q, p float64, need, pairs int) (float64, error) {
	if err := checkBound(q, p, need, pairs); err != nil {
		return 0, err
	}
	need, pairs = rConcaveAt(need, pairs)
	return rConcave(q, p, need, pairs), nil
}

// rConcavePairs is the largest number of pairs at which the shape assumption
// of the r-concave bound was seen to hold.
const rConcavePairs = 50

// rConcaveAt returns the count and pairs at which the r-concave bound is stated.
func rConcaveAt(need, pairs int) (int, int) {
	if pairs <= rConcavePairs {
		return need, pairs
	}
	return need * rConcavePairs / pairs, rConcavePairs
}

// rConcave is the formula at exactly these pairs; arguments are checked.
func rConcave(q, p float64, need, pairs int) float64 {
	theta := q / p
	both := tailMax(theta*theta, need-pairs, pairs, -0.5)
	each := tailMax(theta, need, 2*pairs, -0.25)
	return p * math.Min(both, each)
}

// unimodalFactor is C of E(V) <= C theta q. With j = need - pairs it is
// B/(2j-1) up to 2j-1 = B, and 2(B-j+1)/(B+1) from there on.
func unimodalFactor(need, pairs int) float64 {
	j := need - pairs
	if 2*j-1 <= pairs {
		return float64(pairs) / float64(2*j-1)
	}
	return 2 * float64(pairs-j+1) / float64(pairs+1)
}

// unimodalExists checks the side conditions of the unimodal bound.
func unimodalExists(theta float64, need, pairs int) error {
	b := float64(pairs)
	switch tau := float64(need) / (2 * b); {
	case pairs < 2:
		return &noBound{"the unimodal bound needs at least 2 pairs of draws"}
	case need-pairs < 2:
		return &noBound{fmt.Sprintf("the unimodal bound needs a count of at least %d of %d draws, half of them and 2 more", pairs+2, 2*pairs)}
	case theta > 1/math.Sqrt(3):
		return &noBound{fmt.Sprintf("the unimodal bound needs selected to be at most 0.577 of the candidates; it is %s", show(roundUp(theta)))}
	case tau <= unimodalFloor(theta, b):
		return &noBound{fmt.Sprintf("with selected at %s of the candidates the unimodal bound needs a threshold above %s", show(roundUp(theta)), show(roundUp(unimodalFloor(theta, b))))}
	}
	return nil
}

// unimodalFloor is what the attained threshold must exceed.
func unimodalFloor(theta, b float64) float64 {
	return math.Min(0.5+float64(theta*theta), 0.5+1/(2*b)+float64(0.75*theta*theta))
}

func checkBudget(q, p float64) error {
	if err := checkCandidates(p); err != nil {
		return err
	}
	return checkSelected(q, p)
}

func checkBound(q, p float64, need, pairs int) error {
	if err := checkBudget(q, p); err != nil {
		return err
	}
	return checkPairs(need, pairs)
}

// at returns the bound for q of p candidates at a count of need. The worst
// case is taken at the attained threshold too: 2 tau - 1 = (need - B)/B.
func (b BoundName) at(q, p float64, need, pairs int) (float64, error) {
	switch b {
	case Unimodal:
		return UnimodalBound(q, p, need, pairs)
	case RConcave:
		return RConcaveBound(q, p, need, pairs)
	}
	if err := checkBound(q, p, need, pairs); err != nil {
		return 0, err
	}
	return q * q * float64(pairs) / (float64(need-pairs) * p), nil
}
