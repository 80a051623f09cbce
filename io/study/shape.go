package study

import (
	"errors"
	"fmt"
	"math"

	"holdfast/selection"
)

// tableShape is what the number of candidates and of units in a half decide
// (DESIGN section 7, "draft by shape").
type tableShape struct {
	candidates int
	units      units
	threshold  float64
	bound      selection.BoundName
	floor      float64
	why        string // of the three above

	selected    int
	selectedWhy string
	luck        float64 // false selections at threshold and selected
	asked       float64 // false selections aimed at
}

// units is how much a half has to tell: rows, or those of the rarer outcome.
type units struct {
	number int
	what   string // of which rows, such as " of the rarer outcome"; empty: all
}

// String is what the sentences of a draft say.
func (u units) String() string {
	if u.number == 1 {
		return "1 row" + u.what + " in a half"
	}
	return fmt.Sprintf("%d rows%s in a half", u.number, u.what)
}

// units counts what a half has to tell: of a yes-no outcome the rows of the
// rarer value, which each half gets half of.
func (d *drafter) units() units {
	if d.kind != YesNo {
		return units{number: int(min(d.rows/2, math.MaxInt32))}
	}
	rarer := min(d.outcome.Levels[0].Rows, d.outcome.Levels[1].Rows, d.rows)
	return units{int(min(rarer/2, math.MaxInt32)), " of the rarer outcome"}
}

// The limits of DESIGN section 7.
const (
	manyPerUnit    = 10 // candidates per unit from which a table is very wide
	unitsPerFew    = 10 // units per candidate beyond which it is narrow
	unitsPerChoice = 3  // units that a selected predictor takes at least
	smallPanel     = 50 // candidates below which fewer false selections are aimed at
	regressionSize = 8  // candidates that an ordinary regression takes better
	fewUnits       = 15 // units in a half that show overwhelming effects only
)

func shapeOf(candidates int, units units) (tableShape, error) {
	standard := Default()
	s := tableShape{
		candidates: candidates, units: units,
		threshold: selection.DefaultThreshold, bound: standard.Decision.Bound, floor: standard.Penalty.Floor,
		why:   fmt.Sprintf("the default, for %d candidates and %s", candidates, units),
		asked: selection.DefaultFalseSelections,
	}
	switch {
	case candidates >= manyPerUnit*units.number:
		s.threshold, s.bound, s.floor = 0.6, selection.WorstCase, 0.01
		s.why = fmt.Sprintf("%d candidates are at least %d times the %s", candidates, manyPerUnit, units)
	case candidates*unitsPerFew < units.number:
		s.threshold, s.floor = 0.9, 0.001
		s.why = fmt.Sprintf("%d candidates are fewer than a tenth of the %s", candidates, units)
	}
	if candidates < smallPanel {
		s.asked = float64(candidates) / smallPanel
	}
	return s, s.choose(standard.Draws.Number)
}

// choose finds selected, and the false selections it comes to.
func (s *tableShape) choose(draws int) error {
	s.selected, s.selectedWhy = s.allowed(draws), fmt.Sprintf("what false_selections = %s allows", realText(s.asked))
	if most := s.units.number / unitsPerChoice; s.selected > most {
		s.selected, s.selectedWhy = most, fmt.Sprintf("a third of the %s", s.units)
	}
	if s.selected < 1 {
		s.selected, s.selectedWhy = 1, "the least there is"
	}
	err := s.promise(draws)
	if errors.Is(err, selection.ErrNoBound) && s.bound != selection.WorstCase {
		s.why += fmt.Sprintf("; but the %s bound does not exist for so few", s.bound)
		s.bound = selection.WorstCase
		err = s.promise(draws)
	}
	return err
}

// allowed is the selected that the budget gives, 0 where it gives none.
func (s *tableShape) allowed(draws int) int {
	ask := selection.Ask{Bound: s.bound, Threshold: &s.threshold, FalseSelections: &s.asked}
	d, err := selection.Decide(ask, s.candidates, draws, false, 0)
	if err != nil { // less than one predictor, or no such bound: see promise
		return 0
	}
	return d.Selected
}

// promise finds the false selections at threshold and selected; the error is
// selection.ErrNoBound where the bound does not exist there.
func (s *tableShape) promise(draws int) error {
	q := float64(s.selected)
	ask := selection.Ask{Bound: s.bound, Threshold: &s.threshold, Selected: &q}
	d, err := selection.Decide(ask, s.candidates, draws, false, 0)
	switch {
	case err != nil:
		return err
	case d.FalseSelections == nil:
		return fmt.Errorf("study: draft: %d candidates: %w", s.candidates, selection.ErrNoBound)
	}
	s.luck = *d.FalseSelections
	return nil
}

// flags says where the table is too small for the question.
func (s tableShape) flags() []Flag {
	var flags []Flag
	if s.candidates <= regressionSize {
		flags = append(flags, Flag{Kind: FlagShape, Text: fmt.Sprintf("with %s an ordinary regression answers better", numberOf(s.candidates, "candidate"))})
	}
	if s.units.number <= fewUnits {
		flags = append(flags, Flag{Kind: FlagShape, Text: fmt.Sprintf("with %s only overwhelming effects can be found", s.units)})
	}
	return flags
}
