package report

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
	"unicode"

	"github.com/apache/arrow/go/v17/arrow"

	"holdfast/selection"
)

// promisedTerms are the columns of terms.parquet in DESIGN 7.
const promisedTerms = "predictor, term, class, coef_low, coef_median, coef_high, selected_coef_low, selected_coef_median, selected_coef_high"

// tanks are predictors of the hatchery of every sort: single columns, a group,
// categories, one of them with two levels and so one term, and one that is
// never chosen.
func tanks(classes ...string) selection.Predictors {
	p := selection.Predictors{
		Names:   []string{"ph", "salinity", "feed", "pump", "asv_001", "shade"},
		Terms:   [][]string{nil, {"sal_05m", "sal_10m", "sal_20m"}, {"feed=oats", "feed=yeast \x1b[2J"}, {"pump=old"}, nil, {"shade=half", "shade=full"}},
		Classes: classes,
		Always:  []string{"spawn_day", "site=north"}, AlwaysDeviations: []float64{2, 0.5},
	}
	for i := range 10 {
		p.Deviations = append(p.Deviations, float64(i+1))
	}
	return p
}

// tankDraws invents draws of them, in which shade is never chosen.
func tankDraws(p selection.Predictors, n int) []selection.Draw {
	r := rand.New(rand.NewPCG(*seed, 5))
	chance := []float64{1, 0.95, 0.9, 0.85, 0.3, 0}
	classes := max(1, len(p.Classes))
	draws := make([]selection.Draw, n)
	for d := range draws {
		draw := selection.Draw{Number: d, Last: 1, Complete: true, Deviance: []float64{1, 0.5}, NullDeviance: 1}
		for k := range p.Names {
			if r.Float64() >= chance[k] {
				continue
			}
			draw.Entries = append(draw.Entries, selection.Entry{Predictor: int32(k), Step: 1, Negative: k == 4})
			for t := range max(1, len(p.Terms[k])) {
				for c := range classes {
					v := float64(t+1) + 10*float64(c) + 0.1*r.NormFloat64()
					draw.Coefs = append(draw.Coefs, selection.Coef{Step: 1, Predictor: int32(k), Term: int32(t), Class: int32(c), Value: v})
				}
			}
		}
		for range 2 * len(p.Always) * classes {
			draw.Always = append(draw.Always, 0.5+0.01*r.NormFloat64())
		}
		draws[d] = draw
	}
	return draws
}

func tankJudged(t testing.TB, p selection.Predictors, n int) *selection.Judgement {
	t.Helper()
	d := selection.Decision{Region: selection.Cap, Bound: selection.WorstCase, Threshold: 0.8, Selected: 5}
	j, err := selection.Judge(tankDraws(p, n), false, p, d)
	if err != nil {
		t.Fatal(err)
	}
	return j
}

var feeding = []string{"grazing", "lost", "settled"}

func TestGoldenTextsOfTerms(t *testing.T) {
	info := Info{Kind: "yes-no", Success: "lost", References: []Reference{{"feed", "algae"}, {"pump", "new"}, {"shade", "none"}, {"site", "east"}}}
	byClass := info
	byClass.Kind, byClass.FullTerms, byClass.PerSD = "classes", "oysters.run/terms.parquet", true
	for name, c := range map[string]struct {
		j     *selection.Judgement
		info  Info
		width int
	}{
		"terms":        {tankJudged(t, tanks(), 100), info, 80},
		"terms-narrow": {tankJudged(t, tanks(), 100), info, 60},
		"classes":      {tankJudged(t, tanks(feeding...), 100).PerSD(), byClass, 100},
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

// cellsOf are the values of a term by DESIGN 7, computed a second time from the
// draws, all of which have their regions' end at step 1.
func cellsOf(p selection.Predictors, draws []selection.Draw, k, term, class int) []any {
	var all, chosen []float64
	for _, d := range draws {
		v := 0.0
		for _, c := range d.Coefs {
			if int(c.Predictor) == k && int(c.Term) == term && int(c.Class) == class {
				v = c.Value
			}
		}
		all = append(all, v)
		if slices.ContainsFunc(d.Entries, func(e selection.Entry) bool { return int(e.Predictor) == k }) {
			chosen = append(chosen, v)
		}
	}
	row := []any{p.Names[k], p.Names[k], nil}
	if len(p.Terms[k]) > 0 {
		row[1] = p.Terms[k][term]
	}
	if len(p.Classes) > 0 {
		row[2] = p.Classes[class]
	}
	for _, values := range [][]float64{all, chosen} {
		slices.Sort(values)
		for _, mille := range []int{25, 500, 975} {
			if len(values) == 0 {
				row = append(row, nil)
				continue
			}
			row = append(row, quantile7(values, mille))
		}
	}
	return row
}

// quantile7 is type 7 of Hyndman and Fan (1996).
func quantile7(sorted []float64, mille int) float64 {
	at := (len(sorted) - 1) * mille
	i, g := at/1000, float64(at%1000)/1000
	if g == 0 {
		return sorted[i]
	}
	return sorted[i] + float64(g*(sorted[i+1]-sorted[i]))
}

// termsWanted are all rows of terms.parquet in order.
func termsWanted(p selection.Predictors, j *selection.Judgement, draws []selection.Draw) [][]any {
	var want [][]any
	for _, r := range j.Rows {
		k := r.Index
		if len(p.Terms[k]) == 0 && len(p.Classes) == 0 {
			continue
		}
		for term := range max(1, len(p.Terms[k])) {
			for class := range max(1, len(p.Classes)) {
				want = append(want, cellsOf(p, draws, k, term, class))
			}
		}
	}
	return want
}

// terms.parquet and the "terms" of the JSON hold the same, for every predictor
// without a coefficient of its own and for no other.
func TestTermsReadBack(t *testing.T) {
	for _, classes := range [][]string{nil, feeding} {
		p := tanks(classes...)
		j := tankJudged(t, p, 100)
		want := termsWanted(p, j, tankDraws(p, 100))
		if rows := map[bool]int{true: 8, false: 10 * 3}[classes == nil]; len(want) != rows {
			t.Fatalf("%d rows expected, not %d", len(want), rows)
		}
		var b, text bytes.Buffer
		if err := WriteTerms(&b, j); err != nil {
			t.Fatal(err)
		}
		table := readTable(t, b.Bytes())
		names := columnNames(table)
		if strings.Join(names, ", ") != promisedTerms || int(table.NumRows()) != len(want) {
			t.Fatalf("%v, %d rows for %d terms", names, table.NumRows(), len(want))
		}
		for i, f := range table.Schema().Fields() {
			if id := f.Type.ID(); (i < 3) != (id == arrow.STRING) || i >= 3 && id != arrow.FLOAT64 {
				t.Errorf("%s is %s", f.Name, f.Type)
			}
		}
		if err := JSON(&text, j, Info{}); err != nil {
			t.Fatal(err)
		}
		var top struct{ Terms []json.RawMessage }
		if err := json.Unmarshal(text.Bytes(), &top); err != nil || len(top.Terms) != len(want) {
			t.Fatalf("%d terms in the JSON, %v", len(top.Terms), err)
		}
		for i, row := range want {
			begins(t, "term", keys(t, top.Terms[i]), strings.Join(names, " "))
			var object map[string]any
			if err := json.Unmarshal(top.Terms[i], &object); err != nil {
				t.Fatal(err)
			}
			for k, name := range names {
				if got := cell(table, k, i); got != row[k] || object[name] != row[k] {
					t.Errorf("row %d, %s: %v in Parquet, %v in JSON, not %v", i, name, got, object[name], row[k])
				}
			}
		}
	}
}

// Where every predictor has one coefficient, which stands in the stability
// table, terms.parquet has its columns and no row.
func TestTermsWithoutAny(t *testing.T) {
	j := judged(t, hatchery(), 20, false, hatcheryDecision())
	var b, text bytes.Buffer
	if err := WriteTerms(&b, j); err != nil {
		t.Fatal(err)
	}
	if table := readTable(t, b.Bytes()); table.NumRows() != 0 || strings.Join(columnNames(table), ", ") != promisedTerms {
		t.Errorf("%d rows of %v", table.NumRows(), columnNames(table))
	}
	if err := JSON(&text, j, Info{}); err != nil || !strings.Contains(text.String(), `"terms":[]`) {
		t.Errorf("%v: %.300s", err, text.String())
	}
}

// The row of a predictor with terms, and every row where the outcome has
// classes, has neither coefficient nor sign (DESIGN 7), in every format.
func TestRowsOfTermsHaveNoCoefficient(t *testing.T) {
	for _, classes := range [][]string{nil, feeding} {
		p := tanks(classes...)
		j := tankJudged(t, p, 100)
		var table, text, file bytes.Buffer
		for _, err := range []error{WriteStabilityCSV(&table, j, false), JSON(&text, j, Info{}), WriteStabilityParquet(&file, j)} {
			if err != nil {
				t.Fatal(err)
			}
		}
		records, err := csv.NewReader(&table).ReadAll()
		if err != nil {
			t.Fatal(err)
		}
		var top struct{ Predictors []map[string]any }
		if err := json.Unmarshal(text.Bytes(), &top); err != nil {
			t.Fatal(err)
		}
		arrows := readTable(t, file.Bytes())
		for i, r := range j.Rows {
			several := len(p.Terms[r.Index]) > 0 || classes != nil
			for k, name := range promised[:len(promised)-1] {
				null := several && k >= 5 // positive_share and the six coefficients
				if r.Count == 0 && (k == 5 || k >= 9) {
					null = true
				}
				if records[i+1][k] == "" != null || top.Predictors[i][name] == nil != null || cell(arrows, k, i) == nil != null {
					t.Errorf("classes %v, %s, %s: %q, %v, %v", classes, r.Predictor, name, records[i+1][k], top.Predictors[i][name], cell(arrows, k, i))
				}
			}
		}
	}
}

// The "always" of the JSON has an object for each column and class; the values
// scatter around 0.5, those of step 1 alone count.
func TestAlwaysByClass(t *testing.T) {
	for _, classes := range [][]string{nil, feeding} {
		p := tanks(classes...)
		j := tankJudged(t, p, 100)
		var text bytes.Buffer
		if err := JSON(&text, j, Info{References: []Reference{{"site", "east"}}}); err != nil {
			t.Fatal(err)
		}
		var top struct {
			Classes    []string
			References []map[string]string
			Always     []map[string]any
		}
		if err := json.Unmarshal(text.Bytes(), &top); err != nil {
			t.Fatal(err)
		}
		if !slices.Equal(top.Classes, classes) || len(top.References) != 1 || top.References[0]["predictor"] != "site" || top.References[0]["level"] != "east" {
			t.Errorf("classes %v, references %v", top.Classes, top.References)
		}
		c := max(1, len(classes))
		if len(top.Always) != len(p.Always)*c {
			t.Fatalf("%d objects", len(top.Always))
		}
		for i, row := range top.Always {
			var class any
			if classes != nil {
				class = classes[i%c]
			}
			var values []float64
			for _, d := range tankDraws(p, 100) {
				values = append(values, d.Always[len(p.Always)*c+i])
			}
			slices.Sort(values)
			if row["predictor"] != p.Always[i/c] || row["class"] != class || row["coef_low"] != quantile7(values, 25) ||
				row["coef_median"] != quantile7(values, 500) || row["coef_high"] != quantile7(values, 975) {
				t.Errorf("object %d: %v", i, row)
			}
		}
	}
}

// Draws made anew are counted for programs and said to people.
func TestRedrawnIsReported(t *testing.T) {
	p := tanks()
	draws := tankDraws(p, 20)
	for i := range draws[:6] {
		draws[i].Redraws = 1 + i/2
	}
	j, err := selection.Judge(draws, false, p, selection.Decision{Region: selection.Cap, Bound: selection.WorstCase, Threshold: 0.8, Selected: 5})
	if err != nil {
		t.Fatal(err)
	}
	var text bytes.Buffer
	if err := JSON(&text, j, Info{}); err != nil || !strings.Contains(text.String(), `"redrawn":6,"most_redraws":3`) {
		t.Errorf("%v: %s", err, text.String())
	}
	if page := strings.Join(strings.Fields(written(t, j, Info{}, 80, false)), " "); !strings.Contains(page, "3 of 10 pairs of halves were drawn anew (up to 3 times)") {
		t.Error(page)
	}
}

// The text lists the terms of stable predictors, and of those that are many
// the first ones.
func TestTextListsTerms(t *testing.T) {
	const panels, each = 12, 15
	p := selection.Predictors{}
	var draws [2]selection.Draw
	for i := range draws {
		draws[i] = selection.Draw{Number: i, Last: 1, Complete: true}
	}
	for k := range panels {
		p.Names = append(p.Names, fmt.Sprint("panel", k))
		p.Terms = append(p.Terms, nil)
		for term := range each {
			p.Terms[k] = append(p.Terms[k], fmt.Sprintf("asv_%d_%d", k, term))
			p.Deviations = append(p.Deviations, 1)
		}
		for i := range draws {
			draws[i].Entries = append(draws[i].Entries, selection.Entry{Predictor: int32(k), Step: 1})
			for term := range each {
				draws[i].Coefs = append(draws[i].Coefs, selection.Coef{Step: 1, Predictor: int32(k), Term: int32(term), Value: 1})
			}
		}
	}
	j, err := selection.Judge(draws[:], false, p, selection.Decision{Region: selection.Cap, Bound: selection.WorstCase, Threshold: 1, Selected: panels})
	if err != nil {
		t.Fatal(err)
	}
	text := written(t, j, Info{Copies: []Copy{{"asv_0_0_again", "asv_0_0"}}}, 80, false)
	for want, times := range map[string]int{"asv_4_11": 1, "asv_4_12": 0, "asv_5_0": 0, "3 more": 5, "and 7 predictors more, see terms.parquet": 1, "up to shift and scale: asv_0_0_again": 1} {
		if n := strings.Count(strings.Join(strings.Fields(text), " "), want); n != times {
			t.Errorf("%q stands %d times, not %d, in\n%s", want, n, times, text)
		}
	}
	none := tankJudged(t, selection.Predictors{Names: tanks().Names, Terms: tanks().Terms, Deviations: tanks().Deviations, Always: tanks().Always, AlwaysDeviations: tanks().AlwaysDeviations}, 2)
	none.Stable = 0
	if text := written(t, none, Info{FullTerms: "x.run/terms.parquet"}, 80, false); !strings.Contains(text, "The coefficients of terms stand in x.run/terms.parquet") {
		t.Error(text)
	}
}

// Names of terms and classes are data: no line is wider than the window, and
// none holds what a terminal obeys.
func TestTermsAtAnyWidth(t *testing.T) {
	r := rand.New(rand.NewPCG(*seed, 9))
	parts := []string{"\x1b[2J", "\n", "\u202e", "\xff", "水槽", "e\u0301", "a", "_", strings.Repeat("x", 50)}
	name := func(i int) string {
		text := strconv.Itoa(i)
		for range r.IntN(5) {
			text += parts[r.IntN(len(parts))]
		}
		return text
	}
	for round := range 40 {
		p := tanks()
		if round%2 == 0 {
			p.Classes = []string{name(0), name(1), name(2)}
		}
		for k := range p.Names {
			p.Names[k] = name(k)
			for i := range p.Terms[k] {
				p.Terms[k][i] = name(i)
			}
		}
		p.Always = []string{name(7), name(8)}
		j := tankJudged(t, p, 20)
		info := Info{ASCII: round%3 == 0, PerSD: round%5 == 0, References: []Reference{{name(1), name(2)}}, FullTerms: "x"}
		cells := leastWidth + r.IntN(70)
		for i, line := range strings.Split(strings.TrimSuffix(written(t, j, info, cells, false), "\n"), "\n") {
			if width(line) > cells || strings.ContainsFunc(line, func(r rune) bool { return !unicode.IsPrint(r) }) {
				t.Fatalf("line %d takes %d cells of %d: %q", i, width(line), cells, line)
			}
		}
	}
}

// Every kind says what its coefficients change, and a number says nothing,
// because they change the outcome itself.
func TestScaleOfCoefficients(t *testing.T) {
	j := judged(t, hatchery(), 20, false, hatcheryDecision())
	for kind, want := range map[string]string{"yes-no": "the log odds of the level counted as 1", "count": "logarithm of the expected count",
		"classes": "logarithm of a class's chance", "survival": "logarithm of the hazard: a positive one means that the event comes sooner", "number": ""} {
		text := strings.Join(strings.Fields(written(t, j, Info{Kind: kind}, 100, false)), " ")
		if said := strings.Contains(text, "They are changes of"); said != (want != "") || !strings.Contains(text, want) {
			t.Errorf("%s: %s", kind, text)
		}
	}
}
