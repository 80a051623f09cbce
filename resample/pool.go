package resample

import (
	"context"
	"errors"
	"fmt"
	"sync/atomic"

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

// Sink takes finished draws: paths[i] is draw first+i. Run calls Put from
// one goroutine at a time and with rising first.
type Sink interface {
	Put(first int, paths []solver.Path) error
}

// Options sets how a run goes, never what comes out of it.
type Options struct {
	Workers  int            // goroutines that fit; 0: Workers()
	Block    int            // draws in a block, even for Halves; 0: BlockSize
	Progress func(Progress) // called now and then, from one goroutine at a time; it must be quick. nil: none
}

// window is how many blocks per worker may be under way or waiting for an
// earlier one. It bounds memory; the work is lost only beyond it.
const window = 4

// Run makes all draws of the plan, fits them and puts the outcomes into the
// sink in draw order. It returns when nothing of it runs any more. The error
// is that of the first failure, and names its draws; where ctx ended first it
// is a *StoppedError. In both cases the blocks that were whole have been put,
// so the sink may have gaps. A panic in the fitter or the sink becomes a
// *PanicError.
func Run(ctx context.Context, plan Plan, f Fitter, sink Sink, opt Options) error {
	opt, err := opt.resolve(plan)
	if err != nil {
		return err
	}
	group, inner := errgroup.WithContext(ctx)
	r := &run{
		plan:     plan,
		fitter:   f,
		block:    opt.Block,
		blocks:   (plan.Number + opt.Block - 1) / opt.Block,
		tokens:   make(chan struct{}, window*opt.Workers),
		finished: make(chan outcome, window*opt.Workers),
		tally:    &tally{total: plan.Number, report: opt.Progress},
	}
	workers := min(opt.Workers, r.blocks)
	r.active.Store(int32(workers))
	for range workers {
		group.Go(func() error { return r.work(inner) })
	}
	group.Go(func() error { return r.write(sink) })
	return r.verdict(ctx, group.Wait())
}

// resolve fills in the defaults and refuses what cannot be.
func (o Options) resolve(plan Plan) (Options, error) {
	if plan.units == nil {
		return o, errors.New("resample: the plan did not come from NewPlan")
	}
	if o.Workers < 0 {
		return o, fmt.Errorf("resample: workers %d: at least 1 is needed, or 0 for as many as this process may use", o.Workers)
	}
	if o.Block < 0 {
		return o, fmt.Errorf("resample: block of %d draws: at least 1 is needed, or 0 to have it chosen", o.Block)
	}
	if plan.Design == Halves && o.Block%2 != 0 {
		return o, fmt.Errorf("resample: block of %d draws: it would split a pair: take %d", o.Block, o.Block+1)
	}
	if o.Workers == 0 {
		o.Workers = Workers()
	}
	if o.Block == 0 {
		o.Block = BlockSize(plan.Number, o.Workers, MaxLanes)
	}
	return o, nil
}

// run is what the goroutines of one Run share.
type run struct {
	plan   Plan
	fitter Fitter
	block  int // draws in a block
	blocks int

	next     atomic.Int64  // next block to hand out
	active   atomic.Int32  // workers that have not ended
	tokens   chan struct{} // one for each block handed out and not yet put
	finished chan outcome  // closed by the last worker
	tally    *tally
}

// outcome is one fitted block.
type outcome struct {
	block int
	paths []solver.Path
}

// work fits one block after the other until there are none, one fails, or
// ctx ends. A token is taken before a block, so the block that the writer
// waits for is always with a worker and the tokens cannot run out for good.
func (r *run) work(ctx context.Context) error {
	defer func() {
		if r.active.Add(-1) == 0 {
			close(r.finished)
		}
	}()
	for {
		select {
		case r.tokens <- struct{}{}:
		case <-ctx.Done():
			return ctx.Err()
		}
		if ctx.Err() != nil { // both may have been ready
			return ctx.Err()
		}
		block := int(r.next.Add(1)) - 1
		if block >= r.blocks {
			<-r.tokens
			return nil
		}
		paths, err := r.fit(ctx, block)
		if err != nil {
			return err
		}
		r.finished <- outcome{block, paths} // has room for every token
	}
}

// bounds returns the draws of a block, first to last-1.
func (r *run) bounds(block int) (first, last int) {
	return block * r.block, min((block+1)*r.block, r.plan.Number)
}

// fit makes the draws of a block and fits them.
func (r *run) fit(ctx context.Context, block int) (paths []solver.Path, err error) {
	first, last := r.bounds(block)
	err = guard(func() error {
		paths, err = r.fitter.FitBlock(ctx, r.plan.samples(first, last), r.tally.steps)
		return err
	})
	if err == nil && len(paths) != last-first {
		err = fmt.Errorf("the fitter returned %d paths", len(paths))
	}
	if err != nil {
		return nil, fmt.Errorf("resample: %s: %w", drawRange(first, last), err)
	}
	return paths, nil
}

// write puts blocks in draw order. After a failure or the end of the context
// the workers stop handing in; what was whole by then and waits behind a
// block that will not come is put too, still in draw order. A failing sink is
// not asked again.
func (r *run) write(sink Sink) error {
	var q queue
	for o := range r.finished {
		q.add(o)
		for o, ok := q.next(); ok; o, ok = q.next() {
			if err := r.put(sink, o); err != nil {
				return err
			}
			<-r.tokens
		}
	}
	for _, o := range q.rest() {
		if err := r.put(sink, o); err != nil {
			return err
		}
	}
	return nil
}

// put hands one block to the sink and counts its draws as done.
func (r *run) put(sink Sink, o outcome) error {
	first, last := r.bounds(o.block)
	if err := guard(func() error { return sink.Put(first, o.paths) }); err != nil {
		return fmt.Errorf("resample: keeping %s: %w", drawRange(first, last), err)
	}
	r.tally.draws(last - first)
	return nil
}

// verdict tells an end of the caller's context from a failure of the run's
// own: workers that were stopped from outside report nothing of theirs.
func (r *run) verdict(ctx context.Context, err error) error {
	if err != nil && ctx.Err() != nil && errors.Is(err, ctx.Err()) {
		return &StoppedError{Draws: r.tally.done.Draws, Total: r.plan.Number, Cause: context.Cause(ctx), end: ctx.Err()}
	}
	return err
}

// StoppedError says that the caller's context ended before the last draw.
// errors.Is finds the context's error and its cause in it.
type StoppedError struct {
	Draws, Total int   // draws put into the sink, draws of the plan
	Cause        error // context.Cause of the caller's context
	end          error
}

func (e *StoppedError) Error() string {
	return fmt.Sprintf("resample: stopped after %d of %d draws: %v", e.Draws, e.Total, e.Cause)
}

// Unwrap serves errors.Is and errors.As.
func (e *StoppedError) Unwrap() []error { return []error{e.end, e.Cause} }

// drawRange names draws first to last-1.
func drawRange(first, last int) string {
	if last-first == 1 {
		return fmt.Sprintf("draw %d", first)
	}
	return fmt.Sprintf("draws %d to %d", first, last-1)
}
