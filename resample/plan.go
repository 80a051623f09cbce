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
// NewPlan; a Plan that did not come from there draws nothing.
type Plan struct {
	Rows   int       // rows of the table, 1 to 2^31-1
	Design Design    // zero: Halves
	Number int       // draws, at least 1; even for Halves
	Seed   uint64    // any value
	Case   []float64 // case weight of each row, finite and >= 0; nil: 1 each. Kept, not copied

	units []int32 // rows with a weight, ascending
}

// NewPlan checks a plan and finds its units. The errors say which number to
// change, and to what.
func NewPlan(p Plan) (Plan, error) {
	if err := p.check(); err != nil {
		return Plan{}, err
	}
	units, err := unitsOf(p.Rows, p.Case)
	if err != nil {
		return Plan{}, err
	}
	if len(units) < MinUnits {
		return Plan{}, fmt.Errorf("resample: %d rows with a weight: at least %d are needed, two for each half", len(units), MinUnits)
	}
	p.units = units
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

// Units returns the number of rows that can be drawn.
func (p Plan) Units() int { return len(p.units) }

// Half returns the number of units in each half, floor(Units/2).
func (p Plan) Half() int { return len(p.units) / 2 }

// Sample makes draw number draw, from the plan's seed and that number alone.
// Numbers from Plan.Number on are the draws that a longer plan would have. A
// negative number, or a plan that did not come from NewPlan, panics.
func (p Plan) Sample(draw int) *solver.Sample {
	if draw < 0 || p.units == nil {
		panic(fmt.Sprintf("resample: draw %d of a plan of %d units", draw, len(p.units)))
	}
	if p.Design == Bootstrap {
		return p.bootstrap(newGenerator(p.Design.String(), p.Seed, uint64(draw)))
	}
	pair := p.pair(newGenerator(p.Design.String(), p.Seed, uint64(draw/2)))
	return pair[draw%2]
}

// samples makes the draws of a block; both halves of a pair come from one
// shuffle.
func (p Plan) samples(draws []int) []*solver.Sample {
	out := make([]*solver.Sample, 0, len(draws))
	for i := 0; i < len(draws); i++ {
		d := draws[i]
		if p.Design == Halves && d%2 == 0 && i+1 < len(draws) && draws[i+1] == d+1 {
			pair := p.pair(newGenerator(p.Design.String(), p.Seed, uint64(d/2)))
			out = append(out, pair[:]...)
			i++
			continue
		}
		out = append(out, p.Sample(d))
	}
	return out
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
