package study

import (
	"fmt"
	"strings"
)

// Which whole numbers are taken for counts, and which for codes of classes.
const (
	mostCount  = 10_000 // larger numbers are amounts
	countsFrom = 10     // counts reach down to a tenth of the largest, measurements do not
	fewCodes   = 9      // classes that are written as numbers
	evenCodes  = 4      // a class is at most so many times as frequent as another; counts fall off
)

// chooseKind finds the kind of outcome, and of a yes-no outcome the value that
// counts as yes.
func (d *drafter) chooseKind() error {
	if d.facts.Kind != nil {
		d.kind = *d.facts.Kind
	} else if err := d.kindByValues(); err != nil {
		return err
	}
	switch o := d.outcome; {
	case d.kind == YesNo && len(o.Levels) != 2:
		return d.refuse("the outcome %s does not have two values, which outcome.kind = %q needs", quoted(o.Name), d.kind)
	case d.kind == Number && (o.TwoValued || len(o.Levels) == 2):
		d.flags = append(d.flags, Flag{Kind: FlagOutcome, Column: o.Name, Text: "two values, taken as numbers here: a linear fit of a yes-no outcome finds predictors, but its coefficients are no odds"})
	case d.kind == YesNo:
		d.success, d.successWhy = successOf(o.Levels)
	}
	return d.checkLevels()
}

// kindByValues finds the kind by the values of the outcome.
func (d *drafter) kindByValues() error {
	o := d.outcome
	switch n := len(o.Levels); {
	case o.Text && (n < 2 || n > MostLevels):
		return d.refuse("the outcome %s is text with more than %d values: classes take 2 to %d", quoted(o.Name), MostLevels, MostLevels)
	case n == 2:
		d.kind, d.kindWhy = YesNo, "two values"
	case o.Text:
		d.kind, d.kindWhy = Classes, fmt.Sprintf("text of %d values", n)
	case o.codes():
		d.kind, d.kindWhy = Classes, fmt.Sprintf(`%d whole numbers, all about as frequent, as codes of classes are; "number" if their distances mean something`, n)
	case o.counts():
		d.kind, d.kindWhy = Count, fmt.Sprintf(`whole numbers from %.0f to %.0f, as counts are; "number" if they are measurements`, o.Min, o.Max)
	case o.Whole:
		d.kind, d.kindWhy = Number, fmt.Sprintf("whole numbers from %.0f to %.0f, which are no counts", o.Min, o.Max)
	default:
		d.kind = Number
	}
	return nil
}

// codes says whether whole numbers look like codes of classes: few, without a
// gap from 0 or 1, and about equally frequent.
func (f Fact) codes() bool {
	n := len(f.Levels)
	if !f.Whole || n < 3 || n > fewCodes || f.Min != 0 && f.Min != 1 || f.Max-f.Min != float64(n-1) {
		return false
	}
	least, most := f.Levels[0].Rows, f.Levels[0].Rows
	for _, l := range f.Levels {
		least, most = min(least, l.Rows), max(most, l.Rows)
	}
	return most <= evenCodes*least
}

// counts says whether whole numbers look like counts.
func (f Fact) counts() bool {
	return f.Whole && !f.Date && f.Min >= 0 && f.Max <= mostCount && countsFrom*f.Min <= f.Max
}

// checkLevels refuses a value of the outcome that cannot be in both halves.
func (d *drafter) checkLevels() error {
	if d.kind != YesNo && d.kind != Classes {
		return nil
	}
	for _, l := range d.outcome.Levels {
		if l.Rows < 2 {
			return d.refuse("the outcome %s is %s in one row only, and each of two halves needs such a row: take it out of the table, or join it with another value",
				quoted(d.outcome.Name), quoted(l.Text))
		}
	}
	return nil
}

// yesWords are pairs of values whose meaning is plain, yes first.
var yesWords = [][2]string{
	{"1", "0"}, {"true", "false"}, {"yes", "no"}, {"y", "n"}, {"t", "f"},
	{"positive", "negative"}, {"pos", "neg"}, {"present", "absent"}, {"+", "-"},
}

// successOf chooses which of two values counts as yes, and says why.
func successOf(levels []Level) (success, why string) {
	for _, words := range yesWords {
		for i, l := range levels {
			if strings.EqualFold(l.Text, words[0]) && strings.EqualFold(levels[1-i].Text, words[1]) {
				return l.Text, counted(l, levels[1-i])
			}
		}
	}
	i := 0
	if levels[1].Rows < levels[0].Rows {
		i = 1
	}
	why = counted(levels[i], levels[1-i]) + "; the rarer value is taken, and the other would turn every sign"
	if levels[0].Rows == levels[1].Rows {
		why = counted(levels[i], levels[1-i]) + "; the first value is taken, and the other would turn every sign"
	}
	return levels[i].Text, why
}

// counted says how often a value and the other one stand in the table.
func counted(this, other Level) string {
	return fmt.Sprintf("in %d of %d rows; %s in the others", this.Rows, this.Rows+other.Rows, quoted(other.Text))
}
