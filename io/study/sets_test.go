package study

import (
	"reflect"
	"strings"
	"testing"
)

// DESIGN section 7: the value as in TOML, the quotes of a text may be left out.
func TestSets(t *testing.T) {
	relative := func(s *Study) any { return s.Penalty.Relative }
	leave := func(s *Study) any { return s.Candidates.Leave }
	column := func(s *Study) any { return s.Outcome.Column }
	for _, c := range []struct {
		set  string
		get  func(*Study) any
		want any
	}{
		{"penalty.mix=0.5", func(s *Study) any { return s.Penalty.Mix }, 0.5},
		{" penalty . mix = 1 ", func(s *Study) any { return s.Penalty.Mix }, 1.0},
		{"draws.number=100 # enough", func(s *Study) any { return s.Draws.Number }, 100},
		{"penalty={mix=0.25}", func(s *Study) any { return s.Penalty.Mix }, 0.25},
		{"table.missing=drop-rows", func(s *Study) any { return s.Table.Missing }, DropRows},
		{`table.missing="drop-rows"`, func(s *Study) any { return s.Table.Missing }, DropRows},
		{"table.path=other dir/a=b.csv", func(s *Study) any { return s.Table.Path }, "other dir/a=b.csv"},
		{"penalty.mix=.5", func(s *Study) any { return s.Penalty.Mix }, 0.5},
		{"penalty.mix=+.25", func(s *Study) any { return s.Penalty.Mix }, 0.25},
		{"outcome.column=.5", column, ".5"},
		{"outcome.offset=", func(s *Study) any { return s.Outcome.Offset }, ""},
		{"outcome.column=weight", column, "weight"},
		{"outcome.column=2021", column, "2021"},
		{"outcome.column=1_000", column, "1_000"},
		{"outcome.column=true", column, "true"},
		{"outcome.column=2026-03-14", column, "2026-03-14"},
		{`outcome.column="a\tb"`, column, "a\tb"},
		{`outcome.column='a"b'`, column, `a"b`},
		{`candidates.leave=["a","b"]`, leave, []string{"a", "b"}},
		{"candidates.leave=[a, b c]", leave, []string{"a", "b c"}},
		{"candidates.leave=[1, true]", leave, []string{"1", "true"}},
		{"candidates.leave=[]", leave, []string{}},
		{"penalty.relative.ph=0.5", relative, map[string]float64{"ph": 0.5, "old": 3}},
		{"penalty.relative={ph=0.5}", relative, map[string]float64{"ph": 0.5}},
		{"penalty.relative={}", relative, map[string]float64{}},
		{`penalty.relative."a=b.c"=2`, relative, map[string]float64{"a=b.c": 2, "old": 3}},
		{`penalty.relative.'a=b'=2`, relative, map[string]float64{"a=b": 2, "old": 3}},
		{"penalty.relative.a.b=2", relative, map[string]float64{"a.b": 2, "old": 3}},
		{"penalty.relative.Ca²⁺ (mmol)=2", relative, map[string]float64{"Ca²⁺ (mmol)": 2, "old": 3}},
		{"penalty.relative.d'x=2", relative, map[string]float64{"d'x": 2, "old": 3}},
		{`candidates.groups.sal=["sal_*"]`, func(s *Study) any { return s.Candidates.Groups }, map[string][]string{"sal": {"sal_*"}}},
		{`candidates.reference.feed=algae`, func(s *Study) any { return s.Candidates.Reference }, map[string]string{"feed": "algae"}},
	} {
		s := parse(t, small+"[penalty.relative]\nold = 3\n", c.set)
		if got := c.get(s); !reflect.DeepEqual(got, c.want) {
			t.Errorf("--set %s: got %v, want %v", c.set, got, c.want)
		}
	}
}

func TestLaterSetWins(t *testing.T) {
	s := parse(t, small+"[draws]\nseed = 3\n", "draws.seed=4", "draws.seed=5")
	if s.Draws.Seed != 5 {
		t.Errorf("seed %d, want 5", s.Draws.Seed)
	}
}

func TestBadSets(t *testing.T) {
	for _, c := range []struct{ set, want string }{
		{"", "must be section.key=value"},
		{"mix", "must be section.key=value"},
		{"=3", "must be section.key=value"},
		{"mix=0.5", "stands outside its section: it belongs to [penalty]"},
		{"penalty.mx=0.5", "the nearest is penalty.mix"},
		{"penalti.mix=0.5", "the nearest is [penalty]"},
		{"penalty.mix=half", `penalty.mix = "half": must be a number`},
		{"draws.seed=18446744073709551615", "must be a whole number of at most 9223372036854775807"},
		{"penalty.mix=..5", "must be a number"},
		{"penalty.mix=2", "penalty.mix = 2.0: must be above 0"},
		{"penalty.mix=", `penalty.mix = "": must be a number`},
		{"penalty.mix=0.5\ndraws.seed=1", "must be a number"},
		{"penalty.mix=0.5\n[draws]\nseed=1", "must be a number"},
		{"draws.number=0x", `draws.number = "0x": must be a whole number`},
		{`table.path="a`, "is not TOML"},
		{"candidates.leave=[[a", "is not TOML"},
		{"candidates.leave=a", `such as ["a", "b"]`},
		{"candidates.groups=a", "must be a section"},
		{"draws.seed.x=1", "has one value and no keys of its own"},
		{"penalty=1", "is a section"},
		{"pen\nalty.mix=1", "on one line"},
	} {
		ps := problems(t, small, c.set)
		if ps[0].Set != c.set || !strings.Contains(ps[0].Error(), c.want) || strings.Contains(ps[0].Error(), "\n") {
			t.Errorf("--set %q: got %q, want one with %q", c.set, ps[0].Error(), c.want)
		}
	}
}
