package main

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"time"

	"github.com/spf13/cobra"

	"holdfast/io/deal"
	"holdfast/resample"
)

// dealOptions is what `deal` is told beside the question.
type dealOptions struct {
	out      string
	parts    int // 0: as the run directory says
	cpus     int
	memory   memorySize
	time     time.Duration
	noFit    bool
	throttle int
	scratch  string
	dryRun   bool
	sbatch   []string // for the scheduler, as typed
}

func (p *program) dealCommand() *cobra.Command {
	var q question
	var o dealOptions
	c := &cobra.Command{
		Use:   "deal STUDY --parts N [--out DIR] [--dry-run] [--time T] [--memory SIZE] [--cpus N] [--throttle K] [--scratch DIR] [-- SCHEDULER OPTIONS]",
		Short: "submits the run as a Slurm job array, and a job that judges when all parts are in",
		Long: `deal checks study and table, makes the run directory with a copy of this program
in it, writes a batch script and submits it as a job array, one task for each part,
and a job that judges when all tasks have ended. A task asks for one node and for
memory and time of one and a half times what the plan says, unless they are given.
Near its time limit it writes what is whole and is queued again.

The same command submits again only the parts that are neither whole nor in work.
What stands after -- goes to sbatch, and wins over what the script says.`,
		Example: "  holdfast deal demo/study.toml --parts 4 --out demo/dealt.run --dry-run",
		Args: func(c *cobra.Command, args []string) error {
			if n := c.ArgsLenAtDash(); n >= 0 {
				args = args[:n]
			}
			return exactly("STUDY")(c, args)
		},
	}
	f := c.Flags()
	q.addFlags(f)
	f.StringVar(&o.out, "out", "", "run directory")
	f.IntVar(&o.parts, "parts", 0, "parts, each a task; said once, when the directory is made")
	f.BoolVar(&o.dryRun, "dry-run", false, "print scripts and commands, and make nothing")
	f.DurationVar(&o.time, "time", 0, "time limit of a task (90m, 12h); 0: from timing a few draws here")
	f.Var(&o.memory, "memory", "memory of a task (8G); from the table's shape unless given")
	f.IntVar(&o.cpus, "cpus", 0, "processors of a task; 0: as many as this machine lets a process use")
	f.BoolVar(&o.noFit, "no-fit", false, "fit nothing here; needs --time")
	f.IntVar(&o.throttle, "throttle", 0, "most tasks at a time; 0: as the scheduler likes")
	f.StringVar(&o.scratch, "scratch", "", "folder on the nodes to copy the table to, such as /scratch or '$TMPDIR'")
	c.RunE = func(c *cobra.Command, args []string) error {
		q.path = args[0]
		o.sbatch = args[1:]
		if err := o.check(c.Flags().Changed); err != nil {
			return err
		}
		return p.deal(c.Context(), q, o)
	}
	return c
}

// check refuses numbers that make no sense.
func (o *dealOptions) check(given func(string) bool) error {
	for name, n := range map[string]int{"parts": o.parts, "cpus": o.cpus, "throttle": o.throttle} {
		if given(name) && n < 1 {
			return misuse(fmt.Sprintf("holdfast deal: --%s %d: must be at least 1", name, n), "")
		}
	}
	if given("time") && o.time < shortestLimit {
		return misuse(fmt.Sprintf("holdfast deal: --time %v: at least %v are needed, as a task stops two minutes before the limit", o.time, shortestLimit), "")
	}
	if o.noFit && o.time == 0 {
		return misuse("holdfast deal: --no-fit: how long a draw takes is not known without fitting one", "say how long a part may take, such as --time 8h")
	}
	if err := deal.CheckOptions(o.sbatch); err != nil {
		return wrong(err, "")
	}
	return nil
}

const (
	// shortestLimit is the least time limit of a task: two minutes of it are
	// for ending in order.
	shortestLimit = 5 * time.Minute
	// margin is by what the plan is multiplied for the scheduler.
	margin = 1.5
	// taskRestarts is how often a task asks to be queued again by itself.
	taskRestarts = 20
	// judgeTime is what the judging job asks for.
	judgeTime = time.Hour
	// leastMemory is what any job asks for: less gains nothing, and files that
	// are read and written count too where the scheduler holds jobs to it.
	leastMemory = 512 << 20
)

// deal submits what is missing of a run.
func (p *program) deal(ctx context.Context, q question, o dealOptions) error {
	if o.out == "" {
		o.out = q.runPath()
	}
	if o.cpus == 0 {
		o.cpus = resample.Workers()
	}
	d, err := p.readDeal(ctx, q, o)
	if err != nil {
		return err
	}
	if o.dryRun {
		return d.preview(ctx)
	}
	if err := d.makeRun(); err != nil {
		return err
	}
	return d.submit(ctx)
}

// dealing is a deal under way.
type dealing struct {
	*runner
	q    question
	deal dealOptions
	plan *foreseen
	job  *deal.Job
}

// readDeal reads study and table, finds what a part takes, and makes nothing.
func (p *program) readDeal(ctx context.Context, q question, o dealOptions) (*dealing, error) {
	if err := q.check(); err != nil {
		return nil, err
	}
	dir, err := openExisting(o.out)
	if err != nil {
		return nil, err
	}
	if dir == nil && o.parts == 0 {
		return nil, misuse("holdfast deal: --parts is missing", "holdfast plan "+shellWord(q.path)+" recommends a number")
	}
	if dir != nil && o.parts != 0 && o.parts != dir.PartCount() {
		return nil, misuse(fmt.Sprintf("holdfast deal: --parts %d: %s was made for %d, and its draws are dealt out by that number", o.parts, o.out, dir.PartCount()),
			"leave --parts out, or give another --out")
	}
	settledShare, err := share{parts: o.parts}.settle(o.out, dir)
	if err != nil {
		return nil, err
	}
	d := &dealing{runner: newRunner(p, runOptions{out: o.out, workers: o.cpus, share: settledShare}), q: q, deal: o}
	d.dir = dir
	start := time.Now()
	if err := d.read(ctx); err != nil {
		return nil, err
	}
	if units := d.settled.plan.Number / d.unit(); settledShare.parts > units {
		return nil, misuse(fmt.Sprintf("holdfast deal: --parts %d: the study has %d draws, so no more than %d parts", settledShare.parts, d.settled.plan.Number, units), "")
	}
	asked := planOptions{workers: o.cpus, parts: settledShare.parts, memory: o.memory}
	if o.noFit || o.time > 0 {
		d.plan, err = newForeseen(asked, d.settled.plan, d.decision, d.settled.footprint(d.model))
	} else {
		d.plan, err = d.settled.foresee(ctx, d.model, asked, time.Since(start))
	}
	if err != nil {
		return nil, err
	}
	if d.job, err = d.describe(); err != nil {
		return nil, err
	}
	return d, wrong(d.job.Check(), "")
}

// read reads study and table and compares them with a run directory that is
// there.
func (d *dealing) read(ctx context.Context) error {
	a, err := d.q.open(ctx)
	if err != nil {
		return err
	}
	if d.dir != nil {
		a.follow(d.dir.Run())
	}
	l, err := a.load(ctx, d.o.workers)
	if err != nil {
		return err
	}
	d.p.tell(l)
	if d.settled, err = l.settle(); err != nil {
		return err
	}
	if d.model, err = d.p.ready(ctx, d.settled); err != nil {
		return err
	}
	if d.dir == nil {
		return nil
	}
	return wrong(d.dir.Compare(d.identity(), d.meta(d.model, d.o.share.parts)), "only [decision] and the number of draws may change on an existing run")
}

// unit is the draws that go together.
func (d *dealing) unit() int {
	if d.settled.plan.Design == resample.Halves {
		return 2
	}
	return 1
}

// describe is the job in the scheduler's terms.
func (d *dealing) describe() (*deal.Job, error) {
	run, err := filepath.Abs(d.deal.out)
	if err != nil {
		return nil, err
	}
	if real, err := filepath.EvalSymlinks(run); err == nil {
		run = real
	}
	staging, err := d.staging()
	if err != nil {
		return nil, err
	}
	judge := int64(margin * float64(programBytes+d.plan.memory.judging()))
	return &deal.Job{
		Name: "holdfast-" + d.q.name(), Run: run, Program: filepath.Join(deal.Folder(run), "holdfast"),
		Parts: d.o.share.parts, Part: d.size(), Throttle: d.deal.throttle, Restarts: taskRestarts, Staging: staging,
		Judge: deal.Size{CPUs: 1, Memory: max(leastMemory, judge), Time: judgeTime},
	}, nil
}

// size is what a task asks for.
func (d *dealing) size() deal.Size {
	s := deal.Size{CPUs: d.deal.cpus, Memory: int64(d.deal.memory), Time: d.deal.time}
	if s.Memory == 0 {
		s.Memory = max(leastMemory, int64(margin*float64(d.plan.peakMemory(d.deal.cpus))))
	}
	if wall, known := d.plan.wall(d.o.share.parts, d.plan.workers); known && s.Time == 0 {
		s.Time = max(2*shortestLimit, time.Duration(margin*float64(wall)))
	}
	return s
}

// staging is what is copied to the nodes; nil: nothing.
func (d *dealing) staging() (*deal.Staging, error) {
	if d.deal.scratch == "" {
		return nil, nil
	}
	path, err := filepath.Abs(d.study.TablePath())
	if err != nil {
		return nil, err
	}
	s := &deal.Staging{
		Folder: d.deal.scratch, Name: fmt.Sprintf("holdfast-%d-%.12s", os.Getuid(), d.data.Fingerprint), Path: filepath.Base(path),
	}
	pattern := path
	if info, err := os.Stat(path); err == nil {
		if !info.IsDir() {
			s.Files = []string{path}
			return s, nil
		}
		s.Path, pattern = ".", filepath.Join(path, "*")
	}
	if s.Files, err = filepath.Glob(pattern); err != nil || len(s.Files) == 0 {
		return nil, misuse(fmt.Sprintf("holdfast deal: --scratch: no file of %s is found to be copied", path), "leave --scratch out")
	}
	return s, nil
}

// dealer submits for the job.
func (d *dealing) dealer() *deal.Dealer {
	return &deal.Dealer{Job: d.job, Options: d.deal.sbatch, Missing: d.missingParts, Now: time.Now}
}

// missingParts lists the parts that have draws missing.
func (d *dealing) missingParts() ([]int, error) {
	missing := make(map[int]bool)
	if d.dir != nil {
		found, err := d.dir.Survey()
		if err != nil {
			return nil, err
		}
		for _, draw := range found.Missing {
			missing[draw] = true
		}
	}
	var parts []int
	for part := range d.o.share.parts {
		for _, draw := range resample.Part(d.settled.plan, part, d.o.share.parts) {
			if d.dir == nil || missing[draw] || draw >= d.dir.Run().Meta.Number {
				parts = append(parts, part)
				break
			}
		}
	}
	return parts, nil
}

// makeRun makes the run directory, or extends it, with all that tasks need.
func (d *dealing) makeRun() error {
	if d.dir == nil {
		if err := d.create(); err != nil {
			return err
		}
	}
	if err := d.extend(); err != nil {
		return err
	}
	run, err := filepath.EvalSymlinks(d.job.Run)
	if err != nil {
		return err
	}
	d.job.Run, d.job.Program = run, filepath.Join(deal.Folder(run), "holdfast")
	for _, folder := range []string{deal.Folder(run), filepath.Join(run, "logs")} {
		if err := os.MkdirAll(folder, 0o755); err != nil {
			return fmt.Errorf("holdfast: %w", err)
		}
	}
	self, err := os.Executable()
	if err != nil {
		return err
	}
	return deal.CopyProgram(self, d.job.Program)
}
