package table

import (
	"slices"
	"strings"
)

// mostStrata is the number of levels that a column of strata may have: with
// more, most would hold a single row.
func (l *loading) mostStrata() int { return max(MostLevels, l.n/2) }

// within finds the columns in whose strata rows are drawn. They may have
// another role besides.
func (l asking) within() error {
	seen := map[string]bool{}
	for _, name := range l.req.Within {
		if seen[name] {
			return faultf(l.path(), "%s stands twice among the strata of the draws", quote(name))
		}
		seen[name] = true
		if name == OutcomeStratum {
			switch l.req.Outcome.Measure {
			case AsNumber, AsCount:
				return faultf(l.path(), "rows cannot be drawn within %q: an outcome of kind %s has no classes", name, l.req.Outcome.Measure)
			}
			l.loading.within = append(l.loading.within, nil)
			continue
		}
		c, err := l.column("a stratum of the draws", name, l.mostStrata())
		if err != nil {
			return err
		}
		l.loading.within = append(l.loading.within, c)
	}
	return nil
}

// stratumLevels returns the levels of a column of strata, complete over the
// rows in use.
func (l *loading) stratumLevels(c *column, role string) (coding, error) {
	levels, fault := c.coding(l.mostStrata())
	if fault != "" {
		return coding{}, columnFaultf(l.path(), c.Name, "cannot be a %s: %s", role, fault)
	}
	return levels, l.checkCoded(c, role, levels)
}

// settleWithin combines the columns of strata over the rows used.
func (l *loading) settleWithin(rows []int32) error {
	if len(l.within) == 0 {
		return nil
	}
	parts, names := make([]coding, len(l.within)), make([]string, len(l.within))
	for k, c := range l.within {
		if c == nil {
			parts[k], names[k] = l.outcomeLevels(), OutcomeStratum
			continue
		}
		levels, err := l.withinLevels(c)
		if err != nil {
			return err
		}
		parts[k], names[k] = levels.keep(rows), c.Name
	}
	l.withinParts = parts
	all := combine(parts, names)
	l.data.Within, l.data.WithinLevels = all.codes, all.names
	return nil
}

// withinLevels returns the levels of a column; one that is a category too may
// have had its gaps filled.
func (l *loading) withinLevels(c *column) (coding, error) {
	for _, p := range l.predictors {
		if p.column == c && p.category != nil && p.category.filled > 0 {
			return p.category.levels, nil
		}
	}
	return l.stratumLevels(c, "stratum of the draws")
}

// outcomeLevels is the class or event status of the rows used.
func (l *loading) outcomeLevels() coding {
	if l.req.Outcome.Measure == AsSurvival {
		return l.outcome.status.keep(nil)
	}
	return l.outcome.levels
}

// combine numbers the combinations of levels that occur, in the order of the
// first column's levels, then the second's. They are called column=level, several
// with a comma between.
func combine(parts []coding, columns []string) coding {
	out := parts[0]
	out.names = labels(columns[0], out.names)
	for k, part := range parts[1:] {
		out = cross(out, coding{names: labels(columns[k+1], part.names), codes: part.codes})
	}
	return out
}

func labels(column string, levels []string) []string {
	out := make([]string, len(levels))
	for i, level := range levels {
		out[i] = column + "=" + level
	}
	return out
}

// cross combines two columns without gaps.
func cross(a, b coding) coding {
	width := int64(len(b.names))
	keys := make([]int64, len(a.codes))
	for i := range keys {
		keys[i] = int64(a.codes[i])*width + int64(b.codes[i])
	}
	found := slices.Clone(keys)
	slices.Sort(found)
	found = slices.Compact(found)
	out := coding{names: make([]string, len(found)), codes: make([]int32, len(keys))}
	for k, key := range found {
		out.names[k] = strings.Join([]string{a.names[key/width], b.names[key%width]}, ", ")
	}
	for i, key := range keys {
		k, _ := slices.BinarySearch(found, key)
		out.codes[i] = int32(k)
	}
	return out
}
