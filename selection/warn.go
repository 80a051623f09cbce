package selection

import (
	"fmt"
	"strconv"
	"strings"
)

// mostNamed is how many names or numbers a warning lists; the Judgement has all.
const mostNamed = 10

// warn writes the footnotes.
func (j *Judgement) warn() {
	if n := len(j.Uncertified); n > 0 {
		j.add("in %s a fit could not be certified and the path ends before it; they count with what they have: %s", drawsOf(n, j.Draws), listInts(j.Uncertified))
	}
	j.warnRedrawn()
	j.warnEmpty()
	j.warnCeilings()
	j.warnNoBound()
	if j.Decision.Region == Common {
		j.warnCommon()
	}
}

// warnRedrawn says how many draws had to be made anew: what is found then holds
// for rows that can be fitted (STATISTICS 10). The halves of a pair go together.
func (j *Judgement) warnRedrawn() {
	n, all, what := len(j.Redrawn), j.Draws, "draws"
	if n == 0 {
		return
	}
	if !j.Bootstrap {
		n, all, what = pairsOf(j.Redrawn), j.Draws/2, "pairs of halves"
	}
	were, their := "were", "their"
	if n == 1 {
		were, their = "was", "its"
	}
	j.add("%d of %d %s %s drawn anew (%s), because %s rows could not be fitted; the frequencies hold for rows that can be fitted",
		n, all, what, were, redrawsText(n, j.MostRedraws), their)
}

// redrawsText says how often n draws or pairs were made anew.
func redrawsText(n, most int) string {
	switch {
	case n == 1:
		return times(most)
	case most == 1:
		return "once each"
	}
	return "up to " + times(most)
}

// pairsOf counts the pairs that ascending numbers of draws belong to.
func pairsOf(numbers []int) int {
	n := 0
	for i, d := range numbers {
		if i == 0 || numbers[i-1]/2 != d/2 {
			n++
		}
	}
	return n
}

// warnEmpty lists the draws whose first step with any predictor had too many.
// Columns that coincide within a draw enter together on every lattice; others
// do so only where the lattice is too coarse to tell them apart.
func (j *Judgement) warnEmpty() {
	n := len(j.EmptyRegion)
	if n == 0 {
		return
	}
	why := "a penalty.ratio nearer to 1 separates them"
	switch k := j.emptyTwins; {
	case k == n:
		why = "columns coincide within these draws"
	case k > 0:
		why = fmt.Sprintf("columns coincide within %d of them; in the others a penalty.ratio nearer to 1 separates them", k)
	}
	j.add("in %s more than %s entered at the first step with any, so that none could be counted (%s): %s",
		drawsOf(n, j.Draws), predictors(j.Decision.Selected), why, listInts(j.EmptyRegion))
}

// warnNoBound says why there is no bound, unless the decision's notes do.
func (j *Judgement) warnNoBound() {
	reason := j.Bounds.Of(j.Decision.Bound).Why
	for _, n := range j.Decision.Notes {
		if strings.Contains(n, reason) {
			return
		}
	}
	switch {
	case j.Bootstrap:
		j.add("%s", noBootstrapBound)
	case j.Decision.FalseSelections == nil:
		j.add("this decision has no bound: %s", reason)
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
	estimate := ""
	if j.Decision.FalseSelections != nil {
		estimate = "; the bound is an estimate here"
	}
	j.add("selected is estimated (%.4g on average, at most %d), and the region's end was chosen from these draws%s", j.MeanSelected, j.Decision.Selected, estimate)
}

func (j *Judgement) add(format string, args ...any) {
	j.Warnings = append(j.Warnings, fmt.Sprintf(format, args...))
}

func predictors(n int) string {
	if n == 1 {
		return "1 predictor"
	}
	return strconv.Itoa(n) + " predictors"
}

func times(n int) string {
	if n == 1 {
		return "once"
	}
	return strconv.Itoa(n) + " times"
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
