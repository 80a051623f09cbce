package resample

import (
	"math"
	"math/rand/v2"
	"slices"

	"holdfast/solver"
)

// pair draws two disjoint halves of the units. Where their number is odd the
// unit left over is drawn first; the first half is then a random half of the
// others and the second is the rest, so that one shuffle of half the units
// makes both.
func (p Plan) pair(src rand.Source) [2]*solver.Sample {
	units := slices.Clone(p.units)
	if len(units)%2 != 0 {
		choose(src, units, 1)
		units = units[1:]
	}
	choose(src, units, len(units)/2)
	return [2]*solver.Sample{
		p.half(units[:len(units)/2]),
		p.half(units[len(units)/2:]),
	}
}

// half is the draw of the given rows, once each.
func (p Plan) half(rows []int32) *solver.Sample {
	s := solver.NewSample(p.Rows, rows)
	s.Case = p.Case
	return s
}

// bootstrap draws as many units as there are, with replacement.
func (p Plan) bootstrap(src rand.Source) *solver.Sample {
	s := solver.NewSample(p.Rows, nil)
	s.Case = p.Case
	s.Count = make([]uint8, p.Rows)
	for range p.units {
		row := p.units[below(src, uint64(len(p.units)))]
		// A count is kept in 8 bits. A 256th turn of one row, which has
		// a chance below 1e-500 (Poisson tail), goes to another row.
		for s.Count[row] == math.MaxUint8 {
			row = p.units[below(src, uint64(len(p.units)))]
		}
		s.Count[row]++
		s.Rows[row>>6] |= 1 << (row & 63)
	}
	return s
}
