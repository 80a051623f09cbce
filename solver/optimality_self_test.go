package solver_test

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"holdfast/solver"
)

// TestPlainScores holds the plain scores to finite differences of the plain
// losses, so that the check itself is checked.
func TestPlainScores(t *testing.T) {
	for family := solver.Gaussian; family <= solver.Cox; family++ {
		for seed := range uint64(40) {
			q, d := inventPlain(family, seed)
			v := q.view(d.count, d.weight)
			r := rand.New(rand.NewPCG(seed, 1))
			eta := make([][]float64, q.classCount())
			for c := range eta {
				for range v.row {
					eta[c] = append(eta[c], r.NormFloat64())
				}
			}
			loss, score := v.loss(eta)
			c, k := r.IntN(len(eta)), r.IntN(len(v.row))
			const h = 1e-5
			eta[c][k] += h
			up, _ := v.loss(eta)
			eta[c][k] -= 2 * h
			down, _ := v.loss(eta)
			if slope := (down - up) / (2 * h); math.Abs(slope-score[c][k]) > 1e-7*max(1, math.Abs(loss)) {
				t.Errorf("%v, seed %d: score %g, the loss falls by %g", family, seed, score[c][k], slope)
			}
		}
	}
}

// TestPlainCheckNotices spoils certified fits, one number at a time: the plain
// check must object to each.
func TestPlainCheckNotices(t *testing.T) {
	for family := solver.Gaussian; family <= solver.Cox; family++ {
		spoilt := 0
		for seed := range uint64(60) {
			q, d := inventPlain(family, seed)
			m, err := solver.NewModel(context.Background(), q.problem())
			if err != nil {
				t.Fatal(err)
			}
			if m.Fittable(d.sample()) != nil {
				continue
			}
			fits, err := m.FitAt(context.Background(), d.sample(), []float64{m.LambdaMax() * 0.3})
			if err != nil {
				t.Fatal(err)
			}
			f, err := q.ofFit(fits[0])
			if err != nil {
				t.Fatal(err)
			}
			spoilt += newCheck(q, d).spoilAll(t, f, seed)
		}
		if spoilt < 150 {
			t.Errorf("%v: only %d fits were spoilt", family, spoilt)
		}
	}
}

// spoilAll moves every number of a fit by 1e-4 in units of the penalty, drops
// every coefficient, and returns how many spoilt fits there were.
func (c *check) spoilAll(t *testing.T, f plainFit, seed uint64) int {
	spoilt := 0
	try := func(b *float64, to float64, what string) {
		old := *b
		*b = to
		if r := c.state(f).verdict(); !(r.excess() > c.q.tolerance()) {
			t.Errorf("%v, seed %d: %s from %g to %g goes unnoticed (violation %g)", c.q.family, seed, what, old, to, r.violation)
		}
		*b = old
		spoilt++
	}
	for i := range f.intercept {
		try(&f.intercept[i], f.intercept[i]+1e-4*f.lambda, "an intercept")
	}
	for a, j := range c.q.always {
		for class := range f.always[a] {
			if !c.v.still[j] {
				try(&f.always[a][class], f.always[a][class]+1e-4*f.lambda/c.v.sd[j], "an always-in coefficient")
			}
		}
	}
	for u, terms := range f.coef {
		for i, j := range c.q.units[u] {
			for class, b := range terms[i] {
				if b != 0 {
					try(&terms[i][class], b+1e-4*f.lambda/c.v.sd[j], "a coefficient")
					try(&terms[i][class], 0, "a coefficient")
				}
			}
		}
	}
	return spoilt
}
