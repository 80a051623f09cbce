package main

import (
	"math"
	"slices"
)

// median of at least one value.
func median(x []float64) float64 {
	s := slices.Sorted(slices.Values(x))
	n := len(s)
	return (s[(n-1)/2] + s[n/2]) / 2
}

// interval returns the order statistics that cover the median with at least
// 95 %: the binomial interval, the whole range below six values.
func interval(x []float64) (low, high float64) {
	s := slices.Sorted(slices.Values(x))
	n := len(s)
	k, below := 0, math.Pow(0.5, float64(n)) // below = P(Binomial(n, 1/2) <= k)
	for term := below; 2*(k+1) < n; k++ {
		term *= float64(n-k) / float64(k+1)
		if 2*(below+term) > 0.05 {
			break
		}
		below += term
	}
	return s[k], s[n-1-k]
}

// mannWhitney returns the exact two-sided p value of the rank-sum test (Mann
// & Whitney 1947) for samples without ties; a tie counts half.
func mannWhitney(a, b []float64) float64 {
	u := 0.0
	for _, x := range a {
		for _, y := range b {
			switch {
			case x < y:
				u++
			case x == y:
				u += 0.5
			}
		}
	}
	n, m := len(a), len(b)
	ways := rankSums(n, m)
	small := math.Floor(min(u, float64(n*m)-u))
	below, all := 0.0, 0.0
	for v, w := range ways {
		all += w
		if float64(v) <= small {
			below += w
		}
	}
	return min(1, 2*below/all)
}

// rankSums counts the arrangements of n and m values by their statistic U.
func rankSums(n, m int) []float64 {
	ways := make([][]float64, n+1) // ways[i][u] with i values of the first sample placed
	for i := range ways {
		ways[i] = make([]float64, n*m+1)
	}
	ways[0][0] = 1
	for rank := 1; rank <= n+m; rank++ { // the rank-th value goes to either sample
		for i := min(rank, n); i >= 1; i-- {
			for u := n * m; u >= 0; u-- {
				if over := rank - i; over <= m && u >= over { // values of the second sample below it
					ways[i][u] += ways[i-1][u-over]
				}
			}
		}
	}
	return ways[n]
}
