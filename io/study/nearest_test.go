package study

import (
	"math/rand/v2"
	"testing"
)

// editsByDefinition is the distance as it is defined, without a table: the
// cheapest of all last edits.
func editsByDefinition(a, b []rune) int {
	if len(a) == 0 || len(b) == 0 {
		return len(a) + len(b)
	}
	x, y := a[:len(a)-1], b[:len(b)-1]
	replaced := editsByDefinition(x, y)
	if a[len(a)-1] != b[len(b)-1] {
		replaced++
	}
	best := min(replaced, editsByDefinition(x, b)+1, editsByDefinition(a, y)+1)
	if len(x) > 0 && len(y) > 0 && a[len(a)-1] == y[len(y)-1] && b[len(b)-1] == x[len(x)-1] {
		best = min(best, editsByDefinition(x[:len(x)-1], y[:len(y)-1])+1)
	}
	return best
}

func TestEdits(t *testing.T) {
	for _, c := range []struct {
		a, b string
		want int
	}{
		{"", "", 0}, {"abc", "", 3}, {"", "ab", 2}, {"same", "same", 0},
		{"kitten", "sitting", 3}, // the customary example, from memory
		{"ca", "ac", 1}, {"ca", "abc", 3},
		{"größe", "grösse", 2},
	} {
		if got := edits(c.a, c.b); got != c.want {
			t.Errorf("edits(%q, %q) = %d, want %d", c.a, c.b, got, c.want)
		}
	}
	rng := rand.New(rand.NewPCG(1, 2))
	text := func() []rune {
		r := make([]rune, rng.IntN(7))
		for i := range r {
			r[i] = []rune("abé")[rng.IntN(3)]
		}
		return r
	}
	for range 500 {
		a, b := text(), text()
		if got, want := edits(string(a), string(b)), editsByDefinition(a, b); got != want {
			t.Fatalf("edits(%q, %q) = %d, want %d", string(a), string(b), got, want)
		}
	}
}

func TestNearest(t *testing.T) {
	known := []string{"survival_d21", "salinity", "Salinity_d3", "ph", "PH2"}
	for name, want := range map[string]string{
		"survival": "survival_d21", "Survival_D21": "survival_d21", "salinty": "salinity",
		"salinity_d3": "Salinity_d3", "hp": "ph", "ph2": "PH2", "": "ph", "ph": "ph",
	} {
		if got := nearest(name, known); got != want {
			t.Errorf("nearest(%q) = %q, want %q", name, got, want)
		}
	}
	if got := nearest("x", nil); got != "" {
		t.Errorf("of nothing: %q", got)
	}
	if got := nearest("ab", []string{"b", "a", "AB", "ab"}); got != "ab" {
		t.Errorf("the name itself is nearest: %q", got)
	}
}

// A name that shares little with all others has no near one.
func TestNear(t *testing.T) {
	for name, want := range map[string]string{
		"nope": "", "survivel_d21": "survival_d21", "survival": "survival_d21", "hp": "", "ph": "+ph", "x": "", "": "", "SALT": "salt_d3",
	} {
		if got := near(name, []string{"+pos", "survival_d21", "+ph", "salt_d3"}); got != want {
			t.Errorf("near(%q) = %q, want %q", name, got, want)
		}
	}
	if got := near("a", nil); got != "" || NearHint("nope", []string{"+pos"}) != "" || NearHint("po", []string{"pos"}) != `; the nearest is "pos"` {
		t.Errorf("of nothing: %q", got)
	}
}

// The shortcut by length must not change the answer.
func TestNearestWithoutShortcut(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	text := func() string {
		r := make([]byte, rng.IntN(9))
		for i := range r {
			r[i] = "aAbc"[rng.IntN(4)]
		}
		return string(r)
	}
	for range 300 {
		known := make([]string, 12)
		for i := range known {
			known[i] = text()
		}
		name, best := text(), ""
		cost := func(k string) float64 {
			c := float64(edits(lower(name), lower(k)))
			if c == 0 && k != name {
				c = 0.5
			}
			return c
		}
		for i, k := range known {
			if i == 0 || cost(k) < cost(best) {
				best = k
			}
		}
		if got := nearest(name, known); got != best {
			t.Fatalf("nearest(%q, %q) = %q, want %q", name, known, got, best)
		}
	}
}

// lower folds ASCII letters, all that the random texts hold.
func lower(s string) string {
	b := []byte(s)
	for i, c := range b {
		if c >= 'A' && c <= 'Z' {
			b[i] = c + 'a' - 'A'
		}
	}
	return string(b)
}
