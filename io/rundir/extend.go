package rundir

import (
	"errors"
	"fmt"
	"time"
)

// Extension is a change of the number of draws. It came after the run began,
// perhaps after its result was seen.
type Extension struct {
	Time string `json:"time"` // RFC 3339
	From int    `json:"from"` // draws before
	To   int    `json:"to"`   // draws after
}

// ErrSmaller is what errors.Is finds where a run is to be made smaller.
var ErrSmaller = errors.New("a run cannot be made smaller: to leave out draws that are made, and may have been seen, would choose among results")

// Extend sets a larger number of draws and logs that. The number that is there
// already changes nothing; a smaller one is ErrSmaller.
func (d *Dir) Extend(number int, when time.Time) error {
	return d.edit(func(r *Run) (bool, error) {
		from := r.Meta.Number
		switch {
		case number == from:
			return false, nil
		case number < from:
			return false, fmt.Errorf("rundir: extend %s from %d to %d draws: %w: give another --out for a run of its own", d.path, from, number, ErrSmaller)
		case number > maxDraws:
			return false, fmt.Errorf("rundir: extend %s to %d draws: more than %d", d.path, number, maxDraws)
		case r.halves() && number%2 != 0:
			return false, fmt.Errorf("rundir: extend %s to %d draws: halves come in pairs, so the number must be even: take %d", d.path, number, number+1)
		}
		r.Meta.Number = number
		r.Extensions = append(r.Extensions, Extension{Time: when.UTC().Format(time.RFC3339), From: from, To: number})
		return true, nil
	})
}

// halves reports whether the draws are complementary pairs.
func (r *Run) halves() bool { return r.Identity.Draws.Design == "halves" }

// Asked is the number of draws that was asked for when the run was made,
// before any extension.
func (r *Run) Asked() int {
	if len(r.Extensions) > 0 {
		return r.Extensions[0].From
	}
	return r.Meta.Number
}
