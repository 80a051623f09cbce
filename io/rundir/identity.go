package rundir

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"maps"
	"math"
	"slices"
	"unicode/utf8"
)

// Kinds of outcome whose draws have another form, or whose outcome is told in
// more words than a column. They are words of the study.
const (
	kindYesNo    = "yes-no"
	kindClasses  = "classes"
	kindSurvival = "survival"
)

// Identity is what decides the bits of a run's draws. Two runs of equal
// identity make equal draws, however many.
type Identity struct {
	Fingerprint string `json:"fingerprint"` // of the table's values that enter the fits

	Kind    string   `json:"kind"`              // number, yes-no, count, classes or survival
	Outcome string   `json:"outcome,omitempty"` // column; none for survival
	Success string   `json:"success,omitempty"` // of yes-no: the text that counts as 1; of survival: that of an event, if not 1 or true
	Classes []string `json:"classes,omitempty"` // of classes: the levels, by their numbers

	// Of survival: columns, and the treatment of ties.
	Time   string   `json:"time,omitempty"`
	Event  string   `json:"event,omitempty"`
	Entry  string   `json:"entry,omitempty"`
	Strata []string `json:"strata,omitempty"`
	Ties   string   `json:"ties,omitempty"` // efron or breslow

	Offset     string `json:"offset,omitempty"`      // column
	Exposure   string `json:"exposure,omitempty"`    // column
	CaseWeight string `json:"case_weight,omitempty"` // column

	Candidates []string `json:"candidates"` // predictors fitted, in table order: columns, categories and groups
	Always     []string `json:"always"`     // columns and categories in every model, in table order

	// Terms are the design columns of each group and category, in order, by its
	// name in Candidates or Always. What is not named is one column.
	Terms map[string][]string `json:"terms,omitempty"`
	// Reference is the level of each category that has no design column.
	Reference map[string]string `json:"reference,omitempty"`

	Missing string  `json:"missing"` // what is done with missing cells
	Penalty Penalty `json:"penalty"`
	Draws   Draws   `json:"draws"`
}

// Penalty is the study's penalty. StopAfter and Luck are as resolved when the
// directory was made: they follow from the decision, which may change.
type Penalty struct {
	Mix         float64            `json:"mix"`
	Scale       string             `json:"scale"`
	Relative    map[string]float64 `json:"relative,omitempty"`     // by predictor
	GroupWeight string             `json:"group_weight,omitempty"` // even or sqrt; needed where a candidate has several terms
	Luck        float64            `json:"luck,omitempty"`         // solver.Problem.Luck; needed for even
	Jitter      float64            `json:"jitter"`                 // least W of the randomised lasso; 1, or 0 for Create: none
	Ratio       float64            `json:"ratio"`
	Floor       float64            `json:"floor"`
	StopAfter   int                `json:"stop_after"`
}

// Draws says how rows are drawn, without how often.
type Draws struct {
	Design string   `json:"design"`           // halves or bootstrap
	Within []string `json:"within,omitempty"` // columns whose values are the strata; "outcome": class, success or event
	Seed   uint64   `json:"seed"`
}

// resolved fills in what zero values stand for.
func (id Identity) resolved() Identity {
	if len(id.Always) == 0 {
		id.Always = nil // a list without names is no list
	}
	if id.Penalty.Jitter == 0 {
		id.Penalty.Jitter = 1
	}
	return id
}

// Digest returns the SHA-256 of the identity in hexadecimal.
func (id Identity) Digest() string {
	text, err := json.Marshal(id.resolved())
	if err != nil {
		return "" // only a value that check refuses gets here
	}
	sum := sha256.Sum256(text)
	return hex.EncodeToString(sum[:])
}

// CandidateTerms lists the names of each candidate's terms, nil for one that is
// a single column of its own name; nil where all are.
func (id *Identity) CandidateTerms() [][]string {
	var list [][]string
	for i, name := range id.Candidates {
		if terms := id.Terms[name]; terms != nil {
			if list == nil {
				list = make([][]string, len(id.Candidates))
			}
			list[i] = terms
		}
	}
	return list
}

// CandidateColumns names the design columns of all candidates, candidate by
// candidate: the order of Meta.Centre.
func (id *Identity) CandidateColumns() []string { return id.columns(id.Candidates) }

// AlwaysColumns names the design columns that are in every model: the order of
// solver.Path.Always.
func (id *Identity) AlwaysColumns() []string { return id.columns(id.Always) }

func (id *Identity) columns(predictors []string) []string {
	list := make([]string, 0, len(predictors))
	for _, name := range predictors {
		if terms := id.Terms[name]; terms != nil {
			list = append(list, terms...)
		} else {
			list = append(list, name)
		}
	}
	return list
}

func (id *Identity) check() error {
	if len(id.Candidates) == 0 {
		return errors.New("no candidates")
	}
	if err := distinct("column name", id.Candidates, id.Always); err != nil {
		return err
	}
	if id.Fingerprint == "" || id.Kind == "" || id.Draws.Design == "" {
		return errors.New("fingerprint, kind and design must be given")
	}
	for _, check := range []func() error{id.checkTexts, id.checkOutcome, id.checkTerms, id.checkPenalty} {
		if err := check(); err != nil {
			return err
		}
	}
	return nil
}

// checkTexts refuses texts that are not UTF-8: JSON would change them, and two
// of them might become one.
func (id *Identity) checkTexts() error {
	list := slices.Concat([]string{
		id.Fingerprint, id.Kind, id.Outcome, id.Success, id.Time, id.Event, id.Entry, id.Ties,
		id.Offset, id.Exposure, id.CaseWeight, id.Missing, id.Penalty.Scale, id.Penalty.GroupWeight, id.Draws.Design,
	}, id.Strata, id.Draws.Within, slices.Collect(maps.Keys(id.Reference)), slices.Collect(maps.Values(id.Reference)),
		slices.Collect(maps.Keys(id.Penalty.Relative)))
	for _, text := range list {
		if !utf8.ValidString(text) {
			return fmt.Errorf("text %q: not valid UTF-8", text)
		}
	}
	return nil
}

// checkOutcome checks that each kind is told in its own words and no others.
func (id *Identity) checkOutcome() error {
	survival := id.Kind == kindSurvival
	switch {
	case !survival && id.Outcome == "":
		return fmt.Errorf("outcome: not given for kind %s", id.Kind)
	case survival && (id.Time == "" || id.Event == "" || id.Ties == "" || id.Outcome != ""):
		return errors.New("outcome: kind survival has time, event and ties, and no outcome column")
	case !survival && (id.Time != "" || id.Event != "" || id.Entry != "" || id.Ties != "" || len(id.Strata) > 0):
		return fmt.Errorf("outcome: time, event, entry, ties and strata are for kind survival, not for %s", id.Kind)
	case id.Kind == kindYesNo && id.Success == "" || id.Kind != kindYesNo && !survival && id.Success != "":
		return fmt.Errorf("outcome: success %q for kind %s: yes-no has one, survival may, and no other kind", id.Success, id.Kind)
	case (id.Kind == kindClasses) != (len(id.Classes) > 1):
		return fmt.Errorf("outcome: %d classes for kind %s: classes has two or more, and no other kind any", len(id.Classes), id.Kind)
	}
	return distinct("class", id.Classes)
}

// checkTerms checks the design columns of groups and categories.
func (id *Identity) checkTerms() error {
	known := make(map[string]bool, len(id.Candidates)+len(id.Always))
	for _, name := range slices.Concat(id.Candidates, id.Always) {
		known[name] = true
	}
	for _, name := range slices.Sorted(maps.Keys(id.Terms)) {
		if !known[name] {
			return fmt.Errorf("terms of %q: neither a candidate nor always in", name)
		}
		if len(id.Terms[name]) == 0 {
			return fmt.Errorf("terms of %q: none", name)
		}
		if err := distinct("term", id.Terms[name]); err != nil {
			return fmt.Errorf("terms of %q: %w", name, err)
		}
	}
	return nil
}

func (id *Identity) checkPenalty() error {
	p := id.Penalty
	if !(p.Mix > 0 && p.Mix <= 1) || !(p.Ratio > 0 && p.Ratio < 1) || !(p.Floor > 0 && p.Floor < 1) || p.StopAfter < 0 {
		return fmt.Errorf("penalty: mix %v, ratio %v, floor %v, stop_after %d: outside their ranges",
			p.Mix, p.Ratio, p.Floor, p.StopAfter)
	}
	if !(p.Jitter > 0 && p.Jitter <= 1) || !(p.Luck >= 0 && p.Luck <= 1) {
		return fmt.Errorf("penalty: jitter %v, luck %v: outside their ranges", p.Jitter, p.Luck)
	}
	if id.shape().terms != nil && (p.GroupWeight == "" || p.GroupWeight == "even" && p.Luck == 0) {
		return fmt.Errorf("penalty: group_weight %q, luck %v: not given, and candidates have several terms", p.GroupWeight, p.Luck)
	}
	for name, v := range p.Relative {
		if !(v > 0) || math.IsInf(v, 0) {
			return fmt.Errorf("penalty: relative %q: %v is not a positive number", name, v)
		}
	}
	return nil
}

// distinct refuses names that are not UTF-8 (JSON would change them) or that
// stand twice (a name could not be traced to its column).
func distinct(what string, lists ...[]string) error {
	seen := map[string]bool{}
	for _, names := range lists {
		for _, name := range names {
			if !utf8.ValidString(name) {
				return fmt.Errorf("%s %q: not valid UTF-8", what, name)
			}
			if seen[name] {
				return fmt.Errorf("%s %q: given twice", what, name)
			}
			seen[name] = true
		}
	}
	return nil
}
