package selection

import "iter"

// TermRow is the spread of one coefficient of a predictor that has several: of
// one of its terms, and where the outcome has classes of one class.
type TermRow struct {
	Predictor string
	Term      string  // a single column is its own term
	Class     string  // empty: the outcome has none
	Coef      *Spread // over all draws, 0 where it was not chosen or had left again
	Selected  *Spread // over the draws that chose the predictor; nil if none

	Index     int // position of the predictor among the candidates
	TermIndex int // position of the term within the predictor
}

// Terms lists the coefficients of the predictors whose Row has none: predictors
// in the order of Rows, then by term and class. Those that no draw chose are
// among them. They are made while they are read, since 100,000 candidates
// with 50 classes have millions.
func (j *Judgement) Terms() iter.Seq[TermRow] {
	return func(yield func(TermRow) bool) {
		for i := range j.Rows {
			if r := &j.Rows[i]; j.names.several(r.Index) && !j.termsOf(r, yield) {
				return
			}
		}
	}
}

// TermsOf lists the coefficients of one of the Rows, as Terms does.
func (j *Judgement) TermsOf(r *Row) iter.Seq[TermRow] {
	return func(yield func(TermRow) bool) {
		if j.names.several(r.Index) {
			j.termsOf(r, yield)
		}
	}
}

// termsOf passes a row's coefficients on until it is told to stop.
func (j *Judgement) termsOf(r *Row, yield func(TermRow) bool) bool {
	for term := range j.names.termsOf(r.Index) {
		for class := range j.names.classes() {
			if !yield(j.termRow(r, term, class)) {
				return false
			}
		}
	}
	return true
}

func (j *Judgement) termRow(r *Row, term, class int) TermRow {
	k := r.Index
	t := TermRow{
		Predictor: r.Predictor, Term: j.names.termName(k, term), Class: j.names.className(class),
		Index: k, TermIndex: term,
	}
	t.Coef, t.Selected = j.coefs.spreads(k, term, class, r.Count, j.Draws)
	if j.perSD {
		sd := j.deviation(k, term)
		t.Coef, t.Selected = t.Coef.times(sd), t.Selected.times(sd)
	}
	return t
}

// HasTerms tells whether Terms lists anything.
func (j *Judgement) HasTerms() bool {
	for range j.Terms() {
		return true
	}
	return false
}
