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

// BenchmarkStrata makes both halves of a pair within strata of about equal size.
func BenchmarkStrata(b *testing.B) {
	for _, strata := range []int{2, 1000} {
		b.Run(fmt.Sprintf("rows=200000/strata=%d", strata), func(b *testing.B) {
			codes := make([]int32, 200_000)
			for i := range codes {
				codes[i] = int32(i * 7919 % strata)
			}
			p := mustPlan(b, Plan{Rows: len(codes), Number: 2, Seed: 1, Within: codes})
			for k := 0; b.Loop(); k++ {
				p.draw(k)
			}
		})
	}
}

// BenchmarkJitter makes W of all candidates of a draw.
func BenchmarkJitter(b *testing.B) {
	for _, candidates := range []int{1000, 100_000} {
		b.Run(fmt.Sprintf("candidates=%d", candidates), func(b *testing.B) {
			p := mustPlan(b, Plan{Rows: 10, Number: 2, Seed: 1, Jitter: 0.5, Keys: gauges(candidates)})
			for d := 0; b.Loop(); d++ {
				p.jitter(d)
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
