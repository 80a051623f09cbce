package solver

// Scale says in which units the penalty sees a candidate.
type Scale uint8

const (
	ScaleDraw  Scale = iota // standard deviation over the draw's own rows
	ScaleTable              // standard deviation over all rows used
	ScaleNone               // the column's own units
)

// String returns the word of the study file.
func (s Scale) String() string { return [...]string{"draw", "table", "none"}[s] }

// Problem is what is fitted: the table, the outcome, the penalty, the lattice.
type Problem struct {
	Design     Design
	Candidates []int32   // columns of Design that are candidates, in table order
	Always     []int32   // columns of Design in every model, not penalised
	Centre     []float64 // per column of Design: what was subtracted (for intercepts)
	Names      []string  // per column of Design: for messages
	Outcome    []float64 // one value per row
	Case       []float64 // case weights; nil: 1

	Mix      float64   // in (0,1]; 1: lasso
	Scale    Scale     // units of the penalty
	Relative []float64 // penalty weight of each candidate, > 0; nil: 1

	Ratio     float64 // lambda from lattice step to step, in (0,1)
	Floor     float64 // last lambda as a share of lambda_max, in (0,1)
	StopAfter int     // distinct candidates after which a path stops; 0: never
}
