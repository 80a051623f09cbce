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
// they do not exist; they are taken over the finite values. Of text there are
// Missing, Distinct, Constant, Levels, NoLevels, Correlation, AUC and Leak; of
// columns that are neither numeric nor text only Column.
type ColumnSummary struct {
	Column
	Missing, NaN, Infinite int64
	Rounded                int64 // integers that float64 cannot hold exactly

	Min, Max, Mean float64
	SD             float64 // standard deviation, divisor n
	Distinct       int     // different values, counted up to DistinctLimit; of text up to MostLevels+1
	Constant       bool    // there are values, and all are equal
	Whole          bool    // all values are integers
	Unique         bool    // whole numbers, none missing, none twice: an identifier?
	RowNumber      bool    // counts up by 1 from row to row
	Monotone       bool    // rises, or falls, from every row to the next
	Values         []Value // the two values of a two-valued column of numbers, smaller first
	Levels         []Level // of text, two-valued columns and the outcome: values in byte order (numbers: by size), if at most MostLevels
	NoLevels       string  // of text: why it has no levels
	Dates          string  // how dates are written as numbers in this column, if they seem to be
	Serial         float64 // correlation of each value with that of the row before
	Correlation    float64 // with the outcome; where one of them is text of more than two levels: see relation.go
	AUC            float64 // probability that a row with the outcome's larger value has the larger value here; outcomes of two values only
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

// Scan reads all columns of numbers and of text, a few at a time, and describes
// them. outcome names the column that the others are compared with; empty for
// none. An outcome that is neither is an *Error, as are one of text with more
// than MostLevels levels and a table without rows.
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
	var readable []int
	for k, c := range s.format.columns() {
		nan := math.NaN()
		out.Columns[k] = ColumnSummary{Column: c, Min: nan, Max: nan, Mean: nan, SD: nan, Serial: nan, Correlation: nan, AUC: nan}
		if c.levelled() {
			readable = append(readable, k)
		}
	}
	if err := sc.columns(ctx, readable, out); err != nil {
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
func (sc *scan) columns(ctx context.Context, readable []int, out *Summary) error {
	memory := int64(scanMemory)
	if sc.src.format.rowwise() {
		memory = scanMemoryRowwise
	}
	batch := int(max(memory/(8*sc.n), int64(sc.workers)))
	scratch := make([][]float64, sc.workers)
	var values [][]float64
	for len(readable) > 0 {
		cols := readable[:min(batch, len(readable))]
		readable = readable[len(cols):]
		if values == nil {
			values = newColumns(int(sc.n), len(cols))
		}
		sinks := make([]sink, len(cols))
		for i, k := range cols {
			sinks[i] = sink{col: k, values: values[i]}
			if out.Columns[k].Kind == Text {
				sinks[i].texts = newTexts(int(sc.n), MostLevels)
			}
		}
		rd, err := sc.src.format.fill(ctx, sinks, sc.workers)
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
			if sinks[i].texts != nil {
				sc.text(c, sinks[i].texts, values[i], scratch[w])
			} else {
				describe(c, values[i], scratch[w])
				c.listLevels(values[i], c.Name == out.Outcome)
				sc.compare(c, values[i], scratch[w])
			}
			if c.NoLevels == "" {
				sc.marks[w].add(cols[i], c, values[i], c.Name == out.Outcome)
			}
			return nil
		})
		if err != nil {
			return err
		}
	}
	return nil
}

// text describes a column of text. Its codes are left in values.
func (sc *scan) text(c *ColumnSummary, t *texts, values, scratch []float64) {
	levels, fault := t.coding(MostLevels)
	if fault != "" {
		c.NoLevels = fault
		if t.full.Load() {
			c.Distinct = MostLevels + 1
		}
		return
	}
	c.Levels, c.Distinct, c.Constant = levels.levels(), len(levels.names), len(levels.names) == 1
	codesAsNumbers(levels, values)
	for _, k := range levels.codes {
		if k < 0 {
			c.Missing++
		}
	}
	sc.compareText(c, levels, values, scratch)
}

// listLevels lists the values of a two-valued column, and of the outcome.
func (c *ColumnSummary) listLevels(v []float64, outcome bool) {
	switch {
	case len(c.Values) == 2:
		for _, x := range c.Values {
			c.Levels = append(c.Levels, Level{levelOfNumber(x.Value, c.Kind), x.Count})
		}
	case outcome:
		if levels, fault := codeNumbers(v, c.Kind, MostLevels); fault == "" {
			c.Levels = levels.levels()
		}
	}
}

// readOutcome reads the outcome and prepares the comparison with it.
func (sc *scan) readOutcome(ctx context.Context, outcome string) error {
	for k, c := range sc.src.format.columns() {
		if c.Name != outcome {
			continue
		}
		if !c.levelled() {
			return columnFaultf(sc.src.path, outcome, "cannot be the outcome: %s", c.Reason)
		}
		s := sink{col: k, values: make([]float64, sc.n)}
		if c.Kind == Text {
			s.texts = newTexts(int(sc.n), MostLevels)
		}
		if _, err := sc.src.format.fill(ctx, []sink{s}, sc.workers); err != nil {
			return err
		}
		if s.texts == nil {
			sc.target = newTarget(outcome, s.values)
			return nil
		}
		levels, fault := s.texts.coding(MostLevels)
		if fault != "" {
			return columnFaultf(sc.src.path, outcome, "cannot be the outcome: %s", fault)
		}
		sc.target = newTextTarget(outcome, levels, s.values)
		return nil
	}
	return faultf(sc.src.path, "there is no column called %s (asked for as the outcome)", quote(outcome))
}
