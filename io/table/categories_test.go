package table

import (
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/apache/arrow/go/v17/arrow"
)

// rawX returns the columns of X with the centre added.
func rawX(d *Data) map[string][]float64 {
	out := map[string][]float64{}
	for k, name := range d.Names {
		v := slices.Clone(centred(d, k))
		for i := range v {
			v[i] += d.Centre[k]
		}
		out[name] = v
	}
	return out
}

func TestCategories(t *testing.T) {
	cols := larvae()
	r := Request{
		Outcome: Outcome{Column: "days"}, Candidates: []string{"site", "ph", "grade", "lost"}, Always: []string{"litres", "stage"},
		Categories: []string{"grade", "lost", "stage"}, Reference: map[string]string{"site": "south", "grade": "10.0"},
	}
	want := map[string]func(i int) bool{
		"site=north":    func(i int) bool { return cellsOf(cols, "site")[i] == "north" },
		"site=west":     func(i int) bool { return cellsOf(cols, "site")[i] == "west" },
		"grade=2":       func(i int) bool { return cellsOf(cols, "grade")[i] == 2 },
		"grade=3":       func(i int) bool { return cellsOf(cols, "grade")[i] == 3 },
		"lost=true":     func(i int) bool { return cellsOf(cols, "lost")[i] == true },
		"stage=spat":    func(i int) bool { return cellsOf(cols, "stage")[i] == "spat" },
		"stage=veliger": func(i int) bool { return cellsOf(cols, "stage")[i] == "veliger" },
	}
	prints := map[string]bool{}
	for _, path := range inEveryFormat(t, cols) {
		d := load(t, path, r)
		prints[d.Fingerprint] = true
		if got, want := fmt.Sprint(d.Names), "[site=north site=west ph grade=2 grade=3 lost=true litres stage=spat stage=veliger]"; got != want {
			t.Fatalf("columns %s, want %s", got, want)
		}
		if fmt.Sprint(d.Candidates, d.CandidateColumns) != "[site ph grade lost] [[0 1] [2] [3 4] [5]]" || fmt.Sprint(d.Always, d.AlwaysColumns) != "[litres stage] [[6] [7 8]]" {
			t.Errorf("candidates %v %v, always %v %v", d.Candidates, d.CandidateColumns, d.Always, d.AlwaysColumns)
		}
		raw := rawX(d)
		for name, is := range want {
			for i, v := range raw[name] {
				if math.Abs(v-map[bool]float64{true: 1}[is(i)]) > 1e-15 {
					t.Errorf("%s: %s row %d is %v", filepath.Base(path), name, i, v)
				}
			}
		}
		if got, want := fmt.Sprint(d.Categories), "[{site [{north 5} {south 4} {west 3}] south 0} {grade [{10 4} {2 5} {3 3}] 10 0} {lost [{false 7} {true 5}] false 0} {stage [{pediveliger 2} {spat 6} {veliger 4}] pediveliger 0}]"; got != want {
			t.Errorf("categories\n%s, want\n%s", got, want)
		}
	}
	if len(prints) != 1 {
		t.Errorf("%d fingerprints in three formats", len(prints))
	}
}

// A truth value as a category is the same column as read as a number.
func TestIndicatorsAreCentredAsNumbersAre(t *testing.T) {
	path := inEveryFormat(t, larvae())[0]
	number := load(t, path, Request{Candidates: []string{"lost"}})
	category := load(t, path, Request{Candidates: []string{"lost"}, Categories: []string{"lost"}})
	if number.Centre[0] != category.Centre[0] || number.Deviation[0] != category.Deviation[0] || !slices.Equal(centred(number, 0), centred(category, 0)) {
		t.Errorf("centres %v and %v, deviations %v and %v", number.Centre, category.Centre, number.Deviation, category.Deviation)
	}
	if number.Fingerprint == category.Fingerprint {
		t.Error("number and category have one fingerprint")
	}
}

func TestCategoriesThatCannotBe(t *testing.T) {
	cols := larvae()
	ids, feed := testColumn{"tank", arrow.BinaryTypes.String, nil}, testColumn{"feed", arrow.BinaryTypes.String, nil}
	many := testColumn{"serial", arrow.PrimitiveTypes.Int32, nil}
	for i := range 12 * 5 {
		ids.cells, many.cells = append(ids.cells, fmt.Sprint("tank ", i)), append(many.cells, i)
		feed.cells = append(feed.cells, "algae")
	}
	for k := range cols {
		c := cols[k].cells
		cols[k].cells = slices.Concat(c, c, c, c, c)
	}
	cols = append(cols, ids, feed, many)
	for _, path := range inEveryFormat(t, cols) {
		d := load(t, path, Request{Outcome: Outcome{Column: "days"}, Candidates: []string{"tank", "site", "ph", "feed"}})
		if got := fmt.Sprint(d.Candidates, d.Excluded); got != `[site ph] [{tank has more than 50 levels} {feed has one level, "algae", in all rows}]` {
			t.Errorf("candidates and those left out: %s", got)
		}
		d = load(t, path, Request{Outcome: Outcome{Column: "days"}, Candidates: []string{"ph"}, Always: []string{"feed", "site"}})
		if fmt.Sprint(d.Always, d.AlwaysColumns) != "[feed site] [[] [1 2]]" || !strings.Contains(fmt.Sprint(d.Notes), `always-in category "feed" has one level, "algae", and adds nothing`) {
			t.Errorf("always %v %v, notes %q", d.Always, d.AlwaysColumns, d.Notes)
		}
		for want, r := range map[string]Request{
			`column "tank": cannot be a candidate: has more than 50 levels`:           {Candidates: []string{"ph", "tank"}, Named: []string{"tank"}},
			`column "tank": cannot be an always-in column: has more than 50 levels`:   {Candidates: []string{"ph"}, Always: []string{"tank"}},
			`column "serial": cannot be a candidate: has more than 50 levels`:         {Candidates: []string{"ph", "serial"}, Categories: []string{"serial"}},
			`column "ph": cannot be a candidate: row 1 holds 8.1, and only text`:      {Candidates: []string{"ph"}, Categories: []string{"ph"}},
			`no candidate is left of 1: "tank" has more than 50 levels`:               {Candidates: []string{"tank"}},
			`column "site": no row has the reference level "East"; its levels are "`:  {Candidates: []string{"site"}, Reference: map[string]string{"site": "East"}},
			`"ph" has the reference level "8", and is no category`:                    {Candidates: []string{"ph", "site"}, Reference: map[string]string{"ph": "8"}},
			`"grade" is to be read as a category, and is neither a candidate nor an `: {Candidates: []string{"ph"}, Categories: []string{"grade"}},
		} {
			r.Outcome = Outcome{Column: "days"}
			_, err := tryLoad(t, path, r)
			wantError(t, err, want)
		}
	}
}

// Gaps of a category follow the policy for gaps.
func TestCategoriesWithGaps(t *testing.T) {
	cols := larvae()
	gappy := slices.Clone(cellsOf(cols, "site"))
	gappy[2], gappy[6] = nil, nil // north and west
	cols = append(cols, testColumn{"place", arrow.BinaryTypes.String, gappy}, testColumn{"void", arrow.BinaryTypes.String, make([]any, 12)})
	for k, path := range inEveryFormat(t, cols) {
		r := Request{Outcome: Outcome{Column: "days"}, Candidates: []string{"place", "ph"}}
		_, err := tryLoad(t, path, r)
		wantError(t, err, `1 column has missing, NaN or infinite values: "place" (2 missing)`, `"drop-rows" keeps 10 rows`, "fill-mean")
		r.Missing, r.AcceptLoss = DropRows, true
		d := load(t, path, r)
		if len(d.Rows) != 10 || fmt.Sprint(d.Categories[0].Levels) != "[{north 4} {south 4} {west 2}]" {
			t.Errorf("drop-rows: %d rows, levels %v", len(d.Rows), d.Categories)
		}
		r.Missing = FillMean
		d = load(t, path, r)
		if fmt.Sprint(d.Categories[0]) != "{place [{north 6} {south 4} {west 2}] north 2}" || d.Missing != nil || d.X.Holes(0) != nil ||
			d.Notes[0] != `fill-mean: 2 cells of category "place" take its most frequent level, "north"` {
			t.Errorf("fill-mean: %v, %v, notes %q", d.Categories, d.Missing, d.Notes)
		}
		if k < 2 { // in CSV nothing tells an empty column's kind
			r.Candidates = []string{"void", "ph"}
			if d = load(t, path, r); fmt.Sprint(d.Excluded) != "[{void no row has a value}]" {
				t.Errorf("excluded %v", d.Excluded)
			}
		}
	}
}

// A level that goes with the rows left out goes; a reference that goes with
// them is an error.
func TestLevelsOverTheRowsUsed(t *testing.T) {
	path := writeText(t, tempFile(t, "t.csv"), "y,feed,w\n1,a,1\n2,b,1\n3,a,1\n4,c,0\n5,b,1\n")
	r := Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"feed"}, Weight: "w"}
	if d := load(t, path, r); fmt.Sprint(d.Categories, d.Names) != "[{feed [{a 2} {b 2}] a 0}] [feed=b]" {
		t.Errorf("%v %v", d.Categories, d.Names)
	}
	r.Reference = map[string]string{"feed": "c"}
	_, err := tryLoad(t, path, r)
	wantError(t, err, `column "feed": no row has the reference level "c"; its levels are "a" (2 rows), "b" (2 rows)`)
}

// A column of numbers with a slip in it becomes a category, and is said so.
func TestSlipsAreSaid(t *testing.T) {
	path := writeText(t, tempFile(t, "t.csv"), "y,ph\n1,8\n2,8.1\n3,8\n4,8.1x\n")
	d := load(t, path, Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"ph"}})
	want := `column "ph" is read as a category: it is text: row 3 (line 5) holds "8.1x", not a number`
	if fmt.Sprint(d.Names) != "[ph=8.1 ph=8.1x]" || len(d.Notes) != 1 || d.Notes[0] != want {
		t.Errorf("columns %v, notes %q, want %q", d.Names, d.Notes, want)
	}
}

func TestWithin(t *testing.T) {
	cols := larvae()
	for _, path := range inEveryFormat(t, cols) {
		d := load(t, path, Request{Outcome: Outcome{Measure: AsYesNo, Column: "fate", Success: "alive"}, Candidates: []string{"ph", "grade"}, Always: []string{"site"}, Within: []string{"site", "outcome", "grade"}})
		for i, k := range d.Within {
			want := fmt.Sprintf("site=%v, outcome=%v, grade=%v", cellsOf(cols, "site")[i], cellsOf(cols, "fate")[i], cellsOf(cols, "grade")[i])
			if d.WithinLevels[k] != want {
				t.Errorf("row %d is in %s, want %s", i, d.WithinLevels[k], want)
			}
		}
		d = load(t, path, Request{Outcome: Outcome{Measure: AsClasses, Column: "stage"}, Candidates: []string{"ph"}, Within: []string{"outcome"}})
		if fmt.Sprint(d.WithinLevels) != "[outcome=pediveliger outcome=spat outcome=veliger]" || float64(d.Within[0]) != d.Outcome[0] {
			t.Errorf("strata %v, row 0 in %d", d.WithinLevels, d.Within[0])
		}
		for want, r := range map[string]Request{
			`rows cannot be drawn within "outcome": an outcome of kind count has no classes`: {Outcome: Outcome{Measure: AsCount, Column: "spat_count"}, Within: []string{"outcome"}},
			`"site" stands twice among the strata of the draws`:                              {Outcome: Outcome{Column: "days"}, Within: []string{"site", "site"}},
			`there is no column called "tide" (asked for as a stratum of the draws)`:         {Outcome: Outcome{Column: "days"}, Within: []string{"tide"}},
		} {
			r.Candidates = []string{"ph"}
			_, err := tryLoad(t, path, r)
			wantError(t, err, want)
		}
	}
	gaps := writeText(t, tempFile(t, "t.csv"), "y,x,site\n1,1,a\n2,4,\n3,2,b\n4,6,a\n")
	r := Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"x"}, Within: []string{"site"}}
	_, err := tryLoad(t, gaps, r)
	wantError(t, err, `column "site": the stratum of the draws is missing in row 1`)
	r.Always, r.Missing, r.AcceptLoss = []string{"site"}, DropRows, true
	if d := load(t, gaps, r); fmt.Sprint(d.Within, d.WithinLevels) != "[0 1 0] [site=a site=b]" {
		t.Errorf("%v %v", d.Within, d.WithinLevels)
	}
	r.Missing = FillMean
	if d := load(t, gaps, r); fmt.Sprint(d.Within, d.WithinLevels) != "[0 0 1 0] [site=a site=b]" {
		t.Errorf("%v %v", d.Within, d.WithinLevels)
	}
}

// Many strata are allowed, more than every second row is not.
func TestManyStrata(t *testing.T) {
	var b strings.Builder
	b.WriteString("y,x,pair,id\n")
	for i := range 4000 {
		fmt.Fprintf(&b, "%d,%d,pair %d,%d\n", i%7, i%11, i/2, i)
	}
	path := writeText(t, tempFile(t, "t.csv"), b.String())
	d := load(t, path, Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"x"}, Within: []string{"pair"}})
	if len(d.WithinLevels) != 2000 || d.WithinLevels[d.Within[3998]] != "pair=pair 1999" {
		t.Errorf("%d strata", len(d.WithinLevels))
	}
	for _, column := range []string{"id"} {
		_, err := tryLoad(t, path, Request{Outcome: Outcome{Column: "y"}, Candidates: []string{"x"}, Within: []string{column}})
		wantError(t, err, `column "id": cannot be a stratum of the draws: has more than 2,000 levels`)
	}
}

// What a fit is made of is in the fingerprint.
func TestFingerprintsTellQuestionsApart(t *testing.T) {
	path := inEveryFormat(t, larvae())[2]
	yes := Outcome{Measure: AsYesNo, Column: "fate", Success: "alive"}
	requests := []Request{
		{Outcome: yes, Candidates: []string{"ph", "site"}},
		{Outcome: Outcome{Measure: AsYesNo, Column: "fate", Success: "dead"}, Candidates: []string{"ph", "site"}},
		{Outcome: Outcome{Measure: AsClasses, Column: "fate"}, Candidates: []string{"ph", "site"}},
		{Outcome: yes, Candidates: []string{"ph"}, Always: []string{"site"}},
		{Outcome: yes, Candidates: []string{"ph", "site"}, Reference: map[string]string{"site": "west"}},
		{Outcome: yes, Candidates: []string{"ph", "site"}, Within: []string{"site"}},
		{Outcome: yes, Candidates: []string{"ph", "site"}, Within: []string{"grade"}},
		{Outcome: Outcome{Measure: AsYesNo, Column: "fate", Success: "alive", Offset: "shift"}, Candidates: []string{"ph", "site"}},
		{Outcome: Outcome{Column: "spat_count"}, Candidates: []string{"ph", "site"}},
		{Outcome: Outcome{Measure: AsCount, Column: "spat_count"}, Candidates: []string{"ph", "site"}},
		{Outcome: Outcome{Measure: AsCount, Column: "spat_count", Exposure: "litres"}, Candidates: []string{"ph", "site"}},
		{Outcome: Outcome{Measure: AsCount, Column: "spat_count", Offset: "litres"}, Candidates: []string{"ph", "site"}},
		{Outcome: Outcome{Measure: AsSurvival, Time: "days", Event: "settled"}, Candidates: []string{"ph", "site"}},
		{Outcome: Outcome{Measure: AsSurvival, Time: "days", Event: "settled", Success: "0"}, Candidates: []string{"ph", "site"}},
		{Outcome: Outcome{Measure: AsSurvival, Time: "days", Event: "settled", Entry: "joined"}, Candidates: []string{"ph", "site"}},
		{Outcome: Outcome{Measure: AsSurvival, Time: "days", Event: "settled", Strata: []string{"stage"}}, Candidates: []string{"ph", "site"}},
	}
	seen := map[string]int{}
	for k, r := range requests {
		print := load(t, path, r).Fingerprint
		if was, twice := seen[print]; twice {
			t.Errorf("requests %d and %d have one fingerprint", was, k)
		}
		seen[print] = k
	}
}
