package selection

// Predictors names what could be chosen, in the order of Entry.Predictor.
type Predictors struct {
	Names            []string
	Deviations       []float64 // standard deviation over the table, one per name; for PerSD
	Always           []string  // always-in columns
	AlwaysDeviations []float64 // one per always-in column
}

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
	LowCeiling   []int    // positions in Rows of candidates with a ceiling under 95 %
	Warnings     []string // footnotes, in order

	emptyTwins int // of EmptyRegion: draws in which columns coincide

	draws  []*Draw
	names  []string
	sd     []float64
	always []float64
}

// Row is the judgement on one candidate.
type Row struct {
	Predictor     string
	Frequency     float64  // Count/Draws
	Low, High     float64  // 95 % Monte-Carlo interval of Frequency
	BothHalves    *float64 // share of pairs in which both halves chose it; nil for bootstrap
	PositiveShare *float64 // share of the draws that chose it in which it entered with a plus sign; nil if none

	// Quantiles of 2.5, 50 and 97.5 % at the region's end, over all draws (0
	// where it was not chosen or had left again) ...
	CoefLow, CoefMedian, CoefHigh float64
	// ... and over the draws that chose it; nil if none.
	SelectedLow, SelectedMedian, SelectedHigh *float64

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
	Predictor                     string
	CoefLow, CoefMedian, CoefHigh float64
	Draws                         int // draws that have one; 0: the three are 0 and undefined
}

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
	scaled := *j
	scaled.Rows = make([]Row, len(j.Rows))
	for i, r := range j.Rows {
		scaled.Rows[i] = r.times(j.sd[r.Index])
	}
	scaled.Always = make([]AlwaysRow, len(j.Always))
	for i, a := range j.Always {
		s := j.always[i]
		a.CoefLow, a.CoefMedian, a.CoefHigh = a.CoefLow*s, a.CoefMedian*s, a.CoefHigh*s
		scaled.Always[i] = a
	}
	return &scaled
}

func (r Row) times(s float64) Row {
	r.CoefLow, r.CoefMedian, r.CoefHigh = r.CoefLow*s, r.CoefMedian*s, r.CoefHigh*s
	if r.SelectedLow != nil {
		v := [3]float64{*r.SelectedLow * s, *r.SelectedMedian * s, *r.SelectedHigh * s}
		r.SelectedLow, r.SelectedMedian, r.SelectedHigh = &v[0], &v[1], &v[2]
	}
	return r
}
