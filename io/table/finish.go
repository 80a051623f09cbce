package table

import (
	"context"
	"slices"

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
	reference []int32 // per predictor: level without an indicator
	first     []int32 // per predictor: its first column of X; one more at the end
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
	x.reference, x.first = make([]int32, len(l.predictors)), make([]int32, len(l.predictors)+1)
	for j := range l.predictors {
		count := 1
		if p := &l.predictors[j]; p.category != nil {
			reference, err := l.reference(p)
			if err != nil {
				return nil, err
			}
			x.reference[j] = int32(reference)
			count = len(p.category.levels.names) - 1
			indicators += count
		}
		total += count
		x.first[j+1] = int32(total)
	}
	if err := l.checkCells(indicators); err != nil {
		return nil, err
	}
	x.cols, x.holes = make([][]float64, total), make([][]uint64, total)
	x.prints = make([]print, len(l.predictors))
	l.data.Centre, l.data.Deviation = make([]float64, total), make([]float64, total)
	room := newColumns(x.n, indicators)
	for j, p := range l.predictors {
		if p.category != nil {
			room = room[copy(x.cols[x.first[j]:x.first[j+1]], room):]
		}
	}
	return x, nil
}

// fill fingerprints and centres the columns of all predictors.
func (x *layout) fill(ctx context.Context) error {
	buffers := make([][]byte, x.workers)
	return x.each(ctx, len(x.predictors), func(w, j int) error {
		p := &x.predictors[j]
		x.prints[j] = print{role: p.letter(), name: p.Name}
		if p.category != nil {
			x.prints[j].sum = digestLevels(p.category.levels, int(x.reference[j]))
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
func (x *layout) centre(k int32, v []float64) bool {
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
	k, levels := x.first[j], &x.predictors[j].category.levels
	for level := range levels.names {
		if level == int(x.reference[j]) {
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
	candidates := slices.IndexFunc(l.predictors, func(p predictor) bool { return p.always })
	if candidates < 0 {
		candidates = len(l.predictors)
	}
	d.Candidates, d.CandidateColumns = make([]string, 0, candidates), make([][]int32, 0, candidates)
	d.Names = make([]string, 0, len(columns))
	for j := range l.predictors {
		p := &l.predictors[j]
		own := columns[x.first[j]:x.first[j+1]:x.first[j+1]]
		if p.always {
			d.Always, d.AlwaysColumns = append(d.Always, p.Name), append(d.AlwaysColumns, own)
		} else {
			d.Candidates, d.CandidateColumns = append(d.Candidates, p.Name), append(d.CandidateColumns, own)
		}
		if p.category == nil {
			d.Names = append(d.Names, p.Name)
			continue
		}
		levels := &p.category.levels
		for k, level := range levels.names {
			if k != int(x.reference[j]) {
				d.Names = append(d.Names, p.Name+"="+level)
			}
		}
		d.Categories = append(d.Categories, Category{
			Column: p.Name, Levels: levels.levels(), Reference: levels.names[x.reference[j]], Filled: p.category.filled,
		})
	}
	d.Fingerprint = fingerprint(l.n, d.Rows, append(x.prints, l.sidePrints()...))
}
