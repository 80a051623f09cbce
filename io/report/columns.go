package report

import (
	"math"

	"holdfast/selection"
)

// kind says how a column is written.
type kind uint8

const (
	text  kind = iota // string
	real              // float64, or nil where undefined
	yesNo             // bool
	whole             // int64
)

// column is a column of the stability table.
type column struct {
	name  string
	kind  kind
	value func(*selection.Row) any
}

// stabilityColumns are the columns of stability.csv, stability.parquet and the
// "predictors" of the JSON. The order up to "stable" is fixed.
var stabilityColumns = []column{
	{"predictor", text, func(r *selection.Row) any { return r.Predictor }},
	{"frequency", real, func(r *selection.Row) any { return defined(&r.Frequency) }},
	{"frequency_low", real, func(r *selection.Row) any { return defined(&r.Low) }},
	{"frequency_high", real, func(r *selection.Row) any { return defined(&r.High) }},
	{"both_halves", real, func(r *selection.Row) any { return defined(r.BothHalves) }},
	{"positive_share", real, func(r *selection.Row) any { return defined(r.PositiveShare) }},
	{"coef_low", real, func(r *selection.Row) any { return defined(&r.CoefLow) }},
	{"coef_median", real, func(r *selection.Row) any { return defined(&r.CoefMedian) }},
	{"coef_high", real, func(r *selection.Row) any { return defined(&r.CoefHigh) }},
	{"selected_coef_low", real, func(r *selection.Row) any { return defined(r.SelectedLow) }},
	{"selected_coef_median", real, func(r *selection.Row) any { return defined(r.SelectedMedian) }},
	{"selected_coef_high", real, func(r *selection.Row) any { return defined(r.SelectedHigh) }},
	{"stable", yesNo, func(r *selection.Row) any { return r.Stable }},
	{"could_change", yesNo, func(r *selection.Row) any { return r.CouldChange }},
	{"count", whole, func(r *selection.Row) any { return int64(r.Count) }},
	{"ceiling", real, func(r *selection.Row) any { return defined(&r.Ceiling) }},
}

// defined returns the number, or nil where there is none: a nil pointer, or
// what is not finite and so cannot stand in JSON.
func defined(v *float64) any {
	if v == nil || math.IsNaN(*v) || math.IsInf(*v, 0) {
		return nil
	}
	return *v
}
