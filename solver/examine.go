package solver

import (
	"cmp"
	"context"
	"math"
	"runtime"
	"slices"

	"golang.org/x/sync/errgroup"

	"holdfast/solver/kernel"
)

// Examination is what the candidates of a table are to each other, free of the
// outcome.
type Examination struct {
	Constant []int32 // design columns that do not vary over the rows used, in the order asked
	Copies   []Copy  // design columns that equal an earlier one up to shift and scale, in the order asked
}

// coincide is how close to 1 a correlation over the table must be for two
// columns to be the same predictor (DESIGN 4).
const coincide = 1e-12

// Copy says that column Col equals the earlier column Of up to shift and scale
// (|r| >= 1 - 1e-12, missing in the same rows).
type Copy struct{ Col, Of int32 }

// Examine finds constant columns and copies among the candidates. It takes
// time in proportion to the table: columns are projected on two fixed
// directions, and only those with equal projections are compared in full.
func Examine(ctx context.Context, d Design, candidates []int32) (*Examination, error) {
	rows, _ := d.Dims()
	e := &examiner{d: d, all: drawn{total: float64(rows)}, candidates: candidates, marks: make([]mark, len(candidates))}
	e.all.rows = make([]int32, rows)
	for i := range e.all.rows {
		e.all.rows[i] = int32(i)
	}
	for k := range e.probe {
		e.probe[k] = probe(rows, uint64(k+1))
	}
	if err := e.project(ctx); err != nil {
		return nil, err
	}
	out := &Examination{}
	for i, m := range e.marks {
		if m.constant {
			out.Constant = append(out.Constant, candidates[i])
		}
	}
	out.Copies = e.copies()
	return out, ctx.Err()
}

type examiner struct {
	d          Design
	all        drawn
	candidates []int32
	probe      [2][]float64
	marks      []mark
}

// mark is a column's projections, in units of its own length and with the
// sign of the first one taken out.
type mark struct {
	constant bool
	at       [2]float64
}

// probe is a fixed direction of n numbers in [-1,1): a multiplicative
// generator (L'Ecuyer 1999, table 2, modulus 2^64) suffices.
func probe(n int, key uint64) []float64 {
	v := make([]float64, n)
	state := key*0x9e3779b97f4a7c15 | 1
	for i := range v {
		state *= 3935559000370003845
		v[i] = float64(int64(state)) / (1 << 63)
	}
	return v
}

func (e *examiner) project(ctx context.Context) error {
	workers := runtime.GOMAXPROCS(0)
	g, ctx := errgroup.WithContext(ctx)
	for w := range workers {
		g.Go(func() error {
			buffer := make([]float64, len(e.all.rows))
			for i := w * len(e.marks) / workers; i < (w+1)*len(e.marks)/workers; i++ {
				if err := ctx.Err(); err != nil {
					return err
				}
				e.marks[i] = e.mark(e.candidates[i], buffer)
			}
			return nil
		})
	}
	return g.Wait()
}

func (e *examiner) standard(col int32, buffer []float64) column {
	x := e.d.Panel([]int32{col}, 0, len(e.all.rows), nil)[0]
	return e.all.gather(x, e.d.Holes(col), buffer)
}

func (e *examiner) mark(col int32, buffer []float64) mark {
	x := e.d.Panel([]int32{col}, 0, len(e.all.rows), nil)[0]
	c := e.standard(col, buffer)
	if c.sd == 0 || !e.all.varies(x, e.d.Holes(col)) {
		return mark{constant: true}
	}
	var m mark
	for k, p := range e.probe {
		m.at[k] = kernel.Dot(c.values, p) / (c.sd * math.Sqrt(e.all.total))
	}
	if m.at[0] < 0 {
		m.at[0], m.at[1] = -m.at[0], -m.at[1]
	}
	return m
}

// nearMark is how far the projections of copies may lie apart: two columns of
// length 1 with |r| >= 1 - 1e-12 are within 1.5e-6, times the probes' length
// per root row (0.58), with room for rounding.
const nearMark = 2e-6

func (e *examiner) copies() []Copy {
	order := make([]int, 0, len(e.marks))
	for i, m := range e.marks {
		if !m.constant {
			order = append(order, i)
		}
	}
	slices.SortFunc(order, func(a, b int) int {
		if c := cmp.Compare(e.marks[a].at[0], e.marks[b].at[0]); c != 0 {
			return c
		}
		return a - b
	})
	of := make(map[int]int)
	reach := nearMark * math.Sqrt(e.all.total)
	for k, i := range order {
		for _, j := range order[k+1:] {
			if e.marks[j].at[0]-e.marks[i].at[0] > reach {
				break
			}
			e.pair(i, j, reach, of)
		}
	}
	var out []Copy
	for i := range e.marks {
		if first, ok := of[i]; ok {
			for next, more := of[first]; more; next, more = of[first] {
				first = next
			}
			out = append(out, Copy{e.candidates[i], e.candidates[first]})
		}
	}
	return out
}

// pair notes the later of two columns as a copy of the earlier, or of the one
// that the earlier is a copy of.
func (e *examiner) pair(i, j int, reach float64, of map[int]int) {
	a, b := e.marks[i].at, e.marks[j].at
	if math.Abs(a[1]-b[1]) > reach && math.Abs(a[1]+b[1]) > reach {
		return
	}
	first, later := min(i, j), max(i, j)
	if known, ok := of[later]; ok && known <= first {
		return
	}
	if !e.equal(e.candidates[first], e.candidates[later]) {
		return
	}
	for f, ok := of[first]; ok; f, ok = of[first] {
		first = f
	}
	if known, ok := of[later]; ok && known < first {
		of[first] = known
		return
	}
	if first != later {
		of[later] = first
	}
}

func (e *examiner) equal(a, b int32) bool {
	if !slices.Equal(e.d.Holes(a), e.d.Holes(b)) {
		return false
	}
	x, y := e.standard(a, nil), e.standard(b, nil)
	r := kernel.Dot(x.values, y.values) / (x.sd * y.sd * e.all.total)
	return math.Abs(r) >= 1-coincide
}
