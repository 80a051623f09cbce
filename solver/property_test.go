package solver

import (
	"context"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// invented makes a table of n rows and p columns, neighbours correlated 0.5,
// with a few columns that matter.
func invented(n, p int, seed uint64) (cols [][]float64, y []float64) {
	r := rand.New(rand.NewPCG(seed, 1))
	cols = make([][]float64, p)
	y = make([]float64, n)
	for i := range y {
		y[i] = r.NormFloat64()
	}
	for j := range cols {
		cols[j] = make([]float64, n)
		for i := range cols[j] {
			v := r.NormFloat64()
			if j > 0 {
				v = 0.5*cols[j-1][i] + math.Sqrt(0.75)*v
			}
			cols[j][i] = v
		}
		if j%max(1, p/8) == 0 {
			for i := range y {
				y[i] += 0.5 * cols[j][i]
			}
		}
	}
	return cols, y
}

// problemOf centres columns and makes a lasso problem of them.
func problemOf(cols [][]float64, y []float64) Problem {
	n := len(y)
	p := Problem{Outcome: y, Mix: 1, Ratio: 0.95, Floor: 0.05}
	centred := make([][]float64, len(cols))
	for j, x := range cols {
		mean := 0.0
		for _, v := range x {
			mean += v / float64(n)
		}
		centred[j] = make([]float64, n)
		for i, v := range x {
			centred[j][i] = v - mean
		}
		p.Centre = append(p.Centre, mean)
		p.Names = append(p.Names, "x"+string(rune('0'+j%10)))
		p.Candidates = append(p.Candidates, int32(j))
	}
	p.Design = NewDense(n, centred, nil)
	return p
}

func halves(n, pairs int, seed uint64) []*Sample {
	r := rand.New(rand.NewPCG(seed, 2))
	var out []*Sample
	for range pairs {
		perm := r.Perm(n)
		for h := range 2 {
			rows := make([]int32, n/2)
			for i := range rows {
				rows[i] = int32(perm[h*(n/2)+i])
			}
			out = append(out, NewSample(n, rows))
		}
	}
	return out
}

func mustModel(t testing.TB, p Problem) *Model {
	t.Helper()
	m, err := NewModel(context.Background(), p)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

func mustFit(t testing.TB, m *Model, s []*Sample) []Path {
	t.Helper()
	paths, err := m.FitBlock(context.Background(), s, nil)
	if err != nil {
		t.Fatal(err)
	}
	return paths
}

// samePath reports the first difference between two paths, to the bit.
func samePath(a, b Path) string { return difference(a, b, 0) }

// difference compares two paths: steps, entries and supports exactly,
// coefficients to the relative tolerance (of the largest).
func difference(a, b Path, tolerance float64) string {
	if a.First != b.First || a.Last != b.Last || a.Stop != b.Stop {
		return "steps"
	}
	if len(a.Entries) != len(b.Entries) || len(a.Coefs) != len(b.Coefs) || len(a.Still) != len(b.Still) {
		return "lengths"
	}
	largest := 0.0
	for _, c := range a.Coefs {
		largest = max(largest, math.Abs(c.Value))
	}
	for i := range a.Entries {
		if a.Entries[i] != b.Entries[i] {
			return "entries"
		}
	}
	for i, c := range a.Coefs {
		d := b.Coefs[i]
		if c.Step != d.Step || c.Candidate != d.Candidate || c.Term != d.Term || c.Class != d.Class {
			return "supports"
		}
		if !(math.Abs(c.Value-d.Value) <= tolerance*largest) {
			return "coefficients"
		}
	}
	for i := range a.Intercepts {
		if !(math.Abs(a.Intercepts[i]-b.Intercepts[i]) <= tolerance*(1+math.Abs(a.Intercepts[i]))) {
			return "intercepts"
		}
	}
	for i := range a.Always {
		if !(math.Abs(a.Always[i]-b.Always[i]) <= tolerance*(1+math.Abs(a.Always[i]))) {
			return "always-in coefficients"
		}
	}
	if tolerance == 0 && !slices.Equal(a.Deviance, b.Deviance) {
		return "deviances"
	}
	if tolerance == 0 && (a.Violation != b.Violation || a.Gap != b.Gap) {
		return "certificates"
	}
	if a.Borderline != b.Borderline || a.Twins != b.Twins {
		return "counts"
	}
	return ""
}

// settings are the kinds of problem that every property must hold for.
func settings(n, p int) map[string]func() Problem {
	base := func() Problem {
		cols, y := invented(n, p, 11)
		return problemOf(cols, y)
	}
	return map[string]func() Problem{
		"lasso": base,
		"elastic net": func() Problem {
			q := base()
			q.Mix = 0.4
			return q
		},
		"relative, always": func() Problem {
			q := base()
			q.Always = []int32{1, 4}
			q.Candidates = append(append([]int32{0}, q.Candidates[2:4]...), q.Candidates[5:]...)
			q.Relative = make([]float64, len(q.Candidates))
			for i := range q.Relative {
				q.Relative[i] = 0.5 + float64(i%4)/2
			}
			return q
		},
		"table scale, weights": func() Problem {
			q := base()
			q.Scale = ScaleTable
			q.Case = make([]float64, n)
			for i := range q.Case {
				q.Case[i] = float64(i%5) / 2
			}
			return q
		},
		"own units, stop": func() Problem {
			q := base()
			q.Scale = ScaleNone
			q.StopAfter = 7
			return q
		},
		"twins": func() Problem {
			cols, y := invented(n, p, 11)
			for j := 3; j < p; j += 4 { // rare marks: many coincide in a half
				for i := range cols[j] {
					cols[j][i] = 0
				}
				cols[j][(j*7)%n], cols[j][(j*3+1)%n] = 1, 1
			}
			for j := 5; j < p; j += 8 {
				copy(cols[j], cols[j-1])
				cols[j][j%n] += 1
			}
			return problemOf(cols, y)
		},
		"rare marks": func() Problem { return rareMarks(n, p, ScaleDraw, func(v float64) float64 { return v }) },
		"rare marks, own units, whole outcome": func() Problem {
			return rareMarks(n, p, ScaleNone, func(v float64) float64 { return math.Round(2 * v) })
		},
		"near copies": func() Problem {
			cols, y := invented(n, p, 11)
			for j := p / 2; j < p; j++ { // as a file of single precision holds them
				for i := range cols[j] {
					cols[j][i] = float64(float32(cols[j-p/2][i]))
				}
				cols[j][j%n]++
			}
			return problemOf(cols, y)
		},
		"holes": func() Problem {
			cols, y := invented(n, p, 11)
			q, _ := holed(cols, y, 0.1)
			return q
		},
	}
}

// rareMarks is a table of rare 0/1 columns, many of them linearly dependent
// within a draw, so that the optimum is not unique at many steps.
func rareMarks(n, p int, scale Scale, outcome func(float64) float64) Problem {
	r := rand.New(rand.NewPCG(3, 5))
	y, cols := make([]float64, n), [][]float64{}
	for i := range y {
		y[i] = r.NormFloat64()
	}
	for len(cols) < p {
		c, marks := make([]float64, n), 0
		for i := range c {
			if r.Float64() < 0.05 {
				c[i] = 1
				marks++
			}
		}
		if marks == 0 {
			continue
		}
		cols = append(cols, c)
		if len(cols)%10 == 0 {
			for i := range y {
				y[i] += c[i]
			}
		}
	}
	for i := range y {
		y[i] = outcome(y[i])
	}
	q := problemOf(cols, y)
	q.Scale, q.Floor = scale, 0.01
	return q
}

// holed makes a problem whose cells are missing at the given share, and the
// masks of the missing cells.
func holed(cols [][]float64, y []float64, share float64) (Problem, map[int32][]uint64) {
	r := rand.New(rand.NewPCG(4, 4))
	n := len(y)
	masks := make(map[int32][]uint64)
	q := problemOf(cols, y)
	centred := make([][]float64, len(cols))
	for j, x := range cols {
		centred[j] = make([]float64, n)
		mask := make([]uint64, (n+63)/64)
		mean, filled := 0.0, 0
		for i := range x {
			if j%3 != 0 && r.Float64() < share {
				mask[i>>6] |= 1 << (i & 63)
			} else {
				mean += x[i]
				filled++
			}
		}
		mean /= float64(filled)
		for i := range x {
			if !isHole(mask, int32(i)) {
				centred[j][i] = x[i] - mean
			}
		}
		q.Centre[j] = mean
		if j%3 != 0 {
			masks[int32(j)] = mask
		}
	}
	q.Design = NewDense(n, centred, masks)
	return q, masks
}

// TestHistories shows that recorded bits do not depend on how a solution was
// found: other columns in the working set, other orders, other windows, lanes
// or rows, other blocks.
func TestHistories(t *testing.T) {
	for _, shape := range [][2]int{{60, 90}, {150, 40}} {
		for name, make := range settings(shape[0], shape[1]) {
			samples := append(halves(shape[0], 4, 9), AllRows(shape[0]))
			want := mustFit(t, mustModel(t, make()), samples)
			for seed := range uint64(6) {
				m := mustModel(t, make())
				m.whim = &whim{rand.New(rand.NewPCG(seed, 3)), seed > 0}
				size := 1 + int(seed)*3
				for k0 := 0; k0 < len(samples); k0 += size {
					k1 := min(k0+size, len(samples))
					for k, got := range mustFit(t, m, samples[k0:k1]) {
						if d := samePath(want[k0+k], got); d != "" {
							t.Errorf("%v %s: history %d, draw %d: other %s\n%d %v %s\n%d %v %s", shape, name, seed, k0+k, d, want[k0+k].Last, want[k0+k].Stop, want[k0+k].Why, got.Last, got.Stop, got.Why)
						}
					}
				}
			}
		}
	}
}

// TestSettingsReachTheirCases keeps the settings from becoming idle: the
// cases that they are there for must occur.
func TestSettingsReachTheirCases(t *testing.T) {
	all := settings(60, 90)
	samples := halves(60, 4, 9)
	twins, still, stopped := 0, 0, 0
	for _, p := range mustFit(t, mustModel(t, all["twins"]()), samples) {
		twins += p.Twins
		still += len(p.Still)
	}
	for _, p := range mustFit(t, mustModel(t, all["own units, stop"]()), samples) {
		if p.Stop == StopEntered {
			stopped++
		}
	}
	if twins == 0 || still == 0 || stopped == 0 {
		t.Errorf("twins %d, still columns %d, stopped paths %d: each must occur", twins, still, stopped)
	}
}

// TestOptimality checks stored coefficients against the optimality conditions
// of DESIGN 4, recomputed naively from the raw table.
func TestOptimality(t *testing.T) {
	n := 60
	for name, make := range settings(n, 90) {
		p := make()
		m := mustModel(t, p)
		samples := halves(n, 3, 21)
		for k, path := range mustFit(t, m, samples) {
			if path.Stop == StopUncertified {
				t.Errorf("%s: draw %d: %s", name, k, path.Why)
			}
			for step := path.First; step <= path.Last; step++ {
				if v := naiveViolation(m, samples[k], path, step); v > 1e-9 {
					t.Errorf("%s: draw %d step %d: violation %g", name, k, step, v)
				}
			}
		}
	}
}

// naiveViolation is the largest violation by plain loops over filled,
// uncentred copies of the draw.
func naiveViolation(m *Model, s *Sample, path Path, step int) float64 {
	p := m.p
	n, _ := p.Design.Dims()
	var w []float64
	total := 0.0
	for i := range n {
		v := s.Weight(i)
		if p.Case != nil {
			v *= p.Case[i]
		}
		w = append(w, v)
		total += v
	}
	column := func(j int32) (x []float64, sd float64) {
		raw, holes := p.Design.Panel([]int32{j}, 0, n, nil)[0], p.Design.Holes(j)
		x = append(x, raw...)
		mean, filled := 0.0, 0.0
		for i := range x {
			if holes == nil || !isHole(holes, int32(i)) {
				mean += w[i] * x[i]
				filled += w[i]
			}
		}
		if filled > 0 {
			mean /= filled
		}
		for i := range x {
			if holes != nil && isHole(holes, int32(i)) {
				x[i] = mean
			}
			sd += w[i] * (x[i] - mean) * (x[i] - mean)
			x[i] += p.Centre[j]
		}
		return x, math.Sqrt(sd / total)
	}
	u := append([]float64(nil), p.Outcome...)
	at := step - path.First
	for i := range u {
		u[i] -= path.Intercepts[at]
	}
	beta := make(map[int32]float64)
	for _, c := range path.Coefs {
		if int(c.Step) == step {
			beta[c.Candidate] = c.Value
		}
	}
	for a, j := range p.Always {
		x, _ := column(j)
		for i := range u {
			u[i] -= x[i] * path.Always[at*len(p.Always)+a]
		}
	}
	for c, b := range beta {
		x, _ := column(p.Candidates[c])
		for i := range u {
			u[i] -= x[i] * b
		}
	}
	still := make(map[int32]bool)
	for _, c := range path.Still {
		still[c] = true
	}
	lambda, worst := m.Lambda(step), 0.0
	for c, j := range p.Candidates {
		x, sd := column(j)
		if still[int32(c)] {
			if beta[int32(c)] != 0 {
				return math.Inf(1)
			}
			continue
		}
		switch p.Scale {
		case ScaleTable:
			sd = math.Sqrt(m.table[c])
		case ScaleNone:
			sd = 1
		}
		v := 1.0
		if p.Relative != nil {
			v = p.Relative[c]
		}
		g := 0.0
		for i := range u {
			g += w[i] * u[i] * x[i]
		}
		g /= total * sd
		b := beta[int32(c)] * sd
		t := lambda * p.Mix * v
		if b == 0 {
			worst = max(worst, math.Abs(g)/t-1)
		} else {
			worst = max(worst, math.Abs(g-lambda*(1-p.Mix)*v*b-math.Copysign(t, b))/t)
		}
	}
	return worst
}
