package forecast

import (
	"context"
	"errors"
	"time"

	"holdfast/resample"
	"holdfast/solver"
)

// Options say how long timing may take, and what the run will be like.
type Options struct {
	Workers int // of the run
	// Block returns how many draws a worker of the run fits together where a
	// draw takes so long: whole pairs, as resample.Sizing has it.
	Block func(perDraw time.Duration) int
	Limit time.Duration // more rounds are begun only within it; the first pair is always fitted
	Clock Clock         // zero: SystemClock
}

// Timing is what a few draws took.
type Timing struct {
	First    Round // the first pair, with what a model does only once
	Alone    Round // rounds of one worker; Draws 0: there was no time for any
	Together Round // rounds of all workers; Draws 0: likewise
	Block    int   // draws of a block in Together, or in Alone
	Paths    []solver.Path
}

// steady is how long rounds of one kind are repeated where they are short, so
// that the clock and the machine's moods count little.
const steady = 2 * time.Second

// Time fits the first pair and, within the limit, rounds of one worker and of
// all workers. The draws are the plan's own, from number 0.
func Time(ctx context.Context, plan resample.Plan, f resample.Fitter, o Options) (*Timing, error) {
	if o.Workers < 1 || o.Block == nil {
		return nil, errors.New("forecast: at least one worker and the size of its blocks are needed")
	}
	if o.Clock.Now == nil {
		o.Clock = SystemClock()
	}
	t := &timer{plan: plan, fitter: f, clock: o.Clock}
	first, err := t.round(ctx, 1, 2)
	if err != nil {
		return nil, err
	}
	r := &Timing{First: first, Block: 2}
	left := o.Limit - first.Wall
	if left < first.Wall {
		r.Paths = t.paths
		return r, nil
	}
	// A pair once more, without what is done once: what later rounds cost.
	if r.Alone, err = t.round(ctx, 1, 2); err != nil {
		return nil, err
	}
	left -= r.Alone.Wall
	r.Block = blockWithin(o.Block(r.Alone.PerDraw()), r.Alone.PerDraw(), left/2)
	if r.Together, err = t.rounds(ctx, o.Workers, r.Block, left/2); err != nil {
		return nil, err
	}
	if o.Workers > 1 {
		alone, err := t.rounds(ctx, 1, r.Block, left/2)
		if err != nil {
			return nil, err
		}
		if alone.Draws > 0 {
			r.Alone = alone
		}
	} else if r.Together.Draws > 0 {
		r.Alone = r.Together
	}
	r.Paths = t.paths
	return r, nil
}

// blockWithin is the largest block of whole pairs, up to most, that takes no
// longer than left.
func blockWithin(most int, perDraw, left time.Duration) int {
	block := most
	for block > 2 && time.Duration(block)*perDraw > left {
		block -= 2
	}
	return block
}

// rounds repeats a round until it is steady, has as many draws as the plan, or
// the time is up. Not even one is begun where it would take longer than left.
func (t *timer) rounds(ctx context.Context, workers, block int, left time.Duration) (sum Round, err error) {
	last := time.Duration(0)
	for sum.Wall+last <= left && sum.Wall < steady && sum.Draws < t.plan.Number {
		r, err := t.round(ctx, workers, block)
		if err != nil {
			return sum, err
		}
		sum, last = sum.plus(r), r.Wall
	}
	return sum, nil
}

// Once is what the first draws took beyond their share: done once by every
// process.
func (t *Timing) Once() time.Duration {
	if t.Alone.Draws == 0 {
		return 0
	}
	return max(0, t.First.Busy-2*t.Alone.PerDraw())
}

// Busiest is the round that says most about a run: that of all workers where
// there is one.
func (t *Timing) Busiest() Round {
	for _, r := range []Round{t.Together, t.Alone} {
		if r.Draws > 0 {
			return r
		}
	}
	return t.First
}

// PerDraw is the time that one of so many workers needs for a draw: as timed,
// or where so many were not timed as on a machine with so many free processors.
// Workers that share the path to memory slow each other down, which shows in
// their processor time: it is taken as a line through the two numbers of workers
// that were timed.
func (t *Timing) PerDraw(workers int) time.Duration {
	for _, r := range []Round{t.Together, t.Alone} {
		if r.Draws > 0 && r.Workers == workers {
			return r.PerDraw()
		}
	}
	few, many := t.Alone, t.Together
	if few.Draws == 0 {
		few = t.First
	}
	slope := time.Duration(0)
	if many.Draws > 0 && many.Workers > few.Workers {
		slope = (many.free() - few.free()) / time.Duration(many.Workers-few.Workers)
	}
	return few.free() + max(0, slope)*time.Duration(workers-few.Workers)
}

// Measured reports whether that many workers were timed.
func (t *Timing) Measured(workers int) bool {
	for _, r := range []Round{t.First, t.Alone, t.Together} {
		if r.Draws > 0 && r.Workers == workers {
			return true
		}
	}
	return false
}

// Wall is what so many draws take with so many workers, without what is fixed:
// blocks shrink towards the end, so that all workers end within a pair of each
// other.
func (t *Timing) Wall(draws, workers int) time.Duration {
	if draws < 1 {
		return 0
	}
	pairs := (draws + 1) / 2
	workers = max(1, min(workers, pairs))
	each := (pairs + workers - 1) / workers
	return t.Once() + time.Duration(2*each)*t.PerDraw(workers)
}
