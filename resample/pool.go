package resample

import (
	"context"
	"errors"
	"fmt"
	"sync/atomic"
	"time"

	"golang.org/x/sync/errgroup"

	"holdfast/solver"
)

// Fitter fits the draws of a block. Run calls it from several goroutines at
// once. progress, called while it works, tells of lattice steps done since
// the last call. It returns one path per sample, in their order, and reads
// the samples only. It must return soon after ctx ends.
type Fitter interface {
	FitBlock(ctx context.Context, samples []*solver.Sample, progress func(steps int)) ([]solver.Path, error)
}

// Sink takes finished draws: paths[i] is draw draws[i], and the numbers rise.
// Run calls Put from one goroutine at a time, for each block as soon as it is
// finished: blocks come in any order, each draw once.
type Sink interface {
	Put(draws []int, paths []solver.Path) error
}

// Options sets how a run goes, never what comes out of it.
type Options struct {
	Workers  int             // goroutines that fit; 0: Workers()
	Block    int             // draws in every block, even for Halves; 0: by the time that draws take, see Sizing
	Limit    int             // most draws in a block where Block is 0; 0: MaxLanes
	Risk     time.Duration   // see Sizing; 0: DefaultRisk
	Draws    []int           // draws to make, rising, whole pairs for Halves; nil: all of the plan. Kept, not copied
	Stop     <-chan struct{} // closed: nothing new is begun, the blocks in work are finished and put. nil: never
	Progress func(Progress)  // called now and then, from one goroutine at a time; it must be quick. nil: none

	clock func() time.Time // nil: time.Now
}

// ErrStop is the cause in a *StoppedError where Options.Stop ended the run.
var ErrStop = errors.New("asked to stop")

// Run makes draws of the plan, fits them, and puts each block into the sink
// as soon as it is finished. It returns when nothing of it runs any more. The
// error is that of the first failure, and names its draws; where ctx or
// Options.Stop ended the run before the last draw it is a *StoppedError. The
// blocks that were whole have been put in every case, so the sink may have
// gaps. A panic in the fitter or the sink becomes a *PanicError.
func Run(ctx context.Context, plan Plan, f Fitter, sink Sink, opt Options) error {
	opt, err := opt.resolve(plan)
	if err != nil {
		return err
	}
	group, inner := errgroup.WithContext(ctx)
	r := newRun(plan, f, opt)
	for range r.workers {
		group.Go(func() error { return r.work(inner) })
	}
	group.Go(func() error {
		err := r.write(sink)
		if err != nil {
			group.Go(r.drop)
		}
		return err
	})
	return r.verdict(ctx, group.Wait())
}

// resolve fills in the defaults and refuses what cannot be.
func (o Options) resolve(plan Plan) (Options, error) {
	if plan.units == nil {
		return o, errors.New("resample: the plan did not come from NewPlan")
	}
	if err := o.checkNumbers(plan.Design); err != nil {
		return o, err
	}
	if err := plan.checkDraws(o.Draws); err != nil {
		return o, err
	}
	if o.Draws == nil {
		o.Draws = plan.all()
	}
	if o.Workers == 0 {
		o.Workers = Workers()
	}
	if o.clock == nil {
		o.clock = time.Now
	}
	return o, nil
}

// checkNumbers refuses numbers outside their ranges.
func (o Options) checkNumbers(design Design) error {
	switch {
	case o.Workers < 0:
		return fmt.Errorf("resample: workers %d: at least 1 is needed, or 0 for as many as this process may use", o.Workers)
	case o.Block < 0:
		return fmt.Errorf("resample: block of %d draws: at least 1 is needed, or 0 to have it chosen", o.Block)
	case design == Halves && o.Block%2 != 0:
		return fmt.Errorf("resample: block of %d draws: it would split a pair: take %d", o.Block, o.Block+1)
	case o.Limit < 0:
		return fmt.Errorf("resample: limit of %d draws in a block: at least 1 is needed, or 0 for %d", o.Limit, MaxLanes)
	case o.Risk < 0:
		return fmt.Errorf("resample: risk %v: a block cannot take less than no time", o.Risk)
	}
	return nil
}

// run is what the goroutines of one Run share.
type run struct {
	plan    Plan
	fitter  Fitter
	workers int
	stop    <-chan struct{}
	clock   func() time.Time
	dealer  *dealer

	active   atomic.Int32 // workers that have not ended
	finished chan outcome // closed by the last worker
	tally    *tally
}

func newRun(plan Plan, f Fitter, opt Options) *run {
	sizing := Sizing{Design: plan.Design, Draws: len(opt.Draws), Workers: opt.Workers, Limit: opt.Limit, Risk: opt.Risk}
	r := &run{
		plan:    plan,
		fitter:  f,
		workers: max(1, min(opt.Workers, len(opt.Draws)/sizing.Unit())),
		stop:    opt.Stop,
		clock:   opt.clock,
		dealer:  newDealer(opt.Draws, opt.Block, sizing),
		// One finished block for each worker may wait for the writer, and
		// bounds what is in memory and not yet safe.
		finished: make(chan outcome, opt.Workers),
		tally:    &tally{total: len(opt.Draws), report: opt.Progress},
	}
	r.active.Store(int32(r.workers))
	return r
}

// outcome is one fitted block.
type outcome struct {
	draws []int
	paths []solver.Path
}

// work fits one block after the other until there are none, one fails, ctx
// ends, or the run is asked to stop. A block that is whole goes to the writer
// in every case.
func (r *run) work(ctx context.Context) error {
	defer func() {
		if r.active.Add(-1) == 0 {
			close(r.finished)
		}
	}()
	for {
		if ctx.Err() != nil {
			return ctx.Err()
		}
		if r.stopped() {
			return nil
		}
		draws := r.dealer.take()
		if len(draws) == 0 {
			return nil
		}
		start := r.clock()
		paths, err := r.fit(ctx, draws)
		if err != nil {
			return err
		}
		r.dealer.took(len(draws), r.clock().Sub(start))
		r.finished <- outcome{draws, paths} // until this is closed somebody takes from it
	}
}

// stopped reports whether the run was asked to begin nothing new.
func (r *run) stopped() bool {
	select {
	case <-r.stop:
		return true
	default:
		return false
	}
}

// fit makes the draws of a block and fits them.
func (r *run) fit(ctx context.Context, draws []int) (paths []solver.Path, err error) {
	err = guard(func() error {
		paths, err = r.plan.FitDraws(ctx, r.fitter, draws, r.tally.steps)
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("resample: %s: %w", drawList(draws), err)
	}
	return paths, nil
}

// write puts blocks as they come. After a failure or the end of the context
// the workers begin nothing new, and what was whole by then is put. A sink
// that fails ends the run and is not asked again.
func (r *run) write(sink Sink) error {
	for o := range r.finished {
		if err := r.put(sink, o); err != nil {
			return err
		}
	}
	return nil
}

// drop takes what no writer takes any more, so that no worker waits for ever.
func (r *run) drop() error {
	for range r.finished {
	}
	return nil
}

// put hands one block to the sink and counts its draws as done.
func (r *run) put(sink Sink, o outcome) error {
	if err := guard(func() error { return sink.Put(o.draws, o.paths) }); err != nil {
		return fmt.Errorf("resample: keeping %s: %w", drawList(o.draws), err)
	}
	r.tally.draws(len(o.draws))
	return nil
}

// verdict tells an end from outside from a failure of the run's own: workers
// that were stopped report nothing of theirs.
func (r *run) verdict(ctx context.Context, err error) error {
	done, total := r.tally.done.Draws, r.tally.total
	switch {
	case err != nil && ctx.Err() != nil && errors.Is(err, ctx.Err()):
		return &StoppedError{Draws: done, Total: total, Cause: context.Cause(ctx), end: ctx.Err()}
	case err == nil && done < total:
		return &StoppedError{Draws: done, Total: total, Cause: ErrStop, end: ErrStop}
	}
	return err
}

// StoppedError says that the run was ended from outside before the last draw.
// errors.Is finds the context's error and its cause in it, or ErrStop.
type StoppedError struct {
	Draws, Total int   // draws put into the sink, draws that were to be made
	Cause        error // context.Cause of the caller's context, or ErrStop
	end          error
}

func (e *StoppedError) Error() string {
	return fmt.Sprintf("resample: stopped after %d of %d draws: %v", e.Draws, e.Total, e.Cause)
}

// Unwrap serves errors.Is and errors.As.
func (e *StoppedError) Unwrap() []error { return []error{e.end, e.Cause} }

// drawList names the draws of a block.
func drawList(draws []int) string {
	first, last := draws[0], draws[len(draws)-1]
	switch {
	case len(draws) == 1:
		return fmt.Sprintf("draw %d", first)
	case last-first == len(draws)-1:
		return fmt.Sprintf("draws %d to %d", first, last)
	}
	return fmt.Sprintf("%d draws from %d to %d", len(draws), first, last)
}
