package table

import (
	"context"
	"fmt"
	"maps"
	"math"
	"slices"
)

// checkCategories refuses categories and references that are no predictors.
func (l asking) checkCategories() error {
	if len(l.req.Categories)+len(l.req.Reference) == 0 {
		return nil
	}
	category := map[string]bool{}
	for _, p := range l.loading.predictors {
		category[p.Name] = p.category != nil
	}
	for _, name := range l.req.Categories {
		if _, ok := category[name]; !ok {
			return faultf(l.path(), "%s is to be read as a category, and is neither a candidate nor an always-in column", quote(name))
		}
	}
	for _, name := range slices.Sorted(maps.Keys(l.req.Reference)) {
		if !category[name] {
			return faultf(l.path(), "%s has the reference level %s, and is no category", quote(name), quote(l.req.Reference[name]))
		}
	}
	return nil
}

// findLevels finds the levels of all categories. A candidate that has none, or
// too many, is left out; one that the user named is an error.
func (l *loading) findLevels(ctx context.Context) error {
	faults := make([]string, len(l.predictors))
	err := l.each(ctx, len(l.predictors), func(_, j int) error {
		if p := &l.predictors[j]; p.category != nil {
			var levels coding
			levels, faults[j] = p.coding(MostLevels)
			levels.reorder(func(a, b int) bool { return levels.names[a] < levels.names[b] })
			p.category.levels = levels
			if faults[j] == "" {
				faults[j] = p.notWhole()
			}
		}
		return nil
	})
	if err != nil {
		return err
	}
	for j := range l.predictors {
		switch p := &l.predictors[j]; {
		case p.category == nil:
		case faults[j] != "" && l.named(p):
			return columnFaultf(l.path(), p.Name, "cannot be %s: %s", p.title(), faults[j])
		case faults[j] != "":
			continue
		case p.Kind == Text && p.Reason != plainReason:
			l.note("column %s is read as a category: it %s", quote(p.Name), p.Reason)
		}
	}
	l.leaveOut(func(j int, _ *predictor) string { return faults[j] })
	return l.anyLeft()
}

// coding returns a column by its levels; fault says why it has none.
func (c *column) coding(most int) (levels coding, fault string) {
	if c.texts != nil {
		return c.texts.coding(most)
	}
	return codeNumbers(c.values, c.Kind, most)
}

// notWhole says where a column of numbers has fractions, which are no levels
// of a category.
func (c *column) notWhole() string {
	for i, x := range c.values {
		if x != math.Trunc(x) && x == x {
			return fmt.Sprintf("row %d holds %v, and only text, truth values and whole numbers are levels", i, x)
		}
	}
	return ""
}

// named reports whether the user spoke of this very category, so that it must
// not be left out silently.
func (l *loading) named(p *predictor) bool {
	_, referred := l.req.Reference[p.Name]
	return p.always || p.Kind != Text || referred || slices.Contains(l.req.Named, p.Name)
}

// leaveOut takes out the candidates for which why gives a reason.
func (l *loading) leaveOut(why func(j int, p *predictor) string) {
	kept := l.predictors[:0]
	for j, p := range l.predictors {
		if reason := why(j, &p); reason != "" && !p.always {
			l.data.Excluded = append(l.data.Excluded, Exclusion{p.Name, reason})
			continue
		}
		kept = append(kept, p)
	}
	l.predictors = kept
}

// anyLeft refuses a table whose candidates have all been left out.
func (l *loading) anyLeft() error {
	if len(l.data.Excluded) < len(l.req.Candidates) {
		return nil
	}
	same := true
	for _, e := range l.data.Excluded {
		same = same && e.Reason == noValue
	}
	if same {
		return faultf(l.path(), "no candidate is left: in none of %s does any row have a value", plural(int64(len(l.req.Candidates)), "candidate"))
	}
	first := l.data.Excluded[0]
	return faultf(l.path(), "no candidate is left of %d: %s %s", len(l.req.Candidates), quote(first.Column), first.Reason)
}

// noValue is the reason against a column without any value.
const noValue = "no row has a value"

// settleLevels keeps the levels that the rows used have, and leaves out
// candidates with a single one.
func (l *loading) settleLevels(ctx context.Context, rows []int32) error {
	err := l.each(ctx, len(l.predictors), func(_, j int) error {
		if c := l.predictors[j].category; c != nil {
			c.levels = c.levels.keep(rows)
		}
		return nil
	})
	if err != nil {
		return err
	}
	l.leaveOut(func(_ int, p *predictor) string {
		if p.category == nil || len(p.category.levels.names) > 1 {
			return ""
		}
		level := quote(p.category.levels.names[0])
		if p.always {
			l.note("always-in category %s has one level, %s, and adds nothing", quote(p.Name), level)
		}
		return fmt.Sprintf("has one level, %s, in all rows", level)
	})
	return l.anyLeft()
}

// reference returns the level of a category that gets no indicator.
func (l *loading) reference(p *predictor) (int, error) {
	asked, given := l.req.Reference[p.Name]
	if !given {
		return 0, nil
	}
	levels := &p.category.levels
	if k := levels.find(levelAsTyped(asked, p.Kind)); k >= 0 {
		return k, nil
	}
	return 0, columnFaultf(l.path(), p.Name, "no row has the reference level %s; its levels are %s", quote(asked), levelList(levels.levels()))
}

// indicator writes the column of one level: 1 where a row has it, else 0.
func (c *coding) indicator(level int, v []float64) {
	for i, k := range c.codes {
		v[i] = 0
		if int(k) == level {
			v[i] = 1
		}
	}
}

// fillLevel gives rows in use without a level the most frequent one of the
// rows in use, of several the first, and returns it.
func (l *loading) fillLevel(c *category) string {
	counts := make([]int64, len(c.levels.names))
	for i, k := range c.levels.codes {
		if k >= 0 && l.inUse(i) {
			counts[k]++
		}
	}
	best := 0
	for k, n := range counts {
		if n > counts[best] {
			best = k
		}
	}
	for i, k := range c.levels.codes {
		if k < 0 && l.inUse(i) {
			c.levels.codes[i] = int32(best)
			c.filled++
		}
	}
	return c.levels.names[best]
}
