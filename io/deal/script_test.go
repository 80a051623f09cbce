package deal_test

import (
	"bytes"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"holdfast/io/deal"
)

func jobIn(dir string) *deal.Job {
	return &deal.Job{
		Name: "holdfast-tanks", Run: dir, Program: filepath.Join(dir, "jobs", "holdfast"), Parts: 4, Restarts: 20,
		Part:  deal.Size{CPUs: 8, Memory: 3<<30 + 1, Time: 26*time.Hour + 30*time.Second},
		Judge: deal.Size{CPUs: 1, Memory: 1 << 30, Time: 30 * time.Minute},
	}
}

// What the scheduler reads: one line per option, sizes rounded up.
func TestOptionsOfTheScripts(t *testing.T) {
	j := jobIn("/data/a b%c/tanks.run")
	j.Throttle = 2
	text, err := j.PartsScript([]int{3, 1, 0})
	if err != nil {
		t.Fatal(err)
	}
	for _, line := range []string{
		"--job-name=holdfast-tanks", "--array=0-1,3%2", "--nodes=1", "--ntasks=1", "--cpus-per-task=8", "--mem=3073M",
		"--time=1-02:01:00", "--requeue", "--signal=B:USR1@120", "--open-mode=append",
		`--chdir="/data/a b%%c/tanks.run"`, `--output="/data/a b%%c/tanks.run/logs"/slurm-part-%a.log`,
	} {
		if !strings.Contains(string(text), "\n#SBATCH "+line+"\n") {
			t.Errorf("no line %s in\n%s", line, text)
		}
	}
	judge, err := j.JudgeScript()
	if err != nil {
		t.Fatal(err)
	}
	for _, line := range []string{"--cpus-per-task=1", "--mem=1024M", "--time=00:30:00"} {
		if !strings.Contains(string(judge), "\n#SBATCH "+line+"\n") {
			t.Errorf("no line %s in\n%s", line, judge)
		}
	}
	if strings.Contains(string(judge), "--array") {
		t.Error("the judging job is an array")
	}
}

func TestCheckRefuses(t *testing.T) {
	for says, change := range map[string]func(*deal.Job){
		"parts":      func(j *deal.Job) { j.Parts = 0 },
		"processors": func(j *deal.Job) { j.Part.CPUs = 0 },
		"memory":     func(j *deal.Job) { j.Part.Memory = 0 },
		"time":       func(j *deal.Job) { j.Part.Time = 0 },
		"throttle":   func(j *deal.Job) { j.Throttle = -1 },
		"quotes":     func(j *deal.Job) { j.Run = "/data/\"tanks\"" },
		"control":    func(j *deal.Job) { j.Program = "/data/\n#SBATCH --uid=0" },
	} {
		j := jobIn("/data/tanks.run")
		change(j)
		if _, err := j.PartsScript([]int{0}); err == nil || !strings.Contains(err.Error(), says) {
			t.Errorf("%s: %v", says, err)
		}
	}
}

// bench runs a script as the scheduler would, with a program and commands of
// the test's own that note how they were called.
type bench struct {
	t       *testing.T
	dir     string
	job     *deal.Job
	restart string
}

func newBench(t *testing.T, program string) *bench {
	t.Helper()
	dir := filepath.Join(t.TempDir(), "a b'c")
	b := &bench{t: t, dir: dir, job: jobIn(dir), restart: "0"}
	for _, name := range []string{"jobs", "logs", "bin", "node"} {
		if err := os.MkdirAll(filepath.Join(dir, name), 0o755); err != nil {
			t.Fatal(err)
		}
	}
	b.write("jobs/holdfast", "#!/bin/bash\necho \"$@\" >>\"$NOTES/program\"\n"+program)
	b.write("bin/scontrol", "#!/bin/bash\necho \"$@\" >>\"$NOTES/scontrol\"\n")
	return b
}

func (b *bench) write(name, text string) {
	b.t.Helper()
	// A shell reads its script as it goes, so a file is replaced and not changed.
	path := filepath.Join(b.dir, name)
	if err := os.WriteFile(path+".new", []byte(text), 0o755); err != nil {
		b.t.Fatal(err)
	}
	if err := os.Rename(path+".new", path); err != nil {
		b.t.Fatal(err)
	}
}

func (b *bench) read(name string) string {
	text, err := os.ReadFile(filepath.Join(b.dir, name))
	if err != nil {
		return ""
	}
	return string(text)
}

// script writes the script of one task.
func (b *bench) script() string {
	b.t.Helper()
	text, err := b.job.PartsScript([]int{2})
	if err != nil {
		b.t.Fatal(err)
	}
	b.write("jobs/parts-1.sh", string(text))
	return filepath.Join(b.dir, "jobs", "parts-1.sh")
}

// start begins the script of one task.
func (b *bench) start() (*exec.Cmd, *bytes.Buffer) {
	b.t.Helper()
	c := exec.Command("bash", b.script())
	c.Env = append(os.Environ(), "PATH="+filepath.Join(b.dir, "bin")+":"+os.Getenv("PATH"), "NOTES="+b.dir,
		"SLURM_JOB_ID=77", "SLURM_ARRAY_JOB_ID=77", "SLURM_ARRAY_TASK_ID=2", "SLURM_MEM_PER_NODE=1000", "SLURM_RESTART_COUNT="+b.restart,
		"NODE="+filepath.Join(b.dir, "node"))
	var talk bytes.Buffer
	c.Stderr = &talk
	c.WaitDelay = time.Second
	b.t.Cleanup(func() { c.Process.Kill() })
	if err := c.Start(); err != nil {
		b.t.Fatal(err)
	}
	return c, &talk
}

// begun waits until so many programs have begun.
func (b *bench) begun(times int) {
	b.t.Helper()
	for range 500 {
		if strings.Count(b.read("begun"), "\n") >= times {
			return
		}
		time.Sleep(10 * time.Millisecond)
	}
	b.t.Fatalf("%d programs do not begin within 5 s", times)
}

func codeOf(err error) int {
	var e *exec.ExitError
	if errors.As(err, &e) {
		return e.ExitCode()
	}
	return 0
}

// The exit code of the program is the task's, and it is called with what the
// part needs. No restart is asked for.
func TestExitCodeOfATask(t *testing.T) {
	for _, code := range []int{0, 1, 3, 137, 143} {
		b := newBench(t, fmt.Sprintf("exit %d\n", code))
		c, _ := b.start()
		if got := codeOf(c.Wait()); got != code {
			t.Errorf("exit code %d, the program's is %d", got, code)
		}
		want := fmt.Sprintf("run %s/study.toml --out %s --part auto --memory 950M\n", b.dir, b.dir)
		if got := b.read("program"); got != want {
			t.Errorf("called with %q, want %q", got, want)
		}
		if b.read("scontrol") != "" {
			t.Error("a restart was asked for")
		}
	}
}

// stopping is a program that ends in order when it gets TERM.
const stopping = "trap 'echo stopped >>\"$NOTES/program\"; exit 143' TERM\necho yes >\"$NOTES/begun\"\nwhile :; do sleep 0.02; done\n"

// Near the time limit the program is stopped once and the task queued again,
// up to a number of times.
func TestRestartNearTheLimit(t *testing.T) {
	for restart, want := range map[string]string{"0": "requeue 77_2\n", "19": "requeue 77_2\n", "20": "", "21": ""} {
		b := newBench(t, stopping)
		b.restart = restart
		c, talk := b.start()
		b.begun(1)
		if err := c.Process.Signal(syscall.SIGUSR1); err != nil {
			t.Fatal(err)
		}
		if got := codeOf(c.Wait()); got != 143 {
			t.Errorf("restart %s: exit code %d", restart, got)
		}
		if got := b.read("scontrol"); got != want {
			t.Errorf("restart %s: asked the scheduler %q, want %q", restart, got, want)
		}
		if strings.Count(b.read("program"), "stopped") != 1 {
			t.Errorf("restart %s: %s", restart, b.read("program"))
		}
		if !strings.Contains(talk.String(), "time limit is near") {
			t.Errorf("restart %s: said %q", restart, talk)
		}
	}
}

// A program that ends by itself while the limit is near is not started again.
func TestNoRestartOfAWholePart(t *testing.T) {
	b := newBench(t, "trap 'exit 0' TERM\necho yes >\"$NOTES/begun\"\nwhile :; do sleep 0.02; done\n")
	c, _ := b.start()
	b.begun(1)
	c.Process.Signal(syscall.SIGUSR1)
	if got := codeOf(c.Wait()); got != 0 || b.read("scontrol") != "" {
		t.Errorf("exit code %d, asked %q", got, b.read("scontrol"))
	}
}

// A TERM from outside (scancel) reaches the program by itself: the shell waits
// for it, passes its code on and asks for nothing.
func TestCancelledTask(t *testing.T) {
	b := newBench(t, "echo $$ >\"$NOTES/begun\"\ntrap 'exit 143' TERM\nwhile :; do sleep 0.02; done\n")
	c, _ := b.start()
	b.begun(1)
	c.Process.Signal(syscall.SIGTERM)
	time.Sleep(100 * time.Millisecond)
	if c.ProcessState != nil {
		t.Error("the shell did not wait")
	}
	var pid int
	fmt.Sscan(b.read("begun"), &pid)
	syscall.Kill(pid, syscall.SIGTERM)
	if got := codeOf(c.Wait()); got != 143 || b.read("scontrol") != "" {
		t.Errorf("exit code %d, asked %q", got, b.read("scontrol"))
	}
}

// The table is copied to the node, the program reads the copy, and the last
// task removes it. Two tasks at the same time copy it once.
func TestStaging(t *testing.T) {
	b := newBench(t, "cat \"$NOTES/node/copy/table/part 1.parquet\" >>\"$NOTES/seen\" || exit 1\n"+
		"echo yes >>\"$NOTES/begun\"\nwhile [ ! -e \"$NOTES/go\" ]; do sleep 0.02; done\n")
	b.write("bin/cp", "#!/bin/bash\necho copied >>\"$NOTES/copies\"\nexec /bin/cp \"$@\"\n")
	b.write("part 1.parquet", "oysters\n")
	b.job.Staging = &deal.Staging{Folder: "$NODE", Name: "copy", Files: []string{filepath.Join(b.dir, "part 1.parquet")}, Path: "part 1.parquet"}
	first, _ := b.start()
	b.begun(1)
	second, _ := b.start()
	b.begun(2)
	b.write("go", "")
	for _, c := range []*exec.Cmd{first, second} {
		if got := codeOf(c.Wait()); got != 0 {
			t.Errorf("exit code %d", got)
		}
	}
	if got := strings.Count(b.read("copies"), "copied"); got != 1 {
		t.Errorf("copied %d times", got)
	}
	if b.read("seen") != "oysters\noysters\n" || !strings.Contains(b.read("program"), "--set table.path="+b.dir+"/node/copy/table/part 1.parquet") {
		t.Errorf("seen %q, called with %q", b.read("seen"), b.read("program"))
	}
	if _, err := os.Stat(filepath.Join(b.dir, "node", "copy", "table")); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("the copy is still there: %v", err)
	}
}

// Where the node has no room the table is read where it is, and that is said.
func TestStagingFails(t *testing.T) {
	b := newBench(t, "exit 0\n")
	b.job.Staging = &deal.Staging{Folder: filepath.Join(b.dir, "node"), Name: "copy", Files: []string{filepath.Join(b.dir, "none")}, Path: "none"}
	c, talk := b.start()
	if got := codeOf(c.Wait()); got != 0 || !strings.Contains(talk.String(), "it is read where it is") {
		t.Errorf("exit code %d, said %q", got, talk)
	}
	if strings.Contains(b.read("program"), "--set") {
		t.Errorf("called with %q", b.read("program"))
	}
}
