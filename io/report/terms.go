package report

import (
	"fmt"
	"strings"

	"holdfast/selection"
)

// How many lines the text gives to terms: of one predictor, and until no
// further predictor begins.
const (
	mostTermsEach = 12
	mostTerms     = 60
)

// termLine is a line of the list of terms. What the line before says too is
// empty.
type termLine struct {
	predictor, term, class string
	median, spread         string
}

// cells are the names of a line, in their order.
func (l *termLine) cells() [3]string { return [3]string{l.predictor, l.term, l.class} }

// terms lists the coefficients of the stable predictors that have several.
func (p *page) terms() {
	lines, left := p.termLines()
	if len(lines) > 0 {
		p.line("")
		p.prose("", fmt.Sprintf("Terms of the stable predictors (coefficient%s where chosen: description, no confidence interval %s):", p.unit(), p.coefNote()))
		p.termTable(lines)
	}
	switch full := p.fullTerms(); {
	case left > 0:
		p.line(fmt.Sprintf("%s and %s more, see %s", p.dots(), plural(left, "predictor"), full))
	case len(lines) == 0 && p.j.HasTerms():
		p.line("The coefficients of terms stand in " + full)
	}
}

// fullTerms names what holds all terms.
func (p *page) fullTerms() string {
	if p.info.FullTerms == "" {
		return "terms.parquet"
	}
	return clean(p.info.FullTerms)
}

// termLines makes the lines, and counts the stable predictors left out.
func (p *page) termLines() (lines []termLine, left int) {
	for i := range p.j.Rows[:p.j.Stable] {
		r := &p.j.Rows[i]
		switch {
		case r.Coef != nil:
		case len(lines) >= mostTerms:
			left++
		default:
			lines = append(lines, p.termLinesOf(r)...)
		}
	}
	return lines, left
}

// termLinesOf makes the lines of one predictor.
func (p *page) termLinesOf(r *selection.Row) []termLine {
	var lines []termLine
	all, before := 0, selection.TermRow{TermIndex: -1}
	for t := range p.j.TermsOf(r) {
		if all++; all > mostTermsEach {
			continue
		}
		line := termLine{class: clean(t.Class), median: number3(t.Selected.Median), spread: spreadText(t.Selected)}
		if t.TermIndex != before.TermIndex && t.Term != t.Predictor {
			line.term = clean(t.Term) + p.noteCopies(t.Term)
		}
		lines, before = append(lines, line), t
	}
	lines[0].predictor = clean(r.Predictor)
	if more := all - len(lines); more > 0 {
		lines = append(lines, termLine{term: fmt.Sprintf("%s %d more", p.dots(), more)})
	}
	return lines
}

// termTable writes the lines under heads. A column of names that is empty all
// the way down is left out.
func (p *page) termTable(lines []termLine) {
	g := newTermGrid(lines, p.cells)
	head := termLine{nameHead, "term", "class", medianHead, spreadHead}
	p.line(p.paint(dim, g.line(&head, p.dots())))
	for i := range lines {
		p.line(g.line(&lines[i], p.dots()))
	}
}

// termGrid holds the widths of the list of terms; 0 leaves a column out.
type termGrid struct {
	names   [3]int
	wMedian int
}

func newTermGrid(lines []termLine, cells int) *termGrid {
	var need [3]int
	medians, spreads := []string{medianHead}, []string{spreadHead}
	for i := range lines {
		for k, text := range lines[i].cells() {
			need[k] = max(need[k], width(text))
		}
		medians, spreads = append(medians, lines[i].median), append(spreads, lines[i].spread)
	}
	g := &termGrid{wMedian: widest(medians)}
	room := cells - g.wMedian - gap - widest(spreads) - gap
	for k, head := range [3]string{nameHead, "term", "class"} {
		if need[k] > 0 {
			need[k], room = max(need[k], width(head)), room-gap
		}
	}
	g.names = shareOut(need, room)
	return g
}

// line lays out a line.
func (g *termGrid) line(l *termLine, dots string) string {
	var b strings.Builder
	for k, text := range l.cells() {
		if g.names[k] > 0 {
			b.WriteString(spaces(gap) + padRight(shorten(text, g.names[k], dots), g.names[k]))
		}
	}
	return b.String() + spaces(gap) + padLeft(l.median, g.wMedian) + spaces(gap) + l.spread
}

// shareOut divides a room among columns, a cell each in turn, until all have
// what they need or the room is used up.
func shareOut(need [3]int, room int) [3]int {
	var got [3]int
	for given := true; given; {
		given = false
		for k := range need {
			if got[k] < need[k] && room > 0 {
				got[k]++
				room--
				given = true
			}
		}
	}
	return got
}

// references names the level of each category that the others are measured
// against.
func (p *page) references() {
	var list []string
	for i, r := range p.info.References {
		if i == mostReferences {
			list = append(list, fmt.Sprintf("and %d more", len(p.info.References)-i))
			break
		}
		list = append(list, clean(r.Column+"="+r.Level))
	}
	if len(list) > 0 {
		p.line("")
		p.prose("", "Levels that the others of their category are measured against: "+strings.Join(list, ", "))
	}
}

// mostReferences is how many categories the text names the reference of.
const mostReferences = 12
