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
	Fits       int          `json:"fits"`
	Unreached  int          `json:"unreached"`
	Failed     int          `json:"not_certified"`
	Redraws    int          `json:"redraws"`
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

// result holds all runs of one case; the maps are by number of workers, that of
// the peer is empty where the case has none.
type result struct {
	of    benchCase
	ours  map[int][]ours
	peer  map[int][]peer
	check check
	share float64 // of our CPU time spent in package kernel
}

// check says how far the two sides select the same predictors.
type check struct {
	ours      ours
	draws     int
	entries   int     // of our side in those draws
	different int     // entries on one side only, with the loop's settings as timed
	tight     int     // the same with the tight ones
	tried     [2]bool // which settings were tried
}

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
			line, err := s.timed(c, workers, &r)
			if err != nil {
				return r, err
			}
			line["round"] = round
			if err := log.Encode(line); err != nil {
				return r, err
			}
		}
	}
	return r, nil
}

// timed runs our engine once and then the loop, if there is one, and returns
// what is kept of both.
func (s settings) timed(c benchCase, workers int, r *result) (map[string]any, error) {
	line := map[string]any{"case": c.String(), "workers": workers}
	o, err := s.runOurs(c, workers)
	if err != nil {
		return nil, err
	}
	r.ours[workers] = append(r.ours[workers], o)
	line["ours"] = o
	l, ok := c.loop()
	if !ok {
		return line, nil
	}
	p, err := s.runPeer(c, workers, r.check.ours.LambdaMax, l.timed)
	if err != nil {
		return nil, err
	}
	r.peer[workers] = append(r.peer[workers], p)
	line["peer"] = p
	return line, nil
}

// check compares entries over the draws that the loop makes. Where the loop's
// settings leave differences, it is asked again with tight ones.
func (s settings) check(c benchCase) (check, error) {
	k := check{draws: s.peerDraws}
	var err error
	k.ours, err = s.runOurs(c, 1, "-entries", "-cpuprofile", filepath.Join(s.dir, "cpu.pprof"))
	if err != nil {
		return k, err
	}
	if k.ours.Redraws > 0 {
		return k, fmt.Errorf("%d draws were made anew: the rows written for the loop are not those fitted", k.ours.Redraws)
	}
	for _, of := range k.ours.Entries[:s.peerDraws] {
		k.entries += len(of)
	}
	l, ok := c.loop()
	if !ok {
		return k, nil
	}
	for i, settings := range []settingsOfLoop{l.timed, l.tight} {
		p, err := s.runPeer(c, 2, k.ours.LambdaMax, settings, "--entries")
		if err != nil {
			return k, err
		}
		k.tried[i] = true
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
		"-seed", strconv.FormatUint(s.seed, 10), "-ratio", number(c.ratio), "-floor", number(c.floor),
	}, more...)
	var o ours
	return o, child(&o, s.engine(), args)
}

func (s settings) runPeer(c benchCase, workers int, lambdaMax float64, how settingsOfLoop, more ...string) (peer, error) {
	l, _ := c.loop()
	args := append([]string{
		filepath.Join("bench", "peer", "loop.py"), s.dir, c.shape.Name, "--solver", l.solver, "--draws", strconv.Itoa(s.peerDraws),
		"--workers", strconv.Itoa(workers), "--ratio", number(c.ratio), "--floor", number(c.floor), "--lambda-max", number(lambdaMax),
	}, append(how.args(), more...)...)
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
