package kernel

import (
	"math"
	"math/big"
	"math/rand/v2"
	"testing"
)

// TestExp: against math/big, by the Taylor series at 200 bits of x/2^20 squared
// twenty times: within two units in the last place.
func TestExp(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	for range 3000 {
		x := (2*rng.Float64() - 1) * math.Pow(10, 4*rng.Float64()-1.2)
		if math.Abs(x) > 700 {
			continue
		}
		want, _ := bigExp(x).Float64()
		if ulp := math.Nextafter(want, math.Inf(1)) - want; math.Abs(Exp(x)-want) > 2*ulp {
			t.Errorf("Exp(%g) = %.17g, want %.17g", x, Exp(x), want)
		}
	}
	for x, want := range map[float64]float64{0: 1, 710: math.Inf(1), -746: 0, math.Inf(-1): 0, math.Inf(1): math.Inf(1)} {
		if Exp(x) != want {
			t.Errorf("Exp(%g) = %g, want %g", x, Exp(x), want)
		}
	}
	if !math.IsNaN(Exp(math.NaN())) {
		t.Error("Exp(NaN) is a number")
	}
}

func bigExp(x float64) *big.Float {
	const bits, halvings = 300, 20
	v := new(big.Float).SetPrec(bits).SetFloat64(x)
	v.SetMantExp(v, -halvings)
	sum, term := big.NewFloat(1).SetPrec(bits), big.NewFloat(1).SetPrec(bits)
	for k := 1; k < 60; k++ {
		term.Mul(term, v).Quo(term, new(big.Float).SetPrec(bits).SetInt64(int64(k)))
		sum.Add(sum, term)
	}
	for range halvings {
		sum.Mul(sum, sum)
	}
	return sum
}

// TestLog: exp of it is the number again, at 300 bits; the known values.
func TestLog(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 8))
	for range 3000 {
		x := math.Exp((2*rng.Float64() - 1) * math.Pow(10, 3.5*rng.Float64()-1))
		if x == 0 || math.IsInf(x, 0) {
			continue
		}
		checkLog(t, x, Log(x), 0)
		if x < 1e-60 {
			continue // more than 300 bits hold beside 1
		}
		if x < 1e15 {
			checkLog(t, x, Log1p(x), 1)
		}
		if x < 0.9 {
			checkLog(t, -x, Log1p(-x), 1)
		}
	}
	if Log(1) != 0 || Log1p(0) != 0 || !math.IsInf(Log(0), -1) || !math.IsNaN(Log(-1)) || !math.IsNaN(Log1p(-2)) || !math.IsInf(Log(math.Inf(1)), 1) {
		t.Error("special values")
	}
	if got := Log1p(-1e-300); got != -1e-300 {
		t.Errorf("Log1p(-1e-300) = %g", got)
	}
}

// checkLog compares e^got with x + add: their quotient is 1 within the rounding of
// got.
func checkLog(t *testing.T, x, got, add float64) {
	t.Helper()
	want := new(big.Float).SetPrec(300).SetFloat64(x)
	want.Add(want, big.NewFloat(add))
	ratio := new(big.Float).SetPrec(300).Quo(bigExp(got), want)
	allowed := 0.0
	if add != 0 && (x <= -0.29 || x >= 0.41) {
		allowed = 1.6e-16 // of 1 + x
	}
	off, _ := ratio.Sub(ratio, big.NewFloat(1)).Float64()
	if ulp := math.Nextafter(math.Abs(got), math.Inf(1)) - math.Abs(got); math.Abs(off) > max(2*ulp, allowed) {
		t.Errorf("log(%g + %g) = %.17g: off by %.2g, a unit is %.2g", x, add, got, off, ulp)
	}
}
