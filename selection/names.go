package selection

import (
	"fmt"
	"strings"
)

// Region says which part of a draw's path counts for a decision. The zero
// value means that none was named.
type Region uint8

const (
	// Cap keeps, in each draw, the longest first part of the path over which
	// at most q distinct predictors have entered, in whole steps.
	Cap Region = iota + 1
	// Common keeps one lattice range for all draws. It ends at the last step
	// that every draw reached and where the mean number of distinct
	// predictors is at most q.
	Common
)

// String returns the word of the study file.
func (r Region) String() string {
	switch r {
	case Cap:
		return "cap"
	case Common:
		return "common"
	}
	return ""
}

// ParseRegion reads the word of the study file.
func ParseRegion(s string) (Region, error) {
	for r := Cap; r <= Common; r++ {
		if s == r.String() {
			return r, nil
		}
	}
	return 0, &ArgumentError{Name: "region", Value: fmt.Sprintf("%q", s), Why: `must be "cap" or "common"`}
}

// MarshalText implements encoding.TextMarshaler.
func (r Region) MarshalText() ([]byte, error) { return []byte(r.String()), nil }

// UnmarshalText implements encoding.TextUnmarshaler.
func (r *Region) UnmarshalText(text []byte) (err error) {
	*r, err = ParseRegion(string(text))
	return err
}

// BoundName names one of the three bounds on the expected number of false
// selections. The zero value means that none was named.
type BoundName uint8

const (
	WorstCase BoundName = iota + 1 // no assumption on shapes
	Unimodal                       // one hump
	RConcave                       // one hump with tails that fall off
)

// boundNames lists the bounds in the order in which they are always shown.
var boundNames = [3]BoundName{WorstCase, Unimodal, RConcave}

// String returns the word of the study file.
func (b BoundName) String() string {
	switch b {
	case WorstCase:
		return "worst-case"
	case Unimodal:
		return "unimodal"
	case RConcave:
		return "r-concave"
	}
	return ""
}

// ParseBound reads the word of the study file.
func ParseBound(s string) (BoundName, error) {
	words := make([]string, len(boundNames))
	for i, b := range boundNames {
		if s == b.String() {
			return b, nil
		}
		words[i] = fmt.Sprintf("%q", b)
	}
	return 0, &ArgumentError{Name: "bound", Value: fmt.Sprintf("%q", s), Why: "must be one of " + strings.Join(words, ", ")}
}

// MarshalText implements encoding.TextMarshaler.
func (b BoundName) MarshalText() ([]byte, error) { return []byte(b.String()), nil }

// UnmarshalText implements encoding.TextUnmarshaler.
func (b *BoundName) UnmarshalText(text []byte) (err error) {
	*b, err = ParseBound(string(text))
	return err
}

// Label names the assumption in plain words, for a line on the terminal.
func (b BoundName) Label() string {
	switch b {
	case WorstCase:
		return "worst case, no assumption on shapes"
	case Unimodal:
		return "one-hump assumption"
	case RConcave:
		return "one-hump assumption with falling tails"
	}
	return ""
}

// promise is what all three bounds share: what they speak about and what the
// draws must be. Shah and Samworth (2013) bound the selection of predictors
// that one half is unlikely to choose; calling them false is an assumption.
const promise = "The two halves of a pair are disjoint, and the rows (or the clusters kept together) are independent of each other. " +
	"The number is an average over repetitions of the whole study, not a chance and not a share of the list. " +
	"It counts predictors that a single half would choose with a chance of at most selected/candidates; " +
	"it speaks of false selections only if every predictor without effect is of that kind. " +
	"The number of draws, the threshold and the other settings were fixed before the result was seen."

// Assumes says in plain words what must hold for the bound to be true.
func (b BoundName) Assumes() string {
	switch b {
	case WorstCase:
		return promise
	case Unimodal:
		return promise + " In addition, for each such predictor, the share of pairs in which both halves choose it has a distribution with a single hump (the one-hump assumption)."
	case RConcave:
		return promise + fmt.Sprintf(" In addition, for each such predictor, the share of pairs in which both halves choose it, and its selection frequency, have distributions with a single hump and tails that fall off without gaps or plateaus (r-concave, r = -1/2 and -1/4). "+
			"With more than %d pairs the assumption was seen to fail in simulations, so the bound is stated for %d pairs; it then has no slack left.", rConcavePairs, rConcavePairs)
	}
	return ""
}

// Without says in plain words what remains if the assumption fails.
func (b BoundName) Without() string {
	switch b {
	case WorstCase:
		return "If the rows are not independent, or a predictor without effect is chosen by a half more often than selected/candidates, no number can be given."
	case Unimodal:
		return "If a distribution has a second hump, only the worst-case bound holds."
	case RConcave:
		return "If the tails fall off more slowly, the unimodal bound holds as long as there is a single hump; without that only the worst-case bound holds."
	}
	return ""
}

// MonteCarlo explains the interval of a frequency in plain words.
const MonteCarlo = "The interval of a frequency says how far it could move if other draws were made from the same table. " +
	"It knows nothing of how another table would differ."
