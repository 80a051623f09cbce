package table

import (
	"encoding/base64"
	"fmt"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/schema"
)

// Fields of Parquet's LogicalType union, and values of its older
// ConvertedType, that change what a value means.
const (
	logicalString    = 1
	logicalMap       = 2
	logicalList      = 3
	logicalEnum      = 4
	logicalDecimal   = 5
	logicalDate      = 6
	logicalTime      = 7
	logicalTimestamp = 8
	logicalInteger   = 10
	logicalNull      = 11
	logicalJSON      = 12
	logicalBSON      = 13
	logicalUUID      = 14
	logicalFloat16   = 15

	convertedUTF8     = 0
	convertedEnum     = 4
	convertedDecimal  = 5
	convertedDate     = 6
	convertedTimeMS   = 7
	convertedTimeUS   = 8
	convertedStampMS  = 9
	convertedStampUS  = 10
	convertedUint8    = 11
	convertedUint32   = 13
	convertedUint64   = 14
	convertedInt8     = 15
	convertedInt64    = 18
	convertedJSON     = 19
	convertedBSON     = 20
	convertedInterval = 21
)

// leaf is a top-level column of a Parquet file that holds one value per row.
type leaf struct {
	column   int // position among the table's columns
	chunk    int // position among the column chunks of a row group
	optional bool
	physical int32
	unsigned bool // 32- or 64-bit integers without a sign
	decimal  bool
	scale    int
	half     bool // float16
	length   int
	descr    *schema.Column // the column as a required one: we read definition levels ourselves
}

// parquetColumns turns the schema into the table's columns and, for those
// that can be read, leaves. The first element is the root.
func (pf *parquetFile) parquetColumns() ([]Column, []*leaf, error) {
	var cols []Column
	var leaves []*leaf
	durations := arrowDurations(pf.arrow)
	chunk := 0
	for i := 1; i < len(pf.schema); {
		e := pf.schema[i]
		end, inside, err := pf.subtree(i, 0)
		if err != nil {
			return nil, nil, err
		}
		c := Column{Name: e.name, Type: e.typeName()}
		c.Kind, c.Reason = e.kind()
		if durations[e.name] && c.Kind == Integer {
			c.Kind, c.Type, c.Reason = Date, "duration", "is a duration, not a number"
		}
		c.Usable = c.Reason == ""
		var l *leaf
		if e.physical >= 0 && e.repetition != repetitionRepeated {
			if l, err = e.leaf(); err != nil {
				return nil, nil, err
			}
			l.column, l.chunk = len(cols), chunk
		}
		cols, leaves = append(cols, c), append(leaves, l)
		chunk += inside
		i = end
	}
	return cols, leaves, nil
}

// subtree returns the element after the subtree that begins at i, and the
// number of leaves in it.
func (pf *parquetFile) subtree(i, depth int) (end, leaves int, err error) {
	if depth > 100 || i >= len(pf.schema) {
		return 0, 0, damagedf("the schema is damaged at element %d", i)
	}
	e := pf.schema[i]
	if e.physical >= 0 {
		return i + 1, 1, nil
	}
	end = i + 1
	for range e.children {
		next, inside, err := pf.subtree(end, depth+1)
		if err != nil {
			return 0, 0, err
		}
		end, leaves = next, leaves+inside
	}
	return end, leaves, nil
}

// kind says what an element holds, and why it is no number if it is not.
func (e schemaElement) kind() (Kind, string) {
	if e.physical < 0 || e.repetition == repetitionRepeated {
		return Nested, "is nested (" + e.typeName() + "): one value per row is needed"
	}
	switch e.logical {
	case logicalString, logicalEnum, logicalJSON:
		return Text, plainReason
	case logicalDate, logicalTime, logicalTimestamp:
		return Date, "is a date or time, not a number"
	case logicalBSON, logicalUUID:
		return Binary, "is binary"
	case logicalNull:
		return Empty, "holds no value"
	}
	switch c := e.converted; {
	case c == convertedUTF8, c == convertedEnum, c == convertedJSON:
		return Text, "is text"
	case c >= convertedDate && c <= convertedStampUS, c == convertedInterval:
		return Date, "is a date or time, not a number"
	case c == convertedBSON:
		return Binary, "is binary"
	}
	return e.plainKind()
}

// plainKind is kind for elements whose logical type does not forbid numbers.
func (e schemaElement) plainKind() (Kind, string) {
	switch {
	case e.isDecimal():
		return Number, ""
	case e.physical == physicalBoolean:
		return Boolean, ""
	case e.physical == physicalInt32, e.physical == physicalInt64:
		return Integer, ""
	case e.physical == physicalFloat, e.physical == physicalDouble:
		return Number, ""
	case e.physical == physicalInt96:
		return Date, "is a date or time, not a number"
	case e.physical == physicalFixed && e.logical == logicalFloat16 && e.length == 2:
		return Number, ""
	case e.physical == physicalByteArray, e.physical == physicalFixed:
		return Binary, "is binary"
	}
	return Binary, fmt.Sprintf("has the unknown type %d", e.physical)
}

func (e schemaElement) isDecimal() bool {
	if e.logical != logicalDecimal && e.converted != convertedDecimal {
		return false
	}
	switch e.physical {
	case physicalInt32, physicalInt64, physicalByteArray, physicalFixed:
		return true
	}
	return false
}

// typeName names the type of an element for people.
func (e schemaElement) typeName() string {
	if e.physical < 0 {
		switch {
		case e.logical == logicalList, e.converted == 3:
			return "list"
		case e.logical == logicalMap, e.converted == 1, e.converted == 2:
			return "map"
		}
		return "struct"
	}
	name := e.leafName()
	if e.repetition == repetitionRepeated {
		return "list of " + name
	}
	return name
}

func (e schemaElement) leafName() string {
	switch kind, _ := e.kindOfValue(); {
	case e.isDecimal():
		return fmt.Sprintf("decimal(%d,%d)", e.precision, e.scale)
	case kind == Text:
		return "string"
	case e.logical == logicalDate, e.converted == convertedDate:
		return "date"
	case e.logical == logicalTime, e.converted == convertedTimeMS, e.converted == convertedTimeUS:
		return "time"
	case kind == Date:
		return "timestamp"
	case e.logical == logicalNull:
		return "null"
	case kind == Integer:
		return e.integerName()
	}
	switch e.physical {
	case physicalBoolean:
		return "bool"
	case physicalFloat:
		return "float"
	case physicalDouble:
		return "double"
	}
	if e.logical == logicalFloat16 {
		return "float16"
	}
	return "binary"
}

// kindOfValue is kind for a single value of a repeated element.
func (e schemaElement) kindOfValue() (Kind, string) {
	e.repetition = repetitionOptional
	return e.kind()
}

func (e schemaElement) integerName() string {
	bits := 32
	if e.physical == physicalInt64 {
		bits = 64
	}
	switch {
	case e.logical == logicalInteger && e.bits > 0:
		bits = int(e.bits)
	case e.converted >= convertedUint8 && e.converted <= convertedUint64:
		bits = 8 << (e.converted - convertedUint8)
	case e.converted >= convertedInt8 && e.converted <= convertedInt64:
		bits = 8 << (e.converted - convertedInt8)
	}
	if e.isUnsigned() {
		return fmt.Sprintf("uint%d", bits)
	}
	return fmt.Sprintf("int%d", bits)
}

func (e schemaElement) isUnsigned() bool {
	if e.logical == logicalInteger {
		return !e.signed
	}
	return e.converted >= convertedUint8 && e.converted <= convertedUint64
}

// leaf prepares an element for reading.
func (e schemaElement) leaf() (*leaf, error) {
	l := &leaf{
		optional: e.repetition == repetitionOptional,
		physical: e.physical,
		unsigned: e.isUnsigned(),
		decimal:  e.isDecimal(),
		scale:    int(e.scale),
		half:     e.logical == logicalFloat16,
		length:   int(e.length),
	}
	const longest = 1 << 16 // bytes of a value of fixed length; decimals have 32 at most
	if l.decimal && (e.scale < 0 || e.scale > 400) {
		return nil, damagedf("column %s claims a decimal scale of %d", quote(e.name), e.scale)
	}
	if e.physical == physicalFixed && (l.length < 1 || l.length > longest) {
		return nil, damagedf("column %s claims values of %d bytes", quote(e.name), l.length)
	}
	if e.physical < physicalBoolean || e.physical > physicalFixed {
		return nil, damagedf("column %s has the unknown type %d", quote(e.name), e.physical)
	}
	node, err := schema.NewPrimitiveNode("value", parquet.Repetitions.Required, parquet.Type(e.physical), -1, e.length)
	if err != nil {
		return nil, damagedf("column %s: %v", quote(e.name), err)
	}
	l.descr = schema.NewColumn(node, 0, 0)
	return l, nil
}

// arrowDurations reads the Arrow schema that Arrow writers leave in a Parquet
// file. Only it tells durations from integers: Parquet has no type for them.
func arrowDurations(stored string) map[string]bool {
	raw, err := base64.StdEncoding.DecodeString(stored)
	if err != nil || len(raw) == 0 {
		return nil
	}
	fields, err := schemaOfMessage(raw)
	if err != nil {
		return nil
	}
	durations := map[string]bool{}
	for _, f := range fields {
		if f.typ == arrowDuration {
			durations[f.name] = true
		}
	}
	return durations
}
