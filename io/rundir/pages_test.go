package rundir

import (
	"encoding/binary"
	"runtime"
	"testing"

	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/apache/arrow/go/v17/parquet/file"
)

// onePage is a page reader that hands out the same page again and again.
type onePage struct {
	values int32
	data   []byte
	calls  int
}

func (p *onePage) SetMaxPageHeaderSize(int) {}
func (p *onePage) Err() error               { return nil }
func (p *onePage) Next() bool               { p.calls++; return p.calls < 1000 }

func (p *onePage) Page() file.Page {
	e := parquet.Encodings
	return file.NewDataPageV1(memory.NewBufferBytes(p.data), p.values, e.Plain, e.RLE, e.RLE, int32(len(p.data)))
}

func (p *onePage) Reset(parquet.BufferedReader, int64, compress.Compression, *file.CryptoContext) {}

// levelRun is a level repeated so many times, with the length before it.
func levelRun(count uint64, level byte) []byte {
	body := append(binary.AppendUvarint(nil, count<<1), level)
	return append(binary.LittleEndian.AppendUint32(nil, uint32(len(body))), body...)
}

// A page that lies about how much it holds is refused before memory is taken
// for it, and one that holds nothing is not asked for again and again.
func TestLyingPages(t *testing.T) {
	for name, c := range map[string]struct {
		page onePage
		want int64
	}{
		"a billion levels in ten bytes":   {onePage{values: 1 << 30, data: append(levelRun(1<<30, 0), levelRun(1<<30, 0)...)}, 4},
		"a run longer than the page says": {onePage{values: 4, data: append(levelRun(1<<30, 0), levelRun(4, 0)...)}, 4},
		"more values than bytes":          {onePage{values: 4, data: append(levelRun(4, 0), levelRun(4, 1)...)}, 4},
		"a level of 2":                    {onePage{values: 4, data: append(levelRun(4, 0), levelRun(4, 2)...)}, 4},
		"a run of none":                   {onePage{values: 4, data: append(levelRun(0, 0), levelRun(4, 1)...)}, 4},
		"levels longer than the page":     {onePage{values: 4, data: []byte{200, 0, 0, 0, 8, 0}}, 4},
		"no levels":                       {onePage{values: 4}, 4},
		"nothing, without end":            {onePage{values: 0, data: append(levelRun(4, 0), levelRun(4, 0)...)}, 4},
	} {
		var before, after runtime.MemStats
		runtime.ReadMemStats(&before)
		_, err := readChunk(&c.page, true, c.want, plainFloats)
		runtime.ReadMemStats(&after)
		if err == nil {
			t.Errorf("%s: accepted", name)
		}
		if c.page.calls > 2 {
			t.Errorf("%s: asked for %d pages", name, c.page.calls)
		}
		if taken := after.TotalAlloc - before.TotalAlloc; taken > 1<<20 {
			t.Errorf("%s: %d bytes of memory taken", name, taken)
		}
	}
	good := onePage{values: 3, data: append(append(levelRun(3, 0), 3, 0, 0, 0, 2<<1, 1, 1<<1), append([]byte{0}, make([]byte, 16)...)...)}
	binary.LittleEndian.PutUint32(good.data[len(levelRun(3, 0)):], 4)
	c, err := readChunk(&good, true, 3, plainFloats)
	if err != nil || len(c.values) != 2 {
		t.Errorf("a true page: %d values, %v", len(c.values), err)
	}
}
