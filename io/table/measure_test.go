package table

import (
	"context"
	"encoding/json"
	"fmt"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/ipc"
	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/apache/arrow/go/v17/parquet/file"
	"github.com/apache/arrow/go/v17/parquet/schema"
)

// The benchmarks measure Load in a process of its own, so that its peak of
// resident memory is not that of the code that wrote the file.

// loadEnv names a file that the test binary is to load and measure instead of
// running tests; workersEnv the number of workers.
const (
	loadEnv    = "HOLDFAST_TABLE_LOAD"
	workersEnv = "HOLDFAST_TABLE_WORKERS"
)

// measured is what a child process reports.
type measured struct {
	Open, Load  float64 // seconds
	Processor   float64 // seconds of processor time, all of them
	Peak        int64   // bytes resident at most
	Rows, Cols  int
	Fingerprint string
}

func TestMain(m *testing.M) {
	if path := os.Getenv(loadEnv); path != "" {
		if err := measureLoad(path); err != nil {
			fmt.Fprintln(os.Stderr, err)
			os.Exit(1)
		}
		os.Exit(0)
	}
	os.Exit(m.Run())
}

// measureLoad loads a table whose first column is the outcome.
func measureLoad(path string) error {
	start := time.Now()
	s, err := Open(path)
	if err != nil {
		return err
	}
	r := Request{Missing: FillMean}
	for i, c := range s.Columns() {
		if i == 0 {
			r.Outcome.Column = c.Name
		} else {
			r.Candidates = append(r.Candidates, c.Name)
		}
	}
	r.Workers, _ = strconv.Atoi(os.Getenv(workersEnv))
	opened := time.Now()
	d, err := s.Load(context.Background(), r)
	if err != nil {
		return err
	}
	out := measured{Open: opened.Sub(start).Seconds(), Load: time.Since(opened).Seconds(), Peak: peakMemory(), Fingerprint: d.Fingerprint}
	out.Rows, out.Cols = d.X.Dims()
	var used syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &used); err != nil {
		return err
	}
	out.Processor = time.Duration(used.Utime.Nano() + used.Stime.Nano()).Seconds()
	return json.NewEncoder(os.Stdout).Encode(out)
}

// peakMemory reads the kernel's high-water mark of resident memory.
func peakMemory() int64 {
	text, _ := os.ReadFile("/proc/self/status")
	for _, line := range strings.Split(string(text), "\n") {
		if rest, ok := strings.CutPrefix(line, "VmHWM:"); ok {
			kb, _ := strconv.ParseInt(strings.TrimSpace(strings.TrimSuffix(strings.TrimSpace(rest), "kB")), 10, 64)
			return kb << 10
		}
	}
	return 0
}

// writeWide writes a table of normal numbers column by column with the
// library's low-level writer, so that the writer's memory stays small.
func writeWide(b testing.TB, path string, rows, cols, group int) {
	b.Helper()
	var fields schema.FieldList
	for j := range cols {
		fields = append(fields, schema.NewFloat64Node(columnName(j), parquet.Repetitions.Optional, -1))
	}
	root, err := schema.NewGroupNode("schema", parquet.Repetitions.Required, fields, -1)
	must(b, err)
	f, err := os.Create(path)
	must(b, err)
	defer f.Close()
	w := file.NewParquetWriter(f, root, file.WithWriterProps(parquet.NewWriterProperties(parquet.WithDictionaryDefault(false), parquet.WithCompression(compress.Codecs.Snappy))))
	r := rand.New(rand.NewPCG(3, 4))
	values, levels := make([]float64, group), make([]int16, group)
	for i := range levels {
		levels[i] = 1
	}
	for r0 := 0; r0 < rows; r0 += group {
		n := min(group, rows-r0)
		rg := w.AppendRowGroup()
		for range cols {
			for i := range n {
				values[i] = r.NormFloat64()
			}
			c, err := rg.NextColumn()
			must(b, err)
			_, err = c.(*file.Float64ColumnChunkWriter).WriteBatch(values[:n], levels[:n], nil)
			must(b, err)
			must(b, c.Close())
		}
		must(b, rg.Close())
	}
	must(b, w.Close())
}

func columnName(j int) string { return fmt.Sprintf("x%06d", j) }

// BenchmarkLoad measures seconds and peak memory of Load, and states the
// budget: 1.25 x the matrix + 200 MB + 8 KB per column chunk.
func BenchmarkLoad(b *testing.B) {
	for _, s := range []struct{ rows, cols, group int }{
		{500, 10000, 500}, {500, 100000, 500}, {250000, 1000, 50000}, {250000, 1000, 250000},
	} {
		b.Run(fmt.Sprintf("rows=%d/cols=%d/group=%d", s.rows, s.cols, s.group), func(b *testing.B) {
			path := filepath.Join(b.TempDir(), "t.parquet")
			writeWide(b, path, s.rows, s.cols, s.group)
			chunks := s.cols * ((s.rows + s.group - 1) / s.group)
			for _, workers := range []int{1, 2} {
				b.Run(fmt.Sprintf("workers=%d", workers), func(b *testing.B) {
					measureChild(b, path, workers, s.rows*s.cols*8, chunks)
				})
			}
		})
	}
}

// BenchmarkLoadOther measures the formats that are not Parquet: one Arrow
// batch with everything in it, and CSV.
func BenchmarkLoadOther(b *testing.B) {
	const rows, cols = 100000, 300
	dir := b.TempDir()
	writeOneBatch(b, filepath.Join(dir, "t.arrow"), rows, cols)
	writeNumbers(b, filepath.Join(dir, "t.csv"), rows, cols)
	for _, name := range []string{"t.arrow", "t.csv"} {
		b.Run("file="+name, func(b *testing.B) { measureChild(b, filepath.Join(dir, name), 2, rows*cols*8, cols) })
	}
}

// measureChild runs the test binary once per iteration and reports the worst.
func measureChild(b *testing.B, path string, workers, matrix, chunks int) {
	var worst measured
	for b.Loop() {
		cmd := exec.Command(os.Args[0])
		cmd.Env = append(os.Environ(), loadEnv+"="+path, fmt.Sprintf("%s=%d", workersEnv, workers))
		cmd.Stderr = os.Stderr
		out, err := cmd.Output()
		must(b, err)
		var m measured
		must(b, json.Unmarshal(out, &m))
		worst.Peak, worst.Processor = max(worst.Peak, m.Peak), max(worst.Processor, m.Processor)
		worst.Open, worst.Load = max(worst.Open, m.Open), max(worst.Load, m.Load)
	}
	budget := 1.25*float64(matrix) + 200e6 + 8192*float64(chunks)
	if float64(worst.Peak) > budget {
		b.Errorf("peak memory %.0f MB is over the budget of %.0f MB", float64(worst.Peak)/1e6, budget/1e6)
	}
	b.ReportMetric(worst.Open, "open-s")
	b.ReportMetric(worst.Load, "load-s")
	b.ReportMetric(worst.Processor, "cpu-s")
	b.ReportMetric(float64(worst.Peak)/1e6, "peak-MB")
	b.ReportMetric(budget/1e6, "budget-MB")
	b.ReportMetric(float64(matrix)/1e6, "matrix-MB")
}

// writeOneBatch writes an Arrow file whose rows are all in one record batch.
func writeOneBatch(b testing.TB, path string, rows, cols int) {
	b.Helper()
	var fields []arrow.Field
	var arrays []arrow.Array
	r := rand.New(rand.NewPCG(5, 6))
	for j := range cols {
		fields = append(fields, arrow.Field{Name: columnName(j), Type: arrow.PrimitiveTypes.Float64})
		bld := array.NewFloat64Builder(memory.DefaultAllocator)
		bld.Reserve(rows)
		for range rows {
			bld.UnsafeAppend(r.NormFloat64())
		}
		arrays = append(arrays, bld.NewArray())
	}
	s := arrow.NewSchema(fields, nil)
	f, err := os.Create(path)
	must(b, err)
	defer f.Close()
	w, err := ipc.NewFileWriter(f, ipc.WithSchema(s), ipc.WithLZ4())
	must(b, err)
	must(b, w.Write(array.NewRecord(s, arrays, int64(rows))))
	must(b, w.Close())
}

// writeNumbers writes a CSV file of numbers with full precision.
func writeNumbers(b testing.TB, path string, rows, cols int) {
	b.Helper()
	f, err := os.Create(path)
	must(b, err)
	defer f.Close()
	r := rand.New(rand.NewPCG(7, 8))
	line := []byte{}
	for i := -1; i < rows; i++ {
		line = line[:0]
		for j := range cols {
			if j > 0 {
				line = append(line, ',')
			}
			if i < 0 {
				line = append(line, columnName(j)...)
			} else {
				line = strconv.AppendFloat(line, r.NormFloat64(), 'g', -1, 64)
			}
		}
		_, err := f.Write(append(line, '\n'))
		must(b, err)
	}
}
