package solver

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"holdfast/solver/kernel"
)

// fewestEvents is how many events a draw must have (STATISTICS 10).
const fewestEvents = 5

// cox is the negative log partial likelihood over N (Cox 1972, JRSS-B 34:187-220).
// A row is at risk at t where entry < t <= time. Rows that were drawn several
// times are replicates, so they are tied with themselves. Ties by Efron's
// formula (1977, eq. on p. 562) are d terms with the mean weight of the d who
// die, the l-th of which counts them by 1 - l/d in the risk set; Breslow's is
// one term with all of their weight.
type cox struct {
	p *Problem
	d *drawn

	byTime  []int32 // positions in the draw by stratum, latest time first
	byEntry []int32 // likewise by entry; nil where all are there from the start
	ties    []tie   // by stratum, latest first
	terms   []term
	hi, lo  []int32 // per row: the ties it was at risk at are ties[lo..hi-1]
	dead    []bool
	events  float64

	weight []float64 // of each row, 1 where none are given
	risk   []float64 // weight * e^(eta - shift)
	shift  []float64 // per tie: that of its stratum
	sum    []float64 // per tie: of the risk set
	died   []float64 // per tie: of the deaths
	full   []carried // per tie: hazard added from it down to the earliest of the stratum, that of those who outlive it
	less   []float64 // per tie: how much less of it those who die there bear
}

// tie is the events of one stratum at one time.
type tie struct {
	dead         []int32 // positions in the draw
	added, taken int     // byTime[:added] have come into the risk set by then, byEntry[:taken] have left it; of the stratum
	first        bool    // the latest of its stratum
	from, to     int     // its terms
	count        float64 // deaths, replicates counted
	weight       float64 // of the deaths
}

// term is one factor of the partial likelihood.
type term struct {
	tie    int
	gone   float64 // share of the deaths that no longer counts
	weight float64
}

func (f *cox) take(d *drawn) {
	f.d = d
	s := f.p.Survival
	f.readRows(s)
	f.byTime = f.sorted(func(r int32) float64 { return s.Time[r] }, s)
	f.byEntry = nil
	if s.Entry != nil {
		f.byEntry = f.sorted(func(r int32) float64 { return s.Entry[r] }, s)
	}
	f.findTies(s)
	f.placeRows(s)
}

func (f *cox) readRows(s *Survival) {
	f.dead, f.events = f.dead[:0], 0
	f.weight = resize(f.weight, len(f.d.rows))
	for k, r := range f.d.rows {
		f.dead = append(f.dead, s.Event[r])
		f.weight[k] = 1
		if f.d.weight != nil {
			f.weight[k] = f.d.weight[k]
		}
		if s.Event[r] {
			f.events += f.d.countOf(k)
		}
	}
}

func (s *Survival) stratum(r int32) int32 {
	if s.Stratum == nil {
		return 0
	}
	return s.Stratum[r]
}

// sorted orders the rows by stratum, then by a time from the latest.
func (f *cox) sorted(at func(r int32) float64, s *Survival) []int32 {
	order := make([]int32, len(f.d.rows))
	for k := range order {
		order[k] = int32(k)
	}
	slices.SortFunc(order, func(a, b int32) int {
		p, q := f.d.rows[a], f.d.rows[b]
		return cmp.Or(cmp.Compare(s.stratum(p), s.stratum(q)), cmp.Compare(at(q), at(p)), cmp.Compare(a, b))
	})
	return order
}

// findTies walks down the times of each stratum.
func (f *cox) findTies(s *Survival) {
	f.ties, f.terms = f.ties[:0], f.terms[:0]
	taken := 0
	for i := 0; i < len(f.byTime); {
		r := f.d.rows[f.byTime[i]]
		stratum, t := s.stratum(r), s.Time[r]
		first := i == 0 || s.stratum(f.d.rows[f.byTime[i-1]]) != stratum
		var dead []int32
		for i < len(f.byTime) {
			q := f.d.rows[f.byTime[i]]
			if s.stratum(q) != stratum || s.Time[q] != t {
				break
			}
			if s.Event[q] {
				dead = append(dead, f.byTime[i])
			}
			i++
		}
		for taken < len(f.byEntry) {
			q := f.d.rows[f.byEntry[taken]]
			if c := s.stratum(q); c > stratum || c == stratum && s.Entry[q] < t {
				break
			}
			taken++
		}
		if len(dead) > 0 {
			first = first || len(f.ties) == 0 || s.stratum(f.d.rows[f.ties[len(f.ties)-1].dead[0]]) != stratum
			f.addTie(tie{dead: dead, added: i, taken: taken, first: first}, s.Ties)
		}
	}
}

func (f *cox) addTie(t tie, rule Ties) {
	for _, k := range t.dead {
		t.count += f.d.countOf(int(k))
		t.weight += f.weight[k]
	}
	t.from = len(f.terms)
	if rule == Breslow {
		f.terms = append(f.terms, term{tie: len(f.ties), weight: t.weight})
	} else {
		for l := 0.0; l < t.count; l++ {
			f.terms = append(f.terms, term{tie: len(f.ties), gone: l / t.count, weight: t.weight / t.count})
		}
	}
	t.to = len(f.terms)
	f.ties = append(f.ties, t)
}

// placeRows finds the ties at which each row was at risk: those from its own time
// down to the last one after its entry.
func (f *cox) placeRows(s *Survival) {
	n := len(f.d.rows)
	f.hi, f.lo = make([]int32, n), make([]int32, n)
	k := 0
	for _, i := range f.byTime {
		r := f.d.rows[i]
		for k < len(f.ties) && f.later(s, k, r, s.Time[r]) {
			k++
		}
		f.lo[i] = int32(k)
	}
	k = 0
	order := f.byEntry
	if order == nil {
		order = f.byTime
	}
	for _, i := range order {
		r := f.d.rows[i]
		entry := math.Inf(-1)
		if s.Entry != nil {
			entry = s.Entry[r]
		}
		for k < len(f.ties) && f.later(s, k, r, entry) {
			k++
		}
		f.hi[i] = int32(k)
	}
}

// later reports whether tie k comes before time t of row r's stratum in the order
// of ties: an earlier stratum, or a time after t.
func (f *cox) later(s *Survival, k int, r int32, t float64) bool {
	q := f.d.rows[f.ties[k].dead[0]]
	if a, b := s.stratum(q), s.stratum(r); a != b {
		return a < b
	}
	return s.Time[q] > t
}

func (f *cox) fittable() error {
	if f.events < fewestEvents {
		return fmt.Errorf("%g events: at least %d are needed", f.events, fewestEvents)
	}
	return nil
}

// expose finds the risk sums at eta.
func (f *cox) expose(eta []float64) {
	n := len(f.ties)
	f.risk, f.shift = resize(f.risk, len(eta)), resize(f.shift, n)
	f.sum, f.died = resize(f.sum, n), resize(f.died, n)
	k := 0
	for i := 0; i < len(f.byTime); {
		most := 0.0
		i, most = f.exposeStratum(eta, i)
		for ; k < n && f.ties[k].added <= i; k++ {
			f.shift[k] = most
		}
	}
	f.riskSums()
}

// exposeStratum fills risk for the stratum that begins at byTime[i], relative to
// the largest eta of it, which it returns, with where the stratum ends.
func (f *cox) exposeStratum(eta []float64, i int) (end int, most float64) {
	s := f.p.Survival
	stratum, most, end := s.stratum(f.d.rows[f.byTime[i]]), math.Inf(-1), i
	for end < len(f.byTime) && s.stratum(f.d.rows[f.byTime[end]]) == stratum {
		most = max(most, eta[f.byTime[end]])
		end++
	}
	for _, k := range f.byTime[i:end] {
		f.risk[k] = f.weight[k] * kernel.Exp(eta[k]-most)
	}
	return end, most
}

// riskSums adds rows as the time goes down, and takes those out that had not
// entered yet; what is rounded off is carried along (Neumaier 1974).
func (f *cox) riskSums() {
	var run carried
	added, taken := 0, 0
	for k, t := range f.ties {
		if t.first {
			run = carried{}
			added, taken = f.begins(k)
		}
		for ; added < t.added; added++ {
			run.add(f.risk[f.byTime[added]])
		}
		for ; taken < t.taken; taken++ {
			run.add(-f.risk[f.byEntry[taken]])
		}
		f.sum[k], f.died[k] = run.total(), 0
		for _, i := range t.dead {
			f.died[k] += f.risk[i]
		}
		f.sum[k] = max(f.sum[k], f.died[k]) // those who die are at risk, whatever rounding says
	}
}

// begins returns where the stratum of a tie begins in byTime and byEntry.
func (f *cox) begins(k int) (added, taken int) {
	s := f.p.Survival
	stratum := s.stratum(f.d.rows[f.ties[k].dead[0]])
	if k > 0 {
		added, taken = f.ties[k-1].added, f.ties[k-1].taken
	}
	for s.stratum(f.d.rows[f.byTime[added]]) != stratum {
		added++
	}
	for taken < len(f.byEntry) && s.stratum(f.d.rows[f.byEntry[taken]]) != stratum {
		taken++
	}
	return added, taken
}

// carried is a sum with what rounding took from it.
type carried struct{ sum, lost float64 }

func (c *carried) add(v float64) {
	t := c.sum + v
	if math.Abs(c.sum) >= math.Abs(v) {
		c.lost += (c.sum - t) + v
	} else {
		c.lost += (v - t) + c.sum
	}
	c.sum = t
}

func (c *carried) total() float64 { return c.sum + c.lost }

// left is what of a risk sum a term counts.
func (f *cox) left(t term) float64 { return f.sum[t.tie] - float64(t.gone*f.died[t.tie]) }

// hazards fills the hazard that each tie adds, summed from the earliest.
func (f *cox) hazards() {
	f.full, f.less = slices.Grow(f.full[:0], len(f.ties))[:len(f.ties)], resize(f.less, len(f.ties))
	var run carried
	for k := len(f.ties) - 1; k >= 0; k-- {
		t := f.ties[k]
		full, less := 0.0, 0.0
		for _, q := range f.terms[t.from:t.to] {
			h := q.weight / f.left(q)
			full += h
			less += float64(q.gone * h)
		}
		run.add(full)
		f.full[k], f.less[k] = run, less
		if t.first {
			run = carried{}
		}
	}
}

// hazard is what row i bore. A row that enters late bears little of a sum that may be
// large, so the difference is taken of the sums with what rounding took from them.
func (f *cox) hazard(i int) float64 {
	lo, hi := f.lo[i], f.hi[i]
	if lo >= hi {
		return 0
	}
	h := f.full[lo]
	if int(hi) < len(f.ties) && !f.ties[hi].first {
		h.sum, h.lost = h.sum-f.full[hi].sum, h.lost-f.full[hi].lost
	}
	if f.dead[i] {
		h.lost -= f.less[lo]
	}
	return h.total()
}

func (f *cox) score(eta, u []float64) {
	f.expose(eta)
	f.hazards()
	for i := range u {
		event := 0.0
		if f.dead[i] {
			event = f.weight[i]
		}
		u[i] = event - float64(f.risk[i]*f.hazard(i))
		if f.d.root != nil {
			u[i] /= f.d.root[i]
		}
	}
}

func (f *cox) loss(eta []float64) float64 {
	f.expose(eta)
	loss := 0.0
	for k, t := range f.ties {
		part := 0.0
		for _, q := range f.terms[t.from:t.to] {
			part += float64(q.weight * kernel.Log(f.left(q)))
		}
		for _, i := range t.dead {
			part -= float64(f.weight[i] * (eta[i] - f.shift[k]))
		}
		loss += part
	}
	return loss / f.d.total
}

func (f *cox) bend(eta []float64) curvature {
	f.expose(eta)
	f.hazards()
	c := &coxCurvature{f: f, root: make([]float64, len(eta)), risk: slices.Clone(f.risk), scale: make([]float64, len(f.terms))}
	for i := range c.root {
		c.root[i] = math.Sqrt(max(0, f.risk[i]*f.hazard(i)))
		if f.d.root != nil {
			c.root[i] /= f.d.root[i]
			c.risk[i] /= f.d.root[i]
		}
	}
	for q, t := range f.terms {
		c.scale[q] = math.Sqrt(t.weight) / f.left(t)
	}
	return c
}

// coxCurvature is the information: the sum over terms of the weighted variance of a
// column over the risk set, second moments in a, means in b.
type coxCurvature struct {
	f     *cox
	root  []float64 // per row: sqrt(risk * hazard / w)
	risk  []float64 // per row, over sqrt(w)
	scale []float64 // per term: sqrt(weight) over what it counts of the risk sum
}

func (c *coxCurvature) carry(z []float64, _ int) (a, b []float64) {
	f := c.f
	a, b = make([]float64, len(z)), make([]float64, len(f.terms))
	part := make([]float64, len(z))
	for i, v := range z {
		a[i], part[i] = c.root[i]*v, c.risk[i]*v
	}
	var run carried
	added, taken := 0, 0
	for k, t := range f.ties {
		if t.first {
			run = carried{}
			added, taken = f.begins(k)
		}
		for ; added < t.added; added++ {
			run.add(part[f.byTime[added]])
		}
		for ; taken < t.taken; taken++ {
			run.add(-part[f.byEntry[taken]])
		}
		died := 0.0
		for _, i := range t.dead {
			died += part[i]
		}
		for q := t.from; q < t.to; q++ {
			b[q] = c.scale[q] * (run.total() - float64(f.terms[q].gone*died))
		}
	}
	return a, b
}

func (f *cox) intercepts([]float64) []float64 { return nil }

func (f *cox) deviance(eta []float64) float64 {
	return 2 * f.d.total * f.loss(eta)
}
