package shape

import (
	"math"
	"os"
	"path/filepath"
	"reflect"
	"slices"
	"testing"

	"holdfast/solver"
)

// TestNeighbours holds the columns to the law they are said to follow:
// variance 1, correlation 0.5^k at distance k. 4 standard errors.
func TestNeighbours(t *testing.T) {
	s := Shape{Rows: 20_000, Cols: 6, Signals: 2, SNR: 1}
	made := s.Make(3)
	cols, y := made.Columns, made.Outcome
	bound := 4 / math.Sqrt(float64(s.Rows))
	for distance := range 4 {
		product := 0.0
		for i := range s.Rows {
			product += cols[1][i] * cols[1+distance][i]
		}
		got, want := product/float64(s.Rows), math.Pow(neighbour, float64(distance))
		if math.Abs(got-want) > bound*math.Sqrt(2) {
			t.Errorf("product moment at distance %d is %g, want %g", distance, got, want)
		}
	}
	if len(y) != s.Rows || !(deviation(y) > 0.5) {
		t.Errorf("outcome of %d rows with deviation %g", len(y), deviation(y))
	}
	if again := s.Make(3); !slices.Equal(again.Columns[5], cols[5]) {
		t.Error("the same seed gives another table")
	}
}

// TestSameTable pins the first values of the tables whose figures are published:
// they were made before there were other kinds of outcome.
func TestSameTable(t *testing.T) {
	got := Shape{Rows: 4, Cols: 3, Signals: 2, SNR: 2}.Make(1)
	want := []float64{-0.721215406293976, 1.6686945384217922, 2.9476054326385306, 1.1713584971175772}
	for i, y := range got.Outcome {
		if math.Abs(y-want[i]) > 1e-14 {
			t.Errorf("outcome of row %d is %v, want %v", i, y, want[i])
		}
	}
}

func TestKeepAndRead(t *testing.T) {
	for _, family := range []solver.Family{solver.Gaussian, solver.Cox} {
		dir := t.TempDir()
		s := Shape{Name: "small", Rows: 10, Cols: 3, Signals: 1, SNR: 1, Family: family}
		if err := s.Keep(dir, 5); err != nil {
			t.Fatal(err)
		}
		got, err := s.Read(dir)
		if err != nil {
			t.Fatal(err)
		}
		if want := s.Make(5); !reflect.DeepEqual(got, want) {
			t.Errorf("%v: the table read is not the table made", family)
		}
		other := s
		other.Cols = 4
		if _, err := other.Read(dir); err == nil {
			t.Errorf("%v: a table of another size was read", family)
		}
	}
}

// TestHeader compares with what numpy 1.24.2 writes:
// np.save(f, np.zeros((2, 3), order="F")), bytes 0 to 127.
func TestHeader(t *testing.T) {
	want := "\x93NUMPY\x01\x00v\x00{'descr': '<f8', 'fortran_order': True, 'shape': (2, 3), }"
	for len(want) < 127 {
		want += " "
	}
	want += "\n"
	if got := string(header("<f8", true, 2, 3)); got != want {
		t.Errorf("header\n%q, numpy\n%q", got, want)
	}
}

func TestDrawsOnDisk(t *testing.T) {
	dir := t.TempDir()
	s := Shape{Name: "small", Rows: 10, Cols: 1, Signals: 1, SNR: 1}
	if err := s.Keep(dir, 1); err != nil {
		t.Fatal(err)
	}
	if err := s.KeepDraws(dir, 4, 1); err != nil {
		t.Fatal(err)
	}
	info, err := os.Stat(filepath.Join(dir, "small_rows.npy"))
	if err != nil || info.Size() != headerSize+4*5*4 {
		t.Errorf("%v, %v: want 4 draws of 5 int32", info, err)
	}
}
