package main

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"time"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"holdfast/io/rundir"
	"holdfast/selection"
)

// view says how a judgement is shown.
type view struct {
	asJSON bool
	perSD  bool
}

func (v *view) addFlags(f *pflag.FlagSet) {
	f.BoolVar(&v.asJSON, "json", false, "print JSON")
	f.BoolVar(&v.perSD, "per-sd", false, "print coefficients in units of one standard deviation")
}

// judgeOptions is another decision, and what is done with it.
type judgeOptions struct {
	view        view
	decision    *selection.Decision // nil: the decision of record, changed by
	change      selection.Ask       // zero: nothing
	partial     bool                // judge what is there
	save        bool                // write the tables of the run directory
	spreadsheet string              // file for a copy that spreadsheets read safely
}

func (p *program) judgeCommand() *cobra.Command {
	var o judgeOptions
	var threshold, selected, falseSelections optional
	var bound, region string
	c := &cobra.Command{
		Use:   "judge RUN... [--threshold T] [--false-selections V] [--selected Q] [--bound NAME] [--region NAME] [--partial] [--save]",
		Short: "the decision on finished draws, without fitting again",
		Long: `judge applies a decision to the draws of a run directory, or to those of several
that hold parts of one run. Without options it is the one that was written down
before the first draw. Any other one is marked as explored after seeing the
result, and logged in the (first) directory. One of threshold, selected and
false-selections keeps what it can of the others; two fix the third.

A run with draws missing is not judged; --partial judges the draws that are
there, says which they are, and exits 3.`,
		Example: "  holdfast judge demo/study.run --threshold 0.9",
		Args:    atLeastOne("RUN"),
	}
	f := c.Flags()
	f.Var(&threshold, "threshold", "share of draws from which a predictor is stable, in (0.5,1]")
	f.Var(&falseSelections, "false-selections", "expected number of false selections")
	f.Var(&selected, "selected", "predictors that one draw may contribute")
	f.StringVar(&bound, "bound", "", "worst-case, unimodal or r-concave")
	f.StringVar(&region, "region", "", "cap or common")
	f.BoolVar(&o.partial, "partial", false, "judge the draws that are there although others are missing")
	f.BoolVar(&o.save, "save", false, "write the tables of the run directory with this decision")
	f.StringVar(&o.spreadsheet, "spreadsheet", "", "write the table to this CSV file with leading = + - @ made harmless")
	o.view.addFlags(f)
	c.RunE = func(_ *cobra.Command, args []string) error {
		o.change = selection.Ask{Threshold: threshold.value, Selected: selected.value, FalseSelections: falseSelections.value}
		if err := parseNames(&o.change, bound, region); err != nil {
			return wrong(err, "")
		}
		return p.judgeRun(args, o)
	}
	return c
}

// atLeastOne is a check that one argument or more are there.
func atLeastOne(word string) cobra.PositionalArgs {
	return func(c *cobra.Command, args []string) error {
		if len(args) == 0 {
			return misuse(fmt.Sprintf("%s: %s is missing", c.CommandPath(), word), "usage: "+c.UseLine())
		}
		return nil
	}
}

// parseNames reads the words for bound and region; empty ones change nothing.
func parseNames(a *selection.Ask, bound, region string) (err error) {
	if bound != "" {
		if a.Bound, err = selection.ParseBound(bound); err != nil {
			return err
		}
	}
	if region != "" {
		a.Region, err = selection.ParseRegion(region)
	}
	return err
}

// judged is a run's judgement with what belongs beside it.
type judged struct {
	*evidence
	judgement *selection.Judgement
	explored  bool // not the decision of record
	saved     bool // the tables of the directory are those of this judgement
}

// judgeRun judges the draws of run directories, shows the outcome and keeps
// what is to be kept.
func (p *program) judgeRun(paths []string, o judgeOptions) error {
	e, err := gather(paths, o.partial)
	if err != nil {
		return err
	}
	j, err := e.judge(o)
	if err != nil {
		return err
	}
	if o.save {
		if err := j.save(); err != nil {
			return err
		}
		j.saved = true
	}
	if err := p.log(j); err != nil {
		return err
	}
	if o.spreadsheet != "" {
		if err := j.saveSpreadsheet(o.spreadsheet, o.view); err != nil {
			return err
		}
	}
	if err := p.show(j, o.view); err != nil {
		return err
	}
	return j.verdict()
}

// verdict says what is missing from a judgement that was made.
func (j *judged) verdict() error {
	if note := j.partial(); note != "" {
		return incomplete("holdfast: "+note, "")
	}
	if n := len(j.judgement.Uncertified); n > 0 {
		return incomplete(fmt.Sprintf("holdfast: %d of %d draws end early, at a fit that could not be certified", n, j.judgement.Draws),
			"they count with what they have; the footnotes say what that means")
	}
	return nil
}

// judge applies a decision to the draws.
func (e *evidence) judge(o judgeOptions) (*judged, error) {
	bootstrap := e.bootstrap()
	decision, err := e.decide(o)
	if err != nil {
		return nil, err
	}
	judgement, err := selection.Judge(e.draws, bootstrap, e.run.Predictors(), decision)
	if err != nil {
		return nil, wrong(err, "")
	}
	if how := e.followed(); how != "" {
		judgement.NumberFollowed(how)
	}
	return &judged{evidence: e, judgement: judgement, explored: !decision.Same(*e.run.Decision)}, nil
}

// decide is the decision that is asked for.
func (e *evidence) decide(o judgeOptions) (selection.Decision, error) {
	if o.decision != nil {
		return *o.decision, nil
	}
	if o.change == (selection.Ask{}) {
		return *e.run.Decision, nil
	}
	d, err := e.run.Decision.Change(o.change, len(e.run.Identity.Candidates), len(e.draws), e.bootstrap(), e.run.Identity.Penalty.StopAfter)
	if err != nil {
		return d, wrong(err, "")
	}
	if how := e.followed(); how != "" && o.change.FalseSelections != nil && d.Bound != selection.WorstCase {
		return d, misuse(fmt.Sprintf("holdfast judge: --false-selections: %s, so there is no %s bound to solve for", how, d.Bound),
			"add --bound worst-case, or give --threshold or --selected")
	}
	return d, nil
}

// log notes a decision other than the one of record in the directory.
func (p *program) log(j *judged) error {
	if !j.explored && j.partial() == "" {
		return nil
	}
	err := j.dir.LogJudgement(rundir.Judged{
		Time: time.Now().UTC().Format(time.RFC3339), Draws: j.judgement.Draws,
		Decision: j.judgement.Decision, Stable: j.judgement.Stable, Saved: j.saved,
	})
	if errors.Is(err, rundir.ErrReadOnly) {
		fmt.Fprintln(p.err, "the directory cannot be written, so this judgement is not in its log")
		return nil
	}
	return err
}

// save writes the tables of the run directory.
func (j *judged) save() error {
	for _, t := range j.tables() {
		if err := j.dir.Write(t.name, t.write); err != nil {
			return err
		}
	}
	return nil
}

// saveSpreadsheet writes the stability table to a file of its own.
func (j *judged) saveSpreadsheet(path string, v view) error {
	if _, err := os.Lstat(path); err == nil {
		return misuse("holdfast judge: "+path+" exists, and is not written over", "give --spreadsheet another name")
	}
	if folder := filepath.Dir(path); !isFolder(folder) {
		return misuse("holdfast judge: "+folder+": there is no such folder to write "+filepath.Base(path)+" into", "make the folder first")
	}
	return rundir.WriteFile(path, func(w io.Writer) error { return j.writeSpreadsheet(w, v) })
}
