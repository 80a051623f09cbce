package forecast_test

import (
	"context"
	"errors"
	"math"
	"sync"
	"testing"
	"time"

	"holdfast/resample"
	"holdfast/resample/forecast"
	"holdfast/solver"
)

// machine is an invented one whose clock moves only when draws are fitted:
// a draw takes alone; the first block takes once beside. taken is what other programs
// take of the processors.
type machine struct {
	mu             sync.Mutex
	now, processor time.Duration
	alone, once    time.Duration
	taken          float64
	blocks         []int
	fails          error
}

// FitBlock lets the clock jump by what the block takes.
func (m *machine) FitBlock(_ context.Context, samples []*solver.Sample, _ func(int)) ([]solver.Path, error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	if m.fails != nil {
		return nil, m.fails
	}
	m.blocks = append(m.blocks, len(samples))
	spent := time.Duration(len(samples))*m.alone + m.once
	m.once = 0
	m.now += spent
	m.processor += time.Duration(float64(spent) * (1 - m.taken))
	return make([]solver.Path, len(samples)), nil
}

func (m *machine) clock() forecast.Clock {
	return forecast.Clock{
		Now: func() time.Time {
			m.mu.Lock()
			defer m.mu.Unlock()
			return time.Unix(0, 0).Add(m.now)
		},
		Processor: func() (time.Duration, bool) {
			m.mu.Lock()
			defer m.mu.Unlock()
			return m.processor, true
		},
	}
}

func planOf(t *testing.T, draws int) resample.Plan {
	t.Helper()
	p, err := resample.NewPlan(resample.Plan{Rows: 40, Number: draws, Seed: 1})
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func blockOf(n int) func(time.Duration) int { return func(time.Duration) int { return n } }

// With one worker a machine without moods is foretold exactly, what is done
// once included.
func TestWallOfOneWorker(t *testing.T) {
	m := &machine{alone: 50 * time.Millisecond, once: 300 * time.Millisecond}
	timing, err := forecast.Time(t.Context(), planOf(t, 100), m, forecast.Options{
		Workers: 1, Block: blockOf(8), Limit: time.Minute, Clock: m.clock(),
	})
	if err != nil {
		t.Fatal(err)
	}
	if timing.Once() != 300*time.Millisecond || timing.PerDraw(1) != 50*time.Millisecond {
		t.Errorf("once %v, per draw %v", timing.Once(), timing.PerDraw(1))
	}
	if got, want := timing.Wall(100, 1), 300*time.Millisecond+100*50*time.Millisecond; got != want {
		t.Errorf("100 draws: %v, want %v", got, want)
	}
	if len(timing.Paths) < 4 || timing.Busiest().Share() != 1 {
		t.Errorf("%d paths, share %v", len(timing.Paths), timing.Busiest().Share())
	}
}

// Where a draw takes longer than there is time for, the first pair is all
// that is fitted, and nothing is said to be measured that was not.
func TestSlowDraws(t *testing.T) {
	m := &machine{alone: 10 * time.Second}
	timing, err := forecast.Time(t.Context(), planOf(t, 100), m, forecast.Options{
		Workers: 4, Block: blockOf(16), Limit: 30 * time.Second, Clock: m.clock(),
	})
	if err != nil {
		t.Fatal(err)
	}
	if len(m.blocks) != 1 || m.blocks[0] != 2 || timing.Measured(4) || !timing.Measured(1) {
		t.Errorf("blocks %v, 4 workers measured: %v", m.blocks, timing.Measured(4))
	}
	if got := timing.Wall(100, 1); got != 1000*time.Second {
		t.Errorf("100 draws: %v, want 1000s", got)
	}
}

// Blocks shrink to what there is time for, in whole pairs, and the rounds
// keep to the limit but for their last.
func TestBlocksWithinTheLimit(t *testing.T) {
	m := &machine{alone: time.Second}
	timing, err := forecast.Time(t.Context(), planOf(t, 100), m, forecast.Options{
		Workers: 1, Block: blockOf(16), Limit: 20 * time.Second, Clock: m.clock(),
	})
	if err != nil {
		t.Fatal(err)
	}
	if timing.Block%2 != 0 || timing.Block < 2 || timing.Block > 8 || m.now > 21*time.Second {
		t.Errorf("blocks of %d draws, %v in all", timing.Block, m.now)
	}
}

// A busy machine is seen: other programs had a third of the processors.
func TestShareOfABusyMachine(t *testing.T) {
	m := &machine{alone: 100 * time.Millisecond, taken: 1. / 3}
	timing, err := forecast.Time(t.Context(), planOf(t, 100), m, forecast.Options{
		Workers: 1, Block: blockOf(4), Limit: time.Minute, Clock: m.clock(),
	})
	if err != nil {
		t.Fatal(err)
	}
	if got := timing.Busiest().Share(); math.Abs(got-2./3) > 1e-6 {
		t.Errorf("share %v, want 2/3", got)
	}
}

// Several workers fit at the same time: what four of them take together is timed
// and not four times what one takes.
func TestWorkersAtTheSameTime(t *testing.T) {
	timing, err := forecast.Time(t.Context(), planOf(t, 64), nap(10*time.Millisecond), forecast.Options{
		Workers: 4, Block: blockOf(4), Limit: 2 * time.Second,
	})
	if err != nil {
		t.Fatal(err)
	}
	if r := timing.Together; r.Workers != 4 || r.Draws%16 != 0 || r.Draws == 0 || r.Wall > r.Busy/2 {
		t.Errorf("together: %+v", r)
	}
	if !timing.Measured(1) || !timing.Measured(4) || timing.Measured(2) {
		t.Error("one and four workers were timed, and no others")
	}
	if one, four := timing.Wall(64, 1), timing.Wall(64, 4); four > one/2 {
		t.Errorf("64 draws: %v with one worker, %v with four", one, four)
	}
}

// nap is a fitter that sleeps, so that any number fit at the same time.
type nap time.Duration

func (n nap) FitBlock(_ context.Context, samples []*solver.Sample, _ func(int)) ([]solver.Path, error) {
	time.Sleep(time.Duration(n) * time.Duration(len(samples)))
	return make([]solver.Path, len(samples)), nil
}

// A failure while timing is the caller's to see.
func TestFailureWhileTiming(t *testing.T) {
	m := &machine{fails: errors.New("no such row")}
	if _, err := forecast.Time(t.Context(), planOf(t, 10), m, forecast.Options{
		Workers: 1, Block: blockOf(2), Limit: time.Minute, Clock: m.clock(),
	}); !errors.Is(err, m.fails) {
		t.Errorf("%v", err)
	}
}

// What was not timed is foretold for free processors: a machine whose other work
// took half of the time of five workers tells the truth for five, and for nine
// goes by the processor time.
func TestPerDrawOfABusyMachine(t *testing.T) {
	alone := forecast.Round{Workers: 1, Draws: 10, Busy: time.Second, Processor: time.Second}
	together := forecast.Round{Workers: 5, Draws: 10, Busy: 2800 * time.Millisecond, Processor: 1400 * time.Millisecond}
	timing := forecast.Timing{First: alone, Alone: alone, Together: together}
	for workers, want := range map[int]time.Duration{1: 100, 5: 280, 9: 180} {
		if got := timing.PerDraw(workers); got != want*time.Millisecond {
			t.Errorf("%d workers: %v, want %d ms", workers, got, int(want))
		}
	}
}

// Workers that share what is slow gain less than their number: two points of
// a machine where w workers take alone + (w-1)*crowd per draw give it at any
// other w. One where the measured pair is faster together is not promised to
// be faster still.
func TestPerDrawBetweenAndBeyond(t *testing.T) {
	round := func(workers int, perDraw time.Duration) forecast.Round {
		return forecast.Round{Workers: workers, Draws: 10, Busy: 10 * perDraw, Wall: time.Second}
	}
	timing := forecast.Timing{
		First: forecast.Round{Workers: 1, Draws: 2, Busy: 200 * time.Millisecond}, Alone: round(1, 100*time.Millisecond), Together: round(5, 140*time.Millisecond),
	}
	for workers, want := range map[int]time.Duration{1: 100, 3: 120, 5: 140, 9: 180} {
		if got := timing.PerDraw(workers); got != want*time.Millisecond {
			t.Errorf("%d workers: %v, want %v ms", workers, got, int(want))
		}
	}
	if got, want := timing.Wall(100, 5), 10*2*140*time.Millisecond; got != want {
		t.Errorf("100 draws, 5 workers: %v, want %v", got, want)
	}
	timing.Together = round(5, 90*time.Millisecond)
	if got := timing.PerDraw(9); got != 100*time.Millisecond {
		t.Errorf("faster together: %v, want 100ms", got)
	}
}

// The clock of this machine: a real fitter that spins is charged about what
// it spins.
func TestSystemClock(t *testing.T) {
	timing, err := forecast.Time(t.Context(), planOf(t, 10), spin(20*time.Millisecond), forecast.Options{
		Workers: 1, Block: blockOf(2), Limit: 300 * time.Millisecond,
	})
	if err != nil {
		t.Fatal(err)
	}
	if got := timing.PerDraw(1); got < 20*time.Millisecond {
		t.Errorf("a draw that spins for 20 ms was timed as %v", got)
	}
	if r := timing.Busiest(); r.Processor <= 0 || r.Share() <= 0 {
		t.Errorf("no processor time: %+v", r)
	}
}

type spin time.Duration

func (s spin) FitBlock(_ context.Context, samples []*solver.Sample, _ func(int)) ([]solver.Path, error) {
	for range samples {
		for start := time.Now(); time.Since(start) < time.Duration(s); {
		}
	}
	return make([]solver.Path, len(samples)), nil
}

func TestParts(t *testing.T) {
	for _, c := range []struct {
		draws, fixed time.Duration
		units, want  int
		why          string
	}{
		{time.Hour, time.Second, 100, 1, "a night is long enough"},
		{10 * time.Hour, time.Minute, 100, 3, "4 hours at most"},
		{100 * time.Hour, 2 * time.Hour, 100, 5, "each part works ten times longer than it reads"},
		{1000 * time.Hour, 0, 10, 10, "a pair is not divided"},
		{0, time.Hour, 1, 1, "there is always one"},
	} {
		if got := forecast.Parts(c.draws, c.fixed, c.units); got != c.want {
			t.Errorf("%v, fixed %v, %d units: %d parts, want %d (%s)", c.draws, c.fixed, c.units, got, c.want, c.why)
		}
	}
}

// What is timed is what a worker of the run does: draws are made anew where they
// cannot be fitted, and those that still cannot are not fitted.
func TestUnfittableDraws(t *testing.T) {
	m := &machine{alone: 50 * time.Millisecond}
	plan := planOf(t, 100)
	plan.Fit = func(s *solver.Sample) error {
		if s.Rows[0]&1 != 0 {
			return errors.New("one class only") // 40 rows: one half of each pair
		}
		return nil
	}
	timing, err := forecast.Time(t.Context(), plan, m, forecast.Options{
		Workers: 1, Block: blockOf(8), Limit: time.Minute, Clock: m.clock(),
	})
	if err != nil {
		t.Fatal(err)
	}
	fitted := 0
	for _, n := range m.blocks {
		fitted += n
	}
	refused := 0
	for _, p := range timing.Paths {
		if p.Redraws != resample.MaxRedraws {
			t.Errorf("%d redraws", p.Redraws)
		}
		if p.Stop == solver.StopUncertified {
			refused++
		}
	}
	if fitted != refused || 2*fitted != len(timing.Paths) {
		t.Errorf("%d fitted and %d refused of %d draws", fitted, refused, len(timing.Paths))
	}
	if got, want := timing.Wall(100, 1), 50*50*time.Millisecond; got != want {
		t.Errorf("100 draws: %v, want %v", got, want)
	}
}
