package solver_test

import (
	"context"
	"encoding/csv"
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"holdfast/solver"
)

// Tolerances of the comparison with the reference solutions.
const (
	// coefTolerance is relative to the largest coefficient in units of one
	// standard deviation. The references agree with a second program to 2e-12.
	coefTolerance = 1e-7
	// lossTolerance is relative: objective and loss are sums of squares of
	// residuals, second order in the coefficient error near the optimum.
	lossTolerance = 1e-12
	// promisedViolation is the certificate that gaussian fits promise.
	promisedViolation = 1e-10
	// margin is the distance from the border (of entering, relative) above
	// which a reference says firmly that a column is out.
	firmMargin = 1e-9
	// nistDigits is the relative agreement asked for with NIST's certified
	// values: 8 digits.
	nistDigits = 1e-8
)

// refCase is one file of testdata/ref (testdata/SOURCES.md says how they were
// made and by what they were confirmed).
type refCase struct {
	Name     string `json:"name"`
	DataFile string `json:"data_file"`
	Outcome  string `json:"outcome"`
	Columns  []struct {
		Name   string  `json:"name"`
		Column string  `json:"column"`
		Level  *string `json:"level"`
	} `json:"columns"`
	Penalty struct {
		Rho     float64   `json:"rho"`
		Weights []float64 `json:"penalty_weights"`
	} `json:"penalty"`
	Rows      []int32   `json:"rows"`
	Weights   []float64 `json:"weights"`
	LambdaMax *float64  `json:"lambda_max"`
	Lambdas   []float64 `json:"lambdas"`
	Solutions []refFit  `json:"solutions"`
	Source    struct {
		Published *struct {
			Where    string    `json:"where"`
			Estimate []float64 `json:"estimate"`
		} `json:"published"`
	} `json:"source"`
}

type refFit struct {
	Lambda     float64   `json:"lambda"`
	Intercept  float64   `json:"intercept"`
	AtMean     float64   `json:"intercept_standardised"`
	Coef       []float64 `json:"coef_original"`
	Scaled     []float64 `json:"coef_standardised"`
	Nonzero    int       `json:"nonzero"`
	Objective  float64   `json:"objective_value"`
	Slack      *float64  `json:"inactive_slack"`
	SmallestIn *float64  `json:"smallest_nonzero"`
}

func readCase(t *testing.T, path string) refCase {
	t.Helper()
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	var c refCase
	if err := json.Unmarshal(text, &c); err != nil {
		t.Fatalf("%s: %v", path, err)
	}
	if len(c.Solutions) == 0 || len(c.Solutions) != len(c.Lambdas) {
		t.Fatalf("%s: %d solutions for %d lambdas", path, len(c.Solutions), len(c.Lambdas))
	}
	return c
}

// table is a CSV of testdata as text, column by column.
type table struct {
	rows   int
	names  []string
	column map[string][]string
}

func readTable(t *testing.T, path string) table {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	records, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatalf("%s: %v", path, err)
	}
	tab := table{rows: len(records) - 1, names: records[0], column: map[string][]string{}}
	for j, name := range records[0] {
		cells := make([]string, tab.rows)
		for i, r := range records[1:] {
			cells[i] = r[j]
		}
		tab.column[name] = cells
	}
	return tab
}

// numbers parses a column; ones parses it as the indicator of a level.
func (tab table) numbers(t *testing.T, name string) []float64 {
	t.Helper()
	x := make([]float64, tab.rows)
	for i, cell := range tab.column[name] {
		v, err := strconv.ParseFloat(cell, 64)
		if err != nil {
			t.Fatalf("column %s, row %d: %v", name, i, err)
		}
		x[i] = v
	}
	return x
}

func (tab table) ones(name, level string) []float64 {
	x := make([]float64, tab.rows)
	for i, cell := range tab.column[name] {
		if cell == level {
			x[i] = 1
		}
	}
	return x
}

// fixture is a case ready to be fitted and judged: columns as read, the
// weight of every table row in the case, and the solver's view of both.
type fixture struct {
	refCase
	x       [][]float64 // as read, one per column of the case
	y, w    []float64   // outcome; weight in the case of every table row (0: not used)
	mean    []float64   // weighted, two passes
	sd      []float64   // weighted population standard deviation
	penalty []float64   // weight of every column, 0: always in
	model   *solver.Model
	draws   map[string]*solver.Sample // the same weights, said in different ways
}

func newFixture(t *testing.T, path string) *fixture {
	t.Helper()
	f := &fixture{refCase: readCase(t, path)}
	tab := readTable(t, filepath.Join("..", "testdata", f.DataFile))
	for _, c := range f.Columns {
		if c.Level != nil {
			f.x = append(f.x, tab.ones(c.Column, *c.Level))
		} else {
			f.x = append(f.x, tab.numbers(t, c.Column))
		}
	}
	f.y = tab.numbers(t, f.Outcome)
	f.setWeights(tab.rows)
	for _, x := range f.x {
		m, s := moments(x, f.w)
		f.mean, f.sd = append(f.mean, m), append(f.sd, s)
	}
	f.setModel(t)
	return f
}

// setWeights spreads the case's weights over the table's rows and words them
// as a mask, as counts and as case weights, where the case allows it.
func (f *fixture) setWeights(rows int) {
	used := f.Rows
	if used == nil {
		for i := range rows {
			used = append(used, int32(i))
		}
	}
	f.w = make([]float64, rows)
	for k, i := range used {
		f.w[i] = 1
		if f.Weights != nil {
			f.w[i] = f.Weights[k]
		}
	}
	f.draws = map[string]*solver.Sample{}
	weighted := solver.AllRows(rows)
	weighted.Case = f.w
	f.draws["case weights"] = weighted
	if f.Weights == nil {
		f.draws["rows"] = solver.NewSample(rows, used)
		return
	}
	f.draws["counts"] = counted(f.w)
}

// counted is a draw with whole numbers of copies of each row.
func counted(w []float64) *solver.Sample {
	var drawn []int32
	count := make([]uint8, len(w))
	for i, v := range w {
		count[i] = uint8(v)
		if v > 0 {
			drawn = append(drawn, int32(i))
		}
	}
	s := solver.NewSample(len(w), drawn)
	s.Count = count
	return s
}

func (f *fixture) setModel(t *testing.T) {
	t.Helper()
	p := problemOf(f.x, f.y)
	p.Candidates, p.Always, p.Relative = nil, nil, nil
	f.penalty = f.Penalty.Weights
	if f.penalty == nil {
		f.penalty = ones(len(f.x))
	}
	for j, v := range f.penalty {
		p.Names[j] = f.Columns[j].Name
		if v == 0 {
			p.Always = append(p.Always, int32(j))
			continue
		}
		p.Candidates = append(p.Candidates, int32(j))
		p.Relative = append(p.Relative, v)
	}
	p.Mix = f.Penalty.Rho
	model, err := solver.NewModel(context.Background(), p)
	if err != nil {
		t.Fatal(err)
	}
	f.model = model
}

// problemOf is a lasso problem in which every column is a candidate, the
// columns centred over all rows as a table reader leaves them.
func problemOf(x [][]float64, y []float64) solver.Problem {
	p := solver.Problem{Outcome: y, Mix: 1, Ratio: 0.95, Floor: 0.005}
	cols := make([][]float64, len(x))
	for j, col := range x {
		c, _ := moments(col, ones(len(col)))
		cols[j] = make([]float64, len(col))
		for i, v := range col {
			cols[j][i] = v - c
		}
		p.Centre = append(p.Centre, c)
		p.Candidates = append(p.Candidates, int32(j))
		p.Names = append(p.Names, "x"+strconv.Itoa(j))
	}
	p.Design = solver.NewDense(len(y), cols, nil)
	return p
}

func ones(n int) []float64 {
	w := make([]float64, n)
	for i := range w {
		w[i] = 1
	}
	return w
}

// moments returns weighted mean and population standard deviation, each in a
// pass of its own.
func moments(x, w []float64) (mean, sd float64) {
	var total, sum, square float64
	for i, v := range x {
		total += w[i]
		sum += w[i] * v
	}
	mean = sum / total
	for i, v := range x {
		square += w[i] * (v - mean) * (v - mean)
	}
	return mean, math.Sqrt(square / total)
}

// dense puts the coefficients of a fit in the order of the case's columns.
func (f *fixture) dense(fit solver.Fit) []float64 {
	b := make([]float64, len(f.x))
	always, cand := 0, 0
	for j, v := range f.penalty {
		if v == 0 {
			b[j] = fit.Always[always]
			always++
		} else {
			b[j] = fit.Coef[cand]
			cand++
		}
	}
	return b
}

// TestReference holds fits at given lambdas against testdata/ref: lasso and
// elastic net on diabetes (Efron et al. 2004), gasoline (Kalivas 1997, p > n),
// swiss (Mosteller & Tukey 1977) and birthwt (Hosmer & Lemeshow 1989), with
// half-samples, bootstrap counts, an always-in column, relative penalties and
// a column constant in the draw.
func TestReference(t *testing.T) {
	paths, err := filepath.Glob(filepath.Join("..", "testdata", "ref", "gaussian_*.json"))
	if err != nil || len(paths) < 17 {
		t.Fatalf("found %d gaussian cases in testdata/ref, want at least 17 (%v)", len(paths), err)
	}
	for _, path := range paths {
		if strings.Contains(path, "_group_") { // reference_families_test.go
			continue
		}
		f := newFixture(t, path)
		for wording, draw := range f.draws {
			t.Run(f.Name+"/"+wording, func(t *testing.T) { f.compare(t, draw) })
		}
	}
}

func (f *fixture) compare(t *testing.T, draw *solver.Sample) {
	fits, err := f.model.FitAt(context.Background(), draw, f.Lambdas)
	if err != nil {
		t.Fatal(err)
	}
	if len(fits) != len(f.Lambdas) {
		t.Fatalf("%d fits for %d lambdas", len(fits), len(f.Lambdas))
	}
	for k, fit := range fits {
		want := f.Solutions[k]
		if fit.Lambda != want.Lambda {
			t.Fatalf("fit %d is at lambda %v, asked for %v", k, fit.Lambda, want.Lambda)
		}
		f.compareCoef(t, fit, want)
		f.compareSupport(t, fit, want)
		f.compareLoss(t, fit, want)
		f.certify(t, fit)
	}
}

func (f *fixture) compareCoef(t *testing.T, fit solver.Fit, want refFit) {
	t.Helper()
	largest := largestAbs(want.Scaled)
	atMean, shift := fit.Intercept[0], 1.0
	for j, b := range f.dense(fit) {
		atMean += b * f.mean[j]
		shift += math.Abs(f.mean[j]) / max(f.sd[j], 1e-300)
		if d := math.Abs(b*f.sd[j] - want.Scaled[j]); d > coefTolerance*largest {
			t.Errorf("lambda %g: %s is %.17g per sd, reference %.17g", fit.Lambda, f.Columns[j].Name, b*f.sd[j], want.Scaled[j])
		}
	}
	// The intercept repeats every coefficient's error mean/sd times.
	slack := coefTolerance * largest
	if d := math.Abs(atMean - want.AtMean); d > slack+1e-12*math.Abs(want.AtMean)*shift {
		t.Errorf("lambda %g: %.17g at the mean row, reference %.17g", fit.Lambda, atMean, want.AtMean)
	}
	if d := math.Abs(fit.Intercept[0] - want.Intercept); d > slack*shift+1e-12*math.Abs(want.Intercept) {
		t.Errorf("lambda %g: intercept %.17g, reference %.17g", fit.Lambda, fit.Intercept[0], want.Intercept)
	}
}

func largestAbs(b []float64) float64 {
	largest := 0.0
	for _, v := range b {
		largest = max(largest, math.Abs(v))
	}
	return largest
}

// compareSupport asks for the same selected columns. A reference whose
// nearest excluded column is not firmly out would allow either answer; there
// is none, and this fails if one is added without saying what to do with it.
func (f *fixture) compareSupport(t *testing.T, fit solver.Fit, want refFit) {
	t.Helper()
	if want.Slack != nil && *want.Slack < firmMargin {
		t.Fatalf("lambda %g: the reference leaves its support open (slack %g)", fit.Lambda, *want.Slack)
	}
	selected := 0
	for j, b := range f.dense(fit) {
		if (b != 0) != (want.Scaled[j] != 0) {
			t.Errorf("lambda %g: %s is %g, reference %g", fit.Lambda, f.Columns[j].Name, b, want.Coef[j])
		}
		if b != 0 && f.penalty[j] != 0 {
			selected++
		}
	}
	if fit.Selected != selected {
		t.Errorf("lambda %g: Selected is %d, %d candidates are non-zero", fit.Lambda, fit.Selected, selected)
	}
}

// compareLoss compares the objective, and the loss as the objective less the
// reference's own penalty.
func (f *fixture) compareLoss(t *testing.T, fit solver.Fit, want refFit) {
	t.Helper()
	if d := math.Abs(fit.Objective - want.Objective); d > lossTolerance*want.Objective {
		t.Errorf("lambda %g: objective %.17g, reference %.17g", fit.Lambda, fit.Objective, want.Objective)
	}
	penalty := 0.0
	for j, b := range want.Scaled {
		penalty += f.penalty[j] * fit.Lambda * (f.Penalty.Rho*math.Abs(b) + (1-f.Penalty.Rho)/2*b*b)
	}
	// The loss alone is first order in the coefficient error.
	if d := math.Abs(fit.Loss - (want.Objective - penalty)); d > coefTolerance*want.Objective {
		t.Errorf("lambda %g: loss %.17g, reference %.17g", fit.Lambda, fit.Loss, want.Objective-penalty)
	}
}

// certify asks for the promised certificate and measures the violation anew,
// from the coefficients on the original scale and the table as read.
func (f *fixture) certify(t *testing.T, fit solver.Fit) {
	t.Helper()
	if !fit.Certified || fit.Violation > promisedViolation || fit.Gap > promisedViolation {
		t.Errorf("lambda %g: certified %t, violation %g, gap %g: %s", fit.Lambda, fit.Certified, fit.Violation, fit.Gap, fit.Why)
	}
	if v := f.violation(fit); v > promisedViolation {
		t.Errorf("lambda %g: violation measured from the table is %g", fit.Lambda, v)
	}
}

// violation is that of DESIGN 4 in scaled units, over all columns.
func (f *fixture) violation(fit solver.Fit) float64 {
	b := f.dense(fit)
	u := f.residual(fit.Intercept[0], b)
	worst := 0.0
	for j := range f.x {
		worst = max(worst, f.columnViolation(j, fit.Lambda, b[j], u))
	}
	return worst
}

// residual is centred at its weighted mean, so that the rounding of a large
// intercept does not enter.
func (f *fixture) residual(intercept float64, b []float64) []float64 {
	u := make([]float64, len(f.y))
	for i, y := range f.y {
		u[i] = y - intercept
		for j, x := range f.x {
			u[i] -= b[j] * (x[i] - f.mean[j])
		}
	}
	m, _ := moments(u, f.w)
	for i := range u {
		u[i] -= m
	}
	return u
}

func (f *fixture) columnViolation(j int, lambda, b float64, u []float64) float64 {
	if f.sd[j] == 0 {
		return 0
	}
	var total, g, uu float64
	for i, x := range f.x[j] {
		total += f.w[i]
		g += f.w[i] * (x - f.mean[j]) * u[i]
		uu += f.w[i] * u[i] * u[i]
	}
	g /= total * f.sd[j]
	scaled, l := b*f.sd[j], lambda*f.Penalty.Rho*f.penalty[j]
	switch {
	case lambda == 0:
		return math.Abs(g) / math.Sqrt(uu/total)
	case l == 0:
		return math.Abs(g) / lambda
	case b == 0:
		return max(0, math.Abs(g)/l-1)
	}
	ridge := lambda * (1 - f.Penalty.Rho) * f.penalty[j] * scaled
	return math.Abs(g-ridge-math.Copysign(l, scaled)) / l
}

// TestLambdaMax compares the lattice's origin with the reference's, for the
// cases that use the whole table.
func TestLambdaMax(t *testing.T) {
	for _, name := range []string{"diabetes_lasso", "diabetes_enet50", "diabetes_lasso_factors", "diabetes_lasso_forced_sex",
		"gasoline_lasso", "gasoline_enet50", "swiss_lasso"} {
		f := newFixture(t, filepath.Join("..", "testdata", "ref", "gaussian_"+name+".json"))
		want := *f.LambdaMax
		if got := f.model.LambdaMax(); math.Abs(got-want) > 1e-12*want {
			t.Errorf("%s: lambda_max %.17g, reference %.17g", f.Name, got, want)
		}
	}
}

// TestLongleyCertified compares the unpenalised fit with the certified values
// of the NIST Statistical Reference Datasets (StRD), linear regression,
// Longley, as held in testdata/ref/gaussian_longley_ols.json.
func TestLongleyCertified(t *testing.T) {
	f := newFixture(t, filepath.Join("..", "testdata", "ref", "gaussian_longley_ols.json"))
	nist := f.Source.Published
	if nist == nil || !strings.Contains(nist.Where, "NIST") || len(nist.Estimate) != 1+len(f.x) {
		t.Fatal("the file holds no certified values")
	}
	fits, err := f.model.FitAt(context.Background(), f.draws["rows"], []float64{0})
	if err != nil {
		t.Fatal(err)
	}
	got := append([]float64{fits[0].Intercept[0]}, f.dense(fits[0])...)
	for k, want := range nist.Estimate {
		if math.Abs(got[k]-want) > nistDigits*math.Abs(want) {
			t.Errorf("term %d: %.15g, certified %.15g", k, got[k], want)
		}
	}
}
