package main

import (
	"context"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"

	"github.com/spf13/cobra"

	"holdfast/io/rundir"
	"holdfast/io/study"
	"holdfast/io/table"
)

func (p *program) draftCommand() *cobra.Command {
	var q question
	var out string
	c := &cobra.Command{
		Use:   "draft TABLE --outcome COL [--out study.toml]",
		Short: "writes a study for a table, with the reason beside each setting",
		Long: `draft looks at a table and writes a commented study that runs unchanged: settings
by the table's shape, the kind of outcome by its values, identifiers and suspected
leaks of the outcome left out, the reason beside each. A survival time has to be
written into the study by hand. Without --out the study goes to stdout.`,
		Example: "  holdfast draft demo/hatchery.parquet --outcome survival_d21",
		Args:    exactly("TABLE"),
	}
	f := c.Flags()
	f.StringVar(&q.outcome, "outcome", "", "the outcome's column")
	f.StringVar(&out, "out", "", "file to write; one that exists is not written over")
	c.RunE = func(c *cobra.Command, args []string) error {
		q.path = args[0]
		if isStudy(q.path) {
			return misuse("holdfast draft: "+q.path+" is a study already", "draft takes a table")
		}
		if q.outcome == "" {
			return misuse("holdfast draft: --outcome is missing", "--outcome COLUMN names the column to be explained; holdfast inspect lists what the table holds")
		}
		return p.draft(c.Context(), q, out)
	}
	return c
}

// draft writes a study to a new file, or to stdout where out is empty.
func (p *program) draft(ctx context.Context, q question, out string) error {
	dir := "."
	if out != "" {
		dir = filepath.Dir(out)
		if _, err := os.Lstat(out); err == nil {
			return misuse("holdfast draft: "+out+" exists, and is not written over", "give --out another name, or remove the file")
		}
		if !isFolder(dir) {
			return misuse("holdfast draft: "+dir+": there is no such folder to write "+filepath.Base(out)+" into", "make the folder first")
		}
	}
	text, _, err := q.draft(ctx, dir)
	if err != nil {
		return err
	}
	if out == "" {
		_, err = p.out.Write(text)
		return err
	}
	err = rundir.WriteFile(out, func(w io.Writer) error {
		_, err := w.Write(text)
		return err
	})
	if err == nil {
		fmt.Fprintln(p.err, "study written to "+oneLine(out))
	}
	return err
}

// isFolder reports whether a path is that of a folder.
func isFolder(path string) bool {
	info, err := os.Stat(path)
	return err == nil && info.IsDir()
}

// draft drafts the study of a table, to stand in the folder dir.
func (q question) draft(ctx context.Context, dir string) ([]byte, *table.Source, error) {
	source, err := table.Open(q.path)
	if err != nil {
		return nil, nil, wrong(err, "")
	}
	if err := checkOutcome(source, q.outcome); err != nil {
		return nil, nil, err
	}
	summary, err := source.Scan(ctx, q.outcome)
	if err != nil {
		return nil, nil, wrong(err, "")
	}
	facts := factsOf(summary)
	if facts.Path, err = pathFrom(dir, q.path); err != nil {
		return nil, nil, err
	}
	text, _, err := study.Draft(facts)
	return text, source, wrong(err, "")
}

// checkOutcome refuses an outcome that no column is, and names the nearest.
func checkOutcome(source *table.Source, outcome string) error {
	var names []string
	for _, c := range source.Columns() {
		if c.Name == outcome {
			return nil
		}
		names = append(names, c.Name)
	}
	if outcome == "" {
		return nil
	}
	return misuse(fmt.Sprintf("holdfast: %s: there is no column %q%s", source.Path(), outcome, study.NearHint(outcome, names)),
		"holdfast inspect "+shellWord(source.Path())+" --json lists the columns")
}

// pathFrom is the table's path as a study in dir writes it.
func pathFrom(dir, path string) (string, error) {
	base, err := filepath.Abs(dir)
	if err != nil {
		return "", err
	}
	target, err := filepath.Abs(path)
	if err != nil {
		return "", err
	}
	rel, err := filepath.Rel(base, target)
	if err != nil { // another volume
		return target, nil
	}
	return filepath.ToSlash(rel), nil
}

// factsOf puts a scan into the words of package study.
func factsOf(s *table.Summary) study.Facts {
	f := study.Facts{
		Outcome: s.Outcome, Rows: s.Rows, Incomplete: s.Incomplete,
		Repeats: s.Repeats, OutcomeGaps: s.OutcomeGaps,
	}
	for _, c := range s.Columns {
		f.Columns = append(f.Columns, study.Fact{
			Column:  factColumn(c),
			Missing: c.Missing + c.NaN, Infinite: c.Infinite, Levels: levelsOf(c),
			Constant: c.Constant, TwoValued: len(c.Values) == 2, Whole: c.Whole, Unique: c.Unique,
			Rising: c.Monotone, Date: c.Dates != "", Min: c.Min, Max: c.Max,
			R: defined(c.Correlation), AUC: defined(c.AUC), Serial: defined(c.Serial),
		})
	}
	return f
}

// factColumn is a column in the words of package study.
func factColumn(c table.ColumnSummary) study.Column {
	column := columnOf(c.Column)
	if c.NoLevels != "" {
		column.Reason = c.NoLevels
	}
	return column
}

// levelsOf lists the values of a column, where there are few.
func levelsOf(c table.ColumnSummary) []study.Level {
	var list []study.Level
	for _, l := range c.Levels {
		list = append(list, study.Level{Text: l.Name, Rows: l.Count})
	}
	return list
}

// defined is x, or nil where it does not exist.
func defined(x float64) *float64 {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return nil
	}
	return &x
}
