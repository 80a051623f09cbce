package report

import (
	"bytes"
	"flag"
	"math/rand/v2"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"unicode"

	"holdfast/selection"
)

var update = flag.Bool("update", false, "write the golden texts anew")

func written(t testing.TB, j *selection.Judgement, info Info, width int, colour bool) string {
	t.Helper()
	var b bytes.Buffer
	if err := Text(&b, j, info, width, colour); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// The golden texts are read by people before they are kept; what they say is
// checked number by number in TestTextSaysWhatTheJudgementSays.
func TestGoldenTexts(t *testing.T) {
	list := hatchery()
	record := hatcheryDecision()
	explored := hatcheryDecision()
	explored.Threshold, explored.Region, explored.Bound = 0.9, selection.Common, selection.RConcave
	strict := hatcheryDecision()
	strict.Threshold, strict.Selected, strict.Bound = 1, 2, selection.WorstCase
	plain := Info{Outcome: "survival_d21", Kind: "number"}
	for name, c := range map[string]struct {
		j     *selection.Judgement
		info  Info
		width int
	}{
		"halves": {judged(t, list, 200, false, record), Info{Record: &record, Copies: []Copy{{"salinity_ppt", "salinity_psu"}},
			Warnings: []string{"batch \"7\" was read twice\x07"}}, 80},
		"wide":      {judged(t, list, 200, false, record).PerSD(), Info{PerSD: true, Full: "stability-copy.csv"}, 132},
		"explored":  {judged(t, list, 200, false, explored), Info{Record: &record}, 100},
		"narrow":    {judged(t, list, 200, false, record), Info{}, 60},
		"bootstrap": {judged(t, list, 100, true, record), plain, 0},
		"ascii":     {judged(t, list, 200, false, record), Info{ASCII: true}, 80},
		"none":      {judged(t, list[4:], 200, false, strict), plain, 80},
		"single":    {judged(t, list[:1], 10, false, selection.Decision{Region: selection.Cap, Bound: selection.Unimodal, Threshold: 0.9, Selected: 1}), plain, 80},
		"nothing":   {judged(t, []panel{{"ph", 0, 0}}, 10, false, selection.Decision{Region: selection.Cap, Bound: selection.Unimodal, Threshold: 0.9, Selected: 1}), plain, 80},
	} {
		path := filepath.Join("testdata", name+".txt")
		got := written(t, c.j, c.info, c.width, false)
		if *update {
			if err := os.WriteFile(path, []byte(got), 0o644); err != nil {
				t.Fatal(err)
			}
		}
		want, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		if got != string(want) {
			t.Errorf("%s: the text is now\n%s", path, got)
		}
	}
}

// What DESIGN 4 and 7 want to see in the text, looked for with numbers taken
// from the judgement.
func TestTextSaysWhatTheJudgementSays(t *testing.T) {
	d := hatcheryDecision()
	j := judged(t, hatchery(), 200, false, d)
	text := strings.Join(strings.Fields(written(t, j, Info{}, 120, false)), " ")
	for _, want := range []string{
		strconv.Itoa(j.Stable) + " of 41 candidates are stable: chosen in at least 160 of 200 draws",
		"Expected by luck: at most " + selection.AtMost(*j.Bounds.Of(selection.Unimodal).FalseSelections) + " (one-hump assumption)",
		"Without that assumption: at most " + selection.AtMost(*j.Bounds.Of(selection.WorstCase).FalseSelections),
		selection.AtMost(*j.Bounds.Of(selection.RConcave).FalseSelections) + " one-hump assumption with falling tails",
		"At most 8 predictors can be stable: 7 x 200 / 160",
		"on average " + number3(j.MeanSelected) + ".",
		"The cap was binding in " + strconv.Itoa(j.CapBinding) + " of 200 draws.",
		"description, not a confidence interval",
		"salinity_psu " + strconv.Itoa(j.Rows[0].Count),
		"could change sides with other draws (" + strconv.Itoa(j.CouldChange) + " in all)",
		"see stability.csv",
		selection.Unimodal.Assumes(), selection.MonteCarlo,
		"Selection is not causation. A frequency is not the probability that a predictor matters.",
		"health or safety", "local rules or licensed practice",
	} {
		if !strings.Contains(text, want) {
			t.Errorf("the text does not say %q", want)
		}
	}
	if strings.Contains(text, "Explored") {
		t.Error("the decision of record is called explored")
	}
	for i, r := range j.Rows[:cut(j)] {
		if marked := strings.Contains(text, "~ "+head(clean(r.Predictor), 9)); marked != r.CouldChange {
			t.Errorf("row %d, %s: marked %v, could change %v", i, r.Predictor, marked, r.CouldChange)
		}
	}
}

func TestBootstrapHasNoBoundAndSaysSo(t *testing.T) {
	j := judged(t, hatchery(), 100, true, hatcheryDecision())
	text := written(t, j, Info{}, 100, false)
	if !strings.Contains(text, "no bound can be given (bootstrap draws overlap") || strings.Contains(text, "at most 0") {
		t.Error(text)
	}
}

var escapes = regexp.MustCompile("\x1b\\[[0-9;]*m")

func TestColourChangesNoWord(t *testing.T) {
	j := judged(t, hatchery(), 200, false, hatcheryDecision())
	plain, painted := written(t, j, Info{}, 100, false), written(t, j, Info{}, 100, true)
	if strings.Contains(plain, "\x1b") {
		t.Error("escape sequences without colour")
	}
	if !strings.Contains(painted, "\x1b[1m") {
		t.Error("no escape sequences with colour")
	}
	if escapes.ReplaceAllString(painted, "") != strings.ReplaceAll(plain, "\x1b", "") {
		t.Errorf("with colour the text is\n%s", painted)
	}
}

// No name, whatever is in it, reaches the terminal as a command or breaks the
// table; no line is wider than the window.
func TestHostileNames(t *testing.T) {
	r := rand.New(rand.NewPCG(*seed, 7))
	parts := []string{"\x1b]0;owned\x07", "\x1b[2J", "\n", "\r", "\t", "\u202e", "\u200b", "\x9b31m", "\xff\xfe", "水槽", "é", "e\u0301", "👩‍🔬", "a", "_", "\u0000", "\u2028", strings.Repeat("x", 60), "\uFFFD"}
	for round := range 60 {
		list := hatchery()[:12]
		for i := range list {
			name := strconv.Itoa(i)
			for range r.IntN(5) {
				name += parts[r.IntN(len(parts))]
			}
			list[i].name = name
		}
		j := judged(t, list, 20, false, hatcheryDecision())
		info := Info{Warnings: []string{list[0].name}, Copies: []Copy{{list[1].name, list[2].name}}, ASCII: round%2 == 0}
		cells := 60 + r.IntN(76)
		for i, line := range strings.Split(strings.TrimSuffix(written(t, j, info, cells, false), "\n"), "\n") {
			if strings.ContainsFunc(line, func(r rune) bool { return !unicode.IsPrint(r) }) {
				t.Fatalf("line %d: %q", i, line)
			}
			if width(line) > cells {
				t.Fatalf("line %d takes %d cells of %d: %q", i, width(line), cells, line)
			}
		}
	}
}

func TestTextAtAnyWidth(t *testing.T) {
	j := judged(t, hatchery(), 20, false, hatcheryDecision())
	for _, cells := range []int{-1, 0, 1, 20, 59, 60, 61, 80, 500} {
		if text := written(t, j, Info{}, cells, true); !strings.Contains(text, "candidates") {
			t.Errorf("width %d: %s", cells, text)
		}
	}
	many := judged(t, hatchery(), 2000, false, hatcheryDecision())
	for cells := leastWidth; cells < 200; cells++ {
		for _, info := range []Info{{}, {PerSD: true}, {ASCII: true}} {
			for i, line := range strings.Split(written(t, many, info, cells, false), "\n") {
				if width(line) > cells {
					t.Errorf("line %d takes %d cells of %d: %q", i, width(line), cells, line)
				}
			}
		}
	}
}

func TestCutShowsWhatCouldChange(t *testing.T) {
	rows := func(counts ...int) *selection.Judgement {
		j := &selection.Judgement{}
		for _, n := range counts {
			r := selection.Row{Count: n, Stable: n >= 80, CouldChange: n >= 70 && n < 90}
			j.Rows = append(j.Rows, r)
			if r.Stable {
				j.Stable++
			}
		}
		return j
	}
	repeat := func(n, times int) []int {
		list := make([]int, times)
		for i := range list {
			list[i] = n
		}
		return list
	}
	for name, c := range map[string]struct {
		counts []int
		want   int
	}{
		"ten more":           {append([]int{100, 90}, repeat(20, 50)...), 12},
		"all that change":    {append(append([]int{100}, repeat(75, 20)...), repeat(5, 50)...), 21},
		"up to a limit":      {append([]int{100}, repeat(75, 90)...), 31},
		"all stable":         {repeat(100, 70), 70},
		"none never chosen":  {[]int{100, 50, 0, 0}, 2},
		"nothing to be seen": {[]int{0, 0}, 0},
	} {
		if got := cut(rows(c.counts...)); got != c.want {
			t.Errorf("%s: %d rows, not %d", name, got, c.want)
		}
	}
}

func TestNumbersAtAGlance(t *testing.T) {
	for v, want := range map[float64]string{0: "0", -1234.5: "-1230", 0.4125: "0.412", 999.6: "1000", 12: "12", 123456789: "1.23e+08", 0.000123456: "0.000123"} {
		if got := number3(v); got != want {
			t.Errorf("%v is written %s, not %s", v, got, want)
		}
	}
	if got := short(147.2, 2); got != "150" {
		t.Errorf("two digits of 147.2: %s", got)
	}
}

func TestShorten(t *testing.T) {
	for _, c := range []struct {
		text  string
		cells int
		want  string
	}{
		{"salinity", 8, "salinity"}, {"salinity_psu", 8, "sali…psu"}, {"水槽の温度計", 7, "水…計"}, {"ab", 1, "a"}, {"水", 1, ""}, {"abc", 0, ""},
	} {
		if got := shorten(c.text, c.cells, "…"); got != c.want || width(got) > c.cells {
			t.Errorf("%q in %d cells: %q, not %q", c.text, c.cells, got, c.want)
		}
	}
}

func TestClean(t *testing.T) {
	for text, want := range map[string]string{
		"ph": "ph", "a b": "a b", "a\tb": `a\x09b`, "\x1b[31m": `\x1b[31m`, "\u202eph": `\u202eph`, "\xff": `\xff`, "\uFFFD": "\uFFFD", "水": "水", "\U000e0001": `\U000e0001`,
	} {
		if got := clean(text); got != want {
			t.Errorf("%q becomes %q, not %q", text, got, want)
		}
	}
}

// The bar of a predictor that is not stable ends before the tick, however
// close it came; that of a stable one covers it.
func TestBarAgainstTheThreshold(t *testing.T) {
	for _, cells := range []int{6, 7, 10, 24} {
		for need := 101; need <= 200; need++ {
			p := &page{j: &selection.Judgement{Attained: float64(need) / 200}, info: Info{ASCII: true}}
			below := p.bar(&selection.Row{Frequency: float64(need-1) / 200}, cells)
			above := p.bar(&selection.Row{Frequency: float64(need) / 200, Stable: true}, cells)
			if !strings.HasSuffix(below, "|") || width(below) > cells {
				t.Fatalf("%d of %d cells, below: %q", need, cells, below)
			}
			if strings.Contains(above, "|") || strings.Trim(above, "#") != "" || width(above) < width(below) {
				t.Fatalf("%d of %d cells: %q below, %q above", need, cells, below, above)
			}
		}
	}
}
