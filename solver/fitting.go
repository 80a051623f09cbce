package solver

import (
	"fmt"
	"math"
	"slices"

	"holdfast/solver/kernel"
)

// choice is a member of a support: a place in the working set and a sign.
type choice struct {
	place int
	sign  float64
}

// fitting is one draw on its way down the lattice. It looks a window of steps
// ahead: the working set's problem is solved at each of them, one request asks
// for all gradients at the last, and then the steps are accepted one by one,
// each with its own record. One step is the right window where a draw's
// residuals are short vectors (p > n); several steps spare passes over a long
// table.
type fitting struct {
	m    *Model
	d    drawn
	work working
	qp   activeSet

	// Screening state, per candidate.
	mean    []float64 // draw mean less centre
	inverse []float64 // 1 / (scale * mix * weight); 0: does not vary in the draw
	norm    []float64 // sd * inverse; nil: all 1
	still   []int32
	inside  []bool // scratch: the candidates of a record
	snaps   snapshots
	start0  gradients // at the certified step before the window, where it is longer than one step
	startU  []float64
	end     gradients // at the window's last step
	endU    []float64

	lambda   func(step int) float64
	last     int        // last step of the path
	cur, to  int        // the window: steps cur..to
	supports [][]choice // of the window's steps, by the working set alone
	before   state      // the working set's solution at step cur-1
	rec      *record    // of step cur-1
	failed   error      // why the working set could not be solved at step cur
	stands   int        // the step whose solution qp holds
	ahead    int        // length of the last window on a long table; 0: none yet
	looked   int        // gradients computed to accept the steps of the window
	brought  int        // violators brought into the working set for the window
	had      int        // candidates that had entered before the window

	base      []float64 // coefficients of the always-in columns alone, per member of the null record
	whole     float64   // sum of squares of the outcome before they were taken out
	mostNorm  float64
	unlimited bool // stop_after does not apply: single fits

	entered map[int32]bool
	asked   bool // a request is out for the window
	req     request
	toStart span
	toEnd   span
	coarse  []coarse
	lane    []float64
	spareU  [][]float64 // residuals of dropped records
	fit     []float64
	accept  func(r *record, chosen []chosen, shared bool)
	path    *Path
}

// start makes the fitting ready for a draw: its rows, its always-in columns,
// and the screening numbers of all candidates at the model without any.
func (f *fitting) start(s *Sample) error {
	f.d.draw(s, f.m.p.Outcome)
	if len(f.d.rows) < 2 {
		return fmt.Errorf("the draw has %d rows of positive weight: at least 2 are needed", len(f.d.rows))
	}
	f.work.reset()
	f.qp.reset()
	f.snaps.reset(len(f.d.rows))
	f.entered = make(map[int32]bool)
	f.failed, f.asked = nil, false
	if f.same() {
		clear(f.d.y)
	}
	if err := f.startAlways(); err != nil {
		return err
	}
	f.measure()
	return nil
}

// same is the exact test for an outcome that does not vary in the draw.
func (f *fitting) same() bool {
	y := f.m.p.Outcome
	for _, r := range f.d.rows {
		if y[r] != y[f.d.rows[0]] {
			return false
		}
	}
	return true
}

// constant reports whether the always-in columns leave nothing to explain.
func (f *fitting) constant() bool {
	return f.whole == 0 || kernel.Dot(f.rec.u, f.rec.u) <= 1e-24*f.whole
}

// startAlways fits the always-in columns. Those that depend on earlier ones
// within the draw are dropped, in table order.
func (f *fitting) startAlways() error {
	units := make([]int32, len(f.m.p.Always))
	for a := range units {
		units[a] = int32(f.m.candidates() + a)
	}
	f.work.add(f, units)
	f.qp.grow(len(units))
	for i := range units {
		if f.work.h.row[i][i] > 0 {
			f.qp.push(&f.work, f.m.penalty, 0, i, 0)
		}
	}
	if len(f.qp.members) > len(f.d.rows)-2 {
		return fmt.Errorf("%d always-in columns leave nothing of %d rows", len(f.qp.members), len(f.d.rows))
	}
	null := &record{members: slices.Clone(f.qp.members), sign: make([]float64, len(f.qp.members))}
	if err := null.factorise(f, &record{}, 0); err != nil {
		return err
	}
	null.solve(f)
	f.deflate(null)
	f.rec = null
	if err := f.qp.solve(&f.work, f.m.penalty, 0); err != nil {
		return err
	}
	f.qp.save(&f.before)
	return nil
}

// deflate takes the always-in fit out of the outcome, so that a large part of
// it does not drown the rest in its rounding; records hold what is added to it.
func (f *fitting) deflate(null *record) {
	f.whole = kernel.Dot(f.d.y, f.d.y)
	f.base = append(f.base[:0], null.beta...)
	clear(null.beta)
	copy(f.d.y, null.u)
	for i, z := range f.work.z {
		f.work.c[i] = kernel.Dot(z, f.d.y) / f.d.total
	}
}

// measure fills the screening state at the residual of the null record.
func (f *fitting) measure() {
	n := f.m.candidates()
	f.mean, f.inverse = resize(f.mean, n), resize(f.inverse, n)
	f.end.resize(n)
	if len(f.inside) != n {
		f.inside = make([]bool, n)
	}
	f.still, f.coarse = nil, f.coarse[:0]
	f.norm = nil
	if f.m.scale != nil || f.m.penalty.mix < 1 || f.m.p.Relative != nil {
		f.norm = make([]float64, n)
	}
	f.lane = f.d.lane(f.lane, f.rec.u)
	sum := kernel.Sum(f.lane)
	ref := f.snaps.add(f.rec.u)
	for c := range n {
		f.measureOne(int32(c), sum)
		f.end.ref[c] = ref
	}
	f.endU = append(f.endU[:0], f.rec.u...)
	f.mostNorm = 1
	if f.norm != nil {
		f.mostNorm = slices.Max(f.norm)
	}
}

func (f *fitting) measureOne(c int32, sum float64) {
	x, holes := f.m.column(c)
	sx, sxx, sxy := kernel.Moments(x, f.d.rows, f.d.weight, f.lane)
	filled := f.d.total
	if holes != nil {
		filled -= f.d.weightOfHoles(holes)
		sum -= f.d.overHoles(holes, f.lane)
	}
	mean, sd := 0.0, 0.0
	if filled > 0 {
		mean = sx / filled
		if v := sxx - float64(mean*mean*filled); v > cancelShare*sxx && v > stillShare*f.m.table[c]*f.d.total {
			sd = math.Sqrt(v / f.d.total)
		} else {
			mean, sd = f.careful(c, x, holes)
		}
	}
	f.mean[c] = mean
	if sd == 0 {
		f.inverse[c], f.end.value[c] = 0, 0
		f.still = append(f.still, c)
		return
	}
	f.inverse[c] = 1 / (f.m.scaleOf(c, sd) * f.m.penalty.mix * f.m.penalty.weight[c])
	if f.norm != nil {
		f.norm[c] = sd * f.inverse[c]
	}
	if math.Abs(mean) > farOff*sd {
		f.coarse = append(f.coarse, coarse{c, math.Hypot(mean, sd) * f.inverse[c]})
	}
	f.end.value[c] = (sxy - float64(mean*sum)) * f.inverse[c] / f.d.total
}

// careful is the two-pass mean and sd, 0 where the exact test finds that the
// column does not vary in the draw.
func (f *fitting) careful(c int32, x []float64, holes []uint64) (mean, sd float64) {
	col := f.d.gather(x, holes, f.work.buffer())
	f.work.spare = append(f.work.spare, col.values)
	if col.sd*col.sd < stillShare*f.m.table[c] && !f.d.varies(x, holes) {
		return col.mean, 0
	}
	return col.mean, col.sd
}

// weightOfHoles is the weight of the drawn rows missing in a column.
func (d *drawn) weightOfHoles(holes []uint64) float64 {
	sum := 0.0
	for k, r := range d.rows {
		if isHole(holes, r) {
			if d.weight == nil {
				sum++
			} else {
				sum += d.weight[k]
			}
		}
	}
	return sum
}

func (f *fitting) normOf(c int) float64 {
	if f.norm == nil {
		return 1
	}
	return f.norm[c]
}

// top returns the smallest lambda at which the draw has no candidate, as a
// record number: candidates near the largest screening gradient are gathered.
func (f *fitting) top() float64 {
	largest := 0.0
	for _, v := range f.end.value {
		largest = max(largest, math.Abs(v))
	}
	least := f.least(largest, f.spread(f.rec.u))
	var near []int32
	for c, v := range f.end.value {
		if f.inverse[c] != 0 && math.Abs(v) >= least {
			near = append(near, int32(c))
		}
	}
	f.work.add(f, near)
	top := 0.0
	for _, c := range near {
		top = max(top, f.m.penalty.gauge(c, f.gradient(c, f.rec.u), 1))
	}
	return top
}

// gradient is the record gradient of a unit of the working set.
func (f *fitting) gradient(unit int32, u []float64) float64 {
	return kernel.Dot(f.work.z[f.work.place[unit]], u) / f.d.total
}

// least is the screening gradient that a candidate must stay below to be
// excluded at lambda, where the residual has the given spread.
func (f *fitting) least(lambda, spread float64) float64 {
	return float64(lambda*(1-screenMargin)) - float64(screenRounding*spread*f.mostNorm)
}

// travel sets where the path goes: from step first to last.
func (f *fitting) travel(lambda func(int) float64, first, last int) {
	f.lambda, f.cur, f.last = lambda, first, last
	f.to, f.stands = first, first-1
	f.supports = f.supports[:0]
	f.ahead, f.looked, f.brought, f.had = 0, 0, 0, 0
	f.start0.value = f.start0.value[:0]
}

// next does what can be done without gradients. It returns a request, or nil
// when the path has ended.
func (f *fitting) next() *request {
	for {
		if f.asked {
			f.asked = false
			if fresh := f.newcomers(f.req.found); len(fresh) > 0 {
				f.brought += len(fresh)
				f.bring(fresh)
				return f.ask()
			}
			f.endU = append(f.endU[:0], f.req.u...)
		} else if f.failed == nil && len(f.supports) == 0 {
			return f.ask()
		}
		again, done := f.acceptWindow()
		if done {
			return nil
		}
		if again {
			return f.ask()
		}
		f.advance()
		return f.ask()
	}
}

// ask solves the window on the working set and asks for the gradients at its
// end; where not even the first step can be solved, the path ends.
func (f *fitting) ask() *request {
	f.solveWindow()
	if f.failed != nil {
		f.uncertified(f.failed)
		return nil
	}
	members, beta := f.qp.members, make([]float64, len(f.qp.members))
	for k, i := range members {
		beta[k] = f.qp.beta[i]
	}
	f.fit = resize(f.fit, len(f.d.rows))
	f.work.fitted(members, beta, f.fit)
	f.req.f = f
	f.req.u = resize(f.req.u, len(f.d.rows))
	f.m.family.score(&f.d, f.fit, f.req.u)
	f.req.least = f.least(f.lambda(f.to), f.spread(f.req.u))
	f.req.number = f.snaps.add(f.req.u)
	f.knowWorkingSet()
	f.asked = true
	return &f.req
}

// knowWorkingSet takes the gradients of the working set's candidates, which the
// Gram matrix gives, so that the screen need not compute them.
func (f *fitting) knowWorkingSet() {
	p := f.m.penalty
	for i, u := range f.work.units {
		if !p.always(u) {
			f.end.value[u] = f.qp.g[i] / p.threshold(u, 1)
			f.end.ref[u] = f.req.number
		}
	}
}

// newcomers returns those of the units that the working set does not have.
func (f *fitting) newcomers(units []int32) []int32 {
	var fresh []int32
	for _, u := range units {
		if !f.work.has(u) {
			fresh = append(fresh, u)
		}
	}
	return fresh
}

func (f *fitting) bring(units []int32) {
	if f.m.whim != nil {
		units = f.m.whim.disturb(units, f.inverse)
	}
	f.work.add(f, units)
}

// solveWindow solves the working set's problem at the steps of the window and
// notes the supports. The window is cut where the path will stop, and before a
// step that cannot be solved.
func (f *fitting) solveWindow() {
	f.supports = f.supports[:0]
	f.qp.grow(len(f.work.units))
	p := f.m.penalty
	f.goBack()
	seen := make(map[int32]bool)
	for k := f.cur; k <= f.to; k++ {
		if err := f.qp.solve(&f.work, p, f.lambda(k)); err != nil {
			if k == f.cur {
				f.failed = err
			} else {
				f.to, f.stands = k-1, k
				f.resolve()
			}
			return
		}
		f.stands = k
		f.supports = append(f.supports, f.support(seen))
		if s := f.stopAfter(); s > 0 && len(f.entered)+len(seen) > s {
			f.to = k
			return
		}
	}
}

// goBack returns qp to the certified step before the window, unless it stands
// there, or at the window's first step, already.
func (f *fitting) goBack() {
	if f.stands != f.cur && f.stands != f.cur-1 {
		f.qp.restore(&f.before, &f.work, f.m.penalty, f.lambda(f.cur))
	}
}

// resolve takes the working set down a window that was cut.
func (f *fitting) resolve() {
	f.goBack()
	for k := f.cur; k <= f.to && f.failed == nil; k++ {
		f.failed = f.qp.solve(&f.work, f.m.penalty, f.lambda(k))
		f.stands = k
	}
}

// support lists the candidates among the members and adds the new ones to
// seen.
func (f *fitting) support(seen map[int32]bool) []choice {
	var s []choice
	for k, i := range f.qp.members {
		u := f.work.units[i]
		if f.m.penalty.always(u) {
			continue
		}
		s = append(s, choice{i, f.qp.sign[k]})
		if !f.entered[u] {
			seen[u] = true
		}
	}
	return s
}

// acceptWindow certifies the window's steps one by one. again says that the
// working set has grown and the rest of the window must be solved anew.
func (f *fitting) acceptWindow() (again, done bool) {
	for f.cur <= f.to {
		fresh, err := f.acceptStep(f.supports[0])
		if err != nil {
			f.uncertified(err)
			return false, true
		}
		if len(fresh) > 0 {
			f.brought += len(fresh)
			f.bring(fresh)
			return true, false
		}
		if f.cur == f.to {
			f.qp.save(&f.before)
		} else {
			f.saveSupport(f.rec)
		}
		f.supports = f.supports[1:]
		f.cur++
		if f.cur > f.last {
			f.finished(StopFloor)
			return false, true
		}
		if s := f.stopAfter(); s > 0 && len(f.entered) > s {
			f.finished(StopEntered)
			return false, true
		}
	}
	return false, false
}

// stopAfter is the number of distinct candidates that ends the path; 0: none.
func (f *fitting) stopAfter() int {
	if f.unlimited {
		return 0
	}
	return f.m.p.StopAfter
}

// saveSupport notes a record as the place to go back to.
func (f *fitting) saveSupport(r *record) {
	f.before.members = append(f.before.members[:0], r.members...)
	f.before.sign = append(f.before.sign[:0], r.sign...)
	f.before.beta = append(f.before.beta[:0], r.beta...)
}

func (f *fitting) finished(s Stop) {
	if f.path != nil {
		f.path.Stop = s
	}
}

func (f *fitting) uncertified(err error) {
	if f.path != nil {
		f.path.Stop, f.path.Why = StopUncertified, fmt.Sprintf("lambda %.6g: %v", f.lambda(f.cur), err)
	}
	f.failed = err
}

// advance opens the next window and proposes members for it.
func (f *fitting) advance() {
	steps := f.window()
	f.to = min(f.cur+steps-1, f.last)
	if steps > 1 {
		f.start0.resize(len(f.end.value))
		f.start0.copyFrom(&f.end)
		f.startU = append(f.startU[:0], f.endU...)
	} else {
		f.start0.value = f.start0.value[:0]
	}
	f.bring(f.newcomers(f.propose()))
}

// propose lists the candidates that are likely to enter in the window: by the
// sequential strong rule (Tibshirani et al. 2012) for one step, by the path of
// all rows for a longer window.
func (f *fitting) propose() []int32 {
	to := f.lambda(f.to)
	strong := 2*to - f.rec.lambda
	if f.to > f.cur {
		strong = 0.95 * f.rec.lambda
	}
	var out []int32
	for c, v := range f.end.value {
		if f.inverse[c] == 0 {
			continue
		}
		if math.Abs(v) >= strong || f.m.seeds.enters(int32(c), to) {
			out = append(out, int32(c))
		}
	}
	return out
}
