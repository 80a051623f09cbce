package table

import (
	"encoding/binary"
	"math/big"
	"os"

	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/file"
)

// chunkReader reads column chunks into float64, one after the other. It keeps
// its buffers; one goroutine uses it at a time.
type chunkReader struct {
	pages  pages
	i32    []int32
	i64    []int64
	f32    []float32
	truth  []bool
	bytes  []parquet.ByteArray
	fixed  []parquet.FixedLenByteArray
	number big.Int
}

// read decodes one chunk into dst, one value per row of the row group. first
// is the table row of dst[0], for the count of rounded integers.
func (r *chunkReader) read(f *os.File, c columnChunk, l *leaf, dst []float64, first int64) (rd rounded, err error) {
	defer guard(&err)
	if err := c.readable(len(dst)); err != nil {
		return rd, err
	}
	r.pages.open(f, c, l, int64(len(dst)))
	col := file.NewColumnReader(l.descr, &r.pages, memory.DefaultAllocator, nil)
	for row := 0; row < len(dst); {
		if err := r.pages.next(); err != nil {
			return rd, err
		}
		part := dst[row : row+r.pages.count]
		if r.pages.filled > 0 {
			if err := r.decode(col, l, part[:r.pages.filled]); err != nil {
				return rd, err
			}
		}
		r.countRounded(l, part[:r.pages.filled], first+int64(row), &rd)
		spread(part, r.pages.filled, r.pages.valid)
		row += r.pages.count
	}
	return rd, nil
}

// readable refuses a chunk that lies elsewhere, or does not hold a value per row.
func (c columnChunk) readable(rows int) error {
	switch {
	case c.elsewhere:
		return refusef("the column lies in another file, which is not read")
	case c.sealed:
		return refusef("the column is encrypted: write a copy that is not")
	case c.values != int64(rows):
		return damagedf("a column chunk claims %d values for %d rows", c.values, rows)
	}
	return nil
}

// spread moves the values at the front of v to the rows that have one, from
// the last row backwards, and puts missing where there is none.
func spread(v []float64, filled int, valid []byte) {
	if filled == len(v) {
		return
	}
	k := filled
	for i := len(v) - 1; i >= 0; i-- {
		if k > 0 && valid[i>>3]>>(i&7)&1 == 1 {
			k--
			v[i] = v[k]
		} else {
			v[i] = missing
		}
	}
}

// decode reads the values of a page.
func (r *chunkReader) decode(col file.ColumnChunkReader, l *leaf, dst []float64) error {
	n := int64(len(dst))
	var got int
	var err error
	switch c := col.(type) {
	case *file.Float64ColumnChunkReader:
		_, got, err = c.ReadBatch(n, dst, nil, nil)
		for i, v := range dst {
			dst[i] = foreign(v)
		}
	case *file.Float32ColumnChunkReader:
		r.f32 = growAny(r.f32, len(dst))
		_, got, err = c.ReadBatch(n, r.f32, nil, nil)
		for i, v := range r.f32 {
			dst[i] = foreign(float64(v))
		}
	case *file.Int32ColumnChunkReader:
		r.i32 = growAny(r.i32, len(dst))
		_, got, err = c.ReadBatch(n, r.i32, nil, nil)
		r.fromInt32(l, dst)
	case *file.Int64ColumnChunkReader:
		r.i64 = growAny(r.i64, len(dst))
		_, got, err = c.ReadBatch(n, r.i64, nil, nil)
		r.fromInt64(l, dst)
	case *file.BooleanColumnChunkReader:
		r.truth = growAny(r.truth, len(dst))
		_, got, err = c.ReadBatch(n, r.truth, nil, nil)
		for i, v := range r.truth {
			dst[i] = 0
			if v {
				dst[i] = 1
			}
		}
	case *file.FixedLenByteArrayColumnChunkReader:
		r.fixed = growAny(r.fixed, len(dst))
		_, got, err = c.ReadBatch(n, r.fixed, nil, nil)
		if err == nil && got == len(dst) {
			err = r.fromFixed(l, dst)
		}
	case *file.ByteArrayColumnChunkReader:
		r.bytes = growAny(r.bytes, len(dst))
		_, got, err = c.ReadBatch(n, r.bytes, nil, nil)
		if err == nil && got == len(dst) {
			for i, b := range r.bytes {
				dst[i] = r.fromDecimal(l, b)
			}
		}
	default:
		return damagedf("values of this type are no numbers")
	}
	if err == nil && got != len(dst) {
		err = damagedf("a page has %d values where it claims %d", got, len(dst))
	}
	return err
}

// growAny returns a slice of n elements, the old one if it is large enough.
func growAny[T any](b []T, n int) []T {
	if cap(b) < n {
		return make([]T, n)
	}
	return b[:n]
}

func (r *chunkReader) fromInt32(l *leaf, dst []float64) {
	for i, v := range r.i32 {
		switch {
		case l.decimal:
			dst[i] = decimalSmall(int64(v), l.scale)
		case l.unsigned:
			dst[i] = float64(uint32(v))
		default:
			dst[i] = float64(v)
		}
	}
}

func (r *chunkReader) fromInt64(l *leaf, dst []float64) {
	for i, v := range r.i64 {
		switch {
		case l.decimal:
			dst[i] = decimalSmall(v, l.scale)
		case l.unsigned:
			dst[i] = float64(uint64(v))
		default:
			dst[i] = float64(v)
		}
	}
}

// fromFixed converts values of fixed length: float16 or decimals.
func (r *chunkReader) fromFixed(l *leaf, dst []float64) error {
	for i, b := range r.fixed {
		if len(b) != l.length {
			return damagedf("a value has %d bytes instead of %d", len(b), l.length)
		}
		if l.half {
			dst[i] = foreign(halfToFloat(binary.LittleEndian.Uint16(b)))
			continue
		}
		dst[i] = r.fromDecimal(l, b)
	}
	return nil
}

func (r *chunkReader) fromDecimal(l *leaf, b []byte) float64 {
	v, _ := decimal(bigEndianInt(&r.number, b), l.scale)
	return v
}

// countRounded counts 64-bit integers that float64 cannot hold. Rows are
// found from the values' positions, before these are spread.
func (r *chunkReader) countRounded(l *leaf, values []float64, first int64, rd *rounded) {
	if l.physical != physicalInt64 || l.decimal {
		return
	}
	k := -1
	for i := range values {
		v := r.i64[i]
		if l.unsigned && exactUnsigned(uint64(v)) || !l.unsigned && exactSigned(v) {
			continue
		}
		if rd.count == 0 {
			k = i
		}
		rd.add(first + int64(i))
	}
	if k >= 0 {
		rd.first = first + int64(rowOfValue(k, r.pages.valid))
	}
}

// rowOfValue returns the row of the k-th value of a page.
func rowOfValue(k int, valid []byte) int {
	if len(valid) == 0 {
		return k
	}
	for row := 0; ; row++ {
		if valid[row>>3]>>(row&7)&1 == 1 {
			if k == 0 {
				return row
			}
			k--
		}
	}
}
