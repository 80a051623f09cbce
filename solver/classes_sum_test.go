package solver_test

import (
	"context"
	"math"
	"testing"
)

// TestClassesSumToZero asks for what is settled where the loss leaves a constant
// open: intercepts, on the columns' own scale, sum to zero over classes, as they
// do in the reference, and unpenalised coefficients do.
func TestClassesSumToZero(t *testing.T) {
	for _, name := range []string{"multinomial_iris_lasso", "multinomial_iris_enet50_boot", "multinomial_housing_mle"} {
		f := newFamilyFixture(t, name)
		m := f.model(t)
		fits, err := m.FitAt(context.Background(), f.draws["counts"], f.Lambdas)
		if err != nil {
			t.Fatal(err)
		}
		for _, fit := range fits {
			if got := sumOf(fit.Intercept); math.Abs(got) > 1e-12*largestAbs(fit.Intercept) {
				t.Errorf("%s, lambda %g: intercepts %v sum to %g", name, fit.Lambda, fit.Intercept, got)
			}
			if fit.Lambda > 0 {
				continue
			}
			for j, c := range f.Columns {
				b := f.dense(t, m, fit)
				if got := b[0][j] + b[1][j] + b[2][j]; math.Abs(got) > 1e-12 {
					t.Errorf("%s: coefficients of %s sum to %g", name, c.Name, got)
				}
			}
		}
	}
}

func sumOf(v []float64) float64 {
	sum := 0.0
	for _, x := range v {
		sum += x
	}
	return sum
}
