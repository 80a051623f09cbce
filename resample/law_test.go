package resample

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"gonum.org/v1/gonum/stat/combin"
	"gonum.org/v1/gonum/stat/distuv"
)

// The checks below return the probability of what was seen, or worse, if the
// draws followed their law. Seeds are fixed, so a check that passes passes
// always; rare is small beside their number, caught smaller still.
const (
	rare   = 1e-3
	caught = 1e-9
	draws  = 10_000
)

// pearson is the upper tail of Pearson's statistic (Pearson 1900,
// Philosophical Magazine 50, 157-175). Cells that expect fewer than 5 are
// laid together with the next (common practice); free is the number of
// degrees of freedom before that.
func pearson(observed, expected []float64, free int) float64 {
	sum, o, e := 0.0, 0.0, 0.0
	for i := range observed {
		o, e = o+observed[i], e+expected[i]
		if e < 5 && i < len(observed)-1 {
			free--
			continue
		}
		if e > 0 {
			sum += (o - e) * (o - e) / e
		}
		o, e = 0, 0
	}
	return distuv.ChiSquared{K: float64(free)}.Survival(sum)
}

// twoSided is the probability that a binomial count is at least as far out,
// on its side, as the one seen, doubled.
func twoSided(seen float64, tries int, chance float64) float64 {
	b := distuv.Binomial{N: float64(tries), P: chance}
	return min(1, 2*min(b.CDF(seen), b.Survival(seen-1)))
}

// subset makes one draw of m of n rows.
type subset struct {
	n, m int
	make func(seed uint64, draw int) []int
}

// halfScheme is the package's own: the first or the second half of pair
// number draw.
func halfScheme(n, half int) subset {
	return subset{n, n / 2, func(seed uint64, draw int) []int {
		p, err := NewPlan(Plan{Rows: n, Number: 2, Seed: seed})
		if err != nil {
			panic(err)
		}
		return rowsOf(p.Sample(2*draw + half))
	}}
}

// inclusion checks that each row is in m/n of the draws. The indicators of
// one draw have covariance pi(1-pi) (n I - J)/(n-1), so the sum of squares
// over pi(1-pi) n/(n-1) is chi-square with n-1 degrees of freedom (Cochran
// 1977, Sampling Techniques, section 2.9 for the covariance).
func (s subset) inclusion() float64 {
	count := make([]float64, s.n)
	for d := range draws {
		for _, row := range s.make(1, d) {
			count[row]++
		}
	}
	pi, n := float64(s.m)/float64(s.n), float64(s.n)
	sum := 0.0
	for _, c := range count {
		sum += (c - draws*pi) * (c - draws*pi)
	}
	return distuv.ChiSquared{K: n - 1}.Survival(sum / (draws * pi * (1 - pi) * n / (n - 1)))
}

// together checks that each pair of rows is in m(m-1)/(n(n-1)) of the draws:
// the smallest exact binomial probability, times the number of pairs
// (Bonferroni).
func (s subset) together() float64 {
	count := make([]float64, s.n*s.n)
	for d := range draws {
		rows := s.make(1, d)
		for i, a := range rows {
			for _, b := range rows[i+1:] {
				count[a*s.n+b]++
			}
		}
	}
	chance := float64(s.m*(s.m-1)) / float64(s.n*(s.n-1))
	worst, pairs := 1.0, s.n*(s.n-1)/2
	for a := range s.n {
		for b := a + 1; b < s.n; b++ {
			worst = min(worst, twoSided(count[a*s.n+b], draws, chance))
		}
	}
	return min(1, worst*float64(pairs))
}

// overlap checks that two draws that should know nothing of each other share
// a hypergeometric number of rows (Feller 1968, An Introduction to
// Probability Theory, volume 1, section II.6).
func (s subset) overlap(other func(d int) (seed uint64, draw int)) float64 {
	observed, expected := make([]float64, s.m+1), make([]float64, s.m+1)
	for d := range draws {
		shared, in := 0, make([]bool, s.n)
		for _, row := range s.make(1, d) {
			in[row] = true
		}
		for _, row := range s.make(other(d)) {
			if in[row] {
				shared++
			}
		}
		observed[shared]++
	}
	all := float64(combin.Binomial(s.n, s.m))
	for k := max(0, 2*s.m-s.n); k <= s.m; k++ {
		expected[k] = draws * float64(combin.Binomial(s.m, k)) * float64(combin.Binomial(s.n-s.m, s.m-k)) / all
	}
	return pearson(observed, expected, len(slices.DeleteFunc(slices.Clone(expected), func(e float64) bool { return e == 0 }))-1)
}

func nextDraw(d int) (uint64, int)     { return 1, d + 1 }
func nextSeed(d int) (uint64, int)     { return 2, d }
func nextDiagonal(d int) (uint64, int) { return 2, max(d-1, 0) } // seed up, draw down: an equal sum

// laws are the checks that every scheme of drawing must pass.
var laws = []struct {
	name  string
	check func(subset) float64
}{
	{"inclusion", subset.inclusion},
	{"together", subset.together},
	{"next draw", func(s subset) float64 { return s.overlap(nextDraw) }},
	{"next seed", func(s subset) float64 { return s.overlap(nextSeed) }},
	{"next seed and draw", func(s subset) float64 { return s.overlap(nextDiagonal) }},
}

func TestHalvesFollowTheirLaws(t *testing.T) {
	for _, n := range []int{10, 25} {
		for half := range 2 {
			for _, law := range laws {
				if p := law.check(halfScheme(n, half)); p < rare {
					t.Errorf("n %d, half %d, %s: p = %.2g", n, half, law.name, p)
				}
			}
		}
	}
}

// Within a stratum, whatever the others, draws follow the same laws.
func TestStrataFollowTheLawsOfHalves(t *testing.T) {
	codes := mixedStrata(rand.New(rand.NewPCG(3, 3)), 10, 25, 1)
	rows := make(map[int32][]int)
	for row, code := range codes {
		rows[code] = append(rows[code], row)
	}
	for code, members := range rows {
		if len(members) == 1 {
			continue
		}
		for half := range 2 {
			for _, law := range laws {
				if p := law.check(stratumScheme(codes, code, members, half)); p < rare {
					t.Errorf("%d rows, half %d, %s: p = %.2g", len(members), half, law.name, p)
				}
			}
		}
	}
}

// stratumScheme is what a half takes of one stratum, its rows numbered from 0.
func stratumScheme(codes []int32, code int32, members []int, half int) subset {
	plans := make(map[uint64]Plan)
	for seed := range uint64(3) {
		p, err := NewPlan(Plan{Rows: len(codes), Number: 2, Seed: seed, Within: codes})
		if err != nil {
			panic(err)
		}
		plans[seed] = p
	}
	return subset{len(members), len(members) / 2, func(seed uint64, draw int) (list []int) {
		for row := range Drawn(plans[seed].Sample(2*draw + half)) {
			if codes[row] == code {
				list = append(list, slices.Index(members, row))
			}
		}
		return list
	}}
}

// Strata are drawn independently: of strata of 4 and 5 rows, C(4,2) = 6 outcomes
// of the one and 5!/(2! 2! 1!) = 30 of the other, all 180 together as likely.
func TestStrataAreIndependent(t *testing.T) {
	codes := []int32{0, 1, 0, 1, 0, 1, 0, 1, 1}
	p := mustPlan(t, Plan{Rows: 9, Number: 2, Seed: 1, Within: codes})
	if prob := evenly(outcomes(func(k int) [2]uint64 {
		return [2]uint64{p.Sample(2 * k).Rows[0], p.Sample(2*k + 1).Rows[0]}
	}), 180); prob < rare {
		t.Errorf("p = %.2g", prob)
	}
	// The same stream for every stratum ties them to one another.
	tied := func(k int) [2]uint64 {
		var a, b uint64
		for units := range p.strata(slices.Clone(p.units)) {
			src := newGenerator("test", 0, 1, uint64(k))
			if len(units)%2 != 0 {
				choose(src, units, 1)
				units = units[1:]
			}
			choose(src, units, 2)
			a |= 1<<units[0] | 1<<units[1]
			b |= 1<<units[2] | 1<<units[3]
		}
		return [2]uint64{a, b}
	}
	if prob := evenly(outcomes(tied), 180); prob > caught {
		t.Errorf("tied strata: p = %.2g, the check did not see it", prob)
	}
}

// outcomes counts the outcomes of many draws.
func outcomes[K comparable](make func(k int) K) map[K]float64 {
	count := map[K]float64{}
	for k := range draws {
		count[make(k)]++
	}
	return count
}

// Bootstrap counts of strata of 2 and 3 rows: multinomial in each (3 and 10
// count vectors) and independent.
func TestBootstrapStrataAreIndependentMultinomials(t *testing.T) {
	p := mustPlan(t, Plan{Rows: 5, Number: 1, Seed: 1, Design: Bootstrap, Within: []int32{1, 0, 0, 1, 0}})
	index, expected := map[[5]int]int{}, []float64{}
	for i := 0; i <= 2; i++ {
		for a := 0; a <= 3; a++ {
			for b := 0; a+b <= 3; b++ {
				index[[5]int{i, a, b, 2 - i, 3 - a - b}] = len(expected)
				ways := combin.Binomial(2, i) * combin.Binomial(3, a) * combin.Binomial(3-a, b)
				expected = append(expected, draws*float64(ways)/(4*27))
			}
		}
	}
	if len(expected) != 30 {
		t.Fatalf("%d count vectors", len(expected))
	}
	observed := make([]float64, len(expected))
	for d := range draws {
		at, ok := index[[5]int(countsOf(p, d))]
		if !ok {
			t.Fatalf("draw %d: counts %v", d, countsOf(p, d))
		}
		observed[at]++
	}
	if prob := pearson(observed, expected, 29); prob < rare {
		t.Errorf("p = %.2g", prob)
	}
}

// Each law has a generator that breaks it and is caught: so the checks above
// can fail.
func TestBrokenDrawsAreCaught(t *testing.T) {
	const n, m = 25, 12
	shuffled := func(src rand.Source, swap func(src rand.Source, i int) int) []int {
		items := make([]int, n)
		for i := range items {
			items[i] = i
		}
		for i := range m {
			j := swap(src, i)
			items[i], items[j] = items[j], items[i]
		}
		slices.Sort(items[:m])
		return items[:m]
	}
	fair := func(src rand.Source, i int) int { return i + int(below(src, uint64(n-i))) }
	broken := map[string]func(seed uint64, draw int) []int{
		// the shuffle that never leaves a row in its place
		"inclusion": func(seed uint64, draw int) []int {
			return shuffled(newGenerator("test", 0, seed, uint64(draw)), func(src rand.Source, i int) int {
				return i + 1 + int(below(src, uint64(n-i-1)))
			})
		},
		// a window of rows from a random start: each row as often, neighbours always together
		"together": func(seed uint64, draw int) []int {
			start := int(below(newGenerator("test", 0, seed, uint64(draw)), n))
			rows := make([]int, m)
			for i := range rows {
				rows[i] = (start + i) % n
			}
			slices.Sort(rows)
			return rows
		},
		// two neighbouring draws from one stream
		"next draw": func(seed uint64, draw int) []int {
			return shuffled(newGenerator("test", 0, seed, uint64(draw/2)), fair)
		},
		// a seed whose lowest bit is lost: 1 and 2 become one
		"next seed": func(seed uint64, draw int) []int {
			return shuffled(newGenerator("test", 0, (seed-1)/2, uint64(draw)), fair)
		},
		// seed and draw added up
		"next seed and draw": func(seed uint64, draw int) []int {
			return shuffled(newGenerator("test", 0, 0, seed+uint64(draw)), fair)
		},
	}
	for _, law := range laws {
		if p := law.check(subset{n, m, broken[law.name]}); p > caught {
			t.Errorf("%s: p = %.2g, the check did not see it", law.name, p)
		}
	}
	// the same shuffle, mended, passes: the checks do not fail whatever they are given
	sound := subset{n, m, func(seed uint64, draw int) []int {
		return shuffled(newGenerator("test", 0, seed, uint64(draw)), fair)
	}}
	for _, law := range laws {
		if p := law.check(sound); p < rare {
			t.Errorf("%s: p = %.2g for a sound shuffle", law.name, p)
		}
	}
}

// Ten rows have 126 complementary pairs; all turn up, as often as one
// another.
func TestTenRowsGiveAll126Pairs(t *testing.T) {
	p := mustPlan(t, Plan{Rows: 10, Number: 2, Seed: 1})
	count := map[uint64]float64{}
	for k := range draws {
		a, b := p.Sample(2 * k).Rows[0], p.Sample(2*k + 1).Rows[0]
		count[min(a, b)]++
	}
	if len(count) != 126 {
		t.Fatalf("%d different pairs", len(count))
	}
	if prob := evenly(count, 126); prob < rare {
		t.Errorf("p = %.2g", prob)
	}
}

// Seven rows: two halves of three and one left over, 7!/(3! 3! 1!) = 140
// outcomes, all as likely.
func TestOddUnitIsLeftOverAtRandom(t *testing.T) {
	p := mustPlan(t, Plan{Rows: 7, Number: 2, Seed: 1})
	count, left := map[string]float64{}, map[string]float64{}
	for k := range draws {
		a, b := p.Sample(2 * k).Rows[0], p.Sample(2*k + 1).Rows[0]
		count[fmt.Sprint(a, b)]++
		left[fmt.Sprint(0x7f&^(a|b))]++
	}
	if prob := evenly(count, 140); prob < rare {
		t.Errorf("outcomes: p = %.2g", prob)
	}
	if prob := evenly(left, 7); prob < rare {
		t.Errorf("left over: p = %.2g", prob)
	}
}

// evenly checks that all classes are as frequent; unseen ones count.
func evenly[K comparable](count map[K]float64, classes int) float64 {
	total := 0.0
	for _, c := range count {
		total += c
	}
	observed := make([]float64, 0, classes)
	expected := slices.Repeat([]float64{total / float64(classes)}, classes)
	for _, c := range count {
		observed = append(observed, c)
	}
	observed = append(observed, make([]float64, classes-len(observed))...)
	return pearson(observed, expected, classes-1)
}

// Four rows: 35 count vectors with multinomial chances (Feller 1968, section
// VI.9).
func TestBootstrapOfFourIsMultinomial(t *testing.T) {
	p := mustPlan(t, Plan{Rows: 4, Number: 1, Seed: 1, Design: Bootstrap})
	index := map[[4]int]int{}
	expected := []float64{}
	for a := 0; a <= 4; a++ {
		for b := 0; a+b <= 4; b++ {
			for c := 0; a+b+c <= 4; c++ {
				v := [4]int{a, b, c, 4 - a - b - c}
				index[v] = len(expected)
				ways := combin.Binomial(4, a) * combin.Binomial(4-a, b) * combin.Binomial(4-a-b, c)
				expected = append(expected, draws*float64(ways)/256)
			}
		}
	}
	if len(expected) != 35 {
		t.Fatalf("%d count vectors", len(expected))
	}
	observed := make([]float64, len(expected))
	for d := range draws {
		observed[index[[4]int(countsOf(p, d))]]++
	}
	if prob := pearson(observed, expected, 34); prob < rare {
		t.Errorf("p = %.2g", prob)
	}
}

// Counts of 50 rows: they add up to 50; a row's count is binomial(50, 1/50),
// that of two rows binomial(50, 2/50); neighbouring draws and seeds are
// uncorrelated.
func TestBootstrapCounts(t *testing.T) {
	const n = 50
	p := mustPlan(t, Plan{Rows: n, Number: 1, Seed: 1, Design: Bootstrap})
	q := mustPlan(t, Plan{Rows: n, Number: 1, Seed: 2, Design: Bootstrap})
	one, two := make([]float64, n+1), make([]float64, n+1)
	alongDraws, alongSeeds := 0.0, 0.0
	before := countsOf(p, draws)
	for d := range draws {
		counts := countsOf(p, d)
		total := 0
		for _, c := range counts {
			total += c
		}
		if total != n {
			t.Fatalf("draw %d: counts add up to %d", d, total)
		}
		one[counts[0]]++
		two[counts[17]+counts[n-1]]++
		alongDraws += product(before, counts)
		alongSeeds += product(countsOf(q, d), counts)
		before = counts
	}
	for name, c := range map[string]struct {
		observed []float64
		chance   float64
	}{"one row": {one, 1.0 / n}, "two rows": {two, 2.0 / n}} {
		expected := make([]float64, n+1)
		for k := range expected {
			expected[k] = draws * distuv.Binomial{N: n, P: c.chance}.Prob(float64(k))
		}
		if prob := pearson(c.observed, expected, n); prob < rare {
			t.Errorf("%s: p = %.2g", name, prob)
		}
	}
	// The counts of one draw have covariance I - J/n, so the product sum of
	// two independent draws has mean 0 and variance tr (I - J/n)^2 = n - 1.
	for name, sum := range map[string]float64{"draws": alongDraws, "seeds": alongSeeds} {
		z := sum / math.Sqrt(draws*(n-1))
		if prob := 2 * distuv.UnitNormal.Survival(math.Abs(z)); prob < rare {
			t.Errorf("neighbouring %s: z = %.2f", name, z)
		}
	}
}

// product is the sum over rows of the products of deviations from the mean 1.
func product(a, b []int) float64 {
	sum := 0
	for i := range a {
		sum += (a[i] - 1) * (b[i] - 1)
	}
	return float64(sum)
}
