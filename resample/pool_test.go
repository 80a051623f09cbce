package resample

import (
	"context"
	"errors"
	"fmt"
	"reflect"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"holdfast/solver"
)

// fitFunc is a Fitter made of a function.
type fitFunc func(ctx context.Context, samples []*solver.Sample, progress func(int)) ([]solver.Path, error)

func (f fitFunc) FitBlock(ctx context.Context, samples []*solver.Sample, progress func(int)) ([]solver.Path, error) {
	return f(ctx, samples, progress)
}

// trace makes a path that tells the rows of its draw, and dawdles by an
// amount that differs from draw to draw, so that blocks finish out of order.
func trace(_ context.Context, samples []*solver.Sample, progress func(int)) ([]solver.Path, error) {
	var paths []solver.Path
	for _, s := range samples {
		var p solver.Path
		for row, count := range Drawn(s) {
			p.Entries = append(p.Entries, solver.Entry{Candidate: int32(row), Step: int32(count)})
		}
		time.Sleep(time.Duration(p.Entries[0].Candidate*37%5) * 100 * time.Microsecond)
		progress(3)
		paths = append(paths, p)
	}
	return paths, nil
}

// ledger is a Sink that keeps what it is given.
type ledger struct {
	firsts []int
	paths  []solver.Path
}

func (l *ledger) Put(first int, paths []solver.Path) error {
	l.firsts = append(l.firsts, first)
	l.paths = append(l.paths, paths...)
	return nil
}

// The sink sees the same sequence for any number of workers and any block.
func TestSameSequenceForAnyWorkersAndBlock(t *testing.T) {
	for _, design := range []Design{Halves, Bootstrap} {
		plan := mustPlan(t, Plan{Rows: 30, Number: 60, Seed: 4, Design: design})
		want := make([]solver.Path, plan.Number)
		for d := range want {
			got, err := trace(context.Background(), []*solver.Sample{plan.Sample(d)}, func(int) {})
			if err != nil {
				t.Fatal(err)
			}
			want[d] = got[0]
		}
		for _, workers := range []int{1, 2, 7, 100} {
			for _, block := range []int{0, 2, 4, 16, 64} {
				var l ledger
				if err := Run(context.Background(), plan, fitFunc(trace), &l, Options{Workers: workers, Block: block}); err != nil {
					t.Fatal(err)
				}
				if !reflect.DeepEqual(l.paths, want) {
					t.Errorf("%v, %d workers, block %d: another sequence", design, workers, block)
				}
				if block > 0 && len(l.firsts) != (plan.Number+block-1)/block {
					t.Errorf("%d workers, block %d: %d blocks", workers, block, len(l.firsts))
				}
			}
		}
	}
}

func TestOddBootstrapHasAShortLastBlock(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 7, Design: Bootstrap})
	var l ledger
	if err := Run(context.Background(), plan, fitFunc(trace), &l, Options{Workers: 2, Block: 3}); err != nil {
		t.Fatal(err)
	}
	if fmt.Sprint(l.firsts) != "[0 3 6]" || len(l.paths) != 7 {
		t.Errorf("blocks from %v, %d paths", l.firsts, len(l.paths))
	}
}

func TestRunRefuses(t *testing.T) {
	halves := mustPlan(t, Plan{Rows: 30, Number: 8})
	for name, c := range map[string]struct {
		plan Plan
		opt  Options
		says string
	}{
		"split pair":       {halves, Options{Block: 3}, "take 4"},
		"negative block":   {halves, Options{Block: -2}, "block of -2"},
		"negative workers": {halves, Options{Workers: -1}, "workers -1"},
		"unchecked plan":   {Plan{Rows: 30, Number: 8}, Options{}, "NewPlan"},
	} {
		err := Run(context.Background(), c.plan, fitFunc(trace), &ledger{}, c.opt)
		if err == nil || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

var errTank = errors.New("tank 7 leaks")

// The first failure stops the run: almost no work starts after it, its error
// names the draws, and fits under way are cancelled.
func TestFirstFailureStopsPromptly(t *testing.T) {
	const workers, blocks, failing = 4, 1000, 20
	plan := mustPlan(t, Plan{Rows: 30, Number: 2 * blocks})
	var started, after atomic.Int32
	var failed atomic.Bool
	fit := func(ctx context.Context, samples []*solver.Sample, _ func(int)) ([]solver.Path, error) {
		if failed.Load() {
			after.Add(1)
		}
		if started.Add(1) == failing {
			failed.Store(true)
			return nil, errTank
		}
		select { // a fit that takes a while, unless cancelled
		case <-time.After(2 * time.Millisecond):
			return make([]solver.Path, len(samples)), nil
		case <-ctx.Done():
			return nil, ctx.Err()
		}
	}
	err := Run(context.Background(), plan, fitFunc(fit), &ledger{}, Options{Workers: workers, Block: 2})
	if !errors.Is(err, errTank) || !strings.Contains(err.Error(), "resample: draws ") {
		t.Errorf("error %v", err)
	}
	if n := after.Load(); n > workers {
		t.Errorf("%d blocks were started after the failure", n)
	}
}

// Blocks that are whole when another fails are kept, in order, even behind
// the gap.
func TestWholeBlocksSurviveAFailure(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 8})
	var others sync.WaitGroup
	others.Add(3)
	second := plan.Sample(2)
	fit := func(_ context.Context, samples []*solver.Sample, _ func(int)) ([]solver.Path, error) {
		if sameSample(samples[0], second) {
			others.Wait()
			return nil, errTank
		}
		defer others.Done()
		return make([]solver.Path, len(samples)), nil
	}
	var l ledger
	err := Run(context.Background(), plan, fitFunc(fit), &l, Options{Workers: 4, Block: 2})
	if err == nil || err.Error() != "resample: draws 2 to 3: tank 7 leaks" {
		t.Errorf("error %v", err)
	}
	if fmt.Sprint(l.firsts) != "[0 4 6]" {
		t.Errorf("kept blocks from %v", l.firsts)
	}
}

// sinkFunc is a Sink made of a function.
type sinkFunc func(first int, paths []solver.Path) error

func (f sinkFunc) Put(first int, paths []solver.Path) error { return f(first, paths) }

func TestSinkFailureStopsAndIsNotAskedAgain(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 400})
	var asked, fitted atomic.Int32
	sink := sinkFunc(func(first int, _ []solver.Path) error {
		asked.Add(1)
		if first == 10 {
			return errTank
		}
		return nil
	})
	fit := func(ctx context.Context, samples []*solver.Sample, progress func(int)) ([]solver.Path, error) {
		fitted.Add(1)
		return trace(ctx, samples, progress)
	}
	err := Run(context.Background(), plan, fitFunc(fit), sink, Options{Workers: 2, Block: 2})
	if !errors.Is(err, errTank) || !strings.HasPrefix(err.Error(), "resample: keeping draws 10 to 11: ") {
		t.Errorf("error %v", err)
	}
	if asked.Load() != 6 {
		t.Errorf("the sink was asked %d times", asked.Load())
	}
	if n := fitted.Load(); n > 6+2*window+2 {
		t.Errorf("%d of 200 blocks were fitted", n)
	}
}

// A slow block holds the others back: what waits for it is bounded.
func TestWaitingBlocksAreBounded(t *testing.T) {
	const workers, bound = 3, window*3 - 1
	plan := mustPlan(t, Plan{Rows: 30, Number: 400})
	first := plan.Sample(0)
	var fitted, peak atomic.Int32
	fit := func(ctx context.Context, samples []*solver.Sample, progress func(int)) ([]solver.Path, error) {
		if sameSample(samples[0], first) {
			for end := time.Now().Add(10 * time.Second); fitted.Load() < bound && time.Now().Before(end); {
				time.Sleep(time.Millisecond)
			}
			time.Sleep(20 * time.Millisecond) // time to go beyond the bound
			peak.Store(fitted.Load())
		}
		fitted.Add(1)
		return make([]solver.Path, len(samples)), nil
	}
	var l ledger
	if err := Run(context.Background(), plan, fitFunc(fit), &l, Options{Workers: workers, Block: 2}); err != nil {
		t.Fatal(err)
	}
	if n := peak.Load(); n != bound {
		t.Errorf("%d blocks waited for the first; the bound is %d", n, bound)
	}
	if len(l.paths) != 400 {
		t.Errorf("%d draws", len(l.paths))
	}
}

func TestCallerStops(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 4000})
	ctx, cancel := context.WithCancelCause(context.Background())
	defer cancel(nil)
	stop := errors.New("interrupted from the keyboard")
	var l ledger
	sink := sinkFunc(func(first int, paths []solver.Path) error {
		if first == 20 {
			cancel(stop)
		}
		return l.Put(first, paths)
	})
	err := Run(ctx, plan, fitFunc(trace), sink, Options{Workers: 2, Block: 2})
	var stopped *StoppedError
	if !errors.As(err, &stopped) || !errors.Is(err, stop) || !errors.Is(err, context.Canceled) {
		t.Fatalf("error %v", err)
	}
	if stopped.Draws != len(l.paths) || stopped.Total != 4000 || len(l.paths) > 100 {
		t.Errorf("says %d of %d draws, the sink has %d", stopped.Draws, stopped.Total, len(l.paths))
	}
	if want := fmt.Sprintf("resample: stopped after %d of 4000 draws: interrupted from the keyboard", len(l.paths)); err.Error() != want {
		t.Errorf("error %q", err)
	}
}

func TestEndedContextStartsNothing(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	fit := func(context.Context, []*solver.Sample, func(int)) ([]solver.Path, error) {
		t.Error("a block was fitted")
		return nil, nil
	}
	err := Run(ctx, mustPlan(t, Plan{Rows: 30, Number: 40}), fitFunc(fit), &ledger{}, Options{Workers: 3})
	if !errors.Is(err, context.Canceled) {
		t.Errorf("error %v", err)
	}
}

func TestPanicsBecomeErrorsThatNameTheDraws(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 8})
	third := plan.Sample(4)
	fit := func(ctx context.Context, samples []*solver.Sample, progress func(int)) ([]solver.Path, error) {
		if sameSample(samples[0], third) {
			samples[0].Rows[1<<20] = 0 // out of range
		}
		return trace(ctx, samples, progress)
	}
	err := Run(context.Background(), plan, fitFunc(fit), &ledger{}, Options{Workers: 1, Block: 2})
	var p *PanicError
	if !errors.As(err, &p) || !strings.HasPrefix(err.Error(), "resample: draws 4 to 5: a defect of the program: ") {
		t.Fatalf("error %v", err)
	}
	if strings.Contains(err.Error(), "goroutine") || !strings.Contains(string(p.Stack), "TestPanics") {
		t.Errorf("the stack belongs into the field, not into the text: %v", err)
	}
	sink := sinkFunc(func(int, []solver.Path) error { panic("no ink") })
	err = Run(context.Background(), plan, fitFunc(trace), sink, Options{Workers: 2, Block: 2})
	if !errors.As(err, &p) || !strings.Contains(err.Error(), "no ink") {
		t.Errorf("error %v", err)
	}
}

func TestWrongNumberOfPathsIsAnError(t *testing.T) {
	fit := func(context.Context, []*solver.Sample, func(int)) ([]solver.Path, error) {
		return make([]solver.Path, 1), nil
	}
	err := Run(context.Background(), mustPlan(t, Plan{Rows: 30, Number: 2}), fitFunc(fit), &ledger{}, Options{Workers: 1})
	if err == nil || err.Error() != "resample: draws 0 to 1: the fitter returned 1 paths" {
		t.Errorf("error %v", err)
	}
}

// Progress comes from one goroutine at a time, never falls, and ends at all
// draws and steps.
func TestProgress(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 40})
	var calls int // not atomic: the race detector sees calls that overlap
	var last Progress
	report := func(p Progress) {
		calls++
		if p.Draws < last.Draws || p.Steps < last.Steps || p.Total != 40 {
			t.Errorf("%+v after %+v", p, last)
		}
		last = p
	}
	if err := Run(context.Background(), plan, fitFunc(trace), &ledger{}, Options{Workers: 3, Progress: report}); err != nil {
		t.Fatal(err)
	}
	if want := (Progress{Draws: 40, Total: 40, Steps: 120}); last != want || calls < 40 {
		t.Errorf("ended at %+v after %d calls, want %+v", last, calls, want)
	}
}

// Nothing that matters may sit behind the optional callback: without it the
// draws are the same and a stop still says how many were made.
func TestNoProgressCallback(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 40})
	ctx, cancel := context.WithCancel(context.Background())
	defer cancel()
	sink := sinkFunc(func(first int, _ []solver.Path) error {
		if first == 4 {
			cancel()
		}
		return nil
	})
	err := Run(ctx, plan, fitFunc(trace), sink, Options{Workers: 1, Block: 2})
	var stopped *StoppedError
	if !errors.As(err, &stopped) || stopped.Draws < 6 {
		t.Errorf("error %v", err)
	}
}
