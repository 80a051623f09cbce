package solver

import (
	"fmt"
	"math"
	"slices"

	"holdfast/solver/kernel"
)

const (
	// newtonSteps bounds the proximal Newton steps at one lambda.
	newtonSteps = 200
	// solved is the violation, relative to the thresholds, at which the working
	// set counts as solved: the finish goes on from there.
	solved = 1e-5
	// solvedGroups is the same with groups, where the descent gains digits slowly and
	// the finish, which has Newton steps, fast.
	solvedGroups = 1e-4
	// slow is how much of the violation a step may leave before the Hessian is
	// made anew.
	slow = 0.3
	// sufficient is the share of the decrease that the model promises which a step
	// must bring (Nocedal & Wright 2006, eq. 3.4).
	sufficient = 1e-4
	// halvings of a step.
	halvings = 40
)

// curved is the core of every problem whose Hessian moves or whose penalty has
// groups: proximal Newton steps (Lee, Sun & Saunders 2014, SIAM J. Optim.
// 24:1420-1443), each a quadratic problem on the working set, with a line search
// on the objective itself. Coefficients are numbered by place and lane:
// place*lanes + lane.
type curved struct {
	f     *fitting
	fam   family
	lanes int
	fixed []choice // the always-in places that are not redundant, the intercept first

	beta     []float64
	offset   []float64 // per row of the draw; nil: none
	eta      []float64
	u        []float64
	g        []float64 // gradients at beta
	value    float64   // objective at beta
	loss0    float64   // loss at beta
	standing bool      // eta, u and loss0 are those of beta
	lambda   float64   // of value

	bend    *hessian // of the steps: that of the record before, or a later one
	which   []int    // coefficients of the step's model: all that may move
	chosen  map[int]bool
	modelOf *hessian  // that the model was made of
	model   quadratic // of these
	qp      activeSet
	trial   []float64
	lonely  *record // the fit of the intercept alone
	// seen is, for Cox, the Hessian at the fit of no column: the likelihood does not
	// see what columns do before the first event, or alike in a stratum, so what is
	// redundant must be told by it. Nil elsewhere: the Gram matrix tells.
	seen *hessian
}

func newCurved(f *fitting) *curved {
	return &curved{f: f, fam: newFamily(&f.m.p), chosen: make(map[int]bool), lanes: f.m.lanes()}
}

// begin fits the intercept alone, then with the always-in columns.
func (c *curved) begin() error {
	f := c.f
	c.fam.take(&f.d)
	if err := c.fam.fittable(); err != nil {
		return err
	}
	c.setOffset()
	c.reset()
	units := f.m.alwaysUnits()
	if f.m.p.Family != Cox {
		units = slices.Insert(units, 0, f.m.interceptUnit())
	}
	f.work.add(f, units)
	c.grow()
	c.fixed = c.fixed[:0]
	if f.m.p.Family != Cox {
		c.fixed = append(c.fixed, choice{place: 0})
	}
	var err error
	if c.lonely, err = c.alone(); err != nil {
		return err
	}
	if f.m.p.Family == Cox {
		eta := make([]float64, len(f.d.rows))
		f.plain(eta, c.offset)
		c.seen = c.newHessian(c.fam.bend(eta))
	}
	if f.rec, err = c.beginAlways(len(units)); err != nil {
		return err
	}
	f.whole = kernel.Dot(c.lonely.u, c.lonely.u)
	c.load(f.rec)
	return nil
}

// alone fits the intercept alone, from where its family has it start. What is missing
// is measured against the spread of the residual there, in place of a lambda.
func (c *curved) alone() (*record, error) {
	n := c.newton(&record{}, nil, 1)
	for lane, v := range c.fam.intercepts(c.offset) {
		n.r.beta[n.r.blocks[lane].at] = v
	}
	n.evaluate()
	if spread := c.f.spread(n.r.u); spread > 0 {
		n.r.lambda = spread
	}
	if err := n.converge(); err != nil {
		return nil, err
	}
	n.certify()
	return n.r, nil
}

// seenShare is the share of a square in seen that must remain for a column not to
// depend on others: it is a difference, and has fewer digits than the Gram matrix.
const seenShare = 1e-10

// beginAlways adds the always-in columns that are not redundant, in table order.
func (c *curved) beginAlways(units int) (*record, error) {
	f := c.f
	f.work.complete(f.d.total)
	s := &sharing{f: f, curved: c, lambda: 0}
	p := &parts{}
	for _, q := range c.fixed { // the intercept
		s.join(p, q.place*c.lanes, -1)
	}
	for place := len(c.fixed); place < units; place++ {
		if f.work.square[place] > 0 && s.informs(place*c.lanes) && s.join(p, place*c.lanes, -1) {
			c.fixed = append(c.fixed, choice{place: place})
		}
	}
	if len(c.fixed) > len(f.d.rows)-2 {
		return nil, fmt.Errorf("%d coefficients without penalty leave nothing to explain of %d rows", len(c.fixed), len(f.d.rows))
	}
	r, err := c.record(c.lonely, nil, c.lonely.lambda)
	if err != nil {
		return nil, err
	}
	if err := c.separated(r); err != nil {
		return nil, err
	}
	if r.cert.violation > certifiedCurved {
		return nil, fmt.Errorf("the fit without candidates has violation %.1e", r.cert.violation)
	}
	return r, nil
}

func (c *curved) setOffset() {
	c.offset = nil
	if o := c.f.m.p.Offset; o != nil {
		c.offset = make([]float64, len(c.f.d.rows))
		kernel.Gather(c.offset, o, c.f.d.rows, 0, 1)
	}
}

// reset forgets the draw before.
func (c *curved) reset() {
	c.beta, c.g = c.beta[:0], c.g[:0]
	c.bend, c.modelOf, c.seen, c.lonely = nil, nil, nil, nil
}

// grow makes room for places that joined the working set.
func (c *curved) grow() {
	n := len(c.f.work.units) * c.lanes
	for len(c.beta) < n {
		c.beta, c.g = append(c.beta, 0), append(c.g, 0)
	}
}

// load starts the working set at a record.
func (c *curved) load(r *record) {
	clear(c.beta)
	for _, b := range r.blocks {
		for t := range b.width {
			c.beta[(b.place+t)*c.lanes+b.lane] = r.beta[b.at+t]
		}
	}
	c.lambda, c.standing = 0, false
}

// predict overwrites eta with the linear predictors of coefficients by place and
// lane.
func (c *curved) predict(beta, eta []float64) {
	f := c.f
	n := len(f.d.rows)
	var places []int
	var values []float64
	for lane := range c.lanes {
		places, values = places[:0], values[:0]
		for i := lane; i < len(beta); i += c.lanes {
			if beta[i] != 0 {
				places, values = append(places, i/c.lanes), append(values, beta[i])
			}
		}
		part := eta[lane*n : (lane+1)*n]
		f.work.fitted(places, values, part)
		f.plain(part, c.offset)
	}
}

// plain turns root-weighted fits into linear predictors.
func (f *fitting) plain(eta, offset []float64) {
	for k, r := range f.d.root {
		eta[k] /= r
	}
	for k, o := range offset {
		eta[k] += o
	}
}

// at moves to coefficients and returns the objective there.
func (c *curved) at(beta []float64, lambda float64) float64 {
	n := len(c.f.d.rows) * c.lanes
	c.eta, c.u = resize(c.eta, n), resize(c.u, n)
	c.predict(beta, c.eta)
	c.fam.score(c.eta, c.u)
	c.loss0, c.standing = c.fam.loss(c.eta), true
	return c.loss0 + c.penalise(beta, lambda)
}

// penalise is the penalty of coefficients.
func (c *curved) penalise(beta []float64, lambda float64) float64 {
	sum := 0.0
	c.each(func(unit int32, first, width int) {
		size := c.norm(beta, first, width)
		sum += float64(c.f.penalty.threshold(unit, lambda)*size) + float64(c.f.penalty.ridge(unit, lambda)*size*size/2)
	})
	return sum
}

// each goes through the blocks of candidates: unit, first coefficient, width. The
// coefficients of a block lie lanes apart.
func (c *curved) each(do func(unit int32, first, width int)) {
	w := &c.f.work
	for place := 0; place < len(w.units); {
		width := w.width(place)
		if u := w.units[place]; !c.f.penalty.always(u) {
			for lane := range c.lanes {
				do(u, place*c.lanes+lane, width)
			}
		}
		place += width
	}
}

func (c *curved) norm(v []float64, first, width int) float64 {
	if width == 1 {
		return math.Abs(v[first])
	}
	sum := 0.0
	for t := range width {
		x := v[first+t*c.lanes]
		sum += float64(x * x)
	}
	return math.Sqrt(sum)
}

// gradients fills g at u, and returns the largest violation of the working set; of
// the step's model alone where that is all that is asked for.
func (c *curved) gradients(lambda float64, all bool) float64 {
	f := c.f
	n := len(f.d.rows)
	for i := range c.g {
		if all || c.chosen[i] {
			lane := i % c.lanes
			c.g[i] = kernel.Dot(f.work.z[i/c.lanes], c.u[lane*n:(lane+1)*n]) / f.d.total
		}
	}
	worst := 0.0
	for _, q := range c.fixed {
		for lane := range c.lanes {
			worst = max(worst, math.Abs(c.g[q.place*c.lanes+lane])/lambda)
		}
	}
	c.each(func(unit int32, first, width int) {
		if all || c.chosen[first] {
			worst = max(worst, c.violation(unit, first, width, lambda))
		}
	})
	return worst
}

// violation of one block at g.
func (c *curved) violation(unit int32, first, width int, lambda float64) float64 {
	p := c.f.penalty
	t, ridge := p.threshold(unit, lambda), p.ridge(unit, lambda)
	size := c.norm(c.beta, first, width)
	if size == 0 {
		return max(0, c.norm(c.g, first, width)/t-1)
	}
	sum := 0.0
	for k := range width {
		i := first + k*c.lanes
		e := c.g[i] - float64(ridge*c.beta[i]) - float64(t*c.beta[i]/size)
		sum += float64(e * e)
	}
	return math.Sqrt(sum) / t
}

// solve makes proximal Newton steps until the working set is solved. The Hessian
// is that of the record before while it serves.
func (c *curved) solve(lambda float64) error {
	c.grow()
	if c.standing {
		c.value = c.loss0 + c.penalise(c.beta, lambda)
	} else {
		c.value = c.at(c.beta, lambda)
	}
	worst := c.gradients(lambda, true)
	if c.lambda != lambda {
		c.lambda, c.bend = lambda, c.f.rec.bend
	}
	fresh, enough := c.bend == nil, solved
	if c.f.m.p.Groups != nil {
		enough = solvedGroups
	}
	for range newtonSteps {
		if worst <= enough {
			return nil
		}
		if c.bend == nil {
			c.bend = c.newHessian(c.fam.bend(c.eta))
		}
		if err := c.target(lambda, worst); err != nil {
			return err
		}
		moved, whole := c.search(lambda)
		now := c.gradients(lambda, false)
		if now <= enough || !moved {
			now = c.gradients(lambda, true)
		}
		if !moved && fresh {
			return c.stuck(now)
		}
		if fresh = !moved || !whole || now > slow*worst; fresh {
			c.bend = nil
		}
		worst = now
	}
	return c.stuck(worst)
}

// nearly is the violation at which the finish can go on from a working set that
// no step improves any more, or that has had its number of steps.
const nearly = 1e-3

// stuck judges such a working set: what is left is rounding of the objective, or
// an error.
func (c *curved) stuck(worst float64) error {
	if worst <= nearly {
		return nil
	}
	return fmt.Errorf("the proximal Newton method ended at a violation of %.1e", worst)
}

// choose brings into the step's model what is not 0 or not penalised, and what
// violates; the other coefficients stay at 0. A model keeps what it has while its
// Hessian stands.
func (c *curved) choose(lambda float64) {
	if c.modelOf != c.bend {
		c.modelOf, c.which = c.bend, c.which[:0]
		c.model.units, c.model.h.row = c.model.units[:0], c.model.h.row[:0]
		c.qp.reset()
		clear(c.chosen)
	}
	bring := func(i int) {
		if !c.chosen[i] {
			c.chosen[i] = true
			c.which = append(c.which, i)
			c.model.units = append(c.model.units, c.f.work.units[i/c.lanes])
		}
	}
	for _, q := range c.fixed {
		for lane := range c.lanes {
			bring(q.place*c.lanes + lane)
		}
	}
	c.each(func(unit int32, first, width int) {
		if c.norm(c.beta, first, width) > 0 || c.norm(c.g, first, width) > c.f.penalty.threshold(unit, lambda) {
			for t := range width {
				bring(first + t*c.lanes)
			}
		}
	})
	c.bend.extend(c.which, &c.model.h)
}

// target solves the quadratic model at beta, into trial.
func (c *curved) target(lambda, worst float64) error {
	c.choose(lambda)
	m := &c.model
	m.c, c.trial = resize(m.c, len(c.which)), resize(c.trial, len(c.which))
	for k, i := range c.which {
		m.c[k], c.trial[k] = c.g[i], c.beta[i]
	}
	if c.f.m.p.Groups != nil {
		c.descend(lambda, worst)
		return nil
	}
	for k, b := range c.trial {
		if b != 0 {
			kernel.AddScaled(b, m.h.row[k], m.c)
		}
	}
	c.startActive(lambda)
	if err := c.qp.solve(m, c.f.penalty, lambda); err != nil {
		return err
	}
	copy(c.trial, c.qp.beta)
	return nil
}

// descend solves the model by block coordinate descent.
func (c *curved) descend(lambda, worst float64) {
	d := descent{
		h: &c.model.h, p: c.f.penalty, lambda: lambda, enough: settled * worst * lambda,
		beta: c.trial, r: slices.Clone(c.model.c),
	}
	for k := 0; k < len(c.which); {
		unit, lane, width := c.model.units[k], c.which[k]%c.lanes, 1
		for k+width < len(c.which) && c.model.units[k+width] == unit && c.which[k+width]%c.lanes == lane {
			width++
		}
		d.strips = append(d.strips, strip{unit, k, width})
		k += width
	}
	d.run()
}

// startActive brings into the active set what is not 0 or not penalised.
func (c *curved) startActive(lambda float64) {
	c.qp.grow(len(c.which))
	if c.f.penalty.quadratic() && c.qp.lambda != lambda {
		c.qp.refactor(&c.model, c.f.penalty, lambda)
	}
	c.qp.lambda = lambda
	for k := range c.which {
		free := c.f.penalty.always(c.model.units[k])
		if c.qp.in[k] || !free && c.trial[k] == 0 {
			continue
		}
		sign := 0.0
		if !free {
			sign = math.Copysign(1, c.trial[k])
		}
		if c.qp.push(&c.model, c.f.penalty, lambda, k, sign) {
			c.qp.beta[k] = c.trial[k]
		}
	}
}

// leash is how far a step may move a linear predictor: where an exponential or a
// probability changes more, a quadratic model says nothing.
const leash = 5

// farthest is the largest difference of two vectors.
func farthest(a, b []float64) float64 {
	most := 0.0
	for k, v := range a {
		most = max(most, math.Abs(v-b[k]))
	}
	return most
}

// search goes from beta towards trial as far as the objective falls. It reports
// whether it moved, and whether all the way.
func (c *curved) search(lambda float64) (moved, whole bool) {
	from, to := slices.Clone(c.beta), slices.Clone(c.beta)
	for k, i := range c.which {
		to[i] = c.trial[k]
	}
	promise := c.penalise(to, lambda) - c.penalise(from, lambda)
	for i, g := range c.g {
		promise -= float64(g * (to[i] - from[i]))
	}
	noise := float64(4e-16 * math.Abs(c.value))
	eta := slices.Clone(c.eta)
	for k, t := 0, 1.0; k < halvings; k, t = k+1, t/2 {
		for i := range c.beta {
			c.beta[i] = from[i] + float64(t*(to[i]-from[i]))
		}
		value := c.at(c.beta, lambda)
		if far := farthest(c.eta, eta); k == 0 && far > leash && c.f.m.p.Family != Gaussian {
			t *= 2 * leash / far
			continue
		}
		if value <= c.value+float64(sufficient*t*min(promise, 0))+noise && !math.IsNaN(value) {
			moved = !slices.Equal(c.beta, from)
			c.value = value
			return moved, t == 1
		}
	}
	copy(c.beta, from)
	c.value = c.at(c.beta, lambda)
	return false, false
}

func (c *curved) support() []choice {
	var s []choice
	c.each(func(_ int32, first, width int) {
		if size := c.norm(c.beta, first, width); size > 0 {
			q := choice{place: first / c.lanes, lane: first % c.lanes}
			if width == 1 {
				q.sign = math.Copysign(1, c.beta[first])
			}
			s = append(s, q)
		}
	})
	if c.f.m.p.Groups != nil {
		return c.independent(s)
	}
	return s
}

func (c *curved) score(u []float64) { copy(u, c.u) }

func (c *curved) know() {
	f := c.f
	for _, u := range f.work.units {
		if !f.penalty.always(u) {
			f.end.value[u] = 0
			f.end.ref[u] = f.req.number
		}
	}
	c.each(func(unit int32, first, width int) {
		f.end.value[unit] = max(f.end.value[unit], c.norm(c.g, first, width)/f.penalty.threshold(unit, 1))
	})
}

// Windows are one step long, so there is nowhere to go back to.
func (c *curved) save()          {}
func (c *curved) keep(*record)   {}
func (c *curved) back(_ float64) {}

func (c *curved) finish(support []choice, lambda float64) (*record, error) {
	return c.record(c.f.rec, support, lambda)
}

func (c *curved) loss(r *record) float64 { return r.loss }

func (c *curved) nullLevel() []float64 { return c.level(c.lonely) }
