package main

import (
	"context"
	"errors"
	"fmt"
	"slices"
	"strings"

	"holdfast/io/rundir"
	"holdfast/io/study"
	"holdfast/io/table"
	"holdfast/resample"
	"holdfast/selection"
	"holdfast/solver"
)

// loaded is a question with its table in memory.
type loaded struct {
	*asked
	roles    *study.Roles
	data     *table.Data
	excluded []rundir.Excluded // asked for and no candidate, with reasons
	fitted   []int32           // columns of data.X that are fitted as candidates
	relative []float64         // penalty weight of each of them; nil: all 1
}

// load reads the columns that the study asks for and takes constant columns
// and copies out of the candidates.
func (a *asked) load(ctx context.Context, workers int) (*loaded, error) {
	roles, err := a.study.Resolve(a.columns())
	if err != nil {
		return nil, wrong(err, "")
	}
	data, err := a.source.Load(ctx, table.Request{
		Outcome: table.Outcome{Column: roles.Outcome}, Candidates: roles.Candidates, Always: roles.Always,
		Missing: policy(a.study.Table.Missing), AcceptLoss: a.study.Table.AcceptLoss, Workers: workers, Memory: a.memory,
	})
	if err != nil {
		return nil, a.tableFault(err)
	}
	l := &loaded{asked: a, roles: roles, data: data}
	for _, e := range roles.Excluded {
		l.excluded = append(l.excluded, rundir.Excluded{Column: e.Name, Reason: e.Reason})
	}
	for _, e := range data.Excluded {
		l.excluded = append(l.excluded, rundir.Excluded{Column: e.Column, Reason: e.Reason})
	}
	return l, l.examine(ctx)
}

// tableFault says what is wrong with the table and, where cells are missing,
// what can be typed.
func (a *asked) tableFault(err error) error {
	var e *table.Error
	if !errors.As(err, &e) {
		return err
	}
	return wrong(err, gapHint(e))
}

// gapHint says what can be typed where cells are missing: only what works.
func gapHint(e *table.Error) string {
	if len(e.Gaps) == 0 {
		return ""
	}
	var ways []string
	switch {
	case e.Rows-e.Lost < fewestRows:
	case e.Lost*10 > e.Rows:
		ways = append(ways, fmt.Sprintf("add --set table.missing=drop-rows --set table.accept_loss=true (without %d of %d rows)", e.Lost, e.Rows))
	default:
		ways = append(ways, "add --set table.missing=drop-rows")
	}
	if !slices.ContainsFunc(e.Gaps, func(g table.Gaps) bool { return g.Infinite > 0 }) {
		ways = append(ways, "add --set table.missing=fill-mean")
	}
	return strings.Join(append(ways, "name columns in candidates.leave"), ", or ")
}

// fewestRows is what two halves take.
const fewestRows = 4

// examine finds constant columns and copies among the candidates.
func (l *loaded) examine(ctx context.Context) error {
	all := make([]int32, len(l.data.Candidates))
	for j := range all {
		all[j] = int32(j)
	}
	found, err := solver.Examine(ctx, l.data.X, all)
	if err != nil {
		return wrong(err, "")
	}
	out := make(map[int32]bool)
	for _, j := range found.Constant {
		out[j] = true
		l.excluded = append(l.excluded, rundir.Excluded{Column: l.data.Candidates[j], Reason: "constant over the rows used"})
	}
	for _, c := range found.Copies {
		out[c.Col] = true
		l.excluded = append(l.excluded, rundir.Excluded{
			Column: l.data.Candidates[c.Col], Reason: "copy up to shift and scale", Of: l.data.Candidates[c.Of],
		})
	}
	relative := l.relativeOf()
	for _, j := range all {
		if out[j] {
			continue
		}
		l.fitted = append(l.fitted, j)
		if relative != nil {
			l.relative = append(l.relative, relative[l.data.Candidates[j]])
		}
	}
	if len(l.fitted) == 0 {
		return wrong(fmt.Errorf("holdfast: no candidate is left: all %d are constant over the rows used", len(all)),
			"holdfast inspect shows what the table holds")
	}
	return nil
}

// relativeOf is the study's relative penalty by column; nil: all 1.
func (l *loaded) relativeOf() map[string]float64 {
	if l.roles.Relative == nil {
		return nil
	}
	by := make(map[string]float64, len(l.roles.Candidates))
	for i, name := range l.roles.Candidates {
		by[name] = l.roles.Relative[i]
	}
	return by
}

// names are those of the candidates that are fitted.
func (l *loaded) names() []string {
	names := make([]string, len(l.fitted))
	for i, j := range l.fitted {
		names[i] = l.data.Candidates[j]
	}
	return names
}

// problem is what the solver is asked, with paths that stop after so many
// predictors (0: never).
func (l *loaded) problem(stopAfter int, weight []float64) solver.Problem {
	always := make([]int32, len(l.data.Always))
	for i := range always {
		always[i] = int32(len(l.data.Candidates) + i)
	}
	p := l.study.Penalty
	return solver.Problem{
		Design: l.data.X, Candidates: l.fitted, Always: always, Centre: l.data.Centre,
		Names:   append(append([]string{}, l.data.Candidates...), l.data.Always...),
		Outcome: l.data.Outcome, Case: weight,
		Mix: p.Mix, Scale: p.Scale, Relative: l.relative,
		Ratio: p.Ratio, Floor: p.Floor, StopAfter: stopAfter,
	}
}

// plan is the study's plan of draws over the rows used.
func (l *loaded) plan() (resample.Plan, error) {
	design := resample.Halves
	if l.study.Draws.Design == study.Bootstrap {
		design = resample.Bootstrap
	}
	plan, err := resample.NewPlan(resample.Plan{
		Rows: len(l.data.Outcome), Design: design, Number: l.study.Draws.Number, Seed: l.study.Draws.Seed,
	})
	return plan, wrong(err, "")
}

// settled is a loaded question with its decision made and its draws planned.
type settled struct {
	*loaded
	plan     resample.Plan
	final    *study.Study // every key resolved
	decision selection.Decision
}

// settle plans the draws and makes the decision of record.
func (l *loaded) settle() (*settled, error) {
	plan, err := l.plan()
	if err != nil {
		return nil, err
	}
	final, decision, err := l.study.Settle(len(l.fitted), plan.Half(), len(l.data.Always))
	if err != nil {
		return nil, wrong(err, "")
	}
	return &settled{loaded: l, plan: plan, final: final, decision: decision}, nil
}

// tellDraft prints the study that was drafted, if one was.
func (p *program) tellDraft(a *asked) {
	if a.drafted != nil {
		fmt.Fprintf(p.err, "the study drafted for %s:\n\n%s\n", oneLine(a.path), a.drafted)
	}
}

// tell prints what the user should know before the fits: the study that was
// drafted, what was left out, what reading changed.
func (p *program) tell(l *loaded) {
	p.tellDraft(l.asked)
	for _, n := range l.data.Notes {
		fmt.Fprintln(p.err, oneLine(n))
	}
	if len(l.excluded) > 0 {
		fmt.Fprintf(p.err, "left out by themselves: %s\n", oneLine(exclusions(l.excluded)))
	}
}

// mostListed is how many names a line of talk lists.
const mostListed = 8

// exclusions lists columns with the reason for each, as far as a line goes.
func exclusions(list []rundir.Excluded) string {
	var words []string
	for i, e := range list {
		if i == mostListed {
			words = append(words, fmt.Sprintf("and %d more", len(list)-mostListed))
			break
		}
		why := e.Reason
		if e.Of != "" {
			why = "copy of " + e.Of
		}
		words = append(words, e.Column+" ("+why+")")
	}
	return strings.Join(words, ", ")
}
