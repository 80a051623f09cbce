package main

import (
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"

	"holdfast/bench/shape"
	"holdfast/solver"
)

// settings are the command's flags.
type settings struct {
	cases            []benchCase
	rounds           int
	draws, peerDraws int
	seed             uint64
	ratio            float64
	dir, python      string
}

// benchCase is one table down to one floor.
type benchCase struct {
	shape shape.Shape
	floor float64
	ratio float64
}

// loop is how the scikit-learn loop fits: with which solver, with which settings
// it is timed, and with which differences are settled.
type loop struct {
	solver       string
	timed, tight settingsOfLoop
}

// settingsOfLoop are arguments of bench/peer/loop.py.
type settingsOfLoop struct{ tolerance, scaling, iterations string }

// loops are the kinds of outcome that have one. The others are timed alone.
// liblinear's scaling is how nearly the intercept is free: the gradient it leaves
// is 1/scaling of lambda. With 100,000 its stopping rule, which sees that gradient
// times the scaling, is never met, though the fit is good to 1e-10 of lambda after
// 60 iterations.
var loops = map[solver.Family]loop{
	solver.Gaussian: {"lasso_path", settingsOfLoop{tolerance: "1e-7"}, settingsOfLoop{tolerance: "1e-13"}},
	solver.Binomial: {"liblinear", settingsOfLoop{"1e-6", "1000", "1000"}, settingsOfLoop{"1e-9", "100000", "60"}},
}

// args are the settings for the command line.
func (s settingsOfLoop) args() []string {
	args := []string{"--tolerance", s.tolerance}
	if s.scaling != "" {
		args = append(args, "--intercept-scaling", s.scaling, "--iterations", s.iterations)
	}
	return args
}

// String is the settings for the report.
func (s settingsOfLoop) String() string {
	if s.scaling == "" {
		return "tolerance " + s.tolerance
	}
	return fmt.Sprintf("tolerance %s, intercept scaling %s", s.tolerance, s.scaling)
}

// loop returns the case's loop; ok is false where our engine is timed alone.
func (c benchCase) loop() (l loop, ok bool) {
	l, ok = loops[c.shape.Family]
	return l, ok
}

func (c benchCase) String() string {
	return fmt.Sprintf("%s %d x %d to %g", c.shape.Name, c.shape.Rows, c.shape.Cols, c.floor)
}

func main() {
	if err := run(); err != nil {
		fmt.Fprintln(os.Stderr, "sidebyside:", err)
		os.Exit(1)
	}
}

func run() error {
	s, err := parse()
	if err != nil {
		return err
	}
	if err := s.prepare(); err != nil {
		return err
	}
	raw, err := os.Create(filepath.Join(s.dir, "runs.jsonl"))
	if err != nil {
		return err
	}
	defer raw.Close()
	log := json.NewEncoder(raw)
	var done []result
	for _, c := range s.cases {
		r, err := s.compare(c, log)
		if err != nil {
			return fmt.Errorf("%v: %w", c, err)
		}
		done = append(done, r)
	}
	return summarise(os.Stdout, s, done)
}

func parse() (settings, error) {
	var s settings
	cases := flag.String("cases", "wide:0.3,wide:0.1,tall:0.1,long:0.1,logit:0.2,survival:0.2,count:0.2,classes:0.2", "shapes and floors")
	flag.IntVar(&s.rounds, "rounds", 10, "interleaved rounds of timed runs")
	flag.IntVar(&s.draws, "draws", 64, "draws that our engine makes in a run")
	flag.IntVar(&s.peerDraws, "peer-draws", 8, "draws that the scikit-learn loop makes in a run")
	flag.Uint64Var(&s.seed, "seed", 1, "seed of tables and draws")
	flag.Float64Var(&s.ratio, "ratio", 0.954, "lambda from step to step, of shapes without a number of lambdas")
	flag.StringVar(&s.dir, "dir", "bench/out", "folder for tables, programs and raw results")
	flag.StringVar(&s.python, "python", "/usr/bin/python3", "Python that has scikit-learn (Debian: python3-sklearn)")
	flag.Parse()
	if s.rounds < 1 || s.draws < 2 || s.draws%2 != 0 || s.peerDraws < 2 || s.peerDraws > s.draws {
		return s, errors.New("rounds must be at least 1, draws even, and peer-draws from 2 to draws")
	}
	for word := range strings.SplitSeq(*cases, ",") {
		name, floor, _ := strings.Cut(word, ":")
		sh, err := shape.Find(name)
		if err != nil {
			return s, err
		}
		f, err := strconv.ParseFloat(floor, 64)
		if err != nil {
			return s, fmt.Errorf("case %q: write shape:floor, as in wide:0.3", word)
		}
		s.cases = append(s.cases, benchCase{sh, f, sh.Ratio(f, s.ratio)})
	}
	return s, nil
}

// prepare builds the engine and makes the tables that are not there yet.
func (s settings) prepare() error {
	if err := os.MkdirAll(s.dir, 0o755); err != nil {
		return err
	}
	build := exec.Command("go", "build", "-o", s.engine(), "./bench/engine")
	build.Stderr = os.Stderr
	if err := build.Run(); err != nil {
		return fmt.Errorf("building the engine (start this in the repository's root): %w", err)
	}
	for _, c := range s.cases {
		if err := c.shape.Keep(s.dir, s.seed); err != nil {
			return err
		}
		if err := c.shape.KeepDraws(s.dir, s.draws, s.seed); err != nil {
			return err
		}
	}
	return nil
}

func (s settings) engine() string { return filepath.Join(s.dir, "engine") }
