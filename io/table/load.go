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
		l.choose, l.read, l.weigh, l.dropIncomplete, l.findLevels, l.checkOutcome, l.countGaps, l.applyPolicy, l.finish,
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

	columns    []column    // all that are read, each once, predictors first; never grown, so that pointers hold
	predictors []predictor // candidates, then always; those left out are gone
	outcome    outcome
	weight     *column
	within     []*column // nil for the outcome

	withinParts []coding // per column of within: its levels over the rows used

	used  []uint64 // rows that count; nil: all
	zero  int      // rows of weight 0
	holed []uint64 // rows in which a predictor has a gap

	roleGaps []Gaps // DropRows: of the columns that are no predictors, worst first
	dropped  int    // rows that have one of them, out of use

	data *Data
}

// column is a column of the table that is read. There may be a hundred thousand
// of it and of predictor, so they are kept small.
type column struct {
	*Column
	at     int32     // position in the table
	most   int32     // levels that are wanted of it; 0: none are
	inX    bool      // its numbers become a column of X
	role   string    // empty: none that excludes others
	values []float64 // of numbers
	texts  *texts    // of text
}

// predictor is a candidate or an always-in column.
type predictor struct {
	*column
	always   bool
	category *category // nil for a column of numbers
	gaps     Gaps
}

// category is what is known of a predictor that is read by its levels.
type category struct {
	levels coding
	filled int64 // gaps that took a level
}

// title names the predictor's role.
func (p *predictor) title() string {
	if p.always {
		return "an always-in column"
	}
	return "a candidate"
}

func (l *loading) path() string { return l.src.path }

// choose finds the columns asked for and refuses what cannot be had.
func (l *loading) choose(context.Context) error {
	l.data = &Data{}
	if err := l.checkRows(); err != nil {
		return err
	}
	if len(l.req.Candidates) == 0 {
		return &Error{Path: l.path(), Why: l.noCandidates(l.src.format.columns())}
	}
	all := l.src.format.columns()
	ask := asking{loading: l, positions: make(map[string]int32, len(all)), asked: make([]*column, len(all))}
	for i := range all {
		ask.positions[all[i].Name] = int32(i)
	}
	const others = 7 // columns of an outcome, and the weight
	l.columns = make([]column, 0, len(l.req.Candidates)+len(l.req.Always)+len(l.req.Outcome.Strata)+len(l.req.Within)+others)
	l.predictors = make([]predictor, 0, len(l.req.Candidates)+len(l.req.Always))
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
	positions map[string]int32 // of every column of the table
	asked     []*column        // by position: what is read of it
}

// only is column for a column that has no other role.
func (l asking) only(role, name string, most int) (*column, error) {
	if at, known := l.positions[name]; known && l.asked[at] != nil && l.asked[at].role != "" {
		return nil, columnFaultf(l.path(), name, "cannot be %s and %s at once", l.asked[at].role, role)
	}
	c, err := l.column(role, name, most)
	if err == nil {
		c.role = role
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
	found := &l.src.format.columns()[at]
	switch {
	case most == 0 && found.Kind == Text:
		return nil, columnFaultf(l.path(), name, "cannot be %s: %s, and a number is needed", role, found.Reason)
	case most == 0 && !found.Usable, !found.levelled():
		return nil, columnFaultf(l.path(), name, "cannot be %s: %s", role, found.Reason)
	}
	if l.asked[at] == nil {
		l.columns = append(l.columns, column{Column: found, at: at})
		l.asked[at] = &l.columns[len(l.columns)-1]
	}
	c := l.asked[at]
	c.most = max(c.most, int32(most))
	return c, nil
}

// predictors finds candidates and always-in columns.
func (l asking) predictors() error {
	categories := make(map[string]bool, len(l.req.Categories))
	for _, name := range l.req.Categories {
		categories[name] = true
	}
	for i, name := range slices.Concat(l.req.Candidates, l.req.Always) {
		p := predictor{always: i >= len(l.req.Candidates)}
		most := 0
		if at, known := l.positions[name]; categories[name] || known && l.src.format.columns()[at].Kind == Text {
			p.category, most = &category{}, MostLevels
		}
		var err error
		if p.column, err = l.only(p.title(), name, most); err != nil {
			return err
		}
		p.inX = p.category == nil
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
	for i := range l.columns {
		c := &l.columns[i]
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
	for i := range l.columns {
		switch c := &l.columns[i]; {
		case c.Kind == Text:
			c.texts = newTexts(l.n, int(c.most))
		case c.inX:
			inX++
		default:
			beside++
		}
	}
	block, rest := newColumns(l.n, inX), newColumns(l.n, beside)
	sinks := make([]sink, len(l.columns))
	for i := range l.columns {
		c := &l.columns[i]
		switch {
		case c.texts != nil:
		case c.inX:
			c.values, block = block[0], block[1:]
		default:
			c.values, rest = rest[0], rest[1:]
		}
		sinks[i] = sink{col: int(c.at), values: c.values, texts: c.texts}
	}
	found, err := l.src.format.fill(ctx, sinks, l.workers)
	if err != nil {
		return err
	}
	for i, r := range found {
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
	if l.req.Missing != DropRows {
		if err := l.checkComplete(l.weight, "case weight", w); err != nil {
			return err
		}
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
	return columnFaultf(l.path(), c.Name, "the %s is %s in %s: complete it, or leave these rows out with missing = \"drop-rows\" (it is never filled)",
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
