package study

import "holdfast/selection"

// three is the numbers that the budget ties: two give the third.
type three struct {
	threshold, falseSelections, selected *float64
}

func (d *Decision) three() three {
	return three{d.Threshold, d.FalseSelections, d.Selected}
}

func (d *Decision) setThree(t three) {
	d.Threshold, d.FalseSelections, d.Selected = t.threshold, t.falseSelections, t.selected
}

// count is how many are given.
func (t three) count() int {
	n := 0
	for _, x := range []*float64{t.threshold, t.falseSelections, t.selected} {
		if x != nil {
			n++
		}
	}
	return n
}

// twoOfThree fills up what a study file gives to two (DESIGN section 7, "Two
// of three").
func (t three) twoOfThree() three {
	threshold, luck := selection.DefaultThreshold, selection.DefaultFalseSelections
	switch {
	case t.count() >= 2:
	case t.threshold != nil:
		t.falseSelections = &luck
	case t.count() == 1:
		t.threshold = &threshold
	default:
		t.threshold, t.falseSelections = &threshold, &luck
	}
	return t
}

// combine puts the numbers of --set over those of the file, as `judge`
// replaces them: two given stand alone; one given keeps what judge would
// keep, and where that is not written in the file, Settle works it out.
func (r *reader) combine(file, change three) {
	d := &r.study.Decision
	if file.count() == 3 {
		r.faults.add("decision.false_selections", "threshold, selected and false_selections are all given: two of them decide the third, so leave one out")
		return
	}
	if change.count() == 3 {
		r.faults.add("decision.false_selections", "--set gives threshold, selected and false_selections: two of them decide the third, so leave one out")
		return
	}
	base := file.twoOfThree()
	switch {
	case change.count() == 0:
		d.setThree(base)
	case change.count() == 2:
		d.setThree(change)
	case change.threshold != nil && base.selected != nil:
		d.setThree(three{threshold: change.threshold, selected: base.selected})
	case change.threshold == nil && base.threshold != nil:
		change.threshold = base.threshold
		d.setThree(change)
	default: // what is kept follows from the candidates
		d.setThree(base)
		d.Replace = &Replacement{change.threshold, change.falseSelections, change.selected}
	}
}

// ask is three numbers in the words of package selection.
func (d Decision) ask(t three) selection.Ask {
	return selection.Ask{
		Region: d.Region, Bound: d.Bound,
		Threshold: t.threshold, FalseSelections: t.falseSelections, Selected: t.selected,
	}
}

// ResolveStopAfter is the number of distinct predictors after which a path
// stops: the study's, or where that is 0 four times selected, at most
// unitsInHalf - 2 - always, at least 1. unitsInHalf is the number of
// independent units in a half (for bootstrap draws: half of all), always the
// number of always-in columns.
func (p Penalty) ResolveStopAfter(selected, unitsInHalf, always int) int {
	if p.StopAfter > 0 {
		return p.StopAfter
	}
	return selection.StopAfter(selected, unitsInHalf, always)
}

// Settle works out what follows from the table: the decision, with candidates
// the number of predictors that can be chosen (a group or a category is one),
// and where the paths stop. unitsInHalf and
// always are as for ResolveStopAfter. The study that comes back, a copy that
// shares lists and maps with s, has Penalty.StopAfter resolved and nothing to
// replace any more: what belongs into a run directory.
func (s *Study) Settle(candidates, unitsInHalf, always int) (*Study, selection.Decision, error) {
	// Where the study leaves stop_after open it is 4 q at most, which cannot
	// limit q; what can is the other part, the rank that a half allows.
	limit := s.Penalty.ResolveStopAfter(candidates, unitsInHalf, always)
	bootstrap := s.Draws.Design == Bootstrap
	d, err := selection.Decide(s.Decision.ask(s.Decision.three()), candidates, s.Draws.Number, bootstrap, limit)
	if err != nil {
		return nil, d, err
	}
	settled := *s
	if s.Decision.Replace != nil {
		d, err = d.Change(s.Decision.ask(s.Decision.replacement()), candidates, s.Draws.Number, bootstrap, limit)
		if err != nil {
			return nil, d, err
		}
		threshold, selected := d.Threshold, float64(d.Selected)
		settled.Decision.setThree(three{threshold: &threshold, selected: &selected})
		settled.Decision.Replace = nil
	}
	settled.Penalty.StopAfter = s.Penalty.ResolveStopAfter(d.Selected, unitsInHalf, always)
	return &settled, d, nil
}
