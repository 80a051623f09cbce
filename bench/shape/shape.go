package shape

import (
	"fmt"
	"math"
	"math/rand/v2"
)

// neighbour is the correlation of neighbouring columns.
const neighbour = 0.5

// Shape is the size and the signal of a table.
type Shape struct {
	Name    string
	Rows    int
	Cols    int
	Signals int     // columns with an effect
	SNR     float64 // variance of the signal over that of the noise
}

// Shapes are those whose figures are published.
var Shapes = []Shape{
	{Name: "wide", Rows: 500, Cols: 10_000, Signals: 20, SNR: 2},
	{Name: "tall", Rows: 20_000, Cols: 1_000, Signals: 30, SNR: 0.5},
	{Name: "long", Rows: 200_000, Cols: 200, Signals: 20, SNR: 0.2},
}

// Find returns the shape of that name.
func Find(name string) (Shape, error) {
	for _, s := range Shapes {
		if s.Name == name {
			return s, nil
		}
	}
	return Shape{}, fmt.Errorf("shape: %q: it is wide, tall or long", name)
}

// Make returns the columns and the outcome of a table: the same for the same
// shape and seed.
func (s Shape) Make(seed uint64) (cols [][]float64, outcome []float64) {
	rng := rand.New(rand.NewPCG(seed, uint64(s.Rows)<<32|uint64(s.Cols)))
	cols = make([][]float64, s.Cols)
	for j := range cols {
		cols[j] = make([]float64, s.Rows)
		for i := range cols[j] {
			cols[j][i] = rng.NormFloat64()
			if j > 0 {
				cols[j][i] = neighbour*cols[j-1][i] + math.Sqrt(1-neighbour*neighbour)*cols[j][i]
			}
		}
	}
	return cols, s.outcome(rng, cols)
}

// outcome adds the signal columns and noise.
func (s Shape) outcome(rng *rand.Rand, cols [][]float64) []float64 {
	y := make([]float64, s.Rows)
	for _, j := range rng.Perm(s.Cols)[:s.Signals] {
		b := 0.5 + rng.Float64()
		if rng.IntN(2) == 1 {
			b = -b
		}
		for i, x := range cols[j] {
			y[i] += b * x
		}
	}
	noise := deviation(y) / math.Sqrt(s.SNR)
	for i := range y {
		y[i] += noise * rng.NormFloat64()
	}
	return y
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
