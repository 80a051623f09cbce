package main

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"text/tabwriter"

	"holdfast/io/study"
	"holdfast/io/table"
)

// printInspection prints an inspection for people.
func (p *program) printInspection(i *inspection) error {
	fmt.Fprintf(p.out, "%s: %s, %s\n\n", oneLine(i.path), count(i.summary.Rows, "row"), count(int64(len(i.summary.Columns)), "column"))
	w := tabwriter.NewWriter(p.out, 0, 0, 2, ' ', 0)
	line := func(label, text string) {
		if text == "" {
			text = "none"
		}
		fmt.Fprintf(w, "%s\t%s\n", label, oneLine(text))
	}
	line("kinds", i.kinds())
	line("categories", listed(i.columns(i.category)))
	line("not usable", listed(i.columns(func(c table.ColumnSummary) string { return unless(usable(c), reason(c)) })))
	line("missing", listed(i.columns(gaps)))
	line("constant", listed(i.columns(func(c table.ColumnSummary) string { return unless(!c.Constant, fmt.Sprintf("%.6g", c.Min+0)) })))
	line("look like labels", listed(i.columns(i.label)))
	line("rounded", listed(i.columns(func(c table.ColumnSummary) string {
		return unless(c.Rounded == 0, fmt.Sprintf("%d integers too large for an exact number", c.Rounded))
	})))
	if i.quick {
		line("copies", "not looked for (--quick)")
		line("nearly the same", "not looked for (--quick)")
	} else {
		line("copies", listed(likenesses(i.copies, false)))
		line("nearly the same", listed(likenesses(i.near, true)))
	}
	i.printOutcome(line)
	if err := w.Flush(); err != nil {
		return err
	}
	p.printFindings(i)
	return nil
}

// usable reports whether a column can be a predictor, as numbers or as a
// category.
func usable(c table.ColumnSummary) bool { return c.Usable || len(c.Levels) > 0 }

// reason says why a column cannot be used.
func reason(c table.ColumnSummary) string { return factColumn(c).Reason }

// category describes a column of text that can be a category.
func (i *inspection) category(c table.ColumnSummary) string {
	if c.Kind != table.Text || len(c.Levels) < 2 || c.Name == i.summary.Outcome {
		return ""
	}
	return fmt.Sprintf("%d levels", len(c.Levels))
}

// printOutcome describes the outcome and what looks like it.
func (i *inspection) printOutcome(line func(label, text string)) {
	if i.outcome == nil && i.summary.Outcome == "" {
		line("outcome", "not said (--outcome COLUMN)")
		return
	}
	line("outcome", i.outcomeText())
	if i.summary.Outcome == "" {
		return // a survival time has no single column to be compared with
	}
	line("suspected leaks", listed(i.columns(func(c table.ColumnSummary) string {
		return unless(!c.Leak || c.Name == i.summary.Outcome, leakReason(c))
	})))
}

// outcomeText describes the outcome by its kind.
func (i *inspection) outcomeText() string {
	if i.outcome == nil {
		c, _ := i.column(i.summary.Outcome)
		return c.Name + ": " + valuesText(c)
	}
	o := *i.outcome
	text := explained(o)
	if o.Kind != study.Number {
		text += " (" + o.Kind.String() + ")"
	}
	c, _ := i.column(o.Column)
	switch o.Kind {
	case study.Survival:
		text += ": " + i.eventsText(o)
	case study.YesNo, study.Classes:
		text += ": " + i.levelsText(c)
	default:
		text += ": " + valuesText(c)
	}
	for _, role := range []struct{ word, column string }{
		{"success", o.Success}, {"entry", o.Entry}, {"strata", strings.Join(o.Strata, ", ")},
		{"offset", o.Offset}, {"exposure", o.Exposure}, {"case weights", o.CaseWeight},
	} {
		if role.column != "" {
			text += "; " + role.word + " " + role.column
		}
	}
	return text
}

// column finds a column by its name.
func (i *inspection) column(name string) (table.ColumnSummary, bool) {
	for _, c := range i.summary.Columns {
		if c.Name == name {
			return c, true
		}
	}
	return table.ColumnSummary{}, false
}

// valuesText describes numbers.
func valuesText(c table.ColumnSummary) string {
	return fmt.Sprintf("%.4g to %.4g, mean %.4g, standard deviation %.4g", c.Min, c.Max, c.Mean, c.SD)
}

// levelsText counts the rows of each value.
func (i *inspection) levelsText(c table.ColumnSummary) string {
	if len(c.Levels) == 0 {
		return fmt.Sprintf("more than %d values", table.MostLevels)
	}
	words := make([]string, len(c.Levels))
	for k, l := range c.Levels {
		words[k] = fmt.Sprintf("%s in %d", l.Name, l.Count)
	}
	return listed(words) + fmt.Sprintf(" of %s", count(i.summary.Rows, "row"))
}

// eventsText counts the events of a survival time.
func (i *inspection) eventsText(o study.Outcome) string {
	if n := i.events(o); n != nil {
		return count(*n, "event") + " in " + count(i.summary.Rows, "row")
	}
	return "the events were not counted"
}

// events counts the rows in which the event was seen; nil where the column does
// not say so in two values.
func (i *inspection) events(o study.Outcome) *int64 {
	if c, known := i.column(o.Event); known && o.Kind == study.Survival {
		for _, l := range c.Levels {
			if l.Name == o.Success || o.Success == "" && (l.Name == "1" || l.Name == "true") {
				return &l.Count
			}
		}
	}
	return nil
}

// leakReason is the figure by which a column looks like the outcome.
func leakReason(c table.ColumnSummary) string {
	if math.Abs(c.Correlation) >= table.LeakCorrelation || math.IsNaN(c.AUC) {
		return fmt.Sprintf("r = %.3f", c.Correlation)
	}
	if c.AUC < 0.5 {
		return fmt.Sprintf("AUC = %.3f, reversed", 1-c.AUC)
	}
	return fmt.Sprintf("AUC = %.3f", c.AUC)
}

// printFindings prints what a draft would say and what would be refused.
func (p *program) printFindings(i *inspection) {
	if len(i.flags) > 0 {
		fmt.Fprintln(p.out, "\na draft says:")
	}
	for k, f := range i.flags {
		if k == mostFlags {
			fmt.Fprintf(p.out, "  and %d more; --json lists all\n", len(i.flags)-mostFlags)
			break
		}
		text := f.Text
		if f.Column != "" {
			text = f.Column + ": " + text
		}
		if f.Left {
			text += " (left out)"
		}
		fmt.Fprintln(p.out, "  "+oneLine(text))
	}
	if i.decision != "" {
		fmt.Fprintf(p.out, "\na run would decide: %s\n", i.decision)
	}
	for _, r := range i.refusals {
		fmt.Fprintf(p.out, "\na run would be refused: %s\n", oneLine(r))
	}
}

// count writes a number and its noun.
func count(n int64, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return fmt.Sprintf("%d %ss", n, noun)
}

// mostFlags is how many lines of a draft are shown.
const mostFlags = 20

// columns lists the columns for which about says something.
func (i *inspection) columns(about func(table.ColumnSummary) string) []string {
	var list []string
	for _, c := range i.summary.Columns {
		if text := about(c); text != "" {
			list = append(list, c.Name+" ("+text+")")
		}
	}
	return list
}

// unless is text, or nothing where fine.
func unless(fine bool, text string) string {
	if fine {
		return ""
	}
	return text
}

// kinds counts the columns of each kind.
func (i *inspection) kinds() string {
	count := map[table.Kind]int{}
	for _, c := range i.summary.Columns {
		count[c.Kind]++
	}
	var words []string
	for k := table.Number; k <= table.Empty; k++ {
		if count[k] > 0 {
			words = append(words, fmt.Sprintf("%d %s", count[k], k))
		}
	}
	return strings.Join(words, ", ")
}

// gaps says what is missing in a column.
func gaps(c table.ColumnSummary) string {
	var words []string
	for _, g := range []struct {
		n    int64
		word string
	}{{c.Missing, "missing"}, {c.NaN, "not a number"}, {c.Infinite, "infinite"}} {
		if g.n > 0 {
			words = append(words, fmt.Sprintf("%d %s", g.n, g.word))
		}
	}
	return strings.Join(words, ", ")
}

// label says why a column looks like a label and no measurement.
func (i *inspection) label(c table.ColumnSummary) string {
	switch {
	case c.Kind == table.Text && len(c.Levels) > 1 && int64(len(c.Levels)) == i.summary.Rows:
		return "text, none twice"
	case !c.Usable:
		return ""
	case c.RowNumber:
		return "counts the rows"
	case c.Dates != "":
		return c.Dates
	case c.Unique && c.Monotone:
		return "whole numbers in the order of the rows, none twice"
	case c.Unique:
		return "whole numbers, none twice"
	}
	return ""
}

// likenesses lists pairs, with their correlation where it says something.
func likenesses(list []likeness, withR bool) []string {
	list = slices.Clone(list)
	slices.SortStableFunc(list, func(a, b likeness) int { return byStrength(a.R, b.R) })
	words := make([]string, len(list))
	for k, l := range list {
		words[k] = l.Column + " (of " + l.Of + ")"
		if withR {
			words[k] = fmt.Sprintf("%s and %s (r = %.3f)", l.Column, l.Of, l.R)
		}
	}
	return words
}

// byStrength orders correlations by size, largest first.
func byStrength(a, b float64) int {
	switch a, b = max(a, -a), max(b, -b); {
	case a > b:
		return -1
	case a < b:
		return 1
	}
	return 0
}

// listed joins words, as far as a line goes.
func listed(words []string) string {
	text := briefly(words)
	if len(words) > mostListed {
		text += "; --json lists all"
	}
	return text
}

// briefly joins the first words, and says how many there are more.
func briefly(words []string) string {
	if more := len(words) - mostListed; more > 0 {
		words = append(slices.Clone(words[:mostListed]), fmt.Sprintf("and %d more", more))
	}
	return strings.Join(words, ", ")
}

// columnJSON is a column in `inspect --json`; null where a figure does not
// exist.
type columnJSON struct {
	Name        string   `json:"column"`
	Type        string   `json:"type"`
	Kind        string   `json:"kind"`
	Usable      bool     `json:"usable"`
	Reason      string   `json:"reason,omitempty"`
	Missing     int64    `json:"missing"`
	NaN         int64    `json:"nan"`
	Infinite    int64    `json:"infinite"`
	Rounded     int64    `json:"rounded"`
	Constant    bool     `json:"constant"`
	Label       string   `json:"label,omitempty"`
	Min         *float64 `json:"min"`
	Max         *float64 `json:"max"`
	Mean        *float64 `json:"mean"`
	SD          *float64 `json:"sd"`
	Correlation *float64 `json:"outcome_correlation"`
	AUC         *float64 `json:"outcome_auc"`
	Leak        bool     `json:"leak"`

	Levels []levelJSON `json:"levels,omitempty"`
}

// levelJSON is a value and its rows.
type levelJSON struct {
	Level string `json:"level"`
	Rows  int64  `json:"rows"`
}

// levelsJSON lists values.
func levelsJSON(list []table.Level) (levels []levelJSON) {
	for _, l := range list {
		levels = append(levels, levelJSON{l.Name, l.Count})
	}
	return levels
}

// flagJSON is a line of what a draft says.
type flagJSON struct {
	Kind   string `json:"kind"`
	Column string `json:"column"`
	Text   string `json:"text"`
	Left   bool   `json:"left_out"`
}

// document is what `inspect --json` prints.
func (i *inspection) document() any {
	columns := make([]columnJSON, len(i.summary.Columns))
	for k, c := range i.summary.Columns {
		columns[k] = columnJSON{
			Name: c.Name, Type: c.Type, Kind: c.Kind.String(), Usable: usable(c), Reason: unless(usable(c), reason(c)),
			Missing: c.Missing, NaN: c.NaN, Infinite: c.Infinite, Rounded: c.Rounded,
			Constant: c.Constant, Label: i.label(c), Levels: levelsJSON(c.Levels),
			Min: defined(c.Min), Max: defined(c.Max), Mean: defined(c.Mean), SD: defined(c.SD),
			Correlation: defined(c.Correlation), AUC: defined(c.AUC), Leak: c.Leak && c.Name != i.summary.Outcome,
		}
	}
	flags := make([]flagJSON, len(i.flags))
	for k, f := range i.flags {
		flags[k] = flagJSON{f.Kind.String(), f.Column, f.Text, f.Left}
	}
	return struct {
		Table    string       `json:"table"`
		Rows     int64        `json:"rows"`
		Outcome  string       `json:"outcome"`
		Columns  []columnJSON `json:"columns"`
		Compared bool         `json:"compared"`
		Copies   []likeness   `json:"copies"`
		Near     []likeness   `json:"nearly_the_same"`
		Flags    []flagJSON   `json:"flags"`
		Refused  []string     `json:"refused"`
		outcomeJSON
	}{
		i.path, i.summary.Rows, i.summary.Outcome, columns, !i.quick,
		some(i.copies), some(i.near), flags, some(i.refusals), i.outcomeJSON(),
	}
}

// outcomeJSON says what is explained; null where it was not said.
type outcomeJSON struct {
	Kind    *string `json:"kind"`
	Success *string `json:"success"`
	Events  *int64  `json:"events"`
}

func (i *inspection) outcomeJSON() (o outcomeJSON) {
	if i.outcome == nil {
		return o
	}
	kind := i.outcome.Kind.String()
	o.Kind, o.Events = &kind, i.events(*i.outcome)
	if i.outcome.Success != "" {
		o.Success = &i.outcome.Success
	}
	return o
}

// some makes an empty list of none, so that JSON has [] and not null.
func some[T any](list []T) []T {
	if list == nil {
		return []T{}
	}
	return list
}
