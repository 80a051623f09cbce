package table

import (
	"encoding/binary"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
	"time"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/ipc"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
)

// testLimit is the memory that a damaged file may ask for in tests.
const testLimit = 1 << 22

// survive opens, loads and scans whatever the bytes are. Every failure must be
// an *Error: the file's fault, not a panic and not the machine's.
func survive(t testing.TB, path string, text []byte) error {
	t.Helper()
	if err := os.WriteFile(path, text, 0o644); err != nil {
		t.Fatal(err)
	}
	s, err := Open(path)
	if err == nil {
		for _, r := range askedOfDamage(s.Columns()) {
			_, loaded := s.Load(t.Context(), r)
			err = errors.Join(err, loaded)
		}
		if _, scanned := s.scan(t.Context(), "", testLimit); scanned != nil {
			err = errors.Join(err, scanned)
		}
	}
	if err == nil {
		return nil
	}
	for _, e := range leavesOf(err) {
		var ours *Error
		if !errors.As(e, &ours) {
			t.Errorf("the error is a %T, not an *Error: %v", e, e)
		}
		if strings.Contains(e.Error(), "runtime error") && testing.Verbose() {
			t.Logf("caught: %v", e)
		}
	}
	return err
}

// askedOfDamage are the questions that a damaged file is asked: for all numbers,
// and for the levels of all text.
func askedOfDamage(cols []Column) []Request {
	numbers := Request{Missing: FillMean, Memory: testLimit, Workers: 2}
	levels := numbers
	for _, c := range cols {
		switch {
		case c.Usable:
			numbers.Candidates = append(numbers.Candidates, c.Name)
		case c.Kind == Text:
			levels.Candidates = append(levels.Candidates, c.Name)
		}
	}
	out := []Request{numbers}
	if len(levels.Candidates) > 0 {
		out = append(out, levels)
	}
	return out
}

func leavesOf(err error) []error {
	j, ok := err.(interface{ Unwrap() []error })
	if !ok {
		return []error{err}
	}
	var out []error
	for _, e := range j.Unwrap() {
		out = append(out, leavesOf(e)...)
	}
	return out
}

// damageable are small files of every binary format.
func damageable(t testing.TB) map[string][]byte {
	t.Helper()
	cols, _ := everyType()
	var few []testColumn
	for _, c := range cols {
		switch c.name {
		case "f64", "i64", "bool", "d128", "holes", "inull":
			few = append(few, testColumn{c.name, c.typ, c.cells[:20]})
		}
	}
	few = append(few, testColumn{"text", arrow.BinaryTypes.String, few[0].cells})
	for i := range few[len(few)-1].cells {
		few[len(few)-1].cells = append([]any{}, few[len(few)-1].cells...)
		few[len(few)-1].cells[i] = fmt.Sprint("level ", i%3)
	}
	feeds, _ := feeds(20)
	few = append(few, feeds[1], feeds[4]) // plain and short
	level := testColumn{"level", &arrow.DictionaryType{IndexType: arrow.PrimitiveTypes.Int8, ValueType: arrow.PrimitiveTypes.Float64}, nil}
	for i := range 20 {
		level.cells = append(level.cells, float64(i%3))
	}
	dir := t.TempDir()
	out := map[string][]byte{}
	keep := func(path string) {
		b, err := os.ReadFile(path)
		must(t, err)
		out[filepath.Base(path)] = b
	}
	keep(writeParquet(t, filepath.Join(dir, "plain.parquet"), few, 11, parquet.WithDictionaryDefault(false), parquet.WithStats(false)))
	keep(writeParquet(t, filepath.Join(dir, "two.parquet"), few, 20, parquet.WithDataPageVersion(parquet.DataPageV2), parquet.WithCompression(compress.Codecs.Zstd),
		parquet.WithDictionaryFor("i64", false), parquet.WithEncodingFor("i64", parquet.Encodings.DeltaBinaryPacked), parquet.WithStats(false)))
	keep(writeParquet(t, filepath.Join(dir, "snappy.parquet"), few[:3], 20, parquet.WithCompression(compress.Codecs.Snappy), parquet.WithStats(false)))
	keep(writeParquet(t, filepath.Join(dir, "lengths.parquet"), feeds[:2], 20, parquet.WithDictionaryDefault(false),
		parquet.WithEncodingFor("plain", parquet.Encodings.DeltaLengthByteArray), parquet.WithStats(false)))
	keep(writeParquet(t, filepath.Join(dir, "shared.parquet"), feeds[:2], 9, parquet.WithDictionaryDefault(false),
		parquet.WithEncodingFor("plain", parquet.Encodings.DeltaByteArray), parquet.WithStats(false)))
	keep(writeArrow(t, filepath.Join(dir, "views.arrow"), feeds, 20, false))
	keep(writeArrow(t, filepath.Join(dir, "zstd.arrow"), feeds, 20, false, ipc.WithZstd()))
	keep(writeArrow(t, filepath.Join(dir, "file.arrow"), append(few, level), 20, false))
	keep(writeArrow(t, filepath.Join(dir, "stream.arrow"), append(few, level), 11, true, ipc.WithLZ4()))
	return out
}

func TestEveryByteDamaged(t *testing.T) {
	dir := t.TempDir()
	for name, whole := range damageable(t) {
		must(t, survive(t, filepath.Join(dir, name), whole))
		refused := 0
		step := max(1, len(whole)/300)
		for i := 0; i < len(whole); i += step {
			for _, flip := range []byte{0xff, 0x01} {
				b := append([]byte(nil), whole...)
				b[i] ^= flip
				if survive(t, filepath.Join(dir, name), b) != nil {
					refused++
				}
			}
		}
		if refused == 0 {
			t.Errorf("%s: no damage was noticed", name)
		}
	}
}

func TestEveryLengthCutOff(t *testing.T) {
	dir := t.TempDir()
	for name, whole := range damageable(t) {
		for n := 0; n < len(whole); n += 1 + n/40 {
			err := survive(t, filepath.Join(dir, name), whole[:n])
			// A stream without its end mark may stop between batches.
			if err == nil && !strings.HasPrefix(name, "stream") {
				t.Errorf("%s: the first %d of %d bytes are accepted", name, n, len(whole))
			}
		}
	}
}

func TestLiesInTheFooter(t *testing.T) {
	// Footers written by hand in Thrift's compact protocol: claims that no
	// file of this size can keep.
	dir := t.TempDir()
	list := func(n uint64, elem byte) []byte { return binary.AppendUvarint([]byte{0xf0 | elem}, n) }
	zig := func(v int64) []byte { return binary.AppendUvarint(nil, uint64(v<<1)^uint64(v>>63)) }
	root := []byte{0x48, 1, 's', 0x15, 2, 0x00}        // name "s", one child
	leaf := []byte{0x15, 10, 0x25, 0, 0x18, 1, 'x', 0} // double, required, "x"
	schema := append(append([]byte{0x19, 0x2c}, root...), leaf...)
	for name, c := range map[string]struct {
		footer []byte
		want   string
	}{
		"long list":   {append([]byte{0x29}, list(1<<40, thriftStruct)...), "a list is longer than the file"},
		"long text":   {append([]byte{0x29, 0x1c, 0x48}, binary.AppendUvarint(nil, 1<<50)...), "a text is longer than the file"},
		"deep":        {[]byte(strings.Repeat("\x1c", 500)), "nest too deeply"},
		"no schema":   {[]byte{0x15, 4, 0x00}, "holds no schema"},
		"many rows":   {join([]byte{0x15, 4}, schema, []byte{0x16}, zig(1<<40), []byte{0x19, 0x0c, 0}), "claims 1099511627776 rows"},
		"group rows":  {join([]byte{0x15, 4}, schema, []byte{0x16}, zig(1<<40), []byte{0x19, 0x1c, 0x19, 0x0c, 0x26}, zig(1<<40), []byte{0, 0}), "has 0 column chunks, the schema 1 columns"},
		"chunk place": {join([]byte{0x15, 4}, schema, []byte{0x16, 4, 0x19, 0x1c, 0x19, 0x1c, 0x3c, 0x76}, zig(1<<40), []byte{0x26, 8, 0, 0, 0x26, 4, 0, 0}), "a column chunk lies outside the file"},
	} {
		t.Run(name, func(t *testing.T) {
			file := append([]byte("PAR1"), c.footer...)
			file = binary.LittleEndian.AppendUint32(file, uint32(len(c.footer)))
			file = append(file, "PAR1"...)
			before := allocated()
			err := survive(t, filepath.Join(dir, "t.parquet"), file)
			wantError(t, err, c.want)
			if taken := allocated() - before; taken > 1<<20 {
				t.Errorf("%d bytes were taken", taken)
			}
		})
	}
}

func join(parts ...[]byte) (out []byte) {
	for _, p := range parts {
		out = append(out, p...)
	}
	return out
}

func allocated() uint64 {
	var m runtime.MemStats
	runtime.ReadMemStats(&m)
	return m.TotalAlloc
}

func TestRoomInControlGroups(t *testing.T) {
	// A limit two levels up counts; cached files are given back (kernel
	// documentation, cgroup-v2).
	root := t.TempDir()
	inner := filepath.Join(root, "batch", "job")
	must(t, os.MkdirAll(inner, 0o755))
	writeText(t, filepath.Join(inner, "memory.max"), "max\n")
	writeText(t, filepath.Join(inner, "memory.current"), "5000\n")
	outer := filepath.Join(root, "batch")
	writeText(t, filepath.Join(outer, "memory.max"), "9000\n")
	writeText(t, filepath.Join(outer, "memory.current"), "6000\n")
	writeText(t, filepath.Join(outer, "memory.stat"), "anon 4000\ninactive_file 700\nactive_file 300\n")
	if got := groupMemory(root, "1:name=x:/old\n0::/batch/job\n"); got != 4000 {
		t.Errorf("%d bytes are left, want 4000", got)
	}
	if got := groupMemory(root, "0::/elsewhere\n"); got != math.MaxInt64 {
		t.Errorf("%d bytes are left where nothing is limited", got)
	}
	if freeMemory() < 1<<20 {
		t.Errorf("this machine has %d bytes free", freeMemory())
	}
}

func TestHugeClaimsOfRows(t *testing.T) {
	// A file may hold two thousand million equal rows in a few bytes and tell
	// the truth; then memory decides, before any is taken.
	cols := []testColumn{{"x", arrow.PrimitiveTypes.Float64, []any{1.0, 1.0, 1.0}}}
	path := writeParquet(t, tempFile(t, "t.parquet"), cols, 10)
	s, err := Open(path)
	must(t, err)
	set := s.format.(*parquetSet)
	set.total, set.files[0].groups[0].rows, set.files[0].groups[0].chunks[0].values = 2e9, 2e9, 2e9
	_, err = s.Load(t.Context(), Request{Candidates: []string{"x"}, Memory: 1 << 30})
	wantError(t, err, "2000000000 rows x 1 columns need 16.0 GB, and 1.1 GB is all that may be taken")
	set.total = 3e9
	_, err = s.Load(t.Context(), Request{Candidates: []string{"x"}})
	wantError(t, err, "the table has 3,000,000,000 rows: at most 2,147,483,647 can be used")
}

func TestClaimsOfPages(t *testing.T) {
	number, text := &leaf{physical: physicalDouble}, &leaf{physical: physicalByteArray}
	for name, c := range map[string]struct {
		p  pages
		h  pageHeader
		ok bool
	}{
		"in order":        {pages{left: 1000, codec: codecZstd, leaf: number}, pageHeader{packed: 900, plain: 8000, values: 1000}, true},
		"equal values":    {pages{left: 1000, codec: codecZstd, leaf: number}, pageHeader{packed: 300, plain: 8e6, values: 1e6}, true},
		"brotli":          {pages{left: 1000, codec: codecBrotli, leaf: number}, pageHeader{packed: 30, plain: 8e6, values: 1e6}, true},
		"beyond zstd":     {pages{left: 1000, codec: codecZstd, leaf: number}, pageHeader{packed: 300, plain: 8e8, values: 1e8}, false},
		"beyond brotli":   {pages{left: 1000, codec: codecBrotli, leaf: number}, pageHeader{packed: 30, plain: 8e8, values: 1e8}, false},
		"beyond values":   {pages{left: 1e6, codec: codecZstd, leaf: number}, pageHeader{packed: 1e5, plain: 1e8, values: 1000}, false},
		"beyond chunk":    {pages{left: 10, codec: codecZstd, leaf: number}, pageHeader{packed: 900, plain: 8000, values: 1000}, false},
		"large text":      {pages{left: 1e8, codec: codecZstd, leaf: text}, pageHeader{packed: 1e8, plain: 1e9, values: 1000}, false},
		"negative":        {pages{left: 10, codec: codecZstd, leaf: number}, pageHeader{packed: -1, plain: 8}, false},
		"negative values": {pages{left: 10, codec: codecZstd, leaf: number}, pageHeader{packed: 1, plain: 8, values: -1}, false},
	} {
		if err := c.p.claim(c.h); (err == nil) != c.ok {
			t.Errorf("%s: %v", name, err)
		}
	}
	if checkDelta([]byte{0x80, 1, 4, 3, 0}, 3) != nil {
		t.Error("packed differences in order are refused")
	}
	for _, b := range [][]byte{{}, {0x80}, {0, 4, 3}, {0x80, 1, 0, 3}, {0x80, 1, 4, 4}, {0x80, 0x80, 0x80, 0x80, 1, 4, 3}, {0x80, 1, 3, 3}} {
		if checkDelta(b, 3) == nil {
			t.Errorf("packed differences % x are accepted", b)
		}
	}
}

func TestOpenQuoteDoesNotTakeTheWholeFile(t *testing.T) {
	// A quote that is never closed in a large file must not hang or eat memory.
	text := "a,b\n1,\"2\n" + strings.Repeat("3,4\n", 1<<20)
	start := time.Now()
	wantError(t, second(Open(writeText(t, tempFile(t, "t.csv"), text))), "line 2: a quote is opened and never closed")
	if d := time.Since(start); d > 10*time.Second {
		t.Errorf("it took %v", d)
	}
}

func FuzzParquet(f *testing.F) {
	for name, b := range damageable(f) {
		if strings.HasSuffix(name, ".parquet") {
			f.Add(b)
		}
	}
	path := filepath.Join(f.TempDir(), "t.parquet")
	f.Fuzz(func(t *testing.T, b []byte) { survive(t, path, b) })
}

func FuzzIPC(f *testing.F) {
	for name, b := range damageable(f) {
		if strings.HasSuffix(name, ".arrow") {
			f.Add(b)
		}
	}
	path := filepath.Join(f.TempDir(), "t.arrow")
	f.Fuzz(func(t *testing.T, b []byte) { survive(t, path, b) })
}

// FuzzOutcome reads the columns of a file of text as everything that an
// outcome is made of. What is read must be what its kind promises.
func FuzzOutcome(f *testing.F) {
	f.Add([]byte("a,b,c\nalive,1,0\ndead,2,1\nalive,3,1\n"), uint8(1), "alive")
	f.Add([]byte("a,b,c\n3,1,0\n0,2,true\n7,3,1\n"), uint8(2), "")
	f.Add([]byte("a,b,c\nspat,1,0\nveliger,2,true\nspat,3,1\n"), uint8(3), "")
	f.Add([]byte("a,b,c\n3,1,0\n2,2,1\n7,3,1\n"), uint8(4), "1")
	f.Add([]byte("a,b,c\n3,1,no\n2,2,yes\n7,3,yes\n"), uint8(4), "yes")
	path := filepath.Join(f.TempDir(), "t.csv")
	f.Fuzz(func(t *testing.T, b []byte, measure uint8, success string) {
		must(t, os.WriteFile(path, b, 0o644))
		s, err := Open(path)
		if err != nil || len(s.Columns()) < 3 {
			return
		}
		a, x, c := s.Columns()[0].Name, s.Columns()[1].Name, s.Columns()[2].Name
		r := Request{Outcome: Outcome{Measure: Measure(measure % 5), Column: a, Success: success}, Candidates: []string{x}, Within: []string{c}, Memory: testLimit, Workers: 2}
		if r.Outcome.Measure == AsSurvival {
			r.Outcome.Column, r.Outcome.Time, r.Outcome.Event = "", a, c
			r.Within = []string{OutcomeStratum}
		}
		d, err := s.Load(t.Context(), r)
		if err != nil {
			var ours *Error
			if !errors.As(err, &ours) {
				t.Fatalf("the error is a %T: %v", err, err)
			}
			return
		}
		checkPromise(t, d, r.Outcome.Measure)
	})
}

// checkPromise holds loaded data to what the solver and the draws may expect.
func checkPromise(t *testing.T, d *Data, m Measure) {
	t.Helper()
	n, _ := d.X.Dims()
	if len(d.Within) != n || len(d.WithinLevels) == 0 {
		t.Fatalf("%d of %d rows have a stratum", len(d.Within), n)
	}
	for _, k := range d.Within {
		if k < 0 || int(k) >= len(d.WithinLevels) {
			t.Fatalf("stratum %d of %d", k, len(d.WithinLevels))
		}
	}
	if m == AsSurvival {
		if len(d.Survival.Time) != n || len(d.Survival.Event) != n {
			t.Fatal("a row has no time or no status")
		}
		return
	}
	if len(d.Outcome) != n || (m == AsYesNo) && len(d.Classes) != 2 {
		t.Fatalf("%d outcomes of %d rows, classes %v", len(d.Outcome), n, d.Classes)
	}
	for _, y := range d.Outcome {
		whole := y == math.Trunc(y) && y >= 0
		if notFinite(y) || m != AsNumber && !whole || (m == AsYesNo || m == AsClasses) && int(y) >= len(d.Classes) {
			t.Fatalf("%v is no outcome of kind %v", y, m)
		}
	}
}

func FuzzCSV(f *testing.F) {
	for _, s := range []string{
		"a,b\n1,2\n3,NA\n", "\xef\xbb\xbfa;b\r\n\"1\";2,5\r\n", "a\tb\n\"x\ny\"\t\"\"\"\"\n", "\"", "a,b\n1,\"2", "a|b\n|\n\n|1", "a,b\n1e999,0x10\n-Inf,nan\n",
		"a,b\nalgae,1\nNA,2\n\"yeast, dry\",3\n", "a,b,c\nx,1,2\n\xff,2,x\n x ,3,\"y\"\"\"\n", "a,a\n1,2\n", "\n\n", "a\n1\n\n2\n", "a,b\n99999999999999999999,1_0\n2024-01-31,true\n", "\x1f\x8b\x08\x00",
	} {
		f.Add([]byte(s))
	}
	path := filepath.Join(f.TempDir(), "t.csv")
	f.Fuzz(func(t *testing.T, b []byte) { survive(t, path, b) })
}
