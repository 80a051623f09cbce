package deal

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"
)

// Dealer submits the parts of a run.
type Dealer struct {
	Job     *Job
	Slurm   Slurm
	Options []string // of the user's, for sbatch: they win over the script's
	// Missing lists the parts of which draws are missing in the run directory.
	// It is asked after the scheduler, so that a part whose task ends in between
	// is not taken for one that nobody makes.
	Missing func() ([]int, error)
	Now     func() time.Time
}

// Outcome is what a deal did.
type Outcome struct {
	Missing   []int       // parts that are not whole
	InWork    []int       // of these, parts that a task makes or will make
	Submitted *Submission // nil: nothing was submitted
	Replaced  []Submitted // judging jobs that were cancelled for the new one
}

// Unmade are the parts that nobody makes.
func (o *Outcome) Unmade() []int {
	var unmade []int
	for _, part := range o.Missing {
		if !slices.Contains(o.InWork, part) {
			unmade = append(unmade, part)
		}
	}
	return unmade
}

// Deal submits the parts that are missing and not in work, and a judging job
// that waits for all that are in work.
func (d *Dealer) Deal(ctx context.Context) (*Outcome, error) {
	if err := errors.Join(d.Job.Check(), CheckOptions(d.Options)); err != nil {
		return nil, err
	}
	folder := Folder(d.Job.Run)
	unlock, err := lock(folder)
	if err != nil {
		return nil, err
	}
	defer unlock()
	kept, err := readLedger(folder)
	if err != nil {
		return nil, err
	}
	tasks, err := d.Slurm.InWork(ctx, folder, kept.clusters())
	if err != nil {
		return nil, err
	}
	o, err := d.look(tasks)
	if err != nil {
		return nil, err
	}
	judges := judging(tasks)
	if len(o.Missing) == 0 || len(o.Unmade()) == 0 && len(judges) > 0 {
		return o, nil
	}
	return o, d.submit(ctx, o, kept, tasks)
}

// Look says what would be submitted, and submits nothing. deaf says why the
// scheduler cannot be asked; then nothing is taken to be in work.
func (d *Dealer) Look(ctx context.Context) (o *Outcome, deaf, err error) {
	kept, err := readLedger(Folder(d.Job.Run))
	if err != nil {
		return nil, nil, err
	}
	tasks, deaf := d.Slurm.InWork(ctx, Folder(d.Job.Run), kept.clusters())
	o, err = d.look(tasks)
	return o, deaf, err
}

// look compares what is missing with what is in work.
func (d *Dealer) look(tasks []Task) (*Outcome, error) {
	missing, err := d.Missing()
	if err != nil {
		return nil, err
	}
	o := &Outcome{Missing: missing}
	for _, t := range tasks {
		if t.Index >= 0 && slices.Contains(missing, t.Index) && !slices.Contains(o.InWork, t.Index) {
			o.InWork = append(o.InWork, t.Index)
		}
	}
	slices.Sort(o.InWork)
	return o, nil
}

// submit hands over the array and the judging job. The numbers are kept after
// each of them, so that a failure in between leaves what can be cancelled.
func (d *Dealer) submit(ctx context.Context, o *Outcome, kept *ledger, tasks []Task) error {
	folder := Folder(d.Job.Run)
	s := Submission{Time: d.Now().UTC().Format(time.RFC3339), Parts: o.Unmade()}
	after := arrays(tasks)
	if len(s.Parts) > 0 {
		text, err := d.Job.PartsScript(s.Parts)
		if err != nil {
			return err
		}
		if s.Script, err = newScript(folder, "parts", text); err != nil {
			return err
		}
		array, err := d.Slurm.Submit(ctx, s.Script, d.Options)
		if err != nil {
			// Whatever was not taken is no script of this run.
			return errors.Join(err, os.Remove(s.Script))
		}
		s.Array = &array
		after = append(after, array.Job)
	}
	o.Submitted = &s
	kept.Submissions = append(kept.Submissions, s)
	if err := kept.write(folder); err != nil {
		return err
	}
	judge, err := d.submitJudge(ctx, after)
	if err != nil {
		return err
	}
	s.Judge = &judge
	kept.Submissions[len(kept.Submissions)-1] = s
	if err := kept.write(folder); err != nil {
		return err
	}
	return d.replace(ctx, o, tasks)
}

// submitJudge hands over the judging job, to begin when some jobs have ended.
func (d *Dealer) submitJudge(ctx context.Context, after []string) (Submitted, error) {
	text, err := d.Job.JudgeScript()
	if err != nil {
		return Submitted{}, err
	}
	script, err := newScript(Folder(d.Job.Run), "judge", text)
	if err != nil {
		return Submitted{}, err
	}
	return d.Slurm.Submit(ctx, script, append(slices.Clone(d.Options), d.Dependency(after)))
}

// Dependency is the option that makes a job wait for the end of others,
// whatever became of them.
func (d *Dealer) Dependency(jobs []string) string {
	return "--dependency=afterany:" + strings.Join(jobs, ":")
}

// replace cancels judging jobs that wait and that the new one stands for.
func (d *Dealer) replace(ctx context.Context, o *Outcome, tasks []Task) error {
	for _, t := range judging(tasks) {
		if t.State != "PD" {
			continue
		}
		o.Replaced = append(o.Replaced, Submitted{Job: t.Job, Cluster: o.Submitted.Judge.Cluster})
	}
	return d.Slurm.Cancel(ctx, o.Replaced)
}

// judging are the judging jobs among tasks.
func judging(tasks []Task) []Task {
	var found []Task
	for _, t := range tasks {
		if strings.HasPrefix(filepath.Base(t.Script), "judge-") {
			found = append(found, t)
		}
	}
	return found
}

// arrays are the numbers of the jobs that make parts, each once.
func arrays(tasks []Task) []string {
	var jobs []string
	for _, t := range tasks {
		if t.Index >= 0 && !slices.Contains(jobs, t.Job) {
			jobs = append(jobs, t.Job)
		}
	}
	return jobs
}

// newScript writes a script under the next free number.
func newScript(folder, kind string, text []byte) (string, error) {
	for n := 1; ; n++ {
		path := filepath.Join(folder, fmt.Sprintf("%s-%d.sh", kind, n))
		f, err := os.OpenFile(path, os.O_CREATE|os.O_EXCL|os.O_WRONLY, 0o755)
		if errors.Is(err, fs.ErrExist) {
			continue
		}
		if err != nil {
			return "", fmt.Errorf("deal: %w", err)
		}
		_, err = f.Write(text)
		if err = errors.Join(err, f.Close()); err != nil {
			return "", fmt.Errorf("deal: %w", err)
		}
		return path, nil
	}
}
