package solver

import (
	"fmt"
	"math"

	"holdfast/solver/kernel"
)

const (
	// enterTolerance is the relative excess over its threshold at which the
	// active-set method brings a member in: above rounding (1e-14), below
	// the border that decides what is recorded.
	enterTolerance = 1e-11
	// batch is how many members may enter in one iteration. A batch may step
	// in a wrong direction; single adds follow as soon as one does.
	batch = 16
	// iterations per member of the working set, and at least; far above any
	// count met, they turn an endless loop into a stated failure.
	iterations      = 20
	leastIterations = 2000
)

// activeSet solves the penalised quadratic problem exactly on a working set:
// minimise (1/2) b'Hb - c'b + sum of thresholds*|b| + (1/2) ridges*b^2. It
// follows history (warm starts, updated and downdated factor), so its numbers
// are screening numbers: only its support and signs are used, by the finish.
type activeSet struct {
	members []int     // places in the working set, in the factor's order
	sign    []float64 // of each member; 0 for always-in columns
	chol    factor
	beta    []float64 // per place in the working set
	g       []float64 // c - H beta, per place
	in      []bool    // per place
	lambda  float64   // for which chol's diagonal was made
	out     int       // place that the last exchange took out; -1: none
	b, row  []float64 // scratch
}

func (a *activeSet) reset() {
	a.members, a.sign, a.beta, a.g, a.in = a.members[:0], a.sign[:0], a.beta[:0], a.g[:0], a.in[:0]
	a.chol.truncate(0)
	a.lambda = 0
}

// grow makes room for members that joined the working set.
func (a *activeSet) grow(n int) {
	for len(a.beta) < n {
		a.beta, a.g, a.in = append(a.beta, 0), append(a.g, 0), append(a.in, false)
	}
}

// state is what is needed to go back to an earlier solution.
type state struct {
	members []int
	sign    []float64
	beta    []float64 // of members
}

func (a *activeSet) save(s *state) {
	s.members = append(s.members[:0], a.members...)
	s.sign = append(s.sign[:0], a.sign...)
	s.beta = s.beta[:0]
	for _, i := range a.members {
		s.beta = append(s.beta, a.beta[i])
	}
}

func (a *activeSet) restore(s *state, w *quadratic, p *penalty, lambda float64) {
	for _, i := range a.members {
		a.beta[i], a.in[i] = 0, false
	}
	a.members, a.sign = append(a.members[:0], s.members...), append(a.sign[:0], s.sign...)
	for k, i := range a.members {
		a.beta[i], a.in[i] = s.beta[k], true
	}
	a.refactor(w, p, lambda)
}

// refactor rebuilds the factor of the members, in their order. A member that
// depends on earlier ones is dropped: it is a start, not a solution, and
// members that share a fit are dependent.
func (a *activeSet) refactor(w *quadratic, p *penalty, lambda float64) {
	members, sign := a.members, a.sign
	a.chol.truncate(0)
	a.members, a.sign = a.members[:0], a.sign[:0]
	for k, i := range members {
		s := sign[k]
		if a.chol.push(a.products(w, i, len(a.members)), w.h.row[i][i]+p.ridge(w.units[i], lambda), dependent) {
			a.members, a.sign = append(a.members, i), append(a.sign, s)
		} else {
			a.beta[i], a.in[i] = 0, false
		}
	}
	a.lambda = lambda
}

// products returns column i's products with the first k members.
func (a *activeSet) products(w *quadratic, i, k int) []float64 {
	a.row = resize(a.row, k)
	for q, j := range a.members[:k] {
		a.row[q] = w.h.row[i][j]
	}
	return a.row
}

// solve moves to the optimum at lambda, from wherever it stands.
func (a *activeSet) solve(w *quadratic, p *penalty, lambda float64) error {
	a.grow(len(w.units))
	if p.quadratic() && a.lambda != lambda {
		a.refactor(w, p, lambda)
	}
	single := false
	a.out = -1
	most := leastIterations + iterations*len(w.units)
	for range most {
		dropped, stuck := a.step(w, p, lambda)
		if stuck {
			single = true
		}
		if dropped {
			continue
		}
		a.gradient(w, p, lambda)
		if !a.enter(w, p, lambda, single) {
			return nil
		}
	}
	return fmt.Errorf("the active-set method made %d iterations", most)
}

// step moves the members towards their joint optimum, as far as no sign
// changes; a member that reaches zero is dropped. stuck says that the step
// had no length.
func (a *activeSet) step(w *quadratic, p *penalty, lambda float64) (dropped, stuck bool) {
	if len(a.members) == 0 {
		return false, false
	}
	a.b = resize(a.b, len(a.members))
	for k, i := range a.members {
		a.b[k] = w.c[i] - float64(a.sign[k]*p.threshold(w.units[i], lambda))
	}
	a.chol.solve(a.b)
	length, hit := 1.0, -1
	for k, i := range a.members {
		if a.sign[k] == 0 || a.b[k]*a.sign[k] > 0 {
			continue
		}
		t := 0.0
		if a.beta[i] != 0 {
			t = a.beta[i] / (a.beta[i] - a.b[k])
		}
		if t < length || hit < 0 {
			length, hit = t, k
		}
	}
	for k, i := range a.members {
		a.beta[i] += float64(length * (a.b[k] - a.beta[i]))
	}
	if hit < 0 {
		return false, false
	}
	a.drop(hit)
	return true, length == 0
}

func (a *activeSet) drop(k int) {
	i := a.members[k]
	a.beta[i], a.in[i] = 0, false
	a.members = append(a.members[:k], a.members[k+1:]...)
	a.sign = append(a.sign[:k], a.sign[k+1:]...)
	a.chol.remove(k)
}

func (a *activeSet) gradient(w *quadratic, p *penalty, lambda float64) {
	copy(a.g, w.c)
	for _, i := range a.members {
		kernel.AddScaled(-a.beta[i], w.h.row[i], a.g)
	}
}

// enter brings in the members of the working set that violate most. It
// reports false where none does.
func (a *activeSet) enter(w *quadratic, p *penalty, lambda float64, single bool) bool {
	limit := batch
	if single {
		limit = 1
	}
	worst := a.violators(w, p, lambda, limit)
	moved := false
	for _, i := range worst {
		if a.push(w, p, lambda, i, math.Copysign(1, a.g[i])) {
			moved, a.out = true, -1
		} else if !moved {
			return a.exchange(w, p, lambda, i)
		}
	}
	return moved
}

// violators returns up to limit places outside the members whose gauge
// exceeds 1, the largest first.
func (a *activeSet) violators(w *quadratic, p *penalty, lambda float64, limit int) []int {
	var places [batch]int
	var gauges [batch]float64
	n := 0
	for i, g := range a.g {
		u := w.units[i]
		if a.in[i] || p.always(u) || math.Abs(g) <= p.threshold(u, lambda)*(1+enterTolerance) {
			continue
		}
		v := p.gauge(u, g, lambda)
		k := n
		if n < limit {
			n++
		} else if gauges[n-1] >= v {
			continue
		} else {
			k--
		}
		for ; k > 0 && gauges[k-1] < v; k-- {
			places[k], gauges[k] = places[k-1], gauges[k-1]
		}
		places[k], gauges[k] = i, v
	}
	return append([]int(nil), places[:n]...)
}

func (a *activeSet) push(w *quadratic, p *penalty, lambda float64, i int, sign float64) bool {
	if !a.chol.push(a.products(w, i, len(a.members)), w.h.row[i][i]+p.ridge(w.units[i], lambda), dependent) {
		return false
	}
	a.members, a.sign, a.in[i] = append(a.members, i), append(a.sign, sign), true
	return true
}

// exchange brings in a column that depends linearly on the members: it moves
// along the direction that leaves the fit as it is and lowers the penalty,
// until a member reaches zero, and puts the column in that member's stead. It
// reports false where that cannot lower the objective any more: where there is
// no such member, or where the column was itself taken out by the exchange
// before. What is left then is within rounding of the optimum, and the finish
// decides.
func (a *activeSet) exchange(w *quadratic, p *penalty, lambda float64, i int) bool {
	if i == a.out {
		return false
	}
	sign := math.Copysign(1, a.g[i])
	a.b = resize(a.b, len(a.members))
	copy(a.b, a.products(w, i, len(a.members)))
	a.chol.solve(a.b)
	length, hit := math.Inf(1), -1
	for k, j := range a.members {
		if a.sign[k] == 0 || -sign*a.b[k]*a.sign[k] >= 0 {
			continue
		}
		if t := a.beta[j] / (sign * a.b[k]); t < length {
			length, hit = t, k
		}
	}
	if hit < 0 {
		return false
	}
	for k, j := range a.members {
		a.beta[j] -= float64(length * sign * a.b[k])
	}
	a.out = a.members[hit]
	a.drop(hit)
	if a.push(w, p, lambda, i, sign) {
		a.beta[i] = length * sign
	}
	return true
}
