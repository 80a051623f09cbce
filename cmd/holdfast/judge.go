package main

import (
	"errors"
	"fmt"
	"io"
	"os"
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
	change      selection.Ask // zero: the decision of record
	save        bool          // write the tables of the run directory
	spreadsheet string        // file for a copy that spreadsheets read safely
}

func (p *program) judgeCommand() *cobra.Command {
	var o judgeOptions
	var threshold, selected, falseSelections optional
	var bound, region string
	c := &cobra.Command{
		Use:   "judge RUN [--threshold T] [--false-selections V] [--selected Q] [--bound NAME] [--region NAME] [--save]",
		Short: "the decision on finished draws, without fitting again",
		Long: `judge applies a decision to the draws of a run directory. Without options it is
the one that was written down before the first draw. Any other one is marked as
explored after seeing the result, and logged in the directory. One of threshold,
selected and false-selections keeps what it can of the others; two fix the third.`,
		Example: "  holdfast demo demo\n  holdfast judge demo/study.run --threshold 0.9",
		Args:    exactly("RUN"),
	}
	f := c.Flags()
	f.Var(&threshold, "threshold", "share of draws from which a predictor is stable, in (0.5,1]")
	f.Var(&falseSelections, "false-selections", "expected number of false selections")
	f.Var(&selected, "selected", "predictors that one draw may contribute")
	f.StringVar(&bound, "bound", "", "worst-case, unimodal or r-concave")
	f.StringVar(&region, "region", "", "cap or common")
	f.BoolVar(&o.save, "save", false, "write the tables of the run directory with this decision")
	f.StringVar(&o.spreadsheet, "spreadsheet", "", "write the table to this CSV file with leading = + - @ made harmless")
	o.view.addFlags(f)
	c.RunE = func(_ *cobra.Command, args []string) error {
		o.change = selection.Ask{Threshold: threshold.value, Selected: selected.value, FalseSelections: falseSelections.value}
		if err := parseNames(&o.change, bound, region); err != nil {
			return wrong(err, "")
		}
		dir, err := openRun(args[0])
		if err != nil {
			return err
		}
		return p.judgeRun(dir, o)
	}
	return c
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

// openRun opens a run directory to judge it.
func openRun(path string) (*rundir.Dir, error) {
	info, err := os.Stat(path)
	switch {
	case err != nil:
		return nil, wrong(fmt.Errorf("holdfast: %w", err), "judge takes the directory that holdfast run made, such as study.run")
	case !info.IsDir():
		return nil, misuse("holdfast judge: "+path+" is a file and no run directory", "give the directory that holdfast run made, such as study.run")
	}
	dir, err := rundir.Open(path)
	return dir, wrong(err, "")
}

// judged is a run's judgement with what belongs beside it.
type judged struct {
	dir       *rundir.Dir
	run       rundir.Run
	judgement *selection.Judgement
	explored  bool // not the decision of record
	saved     bool // the tables of the directory are those of this judgement
}

// judgeRun judges the draws of a run directory, shows the outcome and keeps
// what is to be kept.
func (p *program) judgeRun(dir *rundir.Dir, o judgeOptions) error {
	j, err := judgeDraws(dir, o.change)
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
	if n := len(j.judgement.Uncertified); n > 0 {
		return incomplete(fmt.Sprintf("holdfast: %d of %d draws end early, at a fit that could not be certified", n, j.judgement.Draws),
			"they count with what they have; the footnotes say what that means")
	}
	return nil
}

// judgeDraws reads the draws and applies a decision.
func judgeDraws(dir *rundir.Dir, change selection.Ask) (*judged, error) {
	run := dir.Run()
	if run.Decision == nil {
		return nil, incomplete("holdfast: "+dir.Path()+" has no decision and no draws: the run was ended before its first draw",
			"remove the directory and run again")
	}
	bootstrap := run.Identity.Draws.Design == "bootstrap"
	decision := *run.Decision
	if change != (selection.Ask{}) {
		var err error
		decision, err = run.Decision.Change(change, len(run.Identity.Candidates), run.Meta.Number, bootstrap, run.Identity.Penalty.StopAfter)
		if err != nil {
			return nil, wrong(err, "")
		}
	}
	draws, err := dir.Draws()
	if errors.Is(err, rundir.ErrIncomplete) {
		return nil, &fault{exitIncomplete, err, "a run that did not end is not judged by this version: remove the directory and run again"}
	}
	if err != nil {
		return nil, err
	}
	n := len(run.Identity.Candidates)
	judgement, err := selection.Judge(draws, bootstrap, selection.Predictors{
		Names: run.Identity.Candidates, Deviations: run.Meta.Deviation[:n],
		Always: run.Identity.Always, AlwaysDeviations: run.Meta.Deviation[n:],
	}, decision)
	if err != nil {
		return nil, wrong(err, "")
	}
	return &judged{dir: dir, run: run, judgement: judgement, explored: !decision.Same(*run.Decision)}, nil
}

// log notes a decision other than the one of record in the directory.
func (p *program) log(j *judged) error {
	if !j.explored {
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
	return rundir.WriteFile(path, func(w io.Writer) error { return j.writeSpreadsheet(w, v) })
}
