package solver_test

import (
	"math"
	"slices"

	"holdfast/solver"
)

// plain is a problem as DESIGN 4 words it, in the plainest form: columns as
// they were measured. It is what the tests of this file's kind reason about;
// none of its functions shares code with the solver, and none is fast.
type plain struct {
	cols   [][]float64 // NaN: missing
	units  [][]int32   // columns of each candidate
	named  []bool      // per candidate: stated as a group
	always []int32

	family  solver.Family
	outcome []float64
	classes int
	surv    *solver.Survival
	offset  []float64
	weight  []float64

	mix, luck   float64
	scale       solver.Scale
	groupWeight solver.GroupWeight
	relative    []float64
	ratio       float64
	floor       float64
	stopAfter   int
}

// plainDraw is a draw of rows: how often each, with which weights, and the rows
// it is scored on.
type plainDraw struct {
	count  []int
	left   []int     // nil: none
	weight []float64 // nil: those of the problem
	jitter []float64
}

func (q *plain) rows() int { return len(q.cols[0]) }

// isGroup reports whether a candidate is penalised by the norm of its block. A
// group of one column is that column (the issue of groups: it equals the lasso).
func (q *plain) isGroup(u int) bool { return q.named[u] && len(q.units[u]) > 1 }

// classCount is the number of linear predictors.
func (q *plain) classCount() int {
	if q.family == solver.Multinomial {
		return q.classes
	}
	return 1
}

// problem states q in the solver's types.
func (q *plain) problem() solver.Problem {
	p := solver.Problem{
		Always: q.always, Family: q.family, Outcome: q.outcome, Classes: q.classes, Survival: q.surv,
		Offset: q.offset, Case: q.weight, Mix: q.mix, Scale: q.scale, Relative: q.relative,
		GroupWeight: q.groupWeight, Luck: q.luck, Ratio: q.ratio, Floor: q.floor, StopAfter: q.stopAfter,
	}
	centred, holes := make([][]float64, len(q.cols)), map[int32][]uint64{}
	for j, x := range q.cols {
		mask, filled := make([]uint64, (len(x)+63)/64), []float64{}
		for i, v := range x {
			if math.IsNaN(v) {
				mask[i>>6] |= 1 << (i & 63)
				holes[int32(j)] = mask
			} else {
				filled = append(filled, v)
			}
		}
		mean := plainSum(filled) / float64(len(filled))
		centred[j] = make([]float64, len(x))
		for i, v := range x {
			if !math.IsNaN(v) {
				centred[j][i] = v - mean
			}
		}
		p.Centre = append(p.Centre, mean)
		p.Names = append(p.Names, "column"+string(rune('A'+j%26)))
	}
	p.Design = solver.NewDense(q.rows(), centred, holes)
	for c, cols := range q.units {
		p.Candidates = append(p.Candidates, cols[0])
		if q.named[c] {
			if p.Groups == nil {
				p.Groups = make([][]int32, len(q.units))
			}
			p.Groups[c] = cols
		}
	}
	return p
}

// sample states d in the solver's types.
func (d plainDraw) sample() *solver.Sample {
	s := plainMask(d.count)
	s.Case, s.Jitter = d.weight, d.jitter
	if d.left != nil {
		s.Left = plainMask(d.left)
	}
	return s
}

func plainMask(count []int) *solver.Sample {
	s := &solver.Sample{Rows: make([]uint64, (len(count)+63)/64)}
	counts, many := make([]uint8, len(count)), false
	for i, c := range count {
		if c > 0 {
			s.Rows[i>>6] |= 1 << (i & 63)
		}
		counts[i] = uint8(c)
		many = many || c > 1
	}
	if many {
		s.Count = counts
	}
	return s
}

// everyRow is the draw of all rows, once each.
func (q *plain) everyRow() plainDraw {
	count := make([]int, q.rows())
	for i := range count {
		count[i] = 1
	}
	return plainDraw{count: count}
}

func plainSum(v []float64) float64 {
	s := 0.0
	for _, x := range v {
		s += x
	}
	return s
}

// plainView is what a draw sees of a problem: its rows of positive weight, with
// missing cells filled by the mean of the draw's filled ones.
type plainView struct {
	q     *plain
	row   []int     // rows of the table
	count []float64 // how often each
	w     []float64 // count times case weight
	total float64
	x     [][]float64 // per column, filled
	mean  []float64
	sd    []float64
	still []bool // per column: does not vary
}

func (q *plain) view(count []int, weight []float64) *plainView {
	v := q.pick(count, weight)
	for _, x := range q.cols {
		v.take(x, v.fill(x))
	}
	return v
}

// pick finds the rows of positive weight.
func (q *plain) pick(count []int, weight []float64) *plainView {
	v := &plainView{q: q}
	for i, c := range count {
		w := float64(c)
		switch {
		case weight != nil:
			w *= weight[i]
		case q.weight != nil:
			w *= q.weight[i]
		}
		if w > 0 {
			v.row, v.count, v.w = append(v.row, i), append(v.count, float64(c)), append(v.w, w)
			v.total += w
		}
	}
	return v
}

// take adds a column, missing cells filled with fill.
func (v *plainView) take(x []float64, fill float64) {
	cells := make([]float64, len(v.row))
	for k, i := range v.row {
		cells[k] = x[i]
		if math.IsNaN(x[i]) {
			cells[k] = fill
		}
	}
	mean, square := 0.0, 0.0
	for k, c := range cells {
		mean += v.w[k] * c / v.total
	}
	for k, c := range cells {
		square += v.w[k] * (c - mean) * (c - mean) / v.total
	}
	v.x, v.mean, v.sd = append(v.x, cells), append(v.mean, mean), append(v.sd, math.Sqrt(square))
	v.still = append(v.still, len(cells) == 0 || slices.Max(cells) == slices.Min(cells))
}

// others is the view of the rows left out, cells filled as in v.
func (v *plainView) others(left []int, weight []float64) *plainView {
	o := v.q.pick(left, weight)
	for _, x := range v.q.cols {
		o.take(x, v.fill(x))
	}
	return o
}

// fill is the mean of a column's filled cells over the draw.
func (v *plainView) fill(x []float64) float64 {
	sum, filled := 0.0, 0.0
	for k, i := range v.row {
		if !math.IsNaN(x[i]) {
			sum += v.w[k] * x[i]
			filled += v.w[k]
		}
	}
	if filled == 0 {
		return 0
	}
	return sum / filled
}

// plainFit is a fit in the columns' own units, for any family.
type plainFit struct {
	lambda    float64
	intercept []float64     // per class
	always    [][]float64   // per always-in column, per class
	coef      [][][]float64 // per candidate, per column, per class
}

// eta is the linear predictor of every class and row.
func (v *plainView) eta(f plainFit) [][]float64 {
	out := make([][]float64, v.q.classCount())
	for c := range out {
		out[c] = make([]float64, len(v.row))
		for k, i := range v.row {
			if v.q.offset != nil {
				out[c][k] += v.q.offset[i]
			}
			if f.intercept != nil {
				out[c][k] += f.intercept[c]
			}
		}
		v.each(f, c, func(j int32, b float64) {
			for k := range v.row {
				out[c][k] += v.x[j][k] * b
			}
		})
	}
	return out
}

// each calls do for all coefficients of a class that are not zero.
func (v *plainView) each(f plainFit, class int, do func(j int32, b float64)) {
	for a, j := range v.q.always {
		if b := f.always[a][class]; b != 0 {
			do(j, b)
		}
	}
	for u, cols := range v.q.units {
		for t, j := range cols {
			if b := f.coef[u][t][class]; b != 0 {
				do(j, b)
			}
		}
	}
}

// loss returns N times the mean loss, and -1 times its derivative in every
// linear predictor.
func (v *plainView) loss(eta [][]float64) (float64, [][]float64) {
	switch v.q.family {
	case solver.Multinomial:
		return v.multinomial(eta)
	case solver.Cox:
		loss, score := v.cox(eta[0])
		return loss, [][]float64{score}
	}
	loss, score := 0.0, make([]float64, len(v.row))
	for k, i := range v.row {
		y, e := v.q.outcome[i], eta[0][k]
		switch v.q.family {
		case solver.Gaussian:
			loss += v.w[k] * (y - e) * (y - e) / 2
			score[k] = v.w[k] * (y - e)
		case solver.Binomial:
			loss += v.w[k] * (max(e, 0) + math.Log1p(math.Exp(-math.Abs(e))) - y*e)
			score[k] = v.w[k] * (y - 1/(1+math.Exp(-e)))
		case solver.Poisson:
			loss += v.w[k] * (math.Exp(e) - y*e)
			score[k] = v.w[k] * (y - math.Exp(e))
		}
	}
	return loss, [][]float64{score}
}

func (v *plainView) multinomial(eta [][]float64) (loss float64, score [][]float64) {
	score = make([][]float64, len(eta))
	for c := range score {
		score[c] = make([]float64, len(v.row))
	}
	for k, i := range v.row {
		top, sum := math.Inf(-1), 0.0
		for c := range eta {
			top = max(top, eta[c][k])
		}
		for c := range eta {
			sum += math.Exp(eta[c][k] - top)
		}
		y := int(v.q.outcome[i])
		loss += v.w[k] * (top + math.Log(sum) - eta[y][k])
		for c := range eta {
			score[c][k] = -v.w[k] * math.Exp(eta[c][k]-top) / sum
		}
		score[y][k] += v.w[k]
	}
	return loss, score
}

// cox is the negative log partial likelihood and its score residuals, by a
// pass over all rows for each event time. Breslow 1974, Biometrics 30:89-99;
// Efron 1977, JASA 72:557-565. A row drawn twice is two rows; with case weights
// Efron's form takes the mean weight of the tied events (DESIGN 4).
func (v *plainView) cox(eta []float64) (loss float64, score []float64) {
	s := v.q.surv
	score = make([]float64, len(v.row))
	done := make([]bool, len(v.row))
	top := math.Inf(-1)
	for _, e := range eta {
		top = max(top, e)
	}
	for k, i := range v.row {
		if !s.Event[i] || done[k] {
			continue
		}
		var risk, dead []int
		for l, j := range v.row {
			if s.Stratum != nil && s.Stratum[i] != s.Stratum[j] {
				continue
			}
			if s.Time[j] >= s.Time[i] && (s.Entry == nil || s.Entry[j] < s.Time[i]) {
				risk = append(risk, l)
			}
			if s.Event[j] && s.Time[j] == s.Time[i] {
				dead = append(dead, l)
				done[l] = true
			}
		}
		loss += v.coxTime(eta, top, risk, dead, score)
	}
	return loss, score
}

// coxTime is one event time of one stratum.
func (v *plainView) coxTime(eta []float64, top float64, risk, dead []int, score []float64) float64 {
	all, tied, weight, deaths, loss := 0.0, 0.0, 0.0, 0.0, 0.0
	for _, l := range risk {
		all += v.w[l] * math.Exp(eta[l]-top)
	}
	for _, l := range dead {
		tied += v.w[l] * math.Exp(eta[l]-top)
		weight += v.w[l]
		deaths += v.count[l]
		loss -= v.w[l] * (eta[l] - top)
		score[l] += v.w[l]
	}
	steps := 1
	if v.q.surv.Ties == solver.Efron {
		steps = int(deaths)
	}
	for m := range steps {
		part := float64(m) / float64(steps)
		sum := all - part*tied
		loss += weight / float64(steps) * math.Log(sum)
		for _, l := range risk {
			score[l] -= weight / float64(steps) * v.w[l] * math.Exp(eta[l]-top) / sum
		}
		for _, l := range dead {
			score[l] += weight / float64(steps) * part * v.w[l] * math.Exp(eta[l]-top) / sum
		}
	}
	return loss
}

// basis is an orthonormal basis of a group's block: columns centred over the
// draw, sum_i w_i q_i q_i' = N I, by Gram-Schmidt done twice, the largest column
// left over first.
func (v *plainView) basis(cols []int32) [][]float64 {
	var rest, out [][]float64
	for _, j := range cols {
		if v.still[j] {
			continue
		}
		z := make([]float64, len(v.row))
		for k := range z {
			z[k] = (v.x[j][k] - v.mean[j]) / v.sd[j]
		}
		rest = append(rest, z)
	}
	for len(rest) > 0 {
		at, largest := 0, 0.0
		for r, z := range rest {
			for range 2 {
				v.remove(z, out)
			}
			if n := v.dot(z, z); n > largest {
				at, largest = r, n
			}
		}
		if largest < 1e-14 { // of a column of length 1: dependent
			break
		}
		z := rest[at]
		rest = slices.Delete(rest, at, at+1)
		for k := range z {
			z[k] /= math.Sqrt(largest)
		}
		out = append(out, z)
	}
	return out
}

func (v *plainView) dot(a, b []float64) float64 {
	s := 0.0
	for k := range a {
		s += v.w[k] * a[k] * b[k] / v.total
	}
	return s
}

func (v *plainView) remove(z []float64, basis [][]float64) {
	for _, b := range basis {
		d := v.dot(z, b)
		for k := range z {
			z[k] -= d * b[k]
		}
	}
}

// whole is the view of all rows.
func (q *plain) whole() *plainView { return q.view(q.everyRow().count, nil) }

// prices returns v_j of every candidate (DESIGN 4): relative, times that of a
// group's size, which is a matter of the whole table, over the draw's jitter.
func (q *plain) prices(whole *plainView, jitter []float64) []float64 {
	out := make([]float64, len(q.units))
	for u, cols := range q.units {
		out[u] = 1
		if q.isGroup(u) {
			out[u] = q.sizePrice(len(whole.basis(cols)))
		}
		if q.relative != nil {
			out[u] *= q.relative[u]
		}
		if jitter != nil {
			out[u] /= jitter[u]
		}
	}
	return out
}

func (q *plain) sizePrice(k int) float64 {
	if q.groupWeight == solver.GroupSqrt {
		return math.Sqrt(float64(k))
	}
	a := min(max(q.luck, 0.001), 0.25)
	return math.Sqrt(chiSquareAbove(k, a)) / math.Sqrt(chiSquareAbove(1, a))
}

// chiSquareAbove is the value that chi square with k degrees of freedom exceeds
// with probability a, by bisection. The tail is a sum of positive terms
// (Abramowitz & Stegun 26.4.4 and 26.4.5).
func chiSquareAbove(k int, a float64) float64 {
	tail := func(x float64) float64 {
		var q, term float64
		start := 2 - k%2
		if start == 1 {
			q = math.Erfc(math.Sqrt(x / 2))
			term = math.Sqrt(2*x/math.Pi) * math.Exp(-x/2)
		} else {
			q = math.Exp(-x / 2)
			term = math.Exp(-x/2) * x / 2
		}
		for d := start; d < k; d += 2 {
			q += term
			term *= x / float64(d+2)
		}
		return q
	}
	low, high := 0.0, 1000.0
	for range 200 {
		if m := (low + high) / 2; tail(m) > a {
			low = m
		} else {
			high = m
		}
	}
	return (low + high) / 2
}

// scales returns what the penalty multiplies a single candidate's coefficient
// by.
func (v *plainView) scales(whole *plainView) []float64 {
	out := make([]float64, len(v.q.units))
	for u, cols := range v.q.units {
		switch v.q.scale {
		case solver.ScaleDraw:
			out[u] = v.sd[cols[0]]
		case solver.ScaleTable:
			out[u] = whole.sd[cols[0]]
		case solver.ScaleNone:
			out[u] = 1
		}
	}
	return out
}
