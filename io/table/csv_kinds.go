package table

import (
	"bytes"
	"context"
	"fmt"
	"math/big"
	"strconv"
	"unsafe"
)

// cell is what one cell of text holds.
type cell uint8

const (
	cellMissing  cell = iota // see missingWords
	cellInteger              // digits
	cellFraction             // any other number, NaN and infinite among them
	cellTruth                // true, false
	cellText
)

// missingWords are the cells that hold no value, beside the empty one.
var missingWords = map[string]bool{
	"": true, "NA": true, "N/A": true, "n/a": true, "#N/A": true, "NULL": true, "null": true, "None": true, ".": true,
}

// parseCell reads a cell. Blanks around numbers do not count. A number too
// large for float64 is infinite.
func parseCell(b []byte) (v float64, kind cell) {
	b = bytes.TrimSpace(b)
	if len(b) <= 4 && missingWords[string(b)] {
		return 0, cellMissing
	}
	if v, ok := smallInteger(b); ok {
		return v, cellInteger
	}
	switch string(b) {
	case "true", "TRUE", "True":
		return 1, cellTruth
	case "false", "FALSE", "False":
		return 0, cellTruth
	}
	if !numberLike(b) {
		return 0, cellText
	}
	text := unsafe.String(&b[0], len(b)) // ParseFloat keeps it only in errors, which are dropped
	v, err := strconv.ParseFloat(text, 64)
	if err != nil && v == 0 {
		return 0, cellText
	}
	if allDigits(b) {
		return v, cellInteger
	}
	return v, cellFraction
}

// smallInteger reads integers of up to 15 digits, all of which are exact.
func smallInteger(b []byte) (float64, bool) {
	digits := b
	if len(b) > 0 && (b[0] == '-' || b[0] == '+') {
		digits = b[1:]
	}
	if len(digits) == 0 || len(digits) > 15 {
		return 0, false
	}
	var n int64
	for _, c := range digits {
		if c < '0' || c > '9' {
			return 0, false
		}
		n = 10*n + int64(c-'0')
	}
	if b[0] == '-' {
		n = -n
	}
	return float64(n), true
}

// numberLike sorts out what ParseFloat would take but nobody means: numbers in
// base 16 and underscores between digits.
func numberLike(b []byte) bool {
	switch c := b[0]; {
	case c >= '0' && c <= '9', c == '.', c == '-', c == '+':
	case c == 'n' || c == 'N' || c == 'i' || c == 'I': // nan, inf
	default:
		return false
	}
	for _, c := range b {
		if c == '_' || c == 'x' || c == 'X' {
			return false
		}
	}
	return true
}

func allDigits(b []byte) bool {
	if b[0] == '-' || b[0] == '+' {
		b = b[1:]
	}
	for _, c := range b {
		if c < '0' || c > '9' {
			return false
		}
	}
	return len(b) > 0
}

// exactText reports whether float64 holds the integer written in b.
func exactText(b []byte) bool {
	b = bytes.TrimSpace(b)
	if len(b) <= 15 {
		return true
	}
	u, ok := new(big.Int).SetString(string(bytes.TrimPrefix(b, []byte("+"))), 10)
	return ok && exactBig(u)
}

// sighting is where something was seen first.
type sighting struct {
	row, line int64
	value     string
}

// csvTally counts what the cells of a column hold.
type csvTally struct {
	integers, fractions, truths, texts, dates int64
	truth, text                               sighting
}

// take counts a cell.
func (t *csvTally) take(field []byte, row, line int64) {
	switch _, kind := parseCell(field); kind {
	case cellInteger:
		t.integers++
	case cellFraction:
		t.fractions++
	case cellTruth:
		if t.truths == 0 {
			t.truth = sighting{row, line, string(field)}
		}
		t.truths++
	case cellText:
		if t.texts == 0 {
			t.text = sighting{row, line, string(field)}
		}
		t.texts++
		if dateLike(field) {
			t.dates++
		}
	}
}

// merge adds the counts of another worker; the earlier sighting counts.
func (t *csvTally) merge(o csvTally) {
	if o.texts > 0 && (t.texts == 0 || o.text.row < t.text.row) {
		t.text = o.text
	}
	if o.truths > 0 && (t.truths == 0 || o.truth.row < t.truth.row) {
		t.truth = o.truth
	}
	t.integers += o.integers
	t.fractions += o.fractions
	t.truths += o.truths
	t.texts += o.texts
	t.dates += o.dates
}

// dateLike recognises dates as ISO 8601 writes them, alone or with a time:
// 2024-01-31, 2024-01-31T08:00, 2024-01-31 08:00.
func dateLike(b []byte) bool {
	b = bytes.TrimSpace(b)
	if len(b) < 10 || b[4] != '-' || b[7] != '-' {
		return false
	}
	for _, k := range []int{0, 1, 2, 3, 5, 6, 8, 9} {
		if b[k] < '0' || b[k] > '9' {
			return false
		}
	}
	return len(b) == 10 || b[10] == 'T' || b[10] == ' '
}

// column decides what a column is from the cells counted.
func (t *csvTally) column(name string) Column {
	c := Column{Name: name}
	numbers := t.integers + t.fractions
	switch {
	case t.texts > 0 && t.dates == t.texts && numbers+t.truths == 0:
		c.Kind, c.Type, c.Reason = Date, "date", "is a date or time, not a number"
	case t.texts > 0 && numbers > 0:
		c.Kind, c.Type = Text, "text"
		c.Reason = fmt.Sprintf("is text: row %d (line %d) holds %s, not a number%s", t.text.row, t.text.line, quote(t.text.value), commaHint(t.text.value))
	case t.texts > 0:
		c.Kind, c.Type, c.Reason = Text, "text", plainReason
		if hint := commaHint(t.text.value); hint != "" {
			c.Reason = fmt.Sprintf("is text: row %d (line %d) holds %s%s", t.text.row, t.text.line, quote(t.text.value), hint)
		}
	case t.truths > 0 && numbers > 0:
		c.Kind, c.Type = Text, "text"
		c.Reason = fmt.Sprintf("is text: row %d (line %d) holds %s among numbers", t.truth.row, t.truth.line, quote(t.truth.value))
	case t.truths > 0:
		c.Kind, c.Type = Boolean, "boolean"
	case t.fractions > 0:
		c.Kind, c.Type = Number, "number"
	case t.integers > 0:
		c.Kind, c.Type = Integer, "integer"
	default:
		c.Kind, c.Type, c.Reason = Empty, "empty", "holds no value"
	}
	c.Usable = c.Reason == ""
	return c
}

// commaHint explains a number that was written with a decimal comma.
func commaHint(s string) string {
	a, b, ok := bytes.Cut([]byte(s), []byte(","))
	if ok && len(a) > 0 && len(b) > 0 && allDigits(a) && allDigits(b) && b[0] != '-' && b[0] != '+' {
		return " (a decimal comma? write numbers with a decimal point)"
	}
	return ""
}

// findKinds reads every cell to find the kinds of the columns.
func (c *csvFile) findKinds(ctx context.Context, names []string) error {
	workers := workersOr(0)
	tallies := make([][]csvTally, workers)
	rows, err := c.blocks(ctx, workers, func(w int, b csvBlock) error {
		if tallies[w] == nil {
			tallies[w] = make([]csvTally, len(names))
		}
		var fields csvFields
		return c.records(b, &fields, func(row, line int64) error {
			return c.eachField(&fields, len(names), line, func(k int, field []byte) error {
				tallies[w][k].take(field, row, line)
				return nil
			})
		})
	})
	if err != nil {
		return err
	}
	c.total = rows
	for k, name := range names {
		var t csvTally
		for w := range tallies {
			if tallies[w] != nil {
				t.merge(tallies[w][k])
			}
		}
		c.cols = append(c.cols, t.column(name))
	}
	return nil
}
