package table

import (
	"context"
	"encoding/binary"
	"io"
	"os"

	flatbuffers "github.com/google/flatbuffers/go"
)

// arrowFile is an Arrow IPC file or stream. The file format is a stream
// between a magic word and a footer that repeats where its messages lie; we
// walk the messages in both.
type arrowFile struct {
	path    string
	fields  []arrowField
	cols    []Column
	batches []arrowBatch // in order; dictionaries among them
	total   int64
}

// arrowBatch is a record batch or a dictionary batch: where its buffers lie.
type arrowBatch struct {
	rows       int64
	dictionary bool
	id         int64 // of the dictionary
	delta      bool  // the dictionary grows
	first      int64 // table row of the first row
	head       []byte
	body       int64 // position of the body in the file
	size       int64 // of the body
}

// Values of the unions and enumerations in Message.fbs.
const (
	messageSchema     = 1
	messageDictionary = 2
	messageRecord     = 3

	arrowLZ4  = 0
	arrowZstd = 1
	arrowRaw  = -1

	arrowVersion5 = 4 // MetadataVersion.V5
)

const longestMessage = 1 << 30 // bytes of metadata of one message

// oldStream recognises streams as they were written before version 0.15: the
// length of the schema message without the word of ones before it.
func oldStream(head []byte) bool {
	if len(head) < 8 {
		return false
	}
	n := binary.LittleEndian.Uint32(head)
	return n > 0 && n < longestMessage && n%8 == 0 && binary.LittleEndian.Uint32(head[4:]) < n
}

// openArrow reads the schema and finds the batches.
func openArrow(path string) (format, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, openFault(path, err)
	}
	defer f.Close()
	a := &arrowFile{path: path}
	if err := a.index(f); err != nil {
		return nil, inFile(path, err)
	}
	for _, field := range a.fields {
		a.cols = append(a.cols, field.column())
	}
	return a, nil
}

// index walks over the messages of the file.
func (a *arrowFile) index(f *os.File) (err error) {
	defer guard(&err)
	info, err := f.Stat()
	if err != nil {
		return err
	}
	size, pos := info.Size(), int64(0)
	var magic [6]byte
	if _, err := f.ReadAt(magic[:], 0); err == nil && string(magic[:]) == "ARROW1" {
		if _, err := f.ReadAt(magic[:], size-6); err != nil || string(magic[:]) != "ARROW1" {
			return damagedf("it does not end with ARROW1: was it copied whole?")
		}
		var footer [4]byte
		if _, err := f.ReadAt(footer[:], size-10); err != nil {
			return damagedf("it is cut off")
		}
		length := int64(binary.LittleEndian.Uint32(footer[:]))
		if length > size-18 {
			return damagedf("the footer claims %d bytes, the file has %d", length, size)
		}
		pos, size = 8, size-10-length
	}
	for {
		meta, body, err := message(f, pos, size)
		if err != nil {
			return err
		}
		if meta == nil {
			break
		}
		m := flatRoot(meta)
		length := m.int64(3)
		if length < 0 || length > size-body {
			return damagedf("a message claims %d bytes, the file has %d left: was it copied whole?", length, max(0, size-body))
		}
		if err := a.add(m, meta, body, length); err != nil {
			return err
		}
		pos = body + (length+7)&^7
	}
	if a.fields == nil {
		return damagedf("it holds no schema")
	}
	return nil
}

// message returns the metadata of the message at pos and the position of its
// body; nil at the end of the stream.
func message(f *os.File, pos, size int64) (meta []byte, body int64, err error) {
	var word [8]byte
	if size-pos < 4 {
		return nil, 0, nil // a stream may end without a mark
	}
	n, err := f.ReadAt(word[:min(8, size-pos)], pos)
	if err != nil && err != io.EOF {
		return nil, 0, err
	}
	length, head := int64(binary.LittleEndian.Uint32(word[:])), int64(4)
	if length == 0xffffffff {
		if n < 8 {
			return nil, 0, damagedf("a message is cut off")
		}
		length, head = int64(binary.LittleEndian.Uint32(word[4:])), 8
	}
	if length == 0 {
		return nil, 0, nil
	}
	if length > longestMessage || length > size-pos-head || length < 8 {
		return nil, 0, damagedf("a message claims %d bytes of metadata, the file has %d left", length, size-pos-head)
	}
	meta = make([]byte, length)
	if _, err := f.ReadAt(meta, pos+head); err != nil {
		return nil, 0, err
	}
	return meta, pos + head + length, nil
}

// add takes note of a message.
func (a *arrowFile) add(m flat, meta []byte, body, size int64) error {
	header, ok := m.table(2)
	if !ok {
		return damagedf("a message has no header")
	}
	kind := m.int8(1, 0)
	if (kind == messageSchema) != (a.fields == nil) {
		return damagedf("the schema must come first, and once")
	}
	batch := arrowBatch{head: meta, body: body, size: size, first: a.total}
	switch kind {
	case messageSchema:
		fields, err := parseSchema(header)
		if err != nil {
			return err
		}
		a.fields = append([]arrowField{}, fields...)
		return nil
	case messageDictionary:
		batch.dictionary, batch.id, batch.delta = true, header.int64(0), header.int8(2, 0) != 0
		if header, ok = header.table(1); !ok {
			return damagedf("a dictionary holds nothing")
		}
	case messageRecord:
	default:
		return nil // tensors and what later versions may bring
	}
	batch.rows = header.int64(0)
	if batch.rows < 0 || batch.rows > 1<<40 {
		return damagedf("a batch claims %d rows", batch.rows)
	}
	if !batch.dictionary {
		a.total += batch.rows
	}
	a.batches = append(a.batches, batch)
	return nil
}

func (a *arrowFile) columns() []Column { return a.cols }
func (a *arrowFile) rows() int64       { return a.total }
func (a *arrowFile) rowwise() bool     { return false }

// fill implements format: batch by batch, the columns of each at the same
// time.
func (a *arrowFile) fill(ctx context.Context, sinks []sink, workers int) ([]rounded, error) {
	f, err := os.Open(a.path)
	if err != nil {
		return nil, openFault(a.path, err)
	}
	defer f.Close()
	total := make([]rounded, len(sinks))
	dictionaries := newArrowDictionaries(len(sinks))
	readers := make([]*bufferReader, workers)
	for i := range readers {
		readers[i] = &bufferReader{in: f}
	}
	for _, b := range a.batches {
		layout, err := a.layoutOf(b)
		if err != nil {
			return nil, inFile(a.path, err)
		}
		if b.dictionary {
			if err := a.readDictionary(b, layout, sinks, dictionaries, readers[0]); err != nil {
				return nil, inFile(a.path, err)
			}
			continue
		}
		if b.rows == 0 {
			continue
		}
		end := b.first + b.rows
		err = parallel(ctx, workers, len(sinks), func(w, k int) (err error) {
			s := sinks[k]
			field, at := a.fields[s.col], layout.fields[s.col]
			if s.texts != nil {
				err = readers[w].text(layout, at, field, s.texts, s.texts.codes[b.first:end], b.first, dictionaries.text(field, k))
			} else {
				var rd rounded
				rd, err = readers[w].column(layout, at, field, s.values[b.first:end], b.first, dictionaries.numbers)
				total[k].merge(rd)
			}
			return inColumn(a.path, field.name, err)
		})
		if err != nil {
			return nil, err
		}
	}
	return total, nil
}

// readDictionary reads the values of a dictionary, if a column asked for uses
// it.
func (a *arrowFile) readDictionary(b arrowBatch, layout *batchLayout, sinks []sink, dictionaries *arrowDictionaries, r *bufferReader) error {
	for _, s := range sinks {
		field := a.fields[s.col]
		if !field.dictionary || field.id != b.id {
			continue
		}
		field.dictionary = false
		err := dictionaries.claim(b, layout, field, a.total)
		if err == nil && s.texts != nil {
			err = dictionaries.readText(b, layout, field, r)
		} else if err == nil {
			err = dictionaries.readNumbers(b, layout, field, r)
		}
		return inColumn(a.path, field.name, err)
	}
	return nil
}

// batchLayout says where the buffers of a batch lie.
type batchLayout struct {
	rows    int64
	body    int64
	size    int64
	codec   int8
	nodes   []arrowNode
	buffers []arrowBuffer
	fields  []fieldLayout // per field of the schema; for a dictionary its one field
}

type arrowNode struct{ length, nulls int64 }

type arrowBuffer struct{ offset, length int64 }

// fieldLayout is a field's first node, first buffer and number of buffers.
type fieldLayout struct{ node, buffer, count int }

// layoutOf reads a batch's metadata.
func (a *arrowFile) layoutOf(b arrowBatch) (l *batchLayout, err error) {
	defer guard(&err)
	m := flatRoot(b.head)
	version := m.int16(0, 0)
	header, _ := m.table(2)
	fields := a.fields
	if b.dictionary {
		header, _ = header.table(1)
		fields = a.dictionaryFields(b.id)
	}
	l = &batchLayout{rows: b.rows, body: b.body, size: b.size, codec: arrowRaw}
	if c, ok := header.table(3); ok {
		l.codec = c.int8(0, 0)
	}
	start, n := header.vector(1, 16)
	for i := range n {
		at := start + flatbuffers.UOffsetT(16*i)
		l.nodes = append(l.nodes, arrowNode{header.GetInt64(at), header.GetInt64(at + 8)})
	}
	start, n = header.vector(2, 16)
	for i := range n {
		at := start + flatbuffers.UOffsetT(16*i)
		buf := arrowBuffer{header.GetInt64(at), header.GetInt64(at + 8)}
		if buf.offset < 0 || buf.length < 0 || buf.offset > b.size || buf.length > b.size-buf.offset {
			return nil, damagedf("a buffer lies outside its message (%d bytes at %d of %d)", buf.length, buf.offset, b.size)
		}
		l.buffers = append(l.buffers, buf)
	}
	var variadic []int64
	start, n = header.vector(4, 8)
	for i := range n {
		variadic = append(variadic, header.GetInt64(start+flatbuffers.UOffsetT(8*i)))
	}
	w := layoutWalk{version: version, variadic: variadic, buffers: len(l.buffers)}
	for _, f := range fields {
		at := fieldLayout{node: w.node, buffer: w.buffer}
		w.pass(f)
		at.count = w.buffer - at.buffer
		l.fields = append(l.fields, at)
	}
	if w.node > len(l.nodes) || w.buffer > len(l.buffers) {
		return nil, damagedf("a batch has fewer buffers than its columns need")
	}
	return l, nil
}

// dictionaryFields returns the field whose dictionary has the id given, as
// a field of the values.
func (a *arrowFile) dictionaryFields(id int64) []arrowField {
	var find func(fields []arrowField) []arrowField
	find = func(fields []arrowField) []arrowField {
		for _, f := range fields {
			if f.dictionary && f.id == id {
				f.dictionary = false
				return []arrowField{f}
			}
			if found := find(f.children); found != nil {
				return found
			}
		}
		return nil
	}
	return find(a.fields)
}

// layoutWalk counts nodes and buffers, field by field (Arrow columnar format,
// "Buffer Listing for Each Layout").
type layoutWalk struct {
	version  int16
	variadic []int64
	buffers  int
	node     int
	buffer   int
}

// pass moves on by what a field takes.
func (w *layoutWalk) pass(f arrowField) {
	w.node++
	if f.dictionary {
		w.buffer += 2
		return
	}
	switch f.typ {
	case arrowNull, arrowRunEnd:
	case arrowBinary, arrowUTF8, arrowLargeBinary, arrowLargeUTF8, arrowListView, arrowLargeListView:
		w.buffer += 3
	case arrowBinaryView, arrowUTF8View:
		w.buffer += 2 + w.views()
	case arrowStruct, arrowFixedList:
		w.buffer++
	case arrowUnion:
		w.buffer++
		if f.dense {
			w.buffer++
		}
		if w.version < arrowVersion5 {
			w.buffer++
		}
	default: // fixed width: validity and values; lists: validity and offsets
		w.buffer += 2
	}
	for _, c := range f.children {
		w.pass(c)
	}
}

// views takes the number of data buffers of a column of views.
func (w *layoutWalk) views() int {
	if len(w.variadic) == 0 {
		panic(damagedf("a batch does not say how many buffers its text has"))
	}
	n := w.variadic[0]
	w.variadic = w.variadic[1:]
	if n < 0 || n > int64(w.buffers) {
		panic(damagedf("a batch claims %d buffers for a column", n))
	}
	return int(n)
}
