package table

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/big"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/apache/arrow/go/v17/arrow"
)

// load opens and loads a table.
func load(t testing.TB, path string, r Request) *Data {
	t.Helper()
	d, err := tryLoad(t, path, r)
	must(t, err)
	return d
}

func tryLoad(t testing.TB, path string, r Request) (*Data, error) {
	t.Helper()
	s, err := Open(path)
	must(t, err)
	return s.Load(t.Context(), r)
}

func centred(d *Data, j int) []float64 {
	n, _ := d.X.Dims()
	return d.X.Panel([]int32{int32(j)}, 0, n, nil)[0]
}

func TestCentreOfShiftedColumns(t *testing.T) {
	// Columns with mean/sd of 1e8 and more: the centred values must be the
	// exact differences, and mean and deviation those of exact arithmetic
	// (math/big).
	r := rand.New(rand.NewPCG(1, 2))
	const n = 1001
	cols := []testColumn{{"y", arrow.PrimitiveTypes.Float64, nil}}
	for _, shift := range []float64{0, 1e3, 1e8, -1e8, 1e12} {
		cols = append(cols, testColumn{fmt.Sprint("x", shift), arrow.PrimitiveTypes.Float64, nil})
		c := &cols[len(cols)-1]
		for range n {
			c.cells = append(c.cells, shift+r.NormFloat64())
		}
	}
	cols[0].cells = cols[1].cells
	var names []string
	for _, c := range cols[1:] {
		names = append(names, c.name)
	}
	d := load(t, writeParquet(t, tempFile(t, "t.parquet"), cols, 100), Request{Outcome: Outcome{Column: "y"}, Candidates: names})
	for j, c := range cols[1:] {
		mean, sd := exactMoments(c.cells)
		if math.Abs(d.Centre[j]-mean) > 1e-16*math.Abs(mean)*2 {
			t.Errorf("%s: centre %v, want %v", c.name, d.Centre[j], mean)
		}
		if rel := math.Abs(d.Deviation[j]/sd - 1); rel > 1e-14 {
			t.Errorf("%s: deviation %v, want %v (relative error %.1e)", c.name, d.Deviation[j], sd, rel)
		}
		for i, v := range centred(d, j) {
			if exact := new(big.Float).Sub(new(big.Float).SetFloat64(c.cells[i].(float64)), new(big.Float).SetFloat64(d.Centre[j])); c.name != "x0" {
				if f, acc := exact.Float64(); acc != big.Exact || f != v {
					t.Fatalf("%s row %d: %v is not the exact difference", c.name, i, v)
				}
			}
		}
	}
}

// exactMoments returns mean and deviation (divisor n), computed with 300 bits.
func exactMoments(cells []any) (mean, sd float64) {
	num := func() *big.Float { return new(big.Float).SetPrec(300) }
	sum, n := num(), num().SetInt64(int64(len(cells)))
	for _, c := range cells {
		sum.Add(sum, num().SetFloat64(c.(float64)))
	}
	m := num().Quo(sum, n)
	square := num()
	for _, c := range cells {
		d := num().Sub(num().SetFloat64(c.(float64)), m)
		square.Add(square, d.Mul(d, d))
	}
	mean, _ = m.Float64()
	sd, _ = num().Sqrt(square.Quo(square, n)).Float64()
	return mean, sd
}

func TestConstantColumnsCentreExactly(t *testing.T) {
	// The rounded mean of equal values is often not that value.
	for _, x := range []float64{0.1, 1.0 / 3, 1e8 + 0.1, -7e-5} {
		for n := 2; n < 300; n++ {
			v := make([]float64, n)
			for i := range v {
				v[i] = x
			}
			if c, _ := centreOf(v); c != x {
				t.Fatalf("%d times %v has the centre %v", n, x, c)
			}
		}
	}
}

func TestDecimalsRoundOnce(t *testing.T) {
	// The same as reading the number as text (strconv).
	for scale := range 25 {
		for _, u := range []int64{0, 1, 3, -7, 123456789, 1<<53 - 1, 1<<53 + 1, math.MaxInt64, math.MinInt64} {
			want, _ := strconv.ParseFloat(fmt.Sprintf("%de-%d", u, scale), 64)
			if got := decimalSmall(u, scale); got != want {
				t.Errorf("%d with scale %d is %v, want %v", u, scale, got, want)
			}
			if got, _ := decimal(big.NewInt(u), scale); got != want {
				t.Errorf("%d with scale %d is %v as a large number, want %v", u, scale, got, want)
			}
		}
	}
}

func TestRolesEnterTheFingerprint(t *testing.T) {
	path := writeText(t, tempFile(t, "t.csv"), "y,a,b\n1,1,2\n2,2,3\n3,5,1\n")
	seen := map[string]bool{}
	for _, r := range []Request{
		{Outcome: Outcome{Column: "y"}, Candidates: []string{"a", "b"}},
		{Outcome: Outcome{Column: "y"}, Candidates: []string{"a"}, Always: []string{"b"}},
		{Weight: "y", Candidates: []string{"a", "b"}},
		{Candidates: []string{"a", "b", "y"}},
	} {
		seen[load(t, path, r).Fingerprint] = true
	}
	if len(seen) != 4 {
		t.Errorf("four requests have %d fingerprints", len(seen))
	}
}

func TestCentreAtTheEdgesOfFloat64(t *testing.T) {
	for name, c := range map[string]struct {
		v        []float64
		mean, sd float64
	}{
		"constant":  {[]float64{0.1, 0.1, 0.1}, 0.1, 0},
		"large":     {[]float64{1e308, 1.5e308, 1.7e308}, 1.4e308, 2.943920288775949e307},
		"small":     {[]float64{1e-300, 2e-300, 3e-300}, 2e-300, 8.16496580927726e-301},
		"opposite":  {[]float64{8e307, -8e307}, 0, 8e307},
		"one value": {[]float64{7}, 7, 0},
	} {
		v := append([]float64(nil), c.v...)
		m, ok := centreOf(v)
		centre(v, m)
		if !ok || math.Abs(m-c.mean) > 1e-15*math.Abs(c.mean) {
			t.Errorf("%s: centre %v %v, want %v", name, m, ok, c.mean)
		}
		if sd := deviation(v); math.Abs(sd-c.sd) > 1e-15*c.sd {
			t.Errorf("%s: deviation %v, want %v", name, sd, c.sd)
		}
	}
	if _, ok := centreOf([]float64{-1.7e308, 1.7e308, 1.7e308}); ok {
		t.Error("values too far apart are accepted")
	}
}

// gappy is a table of 40 rows with gaps of every sort.
func gappy(t testing.TB) string {
	y := testColumn{"y", arrow.PrimitiveTypes.Float64, nil}
	full := testColumn{"full", arrow.PrimitiveTypes.Float64, nil}
	few := testColumn{"few", arrow.PrimitiveTypes.Float64, nil}
	nan := testColumn{"nan", arrow.PrimitiveTypes.Float64, nil}
	inf := testColumn{"inf", arrow.PrimitiveTypes.Float64, nil}
	void := testColumn{"void", arrow.PrimitiveTypes.Float64, nil}
	w := testColumn{"w", arrow.PrimitiveTypes.Int32, nil}
	hole := testColumn{"hole", arrow.PrimitiveTypes.Float64, nil}
	for i := range 40 {
		x := float64(i*i%17) + 1e8
		y.cells, full.cells = append(y.cells, float64(i)), append(full.cells, x)
		few.cells = append(few.cells, pick(i == 3 || i == 7, nil, any(x)))
		nan.cells = append(nan.cells, pick(i == 7, any(math.NaN()), any(x+1)))
		inf.cells = append(inf.cells, pick(i == 9, any(math.Inf(-1)), any(x+2)))
		void.cells = append(void.cells, nil)
		w.cells = append(w.cells, any(pick(i >= 30, 0, 1)))
		hole.cells = append(hole.cells, pick(i%2 == 0, nil, any(x)))
	}
	return writeParquet(t, tempFile(t, "gaps.parquet"), []testColumn{y, full, few, nan, inf, void, w, hole}, 13)
}

func pick[T any](c bool, a, b T) T {
	if c {
		return a
	}
	return b
}

func TestRefuse(t *testing.T) {
	_, err := tryLoad(t, gappy(t), Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"full", "few", "nan", "inf"}})
	wantError(t, err, "gaps.parquet", `3 columns have missing, NaN or infinite values: "few" (2 missing), "nan" (1 NaN), "inf" (1 infinite)`,
		"leaving them out keeps all 40 rows and 1 of 4 columns", `missing = "drop-rows" keeps 37 rows`)
	if strings.Contains(err.Error(), "fill-mean") {
		t.Errorf("fill-mean is offered although a value is infinite: %v", err)
	}
	var e *Error
	if !errors.As(err, &e) || len(e.Gaps) != 3 || e.Gaps[0] != (Gaps{Column: "few", Missing: 2}) {
		t.Errorf("the gaps in the error are %v", e.Gaps)
	}
	_, err = tryLoad(t, gappy(t), Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"full", "few", "void"}})
	wantError(t, err, `2 columns have`, `"void" (40 missing), "few" (2 missing)`, `"drop-rows" keeps 38 rows (without 1 column that has no value at all)`, "fill-mean")
}

func TestRefuseNamesTheWorstTen(t *testing.T) {
	cols := []testColumn{{"y", arrow.PrimitiveTypes.Float64, nil}}
	var names []string
	for j := range 14 {
		c := testColumn{fmt.Sprintf("x%02d", j), arrow.PrimitiveTypes.Float64, nil}
		for i := range 30 {
			c.cells = append(c.cells, pick(i <= j, nil, any(float64(i))))
		}
		cols, names = append(cols, c), append(names, c.name)
	}
	for i := range 30 {
		cols[0].cells = append(cols[0].cells, float64(i))
	}
	_, err := tryLoad(t, writeParquet(t, tempFile(t, "t.parquet"), cols, 100), Request{Outcome: Outcome{Column: "y"}, Candidates: names})
	wantError(t, err, `14 columns have`, `"x13" (14 missing), "x12" (13 missing)`, `"x04" (5 missing) and 4 more`, "keeps 16 rows")
	if strings.Contains(err.Error(), "x03") {
		t.Errorf("more than ten columns are named: %v", err)
	}
}

func TestDropRows(t *testing.T) {
	d := load(t, gappy(t), Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"full", "few", "nan", "inf", "void"}, Missing: DropRows})
	n, p := d.X.Dims()
	if n != 37 || p != 4 || d.TableRows != 40 || len(d.Rows) != 37 || d.Rows[3] != 4 || d.Outcome[3] != 4 || d.Outcome[36] != 39 {
		t.Errorf("%d x %d, rows %v, outcome %v", n, p, d.Rows, d.Outcome)
	}
	if fmt.Sprint(d.Candidates) != "[full few nan inf]" || len(d.Excluded) != 1 || d.Excluded[0] != (Exclusion{"void", "no row has a value"}) {
		t.Errorf("candidates %v, excluded %v", d.Candidates, d.Excluded)
	}
	if want := `drop-rows left out 3 of 40 rows (7.5 %) because of gaps in 3 columns: "few" (2 missing), "nan" (1 NaN), "inf" (1 infinite)`; len(d.Notes) != 1 || d.Notes[0] != want {
		t.Errorf("notes %q, want %q", d.Notes, want)
	}
	for j := range p {
		for i, v := range centred(d, j) {
			r := int(d.Rows[i])
			if want := float64(r*r%17) + 1e8 + []float64{0, 0, 1, 2}[j] - d.Centre[j]; v != want {
				t.Fatalf("column %d row %d is %v, want %v", j, i, v, want)
			}
		}
	}
}

func TestDropRowsAsksWhenManyAreLost(t *testing.T) {
	r := Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"full", "hole"}, Missing: DropRows}
	_, err := tryLoad(t, gappy(t), r)
	wantError(t, err, `leaves out 20 of 40 rows (50.0 %), more than a tenth`, `"hole" (20 missing)`, "[table] accept_loss = true")
	r.AcceptLoss = true
	if d := load(t, gappy(t), r); len(d.Rows) != 20 {
		t.Errorf("%d rows are kept", len(d.Rows))
	}
}

func TestDropRowsThatKeepsNothing(t *testing.T) {
	path := writeText(t, tempFile(t, "t.csv"), "y,a,b\n1,1,NA\n2,NA,1\n3,3,NA\n")
	_, err := tryLoad(t, path, Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"a", "b"}, Missing: DropRows, AcceptLoss: true})
	wantError(t, err, `"drop-rows" keeps 0 of 3 rows`, `"b" (2 missing)`)
}

func TestFillMean(t *testing.T) {
	r := Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"full", "hole", "void"}, Always: []string{"few"}, Missing: FillMean}
	d := load(t, gappy(t), r)
	if fmt.Sprint(d.Candidates, d.Always) != "[full hole] [few]" || d.Rows != nil {
		t.Fatalf("candidates %v, always %v, rows %v", d.Candidates, d.Always, d.Rows)
	}
	if fmt.Sprint(d.Missing) != "[{hole 20 0 0} {few 2 0 0}]" {
		t.Errorf("gaps %v", d.Missing)
	}
	if d.X.Holes(0) != nil || d.X.Holes(1)[0] != 0x5555555555&(1<<40-1) || d.X.Holes(2)[0] != 1<<3|1<<7 {
		t.Errorf("holes %x %x %x", d.X.Holes(0), d.X.Holes(1), d.X.Holes(2))
	}
	// Centre over filled cells, deviation of the filled column: by hand.
	var sum float64
	for i := 1; i < 40; i += 2 {
		sum += float64(i * i % 17)
	}
	mean := sum / 20
	var square float64
	for i := 1; i < 40; i += 2 {
		square += (float64(i*i%17) - mean) * (float64(i*i%17) - mean)
	}
	if got := d.Centre[1] - 1e8; math.Abs(got-mean) > 2e-8 {
		t.Errorf("centre %v, want %v", got, mean)
	}
	if want := math.Sqrt(square / 40); math.Abs(d.Deviation[1]/want-1) > 1e-12 {
		t.Errorf("deviation %v, want %v", d.Deviation[1], want)
	}
	for i, v := range centred(d, 1) {
		if i%2 == 0 && v != 0 {
			t.Errorf("the missing cell in row %d holds %v", i, v)
		}
	}
	_, err := tryLoad(t, gappy(t), Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"full", "inf"}, Missing: FillMean})
	wantError(t, err, `infinite values are never filled: "inf" (1 infinite)`)
	_, err = tryLoad(t, gappy(t), Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"full"}, Always: []string{"void"}, Missing: FillMean})
	wantError(t, err, `column "void": cannot be an always-in column: no row has a value`)
	_, err = tryLoad(t, gappy(t), Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"void"}, Missing: FillMean})
	wantError(t, err, "no candidate is left")
}

func TestOutcomeAndWeightMustBeComplete(t *testing.T) {
	for _, p := range []Policy{Refuse, FillMean} {
		_, err := tryLoad(t, gappy(t), Request{Outcome: Outcome{Column: "few"}, Candidates: []string{"full"}, Missing: p})
		wantError(t, err, `column "few": the outcome is missing in rows 3, 7 (rows are counted from 0)`, "never filled")
		_, err = tryLoad(t, gappy(t), Request{Outcome: Outcome{Column: "inf"}, Candidates: []string{"full"}, Missing: p})
		wantError(t, err, `column "inf": the outcome is NaN or infinite in row 9`)
		_, err = tryLoad(t, gappy(t), Request{Outcome: Outcome{Column: "y"}, Weight: "nan", Candidates: []string{"full"}, Missing: p})
		wantError(t, err, `column "nan": the case weight is NaN or infinite in row 7`)
	}
	_, err := tryLoad(t, gappy(t), Request{Outcome: Outcome{Column: "hole"}, Candidates: []string{"full"}})
	wantError(t, err, "rows 0, 2, 4, 6, 8, 10, 12, 14, 16, 18 and 10 more")
}

// DropRows leaves out the rows in which any column in use has a gap, and counts
// them together. By hand: rows 3 and 7 of few, 7 of nan, 9 of inf.
func TestDropRowsOfOtherColumns(t *testing.T) {
	for name, c := range map[string]struct {
		r    Request
		gone []int32
		note string
	}{
		"outcome":           {Request{Outcome: Outcome{Column: "few"}, Candidates: []string{"full"}}, []int32{3, 7}, `left out 2 of 40 rows (5.0 %) because of gaps in 1 column: "few" (2 missing)`},
		"infinite outcome":  {Request{Outcome: Outcome{Column: "inf"}, Candidates: []string{"full"}}, []int32{9}, `"inf" (1 infinite)`},
		"weight":            {Request{Outcome: Outcome{Column: "y"}, Weight: "nan", Candidates: []string{"full"}}, []int32{7}, `"nan" (1 NaN)`},
		"offset":            {Request{Outcome: Outcome{Column: "y", Offset: "few"}, Candidates: []string{"full"}}, []int32{3, 7}, `"few" (2 missing)`},
		"with a candidate":  {Request{Outcome: Outcome{Column: "few"}, Candidates: []string{"full", "nan", "inf", "void"}}, []int32{3, 7, 9}, `left out 3 of 40 rows (7.5 %) because of gaps in 2 columns: "few" (2 missing), "inf" (1 infinite)`},
		"stratum of a draw": {Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"full"}, Within: []string{"few"}}, []int32{3, 7}, `"few" (2 missing)`},
	} {
		c.r.Missing = DropRows
		d := load(t, gappy(t), c.r)
		var want []int32
		for i := range int32(40) {
			if !slices.Contains(c.gone, i) {
				want = append(want, i)
			}
		}
		if !slices.Equal(d.Rows, want) || len(d.Outcome) != len(want) || d.Weight != nil && len(d.Weight) != len(want) {
			t.Errorf("%s: rows %v, want %v", name, d.Rows, want)
		}
		if len(d.Notes) != 1 || !strings.Contains(d.Notes[0], c.note) {
			t.Errorf("%s: notes %q, want %q", name, d.Notes, c.note)
		}
	}
	r := Request{Outcome: Outcome{Column: "hole"}, Candidates: []string{"full"}, Missing: DropRows}
	_, err := tryLoad(t, gappy(t), r)
	wantError(t, err, `leaves out 20 of 40 rows (50.0 %), more than a tenth: complete "hole" (20 missing), or confirm with [table] accept_loss = true`)
	var e *Error
	if errors.As(err, &e) && len(e.Gaps) > 0 {
		t.Errorf("the outcome stands among columns that could be filled or left out: %v", e.Gaps)
	}
	r.AcceptLoss = true
	if d := load(t, gappy(t), r); len(d.Rows) != 20 {
		t.Errorf("%d rows are kept", len(d.Rows))
	}
	r.Outcome.Column = "void"
	_, err = tryLoad(t, gappy(t), r)
	wantError(t, err, `column "void": no row has a value`)
}

func TestWeights(t *testing.T) {
	// Rows of weight 0 go first: gaps in them do not count.
	path := writeText(t, tempFile(t, "t.csv"), "y,a,w\n1,1,1\nNA,NA,0\n3,5,2.5\n4,6,0\n5,9,1\n")
	d := load(t, path, Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"a"}, Weight: "w"})
	if fmt.Sprint(d.Rows, d.Outcome, d.Weight, d.Centre) != "[0 2 4] [1 3 5] [1 2.5 1] [5]" || d.Notes[0] != "2 rows of weight 0 were left out" {
		t.Errorf("rows %v, outcome %v, weight %v, centre %v, notes %q", d.Rows, d.Outcome, d.Weight, d.Centre, d.Notes)
	}
	path = writeText(t, tempFile(t, "t.csv"), "y,a,w\n1,1,1\n2,2,-1\n3,5,2.5\n")
	_, err := tryLoad(t, path, Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"a"}, Weight: "w"})
	wantError(t, err, `column "w": a case weight is negative in row 1`)
	path = writeText(t, tempFile(t, "t.csv"), "y,a,w\n1,1,1\n2,2,0\n3,5,0\n")
	_, err = tryLoad(t, path, Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"a"}, Weight: "w"})
	wantError(t, err, `column "w": only 1 row has a weight above 0`)
}

func TestRoundedIntegersAreSaid(t *testing.T) {
	const odd = 1<<53 + 1
	cols := []testColumn{
		{"y", arrow.PrimitiveTypes.Float64, []any{1.0, 2.0, 3.0, 4.0}},
		{"id", arrow.PrimitiveTypes.Int64, []any{1 << 53, nil, odd, odd + 2}},
		{"big", arrow.PrimitiveTypes.Uint64, []any{uint64(1) << 63, uint64(math.MaxUint64), uint64(5), uint64(6)}},
		{"edge", arrow.PrimitiveTypes.Int64, []any{math.MinInt64, math.MaxInt64, 1 << 62, 0}},
	}
	dir := t.TempDir()
	for _, path := range []string{
		writeParquet(t, filepath.Join(dir, "t.parquet"), cols, 2),
		writeParquet(t, filepath.Join(dir, "one.parquet"), cols, 4),
		writeArrow(t, filepath.Join(dir, "t.arrow"), cols, 3, false),
		writeCSV(t, filepath.Join(dir, "t.csv"), cols),
	} {
		d := load(t, path, Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"id", "big", "edge"}, Missing: FillMean})
		want := []string{
			`column "id": 2 integers cannot be held exactly and were rounded to the nearest float64 (the first in row 2)`,
			`column "big": 1 integer cannot be held exactly and was rounded to the nearest float64 (the first in row 1)`,
			`column "edge": 1 integer cannot be held exactly and was rounded to the nearest float64 (the first in row 1)`,
		}
		if len(d.Notes) < 3 || fmt.Sprint(d.Notes[:3]) != fmt.Sprint(want) {
			t.Errorf("%s: notes %q, want %q", filepath.Base(path), d.Notes, want)
		}
	}
}

func TestRequestsThatCannotBeMet(t *testing.T) {
	path := writeText(t, tempFile(t, "t.csv"), "y,a,feed,b,day\n1,1,algae,2,2024-01-31\n2,2,yeast,3,2024-02-01\n3,5,algae,1,2024-02-02\n")
	for _, c := range []struct {
		r    Request
		want []string
	}{
		{Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"nope"}}, []string{`there is no column called "nope" (asked for as a candidate)`}},
		{Request{Outcome: Outcome{Column: "z"}, Candidates: []string{"a"}}, []string{`there is no column called "z" (asked for as the outcome)`}},
		{Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"a", "day"}}, []string{`column "day": cannot be a candidate: is a date or time, not a number`}},
		{Request{Outcome: Outcome{Column: "feed"}, Candidates: []string{"a"}}, []string{`column "feed": cannot be the outcome: is text, and a number is needed (kind = "yes-no" and kind = "classes" read text)`}},
		{Request{Outcome: Outcome{Column: "y"}, Weight: "feed", Candidates: []string{"a"}}, []string{`column "feed": cannot be the case weight: is text, and a number is needed`}},
		{Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"a", "y"}}, []string{`column "y": cannot be a candidate and the outcome at once`}},
		{Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"a", "a"}}, []string{`column "a": cannot be a candidate and a candidate at once`}},
		{Request{Outcome: Outcome{Column: "y"}}, []string{"no candidate column was asked for"}},
		{Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"a", "b"}, Memory: 50}, []string{"3 rows x 3 columns need 72 bytes, and 50 bytes is all that may be taken"}},
	} {
		_, err := tryLoad(t, path, c.r)
		wantError(t, err, c.want...)
	}
	text := writeText(t, tempFile(t, "t.csv"), "y,day\n1,2024-01-31\n2,2024-02-01\n3,2024-02-02\n")
	_, err := tryLoad(t, text, Request{Outcome: Outcome{Column: "y"}})
	wantError(t, err, `no column is left that could be a candidate ("day": is a date or time, not a number)`)
}

func TestTablesThatCannotBeRead(t *testing.T) {
	dir := t.TempDir()
	for name, c := range map[string]struct{ text, want string }{
		"none.csv":     {"", "the file is empty"},
		"blank.csv":    {"\n\n", "the file is empty"},
		"twice.csv":    {"a,b,a\n1,2,3\n", `two columns are called "a" (columns 1 and 3): rename one`},
		"few.csv":      {"a,b\n1,2\n3\n", "line 3 has 1 field, the header has 2"},
		"many.csv":     {"a,b\n1,2\n3,4,5\n", "line 3 has more fields than the header, which has 2"},
		"open.csv":     {"a,b\n1,\"2\n3,4\n", "line 2: a quote is opened and never closed"},
		"bare.csv":     {"a,b\n1,5\" pipe\n3,4\n", "line 2: a quote stands inside a field"},
		"after.csv":    {"a,b\n1,\"5\"x\n3,4\n", "line 2: text follows the closing quote"},
		"numbers.csv":  {"1.5,2\n3,4\n", "the first line holds only numbers"},
		"utf16.csv":    {"\xff\xfea\x00,\x00b\x00\n\x00", "UTF-16"},
		"mac.csv":      {"a,b\r1,2\r", "carriage return"},
		"nul.csv":      {"a\x00b,c\n1,2\n", "not text"},
		"cut.csv.gz":   {"\x1f\x8b\x08\x00\x00\x00", "does not decompress"},
		"t.parquet":    {"hello, world", "not a Parquet file"},
		"half.parquet": {"PAR1 hello, world", "does not end with PAR1"},
		"lie.parquet":  {"PAR1\x00\x00\x00\x00\xff\xff\xff\x7fPAR1", "the footer claims 2147483647 bytes"},
		"t.arrow":      {"hello, world", "not an Arrow file"},
		"half.arrow":   {"ARROW1\x00\x00abcdefghijk", "does not end with ARROW1"},
		"old.feather":  {"FEA1abcdefgh", "version 1 of the Feather format"},
		"t.xlsx":       {"PK\x03\x04", "unknown kind of file"},
	} {
		path := writeText(t, filepath.Join(dir, name), c.text)
		wantError(t, second(Open(path)), name, c.want)
	}
	wantError(t, second(Open(filepath.Join(dir, "absent.csv"))), "there is no such file")
	wantError(t, second(Open(filepath.Join(dir, "absent-*.parquet"))), "no file matches")
	must(t, os.Mkdir(filepath.Join(dir, "folder"), 0o755))
	wantError(t, second(Open(filepath.Join(dir, "folder"))), "holds no .parquet file")
	for text, want := range map[string]string{"y,a\n": "the table has no rows", "y,a\n1,2\n": "the table has a single row"} {
		path := writeText(t, filepath.Join(dir, "short.csv"), text)
		s, err := Open(path)
		must(t, err)
		names := []string{"a"}
		if text == "y,a\n" { // a column without cells has no kind
			wantError(t, second(s.Load(t.Context(), Request{Candidates: names})), want)
			continue
		}
		wantError(t, second(s.Load(t.Context(), Request{Outcome: Outcome{Column: "y"}, Candidates: names})), want)
	}
	empty := writeParquet(t, filepath.Join(dir, "empty.parquet"), []testColumn{{"a", arrow.PrimitiveTypes.Float64, nil}}, 10)
	_, err := tryLoad(t, empty, Request{Candidates: []string{"a"}})
	wantError(t, err, "the table has no rows")
	none := writeArrow(t, filepath.Join(dir, "none.arrow"), []testColumn{{"a", arrow.PrimitiveTypes.Float64, []any{}}}[:1], 10, false)
	_, err = tryLoad(t, none, Request{Candidates: []string{"a"}})
	wantError(t, err, "the table has no rows")
}

func TestChangedFileIsNoticed(t *testing.T) {
	path := writeText(t, tempFile(t, "t.csv"), "y,a\n1,2\n2,3\n3,5\n")
	s, err := Open(path)
	must(t, err)
	writeText(t, path, "y,a\n1,2\n2,3\n3,55\n")
	wantError(t, second(s.Load(t.Context(), Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"a"}})), "the file has changed since it was opened")
}

func TestCancel(t *testing.T) {
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	s, err := Open(gappy(t))
	must(t, err)
	if _, err := s.Load(ctx, Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"full"}}); !errors.Is(err, context.Canceled) {
		t.Errorf("the error is %v", err)
	}
	if _, err := s.Scan(ctx, "y"); !errors.Is(err, context.Canceled) {
		t.Errorf("the error of a scan is %v", err)
	}
}
