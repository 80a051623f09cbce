package table

import "math"

// How text is compared with an outcome: two levels are the numbers 0 and 1,
// more have no order. Then a number and a text are compared by the correlation
// ratio, and two texts by Cramer's V; both lie between 0 and 1.

// newTextTarget prepares the comparison with an outcome of text. values gets
// the numbers of its levels.
func newTextTarget(name string, levels coding, values []float64) *target {
	codesAsNumbers(levels, values)
	t := newTarget(name, values)
	if len(levels.names) > 2 {
		t.levels = &levels
	}
	return t
}

// codesAsNumbers writes the numbers of levels, missing where there is none.
func codesAsNumbers(c coding, v []float64) {
	for i, k := range c.codes {
		v[i] = missing
		if k >= 0 {
			v[i] = float64(k)
		}
	}
}

// compareText is compare for a column of text; v holds the numbers of its
// levels.
func (sc *scan) compareText(c *ColumnSummary, levels coding, v, scratch []float64) {
	switch {
	case sc.target == nil || c.Name == sc.target.name || len(levels.names) < 2:
		return
	case len(levels.names) == 2:
		sc.compare(c, v, scratch)
		return
	case sc.target.levels != nil:
		c.Correlation = cramersV(levels, *sc.target.levels)
	default:
		c.Correlation = correlationRatio(sc.target.values, levels)
	}
	c.judgeLeak()
}

// correlationRatio is the multiple correlation of numbers with the levels of a
// text, the square root of the share of variance between levels (Fisher 1925,
// Statistical Methods for Research Workers, section 45), adjusted for their number
// (Ezekiel 1930) so that levels of few rows do not explain by chance. It is NaN
// where rows or variation do not suffice.
func correlationRatio(v []float64, levels coding) float64 {
	sums, counts := make([]float64, len(levels.names)), make([]float64, len(levels.names))
	var n, mean, scale float64
	for i, k := range levels.codes {
		if k >= 0 && !notFinite(v[i]) {
			n++
			mean += (v[i] - mean) / n
		}
	}
	for i, k := range levels.codes {
		if k >= 0 && !notFinite(v[i]) {
			scale = max(scale, math.Abs(v[i]-mean))
		}
	}
	if scale == 0 || math.IsInf(scale, 0) || math.IsNaN(scale) {
		return math.NaN()
	}
	total, groups := 0.0, 0.0
	for i, k := range levels.codes {
		if k < 0 || notFinite(v[i]) {
			continue
		}
		d := (v[i] - mean) / scale
		if counts[k] == 0 {
			groups++
		}
		sums[k], counts[k], total = sums[k]+d, counts[k]+1, total+float64(d*d)
	}
	if n-groups < 1 || groups < 2 {
		return math.NaN()
	}
	between := 0.0
	for k := range sums {
		if counts[k] > 0 {
			between += float64(sums[k]*sums[k]) / counts[k]
		}
	}
	within := max(0, 1-between/total)
	return math.Sqrt(max(0, 1-float64(within*(n-1))/(n-groups)))
}

// cramersV is Cramer's V of two texts (Cramer 1946, Mathematical Methods of
// Statistics, section 21.9), NaN where one of them does not vary over the rows
// that have both.
func cramersV(a, b coding) float64 {
	table := make([]float64, len(a.names)*len(b.names))
	rows, cols := make([]float64, len(a.names)), make([]float64, len(b.names))
	n := 0.0
	for i := range a.codes {
		if j, k := a.codes[i], b.codes[i]; j >= 0 && k >= 0 {
			table[int(j)*len(cols)+int(k)]++
			rows[j]++
			cols[k]++
			n++
		}
	}
	least := min(filled(rows), filled(cols)) - 1
	if least < 1 {
		return math.NaN()
	}
	chi := 0.0 // chi-squared over n
	for j, r := range rows {
		for k, c := range cols {
			if r > 0 && c > 0 {
				expected := float64(r*c) / n
				d := table[j*len(cols)+k] - expected
				chi += float64(d*d) / expected / n
			}
		}
	}
	return math.Sqrt(min(1, chi/float64(least)))
}

// filled counts what is larger than 0.
func filled(v []float64) int {
	n := 0
	for _, x := range v {
		if x > 0 {
			n++
		}
	}
	return n
}
