package resample

import "sync"

// Progress is how far a run has come.
type Progress struct {
	Draws int // draws fitted and put into the sink
	Total int // draws that the run makes
	Steps int // lattice steps done, summed over draws, those under way included
}

// tally counts for all workers and tells the caller, one call at a time.
type tally struct {
	mu     sync.Mutex
	total  int
	done   Progress
	report func(Progress)
}

func (t *tally) steps(n int) { t.add(0, n) }
func (t *tally) draws(n int) { t.add(n, 0) }

func (t *tally) add(draws, steps int) {
	t.mu.Lock()
	defer t.mu.Unlock()
	t.done.Total = t.total
	t.done.Draws += draws
	t.done.Steps += steps
	if t.report != nil {
		t.report(t.done)
	}
}
