package resample

import (
	"context"
	"fmt"

	"holdfast/solver"
)

// FitDraws makes draws of the plan and fits them as one block, as a worker of
// Run does: both halves of a pair, where they follow each other, come from one
// shuffle. A draw that cannot be fitted after MaxRedraws has a path without
// steps that says why, and f does not see it.
func (p Plan) FitDraws(ctx context.Context, f Fitter, draws []int, progress func(steps int)) ([]solver.Path, error) {
	b := p.block(draws)
	paths, err := b.fit(ctx, f, progress)
	if err != nil {
		return nil, err
	}
	for i, redraws := range b.redraws {
		paths[i].Redraws = redraws
	}
	return paths, nil
}

// block is the draws that are fitted together.
type block struct {
	samples []*solver.Sample
	redraws []int
	refused []error
}

// block makes draws.
func (p Plan) block(draws []int) block {
	var b block
	var d drawn
	for i, number := range draws {
		unit := p.unit(number)
		if i == 0 || unit != p.unit(draws[i-1]) {
			d = p.draw(unit)
		}
		k := number - p.numbers(unit)[0]
		b.samples = append(b.samples, d.samples[k])
		b.redraws = append(b.redraws, d.redraws)
		b.refused = append(b.refused, d.refused[k])
	}
	return b
}

// fit fits those that can be fitted.
func (b block) fit(ctx context.Context, f Fitter, progress func(int)) ([]solver.Path, error) {
	var fittable []*solver.Sample
	for i, s := range b.samples {
		if b.refused[i] == nil {
			fittable = append(fittable, s)
		}
	}
	if len(fittable) == 0 {
		return b.spread(nil), nil
	}
	paths, err := f.FitBlock(ctx, fittable, progress)
	if err != nil {
		return nil, err
	}
	if len(paths) != len(fittable) {
		return nil, fmt.Errorf("the fitter returned %d paths", len(paths))
	}
	return b.spread(paths), nil
}

// spread puts the paths of the fitted draws among those of the refused ones.
func (b block) spread(fitted []solver.Path) []solver.Path {
	paths := make([]solver.Path, len(b.samples))
	for i, why := range b.refused {
		if why != nil {
			paths[i] = solver.Path{Last: -1, Stop: solver.StopUncertified, Why: why.Error()}
			continue
		}
		paths[i], fitted = fitted[0], fitted[1:]
	}
	return paths
}
