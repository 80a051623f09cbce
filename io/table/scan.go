package table

import (
	"context"
	"math"
)

// Summary is what a table holds, column by column.
type Summary struct {
	Rows    int64
	Outcome string // column that correlations and AUCs refer to; empty: none
	Columns []ColumnSummary

	Incomplete  int64 // rows with a gap in a column that is neither the outcome, nor empty, nor a suspected leak
	Repeats     int64 // rows equal to an earlier one in every column but labels and dates, where chance makes none
	OutcomeGaps []int // first rows without a finite value of the outcome, from 0
}

// mostGapRows is how many rows OutcomeGaps names.
const mostGapRows = 10

// ColumnSummary describes one column. Figures other than counts are NaN where
// they do not exist; they are taken over the finite values. For columns that
// are not numeric only Column is filled.
type ColumnSummary struct {
	Column
	Missing, NaN, Infinite int64
	Rounded                int64 // integers that float64 cannot hold exactly

	Min, Max, Mean float64
	SD             float64 // standard deviation, divisor n
	Distinct       int     // different values, counted up to DistinctLimit
	Constant       bool    // there are values, and all are equal
	Whole          bool    // all values are integers
	Unique         bool    // whole numbers, none missing, none twice: an identifier?
	RowNumber      bool    // counts up by 1 from row to row
	Monotone       bool    // rises, or falls, from every row to the next
	Values         []Value // the two values of a two-valued column, smaller first
	Dates          string  // how dates are written as numbers in this column, if they seem to be
	Serial         float64 // correlation of each value with that of the row before
	Correlation    float64 // with the outcome
	AUC            float64 // probability that a row with the outcome's larger value has the larger value here; two-valued outcomes only
	Leak           bool    // seems to be the outcome in other clothes: |Correlation| >= 0.98, or AUC beyond 0.95 either way
}

// Value is a value and how often it occurs.
type Value struct {
	Value float64
	Count int64
}

// DistinctLimit is where counting different values stops.
const DistinctLimit = 1000

// Thresholds at which a candidate is suspected to be the outcome itself.
const (
	LeakCorrelation = 0.98
	leakAUC         = 0.95
)

// Memory that a scan may take for columns at a time. Where every pass reads
// the whole file, passes are made few.
const (
	scanMemory        = 64 << 20
	scanMemoryRowwise = 512 << 20
)

// Scan reads all numeric columns, a few at a time, and describes them. outcome
// names the column that the others are compared with; empty for none. An
// outcome that is not numeric is an *Error, as is a table without rows.
func (s *Source) Scan(ctx context.Context, outcome string) (*Summary, error) {
	return s.scan(ctx, outcome, 0)
}

// scan is Scan with a limit to memory; 0: what the machine has free.
func (s *Source) scan(ctx context.Context, outcome string, limit int64) (*Summary, error) {
	if err := s.unchanged(); err != nil {
		return nil, err
	}
	sc := newScan(s, workersOr(0))
	if sc.n == 0 {
		return nil, faultf(s.path, "the table has no rows")
	}
	if sc.n > 1<<31-1 {
		return nil, faultf(s.path, "the table has %s rows: at most %s can be used", grouped(sc.n), grouped(1<<31-1))
	}
	if err := checkMemory(s.path, int(sc.n), 4*sc.workers+3, limit); err != nil {
		return nil, err
	}
	out := &Summary{Rows: sc.n, Outcome: outcome, Columns: make([]ColumnSummary, len(s.format.columns()))}
	if outcome != "" {
		if err := sc.readOutcome(ctx, outcome); err != nil {
			return nil, err
		}
	}
	var numeric []int
	for k, c := range s.format.columns() {
		nan := math.NaN()
		out.Columns[k] = ColumnSummary{Column: c, Min: nan, Max: nan, Mean: nan, SD: nan, Serial: nan, Correlation: nan, AUC: nan}
		if c.Usable {
			numeric = append(numeric, k)
		}
	}
	if err := sc.columns(ctx, numeric, out); err != nil {
		return nil, err
	}
	summarise(out, sc.marks)
	out.OutcomeGaps = sc.target.gaps(mostGapRows)
	return out, nil
}

// scan is a Scan under way.
type scan struct {
	src     *Source
	n       int64
	workers int
	target  *target     // nil without an outcome
	marks   []*rowMarks // per worker; nil: it had no column
}

func newScan(s *Source, workers int) *scan {
	return &scan{src: s, n: s.format.rows(), workers: workers, marks: make([]*rowMarks, workers)}
}

// columns reads the columns in batches.
func (sc *scan) columns(ctx context.Context, numeric []int, out *Summary) error {
	memory := int64(scanMemory)
	if sc.src.format.rowwise() {
		memory = scanMemoryRowwise
	}
	batch := int(max(memory/(8*sc.n), int64(sc.workers)))
	scratch := make([][]float64, sc.workers)
	var values [][]float64
	for len(numeric) > 0 {
		cols := numeric[:min(batch, len(numeric))]
		numeric = numeric[len(cols):]
		if values == nil {
			values = newColumns(int(sc.n), len(cols))
		}
		rd, err := sc.src.format.fill(ctx, cols, values[:len(cols)], sc.workers)
		if err != nil {
			return err
		}
		err = parallel(ctx, sc.workers, len(cols), func(w, i int) error {
			if scratch[w] == nil {
				scratch[w] = make([]float64, sc.n)
			}
			if sc.marks[w] == nil {
				sc.marks[w] = newRowMarks(sc.n)
			}
			c := &out.Columns[cols[i]]
			c.Rounded = rd[i].count
			describe(c, values[i], scratch[w])
			sc.compare(c, values[i], scratch[w])
			sc.marks[w].add(cols[i], c, values[i], c.Name == out.Outcome)
			return nil
		})
		if err != nil {
			return err
		}
	}
	return nil
}

// readOutcome reads the outcome and prepares the comparison with it.
func (sc *scan) readOutcome(ctx context.Context, outcome string) error {
	for k, c := range sc.src.format.columns() {
		if c.Name != outcome {
			continue
		}
		if !c.Usable {
			return columnFaultf(sc.src.path, outcome, "cannot be the outcome: %s", c.Reason)
		}
		values := newColumns(int(sc.n), 1)
		if _, err := sc.src.format.fill(ctx, []int{k}, values, sc.workers); err != nil {
			return err
		}
		sc.target = newTarget(outcome, values[0])
		return nil
	}
	return faultf(sc.src.path, "there is no column called %s (asked for as the outcome)", quote(outcome))
}
