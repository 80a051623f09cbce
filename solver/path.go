package solver

// Stop says why a draw's path ended where it did.
type Stop uint8

const (
	StopFloor       Stop = iota // the last lattice lambda was reached
	StopEntered                 // more distinct candidates than StopAfter had entered
	StopUncertified             // the next step could not be certified
)

// String returns the word used in files and messages.
func (s Stop) String() string {
	switch s {
	case StopFloor:
		return "floor"
	case StopEntered:
		return "stop_after"
	case StopUncertified:
		return "not certified"
	}
	return "unknown"
}

// Entry is the first lattice step at which a candidate is selected in a draw.
type Entry struct {
	Candidate int32 // position in Problem.Candidates
	Step      int32 // lattice step
	Negative  bool  // sign of the coefficient at that step; false for groups and classes, which have none
}

// Coef is one non-zero coefficient on the original scale of the column.
type Coef struct {
	Step      int32
	Candidate int32 // position in Problem.Candidates
	Term      int32 // column within the group; 0 for a single column
	Class     int32 // for Multinomial; else 0
	Value     float64
}

// Path is the outcome of one draw: the certified fits at lattice steps
// First..Last. All numbers are record numbers: functions of the draw and the
// model alone, whatever block, worker or kernel made them.
type Path struct {
	First, Last int       // lattice steps with a certified fit; Last < First: none
	Stop        Stop      // why the path ended
	Entries     []Entry   // ordered by step, then candidate
	Coefs       []Coef    // ordered by step, candidate, term, class; only non-zero
	Intercepts  []float64 // per step First..Last one for each class, original scale; none for Cox
	Always      []float64 // per step, per column of Problem.Always, one for each class, original scale
	Still       []int32   // candidates that do not vary in the draw, ascending
	Violation   float64   // largest certified violation over the steps
	Gap         float64   // largest relative duality gap over the steps
	Borderline  int       // steps at which a candidate stood on the border and stayed out
	Twins       int       // entries at steps where linearly dependent candidates share the coefficients
	Why         string    // for StopUncertified: what failed

	// Deviance is that of the rows in Sample.Left, per step: the weighted mean of
	// the unit deviance, for Cox -2 log partial likelihood of these rows alone
	// (STATISTICS 11). Nil without Left.
	Deviance []float64
	// NullDeviance is the same for the model of the draw's intercept alone (with
	// offset and strata).
	NullDeviance float64
	// Redraws is how often the draw was made anew because it could not be fitted;
	// the pool fills it in.
	Redraws int
}
