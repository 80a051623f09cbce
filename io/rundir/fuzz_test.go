package rundir

import (
	"bytes"
	"encoding/json"
	"testing"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/file"
)

// Any bytes give a block that passes its checks, or an error; never a panic.
// The digest of the file is left out, or no changed page would reach the
// decoder.
func FuzzBlock(f *testing.F) {
	run := hatcheryRun(f, 4).Run()
	r := source(f)
	for n := 1; n <= 3; n++ {
		text := encoded(f, run, numberedFrom(0, randomPaths(r, n)))
		f.Add(text)
		f.Add(text[:len(text)-9])
	}
	f.Fuzz(func(t *testing.T, text []byte) {
		block, err := decodeUnsealed(&run, text)
		if err != nil {
			return
		}
		if err := run.checkBlock(block); err != nil {
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
	run := hatcheryRun(f, 4).Run()
	text, err := json.Marshal(run)
	if err != nil {
		f.Fatal(err)
	}
	f.Add(text)
	f.Add([]byte(`{"format":2}`))
	f.Add([]byte(`{"format":2,"asked":{"candidates":["a","a"]}}`))
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
	})
}
