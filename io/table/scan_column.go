package table

import (
	"math"
	"slices"
)

// describe fills in what a column's values tell by themselves. scratch holds
// as many values as v.
func describe(c *ColumnSummary, v, scratch []float64) {
	finite := scratch[:0]
	for _, x := range v {
		switch {
		case !notFinite(x):
			finite = append(finite, x)
		case isMissing(x):
			c.Missing++
		case x != x:
			c.NaN++
		default:
			c.Infinite++
		}
	}
	if len(finite) == 0 {
		return
	}
	complete := len(finite) == len(v)
	c.moments(finite)
	c.Constant = c.Min == c.Max
	c.order(finite, complete)
	c.Whole = allWhole(finite)
	c.countValues(finite)
	c.Dates = datesAsNumbers(finite, c)
	if c.Whole && complete && len(v) > 1 {
		c.Unique = noneTwice(finite, c.Min, c.Max) // sorts finite
	}
}

// moments sets smallest, largest, mean, deviation and serial correlation.
func (c *ColumnSummary) moments(v []float64) {
	m, ok := centreOf(v)
	_, c.Min, c.Max, _ = meanOf(v, 1)
	c.Mean = m
	if !ok {
		return
	}
	var sum, square, neighbours, e, lost float64
	largest := max(c.Max-m, m-c.Min)
	if largest == 0 {
		c.SD = 0
		return
	}
	last := 0.0
	for i, x := range v {
		d := (x - m) / largest
		sum, e = twoSum(sum, d)
		lost += e
		square += float64(d * d)
		if i > 0 {
			neighbours += float64(last * d)
		}
		last = d
	}
	n := float64(len(v))
	rest := sum + lost
	square = max(0, square-float64(rest*rest)/n)
	c.SD = math.Sqrt(square/n) * largest
	if len(v) > 2 && square > 0 {
		c.Serial = neighbours / square
	}
}

// order sets Monotone and RowNumber.
func (c *ColumnSummary) order(v []float64, complete bool) {
	if !complete || len(v) < 2 {
		return
	}
	up, down, step := true, true, true
	for i := 1; i < len(v); i++ {
		up = up && v[i] > v[i-1]
		down = down && v[i] < v[i-1]
		step = step && v[i]-v[i-1] == 1
	}
	c.Monotone, c.RowNumber = up || down, step && v[0] == math.Trunc(v[0])
}

func allWhole(v []float64) bool {
	for _, x := range v {
		if x != math.Trunc(x) {
			return false
		}
	}
	return true
}

// countValues counts different values up to the limit.
func (c *ColumnSummary) countValues(v []float64) {
	seen := make(map[float64]int64, 16)
	for _, x := range v {
		seen[x]++
		if len(seen) >= DistinctLimit {
			break
		}
	}
	c.Distinct = len(seen)
	if c.Distinct == 2 {
		c.Values = []Value{{c.Min, seen[c.Min]}, {c.Max, seen[c.Max]}}
	}
}

// noneTwice reports whether no value occurs twice. It sorts v, unless the
// range is so narrow that a bit per possible value is cheaper.
func noneTwice(v []float64, lo, hi float64) bool {
	if span := hi - lo; span < float64(len(v)-1) {
		return false
	} else if span < 64*float64(len(v)) {
		mask := make([]uint64, int(span)/64+1)
		for _, x := range v {
			k := int(x - lo)
			if mask[k>>6]>>(k&63)&1 == 1 {
				return false
			}
			mask[k>>6] |= 1 << (k & 63)
		}
		return true
	}
	slices.Sort(v)
	for i := 1; i < len(v); i++ {
		if v[i] == v[i-1] {
			return false
		}
	}
	return true
}

// datesAsNumbers recognises dates written as one number: 20240131, and
// seconds or parts of seconds since 1970. Years from 1950 to 2100 for the
// first, 1990 to 2050 for the others, and not all in one day or second.
func datesAsNumbers(v []float64, c *ColumnSummary) string {
	if !c.Whole || c.Constant || len(v) < 3 {
		return ""
	}
	if c.Min >= 19500101 && c.Max <= 21001231 {
		for _, x := range v {
			month, day := int(x)/100%100, int(x)%100
			if month < 1 || month > 12 || day < 1 || day > 31 {
				return ""
			}
		}
		return "year, month and day in one number"
	}
	const first, last = 631152000, 2524608000 // 1990-01-01 and 2050-01-01
	for _, unit := range []struct {
		scale float64
		name  string
	}{{1, "seconds"}, {1e3, "milliseconds"}, {1e6, "microseconds"}, {1e9, "nanoseconds"}} {
		if c.Min >= first*unit.scale && c.Max <= last*unit.scale {
			return unit.name + " since 1970"
		}
	}
	return ""
}

// target is the outcome that columns are compared with.
type target struct {
	name    string
	values  []float64
	larger  float64 // the larger of two values
	twofold bool
	levels  *coding // of text with more than two levels; values are their numbers
}

func newTarget(name string, v []float64) *target {
	t := &target{name: name, values: v}
	var c ColumnSummary
	describe(&c, v, make([]float64, len(v)))
	t.twofold, t.larger = len(c.Values) == 2, c.Max
	return t
}

// gaps lists the first rows in which the outcome has no finite value.
func (t *target) gaps(most int) []int {
	if t == nil {
		return nil
	}
	var rows []int
	for i, x := range t.values {
		if notFinite(x) {
			if rows = append(rows, i); len(rows) == most {
				break
			}
		}
	}
	return rows
}

// compare sets a column's correlation with the outcome and its AUC.
func (sc *scan) compare(c *ColumnSummary, v, scratch []float64) {
	if sc.target == nil || c.Name == sc.target.name || c.Constant {
		return
	}
	if sc.target.levels != nil {
		c.Correlation = correlationRatio(v, *sc.target.levels)
	} else {
		c.Correlation = correlation(v, sc.target.values)
	}
	if sc.target.twofold {
		c.AUC = sc.target.auc(v, scratch)
	}
	c.judgeLeak()
}

// judgeLeak says whether a column seems to be the outcome itself.
func (c *ColumnSummary) judgeLeak() {
	c.Leak = math.Abs(c.Correlation) >= LeakCorrelation || c.AUC > leakAUC || c.AUC < 1-leakAUC
}

// correlation is Pearson's, over the rows in which both are finite.
func correlation(x, y []float64) float64 {
	var n, mx, my float64
	var sx, sy float64 // scales that keep squares within range
	for i := range x {
		if notFinite(x[i]) || notFinite(y[i]) {
			continue
		}
		n++
		mx += (x[i] - mx) / n
		my += (y[i] - my) / n
	}
	for i := range x {
		if !notFinite(x[i]) && !notFinite(y[i]) {
			sx, sy = max(sx, math.Abs(x[i]-mx)), max(sy, math.Abs(y[i]-my))
		}
	}
	if n < 3 || sx == 0 || sy == 0 || math.IsInf(sx, 0) || math.IsInf(sy, 0) {
		return math.NaN()
	}
	var xx, yy, xy, dx, dy float64
	for i := range x {
		if notFinite(x[i]) || notFinite(y[i]) {
			continue
		}
		a, b := (x[i]-mx)/sx, (y[i]-my)/sy
		dx, dy = dx+a, dy+b
		xx, yy, xy = xx+float64(a*a), yy+float64(b*b), xy+float64(a*b)
	}
	xx, yy, xy = xx-float64(dx*dx)/n, yy-float64(dy*dy)/n, xy-float64(dx*dy)/n
	return max(-1, min(1, xy/math.Sqrt(float64(xx*yy))))
}

// auc is the area under the receiver operating characteristic curve: the
// share of pairs of rows of different outcome in which the larger outcome has
// the larger value, ties counting one half (Hanley & McNeil 1982).
func (t *target) auc(v, scratch []float64) float64 {
	low, high := scratch[:0], []float64(nil)
	for i, x := range v {
		if notFinite(x) || notFinite(t.values[i]) {
			continue
		}
		if t.values[i] == t.larger {
			high = append(high, x)
		} else {
			low = append(low, x)
		}
	}
	if len(low) == 0 || len(high) == 0 {
		return math.NaN()
	}
	slices.Sort(low)
	slices.Sort(high)
	wins, below, upTo := 0.0, 0, 0
	for _, x := range high {
		for below < len(low) && low[below] < x {
			below++
		}
		for upTo = max(upTo, below); upTo < len(low) && low[upTo] == x; {
			upTo++
		}
		wins += float64(below) + float64(float64(upTo-below)/2)
	}
	return wins / (float64(len(low)) * float64(len(high)))
}
