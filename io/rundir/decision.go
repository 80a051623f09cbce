package rundir

import (
	"errors"
	"fmt"

	"holdfast/selection"
)

// checkDecision refuses what no judgement can use.
func checkDecision(d *selection.Decision) error {
	if !(d.Threshold > 0 && d.Threshold <= 1) {
		return fmt.Errorf("threshold: %v is not between 0 and 1", d.Threshold)
	}
	if d.Selected < 1 {
		return fmt.Errorf("selected: %d is less than 1", d.Selected)
	}
	if d.Region.String() == "" || d.Bound.String() == "" {
		return errors.New("region and bound must be given")
	}
	return nil
}

// Judged is a judgement that is not the one of record, or an extension.
type Judged struct {
	Time     string             `json:"time"`  // RFC 3339, of the first time it was asked
	Draws    int                `json:"draws"` // draws judged
	Decision selection.Decision `json:"decision"`
	Stable   int                `json:"stable"` // predictors found stable
	Saved    bool               `json:"saved"`  // its tables replaced those of the directory
}

// ErrDecided is what errors.Is finds where a decision of record is set again,
// or after the first draw.
var ErrDecided = errors.New("rundir: the decision of record is already set")

// SetDecision writes the decision of record. It must come before the first
// draw, and once; to set the same one again changes nothing, as parts that
// start together do.
func (d *Dir) SetDecision(dec selection.Decision) error {
	if err := checkDecision(&dec); err != nil {
		return fmt.Errorf("rundir: decision: %w", err)
	}
	// Listed before run.json is read: whoever put these draws had set the
	// decision before, so it stands in what is read now.
	blocks, err := d.blocks()
	if err != nil {
		return err
	}
	return d.edit(func(r *Run) (bool, error) {
		switch {
		case r.Decision != nil && r.Decision.Same(dec):
			return false, nil
		case r.Decision != nil:
			return false, ErrDecided
		case len(blocks) > 0:
			return false, fmt.Errorf("%w: draws are already there", ErrDecided)
		}
		r.Decision = &dec
		return true, nil
	})
}

// LogJudgement adds a judgement that is not the one of record to run.json. A
// judgement that is logged already, or that judges all draws of the run as
// the decision of record does, adds nothing. Where the directory cannot
// be written the error is ErrReadOnly.
func (d *Dir) LogJudgement(j Judged) error {
	if err := checkDecision(&j.Decision); err != nil {
		return fmt.Errorf("rundir: judgement: %w", err)
	}
	return d.edit(func(r *Run) (bool, error) {
		if r.Decision != nil && r.Decision.Same(j.Decision) && j.Draws == r.Meta.Number {
			return false, nil
		}
		for i := range r.Judgements {
			if same(r.Judgements[i], j) {
				return false, nil
			}
		}
		r.Judgements = append(r.Judgements, j)
		return true, nil
	})
}

// same reports whether b says nothing that a does not.
func same(a, b Judged) bool {
	return a.Decision.Same(b.Decision) && a.Draws == b.Draws && a.Stable == b.Stable && (a.Saved || !b.Saved)
}
