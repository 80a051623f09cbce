package study

import (
	"maps"
	"slices"
)

// findGroups gives candidates to the groups that name or match them, and makes
// the units of selection of groups and of the candidates that are in none.
func (r *resolver) findGroups() {
	for _, name := range slices.Sorted(maps.Keys(r.study.Candidates.Groups)) {
		r.findMembers(name, r.study.Candidates.Groups[name])
	}
	at := map[string]int{} // position in Predictors of each group
	for _, column := range r.roles.Candidates {
		name, member := r.owner[column]
		if !member {
			r.roles.Predictors = append(r.roles.Predictors, Predictor{Name: column, Columns: []string{column}})
			continue
		}
		i, begun := at[name]
		if !begun {
			i = len(r.roles.Predictors)
			at[name] = i
			r.roles.Predictors = append(r.roles.Predictors, Predictor{Name: name, Group: true})
		}
		r.roles.Predictors[i].Columns = append(r.roles.Predictors[i].Columns, column)
	}
	for _, p := range r.roles.Predictors {
		if p.Group {
			r.roles.Groups = append(r.roles.Groups, Group{p.Name, p.Columns})
		}
	}
}

// findMembers finds the candidates of one group.
func (r *resolver) findMembers(group string, list []string) {
	key := "candidates.groups." + keyName(group)
	if _, column := r.index[group]; column {
		r.faults.add(key, "a column of the table has this name: give the group another one, for both stand in one table of results")
		return
	}
	before := len(r.faults.found)
	members := map[string]bool{}
	for _, text := range list {
		r.askMembers(key, text, members)
	}
	if len(members) == 0 && len(r.faults.found) == before {
		r.faults.add(key, "has no members: none of its columns is a candidate")
	}
	r.own(key, group, members)
}

// askMembers marks the candidates that one entry of a group means.
func (r *resolver) askMembers(key, text string, members map[string]bool) {
	if _, ok := r.index[text]; !ok {
		for _, i := range r.matched(key, text) {
			if name := r.names[i]; r.isCandidate(name) {
				members[name] = true
			}
		}
		return
	}
	switch why := r.noPredictor(text); {
	case why != "":
		r.faults.value(key, quoted(text), "%s", why)
	case !r.isCandidate(text):
		r.faults.value(key, quoted(text), "is always in the model and competes in no group: take its name out of the group, or out of candidates.always")
	default:
		members[text] = true
	}
}

// own gives members to a group. Of two groups that overlap the first column
// that both have is named.
func (r *resolver) own(key, group string, members map[string]bool) {
	shared := map[string]bool{} // groups that were named already
	for _, name := range r.roles.Candidates {
		if !members[name] {
			continue
		}
		other, taken := r.owner[name]
		switch {
		case !taken:
			r.owner[name] = group
		case !shared[other]:
			shared[other] = true
			r.faults.value(key, quoted(name), "is a member of the group %s too, and groups must not overlap", keyName(other))
		}
	}
}
