package study

import (
	"maps"
	"math"
	"slices"
	"strconv"
)

// Limits that keep absurd sizes out before any memory is taken.
const (
	maxDraws = 10_000_000
	maxSteps = 100_000 // lattice steps from lambda_max to the floor
)

// Check says whether a study that was built or changed by hand could have
// been read: values in range and not at odds with each other. Parse has
// checked what it returns.
func (s *Study) Check() error {
	f := faults{file: s.Source, places: s.places}
	s.check(&f)
	return f.err()
}

func (s *Study) check(f *faults) {
	s.Table.check(f)
	s.Outcome.check(f)
	s.Candidates.check(f)
	s.Penalty.check(f)
	s.Draws.check(f)
	s.Decision.check(f, s.Draws)
}

func (t Table) check(f *faults) {
	if t.Path == "" {
		f.add("table.path", "is missing: name the table's file")
	}
}

func (o Outcome) check(f *faults) {
	o.checkColumns(f)
	o.checkOthers(f)
	o.checkOffset(f)
	o.checkRoles(f)
}

// checkColumns says which columns the kind of outcome needs. A yes-no outcome
// needs a success too: package table, which knows the values, asks for it.
func (o Outcome) checkColumns(f *faults) {
	if o.Kind != Survival {
		if o.Column == "" {
			f.add("outcome.column", "is missing: name the column to be explained")
		}
		return
	}
	if o.Column != "" {
		f.add("outcome.column", `outcome.kind = "survival" has time and event in place of column`)
	}
	if o.Time == "" {
		f.add("outcome.time", `is missing: outcome.kind = "survival" needs the column of times`)
	}
	if o.Event == "" {
		f.add("outcome.event", `is missing: outcome.kind = "survival" needs the column that tells events`)
	}
}

// checkOthers refuses what another kind of outcome has.
func (o Outcome) checkOthers(f *faults) {
	for _, c := range []struct {
		key   string
		given bool
		kind  Kind
	}{
		{"outcome.time", o.Time != "", Survival},
		{"outcome.event", o.Event != "", Survival},
		{"outcome.entry", o.Entry != "", Survival},
		{"outcome.ties", o.Ties != Efron, Survival},
		{"outcome.strata", len(o.Strata) > 0, Survival},
		{"outcome.exposure", o.Exposure != "", Count},
	} {
		if c.given && o.Kind != c.kind {
			f.add(c.key, "is for outcome.kind = %q, and it is %q", c.kind, o.Kind)
		}
	}
	if o.Success != "" && o.Kind != YesNo && o.Kind != Survival {
		f.add("outcome.success", "is for outcome.kind = %q, or the event of %q, and it is %q", YesNo, Survival, o.Kind)
	}
}

// checkOffset refuses what classes cannot have: one column cannot be added to
// the linear predictors of all classes and change anything.
func (o Outcome) checkOffset(f *faults) {
	if o.Offset != "" && o.Kind == Classes {
		f.value("outcome.offset", quoted(o.Offset), "is for every kind of outcome but classes, where it would move all classes alike: leave the line out")
	}
}

// checkRoles refuses one column in two roles.
func (o Outcome) checkRoles(f *faults) {
	seen := map[string]string{}
	for _, role := range o.roles() {
		if first, twice := seen[role.column]; twice {
			f.value(role.key, quoted(role.column), "is the column of %s already", first)
			continue
		}
		seen[role.column] = role.key
	}
}

// role is a column named for one purpose.
type role struct{ key, column string }

// roles lists the columns that the outcome names, in the order of the keys.
func (o Outcome) roles() []role {
	var named []role
	for _, r := range []role{
		{"outcome.column", o.Column}, {"outcome.time", o.Time}, {"outcome.event", o.Event},
		{"outcome.entry", o.Entry}, {"outcome.offset", o.Offset},
		{"outcome.exposure", o.Exposure}, {"outcome.case_weight", o.CaseWeight},
	} {
		if r.column != "" {
			named = append(named, r)
		}
	}
	return named
}

func (c Candidates) check(f *faults) {
	if len(c.Take) == 0 {
		f.value("candidates.take", "[]", `takes nothing: ["*"] takes every column without another role`)
	}
	for _, name := range slices.Sorted(maps.Keys(c.Groups)) {
		switch key := "candidates.groups." + keyName(name); {
		case name == "":
			f.add(key, "a group has a name: it stands in the tables of results")
		case len(c.Groups[name]) == 0:
			f.value(key, "[]", "has no members: name columns or patterns, or take the line out")
		}
	}
}

func (p Penalty) check(f *faults) {
	inRange(f, "penalty.mix", p.Mix, p.Mix > 0 && p.Mix <= 1, "above 0 and at most 1")
	inRange(f, "penalty.jitter", p.Jitter, p.Jitter > 0 && p.Jitter <= 1, "above 0 and at most 1")
	ratio := inRange(f, "penalty.ratio", p.Ratio, p.Ratio > 0 && p.Ratio < 1, "above 0 and below 1")
	floor := inRange(f, "penalty.floor", p.Floor, p.Floor > 0 && p.Floor < 1, "above 0 and below 1")
	if steps := math.Log(p.Floor) / math.Log(p.Ratio); ratio && floor && steps > maxSteps {
		f.value("penalty.ratio", realText(p.Ratio), "makes %.0f steps down to penalty.floor = %s, and at most %d are possible: write a smaller ratio or a larger floor",
			steps, realText(p.Floor), maxSteps)
	}
	if p.StopAfter < 0 {
		f.value("penalty.stop_after", strconv.Itoa(p.StopAfter), "must not be negative")
	}
	for _, name := range slices.Sorted(maps.Keys(p.Relative)) {
		v := p.Relative[name]
		inRange(f, "penalty.relative."+keyName(name), v, v > 0 && !math.IsInf(v, 0), "a number above 0 (a column that is not penalised stands in candidates.always)")
	}
}

// inRange notes a number outside what is allowed, and says whether it is in.
func inRange(f *faults, key string, x float64, ok bool, allowed string) bool {
	if !ok {
		f.value(key, realText(x), "must be %s", allowed)
	}
	return ok
}

func (d Draws) check(f *faults) {
	switch {
	case d.Number < 2 || d.Number > maxDraws:
		f.value("draws.number", strconv.Itoa(d.Number), "must be at least 2 and at most %d", maxDraws)
	case d.Design == Halves && d.Number%2 != 0:
		f.value("draws.number", strconv.Itoa(d.Number), "must be even, for two halves make a pair: write %d", d.Number+1)
	}
	if d.Seed > math.MaxInt64 {
		f.value("draws.seed", strconv.FormatUint(d.Seed, 10), "must be at most %d", int64(math.MaxInt64))
	}
}

func (d Decision) check(f *faults, draws Draws) {
	for _, t := range []three{d.three(), d.replacement()} {
		if x := t.threshold; x != nil {
			inRange(f, "decision.threshold", *x, *x > 0.5 && *x <= 1, "above 0.5 and at most 1")
		}
		if x := t.falseSelections; x != nil {
			inRange(f, "decision.false_selections", *x, *x > 0 && !math.IsInf(*x, 0), "a number above 0")
		}
		if x := t.selected; x != nil {
			inRange(f, "decision.selected", *x, *x >= 1 && *x == math.Trunc(*x) && *x <= math.MaxInt32, "a whole number of at least 1")
		}
	}
	if draws.Design == Bootstrap {
		d.checkBootstrap(f)
	}
}

// checkBootstrap holds the rule of draws without a bound: nothing but the
// user can say how many predictors count.
func (d Decision) checkBootstrap(f *faults) {
	switch {
	case d.FalseSelections != nil && (d.Selected != nil || f.places["decision.false_selections"] != place{}):
		f.add("decision.false_selections", `draws.design = "bootstrap" has no bound on false selections: give threshold and selected in its place`)
	case d.Selected == nil || d.Threshold == nil: // so it is wherever a replacement waits
		f.value("draws.design", quoted(Bootstrap.String()), "needs decision.selected: there is no bound to derive it from")
	}
}

// replacement is Replace as three numbers.
func (d Decision) replacement() three {
	if d.Replace == nil {
		return three{}
	}
	return three{d.Replace.Threshold, d.Replace.FalseSelections, d.Replace.Selected}
}
