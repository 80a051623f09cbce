package study

import (
	"fmt"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"
)

// Facts is what Draft has to know of a table.
type Facts struct {
	Path       string // the table as the study is to write it: relative to the study, or absolute
	Source     string // name of the study, for its messages and Dir; may be empty
	Outcome    string // column to be explained
	Rows       int64  // rows of the table
	Incomplete int64  // rows with a gap in a column that can be a candidate; negative: not counted
	Repeats    int64  // rows equal to an earlier one, labels aside, where chance makes none
	Columns    []Fact // in table order

	OutcomeGaps []int // first rows without a finite value of the outcome, from 0

	Kind *Kind // what a study asks the outcome to be; nil: its values decide
}

// Fact is what a scan found in one column. What it could not find is zero.
type Fact struct {
	Column
	Missing  int64 // null or NaN
	Infinite int64

	Constant  bool     // one value in all rows
	TwoValued bool     // two values
	Whole     bool     // whole numbers only
	Unique    bool     // no value twice, none missing
	Rising    bool     // every value larger (or every value smaller) than that of the row before
	Date      bool     // whole numbers that read as dates, such as 20260314
	Min, Max  float64  // over the values there are
	Levels    []Level  // the values as text, in byte order (numbers: by size), where they are at most MostLevels; nil: more, or not counted
	R         *float64 // correlation with the outcome; nil: not defined
	AUC       *float64 // of this column alone for a two-valued outcome; nil: not defined
	Serial    *float64 // correlation of each value with that of the row before; nil: not defined
}

// Level is one value of a column.
type Level struct {
	Text string
	Rows int64
}

// MostLevels is how many values a category, or an outcome of classes, may have.
const MostLevels = 50

// category says whether a column can be a predictor as a category: text of
// few values.
func (f Fact) category() bool { return f.Text && len(f.Levels) > 0 && len(f.Levels) <= MostLevels }

// constant says whether all rows with a value have the same.
func (f Fact) constant() bool { return f.Constant || len(f.Levels) == 1 }

// gaps is the number of cells without a finite value.
func (f Fact) gaps() int64 { return f.Missing + f.Infinite }

// The limits of a leak (DESIGN section 9).
const (
	leakR   = 0.98
	leakAUC = 0.95
)

// FlagKind says what a flag is about.
type FlagKind uint8

const (
	FlagOutcome    FlagKind = iota // a two-valued outcome taken as a number
	FlagLeak                       // a candidate that is the outcome in other clothes
	FlagIdentifier                 // row numbers and other identifiers
	FlagUnique                     // whole numbers, every value once: a count or an identifier
	FlagDate                       // a date written as a whole number
	FlagUnusable                   // cannot be a predictor as it is
	FlagConstant                   // one value: never chosen
	FlagEmpty                      // no value at all
	FlagGaps                       // gaps that decide how missing values are treated
	FlagShape                      // the size of the table limits the answer
	FlagSeries                     // neighbouring rows are alike
	FlagRepeats                    // rows stand there several times
)

// String names the kind in one or two words.
func (k FlagKind) String() string {
	return word([]string{"outcome", "leak", "identifier", "unique numbers", "date", "not usable", "constant", "empty", "gaps", "shape", "series", "repeats"}, k)
}

// Flag is something that would mislead, or that was decided for the user.
type Flag struct {
	Kind   FlagKind
	Column string // empty: the table as a whole
	Text   string // a sentence without the column's name and full stop
	Left   bool   // the draft leaves the column out
}

// Flags lists what is conspicuous, the outcome first, then the table's
// columns in order, then the table as a whole. The error says why no study
// can be drafted from such a table.
func (f Facts) Flags() ([]Flag, error) {
	d, err := newDrafter(f)
	if err != nil {
		return nil, err
	}
	return d.flags, nil
}

// Smallest tables in which an order of the values says anything: below, a
// column of counts rises, or fills its range, too easily by chance.
const (
	rowsForRising = 8
	rowsForDense  = 20
)

// namedAsIdentifier fits names whose last word is that of an identifier.
var namedAsIdentifier = regexp.MustCompile(`(?i:(^|[^a-z])(id|nr|number|index|idx|row|serial|barcode|key)$)|[a-z]ID$`)

// identifier says why a column is one, empty where it is not.
func (f Fact) identifier(rows int64) string {
	span := f.Max - f.Min
	switch {
	case f.Text && f.eachOnce():
		return "text, every value once: an identifier"
	case !f.Whole || !f.Unique || f.constant():
		return ""
	case f.Rising && rows >= rowsForRising && span == float64(rows-1):
		return "a row number: it counts the rows"
	case f.Rising && rows >= rowsForRising:
		return "whole numbers in the order of the rows, every value once: a row number or a time, not a measurement"
	case rows >= rowsForDense && span < 2*float64(rows):
		return "whole numbers without a value twice and almost without a gap between them: an identifier"
	case namedAsIdentifier.MatchString(f.Name):
		return "whole numbers, every value once, and named as an identifier"
	}
	return ""
}

// eachOnce says whether no value of a column stands in two rows.
func (f Fact) eachOnce() bool {
	return len(f.Levels) > 1 && !slices.ContainsFunc(f.Levels, func(l Level) bool { return l.Rows > 1 })
}

// leak says why a column is the outcome in other clothes, empty where not.
func (f Fact) leak() string {
	if f.R != nil && math.Abs(*f.R) >= leakR {
		return fmt.Sprintf("its correlation with the outcome is %.3f: the outcome in other clothes?", *f.R)
	}
	if f.AUC != nil && max(*f.AUC, 1-*f.AUC) > leakAUC {
		return fmt.Sprintf("alone it tells the two outcomes apart (AUC %.3f): the outcome in other clothes?", *f.AUC)
	}
	return ""
}

// flag judges one column that is not the outcome.
func (f Fact) flag(rows int64) (Flag, bool) {
	flag := Flag{Column: f.Name}
	identifier, leak := f.identifier(rows), f.leak()
	switch {
	case !f.Usable && !f.category():
		flag.Kind, flag.Text = FlagUnusable, f.why()
	case rows > 0 && f.Missing == rows:
		flag.Kind, flag.Text, flag.Left = FlagEmpty, "no row has a value", true
	case leak != "":
		flag.Kind, flag.Text, flag.Left = FlagLeak, leak, true
	case identifier != "":
		flag.Kind, flag.Text, flag.Left = FlagIdentifier, identifier, true
	case f.Date:
		flag.Kind, flag.Text = FlagDate, "a date written as a whole number: its distances mean nothing; leave it out, or turn it into days"
	case f.constant():
		flag.Kind, flag.Text = FlagConstant, "one value in all rows: never chosen, and not counted"
	case f.Whole && f.Unique && rows >= rowsForDense:
		flag.Kind, flag.Text = FlagUnique, "whole numbers, every value once: if it is an identifier and no count, leave it out"
	default:
		return flag, false
	}
	return flag, true
}

// drafter gathers what a draft is written from.
type drafter struct {
	facts      Facts
	outcome    Fact
	kind       Kind
	kindWhy    string
	success    string // of a yes-no outcome
	successWhy string
	flags      []Flag
	left       []Flag // of flags: what goes into candidates.leave
	unusable   []Flag
	candidates []Fact
	missing    Missing
	missingWhy string
	rows       int64 // in use at least
	shape      tableShape
}

func newDrafter(f Facts) (*drafter, error) {
	d := &drafter{facts: f}
	for _, step := range []func() error{d.checkOutcome, d.chooseKind, d.sortColumns, d.chooseMissing, d.chooseShape, d.checkRows, d.checkNames} {
		if err := step(); err != nil {
			return nil, err
		}
	}
	return d, nil
}

// refuse is the error of a table from which no study can be drafted.
func (d *drafter) refuse(format string, args ...any) error {
	return Problems{{File: d.facts.Path, Why: fmt.Sprintf(format, args...)}}
}

// checkOutcome finds the outcome and refuses one that cannot be explained.
func (d *drafter) checkOutcome() error {
	f := d.facts
	names := make([]string, len(f.Columns))
	found := -1
	for i, c := range f.Columns {
		names[i] = c.Name
		if c.Name == f.Outcome && found < 0 {
			found = i
		}
	}
	shown := quoted(f.Outcome)
	switch {
	case len(names) == 0:
		return d.refuse("the table has no columns")
	case f.Outcome == "":
		return d.refuse("name the column to be explained: --outcome COLUMN")
	case found < 0:
		return d.refuse("the table has no column %s to be explained%s", shown, NearHint(f.Outcome, names))
	}
	d.outcome = f.Columns[found]
	switch o := d.outcome; {
	case !o.admissible():
		return d.refuse("column %s cannot be the outcome: %s", shown, o.Reason)
	case o.gaps() > 0:
		return d.refuse("the outcome %s has no value in %d of %d rows%s, and an outcome is never filled: take these rows out of the table, or write a study with table.missing = \"drop-rows\", which leaves them out", shown, o.gaps(), f.Rows, f.gapRows(o.gaps()))
	case f.Rows < 4:
		return d.refuse("the table has %s, and two halves take at least 4", numberOf(int(f.Rows), "row"))
	case o.constant():
		return d.refuse("the outcome %s has one value in all rows: there is nothing to explain", shown)
	}
	return nil
}

// sortColumns tells candidates from what is left out.
func (d *drafter) sortColumns() error {
	for _, c := range d.facts.Columns {
		if c.Name == d.facts.Outcome {
			continue
		}
		flag, flagged := c.flag(d.facts.Rows)
		if flagged {
			d.flags = append(d.flags, flag)
		}
		switch {
		case flag.Kind == FlagUnusable && flagged:
			d.unusable = append(d.unusable, flag)
		case flag.Left:
			d.left = append(d.left, flag)
		default:
			d.candidates = append(d.candidates, c)
		}
	}
	return nil
}

// chooseMissing says what happens to gaps, such that the study runs.
func (d *drafter) chooseMissing() error {
	d.rows = d.facts.Rows
	lost, gappy := d.lost()
	switch {
	case gappy == 0:
		d.missingWhy = "no candidate has a missing value"
		return nil
	case lost*20 <= d.facts.Rows && d.facts.Rows-lost >= 4:
		d.missing, d.rows = DropRows, d.facts.Rows-lost
		d.missingWhy = fmt.Sprintf("gaps in %s take out %s%d of %d rows", numberOf(gappy, "candidate"), d.unlessCounted("at most "), lost, d.facts.Rows)
		d.flags = append(d.flags, Flag{Kind: FlagGaps, Text: d.missingWhy + `: missing = "drop-rows"`})
		return nil
	}
	d.leaveInfinite()
	lost, gappy = d.lost()
	if gappy == 0 {
		d.missingWhy = "no candidate has a missing value, those with infinite values left out"
		return nil
	}
	d.missing = FillMean
	d.missingWhy = fmt.Sprintf("gaps in %s; without the rows that have one, %s%d of %d rows would be lost", numberOf(gappy, "candidate"), d.unlessCounted("up to "), lost, d.facts.Rows)
	d.flags = append(d.flags, Flag{Kind: FlagGaps, Text: d.missingWhy + `: missing = "fill-mean", which weakens candidates with many gaps`})
	return nil
}

// lost bounds the rows that have a gap in a candidate, and counts the
// candidates that have any.
func (d *drafter) lost() (rows int64, gappy int) {
	for _, c := range d.candidates {
		if n := c.gaps(); n > 0 {
			gappy++
			rows = min(rows+n, d.facts.Rows)
		}
	}
	if d.facts.Incomplete >= 0 {
		rows = min(rows, d.facts.Incomplete)
	}
	return rows, gappy
}

// unlessCounted is words, or nothing where the rows with gaps were counted over
// the very candidates that are left.
func (d *drafter) unlessCounted(words string) string {
	for _, l := range d.left {
		if l.Kind == FlagGaps {
			return words
		}
	}
	if d.facts.Incomplete < 0 {
		return words
	}
	return ""
}

// leaveInfinite leaves out candidates with infinite values, which are never
// filled.
func (d *drafter) leaveInfinite() {
	var kept []Fact
	for _, c := range d.candidates {
		if c.Infinite == 0 {
			kept = append(kept, c)
			continue
		}
		flag := Flag{Kind: FlagGaps, Column: c.Name, Left: true,
			Text: fmt.Sprintf("infinite in %s, which is never filled", numberOf(int(c.Infinite), "row"))}
		d.flags = append(d.flags, flag)
		d.left = append(d.left, flag)
	}
	d.candidates = kept
}

// chooseShape sets threshold, bound, floor and selected by the table's shape.
func (d *drafter) chooseShape() error {
	varying := 0
	for _, c := range d.candidates {
		if !c.constant() {
			varying++
		}
	}
	if varying == 0 {
		return d.refuse("no candidate is left: of %d columns %d cannot be used, %d are left out and %d have one value in all rows",
			len(d.facts.Columns), len(d.unusable), len(d.left), len(d.candidates)-varying)
	}
	var err error
	if d.shape, err = shapeOf(varying, d.units()); err != nil {
		return err
	}
	d.flags = append(d.flags, d.shape.flags()...)
	return nil
}

// From where on neighbouring rows are called alike: a correlation that
// matters, and one that chance does not make (for independent rows it is about
// normal with deviation 1/sqrt(rows)).
const (
	alikeR      = 0.5
	alikeSigmas = 4
)

// series reports whether a column's values resemble those of the row before.
func (f Fact) series(rows int64) bool {
	return f.Serial != nil && *f.Serial >= alikeR && *f.Serial*math.Sqrt(float64(rows)) >= alikeSigmas
}

// checkRows says where rows seem to depend on each other.
func (d *drafter) checkRows() error {
	alike := 0
	for _, c := range d.candidates {
		if c.series(d.facts.Rows) {
			alike++
		}
	}
	if outcome := d.outcome.series(d.facts.Rows); outcome || alike > 0 && 2*alike >= len(d.candidates) {
		what := fmt.Sprintf("%d of %s", alike, numberOf(len(d.candidates), "candidate"))
		if outcome {
			what = "the outcome and " + what
		}
		d.flags = append(d.flags, Flag{Kind: FlagSeries, Text: "neighbouring rows are alike in " + what +
			": where rows follow each other in time, or share a tank, they are not independent, and the bounds do not hold" +
			" (a table that was only sorted is fine)"})
	}
	if n := d.facts.Repeats; n > 0 {
		are := "are"
		if n == 1 {
			are = "is"
		}
		d.flags = append(d.flags, Flag{Kind: FlagRepeats, Text: fmt.Sprintf("%s %s equal to an earlier one, labels aside: "+
			"the two halves of a pair then share what they should not; take repeats out", numberOf(int(n), "row"), are)})
	}
	return nil
}

// gapRows names the first of n rows without an outcome, where they are known.
func (f Facts) gapRows(n int64) string {
	if len(f.OutcomeGaps) == 0 {
		return ""
	}
	word := "rows"
	if n == 1 {
		word = "row"
	}
	list := make([]string, len(f.OutcomeGaps))
	for i, row := range f.OutcomeGaps {
		list[i] = strconv.Itoa(row)
	}
	more := ""
	if rest := n - int64(len(list)); rest > 0 {
		more = fmt.Sprintf(" and %d more", rest)
	}
	return fmt.Sprintf(" (%s %s%s, counted from 0)", word, strings.Join(list, ", "), more)
}

// checkNames refuses names that a study cannot write.
func (d *drafter) checkNames() error {
	names := []string{d.facts.Path, d.facts.Outcome, d.success}
	for _, l := range d.left {
		names = append(names, l.Column)
	}
	for _, name := range names {
		if !utf8.ValidString(name) {
			return d.refuse("the name \"%s\" is not UTF-8, so no study can write it: rename it", printable(name))
		}
	}
	return nil
}

// numberOf writes a count and its noun.
func numberOf(n int, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return fmt.Sprintf("%d %ss", n, noun)
}
