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
	"slices"

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
	name, want := filepath.Base(path), blockName(block[0].number)
	if name != want && name != otherName(block[0].number, blockDigest(r.Digest, sums)) {
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
	if err := checkFile(pr, src, footer, size); err != nil {
		return nil, nil, err
	}
	if err := r.checkMarks(pr); err != nil {
		return nil, nil, err
	}
	return r.decodeRows(pr, size)
}

// decodeRows decodes the pages and checks the digest of what they say.
func (r *Run) decodeRows(pr *file.Reader, size int64) ([]numbered, []sum, error) {
	s := r.Identity.shape()
	f, err := s.readColumns(pr, size)
	if err != nil {
		return nil, nil, err
	}
	block := f.gather()
	if err := s.checkBlock(block); err != nil {
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

// checkFile compares the digest of the file, so that a damaged page never
// reaches a decoder, and damage is found wherever it is.
func checkFile(pr *file.Reader, src io.ReaderAt, footer, size int64) error {
	digest := []byte(mark(pr, keyFile))
	tail := make([]byte, size-footer)
	if _, err := src.ReadAt(tail, footer); err != nil {
		return err
	}
	if len(digest) != len(noDigest) || bytes.Count(tail, digest) != 1 {
		return errors.New("damaged: the digest of the file is not there")
	}
	copy(tail[bytes.Index(tail, digest):], noDigest)
	h := sha256.New()
	if _, err := io.Copy(h, io.NewSectionReader(src, 0, footer)); err != nil {
		return err
	}
	h.Write(tail)
	if string(digest) != hex.EncodeToString(h.Sum(nil)) {
		return errors.New("damaged: the digest of the file does not fit")
	}
	return nil
}

// cursor reads leaf after leaf and keeps the first error.
type cursor struct {
	shape *shape
	group *file.RowGroupReader
	size  int64
	next  int
	err   error
}

// open checks that the schema is ours and that the row group is possible.
func (s *shape) open(pr *file.Reader, size int64) (*cursor, error) {
	meta := pr.MetaData()
	if meta.Schema == nil || !meta.Schema.Equals(schema.NewSchema(s.blockSchema())) {
		return nil, errors.New("its columns are not those of a block")
	}
	rows := pr.NumRows()
	if pr.NumRowGroups() != 1 || rows < 1 || rows > maxDraws || pr.RowGroup(0).NumRows() != rows {
		return nil, fmt.Errorf("damaged: %d rows in %d row groups", rows, pr.NumRowGroups())
	}
	return &cursor{shape: s, group: pr.RowGroup(0), size: size}, nil
}

// limit is the most values that a chunk of so many bytes can hold.
type limit func(c *cursor, length int64) int64

func perDraw(c *cursor, _ int64) int64 { return c.group.NumRows() }

func perPredictor(c *cursor, _ int64) int64 {
	return c.group.NumRows() * int64(c.shape.candidates+1)
}

func ofBytes(width int64) limit {
	return func(c *cursor, length int64) int64 { return c.group.NumRows() + length/width }
}

// checkChunk refuses a column chunk that cannot be ours: compressed, outside
// the file, or with more values than its bytes or the run can hold.
func (c *cursor) checkChunk(most limit) (int64, error) {
	chunk, err := c.group.MetaData().ColumnChunk(c.next)
	if err != nil {
		return 0, err
	}
	start, length, n, rows := chunk.DataPageOffset(), chunk.TotalCompressedSize(), chunk.NumValues(), c.group.NumRows()
	if chunk.Compression() != compress.Codecs.Uncompressed || chunk.HasDictionaryPage() || chunk.CryptoMetadata() != nil ||
		start < 4 || start > c.size || length < 0 || length > c.size-start {
		return 0, errors.New("it is not a plain column inside the file")
	}
	if n < rows || n > most(c, length) {
		return 0, fmt.Errorf("it says it holds %d values for %d draws", n, rows)
	}
	return n, nil
}

// readColumns decodes all columns.
func (s *shape) readColumns(pr *file.Reader, size int64) (*flat, error) {
	c, err := s.open(pr, size)
	if err != nil {
		return nil, err
	}
	f := &flat{}
	f.draw, f.first, f.last = single(c, plainInts), single(c, plainInts), single(c, plainInts)
	f.stop, f.why = single(c, plainTexts), single(c, plainTexts)
	f.violation, f.gap = single(c, plainFloats), single(c, plainFloats)
	f.borderline, f.twins, f.redraws = single(c, plainInts), single(c, plainInts), single(c, plainInts)
	f.entryStep, f.entries = lists(c, nil, perPredictor, plainInts)
	f.entryPredictor, _ = lists(c, f.entries, perPredictor, plainInts)
	f.entryNegative, _ = lists(c, f.entries, perPredictor, plainFlags)
	f.readCoefs(c)
	f.intercept, f.intercepts = lists(c, nil, ofBytes(8), plainFloats)
	f.always, f.alwayses = lists(c, nil, ofBytes(8), plainFloats)
	f.nullDeviance = single(c, plainFloats)
	f.deviance, f.deviances = lists(c, nil, ofBytes(8), plainFloats)
	f.still, f.stills = lists(c, nil, perPredictor, plainInts)
	return f, c.err
}

func (f *flat) readCoefs(c *cursor) {
	f.coefStep, f.coefs = lists(c, nil, ofBytes(4), plainInts)
	f.coefPredictor, _ = lists(c, f.coefs, ofBytes(4), plainInts)
	if c.shape.terms != nil {
		f.coefTerm, _ = lists(c, f.coefs, ofBytes(4), plainInts)
	}
	if c.shape.classes > 1 {
		f.coefClass, _ = lists(c, f.coefs, ofBytes(4), plainInts)
	}
	f.coefValue, _ = lists(c, f.coefs, ofBytes(8), plainFloats)
}

// single reads the next leaf, which has one value per row.
func single[T any](c *cursor, decode decoder[T]) []T {
	chunk := leaf(c, false, perDraw, decode)
	c.next++
	return chunk.values
}

// lists reads the next leaf: its values, and the length of each row's list.
// want, if not nil, is what the lengths must be.
func lists[T any](c *cursor, want []int, most limit, decode decoder[T]) ([]T, []int) {
	chunk := leaf(c, true, most, decode)
	if c.err != nil {
		return nil, nil
	}
	lengths, err := lengthsOf(chunk.definition, chunk.repetition, int(c.group.NumRows()), len(chunk.values))
	if err == nil && want != nil && !slices.Equal(lengths, want) {
		err = errors.New("its lists differ in length from those of its neighbours")
	}
	if err != nil {
		c.fail(err)
		return nil, nil
	}
	c.next++
	return chunk.values, lengths
}

// fail keeps an error of the leaf that is next.
func (c *cursor) fail(err error) {
	if err != nil {
		c.err = fmt.Errorf("damaged: column %d: %w", c.next, err)
	}
}

// leaf reads the leaf that is next.
func leaf[T any](c *cursor, nested bool, most limit, decode decoder[T]) (found chunk[T]) {
	if c.err != nil {
		return found
	}
	n, err := c.checkChunk(most)
	if err != nil {
		c.fail(err)
		return found
	}
	pages, err := c.group.GetColumnPageReader(c.next)
	if err != nil {
		c.fail(err)
		return found
	}
	found, err = readChunk(pages, nested, n, decode)
	c.fail(err)
	return found
}

// lengthsOf decodes Parquet's levels into list lengths.
func lengthsOf(definition, repetition []byte, rows, values int) ([]int, error) {
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
