package resample

import (
	"context"
	"fmt"
	"math/rand/v2"
	"reflect"
	"slices"
	"testing"
	"time"

	"holdfast/solver"
)

// DESIGN 8: at most five minutes or a tenth of the work is at risk, whichever
// is more. The numbers are worked out by hand beside each line.
func TestSizing(t *testing.T) {
	const s = time.Second
	for _, c := range []struct {
		sizing Sizing
		each   time.Duration
		want   int
		atRisk time.Duration
	}{
		{Sizing{Draws: 200, Workers: 2}, 0, 2, 0},                                                  // nothing known
		{Sizing{Draws: 200, Workers: 2}, s / 100, 16, 16 * s / 100},                                // fast: lanes bound it; a quarter of a worker's 100 is 25
		{Sizing{Draws: 200, Workers: 4}, s / 100, 12, 12 * s / 100},                                // a quarter of a worker's 50 is 12.5
		{Sizing{Draws: 200, Workers: 2}, 10 * s, 16, 160 * s},                                      // 5 min hold 30 draws of 10 s
		{Sizing{Draws: 40, Workers: 1}, 60 * s, 4, 240 * s},                                        // 5 min hold 5 minutes: 4 in pairs; a tenth of 40 min is 4 min
		{Sizing{Draws: 400, Workers: 1}, 60 * s, 16, 960 * s},                                      // a tenth of 400 min is 40 min: lanes bound it
		{Sizing{Draws: 100, Workers: 1}, 60 * s, 10, 600 * s},                                      // a tenth of 100 min
		{Sizing{Draws: 100, Workers: 2}, 60 * s, 4, 240 * s},                                       // a tenth of 50 min is 5 min too
		{Sizing{Draws: 100, Workers: 2}, 3600 * s, 4, 4 * 3600 * s},                                // a tenth of 50 h is 5 h
		{Sizing{Draws: 20, Workers: 4}, 3600 * s, 2, 2 * 3600 * s},                                 // a pair, though a tenth of 5 h is half an hour
		{Sizing{Draws: 20, Workers: 4, Design: Bootstrap}, 3600 * s, 1, 3600 * s},                  // without pairs one draw
		{Sizing{Draws: 200, Workers: 1, Risk: 30 * s}, 10 * s, 16, 160 * s},                        // a tenth of 2000 s is 200 s
		{Sizing{Draws: 60, Workers: 1, Risk: 30 * s}, 10 * s, 6, 60 * s},                           // a tenth of 600 s
		{Sizing{Draws: 60, Workers: 3, Risk: 30 * s}, 10 * s, 2, 20 * s},                           // a tenth of 200 s is 20 s, 30 s hold 3
		{Sizing{Draws: 200, Workers: 1, Limit: 5}, s / 100, 4, 4 * s / 100},                        // the solver's limit
		{Sizing{Draws: 7, Workers: 1, Design: Bootstrap}, s / 100, 2, 2 * s / 100},                 // a quarter of 7, made even
		{Sizing{Draws: 200, Workers: 1, Risk: 1}, 1, 16, 16},                                       // no overflow at a nanosecond
		{Sizing{Draws: 1 << 20, Workers: 1}, 1000 * 3600 * s, 16, time.Duration(16) * 3600000 * s}, // nor at 1000 h
	} {
		if got := c.sizing.Block(c.each); got != c.want {
			t.Errorf("%+v, %v a draw: blocks of %d, want %d", c.sizing, c.each, got, c.want)
		}
		if got := c.sizing.AtRisk(c.each); got != c.atRisk {
			t.Errorf("%+v, %v a draw: %v at risk, want %v", c.sizing, c.each, got, c.atRisk)
		}
	}
}

// What the table above says of some sizes holds of all.
func TestSizingKeepsItsLimits(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 17))
	atLimit := 0
	for range 20000 {
		s := Sizing{Design: Design(r.IntN(2)), Draws: 2 + 2*r.IntN(2000), Workers: 1 + r.IntN(64), Limit: 2 + r.IntN(15), Risk: time.Duration(1 + r.IntN(1e12))}
		each := time.Duration(1 + r.Int64N(int64(1)<<(10+r.IntN(34))))
		n := s.Block(each)
		if n < s.Unit() || n%s.Unit() != 0 || n > s.Limit && n > s.Unit() {
			t.Fatalf("%+v, %v a draw: a block of %d", s, each, n)
		}
		if n > s.Unit() && time.Duration(n)*each > max(s.Risk, time.Duration(s.Draws)*each/time.Duration(s.Workers)/10+1) {
			t.Fatalf("%+v, %v a draw: a block of %d takes %v", s, each, n, time.Duration(n)*each)
		}
		if n == s.Limit {
			atLimit++
		}
	}
	if atLimit < 100 {
		t.Errorf("only %d sizes came to the solver's limit: the check says little", atLimit)
	}
}

// sizesOf runs a plan with one worker and a clock that moves only while draws
// are fitted, by cost(draw), and returns the sizes of the blocks in order.
func sizesOf(t *testing.T, plan Plan, opt Options, cost func(done int) time.Duration) (sizes []int, longest time.Duration) {
	t.Helper()
	var now time.Time // of the clock
	done := 0
	fit := func(_ context.Context, samples []*solver.Sample, _ func(int)) ([]solver.Path, error) {
		start := now
		for range samples {
			now = now.Add(cost(done))
			done++
		}
		sizes = append(sizes, len(samples))
		longest = max(longest, now.Sub(start))
		return make([]solver.Path, len(samples)), nil
	}
	opt.Workers, opt.clock = 1, func() time.Time { return now }
	if err := Run(context.Background(), plan, fitFunc(fit), &ledger{}, opt); err != nil {
		t.Fatal(err)
	}
	return sizes, longest
}

// The first block is a pair; the next ones follow the clock, and no block
// takes longer than is allowed where draws take equal time.
func TestBlocksFollowTheClock(t *testing.T) {
	const s = time.Second
	always := func(d time.Duration) func(int) time.Duration { return func(int) time.Duration { return d } }
	for _, c := range []struct {
		number int
		opt    Options
		cost   func(int) time.Duration
		want   []int
	}{
		{40, Options{}, always(s / 100), []int{2, 10, 10, 10, 8}},                        // a quarter of 40
		{20, Options{}, always(60 * s), []int{2, 4, 4, 4, 4, 2}},                         // 5 min hold 5
		{20, Options{}, always(3600 * s), []int{2, 2, 2, 2, 2, 2, 2, 2, 2, 2}},           // a pair each
		{40, Options{Limit: 6}, always(s / 100), []int{2, 6, 6, 6, 6, 6, 6, 2}},          // the solver's limit
		{40, Options{Block: 16}, always(3600 * s), []int{16, 16, 8}},                     // a size that was asked for
		{40, Options{Draws: upTo(4, 20)}, always(s / 100), []int{2, 4, 4, 4, 2}},         // a quarter of 16
		{24, Options{Risk: 3 * s}, always(s), []int{2, 2, 2, 2, 2, 2, 2, 2, 2, 2, 2, 2}}, // a tenth of 24 s is less than 3 s, which hold 3
	} {
		got, _ := sizesOf(t, mustPlan(t, Plan{Rows: 30, Number: c.number}), c.opt, c.cost)
		if !reflect.DeepEqual(got, c.want) {
			t.Errorf("%d draws, %+v: blocks of %v, want %v", c.number, c.opt, got, c.want)
		}
	}
}

// Draws that become slow make the blocks small again at once; when they are
// fast again the blocks grow, once the slow ones are forgotten.
func TestBlocksShrinkWhenDrawsBecomeSlow(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 400})
	cost := func(done int) time.Duration {
		if done >= 100 && done < 150 {
			return 100 * time.Second
		}
		return time.Second / 100
	}
	sizes, longest := sizesOf(t, plan, Options{}, cost)
	done := 0
	for i, n := range sizes {
		switch {
		case i > 0 && done < 100 && n != 16, done >= 200 && done < 380 && n != 16:
			t.Errorf("from draw %d, where draws are fast, a block of %d", done, n)
		case done >= 120 && done < 150 && n > 16:
			t.Errorf("from draw %d, where draws are slow, a block of %d", done, n)
		}
		done += n
	}
	// A tenth of the whole run at 100 s a draw is 4000 s, more than 16 such
	// draws take: the limit is then the solver's.
	if longest > 1600*time.Second {
		t.Errorf("a block took %v", longest)
	}
	few := mustPlan(t, Plan{Rows: 30, Number: 80})
	sizes, longest = sizesOf(t, few, Options{}, func(done int) time.Duration {
		if done < 20 {
			return time.Second
		}
		return 75 * time.Second
	})
	// 80 draws of 75 s are 6000 s, a tenth is 600 s: 8 draws. Only the block
	// that met the change, of 16, may take longer.
	slow := slices.IndexFunc(sizes, func(n int) bool { return n == 8 })
	if slow < 0 || slow > 3 || slices.Max(sizes[slow:]) > 8 {
		t.Errorf("blocks of %v, the longest took %v", sizes, longest)
	}
}

// With several workers each begins with a pair.
func TestEveryWorkerBeginsWithAPair(t *testing.T) {
	const workers = 4
	plan := mustPlan(t, Plan{Rows: 30, Number: 400})
	sizes := make(chan int, 400)
	all := make(chan struct{})
	fit := func(_ context.Context, samples []*solver.Sample, _ func(int)) ([]solver.Path, error) {
		sizes <- len(samples)
		if len(sizes) == workers {
			close(all)
		}
		<-all // until every worker has its first block
		return make([]solver.Path, len(samples)), nil
	}
	if err := Run(context.Background(), plan, fitFunc(fit), &ledger{}, Options{Workers: workers}); err != nil {
		t.Fatal(err)
	}
	close(sizes)
	i, grown := 0, false
	for n := range sizes {
		if i < workers && n != 2 {
			t.Errorf("block %d has %d draws", i, n)
		}
		grown = grown || n > 2
		i++
	}
	if !grown {
		t.Error("no block grew")
	}
}

// Every draw is in one part, and pairs stay together.
func TestParts(t *testing.T) {
	for _, design := range []Design{Halves, Bootstrap} {
		plan := mustPlan(t, Plan{Rows: 30, Number: 26, Design: design})
		for _, parts := range []int{1, 2, 3, 13, 40} {
			seen := make(map[int]int)
			for part := range parts {
				draws := Part(plan, part, parts)
				if err := plan.checkDraws(draws); err != nil || draws == nil {
					t.Errorf("%v, part %d of %d: %v, %v", design, part, parts, draws, err)
				}
				for _, d := range draws {
					seen[d] = part
				}
			}
			for d := range 26 {
				want := d % parts
				if design == Halves {
					want = d / 2 % parts
				}
				if got, ok := seen[d]; !ok || got != want {
					t.Errorf("%v, %d parts: draw %d is in part %d, want %d", design, parts, d, got, want)
				}
			}
		}
	}
	for _, bad := range [][2]int{{-1, 2}, {2, 2}, {0, 0}} {
		if !panics(func() { Part(mustPlan(t, Plan{Rows: 30, Number: 4}), bad[0], bad[1]) }) {
			t.Errorf("part %d of %d was taken", bad[0], bad[1])
		}
	}
}

func panics(f func()) (did bool) {
	defer func() { did = recover() != nil }()
	f()
	return false
}

// The parts of a run together are the run, to the bit.
func TestPartsTogetherAreTheWhole(t *testing.T) {
	plan := mustPlan(t, Plan{Rows: 30, Number: 44, Seed: 3})
	var whole, together ledger
	if err := Run(context.Background(), plan, fitFunc(trace), &whole, Options{Workers: 2}); err != nil {
		t.Fatal(err)
	}
	for part := range 3 {
		if err := Run(context.Background(), plan, fitFunc(trace), &together, Options{Workers: 1 + part, Draws: Part(plan, part, 3)}); err != nil {
			t.Fatal(err)
		}
	}
	if len(together.wrong) > 0 || !reflect.DeepEqual(whole.paths, together.paths) {
		t.Errorf("%d and %d draws; %v", len(whole.paths), len(together.paths), together.wrong)
	}
}

func ExampleSizing() {
	s := Sizing{Draws: 200, Workers: 4}
	fmt.Println(s.Block(10*time.Second), s.AtRisk(10*time.Second))
	// Output: 12 2m0s
}

// Near the end the blocks shrink, so that no worker is idle while another has
// all that is left.
func TestLastBlocksAreShared(t *testing.T) {
	d := newDealer(upTo(0, 20), 0, Sizing{Draws: 400, Workers: 4})
	d.took(2, time.Millisecond)
	var sizes []int
	for block := d.take(); len(block) > 0; block = d.take() {
		sizes = append(sizes, len(block))
	}
	if fmt.Sprint(sizes) != "[6 4 4 2 2 2]" { // 10, 7, 5, 3, 2 and 1 pairs for 4 workers
		t.Errorf("20 draws left for 4 workers: blocks of %v", sizes)
	}
}
