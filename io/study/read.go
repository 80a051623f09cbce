package study

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"sort"
	"strings"
)

// maxFile is the largest study that is read: a list of 100,000 long column
// names fits twenty times over.
const maxFile = 64 << 20

// Read reads a study file and applies sets, each "section.key=value", in
// order. The error is Problems where the study is wrong; any other error
// comes from the file system.
func Read(path string, sets []string) (*Study, error) {
	text, err := readFile(path)
	if err != nil {
		return nil, err
	}
	return Parse(path, text, sets)
}

// readFile reads a regular file of at most maxFile bytes.
func readFile(path string) ([]byte, error) {
	file, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("study: %w", err)
	}
	defer file.Close()
	text, err := io.ReadAll(io.LimitReader(file, maxFile+1))
	if err != nil {
		return nil, fmt.Errorf("study: %w", err)
	}
	if len(text) > maxFile {
		return nil, Problems{{File: path, Why: fmt.Sprintf("a study file has at most %d MiB: is this the table? give it with --outcome", maxFile>>20)}}
	}
	return text, nil
}

// Parse reads the text of a study. name is the file it stands for: messages
// show it, and relative paths of the study start at its folder. The text is
// not changed or kept. Defaults are filled in and every key is checked; all
// problems found come back together as Problems.
func Parse(name string, text []byte, sets []string) (*Study, error) {
	r := newReader(name)
	if r.file(text) {
		r.setAll(sets)
		r.finish()
	}
	if err := r.faults.err(); err != nil {
		return nil, err
	}
	r.study.places = r.faults.places
	return r.study, nil
}

// reader fills one study.
type reader struct {
	study  *Study
	faults faults
	told   map[string]bool // keys and sections with a problem noted
}

func newReader(name string) *reader {
	s := Default()
	s.Source, s.Dir = name, filepath.Dir(name)
	return &reader{
		study:  &s,
		faults: faults{file: name, places: map[string]place{}},
		told:   map[string]bool{},
	}
}

// file reads the text of the study file, and says whether it is TOML: of a
// text that is not, nothing else can be said.
func (r *reader) file(text []byte) bool {
	found, err := leaves([]byte(strings.TrimPrefix(string(text), "\uFEFF")))
	var bad *syntaxError
	if errors.As(err, &bad) {
		r.faults.at(place{line: bad.line}, "", "", "is not TOML: %s (a text stands in double quotes, a list in [ ])", bad.why)
		return false
	}
	for _, l := range found {
		r.assign(l, place{line: l.line})
	}
	return true
}

// assign gives one key its value, or notes why it cannot have it.
func (r *reader) assign(l leaf, at place) {
	name := pathName(l.path)
	if l.list {
		r.faults.at(at, "["+name+"]", "", "stands in double brackets, which makes a list: write [%s], once", name)
		return
	}
	sec, ok := sectionNamed(l.path[0])
	switch {
	case !ok:
		r.once(l.path[:1], at, name, unknownSection(l))
		return
	case len(l.path) == 1 && l.value.shape != sectionShape:
		r.faults.at(at, name, "", "is a section: write [%s] on a line of its own and its keys below", name)
		return
	case len(l.path) == 1:
		return
	}
	k, ok := sec.keyNamed(l.path[1])
	switch {
	case !ok:
		r.once(l.path[:2], at, name, unknownKey(sec, l.path[1]))
	case k.entries != nil:
		r.entry(k, l, at)
	case len(l.path) > 2:
		r.once(l.path[:2], at, name, pathName(l.path[:2])+" has one value and no keys of its own")
	default:
		r.note(name, l.value, at, k.field.set(r.study, l.value))
	}
}

// entry reads one name of a key that is a section of the user's own names.
func (r *reader) entry(k key, l leaf, at place) {
	name := pathName(l.path)
	switch {
	case len(l.path) == 2 && l.value.shape == sectionShape: // the header; its entries follow
	case len(l.path) == 2:
		r.note(name, l.value, at, fmt.Errorf("must be a section: write [%s] and below it a line for each name", name))
	case len(l.path) > 3:
		r.faults.at(at, name, "", "a name with a dot stands in double quotes: %s.%s",
			pathName(l.path[:2]), quoted(strings.Join(l.path[2:], ".")))
	default:
		r.note(name, l.value, at, k.entries.put(r.study, l.path[2], l.value))
	}
}

// note remembers where a key was given, and what is wrong with its value.
func (r *reader) note(name string, v value, at place, err error) {
	r.faults.places[name] = at
	if err != nil {
		r.told[name] = true
		r.faults.at(at, name, v.String(), "%v", err)
	}
}

// once notes a problem that all keys below a path share, the first time.
func (r *reader) once(path []string, at place, name, why string) {
	if shared := pathName(path); !r.told[shared] {
		r.told[shared] = true
		r.faults.at(at, name, "", "%s", why)
	}
}

// unknownSection says what a first name that is no section may have meant.
func unknownSection(l leaf) string {
	first := l.path[0]
	if len(l.path) == 1 && l.value.shape != sectionShape {
		if homes := homesOf(first); len(homes) > 0 {
			return fmt.Sprintf("stands outside its section: it belongs to %s", strings.Join(homes, ", "))
		}
		return fmt.Sprintf("is not a key of a study, and stands in no section; the nearest key is %s", nearest(first, shortNames()))
	}
	return fmt.Sprintf("there is no section [%s]; the nearest is [%s]", keyName(first), nearest(first, sectionNames()))
}

// unknownKey says what a name that is no key of its section may have meant.
func unknownKey(sec section, name string) string {
	if homes := homesOf(name); len(homes) > 0 {
		return fmt.Sprintf("is not a key of [%s]; %s belongs to %s", sec.name, name, strings.Join(homes, ", "))
	}
	best := nearest(name, namesOf(sec))
	if other := nearest(name, shortNames()); edits(name, other) < edits(name, best) {
		return fmt.Sprintf("is not a key of [%s]; the nearest key is %s, which belongs to %s", sec.name, other, strings.Join(homesOf(other), ", "))
	}
	return fmt.Sprintf("is not a key of a study; the nearest is %s.%s", sec.name, best)
}

// homesOf lists the sections that have a key of a name, in brackets.
func homesOf(name string) []string {
	var homes []string
	for _, s := range sections {
		if _, ok := s.keyNamed(name); ok {
			homes = append(homes, "["+s.name+"]")
		}
	}
	return homes
}

func sectionNames() []string {
	names := make([]string, len(sections))
	for i, s := range sections {
		names[i] = s.name
	}
	return names
}

func namesOf(s section) []string {
	names := make([]string, len(s.keys))
	for i, k := range s.keys {
		names[i] = k.name
	}
	return names
}

// shortNames is every key without its section.
func shortNames() []string {
	var names []string
	for _, s := range sections {
		names = append(names, namesOf(s)...)
	}
	return names
}

// finish fills in what depends on several keys, and checks the whole.
func (r *reader) finish() {
	if r.study.Draws.Within == nil {
		r.study.Draws.Within = defaultWithin(r.study.Outcome.Kind)
	}
	r.study.check(&r.faults)
	sort.SliceStable(r.faults.found, func(i, j int) bool {
		a, b := r.faults.found[i], r.faults.found[j]
		return a.Set == "" && (b.Set != "" || a.Line < b.Line)
	})
}
