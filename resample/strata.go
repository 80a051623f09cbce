package resample

import (
	"errors"
	"fmt"
	"slices"
)

// byStratum lays units of one stratum side by side and returns where each
// stratum ends. Strata come in the order of their first units, so that draws
// depend on which rows belong together and not on the codes.
func byStratum(units []int32, codes []int32) (grouped []int32, ends []int) {
	if codes == nil {
		return units, []int{len(units)}
	}
	place := make(map[int32]int) // of a code in the order of strata
	var sizes []int
	for _, row := range units {
		s, known := place[codes[row]]
		if !known {
			s = len(sizes)
			place[codes[row]] = s
			sizes = append(sizes, 0)
		}
		sizes[s]++
	}
	next := make([]int, len(sizes)) // where the next unit of each stratum goes
	for s := 1; s < len(sizes); s++ {
		next[s] = next[s-1] + sizes[s-1]
	}
	grouped = make([]int32, len(units))
	for _, row := range units {
		s := place[codes[row]]
		grouped[next[s]] = row
		next[s]++
	}
	return grouped, next
}

// strata goes through the strata of some units that are laid out like p.units.
func (p Plan) strata(units []int32) func(yield func(stratum []int32) bool) {
	return func(yield func([]int32) bool) {
		start := 0
		for _, end := range p.ends {
			if !yield(units[start:end:end]) {
				return
			}
			start = end
		}
	}
}

// Units returns the number of rows that can be drawn, those of Lone strata
// included.
func (p Plan) Units() int { return len(p.units) }

// Half returns the number of units in each half: floor(n/2) of each stratum of
// n units, summed.
func (p Plan) Half() int {
	half := 0
	for stratum := range p.strata(p.units) {
		half += len(stratum) / 2
	}
	return half
}

// Lone lists the strata of one unit, by their codes in Within, ascending: they
// are in no half. Bootstrap has none, because it draws that unit every time.
func (p Plan) Lone() []int32 {
	var lone []int32
	if p.Within == nil || p.Design == Bootstrap {
		return nil
	}
	for stratum := range p.strata(p.units) {
		if len(stratum) == 1 {
			lone = append(lone, p.Within[stratum[0]])
		}
	}
	slices.Sort(lone)
	return lone
}

// checkStrata refuses strata of which no draw can be made.
func (p Plan) checkStrata() error {
	half := p.Half()
	switch {
	case half == 0 && p.Design == Bootstrap:
		return errors.New("resample: every stratum has one row only, so that every draw would be the whole table: balance draws by something that more rows share, or by nothing")
	case half == 0:
		return errors.New("resample: every stratum has one row only, and a stratum of one row is in no half: balance halves by something that more rows share, or by nothing")
	case half < 2 && p.Design == Halves:
		return fmt.Errorf("resample: the strata leave one row for each half, and at least 2 are needed: all but one of the %d strata have one row only: balance halves by something that more rows share, or by nothing", len(p.ends))
	}
	return nil
}
