package study

import (
	"strings"
	"testing"
)

// Each kind of outcome takes the columns that can hold it, and says in one
// sentence why another cannot.
func TestOutcomeColumns(t *testing.T) {
	const head = "[table]\npath = \"t.csv\"\n[outcome]\n"
	survival := head + "kind = \"survival\"\ntime = \"days\"\nevent = \"status\"\n"
	for _, c := range []struct{ name, text, want string }{
		{"number", head + "column = \"lost\"\n", ""},
		{"number of text", head + "column = \"status\"\n", `outcome.column = "status": cannot be used: is text, and outcome.kind = "number" needs numbers (yes-no and classes take text)`},
		{"count of text", head + "kind = \"count\"\ncolumn = \"status\"\n", `outcome.kind = "count" needs numbers`},
		{"yes-no of text", head + "kind = \"yes-no\"\nsuccess = \"dead\"\ncolumn = \"status\"\n", ""},
		{"yes-no of numbers", head + "kind = \"yes-no\"\nsuccess = 1\ncolumn = \"lost\"\n", ""},
		{"yes-no of dates", head + "kind = \"yes-no\"\nsuccess = 1\ncolumn = \"spawned\"\n", `outcome.column = "spawned": cannot be used: a date`},
		{"classes of text", head + "kind = \"classes\"\ncolumn = \"feed\"\n", ""},
		{"classes of dates", head + "kind = \"classes\"\ncolumn = \"spawned\"\n", "cannot be used: a date"},
		{"survival", survival, ""},
		{"event as a number", strings.Replace(survival, `"status"`, `"lost"`, 1), ""},
		{"event as a date", strings.Replace(survival, `"status"`, `"spawned"`, 1), `outcome.event = "spawned": cannot be used: a date`},
		{"time as text", strings.Replace(survival, `"days"`, `"feed"`, 1), `outcome.time = "feed": cannot be used: is text, and numbers are needed`},
		{"entry as text", survival + "entry = \"feed\"\n", `outcome.entry = "feed": cannot be used: is text, and numbers are needed`},
		{"entry", survival + "entry = \"tank\"\nstrata = [\"site\"]\n", ""},
		{"unknown entry", survival + "entry = \"tnk\"\n", `outcome.entry = "tnk": the table has no such column; the nearest is "tank"`},
		{"unknown stratum", survival + "strata = [\"sites\"]\n", `outcome.strata = "sites": the table has no such column; the nearest is "site"`},
		{"offset as text", head + "column = \"lost\"\noffset = \"feed\"\n", `outcome.offset = "feed": cannot be used: is text, and numbers are needed`},
		{"exposure as text", head + "kind = \"count\"\ncolumn = \"lost\"\nexposure = \"site\"\n", `outcome.exposure = "site": cannot be used: is text`},
		{"weight as text", head + "column = \"lost\"\ncase_weight = \"site\"\n", `outcome.case_weight = "site": cannot be used: is text`},
		{"weight twice", head + "column = \"lost\"\ncase_weight = \"days\"\noffset = \"days\"\n", `is the column of outcome.offset already`},
	} {
		s, err := Parse("s.toml", []byte(c.text), nil)
		if err == nil {
			_, err = s.Resolve(ponds)
		}
		if (err == nil) != (c.want == "") || err != nil && (!strings.Contains(err.Error(), c.want) || strings.Contains(err.Error(), "\n")) {
			t.Errorf("%s: got %v, want %q", c.name, err, c.want)
		}
	}
}

// No column of the outcome is a candidate.
func TestOutcomeColumnsAreNoCandidates(t *testing.T) {
	r, err := parse(t, "[table]\npath = \"t.csv\"\n[outcome]\nkind = \"survival\"\ntime = \"days\"\nevent = \"status\"\nentry = \"tank\"\nstrata = [\"site\"]\n"+
		"offset = \"ph\"\ncase_weight = \"temp_1\"\n").Resolve(ponds)
	if err != nil || unitsOf(r) != "sal_1 feed sal_2 temp_2 lost" || r.Outcome != "" {
		t.Errorf("got %+v, %v", r, err)
	}
}

// What the draws balance: the word for classes or event status, other
// columns, and never a measurement of the outcome.
func TestWithin(t *testing.T) {
	const yesNo = "[outcome]\nkind = \"yes-no\"\ncolumn = \"lost\"\nsuccess = 1\n"
	const survival = "[outcome]\nkind = \"survival\"\ntime = \"days\"\nevent = \"status\"\nstrata = [\"site\"]\n"
	const number = "[outcome]\ncolumn = \"lost\"\n"
	for _, c := range []struct{ name, text, within, want string }{
		{"default", yesNo, "outcome", ""},
		{"default of survival", survival, "outcome", ""},
		{"default of numbers", number, "", ""},
		{"none", yesNo + "[draws]\nwithin = []\n", "", ""},
		{"sites", number + "[draws]\nwithin = [\"site\"]\n", "site", ""},
		{"two", yesNo + "[draws]\nwithin = [\"tank\", \"outcome\", \"site\"]\n", "tank outcome site", ""},
		{"the outcome's own name", yesNo + "[draws]\nwithin = [\"lost\"]\n", "outcome", ""},
		{"both names", yesNo + "[draws]\nwithin = [\"outcome\", \"lost\"]\n", "outcome", ""},
		{"the event", survival + "[draws]\nwithin = [\"status\", \"site\"]\n", "outcome site", ""},
		{"time", survival + "[draws]\nwithin = [\"days\"]\n", "", `draws.within = "days": is the column of outcome.time, which makes no strata`},
		{"a number", number + "[draws]\nwithin = [\"lost\"]\n", "", `draws.within = "lost": is the column of outcome.column, which makes no strata`},
		{"no classes", number + "[draws]\nwithin = [\"outcome\"]\n", "", `draws.within = "outcome": stands for classes or event status, and outcome.kind = "number" has neither`},
		{"unknown", number + "[draws]\nwithin = [\"sight\"]\n", "", `draws.within = "sight": the table has no such column; the nearest is "site"`},
	} {
		r, err := parse(t, "[table]\npath = \"t.csv\"\n"+c.text).Resolve(ponds)
		switch {
		case c.want != "":
			if err == nil || !strings.Contains(err.Error(), c.want) {
				t.Errorf("%s: got %v, want %s", c.name, err, c.want)
			}
		case err != nil || strings.Join(r.Within, " ") != c.within:
			t.Errorf("%s: got %+v, %v, want %s", c.name, r, err, c.within)
		}
	}
}

// A column that the draws balance is a predictor where it is named as one.
func TestBalancedPredictor(t *testing.T) {
	const text = "[table]\npath = \"t.csv\"\n[outcome]\ncolumn = \"lost\"\n[draws]\nwithin = [\"site\", \"tank\"]\n[candidates]\n"
	r, err := parse(t, text+"take = [\"ph\", \"t*\"]\nalways = [\"site\"]\n").Resolve(ponds)
	if err != nil || unitsOf(r) != "ph temp_1 temp_2" || strings.Join(r.Always, " ") != "site" || strings.Join(r.Within, " ") != "site tank" {
		t.Errorf("got %+v, %v", r, err)
	}
	r, err = parse(t, text+"take = [\"tank\", \"ph\"]\ncategories = [\"tank\"]\n").Resolve(ponds)
	if err != nil || unitsOf(r) != "ph tank" || strings.Join(r.Categories, " ") != "tank" {
		t.Errorf("got %+v, %v", r, err)
	}
}

// A column may be called "outcome" where the word stands for nothing else.
func TestColumnCalledOutcome(t *testing.T) {
	cols := append(ponds[:len(ponds):len(ponds)], Column{"outcome", true, "", false})
	r, err := parse(t, "[table]\npath = \"t.csv\"\n[outcome]\ncolumn = \"lost\"\n[draws]\nwithin = [\"outcome\"]\n").Resolve(cols)
	if err != nil || strings.Join(r.Within, " ") != "outcome" || strings.Contains(unitsOf(r), "outcome") {
		t.Errorf("got %+v, %v", r, err)
	}
}
