package report

import (
	"bufio"
	"bytes"
	"encoding/json"
	"io"
	"iter"
	"slices"

	"holdfast/selection"
)

// JSON writes the judgement as one JSON object on one line. Names and meanings
// of its members stay; members may be added behind those that are there.
func JSON(w io.Writer, j *selection.Judgement, info Info) error {
	out := &object{w: bufio.NewWriter(w)}
	out.open()
	out.member("outcome", info.Outcome)
	out.member("kind", info.Kind)
	out.member("draws", j.Draws)
	out.member("design", design(j))
	out.member("candidates", j.Candidates)
	out.key("decision")
	out.decision(j, info)
	out.key("predictors")
	rows(out, stabilityColumns, slices.Values(j.Rows))
	out.key("always")
	rows(out, alwaysColumns, slices.Values(j.Always))
	out.member("warnings", info.warnings(j))
	out.member("per_sd", info.PerSD)
	out.member("classes", list(j.Classes()))
	out.member("references", list(info.References))
	out.key("terms")
	rows(out, termColumns, j.Terms())
	out.member("redrawn", len(j.Redrawn))
	out.member("most_redraws", j.MostRedraws)
	out.close()
	out.raw("\n")
	if out.err != nil {
		return out.err
	}
	return out.w.Flush()
}

// decision writes the decision and what it promises.
func (o *object) decision(j *selection.Judgement, info Info) {
	d := j.Decision
	o.open()
	o.member("threshold", d.Threshold)
	o.member("selected", d.Selected)
	o.member("false_selections", optional(d.FalseSelections))
	o.member("bound", d.Bound.String())
	o.member("need", j.Need)
	o.member("bounds", j.Bounds)
	o.member("stable", j.StableNames())
	o.member("region", d.Region.String())
	o.member("attained", j.Attained)
	o.member("most_stable", j.MostStable)
	o.member("cap_binding", j.CapBinding)
	o.member("mean_selected", j.MeanSelected)
	o.member("could_change", j.CouldChange)
	o.member("explored", info.explored(j))
	o.close()
}

// list is a list that is empty rather than null.
func list[T any](of []T) []T {
	if of == nil {
		return []T{}
	}
	return of
}

func optional(v *float64) any { return defined(v) }

// rows writes one object per row, members in column order.
func rows[R any](o *object, columns []column[R], all iter.Seq[R]) {
	o.raw("[")
	i := 0
	for r := range all {
		o.comma(i)
		o.open()
		for _, c := range columns {
			o.member(c.name, c.value(&r))
		}
		o.close()
		i++
	}
	o.raw("]")
}

// object writes JSON whose members keep their order, and keeps the first
// error.
type object struct {
	w     *bufio.Writer
	first bool // the next member is the first of its object
	err   error
}

func (o *object) raw(text string) {
	if o.err == nil {
		_, o.err = o.w.WriteString(text)
	}
}

func (o *object) comma(i int) {
	if i > 0 {
		o.raw(",")
	}
}

func (o *object) open()  { o.raw("{"); o.first = true }
func (o *object) close() { o.raw("}"); o.first = false }

func (o *object) key(name string) {
	if !o.first {
		o.raw(",")
	}
	o.first = false
	o.value(name)
	o.raw(":")
}

func (o *object) member(name string, v any) {
	o.key(name)
	o.value(v)
}

// value writes a value without the escapes that only HTML needs.
func (o *object) value(v any) {
	var b bytes.Buffer
	e := json.NewEncoder(&b)
	e.SetEscapeHTML(false)
	if err := e.Encode(v); err != nil && o.err == nil {
		o.err = err
	}
	o.raw(string(bytes.TrimSuffix(b.Bytes(), []byte("\n"))))
}
