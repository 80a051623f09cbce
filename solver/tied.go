package solver

import (
	"errors"
	"math"
	"slices"
)

// share settles a step whose optimum is not unique: all classes of a candidate on
// the border together, or single columns that are linearly dependent (see
// sharing).
func (c *curved) share(r *record, near []choice) (*record, error) {
	if c.lanes > 1 {
		return c.shareClasses(r, near)
	}
	c.f.work.complete(c.f.d.total)
	for _, q := range append(slices.Clone(near), r.support...) {
		if c.f.work.width(q.place) > 1 {
			return c.shareGroups(r, near)
		}
	}
	return c.shareColumns(r, near)
}

// shareClasses takes in the classes on the border of candidates that are then in
// for all of an even number of classes: a common shift of these changes neither fit
// nor penalty, and the record balances them (DESIGN 4).
func (c *curved) shareClasses(r *record, near []choice) (*record, error) {
	if c.lanes%2 != 0 || c.f.penalty.mix < 1 {
		return nil, nil
	}
	count, sum := make(map[int]int), make(map[int]float64)
	all := append(slices.Clone(r.support), near...)
	for _, q := range all {
		count[q.place]++
		sum[q.place] += q.sign
	}
	support := slices.Clone(r.support)
	for _, q := range near {
		if count[q.place] == c.lanes && sum[q.place] == 0 && c.f.work.width(q.place) == 1 {
			support = append(support, q)
		}
	}
	if len(support) == len(r.support) {
		return nil, nil
	}
	s, err := c.record(c.f.rec, support, r.lambda)
	if err != nil {
		return nil, err
	}
	if len(c.weak(s)) > 0 {
		c.f.dropResidual(s.u)
		return nil, nil
	}
	return s, nil
}

// shareColumns takes, of all coefficients with this fit, those of the least sum of
// squares.
func (c *curved) shareColumns(r *record, near []choice) (*record, error) {
	s := &sharing{f: c.f, lambda: r.lambda, curved: c, found: r}
	for _, q := range c.fixed {
		s.fixed = append(s.fixed, q.place)
	}
	border := append(slices.Clone(near), r.support...)
	slices.SortFunc(border, func(a, b choice) int { return int(c.f.work.units[a.place]) - int(c.f.work.units[b.place]) })
	all, x := make([]int, len(border)), make([]float64, len(border))
	for k, q := range border {
		all[k] = k
		s.places, s.sign = append(s.places, q.place), append(s.sign, q.sign)
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

// shared is the record of shares.
func (c *curved) shared(s *sharing, p *parts, alone []float64) *record {
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
		if _, ok := at[i]; ok {
			support = append(support, choice{place: i, sign: s.sign[k]})
		}
	}
	n := &newton{c: c, r: &record{lambda: s.lambda, limit: s.found.limit}}
	n.lineUp(support)
	for _, b := range n.r.blocks {
		n.r.beta[b.at] = at[b.place]
	}
	n.evaluate()
	n.certify()
	return n.r
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
	w := &c.f.work
	var chol factor
	var in []int
	for _, q := range append(slices.Clone(c.fixed), support...) {
		for t := range w.width(q.place) {
			place := q.place + t
			row := make([]float64, len(in))
			for k, i := range in {
				row[k] = w.h.row[place][i]
			}
			if !chol.push(row, w.h.row[place][place], dependent) {
				return true
			}
			in = append(in, place)
		}
	}
	return false
}
