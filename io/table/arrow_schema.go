package table

import (
	"encoding/binary"
	"fmt"

	flatbuffers "github.com/google/flatbuffers/go"
)

// Arrow's metadata is written as FlatBuffers. We read the few tables that are
// needed ourselves: the library loads whole record batches, all columns at
// once, and a file that holds its table in one batch would then be in memory
// three times over. Slots below are the positions of fields in Arrow's
// Schema.fbs, Message.fbs and File.fbs (format version 1.5).

// Values of the union Type in Schema.fbs.
const (
	arrowNull          = 1
	arrowInt           = 2
	arrowFloat         = 3
	arrowBinary        = 4
	arrowUTF8          = 5
	arrowBool          = 6
	arrowDecimal       = 7
	arrowDate          = 8
	arrowTime          = 9
	arrowTimestamp     = 10
	arrowInterval      = 11
	arrowList          = 12
	arrowStruct        = 13
	arrowUnion         = 14
	arrowFixedBinary   = 15
	arrowFixedList     = 16
	arrowMap           = 17
	arrowDuration      = 18
	arrowLargeBinary   = 19
	arrowLargeUTF8     = 20
	arrowLargeList     = 21
	arrowRunEnd        = 22
	arrowBinaryView    = 23
	arrowUTF8View      = 24
	arrowListView      = 25
	arrowLargeListView = 26
)

// arrowField is a field of an Arrow schema.
type arrowField struct {
	name       string
	typ        byte
	bits       int  // integers, floats, decimals
	signed     bool // integers
	scale      int  // decimals
	precision  int
	dense      bool // unions
	children   []arrowField
	dictionary bool
	id         int64 // of the dictionary
	indexBits  int   // of positions in the dictionary
	indexSign  bool
}

// flat is a FlatBuffers table. Reads beyond the buffer panic; callers guard.
type flat struct{ flatbuffers.Table }

func flatRoot(b []byte) flat {
	return flat{flatbuffers.Table{Bytes: b, Pos: flatbuffers.GetUOffsetT(b)}}
}

// at returns the offset of a field, 0 if it is not there.
func (f flat) at(slot int) flatbuffers.UOffsetT {
	o := f.Offset(flatbuffers.VOffsetT(4 + 2*slot))
	if o == 0 {
		return 0
	}
	return f.Pos + flatbuffers.UOffsetT(o)
}

func (f flat) int8(slot int, missing int8) int8 {
	if o := f.at(slot); o != 0 {
		return f.GetInt8(o)
	}
	return missing
}

func (f flat) int16(slot int, missing int16) int16 {
	if o := f.at(slot); o != 0 {
		return f.GetInt16(o)
	}
	return missing
}

func (f flat) int32(slot int, missing int32) int32 {
	if o := f.at(slot); o != 0 {
		return f.GetInt32(o)
	}
	return missing
}

func (f flat) int64(slot int) int64 {
	if o := f.at(slot); o != 0 {
		return f.GetInt64(o)
	}
	return 0
}

func (f flat) text(slot int) string {
	if o := f.at(slot); o != 0 {
		return string(f.ByteVector(o))
	}
	return ""
}

// table returns the table in a field, or in a union.
func (f flat) table(slot int) (flat, bool) {
	o := f.at(slot)
	if o == 0 {
		return flat{}, false
	}
	return flat{flatbuffers.Table{Bytes: f.Bytes, Pos: f.Indirect(o)}}, true
}

// vector returns the start and length of a vector whose elements take width
// bytes each, after checking that they are there.
func (f flat) vector(slot, width int) (start flatbuffers.UOffsetT, n int) {
	o := f.at(slot)
	if o == 0 {
		return 0, 0
	}
	// The library's VectorLen wants the slot's offset within the table.
	rel := o - f.Pos
	start, n = f.Vector(rel), f.VectorLen(rel)
	if n < 0 || int64(start)+int64(n)*int64(width) > int64(len(f.Bytes)) {
		panic(damagedf("metadata: a list is longer than the message"))
	}
	return start, n
}

// tables calls each for every table of a vector.
func (f flat) tables(slot int, each func(flat)) {
	start, n := f.vector(slot, 4)
	for i := range n {
		each(flat{flatbuffers.Table{Bytes: f.Bytes, Pos: f.Indirect(start + flatbuffers.UOffsetT(4*i))}})
	}
}

// parseSchema reads a Schema table.
func parseSchema(s flat) ([]arrowField, error) {
	if s.int16(0, 0) != 0 {
		return nil, refusef("numbers are stored highest byte first, which is not read: write the file on a common machine")
	}
	var fields []arrowField
	s.tables(1, func(f flat) { fields = append(fields, parseField(f, 0)) })
	return fields, nil
}

func parseField(f flat, depth int) arrowField {
	if depth > 64 {
		panic(damagedf("metadata: fields nest too deeply"))
	}
	a := arrowField{name: f.text(0), typ: byte(f.int8(2, 0))}
	if t, ok := f.table(3); ok {
		switch a.typ {
		case arrowInt:
			a.bits, a.signed = int(t.int32(0, 0)), t.int8(1, 0) != 0
		case arrowFloat:
			a.bits = 16 << min(t.int16(0, 0), 2)
		case arrowDecimal:
			a.precision, a.scale, a.bits = int(t.int32(0, 0)), int(t.int32(1, 0)), int(t.int32(2, 128))
		case arrowUnion:
			a.dense = t.int16(0, 0) == 1
		}
	}
	if d, ok := f.table(4); ok {
		a.dictionary, a.id, a.indexBits, a.indexSign = true, d.int64(0), 32, true
		if t, ok := d.table(1); ok {
			a.indexBits, a.indexSign = int(t.int32(0, 0)), t.int8(1, 0) != 0
		}
	}
	f.tables(5, func(c flat) { a.children = append(a.children, parseField(c, depth+1)) })
	return a
}

// schemaOfMessage reads the schema of an encapsulated message, as Arrow
// writers leave it in Parquet files.
func schemaOfMessage(b []byte) (fields []arrowField, err error) {
	defer guard(&err)
	if len(b) >= 8 && binary.LittleEndian.Uint32(b) == 0xffffffff {
		b = b[4:]
	}
	if len(b) < 8 {
		return nil, damagedf("metadata: too short")
	}
	s, ok := flatRoot(b[4:]).table(2)
	if !ok {
		return nil, damagedf("metadata: no schema")
	}
	return parseSchema(s)
}

// column describes a field as a column of the table.
func (a arrowField) column() Column {
	c := Column{Name: a.name, Type: a.typeName()}
	c.Kind, c.Reason = a.kind()
	c.Usable = c.Reason == ""
	return c
}

// kind says what a field holds, and why it is no number if it is not.
func (a arrowField) kind() (Kind, string) {
	switch a.typ {
	case arrowNull:
		return Empty, "holds no value"
	case arrowInt:
		switch a.bits {
		case 8, 16, 32, 64:
			return Integer, ""
		}
	case arrowFloat:
		return Number, ""
	case arrowDecimal:
		switch a.bits {
		case 32, 64, 128, 256:
			return Number, ""
		}
	case arrowBool:
		return Boolean, ""
	case arrowUTF8, arrowLargeUTF8, arrowUTF8View:
		return Text, plainReason
	case arrowDuration:
		return Date, "is a duration, not a number"
	case arrowDate, arrowTime, arrowTimestamp, arrowInterval:
		return Date, "is a date or time, not a number"
	case arrowBinary, arrowFixedBinary, arrowLargeBinary, arrowBinaryView:
		return Binary, "is binary"
	case arrowList, arrowStruct, arrowUnion, arrowFixedList, arrowMap, arrowLargeList, arrowListView, arrowLargeListView:
		return Nested, "is nested (" + a.typeName() + "): one value per row is needed"
	case arrowRunEnd:
		return Nested, "is stored in runs, which are not read: write the column plain"
	}
	return Binary, fmt.Sprintf("has the unknown type %d", a.typ)
}

var arrowNames = map[byte]string{
	arrowNull: "null", arrowBinary: "binary", arrowUTF8: "string", arrowBool: "bool", arrowDate: "date", arrowTime: "time",
	arrowTimestamp: "timestamp", arrowInterval: "interval", arrowList: "list", arrowStruct: "struct", arrowUnion: "union",
	arrowFixedBinary: "binary", arrowFixedList: "list", arrowMap: "map", arrowDuration: "duration", arrowLargeBinary: "binary",
	arrowLargeUTF8: "string", arrowLargeList: "list", arrowRunEnd: "runs", arrowBinaryView: "binary", arrowUTF8View: "string",
	arrowListView: "list", arrowLargeListView: "list",
}

func (a arrowField) typeName() string {
	name := arrowNames[a.typ]
	switch a.typ {
	case arrowInt:
		name = fmt.Sprintf("int%d", a.bits)
		if !a.signed {
			name = "u" + name
		}
	case arrowFloat:
		name = map[int]string{16: "float16", 32: "float", 64: "double"}[a.bits]
	case arrowDecimal:
		name = fmt.Sprintf("decimal(%d,%d)", a.precision, a.scale)
	}
	if a.dictionary {
		return "dictionary of " + name
	}
	return name
}

// width is the number of bits of a stored value; 0 if it has no fixed width.
func (a arrowField) width() int {
	switch a.typ {
	case arrowInt, arrowFloat, arrowDecimal:
		return a.bits
	case arrowBool:
		return 1
	}
	return 0
}
