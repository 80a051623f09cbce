package demo

import (
	"fmt"
	"os"
	"path/filepath"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/apache/arrow/go/v17/parquet/pqarrow"
	"github.com/google/renameio/v2"
)

// Write writes the table as a Parquet file; it appears whole or not at all.
// An existing file of that name
// is an error that wraps os.ErrExist.
func (t *Table) Write(path string) error {
	if _, err := os.Lstat(path); err == nil {
		return fmt.Errorf("demo: %s: %w", path, os.ErrExist)
	}
	f, err := renameio.NewPendingFile(path, renameio.WithTempDir(filepath.Dir(path)), renameio.WithPermissions(0o644))
	if err != nil {
		return fmt.Errorf("demo: %w", err)
	}
	defer f.Cleanup()
	if err := t.encode(f.File); err != nil {
		return fmt.Errorf("demo: %s: %w", path, err)
	}
	if err := f.CloseAtomicallyReplace(); err != nil {
		return fmt.Errorf("demo: %w", err)
	}
	return nil
}

// encode writes the Parquet bytes. The Arrow schema is not stored beside the
// Parquet one: it would add nothing that a reader of this table needs.
func (t *Table) encode(f *os.File) error {
	rec := t.record()
	defer rec.Release()
	props := parquet.NewWriterProperties(parquet.WithCompression(compress.Codecs.Zstd))
	// pqarrow closes what it is given where it can; the pending file has to
	// stay open until it is renamed.
	w, err := pqarrow.NewFileWriter(rec.Schema(), struct{ writer }{f}, props, pqarrow.DefaultWriterProps())
	if err != nil {
		return err
	}
	if err := w.Write(rec); err != nil {
		return err
	}
	return w.Close()
}

// writer hides every other method of a file.
type writer interface {
	Write(p []byte) (int, error)
}

// record builds the Arrow record of the whole table.
func (t *Table) record() arrow.Record {
	mem := memory.DefaultAllocator
	fields := make([]arrow.Field, len(t.columns))
	arrays := make([]arrow.Array, len(t.columns))
	for i, c := range t.columns {
		arrays[i] = c.array(mem)
		fields[i] = arrow.Field{Name: c.name, Type: arrays[i].DataType()}
		defer arrays[i].Release()
	}
	return array.NewRecord(arrow.NewSchema(fields, nil), arrays, int64(t.rows))
}

// array converts a column.
func (c column) array(mem memory.Allocator) arrow.Array {
	switch {
	case c.text != nil:
		b := array.NewStringBuilder(mem)
		defer b.Release()
		b.AppendValues(c.text, nil)
		return b.NewArray()
	case c.integer != nil:
		b := array.NewInt64Builder(mem)
		defer b.Release()
		b.AppendValues(c.integer, nil)
		return b.NewArray()
	}
	b := array.NewFloat64Builder(mem)
	defer b.Release()
	b.AppendValues(c.number, nil)
	return b.NewArray()
}
