package solver

import (
	"fmt"
	"math"

	"holdfast/solver/kernel"
)

// multinomial is the symmetric multinomial logit: a linear predictor per class,
// of which a common shift means nothing.
type multinomial struct {
	p *Problem
	d *drawn
	y []int
}

func (f *multinomial) take(d *drawn) {
	f.d, f.y = d, f.y[:0]
	for _, r := range d.rows {
		f.y = append(f.y, int(f.p.Outcome[r]))
	}
}

func (f *multinomial) fittable() error {
	seen := make([]bool, f.p.Classes)
	for _, c := range f.y {
		seen[c] = true
	}
	for c, ok := range seen {
		if !ok {
			return fmt.Errorf("class %d of the outcome has no row", c)
		}
	}
	return nil
}

// probabilities of one row into q, and the log of what they were divided by.
func (f *multinomial) probabilities(eta []float64, k int, q []float64) float64 {
	n, most := len(f.y), math.Inf(-1)
	for c := range q {
		most = max(most, eta[c*n+k])
	}
	sum := 0.0
	for c := range q {
		q[c] = kernel.Exp(eta[c*n+k] - most)
		sum += q[c]
	}
	for c := range q {
		q[c] /= sum
	}
	return most + kernel.Log(sum)
}

func (f *multinomial) score(eta, u []float64) {
	n, q := len(f.y), make([]float64, f.p.Classes)
	for k, y := range f.y {
		f.probabilities(eta, k, q)
		root := 1.0
		if f.d.root != nil {
			root = f.d.root[k]
		}
		for c, v := range q {
			if c == y {
				v -= 1
			}
			u[c*n+k] = -root * v
		}
	}
}

func (f *multinomial) loss(eta []float64) float64 {
	n := len(f.y)
	losses, q := make([]float64, n), make([]float64, f.p.Classes)
	for k, y := range f.y {
		losses[k] = f.probabilities(eta, k, q) - eta[y*n+k]
	}
	return f.d.weighted(losses) / f.d.total
}

func (f *multinomial) bend(eta []float64) curvature {
	n, q := len(f.y), make([]float64, f.p.Classes)
	c := &multinomialCurvature{p: make([]float64, len(eta)), root: make([]float64, len(eta))}
	for k := range f.y {
		f.probabilities(eta, k, q)
		for l, v := range q {
			c.p[l*n+k], c.root[l*n+k] = v, math.Sqrt(v)
		}
	}
	return c
}

// multinomialCurvature is the probabilities, class after class, and their square
// roots: the curvature between classes a and b is p_a (1{a=b} - p_b).
type multinomialCurvature struct{ p, root []float64 }

func (c *multinomialCurvature) carry(z []float64, lane int) (a, b []float64) {
	n := len(z)
	a, b = make([]float64, n), make([]float64, n)
	p, root := c.p[lane*n:(lane+1)*n], c.root[lane*n:(lane+1)*n]
	for k, v := range z {
		a[k], b[k] = root[k]*v, p[k]*v
	}
	return a, b
}

func (f *multinomial) intercepts([]float64) []float64 {
	share := make([]float64, f.p.Classes)
	for k, y := range f.y {
		w := 1.0
		if f.d.weight != nil {
			w = f.d.weight[k]
		}
		share[y] += w
	}
	for c, v := range share {
		share[c] = kernel.Log(v / f.d.total)
	}
	return share
}

func (f *multinomial) deviance(eta []float64) float64 {
	unit, q := make([]float64, len(f.y)), make([]float64, f.p.Classes)
	for k, y := range f.y {
		f.probabilities(eta, k, q)
		unit[k] = -2 * kernel.Log(min(max(q[y], clip), 1-clip))
	}
	return f.d.weighted(unit) / f.d.total
}
