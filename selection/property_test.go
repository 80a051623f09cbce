package selection

import (
	"cmp"
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

// randomDraws makes draws that hold together: predictors enter, some leave
// again, paths start and end at different steps.
func randomDraws(rng *rand.Rand, n, p, always int) []Draw {
	draws := make([]Draw, n)
	lowest := 3 + rng.IntN(6)
	for i := range draws {
		d := Draw{Number: i, First: -rng.IntN(3), Last: lowest, Complete: true}
		if rng.IntN(6) == 0 {
			d.Last, d.Complete, d.Uncertified = d.First-1+rng.IntN(lowest-d.First+1), false, true
		}
		entered := map[int32]int32{}
		for s := d.First + 1; s <= d.Last; s++ {
			for k := int32(0); k < int32(p); k++ {
				if _, in := entered[k]; !in && rng.Float64() < 0.12/float64(1+k%5) {
					entered[k] = int32(s)
					d.Entries = append(d.Entries, Entry{k, int32(s), rng.IntN(3) == 0})
				}
				if at, in := entered[k]; in && (at == int32(s) || rng.IntN(4) > 0) {
					d.Coefs = append(d.Coefs, Coef{Step: int32(s), Predictor: k, Value: rng.NormFloat64()})
				}
			}
		}
		for range always * max(0, d.Last-d.First+1) {
			d.Always = append(d.Always, rng.NormFloat64())
		}
		for k := int32(0); k < int32(p); k++ {
			if _, in := entered[k]; !in && rng.IntN(20) == 0 {
				d.Still = append(d.Still, k)
			}
		}
		draws[i] = d
	}
	return draws
}

// slowEnd finds the end of a draw's region step by step, by the words of the
// rule.
func slowEnd(draws []Draw, d Draw, region Region, q int) int {
	distinct := func(d Draw, s int) int {
		n := 0
		for _, e := range d.Entries {
			if int(e.Step) <= s {
				n++
			}
		}
		return n
	}
	end := math.MinInt
	if region == Cap {
		for s := d.First - 1; s <= d.Last; s++ {
			if distinct(d, s) <= q {
				end = s
			}
		}
		return end
	}
	for s := -5; s <= 12; s++ {
		sum, all := 0, true
		for _, o := range draws {
			sum += distinct(o, s)
			all = all && s <= o.Last
		}
		if all && sum <= q*len(draws) {
			end = s
		}
	}
	return end
}

// slowRow judges one candidate with dense numbers, all draws in full.
func slowRow(draws []Draw, region Region, q, k int) (count, negative, both int, all, chosen []float64) {
	last := -1
	for i, d := range draws {
		end := slowEnd(draws, d, region, q)
		in, v := false, 0.0
		for _, e := range d.Entries {
			if int(e.Predictor) == k && int(e.Step) <= end {
				in = true
				count++
				if e.Negative {
					negative++
				}
			}
		}
		for _, c := range d.Coefs {
			if in && int(c.Predictor) == k && int(c.Step) == end {
				v = c.Value
			}
		}
		if in {
			chosen = append(chosen, v)
			if i%2 == 1 && last == i-1 {
				both++
			}
			last = i
		}
		all = append(all, v)
	}
	slices.Sort(all)
	slices.Sort(chosen)
	return count, negative, both, all, chosen
}

// The judgement equals a slow one that follows the words of DESIGN 4 and 7.
func TestJudgeEqualsSlowJudgement(t *testing.T) {
	for seed := range uint64(120) {
		rng := rand.New(rand.NewPCG(seed, 1))
		n, p := 2*(1+rng.IntN(8)), 1+rng.IntN(12)
		draws := randomDraws(rng, n, p, 1)
		region, q := Cap+Region(rng.IntN(2)), 1+rng.IntN(p)
		names := plain(p)
		names.Always, names.AlwaysDeviations = []string{"z"}, []float64{1}
		shuffled := slices.Clone(draws)
		rng.Shuffle(n, func(i, j int) { shuffled[i], shuffled[j] = shuffled[j], shuffled[i] })
		j, err := Judge(shuffled, false, names, Decision{Region: region, Bound: WorstCase, Threshold: 0.75, Selected: q})
		if err != nil {
			t.Fatalf("seed %d: %v", seed, err)
		}
		if !slices.IsSortedFunc(j.Rows, func(a, b Row) int {
			return cmp.Or(cmp.Compare(b.Count, a.Count), cmp.Compare(a.Index, b.Index))
		}) {
			t.Errorf("seed %d: rows out of order", seed)
		}
		for _, r := range j.Rows {
			count, negative, both, all, chosen := slowRow(draws, region, q, r.Index)
			got := fmt.Sprint(r.Count, *r.BothHalves, r.Coef.Low, r.Coef.Median, r.Coef.High, r.Stable)
			want := fmt.Sprint(count, float64(both)/float64(n/2), slowQuantile(all, 25), slowQuantile(all, 500), slowQuantile(all, 975), 4*count >= 3*n)
			if count > 0 {
				got += fmt.Sprint(*r.PositiveShare, r.Selected.Low, r.Selected.Median, r.Selected.High)
				want += fmt.Sprint(float64(count-negative)/float64(count), slowQuantile(chosen, 25), slowQuantile(chosen, 500), slowQuantile(chosen, 975))
			}
			if got != want {
				t.Errorf("seed %d, %s, q=%d, candidate %d:\ngot  %s\nwant %s", seed, region, q, r.Index, got, want)
			}
			lo, hi, _, _ := WilsonPairs(n/2-(count-both), count-2*both, both, Level)
			change := lo <= j.Attained && j.Attained <= hi
			if r.Low != lo || r.High != hi || r.CouldChange != change {
				t.Errorf("seed %d, candidate %d: interval %g, %g, %t, want %g, %g, %t", seed, r.Index, r.Low, r.High, r.CouldChange, lo, hi, change)
			}
		}
		if j.Stable > j.MostStable {
			t.Errorf("seed %d: %d stable, at most %d can be", seed, j.Stable, j.MostStable)
		}
	}
}

func slowQuantile(sorted []float64, mille int) float64 {
	at := (len(sorted) - 1) * mille
	i, g := at/1000, float64(at%1000)/1000
	if g == 0 {
		return sorted[i]
	}
	return sorted[i] + g*(sorted[i+1]-sorted[i])
}

// The order in which draws are handed over changes nothing.
func TestJudgeIgnoresOrder(t *testing.T) {
	rng := rand.New(rand.NewPCG(99, 1))
	draws := randomDraws(rng, 20, 30, 0)
	d := Decision{Region: Cap, Bound: RConcave, Threshold: 0.6, Selected: 4}
	first, err := Judge(draws, false, plain(30), d)
	if err != nil {
		t.Fatal(err)
	}
	slices.Reverse(draws)
	second, err := Judge(draws, false, plain(30), d)
	if err != nil {
		t.Fatal(err)
	}
	if !reflect.DeepEqual(first.Rows, second.Rows) || !reflect.DeepEqual(first.Warnings, second.Warnings) || !reflect.DeepEqual(first.Bounds, second.Bounds) {
		t.Error("the judgement changes with the order of the draws")
	}
}

// Selections that are independent with chance theta have
// E(V) = p P(Bin(2B, theta) >= need) exactly (binomial tail from gonum). What
// Judge counts must agree within the error of one big sample.
func TestJudgeCountsIndependentSelections(t *testing.T) {
	const p, pairs, need = 20000, 10, 12
	rng := rand.New(rand.NewPCG(2, 7))
	for _, theta := range []float64{0.2, 0.35, 0.5} {
		draws := make([]Draw, 2*pairs)
		for i := range draws {
			draws[i] = Draw{Number: i, Last: 1, Complete: true}
			for k := int32(0); k < p; k++ {
				if rng.Float64() < theta {
					draws[i].Entries = append(draws[i].Entries, Entry{Predictor: k, Step: 1})
				}
			}
		}
		j, err := Judge(draws, false, plain(p), Decision{Region: Cap, Bound: WorstCase, Threshold: 0.6, Selected: p})
		if err != nil || j.Need != need {
			t.Fatalf("need %d, %v", j.Need, err)
		}
		tail := 1 - distuv.Binomial{N: 2 * pairs, P: theta}.CDF(need-1)
		want, se := p*tail, math.Sqrt(p*tail*(1-tail))
		if math.Abs(float64(j.Stable)-want) > 4*se+0.5 {
			t.Errorf("theta=%g: %d stable, want %.1f (se %.1f)", theta, j.Stable, want, se)
		}
		bounds, _ := boundsAt(theta*p, p, need, pairs)
		for _, b := range bounds {
			if b.FalseSelections != nil && want > *b.FalseSelections*(1+snap) {
				t.Errorf("theta=%g: E(V) = %g above the %s bound %g", theta, want, b.Name, *b.FalseSelections)
			}
		}
	}
}

// screen is one draw of a selector: the candidates in the order of their
// absolute correlation with the outcome over the rows, the first q of them.
func screen(cols [][]float64, y []float64, rows []int, q int) []Entry {
	score := func(x []float64) float64 {
		var sx, sy, sxx, sxy float64
		for _, i := range rows {
			sx, sy = sx+x[i], sy+y[i]
		}
		n := float64(len(rows))
		for _, i := range rows {
			a := x[i] - sx/n
			sxx, sxy = sxx+a*a, sxy+a*(y[i]-sy/n)
		}
		return math.Abs(sxy) / math.Sqrt(sxx)
	}
	type ranked struct {
		k int32
		s float64
	}
	all := make([]ranked, len(cols))
	for k, x := range cols {
		all[k] = ranked{int32(k), score(x)}
	}
	slices.SortFunc(all, func(a, b ranked) int { return cmp.Compare(b.s, a.s) })
	entries := make([]Entry, q)
	for i := range entries {
		entries[i] = Entry{Predictor: all[i].k, Step: int32(i + 1)}
	}
	return entries
}

// STATISTICS 0: screening without signal, p = 200 of which 150 never vary,
// threshold .75, q = 14, 50 pairs. With all 200 counted the unimodal bound is
// 1.00 and the mean number of stable predictors 1.40: the promise is broken.
// Draws that say which columns did not vary put it right.
func TestPromiseNeedsTheRightCandidates(t *testing.T) {
	const tables, rows, varying, still, q, pairs = 250, 100, 50, 150, 14, 50
	var constant []int32
	for k := int32(varying); k < varying+still; k++ {
		constant = append(constant, k)
	}
	d := Decision{Region: Cap, Bound: Unimodal, Threshold: 0.75, Selected: q}
	rng := rand.New(rand.NewPCG(2026, 0))
	var sum, squares, wrong, right float64
	for range tables {
		cols, y := make([][]float64, varying), make([]float64, rows)
		for k := range cols {
			cols[k] = make([]float64, rows)
			for i := range cols[k] {
				cols[k][i] = rng.NormFloat64()
			}
		}
		for i := range y {
			y[i] = rng.NormFloat64()
		}
		draws := make([]Draw, 2*pairs)
		for b := range pairs {
			perm := rng.Perm(rows)
			for h := range 2 {
				draws[2*b+h] = Draw{Number: 2*b + h, Last: q, Complete: true, Entries: screen(cols, y, perm[h*rows/2:(h+1)*rows/2], q)}
			}
		}
		a, err := Judge(draws, false, plain(varying+still), d)
		if err != nil {
			t.Fatal(err)
		}
		for i := range draws {
			draws[i].Still = constant
		}
		b, err := Judge(draws, false, plain(varying+still), d)
		if err != nil {
			t.Fatal(err)
		}
		sum += float64(a.Stable)
		squares += float64(a.Stable * a.Stable)
		wrong, right = *a.Decision.FalseSelections, *b.Decision.FalseSelections
	}
	mean := sum / tables
	se := math.Sqrt((squares/tables - mean*mean) / tables)
	if math.Abs(wrong-1) > 0.001 || mean < wrong+3*se || math.Abs(mean-1.4) > 4*math.Hypot(se, 0.04) {
		t.Errorf("counted wrongly: bound %g, mean %.3f (se %.3f), want 1.00 broken by about 1.40", wrong, mean, se)
	}
	if want, _ := UnimodalBound(q, varying, 75, pairs); right != want || mean > right {
		t.Errorf("counted right: bound %g, want %g, mean %.3f", right, want, mean)
	}
}

// Bounds that are missing without the candidates that rarely vary are missing.
func TestBoundsWithFewCandidatesLeft(t *testing.T) {
	draws := make([]Draw, 20)
	for i := range draws {
		draws[i] = Draw{Number: i, Last: 1, Complete: true, Still: []int32{1, 2, 3}}
	}
	j, err := Judge(draws, false, plain(4), Decision{Region: Cap, Bound: WorstCase, Threshold: 0.8, Selected: 2})
	if err != nil || j.Decision.FalseSelections != nil || len(j.LowCeiling) != 3 {
		t.Errorf("%+v, %v: one candidate is left for selected = 2", j.Bounds, err)
	}
}

func FuzzJudge(f *testing.F) {
	f.Add([]byte{4, 2, 1, 0, 0, 3, 1, 2, 1, 1, 1, 2, 9})
	f.Add([]byte("draws come from files and must never panic, whatever they hold"))
	f.Fuzz(func(t *testing.T, data []byte) {
		next := func() int {
			if len(data) == 0 {
				return 0
			}
			v := data[0]
			data = data[1:]
			return int(int8(v))
		}
		n := next() & 7
		draws := make([]Draw, n)
		for i := range draws {
			flags := next()
			d := Draw{Number: i ^ flags>>4&1, First: next() & 3, Last: next() & 7, Complete: flags&1 > 0, Uncertified: flags&2 > 0}
			for range next() & 7 {
				d.Entries = append(d.Entries, Entry{int32(next()), int32(next() & 7), next() < 0})
			}
			for range next() & 3 {
				d.Coefs = append(d.Coefs, Coef{int32(next() & 7), int32(next()), int32(next() & 1), int32(next() & 1), float64(next())})
			}
			for range next() & 1 {
				d.Still = append(d.Still, int32(next()))
			}
			draws[i] = d
		}
		q, threshold := 1+next()&3, 0.5+float64(1+next()&15)/32
		names := plain(5)
		if next() < 0 {
			names.Terms, names.Deviations = [][]string{nil, {"a", "b"}, {"c"}, nil, {}}, make([]float64, 6)
		}
		if next() < 0 {
			names.Classes = []string{"lost", "alive"}
		}
		j, err := Judge(draws, next() < 0, names, Decision{Region: Cap + Region(next()&1), Bound: Unimodal, Threshold: threshold, Selected: q})
		if err != nil {
			return
		}
		for r := range j.Paths() {
			if r.Frequency <= 0 || r.Frequency > 1 {
				t.Errorf("path with frequency %g", r.Frequency)
			}
		}
		for r := range j.PerSD().Terms() {
			if r.Coef.Low > r.Coef.Median || r.Coef.Median > r.Coef.High {
				t.Errorf("quantiles out of order: %+v", r)
			}
		}
		if j.Stable > j.MostStable && j.Decision.Region == Cap {
			t.Errorf("%d stable, at most %d can be", j.Stable, j.MostStable)
		}
		for _, r := range j.Rows {
			if r.Low > r.Frequency || r.High < r.Frequency {
				t.Errorf("interval %g, %g does not hold %g", r.Low, r.High, r.Frequency)
			}
		}
	})
}

// BenchmarkJudge judges the largest case of DESIGN 1: 100,000 candidates, 1,000
// draws, 120 entries each over 100 steps.
func BenchmarkJudge(b *testing.B) {
	const p, n, entries, steps = 100000, 1000, 120, 100
	rng := rand.New(rand.NewPCG(1, 1))
	draws := make([]Draw, n)
	for i := range draws {
		d := Draw{Number: i, Last: steps, Complete: true}
		for s := int32(1); s <= steps; s++ {
			for len(d.Entries) < entries*int(s)/steps {
				k := int32(len(d.Entries)*p/entries + rng.IntN(p/entries))
				d.Entries = append(d.Entries, Entry{Predictor: k, Step: s})
			}
			for _, e := range d.Entries {
				d.Coefs = append(d.Coefs, Coef{Step: s, Predictor: e.Predictor, Value: 1})
			}
		}
		slices.SortFunc(d.Entries, func(a, b Entry) int {
			return cmp.Or(cmp.Compare(a.Step, b.Step), cmp.Compare(a.Predictor, b.Predictor))
		})
		draws[i] = d
	}
	names := plain(p)
	b.ReportAllocs()
	for b.Loop() {
		j, err := Judge(draws, false, names, Decision{Region: Cap, Bound: Unimodal, Threshold: 0.8, Selected: 100})
		if err != nil || len(j.Rows) != p {
			b.Fatal(err)
		}
	}
}

// BenchmarkPaths walks through the stability paths of the same size.
func BenchmarkPaths(b *testing.B) {
	rng := rand.New(rand.NewPCG(1, 1))
	draws := randomDraws(rng, 200, 2000, 0)
	j, err := Judge(draws, false, plain(2000), Decision{Region: Common, Bound: Unimodal, Threshold: 0.8, Selected: 100})
	if err != nil {
		b.Fatal(err)
	}
	b.ReportAllocs()
	for b.Loop() {
		for range j.Paths() {
		}
	}
}
