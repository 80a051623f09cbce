package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"runtime/debug"
	"slices"
	"time"

	"github.com/spf13/cobra"

	"holdfast/io/rundir"
	"holdfast/io/study"
	"holdfast/io/table"
	"holdfast/resample"
	"holdfast/selection"
	"holdfast/solver"
)

// runOptions is what `run` is told beside the question.
type runOptions struct {
	out      string
	workers  int
	memory   memorySize
	share    share
	wait     time.Duration // for another process on the same part
	takeOver bool
	view     view
}

func (p *program) runCommand() *cobra.Command {
	var q question
	var o runOptions
	var draws, parts int
	var part string
	c := &cobra.Command{
		Use:   "run STUDY|TABLE [--outcome COL] [--out DIR] [--workers N] [--memory SIZE] [--parts N] [--part I|auto] [--draws N]",
		Short: "makes the draws that are not there yet, judges them with the study's decision and writes the tables",
		Long: `run fits every draw of the study, keeps them in a run directory, judges them with
the study's decision, which is written down before the first draw, and writes
the tables. The directory is NAME.run beside the study unless --out says other.

The same command goes on with a run that was interrupted or killed: it makes
what is missing, and the result is the same to the last byte. A larger number of
draws extends a run. With --part it makes the draws of that part only, for one
of several machines; holdfast judge then takes them together.`,
		Example: "  holdfast run demo/study.toml --out demo/again.run",
		Args:    exactly("STUDY"),
	}
	f := c.Flags()
	q.addFlags(f)
	f.StringVar(&o.out, "out", "", "run directory")
	f.IntVar(&o.workers, "workers", 0, "fits at a time; 0: as many as the machine lets this process use")
	f.Var(&o.memory, "memory", "most memory to take (500M, 8G): smaller blocks, then fewer workers")
	f.IntVar(&parts, "parts", 0, "parts that the draws are dealt out to; said once, when the directory is made")
	f.StringVar(&part, "part", "", "make this part only, from 0; auto: the scheduler's task number")
	f.IntVar(&draws, "draws", 0, "draws in place of the study's number; more than are there extend the run")
	f.DurationVar(&o.wait, "wait", 0, "wait so long (10m) for another process that works on the same part")
	f.BoolVar(&o.takeOver, "take-over", false, "work on a part although another process says that it does")
	o.view.addFlags(f)
	c.RunE = func(c *cobra.Command, args []string) (err error) {
		q.path = args[0]
		if c.Flags().Changed("draws") {
			q.setDraws(draws)
		}
		if c.Flags().Changed("workers") && o.workers < 1 {
			return misuse(fmt.Sprintf("holdfast run: --workers %d: must be at least 1", o.workers), "leave it out to use what the machine allows")
		}
		if o.wait < 0 {
			return misuse(fmt.Sprintf("holdfast run: --wait %v: must not be negative", o.wait), "")
		}
		if o.share, err = readShare(c, parts, part); err != nil {
			return err
		}
		return p.run(c.Context(), q, o)
	}
	return c
}

// run makes the draws of a question that are not there yet and judges them.
func (p *program) run(ctx context.Context, q question, o runOptions) error {
	if o.out == "" {
		o.out = q.runPath()
	}
	if o.workers == 0 {
		o.workers = resample.Workers()
	}
	r := newRunner(p, o)
	defer debug.SetMemoryLimit(debug.SetMemoryLimit(-1))
	limitMemory(r.limit)
	defer r.talk.end()
	defer surviveHangup(r.talk.hangUp)()
	err := r.do(ctx, q)
	r.lastWord(err)
	return err
}

// runner is a run under way. Its talk goes to the terminal and to the log.
type runner struct {
	p     program // its err is the talk
	o     runOptions
	term  io.Writer
	talk  *talk
	used  usage
	limit int64 // bytes; 0: none

	*settled
	model *solver.Model
	block int // most draws in a block
	dir   *rundir.Dir
	locks []*rundir.Lock
	books books
}

func newRunner(p *program, o runOptions) *runner {
	t := &talk{term: p.err}
	r := &runner{p: *p, o: o, term: p.err, talk: t, used: startUsage(), limit: memoryLimit(o.memory)}
	r.p.err = t
	return r
}

// do is the run from start to end.
func (r *runner) do(ctx context.Context, q question) (err error) {
	if err := q.check(); err != nil {
		return err
	}
	if r.dir, err = openExisting(r.o.out); err != nil {
		return err
	}
	if r.o.share, err = r.o.share.settle(r.o.out, r.dir); err != nil {
		return err
	}
	if err := r.prepare(ctx, q); err != nil {
		return err
	}
	if err := r.claim(ctx); err != nil {
		return err
	}
	defer r.release()
	if err := r.makeDraws(ctx); err != nil {
		return err
	}
	if r.o.share.only {
		return r.closePart()
	}
	err = r.judge()
	fmt.Fprintln(r.talk, "results are in "+oneLine(r.o.out))
	return err
}

// prepare reads study and table, and makes or opens the run directory.
func (r *runner) prepare(ctx context.Context, q question) error {
	a, err := q.open(ctx)
	if err != nil && r.dir != nil {
		return vanished(err)
	}
	if err != nil {
		return err
	}
	if r.dir != nil {
		a.follow(r.dir.Run())
	}
	if err := r.checkTable(a); err != nil {
		return err
	}
	l, err := a.load(ctx, r.o.workers)
	if err != nil {
		return vanished(err)
	}
	fmt.Fprintln(r.talk, "results go to "+oneLine(r.o.out))
	r.p.tell(l)
	if r.settled, err = l.settle(); err != nil {
		return err
	}
	if r.model, err = r.p.ready(ctx, r.settled); err != nil {
		return err
	}
	if err := r.boundMemory(); err != nil {
		return err
	}
	if r.dir == nil {
		return r.create()
	}
	return r.resume()
}

// vanished tells a table that was there, when the run was made or opened, and is
// not any more, from one that is wrong: the study is right, the machine failed.
func vanished(err error) error {
	var e *table.Error
	if !errors.As(err, &e) {
		return err
	}
	if _, missing := os.Stat(e.Path); !errors.Is(missing, fs.ErrNotExist) {
		return err
	}
	return &fault{exitFailed, fmt.Errorf("%w any more: it was removed, renamed or unmounted since the run began", e),
		"when it is back, type the same command; finished draws are kept"}
}

// checkTable refuses a table that the memory cannot hold before it is read.
func (r *runner) checkTable(a *asked) error {
	roles, err := a.study.Resolve(a.columns())
	if err != nil {
		return wrong(err, "")
	}
	rows, known := a.source.Rows()
	if r.limit == 0 || !known {
		return nil
	}
	if least := leastForTable(int(rows), len(roles.Candidates)+len(roles.Always)); least > r.limit {
		return wrong(fmt.Errorf("holdfast: %w: the limit is %s, and %d rows of %d columns need at least %s",
			errMemory, sizeText(r.limit), rows, len(roles.Candidates)+len(roles.Always), sizeText(least)),
			"allow more memory, or take fewer columns")
	}
	a.memory = r.limit - programBytes
	return nil
}

// boundMemory chooses blocks and workers by the memory there is.
func (r *runner) boundMemory() (err error) {
	f := r.footprint(r.model)
	asked := r.o.workers
	if r.o.workers, r.block, err = f.fit(r.limit, asked); err != nil {
		return wrong(fmt.Errorf("holdfast: %w", err), "allow more memory, or take fewer columns")
	}
	if r.limit > 0 {
		fmt.Fprintf(r.talk, "memory: at most %s, so %d of %d workers and %d draws in a block\n", sizeText(r.limit), r.o.workers, asked, r.block)
	}
	boundMemory(r.limit, f.table)
	return nil
}

// claim takes the locks of the parts that have something missing, and opens
// the log.
func (r *runner) claim(ctx context.Context) error {
	if err := r.lock(ctx); err != nil {
		return err
	}
	part := r.o.share.list()[0]
	past := readHistory(r.dir.LogPath(part))
	log, err := r.dir.Log(part)
	if err != nil {
		return err
	}
	r.talk.keep(log)
	if _, err := r.dir.Tidy(); err != nil {
		return err
	}
	fmt.Fprint(r.talk.logged(), past.firstLine(r.o.share, r.o.workers))
	past.killed(r.talk)
	return nil
}

// makeDraws fits the draws of the share that are not there yet.
func (r *runner) makeDraws(ctx context.Context) error {
	found, err := r.mend()
	if err != nil {
		return err
	}
	mine := r.o.share.draws(r.plan)
	missing := r.missing(mine, found)
	r.tellPlan(len(mine)-len(missing), len(missing))
	r.books = newBooks(r, found)
	if len(missing) == 0 {
		return r.books.close(rundir.StateDone, nil)
	}
	if err := r.books.open(); err != nil {
		return err
	}
	err = r.fit(ctx, missing)
	if err == nil {
		return r.books.close(rundir.StateDone, nil)
	}
	left, state := r.kept(ctx, err, len(mine)), rundir.StateFailed
	if exitCode(ctx, left) > exitIncomplete {
		state = rundir.StateStopped
	}
	if err := r.books.close(state, left); err != nil {
		return left // it says more than that it could not be noted
	}
	return left
}

// fit lets the workers loose.
func (r *runner) fit(ctx context.Context, missing []int) error {
	if err := r.p.signals.begin(); err != nil {
		return err
	}
	defer r.p.signals.end()
	m := newMeter(r.term, r.talk, r.books.whole, r.books.whole+len(missing))
	defer m.end()
	return resample.Run(ctx, r.plan, r.model, &r.books, resample.Options{
		Workers: r.o.workers, Limit: r.block, Draws: missing, Stop: r.p.signals.stop, Progress: m.show,
	})
}

// missing lists those of the share's draws that are not on disk; of a pair of
// which one half is missing, both are made.
func (r *runner) missing(mine []int, found *rundir.Finished) []int {
	out := make(map[int]bool, len(found.Missing))
	for _, d := range found.Missing {
		out[d] = true
		if r.plan.Design == resample.Halves {
			out[d^1] = true
		}
	}
	var list []int
	for _, d := range mine {
		if out[d] {
			list = append(list, d)
		}
	}
	return list
}

// kept says what is left of a run that did not get to its end, and how to go
// on.
func (r *runner) kept(ctx context.Context, err error, mine int) error {
	again := shellCommand(append([]string{os.Args[0]}, r.p.typed...))
	whole := fmt.Sprintf("%d of %d draws are whole and kept in %s", r.books.whole, mine, r.dir.Path())
	var s *interrupted
	if errors.Is(err, resample.ErrStop) {
		s = r.p.signals.cause()
	}
	if s != nil || errors.As(context.Cause(ctx), &s) || errors.As(err, &s) {
		return &fault{s.code(), fmt.Errorf("holdfast: %w: %s", s, whole), "to go on, type: " + again}
	}
	return &fault{exitFailed, fmt.Errorf("%w; %s", err, whole), "when that is mended, go on with: " + again}
}

// closePart says what a part leaves to be done.
func (r *runner) closePart() error {
	fmt.Fprintf(r.talk, "%s is whole; when all are: holdfast judge %s\n", r.o.share, shellWord(r.o.out))
	if n := r.books.redrawn(); n > 0 {
		fmt.Fprintf(r.talk, "%s\n", redrawnText(n))
	}
	if n := len(r.books.uncertified()); n > 0 {
		return incomplete(fmt.Sprintf("holdfast: %d draws of %s end early, at a fit that could not be certified", n, r.o.share),
			"they count with what they have; holdfast judge says what that means")
	}
	return nil
}

// judge judges the draws with the study's decision and writes the tables.
func (r *runner) judge() error {
	r.p.out = r.talk.readers(r.p.out)
	return r.p.judgeRun([]string{r.dir.Path()}, judgeOptions{view: r.o.view, decision: &r.decision, save: true})
}

// lastWord ends the log.
func (r *runner) lastWord(err error) {
	code := exitCode(context.Background(), err)
	if err == nil {
		code = exitDone
	}
	how := fmt.Sprintf("exit %d, %d draws whole", code, r.books.whole)
	if err != nil {
		how += ", " + oneLine(err.Error())
	}
	fmt.Fprint(r.talk.logged(), r.used.lastLine(how, r.o.workers))
}

// tellPlan says what is about to happen, and what was decided.
func (r *runner) tellPlan(there, missing int) {
	d, o := r.decision, r.study.Outcome
	fmt.Fprintf(r.talk, "outcome: %s (%s)\n", oneLine(explained(o)), oneLine(kindText(o)))
	fmt.Fprintf(r.talk, "rows: %d, candidates: %d, draws: %d (%s), seed: %d, workers: %d\n",
		r.rows(), len(r.fitted), r.plan.Number, r.plan.Design, r.plan.Seed, r.o.workers)
	if there > 0 || r.o.share.only {
		fmt.Fprintf(r.talk, "%s: %d draws are there, %d are to be made\n", r.o.share, there, missing)
	}
	if record := r.dir.Run().Decision; record.Same(d) {
		fmt.Fprintf(r.talk, "decided before the first draw: %s\n", inWords(d))
	} else {
		fmt.Fprintf(r.talk, "decided before the first draw: %s\nthe study now says: %s\n", inWords(*record), inWords(d))
	}
	for _, n := range d.Notes {
		r.p.note(n)
	}
}

// inWords is a decision in one line.
func inWords(d selection.Decision) string {
	luck := "no bound on false selections"
	if d.FalseSelections != nil {
		luck = fmt.Sprintf("expected by luck at most %s (%s)", selection.AtMost(*d.FalseSelections), d.Bound.Label())
	}
	return fmt.Sprintf("threshold %.4g, selected %d, region %s, %s", d.Threshold, d.Selected, d.Region, luck)
}

// identity is what decides the bits of the draws.
func (s *settled) identity() rundir.Identity {
	p, d, o := s.final.Penalty, s.final.Draws, s.final.Outcome
	id := rundir.Identity{
		Fingerprint: s.data.Fingerprint,
		Kind:        o.Kind.String(), Outcome: o.Column, Success: o.Success,
		Offset: o.Offset, Exposure: o.Exposure, CaseWeight: o.CaseWeight,
		Candidates: s.names(), Always: s.always(), Terms: s.terms(), Reference: s.references(),
		Missing: s.final.Table.Missing.String(),
		Penalty: rundir.Penalty{
			Mix: p.Mix, Scale: p.Scale.String(), Relative: p.Relative, Jitter: p.Jitter,
			Ratio: p.Ratio, Floor: p.Floor, StopAfter: p.StopAfter,
		},
		Draws: rundir.Draws{Design: d.Design.String(), Within: s.roles.Within, Seed: d.Seed},
	}
	if o.Kind == study.Classes {
		id.Classes = s.data.Classes
	}
	if o.Kind == study.Survival {
		id.Time, id.Event, id.Entry, id.Strata, id.Ties = o.Time, o.Event, o.Entry, o.Strata, o.Ties.String()
	}
	if s.grouped() {
		id.Penalty.GroupWeight = p.GroupWeight.String()
	}
	if s.grouped() && p.GroupWeight == study.Even {
		id.Penalty.Luck = s.luck()
	}
	return id
}

// meta is what else the directory remembers.
func (s *settled) meta(model *solver.Model, parts int) rundir.Meta {
	m := rundir.Meta{
		Tool: version(), Kernel: solver.Kernel(), Parts: parts,
		TableRows: s.data.TableRows, Rows: s.rows(), Number: s.plan.Number,
		LambdaMax: model.LambdaMax(), LastStep: model.LastStep(), Excluded: s.excluded,
		Lone: s.lone(),
	}
	if s.effective != nil {
		m.EffectiveSize = s.effective.median
	}
	for _, j := range slices.Concat(columnsOf(s.fitted), s.alwaysColumns()) {
		m.Centre = append(m.Centre, s.data.Centre[j])
		m.Deviation = append(m.Deviation, s.data.Deviation[j])
	}
	return m
}
