package resample

import (
	"math"
	"math/rand/v2"
	"slices"

	"holdfast/solver"
)

// pair draws two disjoint halves of the units, stratum by stratum. Where the
// number of a stratum's units is odd the unit left over is drawn first; the
// first half is then a random half of the others and the second is the rest, so
// that one shuffle of half the units makes both.
func (p Plan) pair(src rand.Source) []*solver.Sample {
	a, b := p.empty(), p.empty()
	for units := range p.strata(slices.Clone(p.units)) {
		if len(units)%2 != 0 {
			choose(src, units, 1)
			units = units[1:]
		}
		choose(src, units, len(units)/2)
		add(a, units[:len(units)/2])
		add(b, units[len(units)/2:])
	}
	a.Left, b.Left = b, a
	return []*solver.Sample{a, b}
}

// empty is a draw without rows.
func (p Plan) empty() *solver.Sample {
	s := solver.NewSample(p.Rows, nil)
	s.Case = p.Case
	return s
}

// add puts rows into a draw.
func add(s *solver.Sample, rows []int32) {
	for _, row := range rows {
		s.Rows[row>>6] |= 1 << (row & 63)
	}
}

// bootstrap draws, from each stratum with replacement, as many units as it has.
func (p Plan) bootstrap(src rand.Source) *solver.Sample {
	s := p.empty()
	s.Count = make([]uint8, p.Rows)
	for units := range p.strata(p.units) {
		for range units {
			row := units[below(src, uint64(len(units)))]
			// A count is kept in 8 bits. A 256th turn of one row, which has
			// a chance below 1e-500 (Poisson tail), goes to another row.
			for s.Count[row] == math.MaxUint8 {
				row = units[below(src, uint64(len(units)))]
			}
			s.Count[row]++
			s.Rows[row>>6] |= 1 << (row & 63)
		}
	}
	s.Left = p.rest(s)
	return s
}

// rest is the units that a draw does not hold; nil where it holds them all.
func (p Plan) rest(s *solver.Sample) *solver.Sample {
	left := p.empty()
	add(left, p.units)
	some := uint64(0)
	for w := range left.Rows {
		left.Rows[w] &^= s.Rows[w]
		some |= left.Rows[w]
	}
	if some == 0 {
		return nil
	}
	return left
}
