package rundir

import (
	"errors"
	"fmt"
	"slices"
	"strings"

	"holdfast/selection"
	"holdfast/solver"
)

// Damage is a block that cannot be used, and why. Err names the file.
type Damage struct {
	Path string
	Err  error
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
	Draws   []selection.Draw // ordered by number
	Missing []int            // numbers of draws that no readable block holds, ascending
	Damaged []Damage

	Violation   float64 // worst over all draws
	Gap         float64
	Borderline  int // steps redone at the border
	Twins       int // entries that coincided within a draw
	Uncertified []Uncertified
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
	if err := f.complete(d); err != nil {
		return nil, err
	}
	return f.Draws, nil
}

// complete returns an error if anything is missing or damaged.
func (f *Finished) complete(d *Dir) error {
	if len(f.Missing) == 0 && len(f.Damaged) == 0 {
		return nil
	}
	list := []error{fmt.Errorf("rundir: %s: %w: %s of %d", d.path, ErrIncomplete, ranges(f.Missing), d.Run().Meta.Number)}
	for _, b := range f.Damaged {
		list = append(list, b.Err)
	}
	return errors.Join(list...)
}

// Read reads and checks every block, one at a time. Damaged blocks and
// missing draws are listed; a block of another run, and two blocks that
// disagree about a draw, are errors. A draw that two blocks hold with equal
// bits counts once: two processes may have made it.
func (d *Dir) Read() (*Finished, error) {
	run := d.Run()
	f := &Finished{}
	byNumber := make([]*selection.Draw, run.Meta.Number)
	err := d.scan(&f.Damaged, func(n *numbered) {
		byNumber[n.number] = f.add(n, run.Meta.LastStep)
	})
	if err != nil {
		return nil, err
	}
	for number, draw := range byNumber {
		if draw == nil {
			f.Missing = append(f.Missing, number)
			continue
		}
		f.Draws = append(f.Draws, *draw)
	}
	f.sortUncertified()
	return f, nil
}

// ReadPaths returns the full record of every draw, ordered by number, and
// fails where Draws does.
func (d *Dir) ReadPaths() ([]solver.Path, error) {
	f := &Finished{}
	paths := make([]solver.Path, d.Run().Meta.Number)
	seen := make([]bool, len(paths))
	err := d.scan(&f.Damaged, func(n *numbered) {
		paths[n.number], seen[n.number] = n.path, true
	})
	if err != nil {
		return nil, err
	}
	for number := range seen {
		if !seen[number] {
			f.Missing = append(f.Missing, number)
		}
	}
	return paths, f.complete(d)
}

// scan calls each for every draw on disk, once.
func (d *Dir) scan(damaged *[]Damage, each func(*numbered)) error {
	run := d.Run()
	blocks, err := d.blocks()
	if err != nil {
		return err
	}
	type seen struct {
		sum  sum
		path string
	}
	draws := make(map[int]seen, run.Meta.Number)
	for _, file := range blocks {
		block, sums, err := run.readBlock(file.path)
		if errors.Is(err, ErrForeign) {
			return err
		}
		if err != nil {
			*damaged = append(*damaged, Damage{file.path, err})
			continue
		}
		for i := range block {
			number := block[i].number
			if other, ok := draws[number]; ok {
				if other.sum != sums[i] {
					return fmt.Errorf("rundir: blocks %s and %s disagree about draw %d: remove the wrong one", other.path, file.path, number)
				}
				continue
			}
			draws[number] = seen{sums[i], file.path}
			each(&block[i])
		}
	}
	return nil
}

// add turns a draw's record into what a judgement needs, and takes note of
// its certificate.
func (f *Finished) add(n *numbered, lastStep int) *selection.Draw {
	p := &n.path
	f.Violation = max(f.Violation, p.Violation)
	f.Gap = max(f.Gap, p.Gap)
	f.Borderline += p.Borderline
	f.Twins += p.Twins
	if p.Stop == solver.StopUncertified {
		f.Uncertified = append(f.Uncertified, Uncertified{n.number, p.Last + 1, p.Why})
	}
	draw := &selection.Draw{
		Number: n.number, First: p.First, Last: p.Last,
		Uncertified: p.Stop == solver.StopUncertified,
		Complete:    p.Last >= p.First && p.Last >= lastStep,
		Always:      p.Always,
		Still:       p.Still,
	}
	for _, e := range p.Entries {
		draw.Entries = append(draw.Entries, selection.Entry{Predictor: e.Candidate, Step: e.Step, Negative: e.Negative})
	}
	if len(p.Coefs) > 0 {
		draw.Coefs = make([]selection.Coef, len(p.Coefs))
	}
	for i, c := range p.Coefs {
		draw.Coefs[i] = selection.Coef{Step: c.Step, Predictor: c.Candidate, Value: c.Value}
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

// sortUncertified puts the list in draw order, whatever the order of blocks.
func (f *Finished) sortUncertified() {
	slices.SortFunc(f.Uncertified, func(a, b Uncertified) int { return a.Draw - b.Draw })
}
