package solver

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"
)

// kindsOf turns a problem with a numeric outcome into one of every other kind of
// outcome, and into groups.
func kindsOf(q Problem) map[string]Problem {
	n := len(q.Outcome)
	order := make([]int, n)
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int {
		if q.Outcome[a] < q.Outcome[b] {
			return -1
		}
		return 1
	})
	rank := make([]int, n)
	for k, i := range order {
		rank[i] = k
	}
	outcome := func(family Family, of func(i int) float64) Problem {
		p := q
		p.Family, p.Outcome, p.Floor = family, make([]float64, n), 0.1
		for i := range p.Outcome {
			p.Outcome[i] = of(i)
		}
		return p
	}
	out := map[string]Problem{
		"yes-no": outcome(Binomial, func(i int) float64 { return float64((rank[i] + i%3*n/8) / (n/2 + n/8)) }),
		"count":  outcome(Poisson, func(i int) float64 { return math.Floor(9 * math.Pow(float64(rank[i])/float64(n), 3)) }),
	}
	for name, p := range out {
		for i, y := range p.Outcome {
			p.Outcome[i] = y
			if p.Family == Binomial {
				p.Outcome[i] = min(1, y)
			}
		}
		out[name] = p
	}
	for _, k := range []int{2, 3, 4} {
		p := outcome(Multinomial, func(i int) float64 { return float64((rank[i]*7/n + i%2) % k) })
		p.Classes = k
		out["classes "+string(rune('0'+k))] = p
	}
	for _, ties := range []Ties{Efron, Breslow} {
		p := outcome(Cox, func(int) float64 { return 0 })
		p.Outcome = nil
		p.Survival = &Survival{Ties: ties}
		for i := range n {
			t := float64(1 + rank[i]/3)
			p.Survival.Time = append(p.Survival.Time, t)
			p.Survival.Event = append(p.Survival.Event, i%4 != 0)
			p.Survival.Entry = append(p.Survival.Entry, math.Floor(t/2)-float64(1+i%2))
			p.Survival.Stratum = append(p.Survival.Stratum, int32(i%2))
		}
		out["survival "+ties.String()] = p
	}
	for _, name := range []string{"yes-no", "classes 3"} {
		out[name+", groups"] = grouped(out[name])
	}
	p := q
	p.Floor = 0.1
	out["number, groups"] = grouped(p)
	for _, name := range []string{"yes-no", "count", "classes 4", "survival efron"} {
		out[name+", equal groups"] = equalGroups(out[name])
	}
	out["number, equal groups"] = equalGroups(p)
	return out
}

// grouped puts some neighbouring candidates into groups.
func grouped(q Problem) Problem {
	all := q.Candidates
	q.Candidates, q.Groups, q.Luck = nil, nil, 0.05
	relative := q.Relative
	q.Relative = nil
	for j := 0; j < len(all); {
		k := min(1+j%4, len(all)-j)
		q.Candidates = append(q.Candidates, all[j])
		if k == 1 {
			q.Groups = append(q.Groups, nil)
		} else {
			q.Groups = append(q.Groups, slices.Clone(all[j:j+k]))
		}
		if relative != nil {
			q.Relative = append(q.Relative, relative[j])
		}
		j += k
	}
	return q
}

// equalGroups makes groups of which every second has the columns of the one before,
// recoded: as a code and a name of the same category have.
func equalGroups(q Problem) Problem {
	n, _ := q.Design.Dims()
	var cols [][]float64
	r := rand.New(rand.NewPCG(8, 1))
	q.Candidates, q.Groups, q.Names, q.Centre = nil, nil, nil, nil
	q.Always, q.Relative, q.Luck = nil, nil, 0.05
	for g := range 6 {
		level := make([]int, n)
		for i := range level {
			level[i] = (i*(g+3)/7 + r.IntN(2)) % 4
		}
		for _, reference := range []int{0, 2} {
			group := []int32{}
			for l := range 4 {
				if l == reference {
					continue
				}
				c := make([]float64, n)
				for i := range c {
					if level[i] == l {
						c[i] = 1
					}
				}
				group = append(group, int32(len(cols)))
				cols = append(cols, c)
			}
			q.Candidates, q.Groups = append(q.Candidates, group[0]), append(q.Groups, group)
		}
	}
	p := problemOf(cols, make([]float64, n))
	q.Design, q.Names, q.Centre, q.Floor, q.Scale = p.Design, p.Names, p.Centre, 0.3, ScaleDraw
	return q
}

// TestFamilyHistories: no bit of a path depends on which draws were fitted together,
// in which order columns were looked at, or what was looked at beside.
func TestFamilyHistories(t *testing.T) {
	n, p := 60, 30
	for setting, make := range settings(n, p) {
		for kind, q := range kindsOf(make()) {
			if strings.Contains(kind, "equal groups") && setting != "lasso" && setting != "elastic net" {
				continue // they have columns of their own
			}
			samples := halves(n, 1, 9)
			for k := range samples {
				samples[k].Left = samples[k^1]
				samples[k^1].Left = nil
			}
			samples = append(samples, AllRows(n))
			want := mustFit(t, mustModel(t, q), samples)
			for k, path := range want {
				if path.Stop == StopUncertified && !strings.Contains(path.Why, "separation") {
					t.Logf("%s, %s: draw %d: %s", setting, kind, k, path.Why)
				}
			}
			for seed := range uint64(2) {
				m := mustModel(t, q)
				m.whim = &whim{rand.New(rand.NewPCG(seed, 3)), seed > 0}
				size := 1 + int(seed)*2
				for k0 := 0; k0 < len(samples); k0 += size {
					k1 := min(k0+size, len(samples))
					for k, got := range mustFit(t, m, samples[k0:k1]) {
						if d := samePath(want[k0+k], got); d != "" {
							t.Errorf("%s, %s: history %d, draw %d: other %s\n%d %v %s\n%d %v %s", setting, kind, seed, k0+k, d, want[k0+k].Last, want[k0+k].Stop, want[k0+k].Why, got.Last, got.Stop, got.Why)
						}
					}
				}
			}
		}
	}
}
