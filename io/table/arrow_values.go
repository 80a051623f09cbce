package table

import (
	"encoding/binary"
	"io"
	"math"
	"math/big"
	"os"

	"github.com/klauspost/compress/zstd"
	"github.com/pierrec/lz4/v4"
)

// bufferReader reads columns of Arrow batches into float64. It keeps its
// buffers; one goroutine uses it at a time.
type bufferReader struct {
	in     *os.File
	packed []byte
	values []byte
	valid  []byte
	number big.Int

	stream textStream
	lz4    *lz4.Reader
	zstd   *zstd.Decoder
}

// column decodes one column of a batch into dst, one value per row. first is
// the table row of dst[0].
func (r *bufferReader) column(l *batchLayout, at fieldLayout, f arrowField, dst []float64, first int64, dictionaries map[int64][]float64) (rd rounded, err error) {
	defer guard(&err)
	n := int64(len(dst))
	width := int64(f.width())
	if f.dictionary {
		width = int64(f.indexBits)
	}
	valid, err := r.validity(l, at, len(dst))
	if err != nil {
		return rd, err
	}
	if r.values, err = r.buffer(l, l.buffers[at.buffer+1], (n*width+7)/8, r.values); err != nil {
		return rd, err
	}
	switch {
	case f.dictionary:
		err = r.lookUp(f, valid, dst, dictionaries[f.id])
	case f.typ == arrowInt:
		rd = r.integers(f, valid, dst, first)
	case f.typ == arrowDecimal:
		r.decimals(f, valid, dst)
	default:
		r.plain(f, dst)
	}
	if valid != nil {
		for i := range dst {
			if valid[i>>3]>>(i&7)&1 == 0 {
				dst[i] = missing
			}
		}
	}
	return rd, err
}

// buffer returns the first need bytes of a buffer, decompressed, in keep if
// that is large enough. Only what the rows need is ever allocated.
func (r *bufferReader) buffer(l *batchLayout, b arrowBuffer, need int64, keep []byte) ([]byte, error) {
	if l.codec == arrowRaw {
		if b.length < need {
			return nil, damagedf("a column needs %d bytes and has %d", need, b.length)
		}
		keep = grow(keep, int(need))
		return keep, r.readAt(keep, l.body+b.offset)
	}
	if b.length < 8 {
		if need == 0 {
			return keep[:0], nil
		}
		return nil, damagedf("a column needs %d bytes and has %d", need, b.length)
	}
	r.packed = grow(r.packed, int(b.length))
	if err := r.readAt(r.packed, l.body+b.offset); err != nil {
		return nil, err
	}
	plain, stored := int64(binary.LittleEndian.Uint64(r.packed)), r.packed[8:]
	if plain == -1 { // stored as it is
		if int64(len(stored)) < need {
			return nil, damagedf("a column needs %d bytes and has %d", need, len(stored))
		}
		keep = grow(keep, int(need))
		copy(keep, stored)
		return keep, nil
	}
	const padding = 1 << 12 // writers round buffers up, by 64 bytes mostly
	if plain < need || plain > 2*need+padding || tooDense(plain, b.length, false) {
		return nil, damagedf("a column needs %d bytes and claims %d", need, plain)
	}
	keep = grow(keep, int(plain))
	return keep[:plain], unpackFrame(l.codec, keep[:plain], stored)
}

func (r *bufferReader) readAt(b []byte, at int64) error {
	n, err := r.in.ReadAt(b, at)
	switch {
	case n == len(b):
		return nil
	case err == io.EOF:
		return damagedf("a column ends too early")
	}
	return err
}

// integer returns the i-th stored integer; a sign is extended.
func integer(b []byte, bits, i int) uint64 {
	switch bits {
	case 8:
		return uint64(b[i])
	case 16:
		return uint64(binary.LittleEndian.Uint16(b[2*i:]))
	case 32:
		return uint64(binary.LittleEndian.Uint32(b[4*i:]))
	}
	return binary.LittleEndian.Uint64(b[8*i:])
}

func (r *bufferReader) integers(f arrowField, valid []byte, dst []float64, first int64) (rd rounded) {
	shift := uint(64 - f.bits)
	for i := range dst {
		u := integer(r.values, f.bits, i)
		var exact bool
		if f.signed {
			v := int64(u<<shift) >> shift
			dst[i], exact = float64(v), f.bits < 64 || exactSigned(v)
		} else {
			dst[i], exact = float64(u), f.bits < 64 || exactUnsigned(u)
		}
		if !exact && (valid == nil || valid[i>>3]>>(i&7)&1 == 1) {
			rd.add(first + int64(i))
		}
	}
	return rd
}

// plain decodes floats and truth values.
func (r *bufferReader) plain(f arrowField, dst []float64) {
	switch {
	case f.typ == arrowBool:
		for i := range dst {
			dst[i] = float64(r.values[i>>3] >> (i & 7) & 1)
		}
	case f.bits == 16:
		for i := range dst {
			dst[i] = foreign(halfToFloat(binary.LittleEndian.Uint16(r.values[2*i:])))
		}
	case f.bits == 32:
		for i := range dst {
			dst[i] = foreign(float64(math.Float32frombits(binary.LittleEndian.Uint32(r.values[4*i:]))))
		}
	default:
		for i := range dst {
			dst[i] = foreign(math.Float64frombits(binary.LittleEndian.Uint64(r.values[8*i:])))
		}
	}
}

func (r *bufferReader) decimals(f arrowField, valid []byte, dst []float64) {
	w := f.bits / 8
	turned := make([]byte, w)
	for i := range dst {
		if valid != nil && valid[i>>3]>>(i&7)&1 == 0 {
			continue
		}
		for k := range turned {
			turned[k] = r.values[(i+1)*w-1-k]
		}
		dst[i], _ = decimal(bigEndianInt(&r.number, turned), f.scale)
	}
}

// lookUp decodes positions in a dictionary of numbers.
func (r *bufferReader) lookUp(f arrowField, valid []byte, dst []float64, dictionary []float64) error {
	switch f.indexBits {
	case 8, 16, 32, 64:
	default:
		return damagedf("a dictionary has positions of %d bits", f.indexBits)
	}
	for i := range dst {
		if valid != nil && valid[i>>3]>>(i&7)&1 == 0 {
			continue
		}
		k := integer(r.values, f.indexBits, i)
		if k >= uint64(len(dictionary)) {
			return damagedf("a position in a dictionary of %d values is %d", len(dictionary), k)
		}
		dst[i] = dictionary[k]
	}
	return nil
}

// halfToFloat converts a number of 16 bits (IEEE 754 binary16).
func halfToFloat(h uint16) float64 {
	sign, exponent, fraction := 1.0, int(h>>10&31), float64(h&1023)
	if h>>15 == 1 {
		sign = -1
	}
	switch exponent {
	case 0:
		return sign * math.Ldexp(fraction, -24)
	case 31:
		if fraction != 0 {
			return math.NaN()
		}
		return math.Inf(int(sign))
	}
	return sign * math.Ldexp(1024+fraction, exponent-25)
}
