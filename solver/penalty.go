package solver

import (
	"math"
	"slices"
)

// border is the one margin that decides both sides: a candidate is selected
// only where its margin exceeds it (DESIGN 4). It lies far above the rounding
// of a gauge (about 1e-14) and far below any margin met on real data (1e-9).
const border = 1e-10

// isOut reports whether a candidate of this gauge (|gradient| over its
// threshold) may stay out of the model.
func isOut(gauge float64) bool { return gauge-1 <= border }

// penalty is the elastic net on single columns, in scaled units:
// lambda * weight * (mix*|b| + (1-mix)/2*b^2). Weight 0 is an always-in column.
type penalty struct {
	mix    float64
	soft   float64   // what the quadratic part is multiplied by: 1, or 1/2 for two classes
	weight []float64 // per unit: candidates, then always-in columns and the intercept
	uneven bool      // not all candidates weigh 1
}

// of returns the penalty of a draw: with jitter each weight is divided by W
// (Meinshausen & Buhlmann 2010, section 3.1).
func (p *penalty) of(s *Sample) *penalty {
	if s.Jitter == nil {
		return p
	}
	q := &penalty{mix: p.mix, soft: p.soft, weight: slices.Clone(p.weight), uneven: true}
	for c, w := range s.Jitter {
		q.weight[c] /= w
	}
	return q
}

// threshold is the size that a unit's gradient must exceed to enter.
func (p *penalty) threshold(unit int32, lambda float64) float64 {
	return float64(lambda * p.mix * p.weight[unit])
}

// ridge is what the quadratic part adds to the Hessian's diagonal.
func (p *penalty) ridge(unit int32, lambda float64) float64 {
	return float64(lambda * (1 - p.mix) * p.weight[unit] * p.soft)
}

func (p *penalty) always(unit int32) bool { return p.weight[unit] == 0 }

// quadratic reports whether the diagonal of the Hessian moves with lambda.
func (p *penalty) quadratic() bool { return p.mix < 1 }

// gauge is |gradient| relative to the threshold: at most 1 may stay out.
func (p *penalty) gauge(unit int32, gradient, lambda float64) float64 {
	return math.Abs(gradient) / p.threshold(unit, lambda)
}
