package solver

import (
	"context"
	"errors"
	"fmt"
	"math"
	"runtime"
	"sync"

	"golang.org/x/sync/errgroup"

	"holdfast/solver/kernel"
)

// stillShare is the share of a column's table variance below which the exact
// test decides whether it varies in a draw.
const stillShare = 1e-10

// cancelShare is the share of the mean square that the variance must keep for
// a one-pass standard deviation to serve as a screening number (relative error
// about 1e-12); below it the two-pass record numbers are used.
const cancelShare = 1e-4

// farOff is how many standard deviations a column's mean in a draw may lie from
// its centre before its gradient needs watching: rounding is then still 1e-12 of
// the outcome's spread.
const farOff = 1e3

// Model is a Problem made ready: immutable, and safe for any number of
// goroutines.
type Model struct {
	p       Problem
	rows    int
	penalty *penalty
	first   []int     // per candidate: position of its first column in Terms; nil: all are single
	table   []float64 // per unit: variance over all rows, for the constant test
	exact   bool      // which core serves
	two     bool      // two classes, fitted as yes-no (see settle)
	shift   float64   // taken from a numeric outcome
	scale   []float64 // per unit: fixed scale of the penalty; nil with ScaleDraw
	lattice lattice
	last    int
	seeds   seeds
	pool    sync.Pool
	etas    sync.Pool // *[]float64: linear predictors of the rows left out
	whim    *whim     // only in tests: forces other histories
}

// NewModel checks a problem, measures its columns and finds lambda_max. It
// keeps the slices of p. Candidates must hold no constant column and no
// copies (Examine finds them). An error says which value is wrong.
func NewModel(ctx context.Context, p Problem) (*Model, error) {
	if err := p.check(); err != nil {
		return nil, err
	}
	rows, _ := p.Design.Dims()
	m := &Model{p: p, rows: rows, penalty: p.penalty(), first: p.firstTerms()}
	m.exact = m.hasExact()
	m.settle()
	if err := m.measure(ctx); err != nil {
		return nil, err
	}
	top, err := m.findTop()
	if err != nil {
		return nil, err
	}
	m.lattice = lattice{top: top, ratio: p.Ratio}
	m.last = m.lattice.lastAbove(p.Floor * top)
	return m, nil
}

func (p *Problem) check() error {
	rows, cols := p.Design.Dims()
	switch {
	case rows < 2:
		return fmt.Errorf("solver: the table has %d rows: at least 2 are needed", rows)
	case len(p.Candidates) == 0:
		return errors.New("solver: no candidate predictors")
	case p.Case != nil && len(p.Case) != rows:
		return fmt.Errorf("solver: %d case weights for %d rows", len(p.Case), rows)
	case p.Relative != nil && len(p.Relative) != len(p.Candidates):
		return fmt.Errorf("solver: %d relative penalties for %d candidates", len(p.Relative), len(p.Candidates))
	case len(p.Centre) != cols || len(p.Names) != cols:
		return fmt.Errorf("solver: %d centres and %d names for %d columns", len(p.Centre), len(p.Names), cols)
	case !(p.Mix > 0 && p.Mix <= 1):
		return fmt.Errorf("solver: mix is %v: it must lie in (0,1]", p.Mix)
	case !(p.Ratio > 0 && p.Ratio < 1):
		return fmt.Errorf("solver: ratio is %v: it must lie in (0,1)", p.Ratio)
	case !(p.Floor > 0 && p.Floor < 1):
		return fmt.Errorf("solver: floor is %v: it must lie in (0,1)", p.Floor)
	case p.StopAfter < 0:
		return fmt.Errorf("solver: stop_after is %d: it must not be negative", p.StopAfter)
	}
	if err := p.checkOutcome(rows); err != nil {
		return err
	}
	if err := p.checkGroups(); err != nil {
		return err
	}
	return p.checkValues()
}

func (p *Problem) checkValues() error {
	for i, w := range p.Case {
		if !(w >= 0) || math.IsInf(w, 0) {
			return fmt.Errorf("solver: the case weight is %v in row %d: it must be a finite number, 0 or more", w, i)
		}
	}
	for c, v := range p.Relative {
		if !(v > 0) || math.IsInf(v, 0) {
			return fmt.Errorf("solver: the relative penalty of %s is %v: it must be a finite number above 0", p.Names[p.Candidates[c]], v)
		}
	}
	return nil
}

func (p *Problem) penalty() *penalty {
	w := make([]float64, len(p.Candidates)+len(p.Always)+1)
	for c := range p.Candidates {
		w[c] = 1
		if p.Relative != nil {
			w[c] = p.Relative[c]
		}
	}
	return &penalty{mix: p.Mix, soft: 1, weight: w, uneven: p.Relative != nil || p.Groups != nil}
}

// firstTerms finds where each candidate's columns begin in Terms.
func (p *Problem) firstTerms() []int {
	if p.Groups == nil {
		return nil
	}
	first, at := make([]int, len(p.Candidates)), 0
	for c := range first {
		first[c] = at
		at += max(1, len(p.Groups[c]))
	}
	return first
}

func (m *Model) candidates() int { return len(m.p.Candidates) }

// alwaysUnits lists the units of the always-in columns.
func (m *Model) alwaysUnits() []int32 {
	units := make([]int32, len(m.p.Always))
	for a := range units {
		units[a] = int32(m.candidates() + a)
	}
	return units
}

// interceptUnit is the unit of the column of ones, where a core has one.
func (m *Model) interceptUnit() int32 { return int32(m.candidates() + len(m.p.Always)) }

// design returns the design column of a unit that is a single column:
// candidates first, then the always-in columns.
func (m *Model) design(unit int32) int32 {
	if n := m.candidates(); int(unit) >= n {
		return m.p.Always[int(unit)-n]
	}
	return m.p.Candidates[unit]
}

// column returns all rows of a unit's column and its missing cells.
func (m *Model) column(unit int32) (x []float64, holes []uint64) {
	j := m.design(unit)
	return m.p.Design.Panel([]int32{j}, 0, m.rows, nil)[0], m.p.Design.Holes(j)
}

// scaleOf is what a unit's column is divided by. sd is that of the draw.
func (m *Model) scaleOf(unit int32, sd float64) float64 {
	if m.scale == nil || m.penalty.always(unit) {
		if sd == 0 {
			return 1
		}
		return sd
	}
	return m.scale[unit]
}

// everything is the draw of all rows.
func (m *Model) everything() *Sample {
	s := AllRows(m.rows)
	s.Case = m.p.Case
	return s
}

// measure finds the variance of every unit over the rows of positive weight.
func (m *Model) measure(ctx context.Context) error {
	var d drawn
	d.draw(m.everything(), m.rows)
	if len(d.rows) < 2 {
		return fmt.Errorf("solver: %d rows have a positive case weight: at least 2 are needed", len(d.rows))
	}
	m.table = make([]float64, m.interceptUnit())
	err := m.eachUnit(ctx, func(unit int32, buffer []float64) {
		if !m.single(unit) {
			g, _ := d.whiten(m, unit, func() []float64 { return nil })
			m.table[unit] = float64(min(1, len(g.kept)))
			m.penalty.weight[unit] *= m.p.groupWeight(max(1, len(g.kept)))
			return
		}
		x, holes := m.column(unit)
		sd := d.gather(x, holes, buffer).sd
		m.table[unit] = sd * sd
	})
	if err != nil {
		return err
	}
	switch m.p.Scale {
	case ScaleTable:
		m.scale = make([]float64, len(m.table))
		for i, v := range m.table {
			m.scale[i] = math.Sqrt(v)
		}
	case ScaleNone:
		m.scale = make([]float64, len(m.table))
		for i := range m.scale {
			m.scale[i] = 1
		}
	}
	for u, v := range m.table {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return fmt.Errorf("solver: column %s: its variance is %v: a value is not finite, or too large to be squared", m.name(int32(u)), v)
		}
	}
	for c := range m.p.Candidates {
		if m.table[c] == 0 {
			return fmt.Errorf("solver: candidate %s does not vary over the rows used", m.p.Names[m.p.Candidates[c]])
		}
	}
	return nil
}

// eachUnit calls do for every unit, on all cores; buffer holds one column.
func (m *Model) eachUnit(ctx context.Context, do func(unit int32, buffer []float64)) error {
	units, workers := int(m.interceptUnit()), runtime.GOMAXPROCS(0)
	g, ctx := errgroup.WithContext(ctx)
	for w := range workers {
		g.Go(func() error {
			buffer := make([]float64, m.rows)
			for u := w * units / workers; u < (w+1)*units/workers; u++ {
				if err := ctx.Err(); err != nil {
					return err
				}
				do(int32(u), buffer)
			}
			return nil
		})
	}
	return g.Wait()
}

// findTop returns lambda_max: the smallest lambda at which the fit on all rows
// has no candidate.
func (m *Model) findTop() (float64, error) {
	f := m.fitting()
	defer m.release(f)
	if err := f.start(m.everything()); err != nil {
		return 0, fmt.Errorf("solver: all rows: %w", err)
	}
	if f.constant() {
		return 0, errors.New("solver: the outcome is the same in all rows used (or fully explained by the always-in columns): there is nothing to explain")
	}
	top := f.top()
	if top == 0 {
		return 0, errors.New("solver: no candidate has any relation to the outcome: there is nothing to select")
	}
	return top, nil
}

// Classes is the number of coefficients that each column has: the classes of
// Multinomial, else 1.
func (m *Model) Classes() int {
	if m.p.Family == Multinomial || m.two {
		return m.p.Classes
	}
	return 1
}

// lanes is the number of score vectors of a fit.
func (m *Model) lanes() int {
	if m.p.Family == Multinomial {
		return m.p.Classes
	}
	return 1
}

// Terms lists the design columns of all candidates, candidate by candidate, a
// group's in its own order: the order of Fit.Coef.
func (m *Model) Terms() []int32 {
	if m.p.Groups == nil {
		return m.p.Candidates
	}
	var out []int32
	for c, j := range m.p.Candidates {
		if g := m.p.Groups[c]; g != nil {
			out = append(out, g...)
		} else {
			out = append(out, j)
		}
	}
	return out
}

// Fittable says why a draw can have no fit at all, not even without candidates:
// one class only, fewer than five events, always-in columns that tell the
// classes apart. Nil where nothing speaks against it.
func (m *Model) Fittable(s *Sample) error {
	if m.exact && len(m.p.Always) == 0 {
		return nil
	}
	f := m.fitting()
	defer m.release(f)
	f.penalty = m.penalty
	return f.begin(m.weighted(s))
}

// fitting returns a fitting from the pool.
func (m *Model) fitting() *fitting {
	if f, ok := m.pool.Get().(*fitting); ok {
		return f
	}
	return m.newFitting()
}

func (m *Model) newFitting() *fitting {
	f := &fitting{m: m}
	if m.exact {
		f.core = exact{f}
	} else {
		f.core = newCurved(f)
	}
	return f
}

func (m *Model) release(f *fitting) { m.pool.Put(f) }

// LambdaMax returns the smallest lambda at which the fit on all rows has no
// candidate.
func (m *Model) LambdaMax() float64 { return m.lattice.top }

// Lambda returns the lambda of a lattice step: lambda_max * ratio^step.
func (m *Model) Lambda(step int) float64 { return m.lattice.at(step) }

// LastStep returns the last lattice step: the last lambda not below
// floor*lambda_max.
func (m *Model) LastStep() int { return m.last }

// AllRows is the draw of all n rows of a table.
func AllRows(n int) *Sample {
	s := &Sample{Rows: make([]uint64, (n+63)/64)}
	for i := range n {
		s.Rows[i>>6] |= 1 << (i & 63)
	}
	return s
}

// Kernel names the inner loops in use.
func Kernel() string { return kernel.Name() }
