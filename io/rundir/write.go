package rundir

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"slices"
	"strings"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/file"

	"holdfast/solver"
)

// ErrNoDecision is what errors.Is finds where draws come before the decision
// of record.
var ErrNoDecision = errors.New("rundir: the decision of record must be set before the first draw")

// Put writes one block of finished draws: path i is that of draw draws[i], and
// the numbers rise. It keeps nothing of its arguments. Equal draws give equal
// bytes. A file that is there is never replaced: if another block begins with
// the same draw, this one gets a name of its own, so that writers who do not
// know of each other lose nothing.
func (d *Dir) Put(draws []int, paths []solver.Path) error {
	run := d.Run()
	if run.Decision == nil {
		return ErrNoDecision
	}
	if len(draws) != len(paths) {
		return fmt.Errorf("rundir: put: %d draws and %d paths", len(draws), len(paths))
	}
	block := make([]numbered, len(paths))
	for i := range paths {
		block[i] = numbered{draws[i], paths[i]}
	}
	if err := run.Identity.shape().checkBlock(block); err != nil {
		return fmt.Errorf("rundir: put: %w", err)
	}
	if last := block[len(block)-1].number; last >= run.Meta.Number {
		return fmt.Errorf("rundir: put: draw %d: the run has draws 0 to %d", last, run.Meta.Number-1)
	}
	return troubled(d.putBlock(&run, block))
}

// putBlock writes the file of a block under a name that is free, or finds
// that it is there already.
func (d *Dir) putBlock(run *Run, block []numbered) error {
	sums := sumsOf(block)
	write := func(w io.Writer) error { return run.encodeBlock(w, block, sums) }
	plain := d.join(drawsFolder, blockName(block[0].number))
	err := writeNew(d.fs, plain, write)
	if !errors.Is(err, fs.ErrExist) {
		return err
	}
	if _, there, err := run.readBlock(plain); err == nil && slices.Equal(there, sums) {
		return d.fs.SyncFolder(d.join(drawsFolder)) // whoever wrote it may not have come so far
	}
	return writeFile(d.fs, d.join(drawsFolder, otherName(block[0].number, blockDigest(run.Digest, sums))), write)
}

// checkBlock checks each draw of a block and their order.
func (s *shape) checkBlock(block []numbered) error {
	if len(block) == 0 {
		return errors.New("a block without draws")
	}
	for i := range block {
		if err := s.checkPath(&block[i]); err != nil {
			return err
		}
		if i > 0 && block[i].number <= block[i-1].number {
			return fmt.Errorf("draw %d stands behind draw %d", block[i].number, block[i-1].number)
		}
	}
	return nil
}

// noDigest stands where the digest of a file will be.
var noDigest = strings.Repeat("0", 2*sha256.Size)

// encodeBlock writes a block file.
func (r *Run) encodeBlock(w io.Writer, block []numbered, sums []sum) error {
	text, err := r.renderBlock(block, sums)
	if err != nil {
		return err
	}
	footer, err := footerStart(bytes.NewReader(text), int64(len(text)))
	if err != nil {
		return err
	}
	digits := text[footer:]
	if n := bytes.Count(digits, []byte(noDigest)); n != 1 {
		return fmt.Errorf("%d places for the digest of the file", n)
	}
	whole := sha256.Sum256(text)
	hex.Encode(digits[bytes.Index(digits, []byte(noDigest)):], whole[:])
	_, err = w.Write(text)
	return err
}

// renderBlock makes a block file without its digest.
func (r *Run) renderBlock(block []numbered, sums []sum) (text []byte, err error) {
	defer recovered(&err)
	s := r.Identity.shape()
	var out bytes.Buffer
	pw := file.NewParquetWriter(&out, s.blockSchema(), file.WithWriterProps(blockProperties()))
	if err := s.writeColumns(pw.AppendRowGroup(), s.flatten(block)); err != nil {
		return nil, err
	}
	for _, kv := range [][2]string{
		{keyFormat, fmt.Sprint(Format)},
		{keyIdentity, r.Digest},
		{keyFile, noDigest},
		{keyDraws, blockDigest(r.Digest, sums)},
	} {
		if err := pw.AppendKeyValueMetadata(kv[0], kv[1]); err != nil {
			return nil, err
		}
	}
	err = pw.Close()
	return out.Bytes(), err
}

func sumsOf(block []numbered) []sum {
	sums := make([]sum, len(block))
	for i := range block {
		sums[i] = drawSum(block[i].number, &block[i].path)
	}
	return sums
}

// recovered turns a panic of the Parquet library into an error. Its readers
// and writers panic on damaged input and on failed writes.
func recovered(err *error) {
	if r := recover(); r != nil {
		*err = fmt.Errorf("the Parquet library gave up: %v", r)
	}
}

// columns writes the leaves of a row group one after the other and keeps the
// first error.
type columns struct {
	group file.SerialRowGroupWriter
	err   error
}

// writeColumns writes and closes the row group.
func (s *shape) writeColumns(group file.SerialRowGroupWriter, f *flat) error {
	c := &columns{group: group}
	put(c, f.draw, nil)
	put(c, f.first, nil)
	put(c, f.last, nil)
	put(c, bytesOf(f.stop), nil)
	put(c, bytesOf(f.why), nil)
	put(c, f.violation, nil)
	put(c, f.gap, nil)
	put(c, f.borderline, nil)
	put(c, f.twins, nil)
	put(c, f.redraws, nil)
	put(c, f.entryStep, f.entries)
	put(c, f.entryPredictor, f.entries)
	put(c, f.entryNegative, f.entries)
	put(c, f.coefStep, f.coefs)
	put(c, f.coefPredictor, f.coefs)
	if s.terms != nil {
		put(c, f.coefTerm, f.coefs)
	}
	if s.classes > 1 {
		put(c, f.coefClass, f.coefs)
	}
	put(c, f.coefValue, f.coefs)
	put(c, f.intercept, f.intercepts)
	put(c, f.always, f.alwayses)
	put(c, f.nullDeviance, nil)
	put(c, f.deviance, f.deviances)
	put(c, f.still, f.stills)
	return errors.Join(c.err, group.Close())
}

// batchWriter is a typed column writer of the library.
type batchWriter[T any] interface {
	WriteBatch(values []T, definition, repetition []int16) (int64, error)
	Close() error
}

// put writes the next leaf. lengths are those of its lists, one per row; nil
// for a leaf with one value per row.
func put[T any](c *columns, values []T, lengths []int) {
	if c.err != nil {
		return
	}
	column, err := c.group.NextColumn()
	if err != nil {
		c.err = err
		return
	}
	w, ok := column.(batchWriter[T])
	if !ok {
		c.err = fmt.Errorf("column %s: holds no %T", column.Descr().Path(), values)
		return
	}
	definition, repetition := levels(lengths)
	_, err = w.WriteBatch(values, definition, repetition)
	c.err = errors.Join(err, w.Close())
}

// levels encodes list lengths as Parquet's definition and repetition levels.
func levels(lengths []int) (definition, repetition []int16) {
	for _, n := range lengths {
		if n == 0 {
			definition, repetition = append(definition, 0), append(repetition, 0)
		}
		for i := range n {
			definition, repetition = append(definition, 1), append(repetition, int16(min(i, 1)))
		}
	}
	return definition, repetition
}

func bytesOf(texts []string) []parquet.ByteArray {
	list := make([]parquet.ByteArray, len(texts))
	for i, t := range texts {
		list[i] = parquet.ByteArray(t)
	}
	return list
}
