package main

import (
	"context"
	"encoding/csv"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"slices"
	"strconv"

	"github.com/spf13/cobra"
	"golang.org/x/term"

	"holdfast/io/study"
	"holdfast/solver"
)

// fitOptions is what `fit` is told beside the question.
type fitOptions struct {
	lambdas numbers
	weights string // file of case weights
	all     bool
	asJSON  bool
}

func (p *program) fitCommand() *cobra.Command {
	var q question
	var o fitOptions
	c := &cobra.Command{
		Use:   "fit STUDY|TABLE [--outcome COL] [--lambda L,...] [--case-weights FILE]",
		Short: "one fit on all rows, without draws",
		Long: `fit prints the fit on all rows at the lambdas given: the intercept first, then
every coefficient that is not zero, on the original scale; of a category those of
its levels, column=level. For classes each has a value for every class. Without
--lambda it prints a summary of the whole path. Lambda 0 is the fit without a
penalty.`,
		Example: "  holdfast fit demo/study.toml --lambda 2.5",
		Args:    exactly("STUDY"),
	}
	f := c.Flags()
	q.addFlags(f)
	f.Var(&o.lambdas, "lambda", "penalties to fit at, comma-separated, 0 or more")
	f.StringVar(&o.weights, "case-weights", "", "CSV of one column with a header: a weight >= 0 for every table row")
	f.BoolVar(&o.all, "all", false, "print coefficients that are zero too")
	f.BoolVar(&o.asJSON, "json", false, "print JSON")
	c.RunE = func(c *cobra.Command, args []string) error {
		q.path = args[0]
		return p.fit(c.Context(), q, o)
	}
	return c
}

// fit makes the fits and prints them.
func (p *program) fit(ctx context.Context, q question, o fitOptions) error {
	a, err := q.open(ctx)
	if err != nil {
		return err
	}
	l, err := a.load(ctx, 0)
	if err != nil {
		return err
	}
	p.tell(l)
	model, err := l.model(ctx, o.weights)
	if err != nil {
		return err
	}
	if l.study.Penalty.Jitter != 1 {
		fmt.Fprintln(p.err, "penalty.jitter is for draws: this fit has the penalty without it")
	}
	sample := solver.AllRows(l.rows())
	var fits []solver.Fit
	if len(o.lambdas) > 0 {
		fits, err = model.FitAt(ctx, sample, o.lambdas)
	} else {
		fits, err = model.FitPath(ctx, sample)
	}
	if err != nil {
		return wrong(l.separated(err), "")
	}
	return p.printFits(l, fits, o)
}

// separated says of a candidate that separates, which it does at lambda 0 only,
// what can be done about it. Other errors stay what they are. Of a group the
// solver names the first column, whichever of them separates.
func (l *loaded) separated(err error) error {
	var s *solver.SeparationError
	if !errors.As(err, &s) {
		return err
	}
	at := slices.IndexFunc(l.fitted, func(f predictor) bool { return slices.Contains(l.columnNames(f.columns), s.Column) })
	if at < 0 {
		return err
	}
	return wrong(fmt.Errorf("holdfast fit: lambda 0: %s tells the outcome of some rows without error, so that a coefficient grows without end (separation)", l.fitted[at].name),
		"a lambda above 0 has a fit; at lambda 0, leave the predictor out, or merge its rare levels")
}

// model is that of all rows, with case weights of a file where one is named.
func (l *loaded) model(ctx context.Context, weights string) (*solver.Model, error) {
	problem := l.problem()
	weight, err := l.weights(weights)
	if err != nil {
		return nil, err
	}
	if weight != nil {
		problem.Case = weight
	}
	if problem.Family == solver.Multinomial {
		if err := l.holdsClasses(solver.AllRows(l.rows()), problem.Case); err != nil {
			return nil, wrong(fmt.Errorf("holdfast fit: %w", err), "")
		}
	}
	if l.grouped() && problem.GroupWeight == solver.GroupEven {
		s, err := l.settle() // what groups pay follows from the decision
		if err != nil {
			return nil, err
		}
		problem.Luck = s.luck()
	}
	model, err := solver.NewModel(ctx, problem)
	return model, wrong(err, "")
}

// printFits prints the fits that are certified, and says which are not.
func (p *program) printFits(l *loaded, fits []solver.Fit, o fitOptions) error {
	var certified []solver.Fit
	var bad error
	for _, f := range fits {
		if f.Certified {
			certified = append(certified, f)
		} else if bad == nil {
			bad = incomplete(fmt.Sprintf("holdfast: the fit at lambda %s is not certified and not printed: %s", full(f.Lambda), f.Why), "")
		}
	}
	var err error
	switch {
	case o.asJSON:
		err = p.writeJSON(l.fitsJSON(certified, o.all))
	case len(o.lambdas) > 0:
		err = p.printCoefficients(l, certified, o.all)
	default:
		err = p.printSummary(certified)
	}
	if err != nil {
		return err
	}
	return bad
}

// printSummary prints a line for every step of the path.
func (p *program) printSummary(fits []solver.Fit) error {
	w := csv.NewWriter(p.out)
	w.Write([]string{"step", "lambda", "selected", "loss", "violation"})
	for _, f := range fits {
		w.Write([]string{strconv.Itoa(f.Step), full(f.Lambda), strconv.Itoa(f.Selected), full(f.Loss), full(f.Violation)})
	}
	w.Flush()
	return w.Error()
}

// printCoefficients prints a line for every coefficient.
func (p *program) printCoefficients(l *loaded, fits []solver.Fit, all bool) error {
	w := csv.NewWriter(p.out)
	head := []string{"lambda", "kind", "predictor", "coefficient"}
	if l.classes() != nil {
		head = slices.Insert(head, 2, "class")
	}
	w.Write(head)
	for _, f := range fits {
		for _, c := range l.coefficients(f) {
			for class, value := range c.values {
				if value == 0 && !all && c.kind != "intercept" {
					continue
				}
				line := []string{full(f.Lambda), c.kind, p.shown(c.name), full(value)}
				if l.classes() != nil {
					line = slices.Insert(line, 2, p.shown(l.classes()[class]))
				}
				w.Write(line)
			}
		}
	}
	w.Flush()
	return w.Error()
}

// classes are the levels of an outcome of classes; nil for others.
func (l *loaded) classes() []string {
	if l.study.Outcome.Kind != study.Classes {
		return nil
	}
	return l.data.Classes
}

// coefficient is what a column adds: a value, or one for each class.
type coefficient struct {
	kind, name string
	values     []float64
}

// coefficients are all those of a fit: the intercept where there is one,
// always-in columns, then candidates.
func (l *loaded) coefficients(f solver.Fit) []coefficient {
	var list []coefficient
	if len(f.Intercept) > 0 {
		list = append(list, coefficient{"intercept", "", f.Intercept})
	}
	classes := max(1, len(l.classes()))
	add := func(kind string, columns []int32, values []float64) {
		for i, name := range l.columnNames(columns) {
			list = append(list, coefficient{kind, name, values[i*classes : (i+1)*classes]})
		}
	}
	add("always", l.alwaysColumns(), f.Always)
	add("candidate", columnsOf(l.fitted), f.Coef)
	return list
}

// zero reports whether a column adds nothing.
func (c coefficient) zero() bool {
	return !slices.ContainsFunc(c.values, func(v float64) bool { return v != 0 })
}

// shown is a name as it is written to stdout: as it is, but on a terminal
// without what would command it.
func (p *program) shown(name string) string {
	if f, ok := p.out.(*os.File); ok && term.IsTerminal(int(f.Fd())) {
		return visible(name)
	}
	return name
}

// fitJSON is a fit in `fit --json`. Intercept and coefficients are numbers, or
// objects by class.
type fitJSON struct {
	Lambda       float64  `json:"lambda"`
	Intercept    any      `json:"intercept"`
	Coefficients ordered  `json:"coefficients"`
	Selected     int      `json:"selected"`
	Loss         float64  `json:"loss"`
	Violation    float64  `json:"violation"`
	Gap          *float64 `json:"gap"`
	Value        float64  `json:"objective"`
}

// fitsJSON is the document of `fit --json`.
func (l *loaded) fitsJSON(fits []solver.Fit, all bool) any {
	list := make([]fitJSON, len(fits))
	for i, f := range fits {
		j := fitJSON{
			Lambda: f.Lambda, Coefficients: ordered{}, Selected: f.Selected,
			Loss: f.Loss, Violation: f.Violation, Value: f.Objective,
		}
		if l.study.Outcome.Kind == study.Number {
			j.Gap = &f.Gap // others are certified without one
		}
		for _, c := range l.coefficients(f) {
			switch {
			case c.kind == "intercept":
				j.Intercept = l.valueJSON(c)
			case all || !c.zero():
				j.Coefficients = append(j.Coefficients, member{c.name, l.valueJSON(c)})
			}
		}
		list[i] = j
	}
	return struct {
		Kind      string    `json:"kind"`
		Objective string    `json:"objective"`
		Fits      []fitJSON `json:"fits"`
	}{l.study.Outcome.Kind.String(), l.objective(), list}
}

// valueJSON is a coefficient as JSON: a number, or an object by class.
func (l *loaded) valueJSON(c coefficient) any {
	if l.classes() == nil {
		return c.values[0]
	}
	by := ordered{}
	for i, class := range l.classes() {
		by = append(by, member{class, c.values[i]})
	}
	return by
}

// ordered is a JSON object whose members keep their order.
type ordered []member

type member struct {
	name  string
	value any
}

// MarshalJSON implements json.Marshaler.
func (list ordered) MarshalJSON() ([]byte, error) {
	text := []byte{'{'}
	for i, m := range list {
		if i > 0 {
			text = append(text, ',')
		}
		for k, v := range []any{m.name, m.value} {
			if k > 0 {
				text = append(text, ':')
			}
			part, err := json.Marshal(v)
			if err != nil {
				return nil, err
			}
			text = append(text, part...)
		}
	}
	return append(text, '}'), nil
}

// full writes a number so that it can be read back to the bit.
func full(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }
