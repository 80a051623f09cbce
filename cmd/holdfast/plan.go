package main

import (
	"context"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"time"

	"github.com/spf13/cobra"

	"holdfast/io/study"
	"holdfast/resample"
	"holdfast/resample/forecast"
	"holdfast/selection"
	"holdfast/solver"
)

// planOptions is what `plan` is told beside the question.
type planOptions struct {
	workers int
	parts   int // 0: recommend
	memory  memorySize
	noFit   bool
	asJSON  bool
}

func (p *program) planCommand() *cobra.Command {
	var q question
	var o planOptions
	c := &cobra.Command{
		Use:   "plan STUDY|TABLE [--no-fit] [--workers N] [--parts N] [--memory SIZE] [--outcome COL]",
		Short: "what a run will cost, and what it can promise",
		Long: `plan reads the table, fits a few draws and says what all of them will take: wall
time by number of workers, peak memory, disk, the work that is lost if the run is
killed, and into how many parts it is worth dividing. It ends with the error
budget: threshold, selected, all three bounds. With --no-fit nothing but the
table's shape is read: memory follows from it, wall time is not known.`,
		Example: "  holdfast plan demo/study.toml",
		Args:    exactly("STUDY"),
	}
	f := c.Flags()
	q.addFlags(f)
	f.BoolVar(&o.noFit, "no-fit", false, "read the table's shape only, and fit nothing")
	f.IntVar(&o.workers, "workers", 0, "fits at a time; 0: as many as the machine lets this process use")
	f.IntVar(&o.parts, "parts", 0, "parts to plan for; 0: recommend a number")
	f.Var(&o.memory, "memory", "most memory that a process may take, such as 8G")
	f.BoolVar(&o.asJSON, "json", false, "print JSON")
	c.RunE = func(c *cobra.Command, args []string) error {
		q.path = args[0]
		for name, n := range map[string]int{"workers": o.workers, "parts": o.parts} {
			if c.Flags().Changed(name) && n < 1 {
				return misuse(fmt.Sprintf("holdfast plan: --%s %d: must be at least 1", name, n), "leave it out to have it chosen")
			}
		}
		f, err := p.plan(c.Context(), q, o)
		if err != nil {
			return err
		}
		if o.asJSON {
			return p.writeJSON(f.document())
		}
		return p.printForecast(f)
	}
	return c
}

// foreseen is what `plan` found out.
type foreseen struct {
	options    planOptions
	rows       int
	candidates int
	number     int // draws
	design     resample.Design
	decision   selection.Decision
	budget     *selection.Budget // nil: bootstrap draws, which have no bound
	memory     footprint
	workers    int // within the memory
	block      int // draws that a worker fits together
	sizing     resample.Sizing

	// What follows is known only where draws were fitted.
	timing *forecast.Timing
	fixed  time.Duration // reading, checking and measuring the table
	disk   int64         // bytes of the run directory
	before int64         // most memory that this process took before it fitted
	peak   int64         // and while it fitted
}

// plan finds out what a run takes.
func (p *program) plan(ctx context.Context, q question, o planOptions) (*foreseen, error) {
	if o.workers == 0 {
		o.workers = resample.Workers()
	}
	start := time.Now()
	a, err := q.open(ctx)
	if err != nil {
		return nil, err
	}
	if o.noFit {
		p.tellDraft(a)
		if a.study.Outcome.Kind == study.Classes {
			fmt.Fprintf(p.err, "how many classes there are is not known without reading: memory is for %d\n", unreadClasses)
		}
		return a.foreseeShape(o)
	}
	l, err := a.load(ctx, o.workers)
	if err != nil {
		return nil, err
	}
	p.tell(l)
	s, err := l.settle()
	if err != nil {
		return nil, err
	}
	model, err := p.ready(ctx, s)
	if err != nil {
		return nil, err
	}
	return s.foresee(ctx, model, o, time.Since(start))
}

// foreseeShape says what the shape of the table alone tells. Columns that turn
// out to be constant or copies still count, and so do rows that are dropped; how
// many levels a category has, and how many rows a stratum, is not known, so a
// category counts as one column and the rows as one stratum.
func (a *asked) foreseeShape(o planOptions) (*foreseen, error) {
	roles, err := a.study.Resolve(a.columns())
	if err != nil {
		return nil, wrong(err, "")
	}
	rows, known := a.source.Rows()
	if !known {
		return nil, misuse("holdfast plan: "+a.source.Path()+" does not say how many rows it has", "leave out --no-fit")
	}
	plan, err := resample.NewPlan(resample.Plan{Rows: int(rows), Design: drawDesign(a.study), Number: a.study.Draws.Number, Seed: a.study.Draws.Seed})
	if err != nil {
		return nil, wrong(err, "")
	}
	final, decision, err := a.study.Settle(len(roles.Predictors), plan.Half(), len(roles.Always))
	if err != nil {
		return nil, wrong(err, "")
	}
	shape := solver.Shape{
		Rows: int(rows), DrawRows: drawRows(plan), Candidates: len(roles.Predictors), Always: len(roles.Always),
		Steps: solver.Steps(final.Penalty.Ratio, final.Penalty.Floor), StopAfter: final.Penalty.StopAfter, Mix: final.Penalty.Mix,
		Columns: len(roles.Candidates), Curved: final.Outcome.Kind != study.Number || len(roles.Groups)+len(roles.Categories) > 0,
	}
	if final.Outcome.Kind == study.Classes {
		shape.Classes = unreadClasses
	}
	return newForeseen(o, plan, decision, footprint{
		table: tableBytes(int(rows), len(roles.Candidates)+len(roles.Always), vectors(a.study)),
		shape: shape, draws: plan.Number,
	})
}

// unreadClasses is the number of classes that is planned for where the outcome
// is not read.
const unreadClasses = 3

// drawDesign is the study's way of drawing in the words of package resample.
func drawDesign(s *study.Study) resample.Design {
	if s.Draws.Design == study.Bootstrap {
		return resample.Bootstrap
	}
	return resample.Halves
}

// drawRows is how many different rows a draw has: half of them, or for a
// bootstrap draw about 1 - 1/e of them.
func drawRows(p resample.Plan) int {
	if p.Design == resample.Bootstrap {
		return int(0.6322*float64(p.Units())) + 1
	}
	return p.Half()
}

// foresee times draws of a table that is in memory.
func (s *settled) foresee(ctx context.Context, model *solver.Model, o planOptions, fixed time.Duration) (*foreseen, error) {
	f, err := newForeseen(o, s.plan, s.decision, s.footprint(model))
	if err != nil {
		return nil, err
	}
	f.fixed = fixed
	boundMemory(memoryLimit(o.memory), f.memory.table)
	_, f.before = memoryNow()
	f.timing, err = forecast.Time(ctx, s.plan, model, forecast.Options{
		Workers: f.workers, Block: f.sizing.Block, Limit: timingLimit,
	})
	if err != nil {
		return nil, err
	}
	_, f.peak = memoryNow()
	f.disk, err = s.diskOf(model, f.timing.Paths, f.timing.Block)
	return f, err
}

// footprint is what a run of a loaded table holds in memory.
func (s *settled) footprint(model *solver.Model) footprint {
	return footprint{
		table: tableBytes(s.rows(), len(s.data.Names), vectors(s.study)),
		shape: model.Shape(drawRows(s.plan)), draws: s.plan.Number,
	}
}

// timingLimit is how long fitting draws for the plan may take, unless a single
// pair takes longer.
const timingLimit = 30 * time.Second

// newForeseen is what follows from shape and decision.
func newForeseen(o planOptions, plan resample.Plan, d selection.Decision, memory footprint) (*foreseen, error) {
	f := &foreseen{
		options: o, rows: plan.Rows, candidates: memory.shape.Candidates, number: plan.Number, design: plan.Design,
		decision: d, memory: memory,
	}
	var err error
	if f.workers, f.block, err = memory.fit(memoryLimit(o.memory), o.workers); err != nil {
		return nil, wrong(fmt.Errorf("holdfast: %w", err), "allow more memory, or take fewer columns")
	}
	f.sizing = resample.Sizing{Design: plan.Design, Draws: f.partDraws(), Workers: f.workers, Limit: f.block}
	if plan.Design == resample.Bootstrap {
		return f, nil
	}
	selected := float64(d.Selected)
	f.budget, err = selection.SolveBudget(selection.Request{
		Candidates: f.candidates, Draws: f.number, Threshold: &d.Threshold, Selected: &selected,
	})
	return f, wrong(err, "")
}

// parts is the number of parts planned for.
func (f *foreseen) parts() int {
	if f.options.parts > 0 || f.timing == nil {
		return max(1, f.options.parts)
	}
	return forecast.Parts(f.timing.Wall(f.number, f.workers), f.fixed, f.number/f.unit())
}

// partDraws is how many draws the largest part has, as far as the number of
// parts was given.
func (f *foreseen) partDraws() int {
	units := f.number / f.unit()
	parts := max(1, f.options.parts)
	return (units + parts - 1) / parts * f.unit()
}

// unit is the draws that go together.
func (f *foreseen) unit() int {
	if f.design == resample.Halves {
		return 2
	}
	return 1
}

// wall is what the largest of so many parts takes with so many workers, the
// reading of the table with it; false where it is not known.
func (f *foreseen) wall(parts, workers int) (time.Duration, bool) {
	if f.timing == nil {
		return 0, false
	}
	units := f.number / f.unit()
	return f.fixed + f.timing.Wall((units+parts-1)/parts*f.unit(), workers), true
}

// risk is the work of each worker that is lost where the process is killed at
// the worst moment.
func (f *foreseen) risk() (time.Duration, bool) {
	if f.timing == nil {
		return 0, false
	}
	return f.sizing.AtRisk(f.timing.PerDraw(f.workers)), true
}

// peakMemory is the most that a process takes with so many workers: what
// follows from the shape, at least what reading the table took, and what fitting
// took where so many were timed.
func (f *foreseen) peakMemory(workers int) int64 {
	block := f.block
	if f.timing != nil {
		sizing := f.sizing
		sizing.Workers = workers
		block = min(block, sizing.Block(f.timing.PerDraw(workers)))
	} else {
		block = min(block, resample.BlockSize(f.sizing.Draws, workers, block))
	}
	peak := max(f.memory.peak(workers, block), f.before)
	if f.timing != nil && f.timing.Busiest().Workers == workers {
		peak = max(peak, f.peak)
	}
	if limit := memoryLimit(f.options.memory); limit > 0 {
		peak = min(peak, limit)
	}
	return peak
}

// diskOf measures what the run directory will take: the draws that were fitted
// are written into one that is thrown away.
func (s *settled) diskOf(model *solver.Model, paths []solver.Path, block int) (int64, error) {
	folder, err := os.MkdirTemp("", "holdfast-plan-")
	if err != nil {
		return 0, err
	}
	defer os.RemoveAll(folder)
	dir, err := s.makeDir(filepath.Join(folder, "run"), model, 1)
	if err != nil {
		return 0, err
	}
	kept, err := folderSize(folder)
	if err != nil {
		return 0, err
	}
	paths = paths[:min(len(paths), s.plan.Number)]
	for first := 0; first < len(paths); first += block {
		last := min(first+block, len(paths))
		draws := make([]int, last-first)
		for i := range draws {
			draws[i] = first + i
		}
		if err := dir.Put(draws, paths[first:last]); err != nil {
			return 0, err
		}
	}
	written, err := folderSize(folder)
	if err != nil {
		return 0, err
	}
	return kept + (written-kept)*int64(s.plan.Number)/int64(len(paths)) + tablesPerCandidate*int64(len(s.fitted)), nil
}

// tablesPerCandidate is what the tables of a run directory take for one
// candidate, roughly.
const tablesPerCandidate = 160

// folderSize adds the sizes of all files below a folder.
func folderSize(folder string) (sum int64, err error) {
	err = filepath.WalkDir(folder, func(_ string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		info, err := d.Info()
		if err == nil {
			sum += info.Size()
		}
		return err
	})
	return sum, err
}
