package resample

import (
	"fmt"
	"testing"
)

// BenchmarkPair makes both halves of a pair.
func BenchmarkPair(b *testing.B) {
	for _, rows := range []int{500, 20_000, 200_000, 1_000_000} {
		b.Run(fmt.Sprintf("rows=%d", rows), func(b *testing.B) {
			p := mustPlan(b, Plan{Rows: rows, Number: 2, Seed: 1})
			for k := 0; b.Loop(); k++ {
				p.draw(k)
			}
		})
	}
}

// BenchmarkBootstrap makes one draw.
func BenchmarkBootstrap(b *testing.B) {
	for _, rows := range []int{500, 20_000, 200_000, 1_000_000} {
		b.Run(fmt.Sprintf("rows=%d", rows), func(b *testing.B) {
			p := mustPlan(b, Plan{Rows: rows, Number: 1, Seed: 1, Design: Bootstrap})
			for d := 0; b.Loop(); d++ {
				p.Sample(d)
			}
		})
	}
}
