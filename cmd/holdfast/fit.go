package main

import (
	"context"
	"encoding/csv"
	"encoding/json"
	"fmt"
	"os"
	"strconv"

	"github.com/spf13/cobra"
	"golang.org/x/term"

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
every coefficient that is not zero, on the original scale. Without --lambda it
prints a summary of the whole path. Lambda 0 is the fit without a penalty.`,
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
	weight, err := l.weights(o.weights)
	if err != nil {
		return err
	}
	model, err := solver.NewModel(ctx, l.problem(l.study.Penalty.StopAfter, weight))
	if err != nil {
		return wrong(err, "")
	}
	sample := solver.AllRows(len(l.data.Outcome))
	var fits []solver.Fit
	if len(o.lambdas) > 0 {
		fits, err = model.FitAt(ctx, sample, o.lambdas)
	} else {
		fits, err = model.FitPath(ctx, sample)
	}
	if err != nil {
		return wrong(err, "")
	}
	return p.printFits(l, fits, o)
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
	w.Write([]string{"lambda", "kind", "predictor", "coefficient"})
	for _, f := range fits {
		lambda := full(f.Lambda)
		w.Write([]string{lambda, "intercept", "", full(f.Intercept[0])})
		for _, t := range l.terms(f, all) {
			w.Write([]string{lambda, t.kind, p.shown(t.name), full(t.value)})
		}
	}
	w.Flush()
	return w.Error()
}

// coefficient is one coefficient with its name.
type coefficient struct {
	kind, name string
	value      float64
}

// terms are the coefficients of a fit: always-in columns, then candidates,
// those that are zero only if all are asked for.
func (l *loaded) terms(f solver.Fit, all bool) []coefficient {
	var list []coefficient
	for i, v := range f.Always {
		if all || v != 0 {
			list = append(list, coefficient{"always", l.data.Always[i], v})
		}
	}
	for i, v := range f.Coef {
		if all || v != 0 {
			list = append(list, coefficient{"candidate", l.data.Candidates[l.fitted[i]], v})
		}
	}
	return list
}

// shown is a name as it is written to stdout: as it is, but on a terminal
// without what would command it.
func (p *program) shown(name string) string {
	if f, ok := p.out.(*os.File); ok && term.IsTerminal(int(f.Fd())) {
		return visible(name)
	}
	return name
}

// objectiveText says what is minimised, and so on which scale lambda is.
const objectiveText = "(1/N) sum_i w_i (y_i - eta_i)^2/2 + lambda sum_j v_j (mix |s_j b_j| + (1-mix)/2 (s_j b_j)^2)"

// fitsJSON is the document of `fit --json`.
func (l *loaded) fitsJSON(fits []solver.Fit, all bool) any {
	type fitJSON struct {
		Lambda       float64 `json:"lambda"`
		Intercept    float64 `json:"intercept"`
		Coefficients byName  `json:"coefficients"`
		Selected     int     `json:"selected"`
		Loss         float64 `json:"loss"`
		Violation    float64 `json:"violation"`
		Gap          float64 `json:"gap"`
		Value        float64 `json:"objective"`
	}
	list := make([]fitJSON, len(fits))
	for i, f := range fits {
		list[i] = fitJSON{
			Lambda: f.Lambda, Intercept: f.Intercept[0], Coefficients: l.terms(f, all),
			Selected: f.Selected, Loss: f.Loss, Violation: f.Violation, Gap: f.Gap, Value: f.Objective,
		}
	}
	return struct {
		Kind      string    `json:"kind"`
		Objective string    `json:"objective"`
		Fits      []fitJSON `json:"fits"`
	}{l.study.Outcome.Kind.String(), objectiveText, list}
}

// byName writes coefficients as one JSON object, in their order.
type byName []coefficient

// MarshalJSON implements json.Marshaler.
func (list byName) MarshalJSON() ([]byte, error) {
	text := []byte{'{'}
	for i, t := range list {
		name, err := json.Marshal(t.name)
		if err != nil {
			return nil, err
		}
		if i > 0 {
			text = append(text, ',')
		}
		text = append(append(text, name...), ':')
		text = append(text, full(t.value)...)
	}
	return append(text, '}'), nil
}

// full writes a number so that it can be read back to the bit.
func full(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }
