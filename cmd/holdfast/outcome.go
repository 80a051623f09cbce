package main

import (
	"fmt"

	"holdfast/io/study"
	"holdfast/io/table"
	"holdfast/solver"
)

// measures are the kinds of outcome in the words of package table and in those
// of the field.
var measures = map[study.Kind]struct {
	measure table.Measure
	family  solver.Family
}{
	study.Number:   {table.AsNumber, solver.Gaussian},
	study.YesNo:    {table.AsYesNo, solver.Binomial},
	study.Count:    {table.AsCount, solver.Poisson},
	study.Classes:  {table.AsClasses, solver.Multinomial},
	study.Survival: {table.AsSurvival, solver.Cox},
}

// outcomeOf is a study's outcome in the words of package table.
func outcomeOf(o study.Outcome) table.Outcome {
	return table.Outcome{
		Measure: measures[o.Kind].measure, Column: o.Column, Success: o.Success,
		Time: o.Time, Event: o.Event, Entry: o.Entry, Strata: o.Strata,
		Offset: o.Offset, Exposure: o.Exposure,
	}
}

// tiesOf is the study's treatment of ties in the words of package solver.
func tiesOf(t study.Ties) solver.Ties {
	if t == study.Breslow {
		return solver.Breslow
	}
	return solver.Efron
}

// explained is what a study explains, for people and for tables of results: the
// outcome's column, or the two of a survival time.
func explained(o study.Outcome) string {
	if o.Kind == study.Survival {
		return o.Time + " until " + o.Event
	}
	return o.Column
}

// kindText says how the outcome is taken, and what counts.
func kindText(o study.Outcome) string {
	text := o.Kind.String()
	if o.Success != "" {
		text += fmt.Sprintf(", success %q", o.Success)
	}
	return text
}

// losses say what a family minimises, for the scale of lambda.
var losses = map[solver.Family]string{
	solver.Gaussian:    "(1/N) sum_i w_i (y_i - eta_i)^2/2",
	solver.Binomial:    "(1/N) sum_i w_i (log(1 + exp(eta_i)) - y_i eta_i)",
	solver.Poisson:     "(1/N) sum_i w_i (exp(eta_i) - y_i eta_i)",
	solver.Multinomial: "(1/N) sum_i w_i (log sum_c exp(eta_ic) - eta_ic at the row's class)",
	solver.Cox:         "-(1/N) log partial likelihood",
}

// objective says what is minimised, and so on which scale lambda is.
func (l *loaded) objective() string {
	family := measures[l.study.Outcome.Kind].family
	loss := losses[family]
	if family == solver.Cox {
		loss += fmt.Sprintf(" (%s ties)", l.study.Outcome.Ties)
	}
	penalty := "sum_j v_j (mix |s_j b_j| + (1-mix)/2 (s_j b_j)^2)"
	if family == solver.Multinomial {
		penalty = "sum_c sum_j v_j (mix |s_j b_jc| + (1-mix)/2 (s_j b_jc)^2)"
	}
	if l.grouped() {
		penalty += "; a group has r_g = ||X_g b_g||/sqrt(N) for |s_j b_j|"
	}
	return loss + " + lambda " + penalty
}
