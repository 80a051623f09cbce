package main

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"slices"
	"strings"

	"holdfast/io/rundir"
	"holdfast/selection"
)

// evidence is what one run directory, or several that hold parts of one run,
// have to be judged by.
type evidence struct {
	paths    []string
	set      *rundir.Set
	dir      *rundir.Dir // the first: tables and log go there
	run      rundir.Run
	finished *rundir.Finished
	draws    []selection.Draw // that count
}

// openRun opens a run directory to read it.
func openRun(path string) (*rundir.Dir, error) {
	info, err := os.Stat(path)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return nil, misuse("holdfast: "+path+": there is no such directory", "that takes the directory that holdfast run made, such as study.run")
	case err != nil:
		return nil, wrong(fmt.Errorf("holdfast: %w", err), "that takes the directory that holdfast run made, such as study.run")
	case !info.IsDir():
		return nil, misuse("holdfast: "+path+" is a file and no run directory", "give the directory that holdfast run made, such as study.run")
	}
	dir, err := rundir.Open(path)
	return dir, wrong(err, "")
}

// gather reads the draws of run directories. Draws that are missing are an
// error, unless partial says that those that are there are to do.
func gather(paths []string, partial bool) (*evidence, error) {
	e := &evidence{paths: paths}
	for _, path := range paths {
		if _, err := openRun(path); err != nil {
			return nil, err
		}
	}
	set, err := patience(paths).OpenTogether(paths)
	if err != nil {
		return nil, wrong(err, "")
	}
	e.set, e.dir, e.run = set, set.Dirs()[0], set.Run()
	if e.run.Decision == nil {
		return nil, incomplete("holdfast: "+paths[0]+" has no decision and no draws: the run was ended before its first draw", e.goOn())
	}
	if e.finished, err = set.Read(); err != nil {
		return nil, err
	}
	if len(e.finished.Missing) == 0 && len(e.finished.Damaged) == 0 {
		e.draws = e.finished.Draws
		return e, nil
	}
	if !partial {
		return nil, &fault{exitIncomplete, e.holes(), e.goOn() + "; or --partial judges the draws that are there"}
	}
	e.draws = e.wholePairs()
	if len(e.draws) == 0 {
		return nil, &fault{exitIncomplete, e.holes(), e.goOn()}
	}
	return e, nil
}

// patience is how long to wait for files that should be there. What this
// machine wrote itself it sees at once; only what others wrote may come late.
func patience(paths []string) rundir.Patience {
	host, err := os.Hostname()
	if err != nil || os.Getenv("SLURM_JOB_ID") != "" {
		return rundir.DefaultPatience
	}
	for _, path := range paths {
		dir, err := rundir.Open(path)
		if err != nil {
			continue // said later, by whoever needs it
		}
		records, err := dir.Parts()
		if err != nil || slices.ContainsFunc(records, func(p rundir.Part) bool { return p.Host != host }) {
			return rundir.DefaultPatience
		}
	}
	return rundir.Patience{}
}

// bootstrap reports whether the draws are bootstrap draws.
func (e *evidence) bootstrap() bool { return e.run.Identity.Draws.Design == "bootstrap" }

// wholePairs are the draws that can be judged: of halves both, of which the
// other is there.
func (e *evidence) wholePairs() []selection.Draw {
	if e.bootstrap() {
		return e.finished.Draws
	}
	there := make(map[int]bool, len(e.finished.Draws))
	for _, d := range e.finished.Draws {
		there[d.Number] = true
	}
	var list []selection.Draw
	for _, d := range e.finished.Draws {
		if there[d.Number^1] {
			list = append(list, d)
		}
	}
	return list
}

// partial says which draws count, where they are not all.
func (e *evidence) partial() string {
	total := e.run.Meta.Number
	if len(e.draws) == total {
		return ""
	}
	numbers := make([]int, len(e.draws))
	for i, d := range e.draws {
		numbers[i] = d.Number
	}
	return fmt.Sprintf("%d of %d draws count, those that are there: numbers %s", len(e.draws), total, ranges(numbers))
}

// followed says, as half a sentence, why the number of draws that count was not
// fixed before the first; "" if it was.
func (e *evidence) followed() string {
	if n := len(e.run.Extensions); n > 0 {
		return fmt.Sprintf("the number of draws was raised from %d to %d after draws were made", e.run.Asked(), e.run.Meta.Number)
	}
	if e.partial() != "" {
		return fmt.Sprintf("only %d of the %d draws that were decided on are there", len(e.draws), e.run.Meta.Number)
	}
	return ""
}

// holes says which draws are missing, of which parts, and what became of them.
func (e *evidence) holes() error {
	f := e.finished
	list := []error{fmt.Errorf("holdfast: %s: draws are missing: %d of %d (numbers %s)",
		strings.Join(e.paths, ", "), len(f.Missing), e.run.Meta.Number, ranges(f.Missing))}
	for _, d := range f.Damaged {
		list = append(list, d.Err)
	}
	return errors.Join(append(list, e.partsMissing()...)...)
}

// partsMissing says what is known about the parts with missing draws.
func (e *evidence) partsMissing() (list []error) {
	parts := max(e.run.Meta.Parts, 1)
	if parts == 1 {
		return nil
	}
	known := map[int]rundir.Part{}
	if records, err := e.set.Parts(); err == nil {
		for _, p := range records {
			known[p.Part] = p
		}
	}
	count := make([]int, parts)
	for _, d := range e.finished.Missing {
		count[e.run.PartOf(d)]++
	}
	for part, n := range count {
		if n == 0 {
			continue
		}
		what := "never begun"
		if p, ok := known[part]; ok {
			what = strings.TrimSpace(p.State + " on " + p.Host + " " + p.Failure)
		}
		list = append(list, fmt.Errorf("holdfast: part %d of %d: %d draws missing (%s)", part, parts, n, oneLine(what)))
	}
	return list
}

// goOn is what to type to have the missing draws made.
func (e *evidence) goOn() string {
	path := e.dir.Path()
	return "make them with: " + shellCommand([]string{"holdfast", "run", path + "/study.toml", "--out", path})
}

// ranges writes ascending numbers briefly: 0-7, 12, 20-21.
func ranges(list []int) string {
	const most = 8
	var words []string
	for i := 0; i < len(list); {
		j := i
		for j+1 < len(list) && list[j+1] == list[j]+1 {
			j++
		}
		word := fmt.Sprint(list[i])
		if j > i {
			word = fmt.Sprintf("%d-%d", list[i], list[j])
		}
		if words = append(words, word); len(words) > most {
			words[most] = "..."
			break
		}
		i = j + 1
	}
	return strings.Join(words, ", ")
}
