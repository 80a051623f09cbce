package table

import (
	"bytes"
	"encoding/binary"
	"errors"
	"io"
	"sync"

	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/klauspost/compress/zstd"
	"github.com/pierrec/lz4/v4"
)

// Values of Parquet's CompressionCodec.
const (
	codecNone       = 0
	codecSnappy     = 1
	codecGzip       = 2
	codecLZO        = 3
	codecBrotli     = 4
	codecLZ4Hadoop  = 5
	codecZstd       = 6
	codecLZ4        = 7
	codecNameTooBig = 8
)

var codecNames = [codecNameTooBig]string{"none", "snappy", "gzip", "lzo", "brotli", "lz4 (old framing)", "zstd", "lz4"}

// tooDense reports a claim that no codec can keep: zstd stores at best 128 KB
// in 4 bytes, brotli at best 16 MB in about as many, the others less.
func tooDense(plain, packed int64, brotli bool) bool {
	const slack = 1 << 16
	if brotli {
		return packed < 1<<20 && plain > packed<<22+slack
	}
	return plain > packed<<15+slack
}

// zstdBlocks decompresses whole blocks and never writes past the room given,
// so that a small block cannot fill the memory.
var zstdBlocks = sync.OnceValue(func() *zstd.Decoder {
	d, err := zstd.NewReader(nil, zstd.WithDecodeAllCapLimit(true), zstd.WithDecoderConcurrency(0), zstd.WithDecoderLowmem(true))
	if err != nil {
		panic(err) // only for wrong options
	}
	return d
})

// unpack decompresses one block of a Parquet file into dst, which it must fill
// exactly. The library's codecs panic on damaged input; callers guard.
func unpack(codec int32, dst, src []byte) error {
	n, err := len(dst), error(nil)
	switch codec {
	case codecNone:
		n = copy(dst, src)
		if len(src) != len(dst) {
			n = len(src)
		}
	case codecZstd:
		n, err = unpackZstd(dst, src)
	case codecLZ4:
		n, err = lz4.UncompressBlock(src, dst)
	case codecLZ4Hadoop:
		n, err = unpackHadoop(dst, src)
	case codecSnappy, codecGzip, codecBrotli:
		n, err = unpackLibrary(codec, dst, src)
	default:
		name := "unknown"
		if codec >= 0 && codec < codecNameTooBig {
			name = codecNames[codec]
		}
		return refusef("compression %d (%s) is not read: write the file with zstd or snappy", codec, name)
	}
	if err != nil {
		return damagedf("a page does not decompress: %v", err)
	}
	if n != len(dst) {
		return damagedf("a page claims %d bytes and has %d", len(dst), n)
	}
	return nil
}

func unpackZstd(dst, src []byte) (int, error) {
	if len(dst) == 0 {
		return 0, nil
	}
	out, err := zstdBlocks().DecodeAll(src, dst[:0:len(dst)])
	if err == nil && len(out) > 0 && &out[0] != &dst[0] {
		return 0, errors.New("more bytes than announced")
	}
	return len(out), err
}

// unpackLibrary uses the library's own codecs. Snappy would allocate what the
// block claims, so the claim is compared first.
func unpackLibrary(codec int32, dst, src []byte) (int, error) {
	if len(dst) == 0 {
		return 0, nil
	}
	if codec == codecSnappy {
		if n, k := binary.Uvarint(src); k <= 0 || n != uint64(len(dst)) {
			return int(min(n, 1<<40)), nil
		}
	}
	c, err := compress.GetCodec(compress.Compression(codec))
	if err != nil {
		return 0, err
	}
	return len(c.Decode(dst, src)), nil
}

// unpackHadoop reads the framing that old writers gave to LZ4 blocks: the two
// sizes in 4 bytes each, highest first, then the block; repeated. Others wrote
// the bare block under the same number.
func unpackHadoop(dst, src []byte) (int, error) {
	done, rest := 0, src
	for len(rest) >= 8 && done < len(dst) {
		plain := int64(binary.BigEndian.Uint32(rest))
		packed := int64(binary.BigEndian.Uint32(rest[4:]))
		if plain > int64(len(dst)-done) || packed > int64(len(rest)-8) {
			break
		}
		n, err := lz4.UncompressBlock(rest[8:8+packed], dst[done:int64(done)+plain])
		if err != nil || int64(n) != plain {
			break
		}
		done, rest = done+n, rest[8+packed:]
	}
	if done == len(dst) && len(rest) == 0 {
		return done, nil
	}
	return lz4.UncompressBlock(src, dst)
}

// unpackFrame decompresses a buffer of an Arrow IPC message into dst, which it
// must fill exactly.
func unpackFrame(codec int8, dst, src []byte) error {
	var n int
	var err error
	switch codec {
	case arrowLZ4:
		r := lz4Frames.Get().(*lz4.Reader)
		defer lz4Frames.Put(r)
		r.Reset(bytes.NewReader(src))
		n, err = io.ReadFull(r, dst)
	case arrowZstd:
		n, err = unpackZstd(dst, src)
	default:
		return refusef("compression %d is not read", codec)
	}
	if err != nil || n != len(dst) {
		return damagedf("a buffer of %d bytes does not decompress: %v", len(dst), err)
	}
	return nil
}

var lz4Frames = sync.Pool{New: func() any { return lz4.NewReader(nil) }}
