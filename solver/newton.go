package solver

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"holdfast/solver/kernel"
)

const (
	// certifiedCurved is the largest violation of a recorded fit whose Hessian
	// moves (DESIGN 4).
	certifiedCurved = 1e-8
	// curvedEnough ends the Newton steps of a record: far below the border (1e-10), so
	// that no gauge is on the wrong side of it, and a step from rounding.
	curvedEnough = 1e-12
	// mostSteps bounds the Newton steps of a record.
	mostSteps = 200
	// better is what a step near the optimum must leave of the violation at most to be
	// taken without a look at the objective, which has fewer digits.
	better = 0.9
	// local is the violation below which that is a sign of the optimum; far from it
	// gradients may also vanish where a coefficient has gone too far.
	local = 1e-3
	// unseen is the decrease, as a share of the objective, that is lost in its rounding.
	unseen = 1e-10
	// endless is how far linear predictors move, again and again, where no finite
	// coefficients fit best: each Newton step then gains about 1.
	endless = 0.3
	// endlessSteps in a row tell such a fit from one that is only far away.
	endlessSteps = 12
)

// block is the coefficients of one unit for one lane in a record.
type block struct {
	choice
	unit  int32
	width int
	at    int // of its first coefficient in record.beta
}

// record makes the record on a support: a Newton method on the coefficients that
// are not zero, where the objective is smooth, from those of the record before.
// No state of the solver enters.
func (c *curved) record(prev *record, support []choice, lambda float64) (*record, error) {
	c.grow()
	n := c.newton(prev, support, lambda)
	if err := n.converge(); err != nil {
		return nil, err
	}
	n.certify()
	return n.r, nil
}

// newton starts a record at the one before.
func (c *curved) newton(prev *record, support []choice, lambda float64) *newton {
	n := &newton{c: c, r: &record{lambda: lambda, limit: certifiedCurved, bend: prev.bend}}
	if c.f.m.p.Family == Gaussian {
		n.r.limit = certified
	}
	n.lineUp(support)
	n.start(prev)
	return n
}

// newton is a record in the making.
type newton struct {
	c       *curved
	r       *record
	eta     []float64
	residue []float64
	worst   float64
	h       symmetric
	endless int // steps in a row that moved far and gained little
}

// lineUp lists the blocks in an order that is free of history.
func (n *newton) lineUp(support []choice) {
	c, w := n.c, &n.c.f.work
	for _, q := range c.fixed {
		for lane := range c.lanes {
			n.r.blocks = append(n.r.blocks, block{choice: choice{place: q.place, lane: lane}, unit: w.units[q.place], width: 1})
		}
	}
	first := len(n.r.blocks)
	for _, q := range support {
		n.r.blocks = append(n.r.blocks, block{choice: q, unit: w.units[q.place], width: w.width(q.place)})
	}
	slices.SortFunc(n.r.blocks[first:], func(a, b block) int {
		if a.unit != b.unit {
			return int(a.unit) - int(b.unit)
		}
		return a.lane - b.lane
	})
	at := 0
	for i := range n.r.blocks {
		n.r.blocks[i].at = at
		at += n.r.blocks[i].width
	}
	n.r.beta = make([]float64, at)
	n.r.grad = make([]float64, at)
	n.residue = make([]float64, at)
	n.eta = make([]float64, c.lanes*len(c.f.d.rows))
	n.r.u = c.f.residual()
}

// start takes the coefficients of the record before.
func (n *newton) start(prev *record) {
	old := make(map[[2]int]block, len(prev.blocks))
	for _, b := range prev.blocks {
		old[[2]int{b.place, b.lane}] = b
	}
	for _, b := range n.r.blocks {
		if o, ok := old[[2]int{b.place, b.lane}]; ok {
			copy(n.r.beta[b.at:b.at+b.width], prev.beta[o.at:o.at+o.width])
		}
	}
}

// evaluate fills what belongs to the present coefficients, but for the loss.
func (n *newton) evaluate() {
	n.predict()
	n.c.fam.score(n.eta, n.r.u)
	n.gradients()
	n.worst = 0
	for _, b := range n.r.blocks {
		v := n.missing(b)
		if !(v <= n.worst) {
			n.worst = v
		}
	}
	if math.IsNaN(n.worst) {
		n.worst = math.Inf(1)
	}
}

// smooth is the objective as the signs have it, at coefficients and their linear
// predictors.
func (n *newton) smooth(beta, eta []float64) float64 {
	value := n.c.fam.loss(eta)
	for _, b := range n.r.blocks {
		value += n.penalty(b, beta)
	}
	if math.IsNaN(value) {
		return math.Inf(1)
	}
	return value
}

// predict fills eta: blocks in their order, a lane at a time.
func (n *newton) predict() {
	f := n.c.f
	rows := len(f.d.rows)
	for lane := range n.c.lanes {
		var places []int
		var values []float64
		for _, b := range n.r.blocks {
			if b.lane != lane {
				continue
			}
			for t := range b.width {
				places, values = append(places, b.place+t), append(values, n.r.beta[b.at+t])
			}
		}
		part := n.eta[lane*rows : (lane+1)*rows]
		f.work.fitted(places, values, part)
		f.plain(part, n.c.offset)
	}
}

func (n *newton) gradients() {
	f := n.c.f
	rows := len(f.d.rows)
	for _, b := range n.r.blocks {
		u := n.r.u[b.lane*rows : (b.lane+1)*rows]
		for t := range b.width {
			n.r.grad[b.at+t] = kernel.Dot(f.work.z[b.place+t], u) / f.d.total
		}
	}
}

// penalty of a block, of a single column as its sign has it.
func (n *newton) penalty(b block, beta []float64) float64 {
	p, v := n.c.f.penalty, beta[b.at:b.at+b.width]
	t, ridge := p.threshold(b.unit, n.r.lambda), p.ridge(b.unit, n.r.lambda)
	if b.width == 1 {
		return float64(t*b.sign*v[0]) + float64(ridge*v[0]*v[0]/2)
	}
	size := length(v)
	return float64(t*size) + float64(ridge*size*size/2)
}

// missing fills what is missing for a block's optimality condition and returns
// its violation (DESIGN 4).
func (n *newton) missing(b block) float64 {
	p, v := n.c.f.penalty, n.r.beta[b.at:b.at+b.width]
	t, ridge := p.threshold(b.unit, n.r.lambda), p.ridge(b.unit, n.r.lambda)
	g, e := n.r.grad[b.at:b.at+b.width], n.residue[b.at:b.at+b.width]
	size := length(v)
	for k := range e {
		e[k] = g[k] - float64(ridge*v[k])
		switch {
		case b.width == 1:
			e[k] -= float64(t * b.sign)
		case size > 0:
			e[k] -= float64(t * v[k] / size)
		}
	}
	switch {
	case n.r.lambda == 0:
		return n.correlation(b)
	case p.always(b.unit):
		return math.Abs(e[0]) / n.r.lambda
	case b.width > 1 && size == 0:
		return max(0, length(e)/t-1)
	}
	return length(e) / t
}

// correlation is |x'u| / (||x|| ||u||) of an unpenalised block.
func (n *newton) correlation(b block) float64 {
	f := n.c.f
	rows := len(f.d.rows)
	size := length(n.r.u[b.lane*rows:(b.lane+1)*rows]) / math.Sqrt(f.d.total)
	most := 0.0
	for t := range b.width {
		if d := math.Sqrt(f.work.square[b.place+t]) * size; d > 0 {
			most = max(most, math.Abs(n.residue[b.at+t])/d)
		}
	}
	return most
}

// converge makes Newton steps until what is missing is rounding. With groups they
// take turns with proximal steps: far from the optimum a Newton step on a norm runs
// into its kink at 0.
func (n *newton) converge() error {
	n.evaluate()
	if len(n.r.blocks) == 0 {
		return nil
	}
	groups, enough := n.groups(), 1.0
	for range rounds {
		enough *= closer
		if groups && !n.approach(enough) {
			return nil
		}
		done, err := n.descendNewton(groups)
		if err != nil {
			return err
		}
		if done || len(n.r.gone) > 0 {
			break
		}
	}
	if err := n.finite(); err != nil {
		return err
	}
	return n.balance()
}

// penalised reports whether candidates are in that pay: then the fit without them was
// finite, and so is this one.
func (n *newton) penalised() bool {
	return n.r.lambda > 0 && len(n.r.blocks) > len(n.c.fixed)*n.c.lanes
}

// finite makes sure that unpenalised coefficients have come to rest: one more Newton
// step must move no linear predictor. Towards a separation each moves some by 1.
func (n *newton) finite() error {
	if n.r.lambda > 0 && len(n.c.fixed) <= 1 && n.c.f.m.p.Family != Cox {
		return nil // the intercept alone: a draw that can be fitted has one
	}
	if len(n.r.gone) > 0 || n.penalised() {
		return nil
	}
	if err := n.factorise(true); err != nil {
		return err
	}
	step, beta, eta := slices.Clone(n.residue), n.r.beta, slices.Clone(n.eta)
	n.r.chol.solve(step)
	n.r.beta = slices.Clone(beta)
	for i, v := range step {
		n.r.beta[i] += v
	}
	n.predict()
	far := farthest(n.eta, eta)
	n.r.beta, n.eta = beta, eta
	if far > endless {
		n.endless = endlessSteps
	}
	return n.escaping()
}

const (
	// rounds of proximal and Newton steps, and how much less may be missing before
	// the Newton steps of each.
	rounds = 30
	closer = 0.1
)

// groups reports whether a penalised group is in.
func (n *newton) groups() bool {
	for _, b := range n.r.blocks {
		if b.width > 1 && n.r.lambda > 0 {
			return true
		}
	}
	return false
}

// descendNewton makes Newton steps to the end. With groups it gives up, and is not
// done, where a step has to be cut.
func (n *newton) descendNewton(groups bool) (done bool, err error) {
	fresh := n.r.bend == nil
	if err := n.factorise(false); err != nil || len(n.r.gone) > 0 {
		return true, err
	}
	for k := range mostSteps {
		if n.worst <= curvedEnough {
			return true, nil
		}
		before := n.worst
		whole, moved := n.step(fresh)
		if !moved && fresh {
			return !groups || n.worst <= certified, nil
		}
		if groups && !whole && moved && n.worst > near {
			return false, nil
		}
		if fresh = !moved || !whole || n.worst > slow*before; fresh && n.worst > curvedEnough {
			if err := n.factorise(true); err != nil || len(n.r.gone) > 0 {
				return true, err
			}
		}
		if err := n.escaping(); err != nil {
			return true, err
		}
		if k > 20 && n.r.lambda > 0 && n.wrong() {
			return true, nil
		}
	}
	return true, nil
}

// curve puts the Hessian of the loss together: where it was last made, or, if that
// serves no longer, at the present coefficients.
func (n *newton) curve(anew bool) {
	c := n.c
	if anew || n.r.bend == nil {
		n.r.bend = c.newHessian(c.fam.bend(n.eta))
	}
	var list []int
	for _, q := range n.r.blocks {
		for t := range q.width {
			list = append(list, (q.place+t)*c.lanes+q.lane)
		}
	}
	n.h.reset()
	n.r.bend.extend(list, &n.h)
}

// factorise makes the Hessian of the objective and its factor.
func (n *newton) factorise(anew bool) error {
	n.curve(anew)
	n.r.chol = factor{}
	row := make([]float64, len(n.r.beta))
	for _, q := range n.r.blocks {
		for t := range q.width {
			i := q.at + t
			copy(row, n.h.row[i][:i+1])
			n.addPenalty(q, t, row)
			if !n.r.chol.push(row[:i], row[i], breakdown) {
				return n.depends(q)
			}
		}
	}
	return nil
}

// depends takes a candidate whose columns depend on those before it out of the
// support: it will stand on the border, where shares are settled.
func (n *newton) depends(q block) error {
	if n.c.f.penalty.always(q.unit) || n.r.lambda == 0 {
		return fmt.Errorf("the support became linearly dependent at %s", n.c.f.m.name(q.unit))
	}
	n.r.gone = append(n.r.gone, q.choice)
	return nil
}

// addPenalty adds to row t of a block's Hessian the curvature of the penalty, and
// what ties down a common shift of all classes, which the loss does not see.
func (n *newton) addPenalty(b block, t int, row []float64) {
	p, v := n.c.f.penalty, n.r.beta[b.at:b.at+b.width]
	row[b.at+t] += p.ridge(b.unit, n.r.lambda)
	if size := length(v); b.width > 1 && size > 0 && n.r.lambda > 0 {
		bend := p.threshold(b.unit, n.r.lambda) / size
		for s := range t + 1 {
			row[b.at+s] -= float64(bend * (v[t] / size) * (v[s] / size))
		}
		row[b.at+t] += bend
	}
	if free := p.always(b.unit) || n.r.lambda == 0; n.c.lanes == 1 || !free && (b.width > 1 || p.mix < 1) {
		return
	}
	var same []block
	for _, o := range n.r.blocks {
		if o.place == b.place {
			same = append(same, o)
		}
	}
	if len(same) < n.c.lanes {
		return
	}
	for _, o := range same {
		if o.at <= b.at {
			row[o.at+t] += 1 / float64(n.c.lanes)
		}
	}
}

// step makes a Newton step with the factor there is, halved until it improves
// the fit. whole says that it was not halved.
func (n *newton) step(fresh bool) (whole, moved bool) {
	step := slices.Clone(n.residue)
	n.r.chol.solve(step)
	slope := -kernel.Dot(step, n.residue)
	from, u, grad, residue := slices.Clone(n.r.beta), n.r.u, slices.Clone(n.r.grad), slices.Clone(n.residue)
	eta := slices.Clone(n.eta)
	worst, near := n.worst, n.worst < local
	value := 0.0
	if !near {
		value = n.smooth(from, eta)
		near = -slope < float64(unseen*math.Abs(value))
	}
	n.r.u = n.c.f.residual()
	for k, t := 0, 1.0; k < halvings; k, t = k+1, t/2 {
		for i := range n.r.beta {
			n.r.beta[i] = from[i] + float64(t*step[i])
		}
		n.evaluate()
		if far := farthest(n.eta, eta); k == 0 && far > leash && n.c.f.m.p.Family != Gaussian {
			t *= 2 * leash / far
			continue
		}
		good := near && n.worst < better*worst
		if !good {
			if value == 0 {
				value = n.smooth(from, eta)
			}
			rounding := float64(1e-15 * math.Abs(value))
			good = n.smooth(n.r.beta, n.eta) < value-rounding+float64(sufficient*t*slope)
		}
		if good {
			n.c.f.dropResidual(u)
			if fresh {
				n.follow(eta, worst)
			}
			return k == 0, true
		}
	}
	n.c.f.dropResidual(n.r.u)
	copy(n.r.beta, from)
	copy(n.r.grad, grad)
	copy(n.residue, residue)
	n.r.u, n.eta, n.worst = u, eta, worst
	return false, false
}

// follow counts the steps with a new Hessian, in a row, that moved linear predictors far and gained
// little: towards a separation they never end (Albert & Anderson 1984, Biometrika
// 71:1-10).
func (n *newton) follow(eta []float64, worst float64) {
	if farthest(n.eta, eta) > endless && n.worst > 0.1*worst {
		n.endless++
	} else {
		n.endless = 0
	}
}

// escaping returns an error where a coefficient without penalty grows without end.
func (n *newton) escaping() error {
	if n.endless < endlessSteps || n.penalised() || n.c.lonely == nil {
		return nil
	}
	step := slices.Clone(n.residue)
	n.r.chol.solve(step)
	most, name := 0.0, ""
	for _, b := range n.r.blocks {
		free := n.c.f.penalty.always(b.unit) || n.r.lambda == 0
		if size := math.Abs(step[b.at]); free && b.unit != n.c.f.m.interceptUnit() && size > most {
			most, name = size, n.c.f.m.name(b.unit)
		}
	}
	if name == "" {
		name = "the intercept"
	}
	advice := "make it a candidate, merge its rare levels, or leave it out"
	if n.r.lambda == 0 {
		advice = "take a lambda above 0, or leave it out"
	}
	return &SeparationError{name, advice}
}

// SeparationError says that a fit without a penalty on a column does not exist:
// its coefficient grows without end, because the column tells the outcomes of
// some rows without error.
type SeparationError struct {
	Column string
	advice string
}

func (e *SeparationError) Error() string {
	return e.Column + " tells the outcome of some rows without error, so that its coefficient grows without end (separation): " + e.advice
}

// wrong reports whether a single column has the wrong sign: it does not belong,
// and with it the steps may never end.
func (n *newton) wrong() bool {
	for _, b := range n.r.blocks {
		if b.width == 1 && n.r.beta[b.at]*b.sign < 0 {
			return true
		}
	}
	return false
}

// near is the violation from which a Newton method that ends has ended at the
// optimum, as far as rounding goes.
const near = 1e-5

// approach makes proximal Newton steps until no more than enough is missing. It
// returns false, and notes them, where groups end at 0: they do not belong.
func (n *newton) approach(enough float64) bool {
	anew := false
	for range newtonSteps {
		if zero, leaves := n.resting(); n.worst <= enough && !leaves && (!zero || n.worst <= near) {
			break
		}
		fresh := anew || n.r.bend == nil
		n.curve(anew)
		before := n.worst
		moved := n.descend()
		if !moved && fresh {
			break
		}
		anew = !moved || n.worst > slow*before
	}
	for _, b := range n.r.blocks {
		if b.width > 1 && length(n.r.beta[b.at:b.at+b.width]) == 0 {
			n.r.gone = append(n.r.gone, b.choice)
		}
	}
	return len(n.r.gone) == 0
}

// resting reports whether groups are at 0, and whether one of them is to leave it.
func (n *newton) resting() (zero, leaves bool) {
	for _, b := range n.r.blocks {
		if b.width > 1 && length(n.r.beta[b.at:b.at+b.width]) == 0 {
			zero = true
			leaves = leaves || length(n.r.grad[b.at:b.at+b.width]) > n.c.f.penalty.threshold(b.unit, n.r.lambda)*(1+enterTolerance)
		}
	}
	return zero, leaves
}

// descend makes one proximal Newton step, and reports whether the objective fell.
func (n *newton) descend() bool {
	d := descent{h: &n.h, p: n.c.f.penalty, lambda: n.r.lambda, enough: settled * n.worst * n.r.lambda, beta: slices.Clone(n.r.beta), r: slices.Clone(n.r.grad)}
	for _, b := range n.r.blocks {
		d.strips = append(d.strips, strip{b.unit, b.at, b.width})
	}
	d.run()
	from, value := slices.Clone(n.r.beta), n.objective()
	for k, t := 0, 1.0; k < halvings; k, t = k+1, t/2 {
		for i := range n.r.beta {
			n.r.beta[i] = from[i] + float64(t*(d.beta[i]-from[i]))
		}
		n.evaluate()
		if now := n.objective(); now < value {
			return true
		}
	}
	copy(n.r.beta, from)
	n.evaluate()
	return false
}

// objective is the objective itself, whatever the signs.
func (n *newton) objective() float64 {
	sum := n.c.fam.loss(n.eta)
	for _, b := range n.r.blocks {
		size := length(n.r.beta[b.at : b.at+b.width])
		t, ridge := n.c.f.penalty.threshold(b.unit, n.r.lambda), n.c.f.penalty.ridge(b.unit, n.r.lambda)
		sum += float64(t*size) + float64(ridge*size*size/2)
	}
	if math.IsNaN(sum) {
		return math.Inf(1)
	}
	return sum
}

// balance settles what the loss does not see in several classes: unpenalised
// coefficients sum to zero; those of a candidate that is in for all of an even
// number of classes lie around the midpoint of their median interval (DESIGN 4).
func (n *newton) balance() error {
	if n.c.lanes == 1 {
		return nil
	}
	p := n.c.f.penalty
	for i := 0; i+n.c.lanes <= len(n.r.blocks); i++ {
		set := n.r.blocks[i : i+n.c.lanes]
		if set[0].lane != 0 || set[n.c.lanes-1].place != set[0].place {
			continue
		}
		free := p.always(set[0].unit) || n.r.lambda == 0
		for t := range set[0].width {
			values := make([]float64, n.c.lanes)
			for lane, b := range set {
				values[lane] = n.r.beta[b.at+t]
			}
			shift, ok := middle(values, free, set[0].width == 1 && p.mix == 1)
			if !ok {
				continue
			}
			for _, b := range set {
				n.r.beta[b.at+t] -= shift
			}
		}
	}
	n.evaluate()
	return nil
}

// middle is the shift that belongs to coefficients of all classes.
func middle(values []float64, free, lasso bool) (float64, bool) {
	switch k := len(values); {
	case free:
		return kernel.Sum(values) / float64(k), true
	case lasso && k%2 == 0:
		slices.Sort(values)
		return (values[k/2-1] + values[k/2]) / 2, true
	}
	return 0, false
}

// certify notes the certificate and what the record selects.
func (n *newton) certify() {
	f, r := n.c.f, n.r
	r.loss = n.c.fam.loss(n.eta)
	r.cert = certificate{violation: n.worst, objective: r.loss}
	r.spread = f.spread(r.u)
	for _, b := range r.blocks {
		if f.penalty.always(b.unit) {
			continue
		}
		r.cert.objective += n.penalty(b, r.beta)
		r.support = append(r.support, b.choice)
		if len(r.units) == 0 || r.units[len(r.units)-1] != b.unit {
			r.units = append(r.units, b.unit)
		}
	}
	if f.m.p.Family == Gaussian && r.lambda > 0 {
		n.gap()
	}
}

// gap is the relative duality gap of a numeric outcome, as in record.certify, with
// norms for sizes.
func (n *newton) gap() {
	f, r := n.c.f, n.r
	square, most := kernel.Dot(r.u, r.u), 1.0
	pull := func(b block) ([]float64, float64) {
		v, g := r.beta[b.at:b.at+b.width], slices.Clone(r.grad[b.at:b.at+b.width])
		ridge := f.penalty.ridge(b.unit, r.lambda)
		for k := range g {
			g[k] -= float64(ridge * v[k])
		}
		return g, ridge
	}
	for _, b := range r.blocks {
		if f.penalty.always(b.unit) {
			continue
		}
		v := r.beta[b.at : b.at+b.width]
		g, ridge := pull(b)
		square += float64(f.d.total * ridge * kernel.Dot(v, v))
		most = max(most, length(g)/f.penalty.threshold(b.unit, r.lambda))
	}
	c := 1 / most
	gap := float64((1-c)*(1-c)*square) / (2 * f.d.total)
	for _, b := range r.blocks {
		v := r.beta[b.at : b.at+b.width]
		g, _ := pull(b)
		gap += float64(f.penalty.threshold(b.unit, r.lambda)*length(v)) - float64(c*kernel.Dot(v, g))
	}
	if r.cert.objective > 0 {
		r.cert.gap = math.Abs(gap) / r.cert.objective
	}
}

// separated is an error where the fit without candidates did not end.
func (c *curved) separated(r *record) error {
	if math.IsNaN(r.loss) || math.IsInf(r.loss, 0) {
		return errors.New("the fit without candidates has no finite loss")
	}
	return nil
}

// weak lists the blocks whose margin does not exceed the border.
func (c *curved) weak(r *record) []choice {
	out := slices.Clone(r.gone)
	for _, b := range r.blocks {
		if c.f.penalty.always(b.unit) || r.lambda == 0 || holds(out, b.choice) {
			continue
		}
		t := c.f.penalty.threshold(b.unit, r.lambda)
		size := r.beta[b.at] * b.sign / t
		if b.width > 1 {
			size = length(r.beta[b.at:b.at+b.width]) / t
		}
		if size > weakly {
			continue
		}
		if size <= 0 || size/c.inverse(r, b) <= border {
			out = append(out, b.choice)
		}
	}
	return out
}

// inverse is the largest diagonal entry of a block of the inverse Hessian.
func (c *curved) inverse(r *record, b block) float64 {
	most := 0.0
	for t := range b.width {
		most = max(most, r.chol.inverseDiagonal(b.at+t))
	}
	return most
}

func (c *curved) values(r *record) []Coef {
	f := c.f
	var list []Coef
	for _, b := range r.blocks {
		if f.penalty.always(b.unit) {
			continue
		}
		v := slices.Clone(r.beta[b.at : b.at+b.width])
		if f.m.single(b.unit) {
			if v[0] == 0 {
				continue
			}
			list = append(list, Coef{Candidate: b.unit, Class: int32(b.lane), Value: v[0] / f.work.scale[b.place]})
			continue
		}
		g := f.groups[b.unit]
		g.coefficients(v)
		for i, t := range g.kept {
			if v[i] == 0 {
				continue
			}
			list = append(list, Coef{Candidate: b.unit, Term: int32(t), Class: int32(b.lane), Value: v[i]})
		}
	}
	slices.SortStableFunc(list, func(a, b Coef) int {
		if a.Candidate != b.Candidate {
			return int(a.Candidate) - int(b.Candidate)
		}
		return int(a.Term) - int(b.Term)
	})
	return list
}

func (c *curved) always(r *record) []float64 {
	f := c.f
	out := make([]float64, len(f.m.p.Always)*c.lanes)
	for _, b := range r.blocks {
		if a := int(b.unit) - f.m.candidates(); a >= 0 && b.unit != f.m.interceptUnit() {
			out[a*c.lanes+b.lane] = r.beta[b.at] / f.work.scale[b.place]
		}
	}
	return out
}

func (c *curved) level(r *record) []float64 {
	if c.f.m.p.Family == Cox {
		return nil
	}
	out := make([]float64, c.lanes)
	for lane := range out {
		out[lane] = r.beta[r.blocks[lane].at]
	}
	return out
}
