package solver_test

import (
	"fmt"
	"math"
	"slices"

	"holdfast/solver"
)

// Tolerances of DESIGN 4, and the rounding of a plain sum in units of its
// terms: 64 eps.
const (
	plainCertified         = 1e-8
	plainCertifiedGaussian = 1e-10
	plainRounding          = 64 * 0x1p-52
	evenDigits             = 5e-12 // an "even" weight is kept to twelve digits, so that it is the same on every machine
)

// verdict is what the plain check of one fit found: the largest violation, what
// rounding of the check itself can add to it, and where it is; and the largest
// rounding of all conditions.
type verdict struct {
	violation float64
	rounding  float64
	where     string
	blur      float64
}

func (r *verdict) note(violation, rounding float64, where string) {
	r.blur = max(r.blur, rounding)
	if !(violation-rounding <= r.violation-r.rounding) { // also NaN
		r.violation, r.rounding, r.where = violation, rounding, where
	}
}

// excess is the violation that rounding cannot explain.
func (r verdict) excess() float64 { return r.violation - r.rounding }

func (q *plain) tolerance() float64 {
	if q.family == solver.Gaussian {
		return plainCertifiedGaussian
	}
	return plainCertified
}

// check is a problem and a draw made ready for plain checks of its fits.
type check struct {
	q     *plain
	v     *plainView
	price []float64
	scale []float64
	basis [][][]float64 // of groups
}

func newCheck(q *plain, d plainDraw) *check {
	whole := q.whole()
	c := &check{q: q, v: q.view(d.count, d.weight), price: q.prices(whole, d.jitter)}
	c.scale = c.v.scales(whole)
	for u, cols := range q.units {
		var b [][]float64
		if q.isGroup(u) {
			b = c.v.basis(cols)
		}
		c.basis = append(c.basis, b)
	}
	return c
}

// fixed reports whether a candidate does not vary in the draw.
func (c *check) fixed(u int) bool {
	for _, j := range c.q.units[u] {
		if !c.v.still[j] {
			return false
		}
	}
	return true
}

// state is a fit with its residuals.
type state struct {
	c     *check
	f     plainFit
	loss  float64
	score [][]float64
	blur  [][]float64 // per class and row: what rounding of eta can do to the score, in eps
}

func (c *check) state(f plainFit) *state {
	s := &state{c: c, f: f}
	eta := c.v.eta(f)
	s.loss, s.score = c.v.loss(eta)
	s.blur = c.blur(f, eta)
	return s
}

// blur bounds the change of a score by rounding of the linear predictor and of
// the exponential sums.
func (c *check) blur(f plainFit, eta [][]float64) [][]float64 {
	out := make([][]float64, len(eta))
	for class := range eta {
		out[class] = make([]float64, len(c.v.row))
		for k, i := range c.v.row {
			size := 1.0
			if f.intercept != nil {
				size += math.Abs(f.intercept[class])
			}
			if c.q.offset != nil {
				size += math.Abs(c.q.offset[i])
			}
			c.v.each(f, class, func(j int32, b float64) { size += math.Abs(c.v.x[j][k] * b) })
			curvature := 1.0
			switch c.q.family {
			case solver.Gaussian:
				size += math.Abs(c.q.outcome[i])
			case solver.Poisson:
				curvature = math.Exp(eta[class][k])
			case solver.Cox:
				curvature = float64(len(c.v.row)) // a hazard adds up over the event times
			}
			out[class][k] = c.v.w[k] * size * curvature
		}
	}
	return out
}

// gradient is -dloss along a column of the draw, over N, and its rounding. In Cox
// a row's linear predictor moves the scores of all others.
func (s *state) gradient(class int, z []float64) (g, rounding float64) {
	largest := 0.0
	for _, c := range z {
		largest = max(largest, math.Abs(c))
	}
	for k := range z {
		reach := math.Abs(z[k])
		if s.c.q.family == solver.Cox {
			reach = largest
		}
		g += s.score[class][k] * z[k] / s.c.v.total
		rounding += plainRounding * (math.Abs(s.score[class][k])*math.Abs(z[k]) + s.blur[class][k]*reach) / s.c.v.total
	}
	return g, rounding
}

// verdict is the largest violation in the units of DESIGN 4.
func (s *state) verdict() verdict {
	var r verdict
	c := s.c
	for class := range s.score {
		if c.q.family != solver.Cox {
			g, rounding := s.gradient(class, plainOnes(len(c.v.row)))
			r.note(math.Abs(g)/s.f.lambda, rounding/s.f.lambda, fmt.Sprintf("intercept of class %d", class))
		}
		for a, j := range c.q.always {
			if c.v.sd[j] > 0 {
				g, rounding := s.gradient(class, c.column(j, c.v.sd[j]))
				r.note(math.Abs(g)/s.f.lambda, rounding/s.f.lambda, fmt.Sprintf("always-in %d of class %d", a, class))
			}
		}
		for u := range c.q.units {
			v, rounding := s.unit(u, class)
			r.note(v, rounding, fmt.Sprintf("candidate %d of class %d", u, class))
		}
	}
	s.sums(&r)
	return r
}

// column is a column centred over the draw, in units of scale.
func (c *check) column(j int32, scale float64) []float64 {
	z := make([]float64, len(c.v.row))
	for k := range z {
		z[k] = (c.v.x[j][k] - c.v.mean[j]) / scale
	}
	return z
}

// unit is the violation of a candidate in a class. A candidate that does not
// vary, or a column of a group that does not, must be 0.
func (s *state) unit(u, class int) (violation, rounding float64) {
	c := s.c
	for t, j := range c.q.units[u] {
		if c.v.still[j] && s.f.coef[u][t][class] != 0 {
			return math.Inf(1), 0
		}
	}
	if c.fixed(u) {
		return 0, 0
	}
	if c.q.isGroup(u) {
		return s.block(u, class)
	}
	g, rounding := s.gradient(class, c.column(c.q.units[u][0], c.scale[u]))
	b := s.f.coef[u][0][class] * c.scale[u]
	bound := s.f.lambda * c.q.mix * c.price[u]
	if b == 0 {
		return math.Abs(g)/bound - 1, rounding / bound
	}
	ridge := s.f.lambda * (1 - c.q.mix) * c.price[u] * b
	return math.Abs(g-ridge-math.Copysign(bound, b)) / bound, rounding/bound + plainRounding
}

// block is the violation of a group in a class.
func (s *state) block(u, class int) (violation, rounding float64) {
	c := s.c
	fitted, norm, size, in := s.fitted(u, class)
	var square float64
	bound := s.f.lambda * c.q.mix * c.price[u]
	for _, z := range c.basis[u] {
		g, r := s.gradient(class, z)
		rounding += r
		if in {
			theta := c.v.dot(z, fitted)
			g -= s.f.lambda*(1-c.q.mix)*c.price[u]*theta + bound*theta/norm
			rounding += plainRounding * size * bound / norm
		}
		square += g * g
	}
	rounding /= bound
	if c.q.groupWeight == solver.GroupEven {
		rounding += evenDigits * (1 + (1-c.q.mix)/c.q.mix*norm)
	}
	if in {
		return math.Sqrt(square) / bound, rounding
	}
	return math.Sqrt(square)/bound - 1, rounding
}

// fitted is a group's centred share of the linear predictor, its norm r, and
// the size of the terms it was added up from.
func (s *state) fitted(u, class int) (fitted []float64, norm, size float64, in bool) {
	v := s.c.v
	fitted = make([]float64, len(v.row))
	for t, j := range s.c.q.units[u] {
		b := s.f.coef[u][t][class]
		in = in || b != 0
		for k := range fitted {
			fitted[k] += b * (v.x[j][k] - v.mean[j])
		}
		size += math.Abs(b) * (v.sd[j] + math.Abs(v.mean[j]))
	}
	return fitted, math.Sqrt(v.dot(fitted, fitted)), size, in
}

// sums checks what ties the classes together: unpenalised coefficients add up
// to zero, and where the penalty leaves a shift open (the lasso with an even
// number of classes) the median interval has its middle at zero.
func (s *state) sums(r *verdict) {
	if s.c.q.family != solver.Multinomial {
		return
	}
	free := [][]float64{s.f.intercept}
	free = append(free, s.f.always...)
	for k, b := range free {
		size := 0.0
		for _, v := range b {
			size += math.Abs(v)
		}
		if size > 0 {
			r.note(math.Abs(plainSum(b))/size, plainRounding, fmt.Sprintf("sum over the classes of free coefficient %d", k))
		}
	}
	if n := s.c.q.classes; n%2 == 0 && s.c.q.mix == 1 {
		for u := range s.c.q.units {
			if s.c.q.isGroup(u) {
				continue
			}
			b := slices.Clone(s.f.coef[u][0])
			slices.Sort(b)
			if size := math.Abs(b[0]) + math.Abs(b[n-1]); size > 0 {
				r.note(math.Abs(b[n/2-1]+b[n/2])/size, plainRounding, fmt.Sprintf("middle of the classes of candidate %d", u))
			}
		}
	}
}

// penalty is that of the objective.
func (s *state) penalty() float64 {
	sum := 0.0
	for u := range s.c.q.units {
		for class := range s.score {
			r := s.size(u, class)
			sum += s.f.lambda * s.c.price[u] * (s.c.q.mix*r + (1-s.c.q.mix)/2*r*r)
		}
	}
	return sum
}

// size is |s_j b_j|, or the norm of a group.
func (s *state) size(u, class int) float64 {
	if s.c.q.isGroup(u) {
		_, norm, _, _ := s.fitted(u, class)
		return norm
	}
	return math.Abs(s.f.coef[u][0][class]) * s.c.scale[u]
}

// gap is the duality gap of DESIGN 4 (gaussian), relative to the objective: with
// u the residual, theta a candidate's scaled coefficients and k = lambda (1-mix) v
// the dual point is the residual shrunk until it is feasible.
func (s *state) gap() float64 {
	c, v := s.c, s.c.v
	loss, shrink := 2*s.loss, 1.0
	type part struct{ size, cross, bound float64 }
	var parts []part
	for u := range c.q.units {
		if c.fixed(u) {
			continue
		}
		k, bound := s.f.lambda*(1-c.q.mix)*c.price[u], s.f.lambda*c.q.mix*c.price[u]
		basis, fitted := c.basis[u], []float64(nil)
		if c.q.isGroup(u) {
			fitted, _, _, _ = s.fitted(u, 0)
		} else {
			z := c.column(c.q.units[u][0], c.scale[u])
			basis = [][]float64{z}
		}
		gauge, cross, size := 0.0, 0.0, 0.0
		for _, z := range basis {
			theta := s.f.coef[u][0][0] * c.scale[u]
			if c.q.isGroup(u) {
				theta = v.dot(z, fitted)
			}
			g, _ := s.gradient(0, z)
			g -= k * theta
			gauge += g * g
			cross += theta * g
			size += theta * theta
		}
		loss += v.total * k * size
		shrink = min(shrink, bound/math.Sqrt(gauge))
		parts = append(parts, part{math.Sqrt(size), cross, bound})
	}
	gap := (1 - shrink) * (1 - shrink) * loss / (2 * v.total)
	for _, p := range parts {
		gap += p.bound*p.size - shrink*p.cross
	}
	return gap / (s.loss/v.total + s.penalty())
}

// free is the violation at lambda 0: the cosine between a column and the
// residual, both with the root of the weights.
func (s *state) free(cols []int32) (worst, rounding float64) {
	v := s.c.v
	for class := range s.score {
		length := 0.0
		for k, u := range s.score[class] {
			length += u * u / v.w[k] / v.total
		}
		for _, j := range cols {
			if v.still[j] {
				continue
			}
			g, r := s.gradient(class, s.c.column(j, v.sd[j]))
			if g = math.Abs(g) / math.Sqrt(length); g-r/math.Sqrt(length) > worst-rounding {
				worst, rounding = g, r/math.Sqrt(length)
			}
		}
	}
	return worst, rounding
}

func plainOnes(n int) []float64 {
	v := make([]float64, n)
	for i := range v {
		v[i] = 1
	}
	return v
}

// deviance is that of rows left out (STATISTICS 11): the weighted mean of the
// unit deviance; for Cox -2 log partial likelihood of these rows alone.
func (v *plainView) deviance(f plainFit) float64 {
	eta := v.eta(f)
	if v.q.family == solver.Cox {
		loss, _ := v.cox(eta[0])
		return 2 * loss
	}
	sum := 0.0
	for k, i := range v.row {
		sum += v.w[k] * v.unitDeviance(i, k, eta)
	}
	return sum / v.total
}

func (v *plainView) unitDeviance(i, k int, eta [][]float64) float64 {
	y, e := v.q.outcome[i], eta[0][k]
	switch v.q.family {
	case solver.Gaussian:
		return (y - e) * (y - e)
	case solver.Binomial:
		if y == 0 {
			e = -e
		}
		return -2 * math.Log(min(max(1/(1+math.Exp(-e)), 1e-15), 1-1e-15))
	case solver.Poisson:
		d := math.Exp(e) - y
		if y > 0 {
			d += y * (math.Log(y) - e)
		}
		return 2 * d
	}
	top, sum := math.Inf(-1), 0.0
	for c := range eta {
		top = max(top, eta[c][k])
	}
	for c := range eta {
		sum += math.Exp(eta[c][k] - top)
	}
	mu := math.Exp(eta[int(y)][k]-top) / sum
	return -2 * math.Log(min(max(mu, 1e-15), 1-1e-15)) // clipped as yes-no, so that two classes are yes-no
}

// null is the fit of an intercept alone, with the offset: Newton's method on
// the plain loss, or the shares of the classes.
func (v *plainView) null() plainFit {
	f := v.q.nothing()
	switch v.q.family {
	case solver.Cox:
		return f
	case solver.Multinomial:
		mean := 0.0
		for c := range f.intercept {
			share := 0.0
			for k, i := range v.row {
				if int(v.q.outcome[i]) == c {
					share += v.w[k] / v.total
				}
			}
			f.intercept[c] = math.Log(share)
			mean += f.intercept[c] / float64(v.q.classes)
		}
		for c := range f.intercept {
			f.intercept[c] -= mean
		}
		return f
	}
	low, high := -60.0, 60.0
	if v.q.family == solver.Gaussian {
		low, high = -1e9, 1e9
	}
	for range 200 { // the score falls as the intercept rises
		f.intercept[0] = (low + high) / 2
		_, score := v.loss(v.eta(f))
		if plainSum(score[0]) > 0 {
			low = f.intercept[0]
		} else {
			high = f.intercept[0]
		}
	}
	return f
}

// nothing is the fit whose coefficients are all 0.
func (q *plain) nothing() plainFit {
	n := q.classCount()
	f := plainFit{}
	if q.family != solver.Cox {
		f.intercept = make([]float64, n)
	}
	for range q.always {
		f.always = append(f.always, make([]float64, n))
	}
	for _, cols := range q.units {
		var terms [][]float64
		for range cols {
			terms = append(terms, make([]float64, n))
		}
		f.coef = append(f.coef, terms)
	}
	return f
}

// ofFit reads a Fit; an error says where its shape is not that of the contract.
func (q *plain) ofFit(fit solver.Fit) (plainFit, error) {
	f, n := q.nothing(), q.classCount()
	f.lambda = fit.Lambda
	terms := 0
	for _, cols := range q.units {
		terms += len(cols)
	}
	if len(fit.Intercept) != len(f.intercept) || len(fit.Always) != n*len(q.always) || len(fit.Coef) != n*terms {
		return f, fmt.Errorf("a fit with %d intercepts, %d always-in and %d coefficients, want %d, %d, %d",
			len(fit.Intercept), len(fit.Always), len(fit.Coef), len(f.intercept), n*len(q.always), n*terms)
	}
	copy(f.intercept, fit.Intercept)
	for a := range f.always {
		copy(f.always[a], fit.Always[a*n:])
	}
	at := 0
	for u := range f.coef {
		for t := range f.coef[u] {
			copy(f.coef[u][t], fit.Coef[at:])
			at += n
		}
	}
	return f, nil
}
