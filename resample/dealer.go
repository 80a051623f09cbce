package resample

import (
	"slices"
	"sync"
	"time"
)

// dealer hands out blocks of draws, each draw once, in rising order. The
// first blocks are one pair for each worker; the time they take says how
// large the next ones may be. A wrong guess costs time, never a bit.
type dealer struct {
	mu     sync.Mutex
	left   []int // draws not handed out
	fixed  int   // draws in every block; 0: as sizing says
	sizing Sizing
	recent []time.Duration // time of a draw in the last blocks, as a ring
	next   int             // place in recent
}

func newDealer(draws []int, fixed int, sizing Sizing) *dealer {
	return &dealer{left: draws, fixed: fixed, sizing: sizing}
}

// take returns the next block; empty where none is left. The slice is the
// caller's to read.
func (d *dealer) take() []int {
	d.mu.Lock()
	defer d.mu.Unlock()
	n := min(d.size(), len(d.left))
	block := d.left[:n:n]
	d.left = d.left[n:]
	return block
}

// size is the size of the next block. Near the end it shrinks so that every
// worker gets some of what is left.
func (d *dealer) size() int {
	if d.fixed > 0 {
		return d.fixed
	}
	size, unit := d.sizing.Block(d.perDraw()), d.sizing.Unit()
	workers := max(d.sizing.Workers, 1)
	share := (len(d.left)/unit + workers - 1) / workers * unit
	return max(unit, min(size, share))
}

// perDraw is the slowest of the recent blocks' times per draw, so that a block
// keeps its limit where draws differ; 0 where none is known. The caller holds
// mu.
func (d *dealer) perDraw() time.Duration {
	if len(d.recent) == 0 {
		return 0
	}
	return slices.Max(d.recent)
}

// took notes how long a block of so many draws took. Two blocks of each worker
// are remembered: the first blocks are small and slow by the draw, and should
// not be held against the later ones.
func (d *dealer) took(draws int, spent time.Duration) {
	d.mu.Lock()
	defer d.mu.Unlock()
	each := max(spent/time.Duration(draws), 1)
	if len(d.recent) < 2*max(d.sizing.Workers, 1) {
		d.recent = append(d.recent, each)
		return
	}
	d.recent[d.next] = each
	d.next = (d.next + 1) % len(d.recent)
}
