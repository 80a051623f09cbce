package table

import (
	"bufio"
	"encoding/binary"
	"io"

	"github.com/klauspost/compress/zstd"
	"github.com/pierrec/lz4/v4"
)

// text decodes one column of text of a batch into the codes dst, one per row.
// first is the table row of dst[0]; view is the column's dictionary, if its
// field has one. It stops early where the column has too many levels.
func (r *bufferReader) text(l *batchLayout, at fieldLayout, f arrowField, t *texts, dst []int32, first int64, view *arrowView) (err error) {
	defer guard(&err)
	if t.full.Load() {
		return nil
	}
	if f.dictionary {
		return r.textPositions(l, at, f, t, dst, first, view)
	}
	return r.eachText(l, at, f, len(dst), func(i int, word []byte) bool {
		dst[i] = t.add(word, first+int64(i))
		return !t.full.Load()
	})
}

// textPositions decodes positions in a dictionary of text.
func (r *bufferReader) textPositions(l *batchLayout, at fieldLayout, f arrowField, t *texts, dst []int32, first int64, view *arrowView) error {
	switch f.indexBits {
	case 8, 16, 32, 64:
	default:
		return damagedf("a dictionary has positions of %d bits", f.indexBits)
	}
	n := len(dst)
	valid, err := r.validity(l, at, n)
	if err != nil {
		return err
	}
	if r.values, err = r.buffer(l, l.buffers[at.buffer+1], int64(n*f.indexBits/8), r.values); err != nil {
		return err
	}
	for i := range dst {
		dst[i] = noCode
		if valid != nil && valid[i>>3]>>(i&7)&1 == 0 {
			continue
		}
		k := integer(r.values, f.indexBits, i)
		switch {
		case view == nil:
			return damagedf("a column needs a dictionary, and there is none before it")
		case k >= uint64(len(view.codes)):
			return damagedf("a position in a dictionary of %d values is %d", len(view.codes), k)
		}
		dst[i] = view.code(k, t, first+int64(i))
	}
	return nil
}

// validity returns a column's mask of rows with a value; nil if all have one.
func (r *bufferReader) validity(l *batchLayout, at fieldLayout, n int) ([]byte, error) {
	node := l.nodes[at.node]
	if node.length != int64(n) {
		return nil, damagedf("a batch of %d rows has %d values", n, node.length)
	}
	b := l.buffers[at.buffer]
	if node.nulls == 0 || b.length == 0 {
		return nil, nil
	}
	var err error
	r.valid, err = r.buffer(l, b, int64(n+7)/8, r.valid)
	return r.valid, err
}

// eachText calls each for the n texts of a column, in order: nil where there
// is none, the first longestLevel+1 bytes where there are more. It ends early
// where each returns false.
func (r *bufferReader) eachText(l *batchLayout, at fieldLayout, f arrowField, n int, each func(i int, word []byte) bool) error {
	valid, err := r.validity(l, at, n)
	if err != nil {
		return err
	}
	var word func(i int) ([]byte, error)
	switch f.typ {
	case arrowUTF8:
		word, err = r.wordsByOffset(l, at, n, 4)
	case arrowLargeUTF8:
		word, err = r.wordsByOffset(l, at, n, 8)
	case arrowUTF8View:
		word, err = r.wordsByView(l, at, n)
	default:
		return damagedf("values of this type are no text")
	}
	if err != nil {
		return err
	}
	for i := range n {
		var b []byte
		if valid == nil || valid[i>>3]>>(i&7)&1 == 1 {
			if b, err = word(i); err != nil {
				return err
			}
		}
		if !each(i, b) {
			return nil
		}
	}
	return nil
}

// wordsByOffset reads text that stands in one buffer, each value from its
// offset to the next. The buffer is read as it goes by, never held: its size
// is a claim, and often larger than all that is wanted of it.
func (r *bufferReader) wordsByOffset(l *batchLayout, at fieldLayout, n, width int) (func(i int) ([]byte, error), error) {
	var err error
	if r.values, err = r.buffer(l, l.buffers[at.buffer+1], int64(n+1)*int64(width), r.values); err != nil {
		return nil, err
	}
	stream, err := r.openStream(l, l.buffers[at.buffer+2])
	if err != nil {
		return nil, err
	}
	offset := func(i int) int64 { return int64(integer(r.values, 8*width, i)) }
	return func(i int) ([]byte, error) {
		from, to := offset(i), offset(i+1)
		if from < stream.pos || to < from || to > stream.size {
			return nil, damagedf("a text lies from byte %d to %d of %d, after one that ends at %d", from, to, stream.size, stream.pos)
		}
		return stream.word(from, to)
	}, nil
}

// textStream is a buffer of text that goes by.
type textStream struct {
	in   *bufio.Reader
	pos  int64
	size int64 // claimed
	kept [longestLevel + 1]byte
}

// openStream opens a buffer.
func (r *bufferReader) openStream(l *batchLayout, b arrowBuffer) (*textStream, error) {
	s := &r.stream
	if s.in == nil {
		s.in = bufio.NewReaderSize(nil, 1<<16)
	}
	s.pos, s.size = 0, b.length
	section := io.NewSectionReader(r.in, l.body+b.offset, b.length)
	if l.codec == arrowRaw || b.length == 0 {
		s.in.Reset(section)
		return s, nil
	}
	var head [8]byte
	if _, err := io.ReadFull(section, head[:]); err != nil {
		return nil, damagedf("a column of text ends too early")
	}
	switch plain := int64(binary.LittleEndian.Uint64(head[:])); {
	case plain == -1: // stored as it is
		s.size = b.length - 8
		s.in.Reset(section)
		return s, nil
	case plain < 0 || tooDense(plain, b.length, false):
		return nil, damagedf("a column of text of %d bytes claims %d", b.length, plain)
	default:
		s.size = plain
	}
	switch l.codec {
	case arrowLZ4:
		if r.lz4 == nil {
			r.lz4 = lz4.NewReader(nil)
		}
		r.lz4.Reset(section)
		s.in.Reset(r.lz4)
	case arrowZstd:
		if r.zstd == nil {
			r.zstd = newZstdStream()
		}
		if err := r.zstd.Reset(section); err != nil {
			return nil, damagedf("a column of text does not decompress: %v", err)
		}
		s.in.Reset(r.zstd)
	default:
		return nil, refusef("compression %d is not read", l.codec)
	}
	return s, nil
}

// newZstdStream returns a decoder without goroutines of its own and with
// bounded memory.
func newZstdStream() *zstd.Decoder {
	d, err := zstd.NewReader(nil, zstd.WithDecoderConcurrency(1), zstd.WithDecoderLowmem(true), zstd.WithDecoderMaxWindow(1<<27))
	if err != nil {
		panic(err) // only for wrong options
	}
	return d
}

// word returns the bytes from and to, of longer ones the first.
func (s *textStream) word(from, to int64) ([]byte, error) {
	length := to - from
	keep := s.kept[:min(length, int64(len(s.kept)))]
	if err := s.skip(from - s.pos); err != nil {
		return nil, err
	}
	if _, err := io.ReadFull(s.in, keep); err != nil {
		return nil, streamFault(err)
	}
	s.pos += int64(len(keep))
	return keep, s.skip(to - s.pos)
}

// skip passes over n bytes.
func (s *textStream) skip(n int64) error {
	for n > 0 {
		k, err := s.in.Discard(int(min(n, 1<<30)))
		s.pos += int64(k)
		n -= int64(k)
		if err != nil {
			return streamFault(err)
		}
	}
	return nil
}

// streamFault tells damaged text from a disk that cannot be read.
func streamFault(err error) error {
	if err == io.EOF || err == io.ErrUnexpectedEOF {
		return damagedf("a column of text ends too early")
	}
	return damagedf("a column of text does not decompress: %v", err)
}

// viewBuffer is a buffer of text that views point into.
type viewBuffer struct {
	plain  []byte // decompressed; nil where it is read from the file
	in     io.ReaderAt
	size   int64
	window []byte // a piece of it
	at     int64  // where the piece begins
}

const viewWindow = 1 << 13 // bytes read at once; views mostly follow each other

// wordsByView reads text behind views of 16 bytes: the length, and the text
// itself if that has at most 12 bytes; else its first 4, the buffer and the
// offset (Arrow columnar format, "Variable-size Binary View Layout").
func (r *bufferReader) wordsByView(l *batchLayout, at fieldLayout, n int) (func(i int) ([]byte, error), error) {
	var err error
	if r.values, err = r.buffer(l, l.buffers[at.buffer+1], 16*int64(n), r.values); err != nil {
		return nil, err
	}
	buffers := make([]*viewBuffer, at.count-2)
	return func(i int) ([]byte, error) {
		v := r.values[16*i : 16*i+16]
		length := int64(int32(binary.LittleEndian.Uint32(v)))
		switch {
		case length < 0:
			return nil, damagedf("a text claims %d bytes", length)
		case length <= 12:
			return v[4 : 4+length], nil
		}
		which, from := int64(int32(binary.LittleEndian.Uint32(v[8:]))), int64(int32(binary.LittleEndian.Uint32(v[12:])))
		if which < 0 || which >= int64(len(buffers)) {
			return nil, damagedf("a text lies in buffer %d of %d", which, len(buffers))
		}
		if buffers[which] == nil {
			b, err := r.viewBuffer(l, l.buffers[int64(at.buffer)+2+which])
			if err != nil {
				return nil, err
			}
			buffers[which] = b
		}
		return buffers[which].word(from, length)
	}, nil
}

// viewBuffer opens a buffer: in the file where it is not compressed, else in
// memory.
func (r *bufferReader) viewBuffer(l *batchLayout, b arrowBuffer) (*viewBuffer, error) {
	start := l.body + b.offset
	if l.codec == arrowRaw {
		return &viewBuffer{in: io.NewSectionReader(r.in, start, b.length), size: b.length}, nil
	}
	var head [8]byte
	if b.length < 8 {
		return nil, damagedf("a column of text ends too early")
	}
	if err := r.readAt(head[:], start); err != nil {
		return nil, err
	}
	plain := int64(binary.LittleEndian.Uint64(head[:]))
	switch {
	case plain == -1: // stored as it is
		return &viewBuffer{in: io.NewSectionReader(r.in, start+8, b.length-8), size: b.length - 8}, nil
	case plain < 0 || tooDense(plain, b.length, false):
		return nil, damagedf("a column of text of %d bytes claims %d", b.length, plain)
	case plain > longestTextual:
		return nil, refusef("its text takes %s in one buffer, and at most %s are read: write the file in smaller batches", byteSize(plain), byteSize(longestTextual))
	}
	stored := make([]byte, b.length-8)
	if err := r.readAt(stored, start+8); err != nil {
		return nil, err
	}
	v := &viewBuffer{plain: make([]byte, plain), size: plain}
	return v, unpackFrame(l.codec, v.plain, stored)
}

// word returns a text, of longer ones the first bytes.
func (v *viewBuffer) word(from, length int64) ([]byte, error) {
	if from < 0 || from > v.size || length > v.size-from {
		return nil, damagedf("a text of %d bytes at %d lies outside its buffer of %d", length, from, v.size)
	}
	length = min(length, longestLevel+1)
	if v.plain != nil {
		return v.plain[from : from+length], nil
	}
	if from < v.at || from+length > v.at+int64(len(v.window)) {
		v.window = grow(v.window, int(min(viewWindow, v.size-from)))
		if _, err := v.in.ReadAt(v.window, from); err != nil && err != io.EOF {
			return nil, err
		}
		v.at = from
	}
	return v.window[from-v.at : from-v.at+length], nil
}
