package report

import (
	"fmt"
	"io"
	"strconv"
	"strings"

	"holdfast/selection"
)

// Widths of the text in terminal cells.
const (
	defaultWidth = 100 // where the width is not known
	leastWidth   = 60  // narrower windows break the lines themselves
	proseWidth   = 96  // longer lines are hard to read
)

// Text writes a judgement for people: how many predictors are stable, how many
// of those luck could explain, the table, and what the numbers do not mean.
// width is that of the window in cells, 0 if there is none; with colour, lines
// carry escape sequences.
func Text(w io.Writer, j *selection.Judgement, info Info, width int, colour bool) error {
	if width <= 0 {
		width = defaultWidth
	}
	p := &page{j: j, info: info, cells: max(width, leastWidth), colour: colour}
	p.headline()
	p.luck()
	p.promise()
	p.pointToWarnings()
	p.table()
	p.terms()
	p.alwaysIn()
	p.references()
	p.listNotes()
	p.cautions()
	_, err := io.WriteString(w, p.b.String())
	return err
}

// page is a text that is being written.
type page struct {
	b      strings.Builder
	j      *selection.Judgement
	info   Info
	cells  int
	colour bool
	notes  []string
	// coefMark is the mark of the note on coefficients, once there is one.
	coefMark string
}

// ANSI styles. Meaning never hangs on them alone.
const (
	bold   = "1"
	dim    = "2"
	yellow = "33"
	cyan   = "36"
)

// paint colours a text where colours are wanted.
func (p *page) paint(style, text string) string {
	if !p.colour || style == "" || text == "" {
		return text
	}
	return "\x1b[" + style + "m" + text + "\x1b[0m"
}

func (p *page) line(text string) {
	p.b.WriteString(strings.TrimRight(text, " "))
	p.b.WriteByte('\n')
}

// prose writes a paragraph.
func (p *page) prose(style, text string) { p.item(style, "", text) }

// item writes a paragraph behind a lead, its later lines under the first.
func (p *page) item(style, lead, text string) {
	hang := width(lead)
	for _, l := range wrap(text, min(p.cells, proseWidth)-hang) {
		p.line(lead + p.paint(style, l))
		lead = spaces(hang)
	}
}

// note keeps a footnote and returns its mark.
func (p *page) note(text string) string {
	p.notes = append(p.notes, clean(text))
	return fmt.Sprintf("[%d]", len(p.notes))
}

// coefNote returns the mark of the note that says what a coefficient is, and
// is not.
func (p *page) coefNote() string {
	if p.coefMark == "" {
		p.coefMark = p.note("The coefficients are those of the draws that chose the predictor, at the end of what counts of their paths. " +
			"They are shrunken, belong to a changing set of companions, and are too narrow for weak predictors: no test, and no confidence interval." +
			p.info.scale())
	}
	return p.coefMark
}

// headline says how many are stable, and by which decision if not that of
// record.
func (p *page) headline() {
	j := p.j
	what := plural(j.Candidates, "candidate")
	switch j.Stable {
	case 0:
		p.prose(bold, fmt.Sprintf("None of %s is stable, which takes %d of %d draws.", what, j.Need, j.Draws))
	case 1:
		p.prose(bold, fmt.Sprintf("1 of %s is stable: chosen in at least %d of %d draws.", what, j.Need, j.Draws))
	default:
		p.prose(bold, fmt.Sprintf("%d of %s are stable: chosen in at least %d of %d draws.", j.Stable, what, j.Need, j.Draws))
	}
	if p.info.explored(j) {
		r := p.info.Record
		p.prose(yellow, fmt.Sprintf("Explored after seeing the result. The decision of record is threshold %s, selected %d, bound %s, region %s; "+
			"the bounds below hold only for a decision that was made before the draws were seen.",
			number3(r.Threshold), r.Selected, r.Bound, r.Region))
	}
}

// luck states the bound of the decision, what remains without its assumption,
// and all three bounds.
func (p *page) luck() {
	j := p.j
	bound := j.Decision.Bound
	v := j.Bounds.Of(bound)
	if v.FalseSelections == nil {
		p.prose("", fmt.Sprintf("Expected by luck: no bound can be given (%s).", clean(v.Why)))
		if j.Bootstrap {
			return
		}
	} else {
		mark := p.note(bound.Assumes() + " " + bound.Without())
		p.prose(bold, fmt.Sprintf("Expected by luck: at most %s (%s) %s", selection.AtMost(*v.FalseSelections), bound.Label(), mark))
		if worst := j.Bounds.Of(selection.WorstCase); bound != selection.WorstCase && worst.FalseSelections != nil {
			p.prose("", fmt.Sprintf("Without that assumption: at most %s", selection.AtMost(*worst.FalseSelections)))
		}
	}
	p.line("")
	p.line("All three bounds on the number expected by luck:")
	for _, b := range j.Bounds {
		p.boundLine(b, b.Name == bound)
	}
}

func (p *page) boundLine(b selection.BoundValue, decided bool) {
	value, text := "none", b.Name.Label()
	if decided {
		text += " (the decision's)"
	}
	if b.FalseSelections != nil {
		value = selection.AtMost(*b.FalseSelections)
	} else {
		text += ": " + clean(b.Why)
	}
	p.item("", padLeft(value, 9)+"  ", text)
}

// promise states what a decision always carries (DESIGN 4).
func (p *page) promise() {
	j, d := p.j, p.j.Decision
	p.line("")
	p.prose("", fmt.Sprintf("At most %s can be stable: %d x %d / %d, rounded down.",
		plural(j.MostStable, "predictor"), d.Selected, j.Draws, j.Need))
	if j.CommonEnd != nil {
		p.prose("", fmt.Sprintf("A draw contributes what entered by lattice step %d, the same for all; %s on average, at most %d allowed.",
			*j.CommonEnd, number3(j.MeanSelected), d.Selected))
		return
	}
	p.prose("", fmt.Sprintf("A draw contributes at most %s, on average %s. The cap was binding in %d of %d draws.",
		plural(d.Selected, "predictor"), number3(j.MeanSelected), j.CapBinding, j.Draws))
}

// pointToWarnings makes the warnings notes and points to them above the table,
// so that nobody reads the table without them.
func (p *page) pointToWarnings() {
	var marks []string
	for _, w := range p.info.warnings(p.j) {
		marks = append(marks, p.note(w))
	}
	if len(marks) > 0 {
		p.prose(yellow, fmt.Sprintf("%s: see %s below the table.", plural(len(marks), "warning"), strings.Join(marks, " ")))
	}
}

// alwaysIn lists the columns that are in every model.
func (p *page) alwaysIn() {
	all := p.j.Always
	if len(all) == 0 {
		return
	}
	p.line("")
	p.prose("", fmt.Sprintf("In every model, not judged (coefficient%s over the draws):", p.unit()))
	var lines []termLine
	for i, a := range all[:min(len(all), mostAlways)] {
		line := termLine{class: clean(a.Class), spread: "in no draw"}
		if i == 0 || a.Index != all[i-1].Index {
			line.predictor = clean(a.Predictor)
		}
		if a.Coef != nil {
			line.median, line.spread = number3(a.Coef.Median), number3(a.Coef.Low)+" to "+number3(a.Coef.High)
		}
		lines = append(lines, line)
	}
	p.termTable(lines)
	if more := len(all) - len(lines); more > 0 {
		p.line(fmt.Sprintf("  %s and %d more", p.dots(), more))
	}
}

// mostAlways is how many always-in coefficients the text lists.
const mostAlways = 12

// unit is what a coefficient is stated for, where that is not the column's own.
func (p *page) unit() string {
	if p.info.PerSD {
		return " per standard deviation"
	}
	return ""
}

func (p *page) listNotes() {
	if len(p.notes) == 0 {
		return
	}
	p.line("")
	for i, text := range p.notes {
		mark := fmt.Sprintf("[%d] ", i+1)
		p.item("", mark, text)
	}
}

// cautions says what the numbers do not mean (DESIGN 9).
func (p *page) cautions() {
	p.line("")
	p.prose(dim, "Read with care. Selection is not causation. A frequency is not the probability that a predictor matters. "+
		"Where decisions touch health or safety, this table does not replace validation, local rules or licensed practice.")
}

// dots is the mark of something left out.
func (p *page) dots() string {
	if p.info.ASCII {
		return "..."
	}
	return "…"
}

func plural(n int, word string) string {
	if n == 1 {
		return "1 " + word
	}
	return strconv.Itoa(n) + " " + word + "s"
}

// number3 writes a number with three significant digits.
func number3(v float64) string { return short(v, 3) }

// short writes a number with so many significant digits.
func short(v float64, digits int) string { return selection.Figure(v, digits) }
