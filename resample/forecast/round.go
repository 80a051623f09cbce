package forecast

import (
	"context"
	"fmt"
	"time"

	"golang.org/x/sync/errgroup"

	"holdfast/resample"
	"holdfast/solver"
)

// Round is what one round took.
type Round struct {
	Workers   int           // at the same time
	Draws     int           // of all workers together
	Busy      time.Duration // summed over workers
	Wall      time.Duration
	Processor time.Duration // charged for the round; 0: not known
}

// PerDraw is the time that a worker needs for one draw.
func (r Round) PerDraw() time.Duration {
	if r.Draws == 0 {
		return 0
	}
	return r.Busy / time.Duration(r.Draws)
}

// Share is the part of the time that the processors worked for the round: 1
// on an idle machine, less where other work took them. 1 where it is not known.
func (r Round) Share() float64 {
	if r.Processor == 0 || r.Busy == 0 {
		return 1
	}
	return min(1, float64(r.Processor)/float64(r.Busy))
}

// free is the time for one draw on processors that do nothing else.
func (r Round) free() time.Duration {
	return time.Duration(float64(r.PerDraw()) * r.Share())
}

// plus adds another round of the same workers.
func (r Round) plus(o Round) Round {
	r.Workers = o.Workers
	r.Draws += o.Draws
	r.Busy += o.Busy
	r.Wall += o.Wall
	r.Processor += o.Processor
	return r
}

// timer fits rounds.
type timer struct {
	plan   resample.Plan
	fitter resample.Fitter
	clock  Clock
	next   int // draw that the next round starts with
	paths  []solver.Path
}

// round lets each worker make and fit one block of neighbouring draws.
func (t *timer) round(ctx context.Context, workers, block int) (Round, error) {
	r := Round{Workers: workers, Draws: workers * block}
	draws := make([][]int, workers)
	for w := range draws {
		for range block {
			draws[w] = append(draws[w], t.next%t.plan.Number)
			t.next++
		}
	}
	busy := make([]time.Duration, workers)
	paths := make([][]solver.Path, workers)
	start := t.clock.Now()
	before, known := t.clock.Processor()
	group, inner := errgroup.WithContext(ctx)
	for w := range draws {
		group.Go(func() (err error) {
			begun := t.clock.Now()
			paths[w], err = t.plan.FitDraws(inner, t.fitter, draws[w], nil)
			busy[w] = t.clock.Now().Sub(begun)
			return err
		})
	}
	if err := group.Wait(); err != nil {
		return r, fmt.Errorf("forecast: timing draws: %w", err)
	}
	r.Wall = t.clock.Now().Sub(start)
	if after, ok := t.clock.Processor(); ok && known {
		r.Processor = after - before
	}
	for w := range busy {
		r.Busy += busy[w]
		t.paths = append(t.paths, paths[w]...)
	}
	return r, nil
}
