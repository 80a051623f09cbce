package shape

import (
	"math"
	"os"
	"path/filepath"
	"slices"
	"testing"
)

// TestNeighbours holds the columns to the law they are said to follow:
// variance 1, correlation 0.5^k at distance k. 4 standard errors.
func TestNeighbours(t *testing.T) {
	s := Shape{Rows: 20_000, Cols: 6, Signals: 2, SNR: 1}
	cols, y := s.Make(3)
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
	again, _ := s.Make(3)
	if !slices.Equal(again[5], cols[5]) {
		t.Error("the same seed gives another table")
	}
}

func TestKeepAndRead(t *testing.T) {
	dir := t.TempDir()
	s := Shape{Name: "small", Rows: 10, Cols: 3, Signals: 1, SNR: 1}
	if err := s.Keep(dir, 5); err != nil {
		t.Fatal(err)
	}
	cols, y, err := s.Read(dir)
	if err != nil {
		t.Fatal(err)
	}
	want, wantY := s.Make(5)
	if !slices.Equal(y, wantY) || !slices.EqualFunc(cols, want, slices.Equal[[]float64]) {
		t.Error("the table read is not the table made")
	}
	other := s
	other.Cols = 4
	if _, _, err := other.Read(dir); err == nil {
		t.Error("a table of another size was read")
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
	s := Shape{Name: "small", Rows: 10}
	if err := s.KeepDraws(dir, 4, 1); err != nil {
		t.Fatal(err)
	}
	info, err := os.Stat(filepath.Join(dir, "small_rows.npy"))
	if err != nil || info.Size() != headerSize+4*5*4 {
		t.Errorf("%v, %v: want 4 draws of 5 int32", info, err)
	}
}
