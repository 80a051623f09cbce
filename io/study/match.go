package study

import (
	"path"
	"strings"
)

// hasPattern says whether a text may be a pattern: * stands for any run of
// characters, ? for one, [a-z] for one of a set, and \ takes the next as it is.
func hasPattern(text string) bool { return strings.ContainsAny(text, `*?[\`) }

// unslash hides the one character that path.Match gives a meaning to and that
// has none in a column name.
var unslash = strings.NewReplacer("/", "\x00")

// matcher tests names against one pattern.
type matcher struct{ pattern string }

// newMatcher refuses what is no pattern, such as a bracket that never closes.
func newMatcher(pattern string) (matcher, error) {
	m := matcher{unslash.Replace(pattern)}
	_, err := path.Match(m.pattern, "")
	return m, err
}

// match says whether all of name fits the pattern.
func (m matcher) match(name string) bool {
	ok, err := path.Match(m.pattern, unslash.Replace(name))
	return ok && err == nil
}
