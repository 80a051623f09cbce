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
// draw, and once.
func (d *Dir) SetDecision(dec selection.Decision) error {
	if err := checkDecision(&dec); err != nil {
		return fmt.Errorf("rundir: decision: %w", err)
	}
	d.mu.Lock()
	defer d.mu.Unlock()
	if d.run.Decision != nil {
		return ErrDecided
	}
	blocks, err := d.blocks()
	if err != nil {
		return err
	}
	if len(blocks) > 0 {
		return fmt.Errorf("%w: draws are already there", ErrDecided)
	}
	next := d.run
	next.Decision = &dec
	return d.saveRun(next)
}

// LogJudgement adds a judgement that is not the one of record to run.json. A
// judgement that is logged already, or that judges all draws of the run as
// the decision of record does, adds nothing. Where the directory cannot
// be written the error is ErrReadOnly.
func (d *Dir) LogJudgement(j Judged) error {
	if err := checkDecision(&j.Decision); err != nil {
		return fmt.Errorf("rundir: judgement: %w", err)
	}
	d.mu.Lock()
	defer d.mu.Unlock()
	now, err := readRun(d.path) // another process may have added to it
	if err != nil {
		return err
	}
	if now.Digest != d.run.Digest {
		return fmt.Errorf("rundir: %s: run.json now belongs to another run (identity %.12s, not %.12s)", d.path, now.Digest, d.run.Digest)
	}
	d.run = *now
	if now.Decision != nil && now.Decision.Same(j.Decision) && j.Draws == now.Meta.Number {
		return nil
	}
	for i := range now.Judgements {
		if same(now.Judgements[i], j) {
			return nil
		}
	}
	now.Judgements = append(now.Judgements, j)
	return d.saveRun(*now)
}

// same reports whether b says nothing that a does not.
func same(a, b Judged) bool {
	return a.Decision.Same(b.Decision) && a.Draws == b.Draws && a.Stable == b.Stable && (a.Saved || !b.Saved)
}

// saveRun replaces run.json and what is held of it. The caller holds d.mu.
func (d *Dir) saveRun(next Run) error {
	if err := writeFile(d.fs, d.join(runFile), next.encode); err != nil {
		return troubled(err)
	}
	d.run = next
	return nil
}
