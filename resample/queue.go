package resample

import (
	"maps"
	"slices"
)

// queue brings blocks back into order. The run's tokens bound its size.
type queue struct {
	waiting map[int]outcome
	want    int // the block that comes next
}

// add takes a block, in any order.
func (q *queue) add(o outcome) {
	if q.waiting == nil {
		q.waiting = make(map[int]outcome)
	}
	q.waiting[o.block] = o
}

// next gives out the block that is due, if it is there.
func (q *queue) next() (outcome, bool) {
	o, ok := q.waiting[q.want]
	if ok {
		delete(q.waiting, q.want)
		q.want++
	}
	return o, ok
}

// rest lists what waits behind a gap, in order.
func (q *queue) rest() []outcome {
	out := make([]outcome, 0, len(q.waiting))
	for _, b := range slices.Sorted(maps.Keys(q.waiting)) {
		out = append(out, q.waiting[b])
	}
	return out
}
