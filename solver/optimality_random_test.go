package solver_test

import (
	"context"
	"fmt"
	"math"
	"testing"

	"holdfast/solver"
)

// trial is a random problem with its model, its draw, and what checks it.
type trial struct {
	q *plain
	d plainDraw
	m *solver.Model
	c *check
}

// problemsPerFamily makes 2,100 problems.
const problemsPerFamily = 420

// TestOptimalityFromTheDefinition recomputes the optimality conditions of
// DESIGN 4 by plain formulas on random problems of every family: a failure names
// the seed that rebuilds the problem.
func TestOptimalityFromTheDefinition(t *testing.T) {
	for family := solver.Gaussian; family <= solver.Cox; family++ {
		t.Run(family.String(), func(t *testing.T) {
			var tally tally
			for seed := range uint64(problemsPerFamily) {
				if err := tally.try(family, seed); err != nil {
					t.Errorf("seed %d: %v", seed, err)
				}
			}
			tally.report(t)
		})
	}
}

// tally counts what the trials came to.
type tally struct {
	problems, refused, fits, blind, entered, scored, stopped int
	worst                                                    float64
}

// report fails where the trials were idle.
func (y *tally) report(t *testing.T) {
	t.Logf("%d problems, %d fits, largest violation %.2g, %d fits beyond the check's digits; %d candidates entered, %d paths with scores, %d stopped by number, %d draws refused",
		y.problems, y.fits, y.worst, y.blind, y.entered, y.scored, y.stopped, y.refused)
	if y.problems < problemsPerFamily*95/100 || y.fits < 8*y.problems || y.blind > y.fits/200 || y.entered < 3*y.problems || y.scored == 0 || y.stopped == 0 {
		t.Error("the trials are idle")
	}
}

func (y *tally) try(family solver.Family, seed uint64) error {
	q, d := inventPlain(family, seed)
	ctx, s := context.Background(), d.sample()
	m, err := solver.NewModel(ctx, q.problem())
	if err != nil {
		return fmt.Errorf("NewModel: %w", err)
	}
	if why := m.Fittable(s); why != nil {
		y.refused++
		return q.refusedRightly(d, why)
	}
	y.problems++
	k := &trial{q, d, m, newCheck(q, d)}
	paths, err := m.FitBlock(ctx, []*solver.Sample{s}, nil)
	if err != nil {
		return err
	}
	for _, step := range []func(*tally, *solver.Path) error{k.path, k.deviances, k.steps, k.singles, k.top} {
		if err := step(y, &paths[0]); err != nil {
			return err
		}
	}
	return nil
}

// judge checks a fit and returns its state and verdict.
func (k *trial) judge(y *tally, f plainFit) (*state, verdict, error) {
	s := k.c.state(f)
	r := s.verdict()
	y.fits++
	if r.blur > k.q.tolerance() {
		y.blind++
		return s, r, nil
	}
	y.worst = max(y.worst, r.violation)
	if !(r.excess() <= k.q.tolerance()) {
		return s, r, fmt.Errorf("lambda %g: violation %g (rounding %g) at %s", f.lambda, r.violation, r.rounding, r.where)
	}
	if k.q.family == solver.Gaussian {
		if gap := s.gap(); !(gap <= plainCertifiedGaussian+r.blur) {
			return s, r, fmt.Errorf("lambda %g: duality gap %g", f.lambda, gap)
		}
	}
	return s, r, nil
}

// path checks the whole of a Path: its steps, its arrays, every fit.
func (k *trial) path(y *tally, p *solver.Path) error {
	if p.Stop == solver.StopUncertified {
		return fmt.Errorf("not certified after step %d: %s", p.Last, p.Why)
	}
	fits, err := k.q.ofPath(p, k.m)
	if err != nil {
		return err
	}
	worst, gap := math.Inf(-1), 0.0 // beyond rounding
	for i, f := range fits {
		s, r, err := k.judge(y, f)
		if err != nil {
			return fmt.Errorf("step %d: %w", p.First+i, err)
		}
		worst = max(worst, r.excess())
		if k.q.family == solver.Gaussian {
			gap = max(gap, s.gap()-r.blur)
		}
		if err := k.start(p, i, s); err != nil {
			return err
		}
	}
	if worst > p.Violation || gap > p.Gap+1e-12 {
		return fmt.Errorf("violation %g and gap %g reported, at least %g and %g found", p.Violation, p.Gap, worst, gap)
	}
	y.entered += len(p.Entries)
	if p.Stop == solver.StopEntered {
		y.stopped++
	}
	return k.c.shape(p, k.m)
}

// start checks where a path starts: at its first step there is no candidate,
// and at the next lambda there must be one.
func (k *trial) start(p *solver.Path, i int, s *state) error {
	if i > 0 || p.Last == p.First {
		return nil
	}
	top := s.needed()
	if first, next := k.m.Lambda(p.First), k.m.Lambda(p.First+1); top > first*(1+1e-7) || top < next*(1-1e-7) {
		return fmt.Errorf("starts at lambda %g (next %g): the smallest without a candidate is %g", first, next, top)
	}
	return nil
}

// needed is the smallest lambda at which a fit without candidates stays one.
func (s *state) needed() float64 {
	top := 0.0
	for u := range s.c.q.units {
		for class := range s.score {
			if v, _ := s.unit(u, class); !s.c.fixed(u) {
				top = max(top, (v+1)*s.f.lambda)
			}
		}
	}
	return top
}

// ofPath reads the fits of a path, step by step, and checks the order and
// content of its arrays.
func (q *plain) ofPath(p *solver.Path, m *solver.Model) ([]plainFit, error) {
	n, steps := q.classCount(), p.Last-p.First+1
	intercepts := n * steps
	if q.family == solver.Cox {
		intercepts = 0
	}
	if steps < 1 || len(p.Intercepts) != intercepts || len(p.Always) != steps*len(q.always)*n {
		return nil, fmt.Errorf("%d steps with %d intercepts and %d always-in coefficients", steps, len(p.Intercepts), len(p.Always))
	}
	fits := make([]plainFit, steps)
	for i := range fits {
		f := q.nothing()
		f.lambda = m.Lambda(p.First + i)
		if intercepts > 0 {
			copy(f.intercept, p.Intercepts[i*n:])
		}
		for a := range f.always {
			copy(f.always[a], p.Always[(i*len(q.always)+a)*n:])
		}
		fits[i] = f
	}
	for i, c := range p.Coefs {
		if i > 0 && !coefAfter(p.Coefs[i-1], c) {
			return nil, fmt.Errorf("coefficient %d is out of order: %v after %v", i, c, p.Coefs[i-1])
		}
		if c.Value == 0 || math.IsNaN(c.Value) || math.IsInf(c.Value, 0) {
			return nil, fmt.Errorf("coefficient %d is %v", i, c.Value)
		}
		fits[int(c.Step)-p.First].coef[c.Candidate][c.Term][c.Class] = c.Value
	}
	return fits, nil
}

func coefAfter(a, b solver.Coef) bool {
	x, y := [4]int32{a.Step, a.Candidate, a.Term, a.Class}, [4]int32{b.Step, b.Candidate, b.Term, b.Class}
	for i := range x {
		if x[i] != y[i] {
			return x[i] < y[i]
		}
	}
	return false
}

// shape checks entries, still candidates and the end of a path.
func (c *check) shape(p *solver.Path, m *solver.Model) error {
	var want []solver.Entry
	seen := map[int32]bool{}
	for _, b := range p.Coefs {
		if !seen[b.Candidate] {
			seen[b.Candidate] = true
			signed := !c.q.isGroup(int(b.Candidate)) && c.q.family != solver.Multinomial
			want = append(want, solver.Entry{Candidate: b.Candidate, Step: b.Step, Negative: signed && b.Value < 0})
		}
	}
	if fmt.Sprint(want) != fmt.Sprint(p.Entries) {
		return fmt.Errorf("entries %v, the coefficients say %v", p.Entries, want)
	}
	if len(want) > 0 && want[0].Step == int32(p.First) {
		return fmt.Errorf("a candidate at the first step")
	}
	if len(want) == 0 && p.Last > p.First || len(want) > 0 && int(want[0].Step) != p.First+1 {
		return fmt.Errorf("no candidate at the second step")
	}
	var still []int32
	for u := range c.q.units {
		if c.fixed(u) {
			still = append(still, int32(u))
		}
	}
	if fmt.Sprint(still) != fmt.Sprint(p.Still) {
		return fmt.Errorf("still %v, want %v", p.Still, still)
	}
	return c.end(p, m)
}

// end checks why a path ended: at the floor, or at the step at which more
// candidates than StopAfter had entered.
func (c *check) end(p *solver.Path, m *solver.Model) error {
	before := 0
	for _, e := range p.Entries {
		if int(e.Step) < p.Last {
			before++
		}
	}
	over := func(n int) bool { return c.q.stopAfter > 0 && n > c.q.stopAfter }
	switch {
	case over(before):
		return fmt.Errorf("goes on after %d candidates, stop_after is %d", before, c.q.stopAfter)
	case over(len(p.Entries)) != (p.Stop == solver.StopEntered) && p.Last != m.LastStep():
		return fmt.Errorf("%d candidates, stop_after %d, yet it ended by %v", len(p.Entries), c.q.stopAfter, p.Stop)
	case p.Stop == solver.StopFloor && p.Last != m.LastStep():
		return fmt.Errorf("ends at step %d, the floor is at %d", p.Last, m.LastStep())
	}
	return nil
}

// deviances checks the scores on the rows left out.
func (k *trial) deviances(y *tally, p *solver.Path) error {
	if k.d.left == nil {
		if p.Deviance != nil {
			return fmt.Errorf("deviances without rows left out")
		}
		return nil
	}
	y.scored++
	fits, err := k.q.ofPath(p, k.m)
	if err != nil {
		return err
	}
	if len(p.Deviance) != len(fits) {
		return fmt.Errorf("%d deviances for %d steps", len(p.Deviance), len(fits))
	}
	other := k.c.v.others(k.d.left, k.d.weight)
	for i, f := range fits {
		if want := other.deviance(f); !nearly(p.Deviance[i], want, 1e-9) {
			return fmt.Errorf("step %d: deviance %.15g, want %.15g", p.First+i, p.Deviance[i], want)
		}
	}
	if want := other.deviance(k.c.v.null()); !nearly(p.NullDeviance, want, 1e-8) {
		return fmt.Errorf("null deviance %.15g, want %.15g", p.NullDeviance, want)
	}
	return nil
}

// nearly compares two numbers: relative to their size, or to 1 where they are
// smaller. A Poisson score may overflow: rows far from the draw's.
func nearly(got, want, tolerance float64) bool {
	return got == want || math.Abs(got-want) <= tolerance*max(1, math.Abs(want))
}

// steps checks that FitPath gives the fits of FitBlock, to the bit.
func (k *trial) steps(y *tally, p *solver.Path) error {
	fits, err := k.m.FitPath(context.Background(), k.d.sample())
	if err != nil {
		return err
	}
	want, err := k.q.ofPath(p, k.m)
	if err != nil {
		return err
	}
	if len(fits) != len(want) {
		return fmt.Errorf("FitPath has %d steps, FitBlock %d", len(fits), len(want))
	}
	for i, fit := range fits {
		got, err := k.q.ofFit(fit)
		if err != nil {
			return err
		}
		if fmt.Sprint(got) != fmt.Sprint(want[i]) || fit.Step != p.First+i || !fit.Certified {
			return fmt.Errorf("step %d: FitPath differs from FitBlock:\n%v\n%v", p.First+i, got, want[i])
		}
		if err := k.summary(fit, k.c.state(got)); err != nil {
			return fmt.Errorf("step %d: %w", fit.Step, err)
		}
	}
	return nil
}

// summary checks loss, objective, certificate and the number selected.
func (k *trial) summary(fit solver.Fit, s *state) error {
	loss := s.loss / k.c.v.total
	if !nearly(fit.Loss, loss, 1e-10) || !nearly(fit.Objective, loss+s.penalty(), 1e-10) {
		return fmt.Errorf("loss %.15g and objective %.15g, want %.15g and %.15g", fit.Loss, fit.Objective, loss, loss+s.penalty())
	}
	r := s.verdict()
	if r.excess() > fit.Violation {
		return fmt.Errorf("violation %g reported, at least %g found at %s", fit.Violation, r.excess(), r.where)
	}
	if k.q.family == solver.Gaussian {
		if gap := s.gap(); gap > fit.Gap+r.blur+1e-12 {
			return fmt.Errorf("gap %g reported, %g found", fit.Gap, gap)
		}
	}
	selected := 0
	for u := range k.q.units {
		in := false
		for class := range s.score {
			in = in || s.size(u, class) != 0
		}
		if in {
			selected++
		}
	}
	if selected != fit.Selected {
		return fmt.Errorf("%d selected, it says %d", selected, fit.Selected)
	}
	return nil
}

// singles checks FitAt: lambdas off the lattice, and lambda 0 where it exists.
func (k *trial) singles(y *tally, p *solver.Path) error {
	at := k.m.Lambda(p.First + (p.Last-p.First)/2)
	fits, err := k.m.FitAt(context.Background(), k.d.sample(), []float64{0.37 * at, 1.03 * at})
	if err != nil {
		return err
	}
	for _, fit := range fits {
		got, err := k.q.ofFit(fit)
		if err != nil {
			return err
		}
		if !fit.Certified {
			return fmt.Errorf("lambda %g: not certified: %s", fit.Lambda, fit.Why)
		}
		s, _, err := k.judge(y, got)
		if err != nil {
			return err
		}
		if err := k.summary(fit, s); err != nil {
			return fmt.Errorf("lambda %g: %w", fit.Lambda, err)
		}
	}
	return nil
}

// top checks lambda_max: no candidate at it, one just below, and its value by
// the plain gradient of the fit without candidates.
func (k *trial) top(y *tally, _ *solver.Path) error {
	lambda, all := k.m.LambdaMax(), k.q.everyRow()
	fits, err := k.m.FitAt(context.Background(), all.sample(), []float64{lambda, lambda * (1 - 1e-6)})
	if err != nil {
		return err
	}
	if !fits[0].Certified || !fits[1].Certified || fits[0].Selected != 0 || fits[1].Selected == 0 {
		return fmt.Errorf("%d selected at lambda_max, %d just below (%s %s)", fits[0].Selected, fits[1].Selected, fits[0].Why, fits[1].Why)
	}
	f, err := k.q.ofFit(fits[0])
	if err != nil {
		return err
	}
	if want := newCheck(k.q, all).state(f).needed(); !nearly(lambda/want, 1, 1e-7) {
		return fmt.Errorf("lambda_max %g, want %g", lambda, want)
	}
	return nil
}

// refusedRightly checks a refusal of Fittable: the likelihood of the always-in
// columns alone must have no maximum, that is, its ascent must run away.
func (q *plain) refusedRightly(d plainDraw, why error) error {
	if far := q.view(d.count, d.weight).farthest(q.always); far <= settled {
		return fmt.Errorf("refused (%w), but the fit without candidates exists, with linear predictors up to %g", why, far)
	}
	return nil
}

// TestUnpenalised: lambda 0 is certified where the columns have full rank and
// the likelihood has a maximum, and is an error or not certified where not.
func TestUnpenalised(t *testing.T) {
	for family := solver.Gaussian; family <= solver.Cox; family++ {
		t.Run(family.String(), func(t *testing.T) {
			fitted, refused := 0, 0
			for seed := range uint64(60) {
				q, d := inventPlain(family, 500+seed)
				q.units, q.named = q.units[:min(3, len(q.units))], q.named[:min(3, len(q.named))]
				if q.relative != nil {
					q.relative = q.relative[:len(q.units)]
				}
				d.jitter = nil
				ok, err := q.unpenalised(d)
				if err != nil {
					t.Errorf("seed %d: %v", seed, err)
				}
				if ok {
					fitted++
				} else {
					refused++
				}
			}
			if fitted < 15 || refused < 3 {
				t.Errorf("%d fits and %d refusals: the trials are idle", fitted, refused)
			}
		})
	}
}

// unpenalised fits lambda 0 and reports whether there is a fit; an error where
// there should or should not be one, or where it is no optimum, or not that of the
// plain ascent. Always-in columns may be redundant among themselves.
func (q *plain) unpenalised(d plainDraw) (bool, error) {
	m, err := solver.NewModel(context.Background(), q.problem())
	if err != nil {
		return false, err
	}
	c, cols := newCheck(q, d), append([]int32(nil), q.always...)
	for _, u := range q.units {
		cols = append(cols, u...)
	}
	candidates := len(cols) - len(q.always)
	full := len(c.v.basis(cols)) == len(c.v.basis(q.always))+candidates
	top, far := c.v.climb(cols)
	fits, err := m.FitAt(context.Background(), d.sample(), []float64{0})
	fit := err == nil && fits[0].Certified
	exists := full && (far < settled || q.family == solver.Gaussian)
	switch {
	case fit && !full:
		return fit, fmt.Errorf("certified at lambda 0 without full rank: %v", fits[0].Coef)
	case !fit && exists && err == nil:
		return fit, fmt.Errorf("not certified: %s", fits[0].Why)
	case !fit && exists:
		return fit, fmt.Errorf("refused: %w", err)
	case !fit:
		return fit, nil
	}
	f, err := q.ofFit(fits[0])
	if err != nil {
		return fit, err
	}
	if worst, rounding := c.state(f).free(cols); !(worst-rounding <= q.tolerance()) {
		return fit, fmt.Errorf("violation %g (rounding %g)", worst, rounding)
	}
	if off := c.v.between(c.v.eta(f), top.eta()); off > 1e-4 {
		return fit, fmt.Errorf("linear predictors %g from those of the ascent, up to %g", off, far)
	}
	return fit, nil
}

// between is the largest difference of two sets of linear predictors, less what
// the family does not see, relative to the largest of them or 1.
func (v *plainView) between(x, y [][]float64) float64 {
	switch v.q.family {
	case solver.Cox:
		v.centre(x[0])
		v.centre(y[0])
	case solver.Multinomial:
		lessCommon(x)
		lessCommon(y)
	}
	worst, size := 0.0, 1.0
	for c := range x {
		for k := range x[c] {
			worst, size = max(worst, math.Abs(x[c][k]-y[c][k])), max(size, math.Abs(x[c][k]))
		}
	}
	return worst / size
}
