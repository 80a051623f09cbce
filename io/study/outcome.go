package study

import "slices"

// textual says whether a column named by key may hold text: the values of an
// outcome in classes, and the status of an event, are compared as text.
func (o Outcome) textual(key string) bool {
	switch key {
	case "outcome.column":
		return o.Kind == YesNo || o.Kind == Classes
	case "outcome.event":
		return true
	}
	return false
}

// findRoles looks up the columns that the outcome and the draws name.
func (r *resolver) findRoles() {
	r.roles.Outcome = r.study.Outcome.Column
	for _, role := range r.study.Outcome.roles() {
		i, ok := r.index[role.column]
		if !ok {
			r.unknown(role.key, role.column)
			continue
		}
		r.taken[role.column] = role.key
		r.checkValues(role, r.cols[i])
	}
	r.findLabels("outcome.strata", r.study.Outcome.Strata)
	r.findLabels("draws.together", r.study.Draws.Together)
	r.findWithin()
}

// checkValues refuses a column that does not hold what its role needs.
func (r *resolver) checkValues(role role, c Column) {
	textual := r.study.Outcome.textual(role.key)
	switch {
	case c.Text && textual, c.Usable && !c.Text:
	case c.Text && role.key == "outcome.column":
		r.faults.value(role.key, quoted(role.column), "cannot be used: %s, and outcome.kind = %q needs numbers (yes-no and classes take text)", c.why(), r.study.Outcome.Kind)
	case c.Text:
		r.faults.value(role.key, quoted(role.column), "cannot be used: %s, and numbers are needed", c.why())
	default:
		r.faults.value(role.key, quoted(role.column), "cannot be used: %s", c.Reason)
	}
}

// why is the reason why a column cannot be used as it is.
func (c Column) why() string {
	if c.Reason == "" {
		return "text"
	}
	return c.Reason
}

// findLabels looks up columns that only tell rows apart: any values will do.
func (r *resolver) findLabels(key string, list []string) {
	for _, name := range list {
		if r.isColumn(key, name) && r.taken[name] == "" {
			r.taken[name] = key
		}
	}
}

// isColumn notes a name that no column has, or several.
func (r *resolver) isColumn(key, name string) bool {
	i, ok := r.index[name]
	switch {
	case !ok:
		r.unknown(key, name)
	case r.twice[name]:
		r.faults.value(key, quoted(name), "cannot be used: %s", r.cols[i].Reason)
	default:
		return true
	}
	return false
}

// findWithin looks up the columns to be balanced. The column of a classes
// outcome, or of the event status, is balanced as "outcome".
func (r *resolver) findWithin() {
	const key = "draws.within"
	kind := r.study.Outcome.Kind
	hasStatus := len(defaultWithin(kind)) > 0
	for _, name := range r.study.Draws.Within {
		switch taken := r.taken[name]; {
		case hasStatus && (name == outcomeWord || taken == r.statusKey()):
			name = outcomeWord
		case taken != "" && taken != "outcome.strata":
			r.faults.value(key, quoted(name), "is the column of %s, which makes no strata", taken)
			continue
		case name == outcomeWord && r.missing(name):
			r.faults.value(key, quoted(name), "stands for classes or event status, and outcome.kind = %q has neither; the table has no column of that name", kind)
			continue
		case !r.isColumn(key, name):
			continue
		default:
			r.within[name] = taken == ""
		}
		if !slices.Contains(r.roles.Within, name) {
			r.roles.Within = append(r.roles.Within, name)
		}
	}
}

// statusKey is the key of the column that holds classes or event status.
func (r *resolver) statusKey() string {
	if r.study.Outcome.Kind == Survival {
		return "outcome.event"
	}
	return "outcome.column"
}

// missing says whether no column has a name.
func (r *resolver) missing(name string) bool {
	_, ok := r.index[name]
	return !ok
}
