package solver

import (
	"errors"
	"math"
	"slices"

	"holdfast/solver/kernel"
)

// attempts bounds the rounds of settling a support at the border.
const attempts = 50

// chosen is a selected candidate as recorded: where the coefficient stands in
// the record, and its share of it where twins split it.
type chosen struct {
	unit  int32
	place int
	share float64 // sign relative to the record's member, over the number of twins
	enter float64 // sign of the coefficient
}

// acceptStep turns the working set's support at step cur into a record, if all
// candidates bear it out. It returns the units that violate and are not in the
// working set yet; an error where the step cannot be certified.
func (f *fitting) acceptStep(support []choice) (fresh []int32, err error) {
	lambda := f.lambda(f.cur)
	support = slices.Clone(support)
	redone := false
	for range attempts {
		f.canonical(support)
		r, err := f.finish(f.rec, support, lambda)
		if err != nil {
			return nil, err
		}
		if weak := r.weak(f); len(weak) > 0 {
			redone = true
			f.dropResidual(r.u)
			support = slices.DeleteFunc(support, func(c choice) bool { return slices.Contains(weak, c.place) })
			continue
		}
		v := f.judge(r)
		if len(v.fresh) > 0 {
			f.dropResidual(r.u)
			return v.fresh, nil
		}
		redone = redone || v.border
		if v.moved {
			f.dropResidual(r.u)
			continue
		}
		if v.violator != nil {
			redone = true
			f.dropResidual(r.u)
			support = append(support, *v.violator)
			continue
		}
		if err := r.check(f); err != nil {
			return nil, err
		}
		f.take(r, v.twins, redone)
		return nil, nil
	}
	return nil, errors.New("candidates on the border could not be settled")
}

// canonical puts the lowest of coinciding units in a member's stead, so that
// it does not matter which of them the working set met first.
func (f *fitting) canonical(support []choice) {
	w := &f.work
	for k, c := range support {
		if t := w.twin[c.place]; t != c.place {
			if w.h.row[c.place][t] < 0 {
				support[k].sign = -c.sign
			}
			support[k].place = t
		}
	}
}

// verdict is what the candidates outside a record's support say of it.
type verdict struct {
	fresh    []int32 // violators to be brought into the working set
	violator *choice // the lowest violator that is in it already
	moved    bool    // a lower twin of a member was found: canonical must run again
	border   bool    // a candidate stands on the border
	twins    [][2]int
}

// judge checks every candidate outside the support, by a proven margin or by a
// record number.
func (f *fitting) judge(r *record) verdict {
	var v verdict
	outside := f.suspects(r)
	known := len(f.work.units)
	f.work.add(f, f.newcomers(outside))
	f.qp.grow(len(f.work.units))
	for _, c := range outside {
		f.judgeOne(r, c, known, &v)
	}
	return v
}

func (f *fitting) judgeOne(r *record, c int32, known int, v *verdict) {
	place := int(f.work.place[c])
	g := f.gradient(c, r.u)
	gauge := f.m.penalty.gauge(c, g, r.lambda)
	if gauge < 1-border {
		return
	}
	if k := f.twinMember(r, place); k >= 0 {
		if f.work.units[place] < f.work.units[r.members[k]] {
			v.moved = true
		}
		v.twins = append(v.twins, [2]int{k, place})
		return
	}
	if isOut(gauge) {
		v.border = true
		return
	}
	if place >= known {
		v.fresh = append(v.fresh, c)
	} else if v.violator == nil {
		v.violator = &choice{place, math.Copysign(1, g)}
	}
}

// twinMember returns the member that a unit coincides with in this draw, or -1.
func (f *fitting) twinMember(r *record, place int) int {
	for k, i := range r.members {
		if r.sign[k] != 0 && f.work.twin[i] == f.work.twin[place] {
			return k
		}
	}
	return -1
}

// suspects lists the candidates outside a record that the screening numbers do
// not exclude: first by the gradients at the window's ends and the distance of the
// record's residual from theirs, then by the gradient itself.
func (f *fitting) suspects(r *record) []int32 {
	least := f.least(r.lambda, r.u)
	a := f.between(r)
	e := f.distanceFrom(r.u, a)
	first, endD := f.snaps.first, f.distance[1]
	f.lane = f.d.lane(f.lane, r.u)
	sum := kernel.Sum(f.lane)
	f.mark(r, true)
	defer f.mark(r, false)
	var out []int32
	for c, v := range f.end.value {
		if f.inverse[c] == 0 || f.inside[c] {
			continue
		}
		norm := f.normOf(c)
		value, slack := float64((1-a)*v), float64(math.Abs(1-a)*reach(first, f.end.ref[c], endD, norm))+float64(norm*e)
		if a != 0 {
			value += float64(a * f.start0.value[c])
			slack += float64(math.Abs(a) * reach(first, f.start0.ref[c], f.distance[0], norm))
		}
		if math.Abs(value)+slack < least {
			continue
		}
		if math.Abs(f.screened(int32(c), sum)) >= least {
			out = append(out, int32(c))
		}
	}
	return out
}

// mark notes in f.inside which candidates a record holds.
func (f *fitting) mark(r *record, in bool) {
	for k, i := range r.members {
		if r.sign[k] != 0 {
			f.inside[f.work.units[i]] = in
		}
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

// distanceFrom returns the distance of u from the mixture, and leaves the
// distances of the snapshots from the window's ends in f.distance.
func (f *fitting) distanceFrom(u []float64, a float64) float64 {
	f.distance[1] = f.snaps.distances(f.distance[1], f.endU, f.d.total)
	if a == 0 {
		return math.Sqrt(kernel.SquaredDistance(u, f.endU)/f.d.total) * (1 + 1e-9)
	}
	f.distance[0] = f.snaps.distances(f.distance[0], f.startU, f.d.total)
	f.fit = resize(f.fit, len(u))
	for k, e := range f.endU {
		f.fit[k] = float64(a*f.startU[k]) + float64((1-a)*e)
	}
	return math.Sqrt(kernel.SquaredDistance(u, f.fit)/f.d.total) * (1 + 1e-9)
}

// screened is the screening gradient of a candidate at the residual in f.lane.
func (f *fitting) screened(c int32, sum float64) float64 {
	x, holes := f.m.column(c)
	if holes != nil {
		sum -= f.d.overHoles(holes, f.lane)
	}
	return (kernel.DotRows(x, f.d.rows, f.lane) - float64(f.mean[c]*sum)) * f.inverse[c] / f.d.total
}

// take makes a record the certified step, and hands it on.
func (f *fitting) take(r *record, twins [][2]int, redone bool) {
	f.dropResidual(f.rec.u)
	f.rec = r
	list := f.chosen(r, twins)
	if f.path != nil && redone {
		f.path.Borderline++
	}
	f.accept(r, list)
	for _, c := range list {
		f.entered[c.unit] = true
	}
}

// chosen lists the selected candidates in table order. Twins share the
// coefficient of the one that stands for them in equal parts.
func (f *fitting) chosen(r *record, twins [][2]int) []chosen {
	count := make([]int, len(r.members))
	for _, t := range twins {
		count[t[0]]++
	}
	var list []chosen
	for k, i := range r.members {
		if r.sign[k] != 0 {
			list = append(list, chosen{f.work.units[i], k, 1 / float64(1+count[k]), r.sign[k]})
		}
	}
	for _, t := range twins {
		k := t[0]
		sign := math.Copysign(1, f.work.h.row[r.members[k]][t[1]])
		list = append(list, chosen{f.work.units[t[1]], k, sign / float64(1+count[k]), sign * r.sign[k]})
	}
	slices.SortFunc(list, func(a, b chosen) int { return int(a.unit) - int(b.unit) })
	return list
}
