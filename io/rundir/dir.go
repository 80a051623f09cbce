package rundir

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"runtime"
	"sort"
	"sync"
	"syscall"
)

const (
	runFile     = "run.json"
	studyFile   = "study.toml"
	drawsFolder = "draws"
	partsFolder = "parts"
	logsFolder  = "logs"
)

// Dir is an open run directory.
type Dir struct {
	path string
	fs   files
	env  *environment

	mu  sync.Mutex
	run Run
}

// ErrExists is what errors.Is finds where Create refuses a directory that
// holds something.
var ErrExists = errors.New("the directory is not empty")

// Create makes a run directory, with the folders above it where they are
// missing. A directory that holds anything is refused, except for what a
// creation of the same run leaves when it is killed. run.json is written last:
// a directory that has one is complete.
func Create(dir string, id Identity, study []byte, meta Meta) (*Dir, error) {
	return create(disk{}, dir, id, study, meta)
}

func create(fsys files, dir string, id Identity, study []byte, meta Meta) (*Dir, error) {
	run := Run{Format: Format, Digest: id.Digest(), Identity: id.resolved(), Meta: meta.resolved(), Judgements: []Judged{}, Extensions: []Extension{}}
	if err := run.check(); err != nil {
		return nil, fmt.Errorf("rundir: create %s: %w", dir, err)
	}
	if err := refuseFull(dir, study); err != nil {
		return nil, fmt.Errorf("rundir: create %s: %w", dir, err)
	}
	d := &Dir{path: dir, fs: fsys, env: machine, run: run}
	for _, folder := range []string{drawsFolder, partsFolder, logsFolder} {
		if err := makeFolder(fsys, d.join(folder)); err != nil {
			return nil, fmt.Errorf("rundir: create %s: %w", dir, troubled(err))
		}
	}
	if err := writeFile(fsys, d.join(studyFile), writes(study)); err != nil {
		return nil, troubled(err)
	}
	// Parts that start together all come here; one of them makes the run.
	err := writeNew(fsys, d.join(runFile), run.encode)
	if errors.Is(err, fs.ErrExist) {
		return nil, fmt.Errorf("rundir: create %s: %w: another process made the run at this moment", dir, ErrExists)
	}
	if err != nil {
		return nil, troubled(err)
	}
	return d, nil
}

// resolved fills in what zero values stand for.
func (m Meta) resolved() Meta {
	m.Excluded = append([]Excluded{}, m.Excluded...)
	if m.Architecture == "" {
		m.Architecture = runtime.GOARCH
	}
	m.Parts = max(m.Parts, 1)
	return m
}

// makeFolder makes a folder, with those above it where they are missing, and
// syncs the folder above each one that it makes: a folder that is not synced
// takes all that is in it along when the power fails.
func makeFolder(fsys files, path string) error {
	info, err := os.Stat(path)
	if err == nil && !info.IsDir() {
		return &fs.PathError{Op: "mkdir", Path: path, Err: syscall.ENOTDIR}
	}
	if err == nil {
		return nil
	}
	above := filepath.Dir(filepath.Clean(path))
	if above != path {
		if err := makeFolder(fsys, above); err != nil {
			return err
		}
	}
	if err := fsys.Mkdir(path); err != nil && !errors.Is(err, fs.ErrExist) {
		return err
	}
	return fsys.SyncFolder(above)
}

func writes(text []byte) func(io.Writer) error {
	return func(w io.Writer) error {
		_, err := w.Write(text)
		return err
	}
}

// refuseFull returns an error that says what the directory holds, if it holds
// more than a killed creation with the same study leaves.
func refuseFull(dir string, study []byte) error {
	entries, err := os.ReadDir(dir)
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	if err != nil {
		return err
	}
	for _, e := range entries {
		if e.Name() == runFile {
			return fmt.Errorf("%w: it holds a holdfast run: give another --out, or remove it to run again", ErrExists)
		}
	}
	for _, e := range entries {
		if !leftover(dir, e, study) {
			return fmt.Errorf("%w: it holds %s: give another --out", ErrExists, e.Name())
		}
	}
	return nil
}

// leftover reports whether an entry is what a killed creation leaves.
func leftover(dir string, e fs.DirEntry, study []byte) bool {
	path := filepath.Join(dir, e.Name())
	switch {
	case isTemp(e.Name()):
		return true
	case e.Name() == studyFile:
		text, err := readLimited(path, maxRunJSON)
		return err == nil && string(text) == string(study)
	case e.Name() == drawsFolder || e.Name() == partsFolder || e.Name() == logsFolder:
		inside, err := os.ReadDir(path)
		return err == nil && len(inside) == 0
	}
	return false
}

// Open opens a run directory. It changes nothing.
func Open(dir string) (*Dir, error) {
	run, err := readRun(dir)
	if err != nil {
		return nil, err
	}
	return &Dir{path: dir, fs: disk{}, env: machine, run: *run}, nil
}

func readRun(dir string) (*Run, error) {
	path := filepath.Join(dir, runFile)
	text, err := readLimited(path, maxRunJSON)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, fmt.Errorf("rundir: %s: no run.json, so this is no run directory: %w", dir, err)
	}
	if err != nil {
		return nil, fmt.Errorf("rundir: %w", err)
	}
	run, err := decodeRun(text)
	if err != nil {
		return nil, fmt.Errorf("rundir: %s: %w", path, err)
	}
	return run, nil
}

// Path returns the directory's path as it was given.
func (d *Dir) Path() string { return d.path }

// Run returns the content of run.json. Its slices and maps must not be
// written.
func (d *Dir) Run() Run {
	d.mu.Lock()
	defer d.mu.Unlock()
	return d.run
}

// Study returns the text of study.toml.
func (d *Dir) Study() ([]byte, error) {
	text, err := readLimited(d.join(studyFile), maxRunJSON)
	if err != nil {
		return nil, fmt.Errorf("rundir: %w", err)
	}
	return text, nil
}

// SetStudy replaces study.toml: after an extension it says the new number of
// draws, so that it makes the run as it is.
func (d *Dir) SetStudy(text []byte) error {
	return troubled(writeFile(d.fs, d.join(studyFile), writes(text)))
}

// Write writes a result file of that name into the directory, whole or not at
// all, replacing an older one. The name has no folder in it.
func (d *Dir) Write(name string, write func(io.Writer) error) error {
	if filepath.Base(name) != name || name == runFile || name == studyFile || name == "." || name == ".." {
		return fmt.Errorf("rundir: write %q: not the name of a result file", name)
	}
	return troubled(writeFile(d.fs, d.join(name), write))
}

func (d *Dir) join(names ...string) string {
	return filepath.Join(append([]string{d.path}, names...)...)
}

// blockFile is one file of the draws folder.
type blockFile struct {
	path  string
	first int
}

// blocks lists the block files by their first draw.
func (d *Dir) blocks() ([]blockFile, error) {
	entries, err := os.ReadDir(d.join(drawsFolder))
	if err != nil {
		return nil, fmt.Errorf("rundir: %w", err)
	}
	var list []blockFile
	for _, e := range entries {
		if first, ok := blockNumber(e.Name()); ok {
			list = append(list, blockFile{d.join(drawsFolder, e.Name()), first})
		}
	}
	sort.Slice(list, func(a, b int) bool { return list[a].first < list[b].first })
	return list, nil
}
