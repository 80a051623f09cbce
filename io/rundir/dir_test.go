package rundir

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"syscall"
	"testing"

	"holdfast/selection"
)

func TestCreateRefusesAFullDirectory(t *testing.T) {
	study := []byte("[table]\n")
	attempt := func(fill func(dir string)) error {
		dir := t.TempDir()
		fill(dir)
		_, err := Create(dir, hatcheryIdentity(), study, hatcheryMeta(4))
		return err
	}
	write := func(name, text string) func(string) {
		return func(dir string) {
			os.MkdirAll(filepath.Dir(filepath.Join(dir, name)), 0o755)
			os.WriteFile(filepath.Join(dir, name), []byte(text), 0o644)
		}
	}
	refused := map[string]struct {
		fill func(string)
		says string
	}{
		"a run":                  {write("run.json", "{}"), "holds a holdfast run"},
		"a table":                {write("hatchery.parquet", "x"), "holds hatchery.parquet"},
		"another study":          {write("study.toml", "[draws]\n"), "holds study.toml"},
		"draws without run.json": {write("draws/block-000000.parquet", "x"), "holds draws"},
	}
	for name, c := range refused {
		err := attempt(c.fill)
		if !errors.Is(err, ErrExists) || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s: %v", name, err)
		}
	}
	accepted := map[string]func(string){
		"nothing":            func(string) {},
		"an empty folder":    func(dir string) { os.Mkdir(filepath.Join(dir, "draws"), 0o755) },
		"the same study":     write("study.toml", "[table]\n"),
		"an unfinished file": write(tempName("run.json"), "{"),
	}
	for name, fill := range accepted {
		if err := attempt(fill); err != nil {
			t.Errorf("%s: %v", name, err)
		}
	}
	if _, err := Create(filepath.Join(t.TempDir(), "a", "b.run"), hatcheryIdentity(), study, hatcheryMeta(4)); err != nil {
		t.Errorf("folders above it: %v", err)
	}
	file := filepath.Join(t.TempDir(), "file")
	os.WriteFile(file, nil, 0o644)
	if _, err := Create(file, hatcheryIdentity(), study, hatcheryMeta(4)); err == nil {
		t.Error("a file was taken for a directory")
	}
}

func TestCreateRefusesBadContent(t *testing.T) {
	cases := map[string]func(*Identity, *Meta){
		"no candidates":   func(i *Identity, m *Meta) { i.Candidates = nil },
		"given twice":     func(i *Identity, m *Meta) { i.Always = []string{"ph", "spawn_day"} },
		"not valid UTF-8": func(i *Identity, m *Meta) { i.Always = []string{"\xff", "spawn_day"} },
		"standard devi":   func(i *Identity, m *Meta) { m.Deviation = m.Deviation[1:] },
		"number of draws": func(i *Identity, m *Meta) { m.Number = 0 },
		"lambda_max":      func(i *Identity, m *Meta) { m.LambdaMax = odd[1] },
		"mix 2":           func(i *Identity, m *Meta) { i.Penalty.Mix = 2 },
		"relative":        func(i *Identity, m *Meta) { i.Penalty.Relative = map[string]float64{"ph": 0} },
		"not finite":      func(i *Identity, m *Meta) { m.Centre[3] = odd[3] },
		"must be given":   func(i *Identity, m *Meta) { i.Fingerprint = "" },
		"effective_size":  func(i *Identity, m *Meta) { m.EffectiveSize = odd[3] },
		"jitter 2":        func(i *Identity, m *Meta) { i.Penalty.Jitter = 2 },
		"luck -1":         func(i *Identity, m *Meta) { i.Penalty.Luck = -1 },
		"for kind number": func(i *Identity, m *Meta) { i.Outcome = "" },
		"success \"a\"":   func(i *Identity, m *Meta) { i.Success = "a" },
		"success \"\"":    func(i *Identity, m *Meta) { i.Kind = "yes-no" },
		"0 classes":       func(i *Identity, m *Meta) { i.Kind = "classes" },
		"1 classes":       func(i *Identity, m *Meta) { i.Kind, i.Classes = "classes", []string{"spat"} },
		"2 classes":       func(i *Identity, m *Meta) { i.Classes = []string{"spat", "seed"} },
		"class \"spat\"":  func(i *Identity, m *Meta) { i.Kind, i.Classes = "classes", []string{"spat", "spat"} },
		"class \"\\xff":   func(i *Identity, m *Meta) { i.Kind, i.Classes = "classes", []string{"spat", "\xff"} },
		"no outcome col":  func(i *Identity, m *Meta) { i.Kind, i.Time, i.Event, i.Ties = "survival", "days", "settled", "efron" },
		"has time, event": func(i *Identity, m *Meta) { i.Kind, i.Outcome, i.Time, i.Event = "survival", "", "days", "settled" },
		"not for number":  func(i *Identity, m *Meta) { i.Strata = []string{"season"} },
		"neither a cand":  func(i *Identity, m *Meta) { i.Terms = map[string][]string{"feed": {"feed=oats"}} },
		"none":            func(i *Identity, m *Meta) { i.Terms = map[string][]string{"ph": {}} },
		"term \"a\"":      func(i *Identity, m *Meta) { i.Terms = map[string][]string{"ph": {"a", "a"}} },
		"8 means and":     func(i *Identity, m *Meta) { i.Terms = map[string][]string{"spawn_day": {"a", "b"}} },
		"for 9 columns": func(i *Identity, m *Meta) {
			i.Terms, i.Penalty.GroupWeight = map[string][]string{"ph": {"a", "b"}}, "sqrt"
		},
		"group_weight": func(i *Identity, m *Meta) { i.Terms = map[string][]string{"ph": {"a", "b"}} },
		"luck 0": func(i *Identity, m *Meta) {
			i.Terms, i.Penalty.GroupWeight = map[string][]string{"ph": {"a", "b"}}, "even"
		},
		"text \"\\xfe":    func(i *Identity, m *Meta) { i.Reference = map[string]string{"ph": "\xfe"} },
		"text \"\\xfd":    func(i *Identity, m *Meta) { i.Draws.Within = []string{"\xfd"} },
		"text \"\\xfc":    func(i *Identity, m *Meta) { i.Exposure = "\xfc" },
		"no lattice step": func(i *Identity, m *Meta) { m.LastStep = 1 << 40 },
	}
	for says, spoil := range cases {
		id, meta := hatcheryIdentity(), hatcheryMeta(4)
		spoil(&id, &meta)
		dir := filepath.Join(t.TempDir(), "new.run")
		_, err := Create(dir, id, nil, meta)
		if err == nil || !strings.Contains(err.Error(), says) {
			t.Errorf("%s: %v", says, err)
		}
		if _, err := os.Stat(dir); !errors.Is(err, fs.ErrNotExist) {
			t.Errorf("%s: the refused directory was made", says)
		}
	}
}

// A write that fails inside the Parquet library, at any byte, is an error: the
// library itself loses that of the footer.
func TestFailedWritesOfABlockSurface(t *testing.T) {
	run := hatcheryRun(t, 4).Run()
	block := numberedFrom(0, randomPaths(source(t), 4))
	size := len(encoded(t, run, block))
	for n := 0; n < size; n += 7 {
		if err := run.encodeBlock(&short{left: n}, block, sumsOf(block)); err == nil {
			t.Fatalf("a disk that was full after %d of %d bytes was not noticed", n, size)
		}
	}
}

// short takes so many bytes and no more.
type short struct{ left int }

func (s *short) Write(b []byte) (int, error) {
	if len(b) > s.left {
		n := s.left
		s.left = 0
		return n, syscall.ENOSPC
	}
	s.left -= len(b)
	return len(b), nil
}

func TestModeFollowsTheUmask(t *testing.T) {
	for _, c := range []struct{ umask, mode int }{{0o022, 0o644}, {0o077, 0o600}, {0o002, 0o644}} {
		old := syscall.Umask(c.umask)
		path := filepath.Join(t.TempDir(), "x.csv")
		err := WriteFile(path, writes([]byte("x")))
		syscall.Umask(old)
		info, err2 := os.Stat(path)
		if err != nil || err2 != nil || info.Mode().Perm() != fs.FileMode(c.mode) {
			t.Errorf("umask %03o: mode %v, %v, %v", c.umask, info.Mode(), err, err2)
		}
	}
}

func TestDecisionOfRecordComesFirstAndOnce(t *testing.T) {
	paths := randomPaths(source(t), 2)
	d, err := Create(t.TempDir(), hatcheryIdentity(), nil, hatcheryMeta(2))
	if err != nil {
		t.Fatal(err)
	}
	if err := d.Put(upTo(0, 2), paths); !errors.Is(err, ErrNoDecision) {
		t.Errorf("draws before the decision: %v", err)
	}
	bad := hatcheryDecision()
	bad.Selected = 0
	if err := d.SetDecision(bad); err == nil {
		t.Error("a decision with selected 0 was kept")
	}
	if err := d.SetDecision(hatcheryDecision()); err != nil {
		t.Fatal(err)
	}
	if err := d.SetDecision(hatcheryDecision()); err != nil {
		t.Errorf("the same decision again: %v", err)
	}
	other := hatcheryDecision()
	other.Threshold = 0.9
	if err := d.SetDecision(other); !errors.Is(err, ErrDecided) {
		t.Errorf("second decision: %v", err)
	}
	undecided := d.Run()
	undecided.Decision = nil
	if err := d.Put(upTo(0, 2), paths); err != nil {
		t.Fatal(err)
	}
	if err := writeFile(disk{}, d.join(runFile), undecided.encode); err != nil {
		t.Fatal(err)
	}
	if err := d.SetDecision(hatcheryDecision()); !errors.Is(err, ErrDecided) {
		t.Errorf("decision after draws: %v", err)
	}
}

func TestJudgementsAreLoggedOnce(t *testing.T) {
	d := hatcheryRun(t, 4)
	second, err := Open(d.Path())
	if err != nil {
		t.Fatal(err)
	}
	other := hatcheryDecision()
	other.Threshold = 0.9
	record := Judged{Time: "2031-05-01T08:00:00Z", Draws: 4, Decision: hatcheryDecision(), Stable: 2}
	explored := Judged{Time: "2031-05-02T08:00:00Z", Draws: 4, Decision: other, Stable: 1}
	again := explored
	again.Time = "2031-05-03T08:00:00Z"
	saved := again
	saved.Saved = true
	common := explored
	common.Decision.Region = selection.Common
	for _, step := range []struct {
		dir  *Dir
		add  Judged
		want int
	}{{d, record, 0}, {d, explored, 1}, {second, again, 1}, {second, common, 2}, {d, saved, 3}, {d, again, 3}} {
		if err := step.dir.LogJudgement(step.add); err != nil {
			t.Fatal(err)
		}
		if got := len(step.dir.Run().Judgements); got != step.want {
			t.Errorf("after %+v: %d judgements, not %d", step.add, got, step.want)
		}
	}
	fewer := record
	fewer.Draws = 2
	if err := d.LogJudgement(fewer); err != nil || len(d.Run().Judgements) != 4 {
		t.Errorf("the record's decision on fewer draws: %v, %d judgements", err, len(d.Run().Judgements))
	}
	fresh, err := Open(d.Path())
	if err != nil || len(fresh.Run().Judgements) != 4 || fresh.Run().Judgements[0].Time != explored.Time {
		t.Errorf("on disk: %+v, %v", fresh.Run().Judgements, err)
	}
}

// A copy that cannot be written is read all the same, and says so only where
// something was to be written. The file system is simulated: the superuser
// may write anywhere.
func TestReadOnlyCopyIsRead(t *testing.T) {
	d := hatcheryRun(t, 2)
	if err := d.Put(upTo(0, 2), randomPaths(source(t), 2)); err != nil {
		t.Fatal(err)
	}
	before := listing(t, d.Path())
	copied, err := Open(d.Path())
	if err != nil {
		t.Fatal(err)
	}
	copied.fs = sealed{}
	if draws, err := copied.Draws(); err != nil || len(draws) != 2 {
		t.Errorf("%d draws, %v", len(draws), err)
	}
	other := hatcheryDecision()
	other.Selected = 1
	if err := copied.LogJudgement(Judged{Decision: other}); !errors.Is(err, ErrReadOnly) {
		t.Errorf("logging: %v", err)
	}
	if err := copied.Write("stability.csv", writes(nil)); !errors.Is(err, ErrReadOnly) {
		t.Errorf("saving: %v", err)
	}
	if after := listing(t, d.Path()); after != before {
		t.Errorf("reading changed the directory:\n%s\n%s", before, after)
	}
}

// listing names every file with size and time of change.
func listing(t *testing.T, dir string) string {
	t.Helper()
	var b strings.Builder
	err := filepath.Walk(dir, func(path string, info fs.FileInfo, err error) error {
		if err == nil {
			fmt.Fprintln(&b, path, info.Size(), info.ModTime())
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return b.String()
}

func TestResultFilesStayInTheirPlace(t *testing.T) {
	d := hatcheryRun(t, 2)
	for _, name := range []string{"run.json", "study.toml", "../x.csv", "draws/x", "", ".", ".."} {
		if err := d.Write(name, writes(nil)); err == nil {
			t.Errorf("%q was written", name)
		}
	}
	keep := errors.New("no more rows")
	if err := d.Write("stability.csv", writes([]byte("old"))); err != nil {
		t.Fatal(err)
	}
	err := d.Write("stability.csv", func(w io.Writer) error { io.WriteString(w, "new"); return keep })
	text, _ := os.ReadFile(d.join("stability.csv"))
	if !errors.Is(err, keep) || string(text) != "old" {
		t.Errorf("a failed write: %v, and the file holds %q", err, text)
	}
}

func TestParts(t *testing.T) {
	meta := hatcheryMeta(2)
	meta.Parts = 11
	d, err := Create(t.TempDir(), hatcheryIdentity(), nil, meta)
	if err != nil {
		t.Fatal(err)
	}
	for _, part := range []int{10, 2, 0} {
		if err := d.WritePart(Part{Part: part, State: "done", Host: "tank-3", Draws: 2, Violation: 1e-12}); err != nil {
			t.Fatal(err)
		}
	}
	list, err := d.Parts()
	if err != nil || len(list) != 3 || list[0].Part != 0 || list[1].Part != 2 || list[2].Part != 10 || list[2].Host != "tank-3" {
		t.Errorf("%+v, %v", list, err)
	}
	if err := d.WritePart(Part{Part: -1}); err == nil {
		t.Error("part -1 was written")
	}
	if err := d.WritePart(Part{Part: 11}); err == nil || !strings.Contains(err.Error(), "parts 0 to 10") {
		t.Errorf("part 11 of 11: %v", err)
	}
}

func TestOpenRefuses(t *testing.T) {
	dir := t.TempDir()
	if _, err := Open(dir); !errors.Is(err, fs.ErrNotExist) || !strings.Contains(err.Error(), "no run directory") {
		t.Errorf("empty directory: %v", err)
	}
	d := hatcheryRun(t, 2)
	path := d.join(runFile)
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	for says, change := range map[string][2]string{
		"format 4: a later version of holdfast made this run, and this one reads format 3":    {`"format": 3`, `"format": 4`},
		"format 2: an earlier version of holdfast made this run, and this one reads format 3": {`"format": 3`, `"format": 2`},
		"architecture":     {`"architecture": "`, `"elsewhere": "`},
		"file was changed": {`"seed": 1`, `"seed": 2`},
		"not readable":     {`"centre": [`, `"centre": [[`},
		"region":           {`"region": "cap"`, `"region": "everything"`},
	} {
		spoiled := strings.Replace(string(text), change[0], change[1], 1)
		if spoiled == string(text) {
			t.Fatalf("%s: %s is not in run.json", says, change[0])
		}
		os.WriteFile(path, []byte(spoiled), 0o644)
		if _, err := Open(d.Path()); err == nil || !strings.Contains(err.Error(), says) || !strings.Contains(err.Error(), path) {
			t.Errorf("%s: %v", says, err)
		}
	}
}

func TestPutFromManyWorkers(t *testing.T) {
	d := hatcheryRun(t, 40)
	paths := randomPaths(source(t), 40)
	var wg sync.WaitGroup
	for first := 0; first < 40; first += 4 {
		wg.Add(1)
		go func() {
			defer wg.Done()
			if err := d.Put(upTo(first, first+4), paths[first:first+4]); err != nil {
				t.Error(err)
			}
		}()
	}
	wg.Wait()
	if draws, err := d.Draws(); err != nil || len(draws) != 40 {
		t.Errorf("%d draws, %v", len(draws), err)
	}
}
