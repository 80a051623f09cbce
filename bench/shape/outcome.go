package shape

import (
	"math"
	"math/rand/v2"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"

	"holdfast/solver"
)

// classes is how many levels an outcome of classes has.
const classes = 3

// respond adds the outcome to the columns.
func (s Shape) respond(rng *rand.Rand, t *Table) {
	signals := rng.Perm(s.Cols)[:s.Signals]
	switch s.Family {
	case solver.Gaussian:
		t.Outcome = s.noisy(rng, signal(rng, t.Columns, signals))
	case solver.Binomial:
		t.Outcome = aboveMedian(s.noisy(rng, signal(rng, t.Columns, signals)))
	case solver.Poisson:
		t.Outcome = s.counts(rng, signal(rng, t.Columns, signals))
	case solver.Multinomial:
		t.Outcome = s.largest(rng, t.Columns, signals)
	case solver.Cox:
		t.Outcome, t.Event = s.times(rng, signal(rng, t.Columns, signals))
	}
}

// signal adds up the columns named, with coefficients of its own.
func signal(rng *rand.Rand, cols [][]float64, signals []int) []float64 {
	y := make([]float64, len(cols[0]))
	for _, j := range signals {
		b := 0.5 + rng.Float64()
		if rng.IntN(2) == 1 {
			b = -b
		}
		for i, x := range cols[j] {
			y[i] += b * x
		}
	}
	return y
}

// noisy adds normal noise to a signal.
func (s Shape) noisy(rng *rand.Rand, y []float64) []float64 {
	noise := deviation(y) / math.Sqrt(s.SNR)
	for i := range y {
		y[i] += noise * rng.NormFloat64()
	}
	return y
}

// aboveMedian is 1 for the upper half of the values.
func aboveMedian(y []float64) []float64 {
	sorted := slices.Sorted(slices.Values(y))
	half := (sorted[(len(y)-1)/2] + sorted[len(y)/2]) / 2
	out := make([]float64, len(y))
	for i, v := range y {
		if v > half {
			out[i] = 1
		}
	}
	return out
}

// largest is the class with the largest of as many noisy scores, whose signals
// stand on the same columns.
func (s Shape) largest(rng *rand.Rand, cols [][]float64, signals []int) []float64 {
	var scores [classes][]float64
	for c := range scores {
		scores[c] = s.noisy(rng, signal(rng, cols, signals))
	}
	out := make([]float64, len(cols[0]))
	for i := range out {
		for c := range scores {
			if scores[c][i] > scores[int(out[i])][i] {
				out[i] = float64(c)
			}
		}
	}
	return out
}

// logVariance is that of the logarithm of a count's mean.
const logVariance = math.Ln2

// counts are Poisson with a mean that is lognormal in the signal. The mean has
// expectation m and variance m^2 (e^logVariance - 1), and the counts about it
// have variance m, so that m sets the ratio of the two.
func (s Shape) counts(rng *rand.Rand, y []float64) []float64 {
	m := s.SNR / math.Expm1(logVariance)
	unit := math.Sqrt(logVariance) / deviation(y)
	for i, v := range y {
		mean := m * math.Exp(unit*v-logVariance/2)
		y[i] = distuv.Poisson{Lambda: mean, Src: rng}.Rand()
	}
	return y
}

// Times are counted in days of a hundredth of the baseline's mean, so that some
// coincide; censoring strikes at the baseline's rate, independently.
const days = 100

// times are exponential with the signal as the logarithm of the hazard: the
// noise of their logarithm has variance pi^2/6. They are rounded up to days.
func (s Shape) times(rng *rand.Rand, y []float64) (time, event []float64) {
	unit := math.Sqrt(s.SNR*math.Pi*math.Pi/6) / deviation(y)
	event = make([]float64, len(y))
	for i, v := range y {
		died, lost := rng.ExpFloat64()/math.Exp(unit*v), rng.ExpFloat64()
		if died <= lost {
			event[i] = 1
		}
		y[i] = math.Ceil(days * min(died, lost))
	}
	return y, event
}

// deviation is the population standard deviation.
func deviation(x []float64) float64 {
	mean, square := 0.0, 0.0
	for _, v := range x {
		mean += v
	}
	mean /= float64(len(x))
	for _, v := range x {
		square += (v - mean) * (v - mean)
	}
	return math.Sqrt(square / float64(len(x)))
}
