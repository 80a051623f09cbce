package shape

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"

	"holdfast/solver"
)

// neighbour is the correlation of neighbouring columns.
const neighbour = 0.5

// Shape is the size and the signal of a table.
type Shape struct {
	Name    string
	Rows    int
	Cols    int
	Signals int           // columns with an effect
	SNR     float64       // variance of the signal over that of the noise
	Family  solver.Family // kind of the outcome
	Lambdas int           // from lambda_max down to the floor, both counted; 0: the ratio is asked for
}

// Shapes are those whose figures are published.
var Shapes = []Shape{
	{Name: "wide", Rows: 500, Cols: 10_000, Signals: 20, SNR: 2},
	{Name: "tall", Rows: 20_000, Cols: 1_000, Signals: 30, SNR: 0.5},
	{Name: "long", Rows: 200_000, Cols: 200, Signals: 20, SNR: 0.2},
	{Name: "logit", Rows: 1_000, Cols: 5_000, Signals: 20, SNR: 2, Family: solver.Binomial, Lambdas: 20},
	{Name: "survival", Rows: 1_000, Cols: 5_000, Signals: 20, SNR: 2, Family: solver.Cox, Lambdas: 20},
	{Name: "count", Rows: 1_000, Cols: 5_000, Signals: 20, SNR: 2, Family: solver.Poisson, Lambdas: 20},
	{Name: "classes", Rows: 1_000, Cols: 5_000, Signals: 20, SNR: 2, Family: solver.Multinomial, Lambdas: 20},
}

// Find returns the shape of that name.
func Find(name string) (Shape, error) {
	var names []string
	for _, s := range Shapes {
		if s.Name == name {
			return s, nil
		}
		names = append(names, s.Name)
	}
	return Shape{}, fmt.Errorf("shape: %q: it is one of %s", name, strings.Join(names, ", "))
}

// Ratio returns lambda from step to step: asked, unless the shape has a number
// of lambdas.
func (s Shape) Ratio(floor, asked float64) float64 {
	if s.Lambdas == 0 {
		return asked
	}
	return math.Pow(floor, 1/float64(s.Lambdas-1))
}

// Table is what a shape makes.
type Table struct {
	Columns [][]float64
	Outcome []float64 // number, 0 or 1, count, class; for Cox the time
	Event   []float64 // for Cox: 1 where the event was seen, 0 where not; else nil
}

// Make returns a table: the same for the same shape and seed.
func (s Shape) Make(seed uint64) Table {
	rng := rand.New(rand.NewPCG(seed, uint64(s.Rows)<<32|uint64(s.Cols)))
	cols := make([][]float64, s.Cols)
	for j := range cols {
		cols[j] = make([]float64, s.Rows)
		for i := range cols[j] {
			cols[j][i] = rng.NormFloat64()
			if j > 0 {
				cols[j][i] = neighbour*cols[j-1][i] + math.Sqrt(1-neighbour*neighbour)*cols[j][i]
			}
		}
	}
	t := Table{Columns: cols}
	s.respond(rng, &t)
	return t
}
