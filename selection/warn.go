package selection

import (
	"fmt"
	"strconv"
)

// mostNamed is how many names or numbers a warning lists; the Judgement has all.
const mostNamed = 10

// warn writes the footnotes.
func (j *Judgement) warn() {
	if n := len(j.Uncertified); n > 0 {
		j.add("in %s a fit could not be certified and the path ends before it; they count with what they have: %s", drawsOf(n, j.Draws), listInts(j.Uncertified))
	}
	if n := len(j.EmptyRegion); n > 0 {
		j.add("in %s more than %d predictors entered at the first step with any, so that none could be counted (columns that coincide within the draw): %s",
			drawsOf(n, j.Draws), j.Decision.Selected, listInts(j.EmptyRegion))
	}
	j.warnCeilings()
	switch {
	case j.Bootstrap:
		j.add("%s", noBootstrapBound)
	case j.Decision.FalseSelections == nil:
		j.add("this decision has no bound: %s", j.Bounds.Of(j.Decision.Bound).Why)
	}
	if j.Decision.Region == Common {
		j.warnCommon()
	}
}

// warnCeilings lists the candidates that often did not vary.
func (j *Judgement) warnCeilings() {
	n := len(j.LowCeiling)
	if n == 0 {
		return
	}
	names := make([]string, n)
	never := 0
	for i, at := range j.LowCeiling {
		r := j.Rows[at]
		names[i] = r.Predictor
		if r.Varied < j.Need {
			never++
		}
	}
	j.add("%d of %d candidates vary in less than 95 %% of the draws, which is the most their frequency can be: %s", n, j.Candidates, quoteAll(names, mostNamed))
	if never > 0 {
		j.add("%d of them vary in fewer than %d draws and cannot be stable", never, j.Need)
	}
	if !j.Bootstrap {
		j.add("the bounds are stated for the %d candidates left without them where that is larger", j.Candidates-n)
	}
}

// warnCommon says what the common region costs.
func (j *Judgement) warnCommon() {
	if j.MeanSelected == 0 {
		j.add("no step was reached by all draws with anything chosen, so the common region is empty")
		return
	}
	j.add("selected is estimated (%.4g on average, at most %d), and the region's end was chosen from these draws; the bound is an estimate here", j.MeanSelected, j.Decision.Selected)
}

func (j *Judgement) add(format string, args ...any) {
	j.Warnings = append(j.Warnings, fmt.Sprintf(format, args...))
}

func drawsOf(n, all int) string { return fmt.Sprintf("%d of %d draws", n, all) }

func listInts(numbers []int) string {
	s := ""
	for i, n := range numbers {
		if i == mostNamed {
			return s + fmt.Sprintf(" and %d more", len(numbers)-mostNamed)
		}
		if i > 0 {
			s += ", "
		}
		s += strconv.Itoa(n)
	}
	return s
}
