package main

import (
	"fmt"
	"slices"

	"holdfast/resample"
)

// mostWeighed is the number of draws that the effective size is taken over.
const mostWeighed = 200

// effective is what case weights leave of the rows of the draws of a plan.
type effective struct {
	median, smallest float64
	rows             int // of a draw
	design           resample.Design
}

// weigh finds the effective size of the draws of a plan; nil without case
// weights.
func weigh(plan resample.Plan) *effective {
	if plan.Case == nil {
		return nil
	}
	e := effective{rows: plan.Units(), design: plan.Design}
	step := 1
	if plan.Design == resample.Halves {
		e.rows, step = plan.Units()/2, 2
	}
	var sizes []float64
	for draw := 0; draw < min(plan.Number, mostWeighed); draw += step {
		sample := plan.Sample(draw)
		sizes = append(sizes, resample.EffectiveSize(sample))
		if plan.Design == resample.Halves {
			sizes = append(sizes, resample.EffectiveSize(sample.Left)) // the partner
		}
	}
	slices.Sort(sizes)
	e.median, e.smallest = middle(sizes), sizes[0]
	return &e
}

// middle is the median of ascending values.
func middle(sorted []float64) float64 {
	n := len(sorted)
	return (sorted[(n-1)/2] + sorted[n/2]) / 2
}

// String says it to people.
func (e *effective) String() string {
	what := "a half"
	if e.design == resample.Bootstrap {
		what = "a draw"
	}
	return fmt.Sprintf("case weights make the %d rows of %s worth %.4g of equal weight (median; %.4g at least)", e.rows, what, e.median, e.smallest)
}

// small reports whether a few rows decide: less than half of them count.
func small(median float64, rows int) bool { return median < float64(rows)/2 }

// fewCount is the warning where a few rows decide.
func fewCount(median float64, rows int) string {
	return fmt.Sprintf("few rows decide what is chosen: case weights make the %d rows of a draw worth %.4g of equal weight", rows, median)
}
