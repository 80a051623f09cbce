package main

import (
	"context"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"holdfast/io/demo"
	"holdfast/io/rundir"
)

// demoSeed makes the table of the demonstration.
const demoSeed = 1

func (p *program) demoCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "demo [DIR]",
		Short: "the whole job on an invented table: an oyster hatchery",
		Long: `demo writes an invented table (240 batches of oyster larvae, 1,200 columns, of
which 12 matter) and its study into DIR, runs it, judges it and shows the
outcome. It also writes a second table and two studies of it, a yes-no outcome and
a survival time, and says how to run them. Without DIR it takes demo, or the first
of demo-2, demo-3, ... that is not there yet.`,
		Example: "  holdfast demo",
		Args:    between(0, "DIR"),
		RunE: action(func(ctx context.Context, args []string) error {
			dir := freeFolder("demo")
			if len(args) > 0 {
				dir = args[0]
			}
			return p.demo(ctx, dir)
		}),
	}
}

// freeFolder returns name, or the first of name-2, name-3, ... that does not
// exist.
func freeFolder(name string) string {
	dir := name
	for i := 2; ; i++ {
		if _, err := os.Lstat(dir); os.IsNotExist(err) {
			return dir
		}
		dir = name + "-" + strconv.Itoa(i)
	}
}

// demo does the whole job in a folder of its own.
func (p *program) demo(ctx context.Context, dir string) error {
	if entries, err := os.ReadDir(dir); err == nil && len(entries) > 0 {
		return misuse("holdfast demo: "+dir+" is not empty", "give the demo a folder of its own: holdfast demo another-folder")
	}
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return wrong(err, "")
	}
	path, studyPath := filepath.Join(dir, "hatchery.parquet"), filepath.Join(dir, "study.toml")
	fmt.Fprintf(p.err, "writing an invented table, %d batches of oyster larvae: %s\n", demo.Rows, path)
	if err := demo.Make(demoSeed).Write(path); err != nil {
		return err
	}
	if err := p.draft(ctx, question{path: path, outcome: demo.Outcome}, studyPath); err != nil {
		return err
	}
	if err := p.writeBatches(dir); err != nil {
		return err
	}
	q := question{path: studyPath}
	p.typed = []string{"run", studyPath} // what goes on with this run: a demo of its own would begin anew
	if err := p.run(ctx, q, runOptions{}); err != nil {
		return err
	}
	return p.closeDemo(path, studyPath, q.runPath())
}

// writeBatches writes the second table and its studies.
func (p *program) writeBatches(dir string) error {
	path := filepath.Join(dir, demo.BatchesFile)
	fmt.Fprintf(p.err, "writing a second one, %d batches and what became of them: %s\n", demo.Batches, path)
	if err := demo.MakeBatches(demoSeed).Write(path); err != nil {
		return err
	}
	for _, s := range demo.Studies() {
		path := filepath.Join(dir, s.File)
		err := rundir.WriteFile(path, func(w io.Writer) error {
			_, err := io.WriteString(w, s.Text)
			return err
		})
		if err != nil {
			return err
		}
		fmt.Fprintln(p.err, "study written to "+path)
	}
	return nil
}

// closeDemo compares what was found with what matters, which only invented
// data can tell, and says what to type next.
func (p *program) closeDemo(path, studyPath, runPath string) error {
	e, err := gather([]string{runPath}, false)
	if err != nil {
		return err
	}
	j, err := e.judge(judgeOptions{})
	if err != nil {
		return err
	}
	stable := j.judgement.StableNames()
	var found, missed, luck []string
	for _, name := range demo.Matter() {
		if slices.Contains(stable, name) {
			found = append(found, name)
		} else {
			missed = append(missed, name)
		}
	}
	for _, name := range stable {
		if !slices.Contains(demo.Matter(), name) {
			luck = append(luck, name)
		}
	}
	fmt.Fprintf(p.out, "\nThe data is invented, so the truth is known: %d of the %d columns that matter were found.\n", len(found), len(demo.Matter()))
	for _, line := range []struct {
		label string
		names []string
	}{{"found", found}, {"missed", missed}, {"false", luck}} {
		names := strings.Join(line.names, ", ")
		if names == "" {
			names = "none"
		}
		fmt.Fprintf(p.out, "  %-7s %s\n", line.label+":", names)
	}
	fmt.Fprintf(p.err, `
What to type next:
  holdfast inspect %[1]s --outcome %[2]s
  holdfast judge %[4]s --threshold 0.9
  holdfast judge %[4]s --json
  holdfast rows %[3]s --draw 0
  holdfast fit %[3]s
  holdfast draft YOUR-TABLE --outcome COLUMN --out YOUR-STUDY.toml
`, path, demo.Outcome, studyPath, runPath)
	fmt.Fprintln(p.err, "Other kinds of outcome, on the second table:")
	for _, s := range demo.Studies() {
		fmt.Fprintf(p.err, "  holdfast run %s\n    %s\n", filepath.Join(filepath.Dir(path), s.File), s.About)
	}
	return nil
}
