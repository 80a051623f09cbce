package solver_test

import (
	"context"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"holdfast/solver"
)

// Tolerances of the comparison with the reference solutions of other families.
// The references solve their optimality conditions to 2e-14 in units of the
// gradient; fits come to 3e-13 of the largest coefficient.
const (
	// familyTolerance is relative to the largest coefficient in units of one
	// standard deviation.
	familyTolerance = 1e-10
	// promisedGradient is the certificate that these families promise.
	promisedGradient = 1e-8
	// topTolerance is relative, for lambda_max: one gradient of the null model.
	topTolerance = 1e-12
)

// perClass is a JSON number or null, or a list with one number per class.
type perClass []float64

func (p *perClass) UnmarshalJSON(text []byte) error {
	switch {
	case string(text) == "null":
		*p = nil
		return nil
	case text[0] == '[':
		return json.Unmarshal(text, (*[]float64)(p))
	}
	*p = make(perClass, 1)
	return json.Unmarshal(text, &(*p)[0])
}

// byClass is a JSON list of coefficients, or one such list per class.
type byClass [][]float64

func (b *byClass) UnmarshalJSON(text []byte) error {
	if strings.HasPrefix(strings.TrimLeft(string(text[1:]), " \n"), "[") {
		return json.Unmarshal(text, (*[][]float64)(b))
	}
	*b = make(byClass, 1)
	return json.Unmarshal(text, &(*b)[0])
}

// outcomeColumns is a JSON column name, or the two of a survival outcome.
type outcomeColumns struct{ Column, Time, Status string }

func (o *outcomeColumns) UnmarshalJSON(text []byte) error {
	if text[0] == '"' {
		return json.Unmarshal(text, &o.Column)
	}
	type fields outcomeColumns
	return json.Unmarshal(text, (*fields)(o))
}

// familyCase is a file of testdata/ref of any family.
type familyCase struct {
	Name     string         `json:"name"`
	Family   string         `json:"family"`
	DataFile string         `json:"data_file"`
	Outcome  outcomeColumns `json:"outcome"`
	Classes  []string       `json:"classes"`
	Columns  []struct {
		Name   string  `json:"name"`
		Column string  `json:"column"`
		Level  *string `json:"level"`
	} `json:"columns"`
	Offset  string `json:"offset"`
	Ties    string `json:"ties"`
	Penalty struct {
		Rho          float64   `json:"rho"`
		Weights      []float64 `json:"penalty_weights"`
		Groups       [][]int32 `json:"groups"`
		GroupWeights []float64 `json:"group_weights"`
		GroupNorm    string    `json:"group_norm"`
	} `json:"penalty"`
	Rows      []int32     `json:"rows"`
	Weights   []float64   `json:"weights"`
	LambdaMax *float64    `json:"lambda_max"`
	Lambdas   []float64   `json:"lambdas"`
	Solutions []familyFit `json:"solutions"`
}

type familyFit struct {
	Lambda    float64  `json:"lambda"`
	Intercept perClass `json:"intercept"`
	AtMean    perClass `json:"intercept_standardised"`
	Coef      byClass  `json:"coef_original"`
	Scaled    byClass  `json:"coef_standardised"`
	Objective float64  `json:"objective_value"`
	Slack     *float64 `json:"inactive_slack"`
}

func readFamilyCase(t *testing.T, name string) familyCase {
	t.Helper()
	path := filepath.Join("..", "testdata", "ref", name+".json")
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	var c familyCase
	if err := json.Unmarshal(text, &c); err != nil {
		t.Fatalf("%s: %v", path, err)
	}
	if len(c.Solutions) == 0 || len(c.Solutions) != len(c.Lambdas) {
		t.Fatalf("%s: %d solutions for %d lambdas", path, len(c.Solutions), len(c.Lambdas))
	}
	return c
}

// familyFixture is a case ready to be fitted and judged.
type familyFixture struct {
	familyCase
	x        [][]float64 // as read, one per column of the case
	mean, sd []float64   // weighted, population, in two passes
	w        []float64   // weight in the case of every table row; 0: not used
	y        []float64   // outcome; nil for Cox
	problem  solver.Problem
	draws    map[string]*solver.Sample // the same weights, said in different ways
}

func newFamilyFixture(t *testing.T, name string) *familyFixture {
	t.Helper()
	f := &familyFixture{familyCase: readFamilyCase(t, name)}
	tab := readTable(t, filepath.Join("..", "testdata", f.DataFile))
	for _, c := range f.Columns {
		if c.Level != nil {
			f.x = append(f.x, tab.ones(c.Column, *c.Level))
		} else {
			f.x = append(f.x, tab.numbers(t, c.Column))
		}
	}
	f.word(tab.rows)
	for _, x := range f.x {
		m, s := moments(x, f.w)
		f.mean, f.sd = append(f.mean, m), append(f.sd, s)
	}
	f.problem = f.outcome(t, tab)
	f.setPenalty()
	return f
}

// word spreads the case's weights over the table's rows and says them as a
// mask, as counts and as case weights, where the case allows it.
func (f *familyFixture) word(rows int) {
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
	weighted := solver.AllRows(rows)
	weighted.Case = f.w
	f.draws = map[string]*solver.Sample{"counts": counted(f.w), "case weights": weighted}
	if f.Weights == nil {
		f.draws["rows"] = solver.NewSample(rows, used)
	}
}

// outcome makes the problem of the case's family.
func (f *familyFixture) outcome(t *testing.T, tab table) solver.Problem {
	t.Helper()
	p := problemOf(f.x, make([]float64, tab.rows))
	families := map[string]solver.Family{"gaussian": solver.Gaussian, "binomial": solver.Binomial, "poisson": solver.Poisson,
		"multinomial": solver.Multinomial, "cox": solver.Cox}
	family, ok := families[f.Family]
	if !ok {
		t.Fatalf("family %q", f.Family)
	}
	p.Family = family
	switch family {
	case solver.Cox:
		p.Outcome = nil
		p.Survival = f.survival(t, tab)
	case solver.Multinomial:
		p.Classes = len(f.Classes)
		for i, cell := range tab.column[f.Outcome.Column] {
			p.Outcome[i] = float64(slices.Index(f.Classes, cell))
		}
	default:
		p.Outcome = tab.numbers(t, f.Outcome.Column)
	}
	f.y = p.Outcome
	if f.Offset != "" {
		p.Offset = tab.numbers(t, f.Offset)
	}
	return p
}

func (f *familyFixture) survival(t *testing.T, tab table) *solver.Survival {
	t.Helper()
	ties := map[string]solver.Ties{"efron": solver.Efron, "breslow": solver.Breslow}
	rule, ok := ties[f.Ties]
	if !ok {
		t.Fatalf("ties %q", f.Ties)
	}
	s := &solver.Survival{Time: tab.numbers(t, f.Outcome.Time), Ties: rule}
	for _, v := range tab.numbers(t, f.Outcome.Status) {
		s.Event = append(s.Event, v == 1)
	}
	return s
}

// setPenalty says which columns are candidates, and at what price. Groups pay
// sqrt(k) here, as in the reference; TestGroupEven has the other price.
func (f *familyFixture) setPenalty() {
	p := &f.problem
	p.Mix, p.GroupWeight, p.Luck = f.Penalty.Rho, solver.GroupSqrt, 0.1
	p.Candidates = nil
	for j, c := range f.Columns {
		p.Names[j] = c.Name
	}
	if f.Penalty.Groups != nil {
		f.setGroups()
		return
	}
	for j := range f.x {
		v := f.price(j)
		if v == 0 {
			p.Always = append(p.Always, int32(j))
			continue
		}
		p.Candidates = append(p.Candidates, int32(j))
		p.Relative = append(p.Relative, v)
	}
}

func (f *familyFixture) setGroups() {
	p := &f.problem
	for k, g := range f.Penalty.Groups {
		p.Candidates = append(p.Candidates, g[0])
		p.Relative = append(p.Relative, f.Penalty.GroupWeights[k]/math.Sqrt(float64(len(g))))
		if len(g) == 1 {
			g = nil
		}
		p.Groups = append(p.Groups, g)
	}
}

// price is the penalty weight of a single column; 0: always in.
func (f *familyFixture) price(j int) float64 {
	if f.Penalty.Weights == nil {
		return 1
	}
	return f.Penalty.Weights[j]
}

func (f *familyFixture) model(t *testing.T) *solver.Model {
	t.Helper()
	m, err := solver.NewModel(context.Background(), f.problem)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// dense puts the coefficients of a fit in the order of the case's columns, one
// list per class.
func (f *familyFixture) dense(t *testing.T, m *solver.Model, fit solver.Fit) [][]float64 {
	t.Helper()
	classes := m.Classes()
	terms := m.Terms()
	if len(fit.Coef) != len(terms)*classes || len(fit.Always) != len(f.problem.Always)*classes {
		t.Fatalf("%d coefficients of %d terms, %d of %d always-in columns, %d classes", len(fit.Coef), len(terms), len(fit.Always), len(f.problem.Always), classes)
	}
	b := make([][]float64, classes)
	for c := range b {
		b[c] = make([]float64, len(f.x))
		for k, j := range terms {
			b[c][j] = fit.Coef[k*classes+c]
		}
		for k, j := range f.problem.Always {
			b[c][j] = fit.Always[k*classes+c]
		}
	}
	return b
}

// caseNames lists the files of testdata/ref of all families, and of gaussian
// the one with a group.
func caseNames(t *testing.T) []string {
	t.Helper()
	var names []string
	for _, pattern := range []string{"binomial_*", "poisson_*", "multinomial_*", "cox_*", "gaussian_*_group_*"} {
		paths, err := filepath.Glob(filepath.Join("..", "testdata", "ref", pattern+".json"))
		if err != nil {
			t.Fatal(err)
		}
		for _, path := range paths {
			names = append(names, strings.TrimSuffix(filepath.Base(path), ".json"))
		}
	}
	if len(names) != 25 {
		t.Fatalf("%d cases in testdata/ref, want 25", len(names))
	}
	return names
}

// TestFamilyReference holds fits at given lambdas against testdata/ref:
// breast cancer (Street, Wolberg & Mangasarian 1993) and low birth weight
// (Hosmer & Lemeshow 1989) as yes-no, Dobson's counts (1990), warpbreaks
// (Tippett 1950), quine (Aitkin 1978) and insurance claims with an offset
// (Baxter, Coutts & Ross 1980), iris (Fisher 1936) and housing (Madsen 1976)
// as classes, the Gehan trial (1965), lung (Loprinzi et al. 1994) and veteran
// (Kalbfleisch & Prentice 1980) under Breslow and Efron ties; birth weight with
// race as a group. Unpenalised, lasso, elastic net, halves, bootstrap counts,
// always-in columns.
func TestFamilyReference(t *testing.T) {
	for _, name := range caseNames(t) {
		t.Run(name, func(t *testing.T) {
			f := newFamilyFixture(t, name)
			m := f.model(t)
			for wording, draw := range f.draws {
				t.Run(wording, func(t *testing.T) { f.compare(t, m, draw) })
			}
			t.Run("case weights of the problem", f.compareCaseWeights)
		})
	}
}

// compareCaseWeights puts the case's weights into the problem: then lambda_max
// is that of the reference too.
func (f *familyFixture) compareCaseWeights(t *testing.T) {
	weighted := *f
	weighted.problem.Case = f.w
	m := weighted.model(t)
	f.compare(t, m, solver.AllRows(len(f.w)))
	if f.LambdaMax == nil {
		return
	}
	if got, want := m.LambdaMax(), *f.LambdaMax; math.Abs(got-want) > topTolerance*want {
		t.Errorf("lambda_max %.17g, reference %.17g, difference %.2g", got, want, (got-want)/want)
	}
}

func (f *familyFixture) compare(t *testing.T, m *solver.Model, draw *solver.Sample) {
	t.Helper()
	fits, err := m.FitAt(context.Background(), draw, f.Lambdas)
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
		if !fit.Certified || !(fit.Violation <= f.promised()) {
			t.Errorf("lambda %g: certified %t, violation %g: %s", fit.Lambda, fit.Certified, fit.Violation, fit.Why)
			continue
		}
		b := f.dense(t, m, fit)
		f.compareCoef(t, fit, b, want)
		f.compareIntercept(t, fit, b, want)
		f.compareSupport(t, fit, b, want)
		f.compareLoss(t, fit, want)
	}
}

func (f *familyFixture) promised() float64 {
	if f.problem.Family == solver.Gaussian {
		return promisedViolation
	}
	return promisedGradient
}

func (f *familyFixture) compareCoef(t *testing.T, fit solver.Fit, b [][]float64, want familyFit) {
	t.Helper()
	if len(b) != len(want.Scaled) {
		t.Fatalf("%d classes, reference %d", len(b), len(want.Scaled))
	}
	largest := largestOf(want.Scaled)
	for c := range b {
		for j, v := range b[c] {
			if d := v*f.sd[j] - want.Scaled[c][j]; !(math.Abs(d) <= familyTolerance*largest) {
				t.Errorf("lambda %g: %s is %.17g per sd, reference %.17g: %.2g of the largest", fit.Lambda, f.label(j, c), v*f.sd[j], want.Scaled[c][j], d/largest)
			}
		}
	}
}

func (f *familyFixture) label(j, class int) string {
	if f.Classes == nil {
		return f.Columns[j].Name
	}
	return fmt.Sprintf("%s of class %s", f.Columns[j].Name, f.Classes[class])
}

func largestOf(b [][]float64) float64 {
	largest := 0.0
	for _, v := range b {
		largest = max(largest, largestAbs(v))
	}
	return largest
}

// compareIntercept compares intercepts at the mean row, where an error of a
// coefficient does not enter, and at 0, where it enters mean/sd times. Of
// classes both are compared less their mean: a constant common to all of them
// is not determined.
func (f *familyFixture) compareIntercept(t *testing.T, fit solver.Fit, b [][]float64, want familyFit) {
	t.Helper()
	if len(fit.Intercept) != len(want.Intercept) {
		t.Fatalf("lambda %g: %d intercepts, reference %d", fit.Lambda, len(fit.Intercept), len(want.Intercept))
	}
	slack, reach := familyTolerance*max(largestOf(want.Scaled), 1), 1.0
	for j := range f.x {
		reach += math.Abs(f.mean[j]) / max(f.sd[j], 1e-300)
	}
	for c, got := range levelled(fit.Intercept) {
		if d := got - want.Intercept[c]; !(math.Abs(d) <= slack*reach) {
			t.Errorf("lambda %g: intercept %d is %.17g, reference %.17g, difference %.2g", fit.Lambda, c, got, want.Intercept[c], d)
		}
	}
	for c, got := range levelled(f.atMean(fit, b)) {
		if d := got - want.AtMean[c]; !(math.Abs(d) <= slack) {
			t.Errorf("lambda %g: intercept %d at the mean row is %.17g, reference %.17g, difference %.2g", fit.Lambda, c, got, want.AtMean[c], d)
		}
	}
}

// atMean is the linear predictor at the mean row, without the offset.
func (f *familyFixture) atMean(fit solver.Fit, b [][]float64) []float64 {
	out := slices.Clone(fit.Intercept)
	for c := range out {
		for j, v := range b[c] {
			out[c] += v * f.mean[j]
		}
	}
	return out
}

// levelled takes the mean over classes away; one intercept stays as it is.
func levelled(intercept []float64) []float64 {
	if len(intercept) < 2 {
		return intercept
	}
	mean := 0.0
	for _, v := range intercept {
		mean += v / float64(len(intercept))
	}
	out := slices.Clone(intercept)
	for c := range out {
		out[c] -= mean
	}
	return out
}

// compareSupport asks for the same non-zero coefficients, class by class, and
// for the number of candidates that have one. Without a penalty everything is
// in, whatever its value.
func (f *familyFixture) compareSupport(t *testing.T, fit solver.Fit, b [][]float64, want familyFit) {
	t.Helper()
	if fit.Lambda == 0 {
		return
	}
	if want.Slack != nil && *want.Slack < firmMargin {
		t.Fatalf("lambda %g: the reference leaves its support open (slack %g)", fit.Lambda, *want.Slack)
	}
	for c := range b {
		for j, v := range b[c] {
			if (v != 0) != (want.Scaled[c][j] != 0) {
				t.Errorf("lambda %g: %s is %g, reference %g", fit.Lambda, f.label(j, c), v, want.Coef[c][j])
			}
		}
	}
	if got := f.selected(want); fit.Selected != got {
		t.Errorf("lambda %g: %d selected, reference %d", fit.Lambda, fit.Selected, got)
	}
}

// selected counts the candidates with a non-zero coefficient in the reference.
func (f *familyFixture) selected(want familyFit) int {
	n := 0
	for k, first := range f.problem.Candidates {
		members := []int32{first}
		if f.problem.Groups != nil && f.problem.Groups[k] != nil {
			members = f.problem.Groups[k]
		}
		if slices.ContainsFunc(members, func(j int32) bool {
			return slices.ContainsFunc(want.Scaled, func(b []float64) bool { return b[j] != 0 })
		}) {
			n++
		}
	}
	return n
}

// compareLoss compares the objective, and the loss as the objective less the
// reference's own penalty. Both are of second and first order in the error of
// the coefficients.
func (f *familyFixture) compareLoss(t *testing.T, fit solver.Fit, want familyFit) {
	t.Helper()
	size := max(math.Abs(want.Objective), 1)
	if d := fit.Objective - want.Objective; !(math.Abs(d) <= lossTolerance*size) {
		t.Errorf("lambda %g: objective %.17g, reference %.17g, difference %.2g", fit.Lambda, fit.Objective, want.Objective, d)
	}
	loss := want.Objective - f.penaltyOf(want)
	if d := fit.Loss - loss; !(math.Abs(d) <= familyTolerance*size) {
		t.Errorf("lambda %g: loss %.17g, reference %.17g, difference %.2g", fit.Lambda, fit.Loss, loss, d)
	}
}

// penaltyOf is the penalty of a reference solution.
func (f *familyFixture) penaltyOf(want familyFit) float64 {
	rho, sum := f.Penalty.Rho, 0.0
	if f.Penalty.Groups != nil {
		for k, g := range f.Penalty.Groups {
			sum += f.Penalty.GroupWeights[k] * f.norm(g, want.Coef[0])
		}
		return want.Lambda * sum
	}
	for _, b := range want.Scaled {
		for j, v := range b {
			sum += f.price(j) * (rho*math.Abs(v) + (1-rho)/2*v*v)
		}
	}
	return want.Lambda * sum
}

// norm is ||X b|| / sqrt(N) over the columns of a group, centred over the draw
// (Simon & Tibshirani 2012).
func (f *familyFixture) norm(group []int32, b []float64) float64 {
	var total, sum float64
	for i, w := range f.w {
		eta := 0.0
		for _, j := range group {
			eta += b[j] * (f.x[j][i] - f.mean[j])
		}
		total += w
		sum += w * eta * eta
	}
	return math.Sqrt(sum / total)
}

// TestGroupEven pays the other price of a group, and takes it back by the
// relative penalty: the fits are then those of the reference again. For two
// directions the chi-squared quantile is -2 log a in closed form; the luck is
// clipped to [0.001, 0.25].
func TestGroupEven(t *testing.T) {
	for luck, a := range map[float64]float64{0.05: 0.05, 0.9: 0.25, 1e-5: 0.001} {
		f := newFamilyFixture(t, "gaussian_birthwt_group_covariance")
		normal := math.Sqrt2 * math.Erfinv(1-a) // two-sided
		even := math.Sqrt(-2*math.Log(a)) / normal
		p := &f.problem
		p.GroupWeight, p.Luck = solver.GroupEven, luck
		for k, g := range p.Groups {
			if len(g) == 2 {
				p.Relative[k] = math.Sqrt2 / even
			}
		}
		t.Run(fmt.Sprintf("luck %g", luck), func(t *testing.T) { f.compare(t, f.model(t), f.draws["rows"]) })
	}
}

// TestGroupCoding fits the group case with race coded by other columns of the
// same span: the same selection, objective and linear predictor.
func TestGroupCoding(t *testing.T) {
	f := newFamilyFixture(t, "gaussian_birthwt_group_covariance")
	white := make([]float64, len(f.w))
	skewed := make([]float64, len(f.w))
	black, other := f.x[2], f.x[3]
	for i := range white {
		white[i] = 1 - black[i] - other[i]
		skewed[i] = 3*white[i] - 0.5*other[i] + 7
	}
	plain, err := f.model(t).FitAt(context.Background(), f.draws["rows"], f.Lambdas)
	if err != nil {
		t.Fatal(err)
	}
	p := problemOf([][]float64{f.x[0], f.x[1], white, skewed, f.x[4], f.x[5], f.x[6], f.x[7], f.x[8]}, f.y)
	q := f.problem
	q.Design, q.Centre = p.Design, p.Centre
	coded, err := solver.NewModel(context.Background(), q)
	if err != nil {
		t.Fatal(err)
	}
	fits, err := coded.FitAt(context.Background(), f.draws["rows"], f.Lambdas)
	if err != nil {
		t.Fatal(err)
	}
	for k, fit := range fits {
		if fit.Selected != plain[k].Selected || math.Abs(fit.Objective-plain[k].Objective) > lossTolerance*plain[k].Objective {
			t.Errorf("lambda %g: %d selected at %.17g, with other columns %d at %.17g", fit.Lambda, plain[k].Selected, plain[k].Objective, fit.Selected, fit.Objective)
		}
		// Steps of race: from white to black, and from white to other.
		want := plain[k].Coef
		toBlack, toOther := -fit.Coef[2]-3*fit.Coef[3], -fit.Coef[2]-3.5*fit.Coef[3]
		slack := familyTolerance * largestAbs(want)
		if math.Abs(toBlack-want[2]) > slack || math.Abs(toOther-want[3]) > slack {
			t.Errorf("lambda %g: steps of race %.17g %.17g, with other columns %.17g %.17g", fit.Lambda, want[2], want[3], toBlack, toOther)
		}
	}
}
