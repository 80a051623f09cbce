package main

import "testing"

// The median of an even number of values is the mean of the two in the middle.
func TestMiddle(t *testing.T) {
	for want, values := range map[float64][]float64{2: {1, 2, 30}, 2.5: {1, 2, 3, 40}, 7: {7}} {
		if got := middle(values); got != want {
			t.Errorf("%v: %g, want %g", values, got, want)
		}
	}
}
