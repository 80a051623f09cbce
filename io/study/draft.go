package study

import (
	"bytes"
	"fmt"
	"strings"

	"holdfast/selection"
)

// Draft proposes a study for a table and an outcome: a commented text that
// runs unchanged, settings by the table's shape with the reason beside each,
// and what is conspicuous (see Facts.Flags). The study is what Parse makes of
// the text. The error is Problems where no study can run on such a table.
func Draft(f Facts) (text []byte, s *Study, err error) {
	d, err := newDrafter(f)
	if err != nil {
		return nil, nil, err
	}
	text = d.write()
	s, err = Parse(f.Source, text, nil)
	if err != nil {
		return nil, nil, fmt.Errorf("study: the draft of %s does not read back: %w", printable(f.Path), err)
	}
	return text, s, nil
}

// draftText is a draft being written.
type draftText struct{ bytes.Buffer }

// comment writes a line of its own. What stands in it was cleaned before: a
// line end in a column's name must not end the comment.
func (t *draftText) comment(format string, args ...any) {
	t.WriteString("# " + printable(fmt.Sprintf(format, args...)) + "\n")
}

// key writes a key with the reason beside it.
func (t *draftText) key(name, value, why string) {
	t.WriteString(name + " = " + value)
	if why != "" {
		t.WriteString(" # " + printable(why))
	}
	t.WriteByte('\n')
}

// section starts a section.
func (t *draftText) section(name string) { t.WriteString("\n[" + name + "]\n") }

func (d *drafter) write() []byte {
	var t draftText
	d.writeHead(&t)
	d.writeTable(&t)
	d.writeCandidates(&t)
	d.writePenalty(&t)
	d.writeDraws(&t)
	d.writeDecision(&t)
	return t.Bytes()
}

// writeHead says what the study is about and what to look at first.
func (d *drafter) writeHead(t *draftText) {
	t.comment("Which columns of %s matter for %s? Drafted from the table's shape; every line may be changed.", quoted(d.facts.Path), quoted(d.facts.Outcome))
	t.comment("%d rows, %d columns: %s, %d left out, %d not usable.", d.facts.Rows, len(d.facts.Columns),
		numberOf(len(d.candidates), "candidate"), len(d.left), len(d.unusable))
	t.comment("A run also leaves out candidates that are copies of others, so that it may count fewer and state a larger bound.")
	first := true
	for _, f := range d.flags {
		if f.Left || f.Kind == FlagUnusable || f.Kind == FlagUnique || f.Kind == FlagConstant {
			continue // these stand beside candidates.leave
		}
		if first {
			t.comment("Look at this first:")
			first = false
		}
		t.comment("%s", "- "+f.sentence())
	}
}

// sentence is a flag with the column's name in front.
func (f Flag) sentence() string {
	if f.Column == "" {
		return f.Text
	}
	return quoted(f.Column) + ": " + f.Text
}

func (d *drafter) writeTable(t *draftText) {
	t.section("table")
	t.key("path", quoted(d.facts.Path), "")
	t.key("missing", quoted(d.missing.String()), d.missingWhy)
	t.section("outcome")
	t.key("kind", quoted(d.kind.String()), d.kindWhy)
	t.key("column", quoted(d.facts.Outcome), "")
	switch d.kind {
	case YesNo:
		t.key("success", quoted(d.success), d.successWhy)
	case Count:
		t.comment(`exposure = "COLUMN" would add the logarithm of what was watched, such as days or square metres.`)
	}
}

func (d *drafter) writeCandidates(t *draftText) {
	t.section("candidates")
	t.key("take", listText(Default().Candidates.Take), "every column without another role")
	d.writeLeave(t)
	d.writeList(t, "Not usable, left out by themselves:", d.unusable)
	d.writeList(t, "Text that is read as categories, one predictor each:", d.categories())
	d.writeList(t, "Never chosen, not counted:", d.ofKind(FlagConstant))
	d.writeList(t, "Candidates that may be identifiers:", d.ofKind(FlagUnique))
	t.key("always", "[]", "columns that are in every model and not penalised, such as age or batch")
}

func (d *drafter) writeLeave(t *draftText) {
	if len(d.left) == 0 {
		t.key("leave", "[]", "")
		return
	}
	t.WriteString("leave = [\n")
	for _, f := range d.left {
		t.WriteString("  " + quoted(f.Column) + ", # " + printable(f.Text) + "\n")
	}
	t.WriteString("]\n")
}

// categories says of text that competes how it is read.
func (d *drafter) categories() []Flag {
	var found []Flag
	for _, c := range d.candidates {
		if c.Text && !c.constant() {
			found = append(found, Flag{Column: c.Name,
				Text: fmt.Sprintf("%d levels, compared with %s unless candidates.reference names another", len(c.Levels), quoted(c.Levels[0].Text))})
		}
	}
	return found
}

// ofKind picks flags.
func (d *drafter) ofKind(kind FlagKind) []Flag {
	var found []Flag
	for _, f := range d.flags {
		if f.Kind == kind {
			found = append(found, f)
		}
	}
	return found
}

// writeList writes columns with reasons as comments, the first of them where
// there are very many.
func (d *drafter) writeList(t *draftText, title string, flags []Flag) {
	const most = 40
	if len(flags) == 0 {
		return
	}
	t.comment("%s", title)
	for _, f := range flags[:min(most, len(flags))] {
		t.comment("%s", "  "+f.sentence())
	}
	if more := len(flags) - most; more > 0 {
		t.comment("  and %d more", more)
	}
}

func (d *drafter) writePenalty(t *draftText) {
	p := Default().Penalty
	t.section("penalty")
	t.key("mix", realText(p.Mix), "the lasso; less than 1 is the elastic net, which keeps correlated columns together")
	t.key("scale", quoted(p.Scale.String()), "every column in units of its standard deviation in the draw")
	t.key("ratio", realText(p.Ratio), "lambda from step to step")
	t.key("floor", realText(d.shape.floor), "last lambda as a share of the first: "+d.shape.why)
	t.key("stop_after", fmt.Sprint(p.StopAfter), "0: a path ends after four times selected")
}

func (d *drafter) writeDraws(t *draftText) {
	s := Default().Draws
	t.section("draws")
	t.key("design", quoted(s.Design.String()), "pairs of disjoint halves: what the bounds need")
	t.key("number", fmt.Sprint(s.Number), fmt.Sprintf("%d pairs", s.Number/2))
	t.key("seed", fmt.Sprint(s.Seed), "same table, study and seed: same result")
	if within := defaultWithin(d.kind); len(within) > 0 {
		t.key("within", listText(within), "each half gets half of the rows of every value of the outcome")
	}
}

func (d *drafter) writeDecision(t *draftText) {
	s := d.shape
	t.section("decision")
	t.key("region", quoted(Default().Decision.Region.String()), "the first part of each path, until selected predictors have entered")
	t.key("threshold", realText(s.threshold), s.why)
	t.key("selected", fmt.Sprint(s.selected), s.selectedWhy)
	t.comment("%s", d.promise())
	t.key("bound", quoted(s.bound.String()), s.why)
}

// promise is the comment on what threshold and selected come to.
func (d *drafter) promise() string {
	s := d.shape
	text := fmt.Sprintf("false_selections = %s: so many are expected by luck at most, among %s (%s bound)", selection.AtMost(s.luck), numberOf(s.candidates, "candidate"), s.bound)
	if s.luck > s.asked*(1+1e-9) {
		text += fmt.Sprintf("; %.3g was aimed at, but cannot be had with one predictor in a draw", s.asked)
	}
	return strings.TrimSpace(text)
}
