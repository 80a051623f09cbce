package solver_test

import (
	"math"
	"math/rand/v2"

	"holdfast/solver"
)

// invention makes random problems; equal seeds make equal ones.
type invention struct {
	r *rand.Rand
	q *plain
	n int
}

// inventPlain is a random problem of a family, with a draw of it. Which of the
// settings of DESIGN 4 it has is left to the seed.
func inventPlain(family solver.Family, seed uint64) (*plain, plainDraw) {
	v := &invention{r: rand.New(rand.NewPCG(seed, uint64(family)+77))}
	v.n = 24 + v.r.IntN(40)
	v.q = &plain{family: family, mix: 1, ratio: 0.7, floor: 0.02 + 0.1*v.r.Float64()}
	for {
		v.q.weight = v.weights()
		v.table()
		v.penalty()
		v.outcome()
		for range 20 {
			if d := v.draw(); v.q.drawable(d) {
				return v.q, v.q.weighted(d, seed)
			}
		}
	}
}

func (v *invention) chance(p float64) bool { return v.r.Float64() < p }

// weights are case weights: none, whole numbers, or any, some of them 0.
func (v *invention) weights() []float64 {
	if v.chance(0.5) {
		return nil
	}
	w := make([]float64, v.n)
	whole := v.chance(0.5)
	for i := range w {
		switch {
		case v.chance(0.1):
		case whole:
			w[i] = float64(1 + v.r.IntN(3))
		default:
			w[i] = 0.2 + 3*v.r.Float64()
		}
	}
	return w
}

// table invents columns: candidates, groups among them, always-in ones.
func (v *invention) table() {
	q := v.q
	q.cols, q.units, q.named, q.always = nil, nil, nil, nil
	holes := v.chance(0.2)
	for range v.r.IntN(3) {
		q.always = append(q.always, v.column(v.chance(0.3) && holes))
	}
	groups := v.chance(0.5)
	for range 3 + v.r.IntN(9) {
		if !groups || v.chance(0.5) {
			q.units, q.named = append(q.units, []int32{v.column(holes && v.chance(0.5))}), append(q.named, false)
			continue
		}
		if v.chance(0.4) {
			q.units, q.named = append(q.units, v.category()), append(q.named, true)
			continue
		}
		var g []int32
		for range 1 + v.r.IntN(4) {
			g = append(g, v.column(holes && v.chance(0.3)))
		}
		if v.chance(0.2) { // a column that the others make up
			g = append(g, v.mixture(g))
		}
		q.units, q.named = append(q.units, g), append(q.named, true)
	}
}

// column is a column of some kind that varies over the rows used.
func (v *invention) column(holes bool) int32 {
	for {
		x := make([]float64, v.n)
		kind, shift, stretch := v.r.IntN(6), 3*v.r.NormFloat64(), math.Pow(10, float64(v.r.IntN(5)-2))
		for i := range x {
			switch kind {
			case 0: // rare marks: constant in many draws
				if v.chance(0.1) {
					x[i] = 1
				}
			case 1:
				x[i] = float64(v.r.IntN(3))
			case 2:
				x[i] = v.r.NormFloat64()
				if len(v.q.cols) > 0 {
					if near := v.q.cols[len(v.q.cols)-1][i]; !math.IsNaN(near) && math.Abs(near) < 10 {
						x[i] += 2 * near
					}
				}
			default:
				x[i] = stretch * (v.r.NormFloat64() + shift)
			}
			if holes && v.chance(0.1) {
				x[i] = math.NaN()
			}
		}
		if v.varies(x) {
			v.q.cols = append(v.q.cols, x)
			return int32(len(v.q.cols) - 1)
		}
	}
}

func (v *invention) varies(x []float64) bool {
	low, high := math.Inf(1), math.Inf(-1)
	for i, c := range x {
		if (v.q.weight == nil || v.q.weight[i] > 0) && !math.IsNaN(c) {
			low, high = min(low, c), max(high, c)
		}
	}
	return low < high
}

// category is the indicators of a factor, all of its levels or all but one.
func (v *invention) category() []int32 {
	for {
		levels := 2 + v.r.IntN(4)
		var out []int32
		first := v.r.IntN(2)
		code := make([]int, v.n)
		for i := range code {
			code[i] = v.r.IntN(levels)
		}
		good := true
		var cols [][]float64
		for l := first; l < levels; l++ {
			x := make([]float64, v.n)
			for i := range x {
				if code[i] == l {
					x[i] = 1
				}
			}
			good = good && v.varies(x)
			cols = append(cols, x)
		}
		if good {
			for _, x := range cols {
				v.q.cols = append(v.q.cols, x)
				out = append(out, int32(len(v.q.cols)-1))
			}
			return out
		}
	}
}

// mixture is a sum of the columns of a group.
func (v *invention) mixture(g []int32) int32 {
	x := make([]float64, v.n)
	for _, j := range g {
		b := v.r.NormFloat64()
		for i := range x {
			c := v.q.cols[j][i]
			if math.IsNaN(c) {
				c = 0
			}
			x[i] += b * c
		}
	}
	if !v.varies(x) {
		return v.column(false)
	}
	v.q.cols = append(v.q.cols, x)
	return int32(len(v.q.cols) - 1)
}

func (v *invention) penalty() {
	q := v.q
	q.luck = 0.3 * v.r.Float64()
	q.scale = solver.Scale(v.r.IntN(3))
	q.groupWeight = solver.GroupWeight(v.r.IntN(2))
	q.mix, q.relative = 1, nil
	if v.chance(0.4) {
		q.mix = 0.2 + 0.8*v.r.Float64()
	}
	if v.chance(0.3) {
		for range q.units {
			q.relative = append(q.relative, 0.3+2*v.r.Float64())
		}
	}
	if v.chance(0.2) {
		q.stopAfter = 1 + v.r.IntN(len(q.units))
	}
}

// predictor is a linear predictor of a few columns, of standard deviation
// about size.
func (v *invention) predictor(size float64) []float64 {
	eta := make([]float64, v.n)
	for range 3 {
		x := v.q.cols[v.r.IntN(len(v.q.cols))]
		mean, square := 0.0, 0.0
		for _, c := range x {
			if !math.IsNaN(c) {
				mean += c / float64(v.n)
				square += c * c / float64(v.n)
			}
		}
		b := size * v.r.NormFloat64() / math.Sqrt(max(square-mean*mean, 1e-4*square, 1e-12))
		for i, c := range x {
			if !math.IsNaN(c) {
				eta[i] += b * (c - mean)
			}
		}
	}
	return eta
}

func (v *invention) outcome() {
	q := v.q
	q.offset, q.surv, q.outcome = nil, nil, nil
	if q.family != solver.Multinomial && v.chance(0.3) {
		for range v.n {
			q.offset = append(q.offset, v.r.NormFloat64())
		}
	}
	eta := v.predictor(0.5)
	for i := range eta {
		if q.offset != nil {
			eta[i] += q.offset[i]
		}
	}
	switch q.family {
	case solver.Multinomial:
		v.classes()
	case solver.Cox:
		v.survival(eta)
	default:
		for _, e := range eta {
			q.outcome = append(q.outcome, v.observe(e))
		}
	}
}

func (v *invention) observe(eta float64) float64 {
	switch v.q.family {
	case solver.Binomial:
		if v.r.Float64() < 1/(1+math.Exp(-eta)) {
			return 1
		}
		return 0
	case solver.Poisson: // Knuth's product of uniforms
		count, left := 0.0, math.Exp(min(eta+0.7, 4))
		for left -= v.r.ExpFloat64(); left > 0; left -= v.r.ExpFloat64() {
			count++
		}
		return count
	}
	return 5 + eta + v.r.NormFloat64()
}

func (v *invention) classes() {
	q := v.q
	q.classes = 2 + v.r.IntN(3)
	q.outcome = make([]float64, v.n)
	best := make([]float64, v.n)
	for c := range q.classes {
		for i, e := range v.predictor(0.5) {
			if e += v.r.NormFloat64(); c == 0 || e > best[i] {
				best[i], q.outcome[i] = e, float64(c)
			}
		}
	}
}

// survival has exponential times, with ties, entries and strata by the seed.
func (v *invention) survival(eta []float64) {
	s := &solver.Survival{Ties: solver.Ties(v.r.IntN(2))}
	grid := 0.0
	if v.chance(0.6) {
		grid = []float64{0.1, 0.3, 1}[v.r.IntN(3)]
	}
	entries, strata := v.chance(0.4), v.chance(0.3)
	for i := range v.n {
		t := v.r.ExpFloat64() / math.Exp(min(max(eta[i], -3), 3))
		if grid > 0 {
			t = grid * (1 + math.Floor(t/grid))
		}
		s.Time = append(s.Time, t)
		s.Event = append(s.Event, v.chance(0.7))
		if entries {
			e := t * v.r.Float64()
			if grid > 0 {
				e = grid * math.Floor(e/grid)
			}
			if v.chance(0.4) {
				e = -1
			}
			s.Entry = append(s.Entry, e)
		}
		if strata {
			s.Stratum = append(s.Stratum, int32(v.r.IntN(2)))
		}
	}
	v.q.surv = s
}

// draw is all rows, a half, or a bootstrap, with the rows left out.
func (v *invention) draw() plainDraw {
	d := v.q.everyRow()
	kind := v.r.IntN(3)
	perm := v.r.Perm(v.n)
	switch kind {
	case 1:
		d.left = make([]int, v.n)
		for k, i := range perm {
			if k >= v.n/2 {
				d.count[i], d.left[i] = 0, 1
			}
		}
	case 2:
		d.count, d.left = make([]int, v.n), make([]int, v.n)
		for range v.n {
			d.count[v.r.IntN(v.n)]++
		}
		for i, c := range d.count {
			if c == 0 {
				d.left[i] = 1
			}
		}
	}
	if v.chance(0.3) {
		for range v.q.units {
			d.jitter = append(d.jitter, 0.3+0.7*v.r.Float64())
		}
	}
	return d
}

// weighted gives some of the draws that are not scored case weights of their own,
// which take the place of the problem's.
func (q *plain) weighted(d plainDraw, seed uint64) plainDraw {
	r := rand.New(rand.NewPCG(seed, 99))
	if d.left != nil || r.Float64() < 0.6 {
		return d
	}
	w := d
	for range q.rows() {
		w.weight = append(w.weight, 0.1+2*r.Float64())
	}
	if !q.drawable(w) {
		return d
	}
	return w
}

// drawable reports whether a draw and the whole table have what every fit
// needs: cells of each column, all classes, five events, a count above 0, and the
// table always-in columns that do not tell the outcome.
func (q *plain) drawable(d plainDraw) bool {
	for _, v := range []*plainView{q.whole(), q.view(d.count, d.weight)} {
		if len(v.row) < 6 || !q.filled(v) || !q.twoSided(v) {
			return false
		}
	}
	if q.family != solver.Gaussian && len(q.always) > 0 && q.whole().farthest(q.always) > settled {
		return false
	}
	return d.left == nil || len(q.pick(d.left, d.weight).row) > 0
}

func (q *plain) filled(v *plainView) bool {
	for _, x := range q.cols {
		some := false
		for _, i := range v.row {
			some = some || !math.IsNaN(x[i])
		}
		if !some {
			return false
		}
	}
	return true
}

func (q *plain) twoSided(v *plainView) bool {
	seen, events, sum := map[float64]int{}, 0, 0.0
	for _, i := range v.row {
		if q.family == solver.Cox {
			if q.surv.Event[i] {
				events++
			}
			continue
		}
		seen[q.outcome[i]]++
		sum += q.outcome[i]
	}
	switch q.family {
	case solver.Binomial:
		return len(seen) == 2
	case solver.Multinomial:
		return len(seen) == q.classes
	case solver.Poisson:
		return sum > 0
	case solver.Cox:
		return events >= 5
	}
	return len(seen) > 1
}
