package table

import "holdfast/solver"

// Policy says what happens to missing, NaN and infinite values.
type Policy uint8

const (
	Refuse   Policy = iota // none is allowed
	DropRows               // rows that hold one, in a predictor or elsewhere, are left out
	FillMean               // the draw's own mean stands in; infinite values are not allowed. Categories take their most frequent level
)

// String returns the word of the study file.
func (p Policy) String() string {
	switch p {
	case Refuse:
		return "refuse"
	case DropRows:
		return "drop-rows"
	case FillMean:
		return "fill-mean"
	}
	return "unknown"
}

// Measure says how the outcome is read.
type Measure uint8

const (
	AsNumber   Measure = iota // any finite number
	AsYesNo                   // two values, one of which is the success
	AsCount                   // whole numbers from 0 on
	AsClasses                 // 2 to MostLevels values without an order
	AsSurvival                // a time, whether the event was seen then, perhaps an entry
)

// String returns the word of the study file.
func (m Measure) String() string {
	names := [...]string{"number", "yes-no", "count", "classes", "survival"}
	if int(m) < len(names) {
		return names[m]
	}
	return "unknown"
}

// MostLevels is the largest number of levels of a category, and of classes.
const MostLevels = 50

// Outcome says what is to be explained. Without Column and Time none is read.
type Outcome struct {
	Measure Measure
	Column  string // of every measure but AsSurvival
	Success string // AsYesNo: text of the cells that count 1; AsSurvival: of Event, where that is not 1 or true

	Time, Event, Entry string   // AsSurvival; Entry may be empty: everybody is there from the start
	Strata             []string // AsSurvival: columns whose values never share a risk set, of any kind with levels

	Offset   string // column added to the linear predictor
	Exposure string // column whose logarithm is added, > 0
}

// none reports that no outcome is asked for.
func (o Outcome) none() bool { return o.Column == "" && o.Time == "" }

// Request says what a fit needs of a table.
type Request struct {
	Outcome    Outcome
	Candidates []string // in the order in which they are to stand, at least one
	Always     []string // columns in every model
	Weight     string   // column of case weights, >= 0; empty: every row counts 1

	// Categories are those of Candidates and Always that are read by their
	// levels: truth values and whole numbers; columns of text always are.
	Categories []string
	Reference  map[string]string // level without an indicator, by category; default: the first in byte order
	// Named are categories that the user named one by one: one with too many
	// levels is then an error and not left out. Always-in columns, those with a
	// Reference and those that are not text count as named.
	Named []string

	// Within are the columns in whose strata rows are drawn, of any kind with
	// levels; OutcomeStratum stands for the outcome's class or event status.
	Within []string

	Missing    Policy
	AcceptLoss bool  // DropRows may leave out more than a tenth of the rows
	Workers    int   // goroutines that read; 0: one per processor
	Memory     int64 // bytes that the values may take; 0: what the machine has free
}

// OutcomeStratum is the name in Request.Within of the outcome's class.
const OutcomeStratum = "outcome"

// Exclusion is a candidate that was left out, and why.
type Exclusion struct {
	Column string
	Reason string
}

// Gaps counts the cells of a column that hold no finite number.
type Gaps struct {
	Column   string
	Missing  int64 // cells without a value
	NaN      int64 // cells that hold not-a-number
	Infinite int64
}

// Total returns the number of cells counted.
func (g Gaps) Total() int64 { return g.Missing + g.NaN + g.Infinite }

// Level is a value of a column that is read by its values, and its rows.
type Level struct {
	Name  string
	Count int64
}

// Category is a candidate or always-in column that was read by its levels.
type Category struct {
	Column    string
	Levels    []Level // over the rows used, in byte order
	Reference string  // the level without an indicator
	Filled    int64   // gaps that took the most frequent level (FillMean)
}

// Data is what a fit needs of a table, in memory. Its slices belong to the
// caller, but X shares memory with nothing else here.
type Data struct {
	TableRows  int           // rows of the table
	Rows       []int32       // position in the table of each row used; nil: all are used
	Candidates []string      // candidate columns that were kept
	Always     []string      // always-in columns
	X          *solver.Dense // columns of all candidates, then of always; each centred at Centre
	Names      []string      // per column of X: the column, or column=level for an indicator
	Centre     []float64     // per column of X: mean over the rows used (over the filled cells)
	Deviation  []float64     // per column of X: standard deviation over the rows used, divisor n, missing cells at the mean

	CandidateColumns [][]int32  // per entry of Candidates: its columns of X; of a category one per level but the reference
	AlwaysColumns    [][]int32  // per entry of Always: its columns of X; none for a category with a single level
	Categories       []Category // candidates and always-in columns read by their levels, in the order of X

	Outcome  []float64        // per row used: number; 0 or 1; count; class from 0; nil if none was asked for, and for AsSurvival
	Classes  []string         // AsYesNo: failure and success; AsClasses: per class, numbers in their order, text in byte order
	Survival *solver.Survival // AsSurvival; Ties is left to the caller
	Offset   []float64        // per row used: offset plus logarithm of the exposure; nil if neither was asked for
	Weight   []float64        // per row used, > 0; nil if none was asked for

	Within       []int32  // per row used: its stratum of the draws; nil if none was asked for
	WithinLevels []string // per stratum: column=level, several joined with a comma

	Missing  []Gaps      // columns of X with cells that take the draw's mean (FillMean)
	Excluded []Exclusion // candidates left out here
	Notes    []string    // what the user should know: rows left out, integers rounded
	// Fingerprint is a SHA-256, in hexadecimal, of names, roles, positions of
	// the rows used and values, whatever file format, codec or path they came from.
	Fingerprint string
}
