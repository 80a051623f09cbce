package resample

import "fmt"

// Part lists the draws of part number part of parts, ascending: pair k
// belongs to part k mod parts, and so does bootstrap draw k. Every draw of
// the plan is in one part. A part beyond the number of pairs is empty, not
// nil. A part outside 0 to parts-1 panics.
func Part(p Plan, part, parts int) []int {
	if parts < 1 || part < 0 || part >= parts {
		panic(fmt.Sprintf("resample: part %d of %d", part, parts))
	}
	draws := []int{}
	for d := range p.Number {
		if p.unit(d)%parts == part {
			draws = append(draws, d)
		}
	}
	return draws
}

// unit is the number of the pair, or of the bootstrap draw, of a draw.
func (p Plan) unit(draw int) int {
	if p.Design == Halves {
		return draw / 2
	}
	return draw
}

// numbers are the draws of a pair, or of a bootstrap draw.
func (p Plan) numbers(unit int) []int {
	if p.Design == Halves {
		return []int{2 * unit, 2*unit + 1}
	}
	return []int{unit}
}

// all lists the draws of the plan.
func (p Plan) all() []int { return Part(p, 0, 1) }

// checkDraws refuses a list of draws that cannot be made: numbers outside the
// plan, out of order, twice, or one half of a pair without the other.
func (p Plan) checkDraws(draws []int) error {
	for i, d := range draws {
		switch {
		case d < 0 || d >= p.Number:
			return fmt.Errorf("resample: draw %d: the plan has draws 0 to %d", d, p.Number-1)
		case i > 0 && d <= draws[i-1]:
			return fmt.Errorf("resample: draw %d comes after draw %d: the numbers must rise", d, draws[i-1])
		case p.Design == Halves && (i%2 != d%2 || d%2 == 1 && draws[i-1] != d-1):
			return fmt.Errorf("resample: draw %d: halves are made in pairs, and the list has one half of pair %d only", draws[i-i%2], draws[i-i%2]/2)
		}
	}
	if p.Design == Halves && len(draws)%2 == 1 {
		last := draws[len(draws)-1]
		return fmt.Errorf("resample: draw %d: halves are made in pairs, and the list has one half of pair %d only", last, last/2)
	}
	return nil
}
