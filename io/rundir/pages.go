package rundir

import (
	"encoding/binary"
	"errors"
	"fmt"
	"math"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/file"
)

// Pages are decoded here and not by the library's column readers: those loop
// without end on a page that says it holds more than it does. What a block
// needs is small: plain values, and levels of 0 or 1.

// chunk holds the decoded values and levels of a column chunk.
type chunk[T any] struct {
	values                 []T
	definition, repetition []byte // nil for a column without lists
}

// decoder reads n plain values from the start of data.
type decoder[T any] func(data []byte, n int) ([]T, error)

// readChunk reads the pages of a chunk that says it holds want levels.
func readChunk[T any](pages file.PageReader, nested bool, want int64, decode decoder[T]) (c chunk[T], err error) {
	var have int64
	for have < want && pages.Next() {
		page, ok := pages.Page().(*file.DataPageV1)
		if !ok || parquet.Encoding(page.Encoding()) != parquet.Encodings.Plain {
			return c, errors.New("a page of a kind that no block has")
		}
		n := int64(page.NumValues())
		if n < 1 || n > want-have {
			return c, fmt.Errorf("a page says it holds %d values where %d are left", n, want-have)
		}
		if err := c.addPage(page.Data(), int(n), nested, decode); err != nil {
			return c, err
		}
		have += n
	}
	if err := pages.Err(); err != nil {
		return c, err
	}
	if have != want {
		return c, fmt.Errorf("it ends after %d of %d values", have, want)
	}
	return c, nil
}

// addPage decodes a page: for a list repetition levels and definition levels,
// then as many values as there are definition levels of 1.
func (c *chunk[T]) addPage(data []byte, n int, nested bool, decode decoder[T]) error {
	present := n
	if nested {
		repetition, rest, err := readLevels(data, n)
		if err != nil {
			return err
		}
		definition, rest, err := readLevels(rest, n)
		if err != nil {
			return err
		}
		data, present = rest, 0
		for _, d := range definition {
			present += int(d)
		}
		c.definition, c.repetition = append(c.definition, definition...), append(c.repetition, repetition...)
	}
	values, err := decode(data, present)
	c.values = append(c.values, values...)
	return err
}

// errShort says that a page ends before what it should hold.
var errShort = errors.New("a page is too short")

// readLevels decodes n levels of 0 or 1: a length in four bytes, then runs of
// Parquet's RLE/bit-packing hybrid at bit width 1.
func readLevels(data []byte, n int) (levels, rest []byte, err error) {
	if len(data) < 4 {
		return nil, nil, errShort
	}
	length := int64(binary.LittleEndian.Uint32(data))
	if length > int64(len(data)-4) {
		return nil, nil, errShort
	}
	runs, rest := data[4:4+length], data[4+length:]
	for len(levels) < n {
		head, used := binary.Uvarint(runs)
		if used <= 0 || len(runs) == used {
			return nil, nil, errShort
		}
		runs = runs[used:]
		if head&1 == 1 {
			levels, runs, err = unpack(levels, runs, head>>1, n)
		} else {
			levels, runs, err = repeat(levels, runs, head>>1, n)
		}
		if err != nil {
			return nil, nil, err
		}
	}
	return levels, rest, nil
}

// unpack appends groups of eight levels, a bit each; the last group may hold
// more than are left.
func unpack(levels, runs []byte, groups uint64, n int) ([]byte, []byte, error) {
	if groups == 0 || groups > uint64(len(runs)) {
		return nil, nil, errShort
	}
	for _, b := range runs[:groups] {
		for bit := 0; bit < 8 && len(levels) < n; bit++ {
			levels = append(levels, b>>bit&1)
		}
	}
	return levels, runs[groups:], nil
}

// repeat appends one level so many times.
func repeat(levels, runs []byte, count uint64, n int) ([]byte, []byte, error) {
	if count == 0 || count > uint64(n-len(levels)) || runs[0] > 1 {
		return nil, nil, errors.New("a run of levels that makes no sense")
	}
	for range count {
		levels = append(levels, runs[0])
	}
	return levels, runs[1:], nil
}

func plainInts(data []byte, n int) ([]int32, error) {
	if len(data)/4 < n {
		return nil, errShort
	}
	list := make([]int32, n)
	for i := range list {
		list[i] = int32(binary.LittleEndian.Uint32(data[4*i:]))
	}
	return list, nil
}

func plainFloats(data []byte, n int) ([]float64, error) {
	if len(data)/8 < n {
		return nil, errShort
	}
	list := make([]float64, n)
	for i := range list {
		list[i] = math.Float64frombits(binary.LittleEndian.Uint64(data[8*i:]))
	}
	return list, nil
}

func plainFlags(data []byte, n int) ([]bool, error) {
	if len(data) < (n+7)/8 {
		return nil, errShort
	}
	list := make([]bool, n)
	for i := range list {
		list[i] = data[i/8]>>(i%8)&1 == 1
	}
	return list, nil
}

func plainTexts(data []byte, n int) ([]string, error) {
	if len(data)/4 < n {
		return nil, errShort
	}
	list := make([]string, n)
	for i := range list {
		if len(data) < 4 || int64(binary.LittleEndian.Uint32(data)) > int64(len(data)-4) {
			return nil, errShort
		}
		end := 4 + int(binary.LittleEndian.Uint32(data))
		list[i], data = string(data[4:end]), data[end:]
	}
	return list, nil
}
