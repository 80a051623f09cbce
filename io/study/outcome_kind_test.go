package study

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing"
)

// outcomeOf is a table whose outcome has these values.
func outcomeOf(rows, candidates int, o Fact) Facts {
	f := factsOf(rows, candidates)
	o.Name = "y"
	f.Columns[0] = o
	return f
}

// levelled is text, or numbers, with so many rows for each value.
func levelled(text bool, pairs ...any) Fact {
	f := Fact{Column: Column{"y", !text, "", text}, Min: math.Inf(1), Max: math.Inf(-1), Whole: !text}
	for i := 0; i < len(pairs); i += 2 {
		l := Level{pairs[i].(string), int64(pairs[i+1].(int))}
		f.Levels = append(f.Levels, l)
		if x, err := strconv.ParseFloat(l.Text, 64); err == nil {
			f.Min, f.Max = min(f.Min, x), max(f.Max, x)
		}
	}
	return f
}

// The kind of outcome follows from its values, and the reason stands beside.
func TestDraftByKind(t *testing.T) {
	whole := func(low, high float64) Fact {
		return Fact{Column: Column{"y", true, "", false}, Whole: true, Min: low, Max: high}
	}
	for _, c := range []struct {
		name          string
		outcome       Fact
		kind          Kind
		success, said string
	}{
		{"numbers", Fact{Column: Column{"y", true, "", false}, Min: 0.5, Max: 99.5}, Number, "", `kind = "number"` + "\n"},
		{"0 and 1", levelled(false, "0", 30, "1", 170), YesNo, "1", `success = "1" # in 170 of 200 rows; "0" in the others`},
		{"truth", levelled(false, "false", 150, "true", 50), YesNo, "true", `in 50 of 200 rows; "false" in the others`},
		{"yes and no", levelled(true, "No", 30, "Yes", 170), YesNo, "Yes", `kind = "yes-no" # two values`},
		{"1 and 2", levelled(false, "1", 150, "2", 50), YesNo, "2", "the rarer value is taken"},
		{"text of two", levelled(true, "lost", 60, "reared", 140), YesNo, "lost", `success = "lost" # in 60 of 200 rows; "reared" in the others; the rarer value is taken`},
		{"as many of both", levelled(true, "lost", 100, "reared", 100), YesNo, "lost", "the first value is taken"},
		{"halves", Fact{Column: Column{"y", true, "", false}, Levels: []Level{{"0.5", 90}, {"1.5", 110}}, TwoValued: true, Min: 0.5, Max: 1.5}, YesNo, "0.5", "two values"},
		{"text of three", levelled(true, "a", 60, "b", 70, "c", 70), Classes, "", `kind = "classes" # text of 3 values`},
		{"codes", levelled(false, "1", 60, "2", 70, "3", 70), Classes, "", "3 whole numbers, all about as frequent, as codes of classes are"},
		{"codes from 0", levelled(false, "0", 60, "1", 70, "2", 40, "3", 30), Classes, "", "4 whole numbers"},
		{"codes with a gap", levelled(false, "1", 60, "2", 70, "4", 70), Number, "", "whole numbers from 1 to 4, which are no counts"},
		{"few small counts", levelled(false, "0", 120, "1", 60, "2", 16, "3", 4), Count, "", "whole numbers from 0 to 3, as counts are"},
		{"counts", whole(0, 81), Count, "", `kind = "count" # whole numbers from 0 to 81, as counts are; "number" if they are measurements`},
		{"counts above 0", whole(3, 400), Count, "", "as counts are"},
		{"lengths", whole(140, 190), Number, "", "whole numbers from 140 to 190, which are no counts"},
		{"below 0", whole(-4, 90), Number, "", "which are no counts"},
		{"amounts", whole(0, 90_000), Number, "", "which are no counts"},
	} {
		text, s, _ := drafted(t, outcomeOf(200, 20, c.outcome))
		if s.Outcome.Kind != c.kind || s.Outcome.Success != c.success || !strings.Contains(text, c.said) {
			t.Errorf("%s: got %v, %q; want %v, %q and %q in\n%s", c.name, s.Outcome.Kind, s.Outcome.Success, c.kind, c.success, c.said, text)
		}
		if balanced := strings.Contains(text, `within = ["outcome"] # `); balanced != (c.kind == YesNo || c.kind == Classes) {
			t.Errorf("%s: balanced %v", c.name, balanced)
		}
	}
}

// Counts of a Poisson law are drafted as counts and codes of even classes as
// classes, for nearly all tables that chance can make.
func TestDraftTellsCountsFromCodes(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	draw := map[string]func() int{
		"even": func() int { return 1 + rng.IntN(4) },
		"poisson": func() int { // Knuth, The Art of Computer Programming 2, section 3.4.1
			limit, k := math.Exp(-1.2), 0
			for p := rng.Float64(); p > limit; p *= rng.Float64() {
				k++
			}
			return k
		},
	}
	for name, want := range map[string]Kind{"even": Classes, "poisson": Count} {
		wrong := 0
		for range 200 {
			wrong += btoi(kindOf(t, draw[name]) != want)
		}
		if wrong > 10 {
			t.Errorf("%s: %d of 200 tables are not drafted as %v", name, wrong, want)
		}
	}
}

func btoi(b bool) int {
	if b {
		return 1
	}
	return 0
}

// kindOf drafts a table of 120 rows with a drawn outcome.
func kindOf(t *testing.T, draw func() int) Kind {
	t.Helper()
	count := make([]int, 40)
	for range 120 {
		count[draw()]++
	}
	var pairs []any
	for v, n := range count {
		if n > 0 {
			pairs = append(pairs, fmt.Sprint(v), n)
		}
	}
	d, err := newDrafter(outcomeOf(120, 20, levelled(false, pairs...)))
	if err != nil {
		t.Fatal(err)
	}
	return d.kind
}

// DESIGN section 7, "draft by shape": u of a yes-no outcome is the smaller
// class in a half.
func TestDraftByTheRarerOutcome(t *testing.T) {
	text, s, _ := drafted(t, outcomeOf(1000, 400, levelled(true, "lost", 80, "reared", 920)))
	if *s.Decision.Threshold != 0.6 || s.Penalty.Floor != 0.01 || *s.Decision.Selected != 8 || !strings.Contains(text, "400 candidates are at least 10 times the 40 rows of the rarer outcome in a half") {
		t.Errorf("got threshold %v, selected %v in\n%s", *s.Decision.Threshold, *s.Decision.Selected, text)
	}
	text, s, _ = drafted(t, outcomeOf(1000, 400, levelled(true, "lost", 18, "reared", 982)))
	if *s.Decision.Selected != 3 || !strings.Contains(text, "a third of the 9 rows of the rarer outcome in a half") ||
		!strings.Contains(text, "with 9 rows of the rarer outcome in a half only overwhelming effects can be found") {
		t.Errorf("got selected %v in\n%s", *s.Decision.Selected, text)
	}
}

// Text of a few values competes as a category, text of many does not.
func TestDraftOfCategories(t *testing.T) {
	text := func(name string, levels ...Level) Fact {
		return Fact{Column: Column{name, false, "is text", true}, Levels: levels}
	}
	var each []Level
	for i := range 40 {
		each = append(each, Level{fmt.Sprintf("b%02d", i), 1})
	}
	f := factsOf(40, 60, text("site", Level{"east", 10}, Level{"west", 30}), text("batch", each...),
		text("notes"), text("hatchery", Level{"main", 40}))
	draft, s, r := drafted(t, f)
	_ = s
	for _, want := range []string{
		`#   "site": 2 levels, compared with "east" unless candidates.reference names another`,
		`"batch", # text, every value once: an identifier`, `#   "notes": is text`, `#   "hatchery": one value in all rows`,
		"62 candidates, 1 left out, 1 not usable",
	} {
		if !strings.Contains(draft, want) {
			t.Errorf("no %s in\n%s", want, draft)
		}
	}
	if strings.Join(r.Categories, " ") != "site notes hatchery" { // the table refuses notes for its many values
		t.Errorf("categories %q", r.Categories)
	}
}

func TestDraftRefusesKinds(t *testing.T) {
	kind := func(f Facts, k Kind) Facts { f.Kind = &k; return f }
	for _, c := range []struct {
		want  string
		facts Facts
	}{
		{`the outcome "y" is text with more than 50 values: classes take 2 to 50`, outcomeOf(200, 20, levelled(true))},
		{`the outcome "y" has one value in all rows`, outcomeOf(200, 20, levelled(true, "a", 200))},
		{`the outcome "y" is "lost" in one row only, and each of two halves needs such a row`, outcomeOf(200, 20, levelled(true, "lost", 1, "reared", 199))},
		{`is "c" in one row only`, outcomeOf(200, 20, levelled(true, "a", 100, "b", 99, "c", 1))},
		{`does not have two values, which outcome.kind = "yes-no" needs`, kind(outcomeOf(200, 20, levelled(true, "a", 100, "b", 50, "c", 50)), YesNo)},
		{"is not UTF-8", outcomeOf(200, 20, levelled(true, "a\xff", 50, "b", 150))},
	} {
		text, s, err := Draft(c.facts)
		var ps Problems
		if !errors.As(err, &ps) || text != nil || s != nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("got %v, want %q", err, c.want)
		}
	}
}

// A study may ask for another kind than the values suggest: two values taken
// as numbers are flagged (DESIGN section 9).
func TestFlagsOfAnAskedKind(t *testing.T) {
	f := outcomeOf(200, 20, levelled(false, "0", 100, "1", 100))
	if flags, err := f.Flags(); err != nil || len(flags) != 0 {
		t.Errorf("yes-no: %+v, %v", flags, err)
	}
	asked := Number
	f.Kind = &asked
	flags, err := f.Flags()
	if err != nil || len(flags) != 1 || flags[0].Kind != FlagOutcome || flags[0].Column != "y" {
		t.Errorf("number: %+v, %v", flags, err)
	}
	asked = Count
	if flags, err := f.Flags(); err != nil || len(flags) != 0 {
		t.Errorf("count: %+v, %v", flags, err)
	}
}

// The values of an outcome are data: they end no comment, no text and no line.
func TestDraftOfHostileLevels(t *testing.T) {
	for _, level := range []string{"a\nseed = 7", "\x1b[31m", "\u202etxt", `q"]` + "\n[draws]", `\`, "c = 1 # d", "e\u2028f"} {
		text, s, _ := drafted(t, outcomeOf(200, 20, levelled(true, level, 60, level+"\n", 140)))
		if s.Outcome.Success != level || s.Draws.Seed != 1 || strings.ContainsAny(text, "\r\x1b\u202e\u2028") {
			t.Errorf("%q: success %q, seed %d in\n%s", level, s.Outcome.Success, s.Draws.Seed, text)
		}
	}
}
