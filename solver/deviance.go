package solver

import "holdfast/solver/kernel"

// outside is the rows that a draw's path is scored on: the other half, or what a
// bootstrap left out (STATISTICS 11).
type outside struct {
	d      drawn
	fam    family
	offset []float64
	column []float64
	eta    []float64
}

// outside takes the rows left out of a sample; nil where there are none.
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

// deviance scores a record of the draw on the rows left out.
func (f *fitting) deviance(o *outside, r *record) float64 {
	o.begin(f.core.level(r), f.lanes())
	always := f.core.always(r)
	for i, b := range always {
		if b != 0 {
			unit := int32(f.m.candidates() + i/f.lanes())
			f.addOutside(o, f.m.design(unit), f.work.mean[f.work.place[unit]], b, i%f.lanes())
		}
	}
	for _, c := range f.core.values(r) {
		f.addOutside(o, f.m.columns(c.Candidate)[c.Term], f.meanOf(c.Candidate, int(c.Term)), c.Value, int(c.Class))
	}
	return o.fam.deviance(o.eta)
}

// begin starts the linear predictors at the intercepts.
func (o *outside) begin(level []float64, lanes int) {
	n := len(o.d.rows)
	o.eta = resize(o.eta, n*lanes)
	clear(o.eta)
	for lane, v := range level {
		for k := range n {
			o.eta[lane*n+k] = v
		}
	}
	for k, v := range o.offset {
		o.eta[k] += v
	}
}

// addOutside adds a column to the linear predictors. Missing cells take the mean of
// the draw, and so add nothing.
func (f *fitting) addOutside(o *outside, j int32, mean, b float64, lane int) {
	n := len(o.d.rows)
	x, holes := f.m.p.Design.Panel([]int32{j}, 0, f.m.rows, nil)[0], f.m.p.Design.Holes(j)
	o.column = resize(o.column, n)
	kernel.Gather(o.column, x, o.d.rows, mean, 1)
	if holes != nil {
		for k, r := range o.d.rows {
			if isHole(holes, r) {
				o.column[k] = 0
			}
		}
	}
	kernel.AddScaled(b, o.column, o.eta[lane*n:(lane+1)*n])
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

// score appends the deviance of a certified step to the path.
func (f *fitting) scoreLeft(p *Path, r *record) {
	if f.left == nil {
		return
	}
	if len(p.Deviance) == 0 {
		f.left.begin(f.core.nullLevel(), f.lanes())
		p.NullDeviance = f.left.fam.deviance(f.left.eta)
	}
	p.Deviance = append(p.Deviance, f.deviance(f.left, r))
}
