package solver

import (
	"fmt"
	"math"
	"slices"

	"holdfast/solver/kernel"
)

// fitting is one draw on its way down the lattice. It looks a window of steps
// ahead: the working set's problem is solved at each of them, one request asks
// for all gradients at the last, and then the steps are accepted one by one,
// each with its own record. One step is the right window where a draw's
// residuals are short vectors (p > n); several steps spare passes over a long
// table.
type fitting struct {
	m       *Model
	d       drawn
	penalty *penalty // the model's, or the draw's own with jitter
	work    working
	core    core
	qp      activeSet // of the quadratic core

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

	groups []*group // per candidate what the draw makes of a group; nil for a single column, or where there are none

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
	shine   lanes       // of the residual that candidates are measured against
	spareU  [][]float64 // residuals of dropped records
	fit     []float64
	accept  func(r *record, shared bool)
	path    *Path
	left    *outside // the rows that the path is scored on; nil: none
}

// start makes the fitting ready for a draw: its rows, its always-in columns,
// and the screening numbers of all candidates at the model without any.
func (f *fitting) start(s *Sample) error {
	if err := f.begin(s); err != nil {
		return err
	}
	f.left = f.leftOf(s)
	f.measure()
	return nil
}

// begin reads the draw and fits its always-in columns.
func (f *fitting) begin(s *Sample) error {
	f.d.draw(s, f.m.rows)
	if len(f.d.rows) < 2 {
		return fmt.Errorf("the draw has %d rows of positive weight: at least 2 are needed", len(f.d.rows))
	}
	f.work.reset()
	f.qp.reset()
	f.snaps.reset(len(f.d.rows))
	f.entered = make(map[int32]bool)
	f.failed, f.asked = nil, false
	f.penalty = f.m.penalty.of(s)
	return f.core.begin()
}

// constant reports whether the always-in columns leave nothing to explain.
func (f *fitting) constant() bool {
	return f.whole == 0 || kernel.Dot(f.rec.u, f.rec.u) <= 1e-24*f.whole
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
	if f.m.scale != nil || f.penalty.mix < 1 || f.penalty.uneven {
		f.norm = make([]float64, n)
	}
	f.groups = nil
	if f.m.p.Groups != nil {
		f.groups = make([]*group, n)
	}
	f.shine.from(&f.d, f.rec.u)
	ref := f.snaps.add(f.rec.u)
	for c := range int32(n) {
		if f.m.single(c) {
			f.measureOne(c)
		} else {
			f.measureGroup(c)
		}
		f.end.ref[c] = ref
	}
	f.endU = append(f.endU[:0], f.rec.u...)
	f.mostNorm = 1
	if f.norm != nil {
		f.mostNorm = slices.Max(f.norm)
	}
}

func (f *fitting) measureOne(c int32) {
	x, holes := f.m.column(c)
	first, sum := f.shine.lane(0), f.shine.sum[0]
	sx, sxx, sxy := kernel.Moments(x, f.d.rows, f.d.weight, first)
	filled := f.d.total
	if holes != nil {
		filled -= f.d.weightOfHoles(holes)
		sum -= f.d.overHoles(holes, first)
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
	f.inverse[c] = 1 / (f.m.scaleOf(c, sd) * f.penalty.mix * f.penalty.weight[c])
	if f.norm != nil {
		f.norm[c] = sd * f.inverse[c]
	}
	if math.Abs(mean) > farOff*sd {
		f.coarse = append(f.coarse, coarse{c, math.Hypot(mean, sd) * f.inverse[c]})
	}
	if f.lanes() > 1 {
		f.end.value[c] = f.size(c, &f.shine)
		return
	}
	f.end.value[c] = (sxy - float64(mean*sum)) * f.inverse[c] / f.d.total
}

// measureGroup is measureOne for a group.
func (f *fitting) measureGroup(c int32) {
	g, block := f.d.whiten(f.m, c, f.work.buffer)
	f.work.spare = append(f.work.spare, block...)
	f.groups[c], f.mean[c] = g, 0
	if len(g.kept) == 0 {
		f.inverse[c], f.end.value[c] = 0, 0
		f.still = append(f.still, c)
		return
	}
	f.inverse[c] = 1 / f.penalty.threshold(c, 1)
	if f.norm != nil {
		f.norm[c] = f.inverse[c]
	}
	f.end.value[c] = f.size(c, &f.shine)
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
		for lane := range f.lanes() {
			top = max(top, f.penalty.gauge(c, f.gradient(int(f.work.place[c]), lane, f.rec.u), 1))
		}
	}
	return top
}

// lanes is the number of score vectors of a fit.
func (f *fitting) lanes() int { return f.m.lanes() }

// gradient is the record gradient of a unit of the working set, by its first
// place, for one lane; of a group its length.
func (f *fitting) gradient(place, lane int, u []float64) float64 {
	n := len(f.d.rows)
	u = u[lane*n : (lane+1)*n]
	width := f.work.width(place)
	if width == 1 {
		return kernel.Dot(f.work.z[place], u) / f.d.total
	}
	g := make([]float64, width)
	for t := range g {
		g[t] = kernel.Dot(f.work.z[place+t], u) / f.d.total
	}
	return length(g)
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
	f.req.f = f
	f.req.u = resize(f.req.u, f.lanes()*len(f.d.rows))
	f.core.score(f.req.u)
	f.req.least = f.least(f.lambda(f.to), f.spread(f.req.u))
	f.req.number = f.snaps.add(f.req.u)
	f.core.know()
	f.asked = true
	return &f.req
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
	f.goBack()
	seen := make(map[int32]bool)
	for k := f.cur; k <= f.to; k++ {
		if err := f.core.solve(f.lambda(k)); err != nil {
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

// goBack returns the core to the certified step before the window, unless it stands
// there, or at the window's first step, already.
func (f *fitting) goBack() {
	if f.stands != f.cur && f.stands != f.cur-1 {
		f.core.back(f.lambda(f.cur))
	}
}

// resolve takes the working set down a window that was cut.
func (f *fitting) resolve() {
	f.goBack()
	for k := f.cur; k <= f.to && f.failed == nil; k++ {
		f.failed = f.core.solve(f.lambda(k))
		f.stands = k
	}
}

// support lists what the core holds and adds the new candidates to seen.
func (f *fitting) support(seen map[int32]bool) []choice {
	s := f.core.support()
	for _, c := range s {
		if u := f.work.units[c.place]; !f.entered[u] {
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
			f.core.save()
		} else {
			f.core.keep(f.rec)
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

func (f *fitting) finished(s Stop) {
	if f.path != nil {
		f.path.Stop = s
		f.scoreNoted(f.path)
	}
}

func (f *fitting) uncertified(err error) {
	if f.path != nil {
		f.scoreNoted(f.path)
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
