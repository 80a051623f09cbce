package table

import (
	"bytes"
	"fmt"
	"math"
	"slices"
	"sort"
	"strconv"
	"sync"
	"sync/atomic"
	"unicode/utf8"
)

// Limits of what is collected of a column of text. All are held before memory
// is taken.
const (
	longestLevel = 1000     // bytes of one level
	levelBytes   = 64 << 20 // bytes of all levels of a column
	knownLevels  = 1024     // levels that one goroutine remembers by itself
)

// plainReason is why a column of text is no number, where nothing else is to
// be said.
const plainReason = "is text"

// Codes of cells that have no level.
const (
	noCode  int32 = -1 // missing
	oddCode int32 = -2 // text that can be no level, or one too many
)

// texts takes in the cells of one column of text: a number for every
// different text, in the order in which they are met. Several goroutines may
// add at once. It stops collecting as soon as there are too many.
type texts struct {
	codes []int32 // per table row
	most  int     // different texts that are collected

	full    atomic.Bool // there are more than most, or too many bytes
	mu      sync.Mutex
	numbers map[string]int32
	names   []string
	size    int // bytes in names
	odd     oddity
}

// oddity is the first row of a column whose text can be no level.
type oddity struct {
	why string // empty: there is none
	row int64
}

func newTexts(rows, most int) *texts {
	return &texts{codes: make([]int32, rows), most: most, numbers: map[string]int32{}}
}

// add returns the code of a cell's text. Blanks around a text do not count,
// and an empty text is a missing cell.
func (t *texts) add(text []byte, row int64) int32 {
	if len(text) > longestLevel {
		return t.refuse(row, fmt.Sprintf("holds a text of more than %d bytes, which is no level", longestLevel))
	}
	text = bytes.TrimSpace(text)
	switch {
	case len(text) == 0:
		return noCode
	case !utf8.Valid(text):
		return t.refuse(row, "holds text that is not UTF-8 (save the file as UTF-8)")
	}
	t.mu.Lock()
	defer t.mu.Unlock()
	code, known := t.numbers[string(text)]
	switch {
	case known:
		return code
	case t.full.Load() || len(t.names) == t.most || t.size+len(text) > levelBytes:
		t.full.Store(true)
		return oddCode
	}
	name := string(text)
	code = int32(len(t.names))
	t.numbers[name], t.names, t.size = code, append(t.names, name), t.size+len(name)
	return code
}

// refuse remembers the first row whose text can be no level.
func (t *texts) refuse(row int64, why string) int32 {
	t.mu.Lock()
	defer t.mu.Unlock()
	if t.odd.why == "" || row < t.odd.row {
		t.odd = oddity{why, row}
	}
	return oddCode
}

// textCache spares one goroutine the lock of a column for the texts that it
// has met.
type textCache struct {
	texts *texts
	known map[string]int32
}

func (c *textCache) add(text []byte, row int64) int32 {
	if code, ok := c.known[string(text)]; ok {
		return code
	}
	code := c.texts.add(text, row)
	if code >= 0 && len(c.known) < knownLevels {
		if c.known == nil {
			c.known = map[string]int32{}
		}
		c.known[string(text)] = code
	}
	return code
}

// coding is a column as the numbers of its levels.
type coding struct {
	names []string // levels in their order
	codes []int32  // per row: position in names, or noCode
}

// coding returns the levels of a column that was read, in byte order; fault
// says why it has none. Too many levels come first: they do not depend on the
// order in which cells were met. The codes are taken over.
func (t *texts) coding(most int) (c coding, fault string) {
	switch {
	case t.full.Load() && len(t.names) < min(most, t.most):
		return c, fmt.Sprintf("has levels of more than %s altogether", byteSize(levelBytes))
	case t.full.Load() || len(t.names) > most:
		return c, tooMany(most)
	case t.odd.why != "":
		return c, fmt.Sprintf("row %d %s", t.odd.row, t.odd.why)
	}
	c = coding{names: append([]string(nil), t.names...), codes: append([]int32(nil), t.codes...)}
	c.reorder(func(a, b int) bool { return c.names[a] < c.names[b] })
	return c, ""
}

func tooMany(most int) string { return fmt.Sprintf("has more than %s levels", grouped(int64(most))) }

// reorder sorts the levels.
func (c *coding) reorder(less func(a, b int) bool) {
	order := make([]int, len(c.names))
	for i := range order {
		order[i] = i
	}
	sort.SliceStable(order, func(i, j int) bool { return less(order[i], order[j]) })
	names, place := make([]string, len(order)), make([]int32, len(order))
	for to, from := range order {
		names[to], place[from] = c.names[from], int32(to)
	}
	c.names = names
	c.renumber(place)
}

// renumber gives every level a new position.
func (c *coding) renumber(place []int32) {
	for i, k := range c.codes {
		if k >= 0 {
			c.codes[i] = place[k]
		}
	}
}

// codeNumbers returns the levels of a column of numbers, by size. A NaN is a
// missing cell. fault says why there are none.
func codeNumbers(v []float64, kind Kind, most int) (c coding, fault string) {
	numbers := map[float64]int32{}
	var found []float64
	c.codes = make([]int32, len(v))
	for i, x := range v {
		x += 0 // one zero
		code, known := numbers[x]
		switch {
		case x != x:
			code = noCode
		case math.IsInf(x, 0):
			return coding{}, fmt.Sprintf("row %d holds an infinite value", i)
		case !known && len(found) == most:
			return coding{}, tooMany(most)
		case !known:
			code = int32(len(found))
			numbers[x], found = code, append(found, x)
		}
		c.codes[i] = code
	}
	for _, x := range found {
		c.names = append(c.names, levelOfNumber(x, kind))
	}
	c.reorder(func(a, b int) bool { return found[a] < found[b] })
	return c, ""
}

// levelOfNumber writes a number as a level: truth values as words, others
// with as many digits as tell them apart.
func levelOfNumber(x float64, kind Kind) string {
	switch size := math.Abs(x); {
	case kind == Boolean && x == 0:
		return "false"
	case kind == Boolean:
		return "true"
	case x == 0, size >= 1e-6 && size < 1e21:
		return strconv.FormatFloat(x, 'f', -1, 64)
	}
	return strconv.FormatFloat(x, 'g', -1, 64)
}

// levelAsTyped writes what a user calls a level as the column does: 1.0 and 1
// are the same number, TRUE is true.
func levelAsTyped(text string, kind Kind) string {
	b := bytes.TrimSpace([]byte(text))
	if v, what := parseCell(b); kind == Boolean && what == cellTruth || kind.Numeric() && kind != Boolean && (what == cellInteger || what == cellFraction) {
		return levelOfNumber(v, kind)
	}
	return string(b)
}

// counts returns how many rows each level has.
func (c *coding) counts() []int64 {
	n := make([]int64, len(c.names))
	for _, k := range c.codes {
		if k >= 0 {
			n[k]++
		}
	}
	return n
}

// keep returns the coding over the rows given (nil: all), without the levels
// that none of them has.
func (c *coding) keep(rows []int32) coding {
	out := coding{codes: c.codes}
	if rows != nil {
		out.codes = make([]int32, len(rows))
		for k, i := range rows {
			out.codes[k] = c.codes[i]
		}
	}
	out.names = c.names
	place, gone := make([]int32, len(c.names)), 0
	var names []string
	for k, n := range out.counts() {
		if n == 0 {
			gone++
			continue
		}
		place[k] = int32(len(names))
		names = append(names, c.names[k])
	}
	if gone > 0 {
		out.codes = slices.Clone(out.codes)
		out.names = names
		out.renumber(place)
	}
	return out
}

// levels lists the levels and their rows.
func (c *coding) levels() []Level {
	out := make([]Level, len(c.names))
	for k, n := range c.counts() {
		out[k] = Level{c.names[k], n}
	}
	return out
}

// find returns the position of a level, -1 if there is none.
func (c *coding) find(name string) int { return slices.Index(c.names, name) }

// levelList names levels and their rows for a message.
func levelList(levels []Level) string {
	const most = 10
	var b bytes.Buffer
	for i, l := range levels[:min(most, len(levels))] {
		if i > 0 {
			b.WriteString(", ")
		}
		fmt.Fprintf(&b, "%s (%s)", quote(l.Name), plural(l.Count, "row"))
	}
	if more := len(levels) - most; more > 0 {
		fmt.Fprintf(&b, " and %d more", more)
	}
	return b.String()
}
