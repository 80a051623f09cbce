package table

import (
	"context"

	"holdfast/solver"
)

// finish makes of the rows used what a fit needs.
func (l *loading) finish(ctx context.Context) error {
	rows := l.rowsUsed()
	l.data.Rows = rows
	if err := l.settleOutcome(rows); err != nil {
		return err
	}
	l.settleOffset(rows)
	if l.weight != nil {
		l.data.Weight = pickRows(l.weight.values, rows)
	}
	if err := l.settleWithin(rows); err != nil {
		return err
	}
	if err := l.settleLevels(ctx, rows); err != nil {
		return err
	}
	x, err := l.layOut(rows)
	if err != nil {
		return err
	}
	if err := x.fill(ctx); err != nil {
		return err
	}
	l.assemble(x)
	return nil
}

// layout is X under way: which columns every predictor has, and what is known
// of them.
type layout struct {
	*loading
	rows      []int32 // used; nil: all
	n         int     // rows used
	reference []int   // per predictor: level without an indicator
	first     []int   // per predictor: its first column of X; one more at the end
	cols      [][]float64
	holes     [][]uint64
	prints    []print // per predictor
}

// layOut gives every predictor its columns and makes room for indicators.
func (l *loading) layOut(rows []int32) (*layout, error) {
	x := &layout{loading: l, rows: rows, n: l.n}
	if rows != nil {
		x.n = len(rows)
	}
	total, indicators := 0, 0
	for _, p := range l.predictors {
		reference, count := 0, 1
		if p.category {
			var err error
			if reference, err = l.reference(p); err != nil {
				return nil, err
			}
			count = len(p.levels.names) - 1
			indicators += count
		}
		x.reference, x.first = append(x.reference, reference), append(x.first, total)
		total += count
	}
	x.first = append(x.first, total)
	if err := l.checkCells(indicators); err != nil {
		return nil, err
	}
	x.cols, x.holes = make([][]float64, total), make([][]uint64, total)
	x.prints = make([]print, len(l.predictors))
	l.data.Centre, l.data.Deviation = make([]float64, total), make([]float64, total)
	room := newColumns(x.n, indicators)
	for j, p := range l.predictors {
		if p.category {
			room = room[copy(x.cols[x.first[j]:x.first[j+1]], room):]
		}
	}
	return x, nil
}

// fill fingerprints and centres the columns of all predictors.
func (x *layout) fill(ctx context.Context) error {
	buffers := make([][]byte, x.workers)
	return x.each(ctx, len(x.predictors), func(w, j int) error {
		p := x.predictors[j]
		x.prints[j] = print{role: p.letter(), name: p.Name}
		if p.category {
			x.prints[j].sum = digestLevels(p.levels, x.reference[j])
			x.fillIndicators(j)
			return nil
		}
		if buffers[w] == nil {
			buffers[w] = make([]byte, digestBlock*8)
		}
		v := compact(p.values, x.rows)
		x.prints[j].sum = digest(v, buffers[w])
		if !x.centre(x.first[j], v) {
			return columnFaultf(x.path(), p.Name, "values are too far apart for float64: rescale the column")
		}
		return nil
	})
}

// centre puts v into X as column k, centred.
func (x *layout) centre(k int, v []float64) bool {
	c, ok := centreOf(v)
	if ok {
		x.cols[k], x.data.Centre[k], x.holes[k] = v, c, centre(v, c)
		x.data.Deviation[k] = deviation(v)
	}
	return ok
}

// fillIndicators writes the columns of a category, one per level but the
// reference.
func (x *layout) fillIndicators(j int) {
	k, levels := x.first[j], &x.predictors[j].levels
	for level := range levels.names {
		if level == x.reference[j] {
			continue
		}
		levels.indicator(level, x.cols[k])
		x.centre(k, x.cols[k])
		k++
	}
}

// assemble puts the finished columns where the caller finds them.
func (l *loading) assemble(x *layout) {
	d := l.data
	masks := map[int32][]uint64{}
	for k, m := range x.holes {
		if m != nil {
			masks[int32(k)] = m
		}
	}
	if len(masks) == 0 {
		masks = nil
	}
	d.X = solver.NewDense(x.n, x.cols, masks)
	columns := make([]int32, len(x.cols))
	for k := range columns {
		columns[k] = int32(k)
	}
	for j, p := range l.predictors {
		own := columns[x.first[j]:x.first[j+1]:x.first[j+1]]
		if p.always {
			d.Always, d.AlwaysColumns = append(d.Always, p.Name), append(d.AlwaysColumns, own)
		} else {
			d.Candidates, d.CandidateColumns = append(d.Candidates, p.Name), append(d.CandidateColumns, own)
		}
		d.Names = append(d.Names, p.columnNames(x.reference[j])...)
		if p.category {
			d.Categories = append(d.Categories, Category{
				Column: p.Name, Levels: p.levels.levels(), Reference: p.levels.names[x.reference[j]], Filled: p.filled,
			})
		}
	}
	d.Fingerprint = fingerprint(l.n, d.Rows, append(x.prints, l.sidePrints()...))
}

// columnNames names a predictor's columns of X.
func (p *predictor) columnNames(reference int) []string {
	if !p.category {
		return []string{p.Name}
	}
	var out []string
	for k, level := range p.levels.names {
		if k != reference {
			out = append(out, p.Name+"="+level)
		}
	}
	return out
}
