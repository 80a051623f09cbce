package solver

import "math/bits"

// Sample is one draw of rows: which rows, how often, with which case weights.
// It is never a copy of the table.
type Sample struct {
	Rows  []uint64  // bit mask of the rows drawn (bit i&63 of word i>>6)
	Count []uint8   // how often each row was drawn; nil: once each
	Case  []float64 // case weight of every table row, all >= 0; nil: 1

	// Jitter is W in (0,1] of each candidate: its penalty weight is divided by it
	// (randomised lasso, Meinshausen & Buhlmann 2010, section 3.1). Nil: 1.
	Jitter []float64
	// Left is the rows that the draw's path is scored on: the other half, or what
	// a bootstrap left out. Its Case and Jitter are not looked at. Nil: no scores.
	Left *Sample
}

// NewSample returns a draw of the given rows, each drawn once. The rows must
// lie in 0..n-1; their order does not matter.
func NewSample(n int, rows []int32) *Sample {
	s := &Sample{Rows: make([]uint64, (n+63)/64)}
	for _, r := range rows {
		s.Rows[r>>6] |= 1 << (r & 63)
	}
	return s
}

// Weight returns the weight of row i: 0 where it was not drawn, else its
// count times its case weight.
func (s *Sample) Weight(i int) float64 {
	if s.Rows[i>>6]>>(i&63)&1 == 0 {
		return 0
	}
	w := 1.0
	if s.Count != nil {
		w = float64(s.Count[i])
	}
	if s.Case != nil {
		w *= s.Case[i]
	}
	return w
}

// Len returns the number of distinct rows drawn.
func (s *Sample) Len() int {
	n := 0
	for _, w := range s.Rows {
		n += bits.OnesCount64(w)
	}
	return n
}
