package table

import (
	"context"
	"fmt"
	"slices"
	"sync"
	"sync/atomic"
)

// Load reads the columns that a fit needs, all rows of them, and centres
// them. Memory taken: 8 bytes per row and column of X, and of the outcome and
// what belongs to it; 4 bytes per row and column that is read by its levels
// while it lasts; and a bounded workspace per worker. Whatever is wrong with
// the table or the request is an *Error.
func (s *Source) Load(ctx context.Context, r Request) (*Data, error) {
	l := &loading{src: s, req: r, workers: workersOr(r.Workers)}
	for _, step := range []func(context.Context) error{
		l.choose, l.read, l.weigh, l.findLevels, l.checkOutcome, l.countGaps, l.applyPolicy, l.finish,
	} {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		if err := step(ctx); err != nil {
			return nil, err
		}
	}
	return l.data, nil
}

// loading is a Load under way.
type loading struct {
	src     *Source
	req     Request
	workers int
	n       int // rows of the table

	columns    []*column // all that are read, each once, predictors first
	byName     map[string]*column
	roles      map[string]string // of the columns that may have only one
	predictors []*predictor      // candidates, then always; those left out are gone
	outcome    outcome
	weight     *column
	within     []*column // nil for the outcome

	withinParts []coding // per column of within: its levels over the rows used

	used  []uint64 // rows that count; nil: all
	zero  int      // rows of weight 0
	holed []uint64 // rows in which a predictor has a gap
	data  *Data
}

// column is a column of the table that is read.
type column struct {
	Column
	at      int       // position in the table
	most    int       // levels that are wanted of it; 0: none are
	inX     bool      // its numbers become a column of X
	values  []float64 // of numbers
	texts   *texts    // of text
	rounded rounded
}

// predictor is a candidate or an always-in column.
type predictor struct {
	*column
	always   bool
	category bool
	levels   coding // of a category
	gaps     Gaps
	filled   int64 // gaps of a category that took a level
}

func (p *predictor) role() string {
	if p.always {
		return "an always-in column"
	}
	return "a candidate"
}

func (l *loading) path() string { return l.src.path }

// choose finds the columns asked for and refuses what cannot be had.
func (l *loading) choose(context.Context) error {
	l.data = &Data{}
	l.byName, l.roles = map[string]*column{}, map[string]string{}
	if err := l.checkRows(); err != nil {
		return err
	}
	if len(l.req.Candidates) == 0 {
		return &Error{Path: l.path(), Why: l.noCandidates(l.src.format.columns())}
	}
	positions := make(map[string]int, len(l.src.format.columns()))
	for i, c := range l.src.format.columns() {
		positions[c.Name] = i
	}
	ask := asking{l, positions}
	for _, step := range []func() error{ask.predictors, ask.outcome, ask.weight, ask.within} {
		if err := step(); err != nil {
			return err
		}
	}
	return l.checkCells(0)
}

// asking looks the columns of a request up.
type asking struct {
	*loading
	positions map[string]int // of every column of the table
}

// only is column for a column that has no other role.
func (l asking) only(role, name string, most int) (*column, error) {
	if other, twice := l.roles[name]; twice {
		return nil, columnFaultf(l.path(), name, "cannot be %s and %s at once", other, role)
	}
	c, err := l.column(role, name, most)
	if err == nil {
		l.roles[name] = role
	}
	return c, err
}

// column returns a column of the table, noted to be read: as numbers, or by at
// most so many levels.
func (l asking) column(role, name string, most int) (*column, error) {
	at, ok := l.positions[name]
	if !ok {
		return nil, faultf(l.path(), "there is no column called %s (asked for as %s)", quote(name), role)
	}
	found := l.src.format.columns()[at]
	switch {
	case most == 0 && found.Kind == Text:
		return nil, columnFaultf(l.path(), name, "cannot be %s: %s, and a number is needed", role, found.Reason)
	case most == 0 && !found.Usable, !found.levelled():
		return nil, columnFaultf(l.path(), name, "cannot be %s: %s", role, found.Reason)
	}
	c := l.byName[name]
	if c == nil {
		c = &column{Column: found, at: at}
		l.byName[name], l.columns = c, append(l.columns, c)
	}
	c.most = max(c.most, most)
	return c, nil
}

// predictors finds candidates and always-in columns.
func (l asking) predictors() error {
	for i, name := range slices.Concat(l.req.Candidates, l.req.Always) {
		p := &predictor{always: i >= len(l.req.Candidates), category: slices.Contains(l.req.Categories, name)}
		at, known := l.positions[name]
		p.category = p.category || known && l.src.format.columns()[at].Kind == Text
		most := 0
		if p.category {
			most = MostLevels
		}
		var err error
		if p.column, err = l.only(p.role(), name, most); err != nil {
			return err
		}
		p.inX = !p.category
		l.loading.predictors = append(l.loading.predictors, p)
	}
	return l.checkCategories()
}

// weight finds the column of case weights.
func (l asking) weight() (err error) {
	if l.req.Weight != "" {
		l.loading.weight, err = l.only("the case weight", l.req.Weight, 0)
	}
	return err
}

// noCandidates explains a table or a request without candidates.
func (l *loading) noCandidates(all []Column) string {
	for _, c := range all {
		if c.levelled() && c.Name != l.req.Outcome.Column && c.Name != l.req.Weight {
			return "no candidate column was asked for"
		}
	}
	for _, c := range all {
		if !c.levelled() {
			return fmt.Sprintf("no column is left that could be a candidate (%s: %s)", quote(c.Name), c.Reason)
		}
	}
	return "no column is left that could be a candidate"
}

// checkRows refuses tables without enough rows, and with too many.
func (l *loading) checkRows() error {
	const most = 1<<31 - 1 // rows are numbered in 32 bits
	switch n := l.src.format.rows(); {
	case n == 0:
		return faultf(l.path(), "the table has no rows")
	case n == 1:
		return faultf(l.path(), "the table has a single row: nothing can be learned from it")
	case n > most:
		return faultf(l.path(), "the table has %s rows: at most %s can be used", grouped(n), grouped(most))
	default:
		l.n = int(n)
	}
	return nil
}

// checkCells refuses a table that cannot be held: the columns that are read,
// and so many indicator columns, which are made when the others are there.
func (l *loading) checkCells(indicators int) error {
	if indicators > 0 && l.req.Memory <= 0 {
		return checkMemory(l.path(), l.n, indicators, 0)
	}
	numbers, halves := indicators, 0
	for _, c := range l.columns {
		if c.Kind != Text {
			numbers++
		}
		if c.most > 0 { // codes take half as much
			halves++
		}
	}
	return checkMemory(l.path(), l.n, numbers+(halves+1)/2, l.req.Memory)
}

// read fills one block of memory with what becomes X, column after column, and
// others with the rest.
func (l *loading) read(ctx context.Context) error {
	if err := l.src.unchanged(); err != nil {
		return err
	}
	inX, beside := 0, 0
	for _, c := range l.columns {
		switch {
		case c.Kind == Text:
			c.texts = newTexts(l.n, c.most)
		case c.inX:
			inX++
		default:
			beside++
		}
	}
	block, rest := newColumns(l.n, inX), newColumns(l.n, beside)
	sinks := make([]sink, len(l.columns))
	for i, c := range l.columns {
		switch {
		case c.texts != nil:
		case c.inX:
			c.values, block = block[0], block[1:]
		default:
			c.values, rest = rest[0], rest[1:]
		}
		sinks[i] = sink{col: c.at, values: c.values, texts: c.texts}
	}
	found, err := l.src.format.fill(ctx, sinks, l.workers)
	if err != nil {
		return err
	}
	for i, r := range found {
		l.columns[i].rounded = r
		if r.count > 0 {
			l.note("column %s: %s cannot be held exactly and %s rounded to the nearest float64 (the first in row %d)",
				quote(l.columns[i].Name), plural(r.count, "integer"), wasWere(r.count), r.first)
		}
	}
	return nil
}

// note adds a sentence that the user should read.
func (l *loading) note(format string, args ...any) {
	l.data.Notes = append(l.data.Notes, fmt.Sprintf(format, args...))
}

// newColumns returns p slices of n values that lie one behind the other.
func newColumns(n, p int) [][]float64 {
	block := make([]float64, n*p)
	cols := make([][]float64, p)
	for j := range cols {
		cols[j] = block[j*n : (j+1)*n : (j+1)*n]
	}
	return cols
}

// weigh checks the case weights and takes rows of weight 0 out of use.
func (l *loading) weigh(context.Context) error {
	l.data.TableRows = l.n
	if l.weight == nil {
		return nil
	}
	w := l.weight.values
	if err := l.checkComplete(l.weight, "case weight", w); err != nil {
		return err
	}
	var negative []int
	l.used = make([]uint64, (l.n+63)/64)
	for i, v := range w {
		switch {
		case v < 0:
			negative = append(negative, i)
		case v == 0:
			l.zero++
		default:
			l.used[i>>6] |= 1 << (i & 63)
		}
	}
	if len(negative) > 0 {
		return columnFaultf(l.path(), l.req.Weight, "a case weight is negative in %s: weights are 0 or more", rowList(negative))
	}
	if l.zero == 0 {
		l.used = nil
	} else {
		l.note("%s of weight 0 %s left out", plural(int64(l.zero), "row"), wasWere(int64(l.zero)))
	}
	if l.n-l.zero < 2 {
		return columnFaultf(l.path(), l.req.Weight, "only %s a weight above 0", plural(int64(l.n-l.zero), "row has", "rows have"))
	}
	return nil
}

// inUse reports whether row i counts.
func (l *loading) inUse(i int) bool { return l.used == nil || l.used[i>>6]>>(i&63)&1 == 1 }

// checkComplete names the rows in use in which a column has no finite number.
func (l *loading) checkComplete(c *column, role string, v []float64) error {
	var absent, bad []int
	for i, x := range v {
		switch {
		case !notFinite(x) || !l.inUse(i):
		case isMissing(x):
			absent = append(absent, i)
		default:
			bad = append(bad, i)
		}
	}
	switch {
	case len(absent) > 0:
		return l.incomplete(c, role, "missing", absent)
	case len(bad) > 0:
		return l.incomplete(c, role, "NaN or infinite", bad)
	}
	return nil
}

func (l *loading) incomplete(c *column, role, what string, rows []int) error {
	return columnFaultf(l.path(), c.Name, "the %s is %s in %s: complete it, or leave these rows out of the table (it is never filled)",
		role, what, rowList(rows))
}

// each runs work for 0..count-1 on the workers; every worker has an own
// number below l.workers.
func (l *loading) each(ctx context.Context, count int, work func(worker, i int) error) error {
	return parallel(ctx, l.workers, count, work)
}

// parallel runs work for 0..count-1 on several goroutines. Numbers are handed
// out in order, and of several errors the one with the smallest number is
// returned, so that the same table always gives the same message.
func parallel(ctx context.Context, workers, count int, work func(worker, i int) error) error {
	var next atomic.Int64
	var first firstError
	var wait sync.WaitGroup
	for w := range min(workers, count) {
		wait.Go(func() {
			for !first.is() && ctx.Err() == nil {
				i := int(next.Add(1)) - 1
				if i >= count {
					return
				}
				if err := work(w, i); err != nil {
					first.note(int64(i), err)
				}
			}
		})
	}
	wait.Wait()
	if first.err != nil {
		return first.err
	}
	return ctx.Err()
}
