package table

import (
	"bytes"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"testing"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/decimal128"
	"github.com/apache/arrow/go/v17/arrow/decimal256"
	"github.com/apache/arrow/go/v17/arrow/float16"
	"github.com/apache/arrow/go/v17/arrow/ipc"
	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/pqarrow"
)

// The Arrow library writes the files that these tests read: it is the
// implementation outside this project.

// testColumn is a column of a test table; nil cells are missing.
type testColumn struct {
	name  string
	typ   arrow.DataType
	cells []any
}

// record builds rows r0 to r1-1 of a test table.
func record(t testing.TB, cols []testColumn, r0, r1 int) arrow.Record {
	t.Helper()
	b := array.NewRecordBuilder(memory.DefaultAllocator, testSchema(cols))
	defer b.Release()
	for k, c := range cols {
		for _, v := range c.cells[r0:r1] {
			appendCell(t, b.Field(k), v)
		}
	}
	return b.NewRecord()
}

func testSchema(cols []testColumn) *arrow.Schema {
	var fields []arrow.Field
	for _, c := range cols {
		fields = append(fields, arrow.Field{Name: c.name, Type: c.typ, Nullable: true})
	}
	return arrow.NewSchema(fields, nil)
}

func appendCell(t testing.TB, b array.Builder, v any) {
	t.Helper()
	if v == nil {
		b.AppendNull()
		return
	}
	switch b := b.(type) {
	case *array.Float64Builder:
		b.Append(v.(float64))
	case *array.Float32Builder:
		b.Append(float32(v.(float64)))
	case *array.Float16Builder:
		b.Append(float16.New(float32(v.(float64))))
	case *array.Int8Builder:
		b.Append(int8(v.(int)))
	case *array.Int16Builder:
		b.Append(int16(v.(int)))
	case *array.Int32Builder:
		b.Append(int32(v.(int)))
	case *array.Int64Builder:
		b.Append(int64(v.(int)))
	case *array.Uint8Builder:
		b.Append(uint8(v.(int)))
	case *array.Uint16Builder:
		b.Append(uint16(v.(int)))
	case *array.Uint32Builder:
		b.Append(uint32(v.(int)))
	case *array.Uint64Builder:
		b.Append(v.(uint64))
	case *array.BooleanBuilder:
		b.Append(v.(bool))
	case *array.Decimal128Builder:
		n, err := decimal128.FromString(v.(string), b.Type().(*arrow.Decimal128Type).Precision, b.Type().(*arrow.Decimal128Type).Scale)
		must(t, err)
		b.Append(n)
	case *array.Decimal256Builder:
		n, err := decimal256.FromString(v.(string), b.Type().(*arrow.Decimal256Type).Precision, b.Type().(*arrow.Decimal256Type).Scale)
		must(t, err)
		b.Append(n)
	case *array.Float64DictionaryBuilder:
		must(t, b.Append(v.(float64)))
	case *array.Int32DictionaryBuilder:
		must(t, b.Append(int32(v.(int))))
	case *array.DenseUnionBuilder:
		if n, ok := v.(int); ok {
			b.Append(0)
			b.Child(0).(*array.Int32Builder).Append(int32(n))
		} else {
			b.Append(1)
			b.Child(1).(*array.Float64Builder).Append(v.(float64))
		}
	default:
		must(t, b.AppendValueFromString(fmt.Sprint(v)))
	}
}

// eitherType is a union of two types, stored densely.
var eitherType = arrow.DenseUnionOf([]arrow.Field{{Name: "n", Type: arrow.PrimitiveTypes.Int32}, {Name: "v", Type: arrow.PrimitiveTypes.Float64}}, []arrow.UnionTypeCode{0, 1})

func must(t testing.TB, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

// writeParquet writes a test table in row groups of so many rows.
func writeParquet(t testing.TB, path string, cols []testColumn, group int, opts ...parquet.WriterProperty) string {
	t.Helper()
	rec := record(t, cols, 0, len(cols[0].cells))
	defer rec.Release()
	tab := array.NewTableFromRecords(testSchema(cols), []arrow.Record{rec})
	defer tab.Release()
	var buf bytes.Buffer
	props := parquet.NewWriterProperties(append([]parquet.WriterProperty{parquet.WithMaxRowGroupLength(int64(group))}, opts...)...)
	must(t, pqarrow.WriteTable(tab, &buf, int64(group), props, pqarrow.NewArrowWriterProperties(pqarrow.WithStoreSchema())))
	must(t, os.WriteFile(path, buf.Bytes(), 0o644))
	return path
}

// writeArrow writes a test table as an IPC file or stream, in batches of so
// many rows.
func writeArrow(t testing.TB, path string, cols []testColumn, batch int, stream bool, opts ...ipc.Option) string {
	t.Helper()
	f, err := os.Create(path)
	must(t, err)
	defer f.Close()
	opts = append([]ipc.Option{ipc.WithSchema(testSchema(cols))}, opts...)
	var w interface {
		Write(arrow.Record) error
		Close() error
	}
	if stream {
		w = ipc.NewWriter(f, opts...)
	} else {
		w, err = ipc.NewFileWriter(f, opts...)
		must(t, err)
	}
	for r, n := 0, len(cols[0].cells); r < n; r += batch {
		rec := record(t, cols, r, min(n, r+batch))
		must(t, w.Write(rec))
		rec.Release()
	}
	must(t, w.Close())
	return path
}

// writeCSV writes a test table as text; decimals and numbers as they would be
// typed.
func writeCSV(t testing.TB, path string, cols []testColumn) string {
	t.Helper()
	var b bytes.Buffer
	for k, c := range cols {
		if k > 0 {
			b.WriteByte(',')
		}
		b.WriteString(c.name)
	}
	b.WriteByte('\n')
	for r := range cols[0].cells {
		for k, c := range cols {
			if k > 0 {
				b.WriteByte(',')
			}
			switch v := c.cells[r].(type) {
			case nil:
			case float64:
				bits := 64
				if c.typ.ID() == arrow.FLOAT32 {
					v, bits = float64(float32(v)), 64
				}
				b.WriteString(strconv.FormatFloat(v, 'g', -1, bits))
			default:
				fmt.Fprint(&b, v)
			}
		}
		b.WriteByte('\n')
	}
	return writeText(t, path, b.String())
}

func writeText(t testing.TB, path, text string) string {
	t.Helper()
	must(t, os.WriteFile(path, []byte(text), 0o644))
	return path
}

// everyType is a table with every numeric type, and next to it the values
// that float64 should hold. Half-precision values are powers of two, so that
// every width holds them.
func everyType() (cols []testColumn, want map[string][]float64) {
	const n = 40
	add := func(name string, typ arrow.DataType, cell func(i int) (any, float64)) {
		c := testColumn{name: name, typ: typ}
		var w []float64
		for i := range n {
			v, f := cell(i)
			if v == nil {
				f = missing
			}
			c.cells, w = append(c.cells, v), append(w, f)
		}
		cols, want[name] = append(cols, c), w
	}
	want = map[string][]float64{}
	i64 := func(i int) (any, float64) { v := (i - 7) * 3; return v, float64(v) }
	u := func(i int) (any, float64) { return i * 5, float64(i * 5) }
	add("f64", arrow.PrimitiveTypes.Float64, func(i int) (any, float64) { v := math.Sqrt(float64(i)) - 3; return v, v })
	add("f32", arrow.PrimitiveTypes.Float32, func(i int) (any, float64) {
		v := float32(math.Sqrt(float64(i)))
		return float64(v), float64(v)
	})
	add("i8", arrow.PrimitiveTypes.Int8, i64)
	add("i16", arrow.PrimitiveTypes.Int16, func(i int) (any, float64) { v := -i * 700; return v, float64(v) })
	add("i32", arrow.PrimitiveTypes.Int32, func(i int) (any, float64) { v := -i * 70000000 / 2; return int(int32(v)), float64(int32(v)) })
	add("i64", arrow.PrimitiveTypes.Int64, func(i int) (any, float64) { v := -i * (1 << 45); return v, float64(v) })
	add("u8", arrow.PrimitiveTypes.Uint8, u)
	add("u16", arrow.PrimitiveTypes.Uint16, func(i int) (any, float64) { return i * 1600, float64(i * 1600) })
	add("u32", arrow.PrimitiveTypes.Uint32, func(i int) (any, float64) { return i * 100000000, float64(i * 100000000) })
	add("u64", arrow.PrimitiveTypes.Uint64, func(i int) (any, float64) { v := uint64(i) << 58; return v, float64(v) })
	add("bool", arrow.FixedWidthTypes.Boolean, func(i int) (any, float64) { return i%3 == 0, map[bool]float64{true: 1}[i%3 == 0] })
	add("d128", &arrow.Decimal128Type{Precision: 30, Scale: 3}, func(i int) (any, float64) {
		s := fmt.Sprintf("%d.%03d", (i-20)*1000003, i*7)
		f, _ := strconv.ParseFloat(s, 64)
		return s, f
	})
	add("d9", &arrow.Decimal128Type{Precision: 9, Scale: 2}, func(i int) (any, float64) {
		s := fmt.Sprintf("%d.%02d", i+1, i)
		f, _ := strconv.ParseFloat(s, 64)
		return s, f
	})
	add("holes", arrow.PrimitiveTypes.Float64, func(i int) (any, float64) {
		if i%4 == 1 || i > 35 {
			return nil, 0
		}
		return float64(i) / 8, float64(i) / 8
	})
	add("inull", arrow.PrimitiveTypes.Int64, func(i int) (any, float64) {
		if i%5 == 2 {
			return nil, 0
		}
		return i * i, float64(i * i)
	})
	return cols, want
}

// halfAndWide are types that only some of the formats have.
func halfAndWide() (cols []testColumn, want map[string][]float64) {
	half := testColumn{name: "half", typ: arrow.FixedWidthTypes.Float16}
	wide := testColumn{name: "d256", typ: &arrow.Decimal256Type{Precision: 60, Scale: 10}}
	want = map[string][]float64{}
	for i := range 20 {
		v := math.Ldexp(float64(1+i%4), i-12)
		half.cells = append(half.cells, v)
		want["half"] = append(want["half"], v)
		s := fmt.Sprintf("%d12345678901234567890.%010d", i-10, i)
		f, _ := strconv.ParseFloat(s, 64)
		wide.cells = append(wide.cells, s)
		want["d256"] = append(want["d256"], f)
	}
	return []testColumn{half, wide}, want
}

// readAll returns all usable columns as they are before any policy.
func readAll(t testing.TB, path string) (map[string][]float64, []Column) {
	t.Helper()
	s, err := Open(path)
	must(t, err)
	cols := s.Columns()
	var at []int
	for k, c := range cols {
		if c.Usable {
			at = append(at, k)
		}
	}
	n, _ := s.Rows()
	out := newColumns(int(n), len(at))
	var sinks []sink
	for k, c := range out {
		for i := range c {
			c[i] = -12345 // a cell that is never written shows
		}
		sinks = append(sinks, sink{col: at[k], values: c})
	}
	_, err = s.format.fill(t.Context(), sinks, 2)
	must(t, err)
	got := map[string][]float64{}
	for i, k := range at {
		got[cols[k].Name] = out[i]
	}
	return got, cols
}

// same compares bit for bit, so that missing and NaN are told apart.
func same(t testing.TB, got, want map[string][]float64) {
	t.Helper()
	if len(got) != len(want) {
		t.Errorf("%d columns are usable, want %d", len(got), len(want))
	}
	for name, w := range want {
		g := got[name]
		if len(g) != len(w) {
			t.Errorf("column %s has %d rows, want %d", name, len(g), len(w))
			continue
		}
		for i := range w {
			if math.Float64bits(g[i]) != math.Float64bits(w[i]) {
				t.Errorf("column %s row %d is %v, want %v", name, i, g[i], w[i])
				break
			}
		}
	}
}

func tempFile(t testing.TB, name string) string { return filepath.Join(t.TempDir(), name) }
