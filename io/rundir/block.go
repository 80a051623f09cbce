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
func (s *shape) checkPath(n *numbered) error {
	p := &n.path
	if n.number < 0 || n.number >= maxDraws {
		return fmt.Errorf("draw %d: no run has such a draw", n.number)
	}
	steps, err := stepsOf(p)
	if err != nil {
		return fmt.Errorf("draw %d: %w", n.number, err)
	}
	if err := s.checkLengths(p, steps); err != nil {
		return fmt.Errorf("draw %d: %w", n.number, err)
	}
	if stopOf(p.Stop.String()) != p.Stop {
		return fmt.Errorf("draw %d: stop %d has no meaning", n.number, p.Stop)
	}
	for _, check := range []func(*solver.Path) error{s.checkEntries, s.checkCoefs, s.checkStill} {
		if err := check(p); err != nil {
			return fmt.Errorf("draw %d: %w", n.number, err)
		}
	}
	return nil
}

// checkLengths checks the lists that have so many values for each step.
func (s *shape) checkLengths(p *solver.Path, steps int) error {
	if n := len(p.Intercepts); n != 0 && n != steps*s.intercepts {
		return fmt.Errorf("%d intercepts for %d steps with %d each", n, steps, s.intercepts)
	}
	if n := len(p.Always); n != steps*s.always*s.classes {
		return fmt.Errorf("%d always-in coefficients for %d steps of %d columns and %d classes", n, steps, s.always, s.classes)
	}
	if n := len(p.Deviance); n != 0 && n != steps {
		return fmt.Errorf("%d deviances for %d steps", n, steps)
	}
	return nil
}

// stepsOf returns the number of steps of a path.
func stepsOf(p *solver.Path) (int, error) {
	if p.First < -maxSteps || p.First > maxSteps || p.Last < -maxSteps-1 || p.Last > maxSteps {
		return 0, fmt.Errorf("steps %d to %d are no lattice steps", p.First, p.Last)
	}
	if p.Borderline < 0 || p.Borderline > maxSteps || p.Twins < 0 || p.Twins > 1<<30 || p.Redraws < 0 || p.Redraws > maxRedraws {
		return 0, fmt.Errorf("borderline %d, twins %d, redraws %d: no counts", p.Borderline, p.Twins, p.Redraws)
	}
	return max(0, p.Last-p.First+1), nil
}

// inside reports whether a draw can say something about a candidate at a step.
func (s *shape) inside(p *solver.Path, step, candidate int32) bool {
	return int(step) >= p.First && int(step) <= p.Last && candidate >= 0 && int(candidate) < s.candidates
}

// checkEntries checks order and range: each predictor enters at most once, and
// only one with a single coefficient has a sign.
func (s *shape) checkEntries(p *solver.Path) error {
	entered := make(map[int32]bool, len(p.Entries))
	for i, e := range p.Entries {
		if !s.inside(p, e.Step, e.Candidate) || entered[e.Candidate] || i > 0 && !entryBefore(p.Entries[i-1], e) {
			return fmt.Errorf("entry %d (step %d, predictor %d): out of order or range", i, e.Step, e.Candidate)
		}
		if e.Negative && !s.signed(e.Candidate) {
			return fmt.Errorf("entry %d (predictor %d): a sign where there are several coefficients", i, e.Candidate)
		}
		entered[e.Candidate] = true
	}
	return nil
}

// checkCoefs checks order and range: no term has two coefficients at a step,
// or for a class at a step.
func (s *shape) checkCoefs(p *solver.Path) error {
	for i, c := range p.Coefs {
		if !s.inside(p, c.Step, c.Candidate) || c.Term < 0 || c.Term >= s.termsOf(c.Candidate) ||
			c.Class < 0 || int(c.Class) >= s.classes || i > 0 && !coefBefore(p.Coefs[i-1], c) {
			return fmt.Errorf("coefficient %d (step %d, predictor %d, term %d, class %d): out of order or range",
				i, c.Step, c.Candidate, c.Term, c.Class)
		}
	}
	return nil
}

func (s *shape) checkStill(p *solver.Path) error {
	for i, j := range p.Still {
		if j < 0 || int(j) >= s.candidates || i > 0 && p.Still[i-1] >= j {
			return fmt.Errorf("column without variation %d (predictor %d): out of order or range", i, j)
		}
	}
	return nil
}

func entryBefore(a, b solver.Entry) bool {
	if a.Step != b.Step {
		return a.Step < b.Step
	}
	return a.Candidate < b.Candidate
}

func coefBefore(a, b solver.Coef) bool {
	switch {
	case a.Step != b.Step:
		return a.Step < b.Step
	case a.Candidate != b.Candidate:
		return a.Candidate < b.Candidate
	case a.Term != b.Term:
		return a.Term < b.Term
	}
	return a.Class < b.Class
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
