package rundir

import (
	"errors"
	"fmt"
	"io/fs"
	"slices"
	"strings"
	"syscall"

	"holdfast/selection"
	"holdfast/solver"
)

// Damage is a block that cannot be used, and why. Err names the file.
type Damage struct {
	Path  string
	First int // its first draw, from its name
	Err   error
}

// Uncertified is a draw whose path ended before a step that could not be
// certified.
type Uncertified struct {
	Draw int
	Step int // the step that failed
	Why  string
}

// Finished is what is on disk.
type Finished struct {
	Draws   []selection.Draw // ordered by number; nil from Survey
	Count   int              // draws that are there
	Missing []int            // numbers of draws that no readable block holds, ascending
	Beyond  int              // draws that are there and beyond the run's number: an extension that run.json does not know
	Damaged []Damage

	Violation   float64 // worst over all draws
	Gap         float64
	Borderline  int // steps at which a candidate stood on the border and stayed out
	Twins       int // entries at steps where linearly dependent candidates share the fit
	Uncertified []Uncertified

	Certificates []Certificate // of the draws that are there, ordered by number
}

// ErrIncomplete is what errors.Is finds where draws are missing or damaged.
var ErrIncomplete = errors.New("draws are missing")

// Draws returns all draws of the run, ordered by number. An error names every
// block that is damaged and the draws that are missing.
func (d *Dir) Draws() ([]selection.Draw, error) {
	f, err := d.Read()
	if err != nil {
		return nil, err
	}
	if err := f.complete(d.path); err != nil {
		return nil, err
	}
	return f.Draws, nil
}

// complete returns an error if draws are missing. A damaged block whose draws
// stand in another one too is no hole.
func (f *Finished) complete(path string) error {
	if len(f.Missing) == 0 {
		return nil
	}
	list := []error{fmt.Errorf("rundir: %s: %w: %s of %d", path, ErrIncomplete, ranges(f.Missing), f.Count+len(f.Missing))}
	for _, b := range f.Damaged {
		list = append(list, b.Err)
	}
	return errors.Join(list...)
}

// Read reads and checks every block, one at a time. Damaged blocks and
// missing draws are listed; a block of another run, and two blocks that
// disagree about a draw, are errors. A draw that two blocks hold with equal
// bits counts once: two processes may have made it.
func (d *Dir) Read() (*Finished, error) { return read(true, d) }

// Survey is Read without the draws: what is there, what is missing or damaged,
// and the certificates, in little memory.
func (d *Dir) Survey() (*Finished, error) { return read(false, d) }

// read reads the draws of one or more directories of one run. The number of
// draws is the largest of theirs.
func read(keep bool, dirs ...*Dir) (*Finished, error) {
	number := 0
	for _, d := range dirs {
		number = max(number, d.Run().Meta.Number)
	}
	f := &Finished{}
	byNumber := make([]*selection.Draw, number)
	err := scan(dirs, &f.Damaged, func(d *Dir, n *numbered) {
		if n.number >= number {
			f.Beyond++
			return
		}
		byNumber[n.number] = f.add(n, d.Run().Meta.LastStep, keep)
	})
	if err != nil {
		return nil, err
	}
	f.collect(byNumber, keep)
	f.sortUncertified()
	return f, nil
}

// collect lists the draws in order, and those that are missing.
func (f *Finished) collect(byNumber []*selection.Draw, keep bool) {
	for number, draw := range byNumber {
		if draw == nil {
			f.Missing = append(f.Missing, number)
			continue
		}
		f.Count++
		if keep {
			f.Draws = append(f.Draws, *draw)
		}
	}
}

// ReadPaths returns the full record of every draw, ordered by number, and
// fails where Draws does.
func (d *Dir) ReadPaths() ([]solver.Path, error) {
	f := &Finished{}
	paths := make([]solver.Path, d.Run().Meta.Number)
	seen := make([]bool, len(paths))
	err := scan([]*Dir{d}, &f.Damaged, func(_ *Dir, n *numbered) {
		if n.number < len(paths) {
			paths[n.number], seen[n.number] = n.path, true
			f.Count++
		}
	})
	if err != nil {
		return nil, err
	}
	for number := range seen {
		if !seen[number] {
			f.Missing = append(f.Missing, number)
		}
	}
	return paths, f.complete(d.path)
}

// origin is where a draw was read, and its digest.
type origin struct {
	sum  sum
	path string
}

// scan calls each for every draw on disk, once.
func scan(dirs []*Dir, damaged *[]Damage, each func(*Dir, *numbered)) error {
	draws := make(map[int]origin)
	for _, d := range dirs {
		run := d.Run()
		blocks, err := d.blocks()
		if err != nil {
			return err
		}
		for _, file := range blocks {
			block, sums, err := run.readBlock(file.path)
			switch {
			case errors.Is(err, fs.ErrNotExist):
				continue // another process set it aside since the folder was listed
			case errors.Is(err, ErrForeign), noAnswer(err):
				return err
			case err != nil:
				*damaged = append(*damaged, Damage{file.path, file.first, err})
				continue
			}
			for i := range block {
				if isNew, err := note(draws, block[i].number, origin{sums[i], file.path}); err != nil {
					return err
				} else if isNew {
					each(d, &block[i])
				}
			}
		}
	}
	return nil
}

// note keeps where a draw was found, and reports whether it is new. Two draws
// of one number that differ are an error.
func note(draws map[int]origin, number int, found origin) (isNew bool, err error) {
	other, ok := draws[number]
	if !ok {
		draws[number] = found
		return true, nil
	}
	if other.sum != found.sum {
		return false, fmt.Errorf("rundir: blocks %s and %s disagree about draw %d: remove the wrong one", other.path, found.path, number)
	}
	return false, nil
}

// noAnswer tells a file that the system did not let us read, which says
// nothing about what is in it, from a damaged one. A medium that cannot be
// read any more is damage.
func noAnswer(err error) bool {
	var failed *fs.PathError
	return errors.As(err, &failed) && !errors.Is(err, syscall.EIO)
}

// add takes note of a draw's certificate, and turns its record into what a
// judgement needs, if that is to be kept.
func (f *Finished) add(n *numbered, lastStep int, keep bool) *selection.Draw {
	p := &n.path
	f.Certificates = append(f.Certificates, CertificateOf(n.number, p))
	f.Violation = max(f.Violation, p.Violation)
	f.Gap = max(f.Gap, p.Gap)
	f.Borderline += p.Borderline
	f.Twins += p.Twins
	if p.Stop == solver.StopUncertified {
		f.Uncertified = append(f.Uncertified, Uncertified{n.number, p.Last + 1, p.Why})
	}
	if !keep {
		return &selection.Draw{}
	}
	draw := &selection.Draw{
		Number: n.number, First: p.First, Last: p.Last,
		Uncertified: p.Stop == solver.StopUncertified,
		Complete:    p.Last >= p.First && p.Last >= lastStep,
		Always:      p.Always,
		Still:       p.Still,
		Twins:       p.Twins,
		Redraws:     p.Redraws,
		Deviance:    p.Deviance, NullDeviance: p.NullDeviance,
	}
	for _, e := range p.Entries {
		draw.Entries = append(draw.Entries, selection.Entry{Predictor: e.Candidate, Step: e.Step, Negative: e.Negative})
	}
	if len(p.Coefs) > 0 {
		draw.Coefs = make([]selection.Coef, len(p.Coefs))
	}
	for i, c := range p.Coefs {
		draw.Coefs[i] = selection.Coef{Step: c.Step, Predictor: c.Candidate, Term: c.Term, Class: c.Class, Value: c.Value}
	}
	return draw
}

// ranges writes ascending numbers briefly: "0-7, 12 and 20-21".
func ranges(list []int) string {
	var words []string
	for i := 0; i < len(list); {
		j := i
		for j+1 < len(list) && list[j+1] == list[j]+1 {
			j++
		}
		if i == j {
			words = append(words, fmt.Sprint(list[i]))
		} else {
			words = append(words, fmt.Sprintf("%d-%d", list[i], list[j]))
		}
		i = j + 1
	}
	const most = 8
	if len(words) > most {
		words = append(words[:most], "...")
	}
	return fmt.Sprintf("%d (numbers %s)", len(list), strings.Join(words, ", "))
}

// sortUncertified puts the lists in draw order, whatever the order of blocks.
func (f *Finished) sortUncertified() {
	slices.SortFunc(f.Uncertified, func(a, b Uncertified) int { return a.Draw - b.Draw })
	slices.SortFunc(f.Certificates, func(a, b Certificate) int { return a.Draw - b.Draw })
}
