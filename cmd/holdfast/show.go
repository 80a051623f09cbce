package main

import (
	"fmt"
	"io"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"holdfast/io/report"
	"holdfast/io/rundir"
	"holdfast/selection"
	"holdfast/solver"
)

// info is what a report says beside the judgement.
func (j *judged) info(v view) report.Info {
	id := &j.run.Identity
	i := report.Info{
		Outcome: id.Outcome, Kind: id.Kind, Success: id.Success, References: references(id),
		Record: j.run.Decision, PerSD: v.perSD, Warnings: j.cautions(),
		Full: filepath.Join(j.dir.Path(), "stability.csv"), FullTerms: filepath.Join(j.dir.Path(), "terms.parquet"),
	}
	if id.Outcome == "" {
		i.Outcome = id.Time // of survival
	}
	if j.explored && !j.saved {
		i.Full, i.FullTerms = "--json, or --save", "--json, or --save"
	}
	for _, e := range j.run.Meta.Excluded {
		if e.Of != "" {
			i.Copies = append(i.Copies, report.Copy{Name: e.Column, Of: e.Of})
		}
	}
	return i
}

// references are the levels that others are measured against: of candidates,
// of columns that are always in, of members of groups.
func references(id *rundir.Identity) (list []report.Reference) {
	left := maps.Clone(id.Reference)
	for _, name := range slices.Concat(id.Candidates, id.Always, slices.Sorted(maps.Keys(id.Reference))) {
		if level, there := left[name]; there {
			list = append(list, report.Reference{Column: name, Level: level})
			delete(left, name)
		}
	}
	return list
}

// cautions are what the making of the draws has to say to a judgement.
func (j *judged) cautions() (list []string) {
	m := &j.run.Meta
	rows := m.Rows
	if !j.bootstrap() {
		rows /= 2
	}
	if m.EffectiveSize > 0 && small(m.EffectiveSize, rows) {
		list = append(list, fewCount(m.EffectiveSize, rows))
	}
	if n := len(m.Lone); n > 0 {
		list = append(list, fmt.Sprintf("strata of one row, which is in no half: %s", briefly(m.Lone)))
	}
	return list
}

// seen is the judgement in the units that the view asks for.
func (j *judged) seen(v view) *selection.Judgement {
	if v.perSD {
		return j.judgement.PerSD()
	}
	return j.judgement
}

// show prints a judgement: for people, or for programs with the warnings on
// stderr.
func (p *program) show(j *judged, v view) error {
	if !v.asJSON {
		info := j.info(v)
		info.ASCII = isTerminal(p.out) && !unicodeLocale()
		return report.Text(p.out, j.seen(v), info, width(p.out), colour(p.out))
	}
	if err := report.JSON(p.out, j.seen(v), j.info(v)); err != nil {
		return err
	}
	if j.explored {
		fmt.Fprintln(p.err, "warning: explored after seeing the result: the decision of record is "+inWords(*j.run.Decision))
	}
	said := slices.Clone(p.told)
	for _, w := range slices.Concat(j.judgement.Warnings, j.judgement.Decision.Notes, j.cautions()) {
		if !slices.Contains(said, w) {
			said = append(said, w)
			fmt.Fprintln(p.err, "warning: "+oneLine(w))
		}
	}
	return nil
}

// unicodeLocale reports whether the locale is one of UTF-8, or not said: the
// first of the variables that is set decides (POSIX, Environment Variables).
func unicodeLocale() bool {
	for _, name := range []string{"LC_ALL", "LC_CTYPE", "LANG"} {
		if locale := strings.ToLower(os.Getenv(name)); locale != "" {
			return strings.Contains(locale, "utf-8") || strings.Contains(locale, "utf8")
		}
	}
	return true
}

// note says a note on a decision that the judgement need not repeat on stderr.
func (p *program) note(text string) {
	fmt.Fprintln(p.err, oneLine(text))
	p.told = append(p.told, text)
}

// resultFile is a file of the run directory that a judgement writes.
type resultFile struct {
	name  string
	write func(io.Writer) error
}

// tables are the tables of the run directory. Coefficients are in the columns'
// own units, whatever is shown.
func (j *judged) tables() []resultFile {
	return []resultFile{
		{"stability.csv", func(w io.Writer) error { return report.WriteStabilityCSV(w, j.judgement, false) }},
		{"stability.parquet", func(w io.Writer) error { return report.WriteStabilityParquet(w, j.judgement) }},
		{"paths.parquet", func(w io.Writer) error { return report.WritePaths(w, j.judgement, lambdaOf(j.run)) }},
		{"terms.parquet", func(w io.Writer) error { return report.WriteTerms(w, j.judgement) }},
	}
}

// writeSpreadsheet writes the stability table so that no name in it is taken
// for a formula.
func (j *judged) writeSpreadsheet(w io.Writer, v view) error {
	return report.WriteStabilityCSV(w, j.seen(v), true)
}

// lambdaOf returns the lambda of each lattice step of a run.
func lambdaOf(run rundir.Run) func(step int) float64 {
	return func(step int) float64 {
		return solver.Lambda(run.Meta.LambdaMax, run.Identity.Penalty.Ratio, step)
	}
}
