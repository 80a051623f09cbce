package table

import (
	"bufio"
	"bytes"
	"context"
	"errors"
	"io"
	"os"
	"sync"
)

const (
	blockSize     = 1 << 20 // bytes of text handed to a worker at a time
	longestRecord = 1 << 28 // bytes of one record; a quote left open would take the whole file
)

// csvBlock is a piece of text made of whole records.
type csvBlock struct {
	data []byte
	row  int64 // table row of its first record; the header is not counted
	line int64 // its first line in the file, from 1
}

// csvBlocks cuts a file of text into blocks.
type csvBlocks struct {
	in     *bufio.Reader
	file   *os.File
	comma  byte
	carry  []byte // begin of a record whose end was not read yet
	row    int64
	line   int64
	header bool // the header has been passed
	spare  chan []byte
}

func openBlocks(path string, comma byte) (*csvBlocks, error) {
	in, f, err := openText(path)
	if err != nil {
		return nil, err
	}
	return &csvBlocks{in: in, file: f, comma: comma, line: 1}, nil
}

func (b *csvBlocks) close() { b.file.Close() }

// keep sets up the exchange of used buffers.
func (b *csvBlocks) keep(workers int) { b.spare = make(chan []byte, 2*workers+1) }

// buffer returns a used buffer or a new one.
func (b *csvBlocks) buffer() []byte {
	select {
	case s := <-b.spare:
		return s[:0]
	default:
		return make([]byte, 0, blockSize+blockSize/4)
	}
}

// release takes a buffer back.
func (b *csvBlocks) release(s []byte) {
	select {
	case b.spare <- s:
	default:
	}
}

// next returns the next block of at least so many bytes, io.EOF after the
// last. A record ends at a line end outside quotes.
func (b *csvBlocks) next(least int) (csvBlock, error) {
	data := append(b.buffer(), b.carry...)
	end, seen, quotes := 0, 0, 0
	for end < least {
		if len(data) > longestRecord {
			return csvBlock{}, damagedf("line %d: a record is longer than %s: is a quote opened and never closed?", b.line, byteSize(longestRecord))
		}
		n, err := b.read(&data)
		if err != nil && err != io.EOF {
			return csvBlock{}, err
		}
		for {
			k := bytes.IndexByte(data[seen:], '\n')
			if k < 0 {
				quotes += bytes.Count(data[seen:], []byte{'"'})
				seen = len(data)
				break
			}
			quotes += bytes.Count(data[seen:seen+k], []byte{'"'})
			seen += k + 1
			if quotes&1 == 0 {
				end = seen
			}
		}
		if n == 0 && err == io.EOF {
			if quotes&1 == 1 {
				return csvBlock{}, b.openQuote(data, end)
			}
			end = len(data)
			break
		}
	}
	if end == 0 {
		return csvBlock{}, io.EOF
	}
	b.carry = append(b.carry[:0], data[end:]...)
	block := csvBlock{data: data[:end], row: b.row, line: b.line}
	rows, lines := countRecords(block.data)
	b.row, b.line = b.row+rows, b.line+lines
	return block, nil
}

// openQuote explains a file whose quotes do not come in pairs: the record that
// begins at end is never closed, or holds a quote that should be doubled.
func (b *csvBlocks) openQuote(data []byte, end int) error {
	line := b.line + int64(bytes.Count(data[:end], []byte{'\n'}))
	f := csvFields{rest: data[end:], comma: b.comma}
	for {
		_, ok, err := f.next()
		switch {
		case err == errBareQuote:
			return damagedf("line %d: %v", line, err)
		case err != nil || !ok:
			return damagedf("line %d: a quote is opened and never closed", line)
		}
	}
}

// read appends what is there, up to the room in the slice.
func (b *csvBlocks) read(data *[]byte) (int, error) {
	d := *data
	if len(d) == cap(d) {
		d = append(d, make([]byte, max(blockSize, cap(d)))...)[:len(d)]
	}
	n, err := b.in.Read(d[len(d):cap(d)])
	*data = d[:len(d)+n]
	return n, err
}

// share reads blocks and gives them to the workers. Of several errors the one
// that stands first in the file is returned: a quote that is not closed, say,
// is often the echo of a damaged line before.
func (b *csvBlocks) share(ctx context.Context, workers int, work func(worker int, blk csvBlock) error) error {
	queue := make(chan csvBlock, workers)
	var first firstError
	var wait sync.WaitGroup
	for w := range workers {
		wait.Go(func() {
			for blk := range queue {
				if err := work(w, blk); err != nil {
					first.note(blk.row, err)
				}
				b.release(blk.data[:0])
			}
		})
	}
	err := b.produce(ctx, queue, &first)
	close(queue)
	wait.Wait()
	if first.err != nil {
		return first.err
	}
	return err
}

// produce reads blocks until the end of the file or an error.
func (b *csvBlocks) produce(ctx context.Context, queue chan<- csvBlock, first *firstError) error {
	for !first.is() {
		if err := ctx.Err(); err != nil {
			return err
		}
		blk, err := b.next(blockSize)
		if err == io.EOF {
			return nil
		}
		if err != nil {
			return err
		}
		if !b.header {
			b.header = true
			blk = b.dropHeader(blk)
		}
		queue <- blk
	}
	return nil
}

// firstError keeps the error with the smallest position.
type firstError struct {
	mu  sync.Mutex
	at  int64
	err error
}

func (f *firstError) note(at int64, err error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	if f.err == nil || at < f.at {
		f.at, f.err = at, err
	}
}

func (f *firstError) is() bool {
	f.mu.Lock()
	defer f.mu.Unlock()
	return f.err != nil
}

// dropHeader takes the first record out of the first block and out of the
// count of rows.
func (b *csvBlocks) dropHeader(blk csvBlock) csvBlock {
	for len(blk.data) > 0 {
		rec, rest, lines := cutRecord(blk.data)
		blk.data, blk.line = rest, blk.line+lines
		if len(rec) > 0 {
			b.row--
			break
		}
	}
	return blk
}

// firstRecord returns the first record that is not a blank line.
func firstRecord(data []byte) []byte {
	for len(data) > 0 {
		rec, rest, _ := cutRecord(data)
		if len(rec) > 0 {
			return rec
		}
		data = rest
	}
	return nil
}

// cutRecord cuts off the first record, without its line end, and returns the
// number of lines it takes. A blank line gives an empty record.
func cutRecord(data []byte) (rec, rest []byte, lines int64) {
	quotes, seen := 0, 0
	for {
		k := bytes.IndexByte(data[seen:], '\n')
		if k < 0 {
			return trimCR(data), nil, lines + 1
		}
		quotes += bytes.Count(data[seen:seen+k], []byte{'"'})
		seen += k + 1
		lines++
		if quotes&1 == 0 {
			return trimCR(data[:seen-1]), data[seen:], lines
		}
	}
}

func trimCR(b []byte) []byte {
	if n := len(b); n > 0 && b[n-1] == '\r' {
		return b[:n-1]
	}
	return b
}

// countRecords counts records, blank lines left out, and lines.
func countRecords(data []byte) (records, lines int64) {
	for len(data) > 0 {
		rec, rest, n := cutRecord(data)
		if len(rec) > 0 {
			records++
		}
		lines += n
		data = rest
	}
	return records, lines
}

// csvFields takes a record apart.
type csvFields struct {
	rest    []byte
	comma   byte
	done    bool
	scratch []byte // a field whose doubled quotes were made single
}

var (
	errBareQuote  = errors.New("a quote stands inside a field that does not begin with one: put the field in quotes and double the quote")
	errAfterQuote = errors.New("text follows the closing quote of a field: double a quote that belongs to the text")
)

// next returns the next field; ok is false after the last. The slice is valid
// until the next call.
func (f *csvFields) next() (field []byte, ok bool, err error) {
	if f.done {
		return nil, false, nil
	}
	if len(f.rest) > 0 && f.rest[0] == '"' {
		field, err = f.quoted()
		return field, true, err
	}
	k := bytes.IndexByte(f.rest, f.comma)
	if k < 0 {
		field, f.rest, f.done = f.rest, nil, true
	} else {
		field, f.rest = f.rest[:k], f.rest[k+1:]
	}
	if bytes.IndexByte(field, '"') >= 0 {
		return nil, false, errBareQuote
	}
	return field, true, nil
}

// quoted reads a field in quotes.
func (f *csvFields) quoted() ([]byte, error) {
	b := f.rest[1:]
	f.scratch = f.scratch[:0]
	plain := true
	for {
		k := bytes.IndexByte(b, '"')
		if k < 0 {
			return nil, errAfterQuote
		}
		if k+1 < len(b) && b[k+1] == '"' { // doubled
			f.scratch = append(f.scratch, b[:k+1]...)
			b, plain = b[k+2:], false
			continue
		}
		field := b[:k]
		if !plain {
			f.scratch = append(f.scratch, field...)
			field = f.scratch
		}
		switch after := b[k+1:]; {
		case len(after) == 0:
			f.rest, f.done = nil, true
		case after[0] == f.comma:
			f.rest = after[1:]
		default:
			return nil, errAfterQuote
		}
		return field, nil
	}
}
