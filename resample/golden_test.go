package resample

import (
	"slices"
	"testing"
)

// The draws below were made by testdata/first_draws.py, a separate program
// written from the specification of the stream (C2SP, chacha8rand), Lemire
// (2019) and Knuth's algorithm P. A run directory names its draws by number
// and seed only, so if this test fails, every run directory in the world is
// void: mend the generator, not the test.
func TestFirstDrawsAreThoseOfTheSpecification(t *testing.T) {
	halves := [][]int{
		{0, 4, 6, 9, 13, 14, 18, 20, 21, 22, 23, 24},
		{1, 2, 5, 7, 8, 10, 11, 12, 15, 16, 17, 19},
		{0, 1, 4, 6, 8, 10, 14, 17, 19, 20, 21, 22},
		{2, 3, 5, 7, 9, 11, 12, 13, 15, 16, 23, 24},
	}
	p := mustPlan(t, Plan{Rows: 25, Number: 4, Seed: 1})
	for draw, want := range halves {
		if got := rowsOf(p.Sample(draw)); !slices.Equal(got, want) {
			t.Errorf("half %d: rows %v, want %v", draw, got, want)
		}
	}
	bootstrap := [][]int{ // how often each of the 12 rows was drawn
		{1, 2, 1, 0, 4, 1, 1, 0, 1, 0, 1, 0},
		{2, 0, 0, 3, 0, 1, 1, 1, 1, 1, 1, 1},
		{0, 1, 2, 1, 2, 1, 0, 0, 1, 2, 0, 2},
	}
	p = mustPlan(t, Plan{Rows: 12, Number: 3, Seed: 1, Design: Bootstrap})
	for draw, want := range bootstrap {
		if got := countsOf(p, draw); !slices.Equal(got, want) {
			t.Errorf("bootstrap draw %d: counts %v, want %v", draw, got, want)
		}
	}
}

// The far end of seed and number, more than one round of the stream: the
// sums of the row numbers of both halves, by the same program.
func TestLargeSeedAndNumber(t *testing.T) {
	p := mustPlan(t, Plan{Rows: 1000, Number: 2, Seed: 1<<64 - 1})
	for half, want := range []int{252016, 247484} {
		sum := 0
		for row := range Drawn(p.Sample(1<<33 + half)) {
			sum += row
		}
		if sum != want {
			t.Errorf("half %d of pair 2^32: rows add up to %d, want %d", half, sum, want)
		}
	}
}

// Attempts after the first, by the same program.
func TestAttemptsAreThoseOfTheSpecification(t *testing.T) {
	p := mustPlan(t, Plan{Rows: 25, Number: 2, Seed: 1})
	for attempt, want := range map[uint8][2][]int{
		1: {
			{0, 3, 4, 5, 7, 9, 10, 13, 16, 17, 19, 24},
			{1, 2, 6, 8, 11, 14, 15, 18, 20, 21, 22, 23},
		},
		MaxRedraws: {
			{0, 3, 4, 5, 6, 9, 10, 16, 17, 20, 21, 24},
			{1, 2, 7, 8, 11, 12, 13, 14, 15, 18, 22, 23},
		},
	} {
		for half, s := range p.attempt(0, attempt) {
			if got := rowsOf(s); !slices.Equal(got, want[half]) {
				t.Errorf("attempt %d, half %d: rows %v, want %v", attempt, half, got, want[half])
			}
		}
	}
	p = mustPlan(t, Plan{Rows: 12, Number: 1, Seed: 1, Design: Bootstrap})
	want := []int{0, 1, 0, 0, 1, 2, 1, 3, 2, 1, 0, 1}
	for row, count := range Drawn(p.attempt(0, 1)[0]) {
		want[row] -= count
	}
	if slices.ContainsFunc(want, func(left int) bool { return left != 0 }) {
		t.Errorf("bootstrap, attempt 1: counts differ by %v", want)
	}
}

// Draws within strata of 7, 5, 2, 1 and 1 rows, by the same program.
func TestStrataAreThoseOfTheSpecification(t *testing.T) {
	var codes []int32
	for _, letter := range "babcbdbababcaaeb" {
		codes = append(codes, int32(letter))
	}
	p := mustPlan(t, Plan{Rows: 16, Number: 4, Seed: 1, Within: codes})
	for draw, want := range [][]int{
		{4, 6, 7, 11, 13, 15},
		{1, 2, 3, 8, 10, 12},
		{1, 2, 6, 8, 11, 12},
		{0, 3, 4, 9, 13, 15},
	} {
		if got := rowsOf(p.Sample(draw)); !slices.Equal(got, want) {
			t.Errorf("half %d: rows %v, want %v", draw, got, want)
		}
	}
	p = mustPlan(t, Plan{Rows: 16, Number: 2, Seed: 1, Within: codes, Design: Bootstrap})
	for draw, want := range [][]int{
		{2, 1, 0, 2, 3, 1, 0, 2, 2, 1, 0, 0, 0, 1, 1, 0},
		{0, 2, 2, 1, 1, 1, 0, 0, 2, 2, 1, 1, 0, 1, 1, 1},
	} {
		if got := countsOf(p, draw); !slices.Equal(got, want) {
			t.Errorf("bootstrap draw %d: counts %v, want %v", draw, got, want)
		}
	}
}

// W of some candidates, by the same program, to the last bit.
func TestJitterIsThatOfTheSpecification(t *testing.T) {
	keys := []string{"ph", "temperature_d07", "", "größe", "a name longer than sixty-four bytes, as a survey's whole question is"}
	for _, c := range []struct {
		seed uint64
		draw int
		want []float64
	}{
		{1, 0, []float64{0.3610397106265523, 0.2723081678434023, 0.6986819990781066, 0.6264733688102593, 0.775868207254602}},
		{1, 1, []float64{0.4661255320505667, 0.6074621179864927, 0.9519595051727477, 0.6305813426641454, 0.3134805501987178}},
		{1<<64 - 1, 1 << 40, []float64{0.6481129469696343, 0.7067263175911613, 0.5839348736048896, 0.6325912538532216, 0.3669364803046692}},
	} {
		p := mustPlan(t, Plan{Rows: 10, Number: 2, Seed: c.seed, Jitter: 0.25, Keys: keys})
		if got := p.Sample(c.draw).Jitter; !slices.Equal(got, c.want) {
			t.Errorf("seed %d, draw %d: W %v, want %v", c.seed, c.draw, got, c.want)
		}
	}
}
