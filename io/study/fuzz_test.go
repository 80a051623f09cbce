package study

import (
	"errors"
	"slices"
	"testing"
)

// FuzzParse holds that no text and no --set ends in a panic or in a study
// that Check would refuse, that errors are Problems with a line inside the
// text, and that what was read can be written and read again as the same.
func FuzzParse(f *testing.F) {
	f.Add([]byte(small), "penalty.mix=0.5")
	f.Add([]byte(designed), "decision.threshold=0.9")
	f.Add([]byte("\uFEFF[table]\r\npath='t'\r\n[outcome]\r\ncolumn='y'\r\n"), `candidates.leave=["a",'b']`)
	f.Add([]byte("[[table]]\npath = 1\n"), `penalty.relative."a=b"=1`)
	f.Add([]byte("table = {path = \"t\"}\noutcome.column = \"\\u0000\"\n[draws]\nseed = 0xff\n"), "penalty={mix=1}")
	f.Add([]byte("[penalty.relative]\n\"a.b\" = 1e300\na.b = 1\n[x.y]\n"), "candidates.leave=[a")
	f.Add([]byte("a = \"\"\"\n"), "=")
	f.Add([]byte("x = 1979-05-27T07:32:00Z\ny = [1,[2]]\n"), "table.path=1979-05-27")
	f.Fuzz(func(t *testing.T, text []byte, set string) {
		for _, sets := range [][]string{nil, {set}} {
			s, err := Parse("s.toml", text, sets)
			if err != nil {
				checkProblems(t, err, text)
				continue
			}
			if err := s.Check(); err != nil {
				t.Fatalf("Parse took what Check refuses: %v", err)
			}
			if s.Decision.Replace == nil {
				checkRoundTrip(t, s)
			}
		}
	})
}

func checkProblems(t *testing.T, err error, text []byte) {
	t.Helper()
	var ps Problems
	if !errors.As(err, &ps) || len(ps) == 0 {
		t.Fatalf("the error is %T", err)
	}
	lines := 1
	for _, c := range text {
		if c == '\n' {
			lines++
		}
	}
	for _, p := range ps {
		if p.Line < 0 || p.Line > lines || p.Why == "" {
			t.Fatalf("problem %+v of a text with %d lines", p, lines)
		}
		if p.Error() != printable(p.Error()) {
			t.Fatalf("unclean message %q", p.Error())
		}
	}
}

// FuzzResolve holds that a column has at most one part, whatever the
// patterns, and that errors are Problems.
func FuzzResolve(f *testing.F) {
	f.Add("*", "a*", "[b-", "a,b,c")
	f.Add("a", "?", "b", "a,b,a")
	f.Fuzz(func(t *testing.T, take, leave, always, names string) {
		s := Default()
		s.Outcome.Column = "y"
		s.Candidates.Take, s.Candidates.Leave, s.Candidates.Always = []string{take}, []string{leave}, []string{always}
		s.Candidates.Groups["group"] = []string{take}
		cols := []Column{{"y", true, "", false}}
		for i, c := range names {
			cols = append(cols, Column{string(c), i%3 != 2, "nested", i%4 == 1})
		}
		r, err := s.Resolve(cols)
		var ps Problems
		if err != nil {
			if !errors.As(err, &ps) {
				t.Fatalf("the error is %T", err)
			}
			return
		}
		checkUnits(t, "", r)
		seen := map[string]string{}
		for what, list := range map[string][]string{"candidate": r.Candidates, "always": r.Always, "left": slices.Compact(slices.Sorted(slices.Values(r.Left)))} {
			for _, name := range list {
				if seen[name] != "" || name == "y" {
					t.Fatalf("%q is %s and %s", name, what, seen[name])
				}
				seen[name] = what
			}
		}
	})
}
