package study

import (
	"path/filepath"

	"holdfast/selection"
	"holdfast/solver"
)

// Study is what is asked, as the study file says it, defaults filled in.
type Study struct {
	Table      Table
	Outcome    Outcome
	Candidates Candidates
	Penalty    Penalty
	Draws      Draws
	Decision   Decision

	Source string // the file as the caller named it: for messages
	Dir    string // folder that relative paths start from

	places map[string]place // where each key was given, for later messages
}

// Table says where the data are.
type Table struct {
	Path       string  // as written; TablePath resolves it
	Missing    Missing // default Refuse
	AcceptLoss bool    // drop-rows may lose more than a tenth of the rows; default false
}

// Outcome says what is to be explained.
type Outcome struct {
	Kind       Kind     // default Number
	Column     string   // every kind but Survival
	Success    string   // YesNo: the value that counts as yes; Survival: as an event, empty: 1 or true. Compared as text
	Time       string   // Survival
	Event      string   // Survival: column that tells events
	Entry      string   // Survival; empty: everybody is there from the start
	Ties       Ties     // Survival; default Efron
	Strata     []string // Survival
	Offset     string   // column added to the linear predictor; empty: none
	Exposure   string   // Count: column whose logarithm is added; empty: none
	CaseWeight string   // column of weights >= 0; empty: 1
}

// Candidates says which columns compete, and which are always in.
type Candidates struct {
	Take       []string            // names or patterns; default ["*"]
	Leave      []string            // names or patterns; default none
	Always     []string            // names or patterns; default none
	Categories []string            // names or patterns of predictors to be read as categories; text is anyway; default none
	Reference  map[string]string   // reference level by category; default: the first in byte order
	Groups     map[string][]string // names or patterns by group; default none
}

// Penalty says how candidates pay for being chosen.
type Penalty struct {
	Mix         float64            // in (0,1]; 1, the default: the lasso
	Scale       solver.Scale       // default solver.ScaleDraw
	Jitter      float64            // in (0,1]; 1, the default: no randomised penalties
	GroupWeight GroupWeight        // default Even
	Ratio       float64            // lambda from step to step, in (0,1); default 0.95
	Floor       float64            // last lambda as a share of lambda_max, in (0,1); default 0.005
	StopAfter   int                // predictors after which a path stops; 0, the default: see ResolveStopAfter
	Relative    map[string]float64 // relative penalty by candidate, > 0; default 1
}

// Draws says how rows are drawn.
type Draws struct {
	Design   Design   // default Halves
	Number   int      // draws, >= 2, even for Halves; default 200
	Seed     uint64   // 0 to 2^63-1, all that TOML can write; default 1
	Together []string // columns whose equal values are drawn whole; default none
	Within   []string // columns to be balanced; default by kind, see defaultWithin
}

// Decision is the study's decision. After Parse exactly two of Threshold,
// FalseSelections and Selected are set.
type Decision struct {
	Region          selection.Region    // default selection.Cap
	Bound           selection.BoundName // default selection.Unimodal
	Threshold       *float64            // in (0.5,1]
	FalseSelections *float64            // > 0
	Selected        *float64            // a whole number >= 1

	// Replace holds the one number that --set replaces where keeping what
	// `judge` would keep takes the number of candidates: Settle does it. Nil
	// where there is nothing to settle.
	Replace *Replacement
}

// Replacement is the number that replaces another: exactly one is set.
type Replacement struct {
	Threshold, FalseSelections, Selected *float64
}

// Default returns a study with every default and no table or outcome. This is
// the one place where defaults stand, but for those that depend on other keys:
// the decision's numbers, which are package selection's (twoOfThree), and the
// balance (defaultWithin).
func Default() Study {
	return Study{
		Table:   Table{Missing: Refuse},
		Outcome: Outcome{Kind: Number, Ties: Efron, Strata: []string{}},
		Candidates: Candidates{
			Take:       []string{"*"},
			Leave:      []string{},
			Always:     []string{},
			Categories: []string{},
			Reference:  map[string]string{},
			Groups:     map[string][]string{},
		},
		Penalty: Penalty{
			Mix:         1,
			Scale:       solver.ScaleDraw,
			Jitter:      1,
			GroupWeight: Even,
			Ratio:       0.95,
			Floor:       0.005,
			StopAfter:   0,
			Relative:    map[string]float64{},
		},
		Draws: Draws{
			Design:   Halves,
			Number:   200,
			Seed:     1,
			Together: []string{},
		},
		Decision: Decision{Region: selection.Cap, Bound: selection.Unimodal},
	}
}

// outcomeWord stands in draws.within for the outcome's classes or event status.
const outcomeWord = "outcome"

// defaultWithin is the balance of a kind of outcome: its classes or event
// status where it has any ("outcome" stands for them), nothing otherwise.
func defaultWithin(k Kind) []string {
	switch k {
	case YesNo, Classes, Survival:
		return []string{outcomeWord}
	}
	return []string{}
}

// TablePath is the table's path from where the program runs: relative paths
// of a study start at the folder of its file.
func (s *Study) TablePath() string {
	if filepath.IsAbs(s.Table.Path) || s.Dir == "" {
		return s.Table.Path
	}
	return filepath.Join(s.Dir, s.Table.Path)
}

// Rebase returns a copy whose relative paths start at dir, for a study that is
// written elsewhere, such as into its run directory. The copy shares lists and
// maps with s.
func (s *Study) Rebase(dir string) (*Study, error) {
	moved := *s
	moved.Dir = dir
	if filepath.IsAbs(s.Table.Path) {
		return &moved, nil
	}
	target, err := filepath.Abs(s.TablePath())
	if err != nil {
		return nil, err
	}
	base, err := filepath.Abs(dir)
	if err != nil {
		return nil, err
	}
	path, err := filepath.Rel(base, target)
	if err != nil {
		return nil, err
	}
	moved.Table.Path = filepath.ToSlash(path)
	return &moved, nil
}
