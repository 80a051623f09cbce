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
	fitted   []predictor
}

// load reads the columns that the study asks for and takes constant columns
// and copies out of the candidates.
func (a *asked) load(ctx context.Context, workers int) (*loaded, error) {
	roles, err := a.study.Resolve(a.columns())
	if err != nil {
		return nil, wrong(err, "")
	}
	data, err := a.source.Load(ctx, a.request(roles, workers))
	if err != nil {
		return nil, a.tableFault(err)
	}
	l := &loaded{asked: a, roles: roles, data: data}
	for _, e := range roles.Excluded {
		l.exclude(e.Name, e.Reason, "")
	}
	for _, e := range data.Excluded {
		l.exclude(e.Column, e.Reason, "")
	}
	return l, l.examine(ctx)
}

// request is what a fit needs of the table.
func (a *asked) request(roles *study.Roles, workers int) table.Request {
	s := a.study
	return table.Request{
		Outcome: outcomeOf(s.Outcome), Weight: s.Outcome.CaseWeight,
		Candidates: roles.Candidates, Always: roles.Always,
		Categories: roles.Categories, Reference: s.Candidates.Reference, Named: roles.Named,
		Within:  roles.Within,
		Missing: policy(s.Table.Missing), AcceptLoss: s.Table.AcceptLoss, Workers: workers, Memory: a.memory,
	}
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

// rows is the number of rows used.
func (l *loaded) rows() int {
	rows, _ := l.data.X.Dims()
	return rows
}

// problem is what the solver is asked, without what follows from the decision.
func (l *loaded) problem() solver.Problem {
	s := l.study
	p := solver.Problem{
		Design: l.data.X, Always: l.alwaysColumns(), Centre: l.data.Centre, Names: l.data.Names,
		Family: measures[s.Outcome.Kind].family, Outcome: l.data.Outcome, Survival: l.data.Survival,
		Offset: l.data.Offset, Case: l.data.Weight,
		Mix: s.Penalty.Mix, Scale: s.Penalty.Scale, GroupWeight: groupWeight(s.Penalty.GroupWeight),
		Ratio: s.Penalty.Ratio, Floor: s.Penalty.Floor, StopAfter: s.Penalty.StopAfter,
	}
	l.units(&p)
	if p.Family == solver.Multinomial {
		p.Classes = len(l.data.Classes)
	}
	if p.Survival != nil {
		p.Survival.Ties = tiesOf(s.Outcome.Ties)
	}
	return p
}

// groupWeight is the study's word in that of package solver.
func groupWeight(w study.GroupWeight) solver.GroupWeight {
	if w == study.Sqrt {
		return solver.GroupSqrt
	}
	return solver.GroupEven
}

// plan is the study's plan of draws over the rows used.
func (l *loaded) plan() (resample.Plan, error) {
	plan, err := resample.NewPlan(resample.Plan{
		Rows: l.rows(), Design: drawDesign(l.study), Number: l.study.Draws.Number, Seed: l.study.Draws.Seed,
		Case: l.data.Weight, Within: l.data.Within, Jitter: l.study.Penalty.Jitter, Keys: l.names(),
	})
	return plan, wrong(err, "")
}

// settled is a loaded question with its decision made and its draws planned.
type settled struct {
	*loaded
	plan      resample.Plan
	final     *study.Study // every key resolved
	decision  selection.Decision
	effective *effective // what case weights leave of a draw; nil: there are none
}

// settle plans the draws and makes the decision of record.
func (l *loaded) settle() (*settled, error) {
	plan, err := l.plan()
	if err != nil {
		return nil, err
	}
	final, decision, err := l.study.Settle(len(l.fitted), plan.Half(), len(l.alwaysColumns()))
	if err != nil {
		return nil, wrong(err, "")
	}
	return &settled{loaded: l, plan: plan, final: final, decision: decision}, nil
}

// luck is the chance of a single column to be let in by luck, by which groups
// pay for their size: that of the run directory, or selected over candidates.
func (s *settled) luck() float64 {
	if s.asked.luck > 0 {
		return s.asked.luck
	}
	return float64(s.decision.Selected) / float64(len(s.fitted))
}

// ready makes the model, and the draws such that they can be fitted. A
// question of which no draw can be fitted is refused.
func (s *settled) ready(ctx context.Context) (*solver.Model, error) {
	p := s.problem()
	p.StopAfter, p.Luck = s.final.Penalty.StopAfter, s.luck()
	model, err := solver.NewModel(ctx, p)
	if err != nil {
		return nil, wrong(err, "")
	}
	s.plan.Fit = s.fittable(model)
	return model, wrong(s.plan.Check(), everyHalf[s.study.Outcome.Kind])
}

// fittable is the question whether a draw can be fitted: that of the model, and
// before it, for classes, one that answers with the name of a class.
func (l *loaded) fittable(model *solver.Model) func(*solver.Sample) error {
	if l.study.Outcome.Kind != study.Classes {
		return model.Fittable
	}
	return func(sample *solver.Sample) error {
		if err := l.holdsClasses(sample, l.data.Weight); err != nil {
			return err
		}
		return model.Fittable(sample)
	}
}

// holdsClasses names the first class of which a draw has no row of weight; a
// nil weight is 1 for every row.
func (l *loaded) holdsClasses(sample *solver.Sample, weight []float64) error {
	seen := make([]bool, len(l.data.Classes))
	for row := range resample.Drawn(sample) {
		if weight == nil || weight[row] > 0 {
			seen[int(l.data.Outcome[row])] = true
		}
	}
	if missing := slices.Index(seen, false); missing >= 0 {
		return fmt.Errorf("class %q of the outcome has no row", l.data.Classes[missing])
	}
	return nil
}

// everyHalf says what every half must hold, for a question of which none can be
// fitted.
var everyHalf = map[study.Kind]string{
	study.Number:   "the intercept and the columns of candidates.always must be fewer than the rows of every half: name fewer of them",
	study.YesNo:    "every half must hold rows of both values, and columns that are always in must not tell them apart",
	study.Classes:  "every half must hold rows of every class: join classes that are rare, or leave their rows out",
	study.Survival: "every half must see 5 events: more rows with an event are needed",
}

// lone names the strata of one row, which are in no half.
func (s *settled) lone() []string {
	var names []string
	for _, code := range s.plan.Lone() {
		names = append(names, s.data.WithinLevels[code])
	}
	return names
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

// ready makes the model of a question, and says what the user should know of
// its draws before they are made.
func (p *program) ready(ctx context.Context, s *settled) (*solver.Model, error) {
	if lone := s.lone(); len(lone) > 0 {
		p.note("strata of one row, which is in no half: " + briefly(lone))
	}
	model, err := s.ready(ctx)
	if err != nil {
		return nil, err
	}
	if s.effective = weigh(s.plan); s.effective == nil {
		return model, nil
	}
	fmt.Fprintln(p.err, s.effective)
	if small(s.effective.median, s.effective.rows) {
		p.note(fewCount(s.effective.median, s.effective.rows))
	}
	return model, nil
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
