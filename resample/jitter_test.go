package resample

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

// gauges names invented gauges of a hatchery.
func gauges(n int) []string {
	names := make([]string, n)
	for i := range names {
		names[i] = fmt.Sprintf("gauge_%d", i)
	}
	return names
}

func TestJitterRefuses(t *testing.T) {
	for name, c := range map[string]struct {
		plan Plan
		says string
	}{
		"negative":  {Plan{Rows: 10, Number: 2, Jitter: -0.1, Keys: gauges(2)}, "between 0 and 1"},
		"above one": {Plan{Rows: 10, Number: 2, Jitter: 1.5, Keys: gauges(2)}, "between 0 and 1"},
		"NaN":       {Plan{Rows: 10, Number: 2, Jitter: math.NaN(), Keys: gauges(2)}, "between 0 and 1"},
		"no names":  {Plan{Rows: 10, Number: 2, Jitter: 0.5}, "names of the candidates"},
		"twice":     {Plan{Rows: 10, Number: 2, Jitter: 0.5, Keys: []string{"ph", "salt", "ph"}}, `called "ph"`},
	} {
		_, err := NewPlan(c.plan)
		if err == nil {
			t.Errorf("%s: accepted", name)
		} else if !strings.Contains(err.Error(), c.says) || !strings.HasPrefix(err.Error(), "resample: ") {
			t.Errorf("%s: %q does not say %q", name, err, c.says)
		}
	}
}

// 0 and 1 are no jitter, and need no names.
func TestNoJitter(t *testing.T) {
	for _, low := range []float64{0, 1} {
		if w := mustPlan(t, Plan{Rows: 10, Number: 2, Jitter: low}).Sample(0).Jitter; w != nil {
			t.Errorf("jitter %v: W %v", low, w)
		}
	}
}

// W of a candidate is known by its name: neither the order of columns nor other
// candidates matter, nor the number of draws, nor how a draw is asked for.
func TestWDependsOnTheNameAlone(t *testing.T) {
	all := gauges(30)
	some := []string{"gauge_29", "salt", "gauge_0", "gauge_17"}
	p := mustPlan(t, Plan{Rows: 20, Number: 8, Seed: 4, Jitter: 0.3, Keys: all})
	q := mustPlan(t, Plan{Rows: 33, Number: 2, Seed: 4, Jitter: 0.3, Keys: some, Case: slices.Repeat([]float64{2}, 33)})
	for d := 7; d >= 0; d-- {
		w, v := p.Sample(d).Jitter, q.Sample(d).Jitter
		if len(w) != 30 || len(v) != 4 {
			t.Fatalf("draw %d: %d and %d values", d, len(w), len(v))
		}
		if v[0] != w[29] || v[2] != w[0] || v[3] != w[17] {
			t.Errorf("draw %d: W depends on other candidates", d)
		}
		if !slices.Equal(w, p.block([]int{d, (d + 2) % 8}).samples[0].Jitter) {
			t.Errorf("draw %d: W depends on the block", d)
		}
	}
}

// Rows are drawn as without jitter.
func TestJitterLeavesTheRowsAlone(t *testing.T) {
	plain := mustPlan(t, Plan{Rows: 40, Number: 6, Seed: 4})
	jittered := mustPlan(t, Plan{Rows: 40, Number: 6, Seed: 4, Jitter: 0.5, Keys: gauges(3)})
	for d := range 6 {
		if !sameSample(plain.Sample(d), jittered.Sample(d)) {
			t.Errorf("draw %d has other rows", d)
		}
	}
}

// The largest u there is, 1 - 2^-53, does not lead beyond 1, wherever W begins:
// the arithmetic of jitter for a sweep of its first value.
func TestWStaysInItsRange(t *testing.T) {
	for i := range 100_000 {
		low := float64(i+1) / 100_001
		if w := low + float64((1-low)*(1-0x1p-53)); w > 1 || w < low {
			t.Fatalf("jitter %v: W %v", low, w)
		}
	}
	p := mustPlan(t, Plan{Rows: 10, Number: 2, Jitter: 0.9, Keys: gauges(1000)})
	for d := range 20 {
		for _, w := range p.Sample(d).Jitter {
			if w < 0.9 || w > 1 {
				t.Fatalf("draw %d: W %v", d, w)
			}
		}
	}
}

// jitterScheme gives u in [0,1) of candidate number name in a draw; the laws
// below hold of the package's own and are broken by others.
type jitterScheme func(seed uint64, draw, name int) float64

// ownJitter is the package's, scaled back to [0,1).
func ownJitter(names int) jitterScheme {
	keys := gauges(names)
	made := make(map[[2]uint64][]float64)
	return func(seed uint64, draw, name int) float64 {
		key := [2]uint64{seed, uint64(draw)}
		if made[key] == nil {
			p, err := NewPlan(Plan{Rows: 10, Number: 2, Seed: seed, Jitter: 0.5, Keys: keys})
			if err != nil {
				panic(err)
			}
			made[key] = p.jitter(draw)
		}
		return 2*made[key][name] - 1
	}
}

const jitterNames, jitterDraws = 20, 1000

// uniform is the chi-square of all values in 50 classes.
func (u jitterScheme) uniform() float64 {
	observed := make([]float64, 50)
	for d := range jitterDraws {
		for j := range jitterNames {
			observed[int(50*u(1, d, j))]++
		}
	}
	return pearson(observed, slices.Repeat([]float64{jitterDraws * jitterNames / 50}, 50), 49)
}

// correlation is the two-sided probability of the correlation of n pairs of
// uniform values: under independence n r^2 is nearly chi-square with 1 degree of
// freedom (n in the thousands).
func correlation(n int, pair func(i int) (a, b float64)) float64 {
	var ab, aa, bb float64
	for i := range n {
		a, b := pair(i)
		a, b = a-0.5, b-0.5
		ab, aa, bb = ab+a*b, aa+a*a, bb+b*b
	}
	return distuv.ChiSquared{K: 1}.Survival(float64(n) * ab * ab / (aa * bb))
}

// against is the correlation with the value of another seed, draw or name.
func (u jitterScheme) against(other func(d, j int) (seed uint64, draw, name int)) float64 {
	return correlation(jitterDraws*jitterNames/2, func(i int) (float64, float64) {
		d, j := 2*(i/jitterNames), i%jitterNames
		return u(1, d, j), u(other(d, j))
	})
}

var jitterLaws = []struct {
	name  string
	check func(jitterScheme) float64
}{
	{"uniform", jitterScheme.uniform},
	{"halves of a pair", func(u jitterScheme) float64 { // corr(W_A, W_B) = 0
		return u.against(func(d, j int) (uint64, int, int) { return 1, d + 1, j })
	}},
	{"next pair", func(u jitterScheme) float64 {
		return u.against(func(d, j int) (uint64, int, int) { return 1, d + 2, j })
	}},
	{"next name", func(u jitterScheme) float64 {
		return u.against(func(d, j int) (uint64, int, int) { return 1, d, (j + 1) % jitterNames })
	}},
	{"next seed", func(u jitterScheme) float64 {
		return u.against(func(d, j int) (uint64, int, int) { return 2, d, j })
	}},
	{"seed and draw", func(u jitterScheme) float64 {
		return u.against(func(d, j int) (uint64, int, int) { return 2, max(d-1, 0), j })
	}},
}

func TestWFollowsItsLaws(t *testing.T) {
	for _, law := range jitterLaws {
		if p := law.check(ownJitter(jitterNames)); p < rare {
			t.Errorf("%s: p = %.2g", law.name, p)
		}
	}
}

// Each law is broken by a scheme that is caught.
func TestBrokenWIsCaught(t *testing.T) {
	own := ownJitter(jitterNames)
	broken := map[string]jitterScheme{
		"uniform":          func(seed uint64, d, j int) float64 { u := own(seed, d, j); return u * u },
		"halves of a pair": func(seed uint64, d, j int) float64 { return own(seed, d/2, j) }, // one W for both
		"next pair":        func(seed uint64, d, j int) float64 { return own(seed, d%2, j) }, // one W for all pairs
		"next name":        func(seed uint64, d, j int) float64 { return own(seed, d, 0) },   // one W for all candidates
		"next seed":        func(seed uint64, d, j int) float64 { return own(0, d, j) },
		"seed and draw":    func(seed uint64, d, j int) float64 { return own(0, d+int(seed), j) }, // added up
	}
	for _, law := range jitterLaws {
		if p := law.check(broken[law.name]); p > caught {
			t.Errorf("%s: p = %.2g, the check did not see it", law.name, p)
		}
	}
}
