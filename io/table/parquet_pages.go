package table

import (
	"bufio"
	"encoding/binary"
	"hash/crc32"
	"io"
	"math/bits"
	"os"

	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/apache/arrow/go/v17/parquet/file"
)

// pages hands the pages of one column chunk to the library's column reader.
//
// It stands in for the library's own page reader for three reasons. Sizes in
// page headers are claims: they are checked against the file and the number of
// rows before memory is taken (the library takes what it is told). Buffers are
// kept from chunk to chunk. And definition levels, one bit per row, are read
// here: the library is given the values alone, as of a required column, so
// that they can be decoded straight into the matrix.
type pages struct {
	in    *bufio.Reader
	left  int64 // bytes of the chunk not read yet
	codec int32
	leaf  *leaf
	rows  int64 // rows of the chunk not seen yet

	packed []byte // page as stored
	plain  []byte // page decompressed
	queue  []file.Page
	page   file.Page

	text     bool   // values are text: they are not queued but left in values
	words    []byte // of text: the dictionary
	entries  int    // of text: values in the dictionary
	values   []byte // of text: the values of the current page
	encoding int32  // of text: how they are stored

	count  int    // rows of the current page
	filled int    // of them with a value
	valid  []byte // bit per row of the current page; empty: all have a value
}

// pageHeader is Parquet's PageHeader, cut down to what is needed.
type pageHeader struct {
	kind             int32
	plain, packed    int32 // bytes of the page
	values, nulls    int32
	encoding         int32
	levelEncoding    int32
	checksum         uint32 // of the page as stored, if hasChecksum
	defBytes         int32  // version 2 only
	repBytes         int32
	storedUnpacked   bool // version 2: is_compressed = false
	hasChecksum      bool
	hasDataHeader    bool
	hasDictionary    bool
	hasDataHeaderTwo bool
}

// Values of Parquet's PageType and Encoding.
const (
	pageData       = 0
	pageDictionary = 2
	pageDataTwo    = 3

	encodingPlain       = 0
	encodingDictionary  = 2
	encodingRLE         = 3
	encodingBitPacked   = 4
	encodingDeltaBinary = 5
	encodingDeltaLength = 6
	encodingDeltaText   = 7
	encodingRLEDict     = 8
	encodingSplit       = 9
)

const (
	longestHeader  = 1 << 20 // bytes of a page header; statistics of text may be long
	slack          = 1 << 16 // bytes that a page may have beyond its values, twice over
	longestTextual = 1 << 28 // bytes of a page of text
)

// open points the reader at a chunk. The 100 bytes more are for old writers
// that did not count their dictionary's header; pages end by their number of
// values, not there.
func (p *pages) open(f *os.File, c columnChunk, l *leaf, rows int64) {
	section := io.NewSectionReader(f, c.start, c.length+100)
	if p.in == nil {
		p.in = bufio.NewReaderSize(section, 1<<15)
	} else {
		p.in.Reset(section)
	}
	p.left, p.codec, p.leaf, p.rows = c.length+100, c.codec, l, rows
	p.queue, p.page = p.queue[:0], nil
	p.text, p.words, p.entries, p.values = false, nil, 0, nil
}

// next reads pages up to the next data page and queues them for the column
// reader.
func (p *pages) next() error {
	for {
		h, err := p.header()
		if err != nil {
			return err
		}
		switch {
		case h.kind == pageDictionary && h.hasDictionary:
			if err := p.dictionary(h); err != nil {
				return err
			}
		case h.kind == pageData && h.hasDataHeader, h.kind == pageDataTwo && h.hasDataHeaderTwo:
			return p.data(h)
		default: // an index page: nothing for us
			if _, err := p.stored(h); err != nil {
				return err
			}
		}
	}
}

// header reads the next page header. It grows the view until the header fits.
func (p *pages) header() (pageHeader, error) {
	for size := 256; ; size *= 4 {
		view, err := p.in.Peek(size)
		if err != nil && err != io.EOF && err != bufio.ErrBufferFull {
			return pageHeader{}, err
		}
		if len(view) == 0 {
			return pageHeader{}, damagedf("a column chunk ends before its last row")
		}
		t := &thrift{b: view}
		h := parsePageHeader(t)
		if t.err == nil {
			p.in.Discard(t.pos)
			p.left -= int64(t.pos)
			return h, nil
		}
		switch {
		case err == io.EOF || size >= longestHeader:
			return pageHeader{}, t.err
		case err == bufio.ErrBufferFull:
			p.in = bufio.NewReaderSize(p.in, 4*size)
		}
	}
}

func parsePageHeader(t *thrift) pageHeader {
	var h pageHeader
	t.fields(0, func(id int16, typ byte) {
		switch {
		case id == 1 && typ == thriftI32:
			h.kind = t.i32()
		case id == 2 && typ == thriftI32:
			h.plain = t.i32()
		case id == 3 && typ == thriftI32:
			h.packed = t.i32()
		case id == 4 && typ == thriftI32:
			h.hasChecksum, h.checksum = true, uint32(t.i32())
		case id == 5 && typ == thriftStruct:
			h.hasDataHeader = true
			parseDataHeader(t, &h)
		case id == 7 && typ == thriftStruct:
			h.hasDictionary = true
			parseDictionaryHeader(t, &h)
		case id == 8 && typ == thriftStruct:
			h.hasDataHeaderTwo = true
			parseDataHeaderTwo(t, &h)
		default:
			t.skip(typ, 0)
		}
	})
	return h
}

func parseDataHeader(t *thrift, h *pageHeader) {
	t.fields(1, func(id int16, typ byte) {
		switch {
		case id == 1 && typ == thriftI32:
			h.values = t.i32()
		case id == 2 && typ == thriftI32:
			h.encoding = t.i32()
		case id == 3 && typ == thriftI32:
			h.levelEncoding = t.i32()
		default:
			t.skip(typ, 1)
		}
	})
}

func parseDictionaryHeader(t *thrift, h *pageHeader) {
	t.fields(1, func(id int16, typ byte) {
		switch {
		case id == 1 && typ == thriftI32:
			h.values = t.i32()
		case id == 2 && typ == thriftI32:
			h.encoding = t.i32()
		default:
			t.skip(typ, 1)
		}
	})
}

func parseDataHeaderTwo(t *thrift, h *pageHeader) {
	t.fields(1, func(id int16, typ byte) {
		switch {
		case id == 1 && typ == thriftI32:
			h.values = t.i32()
		case id == 2 && typ == thriftI32:
			h.nulls = t.i32()
		case id == 4 && typ == thriftI32:
			h.encoding = t.i32()
		case id == 5 && typ == thriftI32:
			h.defBytes = t.i32()
		case id == 6 && typ == thriftI32:
			h.repBytes = t.i32()
		case id == 7 && (typ == thriftTrue || typ == thriftFalse):
			h.storedUnpacked = typ == thriftFalse
		default:
			t.skip(typ, 1)
		}
	})
}

// width is the number of bytes of a value of fixed width; 0 for byte arrays.
func (l *leaf) width() int64 {
	switch l.physical {
	case physicalBoolean:
		return 1
	case physicalInt32, physicalFloat:
		return 4
	case physicalInt64, physicalDouble:
		return 8
	case physicalInt96:
		return 12
	case physicalFixed:
		return int64(l.length)
	}
	return 0
}

// claim checks the sizes in a page header. No encoding makes values of fixed
// width much larger than they are, so their number bounds the page.
func (p *pages) claim(h pageHeader) error {
	if h.plain < 0 || h.packed < 0 || int64(h.packed) > p.left {
		return damagedf("a page claims %d bytes where the column chunk has %d", h.packed, p.left)
	}
	if h.values < 0 {
		return damagedf("a page claims %d values", h.values)
	}
	most := int64(longestTextual)
	if w := p.leaf.width(); w > 0 {
		most = 2*int64(h.values)*w + int64(h.values)/4 + slack
	}
	if int64(h.plain) > most || tooDense(int64(h.plain), int64(h.packed), p.codec == codecBrotli) {
		return damagedf("a page of %d values and %d bytes claims %d bytes", h.values, h.packed, h.plain)
	}
	return nil
}

// stored reads the bytes of a page as they lie in the file.
func (p *pages) stored(h pageHeader) ([]byte, error) {
	if err := p.claim(h); err != nil {
		return nil, err
	}
	p.packed = grow(p.packed, int(h.packed))
	n, err := io.ReadFull(p.in, p.packed)
	p.left -= int64(n)
	if err == io.EOF || err == io.ErrUnexpectedEOF {
		return nil, damagedf("a page ends too early")
	}
	if err == nil && h.hasChecksum && crc32.ChecksumIEEE(p.packed) != h.checksum {
		return nil, damagedf("the checksum of a page is wrong")
	}
	return p.packed, err
}

// grow returns a slice of n bytes, the old one if it is large enough.
func grow(b []byte, n int) []byte {
	if cap(b) < n {
		return make([]byte, n)
	}
	return b[:n]
}

// dictionary queues a dictionary page. Its bytes outlive the page, so they
// are not taken from the kept buffer. It may have more values than there are
// rows: some writers put the dictionary of a whole table into every row group.
func (p *pages) dictionary(h pageHeader) error {
	least := max(p.leaf.width(), 1) // bytes of a value; byte arrays have their length in front
	if p.leaf.physical == physicalByteArray {
		least = 4
	}
	if int64(h.values) > max(p.rows, dictionaryEntries) || int64(h.values)*least > int64(h.plain) {
		return damagedf("a dictionary of %d values and %d bytes for %d rows", h.values, h.plain, p.rows)
	}
	stored, err := p.stored(h)
	if err != nil {
		return err
	}
	plain := make([]byte, h.plain)
	if err := unpack(p.codec, plain, stored); err != nil {
		return err
	}
	if p.text {
		p.words, p.entries = plain, int(h.values)
		return nil
	}
	p.queue = append(p.queue, file.NewDictionaryPage(memory.NewBufferBytes(plain), h.values, parquet.Encoding(h.encoding)))
	return nil
}

// data reads a data page: its levels here, its values are queued.
func (p *pages) data(h pageHeader) error {
	if int64(h.values) > p.rows {
		return damagedf("a column chunk has more values than rows")
	}
	stored, err := p.stored(h)
	if err != nil {
		return err
	}
	p.rows -= int64(h.values)
	p.count = int(h.values)
	var values []byte
	if h.kind == pageData {
		values, err = p.splitOne(h, stored)
	} else {
		values, err = p.splitTwo(h, stored)
	}
	if err != nil {
		return err
	}
	return p.offer(h.encoding, values)
}

// splitOne takes a page of version 1 apart: all of it is compressed, the
// levels come first with their length in 4 bytes.
func (p *pages) splitOne(h pageHeader, stored []byte) ([]byte, error) {
	b, err := p.unpacked(stored, int(h.plain))
	if err != nil {
		return nil, err
	}
	p.filled, p.valid = p.count, p.valid[:0]
	if !p.leaf.optional {
		return b, nil
	}
	if h.levelEncoding == encodingBitPacked {
		n := (p.count + 7) / 8
		if len(b) < n {
			return nil, damagedf("a page is shorter than its levels")
		}
		p.takeLevels(func(i int) bool { return b[i>>3]>>(7-i&7)&1 == 1 })
		return b[n:], nil
	}
	if len(b) < 4 {
		return nil, damagedf("a page is shorter than its levels")
	}
	n := int64(binary.LittleEndian.Uint32(b))
	if n > int64(len(b)-4) {
		return nil, damagedf("a page is shorter than its levels")
	}
	return b[4+n:], p.levels(b[4 : 4+n])
}

// splitTwo takes a page of version 2 apart: levels come first and are never
// compressed.
func (p *pages) splitTwo(h pageHeader, stored []byte) ([]byte, error) {
	levels := int64(h.defBytes) + int64(h.repBytes)
	if h.defBytes < 0 || h.repBytes < 0 || levels > int64(len(stored)) || levels > int64(h.plain) {
		return nil, damagedf("a page is shorter than its levels")
	}
	p.filled, p.valid = p.count, p.valid[:0]
	if p.leaf.optional && h.defBytes > 0 {
		if err := p.levels(stored[h.repBytes:levels]); err != nil {
			return nil, err
		}
	}
	if h.storedUnpacked {
		return stored[levels:], nil
	}
	return p.unpacked(stored[levels:], int(int64(h.plain)-levels))
}

// unpacked returns n decompressed bytes, in the kept buffer or, where nothing
// was compressed, as they are.
func (p *pages) unpacked(stored []byte, n int) ([]byte, error) {
	if p.codec == codecNone {
		if len(stored) != n {
			return nil, damagedf("a page claims %d bytes and has %d", n, len(stored))
		}
		return stored, nil
	}
	p.plain = grow(p.plain, n)
	return p.plain, unpack(p.codec, p.plain, stored)
}

// levels decodes definition levels of one bit: Parquet's hybrid of runs and
// packed bits.
func (p *pages) levels(b []byte) error {
	p.valid = grow(p.valid, (p.count+7)/8)
	clear(p.valid)
	p.filled = 0
	for row := 0; row < p.count; {
		head, n := binary.Uvarint(b)
		if n <= 0 {
			return damagedf("the levels of a page end before its last row")
		}
		b = b[n:]
		length := head >> 1
		if head&1 == 1 { // groups of 8 bits
			have := min(length, uint64(len(b)))
			if have == 0 {
				return damagedf("the levels of a page end before its last row")
			}
			row = p.packedLevels(row, b[:have])
			b = b[have:]
			continue
		}
		if length == 0 || len(b) == 0 {
			return damagedf("the levels of a page are damaged")
		}
		run := int(min(length, uint64(p.count-row)))
		if b[0]&1 == 1 {
			p.markRun(row, run)
		}
		b, row = b[1:], row+run
	}
	if p.filled == p.count {
		p.valid = p.valid[:0]
	}
	return nil
}

// packedLevels copies levels stored one bit each, from a row that need not
// stand at the begin of a byte.
func (p *pages) packedLevels(row int, b []byte) int {
	for _, c := range b {
		left := p.count - row
		if left <= 0 {
			break
		}
		if left < 8 {
			c &= 1<<left - 1
		}
		p.valid[row>>3] |= c << (row & 7)
		if over := c >> (8 - row&7); over != 0 {
			p.valid[row>>3+1] |= over
		}
		p.filled += bits.OnesCount8(c)
		row += 8
	}
	return min(row, p.count)
}

// markRun marks a run of rows that have a value.
func (p *pages) markRun(row, run int) {
	p.filled += run
	for ; run > 0 && row&7 != 0; row, run = row+1, run-1 {
		p.valid[row>>3] |= 1 << (row & 7)
	}
	for ; run >= 8; row, run = row+8, run-8 {
		p.valid[row>>3] = 0xff
	}
	for ; run > 0; row, run = row+1, run-1 {
		p.valid[row>>3] |= 1 << (row & 7)
	}
}

// takeLevels fills the mask of valid rows from a function.
func (p *pages) takeLevels(has func(row int) bool) {
	p.valid = grow(p.valid, (p.count+7)/8)
	clear(p.valid)
	p.filled = 0
	for i := range p.count {
		if has(i) {
			p.valid[i>>3] |= 1 << (i & 7)
			p.filled++
		}
	}
	if p.filled == p.count {
		p.valid = p.valid[:0]
	}
}

// offer queues the values of a page for the column reader.
func (p *pages) offer(encoding int32, values []byte) error {
	if p.filled == 0 {
		return nil
	}
	if p.text {
		p.values, p.encoding = values, encoding
		return nil
	}
	switch encoding {
	case encodingSplit:
		var err error
		if values, err = p.unsplit(values); err != nil {
			return err
		}
		encoding = encodingPlain
	case encodingDeltaBinary:
		if err := checkDelta(values, p.filled); err != nil {
			return err
		}
	case encodingDictionary, encodingRLEDict:
		if len(values) > 0 && values[0] > 32 {
			return damagedf("a page claims dictionary positions of %d bits", values[0])
		}
	}
	p.queue = append(p.queue, file.NewDataPageV1(memory.NewBufferBytes(values), int32(p.filled),
		parquet.Encoding(encoding), parquet.Encodings.RLE, parquet.Encodings.RLE, int32(len(values))))
	return nil
}

// unsplit turns BYTE_STREAM_SPLIT, which the library does not read, into plain
// values: all first bytes, then all second bytes, and so on.
func (p *pages) unsplit(b []byte) ([]byte, error) {
	w, n := int(p.leaf.width()), p.filled
	if p.leaf.physical == physicalBoolean || w == 0 || len(b) < w*n {
		return nil, damagedf("a page of split bytes has %d bytes for %d values", len(b), n)
	}
	out := make([]byte, w*n)
	for k := range w {
		stream := b[k*n : (k+1)*n]
		for i, c := range stream {
			out[i*w+k] = c
		}
	}
	return out, nil
}

// checkDelta checks the head of DELTA_BINARY_PACKED values, from which the
// library would take sizes unchecked: block size, miniblocks per block, number
// of values.
func checkDelta(b []byte, values int) error {
	var head [3]uint64
	for i := range head {
		v, n := binary.Uvarint(b)
		if n <= 0 {
			return damagedf("a page of packed differences is damaged")
		}
		head[i], b = v, b[n:]
	}
	const largest = 1 << 16 // values in a block; writers use 128
	block, minis, total := head[0], head[1], head[2]
	if block == 0 || block > largest || minis == 0 || minis > block || block%minis != 0 || total != uint64(values) {
		return damagedf("a page of packed differences is damaged")
	}
	return nil
}

// Next implements file.PageReader: it hands out what next has queued.
func (p *pages) Next() bool {
	if len(p.queue) == 0 {
		p.page = nil
		return false
	}
	p.page, p.queue = p.queue[0], p.queue[1:]
	return true
}

// Page implements file.PageReader.
func (p *pages) Page() file.Page { return p.page }

// Err implements file.PageReader; errors are returned by next.
func (p *pages) Err() error { return nil }

// SetMaxPageHeaderSize implements file.PageReader; the limit is fixed here.
func (p *pages) SetMaxPageHeaderSize(int) {}

// Reset implements file.PageReader; the library does not call it on readers
// that it was given.
func (p *pages) Reset(parquet.BufferedReader, int64, compress.Compression, *file.CryptoContext) {}
