package selection

import "iter"

// PathRow is one point of a stability path.
type PathRow struct {
	Step         int
	Predictor    string
	Index        int     // position among the candidates
	Frequency    float64 // share, among the draws that reached the step, in which it has entered by it
	DrawsReached int     // draws that reached the step; steps below a draw's stop are unknown, not zero
}

// Paths lists the stability paths by step, then in table order, where the
// frequency is above 0. They hold every step of the draws, whatever the region.
// They are made while they are read: a table of 100,000 candidates can have
// millions of rows.
func (j *Judgement) Paths() iter.Seq[PathRow] {
	return func(yield func(PathRow) bool) {
		first, last, empty := stepRange(j.draws)
		if empty {
			return
		}
		p := newPathCounts(j.draws, len(j.names.Names), last)
		for step := first; step <= last; step++ {
			p.move(step)
			for k, n := range p.counts {
				if n > 0 && !yield(PathRow{
					Step: step, Predictor: j.names.Names[k], Index: k,
					Frequency: float64(n) / float64(p.reached), DrawsReached: p.reached,
				}) {
					return
				}
			}
		}
	}
}

// pathCounts walks down the lattice with all draws at once.
type pathCounts struct {
	draws   []*Draw
	ends    []int   // last step that each draw reached
	next    []int   // first entry of each draw that is still to come
	counts  []int32 // per predictor: draws that reached the step and have it
	reached int
}

func newPathCounts(draws []*Draw, predictors, last int) *pathCounts {
	p := &pathCounts{
		draws: draws, ends: make([]int, len(draws)), next: make([]int, len(draws)),
		counts: make([]int32, predictors), reached: len(draws),
	}
	for i, d := range draws {
		p.ends[i] = reached(d, last)
	}
	return p
}

// move takes the counts to a step: draws that ended before it go, with all
// that they had; entries at it come in.
func (p *pathCounts) move(step int) {
	for i, d := range p.draws {
		switch {
		case p.next[i] < 0: // gone
		case p.ends[i] < step:
			for _, e := range d.Entries[:p.next[i]] {
				p.counts[e.Predictor]--
			}
			p.next[i] = -1
			p.reached--
		default:
			for p.next[i] < len(d.Entries) && int(d.Entries[p.next[i]].Step) <= step {
				p.counts[d.Entries[p.next[i]].Predictor]++
				p.next[i]++
			}
		}
	}
}
