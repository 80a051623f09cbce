package solver

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"holdfast/solver/kernel"
)

const (
	// certified is the largest violation, and the largest relative duality
	// gap, of a fit that is recorded (DESIGN 4, gaussian).
	certified = 1e-10
	// goodEnough ends the refinement: below it is rounding.
	goodEnough = 1e-13
	// refinements of a record; each gains about ten digits or none.
	refinements = 5
	// unresolved is the share of the threshold that rounding of a gradient
	// may amount to (DESIGN 4: "not resolvable in these units").
	unresolved = 1e-8
	// rounding of a sum of products, relative to the sum of their sizes.
	rounding = 8 * 0x1p-52
	// weakly is the size of a coefficient, relative to its threshold, below
	// which its margin is computed in full.
	weakly = 1e-3
)

// record is a fit at one lambda in scaled units. It is a function of the
// draw, the lattice and the certified supports so far: solver state never
// enters, so that any history gives the same bits.
type record struct {
	lambda  float64
	units   []int32   // selected candidates, ascending
	support []choice  // the parts of them that are not zero
	members []int     // places in the working set: always-in columns, then candidates in order of entry, then unit
	sign    []float64 // 0 for always-in columns
	beta    []float64
	chol    factor // of the members' Hessian; rows are shared with earlier records and never written
	u       []float64
	grad    []float64 // of the members at u
	spread  float64   // root mean square of u
	cert    certificate
	limit   float64  // of the violation and the gap
	blocks  []block  // of the curved core, in place of members and sign
	gone    []choice // groups that the curved core found to be better off at 0
	loss    float64  // likewise: mean loss
	bend    *hessian // likewise: where it was last made
}

// certificate is how well a fit meets its optimality conditions.
type certificate struct {
	violation float64
	gap       float64
	objective float64
}

// finish is the only maker of record numbers: the fit on a given support at
// lambda, following the record of the step before.
func (f *fitting) finish(prev *record, support []choice, lambda float64) (*record, error) {
	r := &record{lambda: lambda, limit: certified}
	keep := r.order(f, prev, support)
	if err := r.factorise(f, prev, keep); err != nil {
		return nil, err
	}
	r.solve(f)
	r.certify(f)
	r.declare(f)
	return r, nil
}

// order lines the members up: those of the step before that stay, in their
// order, then newcomers by unit. It returns how many rows of the factor before
// can be kept.
func (r *record) order(f *fitting, prev *record, support []choice) (keep int) {
	w := &f.work
	chosen := make(map[int]float64, len(support))
	for _, c := range support {
		chosen[c.place] = c.sign
	}
	r.members = make([]int, 0, len(support)+len(prev.members))
	same := true
	for k, i := range prev.members {
		sign, stays := chosen[i]
		if f.penalty.always(w.units[i]) {
			sign, stays = 0, true
		}
		if !stays {
			same = false
			continue
		}
		if same {
			keep = k + 1
		}
		r.members, r.sign = append(r.members, i), append(r.sign, sign)
		delete(chosen, i)
	}
	fresh := make([]choice, 0, len(chosen))
	for _, c := range support {
		if _, ok := chosen[c.place]; ok {
			fresh = append(fresh, c)
		}
	}
	slices.SortFunc(fresh, func(a, b choice) int { return int(w.units[a.place]) - int(w.units[b.place]) })
	for _, c := range fresh {
		r.members, r.sign = append(r.members, c.place), append(r.sign, c.sign)
	}
	return keep
}

// factorise extends the kept rows of the factor before; a diagonal that moves
// with lambda is factored anew.
func (r *record) factorise(f *fitting, prev *record, keep int) error {
	w, p := &f.work, f.penalty
	keep = min(keep, prev.chol.size()) // a shared record has no factor
	if p.quadratic() && prev.lambda != r.lambda {
		keep = 0
	}
	r.chol.row = append(make([][]float64, 0, len(r.members)), prev.chol.row[:keep]...)
	row := make([]float64, len(r.members))
	for k := keep; k < len(r.members); k++ {
		i := r.members[k]
		for q, j := range r.members[:k] {
			row[q] = w.h.row[i][j]
		}
		if !r.chol.push(row[:k], w.h.row[i][i]+p.ridge(w.units[i], r.lambda), breakdown) {
			return fmt.Errorf("the support became linearly dependent at %s", f.m.name(w.units[i]))
		}
	}
	return nil
}

// solve finds the coefficients from the factor, then corrects them by the
// gradient of the actual residual until its violation is rounding.
func (r *record) solve(f *fitting) {
	w, p := &f.work, f.penalty
	r.beta = make([]float64, len(r.members))
	for k, i := range r.members {
		r.beta[k] = w.c[i] - float64(r.sign[k]*p.threshold(w.units[i], r.lambda))
	}
	r.chol.solve(r.beta)
	r.u = f.residual()
	r.grad = make([]float64, len(r.members))
	r.score(f)
	best := r.worst(f)
	for range refinements {
		if best <= goodEnough {
			return
		}
		trial := *r
		trial.beta, trial.u, trial.grad = trial.corrected(f), f.residual(), make([]float64, len(r.grad))
		trial.score(f)
		now := trial.worst(f)
		if !(now < best) {
			f.dropResidual(trial.u)
			return
		}
		f.dropResidual(r.u)
		*r, best = trial, now
	}
}

// residual returns a buffer for a record's residual, of an earlier record where
// one has been dropped.
func (f *fitting) residual() []float64 {
	n := len(f.spareU)
	if n == 0 {
		return make([]float64, f.lanes()*len(f.d.rows))
	}
	u := f.spareU[n-1]
	f.spareU = f.spareU[:n-1]
	return resize(u, f.lanes()*len(f.d.rows))
}

func (f *fitting) dropResidual(u []float64) { f.spareU = append(f.spareU, u) }

// corrected returns the coefficients after one Newton correction.
func (r *record) corrected(f *fitting) []float64 {
	step := make([]float64, len(r.beta))
	for k := range step {
		step[k] = r.residue(f, k)
	}
	r.chol.solve(step)
	for k := range step {
		step[k] += r.beta[k]
	}
	return step
}

// residue is what is missing for member k's optimality condition.
func (r *record) residue(f *fitting, k int) float64 {
	u, p := f.work.units[r.members[k]], f.penalty
	return r.grad[k] - float64(p.ridge(u, r.lambda)*r.beta[k]) - float64(r.sign[k]*p.threshold(u, r.lambda))
}

// score computes the residual of the record and the members' gradients.
func (r *record) score(f *fitting) {
	f.fit = resize(f.fit, len(r.u))
	f.work.fitted(r.members, r.beta, f.fit)
	f.d.residual(f.fit, r.u)
	for k, i := range r.members {
		r.grad[k] = kernel.Dot(f.work.z[i], r.u) / f.d.total
	}
}

// worst is the largest violation among the members (DESIGN 4).
func (r *record) worst(f *fitting) float64 {
	if r.lambda == 0 {
		return r.worstUnpenalised(f)
	}
	v := 0.0
	for k, i := range r.members {
		t := f.penalty.threshold(f.work.units[i], r.lambda)
		if r.sign[k] == 0 {
			t = r.lambda
		}
		v = max(v, math.Abs(r.residue(f, k))/t)
	}
	return v
}

// worstUnpenalised is |x'u| / (||x|| ||u||). A residual that is nothing but
// rounding has no direction to speak of, so its length counts as at least
// that of the rounding.
func (r *record) worstUnpenalised(f *fitting) float64 {
	size := math.Sqrt(kernel.Dot(f.d.y, f.d.y))
	for k, i := range r.members {
		size += float64(math.Abs(r.beta[k]) * math.Sqrt(f.work.h.row[i][i]*f.d.total))
	}
	length := max(math.Sqrt(kernel.Dot(r.u, r.u)), size*0x1p-50/certified)
	v := 0.0
	for k, i := range r.members {
		if d := math.Sqrt(f.work.h.row[i][i]*f.d.total) * length; d > 0 {
			v = max(v, math.Abs(r.grad[k])*f.d.total/d)
		}
	}
	return v
}

// certify computes the violation and the duality gap of the record, the gap in
// the form that is free of cancellation (DESIGN 4): the dual point is the
// residual shrunk by c until every candidate's gradient is within bounds. What
// is not in the support is within them already (checked before a record is
// taken), so the members alone set c.
func (r *record) certify(f *fitting) {
	p, n := f.penalty, f.d.total
	r.cert = certificate{violation: r.worst(f)}
	square, most, l1 := kernel.Dot(r.u, r.u), 1.0, 0.0
	r.spread = math.Sqrt(square / n)
	for k, i := range r.members {
		if r.sign[k] == 0 || r.lambda == 0 {
			continue
		}
		u := f.work.units[i]
		ridge := p.ridge(u, r.lambda)
		square += float64(n * float64(ridge*r.beta[k]) * r.beta[k])
		l1 += float64(p.threshold(u, r.lambda) * math.Abs(r.beta[k]))
		most = max(most, math.Abs(r.grad[k]-float64(ridge*r.beta[k]))/p.threshold(u, r.lambda))
	}
	c := 1 / most
	gap := float64((1-c)*(1-c)*square) / (2 * n)
	for k, i := range r.members {
		if r.lambda == 0 {
			continue
		}
		if r.sign[k] == 0 {
			gap -= float64(c * r.beta[k] * r.grad[k])
			continue
		}
		u := f.work.units[i]
		g := r.grad[k] - float64(p.ridge(u, r.lambda)*r.beta[k])
		gap += float64(p.threshold(u, r.lambda)*math.Abs(r.beta[k])) - float64(c*r.beta[k]*g)
	}
	r.cert.objective = square/(2*n) + l1
	if r.cert.objective > 0 {
		r.cert.gap = math.Abs(gap) / r.cert.objective
	}
}

// check says why a record may not be kept, or nil. Units in which a gradient
// cannot be resolved come first: they are the cause of a violation then.
func (r *record) check(f *fitting) error {
	if err := r.resolvable(f); err != nil {
		return err
	}
	return r.reached()
}

// reached says why a record is not at the optimum of its support, or nil.
func (r *record) reached() error {
	if !(r.cert.violation <= r.limit) || !(r.cert.gap <= r.limit) {
		return fmt.Errorf("violation %.1e, gap %.1e: above %.0e", r.cert.violation, r.cert.gap, r.limit)
	}
	return nil
}

// resolvable checks that rounding of the members' gradients is small beside
// their thresholds.
func (r *record) resolvable(f *fitting) error {
	for _, c := range r.support {
		if r.lambda > 0 && f.blur(r, c.place) > unresolved {
			return errors.New(f.m.name(f.work.units[c.place]) + ": not resolvable in these units")
		}
	}
	return nil
}

// weak lists the candidates of the support whose margin does not exceed the
// border: |b| / ((H^-1)_kk * threshold), negative where the sign is wrong.
func (r *record) weak(f *fitting) []choice {
	var out []choice
	for k, i := range r.members {
		if r.sign[k] == 0 || r.lambda == 0 {
			continue
		}
		t := f.penalty.threshold(f.work.units[i], r.lambda)
		size := r.beta[k] * r.sign[k] / t
		if size > weakly {
			continue
		}
		if size <= 0 || size/r.chol.inverseDiagonal(k) <= border {
			out = append(out, choice{place: i, sign: r.sign[k]})
		}
	}
	return out
}

// declare lists what the record selects.
func (r *record) declare(f *fitting) {
	r.units, r.support = nil, nil
	for k, i := range r.members {
		if r.sign[k] != 0 {
			r.units = append(r.units, f.work.units[i])
			r.support = append(r.support, choice{place: i, sign: r.sign[k]})
		}
	}
	slices.Sort(r.units)
}

func (m *Model) name(unit int32) string {
	if unit == m.interceptUnit() {
		return "the intercept"
	}
	return m.p.Names[m.design(unit)]
}
