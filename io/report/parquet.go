package report

import (
	"errors"
	"fmt"
	"io"
	"iter"
	"slices"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/apache/arrow/go/v17/parquet/pqarrow"

	"holdfast/selection"
)

// WriteStabilityParquet writes the stability table as Parquet, every candidate
// a row.
func WriteStabilityParquet(w io.Writer, j *selection.Judgement) error {
	return writeParquet(w, stabilityColumns, slices.Values(j.Rows))
}

// WriteTerms writes terms.parquet: a row for every term and class of the
// predictors that have no coefficient of their own in the stability table,
// chosen or not. A coefficient stands in one of the two tables and never in
// both, so without groups, categories and classes this one has its columns and
// no row.
func WriteTerms(w io.Writer, j *selection.Judgement) error {
	return writeParquet(w, termColumns, j.Terms())
}

// writeParquet writes rows as Parquet.
func writeParquet[R any](w io.Writer, columns []column[R], list iter.Seq[R]) error {
	fields := make([]arrow.Field, len(columns))
	for i, c := range columns {
		fields[i] = c.kind.field(c.name)
	}
	t := newTable(w, fields)
	for r := range list {
		for i, c := range columns {
			t.add(i, c.value(&r))
		}
		t.endRow()
	}
	return t.close()
}

// WritePaths writes the stability paths as Parquet: step, lambda, predictor,
// frequency, draws_reached. lambda gives the penalty at a lattice step.
func WritePaths(w io.Writer, j *selection.Judgement, lambda func(step int) float64) error {
	t := newTable(w, []arrow.Field{
		whole.field("step"), real.required("lambda"), text.field("predictor"),
		real.required("frequency"), whole.field("draws_reached"),
	})
	for row := range j.Paths() {
		t.add(0, int64(row.Step))
		t.add(1, lambda(row.Step))
		t.add(2, row.Predictor)
		t.add(3, row.Frequency)
		t.add(4, int64(row.DrawsReached))
		t.endRow()
	}
	return t.close()
}

// field is the Arrow field of a column: numbers may be undefined.
func (k kind) field(name string) arrow.Field {
	switch k {
	case real:
		return arrow.Field{Name: name, Type: arrow.PrimitiveTypes.Float64, Nullable: true}
	case yesNo:
		return arrow.Field{Name: name, Type: arrow.FixedWidthTypes.Boolean}
	case whole:
		return arrow.Field{Name: name, Type: arrow.PrimitiveTypes.Int64}
	case optionalText:
		return arrow.Field{Name: name, Type: arrow.BinaryTypes.String, Nullable: true}
	}
	return arrow.Field{Name: name, Type: arrow.BinaryTypes.String}
}

func (k kind) required(name string) arrow.Field {
	f := k.field(name)
	f.Nullable = false
	return f
}

// batch is how many rows are held before they are written as a row group.
const batch = 1 << 16

// table writes rows as Parquet, a row group at a time, and keeps the first
// error. Nothing is compressed, since other versions of a compressor give
// other bytes; dictionaries keep repeated names and frequencies small.
type table struct {
	sink   *sink
	schema *arrow.Schema
	build  *array.RecordBuilder
	out    *pqarrow.FileWriter
	rows   int
	err    error
}

func newTable(w io.Writer, fields []arrow.Field) *table {
	t := &table{sink: &sink{w: w}, schema: arrow.NewSchema(fields, nil)}
	t.build = array.NewRecordBuilder(memory.DefaultAllocator, t.schema)
	t.try(func() error {
		var err error
		t.out, err = pqarrow.NewFileWriter(t.schema, t.sink, parquet.NewWriterProperties(
			parquet.WithCreatedBy("holdfast"),
			parquet.WithVersion(parquet.V2_LATEST),
			parquet.WithRootRepetition(parquet.Repetitions.Required), // other readers take the library's default for a list
			parquet.WithCompression(compress.Codecs.Uncompressed),
			parquet.WithMaxRowGroupLength(batch),
		), pqarrow.DefaultWriterProps())
		return err
	})
	return t
}

// try runs a step unless one before it failed. The library panics where a
// write fails; that becomes an error.
func (t *table) try(step func() error) {
	if t.err != nil {
		return
	}
	defer func() {
		if r := recover(); r != nil {
			t.err = errors.Join(t.sink.err, fmt.Errorf("report: the Parquet library gave up: %v", r))
		}
	}()
	t.err = step()
}

// add appends a value to column i of the row.
func (t *table) add(i int, v any) {
	switch b := t.build.Field(i).(type) {
	case *array.StringBuilder:
		if text, ok := v.(string); ok {
			b.Append(text)
			return
		}
		b.AppendNull()
	case *array.Float64Builder:
		if number, ok := v.(float64); ok {
			b.Append(number)
			return
		}
		b.AppendNull()
	case *array.BooleanBuilder:
		b.Append(v.(bool))
	case *array.Int64Builder:
		b.Append(v.(int64))
	}
}

func (t *table) endRow() {
	if t.rows++; t.rows%batch == 0 {
		t.flush()
	}
}

// flush writes the rows that are held.
func (t *table) flush() {
	record := t.build.NewRecord()
	defer record.Release()
	if record.NumRows() > 0 {
		t.try(func() error { return t.out.Write(record) })
	}
}

// close writes what is left and the footer.
func (t *table) close() error {
	t.flush()
	t.build.Release()
	t.try(func() error { return t.out.Close() })
	if t.err == nil {
		t.err = t.sink.err // the library's Close loses the error of the footer
	}
	return t.err
}

// sink passes bytes on and keeps the first error.
type sink struct {
	w   io.Writer
	err error
}

func (s *sink) Write(b []byte) (int, error) {
	if s.err != nil {
		return 0, s.err
	}
	n, err := s.w.Write(b)
	s.err = err
	return n, err
}
