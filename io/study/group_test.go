package study

import (
	"errors"
	"fmt"
	"reflect"
	"slices"
	"strings"
	"testing"
)

// ponds is a table with text, codes and series, in an order that splits the
// groups.
var ponds = []Column{
	{"sal_1", true, "", false}, {"feed", false, "is text", true}, {"ph", true, "", false}, {"sal_2", true, "", false},
	{"tank", true, "", false}, {"site", false, "is text", true}, {"spawned", false, "a date", false},
	{"temp_1", true, "", false}, {"temp_2", true, "", false}, {"lost", true, "", false},
	{"status", false, "is text", true}, {"days", true, "", false},
}

// ofPonds resolves lines over ponds; the outcome is lost, a number.
func ofPonds(t *testing.T, lines string) (*Roles, error) {
	t.Helper()
	return parse(t, "[table]\npath = \"t.csv\"\n[outcome]\ncolumn = \"lost\"\n"+lines+"\n").Resolve(ponds)
}

// unitsOf writes predictors down: name, and members where it is a group.
func unitsOf(r *Roles) string {
	var b strings.Builder
	for _, p := range r.Predictors {
		if p.Group {
			fmt.Fprintf(&b, "%s(%s) ", p.Name, strings.Join(p.Columns, " "))
			continue
		}
		b.WriteString(p.Name + " ")
	}
	return strings.TrimSpace(b.String())
}

// DESIGN sections 4 and 7: a group and a category are one predictor each, text
// is a category by itself, and groups stand where their first column stands.
func TestPredictors(t *testing.T) {
	const left = "[candidates]\nleave = [\"status\", \"days\"]\n"
	for _, c := range []struct{ name, lines, units, categories, named string }{
		{"plain", left, "sal_1 feed ph sal_2 tank site temp_1 temp_2", "feed site", ""},
		{"text by name", "[candidates]\ntake = [\"ph\", \"feed\"]\nalways = [\"site\"]", "feed ph", "feed site", "feed ph site"},
		{"codes", "[candidates]\ntake = [\"ph\", \"t*\"]\ncategories = [\"tank\"]", "ph tank temp_1 temp_2", "tank", "ph tank"},
		{"codes by pattern", "[candidates]\ntake = [\"ph\", \"t*\"]\nalways = [\"sal_1\"]\ncategories = [\"sal_*\", \"?ank\"]", "ph tank temp_1 temp_2", "sal_1 tank", "sal_1 ph"},
		{"named in another order", "[candidates]\ntake = [\"t*\", \"sal_1\", \"ph\"]\ncategories = [\"tank\", \"sal_1\"]", "sal_1 ph tank temp_1 temp_2", "sal_1 tank", "sal_1 ph tank"},
		{"named by its place", "[candidates]\ntake = [\"ph\", \"sal_*\"]\ncategories = [\"sal_1\"]", "sal_1 ph sal_2", "sal_1", "sal_1 ph"},
		{"text named as category", "[candidates]\ntake = [\"feed\", \"ph\"]\ncategories = [\"feed\"]", "feed ph", "feed", "feed ph"},
		{"a group", left + "[candidates.groups]\nsalinity = [\"sal_*\"]", "salinity(sal_1 sal_2) feed ph tank site temp_1 temp_2", "feed site", ""},
		{"members in table order", left + "[candidates.groups]\nmix = [\"temp_1\", \"ph\", \"sal_2\"]", "sal_1 feed mix(ph sal_2 temp_1) tank site temp_2", "feed site", ""},
		{"two groups", left + "[candidates.groups]\na = [\"temp_?\"]\nb = [\"sal_*\", \"sal_1\", \"tank\"]", "b(sal_1 sal_2 tank) feed ph site a(temp_1 temp_2)", "feed site", ""},
		{"a pattern skips what is no candidate", "[candidates]\ntake = [\"*\"]\nleave = [\"sal_2\", \"days\"]\nalways = [\"site\"]\n[candidates.groups]\ns = [\"s*\"]", "s(sal_1 status) feed ph tank temp_1 temp_2", "feed site status", "site"},
		{"a group with a category", left + "[candidates.groups]\nfood = [\"feed\", \"ph\"]", "sal_1 food(feed ph) sal_2 tank site temp_1 temp_2", "feed site", ""},
		{"a group of one", left + "[candidates.groups]\none = [\"ph\"]", "sal_1 feed one(ph) sal_2 tank site temp_1 temp_2", "feed site", ""},
		{"a reference", left + "[candidates.reference]\nfeed = \"algae\"", "sal_1 feed ph sal_2 tank site temp_1 temp_2", "feed site", ""},
	} {
		r, err := ofPonds(t, c.lines)
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		if got := unitsOf(r); got != c.units || strings.Join(r.Categories, " ") != c.categories || strings.Join(r.Named, " ") != c.named {
			t.Errorf("%s: got %s, categories %q, named %q; want %s, %s, %s", c.name, got, r.Categories, r.Named, c.units, c.categories, c.named)
		}
		checkUnits(t, c.name, r)
	}
}

// checkUnits holds that predictors are the candidates, each once.
func checkUnits(t *testing.T, name string, r *Roles) {
	t.Helper()
	var all []string
	var groups []Group
	for _, p := range r.Predictors {
		all = append(all, p.Columns...)
		if p.Group {
			groups = append(groups, Group{p.Name, p.Columns})
		} else if len(p.Columns) != 1 || p.Columns[0] != p.Name {
			t.Errorf("%s: single predictor %+v", name, p)
		}
	}
	a, b := slices.Sorted(slices.Values(all)), slices.Sorted(slices.Values(r.Candidates))
	if !slices.Equal(a, b) || !reflect.DeepEqual(groups, r.Groups) {
		t.Errorf("%s: predictors %+v of candidates %q, groups %+v", name, r.Predictors, r.Candidates, r.Groups)
	}
}

func TestPredictorsRefused(t *testing.T) {
	for _, c := range []struct{ name, lines, want string }{
		{"group named as a column", "[candidates.groups]\nph = [\"sal_*\"]", `s.toml:6: candidates.groups.ph: a column of the table has this name`},
		{"overlap", "[candidates.groups]\na = [\"sal_*\", \"ph\"]\nb = [\"ph\"]", `s.toml:7: candidates.groups.b = "ph": is a member of the group a too, and groups must not overlap`},
		{"overlap in two columns", "[candidates.groups]\na = [\"sal_*\"]\nb = [\"sal_?\"]", `candidates.groups.b = "sal_1": is a member of the group a too`},
		{"no members", "[candidates]\nleave = [\"sal_*\"]\n[candidates.groups]\ns = [\"sal_*\"]", `candidates.groups.s: has no members: none of its columns is a candidate`},
		{"unknown member", "[candidates.groups]\ns = [\"sall_1\"]", `candidates.groups.s = "sall_1": the table has no such column; the nearest is "sal_1"`},
		{"pattern of nothing", "[candidates.groups]\ns = [\"salt*\"]", `candidates.groups.s = "salt*": matches no column of the table`},
		{"broken pattern", "[candidates.groups]\ns = [\"sal[\"]", "is no column and no pattern"},
		{"member that is left out", "[candidates]\nleave = [\"ph\"]\n[candidates.groups]\ns = [\"ph\", \"sal_1\"]", `candidates.groups.s = "ph": is left out, for candidates.leave names it: take its name out of candidates.leave`},
		{"member that a pattern leaves out", "[candidates]\nleave = [\"p*\"]\n[candidates.groups]\ns = [\"ph\", \"sal_1\"]", `candidates.groups.s = "ph": is left out, for a pattern in candidates.leave matches it: add "ph" to candidates.take`},
		{"member that is not taken", "[candidates]\ntake = [\"sal_1\"]\n[candidates.groups]\ns = [\"ph\", \"sal_1\"]", `candidates.groups.s = "ph": is a column of the table, but candidates.take does not take it: add "ph" to candidates.take, or take its name out of here`},
		{"member that is always in", "[candidates]\nalways = [\"ph\"]\n[candidates.groups]\ns = [\"ph\", \"sal_1\"]", `candidates.groups.s = "ph": is always in the model and competes in no group`},
		{"member that is the outcome", "[candidates.groups]\ns = [\"lost\", \"sal_1\"]", `candidates.groups.s = "lost": is the column of outcome.column, which is never a predictor`},
		{"member that cannot be used", "[candidates.groups]\ns = [\"spawned\"]", `candidates.groups.s = "spawned": cannot be used: a date`},
		{"category that is the outcome", "[candidates]\ncategories = [\"lost\"]", `s.toml:6: candidates.categories = "lost": is the column of outcome.column, which is never a predictor`},
		{"category with another role", "[draws]\nwithin = [\"tank\"]\n[candidates]\ncategories = [\"tank\"]", `candidates.categories = "tank": is the column of draws.within, and a predictor only where candidates.take or candidates.always names it`},
		{"category that is left out", "[candidates]\nleave = [\"tank\"]\ncategories = [\"tank\"]", `candidates.categories = "tank": is left out, for candidates.leave names it: take its name out`},
		{"category that is a date", "[candidates]\ncategories = [\"spawned\"]", `candidates.categories = "spawned": cannot be used: a date`},
		{"unknown category", "[candidates]\ncategories = [\"tanc\"]", `the nearest is "tank"`},
		{"category pattern of no predictor", "[candidates]\nleave = [\"sal_*\"]\ncategories = [\"sal_*\"]", `matches no candidate and no column that is always in the model`},
		{"reference of numbers", "[candidates.reference]\nph = 7", `s.toml:6: candidates.reference.ph: is read as numbers, which have no reference level: take its line out, or put "ph" into candidates.categories`},
		{"reference of a left column", "[candidates]\nleave = [\"feed\"]\n[candidates.reference]\nfeed = \"algae\"", `candidates.reference.feed: is left out, for candidates.leave names it: take its name out`},
		{"reference of no column", "[candidates.reference]\nfed = \"algae\"", `candidates.reference.fed: the table has no such column; the nearest is "feed"`},
		{"reference by pattern", "[candidates.reference]\n\"fe*\" = \"algae\"", `the table has no such column`},
		{"relative of a member", "[candidates.groups]\nsalinity = [\"sal_*\"]\n[penalty.relative]\nsal_1 = 2", `penalty.relative.sal_1: is a member of the group salinity, which is penalised as a whole: write penalty.relative.salinity`},
		{"relative of no group", "[candidates.groups]\nsalinity = [\"sal_*\"]\n[penalty.relative]\nsalinty = 2", `penalty.relative.salinty: is no candidate; the nearest is "salinity"`},
	} {
		r, err := ofPonds(t, c.lines)
		var ps Problems
		if !errors.As(err, &ps) || r != nil || len(ps) != 1 || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: got %v, want one problem with %s", c.name, err, c.want)
		}
	}
}

// A relative penalty is that of a predictor: a group has one.
func TestRelativeOfGroups(t *testing.T) {
	r, err := ofPonds(t, "[candidates]\ntake = [\"sal_*\", \"ph\", \"feed\"]\n[candidates.groups]\nsalinity = [\"sal_*\"]\n[penalty.relative]\nsalinity = 0.5\nfeed = 3")
	if err != nil || unitsOf(r) != "salinity(sal_1 sal_2) feed ph" || !reflect.DeepEqual(r.Relative, []float64{0.5, 3, 1}) {
		t.Errorf("got %+v, %v", r, err)
	}
}

// Two columns of one name are no member, no category and no label of rows.
func TestDuplicateNamesHaveNoRole(t *testing.T) {
	cols := append(slices.Clone(ponds), Column{"tank", false, "is text", true})
	for _, lines := range []string{
		"[candidates]\ncategories = [\"tank\"]", "[candidates.groups]\na = [\"tank\"]", "[draws]\nwithin = [\"tank\"]", "[draws]\ntogether = [\"tank\"]",
	} {
		_, err := parse(t, "[table]\npath = \"t.csv\"\n[outcome]\ncolumn = \"lost\"\n"+lines+"\n").Resolve(cols)
		if err == nil || !strings.Contains(err.Error(), `"tank": cannot be used: its name stands over 2 columns`) {
			t.Errorf("%s: got %v", lines, err)
		}
	}
}
