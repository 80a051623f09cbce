package solver

import (
	"cmp"
	"slices"

	"holdfast/solver/kernel"
)

// scoredTogether is the number of steps whose fits on the rows left out are made in
// one pass over the columns.
const scoredTogether = 16

// outside is the rows that a draw's path is scored on: the other half, or what a
// bootstrap left out (STATISTICS 11).
type outside struct {
	d      drawn
	fam    family
	offset []float64
	steps  []scored // certified steps that are to be scored
	column []float64
	eta    []float64 // linear predictors, step by step, lane by lane
}

// scored is what a certified step predicts by.
type scored struct {
	level, always []float64
	coefs         []Coef
}

// leftOf takes the rows left out of a sample; nil where there are none.
func (f *fitting) leftOf(s *Sample) *outside {
	if s.Left == nil {
		return nil
	}
	o := &outside{fam: newFamily(&f.m.p)}
	left := &Sample{Rows: s.Left.Rows, Count: s.Left.Count, Case: f.m.p.Case}
	o.d.draw(left, f.m.rows)
	if len(o.d.rows) == 0 {
		return nil
	}
	o.fam.take(&o.d)
	if p := f.m.p.Offset; p != nil {
		o.offset = make([]float64, len(o.d.rows))
		kernel.Gather(o.offset, p, o.d.rows, 0, 1)
	}
	return o
}

// scoreLeft notes a certified step, to be scored with others.
func (f *fitting) scoreLeft(p *Path, r *record) {
	o := f.left
	if o == nil {
		return
	}
	if len(p.Deviance) == 0 && len(o.steps) == 0 {
		o.steps = append(o.steps, scored{level: f.core.nullLevel()})
		f.predictOutside(o)
		p.NullDeviance = o.fam.deviance(o.eta)
		f.doneOutside(o)
	}
	o.steps = append(o.steps, scored{f.core.level(r), f.core.always(r), f.core.values(r)})
	if len(o.steps) == scoredTogether {
		f.scoreNoted(p)
	}
}

// scoreNoted appends the deviances of the steps noted to the path.
func (f *fitting) scoreNoted(p *Path) {
	o := f.left
	if o == nil || len(o.steps) == 0 {
		return
	}
	f.predictOutside(o)
	n := len(o.d.rows) * f.lanes()
	for k := range o.steps {
		p.Deviance = append(p.Deviance, o.fam.deviance(o.eta[k*n:(k+1)*n]))
	}
	f.doneOutside(o)
}

// doneOutside gives the room of the linear predictors back: one draw at a time needs
// it.
func (f *fitting) doneOutside(o *outside) {
	eta := o.eta
	f.m.etas.Put(&eta)
	o.steps, o.eta = o.steps[:0], nil
}

// use is one column's coefficient in one step, for one lane.
type use struct {
	unit  int32
	term  int32
	index int // step*lanes + lane
	b     float64
}

// predictOutside fills the linear predictors of the steps noted. Each adds its columns
// in the order of units, whatever steps it is made with.
func (f *fitting) predictOutside(o *outside) {
	lanes, n := f.lanes(), len(o.d.rows)
	if room, ok := f.m.etas.Get().(*[]float64); ok {
		o.eta = *room
	}
	o.begin(lanes)
	uses := o.uses(int32(f.m.candidates()), lanes)
	for r0 := 0; r0 < n; r0 += kernel.Chunk {
		r1 := min(r0+kernel.Chunk, n)
		for i := 0; i < len(uses); {
			k := i
			for k < len(uses) && uses[k].unit == uses[i].unit && uses[k].term == uses[i].term {
				k++
			}
			f.addOutside(o, uses[i:k], r0, r1)
			i = k
		}
	}
}

// begin starts the linear predictors at the intercepts.
func (o *outside) begin(lanes int) {
	n := len(o.d.rows)
	o.eta = resize(o.eta, n*lanes*len(o.steps))
	clear(o.eta)
	for s, step := range o.steps {
		for lane, v := range step.level {
			part := o.eta[(s*lanes+lane)*n:][:n]
			for k := range part {
				part[k] = v
			}
		}
		for lane := range lanes {
			for k, v := range o.offset {
				o.eta[(s*lanes+lane)*n+k] += v
			}
		}
	}
}

// uses lists the coefficients of the steps by column: always-in columns first.
func (o *outside) uses(candidates int32, lanes int) []use {
	var list []use
	for s, step := range o.steps {
		for i, b := range step.always {
			if b != 0 {
				list = append(list, use{candidates + int32(i/lanes), 0, s*lanes + i%lanes, b})
			}
		}
		for _, c := range step.coefs {
			list = append(list, use{c.Candidate, c.Term, s*lanes + int(c.Class), c.Value})
		}
	}
	slices.SortFunc(list, func(a, b use) int {
		if first := a.unit >= candidates; first != (b.unit >= candidates) {
			if first {
				return -1
			}
			return 1
		}
		return cmp.Or(cmp.Compare(a.unit, b.unit), cmp.Compare(a.term, b.term), cmp.Compare(a.index, b.index))
	})
	return list
}

// addOutside adds rows r0 to r1-1 of one column to the linear predictors that use it.
// Missing cells take the mean of the draw, and so add nothing.
func (f *fitting) addOutside(o *outside, uses []use, r0, r1 int) {
	j, mean := f.columnOf(uses[0].unit, int(uses[0].term))
	x, holes := f.m.p.Design.Panel([]int32{j}, 0, f.m.rows, nil)[0], f.m.p.Design.Holes(j)
	rows, n := o.d.rows[r0:r1], len(o.d.rows)
	o.column = resize(o.column, len(rows))
	kernel.Gather(o.column, x, rows, mean, 1)
	if holes != nil {
		for k, r := range rows {
			if isHole(holes, r) {
				o.column[k] = 0
			}
		}
	}
	for _, u := range uses {
		kernel.AddScaled(u.b, o.column, o.eta[u.index*n+r0:][:len(rows)])
	}
}

// columnOf is the design column of a unit's term, and its mean in the draw less its
// centre.
func (f *fitting) columnOf(unit int32, term int) (j int32, mean float64) {
	if int(unit) >= f.m.candidates() {
		return f.m.design(unit), f.work.mean[f.work.place[unit]]
	}
	return f.m.columns(unit)[term], f.meanOf(unit, term)
}

// meanOf is the draw's mean of a column of a candidate, less its centre.
func (f *fitting) meanOf(unit int32, t int) float64 {
	if f.m.single(unit) {
		return f.work.mean[f.work.place[unit]]
	}
	g := f.groups[unit]
	for i, k := range g.kept {
		if k == t {
			return g.mean[i]
		}
	}
	return 0
}
