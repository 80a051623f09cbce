package report

import (
	"flag"
	"fmt"
	"math/rand/v2"
	"testing"

	"holdfast/selection"
)

// seed rebuilds the invented hatchery of these tests.
var seed = flag.Uint64("seed", 11, "seed of the invented draws")

// panel is a predictor of the invented hatchery: its name, how likely a draw
// is to choose it, and the size of its coefficient.
type panel struct {
	name   string
	chance float64
	coef   float64
}

// hatchery are predictors with names that ask for care.
func hatchery() []panel {
	list := []panel{
		{"salinity_psu", 1, 0.412}, {"larvae_per_ml", 0.97, -1234.5}, {"algae, \"T-iso\"", 0.92, 0.000123},
		{"温度_水槽", 0.85, 2.5}, {"=HYPERLINK(\"tank\")", 0.8, -0.03}, {"otu_000123_Vibrio_aestuarianus_relative_abundance", 0.78, 1.75},
		{"ph\x1b[2J\u202e", 0.6, -5}, {"-spawn", 0.35, 0.1}, {"+feed", 0.2, 0.2}, {"@tank", 0.1, -0.2},
	}
	for i := range 30 {
		list = append(list, panel{fmt.Sprintf("asv_%03d", i), 0.05, 0.01 * float64(i-15)})
	}
	return append(list, panel{"never_chosen", 0, 0})
}

// hatcheryDraws invents the draws: what a predictor's chance says enters at a
// step of its own, with a coefficient that scatters.
func hatcheryDraws(list []panel, n int) []selection.Draw {
	r := rand.New(rand.NewPCG(*seed, 3))
	draws := make([]selection.Draw, n)
	for d := range draws {
		draw := selection.Draw{Number: d, First: 0, Last: len(list) - 1, Complete: true}
		for j, p := range list {
			if r.Float64() < p.chance {
				draw.Entries = append(draw.Entries, selection.Entry{Predictor: int32(j), Step: int32(j), Negative: r.Float64() < 0.05 != (p.coef < 0)})
			}
			for _, e := range draw.Entries {
				c := list[e.Predictor].coef
				draw.Coefs = append(draw.Coefs, selection.Coef{Step: int32(j), Predictor: e.Predictor, Value: c * (1 + 0.1*r.NormFloat64())})
			}
			draw.Always = append(draw.Always, 0.5+0.01*r.NormFloat64())
		}
		draws[d] = draw
	}
	return draws
}

func hatcheryDecision() selection.Decision {
	return selection.Decision{Region: selection.Cap, Bound: selection.Unimodal, Threshold: 0.8, Selected: 7, SelectedAsked: 7.3}
}

// judged is the judgement that most tests write.
func judged(t testing.TB, list []panel, n int, bootstrap bool, d selection.Decision) *selection.Judgement {
	t.Helper()
	p := selection.Predictors{Always: []string{"spawn_day"}, AlwaysDeviations: []float64{2}}
	for i, entry := range list {
		p.Names = append(p.Names, entry.name)
		p.Deviations = append(p.Deviations, float64(i+1))
	}
	j, err := selection.Judge(hatcheryDraws(list, n), bootstrap, p, d)
	if err != nil {
		t.Fatal(err)
	}
	return j
}
