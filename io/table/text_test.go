package table

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/ipc"
	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
)

// readTexts returns the cells of all columns of text, "-" where there is none,
// and of columns without levels the reason.
func readTexts(t testing.TB, path string, most int) map[string]string {
	t.Helper()
	s, err := Open(path)
	must(t, err)
	n, _ := s.Rows()
	var sinks []sink
	for k, c := range s.Columns() {
		if c.Kind == Text {
			sinks = append(sinks, sink{col: k, texts: newTexts(int(n), most)})
		}
	}
	_, err = s.format.fill(t.Context(), sinks, 2)
	must(t, err)
	out := map[string]string{}
	for _, s2 := range sinks {
		name := s.Columns()[s2.col].Name
		levels, fault := s2.texts.coding(most)
		if fault != "" {
			out[name] = fault
			continue
		}
		var cells []string
		for _, k := range levels.codes {
			if k < 0 {
				cells = append(cells, "-")
			} else {
				cells = append(cells, levels.names[k])
			}
		}
		out[name] = strings.Join(cells, ",")
	}
	return out
}

// feeds is a table with text in every way that a format stores it.
func feeds(rows int) (cols []testColumn, want string) {
	types := []struct {
		name string
		typ  arrow.DataType
	}{
		{"plain", arrow.BinaryTypes.String}, {"large", arrow.BinaryTypes.LargeString}, {"view", arrow.BinaryTypes.StringView},
		{"short", &arrow.DictionaryType{IndexType: arrow.PrimitiveTypes.Int8, ValueType: arrow.BinaryTypes.String}},
		{"wide", &arrow.DictionaryType{IndexType: arrow.PrimitiveTypes.Uint32, ValueType: arrow.BinaryTypes.String}},
	}
	words := []string{"algae", "yeast", "mixed, with a comma", "a text of more than twelve bytes", "Größe", "algae ", "", "x\"y"}
	r := rand.New(rand.NewPCG(3, 4))
	var cells []any
	var text []string
	for i := range rows {
		if i%7 == 3 {
			cells, text = append(cells, nil), append(text, "-")
			continue
		}
		w := words[r.IntN(len(words))]
		cells = append(cells, w)
		if w = strings.TrimSpace(w); w == "" {
			w = "-"
		}
		text = append(text, w)
	}
	cols = []testColumn{{"x", arrow.PrimitiveTypes.Float64, nil}}
	for i := range rows {
		cols[0].cells = append(cols[0].cells, float64(i))
	}
	for _, c := range types {
		cols = append(cols, testColumn{c.name, c.typ, cells})
	}
	return cols, strings.Join(text, ",")
}

// wantTexts compares all columns of text with one.
func wantTexts(t *testing.T, path, want string, columns int) {
	t.Helper()
	got := readTexts(t, path, MostLevels)
	if len(got) != columns {
		t.Errorf("%s: %d columns of text, want %d", path, len(got), columns)
	}
	for name, cells := range got {
		if cells != want {
			t.Errorf("%s: column %s is\n%s, want\n%s", filepath.Base(path), name, cells, want)
		}
	}
}

func TestTextInArrow(t *testing.T) {
	cols, want := feeds(100)
	for name, opts := range map[string][]ipc.Option{"none": nil, "lz4": {ipc.WithLZ4()}, "zstd": {ipc.WithZstd()}} {
		for _, stream := range []bool{false, true} {
			for _, batch := range []int{100, 13} {
				if batch < 100 && !stream {
					continue // the file format of the library takes one dictionary only
				}
				t.Run(fmt.Sprintf("compression=%s/stream=%v/batch=%d", name, stream, batch), func(t *testing.T) {
					wantTexts(t, writeArrow(t, tempFile(t, "t.arrow"), cols, batch, stream, opts...), want, 5)
				})
			}
		}
	}
}

func TestTextInParquet(t *testing.T) {
	cols, want := feeds(100)
	cols = append(cols[:3:3], cols[4:]...) // the library writes no views to Parquet
	for _, version := range []parquet.DataPageVersion{parquet.DataPageV1, parquet.DataPageV2} {
		for _, codec := range []compress.Compression{compress.Codecs.Uncompressed, compress.Codecs.Snappy, compress.Codecs.Zstd} {
			for name, opts := range map[string][]parquet.WriterProperty{
				"dictionary": {parquet.WithDictionaryDefault(true)},
				"plain":      {parquet.WithDictionaryDefault(false)},
				"lengths":    {parquet.WithDictionaryDefault(false), parquet.WithEncoding(parquet.Encodings.DeltaLengthByteArray)},
				"shared":     {parquet.WithDictionaryDefault(false), parquet.WithEncoding(parquet.Encodings.DeltaByteArray)},
				"falls back": {parquet.WithDictionaryDefault(true), parquet.WithDictionaryPageSizeLimit(40), parquet.WithDataPageSize(50)},
			} {
				if strings.Contains("lengths shared", name) {
					opts = append(opts, parquet.WithEncodingFor("x", parquet.Encodings.Plain))
				}
				t.Run(fmt.Sprintf("%s/codec=%v/page=%d", name, codec, version+1), func(t *testing.T) {
					opts = append(opts, parquet.WithDataPageVersion(version), parquet.WithCompression(codec), parquet.WithDataPageSize(120))
					wantTexts(t, writeParquet(t, tempFile(t, "t.parquet"), cols, 37, opts...), want, 4)
				})
			}
		}
	}
}

func TestTextInCSV(t *testing.T) {
	path := writeText(t, tempFile(t, "t.csv"), "a,b\nalgae,1\n NA ,2\n\"yeast, dry\",3\n\"say \"\"no\"\"\",4\n  algae  ,5\n,6\nnull,7\nGröße,8\n")
	got := readTexts(t, path, MostLevels)
	if want := `algae,-,yeast, dry,say "no",algae,-,-,Größe`; got["a"] != want {
		t.Errorf("text %s, want %s", got["a"], want)
	}
}

// The same levels come out of any number of goroutines and blocks.
func TestTextInManyBlocks(t *testing.T) {
	var b strings.Builder
	b.WriteString("site,id,pad\n")
	var want []string
	for i := range 60000 {
		site := fmt.Sprint("site ", (i*7919)%23)
		fmt.Fprintf(&b, "%s,tank %d,%s\n", site, i, strings.Repeat("y", i%90))
		want = append(want, site)
	}
	got := readTexts(t, writeText(t, tempFile(t, "t.csv"), b.String()), MostLevels)
	if got["site"] != strings.Join(want, ",") || got["id"] != "has more than 50 levels" {
		t.Errorf("site %.80s, id %.80s", got["site"], got["id"])
	}
}

func TestTextsThatAreNoLevels(t *testing.T) {
	long := strings.Repeat("x", longestLevel+1)
	cells := map[string][]any{"bad": {"a", "b", "r\xe9gal", "a"}, "long": {"a", long, "b", long}, "fine": {"a", long[:longestLevel], "b", nil}}
	want := map[string]string{
		"bad": "row 2 holds text that is not UTF-8 (save the file as UTF-8)", "long": "row 1 holds a text of more than 1000 bytes, which is no level",
		"fine": "a," + long[:longestLevel] + ",b,-",
	}
	dir := t.TempDir()
	for _, typ := range []arrow.DataType{arrow.BinaryTypes.String, arrow.BinaryTypes.LargeString, arrow.BinaryTypes.StringView,
		&arrow.DictionaryType{IndexType: arrow.PrimitiveTypes.Int16, ValueType: arrow.BinaryTypes.String}} {
		var cols []testColumn
		for _, name := range []string{"bad", "long", "fine"} {
			cols = append(cols, testColumn{name, typ, cells[name]})
		}
		paths := []string{writeArrow(t, filepath.Join(dir, "t.arrow"), cols, 4, false), writeArrow(t, filepath.Join(dir, "z.arrow"), cols, 4, false, ipc.WithZstd())}
		if typ.ID() == arrow.STRING {
			paths = append(paths, writeCSV(t, filepath.Join(dir, "t.csv"), cols))
		}
		if typ.ID() != arrow.STRING_VIEW {
			paths = append(paths, writeParquet(t, filepath.Join(dir, "t.parquet"), cols, 3),
				writeParquet(t, filepath.Join(dir, "shared.parquet"), cols, 3, parquet.WithDictionaryDefault(false), parquet.WithEncoding(parquet.Encodings.DeltaByteArray)))
		}
		for _, path := range paths {
			for name, got := range readTexts(t, path, MostLevels) {
				if got != want[name] {
					t.Errorf("%s (%v): column %s is %.60s, want %.60s", filepath.Base(path), typ, name, got, want[name])
				}
			}
		}
	}
}

// A dictionary may be replaced between batches, or grow.
func TestTextDictionariesOfStreams(t *testing.T) {
	typ := &arrow.DictionaryType{IndexType: arrow.PrimitiveTypes.Int8, ValueType: arrow.BinaryTypes.String}
	s := arrow.NewSchema([]arrow.Field{{Name: "feed", Type: typ, Nullable: true}}, nil)
	for _, delta := range []bool{false, true} {
		path := tempFile(t, "t.arrows")
		f, err := os.Create(path)
		must(t, err)
		w := ipc.NewWriter(f, ipc.WithSchema(s), ipc.WithDictionaryDeltas(delta))
		batches := []struct {
			values string
			index  []int8
		}{{"a b", []int8{0, 1}}, {"a b c", []int8{2, 0}}, {"a b c d", []int8{3, 1}}}
		if !delta {
			batches[1].values, batches[2].values = "b c a", "z y x b"
		}
		for _, b := range batches {
			values := array.NewStringBuilder(memory.DefaultAllocator)
			values.AppendValues(strings.Fields(b.values), nil)
			index := array.NewInt8Builder(memory.DefaultAllocator)
			index.AppendValues(b.index, nil)
			must(t, w.Write(array.NewRecord(s, []arrow.Array{array.NewDictionaryArray(typ, index.NewArray(), values.NewArray())}, 2)))
		}
		must(t, w.Close())
		must(t, f.Close())
		want := "a,b,a,b,b,y"
		if delta {
			want = "a,b,c,a,d,b"
		}
		if got := readTexts(t, path, MostLevels)["feed"]; got != want {
			t.Errorf("delta %v: %s, want %s", delta, got, want)
		}
	}
}

// Packed differences as the format's page on encodings describes them
// (apache/parquet-format, Encodings.md, DELTA_BINARY_PACKED, its two examples)
// and a block with the largest width.
func TestPackedDifferences(t *testing.T) {
	zig := func(v int64) []byte { return binary.AppendVarint(nil, v) }
	head := func(values uint64, first int64) []byte {
		return join(binary.AppendUvarint(nil, 8), []byte{1}, binary.AppendUvarint(nil, values), zig(first))
	}
	for name, c := range map[string]struct {
		b    []byte
		want []int64
	}{
		"1 to 5":     {join(head(5, 1), zig(1), []byte{0}), []int64{1, 2, 3, 4, 5}},
		"7 5 3 1 2":  {join(head(8, 7), zig(-2), []byte{2}, []byte{0xc0, 0x3f}), []int64{7, 5, 3, 1, 2, 3, 4, 5}},
		"64 bits":    {join(head(2, 0), zig(0), []byte{64}, make([]byte, 7), []byte{0x80}, make([]byte, 56)), []int64{0, -1 << 63}},
		"no value":   {head(1, -9), []int64{-9}},
		"two blocks": {join(head(10, 0), zig(1), []byte{0}, zig(-1), []byte{0}), []int64{0, 1, 2, 3, 4, 5, 6, 7, 8, 7}},
	} {
		d, after, err := openDifferences(append(c.b, 'r', 'e', 's', 't'), len(c.want))
		if err != nil || string(after) != "rest" {
			t.Errorf("%s: %v, followed by %q", name, err, after)
			continue
		}
		var got []int64
		for range c.want {
			v, err := d.next()
			must(t, err)
			got = append(got, v)
		}
		if fmt.Sprint(got) != fmt.Sprint(c.want) {
			t.Errorf("%s: %v, want %v", name, got, c.want)
		}
		if _, err := d.next(); err == nil {
			t.Errorf("%s: there is a value too many", name)
		}
		for cut := range c.b {
			if _, _, err := openDifferences(c.b[:cut], len(c.want)); err == nil {
				t.Errorf("%s: %d of %d bytes are accepted", name, cut, len(c.b))
			}
		}
	}
}

// Positions in a dictionary: runs, and packed values of every width, written
// bit by bit.
func TestRunsOfPositions(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 9))
	for width := uint(1); width <= 32; width++ {
		var want []uint32
		packed := make([]byte, 3*width)
		for i := range 24 {
			v := uint32(r.Uint64() & (1<<width - 1))
			want = append(want, v)
			for bit := range width {
				at := uint(i)*width + bit
				packed[at>>3] |= byte(v>>bit&1) << (at & 7)
			}
		}
		run := binary.LittleEndian.AppendUint32(nil, want[23])[:(width+7)/8]
		d := runs{rest: join([]byte{3<<1 | 1}, packed, []byte{5 << 1}, run), width: width}
		for i := range 29 {
			v, err := d.next()
			must(t, err)
			if v != want[min(i, 23)] {
				t.Fatalf("width %d: value %d is %d, want %d", width, i, v, want[min(i, 23)])
			}
		}
		if _, err := d.next(); err == nil {
			t.Errorf("width %d: there is a value too many", width)
		}
	}
	if d := (runs{}); func() uint32 { v, _ := d.next(); return v }() != 0 {
		t.Error("no bits are no zero")
	}
}

// A column of nothing but different texts takes the memory of its codes, and
// collecting stops early; so does reading where the format allows.
func TestTextsThatAllDiffer(t *testing.T) {
	const n = 150_000
	dir := t.TempDir()
	var cells []any
	var b strings.Builder
	b.WriteString("id,x\n")
	numbers := make([]any, n)
	for i := range n {
		id := fmt.Sprintf("larva number %09d of the year", i)
		cells = append(cells, id)
		fmt.Fprintf(&b, "%s,%d\n", id, i%7)
		numbers[i] = float64(i % 7)
	}
	cols := []testColumn{{"id", arrow.BinaryTypes.String, cells}, {"x", arrow.PrimitiveTypes.Float64, numbers}}
	view := []testColumn{{"id", arrow.BinaryTypes.StringView, cells}, cols[1]}
	for _, path := range []string{
		writeParquet(t, filepath.Join(dir, "t.parquet"), cols, 40_000),
		writeArrow(t, filepath.Join(dir, "t.arrow"), cols, n, false),
		writeArrow(t, filepath.Join(dir, "z.arrow"), cols, n, false, ipc.WithZstd()),
		writeArrow(t, filepath.Join(dir, "v.arrow"), view, n, false),
		writeText(t, filepath.Join(dir, "t.csv"), b.String()),
	} {
		s, err := Open(path)
		must(t, err)
		before := allocated()
		d, err := s.Load(t.Context(), Request{Candidates: []string{"id", "x"}, Workers: 1})
		must(t, err)
		taken := allocated() - before
		t.Logf("%s: %d MB were taken for %d MB of cells", filepath.Base(path), taken>>20, 12*n>>20)
		if taken > 12*n+20<<20 {
			t.Errorf("%s: %d MB were taken for %d MB of cells", filepath.Base(path), taken>>20, 12*n>>20)
		}
		if got := fmt.Sprint(d.Excluded); got != "[{id has more than 50 levels}]" {
			t.Errorf("%s: left out %s", filepath.Base(path), got)
		}
	}
}

// Sizes that a file of text claims, and cannot keep.
func TestClaimsOfText(t *testing.T) {
	huge := []byte{0xff, 0xff, 0xff, 0x7f, 'a'}
	if _, err := (&plainText{rest: huge}).next(); err == nil {
		t.Error("a text longer than its page is accepted")
	}
	if _, err := newTextDictionary(huge, 1); err == nil {
		t.Error("an entry longer than its dictionary is accepted")
	}
	p := &pages{left: 1000, codec: codecNone, leaf: &leaf{physical: physicalByteArray}, rows: 10}
	if err := p.dictionary(pageHeader{values: 1 << 30, plain: 1 << 30, packed: 900}); err == nil {
		t.Error("a dictionary of 2^30 entries is accepted")
	}
	d := newArrowDictionaries(1)
	text := arrowField{typ: arrowUTF8}
	for name, c := range map[string]struct {
		b  arrowBatch
		l  batchLayout
		ok bool
	}{
		"in order":      {arrowBatch{rows: 100, size: 900}, batchLayout{codec: arrowRaw}, true},
		"beyond bytes":  {arrowBatch{rows: 1000, size: 900}, batchLayout{codec: arrowRaw}, false},
		"beyond codecs": {arrowBatch{rows: 1 << 40, size: 900}, batchLayout{codec: arrowZstd}, false},
		"beyond memory": {arrowBatch{rows: 1 << 24, size: 1 << 20}, batchLayout{codec: arrowZstd}, false},
	} {
		if err := d.claim(c.b, &c.l, text, 50); (err == nil) != c.ok {
			t.Errorf("%s: %v", name, err)
		}
	}
	short := &viewBuffer{plain: []byte("abc"), size: 3}
	for _, c := range [][2]int64{{-1, 1}, {4, 1}, {0, 4}, {1 << 40, 1}} {
		if _, err := short.word(c[0], c[1]); err == nil {
			t.Errorf("text %v of 3 bytes is accepted", c)
		}
	}
}

// Differences that add up to lengths which no page has, and shared beginnings
// that make ever longer texts of nothing, take no memory.
func TestSharedBeginningsDoNotGrow(t *testing.T) {
	const n = 100_000
	uv := func(v uint64) []byte { return binary.AppendUvarint(nil, v) }
	zig := func(v int64) []byte { return binary.AppendVarint(nil, v) }
	rise := func(first, step int64) []byte { // first, first+step, ...
		b := join(uv(1<<16), uv(1), uv(n), zig(first))
		for range 2 {
			b = append(b, join(zig(step), []byte{0})...)
		}
		return b
	}
	const word = 100
	page := join(rise(0, word), rise(word, 0), []byte(strings.Repeat("x", n*word)))
	shared, err := newSharedText(page, n)
	must(t, err)
	texts := newTexts(n, MostLevels)
	before := allocated()
	for i := range n { // the last would have ten million bytes
		if _, err := shared.code(texts, int64(i)); err != nil {
			t.Fatal(err)
		}
	}
	if taken := allocated() - before; taken > 1<<20+n*word {
		t.Errorf("%d bytes were taken", taken)
	}
	if _, fault := texts.coding(MostLevels); fault != "row 10 holds a text of more than 1000 bytes, which is no level" {
		t.Errorf("it is said that the column %s", fault)
	}
}

// FuzzTextPage decodes pages of text as they lie in memory, without the guard
// that stands around a whole file: damage must be an error, never a panic, and
// what is read must be made of the page's bytes.
func FuzzTextPage(f *testing.F) {
	f.Add([]byte("\x01\x00\x00\x00a\x02\x00\x00\x00bc"), []byte{}, uint8(encodingPlain), uint16(2))
	f.Add([]byte("\x02\x03\xe4\x04\x01"), []byte("\x01\x00\x00\x00a\x00\x00\x00\x00\x01\x00\x00\x00b\x01\x00\x00\x00c"), uint8(encodingRLEDict), uint16(10))
	f.Add([]byte("\x08\x01\x03\x04\x00\x00aabbcc"), []byte{}, uint8(encodingDeltaLength), uint16(3))
	f.Add([]byte("\x08\x01\x03\x00\x04\x00\x08\x01\x03\x06\x01\x02\x00\x00abcdef"), []byte{}, uint8(encodingDeltaText), uint16(3))
	f.Fuzz(func(t *testing.T, page, dictionary []byte, encoding uint8, values uint16) {
		p := &pages{count: int(values), filled: int(values), values: page, encoding: int32(encoding)}
		words, err := newTextDictionary(dictionary, bytes.Count(dictionary, []byte{0, 0, 0})/2)
		if err != nil {
			words = nil
		}
		texts := newTexts(int(values), MostLevels)
		if p.decodeText(texts, words, texts.codes, 0) != nil {
			return
		}
		for i, k := range texts.codes {
			if k < oddCode || int(k) >= len(texts.names) {
				t.Fatalf("row %d has the code %d of %d", i, k, len(texts.names))
			}
		}
	})
}

// FuzzArrowText does the same for the buffers of an Arrow column.
func FuzzArrowText(f *testing.F) {
	offsets := func(v ...uint32) (b []byte) {
		for _, x := range v {
			b = binary.LittleEndian.AppendUint32(b, x)
		}
		return b
	}
	f.Add(offsets(0, 1, 3, 3), []byte("abc"), uint8(arrowUTF8), uint8(3), int8(arrowRaw))
	f.Add(offsets(0, 0, 2, 0, 2, 0), []byte("abc"), uint8(arrowLargeUTF8), uint8(2), int8(arrowRaw))
	f.Add(join(offsets(2), []byte("ab__________"), offsets(13), []byte("abcd"), offsets(0, 1)), []byte("_abcdefghijklmnop"), uint8(arrowUTF8View), uint8(2), int8(arrowRaw))
	f.Add(join(binary.LittleEndian.AppendUint64(nil, 8), offsets(0, 1)), join(binary.LittleEndian.AppendUint64(nil, 1<<20), []byte("abc")), uint8(arrowUTF8), uint8(1), int8(arrowZstd))
	f.Add(join(binary.LittleEndian.AppendUint64(nil, 1<<63-1), offsets(0, 1)), join(binary.LittleEndian.AppendUint64(nil, 1<<64-1), []byte("abc")), uint8(arrowUTF8), uint8(1), int8(arrowLZ4))
	file, err := os.Create(filepath.Join(f.TempDir(), "buffers"))
	must(f, err)
	f.Cleanup(func() { file.Close() })
	f.Fuzz(func(t *testing.T, where, data []byte, typ, rows uint8, codec int8) {
		_, err := file.WriteAt(join(where, data), 0)
		must(t, err)
		l := &batchLayout{rows: int64(rows), size: int64(len(where) + len(data)), codec: codec, nodes: []arrowNode{{int64(rows), 0}},
			buffers: []arrowBuffer{{0, 0}, {0, int64(len(where))}, {int64(len(where)), int64(len(data))}}}
		r := &bufferReader{in: file}
		texts := newTexts(int(rows), MostLevels)
		err = r.eachText(l, fieldLayout{count: 3}, arrowField{typ: typ}, int(rows), func(i int, word []byte) bool {
			if len(word) > longestLevel+1 {
				t.Fatalf("a text of %d bytes is handed on", len(word))
			}
			texts.codes[i] = texts.add(word, int64(i))
			return true
		})
		var ours damaged
		var refused *Error
		if err != nil && !errors.As(err, &ours) && !errors.As(err, &refused) {
			t.Fatalf("the error is a %T: %v", err, err)
		}
	})
}

// Text behind views is read a window at a time, forwards and back.
func TestViewsBeyondOneWindow(t *testing.T) {
	var cells []any
	var want []string
	for i := range 3000 {
		word := fmt.Sprintf("larva number %06d of the year", i*7919%3000)
		cells, want = append(cells, word), append(want, word)
	}
	path := writeArrow(t, tempFile(t, "t.arrow"), []testColumn{{"id", arrow.BinaryTypes.StringView, cells}}, 3000, false)
	if got := readTexts(t, path, 5000)["id"]; got != strings.Join(want, ",") {
		t.Errorf("%.200s", got)
	}
	text := []byte(strings.Repeat("0123456789", 3000))
	v := &viewBuffer{in: bytes.NewReader(text), size: int64(len(text))}
	for _, at := range []int64{0, 8180, 8190, 20000, 19990, 5, 29980, 8185} {
		if word, err := v.word(at, 20); err != nil || string(word) != string(text[at:at+20]) {
			t.Errorf("at %d: %s, %v", at, word, err)
		}
	}
}
