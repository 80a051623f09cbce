package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"reflect"
	"slices"
	"strings"
	"testing"

	"holdfast/io/demo"
	"holdfast/io/rundir"
	"holdfast/solver"
)

// typed runs the program in process and returns its exit code and streams.
func typed(args ...string) (code int, stdout, stderr string) {
	var out, err bytes.Buffer
	code = run(args, &out, &err)
	return code, out.String(), err.String()
}

// TestWorkers: the stability table is the same byte for byte, and every draw
// on disk to the bit, for 1, 2 and 7 workers, which make other
// blocks.
func TestWorkers(t *testing.T) {
	gasoline, err := filepath.Abs(filepath.Join("..", "..", "testdata", "data", "gasoline.csv"))
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	var tables map[string]string
	var paths []solver.Path
	for _, workers := range []string{"1", "2", "7"} {
		out := filepath.Join(dir, workers+".run")
		code, stdout, stderr := typed("run", gasoline, "--outcome", "octane", "--draws", "48", "--workers", workers, "--out", out, "--json")
		if code != 0 {
			t.Fatalf("%s workers: exit code %d: %s", workers, code, stderr)
		}
		got := resultTables(t, out)
		got["stdout"] = stdout
		made := readPaths(t, out)
		if tables == nil {
			tables, paths = got, made
			continue
		}
		for name, text := range tables {
			if got[name] != text {
				t.Errorf("%s workers: %s differs from that of 1 worker", workers, name)
			}
		}
		if !reflect.DeepEqual(made, paths) {
			t.Errorf("%s workers: the draws on disk differ from those of 1 worker", workers)
		}
	}
}

// resultTables reads the tables of a run.
func resultTables(t *testing.T, run string) map[string]string {
	t.Helper()
	tables := map[string]string{}
	for _, name := range []string{"stability.csv", "stability.parquet", "paths.parquet", "terms.parquet", "study.toml"} {
		text, err := os.ReadFile(filepath.Join(run, name))
		if err != nil {
			t.Fatal(err)
		}
		tables[name] = string(text)
	}
	return tables
}

// readPaths reads every draw of a run in full.
func readPaths(t *testing.T, run string) []solver.Path {
	t.Helper()
	d, err := rundir.Open(run)
	if err != nil {
		t.Fatal(err)
	}
	paths, err := d.ReadPaths()
	if err != nil {
		t.Fatal(err)
	}
	return paths
}

// TestExamples types the examples of the help texts, and the commands of the
// README, in a folder of their own: each must work as it stands.
func TestExamples(t *testing.T) {
	readme, err := os.ReadFile(filepath.Join("..", "..", "README.md"))
	if err != nil {
		t.Fatal(err)
	}
	t.Chdir(t.TempDir())
	lines := []string{"holdfast demo"}
	seen := map[string]bool{"holdfast demo": true, "holdfast demo demo": true}
	add := func(text, indent string) int {
		n := 0
		for _, line := range strings.Split(text, "\n") {
			if line, ok := strings.CutPrefix(line, indent+"holdfast "); ok {
				n++
				if line = "holdfast " + line; !seen[line] {
					seen[line] = true
					lines = append(lines, line)
				}
			}
		}
		return n
	}
	for _, c := range (&program{}).root().Commands() {
		if !c.Hidden && add(c.Example, "  ") == 0 {
			t.Errorf("%s has no example", c.Name())
		}
	}
	if add(string(readme), "    ") < 5 {
		t.Errorf("the README shows fewer commands than it has steps")
	}
	for _, line := range lines {
		code, stdout, stderr := typed(strings.Fields(line)[1:]...)
		if code != 0 {
			t.Errorf("%s: exit code %d: %s", line, code, stderr)
		}
		if stdout == "" && !strings.Contains(line, "--out ") {
			t.Errorf("%s: nothing on stdout", line)
		}
		if strings.HasPrefix(line, "holdfast demo") {
			checkDemo(t, stdout, stderr)
		}
	}
}

// checkDemo: the demonstration shows a judgement, compares it with the truth
// and says what to type next.
func checkDemo(t *testing.T, stdout, stderr string) {
	t.Helper()
	code, text, errs := typed("judge", "demo/study.run", "--json")
	var judgement struct {
		Decision struct{ Stable []string }
	}
	if err := json.Unmarshal([]byte(text), &judgement); code != 0 || err != nil {
		t.Fatalf("demo: judge --json: exit code %d, %v: %s", code, err, errs)
	}
	found := 0
	for _, name := range demo.Matter() {
		if slices.Contains(judgement.Decision.Stable, name) {
			found++
		}
	}
	// The smallest and the largest number at which there is something to show.
	if found < 6 || found == len(demo.Matter()) {
		t.Errorf("demo: %d of the columns that matter are stable", found)
	}
	for _, want := range []string{"Expected by luck", fmt.Sprintf("%d of the 12 columns that matter were found", found), "temperature_d05"} {
		if !strings.Contains(stdout, want) {
			t.Errorf("demo: stdout lacks %q", want)
		}
	}
	for _, want := range []string{filepath.Join("demo", "hatchery.parquet"), filepath.Join("demo", "study.run"), "holdfast judge demo/study.run"} {
		if !strings.Contains(stderr, want) {
			t.Errorf("demo: stderr lacks %q", want)
		}
	}
}

// TestDraftRunsUnchanged: a drafted study gives what the table with --outcome
// gives, and a draft on stdout is the file's text with another path.
func TestDraftRunsUnchanged(t *testing.T) {
	gasoline, err := filepath.Abs(filepath.Join("..", "..", "testdata", "data", "gasoline.csv"))
	if err != nil {
		t.Fatal(err)
	}
	text, err := os.ReadFile(gasoline)
	if err != nil {
		t.Fatal(err)
	}
	t.Chdir(t.TempDir())
	if err := os.WriteFile("spectra.csv", text, 0o644); err != nil {
		t.Fatal(err)
	}
	for _, line := range []string{
		"draft spectra.csv --outcome octane --out study.toml",
		"run study.toml --draws 12 --out a.run",
		"run spectra.csv --outcome octane --draws 12 --out b.run",
	} {
		if code, _, stderr := typed(strings.Fields(line)...); code != 0 {
			t.Fatalf("%s: exit code %d: %s", line, code, stderr)
		}
	}
	if a, b := resultTables(t, "a.run"), resultTables(t, "b.run"); a["stability.csv"] != b["stability.csv"] {
		t.Errorf("the drafted study and the table give other results")
	}
	file, err := os.ReadFile("study.toml")
	if err != nil {
		t.Fatal(err)
	}
	if code, stdout, stderr := typed("draft", "spectra.csv", "--outcome", "octane"); code != 0 || stdout != string(file) {
		t.Errorf("exit code %d, %q: a draft on stdout is not that of --out study.toml", code, stderr)
	}
	if code, _, stderr := typed("draft", "spectra.csv", "--outcome", "octane", "--out", "study.toml"); code != 2 || !strings.Contains(stderr, "exists") {
		t.Errorf("a draft over a file: exit code %d, %q", code, stderr)
	}
}

// TestFinish: errors become one line each and a hint, whatever is in them.
func TestFinish(t *testing.T) {
	for _, c := range []struct {
		err  error
		code int
		text string
	}{
		{nil, 0, ""},
		{fmt.Errorf("table: no disk"), 1, "holdfast: table: no disk\n"},
		{misuse("holdfast: no", "yes"), 2, "holdfast: no\nhint: yes\n"},
		{fmt.Errorf("above: %w", wrong(fmt.Errorf("a\n b\x1b[2J\u202e"), "")), 2, "holdfast: above: a\nholdfast: b\\u001b[2J\\u202e\n"},
		{incomplete("holdfast: 3 missing", ""), 3, "holdfast: 3 missing\n"},
	} {
		var errs bytes.Buffer
		p := &program{err: &errs}
		if code := p.finish(t.Context(), c.err); code != c.code || errs.String() != c.text {
			t.Errorf("%v: exit code %d, %q; want %d, %q", c.err, code, errs.String(), c.code, c.text)
		}
	}
}

// TestLambdaOf: the lambdas of a run directory are those of the fits, to the
// bit, below and above lambda_max.
func TestLambdaOf(t *testing.T) {
	x := []float64{-3, -1, 0.5, 1, 2.5}
	model, err := solver.NewModel(t.Context(), solver.Problem{
		Design: solver.NewDense(5, [][]float64{x}, nil), Candidates: []int32{0},
		Centre: []float64{0}, Names: []string{"x"}, Outcome: []float64{0.3, 1, 2, 2, 5},
		Mix: 1, Ratio: 0.954, Floor: 1e-6,
	})
	if err != nil {
		t.Fatal(err)
	}
	lambda := lambdaOf(rundir.Run{
		Identity: rundir.Identity{Penalty: rundir.Penalty{Ratio: 0.954}},
		Meta:     rundir.Meta{LambdaMax: model.LambdaMax()},
	})
	for step := -40; step <= model.LastStep(); step++ {
		if got, want := lambda(step), model.Lambda(step); got != want {
			t.Errorf("step %d: lambda %v, the fits had %v", step, got, want)
		}
	}
}
