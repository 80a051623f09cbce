package selection

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

// near compares at rounding error.
func near(got, want float64) bool {
	return math.Abs(got-want) <= 1e-12*math.Max(1, math.Abs(want))
}

// Worked values of STATISTICS 1, from Meinshausen and Buhlmann (2010), Theorem 1:
// q = sqrt(0.8 p) at threshold 0.9 gives 1, q = sqrt(0.8 alpha p) gives alpha.
func TestWorstCaseAnchors(t *testing.T) {
	for _, c := range []struct{ q, p, tau, want float64 }{
		{math.Sqrt(0.8 * 100), 100, 0.9, 1},
		{math.Sqrt(0.8 * 12345), 12345, 0.9, 1},
		{math.Sqrt(0.8 * 0.05 * 1000), 1000, 0.9, 0.05},
		{30, 1000, 0.9, 1.125},
	} {
		if got, err := WorstCaseBound(c.q, c.p, c.tau); err != nil || !near(got, c.want) {
			t.Errorf("WorstCaseBound(%g, %g, %g) = %g, %v, want %g", c.q, c.p, c.tau, got, err, c.want)
		}
	}
}

// The trap of STATISTICS 0: q = sqrt(0.8 p), threshold 0.9 and a target of 1
// must meet, whatever the last bit does.
func TestTargetMeetsItsOwnBound(t *testing.T) {
	for p := 1; p <= 5000; p++ {
		q := math.Min(math.Sqrt(0.8*float64(p)), float64(p))
		need, err := solveNeed(WorstCase, q, float64(p), 1, 50)
		if err != nil || need > 90 {
			t.Fatalf("p = %d: need %d, %v, want at most 90", p, need, err)
		}
	}
}

func TestNeedSnaps(t *testing.T) {
	for draws := 2; draws <= 2000; draws += 2 {
		for need := draws/2 + 1; need <= draws; need++ {
			if got, err := Need(float64(need)/float64(draws), draws); err != nil || got != need {
				t.Fatalf("Need(%d/%d) = %d, %v", need, draws, got, err)
			}
		}
	}
	if got, _ := Need(0.5+1e-13, 100); got != 51 {
		t.Errorf("a threshold just above 1/2 needs %d of 100, want 51: half is never stable", got)
	}
}

// Anchors of STATISTICS 2.6.
func TestDAnchors(t *testing.T) {
	d := func(eta, tail float64, n int, r float64) float64 {
		v, err := DValue(eta, tail, n, r)
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
	if got := d(1.0/50, 2.0/50, 50, -0.5); !near(got, 1.0/3) {
		t.Errorf("D(1/50, 2/50, 50, -1/2) = %g, want 1/3, the uniform law on three points", got)
	}
	for _, r := range []float64{-0.25, -0.5, -3} {
		for _, eta := range []float64{0, 1e-9, 0.1, 0.5, 0.99, 1} {
			if got := d(eta, 1, 1, r); !near(got, eta) {
				t.Errorf("D(%g, 1, 1, %g) = %g, want eta", eta, r, got)
			}
		}
	}
	for _, eta := range []float64{1e-4, 0.01, 0.1, 0.3} {
		last := 1.0
		for j := 1; j <= 20; j++ {
			tail := float64(j) / 20
			got := d(eta, tail, 20, -0.5)
			if got > eta/tail*(1+1e-12) && got < 1 {
				t.Errorf("D(%g, %g, 20) = %g exceeds Markov's %g", eta, tail, got, eta/tail)
			}
			if got > last*(1+1e-12) {
				t.Errorf("D(%g, ., 20) rises at %g", eta, tail)
			}
			if v := d(eta*1.1, tail, 20, -0.5); v < got*(1-1e-12) {
				t.Errorf("D(., %g, 20) falls at %g", tail, eta)
			}
			last = got
		}
	}
}

// concaveLaw makes a random r-concave mass function on {0..n}: f^r is convex.
func concaveLaw(rng *rand.Rand, n int, r float64) []float64 {
	phi := make([]float64, n+1)
	slope, level := rng.NormFloat64()*float64(rng.IntN(30)), 0.0
	for i := range phi {
		phi[i] = level
		slope += math.Abs(rng.NormFloat64()) * math.Pow(rng.Float64(), 4) * 3
		level += slope
	}
	low := phi[0]
	for _, v := range phi {
		low = math.Min(low, v)
	}
	sum := 0.0
	lift := 0.01 + 5*rng.Float64()
	for i, v := range phi {
		phi[i] = math.Pow(v-low+lift, 1/r)
		sum += phi[i]
	}
	for i := range phi {
		phi[i] /= sum
	}
	return phi
}

// meanAndTail returns E(X)/n and P(X >= j).
func meanAndTail(law []float64, j int) (mean, tail float64) {
	for i, f := range law {
		mean += f * float64(i)
		if i >= j {
			tail += f
		}
	}
	return mean / float64(len(law)-1), tail
}

// No r-concave law exceeds D at its own mean (the definition of D in Shah and
// Samworth 2013).
func TestDIsNeverExceeded(t *testing.T) {
	rng := rand.New(rand.NewPCG(11, 3))
	close := 0
	for trial := 0; trial < 1500; trial++ {
		n := 3 + rng.IntN(25)
		r := []float64{-0.5, -0.25}[trial%2]
		law := concaveLaw(rng, n, r)
		j := 1 + rng.IntN(n)
		mean, tail := meanAndTail(law, j)
		if d := tailMax(mean, j, n, r); tail > d*(1+1e-12) {
			t.Fatalf("trial %d: an r-concave law has P = %.15g, above D = %.15g", trial, tail, d)
		} else if tail > 0.9*d {
			close++
		}
	}
	if close < 100 {
		t.Errorf("only %d of 1500 laws came near D: the check is too easy", close)
	}
}

// extremal is the law that attains D: f^r affine on {0..k}. It is found here by
// another way than the code's: Newton on log rho with a numerical derivative.
func extremal(k, n int, mean, r float64) []float64 {
	law := func(u float64) []float64 {
		f, sum := make([]float64, n+1), 0.0
		for i := 0; i <= k; i++ {
			f[i] = math.Pow(1+float64(i)/float64(k)*math.Expm1(u), 1/r)
			sum += f[i]
		}
		for i := range f {
			f[i] /= sum
		}
		return f
	}
	excess := func(u float64) float64 { m, _ := meanAndTail(law(u), 0); return m*float64(n) - mean }
	u := 0.0
	for range 200 {
		const h = 1e-6
		step := excess(u) * 2 * h / (excess(u+h) - excess(u-h))
		u -= math.Max(-1, math.Min(1, step))
	}
	return law(u)
}

// The extremal law attains the reference value of D, and the judgement of draws
// that follow it gives exactly the r-concave bound of pairs: a predictor whose
// two halves agree in x of B pairs, and split in all others, is chosen in B+x
// draws, so that it is stable if x >= need - B.
func TestExtremalLawAttainsTheBound(t *testing.T) {
	seen := 0
	for _, c := range readReference(t).D {
		if c.SupportEnd == nil || c.R != -0.5 || c.B > 50 || c.Eta < 1e-6 {
			continue
		}
		j := int(ceilSnap(float64(c.B) * c.T))
		law := extremal(*c.SupportEnd, c.B, float64(c.B)*c.Eta, c.R)
		mean, tail := meanAndTail(law, j)
		if math.Abs(mean-c.Eta) > 1e-9 || !agrees(tail, c.Value) {
			t.Errorf("eta=%g t=%g B=%d: the extremal law has mean %g and P %.12g, want %.10g", c.Eta, c.T, c.B, mean, tail, c.Value)
			continue
		}
		got := stableMass(t, law, c.B+j)
		if !agrees(got, c.Value) {
			t.Errorf("eta=%g t=%g B=%d: judged draws give %.12g, want %.10g", c.Eta, c.T, c.B, got, c.Value)
		}
		seen++
	}
	if seen < 8 {
		t.Errorf("only %d laws tried", seen)
	}
}

// stableMass judges one predictor for each x in 0..B, chosen in both halves of x
// pairs and in one half of the others, and adds up the law over the stable.
func stableMass(t *testing.T, law []float64, need int) float64 {
	t.Helper()
	b := len(law) - 1
	draws := make([]Draw, 2*b)
	for i := range draws {
		draws[i] = Draw{Number: i, Last: 1, Complete: true}
		for x := 0; x <= b; x++ {
			if i/2 < x || i%2 == 0 {
				draws[i].Entries = append(draws[i].Entries, Entry{Predictor: int32(x), Step: 1})
			}
		}
	}
	j, err := Judge(draws, false, plain(b+1), Decision{Region: Cap, Bound: RConcave, Threshold: float64(need) / float64(2*b), Selected: b + 1})
	if err != nil {
		t.Fatal(err)
	}
	sum := 0.0
	for _, r := range j.Rows {
		if r.Stable {
			sum += law[r.Index]
		}
	}
	return sum
}

// uniformsBest is the exact maximum of P(X >= j) over unimodal laws on {0..n}
// with mean at most mean. A law with mode m is a mixture of uniform laws on
// intervals that hold m, and one linear condition needs two of them at most.
func uniformsBest(n, j int, mean float64) float64 {
	best := 0.0
	for mode := 0; mode <= n; mode++ {
		var ms, ts []float64
		for a := 0; a <= mode; a++ {
			for b := mode; b <= n; b++ {
				ms = append(ms, float64(a+b)/2)
				ts = append(ts, float64(max(0, b-max(a, j)+1))/float64(b-a+1))
			}
		}
		for x := range ms {
			if ms[x] > mean {
				continue
			}
			best = math.Max(best, ts[x])
			for y := range ms {
				if ms[y] > mean {
					s := (mean - ms[x]) / (ms[y] - ms[x])
					best = math.Max(best, ts[x]+s*(ts[y]-ts[x]))
				}
			}
		}
	}
	return best
}

// The unimodal bound equals the exact maximum inside its side conditions, and
// its formula is too small in some places outside, which is why the conditions
// matter (Shah and Samworth 2013, Theorem 2).
func TestUnimodalIsTheMaximum(t *testing.T) {
	inside, tooSmall := 0, 0
	for _, b := range []int{5, 10, 20} {
		for _, theta := range []float64{0.01, 0.05, 0.1, 0.2, 0.3, 0.4, 0.5, 0.57, 0.65} {
			for need := b + 1; need <= 2*b; need++ {
				exact := uniformsBest(b, need-b, float64(b)*theta*theta)
				v, err := UnimodalBound(theta*100, 100, need, b)
				switch {
				case err == nil:
					inside++
					if math.Abs(v/100-exact) > 1e-12 {
						t.Errorf("B=%d theta=%g need=%d: bound %.15g, exact maximum %.15g", b, theta, need, v/100, exact)
					}
				case !errors.Is(err, ErrNoBound):
					t.Error(err)
				case unimodalFactor(need, b)*theta*theta < exact*(1-1e-9):
					tooSmall++
				}
			}
		}
	}
	if inside < 150 || tooSmall < 10 {
		t.Errorf("%d cells inside the conditions, %d outside where the formula is too small", inside, tooSmall)
	}
}

// The conditions of STATISTICS 2.2, at their borders, B = 50.
func TestUnimodalConditions(t *testing.T) {
	for _, c := range []struct {
		theta float64
		need  int
		ok    bool
	}{
		{0.577, 100, true}, {0.578, 100, false}, // at most 1/sqrt(3)
		{1e-6, 51, false}, {1e-6, 52, true}, // at least two above half
		{0.3, 58, true}, {0.3, 57, false}, // above 1/2 + 1/100 + .75*.09 = .5775
		{0.15, 53, true}, {0.15, 52, false}, // above 1/2 + .0225
	} {
		if _, err := UnimodalBound(c.theta*1000, 1000, c.need, 50); c.ok != (err == nil) || !c.ok && !errors.Is(err, ErrNoBound) {
			t.Errorf("theta=%g need=%d: %v", c.theta, c.need, err)
		}
	}
}

// As r falls the shape assumption fades to a single hump (STATISTICS 2.6).
func TestDFadesToOneHump(t *testing.T) {
	for _, c := range []struct {
		j    int
		mean float64
	}{{3, 0.1}, {5, 0.4}, {8, 1}, {10, 0.02}} {
		want := uniformsBest(10, c.j, c.mean)
		last := 0.0
		for _, r := range []float64{-0.25, -0.5, -2, -10, -1e3, -1e6} {
			got, err := DValue(c.mean/10, float64(c.j)/10, 10, r)
			if err != nil || got < last || got > want*(1+1e-12) {
				t.Errorf("j=%d mean=%g r=%g: D = %.15g, %v, after %.15g, at most %.15g", c.j, c.mean, r, got, err, last, want)
			}
			last = got
		}
		if math.Abs(last-want) > 1e-4*want {
			t.Errorf("j=%d mean=%g: D = %.15g at r = -1e6, want about %.15g", c.j, c.mean, last, want)
		}
	}
}

// The other two assumptions are weaker: r-concave <= unimodal <= worst case.
func TestBoundsAreOrdered(t *testing.T) {
	for _, pairs := range []int{2, 10, 50, 100} {
		for need := pairs + 2; need <= 2*pairs; need += 1 + pairs/10 {
			for _, q := range []float64{1, 5, 20, 50} {
				w, _ := WorstCase.at(q, 100, need, pairs)
				u, err := UnimodalBound(q, 100, need, pairs)
				if err != nil {
					continue
				}
				if u > w*(1+1e-12) {
					t.Errorf("q=%g need=%d of %d: unimodal %g above worst case %g", q, need, 2*pairs, u, w)
				}
				if r := rConcave(q, 100, need, pairs); r > u*(1+1e-12) {
					t.Errorf("q=%g need=%d of %d: r-concave %g above unimodal %g", q, need, 2*pairs, r, u)
				}
			}
		}
	}
}

// Independent selections with chance theta, the case that the bounds cannot
// tell from the worst, have E(V) = p P(Bin(2B, theta) >= need) exactly
// (binomial tail from gonum). No bound is below it; with one pair, all that do
// not need more pairs are equal to it.
func TestBoundsHoldForIndependentSelections(t *testing.T) {
	const p = 1000
	for _, pairs := range []int{1, 2, 5, 25, 50} {
		for _, theta := range []float64{0.001, 0.01, 0.1, 0.3, 0.5} {
			for need := pairs + 1; need <= 2*pairs; need += 1 + pairs/8 {
				exact := p * (1 - distuv.Binomial{N: float64(2 * pairs), P: theta}.CDF(float64(need-1)))
				for _, b := range boundNames {
					v, err := b.at(theta*p, p, need, pairs)
					if err == nil && exact > v*(1+1e-9) {
						t.Errorf("%s, theta=%g need=%d of %d: bound %g below E(V) = %g", b, theta, need, 2*pairs, v, exact)
					}
					if pairs == 1 && b != Unimodal && !near(v, exact) {
						t.Errorf("%s, theta=%g, one pair: bound %.15g, want E(V) = %.15g", b, theta, v, exact)
					}
				}
			}
		}
	}
}

func FuzzDValue(f *testing.F) {
	f.Add(0.01, 0.8, 50, -0.5)
	f.Add(0.35, 0.34, 10, -0.25)
	f.Add(1.0, math.Inf(1), 1, -1e300)
	f.Fuzz(func(t *testing.T, eta, tail float64, n int, r float64) {
		if n > 60 {
			n = n%60 + 1
		}
		v, err := DValue(eta, tail, n, r)
		if err == nil && !(v >= 0 && v <= 1+1e-12) {
			t.Errorf("DValue(%g, %g, %d, %g) = %g", eta, tail, n, r, v)
		}
	})
}

func FuzzNeed(f *testing.F) {
	f.Add(0.55, 200)
	f.Add(0.5000000001, 4)
	f.Fuzz(func(t *testing.T, threshold float64, draws int) {
		need, err := Need(threshold, draws)
		if err != nil || draws > 1<<30 {
			return
		}
		exact := threshold * float64(draws)
		if need > draws || 2*need <= draws || float64(need) < exact-1e-9*math.Max(1, exact) || (need > draws/2+1 && float64(need-1) >= exact) {
			t.Errorf("Need(%g, %d) = %d", threshold, draws, need)
		}
	})
}
