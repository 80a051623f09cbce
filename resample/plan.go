package resample

import (
	"fmt"
	"iter"
	"math"
	"math/bits"

	"holdfast/solver"
)

// Design says how rows are drawn.
type Design uint8

const (
	Halves    Design = iota // complementary pairs of halves, without replacement
	Bootstrap               // n of n with replacement
)

// String returns the word of the study file.
func (d Design) String() string {
	switch d {
	case Halves:
		return "halves"
	case Bootstrap:
		return "bootstrap"
	}
	return fmt.Sprintf("design %d", uint8(d))
}

// ParseDesign is the inverse of String.
func ParseDesign(word string) (Design, error) {
	for _, d := range []Design{Halves, Bootstrap} {
		if d.String() == word {
			return d, nil
		}
	}
	return 0, fmt.Errorf("resample: design %q: it is halves or bootstrap", word)
}

// MinUnits is the smallest number of units that can be drawn: two in a half.
const MinUnits = 4

// Plan says which draws are made. Fill in the exported fields and pass it to
// NewPlan; a Plan that did not come from there draws nothing. Fit alone may be
// set, or changed, after that.
type Plan struct {
	Rows   int       // rows of the table, 1 to 2^31-1
	Design Design    // zero: Halves
	Number int       // draws, at least 1; even for Halves
	Seed   uint64    // any value
	Case   []float64 // case weight of each row, finite and >= 0; nil: 1 each. Kept, not copied
	Within []int32   // stratum of each row, any code; nil: all rows are one stratum

	// Jitter in (0,1) gives each candidate of each draw a W uniform on
	// [Jitter, 1], for a randomised lasso. 0 or 1: none.
	Jitter float64
	// Keys are the names of the candidates, in their order, no two alike: what
	// W is known by. Not needed without Jitter. Kept, not copied.
	Keys []string

	// Fit says why a draw cannot be fitted at all, nil where it can; such a draw
	// is made anew. It must be a function of the draw alone, or draws would not
	// be the same everywhere, and is called from several goroutines at once. Nil:
	// every draw can be fitted.
	Fit func(*solver.Sample) error

	units []int32 // rows with a weight, stratum by stratum, ascending in each
	ends  []int   // of each stratum in units: where the next begins
}

// NewPlan checks a plan, finds its units and lays them out by strata. The
// errors say which number to change, and to what.
func NewPlan(p Plan) (Plan, error) {
	for _, check := range []func() error{p.check, p.checkJitter} {
		if err := check(); err != nil {
			return Plan{}, err
		}
	}
	units, err := unitsOf(p.Rows, p.Case)
	if err != nil {
		return Plan{}, err
	}
	if len(units) < MinUnits {
		return Plan{}, fmt.Errorf("resample: %d rows with a weight: at least %d are needed, two for each half", len(units), MinUnits)
	}
	p.units, p.ends = byStratum(units, p.Within)
	if err := p.checkStrata(); err != nil {
		return Plan{}, err
	}
	return p, nil
}

// check looks at everything but the case weights.
func (p Plan) check() error {
	switch {
	case p.Rows < 1 || p.Rows > math.MaxInt32:
		return fmt.Errorf("resample: rows %d: the table must have 1 to %d rows", p.Rows, math.MaxInt32)
	case p.Design != Halves && p.Design != Bootstrap:
		return fmt.Errorf("resample: %v: it is halves or bootstrap", p.Design)
	case p.Number < 1:
		return fmt.Errorf("resample: number of draws %d: at least %d", p.Number, least(p.Design))
	case p.Design == Halves && p.Number%2 != 0:
		return fmt.Errorf("resample: number of draws %d: halves come in pairs, so the number must be even: take %d", p.Number, p.Number+1)
	case p.Case != nil && len(p.Case) != p.Rows:
		return fmt.Errorf("resample: %d case weights for %d rows: one for each row is needed", len(p.Case), p.Rows)
	case p.Within != nil && len(p.Within) != p.Rows:
		return fmt.Errorf("resample: strata of %d rows for %d rows: one for each row is needed", len(p.Within), p.Rows)
	}
	return nil
}

// least is the smallest number of draws of a design.
func least(d Design) int {
	if d == Halves {
		return 2
	}
	return 1
}

// unitsOf lists the rows whose weight is not 0.
func unitsOf(rows int, weights []float64) ([]int32, error) {
	units := make([]int32, 0, rows)
	for i := range rows {
		if weights != nil {
			if w := weights[i]; !(w >= 0) || math.IsInf(w, 1) {
				return nil, fmt.Errorf("resample: case weight of row %d is %v: weights must be finite and at least 0", i, w)
			}
			if weights[i] == 0 {
				continue
			}
		}
		units = append(units, int32(i))
	}
	return units, nil
}

// Drawn goes through the rows of a draw in ascending order, each with how
// often it was drawn.
func Drawn(s *solver.Sample) iter.Seq2[int, int] {
	return func(yield func(row, count int) bool) {
		for w, word := range s.Rows {
			for ; word != 0; word &= word - 1 {
				row, count := w<<6|bits.TrailingZeros64(word), 1
				if s.Count != nil {
					count = int(s.Count[row])
				}
				if !yield(row, count) {
					return
				}
			}
		}
	}
}
