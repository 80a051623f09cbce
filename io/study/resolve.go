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
	Text   bool   // text, which is a predictor only as a category, whatever Usable says
}

// Excluded is a column that a pattern took and that cannot be used.
type Excluded struct{ Name, Reason string }

// Roles says which columns play which part. Lists of columns are in table
// order, but for Within.
type Roles struct {
	Outcome    string      // outcome.column; empty for survival
	Candidates []string    // all columns that compete, members of groups among them
	Predictors []Predictor // the units of selection that Candidates make, in order of their first columns
	Groups     []Group     // the groups among Predictors, in the same order
	Always     []string
	Categories []string   // of Candidates and Always: those to be read as categories
	Named      []string   // of Candidates and Always: those that a list names, not only a pattern
	Within     []string   // columns to be balanced, as the study lists them; "outcome" stands for classes or event status
	Left       []string   // taken by candidates.take and left out by candidates.leave
	Excluded   []Excluded // taken by a pattern but not usable, with the reason
	Relative   []float64  // penalty weight of each of Predictors; nil: all 1
}

// Predictor is one unit of selection: a column, a category, or a group.
type Predictor struct {
	Name    string   // of the column, or of the group
	Columns []string // the column alone, or the group's members
	Group   bool
}

// Group is a set of candidates that enter together.
type Group struct {
	Name    string
	Members []string
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
// is never a candidate; only a column of draws.within may be named as one. Of a
// column that cannot be used a pattern only lists it in Excluded; its name is
// an error. Text is read as a category. cols is not changed. The error is
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
	r.findCategories()
	r.findReferences()
	r.findGroups()
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
	within map[string]bool   // columns that the draws balance: a predictor only by name
	owner  map[string]string // group by member
	twice  map[string]bool   // names of several columns
	wishes []wishes
	roles  Roles

	isPredictor map[string]bool // candidates and columns that are always in
}

func newResolver(s *Study, cols []Column) *resolver {
	r := &resolver{
		study:  s,
		faults: faults{file: s.Source, places: s.places},
		cols:   slices.Clone(cols),
		names:  make([]string, len(cols)),
		index:  make(map[string]int, len(cols)),
		taken:  map[string]string{},
		within: map[string]bool{},
		owner:  map[string]string{},
		twice:  map[string]bool{},
		wishes: make([]wishes, len(cols)),

		isPredictor: map[string]bool{},
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
			r.twice[c.Name] = true
			r.cols[i].Usable, r.cols[i].Text = false, false
			r.cols[i].Reason = "its name stands over " + strconv.Itoa(n) + " columns"
		}
	}
	return r
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
		for _, i := range r.matched(key, text) {
			of(&r.wishes[i]).matched = true
		}
	}
}

// matched lists the columns that a pattern matches, and notes a text that is no
// column and no pattern, or a pattern that matches nothing.
func (r *resolver) matched(key, text string) []int {
	if !hasPattern(text) {
		r.unknown(key, text)
		return nil
	}
	m, err := newMatcher(text)
	if err != nil {
		r.faults.value(key, quoted(text), "is no column and no pattern: a [ must be closed, and a \\ must be followed by a character")
		return nil
	}
	var found []int
	for i, name := range r.names {
		if m.match(name) {
			found = append(found, i)
		}
	}
	if len(found) == 0 {
		r.faults.value(key, quoted(text), "matches no column of the table%s", r.hint(text))
	}
	return found
}

// settle gives one column its part.
func (r *resolver) settle(i int) {
	w, name := r.wishes[i], r.names[i]
	if key, ok := r.taken[name]; ok {
		r.checkTaken(w, name, key)
		return
	}
	if r.within[name] {
		w.take.matched, w.always.matched = false, false
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
	case c.admissible():
		*list = append(*list, c.Name)
		r.isPredictor[c.Name] = true
		if named {
			r.roles.Named = append(r.roles.Named, c.Name)
		}
	case named:
		r.faults.value(key, quoted(c.Name), "cannot be used: %s", c.Reason)
	default:
		r.roles.Excluded = append(r.roles.Excluded, Excluded{c.Name, c.Reason})
	}
}

// admissible says whether a column can be a predictor, as it is or as a
// category.
func (c Column) admissible() bool { return c.Usable || c.Text }

// isCandidate says whether a column competes.
func (r *resolver) isCandidate(name string) bool {
	_, found := slices.BinarySearchFunc(r.roles.Candidates, r.index[name], func(have string, at int) int { return r.index[have] - at })
	return found
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

// relative spreads penalty.relative over the predictors.
func (r *resolver) relative() {
	asked := r.study.Penalty.Relative
	if len(asked) == 0 {
		return
	}
	position := make(map[string]int, len(r.roles.Predictors))
	weights := make([]float64, len(r.roles.Predictors))
	for i, p := range r.roles.Predictors {
		position[p.Name] = i
		weights[i] = 1
	}
	for _, name := range slices.Sorted(maps.Keys(asked)) {
		if i, ok := position[name]; ok {
			weights[i] = asked[name]
			continue
		}
		r.notPenalised(name)
	}
	r.roles.Relative = weights
}

// notPenalised notes a relative penalty that has nothing to apply to.
func (r *resolver) notPenalised(name string) {
	key := "penalty.relative." + keyName(name)
	_, known := r.index[name]
	group, member := r.owner[name]
	switch {
	case member:
		r.faults.add(key, "is a member of the group %[1]s, which is penalised as a whole: write penalty.relative.%[1]s", keyName(group))
	case slices.Contains(r.roles.Always, name):
		r.faults.add(key, "is always in the model and not penalised: take its line out")
	case known:
		r.faults.add(key, "%s", r.noPredictor(name))
	case len(r.roles.Predictors) > 0:
		r.faults.add(key, "is no candidate%s", NearHint(name, r.predictorNames()))
	}
}

func (r *resolver) predictorNames() []string {
	names := make([]string, len(r.roles.Predictors))
	for i, p := range r.roles.Predictors {
		names[i] = p.Name
	}
	return names
}
