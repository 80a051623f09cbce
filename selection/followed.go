package selection

// NumberFollowed takes back what holds only for a number of draws that was
// fixed before any draw was seen: the unimodal and the r-concave bound, which
// speak about the law of a frequency over a given number of pairs (Shah &
// Samworth 2013 state both for a fixed B). how says, as half a sentence, what
// happened to the number. The worst-case bound stays: it
// holds for the frequencies of endlessly many draws too, so whatever number
// they led to. Counts, frequencies and what is stable do not change.
func (j *Judgement) NumberFollowed(how string) {
	if j.Bootstrap {
		return
	}
	for i := range j.Bounds {
		b := &j.Bounds[i]
		if b.Name != WorstCase {
			b.FalseSelections, b.Why = nil, how+", and this bound needs a number that was fixed before any draw was seen"
		}
	}
	if j.Decision.Bound != WorstCase {
		if j.Decision.FalseSelections != nil {
			j.add("this decision has no bound any more: %s", j.Bounds.Of(j.Decision.Bound).Why)
		}
		j.Decision.FalseSelections = nil
	}
	if j.Bounds.Of(WorstCase).FalseSelections != nil {
		j.add("%s; the worst-case bound carries over, to the frequencies that endlessly many draws would show", how)
	}
}
