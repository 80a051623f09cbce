package study

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"holdfast/selection"
	"holdfast/solver"
)

// small is the least a study says.
const small = "[table]\npath = \"t.csv\"\n[outcome]\ncolumn = \"y\"\n"

// parse reads a text that must be right.
func parse(t *testing.T, text string, sets ...string) *Study {
	t.Helper()
	s, err := Parse("dir/s.toml", []byte(text), sets)
	if err != nil {
		t.Fatalf("Parse: %v\n%s", err, text)
	}
	return s
}

// problems reads a text that must be wrong.
func problems(t *testing.T, text string, sets ...string) Problems {
	t.Helper()
	s, err := Parse("dir/s.toml", []byte(text), sets)
	var ps Problems
	if !errors.As(err, &ps) || s != nil || len(ps) == 0 {
		t.Fatalf("Parse accepted (error %v, sets %q):\n%s", err, sets, text)
	}
	return ps
}

func number(x float64) *float64 { return &x }

// The study file of DESIGN section 7, to the letter, but for the column
// outcome's later roles.
const designed = `[table]
path    = "hatchery.parquet"     # .parquet .arrow .feather .csv .csv.gz
missing = "refuse"               # refuse | drop-rows | fill-mean | own-level
[outcome]
kind    = "number"               # number | yes-no | count | classes | survival
column  = "survival_d21"
offset  = ""
case_weight = ""
[candidates]
take    = ["*"]
leave   = ["batch_id"]
always  = []
categories = []
[candidates.reference]
feed = "algae"
[candidates.groups]
salinity = ["sal_*"]
[penalty]
mix     = 1.0
scale   = "draw"
jitter  = 1.0
group_weight = "even"
ratio   = 0.95
floor   = 0.005
stop_after = 0
[penalty.relative]
ph = 0.5
[draws]
design  = "halves"
number  = 200
seed    = 1
together = []
within  = []
[decision]
region  = "cap"
threshold = 0.8
false_selections = 1.0
bound   = "unimodal"
`

func TestDesignedStudy(t *testing.T) {
	got := parse(t, designed)
	want := Default()
	want.Table.Path = "hatchery.parquet"
	want.Outcome.Column = "survival_d21"
	want.Candidates.Leave = []string{"batch_id"}
	want.Candidates.Reference["feed"] = "algae"
	want.Candidates.Groups["salinity"] = []string{"sal_*"}
	want.Penalty.Relative["ph"] = 0.5
	want.Draws.Within = []string{}
	want.Decision.Threshold, want.Decision.FalseSelections = number(0.8), number(1)
	want.Source, want.Dir = "dir/s.toml", "dir"
	got.places = nil
	if !reflect.DeepEqual(got, &want) {
		t.Errorf("got\n%+v\nwant\n%+v", got, &want)
	}
}

// Every default of DESIGN section 7, from a study that says nothing else.
func TestDefaults(t *testing.T) {
	s := parse(t, small)
	for _, c := range []struct {
		key       string
		got, want any
	}{
		{"table.missing", s.Table.Missing.String(), "refuse"},
		{"table.accept_loss", s.Table.AcceptLoss, false},
		{"outcome.kind", s.Outcome.Kind.String(), "number"},
		{"outcome.ties", s.Outcome.Ties.String(), "efron"},
		{"candidates.take", s.Candidates.Take, []string{"*"}},
		{"candidates.leave", s.Candidates.Leave, []string{}},
		{"candidates.always", s.Candidates.Always, []string{}},
		{"penalty.mix", s.Penalty.Mix, 1.0},
		{"penalty.scale", s.Penalty.Scale, solver.ScaleDraw},
		{"penalty.jitter", s.Penalty.Jitter, 1.0},
		{"penalty.group_weight", s.Penalty.GroupWeight.String(), "even"},
		{"penalty.ratio", s.Penalty.Ratio, 0.95},
		{"penalty.floor", s.Penalty.Floor, 0.005},
		{"penalty.stop_after", s.Penalty.StopAfter, 0},
		{"draws.design", s.Draws.Design.String(), "halves"},
		{"draws.number", s.Draws.Number, 200},
		{"draws.seed", s.Draws.Seed, uint64(1)},
		{"draws.within", s.Draws.Within, []string{}},
		{"decision.region", s.Decision.Region, selection.Cap},
		{"decision.bound", s.Decision.Bound, selection.Unimodal},
		{"decision.threshold", *s.Decision.Threshold, 0.8},
		{"decision.false_selections", *s.Decision.FalseSelections, 1.0},
	} {
		if !reflect.DeepEqual(c.got, c.want) {
			t.Errorf("%s: got %v, want %v", c.key, c.got, c.want)
		}
	}
	if s.Decision.Selected != nil {
		t.Errorf("decision.selected: got %v, want none", *s.Decision.Selected)
	}
}

// DESIGN section 7: classes and event status are balanced by default.
func TestDefaultWithin(t *testing.T) {
	for kind, want := range map[string][]string{"number": {}, "count": {}, "yes-no": {"outcome"}, "classes": {"outcome"}} {
		text := small + "kind = \"" + kind + "\"\n"
		if kind == "yes-no" {
			text += "success = 1\n"
		}
		s := parse(t, text)
		if !reflect.DeepEqual(s.Draws.Within, want) {
			t.Errorf("%s: within %q, want %q", kind, s.Draws.Within, want)
		}
	}
	s := parse(t, small+"kind = \"yes-no\"\nsuccess = 1\n[draws]\nwithin = []\n")
	if len(s.Draws.Within) != 0 {
		t.Errorf("an empty list was filled up: %q", s.Draws.Within)
	}
}

// values lists, for every key of the study file, values that are taken and
// values that are not.
var values = map[string]struct{ good, bad []string }{
	"table.path":                {[]string{`"a.csv"`, `'C:\t.csv'`}, []string{`1`, `true`, `["a"]`, `""`}},
	"table.missing":             {[]string{`"refuse"`, `"drop-rows"`, `"fill-mean"`, `"own-level"`}, []string{`"drop"`, `"Refuse"`, `0`, `true`}},
	"table.accept_loss":         {[]string{`false`, `true`}, []string{`"true"`, `1`}},
	"outcome.kind":              {[]string{`"number"`, `"count"`, `"classes"`, `"yes-no"`}, []string{`"gaussian"`, `1`, `[]`}},
	"outcome.column":            {[]string{`"y"`}, []string{`1`, `""`, `["y"]`}},
	"outcome.success":           {[]string{`""`}, []string{`["alive"]`, `{}`, `"alive"`}}, // of another kind
	"outcome.time":              {[]string{`""`}, []string{`1`, `"t"`}},
	"outcome.event":             {[]string{`""`}, []string{`1`, `"e"`}},
	"outcome.entry":             {[]string{`""`}, []string{`1`, `"e"`}},
	"outcome.ties":              {[]string{`"efron"`}, []string{`"exact"`, `"breslow"`}},
	"outcome.strata":            {[]string{`[]`}, []string{`1`, `[1]`, `["site"]`}},
	"outcome.offset":            {[]string{`""`, `"o"`}, []string{`0`, `0.5`, `"y"`}},
	"outcome.exposure":          {[]string{`""`}, []string{`1`, `"e"`}},
	"outcome.case_weight":       {[]string{`""`, `"w"`}, []string{`1`, `"y"`}},
	"candidates.take":           {[]string{`["*"]`, `["a", 'b']`}, []string{`"*"`, `[]`, `[1]`, `[["a"]]`}},
	"candidates.leave":          {[]string{`[]`, `["a"]`}, []string{`"a"`, `[true]`}},
	"candidates.always":         {[]string{`[]`, `["a"]`}, []string{`"a"`, `[1.5]`}},
	"candidates.categories":     {[]string{`[]`, `["a"]`}, []string{`"a"`, `[2026-03-14]`}},
	"candidates.reference":      {[]string{`{}`, `{feed = "algae"}`, `{dose = 3, wet = true}`}, []string{`"algae"`, `{feed = ["algae"]}`}},
	"candidates.groups":         {[]string{`{}`, `{salinity = ["sal_*"]}`}, []string{`["sal_*"]`, `{salinity = "sal_*"}`, `{salinity = []}`, `{"" = ["a"]}`}},
	"penalty.mix":               {[]string{`1`, `1.0`, `1e-3`, `0.5`}, []string{`0`, `1.01`, `-0.5`, `nan`, `inf`, `"1"`, `true`}},
	"penalty.scale":             {[]string{`"draw"`, `"table"`, `"none"`}, []string{`"sd"`, `1`, `false`}},
	"penalty.jitter":            {[]string{`1`, `0.2`}, []string{`0`, `1.5`, `nan`, `"1"`}},
	"penalty.group_weight":      {[]string{`"even"`, `"sqrt"`}, []string{`"equal"`, `1`}},
	"penalty.ratio":             {[]string{`0.5`, `0.999`}, []string{`0`, `1`, `1.0`, `0.9999999`, `-inf`, `"0.9"`}},
	"penalty.floor":             {[]string{`0.5`, `1e-4`}, []string{`0`, `1`, `-0.1`, `nan`}},
	"penalty.stop_after":        {[]string{`0`, `1`, `0x10`, `1_000`}, []string{`-1`, `1.0`, `"1"`, `false`}},
	"penalty.relative":          {[]string{`{}`, `{ph = 0.5, "a b" = 2}`}, []string{`0.5`, `{ph = 0}`, `{ph = -1}`, `{ph = inf}`, `{ph = "1"}`}},
	"draws.design":              {[]string{`"halves"`}, []string{`"half"`, `"bootstrap"`, `2`}}, // bootstrap needs selected
	"draws.number":              {[]string{`2`, `200`}, []string{`0`, `1`, `3`, `-2`, `2.0`, `"2"`, `100000000`}},
	"draws.seed":                {[]string{`0`, `9223372036854775807`}, []string{`-1`, `1.5`, `"one"`}},
	"draws.together":            {[]string{`[]`, `["tank"]`}, []string{`"tank"`, `true`}},
	"draws.within":              {[]string{`[]`, `["site"]`}, []string{`"site"`, `{}`}},
	"decision.region":           {[]string{`"cap"`, `"common"`}, []string{`"all"`, `1`}},
	"decision.threshold":        {[]string{`1`, `0.501`, `0.9`}, []string{`0.5`, `1.001`, `nan`, `"0.8"`}},
	"decision.selected":         {[]string{`1`, `20`, `20.0`}, []string{`0`, `0.5`, `20.5`, `inf`, `"20"`}},
	"decision.false_selections": {[]string{`1`, `0.001`, `50.5`}, []string{`0`, `-1`, `inf`, `nan`, `[]`}},
	"decision.bound":            {[]string{`"worst-case"`, `"unimodal"`, `"r-concave"`}, []string{`"unimodel"`, `1`}},
}

// with puts a key into the least study, and says on which line.
func with(name, value string) (text string, line int) {
	sec, key, _ := strings.Cut(name, ".")
	head := map[string]string{"table": "path = \"t.csv\"\n", "outcome": "column = \"y\"\n"}
	if name == "table.path" || name == "outcome.column" {
		head[sec] = ""
	}
	var b strings.Builder
	for _, s := range sections {
		b.WriteString("[" + s.name + "]\n" + head[s.name])
		if s.name == sec {
			line = 1 + strings.Count(b.String(), "\n")
			b.WriteString(key + " = " + value + "\n")
		}
	}
	return b.String(), line
}

func TestEveryKeyTakesAndRefuses(t *testing.T) {
	for _, sec := range sections {
		for _, k := range sec.keys {
			name := sec.name + "." + k.name
			v, ok := values[name]
			if !ok || len(v.good) == 0 || len(v.bad) == 0 {
				t.Errorf("%s: the test has no values for it", name)
			}
			for _, good := range v.good {
				text, _ := with(name, good)
				parse(t, text)
			}
			for _, bad := range v.bad {
				text, line := with(name, bad)
				checkNames(t, problems(t, text), name, bad, line)
			}
		}
	}
}

// checkNames looks for a problem that names the key, the line and, in a list
// or a section, at least what it belongs to.
func checkNames(t *testing.T, ps Problems, name, bad string, line int) {
	t.Helper()
	for _, p := range ps {
		if strings.HasPrefix(p.Key, name) && p.Line == line && p.File == "dir/s.toml" && p.Why != "" {
			return
		}
	}
	t.Errorf("%s = %s: no problem names it and line %d:\n%v", name, bad, line, ps)
}

func TestMessages(t *testing.T) {
	for _, c := range []struct{ text, want string }{
		{small + "[penalty]\nmix = 2\n", "study: dir/s.toml:6: penalty.mix = 2.0: must be above 0 and at most 1"},
		{small + "[penalty]\nmix = nan\n", "study: dir/s.toml:6: penalty.mix = nan: must be a finite number"},
		{small + "[draws]\nseed = -1\n", "study: dir/s.toml:6: draws.seed = -1: must not be negative"},
		{small + "[decision]\ntreshold = 0.9\n", "study: dir/s.toml:6: decision.treshold: is not a key of a study; the nearest is decision.threshold"},
		{small + "[desision]\nthreshold = 0.9\nx = 1\n", "study: dir/s.toml:5: desision: there is no section [desision]; the nearest is [decision]"},
		{small + "threshold = 0.9\n", "study: dir/s.toml:5: outcome.threshold: is not a key of [outcome]; threshold belongs to [decision]"},
		{small + "mixx = 0.9\n", "study: dir/s.toml:5: outcome.mixx: is not a key of [outcome]; the nearest key is mix, which belongs to [penalty]"},
		{"seed = 3\n" + small, "study: dir/s.toml:1: seed: stands outside its section: it belongs to [draws]"},
		{"seeed = 3\n" + small, "study: dir/s.toml:1: seeed: is not a key of a study, and stands in no section; the nearest key is seed"},
		{small + "[draws]\nnumber = \"many\"\n", `study: dir/s.toml:6: draws.number = "many": must be a whole number`},
		{small + "[draws]\nnumber = 201\n", "study: dir/s.toml:6: draws.number = 201: must be even, for two halves make a pair: write 202"},
		{small + "[draws]\ndesign = \"thirds\"\n", `study: dir/s.toml:6: draws.design = "thirds": must be one of "halves", "bootstrap"`},
		{small + "[draws.seed]\nx = 1\n", "study: dir/s.toml:5: draws.seed = a section: must be a whole number"},
		{small + "[penalty.relative]\nph.low = 1\n", `study: dir/s.toml:6: penalty.relative.ph.low: a name with a dot stands in double quotes: penalty.relative."ph.low"`},
		{small + "[[draws]]\nseed = 1\n", "study: dir/s.toml:5: [draws]: stands in double brackets, which makes a list: write [draws], once"},
		{"draws = 5\n" + small, "study: dir/s.toml:1: draws: is a section: write [draws] on a line of its own and its keys below"},
		{small + "[candidates]\nleave = [\"a\", 2]\n", "study: dir/s.toml:6: candidates.leave = a list: must be a list of texts, but its element 2 is 2: put it in double quotes"},
		{small + "[decision]\nthreshold = 0.8\nselected = 4\nfalse_selections = 1\n", "study: dir/s.toml:8: decision.false_selections: threshold, selected and false_selections are all given: two of them decide the third, so leave one out"},
		{small + "[draws]\ndesign = \"bootstrap\"\n", `study: dir/s.toml:6: draws.design = "bootstrap": needs decision.selected: there is no bound to derive it from`},
		{small + "[draws]\ndesign = \"bootstrap\"\n[decision]\nfalse_selections = 1\n", `study: dir/s.toml:8: decision.false_selections: draws.design = "bootstrap" has no bound on false selections: give threshold and selected in its place`},
		{small + "time = \"t\"\n", `study: dir/s.toml:5: outcome.time: is for outcome.kind = "survival", and it is "number"`},
		{"[table]\npath = \"t.csv\"\n[outcome]\nkind = \"survival\"\ncolumn = \"y\"\ntime = \"t\"\nevent = \"e\"\n", `study: dir/s.toml:5: outcome.column: outcome.kind = "survival" has time and event in place of column`},
		{small + "kind = \"classes\"\noffset = \"o\"\n", `study: dir/s.toml:6: outcome.offset = "o": is for every kind of outcome but classes, where it would move all classes alike: leave the line out`},
		{small + "[candidates.groups]\nsalinity = []\n", `study: dir/s.toml:6: candidates.groups.salinity = []: has no members: name columns or patterns, or take the line out`},
		{small + "[candidates.groups]\n\"\" = [\"a\"]\n", `study: dir/s.toml:6: candidates.groups."": a group has a name: it stands in the tables of results`},
		{small + "success = 1\n", `study: dir/s.toml:5: outcome.success: is for outcome.kind = "yes-no", or the event of "survival", and it is "number"`},
		{"[table]\npath = t.csv\n", "study: dir/s.toml:2: is not TOML: "},
		{"[table]\npath = \"a\"\npath = \"b\"\n", "study: dir/s.toml:3: is not TOML: "},
		{small + "[table]\n", "study: dir/s.toml:5: is not TOML: "},
		{"", "study: dir/s.toml: table.path: is missing: name the table's file"},
	} {
		got := problems(t, c.text)[0].Error()
		if got != c.want && !(strings.HasSuffix(c.want, ": ") && strings.HasPrefix(got, c.want)) {
			t.Errorf("for\n%s\ngot  %s\nwant %s", c.text, got, c.want)
		}
	}
}

// A key is refused once, however much stands below it.
func TestUnknownSectionIsToldOnce(t *testing.T) {
	ps := problems(t, small+"[penalti]\nmix = 1\nratio = 2\n[penalty.relativ]\na = 1\nb = 2\n")
	if len(ps) != 2 {
		t.Errorf("got %d problems, want 2:\n%v", len(ps), ps)
	}
}

// All problems come together, in the order of the file, --set last.
func TestSeveralProblems(t *testing.T) {
	ps := problems(t, small+"[penalty]\nmix = 3\nrato = 0.9\nfloor = \"low\"\n[draws]\nnumber = 5\n", "draws.seed=-4")
	var lines []string
	for _, p := range ps {
		lines = append(lines, fmt.Sprintf("%d %s", p.Line, p.Key))
	}
	want := []string{"6 penalty.mix", "7 penalty.rato", "8 penalty.floor", "10 draws.number", "0 draws.seed"}
	if !reflect.DeepEqual(lines, want) {
		t.Errorf("got %q, want %q", lines, want)
	}
	if n := strings.Count(ps.Error(), "\n"); n != 4 {
		t.Errorf("the message has %d line ends, want 4:\n%v", n, ps)
	}
}

// What an editor on another system writes: a byte order mark, and carriage
// returns at line ends.
func TestForeignText(t *testing.T) {
	s := parse(t, "\uFEFF"+strings.ReplaceAll(designed, "\n", "\r\n"))
	if s.Penalty.Relative["ph"] != 0.5 {
		t.Errorf("relative: %v", s.Penalty.Relative)
	}
	ps := problems(t, strings.ReplaceAll(small+"[draws]\nnumber = 5\n", "\n", "\r\n"))
	if ps[0].Line != 6 {
		t.Errorf("line %d, want 6", ps[0].Line)
	}
}

// Control characters of a file must not reach a terminal through a message.
func TestMessagesAreClean(t *testing.T) {
	for _, text := range []string{
		small + "[\"\\u001b[2J\"]\nx = 1\n",
		small + "\"\\u001b\\n\" = 1\n",
		small + "[penalty]\nscale = \"\\u202e\\u0007\"\n",
		small + "[penalty.relative]\n\"a\\nb\" = 0\n",
	} {
		for _, p := range problems(t, text) {
			if strings.ContainsAny(p.Error(), "\x1b\x07\n\u202e") {
				t.Errorf("%q", p.Error())
			}
		}
	}
}

func TestRead(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "study.toml")
	if err := os.WriteFile(path, []byte(small), 0o644); err != nil {
		t.Fatal(err)
	}
	s, err := Read(path, []string{"draws.seed=7"})
	if err != nil || s.Draws.Seed != 7 || s.Source != path {
		t.Fatalf("got %+v, %v", s, err)
	}
	if want := filepath.Join(dir, "t.csv"); s.TablePath() != want {
		t.Errorf("table at %s, want %s", s.TablePath(), want)
	}
	if _, err := Read(filepath.Join(dir, "none.toml"), nil); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("a missing file gives %v", err)
	}
	if _, err := Read(dir, nil); err == nil {
		t.Error("a folder was read")
	}
}

// A table given in place of a study is refused before it fills the memory.
func TestReadRefusesHugeFile(t *testing.T) {
	path := filepath.Join(t.TempDir(), "table.csv")
	file, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	if err := errors.Join(file.Truncate(maxFile+1), file.Close()); err != nil {
		t.Fatal(err)
	}
	var ps Problems
	if _, err := Read(path, nil); !errors.As(err, &ps) || !strings.Contains(err.Error(), "--outcome") {
		t.Errorf("got %v", err)
	}
}

func TestRebase(t *testing.T) {
	s := parse(t, small)
	moved, err := s.Rebase("dir/s.run")
	if err != nil || moved.Table.Path != "../t.csv" {
		t.Fatalf("got %q, %v", moved.Table.Path, err)
	}
	if moved.TablePath() != s.TablePath() || s.Table.Path != "t.csv" {
		t.Errorf("the table moved: %s, was %s", moved.TablePath(), s.TablePath())
	}
	s.Table.Path = "/data/t.csv"
	moved, err = s.Rebase("elsewhere")
	if err != nil || moved.TablePath() != "/data/t.csv" {
		t.Errorf("got %q, %v", moved.TablePath(), err)
	}
}
