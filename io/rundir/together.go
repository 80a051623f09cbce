package rundir

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"slices"
	"strings"
	"time"

	"holdfast/selection"
)

// Patience says how long one waits for a file system that shows files late:
// the machine that reads may see what another wrote some seconds after.
type Patience struct {
	Most  time.Duration       // all the waiting together; 0: none
	Every time.Duration       // between two looks
	Sleep func(time.Duration) // nil: time.Sleep
}

// DefaultPatience is more than the usual caches of network file systems need
// once a folder is opened anew.
var DefaultPatience = Patience{Most: 20 * time.Second, Every: time.Second}

// until calls look until it is content or the time is up.
func (p Patience) until(look func() (content bool, err error)) error {
	pause := p.Sleep
	if pause == nil {
		pause = time.Sleep
	}
	for waited := time.Duration(0); ; waited += max(p.Every, time.Millisecond) {
		content, err := look()
		if err != nil || content || waited >= p.Most {
			return err
		}
		pause(max(p.Every, time.Millisecond))
	}
}

// Set is one run in one or more directories: parts may write into a directory
// of their own each.
type Set struct {
	dirs     []*Dir
	patience Patience
}

// OpenTogether opens directories that hold one run together. It refuses those
// that are not of one study, table, decision, major version and architecture
// with a *Mismatch. One directory is a set too.
func OpenTogether(dirs []string) (*Set, error) { return DefaultPatience.OpenTogether(dirs) }

// OpenTogether is the function of that name with another patience.
func (p Patience) OpenTogether(paths []string) (*Set, error) {
	if len(paths) == 0 {
		return nil, errors.New("rundir: no run directory is given")
	}
	s := &Set{patience: p}
	for _, path := range paths {
		d, err := p.open(path)
		if err != nil {
			return nil, err
		}
		if err := s.join(d); err != nil {
			return nil, err
		}
	}
	return s, nil
}

// open opens a directory, and waits for run.json where its folder of draws is
// there already.
func (p Patience) open(path string) (d *Dir, err error) {
	waitErr := p.until(func() (bool, error) {
		d, err = Open(path)
		if !errors.Is(err, fs.ErrNotExist) {
			return true, nil
		}
		_, none := os.Stat(path + string(os.PathSeparator) + drawsFolder)
		return none != nil, nil
	})
	return d, errors.Join(err, waitErr)
}

// join adds a directory that belongs to the run.
func (s *Set) join(d *Dir) error {
	for _, other := range s.dirs {
		if same, err := sameFolder(other.path, d.path); err != nil {
			return fmt.Errorf("rundir: %w", err)
		} else if same {
			return fmt.Errorf("rundir: %s and %s are one directory: name it once", other.path, d.path)
		}
	}
	if len(s.dirs) > 0 {
		first := s.dirs[0]
		a, b := first.Run(), d.Run()
		b.Meta.Parts = a.Meta.Parts // how draws were shared out is no matter once they are made
		changes := append(differences(&a, &b), decisionChanges(a.Decision, b.Decision)...)
		if len(changes) > 0 {
			return &Mismatch{
				What:    fmt.Sprintf("rundir: %s and %s are not of one run (the first, now the second):", first.path, d.path),
				Changes: changes,
			}
		}
	}
	s.dirs = append(s.dirs, d)
	return nil
}

func sameFolder(a, b string) (bool, error) {
	x, err := os.Stat(a)
	if err != nil {
		return false, err
	}
	y, err := os.Stat(b)
	return err == nil && os.SameFile(x, y), err
}

// decisionChanges compares decisions of record.
func decisionChanges(a, b *selection.Decision) []Change {
	if a == nil && b == nil || a != nil && b != nil && a.Same(*b) {
		return nil
	}
	return []Change{{"decision of record", decisionText(a), decisionText(b)}}
}

func decisionText(d *selection.Decision) string {
	if d == nil {
		return "none yet"
	}
	return fmt.Sprintf("threshold %v, selected %d, region %s, bound %s", d.Threshold, d.Selected, d.Region, d.Bound)
}

// Dirs returns the directories in the order in which they were named.
func (s *Set) Dirs() []*Dir { return s.dirs }

// Run returns the run as the directories know it together: the content of the
// first one's run.json, with the largest number of draws, and with the log of
// judgements and extensions of all.
func (s *Set) Run() Run {
	run := s.dirs[0].Run()
	for _, d := range s.dirs[1:] {
		other := d.Run()
		if other.Meta.Number > run.Meta.Number {
			run.Meta.Number, run.Extensions = other.Meta.Number, other.Extensions
		}
		run.Judgements = append(run.Judgements[:len(run.Judgements):len(run.Judgements)], other.Judgements...)
	}
	return run
}

// Read reads the draws of all directories. Where draws are missing that should
// be there (no part says that it is not done) it looks for new files for a
// while: the file system may show them late.
func (s *Set) Read() (f *Finished, err error) {
	var seen []blockFile
	err = s.patience.until(func() (bool, error) {
		files, err := s.blocks()
		if err != nil {
			return false, err
		}
		if f != nil && slices.Equal(files, seen) {
			return false, nil
		}
		seen = files
		if f, err = read(true, s.dirs...); err != nil {
			return false, err
		}
		return len(f.Missing) == 0 || len(f.Damaged) > 0 || s.unfinished(), nil
	})
	if err != nil {
		return nil, err
	}
	return f, nil
}

// blocks lists the block files of all directories.
func (s *Set) blocks() (all []blockFile, err error) {
	for _, d := range s.dirs {
		list, err := d.blocks()
		if err != nil {
			return nil, err
		}
		all = append(all, list...)
	}
	return all, nil
}

// unfinished reports whether a part is known not to have ended well.
func (s *Set) unfinished() bool {
	parts, err := s.Parts()
	if err != nil {
		return true // nothing to wait for
	}
	for _, p := range parts {
		if p.State != StateDone {
			return true
		}
	}
	return false
}

// Parts lists the records of parts of all directories, ascending.
func (s *Set) Parts() ([]Part, error) {
	var all []Part
	for _, d := range s.dirs {
		list, err := d.Parts()
		if err != nil {
			return nil, err
		}
		all = append(all, list...)
	}
	return sortedParts(all), nil
}

// Draws returns all draws, ordered by number. The error names the draws that
// are missing, by part where there are several, and every damaged block.
func (s *Set) Draws() ([]selection.Draw, error) {
	f, err := s.Read()
	if err != nil {
		return nil, err
	}
	if err := f.complete(s.name()); err != nil {
		return nil, errors.Join(err, s.missingParts(f.Missing))
	}
	return f.Draws, nil
}

// name names the set in messages.
func (s *Set) name() string {
	words := make([]string, len(s.dirs))
	for i, d := range s.dirs {
		words[i] = d.path
	}
	return strings.Join(words, ", ")
}

// missingParts says which parts the missing draws belong to; nil where there
// is one part, or where the directories do not agree about the number.
func (s *Set) missingParts(missing []int) error {
	run := s.Run()
	parts := run.Meta.Parts
	for _, d := range s.dirs {
		if d.PartCount() != parts {
			return nil
		}
	}
	if parts == 1 {
		return nil
	}
	counts := make(map[int]int)
	for _, draw := range missing {
		counts[run.PartOf(draw)]++
	}
	var words []string
	for part := range parts {
		if counts[part] > 0 {
			words = append(words, fmt.Sprintf("part %d (%d draws)", part, counts[part]))
		}
	}
	if len(words) == 0 {
		return nil
	}
	return fmt.Errorf("rundir: of %d parts these are not whole: %s", parts, some(words))
}
