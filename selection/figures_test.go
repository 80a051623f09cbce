package selection

import (
	"math"
	"math/rand/v2"
	"strconv"
	"testing"
)

// A bound is never written smaller than it is.
func TestAtMost(t *testing.T) {
	for v, want := range map[float64]string{
		0.8125: "0.813", 1: "1", 1.0000000001: "1", 1.00001: "1.01", 0.99999: "1", 9.991: "10", 1234.4: "1240", 1236: "1240", 28.284: "28.3", 2e-7: "2e-07",
	} {
		if got := AtMost(v); got != want {
			t.Errorf("%v is written %s, not %s", v, got, want)
		}
	}
	r := rand.New(rand.NewPCG(9, 9))
	for range 10000 {
		v := math.Exp(20*r.Float64() - 12)
		text := AtMost(v)
		got, err := strconv.ParseFloat(text, 64)
		if err != nil || got < v*(1-1e-9) || got > v*1.011 {
			t.Fatalf("%v is written %s", v, text)
		}
	}
}

// What is advised to be typed is allowed: never above the number.
func TestAtLeast(t *testing.T) {
	for v, want := range map[float64]string{14.1485: "14.14", 28.2842712: "28.28", 577.35: "577.3", 12: "12", 2.9999999999: "3", 0.123456: "0.1234", 1234567: "1234000"} {
		if got := AtLeast(v); got != want {
			t.Errorf("%v is written %s, not %s", v, got, want)
		}
	}
}
