package selection

import "fmt"

// plain names n candidates with standard deviation 1.
func plain(n int) Predictors {
	p := Predictors{Names: make([]string, n), Deviations: make([]float64, n)}
	for i := range p.Names {
		p.Names[i], p.Deviations[i] = fmt.Sprintf("x%d", i), 1
	}
	return p
}

func value[T any](v T) *T { return &v }
