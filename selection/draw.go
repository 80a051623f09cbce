package selection

// Entry is the first lattice step at which a predictor was chosen in a draw.
type Entry struct {
	Predictor int32 // position in Predictors
	Step      int32
	Negative  bool // sign of the coefficient at that step
}

// Coef is a non-zero coefficient at a step, in the predictor's own units.
type Coef struct {
	Step      int32
	Predictor int32
	Value     float64
}

// Draw is the outcome of one draw, as far as a judgement needs it.
type Draw struct {
	Number      int       // draw number; complementary pair k is draws 2k and 2k+1
	First, Last int       // lattice steps with a certified fit; Last < First: none
	Uncertified bool      // the path ended because the next step was not certified
	Complete    bool      // the path reached the last lattice step (steps below a stop are unknown)
	Entries     []Entry   // ordered by step, then predictor
	Coefs       []Coef    // ordered by step, then predictor
	Always      []float64 // always-in coefficients, step by step from First
	Still       []int32   // predictors that did not vary in the draw, ascending
	Twins       int       // entries at steps where linearly dependent predictors share the fit
}
