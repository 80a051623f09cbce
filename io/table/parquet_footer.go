package table

import (
	"encoding/binary"
	"io"
	"os"
)

// parquetFile is what the footer of a Parquet file says, cut down to what is
// needed to read columns.
type parquetFile struct {
	path     string
	size     int64 // bytes before the footer: column chunks lie within
	rows     int64
	schema   []schemaElement
	groups   []rowGroup
	arrow    string // the value of the key ARROW:schema, if any
	leaves   int    // columns of the schema that hold values
	sealed   bool   // the file is encrypted
	firstRow int64  // position in the table of the file's first row
}

// schemaElement is a node of the schema, in depth-first order.
type schemaElement struct {
	name       string
	physical   int32 // -1 for groups
	length     int32
	repetition int32
	children   int32
	converted  int32 // -1 if not given
	scale      int32
	precision  int32
	logical    int16 // field number in Parquet's LogicalType union; 0 if not given
	bits       int8  // of an integer's logical type
	signed     bool
}

// rowGroup is a run of rows.
type rowGroup struct {
	rows   int64
	chunks []columnChunk // one per leaf of the schema
}

// columnChunk says where the values of one leaf in one row group lie.
type columnChunk struct {
	start, length int64
	values        int64
	codec         int32
	sealed        bool // encrypted
	elsewhere     bool // stored in another file
}

// Values of Parquet's Type and FieldRepetitionType.
const (
	physicalBoolean   = 0
	physicalInt32     = 1
	physicalInt64     = 2
	physicalInt96     = 3
	physicalFloat     = 4
	physicalDouble    = 5
	physicalByteArray = 6
	physicalFixed     = 7

	repetitionRequired = 0
	repetitionOptional = 1
	repetitionRepeated = 2
)

// readFooter reads the footer of a Parquet file.
func readFooter(path string) (*parquetFile, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, openFault(path, err)
	}
	defer f.Close()
	raw, size, err := footerBytes(f)
	if err != nil {
		return nil, inFile(path, err)
	}
	pf, err := parseFooter(raw)
	if err == nil {
		pf.path, pf.size = path, size
		err = pf.check()
	}
	if err != nil {
		return nil, inFile(path, err)
	}
	return pf, nil
}

// footerBytes returns the footer and the number of bytes before it.
func footerBytes(f *os.File) (raw []byte, before int64, err error) {
	info, err := f.Stat()
	if err != nil {
		return nil, 0, err
	}
	size := info.Size()
	if size < 12 {
		return nil, 0, damagedf("a Parquet file has at least 12 bytes, this one has %d", size)
	}
	var head [4]byte
	if _, err := f.ReadAt(head[:], 0); err != nil {
		return nil, 0, err
	}
	if string(head[:]) != "PAR1" && string(head[:]) != "PARE" {
		return nil, 0, refusef("this is not a Parquet file (folders and globs are read as Parquet files): it does not begin with PAR1")
	}
	var tail [8]byte
	if _, err := f.ReadAt(tail[:], size-8); err != nil {
		return nil, 0, err
	}
	switch string(tail[4:]) {
	case "PAR1":
	case "PARE":
		return nil, 0, refusef("the file is encrypted: write a copy that is not")
	default:
		return nil, 0, damagedf("it does not end with PAR1: was it copied whole?")
	}
	length := int64(binary.LittleEndian.Uint32(tail[:4]))
	if length > size-12 {
		return nil, 0, damagedf("the footer claims %d bytes, the file has %d", length, size)
	}
	raw = make([]byte, length)
	if _, err := f.ReadAt(raw, size-8-length); err != nil && err != io.EOF {
		return nil, 0, err
	}
	return raw, size - 8 - length, nil
}

// parseFooter reads Parquet's FileMetaData.
func parseFooter(raw []byte) (*parquetFile, error) {
	pf := &parquetFile{}
	t := &thrift{b: raw}
	t.fields(0, func(id int16, typ byte) {
		switch {
		case id == 2 && typ == thriftList:
			t.structs(func() { pf.schema = append(pf.schema, parseElement(t)) })
			pf.leaves = countLeaves(pf.schema)
		case id == 3 && typ == thriftI64:
			pf.rows = t.varint()
		case id == 4 && typ == thriftList:
			t.structs(func() { pf.groups = append(pf.groups, parseGroup(t, pf.leaves)) })
		case id == 5 && typ == thriftList:
			t.structs(func() {
				if key, value := parseKeyValue(t); key == "ARROW:schema" {
					pf.arrow = value
				}
			})
		case id == 8:
			pf.sealed = true
			t.skip(typ, 0)
		default:
			t.skip(typ, 0)
		}
	})
	return pf, t.err
}

func countLeaves(schema []schemaElement) int {
	n := 0
	for _, e := range schema {
		if e.physical >= 0 {
			n++
		}
	}
	return n
}

func parseElement(t *thrift) schemaElement {
	e := schemaElement{physical: -1, converted: -1}
	t.fields(1, func(id int16, typ byte) {
		switch {
		case id == 1 && typ == thriftI32:
			e.physical = t.i32()
		case id == 2 && typ == thriftI32:
			e.length = t.i32()
		case id == 3 && typ == thriftI32:
			e.repetition = t.i32()
		case id == 4 && typ == thriftBinary:
			e.name = string(t.bytes())
		case id == 5 && typ == thriftI32:
			e.children = t.i32()
		case id == 6 && typ == thriftI32:
			e.converted = t.i32()
		case id == 7 && typ == thriftI32:
			e.scale = t.i32()
		case id == 8 && typ == thriftI32:
			e.precision = t.i32()
		case id == 10 && typ == thriftStruct:
			parseLogical(t, &e)
		default:
			t.skip(typ, 1)
		}
	})
	return e
}

// parseLogical reads Parquet's LogicalType.
func parseLogical(t *thrift, e *schemaElement) {
	t.fields(2, func(id int16, typ byte) {
		if typ != thriftStruct {
			t.skip(typ, 2)
			return
		}
		e.logical = id
		t.fields(3, func(field int16, typ byte) {
			switch {
			case id == logicalDecimal && field == 1 && typ == thriftI32:
				e.scale = t.i32()
			case id == logicalDecimal && field == 2 && typ == thriftI32:
				e.precision = t.i32()
			case id == logicalInteger && field == 1 && typ == thriftByte:
				e.bits = int8(t.byte())
			case id == logicalInteger && field == 2 && (typ == thriftTrue || typ == thriftFalse):
				e.signed = typ == thriftTrue
			default:
				t.skip(typ, 3)
			}
		})
	})
}

func parseKeyValue(t *thrift) (key, value string) {
	var v []byte
	t.fields(1, func(id int16, typ byte) {
		switch {
		case id == 1 && typ == thriftBinary:
			key = string(t.bytes())
		case id == 2 && typ == thriftBinary:
			v = t.bytes()
		default:
			t.skip(typ, 1)
		}
	})
	if key == "ARROW:schema" {
		value = string(v)
	}
	return key, value
}

func parseGroup(t *thrift, leaves int) rowGroup {
	var g rowGroup
	t.fields(1, func(id int16, typ byte) {
		switch {
		case id == 1 && typ == thriftList:
			g.chunks = make([]columnChunk, 0, leaves)
			t.structs(func() { g.chunks = append(g.chunks, parseChunk(t)) })
		case id == 3 && typ == thriftI64:
			g.rows = t.varint()
		default:
			t.skip(typ, 1)
		}
	})
	return g
}

func parseChunk(t *thrift) columnChunk {
	var c columnChunk
	t.fields(2, func(id int16, typ byte) {
		switch {
		case id == 1 && typ == thriftBinary:
			c.elsewhere = len(t.bytes()) > 0
		case id == 3 && typ == thriftStruct:
			parseChunkMeta(t, &c)
		case id == 8 || id == 9:
			c.sealed = true
			t.skip(typ, 2)
		default:
			t.skip(typ, 2)
		}
	})
	return c
}

// parseChunkMeta reads Parquet's ColumnMetaData. A chunk begins with its
// dictionary page if it has one; some writers give 0 where there is none.
func parseChunkMeta(t *thrift, c *columnChunk) {
	dictionary := int64(0)
	t.fields(3, func(id int16, typ byte) {
		switch {
		case id == 4 && typ == thriftI32:
			c.codec = t.i32()
		case id == 5 && typ == thriftI64:
			c.values = t.varint()
		case id == 7 && typ == thriftI64:
			c.length = t.varint()
		case id == 9 && typ == thriftI64:
			c.start = t.varint()
		case id == 11 && typ == thriftI64:
			dictionary = t.varint()
		default:
			t.skip(typ, 3)
		}
	})
	if dictionary > 0 && dictionary < c.start {
		c.start = dictionary
	}
}

// check holds the claims of the footer against each other and the file size.
// Chunks of nested leaves are checked as the others; their number of values
// is not that of rows and is checked where a column is read.
func (pf *parquetFile) check() error {
	if pf.sealed {
		return refusef("the file is encrypted: write a copy that is not")
	}
	if len(pf.schema) == 0 {
		return damagedf("the footer holds no schema")
	}
	var sum int64
	for i, g := range pf.groups {
		if g.rows < 0 || g.rows > 1<<62 || sum > 1<<62 {
			return damagedf("row group %d claims %d rows", i, g.rows)
		}
		sum += g.rows
		if len(g.chunks) != pf.leaves {
			return damagedf("row group %d has %d column chunks, the schema %d columns", i, len(g.chunks), pf.leaves)
		}
		for _, c := range g.chunks {
			if c.start < 0 || c.length < 0 || c.start > pf.size || c.length > pf.size-c.start {
				if c.elsewhere || c.sealed {
					continue
				}
				return damagedf("row group %d: a column chunk lies outside the file (%d bytes at %d, the file has %d)", i, c.length, c.start, pf.size)
			}
		}
	}
	if sum != pf.rows {
		return damagedf("the footer claims %d rows, its row groups have %d", pf.rows, sum)
	}
	return nil
}
