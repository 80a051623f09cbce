package resample_test

import (
	"context"
	"crypto/sha256"
	"fmt"
	"math/rand/v2"
	"reflect"
	"sync/atomic"
	"testing"

	"holdfast/resample"
	"holdfast/solver"
)

// model is a lasso on an invented table in which three columns matter and
// neighbours are alike.
func model(t *testing.T, rows, cols int) *solver.Model {
	t.Helper()
	m, err := solver.NewModel(context.Background(), problem(rows, cols))
	if err != nil {
		t.Fatal(err)
	}
	return m
}

func problem(rows, cols int) solver.Problem {
	r := rand.New(rand.NewPCG(7, uint64(rows)))
	table := make([][]float64, cols)
	outcome := make([]float64, rows)
	p := solver.Problem{
		Centre: make([]float64, cols), Names: make([]string, cols),
		Mix: 1, Ratio: 0.9, Floor: 0.05,
	}
	for j := range table {
		table[j] = make([]float64, rows)
		sum := 0.0
		for i := range rows {
			v := r.NormFloat64()
			if j > 0 {
				v += float64(0.7 * table[j-1][i])
			}
			table[j][i], sum = v, sum+v
		}
		for i := range rows {
			table[j][i] -= sum / float64(rows)
			if j%(cols/3+1) == 0 {
				outcome[i] += table[j][i]
			}
		}
		p.Candidates = append(p.Candidates, int32(j))
	}
	for i := range outcome {
		outcome[i] += 2 * r.NormFloat64()
	}
	p.Design, p.Outcome = solver.NewDense(rows, table, nil), outcome
	return p
}

// every is a sink that keeps all paths under their numbers.
type every struct{ paths []solver.Path }

func (e *every) Put(draws []int, paths []solver.Path) error {
	e.paths = append(e.paths, make([]solver.Path, max(0, draws[len(draws)-1]+1-len(e.paths)))...)
	for i, d := range draws {
		e.paths[d] = paths[i]
	}
	return nil
}

// The whole engine: every number of every draw has the same bits, whatever
// the workers, the blocks and the neighbours in a block (DESIGN 5 and 6), on
// a wide and on a long table, without and with strata, jitter and redraws.
func TestEngineSameBitsForAnyWorkersAndBlock(t *testing.T) {
	for _, size := range [][2]int{{40, 90}, {160, 20}} {
		m := model(t, size[0], size[1])
		for _, design := range []resample.Design{resample.Halves, resample.Bootstrap} {
			base := resample.Plan{Rows: size[0], Design: design, Number: 28, Seed: 2}
			for _, p := range []resample.Plan{base, everything(base, size[1])} {
				plan, err := resample.NewPlan(p)
				if err != nil {
					t.Fatal(err)
				}
				want := alone(t, m, plan)
				for _, opt := range []resample.Options{{Workers: 1}, {Workers: 2, Block: 4}, {Workers: 7, Block: 2}, {Workers: 2, Block: 28}} {
					var got every
					if err := resample.Run(context.Background(), plan, m, &got, opt); err != nil {
						t.Fatal(err)
					}
					compare(t, plan, opt, got.paths, want)
				}
			}
		}
	}
}

// everything adds strata, jitter, and draws that are made anew to a plan.
func everything(p resample.Plan, cols int) resample.Plan {
	p.Within = make([]int32, p.Rows)
	for i := range p.Within {
		p.Within[i] = int32(i * i % 7)
	}
	p.Jitter = 0.4
	for j := range cols {
		p.Keys = append(p.Keys, fmt.Sprintf("gauge_%d", j))
	}
	p.Fit = func(s *solver.Sample) error {
		if n := s.Weight(0) + s.Weight(1) + s.Weight(2); n == 0 || n == 3 {
			return fmt.Errorf("%v of three tanks", n)
		}
		return nil
	}
	return p
}

// alone fits every draw of a plan by itself.
func alone(t *testing.T, m *solver.Model, plan resample.Plan) []solver.Path {
	t.Helper()
	var all []solver.Path
	redrawn := 0
	for d := range plan.Number {
		s, redraws, err := plan.Draw(d)
		if err != nil {
			t.Fatal(err)
		}
		paths, err := m.FitBlock(context.Background(), []*solver.Sample{s}, nil)
		if err != nil {
			t.Fatal(err)
		}
		paths[0].Redraws = redraws
		redrawn += redraws
		all = append(all, paths[0])
	}
	if (plan.Fit != nil) != (redrawn > 0) {
		t.Errorf("%d redraws: the check says little", redrawn)
	}
	return all
}

func compare(t *testing.T, plan resample.Plan, opt resample.Options, got, want []solver.Path) {
	t.Helper()
	entries := 0
	for d := range want {
		entries += len(want[d].Entries)
		if !reflect.DeepEqual(got[d], want[d]) {
			t.Errorf("%d rows, %v, %d workers, block %d: draw %d differs", plan.Rows, plan.Design, opt.Workers, opt.Block, d)
		}
	}
	if entries < 5*plan.Number {
		t.Errorf("only %d entries in %d draws: the check says little", entries, plan.Number)
	}
}

// A stop in the middle of real fits is prompt and leaves whole draws only,
// equal to those of an undisturbed run.
func TestEngineStops(t *testing.T) {
	m := model(t, 40, 90)
	plan, err := resample.NewPlan(resample.Plan{Rows: 40, Number: 400, Seed: 2})
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	defer cancel()
	var after atomic.Int32
	got := make(map[int][]solver.Path)
	sink := putter(func(draws []int, paths []solver.Path) error {
		got[draws[0]] = paths
		if len(got) == 11 {
			cancel()
		}
		return nil
	})
	progress := func(p resample.Progress) {
		if ctx.Err() != nil {
			after.Add(1)
		}
	}
	if err := resample.Run(ctx, plan, m, sink, resample.Options{Workers: 2, Block: 2, Progress: progress}); err == nil {
		t.Fatal("no error")
	}
	if len(got) < 11 || len(got) > 11+4 {
		t.Errorf("%d of 200 blocks were kept", len(got))
	}
	for first, paths := range got {
		want, err := m.FitBlock(context.Background(), []*solver.Sample{plan.Sample(first), plan.Sample(first + 1)}, nil)
		if err != nil {
			t.Fatal(err)
		}
		if !reflect.DeepEqual(paths, want) {
			t.Errorf("draws from %d differ", first)
		}
	}
	// A fit looks at the context before each request: few steps come late.
	if n := after.Load(); n > 100 {
		t.Errorf("%d reports after the stop", n)
	}
}

type putter func(draws []int, paths []solver.Path) error

func (f putter) Put(draws []int, paths []solver.Path) error { return f(draws, paths) }

// awkward fits draws whose weights and penalties are no short binary
// fractions, so that hardly any product is exact.
func awkward(t *testing.T, rows, cols int, mix float64, weighted bool, block int) []solver.Path {
	t.Helper()
	p := problem(rows, cols)
	p.Mix = mix
	p.Relative = make([]float64, cols)
	for j := range p.Relative {
		p.Relative[j] = 1 + float64(j%5)/7
	}
	if weighted {
		p.Case = make([]float64, rows)
		for i := range p.Case {
			p.Case[i] = 1 + float64(i%7)/3
		}
	}
	m, err := solver.NewModel(context.Background(), p)
	if err != nil {
		t.Fatal(err)
	}
	plan, err := resample.NewPlan(resample.Plan{Rows: rows, Number: 24, Seed: 6, Case: p.Case})
	if err != nil {
		t.Fatal(err)
	}
	var got every
	if err := resample.Run(context.Background(), plan, m, &got, resample.Options{Workers: 2, Block: block}); err != nil {
		t.Fatal(err)
	}
	return got.paths
}

// The bits of all draws of a lasso and an elastic net, with case weights and
// without, as one number. `make bits` runs this test on other instruction
// sets and holds the numbers together; in one process there is nothing to
// compare them with but themselves, from other blocks.
func TestEngineDigest(t *testing.T) {
	digests := make([]string, 2)
	for k, block := range []int{2, 12} {
		h := sha256.New()
		for _, mix := range []float64{1, 0.7} {
			for _, size := range [][2]int{{60, 130}, {400, 25}} {
				for _, weighted := range []bool{false, true} {
					fmt.Fprintf(h, "%+v", awkward(t, size[0], size[1], mix, weighted, block)) // shortest digits that tell floats apart
				}
			}
		}
		digests[k] = fmt.Sprintf("%x", h.Sum(nil))
	}
	if digests[0] != digests[1] {
		t.Error("blocks of 2 and 12 draws differ")
	}
	t.Logf("bits of all draws: %s", digests[0])
}
