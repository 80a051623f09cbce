package study

import (
	"fmt"
	"maps"
	"slices"
)

// findCategories lists the predictors that are read as categories: text, and
// what candidates.categories names or matches.
func (r *resolver) findCategories() {
	asked := map[string]bool{}
	for _, text := range r.study.Candidates.Categories {
		r.askCategories(text, asked)
	}
	for i, name := range r.names {
		if r.isPredictor[name] && (r.cols[i].Text || asked[name]) {
			r.roles.Categories = append(r.roles.Categories, name)
		}
	}
	slices.SortFunc(r.roles.Named, func(a, b string) int { return r.index[a] - r.index[b] })
}

// askCategories marks the predictors that one entry means.
func (r *resolver) askCategories(text string, asked map[string]bool) {
	const key = "candidates.categories"
	if _, ok := r.index[text]; ok {
		if why := r.noPredictor(text); why != "" {
			r.faults.value(key, quoted(text), "%s", why)
			return
		}
		asked[text] = true
		if !slices.Contains(r.roles.Named, text) {
			r.roles.Named = append(r.roles.Named, text)
		}
		return
	}
	found := r.matched(key, text)
	any := false
	for _, i := range found {
		if name := r.names[i]; r.isPredictor[name] {
			asked[name], any = true, true
		}
	}
	if len(found) > 0 && !any {
		r.faults.value(key, quoted(text), "matches no candidate and no column that is always in the model")
	}
}

// noPredictor says why a column of the table is no predictor; empty: it is one.
func (r *resolver) noPredictor(name string) string {
	key, taken := r.taken[name]
	switch {
	case r.isPredictor[name]:
		return ""
	case taken:
		return "is the column of " + key + ", which is never a predictor"
	case !r.cols[r.index[name]].admissible():
		return "cannot be used: " + r.cols[r.index[name]].Reason
	case r.within[name]:
		return "is the column of draws.within, and a predictor only where candidates.take or candidates.always names it"
	}
	return r.notTaken(name)
}

// notTaken says why a usable column plays no part, and what makes it a
// candidate: a name beats a pattern.
func (r *resolver) notTaken(name string) string {
	switch leave := r.wishes[r.index[name]].leave; {
	case leave.named:
		return "is left out, for candidates.leave names it: take its name out of candidates.leave, or out of here"
	case leave.matched:
		return fmt.Sprintf("is left out, for a pattern in candidates.leave matches it: add %s to candidates.take, or take its name out of here", quoted(name))
	}
	return fmt.Sprintf("is a column of the table, but candidates.take does not take it: add %s to candidates.take, or take its name out of here", quoted(name))
}

// findReferences checks that reference levels belong to categories.
func (r *resolver) findReferences() {
	for _, name := range slices.Sorted(maps.Keys(r.study.Candidates.Reference)) {
		key := "candidates.reference." + keyName(name)
		_, known := r.index[name]
		switch {
		case slices.Contains(r.roles.Categories, name):
		case !known:
			r.faults.add(key, "the table has no such column%s", r.hint(name))
		case r.isPredictor[name]:
			r.faults.add(key, "is read as numbers, which have no reference level: take its line out, or put %s into candidates.categories", quoted(name))
		default:
			r.faults.add(key, "%s", r.noPredictor(name))
		}
	}
}
