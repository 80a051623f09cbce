package report

import (
	"math"

	"holdfast/selection"
)

// kind says how a column is written.
type kind uint8

const (
	text         kind = iota // string
	optionalText             // string, or nil
	real                     // float64, or nil where undefined
	yesNo                    // bool
	whole                    // int64
)

// column is a column of a table of R.
type column[R any] struct {
	name  string
	kind  kind
	value func(*R) any
}

// stabilityColumns are the columns of stability.csv, stability.parquet and the
// "predictors" of the JSON. The order up to "stable" is fixed.
var stabilityColumns = []column[selection.Row]{
	{"predictor", text, func(r *selection.Row) any { return r.Predictor }},
	{"frequency", real, func(r *selection.Row) any { return defined(&r.Frequency) }},
	{"frequency_low", real, func(r *selection.Row) any { return defined(&r.Low) }},
	{"frequency_high", real, func(r *selection.Row) any { return defined(&r.High) }},
	{"both_halves", real, func(r *selection.Row) any { return defined(r.BothHalves) }},
	{"positive_share", real, func(r *selection.Row) any { return defined(r.PositiveShare) }},
	{"coef_low", real, func(r *selection.Row) any { return low(r.Coef) }},
	{"coef_median", real, func(r *selection.Row) any { return median(r.Coef) }},
	{"coef_high", real, func(r *selection.Row) any { return high(r.Coef) }},
	{"selected_coef_low", real, func(r *selection.Row) any { return low(r.Selected) }},
	{"selected_coef_median", real, func(r *selection.Row) any { return median(r.Selected) }},
	{"selected_coef_high", real, func(r *selection.Row) any { return high(r.Selected) }},
	{"stable", yesNo, func(r *selection.Row) any { return r.Stable }},
	{"could_change", yesNo, func(r *selection.Row) any { return r.CouldChange }},
	{"count", whole, func(r *selection.Row) any { return int64(r.Count) }},
	{"ceiling", real, func(r *selection.Row) any { return defined(&r.Ceiling) }},
}

// termColumns are the columns of terms.parquet and the "terms" of the JSON, all
// of them fixed. The class is null where the outcome has none.
var termColumns = []column[selection.TermRow]{
	{"predictor", text, func(r *selection.TermRow) any { return r.Predictor }},
	{"term", text, func(r *selection.TermRow) any { return r.Term }},
	{"class", optionalText, func(r *selection.TermRow) any { return class(r.Class) }},
	{"coef_low", real, func(r *selection.TermRow) any { return low(r.Coef) }},
	{"coef_median", real, func(r *selection.TermRow) any { return median(r.Coef) }},
	{"coef_high", real, func(r *selection.TermRow) any { return high(r.Coef) }},
	{"selected_coef_low", real, func(r *selection.TermRow) any { return low(r.Selected) }},
	{"selected_coef_median", real, func(r *selection.TermRow) any { return median(r.Selected) }},
	{"selected_coef_high", real, func(r *selection.TermRow) any { return high(r.Selected) }},
}

// alwaysColumns are the members of the "always" of the JSON, all of them fixed.
var alwaysColumns = []column[selection.AlwaysRow]{
	{"predictor", text, func(r *selection.AlwaysRow) any { return r.Predictor }},
	{"class", optionalText, func(r *selection.AlwaysRow) any { return class(r.Class) }},
	{"coef_low", real, func(r *selection.AlwaysRow) any { return low(r.Coef) }},
	{"coef_median", real, func(r *selection.AlwaysRow) any { return median(r.Coef) }},
	{"coef_high", real, func(r *selection.AlwaysRow) any { return high(r.Coef) }},
}

// class is the name of a class, nil where the outcome has none.
func class(name string) any {
	if name == "" {
		return nil
	}
	return name
}

// low, median and high are the quantiles of a spread, nil where there is none.
func low(s *selection.Spread) any {
	if s == nil {
		return nil
	}
	return defined(&s.Low)
}

func median(s *selection.Spread) any {
	if s == nil {
		return nil
	}
	return defined(&s.Median)
}

func high(s *selection.Spread) any {
	if s == nil {
		return nil
	}
	return defined(&s.High)
}

// defined returns the number, or nil where there is none: a nil pointer, or
// what is not finite and so cannot stand in JSON.
func defined(v *float64) any {
	if v == nil || math.IsNaN(*v) || math.IsInf(*v, 0) {
		return nil
	}
	return *v
}
