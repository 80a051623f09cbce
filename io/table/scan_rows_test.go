package table

import (
	"context"
	"fmt"
	"math/rand/v2"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/apache/arrow/go/v17/arrow"
)

// scanText scans a CSV table.
func scanText(t *testing.T, text, outcome string) *Summary {
	t.Helper()
	s, err := Open(writeText(t, filepath.Join(t.TempDir(), "t.csv"), text))
	must(t, err)
	sum, err := s.Scan(context.Background(), outcome)
	must(t, err)
	return sum
}

// Rows with a gap are counted once each, and not for the sake of the outcome,
// of a leak or of a column without any value.
func TestScanCountsRowsWithGaps(t *testing.T) {
	var b strings.Builder
	b.WriteString("a,b,empty,same,y\n")
	r := rand.New(rand.NewPCG(5, 6))
	var missing []int
	for i := range 90 {
		y := r.NormFloat64()
		a, c, same, out := fmt.Sprint(r.NormFloat64()), fmt.Sprint(r.NormFloat64()), fmt.Sprint(2*y), fmt.Sprint(y)
		if i < 8 {
			a = ""
		}
		if i >= 6 && i < 10 {
			c = "NaN"
		}
		if i >= 40 && i < 45 {
			same = ""
		}
		if i%6 == 5 {
			out = ""
			missing = append(missing, i)
		}
		fmt.Fprintf(&b, "%s,%s,,%s,%s\n", a, c, same, out)
	}
	sum := scanText(t, b.String(), "y")
	if sum.Incomplete != 10 {
		t.Errorf("%d rows with a gap, not the 10 that a and b share", sum.Incomplete)
	}
	if !slices.Equal(sum.OutcomeGaps, missing[:mostGapRows]) {
		t.Errorf("the outcome is missing in %v first, not in %v", sum.OutcomeGaps, missing[:mostGapRows])
	}
}

// Rows that say the same are counted whatever their labels, and not where so
// few values repeat by chance.
func TestScanCountsRepeats(t *testing.T) {
	const n = 300
	r := rand.New(rand.NewPCG(7, 8))
	cols := make([]testColumn, 8)
	for k := range cols {
		cols[k] = testColumn{fmt.Sprint("x", k), arrow.PrimitiveTypes.Float64, nil}
		for range n {
			cols[k].cells = append(cols[k].cells, r.NormFloat64())
		}
	}
	cols[0].name = "id"
	for i := range n {
		cols[0].cells[i] = float64(i)
	}
	cols[3].cells[5] = nil
	for _, pair := range [][2]int{{5, 100}, {5, 200}, {30, 31}} {
		for k := 1; k < len(cols); k++ {
			cols[k].cells[pair[1]] = cols[k].cells[pair[0]]
		}
	}
	cols[7].cells[31] = cols[7].cells[30].(float64) + 1e-9 // no repeat after all
	s, err := Open(writeParquet(t, filepath.Join(t.TempDir(), "t.parquet"), cols, 50))
	must(t, err)
	sum, err := s.Scan(context.Background(), "x7")
	must(t, err)
	if sum.Repeats != 2 {
		t.Errorf("%d repeats, not 2", sum.Repeats)
	}
	var b strings.Builder
	b.WriteString("a,b,y\n")
	for range n {
		fmt.Fprintf(&b, "%d,%d,%d\n", r.IntN(3), r.IntN(3), r.IntN(2))
	}
	if sum := scanText(t, b.String(), "y"); sum.Repeats != 0 {
		t.Errorf("%d repeats where 18 different rows are possible", sum.Repeats)
	}
}

// A name that is no UTF-8 can stand in no study and in no result.
func TestNamesThatAreNotUTF8(t *testing.T) {
	_, err := Open(writeText(t, filepath.Join(t.TempDir(), "t.csv"), "ph,temp\xe9rature,y\n1,2,3\n2,3,4\n"))
	wantError(t, err, "header line, column 2", `"temp\xe9rature"`, "not UTF-8: save the file as UTF-8")
	if _, err = Open(writeText(t, filepath.Join(t.TempDir(), "t.csv"), "ph,feed,y\n1,r\xe9gal,3\n2,x,4\n")); err != nil {
		t.Errorf("a cell that nobody reads is no reason to refuse: %v", err)
	}
	wantError(t, checkColumns("t.parquet", []Column{{Name: "ph"}, {Name: "temp\xe9"}}), "name of column 2", `"temp\xe9"`, "not UTF-8")
}
