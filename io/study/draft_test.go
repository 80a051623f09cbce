package study

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
	"testing"

	"github.com/pelletier/go-toml/v2"

	"holdfast/selection"
)

// factsOf is a table of plain columns x0, x1, ... and the outcome y.
func factsOf(rows, candidates int, more ...Fact) Facts {
	f := Facts{Path: "t.parquet", Source: "study.toml", Outcome: "y", Rows: int64(rows), Incomplete: -1}
	f.Columns = append(f.Columns, Fact{Column: Column{"y", true, "", false}})
	for i := range candidates {
		f.Columns = append(f.Columns, Fact{Column: Column{fmt.Sprintf("x%d", i), true, "", false}, Min: -3.5, Max: 3.5})
	}
	f.Columns = append(f.Columns, more...)
	return f
}

// drafted drafts, and holds what every draft promises: it runs unchanged.
func drafted(t *testing.T, f Facts) (string, *Study, *Roles) {
	t.Helper()
	text, s, err := Draft(f)
	if err != nil {
		t.Fatalf("Draft: %v", err)
	}
	if err := s.CheckReady(); err != nil {
		t.Fatalf("not ready: %v\n%s", err, text)
	}
	var cols []Column
	for _, c := range f.Columns {
		cols = append(cols, c.Column)
	}
	r, err := s.Resolve(cols)
	if err != nil {
		t.Fatalf("Resolve: %v\n%s", err, text)
	}
	return string(text), s, r
}

// luckBy is the bound written out from STATISTICS sections 1 and 2.2: theorem
// 1 of Meinshausen and Buhlmann (2010), and the unimodal bound of Shah and
// Samworth (2013), for 100 pairs.
func luckBy(bound selection.BoundName, q, p, threshold float64) float64 {
	if bound == selection.WorstCase {
		return q * q / ((2*threshold - 1) * p)
	}
	const pairs = 100
	j := math.Ceil(2*pairs*threshold-1e-9) - pairs
	if 2*j-1 <= pairs {
		return pairs / (2*j - 1) * q * q / p
	}
	return 2 * (pairs - j + 1) / (pairs + 1) * q * q / p
}

// DESIGN section 7, "draft by shape", over tables from 4 rows and 1 candidate.
func TestDraftByShape(t *testing.T) {
	for _, rows := range []int{4, 5, 8, 12, 30, 31, 60, 200, 240, 1000, 20_000, 1_000_000} {
		for _, p := range []int{1, 2, 3, 5, 8, 9, 12, 30, 49, 50, 51, 99, 100, 101, 401, 1200, 1201, 30_000} {
			if p*rows > 1e11 {
				continue
			}
			checkShape(t, rows, p)
		}
	}
}

func checkShape(t *testing.T, rows, p int) {
	t.Helper()
	u := rows / 2
	threshold, bound, floor := 0.8, selection.Unimodal, 0.005
	switch {
	case p >= 10*u:
		threshold, bound, floor = 0.6, selection.WorstCase, 0.01
	case float64(p) < float64(u)/10:
		threshold, floor = 0.9, 0.001
	}
	target := 1.0
	if p < 50 {
		target = float64(p) / 50
	}
	text, s, r := drafted(t, factsOf(rows, p))
	name := fmt.Sprintf("%d rows, %d candidates", rows, p)
	d := s.Decision
	if p == 1 && d.Bound == selection.WorstCase {
		bound = selection.WorstCase // the unimodal bound needs q/p <= 1/sqrt(3)
	}
	if *d.Threshold != threshold || d.Bound != bound || s.Penalty.Floor != floor || d.Selected == nil || d.FalseSelections != nil {
		t.Errorf("%s: got threshold %v, %v, floor %v; want %v, %v, %v", name, *d.Threshold, d.Bound, s.Penalty.Floor, threshold, bound, floor)
		return
	}
	q := *d.Selected
	luck := luckBy(bound, q, float64(p), threshold)
	most := math.Max(1, float64(u/3))
	switch {
	case q < 1 || q != math.Trunc(q) || q > most:
		t.Errorf("%s: selected %v, most %v", name, q, most)
	case q > 1 && luck > target*(1+1e-9):
		t.Errorf("%s: selected %v gives %v false selections, wanted %v", name, q, luck, target)
	case q < most && luckBy(bound, q+1, float64(p), threshold) < target*(1-1e-9) && (q+1)/float64(p) < 0.57:
		t.Errorf("%s: selected could be more than %v", name, q)
	}
	if said := saidLuck(t, text); said < luck*(1-1e-9) || said > 1.011*luck { // three digits are written, rounded up
		t.Errorf("%s: false_selections = %v is said, want %v", name, said, luck)
	}
	if raised := strings.Contains(text, "was aimed at"); raised != (luck > target*(1+1e-9)) {
		t.Errorf("%s: raised %v, luck %v, target %v", name, raised, luck, target)
	}
	if got := strings.Contains(text, "ordinary regression answers better"); got != (p <= 8) {
		t.Errorf("%s: regression %v", name, got)
	}
	if got := strings.Contains(text, "only overwhelming effects"); got != (u <= 15) {
		t.Errorf("%s: overwhelming %v", name, got)
	}
	settled, decision, err := s.Settle(len(r.Candidates), u, 0)
	if err != nil || decision.Selected != int(q) || math.Abs(*decision.FalseSelections-luck) > 1e-9*luck {
		t.Errorf("%s: settled %+v, %v; want %v and %v", name, decision, err, q, luck)
		return
	}
	if settled.Penalty.StopAfter < decision.Selected {
		t.Errorf("%s: paths stop after %d", name, settled.Penalty.StopAfter)
	}
}

// saidLuck reads the false selections that a draft states as a comment.
func saidLuck(t *testing.T, text string) float64 {
	t.Helper()
	_, after, found := strings.Cut(text, "# false_selections = ")
	said, _, _ := strings.Cut(after, ":")
	x, err := strconv.ParseFloat(said, 64)
	if !found || err != nil {
		t.Fatalf("no false_selections in\n%s", text)
	}
	return x
}

// whole makes a whole-numbered column with every value once.
func whole(name string, low, high float64, rising bool) Fact {
	return Fact{Column: Column{name, true, "", false}, Whole: true, Unique: true, Rising: rising, Min: low, Max: high}
}

// DESIGN section 9: what would mislead is flagged, and identifiers and leaks
// are left out.
func TestFlags(t *testing.T) {
	usable := func(name string) Column { return Column{name, true, "", false} }
	for _, c := range []struct {
		name string
		fact Fact
		kind FlagKind
		left bool
		none bool
	}{
		{name: "plain", fact: Fact{Column: usable("a")}, none: true},
		{name: "correlation of a leak", fact: Fact{Column: usable("a"), R: number(-0.98)}, kind: FlagLeak, left: true},
		{name: "high correlation", fact: Fact{Column: usable("a"), R: number(0.979)}, none: true},
		{name: "AUC of a leak", fact: Fact{Column: usable("a"), AUC: number(0.951)}, kind: FlagLeak, left: true},
		{name: "AUC of a leak turned round", fact: Fact{Column: usable("a"), AUC: number(0.049)}, kind: FlagLeak, left: true},
		{name: "high AUC", fact: Fact{Column: usable("a"), AUC: number(0.95)}, none: true},
		{name: "row number", fact: whole("a", 0, 199, true), kind: FlagIdentifier, left: true},
		{name: "rising numbers", fact: whole("a", 5, 90_000, true), kind: FlagIdentifier, left: true},
		{name: "shuffled numbers of rows", fact: whole("a", 1, 200, false), kind: FlagIdentifier, left: true},
		{name: "named as identifier", fact: whole("batch_id", 1, 1e6, false), kind: FlagIdentifier, left: true},
		{name: "named as identifier too", fact: whole("tankID", 1, 1e6, false), kind: FlagIdentifier, left: true},
		{name: "ends like one", fact: whole("humid", 1, 1e6, false), kind: FlagUnique},
		{name: "unique count", fact: whole("reads", 1, 1e6, false), kind: FlagUnique},
		{name: "count", fact: Fact{Column: usable("reads"), Whole: true, Max: 100}, none: true},
		{name: "date", fact: Fact{Column: usable("day"), Whole: true, Date: true}, kind: FlagDate},
		{name: "nested", fact: Fact{Column: Column{"notes", false, "nested", false}}, kind: FlagUnusable},
		{name: "constant", fact: Fact{Column: usable("a"), Constant: true, Whole: true}, kind: FlagConstant},
		{name: "empty", fact: Fact{Column: usable("a"), Missing: 200}, kind: FlagEmpty, left: true},
	} {
		f := factsOf(200, 20, c.fact)
		flags, err := f.Flags()
		if err != nil {
			t.Fatal(err)
		}
		switch {
		case c.none && len(flags) == 0:
			continue
		case c.none, len(flags) != 1:
			t.Errorf("%s: got %+v", c.name, flags)
			continue
		}
		if g := flags[0]; g.Kind != c.kind || g.Left != c.left || g.Column != c.fact.Name || g.Text == "" {
			t.Errorf("%s: got %+v", c.name, g)
		}
		text, _, r := drafted(t, f)
		if !strings.Contains(text, flags[0].Text) {
			t.Errorf("%s: the draft does not say %q", c.name, flags[0].Text)
		}
		isCandidate := r.Candidates[len(r.Candidates)-1] == c.fact.Name
		if isCandidate != (c.fact.Usable && !c.left) {
			t.Errorf("%s: candidate %v", c.name, isCandidate)
		}
	}
}

// Rows that depend on each other void the bounds: series and repeats are said,
// the order of a few rows is not.
func TestFlagsOfRows(t *testing.T) {
	said := func(rows int, change func(f *Facts)) []Flag {
		f := factsOf(rows, 20)
		change(&f)
		flags, err := f.Flags()
		if err != nil {
			t.Fatal(err)
		}
		if text, _, _ := drafted(t, f); len(flags) > 0 && !strings.Contains(text, flags[0].Text) {
			t.Errorf("the draft does not say %q", flags[0].Text)
		}
		return flags
	}
	walk := func(columns int) func(f *Facts) {
		return func(f *Facts) {
			for i := 1; i <= columns; i++ {
				f.Columns[i].Serial = number(0.9)
			}
		}
	}
	for name, c := range map[string]struct {
		flags []Flag
		kind  FlagKind
		text  string
	}{
		"an outcome in time":     {said(200, func(f *Facts) { f.Columns[0].Serial = number(0.9); walk(3)(f) }), FlagSeries, "alike in the outcome and 3 of 20 candidates"},
		"candidates in time":     {said(200, walk(10)), FlagSeries, "alike in 10 of 20 candidates"},
		"few candidates in time": {said(200, walk(9)), FlagShape, ""},
		"by chance":              {said(60, func(f *Facts) { f.Columns[0].Serial = number(0.5) }), FlagShape, ""},
		"no order":               {said(2000, func(f *Facts) { f.Columns[0].Serial = number(0.4) }), FlagShape, ""},
		"repeats":                {said(200, func(f *Facts) { f.Repeats = 3 }), FlagRepeats, "3 rows are equal to an earlier one"},
		"one repeat":             {said(200, func(f *Facts) { f.Repeats = 1 }), FlagRepeats, "1 row is equal to an earlier one"},
	} {
		switch {
		case c.text == "" && len(c.flags) == 0:
		case len(c.flags) != 1 || c.flags[0].Kind != c.kind || !strings.Contains(c.flags[0].Text, c.text):
			t.Errorf("%s: %+v", name, c.flags)
		}
	}
}

// Small tables have columns of counts that look like identifiers by chance.
func TestSmallTablesHaveNoIdentifiersByChance(t *testing.T) {
	flags, err := factsOf(7, 20, whole("a", 0, 6, true), whole("b", 0, 9, false)).Flags()
	if err != nil || len(flags) != 1 || flags[0].Kind != FlagShape {
		t.Errorf("got %+v, %v", flags, err)
	}
}

func TestDraftOfTwoValuedOutcome(t *testing.T) {
	f := factsOf(200, 20)
	f.Columns[0].TwoValued = true
	flags, err := f.Flags()
	if err != nil || len(flags) != 1 || flags[0].Kind != FlagOutcome || flags[0].Column != "y" {
		t.Errorf("got %+v, %v", flags, err)
	}
	if text, _, _ := drafted(t, f); !strings.Contains(text, flags[0].Text) {
		t.Errorf("not said in\n%s", text)
	}
}

// The treatment of missing values is such that the study runs, as io/table
// understands it: nothing missing under refuse, at most a tenth of the rows
// lost under drop-rows, no infinite value under fill-mean.
func TestDraftOfMissingValues(t *testing.T) {
	gappy := func(name string, missing, infinite int64) Fact {
		return Fact{Column: Column{name, true, "", false}, Missing: missing, Infinite: infinite}
	}
	for _, c := range []struct {
		name       string
		more       []Fact
		incomplete int64
		want       Missing
		left       int
	}{
		{"none", nil, -1, Refuse, 0},
		{"in columns that are no candidates", []Fact{{Column: Column{"notes", false, "nested", false}, Missing: 90}, gappy("e", 200, 0)}, -1, Refuse, 1},
		{"few", []Fact{gappy("a", 6, 0), gappy("b", 3, 1)}, -1, DropRows, 0},
		{"too many by the sum", []Fact{gappy("a", 6, 0), gappy("b", 5, 0)}, -1, FillMean, 0},
		{"few by the count", []Fact{gappy("a", 6, 0), gappy("b", 6, 0)}, 6, DropRows, 0},
		{"many", []Fact{gappy("a", 120, 0)}, 120, FillMean, 0},
		{"many and infinite", []Fact{gappy("a", 120, 0), gappy("b", 0, 2)}, 122, FillMean, 1},
		{"infinite only", []Fact{gappy("a", 0, 50)}, 50, Refuse, 1},
	} {
		f := factsOf(200, 20, c.more...)
		f.Incomplete = c.incomplete
		text, s, r := drafted(t, f)
		if s.Table.Missing != c.want || len(s.Candidates.Leave) != c.left || s.Table.AcceptLoss {
			t.Errorf("%s: got %v, leave %q, want %v and %d left\n%s", c.name, s.Table.Missing, s.Candidates.Leave, c.want, c.left, text)
		}
		if exact := c.incomplete >= 0 && c.left == 0; c.want != Refuse && exact == (strings.Contains(text, "take out at most") || strings.Contains(text, "up to")) {
			t.Errorf("%s: counted %v\n%s", c.name, exact, text)
		}
		for _, fact := range c.more {
			if fact.Infinite > 0 && s.Table.Missing == FillMean && strings.Contains(strings.Join(r.Candidates, " "), fact.Name+" ") {
				t.Errorf("%s: %s is to be filled", c.name, fact.Name)
			}
		}
	}
}

func TestDraftRefuses(t *testing.T) {
	edit := func(rows, p int, change func(*Facts)) Facts {
		f := factsOf(rows, p)
		change(&f)
		return f
	}
	for _, c := range []struct {
		want  string
		facts Facts
	}{
		{"has no columns", Facts{Path: "t.csv"}},
		{"name the column", edit(20, 5, func(f *Facts) { f.Outcome = "" })},
		{`no column "yy" to be explained; the nearest is "y"`, edit(20, 0, func(f *Facts) { f.Outcome = "yy" })},
		{`column "y" cannot be the outcome: nested`, edit(20, 5, func(f *Facts) { f.Columns[0].Usable, f.Columns[0].Reason = false, "nested" })},
		{`"y" has no value in 3 of 20 rows, and`, edit(20, 5, func(f *Facts) { f.Columns[0].Missing = 3 })},
		{`"y" has no value in 1 of 20 rows (row 17, counted from 0), and`, edit(20, 5, func(f *Facts) { f.Columns[0].Missing, f.OutcomeGaps = 1, []int{17} })},
		{"in 12 of 20 rows (rows 0, 4 and 10 more, counted", edit(20, 5, func(f *Facts) { f.Columns[0].Missing, f.OutcomeGaps = 12, []int{0, 4} })},
		{"has 1 row, and", edit(1, 5, func(*Facts) {})},
		{"has 3 rows", edit(3, 5, func(*Facts) {})},
		{"one value in all rows", edit(20, 5, func(f *Facts) { f.Columns[0].Constant = true })},
		{"no candidate is left", edit(20, 0, func(*Facts) {})},
		{"1 have one value in all rows", edit(20, 1, func(f *Facts) { f.Columns[1].Constant = true })},
		{"is not UTF-8", edit(20, 1, func(f *Facts) { f.Path = "a\xff" })},
		{"is not UTF-8", edit(20, 2, func(f *Facts) { f.Columns[1].Name, f.Columns[1].R = "a\xff", number(1) })},
	} {
		text, s, err := Draft(c.facts)
		var ps Problems
		if !errors.As(err, &ps) || text != nil || s != nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("got %v, want %q", err, c.want)
		}
		if _, err := c.facts.Flags(); err == nil {
			t.Errorf("Flags accepts what Draft refuses: %s", c.want)
		}
	}
}

// Column names are data: they end no comment, no text and no line.
func TestDraftOfHostileNames(t *testing.T) {
	hostile := []string{
		"a\nseed = 7", "b\r", "\x1b[31m", "\u202etxt", `q"]` + "\n[draws]", "*", "[x]", `\`, "c = 1 # d", "e\u2028f", "",
	}
	f := factsOf(200, 20)
	for _, name := range hostile {
		f.Columns = append(f.Columns,
			Fact{Column: Column{name + "1", true, "", false}, R: number(0.99)},
			Fact{Column: Column{name + "2", false, "text\n[draws]", false}},
			Fact{Column: Column{name + "3", true, "", false}, Constant: true},
			Fact{Column: Column{name + "4", true, "", false}, Date: true},
		)
	}
	f.Path, f.Columns[0].Name, f.Outcome = "t\n.csv", "y\n", "y\n"
	text, s, r := drafted(t, f)
	if len(s.Candidates.Leave) != len(hostile) || len(r.Left) != len(hostile) || s.Draws.Seed != 1 {
		t.Errorf("left %q, seed %d", r.Left, s.Draws.Seed)
	}
	if i := strings.IndexAny(text, "\r\x1b\u202e\u2028"); i >= 0 {
		t.Errorf("unclean: %q", text[max(0, i-30):i+3])
	}
	var tree map[string]any
	if err := toml.Unmarshal([]byte(text), &tree); err != nil || len(tree) != 6 {
		t.Errorf("another reader finds %d sections, %v", len(tree), err)
	}
}

// Very many columns that cannot be used do not drown the study.
func TestDraftOfManyUnusable(t *testing.T) {
	f := factsOf(200, 20)
	for i := range 5000 {
		f.Columns = append(f.Columns, Fact{Column: Column{fmt.Sprintf("t%d", i), false, "nested", false}})
	}
	text, _, r := drafted(t, f)
	if n := strings.Count(text, "\n"); n > 120 || !strings.Contains(text, "and 4960 more") || len(r.Excluded) != 5000 {
		t.Errorf("%d lines, %d excluded", n, len(r.Excluded))
	}
}

// Every line that sets something says why beside it, but for names.
func TestDraftGivesReasons(t *testing.T) {
	text, _, _ := drafted(t, factsOf(240, 1200))
	for _, line := range strings.Split(text, "\n") {
		name, _, set := strings.Cut(line, " = ")
		switch {
		case !set, strings.HasPrefix(line, "#"):
		case name == "path", name == "kind", name == "column", name == "leave":
		case !strings.Contains(line, " # "):
			t.Errorf("no reason beside %q", line)
		}
	}
}
