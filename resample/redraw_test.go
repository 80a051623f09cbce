package resample

import (
	"context"
	"errors"
	"fmt"
	"math/rand/v2"
	"reflect"
	"slices"
	"strings"
	"sync/atomic"
	"testing"

	"holdfast/solver"
)

// hold refuses a draw that holds fewer than so many of the rows below edge: a
// stand-in for events.
func hold(least, edge int) func(*solver.Sample) error {
	return func(s *solver.Sample) error {
		n := 0
		for row, count := range Drawn(s) {
			if row < edge {
				n += count
			}
		}
		if n < least {
			return fmt.Errorf("%d events: at least %d are needed", n, least)
		}
		return nil
	}
}

// A pair is redrawn as a whole until both halves can be fitted: the pair is
// that of the first attempt that both pass, and no other.
func TestPairsAreRedrawnAsAWhole(t *testing.T) {
	fit := hold(3, 8)
	free := mustPlan(t, Plan{Rows: 30, Number: 400, Seed: 6, Jitter: 0.5, Keys: gauges(4)})
	bound := free
	bound.Fit = fit
	redrawn, largest := 0, 0
	for k := range 200 {
		want := 0
		for attempt := free.attempt(k, 0); fit(attempt[0]) != nil || fit(attempt[1]) != nil; attempt = free.attempt(k, uint8(want)) {
			want++
		}
		rows := free.attempt(k, uint8(want))
		for half := range 2 {
			s, redraws, err := bound.Draw(2*k + half)
			if err != nil || redraws != want || !sameSample(s, rows[half]) || !slices.Equal(s.Left.Rows, rows[1-half].Rows) {
				t.Fatalf("draw %d: %d redraws (want %d), error %v", 2*k+half, redraws, want, err)
			}
			if !slices.Equal(s.Jitter, free.Sample(2*k+half).Jitter) {
				t.Errorf("draw %d: another W after a redraw", 2*k+half)
			}
		}
		if want > 0 {
			redrawn, largest = redrawn+1, max(largest, want)
		}
	}
	if redrawn < 20 || redrawn > 180 || largest < 2 {
		t.Errorf("%d of 200 pairs redrawn, at most %d times: the check says little", redrawn, largest)
	}
}

// Successive attempts share nothing: both halves are new.
func TestBothHalvesAreNew(t *testing.T) {
	p := mustPlan(t, Plan{Rows: 40, Number: 2})
	for attempt := range uint8(MaxRedraws) {
		before, after := p.attempt(0, attempt), p.attempt(0, attempt+1)
		for half := range 2 {
			for other := range 2 {
				if slices.Equal(before[half].Rows, after[other].Rows) {
					t.Errorf("attempt %d keeps a half", attempt+1)
				}
			}
		}
	}
}

// Never more than 20 redraws, and each half is asked about once in an attempt.
func TestTwentyRedrawsAtMost(t *testing.T) {
	for design, each := range map[Design]int32{Halves: 2, Bootstrap: 1} {
		var asked atomic.Int32
		p := mustPlan(t, Plan{Rows: 20, Number: 2, Design: design})
		p.Fit = func(*solver.Sample) error { asked.Add(1); return errors.New("no events") }
		s, redraws, err := p.Draw(1)
		if redraws != 20 || err == nil || err.Error() != "no events" || asked.Load() != 21*each {
			t.Errorf("%v: %d redraws, error %v, asked %d times", design, redraws, err, asked.Load())
		}
		if s == nil || s.Len() == 0 {
			t.Errorf("%v: no sample of the last attempt", design)
		}
	}
}

// A redrawn pair is an ordinary pair given that both halves pass: of eight rows
// the three marked must not all be in one half. Of the 70 ordered pairs those
// with 1 or 2 of them in the first half pass: 3*C(5,3) + 3*C(5,2) = 60, all as
// likely.
func TestRedrawnPairsAreAsLikely(t *testing.T) {
	p := mustPlan(t, Plan{Rows: 8, Number: 2, Seed: 1})
	p.Fit = hold(1, 3)
	if prob := passing(p.draw); prob < rare {
		t.Errorf("p = %.2g", prob)
	}
	// Mending a refused pair, by one row exchanged, favours some.
	mended := func(unit int) drawn {
		d := drawn{samples: p.attempt(unit, 0)}
		for half, s := range d.samples {
			if p.Fit(s) != nil {
				give, take := rowsOf(d.samples[1-half])[0], rowsOf(s)[0]
				s.Rows[0] ^= 1<<give | 1<<take
				d.samples[1-half].Rows[0] ^= 1<<give | 1<<take
			}
		}
		return d
	}
	if prob := passing(mended); prob > caught {
		t.Errorf("mended pairs: p = %.2g, the check did not see it", prob)
	}
}

// passing is the probability of the pairs seen if all 60 are as likely.
func passing(draw func(unit int) drawn) float64 {
	count := map[uint64]float64{}
	for k := range draws {
		count[draw(k).samples[0].Rows[0]]++
	}
	return evenly(count, 60)
}

// Redraws do not depend on workers, blocks, parts, nor on the order of asking,
// and are written into the paths.
func TestRedrawsAreTheSameEverywhere(t *testing.T) {
	for design, least := range map[Design]int{Halves: 4, Bootstrap: 8} {
		codes := mixedStrata(rand.New(rand.NewPCG(1, 1)), 12, 13, 5)
		plan := mustPlan(t, Plan{Rows: 30, Number: 60, Seed: 4, Design: design, Within: codes, Jitter: 0.5, Keys: gauges(3)})
		plan.Fit = hold(least, 10)
		want := make(map[int]solver.Path)
		redrawn := 0
		for d := plan.Number - 1; d >= 0; d-- {
			s, redraws, err := plan.Draw(d)
			if err != nil {
				t.Fatal(err)
			}
			paths, _ := trace(context.Background(), []*solver.Sample{s}, func(int) {})
			paths[0].Redraws = redraws
			want[d] = paths[0]
			redrawn += min(redraws, 1)
		}
		if redrawn < 5 || redrawn == plan.Number {
			t.Errorf("%v: %d of %d draws were redrawn: the check says little", design, redrawn, plan.Number)
		}
		for _, parts := range []int{1, 3} {
			for _, opt := range []Options{{Workers: 1}, {Workers: 2, Block: 4}, {Workers: 7, Block: 2}, {Workers: 3, Block: 64}} {
				var l ledger
				for part := range parts {
					opt.Draws = Part(plan, part, parts)
					if err := Run(context.Background(), plan, fitFunc(trace), &l, opt); err != nil {
						t.Fatal(err)
					}
				}
				if len(l.wrong) > 0 || !reflect.DeepEqual(l.paths, want) {
					t.Errorf("%v, %d parts, %d workers, block %d: draws differ; %v", design, parts, opt.Workers, opt.Block, l.wrong)
				}
			}
		}
	}
}

// A draw that cannot be fitted has a path without steps that says why; the
// fitter sees the others only, its partner among them.
func TestUnfittableDrawsAreSaid(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 8})
	// Row 0 is always drawn, 30 being even: one half of every pair is refused.
	plan.Fit = func(s *solver.Sample) error {
		if s.Rows[0]&1 != 0 {
			return errors.New("one class only")
		}
		return nil
	}
	var l ledger
	seen := 0
	fit := func(ctx context.Context, samples []*solver.Sample, progress func(int)) ([]solver.Path, error) {
		for _, s := range samples {
			seen++
			if s.Rows[0]&1 != 0 {
				t.Error("the fitter got a draw that cannot be fitted")
			}
		}
		return trace(ctx, samples, progress)
	}
	if err := Run(context.Background(), plan, fitFunc(fit), &l, Options{Workers: 1, Block: 4}); err != nil {
		t.Fatal(err)
	}
	if seen != 4 || len(l.paths) != 8 {
		t.Errorf("%d of 8 draws fitted, %d kept", seen, len(l.paths))
	}
	for d := range 8 {
		p := l.paths[d]
		s, _, refused := plan.Draw(d)
		if p.Redraws != MaxRedraws {
			t.Errorf("draw %d: %d redraws", d, p.Redraws)
		}
		if refused == nil {
			if p.Entries[0].Candidate != int32(rowsOf(s)[0]) || p.Why != "" {
				t.Errorf("draw %d: path %+v", d, p)
			}
			continue
		}
		if p.Last >= p.First || p.Stop != solver.StopUncertified || p.Why != "one class only" || p.Entries != nil {
			t.Errorf("draw %d: path %+v", d, p)
		}
	}
	if err := plan.Check(); err == nil || !strings.Contains(err.Error(), "105 pairs of halves") || !strings.HasSuffix(err.Error(), "one class only") {
		t.Errorf("Check: %v", err)
	}
}

// A block of which nothing can be fitted does not trouble the fitter.
func TestNothingToFit(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 8, Fit: func(*solver.Sample) error { return errors.New("no events") }})
	fit := func(context.Context, []*solver.Sample, func(int)) ([]solver.Path, error) {
		return nil, errors.New("asked")
	}
	var l ledger
	if err := Run(context.Background(), plan, fitFunc(fit), &l, Options{Workers: 2}); err != nil || len(l.paths) != 8 {
		t.Errorf("%d draws, %v", len(l.paths), err)
	}
}

// A panic of Fit names the draws, like one of the fitter.
func TestPanicInFit(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 2, Fit: func(*solver.Sample) error { panic("no such column") }})
	var p *PanicError
	err := Run(context.Background(), plan, fitFunc(trace), &ledger{}, Options{Workers: 1})
	if !errors.As(err, &p) || !strings.Contains(err.Error(), "draws 0 to 1") {
		t.Errorf("error %v", err)
	}
}

func TestCheck(t *testing.T) {
	if err := (Plan{Rows: 30, Number: 2}).Check(); err == nil {
		t.Error("a plan that did not come from NewPlan passes")
	}
	// Nine events never make five in both halves; ten do, if seldom.
	for _, c := range []struct {
		design Design
		events int
		says   string
	}{
		{Halves, 9, "105 pairs of halves"}, {Halves, 10, ""}, {Halves, 30, ""},
		{Bootstrap, 0, "105 bootstrap draws"}, {Bootstrap, 4, ""},
	} {
		asked := 0
		p := mustPlan(t, Plan{Rows: 30, Number: 4, Design: c.design})
		p.Fit = func(s *solver.Sample) error { asked++; return hold(5, c.events)(s) }
		err := p.Check()
		switch {
		case c.says == "" && err != nil:
			t.Errorf("%v, %d events: %v", c.design, c.events, err)
		case c.says != "" && (err == nil || !strings.Contains(err.Error(), c.says) || !strings.Contains(err.Error(), "at least 5")):
			t.Errorf("%v, %d events: %v", c.design, c.events, err)
		case c.events == 30 && asked != 2:
			t.Errorf("asked %d times where everything can be fitted", asked)
		}
	}
}
