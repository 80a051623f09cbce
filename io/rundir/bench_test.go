package rundir

import (
	"testing"

	"holdfast/solver"
)

// BenchmarkDraws reads 1,000 draws of 5,000 coefficients in blocks of 16.
func BenchmarkDraws(b *testing.B) {
	const draws, steps, support, size = 1000, 100, 50, 16
	path := solver.Path{First: 0, Last: steps - 1, Intercepts: make([]float64, steps), Always: make([]float64, 2*steps), Deviance: make([]float64, steps)}
	for j := range int32(support) {
		path.Entries = append(path.Entries, solver.Entry{Candidate: j, Step: 0})
	}
	for step := range int32(steps) {
		for j := range int32(support) {
			path.Coefs = append(path.Coefs, solver.Coef{Step: step, Candidate: j, Value: float64(step) + float64(j)/7})
		}
	}
	id, meta := hatcheryIdentity(), hatcheryMeta(draws)
	id.Candidates = nil
	for j := range support {
		id.Candidates = append(id.Candidates, blockName(j))
	}
	meta.Centre, meta.Deviation = make([]float64, support+2), make([]float64, support+2)
	d, err := Create(b.TempDir(), id, nil, meta)
	if err != nil {
		b.Fatal(err)
	}
	if err := d.SetDecision(hatcheryDecision()); err != nil {
		b.Fatal(err)
	}
	for first := 0; first < draws; first += size {
		paths := make([]solver.Path, min(size, draws-first))
		for i := range paths {
			paths[i] = path
		}
		if err := d.Put(upTo(first, first+len(paths)), paths); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportAllocs()
	for b.Loop() {
		if _, err := d.Draws(); err != nil {
			b.Fatal(err)
		}
	}
}
