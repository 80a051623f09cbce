package solver_test

import (
	"context"
	"fmt"
	"math"
	"math/bits"
	"math/rand/v2"
	"testing"

	"holdfast/solver"
)

// Lattice of the closed-form tables.
const (
	closedRatio = 0.9
	closedFloor = 1e-3
	closedSteps = 65 // 0.9^65 = 0.00106, 0.9^66 = 0.00095 is below the floor
)

// twoColumns is a lasso with two columns scaled within the draw, solved on
// paper: c are their scaled gradients at zero, r their correlation. The first
// enters at max|c|. While it is alone its coefficient is c1 - s lambda, s the
// sign of c1, so that the other's gradient is c2 - r c1 + r s lambda, which
// meets lambda at (c2 - r c1)/(1 - s r) and -lambda at (r c1 - c2)/(1 + s r).
// From there both coefficients grow as lambda falls: neither leaves again.
type twoColumns struct {
	c, sd [2]float64
	r     float64
}

func solveTwo(x [2][]float64, y, w []float64) twoColumns {
	var z twoColumns
	var m [2]float64
	my, _ := moments(y, w)
	total, cross := 0.0, 0.0
	for j := range x {
		m[j], z.sd[j] = moments(x[j], w)
	}
	for i := range y {
		total += w[i]
		cross += w[i] * (x[0][i] - m[0]) * (x[1][i] - m[1])
		for j := range x {
			z.c[j] += w[i] * (x[j][i] - m[j]) * (y[i] - my)
		}
	}
	z.r = cross / (total * z.sd[0] * z.sd[1])
	for j := range z.c {
		z.c[j] /= total * z.sd[j]
	}
	return z
}

// order returns which column enters first, the lambdas at which the two
// enter, and their signs, first entered first.
func (z twoColumns) order() (first int, at [2]float64, sign [2]float64) {
	if math.Abs(z.c[1]) > math.Abs(z.c[0]) {
		first = 1
	}
	c1, c2, r := z.c[first], z.c[1-first], z.r
	s := math.Copysign(1, c1)
	up, down := (c2-r*c1)/(1-s*r), (r*c1-c2)/(1+s*r)
	second := 1.0
	if down > up {
		second = -1
	}
	return first, [2]float64{math.Abs(c1), max(up, down)}, [2]float64{s, second}
}

// coef returns the coefficients at lambda on the columns' own scale.
func (z twoColumns) coef(lambda float64) [2]float64 {
	first, at, sign := z.order()
	var b [2]float64
	switch {
	case lambda >= at[0]:
		return b
	case lambda >= at[1]:
		b[first] = z.c[first] - sign[0]*lambda
	default:
		u1, u2 := z.c[first]-sign[0]*lambda, z.c[1-first]-sign[1]*lambda
		det := 1 - z.r*z.r
		b[first], b[1-first] = (u1-z.r*u2)/det, (u2-z.r*u1)/det
	}
	return [2]float64{b[0] / z.sd[0], b[1] / z.sd[1]}
}

// stepBelow is the first lattice step whose lambda is below at, and how far
// (in steps) at is from the nearest lattice point.
func stepBelow(at, lambdaMax float64) (step int, distance float64) {
	k := math.Log(at/lambdaMax) / math.Log(closedRatio)
	return int(math.Floor(k)) + 1, math.Abs(k - math.Round(k))
}

// TestClosedForm fits every half of ten rows (126 complementary pairs) for
// two columns and compares entries, signs and coefficients at every step
// with the solution on paper.
func TestClosedForm(t *testing.T) {
	for seed, r := range []float64{0, 0.8, -0.95} {
		t.Run(fmt.Sprintf("correlation=%g", r), func(t *testing.T) {
			x, y := tenRows(uint64(seed), r)
			p := problemOf(x[:], y)
			p.Ratio, p.Floor = closedRatio, closedFloor
			model, err := solver.NewModel(context.Background(), p)
			if err != nil {
				t.Fatal(err)
			}
			whole := solveTwo(x, y, ones(10))
			want := max(math.Abs(whole.c[0]), math.Abs(whole.c[1]))
			if got := model.LambdaMax(); math.Abs(got-want) > 1e-13*want {
				t.Fatalf("lambda_max %.17g, on paper %.17g", got, want)
			}
			halves := halvesOfTen()
			if len(halves) != 2*126 {
				t.Fatalf("%d halves", len(halves))
			}
			samples := make([]*solver.Sample, len(halves))
			for d, rows := range halves {
				samples[d] = solver.NewSample(10, rows)
			}
			for d := 0; d < len(samples); d += 14 {
				paths, err := model.FitBlock(context.Background(), samples[d:d+14], nil)
				if err != nil {
					t.Fatal(err)
				}
				for k, path := range paths {
					comparePaper(t, model, path, solveTwo(x, y, weightsOf(halves[d+k])))
				}
			}
		})
	}
}

// tenRows makes two columns of about the given correlation and an outcome
// that needs both, in units far from one.
func tenRows(seed uint64, r float64) (x [2][]float64, y []float64) {
	rng := rand.New(rand.NewPCG(seed, 10))
	for range 10 {
		a, b := rng.NormFloat64(), rng.NormFloat64()
		b = r*a + math.Sqrt(1-r*r)*b
		x[0] = append(x[0], 40+3*a)
		x[1] = append(x[1], 0.02*b)
		y = append(y, 100+2*a-b+rng.NormFloat64())
	}
	return x, y
}

// halvesOfTen lists all halves of ten rows, each followed by its complement.
func halvesOfTen() [][]int32 {
	var out [][]int32
	for mask := range uint(1 << 10) {
		if bits.OnesCount(mask) == 5 && mask&1 == 1 {
			out = append(out, rowsOf(mask), rowsOf(^mask&(1<<10-1)))
		}
	}
	return out
}

func rowsOf(mask uint) []int32 {
	var rows []int32
	for i := range int32(10) {
		if mask>>i&1 == 1 {
			rows = append(rows, i)
		}
	}
	return rows
}

func weightsOf(rows []int32) []float64 {
	w := make([]float64, 10)
	for _, i := range rows {
		w[i] = 1
	}
	return w
}

func comparePaper(t *testing.T, model *solver.Model, path solver.Path, z twoColumns) {
	t.Helper()
	want := paperEntries(t, z, model.LambdaMax())
	if len(path.Entries) != len(want) || path.Last != closedSteps || path.Stop != solver.StopFloor {
		t.Fatalf("entries %v, last step %d, stop %v; on paper %v to step %d", path.Entries, path.Last, path.Stop, want, closedSteps)
	}
	for i, e := range path.Entries {
		if e != want[i] {
			t.Errorf("entry %+v, on paper %+v", e, want[i])
		}
	}
	got := map[int32]*[2]float64{}
	for _, c := range path.Coefs {
		if got[c.Step] == nil {
			got[c.Step] = &[2]float64{}
		}
		got[c.Step][c.Candidate] = c.Value
	}
	for step := path.First; step <= path.Last; step++ {
		b := [2]float64{}
		if at := got[int32(step)]; at != nil {
			b = *at
		}
		comparePaperCoef(t, step, b, z, model.Lambda(step))
	}
}

// paperEntries lists the entries down to the last step, in the order of a
// path: by step, then by column.
func paperEntries(t *testing.T, z twoColumns, lambdaMax float64) []solver.Entry {
	t.Helper()
	first, at, sign := z.order()
	var out []solver.Entry
	for i, column := range []int{first, 1 - first} {
		step, distance := stepBelow(at[i], lambdaMax)
		if distance < 1e-9 {
			t.Fatalf("column %d enters on a lattice point: take another seed", column)
		}
		if step <= closedSteps {
			out = append(out, solver.Entry{Candidate: int32(column), Step: int32(step), Negative: sign[i] < 0})
		}
	}
	if len(out) == 2 && out[0].Step == out[1].Step && out[0].Candidate > out[1].Candidate {
		out[0], out[1] = out[1], out[0]
	}
	return out
}

func comparePaperCoef(t *testing.T, step int, got [2]float64, z twoColumns, lambda float64) {
	t.Helper()
	want := z.coef(lambda)
	largest := max(math.Abs(want[0])*z.sd[0], math.Abs(want[1])*z.sd[1])
	for j := range want {
		if d := math.Abs(got[j]-want[j]) * z.sd[j]; d > 1e-11*largest {
			t.Errorf("step %d: coefficient %d is %.17g, on paper %.17g", step, j, got[j], want[j])
		}
	}
}
