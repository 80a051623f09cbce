package deal

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
)

// Slurm talks to the scheduler by its commands.
type Slurm struct {
	// Run runs a command of the scheduler's and returns what it prints; nil:
	// the command itself.
	Run func(ctx context.Context, name string, args ...string) (string, error)
}

// ErrNoSlurm is what errors.Is finds where the scheduler's commands are not
// on this machine.
var ErrNoSlurm = errors.New("the commands of Slurm are not on this machine")

func (s Slurm) run(ctx context.Context, name string, args ...string) (string, error) {
	if s.Run != nil {
		return s.Run(ctx, name, args...)
	}
	var out, talk bytes.Buffer
	c := exec.CommandContext(ctx, name, args...)
	c.Stdout, c.Stderr = &out, &talk
	err := c.Run()
	switch {
	case errors.Is(err, exec.ErrNotFound):
		return "", fmt.Errorf("deal: %s: %w", name, ErrNoSlurm)
	case err != nil:
		return "", fmt.Errorf("deal: %s: %w: %s", name, err, strings.TrimSpace(talk.String()))
	}
	return out.String(), nil
}

// Submitted is a job that the scheduler has taken.
type Submitted struct {
	Job     string `json:"job"`
	Cluster string `json:"cluster,omitempty"` // where several are federated
}

// Submit hands a script to the scheduler. Options come last and win over the
// script's.
func (s Slurm) Submit(ctx context.Context, script string, options []string) (Submitted, error) {
	args := append(append([]string{"--parsable"}, options...), script)
	text, err := s.run(ctx, "sbatch", args...)
	if err != nil {
		return Submitted{}, err
	}
	job, cluster, _ := strings.Cut(strings.TrimSpace(text), ";")
	if _, err := strconv.Atoi(job); err != nil {
		return Submitted{}, fmt.Errorf("deal: sbatch: %q is no job number: nothing is known to be submitted", strings.TrimSpace(text))
	}
	return Submitted{job, cluster}, nil
}

// Task is a job, or a task of a job array, that has not ended.
type Task struct {
	Job    string
	Index  int    // of the task; -1: a job that is no array
	State  string // the scheduler's two letters
	Script string
}

// InWork lists what of the scripts in a folder has not ended, in the order of
// job and index.
func (s Slurm) InWork(ctx context.Context, folder string, clusters []string) ([]Task, error) {
	args := []string{"--noheader", "--array", "--user=" + strconv.Itoa(os.Getuid()), "--format=%F|%K|%t|%o"}
	if len(clusters) > 0 {
		args = append(args, "--clusters="+strings.Join(clusters, ","))
	}
	text, err := s.run(ctx, "squeue", args...)
	if err != nil {
		return nil, err
	}
	var tasks []Task
	for line := range strings.Lines(text) {
		if t, ok := parseTask(strings.TrimSpace(line)); ok && filepath.Dir(t.Script) == folder {
			tasks = append(tasks, t)
		}
	}
	return tasks, nil
}

// parseTask reads a line of squeue; false: a line that names no task, such as
// the title of a cluster.
func parseTask(line string) (Task, bool) {
	field := strings.SplitN(line, "|", 4)
	if len(field) != 4 {
		return Task{}, false
	}
	t := Task{Job: field[0], Index: -1, State: field[2], Script: field[3]}
	if i, err := strconv.Atoi(field[1]); err == nil {
		t.Index = i
	}
	return t, true
}

// Cancel cancels jobs. Those that have ended are no error.
func (s Slurm) Cancel(ctx context.Context, jobs []Submitted) error {
	for _, j := range jobs {
		args := []string{j.Job}
		if j.Cluster != "" {
			args = append(args, "--clusters="+j.Cluster)
		}
		if _, err := s.run(ctx, "scancel", args...); err != nil {
			return err
		}
	}
	return nil
}

// ownOptions are those that deal itself must set: the list of tasks, and what
// sbatch prints.
var ownOptions = []string{"--array", "-a", "--wrap", "--parsable", "--test-only"}

// CheckOptions refuses options of the user's that would turn a submission
// into another one.
func CheckOptions(options []string) error {
	for _, o := range options {
		name, _, _ := strings.Cut(o, "=")
		if strings.HasPrefix(o, "-a") && !strings.HasPrefix(o, "--") {
			name = "-a"
		}
		if slices.Contains(ownOptions, name) {
			return fmt.Errorf("deal: %s cannot be given: deal sets the tasks itself (parts, throttle) and reads the job number", name)
		}
	}
	return nil
}
