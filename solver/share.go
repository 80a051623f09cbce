package solver

import (
	"cmp"
	"errors"
	"math"
	"slices"

	"holdfast/solver/kernel"
)

// mostShared bounds the candidates at the border whose shares are solved for.
const mostShared = 3000

// sharing finds the coefficients of a step whose optimum is not unique. The
// fit is unique, and with it the set of candidates at the border (gauge 1,
// Tibshirani 2013, Electron. J. Statist. 7:1456-1490, lemma 1), but where these
// are linearly dependent many coefficients give the same fit: columns that
// coincide within the draw, indicators that add up. Among all optima it takes
// the one with the least sum of weight*b^2, the limit of the elastic net as mix
// goes to 1. That one is unique, does not depend on the order of columns or on
// how the fit was found, and gives equal columns equal parts.
type sharing struct {
	f      *fitting
	lambda float64
	fixed  []int             // coefficients of always-in columns
	places []int             // those of candidates at the border, by unit: place*lanes + lane
	sign   []float64         // of their gradients
	curved *curved           // of the curved core
	found  *record           // the optimum that was found: for the curved core its fit stands
	along  map[int][]float64 // of a group: its column along its gradient
}

// share returns the record of the step on all candidates at the border, or nil
// where they are linearly independent, so that r is the only optimum.
func (f *fitting) share(r *record, near []choice) (*record, error) {
	s := &sharing{f: f, lambda: r.lambda}
	border := slices.Clone(near)
	for k, i := range r.members {
		if r.sign[k] == 0 {
			s.fixed = append(s.fixed, i)
		} else {
			border = append(border, choice{place: i, sign: r.sign[k]})
		}
	}
	slices.SortFunc(border, func(a, b choice) int { return int(f.work.units[a.place]) - int(f.work.units[b.place]) })
	for _, c := range border {
		s.places, s.sign = append(s.places, c.place), append(s.sign, c.sign)
	}
	all := make([]int, len(border))
	for k := range all {
		all[k] = k
	}
	if len(s.split(all).rest) == 0 {
		return nil, nil
	}
	if len(border) > mostShared {
		return nil, errors.New("too many candidates on the border are linearly dependent")
	}
	return s.settle(s.start(r))
}

// start is the feasible point that is at hand: the size of each coefficient.
func (s *sharing) start(r *record) []float64 {
	at := make(map[int]float64)
	for k, i := range r.members {
		at[i] = math.Abs(r.beta[k])
	}
	x := make([]float64, len(s.places))
	for k, i := range s.places {
		x[k] = at[i]
	}
	return x
}

// settle is a primal active-set method (Nocedal & Wright 2006, section 16.5):
// from the feasible sizes x towards the least squares of the free candidates,
// fixing those that reach zero, until none that is fixed would lower the sum.
// The problem is strictly convex, so that the end does not depend on the start.
func (s *sharing) settle(x []float64) (*record, error) {
	free := make([]bool, len(x))
	for k := range free {
		free[k] = true
	}
	for range 20 * (len(x) + 10) {
		p := s.split(largestFirst(free, x))
		target := s.spreadOut(p, s.alone(p))
		if s.move(p, x, target, free) {
			continue
		}
		if k := s.release(p, target, free); k >= 0 {
			free[k] = true
			continue
		}
		return s.record(free, target)
	}
	return nil, errors.New("the shares of candidates on the border could not be settled")
}

// largestFirst lists the free candidates, those at zero last: so that these are
// the dependent ones where possible.
func largestFirst(free []bool, x []float64) []int {
	out := indices(free)
	slices.SortStableFunc(out, func(a, b int) int { return cmp.Compare(x[b], x[a]) })
	return out
}

func indices(free []bool) []int {
	var out []int
	for k, ok := range free {
		if ok {
			out = append(out, k)
		}
	}
	return out
}

// move goes from x towards target, as far as no size turns negative, and fixes
// what stands in the way: the dependent ones of it together, or else the first
// of the basis. What stays free then spans as much as before: a direction that
// keeps the fit and moves a candidate shows it to depend on the others. (A
// target of rounding below zero stands in no way: fixing it could cost a
// direction.) It reports whether anything did.
func (s *sharing) move(p *parts, x, target []float64, free []bool) bool {
	length, nothing := 1.0, -border*slices.Max(target)
	for k := range x {
		if free[k] && target[k] < nothing {
			length = min(length, x[k]/(x[k]-target[k]))
		}
	}
	var stops []int
	for k := range x {
		if !free[k] {
			continue
		}
		if target[k] < nothing && x[k]/(x[k]-target[k]) <= length {
			stops = append(stops, k)
			x[k] = 0
		} else {
			x[k] = max(0, x[k]+float64(length*(target[k]-x[k])))
		}
	}
	fixed := false
	for _, k := range stops {
		if slices.Contains(p.rest, k) {
			free[k], fixed = false, true
		}
	}
	if len(stops) > 0 && !fixed {
		free[stops[0]] = false
	}
	return len(stops) > 0
}

// parts are free candidates split into a basis and the rest, which depends on
// it.
type parts struct {
	basis []int // places in the working set: always-in columns, then candidates
	which []int // index of each basis column in places; -1 for always-in columns
	chol  factor
	rest  []int // indices of dependent candidates
}

func (s *sharing) split(free []int) *parts {
	p := &parts{}
	for _, i := range s.fixed {
		s.join(p, i, -1)
	}
	for _, k := range free {
		if !s.join(p, s.places[k], k) {
			p.rest = append(p.rest, k)
		}
	}
	return p
}

func (s *sharing) join(p *parts, place, which int) bool {
	row := s.products(p, place)
	if !p.chol.push(row, s.square(place), s.least()) {
		return false
	}
	p.basis, p.which = append(p.basis, place), append(p.which, which)
	return true
}

func (s *sharing) products(p *parts, place int) []float64 {
	row := make([]float64, len(p.basis))
	for q, j := range p.basis {
		row[q] = s.gram(place, j)
	}
	return row
}

// gram is the product of the columns of two coefficients over N. What several
// classes have in common does not change the fit, so it is taken out.
func (s *sharing) gram(i, j int) float64 {
	lanes := s.f.lanes()
	if s.curved != nil && s.curved.seen != nil {
		return s.seen(i, j)
	}
	g := s.product(i, j)
	if lanes == 1 {
		return g
	}
	if i%lanes == j%lanes {
		return g - g/float64(lanes)
	}
	return -g / float64(lanes)
}

// square is what a coefficient has on the diagonal of the Hessian.
func (s *sharing) square(i int) float64 {
	return s.gram(i, i) + s.f.penalty.ridge(s.unit(i), s.lambda)
}

// least is the share of a square below which a coefficient depends on others.
func (s *sharing) least() float64 {
	if s.curved != nil && s.curved.seen != nil {
		return seenShare
	}
	return dependent
}

// feasible splits candidates whose sizes are given so that the fit has no negative
// size on the basis: each dependent one in turn hands over to the others until it,
// or one of these, has nothing left.
func (s *sharing) feasible(list []int, x []float64) *parts {
	left := slices.Clone(list)
	for {
		p := s.split(left)
		if len(p.rest) == 0 {
			return s.split(append(left, slices.DeleteFunc(slices.Clone(list), func(k int) bool { return slices.Contains(left, k) })...))
		}
		k := p.rest[0]
		t := s.products(p, s.places[k])
		p.chol.solve(t)
		out, length := k, x[k]
		rate := func(q int) float64 { return s.sign[k] * t[q] * s.sign[p.which[q]] }
		for q, j := range p.which {
			if j >= 0 && rate(q) < 0 && x[j]/-rate(q) < length*(1-border) {
				out, length = j, x[j]/-rate(q)
			}
		}
		for q, j := range p.which {
			if j >= 0 {
				x[j] = max(0, x[j]+float64(length*rate(q)))
			}
		}
		x[k] -= length
		left = slices.DeleteFunc(left, func(j int) bool { return j == out })
	}
}

// within reports whether a share does not exceed the border: its margin is that of a
// single column.
func (s *sharing) within(k int, v float64) bool {
	i := s.places[k]
	return v*s.square(i)/s.f.penalty.threshold(s.unit(i), s.lambda) <= border
}

func (s *sharing) unit(i int) int32 { return s.f.work.units[i/s.f.lanes()] }

// weight of a basis column in the sum of squares: none for always-in columns.
func (s *sharing) weight(i int) float64 { return s.f.penalty.weight[s.unit(i)] }

// alone returns the coefficients of the fit on the basis alone, whatever their
// signs: the normal equations of the step.
func (s *sharing) alone(p *parts) []float64 {
	if s.curved != nil {
		return s.expressed(p)
	}
	w := &s.f.work
	b := make([]float64, len(p.basis))
	for q, i := range p.basis {
		b[q] = w.c[i]
		if k := p.which[q]; k >= 0 {
			b[q] -= float64(s.sign[k] * s.f.penalty.threshold(w.units[i], s.lambda))
		}
	}
	p.chol.solve(b)
	return b
}

// expressed returns the coefficients on the basis of the fit that was found.
func (s *sharing) expressed(p *parts) []float64 {
	at := make(map[int]int, len(p.basis))
	for q, i := range p.basis {
		at[i] = q
	}
	out := make([]float64, len(p.basis))
	for _, b := range s.found.blocks {
		v, i := s.found.beta[b.at], b.place*s.f.lanes()+b.lane
		if b.width > 1 {
			v = length(s.found.beta[b.at : b.at+b.width])
		}
		if q, ok := at[i]; ok {
			out[q] += v
			continue
		}
		t := s.products(p, i)
		p.chol.solve(t)
		kernel.AddScaled(v, t, out)
	}
	return out
}

// spreadOut returns the signed sizes of the least-squares coefficients on the
// parts, for the fit whose basis coefficients are alone. The rest takes over
// from the basis: b_basis = alone - T b_rest with T the rest's coordinates, so
// that (V + T'VT) b_rest = T'V alone.
func (s *sharing) spreadOut(p *parts, alone []float64) []float64 {
	basis, rest := s.coefficients(p, alone)
	x := make([]float64, len(s.places))
	for q, k := range p.which {
		if k >= 0 {
			x[k] = s.sign[k] * basis[q]
		}
	}
	for d, k := range p.rest {
		x[k] = s.sign[k] * rest[d]
	}
	return x
}

// coefficients solves for the basis and the rest.
func (s *sharing) coefficients(p *parts, alone []float64) (basis, rest []float64) {
	t, vt := s.coordinates(p)
	var chol factor
	rest = make([]float64, len(t))
	row := make([]float64, len(t))
	for d := range t {
		for e := range d {
			row[e] = kernel.Dot(t[e], vt[d])
		}
		chol.push(row[:d], s.weight(s.places[p.rest[d]])+kernel.Dot(t[d], vt[d]), 0)
		rest[d] = kernel.Dot(vt[d], alone)
	}
	chol.solve(rest)
	basis = slices.Clone(alone)
	for d := range t {
		kernel.AddScaled(-rest[d], t[d], basis)
	}
	return basis, rest
}

// coordinates of the rest in the basis, plain and times the weights.
func (s *sharing) coordinates(p *parts) (t, vt [][]float64) {
	for _, k := range p.rest {
		c := s.products(p, s.places[k])
		p.chol.solve(c)
		v := slices.Clone(c)
		for q, i := range p.basis {
			v[q] *= s.weight(i)
		}
		t, vt = append(t, c), append(vt, v)
	}
	return t, vt
}

// release finds the fixed candidate that would lower the sum of squares most
// by taking over from the others; -1 where none would.
func (s *sharing) release(p *parts, target []float64, free []bool) int {
	size := 0.0
	for _, v := range target {
		size = max(size, math.Abs(v))
	}
	best, most := -1, border*size
	for k, ok := range free {
		if ok || !s.depends(p, s.places[k]) {
			continue
		}
		t := s.products(p, s.places[k])
		p.chol.solve(t)
		gain := 0.0
		for q, i := range p.basis {
			if j := p.which[q]; j >= 0 {
				gain += float64(t[q] * s.weight(i) * s.sign[j] * target[j])
			}
		}
		if gain *= s.sign[k]; gain > most {
			best, most = k, gain
		}
	}
	return best
}

// depends reports whether a column lies in the span of the basis.
func (s *sharing) depends(p *parts, place int) bool {
	trial := factor{row: p.chol.row[:len(p.chol.row):len(p.chol.row)]}
	return !trial.push(s.products(p, place), s.square(place), s.least())
}

// record makes the record of the free candidates that are not zero, by numbers
// that depend on that set alone.
func (s *sharing) record(free []bool, x []float64) (*record, error) {
	size := slices.Max(x)
	none := true
	for k, v := range x {
		if v <= border*size || s.within(k, v) {
			free[k] = false
		} else {
			none = false
		}
	}
	if none {
		return nil, nil // all stay out
	}
	p := s.split(indices(free))
	if s.curved != nil {
		return s.curved.shared(s, s.feasible(indices(free), slices.Clone(x)))
	}
	alone := s.alone(p)
	r := s.filled(p, alone)
	for range refinements {
		if r.worst(s.f) <= goodEnough {
			break
		}
		better := s.filled(p, s.corrected(p, r, alone))
		if !(better.worst(s.f) < r.worst(s.f)) {
			break
		}
		r = better
	}
	r.certify(s.f)
	r.declare(s.f)
	return r, nil
}

// corrected adds to the basis coefficients a Newton step for what the record
// misses.
func (s *sharing) corrected(p *parts, r *record, alone []float64) []float64 {
	at := make(map[int]int)
	for k, i := range r.members {
		at[i] = k
	}
	step := make([]float64, len(p.basis))
	for q, i := range p.basis {
		step[q] = r.residue(s.f, at[i])
	}
	p.chol.solve(step)
	for q := range step {
		alone[q] += step[q]
	}
	return alone
}

// filled is the record with the shares of one fit on the basis. Its factor is
// left empty: the next step makes its own.
func (s *sharing) filled(p *parts, alone []float64) *record {
	basis, rest := s.coefficients(p, alone)
	at := make(map[int]float64)
	r := &record{lambda: s.lambda, limit: certified}
	for q, i := range p.basis {
		at[i] = basis[q]
	}
	for d, k := range p.rest {
		at[s.places[k]] = rest[d]
	}
	for _, i := range s.fixed {
		r.members, r.sign, r.beta = append(r.members, i), append(r.sign, 0), append(r.beta, at[i])
	}
	for k, i := range s.places {
		if b, ok := at[i]; ok {
			r.members, r.sign, r.beta = append(r.members, i), append(r.sign, s.sign[k]), append(r.beta, b)
		}
	}
	r.u, r.grad = s.f.residual(), make([]float64, len(r.members))
	r.score(s.f)
	return r
}
