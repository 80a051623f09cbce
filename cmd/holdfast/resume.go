package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"time"

	"holdfast/io/rundir"
	"holdfast/io/study"
	"holdfast/solver"
)

// openExisting opens the run directory that an earlier process made; nil where
// there is none.
func openExisting(out string) (*rundir.Dir, error) {
	if _, err := os.Stat(filepath.Join(out, "run.json")); err != nil {
		return nil, nil // whoever makes it says what is in the way
	}
	dir, err := rundir.Open(out)
	return dir, wrong(err, "")
}

// follow takes over what a run directory has settled and the study leaves open:
// where the paths stop, and what groups pay, followed from the decision that was
// of record.
func (a *asked) follow(run rundir.Run) {
	a.luck = run.Identity.Penalty.Luck
	if a.study.Penalty.StopAfter == 0 {
		a.study.Penalty.StopAfter = run.Identity.Penalty.StopAfter
	}
}

// makeDir makes a run directory and writes the decision of record.
func (s *settled) makeDir(out string, model *solver.Model, parts int) (*rundir.Dir, error) {
	moved, err := s.final.Rebase(out)
	if err != nil {
		return nil, err
	}
	text, err := moved.Marshal()
	if err != nil {
		return nil, err
	}
	dir, err := rundir.Create(out, s.identity(), text, s.meta(model, parts))
	if err != nil {
		return nil, err
	}
	return dir, dir.SetDecision(s.decision)
}

// create makes the run directory. Where another process has just made it, that
// one is taken.
func (r *runner) create() (err error) {
	r.dir, err = r.makeDir(r.o.out, r.model, r.o.share.parts)
	switch {
	case errors.Is(err, rundir.ErrDecided):
	case errors.Is(err, rundir.ErrExists):
		if there, openErr := openExisting(r.o.out); there == nil || openErr != nil {
			return wrong(err, "")
		}
	default:
		return err
	}
	if r.dir, err = rundir.Open(r.o.out); err != nil {
		return err
	}
	return r.resume()
}

// resume checks that the run directory holds draws of the same question, and
// extends it where more of them are asked for.
func (r *runner) resume() error {
	if err := r.dir.Compare(r.identity(), r.meta(r.model, r.o.share.parts)); err != nil {
		return wrong(err, "only [decision] and the number of draws may change on an existing run")
	}
	if r.dir.Run().Decision != nil {
		return nil
	}
	err := r.dir.SetDecision(r.decision)
	if errors.Is(err, rundir.ErrDecided) {
		return r.dir.Refresh() // another process was first
	}
	return err
}

// extend asks for more draws where the study does.
func (r *runner) extend() error {
	had := r.dir.Run().Meta.Number
	if r.plan.Number == had {
		return r.updateStudy()
	}
	err := r.dir.Extend(r.plan.Number, time.Now())
	if errors.Is(err, rundir.ErrSmaller) {
		return wrong(err, fmt.Sprintf("add --draws %d to go on with all of them, or give another --out", had))
	}
	if err != nil {
		return err
	}
	fmt.Fprintf(r.talk, "the run is extended from %d to %d draws; that is logged\n", had, r.plan.Number)
	return r.updateStudy()
}

// updateStudy makes study.toml in the run directory say the number of draws
// that the run has, so that it makes the same run elsewhere. A process that was
// killed between an extension and this leaves it to the next.
func (r *runner) updateStudy() error {
	text, err := r.dir.Study()
	if err != nil {
		return err
	}
	kept, err := study.Parse(filepath.Join(r.dir.Path(), "study.toml"), text, nil)
	if err != nil {
		return err
	}
	if kept.Draws.Number == r.plan.Number {
		return nil
	}
	kept.Draws.Number = r.plan.Number
	if text, err = kept.Marshal(); err != nil {
		return err
	}
	return r.dir.SetStudy(text)
}

// lock takes the locks of the parts that this process works on.
func (r *runner) lock(ctx context.Context) error {
	for _, part := range r.o.share.list() {
		l, err := r.dir.Lock(part, rundir.LockOptions{TakeOver: r.o.takeOver, Wait: r.o.wait, Done: ctx.Done()})
		var held *rundir.Held
		if errors.As(err, &held) {
			r.release()
			return &fault{exitFailed, fmt.Errorf("holdfast: %w", err),
				"wait for it with --wait 10m, or, if that process does not exist any more, add --take-over"}
		}
		if err != nil {
			r.release()
			return err
		}
		r.locks = append(r.locks, l)
	}
	return nil
}

// release gives the locks back.
func (r *runner) release() {
	for _, l := range r.locks {
		if err := l.Unlock(); err != nil {
			fmt.Fprintln(r.talk, oneLine(err.Error())) // nobody is kept out: the process that holds it ends
		}
	}
	r.locks = nil
}

// mend reads what is on disk and sets damaged blocks aside, so that their
// draws are made again.
func (r *runner) mend() (*rundir.Finished, error) {
	if err := r.extend(); err != nil {
		return nil, err
	}
	found, err := r.dir.Survey()
	if err != nil || len(found.Damaged) == 0 {
		return found, err
	}
	for _, d := range found.Damaged {
		fmt.Fprintf(r.talk, "damaged, set aside and made again: %s\n", oneLine(d.Err.Error()))
	}
	return found, r.dir.SetAside(found.Damaged)
}
