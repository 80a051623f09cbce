package table

import (
	"bytes"
	"compress/gzip"
	"encoding/base64"
	"fmt"
	"math"
	"path/filepath"
	"strings"
	"testing"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/ipc"
	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/apache/arrow/go/v17/parquet/pqarrow"
)

func TestParquetEveryCodec(t *testing.T) {
	cols, want := everyType()
	for _, c := range []compress.Compression{compress.Codecs.Uncompressed, compress.Codecs.Snappy, compress.Codecs.Gzip, compress.Codecs.Brotli, compress.Codecs.Zstd} {
		for _, version := range []parquet.DataPageVersion{parquet.DataPageV1, parquet.DataPageV2} {
			for _, dictionary := range []bool{true, false} {
				t.Run(fmt.Sprintf("codec=%v/page=%d/dictionary=%v", c, version+1, dictionary), func(t *testing.T) {
					path := writeParquet(t, tempFile(t, "t.parquet"), cols, 16, parquet.WithCompression(c),
						parquet.WithDataPageVersion(version), parquet.WithDictionaryDefault(dictionary), parquet.WithDataPageSize(64))
					got, _ := readAll(t, path)
					same(t, got, want)
				})
			}
		}
	}
}

func TestParquetEveryEncoding(t *testing.T) {
	cols, want := everyType()
	for _, name := range []string{"i32", "i64", "inull"} {
		for _, version := range []parquet.DataPageVersion{parquet.DataPageV1, parquet.DataPageV2} {
			path := writeParquet(t, tempFile(t, "t.parquet"), cols, 25, parquet.WithDictionaryDefault(false),
				parquet.WithEncodingFor(name, parquet.Encodings.DeltaBinaryPacked), parquet.WithDataPageVersion(version))
			got, _ := readAll(t, path)
			same(t, got, want)
		}
	}
	path := writeParquet(t, tempFile(t, "t.parquet"), cols, 25, parquet.WithDictionaryDefault(false),
		parquet.WithEncodingFor("bool", parquet.Encodings.RLE), parquet.WithDataPageVersion(parquet.DataPageV2))
	got, _ := readAll(t, path)
	same(t, got, want)
}

func TestParquetWithoutStatisticsAndOldVersions(t *testing.T) {
	cols, want := everyType()
	for _, v := range []parquet.Version{parquet.V1_0, parquet.V2_4, parquet.V2_LATEST} {
		path := writeParquet(t, tempFile(t, "t.parquet"), cols, 7, parquet.WithStats(false), parquet.WithVersion(v))
		got, _ := readAll(t, path)
		same(t, got, want)
	}
}

func TestHalfAndWideDecimals(t *testing.T) {
	cols, want := halfAndWide()
	got, _ := readAll(t, writeArrow(t, tempFile(t, "t.arrow"), cols, 7, false))
	same(t, got, want)
	got, _ = readAll(t, writeParquet(t, tempFile(t, "t.parquet"), cols, 7))
	same(t, got, want)
}

func TestArrowEveryCompression(t *testing.T) {
	cols, want := everyType()
	for name, opts := range map[string][]ipc.Option{"none": nil, "lz4": {ipc.WithLZ4()}, "zstd": {ipc.WithZstd()}} {
		for _, stream := range []bool{false, true} {
			t.Run(fmt.Sprintf("compression=%s/stream=%v", name, stream), func(t *testing.T) {
				path := writeArrow(t, tempFile(t, "t.feather"), cols, 11, stream, opts...)
				got, _ := readAll(t, path)
				same(t, got, want)
			})
		}
	}
}

func TestArrowPassesOverOtherColumns(t *testing.T) {
	// Text, lists, structs, views and dictionaries stand between the numbers:
	// their buffers must be counted right.
	list := arrow.ListOf(arrow.PrimitiveTypes.Int32)
	cols := []testColumn{
		{"text", arrow.BinaryTypes.String, []any{"a", nil, "ccc"}},
		{"x", arrow.PrimitiveTypes.Float64, []any{1.5, nil, -2.0}},
		{"list", list, []any{"[1,2]", nil, "[]"}},
		{"struct", arrow.StructOf(arrow.Field{Name: "a", Type: arrow.PrimitiveTypes.Int8, Nullable: true}, arrow.Field{Name: "b", Type: arrow.BinaryTypes.String, Nullable: true}), []any{`{"a":1,"b":"x"}`, nil, `{"a":2,"b":"y"}`}},
		{"y", arrow.PrimitiveTypes.Int32, []any{7, 8, nil}},
		{"day", arrow.FixedWidthTypes.Date32, []any{"2024-01-31", nil, "2024-02-01"}},
		{"lapse", arrow.FixedWidthTypes.Duration_s, []any{"1s", nil, "2s"}},
		{"nothing", arrow.Null, []any{nil, nil, nil}},
		{"view", arrow.BinaryTypes.StringView, []any{"short", nil, "too long to stand within the view itself"}},
		{"either", eitherType, []any{7, 2.5, 8}},
		{"kind", &arrow.DictionaryType{IndexType: arrow.PrimitiveTypes.Int8, ValueType: arrow.BinaryTypes.String}, []any{"u", "v", nil}},
		{"level", &arrow.DictionaryType{IndexType: arrow.PrimitiveTypes.Int16, ValueType: arrow.PrimitiveTypes.Float64}, []any{0.5, nil, 0.25}},
		{"z", arrow.FixedWidthTypes.Boolean, []any{true, false, nil}},
	}
	// The union and the view have no place in Parquet files of the library.
	want := map[string][]float64{"x": {1.5, missing, -2}, "y": {7, 8, missing}, "level": {0.5, missing, 0.25}, "z": {1, 0, missing}}
	for _, stream := range []bool{false, true} {
		got, kinds := readAll(t, writeArrow(t, tempFile(t, "t.arrow"), cols, 3, stream, ipc.WithZstd()))
		same(t, got, want)
		checkReasons(t, kinds)
	}
	pq := append(append([]testColumn{}, cols[:6]...), cols[7], cols[12]) // the library writes no durations to Parquet
	got, kinds := readAll(t, writeParquet(t, tempFile(t, "t.parquet"), pq, 3))
	delete(want, "level")
	same(t, got, want)
	checkReasons(t, kinds)
}

func TestParquetDurationsOfOtherWriters(t *testing.T) {
	// Writers that store durations put plain integers into the file and the
	// Arrow schema beside them.
	var schema bytes.Buffer
	w := ipc.NewWriter(&schema, ipc.WithSchema(arrow.NewSchema([]arrow.Field{
		{Name: "lapse", Type: arrow.FixedWidthTypes.Duration_ms, Nullable: true}, {Name: "x", Type: arrow.PrimitiveTypes.Int64, Nullable: true}}, nil)))
	must(t, w.Close())
	cols := []testColumn{{"lapse", arrow.PrimitiveTypes.Int64, []any{1, 2}}, {"x", arrow.PrimitiveTypes.Int64, []any{3, 4}}}
	rec := record(t, cols, 0, 2)
	defer rec.Release()
	md := arrow.NewMetadata([]string{"ARROW:schema"}, []string{base64.StdEncoding.EncodeToString(schema.Bytes())})
	fields := arrow.NewSchema(rec.Schema().Fields(), &md)
	tab := array.NewTableFromRecords(fields, []arrow.Record{array.NewRecord(fields, rec.Columns(), 2)})
	var buf bytes.Buffer
	must(t, pqarrow.WriteTable(tab, &buf, 10, parquet.NewWriterProperties(), pqarrow.DefaultWriterProps()))
	got, kinds := readAll(t, writeText(t, tempFile(t, "t.parquet"), buf.String()))
	same(t, got, map[string][]float64{"x": {3, 4}})
	if c := kinds[0]; c.Kind != Date || c.Type != "duration" {
		t.Errorf("the column of durations is %v, %s", c.Kind, c.Type)
	}
}

func TestParquetTypesOldAndNew(t *testing.T) {
	// Parquet names types twice: ConvertedType until 2.3, LogicalType since
	// 2.4 (parquet.thrift). Either alone must do.
	plain := func(physical int32) schemaElement { return schemaElement{physical: physical, converted: -1} }
	with := func(e schemaElement, change func(*schemaElement)) schemaElement { change(&e); return e }
	for want, e := range map[string]schemaElement{
		"uint16 integer":       with(plain(physicalInt32), func(e *schemaElement) { e.logical, e.bits = logicalInteger, 16 }),
		"int8 integer":         with(plain(physicalInt32), func(e *schemaElement) { e.logical, e.bits, e.signed = logicalInteger, 8, true }),
		"uint32 integer":       with(plain(physicalInt32), func(e *schemaElement) { e.converted = convertedUint32 }),
		"int64 integer":        with(plain(physicalInt64), func(e *schemaElement) { e.converted = convertedInt64 }),
		"uint64 integer":       with(plain(physicalInt64), func(e *schemaElement) { e.logical, e.bits = logicalInteger, 64 }),
		"int32 integer":        plain(physicalInt32),
		"decimal(9,2) number":  with(plain(physicalInt32), func(e *schemaElement) { e.converted, e.precision, e.scale = convertedDecimal, 9, 2 }),
		"date date":            with(plain(physicalInt32), func(e *schemaElement) { e.logical = logicalDate }),
		"time date":            with(plain(physicalInt64), func(e *schemaElement) { e.converted = convertedTimeUS }),
		"timestamp date":       plain(physicalInt96),
		"string text":          with(plain(physicalByteArray), func(e *schemaElement) { e.converted = convertedUTF8 }),
		"binary binary":        with(plain(physicalFixed), func(e *schemaElement) { e.logical, e.length = logicalUUID, 16 }),
		"float16 number":       with(plain(physicalFixed), func(e *schemaElement) { e.logical, e.length = logicalFloat16, 2 }),
		"list of int32 nested": with(plain(physicalInt32), func(e *schemaElement) { e.repetition = repetitionRepeated }),
	} {
		if kind, _ := e.kind(); e.typeName()+" "+kind.String() != want {
			t.Errorf("%+v is %s %v, want %s", e, e.typeName(), kind, want)
		}
	}
	if l, err := with(plain(physicalInt64), func(e *schemaElement) { e.logical, e.bits = logicalInteger, 64 }).leaf(); err != nil || !l.unsigned {
		t.Errorf("unsigned is %v, %v", l.unsigned, err)
	}
}

// checkReasons expects every unusable column of the table above to say why.
func checkReasons(t *testing.T, cols []Column) {
	t.Helper()
	want := map[string]struct {
		kind   Kind
		reason string
	}{
		"text": {Text, "text"}, "list": {Nested, "nested (list)"}, "struct": {Nested, "nested (struct)"}, "day": {Date, "date"},
		"lapse": {Date, "duration"}, "view": {Text, "text"}, "either": {Nested, "nested (union)"}, "nothing": {Empty, "no value"}, "kind": {Text, "text"},
	}
	for _, c := range cols {
		w, ok := want[c.Name]
		if ok == c.Usable {
			t.Errorf("column %s: usable is %v", c.Name, c.Usable)
		}
		if ok && (c.Kind != w.kind || !strings.Contains(c.Reason, w.reason)) {
			t.Errorf("column %s is %v, %q, want %v, %q", c.Name, c.Kind, c.Reason, w.kind, w.reason)
		}
	}
}

func TestArrowDictionaryGrows(t *testing.T) {
	// A stream may replace a dictionary between batches, or add to it.
	typ := &arrow.DictionaryType{IndexType: arrow.PrimitiveTypes.Int8, ValueType: arrow.PrimitiveTypes.Float64}
	cols := []testColumn{{"level", typ, []any{1.0, 2.0, 3.0, 1.0, 9.0, 3.0}}, {"x", arrow.PrimitiveTypes.Int8, []any{1, 2, 3, 4, 5, 6}}}
	want := map[string][]float64{"level": {1, 2, 3, 1, 9, 3}, "x": {1, 2, 3, 4, 5, 6}}
	got, _ := readAll(t, writeArrow(t, tempFile(t, "t.arrows"), cols, 2, true))
	same(t, got, want)

	var buf bytes.Buffer
	s := arrow.NewSchema([]arrow.Field{{Name: "level", Type: typ}}, nil)
	w := ipc.NewWriter(&buf, ipc.WithSchema(s), ipc.WithDictionaryDeltas(true))
	for _, batch := range []struct {
		values []float64
		index  []int8
	}{{[]float64{1, 2}, []int8{0, 1}}, {[]float64{1, 2, 3}, []int8{2, 0}}, {[]float64{1, 2, 3, 9}, []int8{3, 2}}} {
		values := array.NewFloat64Builder(memory.DefaultAllocator)
		values.AppendValues(batch.values, nil)
		index := array.NewInt8Builder(memory.DefaultAllocator)
		index.AppendValues(batch.index, nil)
		must(t, w.Write(array.NewRecord(s, []arrow.Array{array.NewDictionaryArray(typ, index.NewArray(), values.NewArray())}, 2)))
	}
	must(t, w.Close())
	got, _ = readAll(t, writeText(t, tempFile(t, "t.arrows"), buf.String()))
	same(t, got, map[string][]float64{"level": {1, 2, 3, 1, 9, 3}})
}

func TestCSV(t *testing.T) {
	for name, text := range map[string]string{
		"comma":       "a,b,c\n1,2.5,true\n,NA,false\n-3,1e3,TRUE\n",
		"semicolon":   "a;b;c\n1;2.5;true\n;NA;false\n-3;1e3;TRUE\n",
		"tab":         "a\tb\tc\n1\t2.5\ttrue\n\tNA\tfalse\n-3\t1e3\tTRUE\n",
		"mark":        "\xef\xbb\xbfa,b,c\r\n1,2.5,true\r\n,NA,false\r\n-3,1e3,TRUE\r\n",
		"quotes":      "\"a\",\"b\",c\n\"1\",\"2.5\",true\n\"\",\"NA\",false\n-3,\" 1e3 \",\"TRUE\"",
		"blank lines": "a,b,c\n\n1,2.5,true\n,NA,false\n\n-3,1e3,TRUE\n\n",
	} {
		t.Run(name, func(t *testing.T) {
			got, _ := readAll(t, writeText(t, tempFile(t, "t.csv"), text))
			same(t, got, map[string][]float64{"a": {1, missing, -3}, "b": {2.5, missing, 1000}, "c": {1, 0, 1}})
		})
	}
}

func TestCSVQuotedLinesAndKinds(t *testing.T) {
	text := "id,note,x,mixed,day,\"odd \"\"name\"\"\",empty,half,euro\n" +
		"1,\"two\nlines, and a comma\",1.5,1,2024-01-31,1,,TRUE,\"1,5\"\n" +
		"2,\"say \"\"no\"\"\",NaN,2,2024-02-29 10:00,2,NA,0,\"2,5\"\n" +
		"3,plain,-Inf,abc,NA,3,,1,\"3,25\"\n"
	got, cols := readAll(t, writeText(t, tempFile(t, "t.csv"), text))
	same(t, got, map[string][]float64{"id": {1, 2, 3}, "x": {1.5, math.NaN(), math.Inf(-1)}, `odd "name"`: {1, 2, 3}})
	want := map[string]string{
		"note":  "is text",
		"mixed": `is text: row 2 (line 5) holds "abc", not a number`,
		"day":   "is a date or time, not a number",
		"empty": "holds no value",
		"half":  `is text: row 0 (line 2) holds "TRUE" among numbers`,
		"euro":  `is text: row 0 (line 2) holds "1,5" (a decimal comma? write numbers with a decimal point)`,
	}
	for _, c := range cols {
		if c.Reason != want[c.Name] {
			t.Errorf("column %s: reason %q, want %q", c.Name, c.Reason, want[c.Name])
		}
	}
}

func TestCSVInManyBlocks(t *testing.T) {
	// Larger than several blocks, quotes with line ends in them, compressed.
	var b bytes.Buffer
	b.WriteString("i,note,x\n")
	const n = 60000
	want := map[string][]float64{}
	for i := range n {
		x := math.Sqrt(float64(i))
		fmt.Fprintf(&b, "%d,\"line\n%d \"\"quoted\"\", %s\",%v\n", i, i, strings.Repeat("y", i%120), x)
		want["i"], want["x"] = append(want["i"], float64(i)), append(want["x"], x)
	}
	got, _ := readAll(t, writeText(t, tempFile(t, "t.csv"), b.String()))
	same(t, got, want)
	var z bytes.Buffer
	w := gzip.NewWriter(&z)
	w.Write(b.Bytes())
	must(t, w.Close())
	got, _ = readAll(t, writeText(t, tempFile(t, "t.csv.gz"), z.String()))
	same(t, got, want)
}

func TestFolderAndGlob(t *testing.T) {
	cols, want := everyType()
	dir := t.TempDir()
	part := func(r0, r1 int) []testColumn {
		var out []testColumn
		for _, c := range cols {
			out = append(out, testColumn{c.name, c.typ, c.cells[r0:r1]})
		}
		return out
	}
	writeParquet(t, filepath.Join(dir, "part-2.parquet"), part(13, 29), 4)
	writeParquet(t, filepath.Join(dir, "part-1.parquet"), part(0, 13), 100)
	writeParquet(t, filepath.Join(dir, "part-3.parquet"), part(29, 40), 100, parquet.WithCompression(compress.Codecs.Zstd))
	writeText(t, filepath.Join(dir, "_SUCCESS"), "")
	writeText(t, filepath.Join(dir, "notes.txt"), "not a table")
	got, _ := readAll(t, dir)
	same(t, got, want)
	got, _ = readAll(t, filepath.Join(dir, "part-*.parquet"))
	same(t, got, want)

	s, err := Open(filepath.Join(dir, "part-[12].parquet"))
	must(t, err)
	if n, known := s.Rows(); n != 29 || !known {
		t.Errorf("the glob has %d rows, want 29", n)
	}

	writeText(t, filepath.Join(dir, "part-4.csv"), "a,b\n1,2\n3,4\n")
	wantError(t, second(Open(filepath.Join(dir, "*.csv"))), "part-4.csv: this is not a Parquet file (folders and globs are read as Parquet files)")

	other := part(0, 13)
	other[1].typ = arrow.PrimitiveTypes.Float64
	writeParquet(t, filepath.Join(dir, "part-4.parquet"), other, 100)
	wantError(t, second(Open(dir)), "part-4.parquet", `column "f32"`, "is double, in part-1.parquet it is float")
	other[1].name = "other"
	writeParquet(t, filepath.Join(dir, "part-4.parquet"), other, 100)
	wantError(t, second(Open(dir)), "part-4.parquet", `column 2 is called "other", in part-1.parquet it is "f32"`)
	writeParquet(t, filepath.Join(dir, "part-4.parquet"), part(0, 13)[:3], 100)
	wantError(t, second(Open(dir)), "part-4.parquet", "has 3 columns, part-1.parquet has 15")
}

func second[T any](_ T, err error) error { return err }

// wantError expects an *Error whose text contains all the parts.
func wantError(t testing.TB, err error, parts ...string) {
	t.Helper()
	if err == nil {
		t.Errorf("no error, want one with %q", parts)
		return
	}
	if _, ok := err.(*Error); !ok {
		t.Errorf("the error is a %T, not an *Error: %v", err, err)
	}
	for _, p := range parts {
		if !strings.Contains(err.Error(), p) {
			t.Errorf("the error is %q, want %q in it", err, p)
		}
	}
}

func TestSameNumbersInEveryFormat(t *testing.T) {
	cols, _ := everyType()
	dir := t.TempDir()
	paths := []string{
		writeParquet(t, filepath.Join(dir, "a.parquet"), cols, 9),
		writeParquet(t, filepath.Join(dir, "b.parquet"), cols, 1000, parquet.WithCompression(compress.Codecs.Zstd), parquet.WithDictionaryDefault(false)),
		writeArrow(t, filepath.Join(dir, "a.arrow"), cols, 6, false, ipc.WithLZ4()),
		writeArrow(t, filepath.Join(dir, "b.arrow"), cols, 60, true),
		writeCSV(t, filepath.Join(dir, "a.csv"), cols),
	}
	r := Request{Outcome: Outcome{Column: "f64"}, Candidates: []string{"f32", "i8", "i64", "u64", "bool", "d128", "holes", "inull", "u16"}, Always: []string{"d9", "u8"}, Missing: FillMean}
	var first *Data
	for _, p := range paths {
		for _, workers := range []int{1, 3} {
			r.Workers = workers
			s, err := Open(p)
			must(t, err)
			d, err := s.Load(t.Context(), r)
			must(t, err)
			if first == nil {
				first = d
				continue
			}
			sameData(t, filepath.Base(p), d, first)
		}
	}
	// A changed cell, another order or another role changes the fingerprint.
	r.Candidates[0], r.Candidates[1] = r.Candidates[1], r.Candidates[0]
	s, _ := Open(paths[0])
	d, err := s.Load(t.Context(), r)
	must(t, err)
	if d.Fingerprint == first.Fingerprint {
		t.Error("two orders of the columns have one fingerprint")
	}
	cols[0].cells[3] = cols[0].cells[3].(float64) + 1e-15
	s, _ = Open(writeCSV(t, filepath.Join(dir, "c.csv"), cols))
	r.Candidates[0], r.Candidates[1] = r.Candidates[1], r.Candidates[0]
	d, err = s.Load(t.Context(), r)
	must(t, err)
	if d.Fingerprint == first.Fingerprint {
		t.Error("a changed cell does not change the fingerprint")
	}
}

// sameData compares two loaded tables bit for bit.
func sameData(t *testing.T, name string, a, b *Data) {
	t.Helper()
	if a.Fingerprint != b.Fingerprint {
		t.Errorf("%s: fingerprint %s, want %s", name, a.Fingerprint, b.Fingerprint)
	}
	n, p := b.X.Dims()
	for j := range p {
		x := a.X.Panel([]int32{int32(j)}, 0, n, nil)[0]
		y := b.X.Panel([]int32{int32(j)}, 0, n, nil)[0]
		for i := range x {
			if math.Float64bits(x[i]) != math.Float64bits(y[i]) {
				t.Fatalf("%s: column %d row %d is %v, want %v", name, j, i, x[i], y[i])
			}
		}
		if fmt.Sprint(a.X.Holes(int32(j))) != fmt.Sprint(b.X.Holes(int32(j))) {
			t.Errorf("%s: column %d has other holes", name, j)
		}
	}
	if fmt.Sprint(a.Centre, a.Deviation, a.Outcome, a.Missing, a.Rows) != fmt.Sprint(b.Centre, b.Deviation, b.Outcome, b.Missing, b.Rows) {
		t.Errorf("%s: centre, deviation, outcome or gaps differ", name)
	}
}

func TestRealTablesInThreeFormats(t *testing.T) {
	// Diabetes data (Efron, Hastie, Johnstone & Tibshirani 2004) and gasoline
	// spectra (Kalivas 1997) as in testdata: sources are listed there.
	for _, name := range []string{"diabetes", "gasoline"} {
		path := filepath.Join("..", "..", "testdata", "data", name+".csv")
		got, cols := readAll(t, path)
		var tc []testColumn
		for _, c := range cols {
			k := testColumn{name: c.Name, typ: arrow.PrimitiveTypes.Float64}
			for _, v := range got[c.Name] {
				k.cells = append(k.cells, v)
			}
			tc = append(tc, k)
		}
		pq, _ := readAll(t, writeParquet(t, tempFile(t, "t.parquet"), tc, 100))
		same(t, pq, got)
	}
	got, _ := readAll(t, filepath.Join("..", "..", "testdata", "data", "diabetes.csv"))
	// First row of the published table; 442 patients.
	if len(got) != 11 || len(got["y"]) != 442 || got["y"][0] != 151 || got["bmi"][0] != 32.1 || got["s5"][0] != 4.8598 {
		t.Errorf("the diabetes table has %d columns, first outcome %v", len(got), got["y"][0])
	}
}
