package table

import (
	"fmt"
	"math"
	"math/rand/v2"
	"path/filepath"
	"strings"
	"testing"

	"github.com/apache/arrow/go/v17/arrow"
	"gonum.org/v1/gonum/integrate"
	"gonum.org/v1/gonum/stat"
)

// scanned is a table with a column of every sort that a scan can tell.
func scanned(t testing.TB) []testColumn {
	r := rand.New(rand.NewPCG(11, 12))
	const n = 400
	names := []string{"alive", "id", "count_up", "day", "second", "constant", "noise", "ties", "close", "inverse", "holes", "series", "feed", "inf", "order"}
	cols := make([]testColumn, len(names))
	for k, name := range names {
		cols[k] = testColumn{name, arrow.PrimitiveTypes.Float64, nil}
	}
	cols[12].typ = arrow.BinaryTypes.String
	ids := r.Perm(100000)
	walk := 0.0
	for i := range n {
		y := float64(r.IntN(2))
		walk = 0.95*walk + r.NormFloat64()
		cells := []any{y, float64(ids[i]), float64(i + 7), float64(20240100 + 1 + i%28), float64(1700000000 + 60*i), 3.5, r.NormFloat64() * 10,
			float64(r.IntN(5)) + y, y*3 + 0.1*r.NormFloat64(), -y*2 + 0.6*r.NormFloat64(), r.Float64(), walk, fmt.Sprint("feed ", i%3), r.Float64(), y*2 + 0.6*r.NormFloat64()}
		if i%8 == 0 {
			cells[10] = nil
		}
		if i == 9 {
			cells[10], cells[13] = math.NaN(), math.Inf(1)
		}
		for k := range cols {
			cols[k].cells = append(cols[k].cells, cells[k])
		}
	}
	return cols
}

func TestScan(t *testing.T) {
	cols := scanned(t)
	dir := t.TempDir()
	for _, path := range []string{writeParquet(t, filepath.Join(dir, "t.parquet"), cols, 77), writeCSV(t, filepath.Join(dir, "t.csv"), cols)} {
		s, err := Open(path)
		must(t, err)
		sum, err := s.Scan(t.Context(), "alive")
		must(t, err)
		if sum.Rows != 400 || len(sum.Columns) != len(cols) {
			t.Fatalf("%d rows, %d columns", sum.Rows, len(sum.Columns))
		}
		at := map[string]ColumnSummary{}
		for _, c := range sum.Columns {
			at[c.Name] = c
		}
		checkFlags(t, at)
		checkFigures(t, at, cols)
	}
}

// checkFlags checks what a scan says of each column.
func checkFlags(t *testing.T, at map[string]ColumnSummary) {
	t.Helper()
	flags := func(c ColumnSummary) string {
		s := ""
		for _, f := range []struct {
			on   bool
			name string
		}{{c.Constant, "constant "}, {c.Whole, "whole "}, {c.Unique, "unique "}, {c.RowNumber, "row "}, {c.Monotone, "monotone "}, {c.Dates != "", "date "}, {c.Leak, "leak "}, {len(c.Values) == 2, "two "}} {
			if f.on {
				s += f.name
			}
		}
		return s
	}
	want := map[string]string{
		"alive": "whole two ", "id": "whole unique ", "count_up": "whole unique row monotone ", "day": "whole date ",
		"second": "whole unique monotone date ", "constant": "constant ", "noise": "", "ties": "whole ", "close": "leak ",
		"inverse": "leak ", "holes": "", "series": "", "feed": "", "inf": "", "order": "leak ",
	}
	for name, w := range want {
		if got := flags(at[name]); got != w {
			t.Errorf("column %s is %q, want %q", name, got, w)
		}
	}
	if c := at["holes"]; c.Missing != 50 || c.NaN != 1 || c.Infinite != 0 || c.Distinct != 349 {
		t.Errorf("holes: %d missing, %d NaN, %d infinite, %d different", c.Missing, c.NaN, c.Infinite, c.Distinct)
	}
	if c := at["inf"]; c.Infinite != 1 || c.Max > 1 {
		t.Errorf("inf: %d infinite, largest %v", c.Infinite, c.Max)
	}
	if c := at["alive"]; c.Values[0].Count+c.Values[1].Count != 400 || c.Values[1].Value != 1 {
		t.Errorf("alive: values %v", c.Values)
	}
	if at["day"].Dates != "year, month and day in one number" || at["second"].Dates != "seconds since 1970" {
		t.Errorf("dates: %q, %q", at["day"].Dates, at["second"].Dates)
	}
	if c := at["feed"]; c.Usable || c.Kind != Text || !math.IsNaN(c.Mean) {
		t.Errorf("feed: %v %v", c.Kind, c.Mean)
	}
}

// checkFigures compares with gonum: moments, correlations, area under the
// curve.
func checkFigures(t *testing.T, at map[string]ColumnSummary, cols []testColumn) {
	t.Helper()
	floats := func(k int) (v []float64) {
		for _, c := range cols[k].cells {
			v = append(v, c.(float64))
		}
		return v
	}
	y := floats(0)
	for _, k := range []int{1, 2, 6, 7, 8, 9, 11} {
		v, c := floats(k), at[cols[k].name]
		mean, variance := stat.PopMeanVariance(v, nil)
		near(t, c.Name+" mean", c.Mean, mean)
		near(t, c.Name+" sd", c.SD, math.Sqrt(variance))
		near(t, c.Name+" correlation", c.Correlation, stat.Correlation(v, y, nil))
		near(t, c.Name+" auc", c.AUC, areaUnderCurve(v, y))
	}
	if c := at["series"]; c.Serial < 0.85 || at["noise"].Serial > 0.2 {
		t.Errorf("serial correlation %v of a series of 0.95, %v of noise", c.Serial, at["noise"].Serial)
	}
}

func near(t *testing.T, what string, got, want float64) {
	t.Helper()
	if !(math.Abs(got-want) <= 1e-10*(1+math.Abs(want))) {
		t.Errorf("%s is %v, want %v", what, got, want)
	}
}

// areaUnderCurve is gonum's receiver operating characteristic, integrated.
func areaUnderCurve(v, y []float64) float64 {
	v = append([]float64(nil), v...)
	classes := make([]bool, len(y))
	for i := range y {
		classes[i] = y[i] == 1
	}
	stat.SortWeightedLabeled(v, classes, nil)
	tpr, fpr, _ := stat.ROC(nil, v, classes, nil)
	return integrate.Trapezoidal(fpr, tpr)
}

func TestScanInManyBatches(t *testing.T) {
	// More columns than fit the memory of one batch give the same summary.
	cols := scanned(t)
	s, err := Open(writeParquet(t, tempFile(t, "t.parquet"), cols, 100))
	must(t, err)
	whole, err := s.Scan(t.Context(), "alive")
	must(t, err)
	sc := newScan(s, 1)
	must(t, sc.readOutcome(t.Context(), "alive"))
	parts := &Summary{Rows: 400, Outcome: "alive", Columns: make([]ColumnSummary, len(cols))}
	for k := range parts.Columns {
		nan := math.NaN()
		parts.Columns[k] = ColumnSummary{Column: s.format.columns()[k], Min: nan, Max: nan, Mean: nan, SD: nan, Serial: nan, Correlation: nan, AUC: nan}
		if parts.Columns[k].levelled() {
			must(t, sc.columns(t.Context(), []int{k}, parts))
		}
	}
	summarise(parts, sc.marks)
	if a, b := fmt.Sprintf("%v", whole), fmt.Sprintf("%v", parts); a != b {
		t.Errorf("two ways of scanning differ:\n%s\n%s", a, b)
	}
}

func TestLeakOfANumberOutcome(t *testing.T) {
	s, err := Open(writeText(t, tempFile(t, "t.csv"), "y,copy,other\n1,-2.1,4\n2,-4,1\n3,-6.1,3\n5,-10,2\n8,-16,9\n9,-18.1,0\n"))
	must(t, err)
	sum, err := s.Scan(t.Context(), "y")
	must(t, err)
	if c := sum.Columns; !c[1].Leak || c[2].Leak || c[0].Leak || !math.IsNaN(c[1].AUC) {
		t.Errorf("leaks %v %v %v, AUC %v", c[0].Leak, c[1].Leak, c[2].Leak, c[1].AUC)
	}
}

func TestScanErrors(t *testing.T) {
	var dated strings.Builder
	for i := range MostLevels + 1 {
		fmt.Fprintf(&dated, "%d,2024-01-%02d,tank %d\n", i, i%28+1, i)
	}
	s, err := Open(writeText(t, tempFile(t, "t.csv"), "y,day,id\n"+dated.String()))
	must(t, err)
	wantError(t, second(s.Scan(t.Context(), "day")), `column "day": cannot be the outcome: is a date or time, not a number`)
	wantError(t, second(s.Scan(t.Context(), "id")), `column "id": cannot be the outcome: has more than 50 levels`)
	wantError(t, second(s.Scan(t.Context(), "z")), `there is no column called "z" (asked for as the outcome)`)
	s, err = Open(writeText(t, tempFile(t, "t.csv"), "y,feed\n"))
	must(t, err)
	wantError(t, second(s.Scan(t.Context(), "")), "the table has no rows")
}

func TestScanOfRealTables(t *testing.T) {
	// Diabetes data (Efron et al. 2004): 442 patients, outcome 25 to 346 with
	// mean 152.13; correlation of body mass index with it 0.586 (from the
	// published table, computed with gonum).
	s, err := Open(filepath.Join("..", "..", "testdata", "data", "diabetes.csv"))
	must(t, err)
	sum, err := s.Scan(t.Context(), "y")
	must(t, err)
	c := sum.Columns[0]
	if c.Min != 25 || c.Max != 346 || math.Abs(c.Mean-152.1335) > 1e-4 || !c.Whole {
		t.Errorf("outcome from %v to %v, mean %v", c.Min, c.Max, c.Mean)
	}
	got, _ := readAll(t, s.Path())
	near(t, "bmi correlation", sum.Columns[3].Correlation, stat.Correlation(got["bmi"], got["y"], nil))
	if sex := sum.Columns[2]; len(sex.Values) != 2 || sex.Values[0].Value != 1 || sex.Values[1].Value != 2 {
		t.Errorf("sex has the values %v", sex.Values)
	}
}

// A scan tells the levels of text, of two-valued columns and of the outcome.
func TestScanTellsLevels(t *testing.T) {
	for _, path := range inEveryFormat(t, larvae()) {
		s, err := Open(path)
		must(t, err)
		sum, err := s.Scan(t.Context(), "grade")
		must(t, err)
		want := map[string]string{
			"lost": "[{false 7} {true 5}]", "fate": "[{alive 7} {dead 5}]", "stage": "[{pediveliger 2} {spat 6} {veliger 4}]", "grade": "[{2 5} {3 3} {10 4}]",
			"settled": "[{0 3} {1 9}]", "site": "[{north 5} {south 4} {west 3}]",
		}
		for _, c := range sum.Columns {
			if got := fmt.Sprint(c.Levels); got != want[c.Name] && (want[c.Name] != "" || got != "[]") {
				t.Errorf("%s: column %s has the levels %s, want %s", filepath.Base(path), c.Name, got, want[c.Name])
			}
			if c.Kind == Text && (c.Missing != 0 || c.Distinct != len(c.Levels) || c.Constant) {
				t.Errorf("column %s: %d missing, %d different, constant %v", c.Name, c.Missing, c.Distinct, c.Constant)
			}
		}
	}
}

// What is text is compared as text: two levels as 0 and 1, more by the
// correlation ratio and Cramer's V. Values by gonum and by hand.
func TestScanComparesText(t *testing.T) {
	var b strings.Builder
	b.WriteString("y,fate,site,place,twin,id,stage,x\n")
	var y, fate []float64
	sums, counts := map[string]float64{}, map[string]float64{}
	for i := range 120 {
		alive := i*7%5 < 2
		site := []string{"north", "south", "west"}[i*11%3]
		v := float64(i*37%101)/10 + 3*is(alive) + 4*is(site == "west")
		y, fate = append(y, v), append(fate, is(!alive))
		sums[site], counts[site] = sums[site]+v, counts[site]+1
		word := pick(alive, "alive", "dead")
		place := site
		if i == 5 {
			place = ""
		}
		fmt.Fprintf(&b, "%v,%s,%s,%s,%s,tank %d,%s,%v\n", v, word, site, place, strings.ToUpper(word), i, "s-"+site, i%4)
	}
	at := func(outcome string) map[string]ColumnSummary {
		out := map[string]ColumnSummary{}
		for _, c := range scanText(t, b.String(), outcome).Columns {
			out[c.Name] = c
		}
		return out
	}
	number, two, three := at("y"), at("fate"), at("site")
	near(t, "y with two levels", number["fate"].Correlation, stat.Correlation(fate, y, nil))
	near(t, "two levels with y", two["y"].Correlation, stat.Correlation(y, fate, nil))
	near(t, "two levels with y, auc", two["y"].AUC, areaUnderCurve(y, fate))
	mean, variance := stat.PopMeanVariance(y, nil)
	between := 0.0
	for site, n := range counts {
		between += n * (sums[site]/n - mean) * (sums[site]/n - mean)
	}
	ratio := math.Sqrt(1 - (1-between/(120*variance))*119/117)
	near(t, "y with three levels", number["site"].Correlation, ratio)
	near(t, "three levels with y", three["y"].Correlation, ratio)
	for name, c := range map[string]ColumnSummary{"twin of two": two["twin"], "twin of three": three["stage"], "twin with a gap": three["place"]} {
		if !c.Leak || math.Abs(math.Abs(c.Correlation)-1) > 1e-12 {
			t.Errorf("%s: correlation %v, leak %v", name, c.Correlation, c.Leak)
		}
	}
	if c := number["id"]; c.NoLevels != "has more than 50 levels" || c.Levels != nil || c.Leak || c.Distinct != MostLevels+1 {
		t.Errorf("id: %+v", c)
	}
	if number["site"].Leak || two["x"].Leak || number["place"].Missing != 1 {
		t.Errorf("leaks %v %v, %d missing", number["site"].Leak, two["x"].Leak, number["place"].Missing)
	}
}

// Cramer's V of the table 10 20 / 30 5 by hand: chi-squared is n (ad-bc)^2 over
// the product of the margins.
func TestCramersV(t *testing.T) {
	var a, b coding
	a.names, b.names = []string{"x", "y", "unused"}, []string{"p", "q"}
	for _, c := range []struct {
		x, y  int32
		count int
	}{{0, 0, 10}, {0, 1, 20}, {1, 0, 30}, {1, 1, 5}, {noCode, 0, 7}, {1, noCode, 3}} {
		for range c.count {
			a.codes, b.codes = append(a.codes, c.x), append(b.codes, c.y)
		}
	}
	d := 10.0*5 - 20.0*30
	near(t, "V", cramersV(a, b), math.Sqrt(d*d/(30*35*40*25)))
	if v := cramersV(a, coding{names: []string{"p"}, codes: make([]int32, len(a.codes))}); !math.IsNaN(v) {
		t.Errorf("V with a constant is %v", v)
	}
}

// Gaps in text that can be a candidate take rows out, labels do not; text tells
// rows apart.
func TestScanCountsRowsWithText(t *testing.T) {
	var b strings.Builder
	b.WriteString("y,site,id\n")
	for i := range 80 {
		fmt.Fprintf(&b, "%d,%s,%s\n", i%9, pick(i%10 == 3, "", []string{"a", "b"}[i%2]), pick(i%10 == 4, "", fmt.Sprint("tank ", i)))
	}
	if sum := scanText(t, b.String(), "y"); sum.Incomplete != 8 {
		t.Errorf("%d rows with a gap, want 8", sum.Incomplete)
	}
}

// A text that is a label tells no rows apart: 80 rows of five columns of nine
// values may repeat by chance, whatever the label.
func TestLabelsSayNothingAboutRepeats(t *testing.T) {
	var b strings.Builder
	b.WriteString("y,a,b,c,d,id\n")
	for i := range 80 {
		fmt.Fprintf(&b, "%d,%d,%d,%d,%d,tank %d\n", i%9, i*2%9, i*4%9, i*5%9, i*7%9, i)
	}
	if sum := scanText(t, b.String(), "y"); sum.Repeats != 0 {
		t.Errorf("%d repeats", sum.Repeats)
	}
	if sum := scanText(t, strings.ReplaceAll(b.String(), "tank ", ""), "y"); sum.Repeats != 0 {
		t.Errorf("%d repeats with numbers for labels", sum.Repeats)
	}
	text := b.String()
	for i := range 80 {
		text = strings.Replace(text, fmt.Sprintf(",tank %d\n", i), fmt.Sprintf(",feed %d\n", i%27), 1)
	}
	if sum := scanText(t, text, "y"); sum.Repeats != 53 {
		t.Errorf("%d repeats of 53 where text of 27 levels tells enough", sum.Repeats)
	}
}
