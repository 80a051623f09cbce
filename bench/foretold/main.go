// Command foretold holds `holdfast plan` to what runs really take:
//
//	go build -o bench/out/holdfast ./cmd/holdfast
//	go run ./bench/foretold -program bench/out/holdfast >> bench/foretold/runs.csv
//
// For each table of bench/shape it writes a CSV table and a study with the
// defaults, and then, round by round, plans and runs it, each in a process of its
// own, and prints a line: what was foretold and what came. Wall time is that of
// the whole command, which other work on the machine stretches; processor time it
// cannot stretch by much. Peak memory and processor time are what the run's log
// says.
package main

import (
	"bufio"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"time"

	"holdfast/bench/shape"
	"holdfast/solver"
)

type settings struct {
	program, dir           string
	draws, workers, rounds int
}

func main() {
	var s settings
	names := flag.String("shapes", "wide,tall,long", "tables")
	flag.StringVar(&s.program, "program", "bench/out/holdfast", "the program")
	flag.StringVar(&s.dir, "dir", "bench/out", "folder for tables and runs")
	flag.IntVar(&s.draws, "draws", 64, "draws of a run")
	flag.IntVar(&s.workers, "workers", 2, "workers")
	flag.IntVar(&s.rounds, "rounds", 3, "plans and runs of each table")
	flag.Parse()
	if err := s.measure(strings.Split(*names, ",")); err != nil {
		fmt.Fprintln(os.Stderr, "foretold:", err)
		os.Exit(1)
	}
}

func (s settings) measure(names []string) error {
	fmt.Println("shape,draws,workers,wall_plan,wall_run,processor_plan,processor_run,memory_plan,memory_run,disk_plan,disk_run")
	for _, name := range names {
		sh, err := shape.Find(name)
		if err != nil {
			return err
		}
		if err := s.prepare(sh); err != nil {
			return err
		}
	}
	for range s.rounds {
		for _, name := range names {
			if err := s.round(name); err != nil {
				return err
			}
		}
	}
	return nil
}

// prepare writes table and study where they are not there yet.
func (s settings) prepare(sh shape.Shape) error {
	if sh.Family != solver.Gaussian {
		return fmt.Errorf("%s: its outcome is no number, and the study written here is for one", sh.Name)
	}
	study := fmt.Sprintf("[table]\npath = \"%s.csv\"\n[outcome]\ncolumn = \"y\"\n[draws]\nnumber = %d\n", sh.Name, s.draws)
	if err := os.WriteFile(s.in(sh.Name+".toml"), []byte(study), 0o644); err != nil {
		return err
	}
	if _, err := os.Stat(s.in(sh.Name + ".csv")); err == nil {
		return nil
	}
	f, err := os.Create(s.in(sh.Name + ".csv"))
	if err != nil {
		return err
	}
	w := bufio.NewWriterSize(f, 1<<20)
	t := sh.Make(1)
	for j := range t.Columns {
		fmt.Fprintf(w, "x%d,", j)
	}
	fmt.Fprintln(w, "y")
	var line []byte
	for i, y := range t.Outcome {
		line = line[:0]
		for _, c := range t.Columns {
			line = append(strconv.AppendFloat(line, c[i], 'g', 9, 64), ',')
		}
		line = append(strconv.AppendFloat(line, y, 'g', 9, 64), '\n')
		w.Write(line)
	}
	return errors.Join(w.Flush(), f.Close())
}

func (s settings) in(name string) string { return filepath.Join(s.dir, name) }

// plan is what is read of `plan --json`.
type plan struct {
	Wall []struct {
		Workers int     `json:"workers"`
		Seconds float64 `json:"seconds"`
	} `json:"wall"`
	Memory float64 `json:"memory_bytes"`
	Disk   float64 `json:"disk_bytes"`
	Timing struct {
		Draws     int     `json:"draws"`
		Processor float64 `json:"processor_seconds_per_draw"`
	} `json:"timing"`
}

func (s settings) round(name string) error {
	workers := strconv.Itoa(s.workers)
	planning := exec.Command(s.program, "plan", s.in(name+".toml"), "--json", "--workers", workers)
	text, err := planning.Output()
	if err != nil {
		return fmt.Errorf("plan of %s: %w", name, err)
	}
	var p plan
	if err := json.Unmarshal(text, &p); err != nil {
		return err
	}
	wall := 0.0
	for _, w := range p.Wall {
		if w.Workers == s.workers {
			wall = w.Seconds
		}
	}
	// What the plan itself took beside the draws that it timed is reading and
	// checking the table, which a run does too.
	used := (planning.ProcessState.UserTime() + planning.ProcessState.SystemTime()).Seconds()
	processorPlan := float64(s.draws-p.Timing.Draws)*p.Timing.Processor + used
	run := s.in(name + ".run")
	if err := os.RemoveAll(run); err != nil {
		return err
	}
	start := time.Now()
	if err := exec.Command(s.program, "run", s.in(name+".toml"), "--out", run, "--workers", workers).Run(); err != nil {
		return fmt.Errorf("run of %s: %w", name, err)
	}
	took := time.Since(start).Seconds()
	memory, processor, err := lastLine(filepath.Join(run, "logs", "part-0.log"))
	if err != nil {
		return err
	}
	disk, err := size(run)
	if err != nil {
		return err
	}
	fmt.Printf("%s,%d,%d,%.2f,%.2f,%.2f,%.2f,%.0f,%.0f,%.0f,%.0f\n", name, s.draws, s.workers,
		wall, took, processorPlan, processor, p.Memory, memory, p.Disk, disk)
	return nil
}

var endLine = regexp.MustCompile(`peak memory ([0-9.]+)([KMG]).*\(([0-9.]+) s of processor time`)

// lastLine reads peak memory and processor time from the end of a log.
func lastLine(path string) (memory, processor float64, err error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return 0, 0, err
	}
	found := endLine.FindStringSubmatch(string(text))
	if found == nil {
		return 0, 0, fmt.Errorf("%s: no last line", path)
	}
	memory, err = strconv.ParseFloat(found[1], 64)
	if err != nil {
		return 0, 0, err
	}
	processor, err = strconv.ParseFloat(found[3], 64)
	unit := map[string]float64{"K": 1 << 10, "M": 1 << 20, "G": 1 << 30}
	return memory * unit[found[2]], processor, err
}

// size adds the sizes of all files below a folder.
func size(folder string) (sum float64, err error) {
	err = filepath.WalkDir(folder, func(_ string, d os.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		info, err := d.Info()
		if err == nil {
			sum += float64(info.Size())
		}
		return err
	})
	return sum, err
}
