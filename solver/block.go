package solver

import (
	"context"
	"math"
	"sync"

	"holdfast/solver/kernel"
)

// blockBytes bounds the gathered columns of the draws that one worker fits
// together.
const blockBytes = 192 << 20

// BlockLimit returns how many draws of the given number of rows one worker
// should fit together: as many as one pass over a column serves, fewer where
// their gathered columns would take much memory, at least a pair.
func (m *Model) BlockLimit(drawRows int) int { return m.Shape(drawRows).BlockLimit() }

// Windows, in lattice steps: the first one on a long table, and the longest.
const (
	firstWindow = 8
	longWindow  = 16
)

// long reports whether the table has so many more rows than candidates that
// passes over it cost most; solutions at two far lambdas are then nearly
// straight lines, and looking ahead pays.
func (m *Model) long() bool { return m.rows >= 2*m.candidates() }

// window is how many lattice steps the fitting looks ahead: one on a wide
// table. On a long one it follows how the window before went: it was too long
// where its steps needed more gradients than another pass over the table would
// have made, or brought in many more candidates than entered, as a residual far
// from the optimum does.
func (f *fitting) window() int {
	switch {
	case !f.m.exact:
		return 1
	case f.m.whim != nil:
		return f.m.whim.window()
	case !f.m.long():
		return 1
	case f.ahead == 0:
		f.ahead = firstWindow
	case f.looked > f.m.candidates() || f.brought > 8+len(f.entered)-f.had:
		f.ahead = max(4, f.ahead/2)
	case f.looked < f.m.candidates()/2:
		f.ahead = min(longWindow, f.ahead+f.ahead/2)
	}
	f.looked, f.brought, f.had = 0, 0, len(f.entered)
	return f.ahead
}

// FitBlock fits the path of each draw and returns them in the order of the
// samples. The draws share the passes over the table; each path depends on its
// own sample only, to the bit. progress, which may be nil, is told of lattice
// steps done. It is safe for concurrent use. A draw that cannot be certified
// ends its path and says so in its Path, before its first step where it cannot
// be fitted at all; an error is returned only for a cancelled context.
func (m *Model) FitBlock(ctx context.Context, samples []*Sample, progress func(steps int)) ([]Path, error) {
	m.seedFrom(ctx)
	paths := make([]Path, len(samples))
	fits := make([]*fitting, 0, len(samples))
	for k, s := range samples {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		f := m.fitting()
		defer m.release(f)
		if err := f.start(m.weighted(s)); err != nil {
			paths[k] = Path{First: m.last, Last: m.last - 1, Stop: StopUncertified, Why: err.Error()}
			continue
		}
		f.record(&paths[k], progress)
		fits = append(fits, f)
	}
	if err := m.lockstep(ctx, fits); err != nil {
		return nil, err
	}
	return paths, nil
}

// weighted adds the problem's case weights to a sample that has none.
func (m *Model) weighted(s *Sample) *Sample {
	if s.Case != nil || m.p.Case == nil {
		return s
	}
	w := *s
	w.Case = m.p.Case
	return &w
}

// lockstep lets the fittings ask for gradients together until all are done.
func (m *Model) lockstep(ctx context.Context, fits []*fitting) error {
	var screen screen = &productScreen{m: m}
	reqs := make([]*request, 0, len(fits))
	for len(fits) > 0 {
		reqs, fits = gatherRequests(reqs[:0], fits)
		if err := ctx.Err(); err != nil {
			return err
		}
		if err := screen.answer(ctx, reqs); err != nil {
			return err
		}
	}
	return nil
}

// gatherRequests takes each fitting as far as it goes and drops those that are
// done.
func gatherRequests(reqs []*request, fits []*fitting) ([]*request, []*fitting) {
	going := make([]*fitting, 0, len(fits))
	for _, f := range fits {
		if r := f.next(); r != nil {
			reqs, going = append(reqs, r), append(going, f)
		}
	}
	return reqs, going
}

// record makes the fitting write its certified steps into a path on the
// lattice.
func (f *fitting) record(p *Path, progress func(int)) {
	first := f.m.last
	if !f.constant() {
		if top := f.top(); top > 0 {
			first = min(f.m.lattice.lastEmpty(top), f.m.last)
		}
	}
	*p = Path{First: first, Last: first - 1, Still: f.still}
	f.path = p
	f.accept = func(r *record, shared bool) {
		f.note(p, r, shared)
		if progress != nil {
			progress(1)
		}
	}
	f.travel(f.m.lattice.at, first, f.m.last)
}

// note appends a certified step to a path.
func (f *fitting) note(p *Path, r *record, shared bool) {
	step := int32(f.cur)
	negative := make(map[int32]bool)
	for _, c := range f.values(r) {
		c.Step = step
		p.Coefs = append(p.Coefs, c)
		negative[c.Candidate] = c.Value < 0 && f.signed(c.Candidate)
	}
	for _, u := range r.units {
		if !f.entered[u] {
			p.Entries = append(p.Entries, Entry{Candidate: u, Step: step, Negative: negative[u]})
			if shared {
				p.Twins++
			}
		}
	}
	p.Last = f.cur
	intercepts, always := f.rest(r)
	p.Intercepts = append(p.Intercepts, intercepts...)
	p.Always = append(p.Always, always...)
	p.Violation = max(p.Violation, r.cert.violation)
	p.Gap = max(p.Gap, r.cert.gap)
	f.scoreLeft(p, r)
}

// rest returns the intercepts and the always-in coefficients on the original
// scale.
func (f *fitting) rest(r *record) (intercepts, always []float64) {
	intercepts, always = f.core.level(r), f.core.always(r)
	if len(intercepts) == 0 {
		return nil, always
	}
	lanes := f.lanes()
	for lane := range intercepts {
		intercepts[lane] += f.m.shift
	}
	subtract := func(j int32, mean, b float64, lane int) {
		intercepts[lane] = math.FMA(-b, f.m.p.Centre[j]+mean, intercepts[lane])
	}
	for i, b := range always {
		if b != 0 {
			unit := int32(f.m.candidates() + i/lanes)
			subtract(f.m.design(unit), f.work.mean[f.work.place[unit]], b, i%lanes)
		}
	}
	for _, c := range f.core.values(r) {
		subtract(f.m.columns(c.Candidate)[c.Term], f.meanOf(c.Candidate, int(c.Term)), c.Value, int(c.Class))
	}
	if lanes > 1 { // a common shift means nothing: they sum to zero (DESIGN 4)
		mean := kernel.Sum(intercepts) / float64(lanes)
		for lane := range intercepts {
			intercepts[lane] -= mean
		}
	}
	return f.twofold(intercepts), f.twofold(always)
}

// signed reports whether a candidate's coefficient is one number.
func (f *fitting) signed(unit int32) bool { return f.m.Classes() == 1 && f.m.single(unit) }

// values lists the coefficients of a record's candidates by class.
func (f *fitting) values(r *record) []Coef {
	list := f.core.values(r)
	if !f.m.two {
		return list
	}
	both := make([]Coef, 0, 2*len(list))
	for _, c := range list {
		no, yes := c, c
		no.Value, yes.Value, yes.Class = -c.Value/2, c.Value/2, 1
		both = append(both, no, yes)
	}
	return both
}

// twofold gives each of two classes its half.
func (f *fitting) twofold(list []float64) []float64 {
	if !f.m.two {
		return list
	}
	both := make([]float64, 0, 2*len(list))
	for _, v := range list {
		both = append(both, -v/2, v/2)
	}
	return both
}

// seeds are the lambdas at which candidates enter on all rows: proposals for
// draws on long tables, where most draws agree with them. Nothing recorded
// depends on them.
type seeds struct {
	once   sync.Once
	lambda []float64
}

func (s *seeds) enters(c int32, lambda float64) bool {
	return s.lambda != nil && s.lambda[c] >= lambda
}

// seedFrom makes the seeds, once, where windows are long. A failure leaves
// the seeds empty: they only propose.
func (m *Model) seedFrom(ctx context.Context) {
	if !m.long() || !m.exact {
		return
	}
	m.seeds.once.Do(func() {
		f := m.fitting()
		defer m.release(f)
		var p Path
		if f.start(m.everything()) != nil {
			return
		}
		f.record(&p, nil)
		if m.lockstep(ctx, []*fitting{f}) != nil {
			return
		}
		lambda := make([]float64, m.candidates())
		for _, e := range p.Entries {
			lambda[e.Candidate] = m.Lambda(int(e.Step))
		}
		m.seeds.lambda = lambda
	})
}
