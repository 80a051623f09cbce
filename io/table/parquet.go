package table

import (
	"context"
	"errors"
	"os"
	"path/filepath"
)

// parquetSet is one or more Parquet files of one schema, one below the other.
type parquetSet struct {
	files  []*parquetFile
	leaves [][]*leaf // per file, per column of the table; nil where a column cannot be read
	cols   []Column
	total  int64
}

// openParquet reads the footers of the files.
func openParquet(paths []string) (format, error) {
	s := &parquetSet{}
	for _, path := range paths {
		pf, err := readFooter(path)
		if err != nil {
			return nil, err
		}
		cols, leaves, err := pf.parquetColumns()
		if err != nil {
			return nil, inFile(path, err)
		}
		if s.cols == nil {
			s.cols = cols
		} else if err := sameSchema(paths[0], s.cols, path, cols); err != nil {
			return nil, err
		}
		pf.firstRow = s.total
		pf.schema, pf.arrow = nil, ""
		s.total += pf.rows
		if s.total < 0 || s.total > 1<<62 {
			return nil, faultf(path, "the footer claims %d rows", pf.rows)
		}
		s.files, s.leaves = append(s.files, pf), append(s.leaves, leaves)
	}
	return s, nil
}

// sameSchema names the first difference between the columns of two files.
// Whether missing values are allowed makes no difference; the order does.
func sameSchema(first string, want []Column, path string, got []Column) error {
	base := filepath.Base(first)
	for i := range min(len(want), len(got)) {
		w, g := want[i], got[i]
		switch {
		case w.Name != g.Name:
			return faultf(path, "column %d is called %s, in %s it is %s: files of one table need the same columns in the same order", i+1, quote(g.Name), base, quote(w.Name))
		case w.Type != g.Type:
			return columnFaultf(path, g.Name, "is %s, in %s it is %s: files of one table need the same types", g.Type, base, w.Type)
		}
	}
	if len(want) != len(got) {
		return faultf(path, "has %s, %s has %d: files of one table need the same columns", plural(int64(len(got)), "column"), base, len(want))
	}
	return nil
}

func (s *parquetSet) columns() []Column { return s.cols }
func (s *parquetSet) rows() int64       { return s.total }
func (s *parquetSet) rowwise() bool     { return false }

// chunkTask is one column chunk to be read.
type chunkTask struct {
	file  int
	group int
	first int64 // table row of the group's first row
}

// fill implements format. Row groups are read one after the other, the
// columns of each at the same time.
func (s *parquetSet) fill(ctx context.Context, sinks []sink, workers int) ([]rounded, error) {
	var tasks []chunkTask
	for i, pf := range s.files {
		row := pf.firstRow
		for g := range pf.groups {
			tasks = append(tasks, chunkTask{file: i, group: g, first: row})
			row += pf.groups[g].rows
		}
	}
	total := make([]rounded, len(sinks))
	readers := make([]*chunkReader, workers)
	open := -1
	var f *os.File
	defer func() {
		if f != nil {
			f.Close()
		}
	}()
	for _, t := range tasks {
		if t.file != open {
			if f != nil {
				f.Close()
			}
			var err error
			if f, err = os.Open(s.files[t.file].path); err != nil {
				return nil, openFault(s.files[t.file].path, err)
			}
			open = t.file
		}
		if err := s.fillGroup(ctx, f, t, sinks, total, readers); err != nil {
			return nil, err
		}
	}
	return total, nil
}

// fillGroup reads the columns of one row group.
func (s *parquetSet) fillGroup(ctx context.Context, f *os.File, t chunkTask, sinks []sink, total []rounded, readers []*chunkReader) error {
	pf := s.files[t.file]
	group := &pf.groups[t.group]
	if group.rows == 0 {
		return nil
	}
	end := t.first + group.rows
	return parallel(ctx, len(readers), len(sinks), func(w, k int) (err error) {
		if readers[w] == nil {
			readers[w] = &chunkReader{}
		}
		l := s.leaves[t.file][sinks[k].col]
		chunk := group.chunks[l.chunk]
		if text := sinks[k].texts; text != nil {
			err = readers[w].readText(f, chunk, l, text, text.codes[t.first:end], t.first)
		} else {
			var rd rounded
			rd, err = readers[w].read(f, chunk, l, sinks[k].values[t.first:end], t.first)
			total[k].merge(rd)
		}
		return inColumn(pf.path, s.cols[sinks[k].col].Name, err)
	})
}

// inColumn is inFile for errors met in a column.
func inColumn(path, column string, err error) error {
	if err = inFile(path, err); err == nil {
		return nil
	}
	var e *Error
	if errors.As(err, &e) && e.Column == "" {
		e.Column = column
	}
	return err
}
