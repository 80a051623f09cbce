package solver

import (
	"math"
	"math/bits"

	"holdfast/solver/kernel"
)

// drawn is a Sample as the fits see it: the rows of positive weight, compact.
type drawn struct {
	rows   []int32   // ascending
	count  []float64 // how often each was drawn; nil: once each
	weight []float64 // per drawn row; nil: all 1
	root   []float64 // square roots of weight; nil: all 1
	total  float64   // N, the sum of the weights
	mean   float64   // weighted mean of the outcome over the draw
	y      []float64 // root * (outcome - mean), where it is a number
}

// draw fills d from a sample of a table of n rows, but for the outcome.
func (d *drawn) draw(s *Sample, n int) {
	d.rows = d.rows[:0]
	d.weight, d.root, d.count = nil, nil, nil
	for w, word := range s.Rows {
		for ; word != 0; word &= word - 1 {
			i := w<<6 + bits.TrailingZeros64(word)
			if i < n && s.Weight(i) > 0 {
				d.rows = append(d.rows, int32(i))
			}
		}
	}
	d.setWeights(s)
}

func (d *drawn) setWeights(s *Sample) {
	d.total = float64(len(d.rows))
	if s.Count != nil {
		d.count = make([]float64, len(d.rows))
		for k, r := range d.rows {
			d.count[k] = float64(s.Count[r])
		}
	}
	if s.Count == nil && s.Case == nil {
		return
	}
	d.weight = make([]float64, len(d.rows))
	d.root = make([]float64, len(d.rows))
	for k, r := range d.rows {
		d.weight[k] = s.Weight(int(r))
		d.root[k] = math.Sqrt(d.weight[k])
	}
	d.total = kernel.Sum(d.weight)
}

// countOf is how often drawn row k was drawn.
func (d *drawn) countOf(k int) float64 {
	if d.count == nil {
		return 1
	}
	return d.count[k]
}

// setOutcome centres the outcome on its two-pass mean: a mean from one pass
// leaves an error of eps times the mean, which the second removes.
func (d *drawn) setOutcome(outcome []float64) {
	d.y = resize(d.y, len(d.rows))
	kernel.Gather(d.y, outcome, d.rows, 0, 1)
	d.mean = d.centre(d.y)
	if d.root != nil {
		for k := range d.y {
			d.y[k] *= d.root[k]
		}
	}
}

// centre subtracts from v (unweighted values of the drawn rows) its weighted
// mean, computed in two passes, and returns the mean.
func (d *drawn) centre(v []float64) float64 {
	if len(v) == 0 {
		return 0
	}
	mean := 0.0
	for range 2 {
		shift := d.weighted(v) / d.total
		for k := range v {
			v[k] -= shift
		}
		mean += shift
	}
	return mean
}

// weighted returns the weighted sum of values of the drawn rows.
func (d *drawn) weighted(v []float64) float64 {
	if d.weight == nil {
		return kernel.Sum(v)
	}
	return kernel.Dot(d.weight, v)
}

// constant returns the gathered column of ones.
func (d *drawn) constant(dst []float64) []float64 {
	if d.root != nil {
		return append(dst[:0], d.root...)
	}
	dst = resize(dst, len(d.rows))
	for k := range dst {
		dst[k] = 1
	}
	return dst
}

// lanes are the vectors root*u of a fit's score vectors u, whose products with a
// raw column are the gradients times N, and their sums.
type lanes struct {
	v    []float64 // one after another
	sum  []float64
	rows int
}

// from fills the lanes from score vectors.
func (l *lanes) from(d *drawn, u []float64) {
	l.rows = len(d.rows)
	l.v, l.sum = append(l.v[:0], u...), l.sum[:0]
	for k0 := 0; k0 < len(u); k0 += l.rows {
		v := l.v[k0 : k0+l.rows]
		for k, r := range d.root {
			v[k] *= r
		}
		l.sum = append(l.sum, kernel.Sum(v))
	}
}

// lane is one of them.
func (l *lanes) lane(k int) []float64 { return l.v[k*l.rows : (k+1)*l.rows] }

// column is one design column gathered on a draw's rows: record numbers.
type column struct {
	mean   float64   // mean over the draw, less the column's centre in the design
	sd     float64   // standard deviation over the draw, 0 where it does not vary
	values []float64 // root * (x - mean); 0 in holes
}

// gather fills the column from raw values by the two-pass rule. Missing cells
// take the mean over the draw's filled cells and so contribute nothing to any
// product of centred columns (DESIGN: filled on the shared matrix).
func (d *drawn) gather(x []float64, holes []uint64, dst []float64) column {
	v := resize(dst, len(d.rows))
	kernel.Gather(v, x, d.rows, 0, 1)
	c := column{values: v}
	if holes == nil {
		c.mean = d.centre(v)
	} else {
		c.mean = d.centreFilled(v, holes)
	}
	if d.root != nil {
		for k := range v {
			v[k] *= d.root[k]
		}
	}
	if !allZero(v) {
		c.sd = math.Sqrt(kernel.Dot(v, v) / d.total)
	}
	return c
}

// centreFilled centres the filled cells on their own mean and sets the
// missing ones to 0.
func (d *drawn) centreFilled(v []float64, holes []uint64) float64 {
	filled := make([]float64, len(v))
	for k, r := range d.rows {
		if !isHole(holes, r) {
			filled[k] = 1
			if d.weight != nil {
				filled[k] = d.weight[k]
			}
		}
	}
	total, mean := kernel.Sum(filled), 0.0
	if total == 0 {
		clear(v)
		return 0
	}
	for range 2 {
		shift := kernel.Dot(filled, v) / total
		for k := range v {
			v[k] -= shift
		}
		mean += shift
	}
	for k := range v {
		if filled[k] == 0 {
			v[k] = 0
		}
	}
	return mean
}

// varies is the exact test: whether the column takes two values over the
// draw's filled cells.
func (d *drawn) varies(x []float64, holes []uint64) bool {
	first, seen := 0.0, false
	for _, r := range d.rows {
		switch {
		case holes != nil && isHole(holes, r):
		case !seen:
			first, seen = x[r], true
		case x[r] != first:
			return true
		}
	}
	return false
}

func isHole(holes []uint64, r int32) bool { return holes[r>>6]>>(r&63)&1 != 0 }

func allZero(v []float64) bool {
	for _, x := range v {
		if x != 0 {
			return false
		}
	}
	return true
}

// resize returns a slice of n values, reusing v where it is large enough. The
// values are not cleared.
func resize(v []float64, n int) []float64 {
	if cap(v) < n {
		return make([]float64, n)
	}
	return v[:n]
}
