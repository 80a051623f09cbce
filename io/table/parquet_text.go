package table

import (
	"encoding/binary"
	"os"
)

// Pages of text are decoded here: the library would take the lengths in them
// unchecked, and for pages of shared beginnings build every value before any
// is looked at. A value is a view into the page.

// readText reads one chunk of text into the codes dst, one per row of the row
// group. first is the table row of dst[0]. It stops early where the column has
// too many levels.
func (r *chunkReader) readText(f *os.File, c columnChunk, l *leaf, t *texts, dst []int32, first int64) (err error) {
	defer guard(&err)
	if err := c.readable(len(dst)); err != nil {
		return err
	}
	if l.physical != physicalByteArray {
		return damagedf("text is stored as type %d", l.physical)
	}
	p := &r.pages
	p.open(f, c, l, int64(len(dst)))
	p.text = true
	var words *textDictionary
	for row := 0; row < len(dst) && !t.full.Load(); {
		if err := p.next(); err != nil {
			return err
		}
		part := dst[row : row+p.count]
		if words == nil && p.words != nil {
			if words, err = newTextDictionary(p.words, p.entries); err != nil {
				return err
			}
		}
		if err := p.decodeText(t, words, part, first+int64(row)); err != nil {
			return err
		}
		row += p.count
	}
	return nil
}

// textValues hands out the values of a page, one after the other.
type textValues interface {
	// code is the number of the next value, which stands in the table row given.
	code(t *texts, row int64) (int32, error)
}

// decodeText reads the rows of the current page.
func (p *pages) decodeText(t *texts, words *textDictionary, dst []int32, first int64) error {
	var values textValues
	var err error
	if p.filled > 0 {
		if values, err = p.openText(words); err != nil {
			return err
		}
	}
	for i := range dst {
		if p.filled == 0 || len(p.valid) > 0 && p.valid[i>>3]>>(i&7)&1 == 0 {
			dst[i] = noCode
			continue
		}
		if dst[i], err = values.code(t, first+int64(i)); err != nil {
			return err
		}
	}
	return nil
}

// openText chooses the decoder of the current page.
func (p *pages) openText(words *textDictionary) (textValues, error) {
	switch p.encoding {
	case encodingPlain:
		return &plainText{rest: p.values}, nil
	case encodingDictionary, encodingRLEDict:
		if words == nil {
			return nil, damagedf("a page needs a dictionary, and there is none before it")
		}
		if len(p.values) == 0 || p.values[0] > 32 {
			return nil, damagedf("a page of dictionary positions is damaged")
		}
		words.positions = runs{rest: p.values[1:], width: uint(p.values[0])}
		return words, nil
	case encodingDeltaLength:
		return newLengthText(p.values, p.filled)
	case encodingDeltaText:
		return newSharedText(p.values, p.filled)
	}
	return nil, refusef("text in encoding %d is not read: write the column plain or with a dictionary", p.encoding)
}

// plainText is text behind its length in 4 bytes.
type plainText struct{ rest []byte }

func (p *plainText) next() ([]byte, error) {
	if len(p.rest) < 4 {
		return nil, damagedf("a page of text ends before its last value")
	}
	n := int64(binary.LittleEndian.Uint32(p.rest))
	if n > int64(len(p.rest)-4) {
		return nil, damagedf("a text claims %d bytes, the page has %d left", n, len(p.rest)-4)
	}
	word := p.rest[4 : 4+n]
	p.rest = p.rest[4+n:]
	return word, nil
}

func (p *plainText) code(t *texts, row int64) (int32, error) {
	word, err := p.next()
	if err != nil {
		return 0, err
	}
	return t.add(word, row), nil
}

// textDictionary is the dictionary of a chunk, and the positions of a page in
// it. An entry gets its code when the first row uses it: a dictionary may hold
// more than the rows do.
type textDictionary struct {
	words     [][]byte
	codes     []int32
	positions runs
}

const notAsked int32 = -3 // an entry that no row has used

func newTextDictionary(b []byte, entries int) (*textDictionary, error) {
	d := &textDictionary{words: make([][]byte, entries), codes: make([]int32, entries)}
	values := plainText{rest: b}
	for i := range d.words {
		var err error
		if d.words[i], err = values.next(); err != nil {
			return nil, err
		}
		d.codes[i] = notAsked
	}
	return d, nil
}

func (d *textDictionary) code(t *texts, row int64) (int32, error) {
	k, err := d.positions.next()
	if err != nil {
		return 0, err
	}
	if int64(k) >= int64(len(d.words)) {
		return 0, damagedf("a position in a dictionary of %d values is %d", len(d.words), k)
	}
	if d.codes[k] == notAsked {
		d.codes[k] = t.add(d.words[k], row)
	}
	return d.codes[k], nil
}

// runs decodes Parquet's hybrid of runs and packed integers, lowest bit first
// (Parquet format, Encodings.md, RLE).
type runs struct {
	rest   []byte
	width  uint   // bits of a value, at most 32
	left   uint64 // values left in the current run
	packed []byte // of a packed run: its bytes
	bit    uint64 // of a packed run: position of the next value
	value  uint32 // of a repeated value
}

func (r *runs) next() (uint32, error) {
	if r.width == 0 {
		return 0, nil
	}
	for r.left == 0 {
		if err := r.open(); err != nil {
			return 0, err
		}
	}
	r.left--
	if r.packed == nil {
		return r.value, nil
	}
	var v uint64
	at, shift := r.bit>>3, r.bit&7
	for k := uint64(0); k < 5 && at+k < uint64(len(r.packed)); k++ {
		v |= uint64(r.packed[at+k]) << (8 * k)
	}
	r.bit += uint64(r.width)
	return uint32(v >> shift & (1<<r.width - 1)), nil
}

// open reads the head of the next run.
func (r *runs) open() error {
	head, n := binary.Uvarint(r.rest)
	if n <= 0 {
		return damagedf("a page of dictionary positions ends before its last value")
	}
	r.rest = r.rest[n:]
	if head&1 == 0 {
		bytes := int(r.width+7) / 8
		if len(r.rest) < bytes {
			return damagedf("a page of dictionary positions is damaged")
		}
		r.left, r.packed, r.value = head>>1, nil, 0
		for k, b := range r.rest[:bytes] {
			r.value |= uint32(b) << (8 * k)
		}
		r.rest = r.rest[bytes:]
		return nil
	}
	// A group is 8 values in width bytes; the last may be cut short.
	groups := min(head>>1, uint64(len(r.rest)))
	length := min(groups*uint64(r.width), uint64(len(r.rest)))
	r.packed, r.rest, r.bit = r.rest[:length], r.rest[length:], 0
	r.left = min(groups*8, length*8/uint64(r.width))
	return nil
}

// lengthText is text whose lengths stand together before it
// (DELTA_LENGTH_BYTE_ARRAY).
type lengthText struct {
	lengths differences
	rest    []byte
}

func newLengthText(b []byte, values int) (*lengthText, error) {
	lengths, rest, err := openDifferences(b, values)
	return &lengthText{lengths, rest}, err
}

func (p *lengthText) next() ([]byte, error) {
	n, err := p.lengths.next()
	if err != nil {
		return nil, err
	}
	if n < 0 || n > int64(len(p.rest)) {
		return nil, damagedf("a text claims %d bytes, the page has %d left", n, len(p.rest))
	}
	word := p.rest[:n]
	p.rest = p.rest[n:]
	return word, nil
}

func (p *lengthText) code(t *texts, row int64) (int32, error) {
	word, err := p.next()
	if err != nil {
		return 0, err
	}
	return t.add(word, row), nil
}

// sharedText is text that begins as the value before does
// (DELTA_BYTE_ARRAY): the lengths of what is shared, then the rests.
type sharedText struct {
	shared differences
	rests  *lengthText
	word   []byte // the value before, as far as it can be a level
	length int64  // of the value before
}

func newSharedText(b []byte, values int) (*sharedText, error) {
	shared, rest, err := openDifferences(b, values)
	if err != nil {
		return nil, err
	}
	rests, err := newLengthText(rest, values)
	return &sharedText{shared: shared, rests: rests}, err
}

func (p *sharedText) code(t *texts, row int64) (int32, error) {
	n, err := p.shared.next()
	if err != nil {
		return 0, err
	}
	if n < 0 || n > p.length {
		return 0, damagedf("a text begins as %d bytes of one before, which has %d", n, p.length)
	}
	rest, err := p.rests.next()
	if err != nil {
		return 0, err
	}
	// Only what a level may be long is kept; of longer texts the length tells.
	const most = longestLevel + 1
	p.word = append(p.word[:min(n, most)], rest[:min(int64(len(rest)), max(0, most-n))]...)
	p.length = n + int64(len(rest))
	return t.add(p.word, row), nil
}

// differences decodes integers in DELTA_BINARY_PACKED: blocks of miniblocks of
// packed differences (Parquet format, Encodings.md). It keeps no values.
type differences struct {
	rest   []byte
	minis  int // miniblocks in a block
	size   int // values in a miniblock
	left   int // values not handed out
	begun  bool
	value  int64
	least  int64  // smallest difference of the block
	widths []byte // of the miniblocks not begun
	packed []byte // of the current miniblock
	width  uint
	bit    uint64
	inMini int // values left in it
}

// openDifferences returns a decoder of so many integers, and what follows them.
func openDifferences(b []byte, values int) (d differences, after []byte, err error) {
	if err := checkDelta(b, values); err != nil {
		return d, nil, err
	}
	var head [3]uint64
	for i := range head {
		v, n := binary.Uvarint(b)
		head[i], b = v, b[n:]
	}
	first, n := binary.Varint(b)
	if n <= 0 {
		return d, nil, damagedf("a page of packed differences is damaged")
	}
	size := head[0] / head[1]
	if size%8 != 0 {
		return d, nil, damagedf("a page of packed differences has miniblocks of %d values", size)
	}
	d = differences{rest: b[n:], minis: int(head[1]), size: int(size), left: values, value: first}
	whole := d
	for range values {
		if _, err := whole.next(); err != nil {
			return d, nil, err
		}
	}
	return d, whole.rest, nil
}

func (d *differences) next() (int64, error) {
	if d.left == 0 {
		return 0, damagedf("a page of packed differences ends before its last value")
	}
	d.left--
	if !d.begun {
		d.begun = true
		return d.value, nil
	}
	if d.inMini == 0 {
		if err := d.open(); err != nil {
			return 0, err
		}
	}
	d.inMini--
	d.value += d.least + int64(d.unpack())
	return d.value, nil
}

// open begins the next miniblock, and before the first of a block the block.
func (d *differences) open() error {
	if len(d.widths) == 0 {
		least, n := binary.Varint(d.rest)
		if n <= 0 || len(d.rest)-n < d.minis {
			return damagedf("a page of packed differences is damaged")
		}
		d.least, d.widths, d.rest = least, d.rest[n:n+d.minis], d.rest[n+d.minis:]
	}
	width := int(d.widths[0])
	d.widths = d.widths[1:]
	length := width * d.size / 8
	if width > 64 || length > len(d.rest) {
		return damagedf("a page of packed differences is damaged")
	}
	d.packed, d.rest = d.rest[:length], d.rest[length:]
	d.width, d.bit, d.inMini = uint(width), 0, d.size
	return nil
}

// unpack returns the next packed integer, lowest bit first.
func (d *differences) unpack() (v uint64) {
	for got := uint(0); got < d.width; {
		shift := uint(d.bit & 7)
		take := min(8-shift, d.width-got)
		v |= uint64(d.packed[d.bit>>3]>>shift&(1<<take-1)) << got
		got += take
		d.bit += uint64(take)
	}
	return v
}
