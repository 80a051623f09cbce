package main

import (
	"encoding/json"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
)

// ours is what bench/engine prints.
type ours struct {
	ModelTime  float64      `json:"model_seconds"`
	PerDraw    float64      `json:"seconds_per_draw"`
	CPU        float64      `json:"cpu_seconds_per_draw"`
	PeakMemory int64        `json:"peak_bytes"`
	LambdaMax  float64      `json:"lambda_max"`
	Steps      int          `json:"steps"`
	Kernel     string       `json:"kernel"`
	Violation  float64      `json:"violation"`
	Gap        float64      `json:"gap"`
	Failed     int          `json:"not_certified"`
	Borderline int          `json:"borderline"`
	Entries    [][][2]int32 `json:"entries,omitempty"`
}

// peer is what bench/peer/loop.py prints.
type peer struct {
	PerDraw      float64      `json:"seconds_per_draw"`
	CPU          float64      `json:"cpu_seconds_per_draw"`
	Prepare      float64      `json:"prepare_seconds_per_draw"`
	Path         float64      `json:"path_seconds_per_draw"`
	PeakMemory   int64        `json:"peak_bytes"`
	NotConverged int          `json:"not_converged"`
	Versions     string       `json:"versions"`
	Entries      [][][2]int32 `json:"entries,omitempty"`
}

// result holds all runs of one case; the maps are by number of workers.
type result struct {
	of    benchCase
	ours  map[int][]ours
	peer  map[int][]peer
	check check
	share float64 // of our CPU time spent in package kernel
}

// check says how far the two sides select the same predictors.
type check struct {
	ours       ours
	draws      int
	entries    int     // of our side in those draws
	different  int     // entries on one side only, at the loop's tolerance
	tight      int     // the same at the tight tolerance
	tolerances [2]bool // which tolerances were tried
}

// Tolerances of the scikit-learn loop: as timed, and for settling differences.
const (
	timedTolerance = 1e-7
	tightTolerance = 1e-13
)

// allWorkers are the numbers of workers that are timed, in this order.
var allWorkers = []int{1, 2}

// compare checks selections, takes a profile and then times both sides.
func (s settings) compare(c benchCase, log *json.Encoder) (result, error) {
	r := result{of: c, ours: map[int][]ours{}, peer: map[int][]peer{}}
	var err error
	if r.check, err = s.check(c); err != nil {
		return r, err
	}
	if r.share, err = s.kernelShare(filepath.Join(s.dir, "cpu.pprof")); err != nil {
		return r, err
	}
	for round := range s.rounds {
		fmt.Fprintf(os.Stderr, "%v: round %d of %d\n", c, round+1, s.rounds)
		for _, workers := range allWorkers {
			o, err := s.runOurs(c, workers)
			if err != nil {
				return r, err
			}
			p, err := s.runPeer(c, workers, r.check.ours.LambdaMax, timedTolerance)
			if err != nil {
				return r, err
			}
			r.ours[workers] = append(r.ours[workers], o)
			r.peer[workers] = append(r.peer[workers], p)
			line := map[string]any{"case": c.String(), "round": round, "workers": workers, "ours": o, "peer": p}
			if err := log.Encode(line); err != nil {
				return r, err
			}
		}
	}
	return r, nil
}

// check compares entries over the draws that the loop makes. Where the loop's
// tolerance leaves differences, it is asked again with a tight one.
func (s settings) check(c benchCase) (check, error) {
	k := check{draws: s.peerDraws}
	var err error
	k.ours, err = s.runOurs(c, 1, "-entries", "-cpuprofile", filepath.Join(s.dir, "cpu.pprof"))
	if err != nil {
		return k, err
	}
	for _, of := range k.ours.Entries[:s.peerDraws] {
		k.entries += len(of)
	}
	for i, tolerance := range []float64{timedTolerance, tightTolerance} {
		p, err := s.runPeer(c, 2, k.ours.LambdaMax, tolerance, "--entries")
		if err != nil {
			return k, err
		}
		k.tolerances[i] = true
		*[]*int{&k.different, &k.tight}[i] = differences(k.ours.Entries, p.Entries)
		if k.different == 0 {
			break
		}
	}
	return k, nil
}

// differences counts the entries that only one side has.
func differences(a, b [][][2]int32) int {
	n := 0
	for d := range min(len(a), len(b)) {
		for _, e := range a[d] {
			if !slices.Contains(b[d], e) {
				n++
			}
		}
		for _, e := range b[d] {
			if !slices.Contains(a[d], e) {
				n++
			}
		}
	}
	return n
}

func (s settings) runOurs(c benchCase, workers int, more ...string) (ours, error) {
	args := append([]string{
		"-shape", c.shape.Name, "-dir", s.dir, "-draws", strconv.Itoa(s.draws), "-workers", strconv.Itoa(workers),
		"-seed", strconv.FormatUint(s.seed, 10), "-ratio", number(s.ratio), "-floor", number(c.floor),
	}, more...)
	var o ours
	return o, child(&o, s.engine(), args)
}

func (s settings) runPeer(c benchCase, workers int, lambdaMax, tolerance float64, more ...string) (peer, error) {
	args := append([]string{
		filepath.Join("bench", "peer", "loop.py"), s.dir, c.shape.Name, "--draws", strconv.Itoa(s.peerDraws), "--workers", strconv.Itoa(workers),
		"--ratio", number(s.ratio), "--floor", number(c.floor), "--lambda-max", number(lambdaMax), "--tolerance", number(tolerance),
	}, more...)
	var p peer
	return p, child(&p, s.python, args)
}

func number(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }

// child runs a program and reads the JSON it prints.
func child(into any, program string, args []string) error {
	cmd := exec.Command(program, args...)
	cmd.Stderr = os.Stderr
	// One thread for the peer's linear algebra: its processes are what is counted.
	cmd.Env = append(os.Environ(), "OPENBLAS_NUM_THREADS=1", "OMP_NUM_THREADS=1")
	text, err := cmd.Output()
	if err != nil {
		return fmt.Errorf("%s: %w", program, err)
	}
	if err := json.Unmarshal(text, into); err != nil {
		return fmt.Errorf("%s: %w", program, err)
	}
	return nil
}
