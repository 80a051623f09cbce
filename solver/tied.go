package solver

import (
	"cmp"
	"errors"
	"math"
	"slices"

	"holdfast/solver/kernel"
)

// share settles a step whose optimum is not unique: single columns that are
// linearly dependent, or classes that have a common shift (see sharing).
func (c *curved) share(r *record, near []choice) (*record, error) {
	c.f.work.complete(c.f.d.total)
	for _, q := range append(slices.Clone(near), r.support...) {
		if c.f.work.width(q.place) > 1 {
			return c.shareGroups(r, near)
		}
	}
	return c.shareColumns(r, near)
}

// shareColumns takes, of all coefficients with this fit, those of the least sum of
// squares.
func (c *curved) shareColumns(r *record, near []choice) (*record, error) {
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
		for _, b := range r.blocks {
			if b.same(q) {
				x[k] = math.Abs(r.beta[b.at])
			}
		}
	}
	if len(s.split(all).rest) == 0 {
		return nil, nil
	}
	if len(border) > mostShared {
		return nil, errors.New("too many candidates on the border are linearly dependent")
	}
	return s.settle(x)
}

// shared is the record of shares: the fit on a basis, by the signs that the border
// gives, whatever those of its coefficients are, shared out.
func (c *curved) shared(s *sharing, p *parts) (*record, error) {
	var support []choice
	for q, i := range p.basis {
		if k := p.which[q]; k >= 0 {
			support = append(support, c.choiceOf(i, s.sign[k]))
		}
	}
	n := c.newton(c.f.rec, support, s.lambda)
	n.anySign = true
	if err := n.converge(); err != nil {
		return nil, err
	}
	alone := make([]float64, len(p.basis))
	for _, b := range n.r.blocks {
		if q := slices.Index(p.basis, b.place*c.lanes+b.lane); q >= 0 {
			alone[q] = n.r.beta[b.at] - n.common(b)
		}
	}
	c.f.dropResidual(n.r.u)
	return c.fill(s, p, alone, n.r.bend)
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
func (c *curved) fill(s *sharing, p *parts, alone []float64, bend *hessian) (*record, error) {
	basis, rest := s.coefficients(p, alone)
	at := make(map[int]float64)
	for q, i := range p.basis {
		at[i] = basis[q]
	}
	var support []choice
	for d, k := range p.rest {
		at[s.places[k]] = rest[d]
	}
	for k, i := range s.places {
		if _, ok := at[i]; ok {
			support = append(support, c.choiceOf(i, s.sign[k]))
		}
	}
	n := c.newton(c.f.rec, support, s.lambda)
	for _, b := range n.r.blocks {
		n.r.beta[b.at] = at[b.place*c.lanes+b.lane]
	}
	n.r.bend = bend
	n.evaluate()
	if err := n.balance(); err != nil {
		return nil, err
	}
	n.certify()
	return n.r, nil
}

// shareGroups redoes a step at which groups stand on the border by a path that is
// free of history: the descent from 0 on everything at the border, in the order of
// units.
func (c *curved) shareGroups(r *record, near []choice) (*record, error) {
	border := append(slices.Clone(near), r.support...)
	slices.SortFunc(border, func(a, b choice) int { return int(c.f.work.units[a.place]) - int(c.f.work.units[b.place]) })
	if !c.dependent(border) {
		return nil, nil
	}
	return nil, errors.New("groups on the border are linearly dependent: their shares are not determined")
}

// dependent reports whether the columns of a support are linearly dependent.
func (c *curved) dependent(support []choice) bool {
	s := &sharing{f: c.f, curved: c}
	p := &parts{}
	for _, q := range append(slices.Clone(c.fixed), support...) {
		for t := range c.f.work.width(q.place) {
			if !s.join(p, (q.place+t)*c.lanes, -1) {
				return true
			}
		}
	}
	return false
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
