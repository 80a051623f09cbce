package table

import (
	"context"
	"fmt"
	"math/bits"
	"slices"
	"sort"
	"strconv"
	"strings"
)

// countGaps counts missing, NaN and infinite cells of candidates and always-in
// columns over the rows in use.
func (l *loading) countGaps(ctx context.Context) error {
	words := (l.n + 63) / 64
	masks := make([][]uint64, l.workers)
	err := l.each(ctx, len(l.predictors), func(w, j int) error {
		if masks[w] == nil {
			masks[w] = make([]uint64, words)
		}
		p := &l.predictors[j]
		if p.category != nil {
			p.gaps = gapsOfLevels(p.category.levels.codes, l.used, masks[w])
		} else {
			p.gaps = gapsOf(p.values, l.used, masks[w])
		}
		p.gaps.Column = p.Name
		return nil
	})
	if err != nil {
		return err
	}
	l.excludeEmpty()
	l.holed = make([]uint64, words)
	for _, m := range masks {
		for i, b := range m {
			l.holed[i] |= b
		}
	}
	return nil
}

// gapsOf counts the gaps of a column over the rows in use and marks their
// rows. A column that has no value at all marks none: it is not its rows that
// are at fault.
func gapsOf(v []float64, used, mark []uint64) Gaps {
	var g Gaps
	var rows int64
	for i, x := range v {
		if used != nil && used[i>>6]>>(i&63)&1 == 0 {
			continue
		}
		rows++
		switch {
		case !notFinite(x):
		case isMissing(x):
			g.Missing++
		case x != x:
			g.NaN++
		default:
			g.Infinite++
		}
	}
	if g.Total() == 0 || g.Missing+g.NaN == rows {
		return g
	}
	for i, x := range v {
		if notFinite(x) && (used == nil || used[i>>6]>>(i&63)&1 == 1) {
			mark[i>>6] |= 1 << (i & 63)
		}
	}
	return g
}

// gapsOfLevels is gapsOf for a category.
func gapsOfLevels(codes []int32, used, mark []uint64) Gaps {
	var g Gaps
	var rows int64
	for i, k := range codes {
		if used == nil || used[i>>6]>>(i&63)&1 == 1 {
			rows++
			if k < 0 {
				g.Missing++
			}
		}
	}
	if g.Missing == 0 || g.Missing == rows {
		return g
	}
	for i, k := range codes {
		if k < 0 && (used == nil || used[i>>6]>>(i&63)&1 == 1) {
			mark[i>>6] |= 1 << (i & 63)
		}
	}
	return g
}

// excludeEmpty leaves out candidates that hold no value at all, except under
// Refuse, where every gap is refused.
func (l *loading) excludeEmpty() {
	if l.req.Missing == Refuse {
		return
	}
	full := int64(l.rowsLeft())
	l.leaveOut(func(_ int, p *predictor) string {
		if p.gaps.Missing+p.gaps.NaN == full {
			return noValue
		}
		return ""
	})
}

// applyPolicy refuses, or decides what happens to the gaps.
func (l *loading) applyPolicy(context.Context) error {
	if err := l.anyLeft(); err != nil {
		return err
	}
	worst := l.worstFirst()
	if len(worst)+len(l.roleGaps) == 0 {
		return nil
	}
	for _, p := range l.predictors {
		if p.always && l.req.Missing != Refuse && p.gaps.Total() == int64(l.rowsLeft()) {
			return columnFaultf(l.path(), p.Name, "cannot be an always-in column: %s", noValue)
		}
	}
	switch l.req.Missing {
	case DropRows:
		return l.dropRows(worst)
	case FillMean:
		return l.fillMean(worst)
	}
	return l.gapFault(worst, l.refusal(worst))
}

// worstFirst returns the predictors with gaps, most gaps first, table order
// among equals.
func (l *loading) worstFirst() []Gaps {
	var out []Gaps
	for _, p := range l.predictors {
		if p.gaps.Total() > 0 {
			out = append(out, p.gaps)
		}
	}
	sortGaps(out)
	return out
}

func sortGaps(g []Gaps) {
	sort.SliceStable(g, func(a, b int) bool { return g[a].Total() > g[b].Total() })
}

// dropIncomplete takes the rows out of use in which the outcome, or another
// column that is no predictor, has a gap, where DropRows was asked for. Such
// columns are never filled. Gaps of predictors are counted over what is left.
func (l *loading) dropIncomplete(context.Context) error {
	if l.req.Missing != DropRows {
		return nil
	}
	mark := make([]uint64, (l.n+63)/64)
	for _, c := range l.roleColumns() {
		g := c.markGaps(l.used, mark)
		g.Column = c.Name
		switch {
		case g.Total() == 0:
			continue
		case g.Missing+g.NaN == int64(l.rowsLeft()):
			return columnFaultf(l.path(), c.Name, "no row has a value, so missing = \"drop-rows\" would keep none: name another column")
		}
		l.roleGaps = append(l.roleGaps, g)
	}
	if len(l.roleGaps) == 0 {
		return nil
	}
	sortGaps(l.roleGaps)
	l.takeOut(mark)
	l.dropped = countRows(mark)
	if l.rowsLeft() < 2 {
		return l.keepsTooFew(nil)
	}
	return nil
}

// roleColumns lists the columns that are read for another purpose than as
// predictors, each once.
func (l *loading) roleColumns() []*column {
	o := &l.outcome
	var out []*column
	for _, c := range slices.Concat([]*column{o.column, o.time, o.event, o.entry, o.offset, o.exposure, l.weight}, o.strata, l.within) {
		if c != nil && !slices.Contains(out, c) {
			out = append(out, c)
		}
	}
	return out
}

// markGaps counts the gaps of a column that was read, and marks their rows.
func (c *column) markGaps(used, mark []uint64) Gaps {
	if c.texts != nil {
		return gapsOfLevels(c.texts.codes, used, mark)
	}
	return gapsOf(c.values, used, mark)
}

// dropRows takes the rows with gaps in predictors out of use, and says how
// many rows are lost with those that are gone already.
func (l *loading) dropRows(worst []Gaps) error {
	before, lost := l.n-l.zero, l.lost()
	share := 100 * float64(lost) / float64(before)
	switch {
	case before-lost < 2:
		return l.keepsTooFew(worst)
	case lost*10 > before && !l.req.AcceptLoss:
		return l.gapFault(worst, fmt.Sprintf(
			"missing = \"drop-rows\" leaves out %d of %d rows (%.1f %%), more than a tenth: %s, or confirm with [table] accept_loss = true",
			lost, before, share, l.insteadOfDropping(worst)))
	}
	l.takeOut(l.holed)
	all := slices.Concat(l.roleGaps, worst)
	sortGaps(all)
	l.note("drop-rows left out %d of %d rows (%.1f %%) because of gaps in %s: %s", lost, before, share, plural(int64(len(all)), "column"), gapList(all))
	return nil
}

// keepsTooFew refuses to drop rows until nothing is left to learn from.
func (l *loading) keepsTooFew(worst []Gaps) error {
	before := l.n - l.zero
	return l.gapFault(worst, fmt.Sprintf("missing = \"drop-rows\" keeps %d of %d rows: %s", before-l.lost(), before, l.insteadOfDropping(worst)))
}

// insteadOfDropping says what else can be done about gaps: predictors can be
// left out or filled, other columns only be completed.
func (l *loading) insteadOfDropping(worst []Gaps) string {
	var ways []string
	if len(l.roleGaps) > 0 {
		ways = append(ways, "complete "+gapList(l.roleGaps))
	}
	if len(worst) > 0 {
		ways = append(ways, "leave out the columns with the most gaps ("+gapList(worst)+")")
	}
	infinite := slices.ContainsFunc(worst, func(g Gaps) bool { return g.Infinite > 0 })
	if len(l.roleGaps) == 0 && !infinite { // neither is ever filled
		ways = append(ways, "use missing = \"fill-mean\"")
	}
	return strings.Join(ways, ", ")
}

// takeOut takes marked rows out of use.
func (l *loading) takeOut(mark []uint64) {
	if l.used == nil {
		l.used = fullMask(l.n)
	}
	for i, w := range mark {
		l.used[i] &^= w
	}
}

// rowsLeft is the number of rows that have a weight and are complete but for
// their predictors.
func (l *loading) rowsLeft() int { return l.n - l.zero - l.dropped }

// lost is the number of rows with a gap.
func (l *loading) lost() int { return l.dropped + countRows(l.holed) }

// countRows is the number of rows marked.
func countRows(mark []uint64) int {
	n := 0
	for _, w := range mark {
		n += bits.OnesCount64(w)
	}
	return n
}

// gapFault is an error about gaps, with what a caller needs to advise: the
// gaps, where all are those of predictors.
func (l *loading) gapFault(gaps []Gaps, why string) error {
	if len(l.roleGaps) > 0 {
		gaps = nil
	}
	return &Error{Path: l.path(), Why: why, Gaps: gaps, Rows: l.n - l.zero, Lost: l.lost()}
}

// fillMean keeps the gaps of numbers, except infinite values, and fills those
// of categories.
func (l *loading) fillMean(worst []Gaps) error {
	var infinite, numbers []Gaps
	var cells int64
	category := map[string]bool{}
	for _, p := range l.predictors {
		if p.category != nil {
			category[p.Name] = true
		}
	}
	for _, g := range worst {
		if g.Infinite > 0 {
			infinite = append(infinite, Gaps{Column: g.Column, Infinite: g.Infinite})
		}
		if !category[g.Column] {
			numbers = append(numbers, g)
			cells += g.Total()
		}
	}
	if len(infinite) > 0 {
		sort.SliceStable(infinite, func(a, b int) bool { return infinite[a].Infinite > infinite[b].Infinite })
		return l.gapFault(infinite, fmt.Sprintf(
			"infinite values are never filled: %s; correct them, leave these columns out, or use missing = \"drop-rows\"", gapList(infinite)))
	}
	l.data.Missing = numbers
	if cells > 0 {
		l.note("fill-mean: %s in %s take%s the mean of the draw",
			plural(cells, "cell"), plural(int64(len(numbers)), "column"), thirdPerson(cells))
	}
	for _, p := range l.predictors {
		if c := p.category; c != nil && p.gaps.Missing > 0 {
			level := l.fillLevel(c)
			l.note("fill-mean: %s of category %s take%s its most frequent level, %s",
				plural(c.filled, "cell"), quote(p.Name), thirdPerson(c.filled), quote(level))
		}
	}
	return nil
}

// refusal is the text of the error under Refuse: which columns, and what each
// way out would keep.
func (l *loading) refusal(worst []Gaps) string {
	rows, lost := l.n-l.zero, l.lost()
	var b strings.Builder
	fmt.Fprintf(&b, "%s missing, NaN or infinite values: %s; ", plural(int64(len(worst)), "column has", "columns have"), gapList(worst))
	empty := 0
	infinite := false
	for _, g := range worst {
		infinite = infinite || g.Infinite > 0
		if g.Total() == int64(rows) {
			empty++
		}
	}
	p := len(l.predictors)
	fmt.Fprintf(&b, "leaving %s out keeps all %d rows and %d of %d columns; missing = \"drop-rows\" keeps %d rows",
		itThem(len(worst)), rows, p-len(worst), p, rows-lost)
	if empty > 0 {
		fmt.Fprintf(&b, " (without %s that %s no value at all)", plural(int64(empty), "column"), hasHave(empty))
	}
	if !infinite {
		fmt.Fprintf(&b, "; missing = \"fill-mean\" keeps everything and takes the draw's mean for the cells")
	}
	return b.String()
}

// gapList names the ten worst columns and says how many more there are.
func gapList(worst []Gaps) string {
	const most = 10
	var parts []string
	for _, g := range worst[:min(most, len(worst))] {
		var c []string
		if g.Missing > 0 {
			c = append(c, strconv.FormatInt(g.Missing, 10)+" missing")
		}
		if g.NaN > 0 {
			c = append(c, strconv.FormatInt(g.NaN, 10)+" NaN")
		}
		if g.Infinite > 0 {
			c = append(c, strconv.FormatInt(g.Infinite, 10)+" infinite")
		}
		parts = append(parts, quote(g.Column)+" ("+strings.Join(c, ", ")+")")
	}
	s := strings.Join(parts, ", ")
	if more := len(worst) - most; more > 0 {
		s += fmt.Sprintf(" and %d more", more)
	}
	return s
}

// rowsUsed lists the rows in use; nil if all are.
func (l *loading) rowsUsed() []int32 {
	if l.used == nil {
		return nil
	}
	var rows []int32
	for i := range l.n {
		if l.used[i>>6]>>(i&63)&1 == 1 {
			rows = append(rows, int32(i))
		}
	}
	return rows
}

// compact moves the rows in use to the front of a column and returns them.
func compact(v []float64, rows []int32) []float64 {
	if rows == nil {
		return v
	}
	for k, i := range rows {
		v[k] = v[i]
	}
	return v[:len(rows):len(rows)]
}

// fullMask has the bits 0..n-1 set.
func fullMask(n int) []uint64 {
	m := make([]uint64, (n+63)/64)
	for i := range m {
		m[i] = ^uint64(0)
	}
	if n&63 != 0 {
		m[len(m)-1] = 1<<(n&63) - 1
	}
	return m
}

// rowList names rows by their position in the table, from 0.
func rowList(rows []int) string {
	const most = 10
	var parts []string
	for _, r := range rows[:min(most, len(rows))] {
		parts = append(parts, strconv.Itoa(r))
	}
	if len(rows) == 1 {
		return "row " + parts[0] + " (rows are counted from 0)"
	}
	s := "rows " + strings.Join(parts, ", ")
	if more := len(rows) - most; more > 0 {
		s += fmt.Sprintf(" and %d more", more)
	}
	return s + " (rows are counted from 0)"
}

// plural writes a count and a word; two words give singular and plural.
func plural(n int64, word ...string) string {
	w := word[0]
	if n != 1 {
		if len(word) > 1 {
			w = word[1]
		} else {
			w += "s"
		}
	}
	return strconv.FormatInt(n, 10) + " " + w
}

func wasWere(n int64) string {
	if n == 1 {
		return "was"
	}
	return "were"
}

func thirdPerson(n int64) string {
	if n == 1 {
		return "s"
	}
	return ""
}

func hasHave(n int) string {
	if n == 1 {
		return "has"
	}
	return "have"
}

func itThem(n int) string {
	if n == 1 {
		return "it"
	}
	return "them"
}
