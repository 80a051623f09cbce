package report

import (
	"slices"

	"holdfast/selection"
)

// Info is what a report says beside the judgement itself.
type Info struct {
	Outcome string // column
	Kind    string // number, yes-no, ...
	// Record is the decision of record. Where the judgement follows another
	// one, the report says that it was explored after seeing the result.
	Record *selection.Decision
	// Full names the file that holds the whole table, for the line under the
	// text's table; empty: stability.csv.
	Full     string
	PerSD    bool     // coefficients are per standard deviation
	Copies   []Copy   // columns that stand under another's name
	Warnings []string // beside those of the judgement
	ASCII    bool     // the text uses no other characters of its own
}

// Copy is a column that is a copy of a candidate up to shift and scale.
type Copy struct{ Name, Of string }

// explored reports whether the judgement follows another decision than the
// one of record.
func (i Info) explored(j *selection.Judgement) bool {
	return i.Record != nil && !i.Record.Same(j.Decision)
}

// warnings lists all warnings once: those of the judgement, of its decision,
// and of the caller.
func (i Info) warnings(j *selection.Judgement) []string {
	list := []string{}
	for _, from := range [][]string{j.Warnings, j.Decision.Notes, i.Warnings} {
		for _, w := range from {
			if !slices.Contains(list, w) {
				list = append(list, w)
			}
		}
	}
	return list
}

// design is the word of the study file.
func design(j *selection.Judgement) string {
	if j.Bootstrap {
		return "bootstrap"
	}
	return "halves"
}
