package table

import (
	"context"
	"fmt"
	"sync"
	"sync/atomic"

	"holdfast/solver"
)

// Load reads the columns that a fit needs, all rows of them, and centres
// them. Memory taken: 8 bytes per row and column, and a bounded workspace per
// worker. Whatever is wrong with the table or the request is an *Error.
func (s *Source) Load(ctx context.Context, r Request) (*Data, error) {
	l := &loading{src: s, req: r, workers: workersOr(r.Workers)}
	for _, step := range []func(context.Context) error{
		l.choose, l.read, l.weigh, l.checkOutcome, l.countGaps, l.applyPolicy, l.finish,
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

// loading is a Load under way. Columns are numbered as they are read:
// candidates, always, then outcome and weight where asked for.
type loading struct {
	src     *Source
	req     Request
	workers int
	cols    []Column
	from    []int // position in the table of each column
	p       int   // candidates and always
	n       int   // rows of the table
	values  [][]float64
	rounded []rounded
	used    []uint64 // rows that count, before missing values are looked at; nil: all
	zero    int      // rows of weight 0
	gaps    []Gaps   // per candidate and always
	holed   []uint64 // rows in which any of those has a gap
	data    *Data
}

func (l *loading) path() string { return l.src.path }

// choose finds the columns asked for and refuses what cannot be had.
func (l *loading) choose(context.Context) error {
	l.data = &Data{}
	if o := l.req.Outcome; o.Measure != AsNumber || o.Offset != "" || o.Exposure != "" || len(l.req.Categories) > 0 || len(l.req.Within) > 0 {
		return faultf(l.path(), "only an outcome that is a number, and columns of numbers, are read by this version")
	}
	if err := l.checkRows(); err != nil {
		return err
	}
	all := l.src.format.columns()
	at := make(map[string]int, len(all))
	for i, c := range all {
		at[c.Name] = i
	}
	taken := map[string]string{}
	pick := func(role, name string) error {
		i, ok := at[name]
		if !ok {
			return faultf(l.path(), "there is no column called %s (asked for as %s)", quote(name), role)
		}
		if other, twice := taken[name]; twice {
			return columnFaultf(l.path(), name, "cannot be %s and %s at once", other, role)
		}
		taken[name] = role
		if !all[i].Usable {
			return columnFaultf(l.path(), name, "cannot be %s: %s", role, all[i].Reason)
		}
		l.from, l.cols = append(l.from, i), append(l.cols, all[i])
		return nil
	}
	if len(l.req.Candidates) == 0 {
		return &Error{Path: l.path(), Why: l.noCandidates(all)}
	}
	for _, name := range l.req.Candidates {
		if err := pick("a candidate", name); err != nil {
			return err
		}
	}
	for _, name := range l.req.Always {
		if err := pick("an always-in column", name); err != nil {
			return err
		}
	}
	l.p = len(l.from)
	if l.req.Outcome.Column != "" {
		if err := pick("the outcome", l.req.Outcome.Column); err != nil {
			return err
		}
	}
	if l.req.Weight != "" {
		if err := pick("the case weight", l.req.Weight); err != nil {
			return err
		}
	}
	return checkMemory(l.path(), l.n, len(l.from), l.req.Memory)
}

// noCandidates explains a table or a request without candidates.
func (l *loading) noCandidates(all []Column) string {
	for _, c := range all {
		if c.Usable && c.Name != l.req.Outcome.Column && c.Name != l.req.Weight {
			return "no candidate column was asked for"
		}
	}
	for _, c := range all {
		if !c.Usable {
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

// read fills one block of memory, column after column.
func (l *loading) read(ctx context.Context) error {
	if err := l.src.unchanged(); err != nil {
		return err
	}
	l.values = newColumns(l.n, len(l.from))
	var err error
	l.rounded, err = l.src.format.fill(ctx, l.from, l.values, l.workers)
	if err != nil {
		return err
	}
	for i, r := range l.rounded {
		if r.count > 0 {
			l.data.Notes = append(l.data.Notes, fmt.Sprintf(
				"column %s: %s cannot be held exactly and %s rounded to the nearest float64 (the first in row %d)",
				quote(l.cols[i].Name), plural(r.count, "integer"), wasWere(r.count), r.first))
		}
	}
	return nil
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
	if l.req.Weight == "" {
		return nil
	}
	w := l.values[len(l.values)-1]
	if err := l.checkComplete(l.req.Weight, "case weight", w); err != nil {
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
		l.data.Notes = append(l.data.Notes, fmt.Sprintf("%s of weight 0 %s left out", plural(int64(l.zero), "row"), wasWere(int64(l.zero))))
	}
	if l.n-l.zero < 2 {
		return columnFaultf(l.path(), l.req.Weight, "only %s a weight above 0", plural(int64(l.n-l.zero), "row has", "rows have"))
	}
	return nil
}

// checkOutcome refuses an outcome with anything but finite numbers.
func (l *loading) checkOutcome(context.Context) error {
	if l.req.Outcome.Column == "" {
		return nil
	}
	return l.checkComplete(l.req.Outcome.Column, "outcome", l.values[l.p])
}

// checkComplete names the rows in use in which a column has no finite number.
func (l *loading) checkComplete(name, role string, v []float64) error {
	var absent, bad []int
	for i, x := range v {
		switch {
		case !notFinite(x) || l.used != nil && l.used[i>>6]>>(i&63)&1 == 0:
		case isMissing(x):
			absent = append(absent, i)
		default:
			bad = append(bad, i)
		}
	}
	advice := "complete it, or leave these rows out of the table (it is never filled)"
	switch {
	case len(absent) > 0:
		return columnFaultf(l.path(), name, "the %s is missing in %s: %s", role, rowList(absent), advice)
	case len(bad) > 0:
		return columnFaultf(l.path(), name, "the %s is NaN or infinite in %s: %s", role, rowList(bad), advice)
	}
	return nil
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

// finish compacts, fingerprints and centres the columns.
func (l *loading) finish(ctx context.Context) error {
	rows := l.rowsUsed()
	n := l.n
	if rows != nil {
		n = len(rows)
		l.data.Rows = rows
	}
	digests := make([][32]byte, len(l.values))
	holes := make([][]uint64, l.p)
	l.data.Centre, l.data.Deviation = make([]float64, l.p), make([]float64, l.p)
	buffers := make([][]byte, l.workers)
	err := l.each(ctx, len(l.values), func(w, j int) error {
		if buffers[w] == nil {
			buffers[w] = make([]byte, digestBlock*8)
		}
		v := compact(l.values[j], rows)
		l.values[j] = v
		digests[j] = digest(v, buffers[w])
		if j >= l.p {
			return nil
		}
		c, ok := centreOf(v)
		if !ok {
			return columnFaultf(l.path(), l.cols[j].Name, "values are too far apart for float64: rescale the column")
		}
		l.data.Centre[j] = c
		holes[j] = centre(v, c)
		l.data.Deviation[j] = deviation(v)
		return nil
	})
	if err != nil {
		return err
	}
	l.assemble(n, digests, holes)
	return nil
}

// assemble puts the finished columns where the caller finds them.
func (l *loading) assemble(n int, digests [][32]byte, holes [][]uint64) {
	d, c := l.data, len(l.req.Candidates)-len(l.data.Excluded)
	d.Candidates, d.Always = names(l.cols[:c]), names(l.cols[c:l.p])
	masks := map[int32][]uint64{}
	for j, m := range holes {
		if m != nil {
			masks[int32(j)] = m
		}
	}
	if len(masks) == 0 {
		masks = nil
	}
	d.Names = names(l.cols[:l.p])
	for j := range l.p {
		if j < c {
			d.CandidateColumns = append(d.CandidateColumns, []int32{int32(j)})
		} else {
			d.AlwaysColumns = append(d.AlwaysColumns, []int32{int32(j)})
		}
	}
	d.X = solver.NewDense(n, l.values[:l.p:l.p], masks)
	rest := l.values[l.p:]
	if l.req.Outcome.Column != "" {
		d.Outcome, rest = append([]float64(nil), rest[0]...), rest[1:]
	}
	if l.req.Weight != "" {
		d.Weight = append([]float64(nil), rest[0]...)
	}
	d.Fingerprint = fingerprint(l.n, d.Rows, l.roles(c), names(l.cols), digests)
}

// roles returns one letter per column read.
func (l *loading) roles(candidates int) []byte {
	roles := make([]byte, 0, len(l.cols))
	for j := range l.p {
		if j < candidates {
			roles = append(roles, 'c')
		} else {
			roles = append(roles, 'a')
		}
	}
	if l.req.Outcome.Column != "" {
		roles = append(roles, 'o')
	}
	if l.req.Weight != "" {
		roles = append(roles, 'w')
	}
	return roles
}

func names(cols []Column) []string {
	out := make([]string, len(cols))
	for i, c := range cols {
		out[i] = c.Name
	}
	return out
}
