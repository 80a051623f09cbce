package resample

import (
	"errors"
	"fmt"

	"holdfast/solver"
)

// MaxRedraws is how often a pair, or a bootstrap draw, is made anew where it
// cannot be fitted.
const MaxRedraws = 20

// drawn is the draws of one pair, or one bootstrap draw.
type drawn struct {
	samples []*solver.Sample
	redraws int
	refused []error // per sample: why it cannot be fitted still; nil: it can
}

// draw makes pair (bootstrap: draw) number unit. Where Fit refuses a draw the
// whole pair is made anew. W belongs to the number of a draw and stays.
func (p Plan) draw(unit int) drawn {
	var jitter [][]float64
	for _, number := range p.numbers(unit) {
		jitter = append(jitter, p.jitter(number))
	}
	for attempt := uint8(0); ; attempt++ {
		d := drawn{samples: p.attempt(unit, attempt), redraws: int(attempt)}
		for i, s := range d.samples {
			s.Jitter = jitter[i]
		}
		if p.judge(&d); d.why() == nil || attempt == MaxRedraws {
			return d
		}
	}
}

// attempt draws the rows of a pair, or of a bootstrap draw.
func (p Plan) attempt(unit int, attempt uint8) []*solver.Sample {
	src := newGenerator(p.Design.String(), attempt, p.Seed, uint64(unit))
	if p.Design == Bootstrap {
		return []*solver.Sample{p.bootstrap(src)}
	}
	return p.pair(src)
}

// judge asks Fit about each sample.
func (p Plan) judge(d *drawn) {
	d.refused = make([]error, len(d.samples))
	if p.Fit == nil {
		return
	}
	for i, s := range d.samples {
		d.refused[i] = p.Fit(s)
	}
}

// why is the first refusal; nil where all can be fitted.
func (d *drawn) why() error {
	for _, err := range d.refused {
		if err != nil {
			return err
		}
	}
	return nil
}

// Sample makes draw number draw, as Draw does.
func (p Plan) Sample(draw int) *solver.Sample {
	s, _, _ := p.Draw(draw)
	return s
}

// Draw makes a draw, from the plan and its number alone, and says how often its
// pair (bootstrap: the draw) was made anew because Fit refused it or its
// partner. err is why Fit refuses the draw even after MaxRedraws; the sample is
// then that of the last attempt. Numbers from Plan.Number on are the draws that
// a longer plan would have. A negative number, or a plan that did not come from
// NewPlan, panics.
//
// The sample has W of each candidate in Jitter, and in Left the partner or, for
// Bootstrap, the units not drawn (nil where none is left).
func (p Plan) Draw(number int) (s *solver.Sample, redraws int, err error) {
	if number < 0 || p.units == nil {
		panic(fmt.Sprintf("resample: draw %d of a plan of %d units", number, len(p.units)))
	}
	d := p.draw(p.unit(number))
	i := number - p.numbers(p.unit(number))[0]
	return d.samples[i], d.redraws, d.refused[i]
}

// probes is how many pairs, or bootstrap draws, Check tries. With 21 attempts
// each, a plan of which every tenth attempt can be fitted fails by bad luck
// once in 60,000 plans.
const probes = 5

// Check says why a run would be in vain: Fit refuses the first few pairs
// (bootstrap: draws), however often they are made anew. What strata make
// impossible is refused by NewPlan already. It is meant for the time before a
// run; where something can be fitted it costs little more than one pair.
func (p Plan) Check() error {
	if p.units == nil {
		return errors.New("resample: the plan did not come from NewPlan")
	}
	var last error
	for unit := range probes {
		d := p.draw(unit)
		if last = d.why(); last == nil {
			return nil
		}
	}
	return fmt.Errorf("resample: none of %d %s that were tried can be fitted: %w", probes*(MaxRedraws+1), p.things(), last)
}

// things is what a plan draws, for messages.
func (p Plan) things() string {
	if p.Design == Halves {
		return "pairs of halves"
	}
	return "bootstrap draws"
}
