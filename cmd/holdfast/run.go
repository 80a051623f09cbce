package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"time"

	"github.com/spf13/cobra"

	"holdfast/io/rundir"
	"holdfast/resample"
	"holdfast/selection"
	"holdfast/solver"
)

// runOptions is what `run` is told beside the question.
type runOptions struct {
	out     string
	workers int
	draws   int // 0: as the study says
	view    view
}

func (p *program) runCommand() *cobra.Command {
	var q question
	var o runOptions
	c := &cobra.Command{
		Use:   "run STUDY|TABLE [--outcome COL] [--out DIR] [--workers N] [--draws N]",
		Short: "makes the draws, judges them with the study's decision and writes the tables",
		Long: `run fits every draw of the study, keeps them in a run directory, judges them with
the study's decision, which is written down before the first draw, and writes
the tables. The directory is NAME.run beside the study unless --out says other.`,
		Example: "  holdfast demo demo\n  holdfast run demo/study.toml --out demo/again.run",
		Args:    exactly("STUDY"),
	}
	f := c.Flags()
	q.addFlags(f)
	f.StringVar(&o.out, "out", "", "run directory to make")
	f.IntVar(&o.workers, "workers", 0, "fits at a time; 0: as many as the machine lets this process use")
	f.IntVar(&o.draws, "draws", 0, "draws in place of the study's number")
	o.view.addFlags(f)
	c.RunE = func(c *cobra.Command, args []string) error {
		q.path = args[0]
		if c.Flags().Changed("draws") {
			q.sets = append(q.sets, "draws.number="+strconv.Itoa(o.draws))
		}
		if c.Flags().Changed("workers") && o.workers < 1 {
			return misuse(fmt.Sprintf("holdfast run: --workers %d: must be at least 1", o.workers), "leave it out to use what the machine allows")
		}
		return p.run(c.Context(), q, o)
	}
	return c
}

// run makes the draws of a question and judges them.
func (p *program) run(ctx context.Context, q question, o runOptions) error {
	if o.out == "" {
		o.out = q.runPath()
	}
	if o.workers == 0 {
		o.workers = resample.Workers()
	}
	if err := refuseRun(o.out); err != nil {
		return err
	}
	fmt.Fprintln(p.err, "results go to "+oneLine(o.out))
	a, err := q.open(ctx)
	if err != nil {
		return err
	}
	l, err := a.load(ctx, o.workers)
	if err != nil {
		return err
	}
	p.tell(l)
	s, err := l.settle()
	if err != nil {
		return err
	}
	dir, err := p.makeDraws(ctx, s, o)
	if err != nil {
		return err
	}
	err = p.judgeRun(dir, judgeOptions{view: o.view, save: true})
	fmt.Fprintln(p.err, "results are in "+oneLine(o.out))
	return err
}

// refuseRun says early, before the table is read, that a directory has a run.
func refuseRun(out string) error {
	if _, err := os.Stat(filepath.Join(out, "run.json")); err == nil {
		return misuse("holdfast: "+out+" holds a run already, and a run is never written over",
			"give another --out, or remove the directory to run again")
	}
	return nil
}

// makeDraws fits all draws into a new run directory.
func (p *program) makeDraws(ctx context.Context, s *settled, o runOptions) (*rundir.Dir, error) {
	model, err := solver.NewModel(ctx, s.problem(s.final.Penalty.StopAfter, nil))
	if err != nil {
		return nil, wrong(err, "")
	}
	dir, err := s.makeDir(o.out, model)
	if err != nil {
		return nil, err
	}
	p.tellPlan(s, o)
	boundGarbage()
	start := time.Now()
	m := newMeter(p.err, s.plan.Number)
	err = resample.Run(ctx, s.plan, model, dir, resample.Options{
		Workers:  o.workers,
		Limit:    model.BlockLimit(s.plan.Half()),
		Progress: m.show,
	})
	m.end()
	done, recordErr := recordPart(dir, o.workers, start, err)
	if err == nil {
		err = recordErr
	}
	return dir, kept(ctx, err, dir, done, s.plan.Number)
}

// kept says what is left of a run that did not get to its end.
func kept(ctx context.Context, err error, dir *rundir.Dir, done, total int) error {
	var f *fault
	if err == nil || errors.As(err, &f) {
		return err
	}
	hint := "this version does not go on with such a run: remove the directory, then type the same command"
	text := fmt.Errorf("%w; %d of %d draws are whole and kept in %s", err, done, total, dir.Path())
	if cause := context.Cause(ctx); cause != nil {
		text = fmt.Errorf("holdfast: %w: %d of %d draws are whole and kept in %s", cause, done, total, dir.Path())
	}
	return &fault{exitFailed, text, hint}
}

// makeDir makes the run directory and writes the decision of record.
func (s *settled) makeDir(out string, model *solver.Model) (*rundir.Dir, error) {
	moved, err := s.final.Rebase(out)
	if err != nil {
		return nil, err
	}
	text, err := moved.Marshal()
	if err != nil {
		return nil, err
	}
	dir, err := rundir.Create(out, s.identity(), text, s.meta(model))
	if errors.Is(err, rundir.ErrExists) {
		return nil, wrong(err, "")
	}
	if err != nil {
		return nil, err
	}
	return dir, dir.SetDecision(s.decision)
}

// identity is what decides the bits of the draws.
func (s *settled) identity() rundir.Identity {
	p, d := s.final.Penalty, s.final.Draws
	return rundir.Identity{
		Fingerprint: s.data.Fingerprint,
		Outcome:     s.roles.Outcome, Kind: s.final.Outcome.Kind.String(),
		Candidates: s.names(), Always: s.data.Always,
		Missing: s.final.Table.Missing.String(),
		Penalty: rundir.Penalty{
			Mix: p.Mix, Scale: p.Scale.String(), Relative: p.Relative,
			Ratio: p.Ratio, Floor: p.Floor, StopAfter: p.StopAfter,
		},
		Draws: rundir.Draws{Design: d.Design.String(), Seed: d.Seed},
	}
}

// meta is what else the directory remembers.
func (s *settled) meta(model *solver.Model) rundir.Meta {
	m := rundir.Meta{
		Tool: version(), Kernel: solver.Kernel(),
		TableRows: s.data.TableRows, Rows: len(s.data.Outcome), Number: s.plan.Number,
		LambdaMax: model.LambdaMax(), LastStep: model.LastStep(), Excluded: s.excluded,
	}
	add := func(j int) {
		m.Centre = append(m.Centre, s.data.Centre[j])
		m.Deviation = append(m.Deviation, s.data.Deviation[j])
	}
	for _, j := range s.fitted {
		add(int(j))
	}
	for i := range s.data.Always {
		add(len(s.data.Candidates) + i)
	}
	return m
}

// tellPlan says what is about to happen, and what was decided.
func (p *program) tellPlan(s *settled, o runOptions) {
	d := s.decision
	fmt.Fprintf(p.err, "rows: %d, candidates: %d, draws: %d (%s), seed: %d, workers: %d\n",
		len(s.data.Outcome), len(s.fitted), s.plan.Number, s.plan.Design, s.plan.Seed, o.workers)
	fmt.Fprintf(p.err, "decided before the first draw: %s\n", inWords(d))
	for _, n := range d.Notes {
		fmt.Fprintln(p.err, oneLine(n))
	}
}

// inWords is a decision in one line.
func inWords(d selection.Decision) string {
	luck := "no bound on false selections"
	if d.FalseSelections != nil {
		luck = fmt.Sprintf("expected by luck at most %.4g (%s)", *d.FalseSelections, d.Bound.Label())
	}
	return fmt.Sprintf("threshold %.4g, selected %d, region %s, %s", d.Threshold, d.Selected, d.Region, luck)
}

// recordPart writes how the draws went, and returns how many are whole.
func recordPart(dir *rundir.Dir, workers int, start time.Time, failure error) (done int, err error) {
	end := time.Now()
	host, err := os.Hostname()
	if err != nil {
		host = "unknown"
	}
	found, err := dir.Read()
	if err != nil {
		return 0, err
	}
	part := rundir.Part{
		State: "done", Host: host, Workers: workers, Kernel: solver.Kernel(),
		Started: start.UTC().Format(time.RFC3339), Ended: end.UTC().Format(time.RFC3339), Seconds: end.Sub(start).Seconds(),
		Draws: len(found.Draws), Violation: found.Violation, Gap: found.Gap,
		Borderline: found.Borderline, Twins: found.Twins,
	}
	for _, u := range found.Uncertified {
		part.Uncertified = append(part.Uncertified, u.Draw)
	}
	if failure != nil {
		part.State, part.Failure = "failed", oneLine(failure.Error())
	}
	return part.Draws, dir.WritePart(part)
}
