package selection

import "slices"

// Judgement is the outcome of applying a decision to draws.
type Judgement struct {
	Draws      int
	Bootstrap  bool
	Candidates int // p
	Decision   Decision
	Need       int     // smallest count that is stable
	Attained   float64 // Need/Draws
	Bounds     Bounds  // at Attained; the larger of p and p without LowCeiling

	Rows   []Row // one per candidate: by count, then in table order
	Always []AlwaysRow

	Stable       int      // how many are stable: the first rows
	MostStable   int      // floor(q * draws / need): more than that cannot be stable
	CouldChange  int      // rows whose interval covers the attained threshold
	CapBinding   int      // draws in which the cap, not the end of the path, ended the region
	MeanSelected float64  // predictors that a draw contributed on average
	CommonEnd    *int     // last step of the common region; nil for the cap
	EmptyRegion  []int    // numbers of draws in which more than q predictors entered at the first step with any
	Uncertified  []int    // numbers of draws whose path ended at a fit that was not certified
	Redrawn      []int    // numbers of draws that were made anew because they could not be fitted
	MostRedraws  int      // how often at most
	LowCeiling   []int    // positions in Rows of candidates with a ceiling under 95 %
	Warnings     []string // footnotes, in order

	emptyTwins int // of EmptyRegion: draws in which columns coincide

	draws []*Draw
	names Predictors
	coefs *gathered
	perSD bool // coefficients are per standard deviation
}

// Row is the judgement on one candidate.
type Row struct {
	Predictor     string
	Frequency     float64  // Count/Draws
	Low, High     float64  // 95 % Monte-Carlo interval of Frequency
	BothHalves    *float64 // share of pairs in which both halves chose it; nil for bootstrap
	PositiveShare *float64 // share of the draws that chose it in which it entered with a plus sign; nil if none, or where it has several coefficients

	// Coef is over all draws, 0 where it was not chosen or had left again by the
	// region's end; nil where it has several coefficients, which Terms lists.
	Coef *Spread
	// Selected is over the draws that chose it; nil if none, or as above.
	Selected *Spread

	Stable      bool
	CouldChange bool    // the interval covers the attained threshold
	Count       int     // draws that chose it
	Varied      int     // draws in which it varied at all
	Ceiling     float64 // Varied/Draws, the most that Frequency can be
	Index       int     // position among the candidates, in table order
}

// AlwaysRow is the spread of an always-in coefficient at the region's end, over
// the draws that have one.
type AlwaysRow struct {
	Predictor string
	Class     string  // empty: the outcome has none
	Coef      *Spread // nil if no draw has one
	Draws     int     // draws that have one
	Index     int     // position among the always-in columns
}

// Classes are the levels of an outcome of classes; nil for others.
func (j *Judgement) Classes() []string { return j.names.Classes }

// StableNames names the stable predictors, in the order of Rows.
func (j *Judgement) StableNames() []string {
	names := make([]string, j.Stable)
	for i := range names {
		names[i] = j.Rows[i].Predictor
	}
	return names
}

// PerSD returns the same judgement with every coefficient multiplied by the
// standard deviation of its column: the change of the outcome per standard
// deviation. The other one is not changed.
func (j *Judgement) PerSD() *Judgement {
	if j.perSD {
		return j
	}
	scaled := *j
	scaled.perSD = true
	scaled.Rows = slices.Clone(j.Rows)
	for i := range scaled.Rows {
		r := &scaled.Rows[i]
		sd := j.deviation(r.Index, 0)
		r.Coef, r.Selected = r.Coef.times(sd), r.Selected.times(sd)
	}
	scaled.Always = slices.Clone(j.Always)
	for i := range scaled.Always {
		a := &scaled.Always[i]
		a.Coef = a.Coef.times(j.names.AlwaysDeviations[a.Index])
	}
	return &scaled
}

// deviation is the standard deviation of a predictor's term.
func (j *Judgement) deviation(predictor, term int) float64 {
	return j.names.Deviations[j.coefs.first[predictor]+term]
}
