package table

import "math"

// thrift reads Thrift's compact protocol, in which Parquet writes its footer
// and page headers (Apache Thrift, "Thrift Compact protocol encoding"). We read
// it ourselves because a wide table's footer would otherwise take 5 to 6 KB of
// heap per column chunk where 32 bytes are needed, and because every length in
// it is a claim that must be checked before memory is taken for it. The first
// error sticks; values read after it are zero.
type thrift struct {
	b   []byte
	pos int
	err error
}

// Types of fields and elements in the compact protocol.
const (
	thriftStop   = 0
	thriftTrue   = 1
	thriftFalse  = 2
	thriftByte   = 3
	thriftI16    = 4
	thriftI32    = 5
	thriftI64    = 6
	thriftDouble = 7
	thriftBinary = 8
	thriftList   = 9
	thriftSet    = 10
	thriftMap    = 11
	thriftStruct = 12
	thriftUUID   = 13
)

const thriftDepth = 32 // structures within structures; Parquet's own nest 6 deep

func (t *thrift) fail(why string) {
	if t.err == nil {
		t.err = damagedf("metadata: %s at byte %d", why, t.pos)
	}
	t.pos = len(t.b)
}

func (t *thrift) byte() byte {
	if t.pos >= len(t.b) {
		t.fail("ends too early")
		return 0
	}
	t.pos++
	return t.b[t.pos-1]
}

// uvarint reads a number of 7 bits per byte.
func (t *thrift) uvarint() uint64 {
	var v uint64
	for shift := uint(0); shift < 64; shift += 7 {
		c := t.byte()
		v |= uint64(c&0x7f) << shift
		if c < 0x80 {
			return v
		}
	}
	t.fail("a number has too many bytes")
	return 0
}

// varint reads a zigzag number.
func (t *thrift) varint() int64 {
	u := t.uvarint()
	return int64(u>>1) ^ -int64(u&1)
}

// i32 reads a number that must fit 32 bits.
func (t *thrift) i32() int32 {
	v := t.varint()
	if v < math.MinInt32 || v > math.MaxInt32 {
		t.fail("a number is too large")
		return 0
	}
	return int32(v)
}

// bytes reads a byte string; the slice is a view.
func (t *thrift) bytes() []byte {
	n := t.uvarint()
	if n > uint64(len(t.b)-t.pos) {
		t.fail("a text is longer than the file")
		return nil
	}
	t.pos += int(n)
	return t.b[t.pos-int(n) : t.pos]
}

// list reads the head of a list. Every element takes at least one byte, which
// bounds what a damaged length can claim.
func (t *thrift) list() (count int, elem byte) {
	h := t.byte()
	n := uint64(h >> 4)
	if n == 15 {
		n = t.uvarint()
	}
	if n > uint64(len(t.b)-t.pos) {
		t.fail("a list is longer than the file")
		return 0, 0
	}
	return int(n), h & 15
}

// structs calls each for every element of a list of structures.
func (t *thrift) structs(each func()) {
	n, elem := t.list()
	if n > 0 && elem != thriftStruct {
		t.fail("a list holds the wrong type")
		return
	}
	for i := 0; i < n && t.err == nil; i++ {
		each()
	}
}

// fields calls each for every field of a structure. each reads the value with
// the methods above, or calls skip with the type.
func (t *thrift) fields(depth int, each func(id int16, typ byte)) {
	if depth > thriftDepth {
		t.fail("structures nest too deeply")
		return
	}
	var id int16
	for t.err == nil {
		h := t.byte()
		if h == thriftStop {
			return
		}
		if delta := int16(h >> 4); delta != 0 {
			id += delta
		} else {
			id = int16(t.varint())
		}
		each(id, h&15)
	}
}

// skip passes over a value of the type given.
func (t *thrift) skip(typ byte, depth int) {
	switch typ {
	case thriftTrue, thriftFalse:
	case thriftByte:
		t.byte()
	case thriftI16, thriftI32, thriftI64:
		t.uvarint()
	case thriftDouble:
		t.jump(8)
	case thriftUUID:
		t.jump(16)
	case thriftBinary:
		t.bytes()
	case thriftList, thriftSet:
		t.skipList(depth)
	case thriftMap:
		t.skipMap(depth)
	case thriftStruct:
		t.fields(depth+1, func(_ int16, typ byte) { t.skip(typ, depth+1) })
	default:
		t.fail("unknown type")
	}
}

func (t *thrift) jump(n int) {
	if n > len(t.b)-t.pos {
		t.fail("ends too early")
		return
	}
	t.pos += n
}

func (t *thrift) skipList(depth int) {
	if depth > thriftDepth {
		t.fail("lists nest too deeply")
		return
	}
	n, elem := t.list()
	for i := 0; i < n && t.err == nil; i++ {
		t.skipElement(elem, depth+1)
	}
}

func (t *thrift) skipMap(depth int) {
	if depth > thriftDepth {
		t.fail("maps nest too deeply")
		return
	}
	n := t.uvarint()
	if n == 0 {
		return
	}
	if n > uint64(len(t.b)-t.pos) {
		t.fail("a map is longer than the file")
		return
	}
	kinds := t.byte()
	for i := uint64(0); i < n && t.err == nil; i++ {
		t.skipElement(kinds>>4, depth+1)
		t.skipElement(kinds&15, depth+1)
	}
}

// skipElement is skip for elements of lists and maps, where a truth value
// takes a byte.
func (t *thrift) skipElement(typ byte, depth int) {
	if typ == thriftTrue || typ == thriftFalse {
		t.byte()
		return
	}
	t.skip(typ, depth)
}
