// Command engine is one timed run of our engine for the side-by-side
// comparison: it reads a table of bench/shape, fits all draws with the given
// number of workers and prints what it took as JSON. It is started afresh for
// every run, so that peak memory is that of one run.
package main

import (
	"context"
	"encoding/json"
	"flag"
	"fmt"
	"os"
	"runtime/debug"
	"runtime/pprof"
	"time"

	"holdfast/bench/shape"
	"holdfast/resample"
	"holdfast/solver"
)

// settings are the command's flags.
type settings struct {
	shape          shape.Shape
	dir            string
	draws, workers int
	seed           uint64
	ratio, floor   float64
	profile        string
	entries        bool
}

// report is printed as JSON.
type report struct {
	Workers    int          `json:"workers"`
	Draws      int          `json:"draws"`
	ReadTime   float64      `json:"read_seconds"`
	ModelTime  float64      `json:"model_seconds"`
	FitTime    float64      `json:"fit_seconds"`
	PerDraw    float64      `json:"seconds_per_draw"`
	CPUPerDraw float64      `json:"cpu_seconds_per_draw"` // all workers together
	PeakMemory int64        `json:"peak_bytes"`
	LambdaMax  float64      `json:"lambda_max"`
	Steps      int          `json:"steps"`
	Kernel     string       `json:"kernel"`
	Violation  float64      `json:"violation"`
	Gap        float64      `json:"gap"`
	Fits       int          `json:"fits"`      // certified
	Unreached  int          `json:"unreached"` // from the one that could not be certified down to the floor
	Failed     int          `json:"not_certified"`
	Redraws    int          `json:"redraws"`
	Borderline int          `json:"borderline"`
	Entries    [][][2]int32 `json:"entries,omitempty"` // per draw: column, step
}

func main() {
	if err := run(); err != nil {
		fmt.Fprintln(os.Stderr, "engine:", err)
		os.Exit(1)
	}
}

func run() error {
	s, err := parse()
	if err != nil {
		return err
	}
	r, err := s.measure()
	if err != nil {
		return err
	}
	return json.NewEncoder(os.Stdout).Encode(r)
}

func parse() (settings, error) {
	var s settings
	name := flag.String("shape", "wide", "table: a name of bench/shape")
	flag.StringVar(&s.dir, "dir", "bench/out", "folder of the tables")
	flag.IntVar(&s.draws, "draws", 64, "number of draws")
	flag.IntVar(&s.workers, "workers", 1, "workers")
	flag.Uint64Var(&s.seed, "seed", 1, "seed of the draws")
	flag.Float64Var(&s.ratio, "ratio", 0.954, "lambda from step to step")
	flag.Float64Var(&s.floor, "floor", 0.1, "last lambda as a share of lambda_max")
	flag.StringVar(&s.profile, "cpuprofile", "", "file for a CPU profile of the fits")
	flag.BoolVar(&s.entries, "entries", false, "print the entries of every draw")
	flag.Parse()
	var err error
	s.shape, err = shape.Find(*name)
	return s, err
}

// garbage is what may pile up beside the table before the collector runs, as
// in cmd/holdfast.
const garbage = 128 << 20

func (s settings) measure() (*report, error) {
	r := &report{Workers: s.workers, Draws: s.draws, Kernel: solver.Kernel()}
	start := time.Now()
	table, err := s.shape.Read(s.dir)
	if err != nil {
		return nil, err
	}
	problem := s.shape.Problem(table, s.ratio, s.floor)
	r.ReadTime = lap(&start)
	model, err := solver.NewModel(context.Background(), problem)
	if err != nil {
		return nil, err
	}
	r.ModelTime = lap(&start)
	debug.SetGCPercent(int(min(100, max(100*garbage/int64(8*s.shape.Rows*s.shape.Cols), 2))))
	before := shape.CPUTime()
	paths, err := s.fit(table, model)
	if err != nil {
		return nil, err
	}
	r.FitTime, r.CPUPerDraw = lap(&start), (shape.CPUTime()-before)/float64(s.draws)
	r.PerDraw = r.FitTime / float64(s.draws)
	r.LambdaMax, r.Steps = model.LambdaMax(), model.LastStep()+1
	r.describe(model, paths, s.entries)
	r.PeakMemory, err = shape.PeakMemory()
	return r, err
}

// lap returns the seconds since start and sets it to now.
func lap(start *time.Time) float64 {
	now := time.Now()
	d := now.Sub(*start).Seconds()
	*start = now
	return d
}

// fit makes and fits all draws as a run does, but keeps them in memory.
func (s settings) fit(table shape.Table, model *solver.Model) ([]solver.Path, error) {
	plan, err := s.shape.Plan(table, s.draws, s.seed)
	if err != nil {
		return nil, err
	}
	plan.Fit = model.Fittable
	if s.profile != "" {
		f, err := os.Create(s.profile)
		if err != nil {
			return nil, err
		}
		defer f.Close()
		if err := pprof.StartCPUProfile(f); err != nil {
			return nil, err
		}
		defer pprof.StopCPUProfile()
	}
	kept := memory{make([]solver.Path, s.draws)}
	err = resample.Run(context.Background(), plan, model, &kept, resample.Options{Workers: s.workers})
	return kept.paths, err
}

// memory is a sink that keeps the draws under their numbers.
type memory struct{ paths []solver.Path }

func (m *memory) Put(draws []int, paths []solver.Path) error {
	for i, d := range draws {
		m.paths[d] = paths[i]
	}
	return nil
}

// describe adds the certificates and, if asked for, the entries.
func (r *report) describe(model *solver.Model, paths []solver.Path, entries bool) {
	for _, p := range paths {
		r.Violation, r.Gap = max(r.Violation, p.Violation), max(r.Gap, p.Gap)
		r.Borderline += p.Borderline
		r.Redraws += p.Redraws
		r.Fits += p.Last - p.First + 1
		if p.Stop == solver.StopUncertified {
			r.Failed++
			r.Unreached += model.LastStep() - p.Last
		}
		if !entries {
			continue
		}
		of := [][2]int32{}
		for _, e := range p.Entries {
			of = append(of, [2]int32{e.Candidate, e.Step})
		}
		r.Entries = append(r.Entries, of)
	}
}
