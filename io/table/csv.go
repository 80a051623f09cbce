package table

import (
	"bufio"
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"unicode/utf8"

	"github.com/klauspost/compress/gzip"
)

// csvFile is a table in comma-separated text (RFC 4180): a header, then a
// record per row. Separators are commas, semicolons, tabs or bars, whichever
// the header has most of. Blank lines are passed over.
type csvFile struct {
	path  string
	comma byte
	cols  []Column
	total int64
}

// openCSV reads the header, and every cell once to find the columns' kinds.
func openCSV(path string) (format, error) {
	c := &csvFile{path: path}
	names, err := c.header()
	if err != nil {
		return nil, inText(path, err)
	}
	if err := checkNames(path, names); err != nil {
		return nil, err
	}
	if err := c.findKinds(context.Background(), names); err != nil {
		return nil, inText(path, err)
	}
	return c, nil
}

// inText is inFile for text: the error already says where.
func inText(path string, err error) error {
	var d damaged
	if errors.As(err, &d) {
		return &Error{Path: path, Why: d.why}
	}
	if errors.Is(err, gzip.ErrHeader) || errors.Is(err, gzip.ErrChecksum) || errors.Is(err, io.ErrUnexpectedEOF) {
		return &Error{Path: path, Why: "the file does not decompress: was it copied whole?", Err: err}
	}
	return inFile(path, err)
}

// header reads the first record and finds the separator.
func (c *csvFile) header() ([]string, error) {
	var names []string
	b, err := openBlocks(c.path, ',')
	if err != nil {
		return nil, err
	}
	defer b.close()
	block, err := b.next(1)
	if err == io.EOF {
		return nil, damagedf("the file is empty")
	}
	if err != nil {
		return nil, err
	}
	line := firstRecord(block.data)
	switch {
	case len(line) == 0:
		return nil, damagedf("the file is empty")
	case bytes.HasPrefix(line, []byte("\xff\xfe")), bytes.HasPrefix(line, []byte("\xfe\xff")):
		return nil, damagedf("the text is UTF-16: save it as UTF-8")
	case bytes.IndexByte(line, 0) >= 0:
		return nil, damagedf("the file is not text")
	case bytes.IndexByte(bytes.TrimSuffix(line, []byte("\r")), '\r') >= 0:
		return nil, damagedf("lines end with a carriage return alone: save the file with common line ends")
	}
	c.comma = separator(line)
	f := csvFields{rest: line, comma: c.comma}
	for {
		field, ok, err := f.next()
		if err != nil {
			return nil, damagedf("line 1: %v", err)
		}
		if !ok {
			return names, nil
		}
		if !utf8.Valid(field) {
			return nil, damagedf("header line, column %d: %s is not UTF-8: save the file as UTF-8", len(names)+1, quote(string(field)))
		}
		names = append(names, string(bytes.TrimSpace(field)))
	}
}

// separator returns the separator that a header has most of.
func separator(line []byte) byte {
	best, most := byte(','), 0
	for _, c := range []byte{',', ';', '\t', '|'} {
		n, quoted := 0, false
		for _, b := range line {
			switch {
			case b == '"':
				quoted = !quoted
			case b == c && !quoted:
				n++
			}
		}
		if n > most {
			best, most = c, n
		}
	}
	return best
}

// checkNames completes the header: a column without a name (row names that
// were written along, often) is called after its position. A first line of
// measurements is no header.
func checkNames(path string, names []string) error {
	numbers, fractions := 0, 0
	for i, n := range names {
		switch _, kind := parseCell([]byte(n)); {
		case n == "":
			names[i] = fmt.Sprintf("column_%d", i+1)
		case kind == cellInteger:
			numbers++
		case kind == cellFraction:
			numbers++
			fractions++
		}
	}
	if numbers == len(names) && fractions > 0 {
		return faultf(path, "the first line holds only numbers: a header with the names of the columns is needed")
	}
	return nil
}

func (c *csvFile) columns() []Column { return c.cols }
func (c *csvFile) rows() int64       { return c.total }
func (c *csvFile) rowwise() bool     { return true }

// records calls each for every record of a block: its row in the table, its
// line in the file, and its fields.
func (c *csvFile) records(b csvBlock, scratch *csvFields, each func(row, line int64) error) error {
	row, line := b.row, b.line
	data := b.data
	for len(data) > 0 {
		rec, rest, lines := cutRecord(data)
		data = rest
		at := line
		line += lines
		if len(rec) == 0 {
			continue
		}
		scratch.rest, scratch.comma, scratch.done = rec, c.comma, false
		if err := each(row, at); err != nil {
			return err
		}
		row++
	}
	return nil
}

// eachField calls each for the fields of a record and checks their number.
func (c *csvFile) eachField(f *csvFields, columns int, line int64, each func(k int, field []byte) error) error {
	for k := 0; ; k++ {
		field, ok, err := f.next()
		if err != nil {
			return damagedf("line %d: %v", line, err)
		}
		switch {
		case !ok && k == columns:
			return nil
		case !ok:
			return damagedf("line %d has %s, the header has %d", line, plural(int64(k), "field"), columns)
		case k == columns:
			return damagedf("line %d has more fields than the header, which has %d", line, columns)
		}
		if err := each(k, field); err != nil {
			return err
		}
	}
}

// fill implements format: the whole file is read, the columns asked for are
// kept.
func (c *csvFile) fill(ctx context.Context, sinks []sink, workers int) ([]rounded, error) {
	target := make([]int, len(c.cols))
	for k := range target {
		target[k] = -1
	}
	for i, s := range sinks {
		target[s.col] = i
	}
	found := make([][]rounded, workers)
	caches := make([][]textCache, workers)
	rows, err := c.blocks(ctx, workers, func(w int, b csvBlock) error {
		if found[w] == nil {
			found[w], caches[w] = make([]rounded, len(sinks)), newTextCaches(sinks)
		}
		var fields csvFields
		return c.records(b, &fields, func(row, line int64) error {
			if row >= c.total {
				return faultf(c.path, "the file has changed since it was opened: start again")
			}
			return c.eachField(&fields, len(c.cols), line, func(k int, field []byte) error {
				i := target[k]
				if i < 0 {
					return nil
				}
				if text := sinks[i].texts; text != nil {
					text.codes[row] = caches[w][i].cell(field, row)
					return nil
				}
				v, kind := parseCell(field)
				switch kind {
				case cellText:
					return columnFaultf(c.path, c.cols[k].Name, "line %d holds %s, not a number", line, quote(string(field)))
				case cellMissing:
					v = missing
				case cellInteger:
					if !exactText(field) {
						found[w][i].add(row)
					}
				}
				sinks[i].values[row] = v
				return nil
			})
		})
	})
	if err != nil {
		return nil, inText(c.path, err)
	}
	if rows != c.total {
		return nil, faultf(c.path, "the file has changed since it was opened: start again")
	}
	total := make([]rounded, len(sinks))
	for _, f := range found {
		for i := range f {
			total[i].merge(f[i])
		}
	}
	return total, nil
}

// newTextCaches returns a cache for every column of text.
func newTextCaches(sinks []sink) []textCache {
	caches := make([]textCache, len(sinks))
	for i, s := range sinks {
		caches[i].texts = s.texts
	}
	return caches
}

// cell returns the code of a cell. The words for a missing number stand for a
// missing text too.
func (c *textCache) cell(field []byte, row int64) int32 {
	if b := bytes.TrimSpace(field); len(b) <= 4 && missingWords[string(b)] {
		return noCode
	}
	return c.add(field, row)
}

// blocks cuts the file into blocks of whole records and has them worked on at
// the same time. It returns the number of rows.
func (c *csvFile) blocks(ctx context.Context, workers int, work func(worker int, b csvBlock) error) (int64, error) {
	in, err := openBlocks(c.path, c.comma)
	if err != nil {
		return 0, err
	}
	defer in.close()
	in.keep(workers)
	err = in.share(ctx, workers, work)
	return in.row, err
}

// openText opens a file of text, decompresses it if it is compressed and
// passes over a byte order mark.
func openText(path string) (*bufio.Reader, *os.File, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, nil, openFault(path, err)
	}
	in := bufio.NewReaderSize(f, 1<<16)
	if head, _ := in.Peek(2); string(head) == "\x1f\x8b" {
		z, err := gzip.NewReader(in)
		if err != nil {
			f.Close()
			return nil, nil, err
		}
		in = bufio.NewReaderSize(z, 1<<16)
	}
	if head, _ := in.Peek(3); string(head) == "\xef\xbb\xbf" {
		in.Discard(3)
	}
	return in, f, nil
}
