package solver

import (
	"fmt"
	"math"
	"slices"

	"holdfast/solver/kernel"
)

// family is what a kind of outcome supplies to the curved core for one draw:
// loss, score and curvature. Linear predictors eta are plain, lane after lane;
// score vectors are root-weighted: sqrt(w) times the negative derivative of the
// loss, so that a gathered column's gradient is its product with them over N.
type family interface {
	// take reads the outcome of a draw's rows.
	take(d *drawn)
	// fittable says why no finite fit exists, whatever the columns; nil if one may.
	fittable() error
	// score overwrites u with the score at eta.
	score(eta, u []float64)
	// loss returns the mean loss at eta, which may be infinite where eta is far off.
	loss(eta []float64) float64
	// intercepts are where the fit of the intercept alone starts, given offsets (nil:
	// none); none for Cox.
	intercepts(offset []float64) []float64
	// bend returns the curvature at eta.
	bend(eta []float64) curvature
	// deviance is the mean unit deviance at eta (STATISTICS 11), for Cox -2 log
	// partial likelihood.
	deviance(eta []float64) float64
}

// newFamily returns the family of a problem.
func newFamily(p *Problem) family {
	switch p.Family {
	case Binomial:
		return &pointwise{p: p, at: binomialLoss, mean: binomialMean, unit: binomialDeviance, check: bothClasses}
	case Poisson:
		return &pointwise{p: p, at: poissonLoss, mean: poissonMean, unit: poissonDeviance, check: someCount}
	case Multinomial:
		return &multinomial{p: p}
	case Cox:
		return &cox{p: p}
	}
	return &pointwise{p: p, at: gaussianLoss, mean: gaussianMean, unit: gaussianDeviance, check: anyOutcome}
}

// pointwise is a family whose loss is a sum over rows with one linear predictor
// each.
type pointwise struct {
	p     *Problem
	at    func(y, eta float64) float64      // loss
	mean  func(eta float64) (mu, v float64) // mean and variance function
	unit  func(y, eta float64) float64      // deviance
	check func(y, w []float64) error

	d      *drawn
	y      []float64
	values []float64 // scratch: one per row
}

func (f *pointwise) take(d *drawn) {
	f.d = d
	f.y = resize(f.y, len(d.rows))
	kernel.Gather(f.y, f.p.Outcome, d.rows, 0, 1)
}

func (f *pointwise) fittable() error { return f.check(f.y, f.d.weight) }

func (f *pointwise) score(eta, u []float64) {
	for k, e := range eta {
		mu, _ := f.mean(e)
		u[k] = f.y[k] - mu
	}
	for k, r := range f.d.root {
		u[k] *= r
	}
}

func (f *pointwise) loss(eta []float64) float64 {
	f.values = resize(f.values, len(eta))
	for k, e := range eta {
		f.values[k] = f.at(f.y[k], e)
	}
	return f.d.weighted(f.values) / f.d.total
}

func (f *pointwise) bend(eta []float64) curvature {
	root := make([]float64, len(eta))
	for k, e := range eta {
		_, v := f.mean(e)
		root[k] = math.Sqrt(v)
	}
	return pointwiseCurvature(root)
}

// pointwiseCurvature is the square root of the variance function, by row.
type pointwiseCurvature []float64

func (c pointwiseCurvature) carry(z []float64, _ int) (a, b []float64) {
	a = make([]float64, len(z))
	for k, s := range c {
		a[k] = s * z[k]
	}
	return a, nil
}

// intercepts is the link of the mean, less that of the offsets: the fit itself where
// there are none, or where counts have them.
func (f *pointwise) intercepts(offset []float64) []float64 {
	mean := f.d.weighted(f.y) / f.d.total
	f.values = resize(f.values, len(f.y))
	for k := range f.values {
		f.values[k] = 0
		if offset != nil {
			f.values[k] = offset[k]
		}
	}
	switch f.p.Family {
	case Binomial:
		return []float64{kernel.Log(mean/(1-mean)) - f.d.weighted(f.values)/f.d.total}
	case Poisson:
		most := slices.Max(f.values)
		for k, o := range f.values {
			f.values[k] = kernel.Exp(o - most)
		}
		return []float64{kernel.Log(mean/(f.d.weighted(f.values)/f.d.total)) - most}
	}
	return []float64{mean - f.d.weighted(f.values)/f.d.total}
}

func (f *pointwise) deviance(eta []float64) float64 {
	f.values = resize(f.values, len(eta))
	for k, e := range eta {
		f.values[k] = f.unit(f.y[k], e)
	}
	return f.d.weighted(f.values) / f.d.total
}

func gaussianLoss(y, eta float64) float64 { return gaussianDeviance(y, eta) / 2 }

func gaussianMean(eta float64) (mu, v float64) { return eta, 1 }

func gaussianDeviance(y, eta float64) float64 {
	r := y - eta
	return r * r
}

func anyOutcome([]float64, []float64) error { return nil }

// binomialMean has e^-|eta| only, so that nothing overflows.
func binomialMean(eta float64) (mu, v float64) {
	t := kernel.Exp(-math.Abs(eta))
	below, above := t/(1+t), 1/(1+t)
	if eta < 0 {
		return below, float64(below * above)
	}
	return above, float64(below * above)
}

func binomialLoss(y, eta float64) float64 {
	loss := kernel.Log1p(kernel.Exp(-math.Abs(eta)))
	if y > 0.5 && eta < 0 || y < 0.5 && eta > 0 {
		loss += math.Abs(eta)
	}
	return loss
}

// clip is how near to 0 or 1 a probability may be in a deviance (STATISTICS 11).
const clip = 1e-15

func binomialDeviance(y, eta float64) float64 {
	mu, _ := binomialMean(eta)
	if y < 0.5 {
		mu, _ = binomialMean(-eta)
	}
	return -2 * kernel.Log(min(max(mu, clip), 1-clip))
}

func bothClasses(y, _ []float64) error {
	for _, v := range y {
		if v != y[0] {
			return nil
		}
	}
	return fmt.Errorf("the outcome is the same in all %d rows", len(y))
}

func poissonLoss(y, eta float64) float64 { return kernel.Exp(eta) - float64(y*eta) }

func poissonMean(eta float64) (mu, v float64) {
	mu = kernel.Exp(eta)
	return mu, mu
}

func poissonDeviance(y, eta float64) float64 {
	mu := kernel.Exp(eta)
	if y == 0 {
		return 2 * mu
	}
	return 2 * (float64(y*(kernel.Log(y)-eta)) - (y - mu))
}

func someCount(y, _ []float64) error {
	for _, v := range y {
		if v > 0 {
			return nil
		}
	}
	return fmt.Errorf("all %d counts are 0", len(y))
}
