package report

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"holdfast/selection"
)

// How many rows below the stable ones the text shows: enough to see what came
// close, and all that could change sides up to a limit.
const (
	nextRows = 10
	mostNext = 30
)

// Cells of the table's parts.
const (
	leastName = 12
	mostName  = 40
	leastBar  = 6
	mostBar   = 24
	gap       = 2
)

// cut is how many rows the text shows.
func cut(j *selection.Judgement) int {
	end := j.Stable + nextRows
	for i := j.Stable; i < len(j.Rows) && i < j.Stable+mostNext; i++ {
		if j.Rows[i].CouldChange {
			end = max(end, i+1)
		}
	}
	end = min(end, len(j.Rows))
	for end > j.Stable && j.Rows[end-1].Count == 0 {
		end--
	}
	return end
}

// table writes the table with the predictors that matter for the decision.
func (p *page) table() {
	j := p.j
	end := cut(j)
	p.line("")
	if end > 0 {
		g := p.newGrid(j.Rows[:end])
		p.heading(g)
		for i := range j.Rows[:end] {
			if i == j.Stable {
				p.border(g)
			}
			p.row(g, i)
		}
		if end == j.Stable {
			p.border(g)
		}
	}
	p.below(end)
}

// sharesASign reports whether a sign among the first rows has a share beside it.
func sharesASign(rows []selection.Row) bool {
	return slices.ContainsFunc(rows, func(r selection.Row) bool {
		return r.PositiveShare != nil && *r.PositiveShare > 0 && *r.PositiveShare < 1
	})
}

// below says what the table leaves out and what its marks mean.
func (p *page) below(end int) {
	full := p.info.Full
	if full == "" {
		full = "stability.csv"
	}
	if more := len(p.j.Rows) - end; end == 0 {
		p.line("No candidate was chosen in any draw; all stand in " + clean(full))
	} else if more > 0 {
		p.line(fmt.Sprintf("%s and %d more, see %s", p.dots(), more, clean(full)))
	}
	if sharesASign(p.j.Rows[:end]) {
		p.item("", "% ", "share of the draws that chose it in which it entered with this sign")
	}
	if p.j.CouldChange > 0 {
		p.item("", "~ ", fmt.Sprintf("could change sides with other draws (%d in all): the interval covers the threshold, %d of %d.",
			p.j.CouldChange, p.j.Need, p.j.Draws))
	}
}

// grid holds the texts of the table's rows and the widths of its columns.
type grid struct {
	name, chosen, interval, sign, median, spread []string
	mark                                         []string // of the note behind the name, or empty
	wName, wChosen, wInterval, wBar, wSign       int
	wMedian, wSpread                             int
	chosenHead, intervalHead                     string
	coefMark                                     string
	narrow                                       bool // there is no room for the spread
	bare                                         bool // no row has a coefficient of its own
}

const (
	chosenOver   = "chosen"
	intervalOver = "interval"
	medianHead   = "median"
	signHead     = "sign"
	nameHead     = "predictor"
	spreadHead   = "2.5 to 97.5 %"
)

// newGrid makes the texts and shares out the width: what numbers need, then
// the names, then the bar.
func (p *page) newGrid(rows []selection.Row) *grid {
	g := &grid{
		chosenHead: fmt.Sprintf("of %d", p.j.Draws), intervalHead: "95 % " + p.note(selection.MonteCarlo),
		bare: !slices.ContainsFunc(rows, func(r selection.Row) bool { return r.Coef != nil }),
	}
	if !g.bare {
		g.coefMark = p.coefNote()
	}
	for i := range rows {
		g.addRow(p, &rows[i])
	}
	g.wChosen = widest(g.chosen, g.chosenHead, chosenOver)
	g.wInterval = widest(g.interval, g.intervalHead, intervalOver)
	if !g.bare {
		g.wSign = widest(g.sign, signHead)
		g.wMedian = widest(g.median, medianHead)
		g.wSpread = widest(g.spread, spreadHead)
	}
	g.share(p.cells)
	for i := range g.name {
		g.name[i] = shorten(g.name[i], g.wName-width(g.mark[i]), p.dots()) + g.mark[i]
	}
	return g
}

// share gives the names what they need, up to two thirds of what numbers
// leave, and the bar the rest. Where there is no room for a bar worth looking
// at there is none.
func (g *grid) share(cells int) {
	left := cells - gap - (gap + g.wChosen) - (gap + g.wInterval)
	rest := left - g.coefs()
	need := min(g.widestName(), mostName)
	if !g.bare && rest < min(need, leastName) {
		g.narrow = true
		rest = left - g.coefs()
	}
	g.wName = min(need, max(leastName, (rest-gap)*2/3))
	g.wBar = min(mostBar, rest-gap-g.wName)
	if g.wBar < leastBar {
		g.wBar = 0
		g.wName = min(need, max(leastName, rest))
	}
}

func (g *grid) addRow(p *page, r *selection.Row) {
	g.name, g.mark = append(g.name, clean(r.Predictor)), append(g.mark, p.noteCopies(r.Predictor))
	g.chosen = append(g.chosen, fmt.Sprint(r.Count))
	g.interval = append(g.interval, drawsText(r, p.j.Draws))
	g.sign = append(g.sign, signText(r.PositiveShare))
	if r.Selected == nil {
		g.median, g.spread = append(g.median, ""), append(g.spread, p.countTerms(r))
		return
	}
	g.median = append(g.median, number3(r.Selected.Median))
	g.spread = append(g.spread, spreadText(r.Selected))
}

// countTerms stands in the place of a coefficient where a predictor has several.
func (p *page) countTerms(r *selection.Row) string {
	n := 0
	for range p.j.TermsOf(r) {
		n++
	}
	if n == 0 {
		return ""
	}
	return plural(n, "term")
}

// spreadText is the range of a coefficient.
func spreadText(s *selection.Spread) string { return short(s.Low, 2) + " to " + short(s.High, 2) }

// copiesOf lists the columns that stand under a predictor's name.
func (p *page) copiesOf(predictor string) []string {
	var list []string
	for _, c := range p.info.Copies {
		if c.Of == predictor {
			list = append(list, c.Name)
		}
	}
	return list
}

// mostCopies is how many copies of a predictor a note names.
const mostCopies = 5

// noteCopies makes a note of the columns that a row stands for, and returns its
// mark.
func (p *page) noteCopies(predictor string) string {
	list := p.copiesOf(predictor)
	if len(list) == 0 {
		return ""
	}
	more := ""
	if len(list) > mostCopies {
		more = fmt.Sprintf(" and %d more", len(list)-mostCopies)
		list = list[:mostCopies]
	}
	return " " + p.note(fmt.Sprintf("%s stands also for what equals it up to shift and scale: %s%s", predictor, strings.Join(list, ", "), more))
}

// drawsText is the interval of the frequency in draws, rounded outward.
func drawsText(r *selection.Row, draws int) string {
	low, high := math.Floor(r.Low*float64(draws)), math.Ceil(r.High*float64(draws))
	return fmt.Sprintf("%.0f-%.0f", max(low, 0), min(high, float64(draws)))
}

// signText is the sign at entry, with the share of the draws that chose the
// predictor where not all agree.
func signText(positive *float64) string {
	switch {
	case positive == nil:
		return ""
	case *positive == 1:
		return "+"
	case *positive == 0:
		return "-"
	case *positive >= 0.5:
		return fmt.Sprintf("+%.0f%%", math.Floor(100**positive))
	}
	return fmt.Sprintf("-%.0f%%", math.Floor(100*(1-*positive)))
}

// heading writes the column heads. What stands over the coefficients is longer
// than they are and reaches to the left, over the bar and the signs.
func (p *page) heading(g *grid) {
	over := g.join("", "", chosenOver, intervalOver)
	if g.bare {
		p.line(p.paint(dim, over))
	} else {
		p.headCoefs(g, over)
	}
	heads := []string{g.join("", nameHead, g.chosenHead, g.intervalHead)}
	if g.wBar > 0 {
		heads = append(heads, spaces(g.wBar))
	}
	if !g.bare {
		heads = append(heads, padRight(signHead, g.wSign), padLeft(medianHead, g.wMedian))
	}
	if !g.bare && !g.narrow {
		heads = append(heads, spreadHead)
	}
	p.line(p.paint(dim, strings.Join(heads, spaces(gap))))
}

// headCoefs writes what stands over the heads of the coefficients.
func (p *page) headCoefs(g *grid, over string) {
	title := g.title(p.cells - width(over) - gap)
	room := max(g.total()-width(over)-gap, width(title))
	what := "coefficient" + p.unit() + " where chosen:"
	p.line(p.paint(dim, spaces(width(over)+gap+room-max(width(title), width(what)))+what))
	p.line(p.paint(dim, over+spaces(gap)+padLeft(title, room)))
}

// title is what stands over the coefficients, as far as there is room; the note
// says it in full.
func (g *grid) title(room int) string {
	for _, text := range []string{"description, not a confidence interval " + g.coefMark, "no confidence interval " + g.coefMark, "a description " + g.coefMark} {
		if width(text) <= room {
			return text
		}
	}
	return g.coefMark
}

// join lays out the left part of a line.
func (g *grid) join(mark, name, chosen, interval string) string {
	return strings.Join([]string{padRight(mark, 1) + " " + padRight(name, g.wName),
		padLeft(chosen, g.wChosen), padLeft(interval, g.wInterval)}, spaces(gap))
}

func (p *page) row(g *grid, i int) {
	r := &p.j.Rows[i]
	mark := " "
	if r.CouldChange {
		mark = "~"
	}
	name := padRight(g.name[i], g.wName)
	if r.Stable {
		name = p.paint(bold, name)
	}
	parts := []string{p.paint(yellow, mark) + " " + name, padLeft(g.chosen[i], g.wChosen), padLeft(g.interval[i], g.wInterval)}
	if g.wBar > 0 {
		parts = append(parts, p.paint(cyan, padRight(p.bar(r, g.wBar), g.wBar)))
	}
	if !g.bare {
		parts = append(parts, padRight(g.sign[i], g.wSign), padLeft(g.median[i], g.wMedian))
	}
	if !g.bare && !g.narrow {
		parts = append(parts, g.spread[i])
	}
	p.line(strings.Join(parts, spaces(gap)))
}

// border stands between the stable predictors and the others.
func (p *page) border(g *grid) {
	text := fmt.Sprintf("stable above: %d of %d draws or more", p.j.Need, p.j.Draws)
	if p.j.Stable == 0 {
		text = fmt.Sprintf("none was chosen in %d of %d draws", p.j.Need, p.j.Draws)
	}
	dash := "─"
	if p.info.ASCII {
		dash = "-"
	}
	left := strings.Repeat(dash, 2)
	right := strings.Repeat(dash, max(2, g.total()-width(text)-4))
	p.line(p.paint(dim, left+" "+text+" "+right))
}

// total is the width of a full line.
func (g *grid) total() int {
	w := gap + g.wName + (gap + g.wChosen) + (gap + g.wInterval) + g.coefs()
	if g.wBar > 0 {
		w += gap + g.wBar
	}
	return w
}

// coefs is the width of what a line says about coefficients.
func (g *grid) coefs() int {
	switch {
	case g.bare:
		return 0
	case g.narrow:
		return gap + g.wSign + gap + g.wMedian
	}
	return gap + g.wSign + gap + g.wMedian + gap + g.wSpread
}

// bar draws the frequency, with a tick at the threshold where the bar does not
// reach it.
func (p *page) bar(r *selection.Row, cells int) string {
	full, tick := "█", "┊"
	if p.info.ASCII {
		full, tick = "#", "|"
	}
	length := int(math.Round(r.Frequency * float64(cells)))
	at := int(math.Ceil(p.j.Attained*float64(cells))) - 1
	if r.Stable {
		length = max(length, at+1) // rounding puts nobody on the wrong side of the threshold
	} else {
		length = min(length, at)
	}
	line := strings.Repeat(full, length)
	if length <= at {
		line += spaces(at-length) + tick
	}
	return line
}

// widestName is the largest width of a name with its mark.
func (g *grid) widestName() int {
	w := width(nameHead)
	for i := range g.name {
		w = max(w, width(g.name[i])+width(g.mark[i]))
	}
	return w
}

// widest is the largest width among texts.
func widest(texts []string, more ...string) int {
	w := 0
	for _, list := range [][]string{texts, more} {
		for _, t := range list {
			w = max(w, width(t))
		}
	}
	return w
}
