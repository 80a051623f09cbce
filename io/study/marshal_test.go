package study

import (
	"bytes"
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"github.com/pelletier/go-toml/v2"

	"holdfast/selection"
	"holdfast/solver"
)

// again writes a study and reads it back.
func again(t *testing.T, s *Study) (*Study, []byte) {
	t.Helper()
	text, err := s.Marshal()
	if err != nil {
		t.Fatal(err)
	}
	back, err := Parse(s.Source, text, nil)
	if err != nil {
		t.Fatalf("%v in\n%s", err, text)
	}
	return back, text
}

// checkRoundTrip holds Parse(Marshal(s)) == s, and the same bytes again.
func checkRoundTrip(t *testing.T, s *Study) {
	t.Helper()
	back, text := again(t, s)
	_, second := again(t, back)
	a, b := *s, *back
	a.places, b.places = nil, nil
	if !reflect.DeepEqual(a, b) {
		t.Errorf("read back\n%+v\nwas\n%+v\nfrom\n%s", b, a, text)
	}
	if !bytes.Equal(text, second) {
		t.Errorf("written again\n%s\nwas\n%s", second, text)
	}
}

func TestRoundTripOfKinds(t *testing.T) {
	for _, text := range []string{
		small, designed,
		small + "kind = \"yes-no\"\nsuccess = 1\n",
		small + "kind = \"yes-no\"\nsuccess = true\n[draws]\nwithin = []\n",
		small + "kind = \"count\"\nexposure = \"e\"\n",
		small + "kind = \"classes\"\n",
		"[table]\npath = \"t\"\nmissing = \"drop-rows\"\naccept_loss = true\n[outcome]\nkind = \"survival\"\ntime = \"t\"\nevent = \"e\"\nentry = \"s\"\nties = \"breslow\"\nstrata = [\"site\"]\n",
		"[table]\npath = \"t\"\n[outcome]\nkind = \"survival\"\ntime = \"t\"\nevent = \"e\"\nsuccess = 2\n",
		small + "[decision]\nselected = 3\nfalse_selections = 0.125\n",
		small + "[draws]\ndesign = \"bootstrap\"\n[decision]\nselected = 3\n",
	} {
		checkRoundTrip(t, parse(t, text))
	}
}

// oddText makes names of the characters that could break a TOML text.
func oddText(rng *rand.Rand) string {
	odd := []rune("ab.=#[]{}\"'\\,\n\r\t\x00\x1b\x7f \u00a0\u202e\ufeff\U000e0001é漢😀*?")
	r := make([]rune, 1+rng.IntN(6))
	for i := range r {
		r[i] = odd[rng.IntN(len(odd))]
	}
	return string(r)
}

func oddTexts(rng *rand.Rand) []string {
	list := make([]string, rng.IntN(12))
	for i := range list {
		list[i] = oddText(rng)
	}
	return list
}

// randomStudy draws every field from all that it may hold.
func randomStudy(rng *rand.Rand) *Study {
	s := Default()
	unit := func() float64 { return 1 - rng.Float64()*0.999 } // (0.001, 1]
	s.Table = Table{Path: oddText(rng), Missing: Missing(rng.IntN(4)), AcceptLoss: rng.IntN(2) == 0}
	s.Outcome.Column, s.Outcome.Offset, s.Outcome.CaseWeight = "y"+oddText(rng), "o"+oddText(rng), "w"+oddText(rng)
	s.Candidates.Take = append(oddTexts(rng), "*")
	s.Candidates.Leave, s.Candidates.Always, s.Candidates.Categories = oddTexts(rng), oddTexts(rng), oddTexts(rng)
	for range rng.IntN(4) {
		s.Candidates.Reference[oddText(rng)] = oddText(rng)
		s.Candidates.Groups[oddText(rng)] = append(oddTexts(rng), oddText(rng))
		s.Penalty.Relative[oddText(rng)] = math.Exp(40 * rng.NormFloat64())
	}
	s.Penalty.Mix, s.Penalty.Jitter = unit(), unit()
	s.Penalty.Scale, s.Penalty.GroupWeight = solver.Scale(rng.IntN(3)), GroupWeight(rng.IntN(2))
	s.Penalty.Ratio, s.Penalty.Floor = 0.999*unit(), 0.999*unit()
	s.Penalty.StopAfter = rng.IntN(1000)
	s.Draws = Draws{Number: 2 * (1 + rng.IntN(1000)), Seed: rng.Uint64() >> 1, Together: oddTexts(rng), Within: oddTexts(rng)}
	s.Decision.Region = selection.Region(1 + rng.IntN(2))
	s.Decision.Bound = selection.BoundName(1 + rng.IntN(3))
	three := []**float64{&s.Decision.Threshold, &s.Decision.Selected, &s.Decision.FalseSelections}
	for i, v := range []float64{0.5 + unit()/2, float64(1 + rng.IntN(99)), 10 * unit()} {
		*three[i] = &v
	}
	*three[rng.IntN(3)] = nil
	return &s
}

func TestRoundTripOfRandomStudies(t *testing.T) {
	for seed := range uint64(300) {
		s := randomStudy(rand.New(rand.NewPCG(seed, 1)))
		s.Source, s.Dir = "s.toml", "."
		if err := s.Check(); err != nil {
			t.Fatalf("seed %d: %v", seed, err)
		}
		checkRoundTrip(t, s)
		if t.Failed() {
			t.Fatalf("seed %d", seed)
		}
	}
}

// The library's decoder, which shares nothing with our reader but the
// grammar, finds every value where DESIGN section 7 says it stands.
func TestWrittenStudyForAnotherReader(t *testing.T) {
	s := randomStudy(rand.New(rand.NewPCG(7, 7)))
	s.Candidates.Groups = map[string][]string{"a.b": {"x\ny"}}
	text, err := s.Marshal()
	if err != nil {
		t.Fatal(err)
	}
	var got map[string]map[string]any
	if err := toml.Unmarshal(text, &got); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		section, key string
		want         any
	}{
		{"table", "path", s.Table.Path}, {"table", "missing", s.Table.Missing.String()}, {"table", "accept_loss", s.Table.AcceptLoss},
		{"outcome", "kind", "number"}, {"outcome", "column", s.Outcome.Column}, {"outcome", "offset", s.Outcome.Offset}, {"outcome", "case_weight", s.Outcome.CaseWeight},
		{"candidates", "take", anys(s.Candidates.Take)}, {"candidates", "leave", anys(s.Candidates.Leave)},
		{"candidates", "always", anys(s.Candidates.Always)}, {"candidates", "categories", anys(s.Candidates.Categories)},
		{"candidates", "groups", map[string]any{"a.b": []any{"x\ny"}}},
		{"penalty", "mix", s.Penalty.Mix}, {"penalty", "scale", s.Penalty.Scale.String()}, {"penalty", "jitter", s.Penalty.Jitter},
		{"penalty", "group_weight", s.Penalty.GroupWeight.String()}, {"penalty", "ratio", s.Penalty.Ratio}, {"penalty", "floor", s.Penalty.Floor},
		{"penalty", "stop_after", int64(s.Penalty.StopAfter)},
		{"draws", "design", "halves"}, {"draws", "number", int64(s.Draws.Number)}, {"draws", "seed", int64(s.Draws.Seed)},
		{"draws", "together", anys(s.Draws.Together)}, {"draws", "within", anys(s.Draws.Within)},
		{"decision", "region", s.Decision.Region.String()}, {"decision", "bound", s.Decision.Bound.String()},
	} {
		if !reflect.DeepEqual(got[c.section][c.key], c.want) {
			t.Errorf("%s.%s: got %#v, want %#v", c.section, c.key, got[c.section][c.key], c.want)
		}
	}
}

func anys(list []string) []any {
	out := []any{}
	for _, e := range list {
		out = append(out, e)
	}
	return out
}

// What is written down can be read in any editor: no control characters, no
// marks that turn the writing direction.
func TestWrittenStudyIsClean(t *testing.T) {
	for seed := range uint64(50) {
		text, err := randomStudy(rand.New(rand.NewPCG(seed, 2))).Marshal()
		if err != nil {
			t.Fatal(err)
		}
		if i := bytes.IndexAny(text, "\x00\x1b\x7f\r\t\u202e\ufeff"); i >= 0 {
			t.Fatalf("seed %d: %q", seed, text[max(0, i-20):i+5])
		}
	}
}

// Numbers are written as a user would: selected as a count, the rest as
// numbers with a point.
func TestWrittenNumbers(t *testing.T) {
	_, text := again(t, parse(t, small+"[decision]\nselected = 38.0\nthreshold = 1\n"))
	for _, want := range []string{"\nselected = 38 #", "\nthreshold = 1.0 #", "\nseed = 1 #", "\nmix = 1.0 #"} {
		if !strings.Contains(string(text), want) {
			t.Errorf("no %q in\n%s", want, text)
		}
	}
}

// A decision that waits for the number of candidates cannot be written.
func TestMarshalRefusesUnsettled(t *testing.T) {
	s := parse(t, small, "decision.threshold=0.9")
	if text, err := s.Marshal(); err == nil {
		t.Errorf("written:\n%s", text)
	}
	settled, _, err := s.Settle(100, 50, 0)
	if err != nil {
		t.Fatal(err)
	}
	checkRoundTrip(t, settled)
}

func TestCheckOfHandBuiltStudy(t *testing.T) {
	s := Default()
	if err := s.Check(); err == nil || !strings.Contains(err.Error(), "table.path") {
		t.Errorf("got %v", err)
	}
	s.Table.Path, s.Outcome.Column, s.Penalty.Mix = "t.csv", "y", math.NaN()
	s.Draws.Seed, s.Penalty.StopAfter = math.MaxUint64, -1
	err := s.Check()
	if fmt.Sprint(err) != "study: penalty.mix = nan: must be above 0 and at most 1\n"+
		"study: penalty.stop_after = -1: must not be negative\n"+
		"study: draws.seed = 18446744073709551615: must be at most 9223372036854775807" {
		t.Errorf("got %v", err)
	}
}
