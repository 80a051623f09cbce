package main

import (
	"bufio"
	"context"
	"fmt"

	"github.com/spf13/cobra"

	"holdfast/resample"
)

func (p *program) rowsCommand() *cobra.Command {
	var q question
	var draw int
	var asJSON bool
	c := &cobra.Command{
		Use:   "rows STUDY|TABLE --draw D [--outcome COL]",
		Short: "the rows of a draw, so that anyone can check a frequency",
		Long: `rows prints which rows of the table a draw holds and how often: their positions
in the table as read, from 0. Draws are numbered from 0; draws 2k and 2k+1 are
the two halves of pair k.`,
		Example: "  holdfast rows demo/study.toml --draw 0",
		Args:    exactly("STUDY"),
	}
	f := c.Flags()
	q.addFlags(f)
	f.IntVar(&draw, "draw", 0, "number of the draw, from 0")
	f.BoolVar(&asJSON, "json", false, "print JSON")
	c.RunE = func(c *cobra.Command, args []string) error {
		q.path = args[0]
		if !c.Flags().Changed("draw") {
			return misuse("holdfast rows: --draw is missing", "--draw 0 is the first")
		}
		return p.rows(c.Context(), q, draw, asJSON)
	}
	return c
}

// rows prints the rows of one draw.
func (p *program) rows(ctx context.Context, q question, draw int, asJSON bool) error {
	a, err := q.open(ctx)
	if err != nil {
		return err
	}
	l, err := a.load(ctx, 0)
	if err != nil {
		return err
	}
	p.tellDraft(a)
	s, err := l.settle()
	if err != nil {
		return err
	}
	if _, err = s.ready(ctx); err != nil {
		return err
	}
	plan := s.plan
	if draw < 0 || draw >= plan.Number {
		return misuse(fmt.Sprintf("holdfast rows: --draw %d: the study has draws 0 to %d", draw, plan.Number-1), "")
	}
	sample, redraws, why := plan.Draw(draw)
	if redraws > 0 {
		fmt.Fprintf(p.err, "drawn anew %s, because rows that were drawn could not be fitted\n", timesText(redraws))
	}
	if why != nil {
		fmt.Fprintf(p.err, "draw %d cannot be fitted still, and has no path: %s\n", draw, oneLine(why.Error()))
	}
	list := []drawnRow{}
	for i, count := range resample.Drawn(sample) {
		row := i
		if l.data.Rows != nil {
			row = int(l.data.Rows[i])
		}
		list = append(list, drawnRow{row, count})
	}
	if asJSON {
		return p.writeJSON(list)
	}
	w := bufio.NewWriter(p.out)
	fmt.Fprintln(w, "row,count")
	for _, r := range list {
		fmt.Fprintf(w, "%d,%d\n", r.Row, r.Count)
	}
	return w.Flush()
}

// drawnRow is a row of a draw: its position in the table as read.
type drawnRow struct {
	Row   int `json:"row"`
	Count int `json:"count"`
}

// timesText writes how often something was done.
func timesText(n int) string {
	if n == 1 {
		return "once"
	}
	return fmt.Sprintf("%d times", n)
}
