package solver

import (
	"fmt"
	"slices"

	"holdfast/solver/kernel"
)

// exact is the core of a numeric outcome on single columns: one lane, a Hessian
// that does not move, and an active-set method that needs no iteration.
type exact struct{ f *fitting }

// begin fits the always-in columns. Those that depend on earlier ones within the
// draw are dropped, in table order.
func (e exact) begin() error {
	f := e.f
	f.d.setOutcome(f.m.p.Outcome)
	if f.same() {
		clear(f.d.y)
	}
	units := f.m.alwaysUnits()
	f.work.add(f, units)
	f.qp.grow(len(units))
	for i := range units {
		if f.work.h.row[i][i] > 0 {
			f.qp.push(&f.work.quadratic, f.penalty, 0, i, 0)
		}
	}
	if len(f.qp.members) > len(f.d.rows)-2 {
		return fmt.Errorf("an intercept and %d always-in columns leave nothing to explain of %d rows", len(f.qp.members), len(f.d.rows))
	}
	null := &record{members: slices.Clone(f.qp.members), sign: make([]float64, len(f.qp.members))}
	if err := null.factorise(f, &record{}, 0); err != nil {
		return err
	}
	null.solve(f)
	f.deflate(null)
	f.rec = null
	if err := f.qp.solve(&f.work.quadratic, f.penalty, 0); err != nil {
		return err
	}
	f.qp.save(&f.before)
	return nil
}

// same is the exact test for an outcome that does not vary in the draw.
func (f *fitting) same() bool {
	y := f.m.p.Outcome
	for _, r := range f.d.rows {
		if y[r] != y[f.d.rows[0]] {
			return false
		}
	}
	return true
}

// deflate takes the always-in fit out of the outcome, so that a large part of
// it does not drown the rest in its rounding; records hold what is added to it.
func (f *fitting) deflate(null *record) {
	f.whole = kernel.Dot(f.d.y, f.d.y)
	f.base = append(f.base[:0], null.beta...)
	clear(null.beta)
	copy(f.d.y, null.u)
	for i, z := range f.work.z {
		f.work.c[i] = kernel.Dot(z, f.d.y) / f.d.total
	}
}

func (e exact) solve(lambda float64) error {
	f := e.f
	f.qp.grow(len(f.work.units))
	return f.qp.solve(&f.work.quadratic, f.penalty, lambda)
}

func (e exact) support() []choice {
	f := e.f
	var s []choice
	for k, i := range f.qp.members {
		if !f.penalty.always(f.work.units[i]) {
			s = append(s, choice{place: i, sign: f.qp.sign[k]})
		}
	}
	return s
}

func (e exact) score(u []float64) {
	f := e.f
	members, beta := f.qp.members, make([]float64, len(f.qp.members))
	for k, i := range members {
		beta[k] = f.qp.beta[i]
	}
	f.fit = resize(f.fit, len(f.d.rows))
	f.work.fitted(members, beta, f.fit)
	f.d.residual(f.fit, u)
}

// residual overwrites u with what a fit leaves of the outcome.
func (d *drawn) residual(fitted, u []float64) {
	for i, y := range d.y {
		u[i] = y - fitted[i]
	}
}

// know takes the gradients of the working set's candidates, which the Gram
// matrix gives, so that the screen need not compute them.
func (e exact) know() {
	f := e.f
	for i, u := range f.work.units {
		if !f.penalty.always(u) {
			f.end.value[u] = f.qp.g[i] / f.penalty.threshold(u, 1)
			f.end.ref[u] = f.req.number
		}
	}
}

func (e exact) save() { e.f.qp.save(&e.f.before) }

func (e exact) keep(r *record) {
	s := &e.f.before
	s.members = append(s.members[:0], r.members...)
	s.sign = append(s.sign[:0], r.sign...)
	s.beta = append(s.beta[:0], r.beta...)
}

func (e exact) back(lambda float64) {
	f := e.f
	f.qp.grow(len(f.work.units))
	f.qp.restore(&f.before, &f.work.quadratic, f.penalty, lambda)
}

func (e exact) finish(support []choice, lambda float64) (*record, error) {
	return e.f.finish(e.f.rec, support, lambda)
}

func (e exact) weak(r *record) []choice { return r.weak(e.f) }

func (e exact) share(r *record, near []choice) (*record, error) { return e.f.share(r, near) }

func (e exact) values(r *record) []Coef {
	var list []Coef
	for k, i := range r.members {
		if r.sign[k] != 0 {
			list = append(list, Coef{Candidate: e.f.work.units[i], Value: r.beta[k] / e.f.work.scale[i]})
		}
	}
	slices.SortFunc(list, func(a, b Coef) int { return int(a.Candidate) - int(b.Candidate) })
	return list
}

func (e exact) always(r *record) []float64 {
	f := e.f
	out := make([]float64, len(f.m.p.Always))
	for k, i := range r.members {
		if u := f.work.units[i]; f.penalty.always(u) {
			out[int(u)-f.m.candidates()] = (f.base[k] + r.beta[k]) / f.work.scale[i]
		}
	}
	return out
}

func (e exact) level(*record) []float64 { return []float64{e.f.d.mean} }

func (e exact) nullLevel() []float64 { return []float64{e.f.d.mean} }

func (e exact) loss(r *record) float64 { return kernel.Dot(r.u, r.u) / (2 * e.f.d.total) }
