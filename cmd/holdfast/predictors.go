package main

import (
	"context"
	"fmt"
	"slices"

	"holdfast/io/rundir"
	"holdfast/solver"
)

// predictor is a unit of selection with its columns of the design.
type predictor struct {
	name    string
	columns []int32
	several bool    // a group or a category: its columns are terms with names of their own
	weight  float64 // of the penalty, relative to others
}

// examine makes the predictors that are fitted: without constant columns, and
// copies under one name.
func (l *loaded) examine(ctx context.Context) error {
	all := l.predictors()
	found, err := l.look(ctx, all)
	if err != nil {
		return wrong(err, "")
	}
	varying := l.withoutConstant(all, found)
	if single := ofOneColumn(varying); len(single) != len(varying) {
		// A column that a group has too hides copies among the others.
		if found, err = l.look(ctx, single); err != nil {
			return wrong(err, "")
		}
	}
	if l.fitted, err = l.withoutRecoded(ctx, l.withoutCopies(varying, found)); err != nil {
		return wrong(err, "")
	}
	if len(l.fitted) == 0 {
		return wrong(fmt.Errorf("holdfast: no candidate is left: all %d are constant over the rows used", len(l.roles.Predictors)),
			"holdfast inspect shows what the table holds")
	}
	return nil
}

// predictors are those that the study asks for, with the columns that the table
// has for them.
func (l *loaded) predictors() []predictor {
	columns := make(map[string][]int32, len(l.data.Candidates))
	for i, name := range l.data.Candidates {
		columns[name] = l.data.CandidateColumns[i]
	}
	category := l.isCategory()
	list := make([]predictor, 0, len(l.roles.Predictors))
	for i, asked := range l.roles.Predictors {
		p := predictor{name: asked.Name, several: asked.Group || category[asked.Name], weight: 1}
		if l.roles.Relative != nil {
			p.weight = l.roles.Relative[i]
		}
		for _, name := range asked.Columns {
			p.columns = append(p.columns, columns[name]...)
		}
		switch {
		case len(p.columns) > 0:
			list = append(list, p)
		case asked.Group:
			l.exclude(p.name, "none of its columns can be used", "")
		}
	}
	return list
}

// isCategory tells the columns that were read by their levels.
func (l *loaded) isCategory() map[string]bool {
	is := make(map[string]bool, len(l.data.Categories))
	for _, c := range l.data.Categories {
		is[c.Column] = true
	}
	return is
}

// exclude notes what was asked for and is no candidate.
func (l *loaded) exclude(name, reason, of string) {
	l.excluded = append(l.excluded, rundir.Excluded{Column: name, Reason: reason, Of: of})
}

// withoutConstant takes out columns that do not vary over the rows used; a
// group keeps those that do.
func (l *loaded) withoutConstant(all []predictor, found *solver.Examination) []predictor {
	const reason = "constant over the rows used"
	constant := make(map[int32]bool, len(found.Constant))
	for _, j := range found.Constant {
		constant[j] = true
	}
	var kept []predictor
	for _, p := range all {
		varying := slices.DeleteFunc(slices.Clone(p.columns), func(j int32) bool { return constant[j] })
		switch {
		case len(varying) == 0 && p.several:
			l.exclude(p.name, "all its columns are "+reason, "")
			continue
		case len(varying) == 0:
			l.exclude(p.name, reason, "")
			continue
		}
		for _, j := range p.columns {
			if constant[j] {
				l.exclude(l.data.Names[j], reason, "")
			}
		}
		p.columns = varying
		kept = append(kept, p)
	}
	return kept
}

// ofOneColumn are the predictors of one column.
func ofOneColumn(list []predictor) (single []predictor) {
	for _, p := range list {
		if len(p.columns) == 1 {
			single = append(single, p)
		}
	}
	return single
}

// withoutCopies takes out predictors of one column that are an earlier one up to
// shift and scale.
func (l *loaded) withoutCopies(all []predictor, found *solver.Examination) []predictor {
	name := map[int32]string{}
	for _, p := range ofOneColumn(all) {
		name[p.columns[0]] = p.name
	}
	copied := make(map[int32]bool, len(found.Copies))
	for _, c := range found.Copies {
		copied[c.Col] = true
		l.exclude(name[c.Col], "copy up to shift and scale", name[c.Of])
	}
	return slices.DeleteFunc(all, func(p predictor) bool { return len(p.columns) == 1 && copied[p.columns[0]] })
}

// withoutRecoded takes out predictors of several columns that an earlier one is in
// other words: a category under other names, as a code and what it stands for.
func (l *loaded) withoutRecoded(ctx context.Context, all []predictor) ([]predictor, error) {
	several := slices.DeleteFunc(slices.Clone(all), func(p predictor) bool { return len(p.columns) == 1 })
	groups := make([][]int32, len(several))
	for i, p := range several {
		groups[i] = p.columns
	}
	same, err := solver.EqualGroups(ctx, l.data.X, groups)
	if err != nil {
		return nil, err
	}
	out := make(map[string]bool, len(same))
	for _, c := range same {
		out[several[c.Col].name] = true
		l.exclude(several[c.Col].name, "recoded copy", several[c.Of].name)
	}
	return slices.DeleteFunc(all, func(p predictor) bool { return out[p.name] }), nil
}

// look examines all columns of some predictors.
func (l *loaded) look(ctx context.Context, list []predictor) (*solver.Examination, error) {
	if len(list) == 0 {
		return &solver.Examination{}, nil
	}
	return solver.Examine(ctx, l.data.X, columnsOf(list))
}

// columnsOf lists the columns of predictors, one after the other.
func columnsOf(list []predictor) []int32 {
	columns := make([]int32, 0, len(list))
	for _, p := range list {
		columns = append(columns, p.columns...)
	}
	return columns
}

// grouped reports whether a predictor of several columns is fitted.
func (l *loaded) grouped() bool {
	return slices.ContainsFunc(l.fitted, func(p predictor) bool { return len(p.columns) > 1 })
}

// names are those of the predictors that are fitted.
func (l *loaded) names() []string {
	names := make([]string, len(l.fitted))
	for i, p := range l.fitted {
		names[i] = p.name
	}
	return names
}

// alwaysColumns are the columns of the design that are in every model.
func (l *loaded) alwaysColumns() []int32 { return slices.Concat(l.data.AlwaysColumns...) }

// always are the columns and categories in every model.
func (l *loaded) always() []string {
	var names []string
	for i, name := range l.data.Always {
		if len(l.data.AlwaysColumns[i]) > 0 {
			names = append(names, name)
		}
	}
	return names
}

// references are the levels without a column, by category.
func (l *loaded) references() map[string]string {
	levels := map[string]string{}
	for _, c := range l.data.Categories {
		levels[c.Column] = c.Reference
	}
	return levels
}

// terms names the columns of groups and categories, by predictor.
func (l *loaded) terms() map[string][]string {
	terms := map[string][]string{}
	for _, p := range l.fitted {
		if p.several {
			terms[p.name] = l.columnNames(p.columns)
		}
	}
	category := l.isCategory()
	for i, name := range l.data.Always {
		if category[name] && len(l.data.AlwaysColumns[i]) > 0 {
			terms[name] = l.columnNames(l.data.AlwaysColumns[i])
		}
	}
	return terms
}

// columnNames names columns of the design.
func (l *loaded) columnNames(columns []int32) []string {
	names := make([]string, len(columns))
	for i, j := range columns {
		names[i] = l.data.Names[j]
	}
	return names
}

// units puts the predictors into a problem: columns, groups, penalty weights.
func (l *loaded) units(p *solver.Problem) {
	grouped := l.grouped()
	for _, f := range l.fitted {
		p.Candidates = append(p.Candidates, f.columns[0])
		if l.roles.Relative != nil {
			p.Relative = append(p.Relative, f.weight)
		}
		if !grouped {
			continue
		}
		var group []int32 // a group of one column is that column
		if len(f.columns) > 1 {
			group = f.columns
		}
		p.Groups = append(p.Groups, group)
	}
}
