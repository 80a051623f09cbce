package study

import (
	"fmt"
	"strconv"
	"strings"
	"unicode/utf8"
)

// Problem is one thing that is wrong with a study: where, which key, why.
type Problem struct {
	File string // the study as the caller named it
	Line int    // line of the file, from 1; 0: the file as a whole
	Set  string // the --set argument, where the problem is in one
	Key  string // section.key, as it would be written in TOML; may be empty

	Value string // the value as it would be written, where it is the value that is wrong
	Why   string // what is wrong and what is allowed
}

// Error says it in one line, such as
// "study: hatchery.toml:12: penalty.mix = 2.0: must be above 0 and at most 1".
func (p Problem) Error() string {
	parts := []string{"study"}
	switch {
	case p.Set != "":
		parts = append(parts, "--set "+printable(p.Set))
	case p.Line > 0:
		parts = append(parts, fmt.Sprintf("%s:%d", printable(p.File), p.Line))
	case p.File != "":
		parts = append(parts, printable(p.File))
	}
	switch {
	case p.Key != "" && p.Value != "":
		parts = append(parts, p.Key+" = "+p.Value)
	case p.Key != "":
		parts = append(parts, p.Key)
	}
	return strings.Join(append(parts, p.Why), ": ")
}

// Problems is everything found wrong at once, in the order of the file. It is
// the error of Read, Parse, Resolve and CheckReady: a wrong study, exit code 2.
type Problems []Problem

// mostShown is how many problems a message lists.
const mostShown = 20

// Error puts each problem on a line of its own, the first of very many.
func (ps Problems) Error() string {
	var lines []string
	for _, p := range ps[:min(mostShown, len(ps))] {
		lines = append(lines, p.Error())
	}
	if more := len(ps) - mostShown; more > 0 {
		lines = append(lines, fmt.Sprintf("study: and %d more problems", more))
	}
	return strings.Join(lines, "\n")
}

// place is where a key was given.
type place struct {
	line int
	set  string
}

// faults collects problems about the keys of one study.
type faults struct {
	file   string
	places map[string]place
	found  Problems
}

// add notes a problem of key, at the place where the key was given.
func (f *faults) add(key, format string, args ...any) {
	f.at(f.places[key], key, "", format, args...)
}

// value notes a problem of the value of key, at the place where it was given.
func (f *faults) value(key, value, format string, args ...any) {
	f.at(f.places[key], key, value, format, args...)
}

// at notes a problem at a given place.
func (f *faults) at(where place, key, value, format string, args ...any) {
	f.found = append(f.found, Problem{
		File: f.file, Line: where.line, Set: where.set,
		Key: key, Value: value, Why: fmt.Sprintf(format, args...),
	})
}

// err is nil where nothing was found: a nil Problems must not become a
// non-nil error.
func (f *faults) err() error {
	if len(f.found) == 0 {
		return nil
	}
	return f.found
}

// printable makes text from a file safe to show: control characters, bytes
// that are no UTF-8 and invisible marks (such as those that turn the writing
// direction) are escaped, everything else stays as it is.
func printable(s string) string {
	var b strings.Builder
	for i, r := range s {
		switch {
		case r == utf8.RuneError && !strings.HasPrefix(s[i:], "\uFFFD"):
			fmt.Fprintf(&b, `\x%02x`, s[i])
		case strconv.IsGraphic(r):
			b.WriteRune(r)
		default:
			quoted := strconv.QuoteRune(r)
			b.WriteString(quoted[1 : len(quoted)-1])
		}
	}
	return b.String()
}
