package study

import (
	"errors"
	"fmt"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"
	"time"
)

// hatchery is a table of an invented oyster hatchery.
var hatchery = []Column{
	{"batch_id", true, "", false}, {"notes", false, "nested", false}, {"sal_1", true, "", false}, {"sal_2", true, "", false},
	{"sal_list", false, "nested", false}, {"ph", true, "", false}, {"Mg [mmol/l]", true, "", false}, {"feed/day", true, "", false},
	{"survival", true, "", false}, {"age", true, "", false}, {"spawned", false, "a date", false},
}

// resolved applies lines to the least study over the hatchery.
func resolved(t *testing.T, lines string) (*Roles, error) {
	t.Helper()
	return parse(t, "[table]\npath = \"t.csv\"\n[outcome]\ncolumn = \"survival\"\n"+lines).Resolve(hatchery)
}

func TestResolve(t *testing.T) {
	for _, c := range []struct {
		name, lines                         string
		candidates, always, left, excludeds string
	}{
		{"default", "", "batch_id sal_1 sal_2 ph Mg_[mmol/l] feed/day age", "", "", "notes sal_list spawned"},
		{"leave by name", `leave = ["batch_id"]`, "sal_1 sal_2 ph Mg_[mmol/l] feed/day age", "", "batch_id", "notes sal_list spawned"},
		{"leave by pattern", `leave = ["sal_*", "batch?id"]`, "ph Mg_[mmol/l] feed/day age", "", "batch_id sal_1 sal_2 sal_list", "notes spawned"},
		{"always beats a pattern", `always = ["age"]`, "batch_id sal_1 sal_2 ph Mg_[mmol/l] feed/day", "age", "", "notes sal_list spawned"},
		{"always by pattern", "take = [\"sal_*\"]\nalways = [\"a?e\", \"ph\"]", "sal_1 sal_2", "ph age", "", "sal_list"},
		{"table order", "take = [\"ph\", \"sal_2\", \"batch_id\"]", "batch_id sal_2 ph", "", "", ""},
		{"taken twice", "take = [\"ph\", \"p*\", \"ph\"]", "ph", "", "", ""},
		{"name beats leave pattern", "take = [\"*\", \"sal_2\"]\nleave = [\"sal_[12]\"]", "batch_id sal_2 ph Mg_[mmol/l] feed/day age", "", "sal_1", "notes sal_list spawned"},
		{"name beats always pattern", "take = [\"ph\", \"sal_1\"]\nalways = [\"sal_[12]\"]", "sal_1 ph", "sal_2", "", ""},
		{"leave pattern beats always pattern", "take = [\"ph\"]\nleave = [\"*_1\"]\nalways = [\"sal_[12]\"]", "ph", "sal_2", "sal_1", ""},
		{"always name beats leave pattern", "take = [\"ph\"]\nleave = [\"sal_*\"]\nalways = [\"sal_1\"]", "ph", "sal_1", "", ""},
		{"a name with brackets", `take = ["Mg [mmol/l]"]`, "Mg_[mmol/l]", "", "", ""},
		{"a slash is a character", `take = ["feed*"]`, "feed/day", "", "", ""},
		{"a class", `take = ["[^s]*"]`, "batch_id ph Mg_[mmol/l] feed/day age", "", "", "notes"},
		{"escaped bracket", `take = ['Mg \[*']`, "Mg_[mmol/l]", "", "", ""},
		{"leaving what is not taken", "take = [\"ph\"]\nleave = [\"age\"]", "ph", "", "", ""},
		{"leaving the outcome", `leave = ["survival", "sal_*", "batch_id"]`, "ph Mg_[mmol/l] feed/day age", "", "batch_id sal_1 sal_2 sal_list", "notes spawned"},
	} {
		r, err := resolved(t, "[candidates]\n"+c.lines+"\n")
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		var excluded []string
		for _, e := range r.Excluded {
			excluded = append(excluded, e.Name)
			if e.Reason == "" {
				t.Errorf("%s: %s is excluded without a reason", c.name, e.Name)
			}
		}
		for _, l := range []struct {
			what string
			got  []string
			want string
		}{
			{"candidates", r.Candidates, c.candidates}, {"always", r.Always, c.always},
			{"left", r.Left, c.left}, {"excluded", excluded, c.excludeds},
		} {
			if got := strings.ReplaceAll(strings.Join(l.got, "|"), " ", "_"); got != strings.ReplaceAll(l.want, " ", "|") {
				t.Errorf("%s: %s: got %s, want %s", c.name, l.what, got, l.want)
			}
		}
	}
}

func TestResolveRefuses(t *testing.T) {
	for _, c := range []struct{ name, lines, want string }{
		{"unknown name", "[candidates]\ntake = [\"salt_1\"]", `s.toml:6: candidates.take = "salt_1": the table has no such column; the nearest is "sal_1"`},
		{"unknown leave", "[candidates]\nleave = [\"batch-id\"]", `s.toml:6: candidates.leave = "batch-id": the table has no such column; the nearest is "batch_id"`},
		{"pattern without match", "[candidates]\nleave = [\"salt_*\"]", `candidates.leave = "salt_*": matches no column`},
		{"broken pattern", "[candidates]\ntake = [\"Mg [mmol\"]", "is no column and no pattern"},
		{"the outcome", "[candidates]\ntake = [\"*\", \"survival\"]", `candidates.take = "survival": is the column of outcome.column, which is never a candidate`},
		{"the outcome always", "[candidates]\nalways = [\"survival\"]", "which is never a predictor"},
		{"text by name", "[candidates]\ntake = [\"notes\"]", `candidates.take = "notes": cannot be used: nested`},
		{"text always", "[candidates]\nalways = [\"notes\"]", `candidates.always = "notes": cannot be used: nested`},
		{"take and leave", "[candidates]\ntake = [\"ph\", \"age\"]\nleave = [\"ph\"]", `s.toml:7: candidates.leave = "ph": is named by candidates.take too`},
		{"take and always", "[candidates]\ntake = [\"ph\", \"age\"]\nalways = [\"ph\"]", `candidates.always = "ph": is named by candidates.take too`},
		{"leave and always", "[candidates]\nleave = [\"ph\"]\nalways = [\"ph\"]", `candidates.always = "ph": is named by candidates.leave too`},
		{"nothing left", "[candidates]\ntake = [\"sal_*\"]\nleave = [\"sal_1\", \"sal_2\"]", `leaves no candidate: of 11 columns 2 are left out, 0 are always in the model, 1 cannot be used ("sal_list": nested)`},
		{"relative of no column", "[penalty.relative]\npH = 2", `s.toml:6: penalty.relative.pH: is no candidate; the nearest is "ph"`},
		{"relative of always", "[candidates]\nalways = [\"ph\"]\n[penalty.relative]\nph = 2", "penalty.relative.ph: is always in the model"},
		{"relative of a left column", "[candidates]\nleave = [\"ph\"]\n[penalty.relative]\nph = 2", "penalty.relative.ph: is left out, for candidates.leave names it"},
		{"relative by pattern", "[penalty.relative]\n\"sal_*\" = 2", "is no candidate"},
	} {
		r, err := resolved(t, c.lines+"\n")
		var ps Problems
		if !errors.As(err, &ps) || r != nil || len(ps) != 1 || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: got %v, want one problem with %s", c.name, err, c.want)
		}
	}
}

func TestResolveOutcome(t *testing.T) {
	for column, want := range map[string]string{
		"survivl": `outcome.column = "survivl": the table has no such column; the nearest is "survival"`,
		"notes":   `outcome.column = "notes": cannot be used: nested`,
	} {
		_, err := parse(t, strings.Replace(small, `"y"`, `"`+column+`"`, 1)).Resolve(hatchery)
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want %s", err, want)
		}
	}
	if _, err := parse(t, small).Resolve(nil); err == nil {
		t.Error("a table without columns was taken")
	}
}

// Every column that the outcome or the draws name is kept out of the
// candidates, so that later issues find it so.
func TestOtherRolesAreNoCandidates(t *testing.T) {
	s := parse(t, small+"offset = \"o\"\ncase_weight = \"w\"\n[draws]\ntogether = [\"tank\"]\nwithin = [\"site\"]\n")
	var cols []Column
	for _, name := range []string{"y", "x", "o", "w", "tank", "site"} {
		cols = append(cols, Column{name, true, "", false})
	}
	r, err := s.Resolve(cols)
	if err != nil || !reflect.DeepEqual(r.Candidates, []string{"x"}) {
		t.Errorf("got %+v, %v", r, err)
	}
	if _, err := s.Resolve(cols[:2]); err == nil || strings.Count(err.Error(), "no such column") != 4 {
		t.Errorf("got %v, want four unknown columns", err)
	}
}

func TestRelative(t *testing.T) {
	r, err := resolved(t, "[candidates]\ntake = [\"sal_*\", \"ph\"]\n[penalty.relative]\nph = 0.5\nsal_1 = 3\n")
	if err != nil || !reflect.DeepEqual(r.Relative, []float64{3, 1, 0.5}) {
		t.Errorf("got %+v, %v", r, err)
	}
	if r, _ := resolved(t, ""); r.Relative != nil {
		t.Errorf("got %v where none is asked", r.Relative)
	}
}

// One name over two columns: a pattern lists both as not usable, a name is an
// error.
func TestDuplicateNames(t *testing.T) {
	cols := []Column{{"y", true, "", false}, {"a", true, "", false}, {"b", true, "", false}, {"a", true, "", false}}
	r, err := parse(t, small).Resolve(cols)
	if err != nil || !reflect.DeepEqual(r.Candidates, []string{"b"}) || len(r.Excluded) != 2 || !strings.Contains(r.Excluded[0].Reason, "2 columns") {
		t.Errorf("got %+v, %v", r, err)
	}
	if _, err := parse(t, small+"[candidates]\ntake = [\"a\"]\n").Resolve(cols); err == nil {
		t.Error("an ambiguous name was taken")
	}
	if cols[1].Reason != "" {
		t.Error("Resolve changed its argument")
	}
}

// wildcard is * and ? by their definition, tried out character by character.
func wildcard(pattern, name string) bool {
	switch {
	case pattern == "":
		return name == ""
	case pattern[0] == '*':
		return wildcard(pattern[1:], name) || name != "" && wildcard(pattern, name[1:])
	}
	return name != "" && (pattern[0] == '?' || pattern[0] == name[0]) && wildcard(pattern[1:], name[1:])
}

func TestMatch(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	text := func(letters string) string {
		b := make([]byte, rng.IntN(6))
		for i := range b {
			b[i] = letters[rng.IntN(len(letters))]
		}
		return string(b)
	}
	hits := 0
	for range 5000 {
		pattern, name := text("ab/*?"), text("ab/")
		m, err := newMatcher(pattern)
		if err != nil {
			t.Fatal(err)
		}
		want := wildcard(pattern, name)
		if m.match(name) != want {
			t.Fatalf("match(%q, %q) = %v", pattern, name, !want)
		}
		if want {
			hits++
		}
	}
	if hits < 100 {
		t.Errorf("only %d of the random names matched", hits)
	}
}

// A hundred thousand columns and as many wrong names end in seconds, and in a
// message that can be read.
func TestResolveIsQuick(t *testing.T) {
	cols := []Column{{"y", true, "", false}}
	wrong := make([]string, 100_000)
	for i := range wrong {
		cols = append(cols, Column{fmt.Sprintf("otu_%06d", i), true, "", false})
		wrong[i] = fmt.Sprintf("oto_%06d", i)
	}
	s := parse(t, small)
	start := time.Now()
	if r, err := s.Resolve(cols); err != nil || len(r.Candidates) != 100_000 {
		t.Fatal(err)
	}
	s.Candidates.Leave = wrong
	_, err := s.Resolve(cols)
	if err == nil || strings.Count(err.Error(), "\n") > 30 {
		t.Errorf("got a message of %d lines", strings.Count(err.Error(), "\n"))
	}
	if took := time.Since(start); took > 20*time.Second {
		t.Errorf("took %v", took)
	}
}
