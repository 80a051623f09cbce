package solver

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
)

// Fit is one certified fit in the columns' own units.
type Fit struct {
	Step      int       // lattice step, for FitPath
	Lambda    float64   // penalty
	Intercept []float64 // one per class; none for Cox
	Always    []float64 // per always-in column one for each class; 0 for those redundant in the draw
	Coef      []float64 // per column of Model.Terms one for each class, most of them 0
	Selected  int       // candidates that are not 0
	Loss      float64   // mean loss over the draw
	Objective float64   // loss and penalty
	Violation float64   // largest violation of the optimality conditions
	Gap       float64   // relative duality gap
	Certified bool      // false: the fit was not reached, its numbers are zero
	Why       string    // why it is not certified
}

// FitAt fits the given lambdas, in any order, and returns the fits in that
// order. Lambda 0 is the unpenalised fit, which needs full column rank.
// Negative or non-finite lambdas are errors.
func (m *Model) FitAt(ctx context.Context, s *Sample, lambdas []float64) ([]Fit, error) {
	var positive []float64
	zero := false
	for _, l := range lambdas {
		switch {
		case !(l >= 0) || math.IsInf(l, 0):
			return nil, fmt.Errorf("solver: lambda is %v: it must be a finite number, 0 or more", l)
		case l == 0:
			zero = true
		default:
			positive = append(positive, l)
		}
	}
	slices.SortFunc(positive, func(a, b float64) int { return cmp.Compare(b, a) })
	positive = slices.Compact(positive)
	fits, err := m.descend(ctx, s, func(k int) float64 { return positive[k] }, 0, len(positive)-1)
	if err != nil {
		return nil, err
	}
	at := make(map[float64]Fit)
	for k, l := range positive {
		at[l] = fits[k]
	}
	if zero {
		if at[0], err = m.unpenalised(ctx, s); err != nil {
			return nil, err
		}
	}
	out := make([]Fit, len(lambdas))
	for i, l := range lambdas {
		out[i] = at[l]
		out[i].Step = i
	}
	return out, nil
}

// FitPath fits a draw down the lattice, as FitBlock does, and returns every
// step as a Fit.
func (m *Model) FitPath(ctx context.Context, s *Sample) ([]Fit, error) {
	f := m.fitting()
	defer m.release(f)
	if err := f.start(m.weighted(s)); err != nil {
		return nil, fmt.Errorf("solver: %w", err)
	}
	var p Path
	f.record(&p, nil)
	var fits []Fit
	f.accept = func(r *record, _ bool) { fits = append(fits, f.fitOf(r)) }
	if err := m.lockstep(ctx, []*fitting{f}); err != nil {
		return nil, err
	}
	if p.Stop == StopUncertified {
		k := f.cur
		missed := m.blank(k, f.lambda(k))
		missed.Why = p.Why
		fits = append(fits, missed)
	}
	return fits, nil
}

// descend fits a draw at lambda(first..last), which go down. Steps after one
// that is not certified are returned as not certified.
func (m *Model) descend(ctx context.Context, s *Sample, lambda func(int) float64, first, last int) ([]Fit, error) {
	if last < first {
		return nil, nil
	}
	f := m.fitting()
	defer m.release(f)
	if err := f.start(m.weighted(s)); err != nil {
		return nil, fmt.Errorf("solver: %w", err)
	}
	var p Path
	fits := make([]Fit, 0, last-first+1)
	f.path = &p
	f.accept = func(r *record, _ bool) { fits = append(fits, f.fitOf(r)) }
	f.travel(lambda, first, last)
	f.unlimited = true
	defer func() { f.unlimited = false }()
	if err := m.lockstep(ctx, []*fitting{f}); err != nil {
		return nil, err
	}
	for k := first + len(fits); k <= last; k++ {
		missed := m.blank(k, lambda(k))
		missed.Why = p.Why
		fits = append(fits, missed)
	}
	return fits, nil
}

// fitOf puts a record into the columns' own units.
func (f *fitting) fitOf(r *record) Fit {
	fit := f.m.blank(f.cur, r.lambda)
	fit.Selected, fit.Loss, fit.Objective = len(r.units), f.core.loss(r), r.cert.objective
	fit.Violation, fit.Gap, fit.Certified = r.cert.violation, r.cert.gap, true
	classes := f.m.Classes()
	for _, c := range f.values(r) {
		fit.Coef[(f.m.firstTerm(c.Candidate)+int(c.Term))*classes+int(c.Class)] = c.Value
	}
	fit.Intercept, fit.Always = f.rest(r)
	return fit
}

// blank is a fit that was not reached.
func (m *Model) blank(step int, lambda float64) Fit {
	classes := m.Classes()
	fit := Fit{
		Step: step, Lambda: lambda,
		Coef: make([]float64, len(m.Terms())*classes), Always: make([]float64, len(m.p.Always)*classes),
	}
	if m.p.Family != Cox {
		fit.Intercept = make([]float64, classes)
	}
	return fit
}

// unpenalised is the fit at lambda 0: all candidates in, by the same finish.
func (m *Model) unpenalised(ctx context.Context, s *Sample) (Fit, error) {
	f := m.fitting()
	defer m.release(f)
	if err := f.start(m.weighted(s)); err != nil {
		return Fit{}, fmt.Errorf("solver: %w", err)
	}
	if err := f.fullRank(); err != nil {
		return Fit{}, err
	}
	if err := ctx.Err(); err != nil {
		return Fit{}, err
	}
	units := make([]int32, m.candidates())
	for c := range units {
		units[c] = int32(c)
	}
	f.work.add(f, units)
	var support []choice
	for c := range units {
		for lane := range f.lanes() {
			support = append(support, choice{place: int(f.work.place[int32(c)]), lane: lane, sign: 1})
		}
	}
	r, err := f.core.finish(support, 0)
	var separation *SeparationError
	if errors.As(err, &separation) {
		return Fit{}, fmt.Errorf("solver: lambda 0: %w", err)
	}
	if err != nil {
		return Fit{}, fmt.Errorf("solver: lambda 0 needs full column rank: %w: leave it out, or take a lambda above 0", err)
	}
	f.cur = 0
	fit := f.fitOf(r)
	if err := r.check(f); err != nil {
		fit.Certified, fit.Why = false, err.Error()
	}
	return fit, nil
}

// fullRank checks by count what the factor then checks by number.
func (f *fitting) fullRank() error {
	m := f.m
	if len(f.still) > 0 {
		return fmt.Errorf("solver: lambda 0 needs full column rank: %s does not vary over the rows used", m.name(f.still[0]))
	}
	for c, g := range f.groups {
		if g != nil && len(g.kept) < len(m.p.Groups[c]) {
			return fmt.Errorf("solver: lambda 0 needs full column rank: the columns of the group of %s are linearly dependent", m.name(int32(c)))
		}
	}
	if need := len(m.Terms()) + len(m.p.Always) + 1; need > len(f.d.rows) {
		return fmt.Errorf("solver: lambda 0 needs full column rank: %d rows for %d coefficients", len(f.d.rows), need)
	}
	return nil
}
