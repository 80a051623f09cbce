package demo

import (
	"crypto/sha256"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"
)

// TestValuesAreKept: the values of both tables at seed 1, as they were when
// the demonstrations were written about them.
func TestValuesAreKept(t *testing.T) {
	for _, c := range []struct {
		name  string
		table *Table
		want  string
	}{
		{"larvae", Make(1), "ca8097738a6bfac47dab5fa4a065340d98768719d8eb477c6c6ce67f172f4923"},
		{"batches", MakeBatches(1), "9c9790e0e7bbdaee3863308a2b248180af8572af414b1c7480875f0add48c02e"},
	} {
		h := sha256.New()
		for _, col := range c.table.columns {
			fmt.Fprintln(h, col.name, col.number, col.integer, col.text)
		}
		if got := fmt.Sprintf("%x", h.Sum(nil)); got != c.want {
			t.Errorf("%s: digest %s, want %s", c.name, got, c.want)
		}
	}
}

// TestBatchesShape: 600 rows, no name twice, and every planted column there.
func TestBatchesShape(t *testing.T) {
	tab := MakeBatches(1)
	names := tab.Names()
	if sorted := slices.Compact(slices.Sorted(slices.Values(names))); len(sorted) != len(names) {
		t.Errorf("column names repeat")
	}
	for _, c := range tab.columns {
		if n := len(c.number) + len(c.integer) + len(c.text); n != Batches {
			t.Errorf("%s: %d rows, want %d", c.name, n, Batches)
		}
	}
	for _, e := range slices.Concat(ofLoss, ofSettling) {
		if !slices.Contains(names, e.column) {
			t.Errorf("no column %s", e.column)
		}
	}
}

// TestFates: what became of the batches is possible: watched from the arrival
// to some day after it, nothing after the last day, and both outcomes as
// frequent as a study of them takes.
func TestFates(t *testing.T) {
	for _, seed := range []uint64{1, 2, 3} {
		tab := MakeBatches(seed)
		arrival, day, settled, fate := tab.Integer("arrival_day"), tab.Integer("settlement_day"), tab.Integer("settled"), tab.Text("fate")
		events, lost, late := 0, 0, 0
		for i := range day {
			if arrival[i] < 0 || arrival[i] >= day[i] || day[i] > lastDay || settled[i] < 0 || settled[i] > 1 {
				t.Fatalf("seed %d: batch %d came on day %d, was watched until day %d, settled %d", seed, i, arrival[i], day[i], settled[i])
			}
			if settled[i] == 0 && day[i] < lastDay && fate[i] != "lost" {
				t.Errorf("seed %d: batch %d was watched until day %d only, and is %s", seed, i, day[i], fate[i])
			}
			events += int(settled[i])
			if fate[i] == "lost" {
				lost++
			}
			if arrival[i] > 0 {
				late++
			}
		}
		if events < 400 || lost < 150 || lost > 250 || late < 130 || late > 230 {
			t.Errorf("seed %d: %d settled, %d lost, %d came late", seed, events, lost, late)
		}
	}
}

// TestDelayedEntry: a batch that arrives on a day is one that had not settled
// by then. With the same numbers drawn, conditioning moves the day of settling
// behind the arrival and keeps the order; and the conditioned law has the
// survival S(t)/S(arrival) of the Weibull law.
func TestDelayedEntry(t *testing.T) {
	const n, arrival, from = 40_000, 20, 26
	src := (origin{seed: 3}).source("test")
	after := 0
	for range n {
		if src.settlement(0, arrival) > from {
			after++
		}
	}
	hazard := func(t float64) float64 { return math.Pow(t/settleScale, settleShape) }
	want := math.Exp(hazard(arrival) - hazard(from))
	if got, error := float64(after)/n, math.Sqrt(want*(1-want)/n); math.Abs(got-want) > 4*error {
		t.Errorf("share after day %d of those there on day %d: %.4f, want %.4f", from, arrival, got, want)
	}
}

// strong is the standardised score that a planted effect passes over all rows.
// By chance a column passes it in one of 16,000 cases.
const strong = 4

// TestLossCanBeFound: without the solver, by score statistics within sites: what
// was planted strongly is strong, and what was not planted is not.
func TestLossCanBeFound(t *testing.T) {
	for _, seed := range []uint64{1, 2, 3} {
		tab := MakeBatches(seed)
		lost := make([]float64, Batches)
		for i, f := range tab.Text("fate") {
			if f == "lost" {
				lost[i] = 1
			}
		}
		score := func(name string) float64 { return scoreWithin(tab.Text("site"), tab.Number(name), lost) }
		for _, e := range ofLoss {
			z := score(e.column)
			if z*e.size < 0 || math.Abs(e.size) >= 0.6 && math.Abs(z) < strong {
				t.Errorf("seed %d: %s has score %.1f", seed, e.column, z)
			}
		}
		checkQuiet(t, seed, tab, ofLoss, score)
		if cove, lagoon := shareOf(tab.Text("site"), "cove", lost), shareOf(tab.Text("site"), "lagoon", lost); cove < lagoon+0.1 {
			t.Errorf("seed %d: %.2f of the cove are lost and %.2f of the lagoon", seed, cove, lagoon)
		}
	}
}

// shareOf is the mean of y in one site.
func shareOf(site []string, name string, y []float64) float64 {
	sum, n := 0.0, 0.0
	for i, s := range site {
		if s == name {
			sum, n = sum+y[i], n+1
		}
	}
	return sum / n
}

// scoreWithin is the score statistic of a logistic regression on one column at
// coefficient 0, with an intercept for each site: sum of (x-mean)(y-mean)
// within sites over its standard deviation (Mantel 1963, JASA 58:690-700).
func scoreWithin(site []string, x, y []float64) float64 {
	var u, v float64
	for _, s := range labels[0].levels {
		var a, b []float64
		for i := range site {
			if site[i] == s {
				a, b = append(a, x[i]), append(b, y[i])
			}
		}
		ma, sa := moments(a)
		mb, sb := moments(b)
		for i := range a {
			u += (a[i] - ma) * (b[i] - mb)
		}
		n := float64(len(a))
		v += n * n * sa * sa * sb * sb / (n - 1)
	}
	return u / math.Sqrt(v)
}

// TestSettlingCanBeFound does the same by the score of the Cox model.
func TestSettlingCanBeFound(t *testing.T) {
	for _, seed := range []uint64{1, 2, 3} {
		tab := MakeBatches(seed)
		score := func(name string) float64 { return scoreOfHazard(tab, tab.Number(name)) }
		for _, e := range ofSettling {
			z := score(e.column)
			if z*e.size < 0 || math.Abs(e.size) >= 0.3 && math.Abs(z) < strong {
				t.Errorf("seed %d: %s has score %.1f", seed, e.column, z)
			}
		}
		warmth := make([]float64, Batches)
		for _, d := range fewDays {
			x := tab.Number(fmt.Sprintf("temperature_d%02d", d))
			for i := range warmth {
				warmth[i] += x[i]
			}
		}
		paste := make([]float64, Batches)
		for i, f := range tab.Text("feed_mix") {
			if f == "paste" {
				paste[i] = 1
			}
		}
		if z := scoreOfHazard(tab, warmth); z < strong {
			t.Errorf("seed %d: temperature has score %.1f", seed, z)
		}
		if z := scoreOfHazard(tab, paste); z > -strong {
			t.Errorf("seed %d: paste has score %.1f", seed, z)
		}
		checkQuiet(t, seed, tab, ofSettling, score)
	}
}

// scoreOfHazard is the score of the Cox model on one column at coefficient 0,
// within sites, risk sets by their definition entry < t <= time and events at
// the same time one after the other (Breslow 1974, Biometrics 30:89-99).
func scoreOfHazard(tab *Table, x []float64) float64 {
	site, arrival, day, settled := tab.Text("site"), tab.Integer("arrival_day"), tab.Integer("settlement_day"), tab.Integer("settled")
	var u, v float64
	for i := range x {
		if settled[i] == 0 {
			continue
		}
		var risk []float64
		for k := range x {
			if site[k] == site[i] && arrival[k] < day[i] && day[i] <= day[k] {
				risk = append(risk, x[k])
			}
		}
		mean, spread := moments(risk)
		u += x[i] - mean
		v += spread * spread
	}
	return u / math.Sqrt(v)
}

// checkQuiet: quantities of which no day was planted have no strong score.
func checkQuiet(t *testing.T, seed uint64, tab *Table, planted []effect, score func(string) float64) {
	t.Helper()
	quantity := func(name string) string { return strings.Split(name, "_d0")[0] }
	quiet := 0
	for _, c := range tab.columns {
		if c.number == nil || slices.ContainsFunc(planted, func(e effect) bool { return quantity(e.column) == quantity(c.name) }) {
			continue
		}
		quiet++
		if z := score(c.name); math.Abs(z) > strong {
			t.Errorf("seed %d: %s has score %.1f, and nothing was planted there", seed, c.name, z)
		}
	}
	if quiet < 80 {
		t.Errorf("only %d quiet columns", quiet)
	}
}
