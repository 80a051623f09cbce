package rundir

import (
	"fmt"

	"holdfast/solver"
)

// numbered is a draw's outcome with its number.
type numbered struct {
	number int
	path   solver.Path
}

// checkPath refuses what no draw of this run can be. It guards the writer
// against a caller's mistake, and the reader against a file that some other
// program wrote.
func (r *Run) checkPath(n *numbered) error {
	p := &n.path
	if n.number < 0 || n.number >= maxDraws {
		return fmt.Errorf("draw %d: no run has such a draw", n.number)
	}
	steps, err := stepsOf(p)
	if err != nil {
		return fmt.Errorf("draw %d: %w", n.number, err)
	}
	if len(p.Intercepts) != 0 && len(p.Intercepts) != steps {
		return fmt.Errorf("draw %d: %d intercepts for %d steps", n.number, len(p.Intercepts), steps)
	}
	if len(p.Always) != steps*len(r.Identity.Always) {
		return fmt.Errorf("draw %d: %d always-in coefficients for %d steps of %d columns",
			n.number, len(p.Always), steps, len(r.Identity.Always))
	}
	if stopOf(p.Stop.String()) != p.Stop {
		return fmt.Errorf("draw %d: stop %d has no meaning", n.number, p.Stop)
	}
	if err := checkLists(p, int32(len(r.Identity.Candidates))); err != nil {
		return fmt.Errorf("draw %d: %w", n.number, err)
	}
	return nil
}

// stepsOf returns the number of steps of a path.
func stepsOf(p *solver.Path) (int, error) {
	if p.First < -maxSteps || p.First > maxSteps || p.Last < -maxSteps-1 || p.Last > maxSteps {
		return 0, fmt.Errorf("steps %d to %d are no lattice steps", p.First, p.Last)
	}
	if p.Borderline < 0 || p.Borderline > maxSteps || p.Twins < 0 || p.Twins > 1<<30 {
		return 0, fmt.Errorf("borderline %d, twins %d: no counts", p.Borderline, p.Twins)
	}
	return max(0, p.Last-p.First+1), nil
}

// checkLists checks the order and range of entries, coefficients and columns
// that do not vary: each predictor enters at most once, and none has two
// coefficients at a step.
func checkLists(p *solver.Path, candidates int32) error {
	inside := func(step, j int32) bool {
		return int(step) >= p.First && int(step) <= p.Last && j >= 0 && j < candidates
	}
	entered := make(map[int32]bool, len(p.Entries))
	for i, e := range p.Entries {
		if !inside(e.Step, e.Candidate) || entered[e.Candidate] ||
			i > 0 && !before(p.Entries[i-1].Step, p.Entries[i-1].Candidate, e.Step, e.Candidate) {
			return fmt.Errorf("entry %d (step %d, predictor %d): out of order or range", i, e.Step, e.Candidate)
		}
		entered[e.Candidate] = true
	}
	for i, c := range p.Coefs {
		if !inside(c.Step, c.Candidate) ||
			i > 0 && !before(p.Coefs[i-1].Step, p.Coefs[i-1].Candidate, c.Step, c.Candidate) {
			return fmt.Errorf("coefficient %d (step %d, predictor %d): out of order or range", i, c.Step, c.Candidate)
		}
	}
	for i, j := range p.Still {
		if j < 0 || j >= candidates || i > 0 && p.Still[i-1] >= j {
			return fmt.Errorf("column without variation %d (predictor %d): out of order or range", i, j)
		}
	}
	return nil
}

func before(step0, j0, step1, j1 int32) bool {
	return step0 < step1 || step0 == step1 && j0 < j1
}

// noStop is the value that stands for a word that is no reason to stop.
const noStop = solver.Stop(255)

// stopOf reads the word of a solver.Stop.
func stopOf(word string) solver.Stop {
	for s := solver.StopFloor; s <= solver.StopUncertified; s++ {
		if s.String() == word {
			return s
		}
	}
	return noStop
}

// flat holds a block column by column, as it stands in the file.
type flat struct {
	draw, first, last []int32
	stop, why         []string
	violation, gap    []float64
	borderline, twins []int32

	entries                   []int // list lengths
	entryStep, entryPredictor []int32
	entryNegative             []bool

	coefs                   []int
	coefStep, coefPredictor []int32
	coefValue               []float64

	intercepts []int
	intercept  []float64
	alwayses   []int
	always     []float64
	stills     []int
	still      []int32
}

// flatten lays a block out in columns.
func flatten(block []numbered) *flat {
	f := &flat{}
	for i := range block {
		p := &block[i].path
		f.draw = append(f.draw, int32(block[i].number))
		f.first = append(f.first, int32(p.First))
		f.last = append(f.last, int32(p.Last))
		f.stop = append(f.stop, p.Stop.String())
		f.why = append(f.why, p.Why)
		f.violation = append(f.violation, p.Violation)
		f.gap = append(f.gap, p.Gap)
		f.borderline = append(f.borderline, int32(p.Borderline))
		f.twins = append(f.twins, int32(p.Twins))
		f.addLists(p)
	}
	return f
}

func (f *flat) addLists(p *solver.Path) {
	f.entries = append(f.entries, len(p.Entries))
	for _, e := range p.Entries {
		f.entryStep = append(f.entryStep, e.Step)
		f.entryPredictor = append(f.entryPredictor, e.Candidate)
		f.entryNegative = append(f.entryNegative, e.Negative)
	}
	f.coefs = append(f.coefs, len(p.Coefs))
	for _, c := range p.Coefs {
		f.coefStep = append(f.coefStep, c.Step)
		f.coefPredictor = append(f.coefPredictor, c.Candidate)
		f.coefValue = append(f.coefValue, c.Value)
	}
	f.intercepts = append(f.intercepts, len(p.Intercepts))
	f.intercept = append(f.intercept, p.Intercepts...)
	f.alwayses = append(f.alwayses, len(p.Always))
	f.always = append(f.always, p.Always...)
	f.stills = append(f.stills, len(p.Still))
	f.still = append(f.still, p.Still...)
}

// gather is the inverse of flatten. Lengths have been checked to agree.
// Empty lists become nil.
func (f *flat) gather() []numbered {
	block := make([]numbered, len(f.draw))
	for i := range block {
		block[i].number = int(f.draw[i])
		block[i].path = solver.Path{
			First: int(f.first[i]), Last: int(f.last[i]),
			Stop: stopOf(f.stop[i]), Why: f.why[i],
			Violation: f.violation[i], Gap: f.gap[i],
			Borderline: int(f.borderline[i]), Twins: int(f.twins[i]),
			Entries:    f.takeEntries(f.entries[i]),
			Coefs:      f.takeCoefs(f.coefs[i]),
			Intercepts: take(&f.intercept, f.intercepts[i]),
			Always:     take(&f.always, f.alwayses[i]),
			Still:      take(&f.still, f.stills[i]),
		}
	}
	return block
}

// take cuts the first n values off a column.
func take[T any](column *[]T, n int) []T {
	if n == 0 {
		return nil
	}
	head := (*column)[:n:n]
	*column = (*column)[n:]
	return head
}

func (f *flat) takeEntries(n int) []solver.Entry {
	if n == 0 {
		return nil
	}
	list := make([]solver.Entry, n)
	step, predictor, negative := take(&f.entryStep, n), take(&f.entryPredictor, n), take(&f.entryNegative, n)
	for i := range list {
		list[i] = solver.Entry{Candidate: predictor[i], Step: step[i], Negative: negative[i]}
	}
	return list
}

func (f *flat) takeCoefs(n int) []solver.Coef {
	if n == 0 {
		return nil
	}
	list := make([]solver.Coef, n)
	step, predictor, value := take(&f.coefStep, n), take(&f.coefPredictor, n), take(&f.coefValue, n)
	for i := range list {
		list[i] = solver.Coef{Step: step[i], Candidate: predictor[i], Value: value[i]}
	}
	return list
}
