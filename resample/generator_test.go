package resample

import (
	"math"
	"testing"
)

// script is a source that plays given values.
type script struct {
	values []uint64
	used   int
}

func (s *script) Uint64() uint64 {
	s.used++
	return s.values[s.used-1]
}

// 2^64 = 3 * 6148914691236517205 + 1, so of the 2^64 values exactly one must
// be rejected for the limit 3: the one whose low product is 0, which is 0
// itself (Lemire 2019, section 4).
func TestBelowRejects(t *testing.T) {
	s := &script{values: []uint64{0, math.MaxUint64}}
	if got := below(s, 3); got != 2 || s.used != 2 {
		t.Errorf("got %d after %d values, want 2 after 2", got, s.used)
	}
	s = &script{values: []uint64{1, 7}}
	if got := below(s, 3); got != 0 || s.used != 1 {
		t.Errorf("got %d after %d values, want 0 after 1", got, s.used)
	}
}

// For a limit just above half of 2^64 nearly every second value is rejected,
// and what is left is still even: chi-square over 16 equal classes.
func TestBelowIsEvenWhereRejectionMatters(t *testing.T) {
	const limit, classes, tries = 1<<63 + 1, 16, 16000
	src := newGenerator("test", 0, 1, 0)
	observed := make([]float64, classes)
	for range tries {
		observed[below(src, limit)>>59]++ // the last value alone is class 16
	}
	expected := make([]float64, classes)
	for i := range expected {
		expected[i] = tries / classes
	}
	if p := pearson(observed, expected, classes-1); p < rare {
		t.Errorf("p = %.2g", p)
	}
}

// A biased reduction is caught by the same statistic: the high product
// without the rejection, for a limit where that doubles some values.
func TestBelowWithoutRejectionWouldBeCaught(t *testing.T) {
	const limit, tries = 1 << 62 * 3, 16000
	src := newGenerator("test", 0, 1, 0)
	reduced := func() uint64 { return src.Uint64() % limit } // favours the first third
	observed, expected := make([]float64, 3), make([]float64, 3)
	for range tries {
		observed[reduced()>>62]++
	}
	for i := range expected {
		expected[i] = tries / 3.0
	}
	if p := pearson(observed, expected, 2); p > rare {
		t.Errorf("p = %.2g: the check cannot see a bias of 2 to 1", p)
	}
}

func TestGeneratorKeysAreApart(t *testing.T) {
	seen := map[uint64]string{}
	for _, label := range []string{"halves", "bootstrap", "0123456789abcde"} {
		for _, attempt := range []uint8{0, 1, MaxRedraws, math.MaxUint8} {
			for _, seed := range []uint64{0, 1, 2, 1 << 32, math.MaxUint64} {
				for _, number := range []uint64{0, 1, 2, 1 << 32, math.MaxUint64} {
					v := newGenerator(label, attempt, seed, number).Uint64()
					if at, twice := seen[v]; twice {
						t.Errorf("%s %d %d %d starts like %s", label, attempt, seed, number, at)
					}
					seen[v] = label
				}
			}
		}
	}
}

func TestLongLabelPanics(t *testing.T) {
	if guard(func() error { newGenerator("0123456789abcdef", 0, 0, 0); return nil }) == nil {
		t.Error("a label of 16 bytes was cut")
	}
}
