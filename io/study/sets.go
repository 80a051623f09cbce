package study

import (
	"errors"
	"fmt"
	"strings"
)

// setAll applies the --set arguments over the file. The three numbers of the
// decision are read apart: they replace as `judge` replaces.
func (r *reader) setAll(sets []string) {
	file := r.study.Decision.three()
	r.study.Decision.setThree(three{})
	for _, set := range sets {
		r.set(set)
	}
	change := r.study.Decision.three()
	r.study.Decision.setThree(three{})
	r.combine(file, change)
}

// set applies one argument.
func (r *reader) set(set string) {
	at := place{set: set}
	path, raw, err := splitSet(set)
	if err != nil {
		r.faults.at(at, "", "", "%v", err)
		return
	}
	found, err := setLeaves(path, raw)
	if err != nil {
		r.faults.at(at, "", "", "%v", err)
		return
	}
	// The argument stands for the key as a whole: a later one replaces an
	// earlier one, and what the file says, without a trace.
	if k, ok := keyAt(path); ok && k.entries != nil && len(path) == 2 && found[0].value.shape == sectionShape {
		k.entries.clear(r.study)
	}
	for _, l := range found {
		r.assign(l, at)
	}
}

// keyAt finds the key of a path.
func keyAt(path []string) (key, bool) {
	if len(path) < 2 {
		return key{}, false
	}
	sec, ok := sectionNamed(path[0])
	if !ok {
		return key{}, false
	}
	return sec.keyNamed(path[1])
}

// splitSet cuts "section.key=value" at the first = outside quotes.
func splitSet(set string) (path []string, raw string, err error) {
	var quote rune
	for i, c := range set {
		switch {
		case quote != 0:
			if c == quote {
				quote = 0
			}
		case c == '"' || c == '\'':
			quote = c
		case c == '=':
			return splitAt(set, i)
		}
	}
	if i := strings.IndexByte(set, '='); i >= 0 { // the quote was a letter of a name
		return splitAt(set, i)
	}
	return nil, "", fmt.Errorf("must be section.key=value, such as penalty.mix=0.5")
}

func splitAt(set string, i int) (path []string, raw string, err error) {
	path, err = splitKey(strings.TrimSpace(set[:i]))
	return path, strings.TrimSpace(set[i+1:]), err
}

// splitKey reads a dotted key. What TOML would have in quotes, such as a
// column name with a space or a dot, may go without them.
func splitKey(text string) ([]string, error) {
	if strings.ContainsAny(text, "\r\n") {
		return nil, fmt.Errorf("must be section.key=value on one line")
	}
	if found, err := leaves([]byte(text + " = 0")); err == nil && len(found) == 1 {
		path := found[0].path
		if len(path) <= 3 {
			return path, nil
		}
	}
	path := strings.SplitN(text, ".", 3)
	for i, p := range path {
		path[i] = strings.TrimSpace(p)
	}
	if len(path) < 2 || path[1] == "" {
		return nil, fmt.Errorf("must be section.key=value, such as penalty.mix=0.5")
	}
	return path, nil
}

// setLeaves reads the value of an argument as TOML, or as a text without its
// quotes.
func setLeaves(path []string, raw string) ([]leaf, error) {
	if found, err := tomlLeaves(leadingZero(raw)); err == nil {
		for i := range found {
			found[i].path = append(append([]string{}, path...), found[i].path[1:]...)
		}
		found[0].value.allowBare(raw)
		return found, nil
	}
	if v, ok := bareList(raw); ok {
		return []leaf{{path: path, value: v}}, nil
	}
	if raw != "" && strings.ContainsRune(`"'[{`, rune(raw[0])) {
		_, err := tomlLeaves(raw)
		return nil, fmt.Errorf("the value is not TOML: %v (in most shells put the whole argument in single quotes)", err)
	}
	return []leaf{{path: path, value: value{shape: textShape, text: raw}}}, nil
}

// leadingZero completes a number that begins with its point, which TOML does
// not know.
func leadingZero(raw string) string {
	digits := strings.TrimLeft(raw, "+-")
	if sign := len(raw) - len(digits); sign <= 1 && len(digits) > 1 && digits[0] == '.' && digits[1] >= '0' && digits[1] <= '9' {
		return raw[:sign] + "0" + digits
	}
	return raw
}

// allowBare lets a value without quotes be a text where a key wants one: a
// column may be called 2021 or true.
func (v *value) allowBare(raw string) {
	switch v.shape {
	case wholeShape, realShape, boolShape, dateShape:
		v.bare = raw
	case listShape:
		for i := range v.list {
			v.list[i].allowBare(v.list[i].text)
		}
	}
}

// tomlLeaves reads raw as one TOML value, under the name v.
func tomlLeaves(raw string) ([]leaf, error) {
	found, err := leaves([]byte("v = " + raw))
	if err != nil {
		return nil, err
	}
	for _, l := range found {
		if l.path[0] != "v" {
			return nil, errors.New("more than one value")
		}
	}
	return found, nil
}

// bareList reads [a, b], what a shell leaves of ["a", "b"].
func bareList(raw string) (value, bool) {
	if len(raw) < 2 || raw[0] != '[' || raw[len(raw)-1] != ']' || strings.ContainsAny(raw[1:len(raw)-1], `[]"'{}`) {
		return value{}, false
	}
	list := value{shape: listShape}
	for _, e := range strings.Split(raw[1:len(raw)-1], ",") {
		list.list = append(list.list, value{shape: textShape, text: strings.TrimSpace(e)})
	}
	return list, true
}
