package rundir

import (
	"bytes"
	"encoding/json"
	"maps"
	"slices"
	"testing"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/file"
)

// Any bytes give a block that passes its checks, or an error; never a panic.
// The digest of the file is left out, or no changed page would reach the
// decoder.
func FuzzBlock(f *testing.F) {
	var runs []Run
	for _, name := range slices.Sorted(maps.Keys(kinds())) {
		run := runOf(f, kinds()[name], 4).Run()
		r := source(f)
		for n := 1; n <= 3; n++ {
			text := encoded(f, run, numberedFrom(0, forms[name].randomPaths(r, n)))
			f.Add(uint8(len(runs)), text)
			f.Add(uint8(len(runs)), text[:len(text)-9])
		}
		runs = append(runs, run)
	}
	f.Fuzz(func(t *testing.T, kind uint8, text []byte) {
		run := &runs[int(kind)%len(runs)]
		block, err := decodeUnsealed(run, text)
		if err != nil {
			return
		}
		if err := run.Identity.shape().checkBlock(block); err != nil {
			t.Errorf("a block that breaks its own rules came out: %v", err)
		}
	})
}

// decodeUnsealed is decodeBlock without checkFile.
func decodeUnsealed(run *Run, text []byte) (block []numbered, err error) {
	defer recovered(&err)
	src := bytes.NewReader(text)
	if _, err := footerStart(src, int64(len(text))); err != nil {
		return nil, err
	}
	pr, err := file.NewParquetReader(src, file.WithReadProps(parquet.NewReaderProperties(newGuard(int64(len(text))))))
	if err != nil {
		return nil, err
	}
	block, _, err = run.decodeRows(pr, int64(len(text)))
	return block, err
}

// What run.json is read as can be written and read again to the same.
func FuzzRun(f *testing.F) {
	for _, id := range kinds() {
		text, err := json.Marshal(runOf(f, id, 4).Run())
		if err != nil {
			f.Fatal(err)
		}
		f.Add(text)
	}
	f.Add([]byte(`{"format":3}`))
	f.Add([]byte(`{"format":3,"asked":{"candidates":["a","a"]}}`))
	f.Fuzz(func(t *testing.T, text []byte) {
		run, err := decodeRun(text)
		if err != nil {
			return
		}
		var b bytes.Buffer
		if err := run.encode(&b); err != nil {
			t.Fatal(err)
		}
		again, err := decodeRun(b.Bytes())
		if err != nil {
			t.Fatalf("not read again: %v", err)
		}
		if again.Digest != run.Digest || again.Identity.Digest() != run.Digest {
			t.Errorf("the identity changed: %s, %s", again.Digest, run.Digest)
		}
		if len(run.Predictors().Names) != run.Identity.shape().candidates {
			t.Error("predictors are lost")
		}
	})
}
