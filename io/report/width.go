package report

import (
	"fmt"
	"strings"
	"unicode"
	"unicode/utf8"

	"github.com/rivo/uniseg"
)

// clean returns a text that a terminal only shows. What is not printable (line
// ends, escape sequences, marks that turn the writing direction, bytes that
// are no UTF-8) is replaced by its escape.
func clean(text string) string {
	if !strings.ContainsFunc(text, unsafe) && utf8.ValidString(text) {
		return text
	}
	var b strings.Builder
	for i, r := range text {
		switch {
		case r == utf8.RuneError && !strings.HasPrefix(text[i:], "\uFFFD"):
			fmt.Fprintf(&b, `\x%02x`, text[i])
		case !unsafe(r):
			b.WriteRune(r)
		case r < 0x80:
			fmt.Fprintf(&b, `\x%02x`, r)
		case r < 0x10000:
			fmt.Fprintf(&b, `\u%04x`, r)
		default:
			fmt.Fprintf(&b, `\U%08x`, r)
		}
	}
	return b.String()
}

func unsafe(r rune) bool { return !unicode.IsPrint(r) }

// width is the number of terminal cells that a text takes.
func width(text string) int { return uniseg.StringWidth(text) }

// shorten cuts a text in the middle so that it takes at most so many cells:
// names of one panel often differ at the end only.
func shorten(text string, cells int, mark string) string {
	if width(text) <= cells {
		return text
	}
	room := cells - width(mark)
	if room < 2 {
		return head(text, cells)
	}
	tail := room / 2
	return head(text, room-tail) + mark + last(text, tail)
}

// head is the longest first part of at most so many cells.
func head(text string, cells int) string {
	var b strings.Builder
	g := uniseg.NewGraphemes(text)
	for g.Next() && g.Width() <= cells {
		cells -= g.Width()
		b.WriteString(g.Str())
	}
	return b.String()
}

// last is the longest last part of at most so many cells.
func last(text string, cells int) string {
	var parts []string
	for g := uniseg.NewGraphemes(text); g.Next(); {
		parts = append(parts, g.Str())
	}
	from := len(parts)
	for from > 0 && width(parts[from-1]) <= cells {
		from--
		cells -= width(parts[from])
	}
	return strings.Join(parts[from:], "")
}

// padRight and padLeft fill up with spaces to so many cells.
func padRight(text string, cells int) string { return text + spaces(cells-width(text)) }
func padLeft(text string, cells int) string  { return spaces(cells-width(text)) + text }

func spaces(n int) string { return strings.Repeat(" ", max(0, n)) }

// wrap breaks a text at spaces into lines of at most so many cells; a word
// that is longer is broken too.
func wrap(text string, cells int) []string {
	var lines []string
	line := ""
	for _, word := range strings.Fields(text) {
		if line != "" && width(line)+1+width(word) <= cells {
			line += " " + word
			continue
		}
		if line != "" {
			lines = append(lines, line)
		}
		for line = word; width(line) > cells; {
			part := head(line, cells)
			if part == "" {
				break // not even one character fits
			}
			lines, line = append(lines, part), line[len(part):]
		}
	}
	return append(lines, line)
}
