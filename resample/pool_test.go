package resample

import (
	"context"
	"errors"
	"fmt"
	"math/rand/v2"
	"reflect"
	"slices"
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

// ledger is a Sink that keeps what it is given and notes what must not be: a
// draw that comes twice, and numbers that do not rise.
type ledger struct {
	blocks [][]int
	paths  map[int]solver.Path
	wrong  []string
}

func (l *ledger) Put(draws []int, paths []solver.Path) error {
	if l.paths == nil {
		l.paths = make(map[int]solver.Path)
	}
	l.blocks = append(l.blocks, slices.Clone(draws))
	if len(draws) != len(paths) || !slices.IsSorted(draws) {
		l.wrong = append(l.wrong, fmt.Sprintf("%d paths for draws %v", len(paths), draws))
	}
	for i, d := range draws {
		if _, ok := l.paths[d]; ok {
			l.wrong = append(l.wrong, fmt.Sprintf("draw %d came twice", d))
		}
		l.paths[d] = paths[i]
	}
	return nil
}

// sorted lists the blocks by their first draw, as text.
func (l *ledger) sorted() string {
	list := slices.Clone(l.blocks)
	slices.SortFunc(list, slices.Compare)
	return fmt.Sprint(list)
}

// The sink gets exactly the draws that were asked for, each once and equal to
// the bit, for any number of workers, any block, and any choice of draws.
func TestExactlyTheDrawsAskedFor(t *testing.T) {
	r := rand.New(rand.NewPCG(11, 3))
	for _, design := range []Design{Halves, Bootstrap} {
		plan := mustPlan(t, Plan{Rows: 30, Number: 60, Seed: 4, Design: design})
		all := traces(t, plan)
		for _, choice := range [][]int{nil, {}, {0, 1}, {58, 59}, Part(plan, 2, 3), someUnits(r, plan), someUnits(r, plan)} {
			want := all
			if choice != nil {
				want = make(map[int]solver.Path)
				for _, d := range choice {
					want[d] = all[d]
				}
			}
			for _, workers := range []int{1, 2, 7, 100} {
				for _, block := range []int{0, 2, 4, 16, 64} {
					var l ledger
					if err := Run(context.Background(), plan, fitFunc(trace), &l, Options{Workers: workers, Block: block, Draws: choice}); err != nil {
						t.Fatal(err)
					}
					if len(l.wrong) > 0 || len(l.paths) != len(want) || len(want) > 0 && !reflect.DeepEqual(l.paths, want) {
						t.Errorf("%v, %d workers, block %d, draws %v: %d draws of %d; %v", design, workers, block, choice, len(l.paths), len(want), l.wrong)
					}
					if block > 0 && len(l.blocks) != (len(want)+block-1)/block {
						t.Errorf("%d workers, block %d: %d blocks", workers, block, len(l.blocks))
					}
				}
			}
		}
	}
}

// traces fits every draw of a plan alone.
func traces(t *testing.T, plan Plan) map[int]solver.Path {
	t.Helper()
	all := make(map[int]solver.Path)
	for d := range plan.Number {
		got, err := trace(context.Background(), []*solver.Sample{plan.Sample(d)}, func(int) {})
		if err != nil {
			t.Fatal(err)
		}
		all[d] = got[0]
	}
	return all
}

// someUnits chooses about half of the pairs, or of the bootstrap draws.
func someUnits(r *rand.Rand, plan Plan) []int {
	draws, take := []int{}, false
	for d := range plan.Number {
		if plan.Design == Bootstrap || d%2 == 0 {
			take = r.IntN(2) == 0
		}
		if take {
			draws = append(draws, d)
		}
	}
	return draws
}

func TestOddBootstrapHasAShortLastBlock(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 7, Design: Bootstrap})
	var l ledger
	if err := Run(context.Background(), plan, fitFunc(trace), &l, Options{Workers: 2, Block: 3}); err != nil {
		t.Fatal(err)
	}
	if l.sorted() != "[[0 1 2] [3 4 5] [6]]" {
		t.Errorf("blocks %v", l.sorted())
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
		"negative limit":   {halves, Options{Limit: -1}, "limit of -1"},
		"negative risk":    {halves, Options{Risk: -time.Second}, "risk -1s"},
		"unchecked plan":   {Plan{Rows: 30, Number: 8}, Options{}, "NewPlan"},
		"beyond the plan":  {halves, Options{Draws: []int{6, 7, 8, 9}}, "draw 8: the plan has draws 0 to 7"},
		"negative draw":    {halves, Options{Draws: []int{-1, 0}}, "draw -1"},
		"twice":            {halves, Options{Draws: []int{2, 3, 2, 3}}, "draw 2 comes after draw 3"},
		"second half only": {halves, Options{Draws: []int{0, 1, 3}}, "draw 3: halves are made in pairs, and the list has one half of pair 1 only"},
		"first half only":  {halves, Options{Draws: []int{2, 4, 5}}, "one half of pair 1 only"},
		"last half only":   {halves, Options{Draws: []int{0, 1, 4}}, "one half of pair 2 only"},
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

// Blocks that are whole when another fails are kept.
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
	if l.sorted() != "[[0 1] [4 5] [6 7]]" {
		t.Errorf("kept blocks %v", l.sorted())
	}
}

// sinkFunc is a Sink made of a function.
type sinkFunc func(draws []int, paths []solver.Path) error

func (f sinkFunc) Put(draws []int, paths []solver.Path) error { return f(draws, paths) }

// A sink that fails is not asked again, nothing new is begun, and the fits
// under way are cancelled.
func TestSinkFailureStopsAndIsNotAskedAgain(t *testing.T) {
	const workers = 2
	plan := mustPlan(t, Plan{Rows: 30, Number: 400})
	var asked, after, cancelled atomic.Int32
	var failed atomic.Bool
	sink := sinkFunc(func([]int, []solver.Path) error {
		if asked.Add(1) == 6 {
			failed.Store(true)
			return errTank
		}
		return nil
	})
	fit := func(ctx context.Context, samples []*solver.Sample, _ func(int)) ([]solver.Path, error) {
		if failed.Load() {
			after.Add(1)
			<-ctx.Done() // an hour of work, unless cancelled
			cancelled.Add(1)
			return nil, ctx.Err()
		}
		return make([]solver.Path, len(samples)), nil
	}
	err := Run(context.Background(), plan, fitFunc(fit), sink, Options{Workers: workers, Block: 2})
	if !errors.Is(err, errTank) || !strings.HasPrefix(err.Error(), "resample: keeping draws ") {
		t.Errorf("error %v", err)
	}
	if asked.Load() != 6 {
		t.Errorf("the sink was asked %d times", asked.Load())
	}
	if n := after.Load(); n > workers || n != cancelled.Load() {
		t.Errorf("%d blocks were begun after the failure, %d of them cancelled", n, cancelled.Load())
	}
}

// Workers that have blocks in their hands when the sink fails do not wait for
// it for ever.
func TestFailingSinkLeavesNoWorkerWaiting(t *testing.T) {
	const workers = 3
	plan := mustPlan(t, Plan{Rows: 30, Number: 400})
	var fitted atomic.Int32
	fit := func(_ context.Context, samples []*solver.Sample, _ func(int)) ([]solver.Path, error) {
		fitted.Add(1)
		return make([]solver.Path, len(samples)), nil
	}
	sink := sinkFunc(func([]int, []solver.Path) error {
		for fitted.Load() < 2*workers+1 { // one each waits, one each is in hand
			time.Sleep(time.Millisecond)
		}
		return errTank
	})
	ended := make(chan error, 1)
	go func() {
		ended <- Run(context.Background(), plan, fitFunc(fit), sink, Options{Workers: workers, Block: 2})
	}()
	select {
	case err := <-ended:
		if !errors.Is(err, errTank) {
			t.Errorf("error %v", err)
		}
	case <-time.After(20 * time.Second):
		t.Fatal("a worker still waits for the sink")
	}
}

// A block is put as soon as it is finished, and not held back by an earlier
// one: the first block waits here until all others are in the sink.
func TestFinishedBlocksDoNotWait(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 100})
	first := plan.Sample(0)
	others := make(chan struct{})
	fit := func(_ context.Context, samples []*solver.Sample, _ func(int)) ([]solver.Path, error) {
		if sameSample(samples[0], first) {
			select {
			case <-others:
			case <-time.After(20 * time.Second):
				return nil, errors.New("finished blocks were held back")
			}
		}
		return make([]solver.Path, len(samples)), nil
	}
	var l ledger
	sink := sinkFunc(func(draws []int, paths []solver.Path) error {
		defer func() {
			if len(l.paths) == 98 {
				close(others)
			}
		}()
		return l.Put(draws, paths)
	})
	if err := Run(context.Background(), plan, fitFunc(fit), sink, Options{Workers: 2, Block: 2}); err != nil {
		t.Fatal(err)
	}
	if len(l.paths) != 100 || l.blocks[49][0] != 0 {
		t.Errorf("%d draws, the last block %v", len(l.paths), l.blocks[len(l.blocks)-1])
	}
}

// A slow sink holds the workers back: what is finished and not yet safe is
// bounded by one block for each worker, and one more in each worker's hands.
func TestUnsafeBlocksAreBounded(t *testing.T) {
	const workers = 3
	plan := mustPlan(t, Plan{Rows: 30, Number: 400})
	var fitted, put, peak atomic.Int32
	fit := func(_ context.Context, samples []*solver.Sample, _ func(int)) ([]solver.Path, error) {
		fitted.Add(1)
		return make([]solver.Path, len(samples)), nil
	}
	sink := sinkFunc(func([]int, []solver.Path) error {
		time.Sleep(200 * time.Microsecond)
		peak.Store(max(peak.Load(), fitted.Load()-put.Load()))
		put.Add(1)
		return nil
	})
	if err := Run(context.Background(), plan, fitFunc(fit), sink, Options{Workers: workers, Block: 2}); err != nil {
		t.Fatal(err)
	}
	if n := peak.Load(); n > 2*workers+1 || n < workers {
		t.Errorf("%d finished blocks waited for the sink", n)
	}
}

// The graceful stop: nothing is begun after it, what is in work is finished
// and put, and the error says how many draws there are.
func TestStopFinishesWhatIsInWork(t *testing.T) {
	const workers = 3
	plan := mustPlan(t, Plan{Rows: 30, Number: 400})
	stop := make(chan struct{})
	var begun, late atomic.Int32
	fit := func(ctx context.Context, samples []*solver.Sample, _ func(int)) ([]solver.Path, error) {
		n := begun.Add(1)
		select {
		case <-stop:
			late.Add(1)
		default:
		}
		if n == 20 {
			close(stop)
		}
		time.Sleep(2 * time.Millisecond)
		return make([]solver.Path, len(samples)), ctx.Err()
	}
	var l ledger
	err := Run(context.Background(), plan, fitFunc(fit), &l, Options{Workers: workers, Block: 2, Stop: stop})
	var stopped *StoppedError
	if !errors.As(err, &stopped) || !errors.Is(err, ErrStop) || errors.Is(err, context.Canceled) {
		t.Fatalf("error %v", err)
	}
	if n := late.Load(); n > workers-1 {
		t.Errorf("%d blocks were begun after the stop", n)
	}
	if len(l.blocks) != int(begun.Load()) || stopped.Draws != len(l.paths) || stopped.Total != 400 {
		t.Errorf("%d blocks were begun, %d are whole; the error says %d of %d draws", begun.Load(), len(l.blocks), stopped.Draws, stopped.Total)
	}
	if want := fmt.Sprintf("resample: stopped after %d of 400 draws: asked to stop", len(l.paths)); err.Error() != want {
		t.Errorf("error %q", err)
	}
}

// A stop before the first block begins nothing; one that comes when all
// blocks are in work changes nothing.
func TestStopAtTheEnds(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 4})
	stop := make(chan struct{})
	both := make(chan struct{}, 2)
	fit := func(_ context.Context, samples []*solver.Sample, _ func(int)) ([]solver.Path, error) {
		both <- struct{}{}
		<-stop
		return make([]solver.Path, len(samples)), nil
	}
	go func() {
		for len(both) < 2 {
			time.Sleep(time.Millisecond)
		}
		close(stop)
	}()
	var l ledger
	if err := Run(context.Background(), plan, fitFunc(fit), &l, Options{Workers: 2, Block: 2, Stop: stop}); err != nil || len(l.paths) != 4 {
		t.Errorf("stopped in the last blocks: %d draws, %v", len(l.paths), err)
	}
	err := Run(context.Background(), plan, fitFunc(fit), &ledger{}, Options{Workers: 2, Stop: stop})
	var stopped *StoppedError
	if !errors.As(err, &stopped) || stopped.Draws != 0 || len(both) != 2 {
		t.Errorf("stopped before the first block: %v, %d blocks begun", err, len(both)-2)
	}
}

// The second signal: the context ends what the graceful stop let go on.
func TestContextEndsWhatStopLeft(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 40})
	stop := make(chan struct{})
	ctx, cancel := context.WithCancel(context.Background())
	defer cancel()
	var once sync.Once
	fit := func(ctx context.Context, _ []*solver.Sample, _ func(int)) ([]solver.Path, error) {
		once.Do(func() { close(stop); cancel() })
		<-ctx.Done() // an hour of work, unless cancelled
		return nil, ctx.Err()
	}
	err := Run(ctx, plan, fitFunc(fit), &ledger{}, Options{Workers: 2, Stop: stop})
	if !errors.Is(err, context.Canceled) {
		t.Errorf("error %v", err)
	}
}

func TestCallerStops(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 4000})
	ctx, cancel := context.WithCancelCause(context.Background())
	defer cancel(nil)
	stop := errors.New("interrupted from the keyboard")
	var l ledger
	sink := sinkFunc(func(draws []int, paths []solver.Path) error {
		if len(l.blocks) == 10 {
			cancel(stop)
		}
		return l.Put(draws, paths)
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
	sink := sinkFunc(func([]int, []solver.Path) error { panic("no ink") })
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
	sink := sinkFunc(func(draws []int, _ []solver.Path) error {
		if draws[0] == 4 {
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
