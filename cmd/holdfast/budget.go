package main

import (
	"fmt"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"holdfast/selection"
)

func (p *program) budgetCommand() *cobra.Command {
	var candidates, draws int
	var threshold, selected, falseSelections optional
	var asJSON bool
	c := &cobra.Command{
		Use:   "budget --candidates P [--threshold T] [--selected Q] [--false-selections V] [--draws N]",
		Short: "solves threshold, selected and false selections for the missing one",
		Long: `budget takes two of threshold, selected and false-selections and solves for the
third, before any row is read. All three bounds are shown; the assumption that
each needs is said beside it.`,
		Example: "  holdfast budget --candidates 1000 --threshold 0.9 --selected 20",
		Args:    exactly(),
		RunE: func(c *cobra.Command, _ []string) error {
			if !c.Flags().Changed("candidates") {
				return misuse("holdfast budget: --candidates is missing", "--candidates P is the number of predictors that can be chosen")
			}
			b, err := selection.SolveBudget(selection.Request{
				Candidates: candidates, Draws: draws,
				Threshold: threshold.value, Selected: selected.value, FalseSelections: falseSelections.value,
			})
			if err != nil {
				return wrong(err, "")
			}
			if asJSON {
				return p.writeJSON(b)
			}
			return p.printBudget(b)
		},
	}
	f := c.Flags()
	f.IntVar(&candidates, "candidates", 0, "predictors that can be chosen")
	f.Var(&threshold, "threshold", "share of draws from which a predictor is stable, in (0.5,1]")
	f.Var(&selected, "selected", "predictors that one draw may choose")
	f.Var(&falseSelections, "false-selections", "expected number of false selections")
	f.IntVar(&draws, "draws", 200, "draws, an even number")
	f.BoolVar(&asJSON, "json", false, "print JSON")
	return c
}

// printBudget prints a budget for people.
func (p *program) printBudget(b *selection.Budget) error {
	fmt.Fprintf(p.out, "%d candidates, %d draws\n", b.Candidates, b.Draws)
	if b.Threshold != nil {
		fmt.Fprintf(p.out, "threshold %s\n", full(*b.Threshold))
	}
	if b.Need != nil {
		fmt.Fprintf(p.out, "stable: chosen in at least %d of %d draws\n", *b.Need, b.Draws)
	}
	if b.Selected != nil {
		fmt.Fprintf(p.out, "selected %s: the most predictors that a draw contributes\n", full(*b.Selected))
	}
	if b.FalseSelections != nil {
		fmt.Fprintf(p.out, "false selections %s, as asked\n", full(*b.FalseSelections))
	}
	fmt.Fprintln(p.out)
	w := tabwriter.NewWriter(p.out, 0, 0, 3, ' ', 0)
	fmt.Fprintln(w, strings.Join(append(budgetHead(b), "bound by", "assumes"), "\t"))
	var notes []string
	for _, v := range b.Bounds {
		cells := budgetCells(b, v)
		if v.Why != "" {
			notes = append(notes, fmt.Sprintf("%s: %s", v.Name, v.Why))
		}
		fmt.Fprintln(w, strings.Join(append(cells, v.Name.String(), v.Name.Label()), "\t"))
	}
	if err := w.Flush(); err != nil {
		return err
	}
	for _, n := range notes {
		fmt.Fprintln(p.out, "  "+n)
	}
	return nil
}

// budgetHead names the columns: what was solved for first.
func budgetHead(b *selection.Budget) []string {
	const luck = "expected by luck, at most"
	switch {
	case b.Threshold == nil:
		return []string{"threshold", "draws needed", luck}
	case b.Selected == nil:
		return []string{"selected", luck}
	}
	return []string{luck}
}

func budgetCells(b *selection.Budget, v selection.BoundValue) []string {
	luck := number(v.FalseSelections, selection.AtMost)
	switch {
	case b.Threshold == nil:
		need := "none"
		if v.Need != nil {
			need = fmt.Sprintf("%d of %d", *v.Need, b.Draws)
		}
		return []string{number(v.Threshold, full), need, luck}
	case b.Selected == nil:
		return []string{number(v.Selected, selection.AtLeast), luck}
	}
	return []string{luck}
}

// number shows a number as show does, none where it does not exist.
func number(x *float64, show func(float64) string) string {
	if x == nil {
		return "none"
	}
	return show(*x)
}
