package table

import (
	"context"
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet/file"
	"github.com/apache/arrow/go/v17/parquet/pqarrow"
)

// Files of other writers (parquet-mr, parquet-cpp, pyarrow, Rust) and encodings
// that the Arrow library of this project does not write: see
// testdata/parquet/SOURCES.md. Expected values are those of the collection's
// README and of the documents beside its files.

func foreignFile(name string) string { return filepath.Join("testdata", "parquet", name) }

func TestSplitBytesEqualPlain(t *testing.T) {
	got, _ := readAll(t, foreignFile("byte_stream_split_extended.gzip.parquet"))
	pairs := 0
	for name, plain := range got {
		kind, ok := strings.CutSuffix(name, "_plain")
		if !ok {
			continue
		}
		pairs++
		same(t, map[string][]float64{kind: got[kind+"_byte_stream_split"]}, map[string][]float64{kind: plain})
		if len(plain) != 200 {
			t.Errorf("%s has %d rows", name, len(plain))
		}
	}
	if pairs != 6 {
		t.Errorf("%d pairs of columns, want 6", pairs)
	}
}

func TestPackedDifferencesOfEveryWidth(t *testing.T) {
	got, _ := readAll(t, foreignFile("delta_binary_packed.parquet"))
	f, err := os.Open(foreignFile("delta_binary_packed_expect.csv"))
	must(t, err)
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	must(t, err)
	if len(rows) != 201 || len(rows[0]) != 66 {
		t.Fatalf("%d x %d expected values", len(rows), len(rows[0]))
	}
	for k, name := range rows[0] {
		for i, r := range rows[1:] {
			v, err := strconv.ParseInt(r[k], 10, 64)
			must(t, err)
			if got[name][i] != float64(v) {
				t.Fatalf("%s row %d is %v, want %d", name, i, got[name][i], v)
			}
		}
	}
	csvValues, _ := readAll(t, foreignFile("delta_binary_packed_expect.csv"))
	same(t, csvValues, got)
}

func TestOldAndNewLZ4(t *testing.T) {
	// The three files hold the same table under three framings of LZ4.
	want, _ := readAll(t, foreignFile("lz4_raw_compressed.parquet"))
	if len(want) != 2 || len(want["c0"]) != 4 || want["c0"][0] != 1593604800 || want["v11"][1] != 7.7 {
		t.Errorf("the table holds %v", want)
	}
	for _, name := range []string{"hadoop_lz4_compressed.parquet", "non_hadoop_lz4_compressed.parquet"} {
		got, _ := readAll(t, foreignFile(name))
		same(t, got, want)
	}
}

func TestDecimalsOfEveryStorage(t *testing.T) {
	// 1.00 to 24.00 as 32-bit integers, byte arrays and arrays of fixed length.
	for _, name := range []string{"int32_decimal.parquet", "byte_array_decimal.parquet", "fixed_length_decimal_legacy.parquet"} {
		got, cols := readAll(t, foreignFile(name))
		v := got["value"]
		if len(v) != 24 || !strings.HasPrefix(cols[0].Type, "decimal(") {
			t.Fatalf("%s: %d rows of %s", name, len(v), cols[0].Type)
		}
		for i := range v {
			if v[i] != float64(i+1) {
				t.Errorf("%s row %d is %v", name, i, v[i])
			}
		}
	}
}

func TestHalfPrecisionOfAnotherWriter(t *testing.T) {
	got, _ := readAll(t, foreignFile("float16_nonzeros_and_nans.parquet"))
	same(t, got, map[string][]float64{"x": {missing, 1, -2, math.NaN(), 0, -1, math.Copysign(0, -1), 2}})
}

func TestPagesWithoutAnyValue(t *testing.T) {
	got, _ := readAll(t, foreignFile("int32_with_null_pages.parquet"))
	lo, hi, absent := math.Inf(1), math.Inf(-1), 0
	for _, v := range got["int32_field"] {
		if isMissing(v) {
			absent++
			continue
		}
		lo, hi = min(lo, v), max(hi, v)
	}
	if len(got["int32_field"]) != 1000 || absent != 275 || lo != -2136906554 || hi != 2145722375 {
		t.Errorf("%d missing, from %v to %v; want 275, -2136906554, 2145722375", absent, lo, hi)
	}
	got, _ = readAll(t, foreignFile("page_v2_empty_compressed.parquet"))
	for _, v := range got["integer_column"] {
		if !isMissing(v) {
			t.Errorf("%v where nothing is", v)
		}
	}
	got, _ = readAll(t, foreignFile("datapage_v2_empty_datapage.snappy.parquet"))
	same(t, got, map[string][]float64{"value": {missing}})
}

func TestOtherWritersHabits(t *testing.T) {
	got, _ := readAll(t, foreignFile("concatenated_gzip_members.parquet"))
	if v := got["long_col"]; len(v) != 513 || v[0] != 1 || v[512] != 513 {
		t.Errorf("513 numbers in two gzip members: %v", v)
	}
	got, _ = readAll(t, foreignFile("dict-page-offset-zero.parquet"))
	if v := got["l_partkey"]; len(v) != 39 || v[0] != 1552 || v[38] != 1552 {
		t.Errorf("39 times 1552: %v", v)
	}
	got, _ = readAll(t, foreignFile("rle_boolean_encoding.parquet"))
	v := got["datatype_boolean"]
	if len(v) != 68 || v[0] != 1 || v[1] != 0 || !isMissing(v[2]) || v[3] != 1 {
		t.Errorf("68 truth values in runs: %v", v)
	}
}

func TestChecksums(t *testing.T) {
	got, _ := readAll(t, foreignFile("datapage_v1-snappy-compressed-checksum.parquet"))
	if len(got) != 2 || len(got["a"]) != 5120 {
		t.Errorf("%d columns", len(got))
	}
	s, err := Open(foreignFile("datapage_v1-corrupt-checksum.parquet"))
	must(t, err)
	_, err = s.Load(t.Context(), Request{Candidates: []string{"a", "b"}})
	wantError(t, err, `column "a"`, "the checksum of a page is wrong")
}

func TestEncryptedColumnsAreRefused(t *testing.T) {
	err := second(Open(foreignFile("encrypted_columns.parquet")))
	wantError(t, err, "encrypted_columns.parquet: the file is encrypted: write a copy that is not")
}

func TestLevelsOfTheOldestFiles(t *testing.T) {
	// Before runs there were packed levels, highest bit first (Parquet format,
	// Encodings.md, BIT_PACKED): 1011 0001 and 10.
	p := &pages{leaf: &leaf{optional: true, physical: physicalDouble}, count: 10}
	h := pageHeader{plain: 5, levelEncoding: encodingBitPacked}
	values, err := p.splitOne(h, []byte{0b10110001, 0b10000000, 7, 8, 9})
	must(t, err)
	if string(values) != "\x07\x08\x09" || p.filled != 5 || len(p.valid) != 2 || p.valid[0] != 0b10001101 || p.valid[1] != 1 {
		t.Errorf("values %v, %d filled, levels %b", values, p.filled, p.valid)
	}
	if _, err := p.splitOne(h, []byte{1}); err == nil {
		t.Error("a page shorter than its levels is accepted")
	}
}

// Text of other writers is read as the Arrow library reads it; of one file the
// values follow a rule.
func TestTextOfOtherWriters(t *testing.T) {
	for name, columns := range map[string]int{
		"delta_length_byte_array.parquet": 1, "data_index_bloom_encoding_stats.parquet": 1, "datapage_v2.snappy.parquet": 1, "sort_columns.parquet": 1,
	} {
		got := readTexts(t, foreignFile(name), 1000)
		if len(got) != columns {
			t.Errorf("%s: %d columns of text", name, len(got))
		}
		for column, cells := range got {
			if want := libraryTexts(t, foreignFile(name), column); cells != want {
				t.Errorf("%s: column %s is %.200s, want %.200s", name, column, cells, want)
			}
		}
	}
	for i, cell := range strings.Split(readTexts(t, foreignFile("delta_length_byte_array.parquet"), 1000)["FRUIT"], ",") {
		if want := "apple_banana_mango" + strconv.Itoa(i*i); cell != want {
			t.Fatalf("row %d is %s, want %s", i, cell, want)
		}
	}
}

// libraryTexts reads a column with the Arrow library.
func libraryTexts(t *testing.T, path, column string) string {
	t.Helper()
	f, err := file.OpenParquetFile(path, false)
	must(t, err)
	defer f.Close()
	r, err := pqarrow.NewFileReader(f, pqarrow.ArrowReadProperties{}, memory.DefaultAllocator)
	must(t, err)
	tab, err := r.ReadTable(context.Background())
	must(t, err)
	defer tab.Release()
	var cells []string
	for k := range int(tab.NumCols()) {
		if tab.Schema().Field(k).Name != column {
			continue
		}
		for _, chunk := range tab.Column(k).Data().Chunks() {
			for i := range chunk.Len() {
				cell := "-"
				if chunk.IsValid(i) {
					cell = strings.TrimSpace(chunk.(*array.String).Value(i)) // blanks around do not count here
				}
				cells = append(cells, cell)
			}
		}
	}
	return strings.Join(cells, ",")
}
