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

// Family is the kind of outcome: its loss, as the field names it.
type Family uint8

const (
	Gaussian    Family = iota // (1/2)(y - eta)^2
	Binomial                  // log(1 + e^eta) - y eta
	Poisson                   // e^eta - y eta
	Multinomial               // log sum_c e^(eta_c) - eta_y, one linear predictor per class
	Cox                       // negative log partial likelihood
)

// String returns the field's word.
func (f Family) String() string {
	return [...]string{"gaussian", "binomial", "poisson", "multinomial", "cox"}[f]
}

// Ties says how events at the same time are treated.
type Ties uint8

const (
	Efron   Ties = iota // Efron 1977, JASA 72:557-565
	Breslow             // Breslow 1974, Biometrics 30:89-99
)

// String returns the word of the study file.
func (t Ties) String() string { return [...]string{"efron", "breslow"}[t] }

// Survival is the outcome of the Cox model, one value per row. A row is at risk
// at the times t with Entry < t <= Time.
type Survival struct {
	Time    []float64
	Event   []bool
	Entry   []float64 // nil: everybody is there from the start
	Stratum []int32   // rows of unequal stratum never share a risk set; nil: one stratum
	Ties    Ties
}

// GroupWeight says how much a group pays for its size.
type GroupWeight uint8

const (
	// GroupEven lets luck admit a group as often as a single column:
	// sqrt(chi2quantile_k(1-Luck)) / z(1-Luck/2) for k directions (DESIGN 4).
	GroupEven GroupWeight = iota
	// GroupSqrt is sqrt(k) (Simon & Tibshirani 2012, Statistica Sinica 22:983-1001).
	GroupSqrt
)

// String returns the word of the study file.
func (w GroupWeight) String() string { return [...]string{"even", "sqrt"}[w] }

// Problem is what is fitted: the table, the outcome, the penalty, the lattice.
type Problem struct {
	Design     Design
	Candidates []int32   // columns of Design that are candidates, in table order; of a group its first column
	Groups     [][]int32 // per candidate: the columns of a group, the first being that in Candidates, or nil for a single column; nil: all single
	Always     []int32   // columns of Design in every model, not penalised
	Centre     []float64 // per column of Design: what was subtracted (for intercepts)
	Names      []string  // per column of Design: for messages

	Family   Family
	Outcome  []float64 // one value per row: number; 0 or 1; count; class 0 to Classes-1; nil for Cox
	Classes  int       // of Multinomial, at least 2
	Survival *Survival // of Cox
	Offset   []float64 // added to the linear predictor, one value per row; nil: none. Not for Multinomial
	Case     []float64 // case weights; nil: 1

	Mix      float64   // in (0,1]; 1: lasso
	Scale    Scale     // units of the penalty
	Relative []float64 // penalty weight of each candidate, > 0; nil: 1. Multiplies that of a group's size

	GroupWeight GroupWeight
	Luck        float64 // chance of a single column to be let in by luck, q/p, clipped to [0.001, 0.25]; for GroupEven

	Ratio     float64 // lambda from lattice step to step, in (0,1)
	Floor     float64 // last lambda as a share of lambda_max, in (0,1)
	StopAfter int     // distinct candidates after which a path stops; 0: never
}
