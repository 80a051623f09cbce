package study

import (
	"strings"
	"testing"
)

// Every key of later work is read, and refused in one sentence at its line.
func TestRefusals(t *testing.T) {
	seen := map[string]bool{}
	for _, c := range []struct {
		text, key string
		line      int
	}{
		{"[table]\npath = \"t.csv\"\nmissing = \"own-level\"\n[outcome]\ncolumn = \"y\"\n", "table.missing", 3},
		{small + "[draws]\ntogether = [\"tank\"]\n", "draws.together", 6},
	} {
		s := parse(t, c.text)
		got := s.Refusals()
		if len(got) != 1 || got[0].Key != c.key || got[0].Line != c.line || strings.ContainsAny(got[0].Why, ".\n") {
			t.Errorf("got %v, want one refusal of %s at line %d, for\n%s", got, c.key, c.line, c.text)
			continue
		}
		if err := s.CheckReady(); err == nil || err.Error() != got.Error() {
			t.Errorf("CheckReady: %v", err)
		}
		seen[got[0].Why] = true
	}
	for _, l := range later {
		if !seen[l.why] {
			t.Errorf("%s: nothing tests %q", l.key, l.why)
		}
	}
}

// What works now is not refused.
func TestReady(t *testing.T) {
	for _, text := range []string{
		small,
		small + "kind = \"yes-no\"\nsuccess = \"alive\"\n",
		small + "kind = \"count\"\nexposure = \"days\"\noffset = \"o\"\ncase_weight = \"w\"\n",
		small + "kind = \"classes\"\n",
		"[table]\npath = \"t.csv\"\n[outcome]\nkind = \"survival\"\ntime = \"t\"\nevent = \"e\"\nentry = \"s\"\nties = \"breslow\"\nstrata = [\"site\"]\n",
		small + "[candidates]\ncategories = [\"c\"]\n[candidates.reference]\nfeed = \"algae\"\n[candidates.groups]\nb = [\"x\"]\na = [\"z\"]\n",
		small + "[penalty]\njitter = 0.5\ngroup_weight = \"sqrt\"\n[draws]\nwithin = [\"site\"]\n",
		small + "[candidates]\nalways = [\"age\"]\n[penalty.relative]\nph = 0.5\n",
		small + "[penalty]\nmix = 0.5\njitter = 1\nscale = \"table\"\ngroup_weight = \"sqrt\"\n",
		small + "[draws]\ndesign = \"bootstrap\"\n[decision]\nselected = 3\n",
		"[table]\npath = \"t.csv\"\nmissing = \"fill-mean\"\n[outcome]\ncolumn = \"y\"\n",
	} {
		if err := parse(t, text).CheckReady(); err != nil {
			t.Errorf("%v for\n%s", err, text)
		}
	}
}
