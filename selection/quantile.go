package selection

// The quantiles that are reported, in thousandths.
const (
	lowMille    = 25
	medianMille = 500
	highMille   = 975
)

// sparse is a sample of n numbers of which most are 0: the others, ascending,
// and how many of those are below 0. Zeros may stand among the others.
type sparse struct {
	values   []float64
	negative int
	n        int
}

// newSparse makes a sample of n numbers from ascending values; the rest is 0.
func newSparse(ascending []float64, n int) sparse {
	negative := 0
	for negative < len(ascending) && ascending[negative] < 0 {
		negative++
	}
	return sparse{ascending, negative, n}
}

// at returns the i-th smallest number, from 0.
func (s sparse) at(i int) float64 {
	zeros := s.n - len(s.values)
	switch {
	case i < s.negative:
		return s.values[i]
	case i < s.negative+zeros:
		return 0
	}
	return s.values[i-zeros]
}

// quantile is the quantile of type 7 of Hyndman and Fan (1996) at mille/1000:
// the number at position (n-1)*mille/1000, counted from 0, with linear
// interpolation. The position is split on integers.
func (s sparse) quantile(mille int) float64 {
	place := (s.n - 1) * mille
	i, part := place/1000, float64(place%1000)/1000
	x := s.at(i)
	if part == 0 {
		return x
	}
	return x + float64(part*(s.at(i+1)-x))
}

// spread returns the three reported quantiles.
func (s sparse) spread() *Spread {
	return &Spread{s.quantile(lowMille), s.quantile(medianMille), s.quantile(highMille)}
}
