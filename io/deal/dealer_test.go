package deal_test

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"holdfast/io/deal"
)

// scheduler is one of the test's own: it numbers jobs from 100, keeps their
// state, and answers as sbatch, squeue and scancel do.
type scheduler struct {
	next  int
	lines []string // of squeue, in its order
	calls []string
	fails map[string]error
}

func (s *scheduler) run(_ context.Context, name string, args ...string) (string, error) {
	s.calls = append(s.calls, name+" "+strings.Join(args, " "))
	if err := s.fails[name]; err != nil {
		return "", err
	}
	switch name {
	case "squeue":
		return strings.Join(s.lines, "\n") + "\n", nil
	case "scancel":
		s.end(args[0])
		return "", nil
	}
	s.next++
	job := fmt.Sprint(99 + s.next)
	script := args[len(args)-1]
	text, err := os.ReadFile(script)
	if err != nil {
		return "", err
	}
	indexes := "N/A"
	for line := range strings.Lines(string(text)) {
		if list, ok := strings.CutPrefix(strings.TrimSpace(line), "#SBATCH --array="); ok {
			indexes = list
		}
	}
	for _, word := range strings.Split(indexes, ",") {
		first, last := word, word
		if a, b, ok := strings.Cut(word, "-"); ok {
			first, last = a, b
		}
		var a, b int
		if _, err := fmt.Sscan(first, &a); err != nil {
			s.lines = append(s.lines, fmt.Sprintf("%s|N/A|PD|%s", job, script))
			continue
		}
		fmt.Sscan(last, &b)
		for k := a; k <= b; k++ {
			s.lines = append(s.lines, fmt.Sprintf("%s|%d|R|%s", job, k, script))
		}
	}
	return job + "\n", nil
}

// end takes lines that begin so out of the list.
func (s *scheduler) end(begin string) {
	s.lines = slices.DeleteFunc(s.lines, func(l string) bool { return strings.HasPrefix(l, begin+"|") })
}

func (s *scheduler) count(name string) int {
	n := 0
	for _, c := range s.calls {
		if strings.HasPrefix(c, name+" ") {
			n++
		}
	}
	return n
}

func dealerIn(t *testing.T, s *scheduler, missing *[]int) *deal.Dealer {
	t.Helper()
	dir := t.TempDir()
	if err := os.Mkdir(deal.Folder(dir), 0o755); err != nil {
		t.Fatal(err)
	}
	return &deal.Dealer{
		Job: jobIn(dir), Slurm: deal.Slurm{Run: s.run},
		Missing: func() ([]int, error) { return slices.Clone(*missing), nil },
		Now:     func() time.Time { return time.Unix(0, 0) },
	}
}

// The first deal submits everything; while all is in work another one submits
// nothing; then only what is neither whole nor in work, and the judging job that
// waits gives way to one that waits for all.
func TestNeverTwice(t *testing.T) {
	s, missing := &scheduler{}, []int{0, 1, 2, 3}
	d := dealerIn(t, s, &missing)
	d.Options = []string{"--account=lab", "--dependency=singleton"}
	o, err := d.Deal(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	if !slices.Equal(o.Submitted.Parts, missing) || o.Submitted.Array.Job != "100" || o.Submitted.Judge.Job != "101" {
		t.Fatalf("%+v", o.Submitted)
	}
	if last := s.calls[len(s.calls)-1]; !strings.Contains(last, "--account=lab --dependency=singleton --dependency=afterany:100 ") {
		t.Errorf("judging: %s", last)
	}

	if o, err = d.Deal(t.Context()); err != nil || o.Submitted != nil || s.count("sbatch") != 2 || len(o.InWork) != 4 {
		t.Fatalf("in work: %+v, %v, %q", o, err, s.calls)
	}

	s.end("100|2") // cancelled
	s.end("100|3") // whole
	missing = []int{0, 1, 2}
	o, err = d.Deal(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	if !slices.Equal(o.Submitted.Parts, []int{2}) || !slices.Equal(o.InWork, []int{0, 1}) {
		t.Errorf("%+v", o)
	}
	if len(o.Replaced) != 1 || o.Replaced[0].Job != "101" {
		t.Errorf("replaced %+v", o.Replaced)
	}
	if !slices.ContainsFunc(s.calls, func(c string) bool { return strings.Contains(c, "--dependency=afterany:100:102 ") }) {
		t.Errorf("no judging job waits for both arrays: %q", s.calls)
	}

	s.lines, missing = nil, nil
	if o, err = d.Deal(t.Context()); err != nil || o.Submitted != nil || s.count("sbatch") != 4 {
		t.Errorf("whole: %+v, %v", o, err)
	}
	text, err := os.ReadFile(filepath.Join(deal.Folder(d.Job.Run), "submitted.json"))
	if err != nil {
		t.Fatal(err)
	}
	for _, job := range []string{"100", "101", "102", "103"} {
		if !strings.Contains(string(text), `"job": "`+job+`"`) {
			t.Errorf("job %s is not kept in %s", job, text)
		}
	}
}

// A job of another run, and one of another user's folder, are none of ours.
func TestForeignJobs(t *testing.T) {
	s, missing := &scheduler{}, []int{0, 1}
	d := dealerIn(t, s, &missing)
	s.lines = []string{"CLUSTER: tanks", "7|0|R|/elsewhere/jobs/parts-1.sh", "8|1|R|" + d.Job.Run + "/parts-1.sh"}
	if o, err := d.Deal(t.Context()); err != nil || len(o.InWork) != 0 || !slices.Equal(o.Submitted.Parts, missing) {
		t.Errorf("%+v, %v", o, err)
	}
}

// An array whose judging job was refused is known by its script; the next deal
// submits the judging job alone.
func TestJudgingJobRefused(t *testing.T) {
	s, missing := &scheduler{}, []int{0, 1}
	d := dealerIn(t, s, &missing)
	refused := errors.New("deal: sbatch: QOSMaxSubmitJobPerUserLimit")
	d.Slurm.Run = func(ctx context.Context, name string, args ...string) (string, error) {
		if name == "sbatch" && strings.Contains(strings.Join(args, " "), "judge-") {
			return "", refused
		}
		return s.run(ctx, name, args...)
	}
	o, err := d.Deal(t.Context())
	if !errors.Is(err, refused) || o == nil || o.Submitted.Array.Job != "100" {
		t.Fatalf("%+v, %v", o, err)
	}
	d.Slurm.Run = s.run
	if o, err = d.Deal(t.Context()); err != nil || o.Submitted.Array != nil || o.Submitted.Judge == nil || len(o.Submitted.Parts) != 0 {
		t.Errorf("%+v, %v", o, err)
	}
	if last := s.calls[len(s.calls)-1]; !strings.Contains(last, "afterany:100 ") {
		t.Errorf("judging: %s", last)
	}
}

// What the scheduler refuses leaves nothing behind that looks submitted.
func TestArrayRefused(t *testing.T) {
	s, missing := &scheduler{}, []int{0}
	s.fails = map[string]error{"sbatch": errors.New("deal: sbatch: invalid account")}
	d := dealerIn(t, s, &missing)
	if o, err := d.Deal(t.Context()); err == nil || o.Submitted != nil || !strings.Contains(err.Error(), "invalid account") {
		t.Errorf("%+v, %v", o, err)
	}
	names, err := os.ReadDir(deal.Folder(d.Job.Run))
	if err != nil || len(names) != 1 || names[0].Name() != "lock" {
		t.Errorf("left behind: %v, %v", names, err)
	}
}

// Two deals of one run do not cross: the second says so and submits nothing.
func TestTwoDeals(t *testing.T) {
	s, missing := &scheduler{}, []int{0}
	d := dealerIn(t, s, &missing)
	inner := *d
	d.Missing = func() ([]int, error) {
		if _, err := inner.Deal(t.Context()); err == nil || !strings.Contains(err.Error(), "under way") {
			t.Errorf("the second deal: %v", err)
		}
		return missing, nil
	}
	if _, err := d.Deal(t.Context()); err != nil || s.count("sbatch") != 2 {
		t.Errorf("%v, %q", err, s.calls)
	}
}

// A dry run asks and changes nothing, also where there is no scheduler.
func TestLook(t *testing.T) {
	s, missing := &scheduler{}, []int{0, 1}
	d := dealerIn(t, s, &missing)
	s.fails = map[string]error{"squeue": deal.ErrNoSlurm}
	o, deaf, err := d.Look(t.Context())
	if err != nil || !errors.Is(deaf, deal.ErrNoSlurm) || !slices.Equal(o.Unmade(), missing) || s.count("sbatch") != 0 {
		t.Errorf("%+v, %v, %v", o, deaf, err)
	}
	if names, _ := os.ReadDir(deal.Folder(d.Job.Run)); len(names) != 0 {
		t.Errorf("left behind: %v", names)
	}
}

func TestOptionsThatCannotBeGiven(t *testing.T) {
	for _, o := range []string{"--array=0-9", "-a0-9", "-a", "--array", "--parsable", "--wrap=hostname", "--test-only"} {
		if err := deal.CheckOptions([]string{"--mem=1G", o}); err == nil {
			t.Errorf("%s is taken", o)
		}
	}
	if err := deal.CheckOptions([]string{"-A", "lab", "--time=30", "-p", "day", "--account=array"}); err != nil {
		t.Error(err)
	}
}

// Answers of sbatch: a number, with the cluster where several are federated;
// anything else is no submission.
func TestAnswersOfSbatch(t *testing.T) {
	for answer, want := range map[string]deal.Submitted{"12\n": {Job: "12"}, "12;north\n": {Job: "12", Cluster: "north"}, "": {}, "Submitted batch job 12": {}} {
		s := deal.Slurm{Run: func(context.Context, string, ...string) (string, error) { return answer, nil }}
		got, err := s.Submit(t.Context(), "x.sh", nil)
		if got != want || (err != nil) != (want.Job == "") {
			t.Errorf("%q: %+v, %v", answer, got, err)
		}
	}
	if _, err := (deal.Slurm{}).InWork(context.Background(), "/", []string{"no\x00cluster"}); err == nil {
		t.Error("a command that cannot be run is no error")
	}
}

func TestIndexes(t *testing.T) {
	for want, parts := range map[string][]int{"0": {0}, "0-3": {3, 1, 2, 0}, "1,3": {3, 1}, "0-1,4,6-7": {0, 1, 4, 6, 7}} {
		if got := deal.Indexes(parts); got != want {
			t.Errorf("%v: %s, want %s", parts, got, want)
		}
	}
}
