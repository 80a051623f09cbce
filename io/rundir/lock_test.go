package rundir

import (
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"
)

// tank is a machine of the tests: process 100 of it asks, and those in running
// live.
func tank(host string, running ...int) *environment {
	return &environment{
		self: func() holder { return holder{Host: host, Boot: "b1", Space: "s1", PID: 100} },
		alive: func(h holder) bool {
			for _, pid := range running {
				if pid == h.PID {
					return true
				}
			}
			return false
		},
		sleep: func(time.Duration, <-chan struct{}) bool { return true },
		beat:  time.Hour, stale: 2 * time.Minute, poll: time.Second,
	}
}

// on opens the directory of d from another machine.
func on(t *testing.T, d *Dir, env *environment) *Dir {
	t.Helper()
	other, err := Open(d.Path())
	if err != nil {
		t.Fatal(err)
	}
	other.env = env
	return other
}

// leave puts the lock file of a holder down.
func leave(t *testing.T, d *Dir, h holder) string {
	t.Helper()
	text, err := h.encode(0)
	if err != nil {
		t.Fatal(err)
	}
	path := d.join(partsFolder, "0.lock")
	if err := os.WriteFile(path, text, 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func TestLockIsHeld(t *testing.T) {
	d := hatcheryRun(t, 4)
	d.env = tank("tank-1", 100)
	lock, err := d.Lock(0, LockOptions{})
	if err != nil {
		t.Fatal(err)
	}
	for _, env := range []*environment{tank("tank-1", 100), tank("tank-2")} {
		_, err = on(t, d, env).Lock(0, LockOptions{Wait: 3 * time.Second})
		var held *Held
		if !errors.As(err, &held) || held.Host != "tank-1" || held.PID != 100 || held.Part != 0 || held.Since == "" {
			t.Fatalf("a second process: %v", err)
		}
		if text := err.Error(); !strings.Contains(text, "part 0") || !strings.Contains(text, "process 100 on tank-1 since 2") {
			t.Errorf("it says %q", text)
		}
	}
	if err := lock.Unlock(); err != nil {
		t.Fatal(err)
	}
	if err := lock.Unlock(); err != nil {
		t.Errorf("given back twice: %v", err)
	}
	lock, err = on(t, d, tank("tank-2")).Lock(0, LockOptions{})
	if err != nil {
		t.Fatalf("after it was given back: %v", err)
	}
	lock.Unlock()
	for _, part := range []int{-1, 1} {
		if _, err := d.Lock(part, LockOptions{}); err == nil || !strings.Contains(err.Error(), "parts 0 to 0") {
			t.Errorf("part %d: %v", part, err)
		}
	}
}

// Who is known to be dead, and of whom nothing is known.
func TestDeadHolders(t *testing.T) {
	here := holder{Host: "tank-1", Boot: "b1", Space: "s1", PID: 7}
	with := func(change func(*holder)) holder { h := here; change(&h); return h }
	task := func(restart int) func() holder {
		return func() holder { return holder{Host: "tank-2", PID: 1, Task: "slurm 12 3", Restart: restart} }
	}
	for name, c := range map[string]struct {
		h    holder
		env  *environment
		dead bool
	}{
		"dead process of this machine":      {here, tank("tank-1", 100), true},
		"living process of this machine":    {here, tank("tank-1", 7), false},
		"process of another machine":        {here, tank("tank-2"), false},
		"before the machine was restarted":  {with(func(h *holder) { h.Boot = "b0" }), tank("tank-1"), false},
		"in another container":              {with(func(h *holder) { h.Space = "s2" }), tank("tank-1"), false},
		"nothing known":                     {holder{}, tank(""), false},
		"earlier start of the task":         {with(func(h *holder) { h.Task = "slurm 12 3" }), &environment{self: task(1)}, true},
		"the same start of the task":        {with(func(h *holder) { h.Task, h.Restart = "slurm 12 3", 1 }), &environment{self: task(1)}, false},
		"a later start of the task":         {with(func(h *holder) { h.Task, h.Restart = "slurm 12 3", 2 }), &environment{self: task(1)}, false},
		"earlier start of another task":     {with(func(h *holder) { h.Task = "slurm 12 4" }), &environment{self: task(1)}, false},
		"no task, and the number of a task": {with(func(h *holder) { h.PID = 1 }), &environment{self: task(1)}, false},
	} {
		if got := c.env.dead(c.h); got != c.dead {
			t.Errorf("%s: dead %v", name, got)
		}
		d := hatcheryRun(t, 4)
		leave(t, d, c.h)
		if c.env.sleep == nil {
			base := tank("tank-2")
			base.self, c.env = c.env.self, base
		}
		lock, err := on(t, d, c.env).Lock(0, LockOptions{})
		if c.dead != (err == nil) {
			t.Errorf("%s: %v", name, err)
		}
		if err == nil {
			lock.Unlock()
		}
	}
}

// What the system says about a real process: it lives, it ends, and its number
// alone does not make it another one.
func TestRealProcesses(t *testing.T) {
	me := self()
	if me.PID != os.Getpid() || me.Host == "" || !alive(me) {
		t.Errorf("this process: %+v, alive %v", me, alive(me))
	}
	child := exec.Command("sleep", "60")
	if err := child.Start(); err != nil {
		t.Fatal(err)
	}
	h := holder{PID: child.Process.Pid, Start: processStart(child.Process.Pid)}
	if !alive(h) {
		t.Error("a living process is taken for dead")
	}
	if h.Start != "" {
		// proc(5): clock ticks since the machine started, of which there are
		// 100 a second; the first number of /proc/uptime is seconds.
		var ticks, uptime float64
		fmt.Sscan(h.Start, &ticks)
		fmt.Sscan(firstLine("/proc/uptime"), &uptime)
		if ago := uptime - ticks/100; ago < -1 || ago > 20 {
			t.Errorf("the process began %v seconds ago", ago)
		}
		other := h
		other.Start = "1"
		if alive(other) {
			t.Error("another process of the same number is taken for the holder")
		}
	}
	if err := child.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	child.Wait()
	if alive(h) {
		t.Error("a dead process is taken for living")
	}
}

// The names are those of Slurm's documentation (sbatch, "Output environment
// variables"): SLURM_ARRAY_JOB_ID, SLURM_ARRAY_TASK_ID, SLURM_JOB_ID,
// SLURM_RESTART_COUNT (set once a job was restarted).
func TestSchedulerTask(t *testing.T) {
	for _, c := range []struct {
		env     map[string]string
		task    string
		restart int
	}{
		{nil, "", 0},
		{map[string]string{"SLURM_JOB_ID": "15"}, "slurm  15 ", 0},
		{map[string]string{"SLURM_JOB_ID": "15", "SLURM_ARRAY_JOB_ID": "12", "SLURM_ARRAY_TASK_ID": "3", "SLURM_RESTART_COUNT": "2", "SLURM_CLUSTER_NAME": "reef"}, "slurm reef 12 3", 2},
		{map[string]string{"SLURM_ARRAY_TASK_ID": "3"}, "", 0},
	} {
		task, restart := schedulerTask(func(name string) string { return c.env[name] })
		if task != c.task || restart != c.restart {
			t.Errorf("%v: %q, restart %d", c.env, task, restart)
		}
	}
}

// A lock is stale by the clock of the file system: its time against that of a
// file made beside it. A wait that reaches so far gets it.
func TestStaleLock(t *testing.T) {
	d := hatcheryRun(t, 4)
	path := leave(t, d, holder{Host: "tank-9", PID: 7})
	age := func(by time.Duration) {
		t.Helper()
		if err := os.Chtimes(path, time.Time{}, time.Now().Add(-by)); err != nil {
			t.Fatal(err)
		}
	}
	age(time.Minute)
	if _, err := on(t, d, tank("tank-1")).Lock(0, LockOptions{}); err == nil {
		t.Error("a lock that was touched a minute ago was taken")
	}
	age(3 * time.Minute)
	lock, err := on(t, d, tank("tank-1")).Lock(0, LockOptions{})
	if err != nil {
		t.Fatalf("a lock of three minutes: %v", err)
	}
	lock.Unlock()
	path = leave(t, d, holder{Host: "tank-9", PID: 7})
	env := tank("tank-1")
	waits := 0
	env.sleep = func(time.Duration, <-chan struct{}) bool {
		waits++
		age(time.Duration(waits) * time.Second) // time goes on
		return true
	}
	lock, err = on(t, d, env).Lock(0, LockOptions{Wait: 10 * time.Minute})
	if err != nil || waits < 115 || waits > 125 {
		t.Fatalf("after %d looks: %v", waits, err)
	}
	lock.Unlock()
	leave(t, d, holder{Host: "tank-9", PID: 7})
	if lock, err = on(t, d, tank("tank-1")).Lock(0, LockOptions{TakeOver: true}); err != nil {
		t.Fatalf("take over: %v", err)
	}
	lock.Unlock()
	if err := os.WriteFile(path, nil, 0o644); err != nil { // cut short by a crash
		t.Fatal(err)
	}
	_, err = on(t, d, tank("tank-1")).Lock(0, LockOptions{})
	if err == nil || !strings.Contains(err.Error(), "another process") {
		t.Errorf("a lock that says nothing: %v", err)
	}
	done := make(chan struct{})
	close(done)
	env = tank("tank-1")
	env.sleep = sleep
	start := time.Now()
	if _, err = on(t, d, env).Lock(0, LockOptions{Wait: time.Hour, Done: done}); err == nil || time.Since(start) > 10*time.Second {
		t.Errorf("a wait that was ended: %v after %v", err, time.Since(start))
	}
}

// A holder touches its lock by the clock of the file system, finds out that it
// was taken over, and leaves the new holder's lock alone.
func TestHeartbeat(t *testing.T) {
	d := hatcheryRun(t, 4)
	d.env = tank("tank-1")
	d.env.beat = 5 * time.Millisecond
	lock, err := d.Lock(0, LockOptions{})
	if err != nil {
		t.Fatal(err)
	}
	path := d.join(partsFolder, "0.lock")
	before, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.Chtimes(path, time.Time{}, time.Now().Add(-time.Hour)); err != nil {
		t.Fatal(err)
	}
	for end := time.Now().Add(20 * time.Second); ; time.Sleep(time.Millisecond) {
		info, err := os.Stat(path)
		if err == nil && time.Since(info.ModTime()) < time.Minute {
			break
		}
		if time.Now().After(end) {
			t.Fatal("the lock was not touched")
		}
	}
	if after, _ := os.ReadFile(path); string(after) != string(before) {
		t.Errorf("a touch changed %q to %q", before, after)
	}
	taker, err := on(t, d, tank("tank-2")).Lock(0, LockOptions{TakeOver: true})
	if err != nil {
		t.Fatal(err)
	}
	select {
	case <-lock.Lost():
	case <-time.After(20 * time.Second):
		t.Fatal("the holder did not find out")
	}
	if err := lock.Unlock(); err != nil {
		t.Error(err)
	}
	if text, err := os.ReadFile(path); err != nil || string(text) != string(taker.text) {
		t.Errorf("the new holder's lock: %q, %v", text, err)
	}
	if err := touch(path, lock.text); err != errLost {
		t.Errorf("touching a lock that was lost: %v", err)
	}
	if text, _ := os.ReadFile(path); string(text) != string(taker.text) {
		t.Errorf("the old holder wrote over the new one's lock: %q", text)
	}
	taker.Unlock()
	if _, err := os.Stat(path); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("after the last holder: %v", err)
	}
}

// Many processes find one dead holder at the same moment: somebody gets the
// lock, and hardly ever two. It cannot be ruled out without a lock for the
// lock, and need not be: two holders do double work and nothing else.
func TestManyTakersOfOneLock(t *testing.T) {
	t.Parallel()
	for _, fsys := range []files{disk{}, unlinked{}} {
		var both atomic.Int32
		for range 40 {
			d := hatcheryRun(t, 4)
			leave(t, d, holder{Host: "tank-1", Boot: "b1", Space: "s1", PID: 7})
			var group sync.WaitGroup
			var got atomic.Int32
			locks := make([]*Lock, 6)
			for i := range locks {
				group.Add(1)
				other := on(t, d, tank("tank-1", 100))
				other.fs = fsys
				go func() {
					defer group.Done()
					lock, err := other.Lock(0, LockOptions{})
					if err == nil {
						got.Add(1)
						locks[i] = lock
					} else if held := (*Held)(nil); !errors.As(err, &held) {
						t.Error(err)
					}
				}()
			}
			group.Wait()
			if got.Load() != 1 {
				both.Add(1)
			}
			if got.Load() == 0 {
				t.Error("nobody got the lock")
			}
			for _, lock := range locks {
				if lock != nil {
					if err := lock.Unlock(); err != nil {
						t.Error(err)
					}
				}
			}
			if left, _ := filepath.Glob(d.join(partsFolder, "*")); len(left) > 0 {
				t.Errorf("left behind: %v", left)
			}
		}
		if _, ok := fsys.(disk); ok && both.Load() > 4 {
			t.Errorf("in %d of 40 rounds not exactly one got the lock", both.Load())
		}
		t.Logf("%T: in %d of 40 rounds not exactly one", fsys, both.Load())
	}
}

// Two processes that change run.json at once lose nothing of each other.
func TestEditsAreNotLost(t *testing.T) {
	d := hatcheryRun(t, 4)
	var group sync.WaitGroup
	const each = 8
	for k := range 3 {
		group.Add(1)
		env := tank("tank-1", 100)
		env.sleep = func(time.Duration, <-chan struct{}) bool { time.Sleep(time.Millisecond); return true }
		other := on(t, d, env)
		go func() {
			defer group.Done()
			for i := range each {
				judged := Judged{Time: "2031-05-01T08:00:00Z", Draws: 4, Decision: hatcheryDecision(), Stable: 100*k + i}
				judged.Decision.Threshold = 0.9
				if err := other.LogJudgement(judged); err != nil {
					t.Error(err)
				}
				if err := other.Extend(4+2*(i+1), time.Unix(2e9, 0)); err != nil && !errors.Is(err, ErrSmaller) {
					t.Error(err)
				}
			}
		}()
	}
	group.Wait()
	run, err := readRun(d.Path())
	if err != nil {
		t.Fatal(err)
	}
	if len(run.Judgements) != 3*each || run.Meta.Number != 4+2*each || run.Extensions[len(run.Extensions)-1].To != run.Meta.Number {
		t.Errorf("%d judgements, %d draws, extensions %v", len(run.Judgements), run.Meta.Number, run.Extensions)
	}
	if _, err := os.Stat(d.join(editLock)); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("the lock of run.json was left: %v", err)
	}
}

// A directory that cannot be written says so, and not that somebody holds it.
func TestLockOfASealedDirectory(t *testing.T) {
	d := hatcheryRun(t, 4)
	d.fs = sealed{}
	if _, err := d.Lock(0, LockOptions{}); !errors.Is(err, ErrReadOnly) {
		t.Errorf("error %v", err)
	}
	if _, err := d.Log(0); !errors.Is(err, ErrReadOnly) {
		t.Errorf("log: %v", err)
	}
	if err := d.Extend(6, time.Now()); !errors.Is(err, ErrReadOnly) {
		t.Errorf("extend: %v", err)
	}
	if err := d.Extend(4, time.Now()); err != nil {
		t.Errorf("nothing to extend: %v", err)
	}
}

func ExampleHeld() {
	fmt.Println(&Held{Host: "tank-3", PID: 4711, Since: "2031-05-01T08:00:00Z", Part: 2})
	// Output: rundir: part 2 is being made by process 4711 on tank-3 since 2031-05-01T08:00:00Z: wait until it ends, or take over from it if it is dead
}
