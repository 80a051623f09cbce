package solver

import (
	"errors"
	"math"
	"slices"

	"holdfast/solver/kernel"
)

// attempts bounds the rounds of settling a support at the border.
const attempts = 50

// together is in how many of them all violators join a support at once; after that
// the lowest alone.
const together = 10

// acceptStep turns the working set's support at step cur into a record, if all
// candidates bear it out. It returns the units that violate and are not in the
// working set yet; an error where the step cannot be certified.
func (f *fitting) acceptStep(support []choice) (fresh []int32, err error) {
	lambda := f.lambda(f.cur)
	support = slices.Clone(support)
	for attempt := range attempts {
		r, err := f.core.finish(support, lambda)
		if err != nil {
			return nil, err
		}
		if weak := f.core.weak(r); len(weak) > 0 {
			f.dropResidual(r.u)
			support = slices.DeleteFunc(support, func(c choice) bool { return holds(weak, c) })
			continue
		}
		if err := r.check(f); err != nil {
			return nil, err
		}
		v, err := f.judge(r)
		if err != nil {
			return nil, err
		}
		if len(v.fresh) > 0 {
			f.dropResidual(r.u)
			return v.fresh, nil
		}
		if len(v.violators) > 0 {
			f.dropResidual(r.u)
			if attempt >= together {
				v.violators = v.violators[:1]
			}
			support = append(support, v.violators...)
			continue
		}
		return nil, f.conclude(r, v.near)
	}
	return nil, errors.New("candidates on the border could not be settled")
}

// conclude takes a record that no candidate violates: as it is, or with the
// coefficients shared out where those at the border are linearly dependent.
func (f *fitting) conclude(r *record, near []choice) error {
	shared := false
	if len(near) > 0 {
		s, err := f.core.share(r, near)
		if err != nil {
			return err
		}
		if s != nil {
			near = append(near, r.support...)
			f.dropResidual(r.u)
			r, shared = s, true
		}
		r.cert.violation = max(r.cert.violation, f.excess(r, near))
	}
	if err := r.check(f); err != nil {
		return err
	}
	f.take(r, shared, len(near) > 0 && !shared)
	return nil
}

// excess is how far the largest gauge among places outside a record lies above
// 1.
func (f *fitting) excess(r *record, places []choice) float64 {
	most := 0.0
	for _, c := range places {
		if !holds(r.support, c) {
			most = max(most, f.penalty.gauge(f.work.units[c.place], f.gradient(c.place, c.lane, r.u), r.lambda)-1)
		}
	}
	return most
}

// verdict is what the candidates outside a record's support say of it.
type verdict struct {
	fresh     []int32  // violators to be brought into the working set
	violators []choice // violators that are in it already, the lowest first
	near      []choice // candidates on the border, that may stay out
}

// judge checks every candidate outside the support, by a proven margin or by a
// record number.
func (f *fitting) judge(r *record) (verdict, error) {
	var v verdict
	outside := f.suspects(r)
	known := len(f.work.units)
	f.work.add(f, f.newcomers(outside))
	if f.lanes() > 1 {
		outside = append(outside, r.units...) // their other lanes
		slices.Sort(outside)
	}
	for _, c := range outside {
		for lane := range f.lanes() {
			if err := f.judgeOne(r, c, lane, known, &v); err != nil {
				return v, err
			}
		}
	}
	return v, nil
}

func (f *fitting) judgeOne(r *record, c int32, lane, known int, v *verdict) error {
	place := int(f.work.place[c])
	if holds(r.support, choice{place: place, lane: lane}) {
		return nil
	}
	g := f.gradient(place, lane, r.u)
	gauge := f.penalty.gauge(c, g, r.lambda)
	if blur := f.blur(r, place); blur > unresolved && gauge >= 1-blur {
		return errors.New(f.m.name(c) + ": not resolvable in these units")
	}
	side := choice{place, lane, math.Copysign(1, g)}
	switch {
	case gauge < 1-border:
	case isOut(gauge):
		v.near = append(v.near, side)
	case place >= known:
		if !slices.Contains(v.fresh, c) {
			v.fresh = append(v.fresh, c)
		}
	default:
		v.violators = append(v.violators, side)
	}
	return nil
}

// suspects lists the candidates outside a record that the screening numbers do
// not exclude: first by the gradients at the window's ends and the distance of the
// record's residual from theirs, then by the gradient itself.
func (f *fitting) suspects(r *record) []int32 {
	least := f.least(r.lambda, r.spread)
	within := f.within(r)
	f.shine.from(&f.d, r.u)
	f.mark(r, true)
	defer f.mark(r, false)
	var out []int32
	for c := range f.end.value {
		if f.inverse[c] == 0 || f.inside[c] || within(int32(c)) < least {
			continue
		}
		f.looked++
		if f.size(int32(c), &f.shine) >= least {
			out = append(out, int32(c))
		}
	}
	return f.addCoarse(r, out, within)
}

// within returns a function that gives an upper limit of the size of a
// candidate's gradient at a record.
func (f *fitting) within(r *record) func(c int32) float64 {
	a := f.between(r)
	e := f.distanceFrom(r.u, a)
	end, start := &f.toEnd, &f.toStart
	end.from(&f.snaps, f.endU, f.d.total)
	start.from(&f.snaps, f.startU, f.d.total)
	return func(c int32) float64 {
		norm := f.normOf(int(c))
		value, slack := float64((1-a)*f.end.value[c]), float64(math.Abs(1-a)*end.reach(f.end.ref[c]))
		if a != 0 {
			value += float64(a * f.start0.value[c])
			slack += float64(math.Abs(a) * start.reach(f.start0.ref[c]))
		}
		return math.Abs(value) + float64(norm*(slack+e))
	}
}

// coarse is a candidate whose values in the draw lie far from the centre of
// the table for their spread, so that its gradient is known less well than
// screening takes for granted.
type coarse struct {
	unit int32
	size float64 // root mean square about the centre, in the penalty's units
}

// addCoarse adds the coarse candidates that the rounding of their gradient does
// not let be excluded.
func (f *fitting) addCoarse(r *record, out []int32, within func(int32) float64) []int32 {
	if len(f.coarse) == 0 {
		return out
	}
	for _, c := range f.coarse {
		if !f.inside[c.unit] && within(c.unit) >= r.lambda-float64(rounding*r.spread*c.size) && !slices.Contains(out, c.unit) {
			out = append(out, c.unit)
		}
	}
	slices.Sort(out)
	return out
}

// blur is how far rounding may move a gauge (DESIGN 4: 8 eps sum|x u| over
// N lambda v; sum|x u| is at most N times the spread of u times the root mean
// square of x).
func (f *fitting) blur(r *record, place int) float64 {
	w := &f.work
	size := math.Sqrt(float64(w.mean[place]*w.mean[place])/float64(w.scale[place]*w.scale[place]) + w.square[place])
	return rounding * r.spread * size / f.penalty.threshold(w.units[place], r.lambda)
}

// spread is the root mean square of a residual.
func (f *fitting) spread(u []float64) float64 { return math.Sqrt(kernel.Dot(u, u) / f.d.total) }

// mark notes in f.inside which candidates a record holds.
func (f *fitting) mark(r *record, in bool) {
	for _, u := range r.units {
		f.inside[u] = in
	}
}

// between returns how much of the window's start, rather than its end, a
// record's residual is made of: the share that leaves the least distance.
func (f *fitting) between(r *record) float64 {
	if len(f.start0.value) == 0 || f.cur == f.to {
		return 0
	}
	num, den := 0.0, 0.0
	for k, e := range f.endU {
		d := f.startU[k] - e
		num += float64(d * (r.u[k] - e))
		den += float64(d * d)
	}
	if den == 0 {
		return 0
	}
	return num / den
}

// distanceFrom returns the distance of u from the mixture of the window's ends.
func (f *fitting) distanceFrom(u []float64, a float64) float64 {
	if a == 0 {
		return distance(u, f.endU, f.d.total)
	}
	f.fit = resize(f.fit, len(u))
	for k, e := range f.endU {
		f.fit[k] = float64(a*f.startU[k]) + float64((1-a)*e)
	}
	return distance(u, f.fit, f.d.total)
}

// take makes a record the certified step, and hands it on.
func (f *fitting) take(r *record, shared, settled bool) {
	f.dropResidual(f.rec.u)
	f.rec = r
	if f.path != nil && settled {
		f.path.Borderline++
	}
	f.accept(r, shared)
	for _, u := range r.units {
		f.entered[u] = true
	}
}
