package demo

import (
	"crypto/sha256"
	"errors"
	"fmt"

	"math"
	"os"
	"path/filepath"
	"slices"
	"testing"
)

// TestShape holds the table to what the demonstration promises: 240 x 1,200,
// twelve columns that matter, an identifier, a row number, a constant column
// and a copy.
func TestShape(t *testing.T) {
	tab := Make(1)
	names := tab.Names()
	if len(names) != 1200 {
		t.Errorf("%d columns, want 1200", len(names))
	}
	if sorted := slices.Compact(slices.Sorted(slices.Values(names))); len(sorted) != len(names) {
		t.Errorf("column names repeat")
	}
	if len(Matter()) != 12 {
		t.Errorf("%d columns matter, want 12", len(Matter()))
	}
	for _, name := range append(Matter(), Outcome, "batch_id", "row_no", "spawned_on", "tank_volume", "conductivity_d07") {
		if !slices.Contains(names, name) {
			t.Errorf("no column %s", name)
		}
	}
	for _, c := range tab.columns {
		if n := len(c.number) + len(c.integer) + len(c.text); n != Rows {
			t.Errorf("%s: %d rows, want %d", c.name, n, Rows)
		}
	}
	if _, spread := moments(tab.Number("tank_volume")); spread != 0 {
		t.Errorf("tank_volume varies")
	}
	if r := correlation(tab.Number("salinity_d07"), tab.Number("conductivity_d07")); r < 1-1e-12 {
		t.Errorf("conductivity_d07 is no copy of salinity_d07: r = %v", r)
	}
}

// TestOutcome: survival is a percentage that nothing pushes to its limits, and
// the columns that matter explain more than half of it, so that a demonstration
// has something to find.
func TestOutcome(t *testing.T) {
	for _, seed := range []uint64{1, 2, 3} {
		tab := Make(seed)
		y := tab.Number(Outcome)
		if lo, hi := slices.Min(y), slices.Max(y); lo <= 0 || hi >= 100 {
			t.Errorf("seed %d: survival from %v to %v", seed, lo, hi)
		}
		_, spread := moments(y)
		if noise := noisePoints / spread; noise*noise > 0.5 {
			t.Errorf("seed %d: noise is %.0f %% of the variance", seed, 100*noise*noise)
		}
	}
}

// TestBlocks: members of one community are correlated as the recipe says
// (0.7^2, standard error about 0.05 for 240 rows), members of two are not.
func TestBlocks(t *testing.T) {
	tab := Make(1)
	inside, across, n := 0.0, 0.0, 0
	for k := 0; k+communitySize < taxa; k += communitySize {
		a, b, c := tab.Number(otu(k)), tab.Number(otu(k+1)), tab.Number(otu(k+communitySize))
		inside += correlation(a, b)
		across += correlation(a, c)
		n++
	}
	inside, across = inside/float64(n), across/float64(n)
	if math.Abs(inside-community*community) > 0.03 {
		t.Errorf("mean correlation inside a community %.3f, want %.2f", inside, community*community)
	}
	if math.Abs(across) > 0.03 {
		t.Errorf("mean correlation across communities %.3f, want 0", across)
	}
}

// TestNormal: mean 0, variance 1 and fourth moment 2.9, that of the sum of
// twelve uniform numbers (excess kurtosis -6/(5*12); derived), within five
// standard errors.
func TestNormal(t *testing.T) {
	const n = 200_000
	var m1, m2, m4 float64
	for _, x := range (origin{seed: 7}).source("test").normals(n) {
		m1 += x
		m2 += x * x
		m4 += x * x * x * x
	}
	for _, c := range []struct {
		what           string
		got, want, tol float64
	}{{"mean", m1 / n, 0, 0.012}, {"variance", m2 / n, 1, 0.016}, {"fourth moment", m4 / n, 2.9, 0.1}} {
		if math.Abs(c.got-c.want) > c.tol {
			t.Errorf("%s %.4f, want %.1f", c.what, c.got, c.want)
		}
	}
}

// TestWriteTwice: equal seeds give equal bytes, other seeds others; an
// existing file is never overwritten.
func TestWriteTwice(t *testing.T) {
	dir := t.TempDir()
	digest := func(name string, seed uint64) [32]byte {
		path := filepath.Join(dir, name)
		if err := Make(seed).Write(path); err != nil {
			t.Fatal(err)
		}
		text, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		return sha256.Sum256(text)
	}
	a, b, c := digest("a.parquet", 1), digest("b.parquet", 1), digest("c.parquet", 2)
	if a != b {
		t.Errorf("the same seed gave other bytes")
	}
	if a == c {
		t.Errorf("another seed gave the same bytes")
	}
	if err := Make(3).Write(filepath.Join(dir, "a.parquet")); !errors.Is(err, os.ErrExist) {
		t.Errorf("writing over a file: %v", err)
	}
	left, err := os.ReadDir(dir)
	if err != nil || len(left) != 3 {
		t.Errorf("%d files in the folder, want 3 (%v)", len(left), err)
	}
}

func otu(k int) string { return fmt.Sprintf("otu_%04d", k+1) }

func correlation(a, b []float64) float64 {
	ma, sa := moments(a)
	mb, sb := moments(b)
	sum := 0.0
	for i := range a {
		sum += (a[i] - ma) * (b[i] - mb)
	}
	return sum / float64(len(a)) / (sa * sb)
}
