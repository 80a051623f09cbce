package main

import (
	"fmt"
	"math"
	"slices"
	"text/tabwriter"
	"time"

	"holdfast/selection"
)

// workerCounts are the numbers of workers that a plan lists: powers of two up
// to twice those it plans for, and these.
func (f *foreseen) workerCounts() []int {
	var counts []int
	for w := 1; w <= max(8, 2*f.workers); w *= 2 {
		counts = append(counts, w)
	}
	if !slices.Contains(counts, f.workers) {
		counts = append(counts, f.workers)
		slices.Sort(counts)
	}
	return counts
}

// printForecast prints a plan for people.
func (p *program) printForecast(f *foreseen) error {
	fmt.Fprintf(p.out, "%d rows, %d candidates, %d draws (%s)\n\n", f.rows, f.candidates, f.number, f.design)
	if err := p.printCosts(f); err != nil {
		return err
	}
	p.printCondition(f)
	fmt.Fprintf(p.out, "\nwhat it can promise: %s\n", inWords(f.decision))
	for _, n := range f.decision.Notes {
		fmt.Fprintln(p.out, "  "+oneLine(n))
	}
	if f.budget == nil {
		fmt.Fprintf(p.out, "bootstrap draws have no bound on false selections; at most %d predictors can be stable\n", f.mostStable())
		return nil
	}
	fmt.Fprintf(p.out, "at most %d predictors can be stable\n\n", f.mostStable())
	return p.printBudget(f.budget)
}

// printCosts prints time, memory, disk, work at risk and parts.
func (p *program) printCosts(f *foreseen) error {
	w := tabwriter.NewWriter(p.out, 0, 0, 3, ' ', 0)
	fmt.Fprintln(w, "workers\twall time\tpeak memory\t")
	for _, n := range f.workerCounts() {
		wall, note := "unknown", ""
		if t, known := f.wall(max(1, f.options.parts), n); known {
			wall = durationText(t)
			if !f.timing.Measured(n) {
				note = "not timed: as if so many processors were free"
			}
		}
		fmt.Fprintf(w, "%d\t%s\t%s\t%s\n", n, wall, sizeText(f.peakMemory(n)), note)
	}
	if err := w.Flush(); err != nil {
		return err
	}
	fmt.Fprintln(p.out)
	if f.workers < f.options.workers {
		fmt.Fprintf(p.out, "the memory that may be taken allows %d of %d workers\n", f.workers, f.options.workers)
	}
	if f.options.parts > 1 {
		fmt.Fprintf(p.out, "each of %d parts, on a machine of its own; all figures are for one of them\n", f.options.parts)
	}
	if risk, known := f.risk(); known {
		fmt.Fprintf(p.out, "work at risk if killed: at most %s of each of %d workers\n", durationText(risk), f.workers)
		fmt.Fprintf(p.out, "disk: %s\n", sizeText(f.disk))
		fmt.Fprintf(p.out, "%s\n", f.partsAdvice())
		return nil
	}
	fmt.Fprintln(p.out, "wall time, disk, work at risk and parts are not known without fitting: leave out --no-fit")
	return nil
}

// partsAdvice says into how many parts the run is worth dividing.
func (f *foreseen) partsAdvice() string {
	if f.options.parts > 0 {
		return fmt.Sprintf("reading and checking the table: %s, once for each part", durationText(f.fixed))
	}
	n := f.parts()
	if n == 1 {
		return fmt.Sprintf("parts: 1 is best: each part reads and checks the table first, which takes %s", durationText(f.fixed))
	}
	wall, _ := f.wall(n, f.workers)
	return fmt.Sprintf("parts: %d machines would take %s each, the table read by each of them (%s)", n, durationText(wall), durationText(f.fixed))
}

// printCondition says how the times were come by.
func (p *program) printCondition(f *foreseen) {
	if f.timing == nil {
		return
	}
	r := f.timing.Busiest()
	fmt.Fprintf(p.out, "timed on %d draws, %d at a time, %s for one\n", len(f.timing.Paths), r.Workers, durationText(r.PerDraw()))
	if share := r.Share(); share < busyShare {
		fmt.Fprintf(p.out, "the machine was busy with other work: the fits had %.0f %% of the time, and would take %s for a draw on an idle one\n",
			100*share, durationText(time.Duration(float64(r.PerDraw())*share)))
	}
}

// busyShare is the share of the time below which other work is worth a line.
const busyShare = 0.85

// mostStable is how many predictors can be stable at most: draws times
// selected choices, need of them for each.
func (f *foreseen) mostStable() int {
	need, err := selection.Need(f.decision.Threshold, f.number)
	if err != nil {
		return 0
	}
	return min(f.candidates, f.decision.Selected*f.number/need)
}

// durationText writes a time for people, in three digits at most.
func durationText(d time.Duration) string {
	switch s := d.Seconds(); {
	case s < 0.9995:
		return fmt.Sprintf("%.3g ms", math.Max(s*1e3, 0.001))
	case s < 99.95:
		return fmt.Sprintf("%.3g s", s)
	case s < 99.5*60:
		return fmt.Sprintf("%.0f min", s/60)
	default:
		return fmt.Sprintf("%.3g h", s/3600)
	}
}

// forecastDocument is `plan --json`. What is not known is null.
type forecastDocument struct {
	Rows       int             `json:"rows"`
	Candidates int             `json:"candidates"`
	Draws      int             `json:"draws"`
	Design     string          `json:"design"`
	Workers    int             `json:"workers"`
	Block      int             `json:"block"`
	Wall       []forecastWall  `json:"wall"`
	Memory     int64           `json:"memory_bytes"`
	Disk       *int64          `json:"disk_bytes"`
	Risk       *float64        `json:"risk_seconds"`
	Parts      *int            `json:"parts"`
	Fixed      *float64        `json:"fixed_seconds"` // paid by every part
	Timing     *forecastTiming `json:"timing"`
	Decision   forecastPromise `json:"decision"`
}

// forecastWall is the wall time of the run, or of its largest part where parts
// were given.
type forecastWall struct {
	Workers int      `json:"workers"`
	Seconds *float64 `json:"seconds"`
	Timed   bool     `json:"timed"`
	Memory  int64    `json:"memory_bytes"`
}

// forecastTiming is what was measured.
type forecastTiming struct {
	Draws     int     `json:"draws"`
	Workers   int     `json:"workers"`
	PerDraw   float64 `json:"seconds_per_draw"` // of one of these workers
	Processor float64 `json:"processor_seconds_per_draw"`
	Memory    int64   `json:"memory_bytes"` // the most that this process took
}

// forecastPromise is the error budget.
type forecastPromise struct {
	Threshold       float64           `json:"threshold"`
	Selected        int               `json:"selected"`
	FalseSelections *float64          `json:"false_selections"`
	Bound           string            `json:"bound"`
	Region          string            `json:"region"`
	Need            *int              `json:"need"`
	MostStable      int               `json:"most_stable"`
	Bounds          *selection.Bounds `json:"bounds"`
}

// document is the plan for programs.
func (f *foreseen) document() forecastDocument {
	d := forecastDocument{
		Rows: f.rows, Candidates: f.candidates, Draws: f.number, Design: f.design.String(),
		Workers: f.workers, Block: f.block, Memory: f.peakMemory(f.workers), Decision: f.promise(),
	}
	for _, n := range f.workerCounts() {
		w := forecastWall{Workers: n, Memory: f.peakMemory(n)}
		if t, known := f.wall(max(1, f.options.parts), n); known {
			w.Seconds, w.Timed = seconds(t), f.timing.Measured(n)
		}
		d.Wall = append(d.Wall, w)
	}
	if f.timing == nil {
		return d
	}
	risk, _ := f.risk()
	parts := f.parts()
	d.Disk, d.Risk, d.Parts, d.Fixed = &f.disk, seconds(risk), &parts, seconds(f.fixed)
	r := f.timing.Busiest()
	d.Timing = &forecastTiming{
		Draws: len(f.timing.Paths), Workers: r.Workers, PerDraw: r.PerDraw().Seconds(),
		Processor: r.Processor.Seconds() / float64(r.Draws), Memory: f.peak,
	}
	return d
}

func (f *foreseen) promise() forecastPromise {
	p := forecastPromise{
		Threshold: f.decision.Threshold, Selected: f.decision.Selected, FalseSelections: f.decision.FalseSelections,
		Bound: f.decision.Bound.String(), Region: f.decision.Region.String(), MostStable: f.mostStable(),
	}
	if need, err := selection.Need(f.decision.Threshold, f.number); err == nil {
		p.Need = &need
	}
	if f.budget != nil {
		p.Bounds = &f.budget.Bounds
	} else {
		p.Bound = ""
	}
	return p
}

func seconds(d time.Duration) *float64 {
	s := d.Seconds()
	return &s
}
