package table

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"

	"holdfast/solver"
)

// outcome is what is to be explained: its columns, and what was made of them.
type outcome struct {
	column, time, event, entry, offset, exposure *column
	strata                                       []*column

	levels  coding   // AsYesNo, AsClasses; per table row, later per row used
	status  coding   // AsSurvival: noEvent and seen
	stratum []coding // per column of strata
}

// The two values of an event status.
const (
	noEvent   = "no event"
	seenEvent = "event"
)

// outcome finds the columns of the outcome.
func (l asking) outcome() error {
	o, out := l.req.Outcome, &l.loading.outcome
	if err := l.checkMeasure(); err != nil {
		return err
	}
	levels := 0
	if o.Measure == AsYesNo || o.Measure == AsClasses {
		levels = MostLevels
	}
	for _, a := range []struct {
		to         **column
		role, name string
		most       int
	}{
		{&out.column, "the outcome", o.Column, levels},
		{&out.time, "the time", o.Time, 0},
		{&out.event, "the event status", o.Event, MostLevels},
		{&out.entry, "the entry", o.Entry, 0},
		{&out.offset, "the offset", o.Offset, 0},
		{&out.exposure, "the exposure", o.Exposure, 0},
	} {
		if a.name == "" {
			continue
		}
		var err error
		if *a.to, err = l.only(a.role, a.name, a.most); err != nil {
			return l.measureHint(err, a.role, a.name)
		}
	}
	for _, name := range o.Strata {
		c, err := l.only("a stratum of the outcome", name, l.mostStrata())
		if err != nil {
			return err
		}
		out.strata = append(out.strata, c)
	}
	return nil
}

// checkMeasure refuses an outcome whose parts do not belong together.
func (l asking) checkMeasure() error {
	o := l.req.Outcome
	survival := o.Measure == AsSurvival
	switch {
	case o.Measure > AsSurvival:
		return faultf(l.path(), "the outcome is to be read in an unknown way (%d)", o.Measure)
	case o.none() && (survival || o.Event != "" || o.Measure != AsNumber):
		return faultf(l.path(), "an outcome of kind %s needs its columns", o.Measure)
	case survival && (o.Time == "" || o.Event == "" || o.Column != ""):
		return faultf(l.path(), "an outcome of kind survival has a time and an event status, and no other column")
	case !survival && (o.Time != "" || o.Event != "" || o.Entry != "" || len(o.Strata) > 0):
		return faultf(l.path(), "time, event status, entry and strata belong to an outcome of kind survival, not %s", o.Measure)
	case o.Measure == AsClasses && (o.Offset != "" || o.Exposure != ""):
		return faultf(l.path(), "an outcome of kind classes has no offset and no exposure")
	case o.Exposure != "" && o.Measure != AsCount:
		return faultf(l.path(), "an exposure belongs to an outcome of kind count, not %s", o.Measure)
	}
	return nil
}

// measureHint says how a text can be an outcome, where a number was asked for.
func (l asking) measureHint(err error, role, name string) error {
	e, ours := err.(*Error)
	if at, ok := l.positions[name]; ours && ok && role == "the outcome" && l.src.format.columns()[at].Kind == Text {
		e.Why += ` (kind = "yes-no" and kind = "classes" read text)`
	}
	return err
}

// checkOutcome refuses gaps, and values that its kind cannot have.
func (l *loading) checkOutcome(context.Context) error {
	o := &l.outcome
	for _, a := range []struct {
		c    *column
		role string
	}{{o.column, "outcome"}, {o.time, "time"}, {o.entry, "entry"}, {o.offset, "offset"}, {o.exposure, "exposure"}} {
		if a.c == nil || a.c.values == nil {
			continue
		}
		if err := l.checkComplete(a.c, a.role, a.c.values); err != nil {
			return err
		}
	}
	if o.exposure != nil {
		if rows := l.rowsWhere(func(i int) bool { return o.exposure.values[i] <= 0 }); rows != nil {
			return columnFaultf(l.path(), o.exposure.Name, "the exposure is 0 or negative in %s: its logarithm is taken, so it must be larger", rowList(rows))
		}
	}
	switch l.req.Outcome.Measure {
	case AsYesNo, AsClasses:
		return l.checkLevels()
	case AsCount:
		return l.checkCounts()
	case AsSurvival:
		return l.checkSurvival()
	}
	return nil
}

// rowsWhere lists the rows in use for which is holds; nil: none.
func (l *loading) rowsWhere(is func(i int) bool) (rows []int) {
	for i := range l.n {
		if l.inUse(i) && is(i) {
			rows = append(rows, i)
		}
	}
	return rows
}

// checkLevels finds the levels of a yes-no outcome or of classes.
func (l *loading) checkLevels() error {
	c := l.outcome.column
	levels, fault := c.coding(MostLevels)
	if fault != "" {
		return columnFaultf(l.path(), c.Name, "cannot be an outcome of kind %s: %s", l.req.Outcome.Measure, fault)
	}
	l.outcome.levels = levels
	if err := l.checkCoded(c, "outcome", levels); err != nil {
		return err
	}
	if l.req.Outcome.Measure == AsClasses {
		if fault := c.notWhole(); fault != "" {
			return columnFaultf(l.path(), c.Name, "cannot be an outcome of kind classes: %s", fault)
		}
	}
	return nil
}

// checkCoded names the rows in use without a level.
func (l *loading) checkCoded(c *column, role string, levels coding) error {
	if rows := l.rowsWhere(func(i int) bool { return levels.codes[i] < 0 }); rows != nil {
		return l.incomplete(c, role, "missing", rows)
	}
	return nil
}

// checkCounts refuses what is no number of things.
func (l *loading) checkCounts() error {
	c := l.outcome.column
	if rows := l.rowsWhere(func(i int) bool { return c.values[i] < 0 || c.values[i] != math.Trunc(c.values[i]) }); rows != nil {
		return columnFaultf(l.path(), c.Name, "is no count in %s (the first holds %v): counts are whole numbers from 0 on",
			rowList(rows), c.values[rows[0]])
	}
	return nil
}

// checkSurvival refuses times that cannot be, and finds the event status.
func (l *loading) checkSurvival() error {
	o := &l.outcome
	if rows := l.rowsWhere(func(i int) bool { return o.time.values[i] <= 0 }); rows != nil {
		return columnFaultf(l.path(), o.time.Name, "the time is 0 or negative in %s (the first holds %v): times are larger than 0",
			rowList(rows), o.time.values[rows[0]])
	}
	if o.entry != nil {
		if rows := l.rowsWhere(func(i int) bool { return o.entry.values[i] >= o.time.values[i] }); rows != nil {
			i := rows[0]
			return columnFaultf(l.path(), o.entry.Name, "the entry is not before the time in %s (the first enters at %v and ends at %v)",
				rowList(rows), o.entry.values[i], o.time.values[i])
		}
	}
	for _, c := range o.strata {
		levels, err := l.stratumLevels(c, "stratum")
		if err != nil {
			return err
		}
		o.stratum = append(o.stratum, levels)
	}
	return l.findStatus()
}

// findStatus reads the event status: 1 or true where the event was seen, 0 or
// false where not, or the text that stands for the event.
func (l *loading) findStatus() error {
	c := l.outcome.event
	levels, fault := c.coding(MostLevels)
	if fault != "" {
		return columnFaultf(l.path(), c.Name, "cannot be the event status: %s", fault)
	}
	if err := l.checkCoded(c, "event status", levels); err != nil {
		return err
	}
	place := make([]int32, len(levels.names))
	for k, name := range levels.names {
		seen, ok := l.isEvent(name)
		if !ok {
			rows := l.rowsWhere(func(i int) bool { return int(levels.codes[i]) == k })
			if rows == nil {
				continue
			}
			return columnFaultf(l.path(), c.Name, "holds %s in %s: without success, the event status is 1 or true where the event was seen, and 0 or false where it was not; %s",
				quote(name), rowList(rows), l.valuesOf(levels, "the event"))
		}
		if seen {
			place[k] = 1
		}
	}
	levels.renumber(place)
	levels.names = []string{noEvent, seenEvent}
	l.outcome.status = levels
	return nil
}

// valuesOf lists the values of the rows in use, and how the study says which
// of them is meant.
func (l *loading) valuesOf(levels coding, meant string) string {
	used := levels.keep(l.rowsUsed())
	return "it holds " + levelList(used.levels()) + ": " + writeSuccess(used.names, meant)
}

// writeSuccess is what can be typed to name one of several values.
func writeSuccess(names []string, meant string) string {
	const most = 4
	var lines []string
	for _, name := range names[:min(most, len(names))] {
		lines = append(lines, "success = "+tomlText(name))
	}
	if len(names) > most {
		lines = append(lines, "another of them")
	}
	return "write " + strings.Join(lines, " or ") + " in [outcome], whichever is " + meant
}

// isEvent reports whether a level of the event status says that the event was
// seen; ok is false where it says nothing.
func (l *loading) isEvent(name string) (seen, ok bool) {
	if success := l.req.Outcome.Success; success != "" {
		return name == levelAsTyped(success, l.outcome.event.Kind), true
	}
	v, kind := parseCell([]byte(name))
	ok = kind == cellTruth || kind == cellInteger && (v == 0 || v == 1)
	return v == 1, ok
}

// settleOutcome makes the outcome of the rows used.
func (l *loading) settleOutcome(rows []int32) error {
	o, d := &l.outcome, l.data
	switch l.req.Outcome.Measure {
	case AsYesNo:
		o.levels = o.levels.keep(rows)
		return l.settleYesNo()
	case AsClasses:
		o.levels = o.levels.keep(rows)
		return l.settleClasses()
	case AsSurvival:
		o.status = pickCodes(o.status, rows)
		return l.settleSurvival(rows)
	}
	if o.column == nil {
		return nil
	}
	d.Outcome = pickRows(o.column.values, rows)
	if l.req.Outcome.Measure == AsCount && !slices.ContainsFunc(d.Outcome, func(y float64) bool { return y > 0 }) {
		return columnFaultf(l.path(), o.column.Name, "all counts are 0: there is nothing to explain")
	}
	return nil
}

// settleYesNo puts failure before success.
func (l *loading) settleYesNo() error {
	c, levels := l.outcome.column, &l.outcome.levels
	asked := l.req.Outcome.Success
	success := levels.find(levelAsTyped(asked, c.Kind))
	list := levelList(levels.levels())
	switch k := len(levels.names); {
	case k == 1:
		return columnFaultf(l.path(), c.Name, "holds one value, %s: there is nothing to explain", list)
	case k > 2:
		return columnFaultf(l.path(), c.Name, "holds %d values, and an outcome of kind yes-no has two: %s; leave the rows of the others out, or write kind = \"classes\"", k, list)
	case asked == "":
		return columnFaultf(l.path(), c.Name, "which value is the success? It holds %s: %s", list, writeSuccess(levels.names, "the success"))
	case success < 0:
		return columnFaultf(l.path(), c.Name, "no row holds the success %s; it holds %s: %s", quote(asked), list, writeSuccess(levels.names, "the success"))
	case success == 0:
		levels.reorder(func(a, _ int) bool { return a == 1 })
	}
	l.settleCodes()
	return nil
}

// tomlText writes a text as a study file does.
func tomlText(s string) string { return fmt.Sprintf("%q", s) }

// settleClasses counts the classes.
func (l *loading) settleClasses() error {
	c, levels := l.outcome.column, &l.outcome.levels
	if len(levels.names) == 1 {
		return columnFaultf(l.path(), c.Name, "holds one class, %s: there is nothing to explain", levelList(levels.levels()))
	}
	l.settleCodes()
	return nil
}

// settleCodes makes the levels of the outcome its values.
func (l *loading) settleCodes() {
	levels := l.outcome.levels
	l.data.Classes = levels.names
	l.data.Outcome = make([]float64, len(levels.codes))
	for i, k := range levels.codes {
		l.data.Outcome[i] = float64(k)
	}
}

// settleSurvival makes times, status and strata of the rows used.
func (l *loading) settleSurvival(rows []int32) error {
	o := &l.outcome
	s := &solver.Survival{Time: pickRows(o.time.values, rows), Event: make([]bool, len(o.status.codes))}
	events := 0
	for i, k := range o.status.codes {
		if s.Event[i] = k == 1; s.Event[i] {
			events++
		}
	}
	if events == 0 {
		why := "no row has the event: there is nothing to explain"
		if l.req.Outcome.Success != "" {
			levels, _ := o.event.coding(MostLevels) // findStatus has seen that it has levels
			why = fmt.Sprintf("no row holds the event %s; %s", quote(l.req.Outcome.Success), l.valuesOf(levels, "the event"))
		}
		return columnFaultf(l.path(), o.event.Name, "%s", why)
	}
	if o.entry != nil {
		s.Entry = pickRows(o.entry.values, rows)
	}
	if len(o.strata) > 0 {
		var names []string
		for k := range o.stratum {
			o.stratum[k] = o.stratum[k].keep(rows)
			names = append(names, o.strata[k].Name)
		}
		s.Stratum = combine(o.stratum, names).codes
	}
	l.data.Survival = s
	return nil
}

// settleOffset adds offset and logarithm of the exposure.
func (l *loading) settleOffset(rows []int32) {
	o := &l.outcome
	if o.offset != nil {
		l.data.Offset = pickRows(o.offset.values, rows)
	}
	if o.exposure == nil {
		return
	}
	exposure := pickRows(o.exposure.values, rows)
	for i, x := range exposure {
		exposure[i] = logarithm(x)
		if o.offset != nil {
			exposure[i] += l.data.Offset[i]
		}
	}
	l.data.Offset = exposure
}

// pickRows copies the values of the rows given (nil: all).
func pickRows(v []float64, rows []int32) []float64 {
	if rows == nil {
		return slices.Clone(v)
	}
	out := make([]float64, len(rows))
	for k, i := range rows {
		out[k] = v[i]
	}
	return out
}

// pickCodes is pickRows for levels, all of which are kept.
func pickCodes(c coding, rows []int32) coding {
	if rows == nil {
		return c
	}
	out := coding{names: c.names, codes: make([]int32, len(rows))}
	for k, i := range rows {
		out.codes[k] = c.codes[i]
	}
	return out
}
