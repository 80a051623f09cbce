package study

import (
	"fmt"
	"maps"
	"slices"
	"strconv"
)

// Column is what Resolve has to know of a column of the table.
type Column struct {
	Name   string
	Usable bool   // can be a predictor as it is
	Reason string // where not usable: why, such as "text"
}

// Excluded is a column that a pattern took and that cannot be used.
type Excluded struct{ Name, Reason string }

// Roles says which columns play which part. All lists are in table order.
type Roles struct {
	Outcome    string // outcome.column; empty for survival
	Candidates []string
	Always     []string
	Left       []string   // taken by candidates.take and left out by candidates.leave
	Excluded   []Excluded // taken by a pattern but not usable, with the reason
	Relative   []float64  // penalty weight of each of Candidates; nil: all 1
}

// wish counts how a list of candidates speaks of a column.
type wish struct {
	named, matched bool
}

// wishes is what the three lists say of one column.
type wishes struct{ take, leave, always wish }

// Resolve finds the columns that a study speaks of. A name beats a pattern;
// among patterns leave beats always and always beats take; two lists that both
// name a column are an error. The outcome, and every column with another role,
// is never a candidate. Of a column that cannot be used a pattern only lists
// it in Excluded; its name is an error. cols is not changed. The error is
// Problems, all that were found.
func (s *Study) Resolve(cols []Column) (*Roles, error) {
	r := newResolver(s, cols)
	r.findRoles()
	r.read("candidates.take", s.Candidates.Take, func(w *wishes) *wish { return &w.take })
	r.read("candidates.leave", s.Candidates.Leave, func(w *wishes) *wish { return &w.leave })
	r.read("candidates.always", s.Candidates.Always, func(w *wishes) *wish { return &w.always })
	for i := range r.cols {
		r.settle(i)
	}
	r.checkSome()
	r.relative()
	if err := r.faults.err(); err != nil {
		return nil, err
	}
	return &r.roles, nil
}

// resolver is the work of one Resolve.
type resolver struct {
	study  *Study
	faults faults
	cols   []Column
	names  []string
	index  map[string]int    // first column of a name
	taken  map[string]string // key by column with a role of its own
	wishes []wishes
	roles  Roles
}

func newResolver(s *Study, cols []Column) *resolver {
	r := &resolver{
		study:  s,
		faults: faults{file: s.Source, places: s.places},
		cols:   slices.Clone(cols),
		names:  make([]string, len(cols)),
		index:  make(map[string]int, len(cols)),
		taken:  map[string]string{},
		wishes: make([]wishes, len(cols)),
	}
	count := make(map[string]int, len(cols))
	for _, c := range cols {
		count[c.Name]++
	}
	for i, c := range cols {
		r.names[i] = c.Name
		if _, ok := r.index[c.Name]; !ok {
			r.index[c.Name] = i
		}
		if n := count[c.Name]; n > 1 {
			r.cols[i].Usable = false
			r.cols[i].Reason = "its name stands over " + strconv.Itoa(n) + " columns"
		}
	}
	return r
}

// findRoles looks up the columns that the outcome names.
func (r *resolver) findRoles() {
	r.roles.Outcome = r.study.Outcome.Column
	for _, role := range r.study.Outcome.roles() {
		i, ok := r.index[role.column]
		if !ok {
			r.unknown(role.key, role.column)
			continue
		}
		r.taken[role.column] = role.key
		if c := r.cols[i]; !c.Usable && (r.study.Outcome.Kind == Number || role.key != "outcome.column") {
			r.faults.value(role.key, quoted(role.column), "cannot be used: %s", c.Reason)
		}
	}
	for _, list := range []struct {
		key  string
		cols []string
	}{
		{"outcome.strata", r.study.Outcome.Strata},
		{"draws.together", r.study.Draws.Together},
		{"draws.within", r.balanced()},
	} {
		for _, name := range list.cols {
			if _, ok := r.index[name]; !ok {
				r.unknown(list.key, name)
			} else if r.taken[name] == "" {
				r.taken[name] = list.key
			}
		}
	}
}

// balanced is draws.within without the word that stands for the outcome.
func (r *resolver) balanced() []string {
	if len(defaultWithin(r.study.Outcome.Kind)) == 0 {
		return r.study.Draws.Within
	}
	return slices.DeleteFunc(slices.Clone(r.study.Draws.Within), func(name string) bool { return name == "outcome" })
}

// unknown notes a name that no column has.
func (r *resolver) unknown(key, name string) {
	r.faults.value(key, quoted(name), "the table has no such column%s", r.hint(name))
}

// hint names the nearest column. Past the problems that are shown it is not
// worth the search: a list may hold as many wrong names as a table columns.
func (r *resolver) hint(name string) string {
	if len(r.faults.found) >= mostShown {
		return ""
	}
	return NearHint(name, r.names)
}

// read marks the columns that a list names or matches.
func (r *resolver) read(key string, list []string, of func(*wishes) *wish) {
	for _, text := range list {
		if i, ok := r.index[text]; ok {
			of(&r.wishes[i]).named = true
			continue
		}
		if !hasPattern(text) {
			r.unknown(key, text)
			continue
		}
		m, err := newMatcher(text)
		if err != nil {
			r.faults.value(key, quoted(text), "is no column and no pattern: a [ must be closed, and a \\ must be followed by a character")
			continue
		}
		if !r.mark(m, of) {
			r.faults.value(key, quoted(text), "matches no column of the table%s", r.hint(text))
		}
	}
}

// mark marks what a pattern matches, and says whether that is anything.
func (r *resolver) mark(m matcher, of func(*wishes) *wish) bool {
	any := false
	for i, name := range r.names {
		if m.match(name) {
			of(&r.wishes[i]).matched = true
			any = true
		}
	}
	return any
}

// settle gives one column its part.
func (r *resolver) settle(i int) {
	w, name := r.wishes[i], r.names[i]
	if key, ok := r.taken[name]; ok {
		r.checkTaken(w, name, key)
		return
	}
	if r.conflict(w, name) {
		return
	}
	named := w.take.named || w.leave.named || w.always.named
	switch {
	case w.leave.named, !named && w.leave.matched:
		if w.take.matched || w.always.matched {
			r.roles.Left = append(r.roles.Left, name)
		}
	case w.always.named, !named && w.always.matched:
		r.admit(&r.roles.Always, "candidates.always", i, w.always.named)
	case w.take.named, w.take.matched:
		r.admit(&r.roles.Candidates, "candidates.take", i, w.take.named)
	}
}

// checkTaken refuses a column that is named as a predictor and has a role.
func (r *resolver) checkTaken(w wishes, name, key string) {
	if w.take.named {
		r.faults.value("candidates.take", quoted(name), "is the column of %s, which is never a candidate", key)
	}
	if w.always.named {
		r.faults.value("candidates.always", quoted(name), "is the column of %s, which is never a predictor", key)
	}
}

// conflict notes a column that several lists name.
func (r *resolver) conflict(w wishes, name string) bool {
	var by []string
	for _, l := range []struct {
		key   string
		named bool
	}{
		{"candidates.take", w.take.named}, {"candidates.leave", w.leave.named}, {"candidates.always", w.always.named},
	} {
		if l.named {
			by = append(by, l.key)
		}
	}
	if len(by) < 2 {
		return false
	}
	r.faults.value(by[1], quoted(name), "is named by %s too: a column has one part, so take its name out of one of them", by[0])
	return true
}

// admit appends a usable column to a list.
func (r *resolver) admit(list *[]string, key string, i int, named bool) {
	switch c := r.cols[i]; {
	case c.Usable:
		*list = append(*list, c.Name)
	case named:
		r.faults.value(key, quoted(c.Name), "cannot be used: %s", c.Reason)
	default:
		r.roles.Excluded = append(r.roles.Excluded, Excluded{c.Name, c.Reason})
	}
}

// checkSome refuses a study without a candidate, and says where all went.
func (r *resolver) checkSome() {
	if len(r.roles.Candidates) > 0 || len(r.faults.found) > 0 {
		return
	}
	why := fmt.Sprintf("leaves no candidate: of %d columns %d are left out, %d are always in the model, %d cannot be used",
		len(r.cols), len(r.roles.Left), len(r.roles.Always), len(r.roles.Excluded))
	if len(r.roles.Excluded) > 0 {
		e := r.roles.Excluded[0]
		why += fmt.Sprintf(" (%s: %s)", quoted(e.Name), e.Reason)
	}
	r.faults.add("candidates.take", "%s", why)
}

// relative spreads penalty.relative over the candidates.
func (r *resolver) relative() {
	asked := r.study.Penalty.Relative
	if len(asked) == 0 {
		return
	}
	position := make(map[string]int, len(r.roles.Candidates))
	weights := make([]float64, len(r.roles.Candidates))
	for i, name := range r.roles.Candidates {
		position[name] = i
		weights[i] = 1
	}
	for _, name := range slices.Sorted(maps.Keys(asked)) {
		if i, ok := position[name]; ok {
			weights[i] = asked[name]
			continue
		}
		r.notCandidate(name)
	}
	r.roles.Relative = weights
}

// notCandidate notes a relative penalty that has nothing to apply to.
func (r *resolver) notCandidate(name string) {
	key := "penalty.relative." + keyName(name)
	_, known := r.index[name]
	switch {
	case slices.Contains(r.roles.Always, name):
		r.faults.add(key, "is always in the model and not penalised: take its line out")
	case known:
		r.faults.add(key, "is a column of the table but no candidate: take its line out, or the column in")
	case len(r.roles.Candidates) > 0:
		r.faults.add(key, "is no candidate%s", NearHint(name, r.roles.Candidates))
	}
}
