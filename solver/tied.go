package solver

import (
	"cmp"
	"errors"
	"slices"

	"holdfast/solver/kernel"
)

// share settles a step whose optimum is not unique: candidates that are linearly
// dependent, or classes that have a common shift (see sharing). At any optimum the
// coefficients of a group at the border are a multiple of its gradient, so that it
// counts as one column, along that.
func (c *curved) share(r *record, near []choice) (*record, error) {
	c.f.work.complete(c.f.d.total)
	s := &sharing{f: c.f, lambda: r.lambda, curved: c, found: r}
	for _, q := range c.fixed {
		for lane := range c.lanes {
			s.fixed = append(s.fixed, q.place*c.lanes+lane)
		}
	}
	border := append(slices.Clone(near), r.support...)
	slices.SortFunc(border, func(a, b choice) int {
		return cmp.Or(cmp.Compare(c.f.work.units[a.place], c.f.work.units[b.place]), cmp.Compare(a.lane, b.lane))
	})
	all, x := make([]int, len(border)), make([]float64, len(border))
	for k, q := range border {
		all[k] = k
		s.places, s.sign = append(s.places, q.place*c.lanes+q.lane), append(s.sign, q.sign)
		if c.f.work.width(q.place) > 1 {
			s.sign[k] = 1
		}
		for _, b := range r.blocks {
			if b.same(q) {
				x[k] = length(r.beta[b.at : b.at+b.width])
			}
		}
	}
	s.aim(r.u)
	if len(s.split(all).rest) == 0 {
		return nil, nil
	}
	if len(border) > mostShared {
		return nil, errors.New("too many candidates on the border are linearly dependent")
	}
	return s.settle(x)
}

// loose is the share of a square that must remain for a candidate to count as
// independent in a solution of the working set, whose directions are not exact.
const loose = 1e-9

// independent leaves out of a support what depends linearly on what is before it:
// the descent may split a fit between groups at will. What is left out stands on
// the border then, and shares are settled there.
func (c *curved) independent(support []choice) []choice {
	s := &sharing{f: c.f, along: make(map[int][]float64)}
	var chol factor
	var in []int
	var kept []choice
	for _, q := range support {
		i := q.place*c.lanes + q.lane
		if width := c.f.work.width(q.place); width > 1 {
			s.along[i] = s.column(i, c.directionOf(i, width))
		} else {
			s.along[i] = c.f.work.z[q.place]
		}
		row := make([]float64, len(in))
		for k, j := range in {
			row[k] = s.gram(i, j)
		}
		if chol.push(row, s.gram(i, i), loose) {
			in, kept = append(in, i), append(kept, q)
		}
	}
	return kept
}

// directionOf is the unit vector of a group's coefficients in the working set.
func (c *curved) directionOf(i, width int) []float64 {
	v := make([]float64, width)
	for t := range v {
		v[t] = c.beta[i+t*c.lanes]
	}
	size := length(v)
	for t := range v {
		v[t] /= size
	}
	return v
}

// aim finds the columns of groups along their gradients at a score vector.
func (s *sharing) aim(u []float64) {
	s.along = nil
	for _, i := range s.places {
		if s.f.work.width(i/s.f.lanes()) > 1 {
			if s.along == nil {
				s.along = make(map[int][]float64)
			}
			s.along[i] = s.column(i, s.direction(i, u))
		}
	}
}

// direction is the unit vector of a group's gradient.
func (s *sharing) direction(i int, u []float64) []float64 {
	f := s.f
	place, lane, n := i/f.lanes(), i%f.lanes(), len(f.d.rows)
	g := make([]float64, f.work.width(place))
	for t := range g {
		g[t] = kernel.Dot(f.work.z[place+t], u[lane*n:(lane+1)*n])
	}
	size := length(g)
	for t := range g {
		g[t] /= size
	}
	return g
}

// column is the sum of a group's columns with the weights of a direction.
func (s *sharing) column(i int, direction []float64) []float64 {
	v := make([]float64, len(s.f.d.rows))
	for t, d := range direction {
		kernel.AddScaled(d, s.f.work.z[i/s.f.lanes()+t], v)
	}
	return v
}

// columnOf is the column of a coefficient.
func (s *sharing) columnOf(i int) []float64 {
	if v, ok := s.along[i]; ok {
		return v
	}
	return s.f.work.z[i/s.f.lanes()]
}

// product is that of two columns over N.
func (s *sharing) product(i, j int) float64 {
	lanes := s.f.lanes()
	if s.along[i] == nil && s.along[j] == nil {
		return s.f.work.h.row[i/lanes][j/lanes]
	}
	return kernel.Dot(s.columnOf(i), s.columnOf(j)) / s.f.d.total
}

// seen is the curvature between two columns that the likelihood of Cox has at no
// effect.
func (s *sharing) seen(i, j int) float64 {
	h := s.curved.seen
	if s.along[i] == nil && s.along[j] == nil {
		return h.between(i, j)
	}
	a, b := h.at.carry(s.columnOf(i), 0)
	p, q := h.at.carry(s.columnOf(j), 0)
	return (kernel.Dot(a, p) - kernel.Dot(b, q)) / s.f.d.total
}

// shared is the record of shares: the fit on a basis on which no size is negative,
// shared out.
func (c *curved) shared(s *sharing, p *parts) (*record, error) {
	var support []choice
	for q, i := range p.basis {
		if k := p.which[q]; k >= 0 {
			support = append(support, c.choiceOf(i, s.sign[k]))
		}
	}
	n := c.newton(c.f.rec, support, s.lambda)
	if err := n.converge(); err != nil {
		return nil, err
	}
	if len(n.r.gone) > 0 {
		return nil, errors.New("the shares of groups on the border could not be settled")
	}
	s.aim(n.r.u)
	p = s.again(p)
	alone := make([]float64, len(p.basis))
	for _, b := range n.r.blocks {
		q := slices.Index(p.basis, b.place*c.lanes+b.lane)
		switch {
		case q < 0:
		case b.width > 1:
			alone[q] = length(n.r.beta[b.at : b.at+b.width])
		default:
			alone[q] = n.r.beta[b.at] - n.common(b)
		}
	}
	r, err := c.fill(s, p, alone, n.r)
	c.f.dropResidual(n.r.u)
	return r, err
}

// again splits the candidates of a split along their new columns.
func (s *sharing) again(p *parts) *parts {
	if s.along == nil {
		return p
	}
	var order []int
	for _, k := range p.which {
		if k >= 0 {
			order = append(order, k)
		}
	}
	return s.split(append(order, p.rest...))
}

// common is what an always-in coefficient has in common with that of the last class,
// which is not in a basis.
func (n *newton) common(b block) float64 {
	if n.c.lanes == 1 || !n.c.f.penalty.always(b.unit) {
		return 0
	}
	for _, o := range n.r.blocks {
		if o.place == b.place && o.lane == n.c.lanes-1 {
			return n.r.beta[o.at]
		}
	}
	return 0
}

func (c *curved) choiceOf(i int, sign float64) choice {
	return choice{place: i / c.lanes, lane: i % c.lanes, sign: sign}
}

// fill makes the record of coefficients on a basis, shared out.
func (c *curved) fill(s *sharing, p *parts, alone []float64, fit *record) (*record, error) {
	basis, rest := s.coefficients(p, alone)
	at := make(map[int]float64)
	for q, i := range p.basis {
		at[i] = basis[q]
	}
	for d, k := range p.rest {
		at[s.places[k]] = rest[d]
	}
	var support []choice
	for k, i := range s.places {
		if _, ok := at[i]; ok || s.whole(i, at) {
			support = append(support, c.choiceOf(i, s.sign[k]))
		}
	}
	n := c.newton(c.f.rec, support, s.lambda)
	for _, b := range n.r.blocks {
		i := b.place*c.lanes + b.lane
		if b.width == 1 {
			n.r.beta[b.at] = at[i]
			continue
		}
		for t, d := range s.direction(i, fit.u) {
			n.r.beta[b.at+t] = at[i] * d
		}
	}
	n.r.bend = fit.bend
	n.evaluate()
	if err := n.balance(); err != nil {
		return nil, err
	}
	n.certify()
	return n.r, nil
}

// whole reports whether a single column stands on the border for all of an even
// number of classes, and is in for some: its classes are then balanced together,
// whichever are 0 at the least squares.
func (s *sharing) whole(i int, at map[int]float64) bool {
	lanes := s.f.lanes()
	if lanes%2 != 0 || s.f.penalty.mix < 1 || s.f.work.width(i/lanes) > 1 {
		return false
	}
	in := false
	for lane := range lanes {
		j := i - i%lanes + lane
		if !slices.Contains(s.places, j) {
			return false
		}
		_, ok := at[j]
		in = in || ok
	}
	return in
}

// informs reports whether the likelihood sees a column at all.
func (s *sharing) informs(i int) bool {
	h := s.curved.seen
	if h == nil {
		return true
	}
	k := h.place(i)
	return h.row[k][k] > seenShare*kernel.Dot(h.a[k], h.a[k])/s.f.d.total
}
