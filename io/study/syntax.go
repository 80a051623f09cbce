package study

import (
	"bytes"
	"errors"
	"fmt"
	"sort"
	"strconv"
	"strings"
	"unicode/utf8"

	"github.com/pelletier/go-toml/v2"
	"github.com/pelletier/go-toml/v2/unstable"
)

// shape is the TOML type of a value.
type shape uint8

const (
	textShape shape = iota
	wholeShape
	realShape
	boolShape
	listShape
	sectionShape // an inline table, or a header
	dateShape
)

// value is one TOML value.
type value struct {
	shape shape
	text  string  // textShape: decoded; other scalars: as written
	bare  string  // in a --set argument: what stands there, should the key want a text
	list  []value // listShape
}

// String shows a value in a message: as it would be written, with what it is
// where that is not plain to see.
func (v value) String() string {
	switch v.shape {
	case textShape:
		return shortened(quoted(v.text))
	case listShape:
		return "a list"
	case sectionShape:
		return "a section"
	case dateShape:
		return shortened(printable(v.text)) + " (a date or time)"
	}
	return shortened(printable(v.text))
}

// asText is the value where a text is wanted.
func (v value) asText() (string, bool) {
	if v.shape == textShape {
		return v.text, true
	}
	return v.bare, v.bare != ""
}

// shortened cuts what is too long to be read in a message.
func shortened(s string) string {
	const most = 60
	if utf8.RuneCountInString(s) <= most {
		return s
	}
	return string([]rune(s)[:most]) + "..."
}

// leaf is one assignment of a document, or a section header with nothing
// assigned in the header itself.
type leaf struct {
	path  []string
	line  int
	value value
	list  bool // a header in double brackets
}

// syntaxError is a document that is not TOML.
type syntaxError struct {
	line int
	why  string
}

func (e *syntaxError) Error() string { return e.why }

// leaves reads a document into its assignments, in order. The library's
// decoder is the judge of what is TOML (syntax, keys given twice, numbers that
// fit); its parser then gives the values with their positions.
func leaves(document []byte) ([]leaf, error) {
	// A copy with no room behind it: the library finds positions by the
	// capacity of slices.
	document = bytes.Clone(document)
	var whole any
	if err := toml.Unmarshal(document, &whole); err != nil {
		return nil, asSyntaxError(err)
	}
	walk := walker{lines: newlines(document)}
	walk.parser.Reset(document)
	for walk.parser.NextExpression() {
		walk.expression(walk.parser.Expression())
	}
	if err := walk.parser.Error(); err != nil {
		return nil, asSyntaxError(err)
	}
	return walk.leaves, nil
}

// asSyntaxError keeps the line and the reason of the library's error.
func asSyntaxError(err error) error {
	var decode *toml.DecodeError
	if errors.As(err, &decode) {
		line, _ := decode.Position()
		return &syntaxError{line: line, why: strings.TrimPrefix(decode.Error(), "toml: ")}
	}
	return &syntaxError{why: strings.TrimPrefix(err.Error(), "toml: ")}
}

// newlines lists the offsets of all line ends.
func newlines(document []byte) []int {
	var at []int
	for i, c := range document {
		if c == '\n' {
			at = append(at, i)
		}
	}
	return at
}

// walker turns the parser's expressions into leaves.
type walker struct {
	parser unstable.Parser
	lines  []int
	prefix []string // the header in force
	leaves []leaf
}

func (w *walker) expression(node *unstable.Node) {
	switch node.Kind {
	case unstable.Table, unstable.ArrayTable:
		path, line := w.key(node.Key())
		w.prefix = path
		w.leaves = append(w.leaves, leaf{
			path: path, line: line, value: value{shape: sectionShape},
			list: node.Kind == unstable.ArrayTable,
		})
	case unstable.KeyValue:
		w.assignment(w.prefix, node)
	}
}

// assignment flattens inline tables: a = {b = 1} is a.b = 1.
func (w *walker) assignment(prefix []string, node *unstable.Node) {
	name, line := w.key(node.Key())
	path := append(append([]string{}, prefix...), name...)
	content := node.Value()
	if content.Kind != unstable.InlineTable {
		w.leaves = append(w.leaves, leaf{path: path, line: line, value: w.value(content)})
		return
	}
	w.leaves = append(w.leaves, leaf{path: path, line: line, value: value{shape: sectionShape}})
	for it := content.Children(); it.Next(); {
		if it.Node().Kind == unstable.KeyValue {
			w.assignment(path, it.Node())
		}
	}
}

// key returns the parts of a dotted key and the line it stands on.
func (w *walker) key(it unstable.Iterator) (parts []string, line int) {
	for it.Next() {
		if line == 0 {
			line = 1 + sort.SearchInts(w.lines, int(it.Node().Raw.Offset))
		}
		parts = append(parts, string(it.Node().Data))
	}
	return parts, line
}

func (w *walker) value(node *unstable.Node) value {
	switch node.Kind {
	case unstable.String:
		return value{shape: textShape, text: string(node.Data)}
	case unstable.Integer:
		return value{shape: wholeShape, text: string(node.Data)}
	case unstable.Float:
		return value{shape: realShape, text: string(node.Data)}
	case unstable.Bool:
		return value{shape: boolShape, text: string(node.Data)}
	case unstable.Array:
		return w.listOf(node)
	case unstable.InlineTable:
		return value{shape: sectionShape}
	}
	return value{shape: dateShape, text: string(node.Data)}
}

func (w *walker) listOf(node *unstable.Node) value {
	list := value{shape: listShape}
	for it := node.Children(); it.Next(); {
		list.list = append(list.list, w.value(it.Node()))
	}
	return list
}

// whole reads a TOML integer: the library has checked its form and size.
func (v value) whole() (int64, error) {
	return strconv.ParseInt(v.text, 0, 64)
}

// real reads a TOML number, whole or not; inf and nan are numbers here and
// are refused where a key is read.
func (v value) real() (float64, error) {
	if v.shape == wholeShape {
		whole, err := v.whole()
		return float64(whole), err
	}
	return strconv.ParseFloat(strings.ReplaceAll(v.text, "_", ""), 64)
}

// pathName writes a path as TOML would, safe to show.
func pathName(path []string) string {
	parts := make([]string, len(path))
	for i, p := range path {
		parts[i] = keyName(p)
	}
	return strings.Join(parts, ".")
}

// keyName is a name as a TOML key: bare where it can be, else quoted.
func keyName(name string) string {
	if name == "" || strings.Trim(name, "abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789_-") != "" {
		return quoted(name)
	}
	return name
}

// quoted is a text as a TOML basic string on one line. What is not graphic is
// escaped though TOML would allow some of it raw: it is invisible or turns
// the writing direction. A byte that is no UTF-8, which TOML cannot hold,
// becomes U+FFFD.
func quoted(s string) string {
	var b strings.Builder
	b.WriteByte('"')
	for _, r := range s {
		switch {
		case r == '"' || r == '\\':
			b.WriteByte('\\')
			b.WriteRune(r)
		case strconv.IsGraphic(r):
			b.WriteRune(r)
		case r > 0xFFFF:
			fmt.Fprintf(&b, `\U%08X`, r)
		default:
			fmt.Fprintf(&b, `\u%04X`, r)
		}
	}
	b.WriteByte('"')
	return b.String()
}
