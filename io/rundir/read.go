package rundir

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/apache/arrow/go/v17/parquet/file"
	"github.com/apache/arrow/go/v17/parquet/schema"
)

// maxFooter is the longest footer that is parsed. That of a block file has
// about 3 KB.
const maxFooter = 1 << 20

// ErrForeign is what errors.Is finds where a block belongs to another run.
var ErrForeign = errors.New("it belongs to another run")

// readBlock reads and checks a block file, and names it in every error.
func (r *Run) readBlock(path string) ([]numbered, []sum, error) {
	block, sums, err := r.openBlock(path)
	if err != nil {
		return nil, nil, fmt.Errorf("rundir: block %s: %w", path, err)
	}
	if want := blockName(block[0].number); filepath.Base(path) != want {
		return nil, nil, fmt.Errorf("rundir: block %s: its first draw is %d, so its name should be %s", path, block[0].number, want)
	}
	return block, sums, nil
}

func (r *Run) openBlock(path string) ([]numbered, []sum, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, nil, err
	}
	defer f.Close()
	size, err := regularSize(f)
	if err != nil {
		return nil, nil, err
	}
	return r.decodeBlock(f, size)
}

// decodeBlock checks the bytes, decodes them, and checks what they say.
func (r *Run) decodeBlock(src parquet.ReaderAtSeeker, size int64) (block []numbered, sums []sum, err error) {
	defer recovered(&err)
	footer, err := footerStart(src, size)
	if err != nil {
		return nil, nil, err
	}
	pr, err := file.NewParquetReader(src, file.WithReadProps(parquet.NewReaderProperties(newGuard(size))))
	if err != nil {
		return nil, nil, err
	}
	if err := r.checkMarks(pr); err != nil {
		return nil, nil, err
	}
	if err := checkPages(pr, src, footer); err != nil {
		return nil, nil, err
	}
	return r.decodeRows(pr, size)
}

// decodeRows decodes the pages and checks the digest of what they say.
func (r *Run) decodeRows(pr *file.Reader, size int64) ([]numbered, []sum, error) {
	f, err := readColumns(pr, size, len(r.Identity.Candidates))
	if err != nil {
		return nil, nil, err
	}
	block := f.gather()
	if err := r.checkBlock(block); err != nil {
		return nil, nil, err
	}
	sums := sumsOf(block)
	if mark(pr, keyDraws) != blockDigest(r.Digest, sums) {
		return nil, nil, errors.New("damaged: the digest of its draws does not fit")
	}
	return block, sums, nil
}

// footerStart returns where the pages of a Parquet file end, after a look at
// its last eight bytes.
func footerStart(src io.ReaderAt, size int64) (int64, error) {
	var tail [8]byte
	if size < 12 {
		return 0, fmt.Errorf("damaged: %d bytes are too few", size)
	}
	if _, err := src.ReadAt(tail[:], size-8); err != nil {
		return 0, err
	}
	length := int64(binary.LittleEndian.Uint32(tail[:4]))
	if !bytes.Equal(tail[4:], []byte("PAR1")) || length > size-12 || length > maxFooter {
		return 0, errors.New("damaged: it does not end as a Parquet file does (cut short?)")
	}
	return size - 8 - length, nil
}

// mark returns a value of the file's key-value metadata, or "".
func mark(pr *file.Reader, key string) string {
	if v := pr.MetaData().KeyValueMetadata().FindValue(key); v != nil {
		return *v
	}
	return ""
}

// checkMarks checks format and identity.
func (r *Run) checkMarks(pr *file.Reader) error {
	if got := mark(pr, keyFormat); got != fmt.Sprint(Format) {
		return fmt.Errorf("format %q: this program reads format %d", got, Format)
	}
	if got := mark(pr, keyIdentity); got != r.Digest {
		return fmt.Errorf("%w: identity %.12s, not %.12s", ErrForeign, got, r.Digest)
	}
	return nil
}

// checkPages compares the digest of all bytes before the footer, so that a
// damaged page never reaches a decoder.
func checkPages(pr *file.Reader, src io.ReaderAt, footer int64) error {
	h := sha256.New()
	if _, err := io.Copy(h, io.NewSectionReader(src, 0, footer)); err != nil {
		return err
	}
	if mark(pr, keyPages) != hex.EncodeToString(h.Sum(nil)) {
		return errors.New("damaged: the digest of its pages does not fit")
	}
	return nil
}

// leaf is a column chunk and how many values it says it holds.
type leaf struct {
	reader file.ColumnChunkReader
	values int64
	rows   int64
}

// leaves opens the column chunks after checking that the schema is ours and
// that the sizes in the footer are possible in a file of this size.
func leaves(pr *file.Reader, size int64, candidates int) ([]leaf, error) {
	meta := pr.MetaData()
	if meta.Schema == nil || !meta.Schema.Equals(schema.NewSchema(blockSchema())) {
		return nil, errors.New("its columns are not those of a block")
	}
	rows := pr.NumRows()
	if pr.NumRowGroups() != 1 || rows < 1 || rows > maxDraws || pr.RowGroup(0).NumRows() != rows {
		return nil, fmt.Errorf("damaged: %d rows in %d row groups", rows, pr.NumRowGroups())
	}
	group := pr.RowGroup(0)
	list := make([]leaf, numColumns)
	for i := range list {
		n, err := checkChunk(group, i, size, candidates)
		if err != nil {
			return nil, err
		}
		reader, err := group.Column(i)
		if err != nil {
			return nil, err
		}
		list[i] = leaf{reader, n, rows}
	}
	return list, nil
}

// checkChunk refuses a column chunk that cannot be ours: compressed, outside
// the file, or with more values than its bytes or the run can hold.
func checkChunk(group *file.RowGroupReader, i int, size int64, candidates int) (int64, error) {
	chunk, err := group.MetaData().ColumnChunk(i)
	if err != nil {
		return 0, err
	}
	start, length, n, rows := chunk.DataPageOffset(), chunk.TotalCompressedSize(), chunk.NumValues(), group.NumRows()
	if chunk.Compression() != compress.Codecs.Uncompressed || chunk.HasDictionaryPage() || chunk.CryptoMetadata() != nil ||
		start < 4 || start > size || length < 0 || length > size-start {
		return 0, fmt.Errorf("damaged: column %d lies outside the file", i)
	}
	most := rows
	switch i {
	case colEntryStep, colEntryPredictor, colEntryNegative, colStill:
		most = rows * int64(candidates+1)
	case colCoefStep, colCoefPredictor:
		// as many as coefficients; compared when they are read
		most = rows + size/8
	case colCoefValue, colIntercept, colAlways:
		most = rows + length/8
	}
	if n < rows || n > most {
		return 0, fmt.Errorf("damaged: column %d says it holds %d values for %d draws", i, n, rows)
	}
	return n, nil
}

// readColumns decodes all columns.
func readColumns(pr *file.Reader, size int64, candidates int) (*flat, error) {
	list, err := leaves(pr, size, candidates)
	if err != nil {
		return nil, err
	}
	c := &cursor{leaves: list}
	f := &flat{}
	f.draw, f.first, f.last = single[int32](c), single[int32](c), single[int32](c)
	f.stop, f.why = textsOf(single[parquet.ByteArray](c)), textsOf(single[parquet.ByteArray](c))
	f.violation, f.gap = single[float64](c), single[float64](c)
	f.borderline, f.twins = single[int32](c), single[int32](c)
	f.entryStep, f.entries = lists[int32](c, nil)
	f.entryPredictor, _ = lists[int32](c, f.entries)
	f.entryNegative, _ = lists[bool](c, f.entries)
	f.coefStep, f.coefs = lists[int32](c, nil)
	f.coefPredictor, _ = lists[int32](c, f.coefs)
	f.coefValue, _ = lists[float64](c, f.coefs)
	f.intercept, f.intercepts = lists[float64](c, nil)
	f.always, f.alwayses = lists[float64](c, nil)
	f.still, f.stills = lists[int32](c, nil)
	return f, c.err
}

// cursor reads leaf after leaf and keeps the first error.
type cursor struct {
	leaves []leaf
	next   int
	err    error
}

// batchReader is a typed column reader of the library.
type batchReader[T any] interface {
	ReadBatch(batch int64, values []T, definition, repetition []int16) (int64, int, error)
	Err() error
}

// batch is how many values are asked for at a time: memory grows only with
// values that are really there.
const batch = 1 << 13

// single reads a leaf with one value per row.
func single[T any](c *cursor) []T {
	values, _ := lists[T](c, nil)
	return values
}

// lists reads the next leaf: its values, and for a list the length of each
// row's list. want, if not nil, is what the lengths must be.
func lists[T any](c *cursor, want []int) (values []T, lengths []int) {
	if c.err != nil {
		return nil, nil
	}
	l := c.leaves[c.next]
	values, definition, repetition, err := readLeaf[T](l)
	if err == nil && l.reader.Descriptor().MaxRepetitionLevel() > 0 {
		lengths, err = lengthsOf(definition, repetition, int(l.rows), len(values))
	} else if err == nil && int64(len(values)) != l.rows {
		err = fmt.Errorf("%d values for %d draws", len(values), l.rows)
	}
	if err == nil && want != nil && !equal(lengths, want) {
		err = errors.New("its lists differ in length from those of its neighbours")
	}
	if err != nil {
		c.err = fmt.Errorf("damaged: column %s: %w", l.reader.Descriptor().Path(), err)
		return nil, nil
	}
	c.next++
	return values, lengths
}

// readLeaf reads all values and levels of a leaf.
func readLeaf[T any](l leaf) (values []T, definition, repetition []int16, err error) {
	r, ok := l.reader.(batchReader[T])
	if !ok {
		return nil, nil, nil, errors.New("of another type")
	}
	var (
		v      = make([]T, batch)
		def    = make([]int16, batch)
		rep    = make([]int16, batch)
		nested = l.reader.Descriptor().MaxRepetitionLevel() > 0
		read   int64
	)
	for read < l.values {
		levels, n, err := r.ReadBatch(min(batch, l.values-read), v, def, rep)
		if err == nil {
			err = r.Err()
		}
		if err != nil {
			return nil, nil, nil, err
		}
		if levels == 0 {
			return nil, nil, nil, fmt.Errorf("it ends after %d of %d values", read, l.values)
		}
		values = append(values, clone(v[:n])...)
		if nested {
			definition, repetition = append(definition, def[:levels]...), append(repetition, rep[:levels]...)
		}
		read += levels
	}
	return values, definition, repetition, nil
}

// clone copies texts out of the page that the library is about to reuse;
// other values are copied by the append that follows.
func clone[T any](values []T) []T {
	if texts, ok := any(values).([]parquet.ByteArray); ok {
		for i := range texts {
			texts[i] = bytes.Clone(texts[i])
		}
	}
	return values
}

// lengthsOf decodes Parquet's levels into list lengths.
func lengthsOf(definition, repetition []int16, rows, values int) ([]int, error) {
	var lengths []int
	total := 0
	for i := range definition {
		d, r := definition[i], repetition[i]
		switch {
		case r == 0 && (d == 0 || d == 1) && len(lengths) < rows:
			lengths = append(lengths, int(d))
		case r == 1 && d == 1 && len(lengths) > 0 && lengths[len(lengths)-1] > 0:
			lengths[len(lengths)-1]++
		default:
			return nil, errors.New("its lists make no sense")
		}
		total += int(d)
	}
	if len(lengths) != rows || total != values {
		return nil, fmt.Errorf("%d lists with %d values for %d draws with %d", len(lengths), total, rows, values)
	}
	return lengths, nil
}

func equal(a, b []int) bool {
	if len(a) != len(b) {
		return false
	}
	for i := range a {
		if a[i] != b[i] {
			return false
		}
	}
	return true
}

func textsOf(list []parquet.ByteArray) []string {
	texts := make([]string, len(list))
	for i, b := range list {
		texts[i] = string(b)
	}
	return texts
}

// guard is the allocator of the library's readers. Nothing in a block is
// compressed, so no buffer is longer than the file; one that claims to be is
// refused by a panic, which decodeBlock turns into an error.
type guard struct {
	memory.Allocator
	limit int
}

// newGuard leaves room for the library's own rounding and level buffers.
func newGuard(size int64) *guard {
	return &guard{memory.DefaultAllocator, int(size) + 1<<20}
}

func (g *guard) Allocate(n int) []byte {
	g.check(n)
	return g.Allocator.Allocate(n)
}

func (g *guard) Reallocate(n int, b []byte) []byte {
	g.check(n)
	return g.Allocator.Reallocate(n, b)
}

func (g *guard) check(n int) {
	if n > g.limit {
		panic(fmt.Sprintf("a buffer of %d bytes in a file of about %d", n, g.limit))
	}
}
