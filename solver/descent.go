package solver

import (
	"math"

	"holdfast/solver/kernel"
)

const (
	// sweeps of block coordinate descent over one quadratic model.
	sweeps = 2000
	// settled is the largest move, as a share of what is missing for the optimum of
	// the problem itself, at which a sweep ends the descent: the model is no
	// better than that (inexact steps, Lee, Sun & Saunders 2014, section 3).
	settled = 0.03
)

// strip is a block of coefficients of a quadratic model: width of them, from
// first.
type strip struct {
	unit         int32
	first, width int
}

// descent solves a quadratic model with groups by block coordinate descent
// (Tseng 2001, J. Optim. Theory Appl. 109:475-494), a block at a time: of a group
// by the step of a majorising multiple of the identity, which is exact for an
// orthonormal block (Yuan & Lin 2006, JRSS-B 68:49-67).
type descent struct {
	h      *symmetric
	strips []strip
	p      *penalty
	lambda float64
	enough float64 // largest move, in units of the gradient, at which a sweep is the last
	beta   []float64
	r      []float64 // gradient of the model at beta
	block  []float64
}

// run sweeps until nothing moves. What it ends at is a direction of descent all the
// same where the sweeps run out.
func (d *descent) run() {
	for k := range sweeps {
		// Every fourth sweep looks at all blocks, the others at those that are not 0.
		all := k%4 == 0
		if d.sweep(all) > d.enough {
			continue
		}
		if all || d.sweep(true) <= d.enough {
			return
		}
	}
}

// sweep goes over the blocks once and returns the largest move, in units of the
// gradient.
func (d *descent) sweep(all bool) float64 {
	most := 0.0
	for _, s := range d.strips {
		switch {
		case d.p.always(s.unit):
			if h := d.h.row[s.first][s.first]; h > 0 {
				most = max(most, math.Abs(d.r[s.first]))
				d.move(s.first, d.r[s.first]/h)
			}
		case all || d.size(s) > 0:
			most = max(most, d.shrink(s))
		}
	}
	return most
}

func (d *descent) size(s strip) float64 {
	return length(d.beta[s.first : s.first+s.width])
}

// shrink makes one proximal step on a block.
func (d *descent) shrink(s strip) float64 {
	t, ridge, steep := d.p.threshold(s.unit, d.lambda), d.p.ridge(s.unit, d.lambda), d.steepness(s)
	if steep <= 0 {
		return 0
	}
	d.block = resize(d.block, s.width)
	for k := range s.width {
		i := s.first + k
		d.block[k] = d.r[i] + float64(steep*d.beta[i])
	}
	size, share, most := length(d.block), 0.0, 0.0
	if size > t {
		share = (1 - t/size) / (steep + ridge)
	}
	for k := range s.width {
		i := s.first + k
		by := float64(share*d.block[k]) - d.beta[i]
		most = max(most, steep*math.Abs(by))
		d.move(i, by)
	}
	return most
}

// steepness bounds the largest eigenvalue of a block of the Hessian by its row
// sums (Gershgorin 1931).
func (d *descent) steepness(s strip) float64 {
	most := 0.0
	for k := range s.width {
		sum := 0.0
		for l := range s.width {
			sum += math.Abs(d.h.row[s.first+k][s.first+l])
		}
		most = max(most, sum)
	}
	return most
}

func (d *descent) move(i int, by float64) {
	if by != 0 {
		d.beta[i] += by
		kernel.AddScaled(-by, d.h.row[i], d.r)
	}
}
