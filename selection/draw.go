package selection

// Entry is the first lattice step at which a predictor was chosen in a draw.
type Entry struct {
	Predictor int32 // position in Predictors
	Step      int32
	Negative  bool // sign of the coefficient at that step; not looked at where the predictor has terms or the outcome classes
}

// Coef is a non-zero coefficient at a step, in the column's own units.
type Coef struct {
	Step      int32
	Predictor int32
	Term      int32 // term within the predictor; 0 where it has none
	Class     int32 // class of the outcome; 0 where it has none
	Value     float64
}

// before tells whether a coefficient stands before another in a draw.
func (c Coef) before(d Coef) bool {
	if c.Step != d.Step || c.Predictor != d.Predictor {
		return before(c.Step, c.Predictor, d.Step, d.Predictor)
	}
	return before(c.Term, c.Class, d.Term, d.Class)
}

// Draw is the outcome of one draw, as far as a judgement needs it.
type Draw struct {
	Number      int       // draw number; complementary pair k is draws 2k and 2k+1
	First, Last int       // lattice steps with a certified fit; Last < First: none
	Uncertified bool      // the path ended because the next step was not certified
	Complete    bool      // the path reached the last lattice step (steps below a stop are unknown)
	Entries     []Entry   // ordered by step, then predictor
	Coefs       []Coef    // ordered by step, predictor, term, class
	Always      []float64 // always-in coefficients: per step from First, per column, one for each class
	Still       []int32   // predictors that did not vary in the draw, ascending
	Twins       int       // entries at steps where linearly dependent predictors share the fit
	Redraws     int       // how often it was made anew because it could not be fitted; the halves of a pair together

	// Deviance is the mean deviance of the rows that the draw left out (of a half:
	// the other half), per step from First; nil where it was not taken. A
	// judgement keeps it and decides nothing by it.
	Deviance     []float64
	NullDeviance float64 // the same for the model without candidates and always-in columns
}
