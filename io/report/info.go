package report

import (
	"fmt"
	"slices"

	"holdfast/selection"
)

// Info is what a report says beside the judgement itself.
type Info struct {
	Outcome string // column
	Kind    string // number, yes-no, ...
	Success string // of yes-no: the level counted as 1
	// Record is the decision of record. Where the judgement follows another
	// one, the report says that it was explored after seeing the result.
	Record *selection.Decision
	// Full names the file that holds the whole table, for the line under the
	// text's table; empty: stability.csv.
	Full string
	// FullTerms does the same for all terms; empty: terms.parquet.
	FullTerms  string
	References []Reference // of the categories, in table order
	PerSD      bool        // coefficients are per standard deviation
	Copies     []Copy      // columns that stand under another's name
	Warnings   []string    // beside those of the judgement
	ASCII      bool        // the text uses no other characters of its own
}

// Copy is a column that is a copy of a candidate up to shift and scale.
type Copy struct{ Name, Of string }

// Reference is the level of a category that its other levels are measured
// against.
type Reference struct {
	Column string `json:"predictor"`
	Level  string `json:"level"`
}

// scale says what a coefficient changes, where that is not the outcome itself:
// the linear predictor of the kind's model.
func (i Info) scale() string {
	switch i.Kind {
	case "yes-no":
		if i.Success == "" {
			return " They are changes of the log odds of the level counted as 1."
		}
		return fmt.Sprintf(" They are changes of the log odds of %q.", i.Success)
	case "count":
		return " They are changes of the logarithm of the expected count."
	case "classes":
		return " They are changes of the logarithm of a class's chance, up to a number that all classes share."
	case "survival":
		return " They are changes of the logarithm of the hazard: a positive one means that the event comes sooner."
	}
	return ""
}

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
