package solver

import (
	"context"
	"math"

	"holdfast/solver/kernel"
)

// screenMargin is the relative distance from a threshold within which a
// screening number decides nothing: the unit is gathered and judged by a
// record number. Screening numbers are wrong by about 1e-11 of the outcome's
// spread (screenRounding), which the margin is widened by.
const (
	screenMargin   = 1e-7
	screenRounding = 1e-10
)

// snapshotBytes bounds the score vectors that one draw keeps as references.
const snapshotBytes = 64 << 20

// gradients holds one screening gradient per candidate, divided by scale, mix
// and penalty weight so that it compares with lambda itself, and the snapshot
// of the score vector that it belongs to.
type gradients struct {
	value []float64
	ref   []int32 // number of a snapshot
}

func (g *gradients) resize(n int) {
	g.value = resize(g.value, n)
	if cap(g.ref) < n {
		g.ref = make([]int32, n)
	}
	g.ref = g.ref[:n]
}

func (g *gradients) copyFrom(o *gradients) {
	copy(g.value, o.value)
	copy(g.ref, o.ref)
}

// snapshots are the score vectors that gradients refer to. Numbers go up; the
// oldest are let go when the room is used up.
type snapshots struct {
	first int32 // number of kept[0]
	kept  [][]float64
	spare [][]float64
	most  int
}

func (s *snapshots) reset(rows int) {
	s.spare = append(s.spare, s.kept...)
	s.kept, s.first = s.kept[:0], 0
	s.most = max(8, snapshotBytes/(8*max(rows, 1)))
}

// add keeps a copy of u and returns its number.
func (s *snapshots) add(u []float64) int32 {
	if len(s.kept) >= s.most {
		half := len(s.kept) / 2
		s.spare = append(s.spare, s.kept[:half]...)
		s.kept = append(s.kept[:0], s.kept[half:]...)
		s.first += int32(half)
	}
	var b []float64
	if n := len(s.spare); n > 0 {
		b, s.spare = s.spare[n-1], s.spare[:n-1]
	}
	s.kept = append(s.kept, append(b[:0], u...))
	return s.first + int32(len(s.kept)) - 1
}

// distance is an upper limit of ||u - v||/sqrt(N): by Cauchy-Schwarz the
// gradients of a standardised column at u and v differ by no more.
func distance(u, v []float64, total float64) float64 {
	return math.Sqrt(kernel.SquaredDistance(u, v)/total) * (1 + 1e-9)
}

// span measures how far snapshots lie from one score vector, each when it is
// first asked for: many snapshots are referred to by no candidate any more.
type span struct {
	snaps    *snapshots
	u        []float64
	total    float64
	distance []float64 // per kept snapshot; negative: not measured yet
}

// from points the span at a score vector.
func (s *span) from(snaps *snapshots, u []float64, total float64) {
	s.snaps, s.u, s.total = snaps, u, total
	s.distance = resize(s.distance, len(snaps.kept))
	for i := range s.distance {
		s.distance[i] = -1
	}
}

// reach returns how far the gradient of a standardised candidate can be from
// the value that belongs to a snapshot.
func (s *span) reach(ref int32) float64 {
	i := ref - s.snaps.first
	if i < 0 {
		return math.Inf(1)
	}
	if s.distance[i] < 0 {
		s.distance[i] = distance(s.u, s.snaps.kept[i], s.total)
	}
	return s.distance[i]
}

// request asks for the candidates whose gradient at a score vector may reach
// least, with their gradients brought up to date.
type request struct {
	f      *fitting
	u      []float64
	number int32   // of u's snapshot
	least  float64 // lambda less the margin
	found  []int32 // the answer: units whose gradient reaches least, ascending
}

// screen answers requests for gradients of all candidates; how is its own
// business.
type screen interface {
	answer(ctx context.Context, reqs []*request) error
}

// productScreen computes the gradients that no reference excludes, column by
// column over all requests, so that a column is read once for all of them:
// as one product with up to sixteen lanes where most need it, else by the
// rows of each draw.
type productScreen struct {
	m      *Model
	need   []uint16 // per candidate: the requests that need it
	span   span
	lane   []lanes   // per request
	rows   []float64 // all table rows x lanes, filled when first needed
	filled bool
	out    []float64
}

func (s *productScreen) answer(ctx context.Context, reqs []*request) error {
	for len(reqs) > 0 {
		n := min(len(reqs), kernel.MaxLanes)
		if err := s.pass(ctx, reqs[:n]); err != nil {
			return err
		}
		reqs = reqs[n:]
	}
	return nil
}

func (s *productScreen) pass(ctx context.Context, reqs []*request) error {
	s.mark(reqs)
	if err := s.compute(ctx, reqs); err != nil {
		return err
	}
	for _, r := range reqs {
		r.collect()
	}
	return nil
}

// mark finds which candidates each request needs.
func (s *productScreen) mark(reqs []*request) {
	if len(s.need) != s.m.candidates() {
		s.need = make([]uint16, s.m.candidates())
	}
	clear(s.need)
	s.filled = false
	for len(s.lane) < len(reqs) {
		s.lane = append(s.lane, lanes{})
	}
	for l, r := range reqs {
		f := r.f
		s.span.from(&f.snaps, r.u, f.d.total)
		bit := uint16(1) << l
		for c, v := range f.end.value {
			if f.inverse[c] == 0 {
				continue
			}
			if !(math.Abs(v)+float64(f.normOf(c)*s.span.reach(f.end.ref[c])) < r.least) {
				s.need[c] |= bit
			}
		}
		if whim := f.m.whim; whim != nil {
			whim.alsoNeed(s.need, f.inverse, bit)
		}
		s.lane[l].from(&f.d, r.u)
	}
}

func (s *productScreen) compute(ctx context.Context, reqs []*request) error {
	const stretch = 1024 // candidates between two looks at the context
	for c0 := 0; c0 < len(s.need); c0 += stretch {
		if err := ctx.Err(); err != nil {
			return err
		}
		for c := c0; c < min(c0+stretch, len(s.need)); c++ {
			if s.need[c] != 0 {
				s.column(reqs, c)
			}
		}
	}
	return nil
}

// column brings one candidate's gradient up to date in the requests that need
// it.
func (s *productScreen) column(reqs []*request, c int) {
	if s.m.lanes() > 1 || !s.m.single(int32(c)) {
		s.sizes(reqs, c)
		return
	}
	x, holes := s.m.column(int32(c))
	byLanes := s.lanesPay(reqs, s.need[c])
	if byLanes {
		s.fill(reqs)
		s.out = resize(s.out, len(reqs))
		kernel.Lanes([][]float64{x}, s.rows, len(reqs), s.out)
	}
	for l, r := range reqs {
		if s.need[c]>>l&1 == 0 {
			continue
		}
		f := r.f
		var raw float64
		if byLanes {
			raw = s.out[l]
		} else {
			raw = kernel.DotRows(x, f.d.rows, s.lane[l].v)
		}
		sum := s.lane[l].sum[0]
		if holes != nil {
			sum -= f.d.overHoles(holes, s.lane[l].v)
		}
		f.end.value[c] = (raw - float64(f.mean[c]*sum)) * f.inverse[c] / f.d.total
		f.end.ref[c] = r.number
	}
}

// sizes is column for groups and several classes.
func (s *productScreen) sizes(reqs []*request, c int) {
	for l, r := range reqs {
		if s.need[c]>>l&1 != 0 {
			r.f.end.value[c] = r.f.size(int32(c), &s.lane[l])
			r.f.end.ref[c] = r.number
		}
	}
}

// size is the screening gradient of a candidate, divided as in gradients: the
// largest over the lanes, of a group its length. It is never negative.
func (f *fitting) size(c int32, l *lanes) float64 {
	most := 0.0
	for k, sum := range l.sum {
		if f.m.single(c) {
			x, holes := f.m.column(c)
			most = max(most, math.Abs(f.d.product(x, holes, l.lane(k), f.mean[c], sum)))
		} else {
			most = max(most, f.groupSize(c, l.lane(k), sum))
		}
	}
	return most * f.inverse[c] / f.d.total
}

// groupSize is the length of a group's gradient for one lane, times N.
func (f *fitting) groupSize(c int32, lane []float64, sum float64) float64 {
	g := f.groups[c]
	v := make([]float64, len(g.kept))
	for i, t := range g.kept {
		j := f.m.p.Groups[c][t]
		x := f.m.p.Design.Panel([]int32{j}, 0, f.m.rows, nil)[0]
		v[i] = f.d.product(x, f.m.p.Design.Holes(j), lane, g.mean[i], sum)
	}
	g.gradient(v)
	return length(v)
}

// product is that of a centred column with a lane whose sum is given.
func (d *drawn) product(x []float64, holes []uint64, lane []float64, mean, sum float64) float64 {
	if holes != nil {
		sum -= d.overHoles(holes, lane)
	}
	return kernel.DotRows(x, d.rows, lane) - float64(mean*sum)
}

// lanesPay weighs a product over all rows and lanes against one over the drawn
// rows for each request that needs the column (measured with the portable
// kernels, 500 rows: 0.33 ns per row and lane, 0.45 ns per drawn row).
func (s *productScreen) lanesPay(reqs []*request, need uint16) bool {
	if whim := s.m.whim; whim != nil && whim.coin() {
		return true
	}
	drawn := 0
	for l, r := range reqs {
		if need>>l&1 != 0 {
			drawn += len(r.f.d.rows)
		}
	}
	return 0.33*float64(s.m.rows*len(reqs)) < 0.45*float64(drawn)
}

// fill lays the requests' vectors out row by row, zero where not drawn.
func (s *productScreen) fill(reqs []*request) {
	if s.filled {
		return
	}
	k := len(reqs)
	s.rows = resize(s.rows, s.m.rows*k)
	clear(s.rows)
	for l, r := range reqs {
		for i, row := range r.f.d.rows {
			s.rows[int(row)*k+l] = s.lane[l].v[i]
		}
	}
	s.filled = true
}

// collect lists the units whose gradient reaches the request's least.
func (r *request) collect() {
	r.found = r.found[:0]
	for c, v := range r.f.end.value {
		if math.Abs(v) >= r.least && r.f.end.ref[c] == r.number && r.f.inverse[c] != 0 {
			r.found = append(r.found, int32(c))
		}
	}
}

// overHoles sums a lane over the drawn rows that are missing in a column.
func (d *drawn) overHoles(holes []uint64, lane []float64) float64 {
	sum := 0.0
	for k, r := range d.rows {
		if isHole(holes, r) {
			sum += lane[k]
		}
	}
	return sum
}
