package solver

import (
	"errors"
	"fmt"
	"math"
)

// checkOutcome checks the outcome and what goes with it against the family.
func (p *Problem) checkOutcome(rows int) error {
	switch {
	case p.Family > Cox:
		return fmt.Errorf("solver: family %d: there is no such family", p.Family)
	case p.Offset != nil && len(p.Offset) != rows:
		return fmt.Errorf("solver: %d offsets for %d rows", len(p.Offset), rows)
	case p.Offset != nil && p.Family == Multinomial:
		return errors.New("solver: an offset means nothing for several classes: it would shift all of them alike")
	case p.Family == Cox:
		return p.checkSurvival(rows)
	case len(p.Outcome) != rows:
		return fmt.Errorf("solver: %d outcome values for %d rows", len(p.Outcome), rows)
	case p.Family == Multinomial && p.Classes < 2:
		return fmt.Errorf("solver: %d classes: at least 2 are needed", p.Classes)
	}
	for i, y := range p.Outcome {
		if why := p.badOutcome(y); why != "" {
			return fmt.Errorf("solver: the outcome is %v in row %d%s", y, i, why)
		}
	}
	return p.checkOffset()
}

// badOutcome says what an outcome value should have been; "" where it is right.
func (p *Problem) badOutcome(y float64) string {
	switch {
	case math.IsNaN(y) || math.IsInf(y, 0):
		return ": it must be a finite number"
	case p.Family == Binomial && y != 0 && y != 1:
		return ": it must be 0 or 1"
	case p.Family == Poisson && (y < 0 || y != math.Floor(y)):
		return ": it must be a whole number, 0 or more"
	case p.Family == Multinomial && (y < 0 || y >= float64(p.Classes) || y != math.Floor(y)):
		return fmt.Sprintf(": it must be a class, 0 to %d", p.Classes-1)
	}
	return ""
}

func (p *Problem) checkOffset() error {
	for i, o := range p.Offset {
		if math.IsNaN(o) || math.IsInf(o, 0) {
			return fmt.Errorf("solver: the offset is %v in row %d: it must be a finite number", o, i)
		}
	}
	return nil
}

func (p *Problem) checkSurvival(rows int) error {
	s := p.Survival
	if s == nil {
		return errors.New("solver: the Cox model has no survival times")
	}
	if len(s.Time) != rows || len(s.Event) != rows || s.Entry != nil && len(s.Entry) != rows || s.Stratum != nil && len(s.Stratum) != rows {
		return fmt.Errorf("solver: %d times, %d events, %d entries, %d strata for %d rows", len(s.Time), len(s.Event), len(s.Entry), len(s.Stratum), rows)
	}
	for i, t := range s.Time {
		if math.IsNaN(t) || math.IsInf(t, 0) {
			return fmt.Errorf("solver: the time is %v in row %d: it must be a finite number", t, i)
		}
		if s.Entry != nil && !(s.Entry[i] < t) {
			return fmt.Errorf("solver: row %d enters at %v and its time is %v: entry must be before it", i, s.Entry[i], t)
		}
	}
	return p.checkOffset()
}

// checkGroups checks the columns of groups.
func (p *Problem) checkGroups() error {
	if p.Groups == nil {
		return nil
	}
	if len(p.Groups) != len(p.Candidates) {
		return fmt.Errorf("solver: %d groups for %d candidates", len(p.Groups), len(p.Candidates))
	}
	in := make(map[int32]bool)
	for _, j := range p.Always {
		in[j] = true
	}
	for c, g := range p.Groups {
		if g == nil {
			g = p.Candidates[c : c+1]
		}
		if len(g) == 0 || g[0] != p.Candidates[c] {
			return fmt.Errorf("solver: group %d does not begin with its candidate", c)
		}
		for _, j := range g {
			if in[j] {
				return fmt.Errorf("solver: column %s is in two groups, or in one and in every model", p.Names[j])
			}
			in[j] = true
		}
	}
	return nil
}

// settle puts an outcome into the form that is fitted. A numeric one loses the offset
// and its mean, which the intercept gets back. Two classes are yes-no: their
// coefficients are -b/2 and b/2, so that the absolute values add up to |b| and half
// the squares to b^2/4, half of what a yes-no outcome pays.
func (m *Model) settle() {
	if m.p.Family == Multinomial && m.p.Classes == 2 {
		m.two, m.p.Family, m.penalty.soft = true, Binomial, 0.5
	}
	if m.p.Family != Gaussian {
		return
	}
	y := append([]float64(nil), m.p.Outcome...)
	for i, o := range m.p.Offset {
		y[i] -= o
	}
	m.p.Offset = nil
	if !m.exact {
		var d drawn
		d.draw(m.everything(), m.rows)
		d.y, m.p.Outcome = resize(d.y, len(d.rows)), y
		d.setOutcome(y)
		m.shift = d.mean
		for i := range y {
			y[i] -= m.shift
		}
	}
	m.p.Outcome = y
}

// hasExact reports whether the exact core serves: a numeric outcome and no group.
func (m *Model) hasExact() bool {
	if m.p.Family != Gaussian {
		return false
	}
	for c := range m.p.Candidates {
		if !m.single(int32(c)) {
			return false
		}
	}
	return true
}
