package solver_test

import (
	"context"
	"math"
	"slices"
	"testing"

	"holdfast/solver"
)

// handbook is an unpenalised fit whose numbers stand in print. What is marked
// "from memory" was typed without the printed source at hand.
type handbook struct {
	file     string   // case of testdata/ref that says how the table is read
	source   string   // where the numbers stand
	keep     []string // columns of the case that are used; nil: all
	terms    []string // "" is the intercept
	estimate []float64
	decimals int
	// Either may be 0: not in print.
	logLikelihood, deviance float64
	digits                  int // decimals of these two
}

// TestHandbook holds the unpenalised fit, lambda 0, to published values.
func TestHandbook(t *testing.T) {
	for _, h := range handbooks {
		t.Run(h.source, func(t *testing.T) { h.check(t) })
	}
}

var handbooks = []handbook{
	{
		file:   "poisson_dobson_mle",
		source: "Dobson (1990), An Introduction to Generalized Linear Models, p. 93: randomised controlled trial; estimates and deviance from memory",
		terms:  []string{"", "outcome=2", "outcome=3", "treatment=2", "treatment=3"}, estimate: []float64{3.045, -0.454, -0.293, 0, 0}, decimals: 3,
		deviance: 5.1291, digits: 4,
	},
	{
		file:   "cox_gehan_breslow",
		source: "Gehan (1965), Biometrika 52:203-233, remission times, Breslow ties: textbook values from memory",
		terms:  []string{"treat=6-MP"}, estimate: []float64{-1.509}, decimals: 3,
		logLikelihood: -86.380, digits: 3,
	},
	{
		file:   "cox_gehan_efron",
		source: "Gehan (1965), Biometrika 52:203-233, remission times, Efron ties: textbook values from memory",
		terms:  []string{"treat=6-MP"}, estimate: []float64{-1.572}, decimals: 3,
		logLikelihood: -85.008, digits: 3,
	},
	{
		file:   "binomial_birthwt_mle",
		source: "Hosmer & Lemeshow (1989), Applied Logistic Regression, low birth weight, five terms: from memory",
		terms:  []string{"", "age", "lwt", "race=black", "race=other", "ftv"}, estimate: []float64{1.295, -0.024, -0.014, 1.004, 0.433, -0.049}, decimals: 3,
		logLikelihood: -111.286, digits: 3,
	},
	{
		file: "binomial_birthwt_mle", keep: []string{"lwt", "race=black", "race=other"},
		source: "Hosmer & Lemeshow (1989), Applied Logistic Regression, low birth weight, weight and race: from memory",
		terms:  []string{"", "lwt", "race=black", "race=other"}, estimate: []float64{0.806, -0.015, 1.081, 0.481}, decimals: 3,
		logLikelihood: -111.630, digits: 3,
	},
	{
		file: "binomial_birthwt_mle", keep: []string{"lwt"},
		source: "Hosmer & Lemeshow (1989), Applied Logistic Regression, low birth weight, weight alone: from memory",
		terms:  []string{"", "lwt"}, estimate: []float64{0.998, -0.014}, decimals: 3,
		logLikelihood: -114.345, digits: 3,
	},
	{
		file:     "poisson_insurance_offset_mle",
		source:   "Venables & Ripley (2002), Modern Applied Statistics with S: insurance claims, holders as exposure; residual deviance from memory",
		deviance: 51.42, digits: 2,
	},
	{
		file:     "poisson_warpbreaks_mle",
		source:   "R's help page of warpbreaks (Tippett 1950), counts by wool and tension; print-out from memory",
		terms:    []string{"", "wool=B", "tension=M", "tension=H"},
		estimate: []float64{3.69196, -0.20599, -0.32132, -0.51849}, decimals: 5,
		deviance: 210.39, digits: 2,
	},
	{
		file:          "multinomial_housing_mle",
		source:        "Venables & Ripley (2002), Modern Applied Statistics with S: housing satisfaction, three classes; log-likelihood from memory",
		logLikelihood: -1735.042, digits: 3,
	},
}

func (h handbook) check(t *testing.T) {
	t.Helper()
	f := newFamilyFixture(t, h.file)
	h.leave(f)
	fits, err := f.model(t).FitAt(context.Background(), f.draws["counts"], []float64{0})
	if err != nil {
		t.Fatal(err)
	}
	fit := fits[0]
	if !fit.Certified {
		t.Fatalf("not certified: %s", fit.Why)
	}
	for k, term := range h.terms {
		got := h.term(t, f, fit, term)
		if !agrees(got, h.estimate[k], h.decimals) {
			t.Errorf("%q is %.6f, printed %.*f", term, got, h.decimals, h.estimate[k])
		}
	}
	h.checkLikelihood(t, f, fit)
}

// leave takes the columns that are not kept out of the candidates.
func (h handbook) leave(f *familyFixture) {
	if h.keep == nil {
		return
	}
	f.problem.Candidates = slices.DeleteFunc(f.problem.Candidates, func(j int32) bool {
		return !slices.Contains(h.keep, f.problem.Names[j])
	})
	f.problem.Relative = nil
}

func (h handbook) term(t *testing.T, f *familyFixture, fit solver.Fit, name string) float64 {
	t.Helper()
	if name == "" {
		return fit.Intercept[0]
	}
	k := slices.IndexFunc(f.problem.Candidates, func(j int32) bool { return f.problem.Names[j] == name })
	if k < 0 {
		t.Fatalf("no column %s", name)
	}
	return fit.Coef[k]
}

// checkLikelihood turns the mean loss into what is in print. Of yes-no, classes
// and survival the loss is the negative log-likelihood; of counts, less a term
// that the deviance has: 2 sum[y log(y/mu) - (y - mu)].
func (h handbook) checkLikelihood(t *testing.T, f *familyFixture, fit solver.Fit) {
	t.Helper()
	total, saturated := 0.0, 0.0
	for i, w := range f.w {
		total += w
		if f.problem.Family == solver.Poisson && f.y[i] > 0 {
			saturated += w * (f.y[i]*math.Log(f.y[i]) - f.y[i])
		}
	}
	if got := -total * fit.Loss; h.logLikelihood != 0 && !agrees(got, h.logLikelihood, h.digits) {
		t.Errorf("log-likelihood %.6f, printed %.*f", got, h.digits, h.logLikelihood)
	}
	if got := 2 * (saturated + total*fit.Loss); h.deviance != 0 && !agrees(got, h.deviance, h.digits) {
		t.Errorf("deviance %.6f, printed %.*f", got, h.digits, h.deviance)
	}
}

// agrees says whether a number rounds to the one in print.
func agrees(got, printed float64, decimals int) bool {
	return math.Abs(got-printed) <= 0.5*math.Pow10(-decimals)*(1+1e-9)
}

// TestHandbookClasses holds the housing fit (Madsen 1976) against the print-out
// in Venables & Ripley (2002), section 7.3, from memory: coefficients of the
// classes medium and high less those of low, which is how it is printed. Their
// program stops early, so that four decimals are asked for.
func TestHandbookClasses(t *testing.T) {
	printed := map[string][2]float64{
		"infl=Medium": {0.4464, 0.7349}, "infl=High": {0.6649, 1.6126}, "type=Apartment": {-0.4357, -0.7356},
		"type=Atrium": {0.1314, -0.4080}, "type=Terrace": {-0.6666, -1.4123}, "cont=High": {0.3609, 0.4818},
	}
	f := newFamilyFixture(t, "multinomial_housing_mle")
	m := f.model(t)
	fits, err := m.FitAt(context.Background(), f.draws["counts"], []float64{0})
	if err != nil {
		t.Fatal(err)
	}
	b := f.dense(t, m, fits[0])
	intercept := fits[0].Intercept
	for k, want := range []float64{-0.4192, -0.1387} {
		if got := intercept[k+1] - intercept[0]; math.Abs(got-want) > 1e-4 {
			t.Errorf("intercept of %s: %.6f, printed %.4f", f.Classes[k+1], got, want)
		}
	}
	for j, c := range f.Columns {
		for k, want := range printed[c.Name] {
			if got := b[k+1][j] - b[0][j]; math.Abs(got-want) > 1e-4 {
				t.Errorf("%s of %s: %.6f, printed %.4f", c.Name, f.Classes[k+1], got, want)
			}
		}
	}
}
