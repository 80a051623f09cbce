package selection

import "sort"

// reach is the end of a draw's region.
type reach struct {
	end     int32 // last step that counts
	entered int   // entries that count: the first ones
	bound   bool  // the rule, not the end of the path, set the end
}

// capRegion is the longest first part of a path over which at most q distinct
// predictors have entered, in whole steps.
func capRegion(d *Draw, q int) reach {
	if len(d.Entries) <= q {
		return reach{end: int32(d.Last), entered: len(d.Entries)}
	}
	end := d.Entries[q].Step - 1 // the step with the entry that is one too many
	return reach{end: end, entered: enteredBy(d, end), bound: true}
}

// enteredBy counts the entries up to a step.
func enteredBy(d *Draw, step int32) int {
	return sort.Search(len(d.Entries), func(i int) bool { return d.Entries[i].Step > step })
}

// reached is the last step at which it is known who has entered: a draw that
// holds no fit but is complete has none anywhere.
func reached(d *Draw, last int) int {
	if d.Complete && d.Last < d.First {
		return max(last, d.Last)
	}
	return d.Last
}

// stepRange is the first and last step that any draw holds; empty if none does.
func stepRange(draws []*Draw) (first, last int, empty bool) {
	empty = true
	for _, d := range draws {
		if d.Last < d.First {
			continue
		}
		if empty {
			first, last, empty = d.First, d.Last, false
			continue
		}
		first, last = min(first, d.First), max(last, d.Last)
	}
	return first, last, empty
}

// commonEnd is the end of the common region: the last step that every draw
// reached and by which the number of distinct predictors is at most q on
// average. It lies before the first step if there is none.
func commonEnd(draws []*Draw, q int) int {
	first, last, empty := stepRange(draws)
	if empty {
		return -1
	}
	entered := make([]int, last-first+1)
	shared := last
	for _, d := range draws {
		shared = min(shared, reached(d, last))
		for _, e := range d.Entries {
			entered[int(e.Step)-first]++
		}
	}
	sum, end := 0, first-1
	for s := first; s <= shared; s++ {
		if sum += entered[s-first]; sum > q*len(draws) {
			break
		}
		end = s
	}
	return end
}
