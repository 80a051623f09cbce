package main

import (
	"context"

	"github.com/spf13/cobra"

	"holdfast/io/study"
	"holdfast/io/table"
	"holdfast/solver"
)

// inspectOptions is what `inspect` is told beside the question.
type inspectOptions struct {
	quick  bool
	asJSON bool
}

func (p *program) inspectCommand() *cobra.Command {
	var q question
	var o inspectOptions
	c := &cobra.Command{
		Use:   "inspect TABLE|STUDY [--outcome COL] [--quick]",
		Short: "what a table holds, and what of it would mislead or be refused",
		Long: `inspect reads a table and says what it holds: kinds, categories, missing values,
constant columns, copies, columns that are nearly the same, and, with an outcome,
its kind, and what looks like the outcome in other clothes. For a study it also says whether a run
would be refused.`,
		Example: "  holdfast inspect demo/hatchery.parquet --outcome survival_d21",
		Args:    exactly("TABLE"),
	}
	f := c.Flags()
	q.addFlags(f)
	f.BoolVar(&o.quick, "quick", false, "do not compare columns with each other")
	f.BoolVar(&o.asJSON, "json", false, "print JSON, with figures for every column")
	c.RunE = func(c *cobra.Command, args []string) error {
		q.path = args[0]
		return p.inspect(c.Context(), q, o)
	}
	return c
}

// inspection is what was found in a table.
type inspection struct {
	path     string
	summary  *table.Summary
	outcome  *study.Outcome // nil: nobody said
	flags    []study.Flag
	quick    bool
	copies   []likeness
	near     []likeness
	refusals []string // why a run would be refused
	decision string   // what a run would decide, for a study that can be run
}

// likeness is a column that says the same as another one, or nearly.
type likeness struct {
	Column string  `json:"column"`
	Of     string  `json:"of"`
	R      float64 `json:"r"`
}

// inspect looks at a table and prints what it found. What a run would refuse
// is a finding here, not a failure.
func (p *program) inspect(ctx context.Context, q question, o inspectOptions) error {
	i := &inspection{quick: o.quick}
	source, err := i.openFor(&q)
	if err != nil {
		return err
	}
	i.path = source.Path()
	if i.summary, err = source.Scan(ctx, q.outcome); err != nil {
		return wrong(err, "")
	}
	if q.outcome != "" {
		i.draft()
	}
	if isStudy(q.path) {
		q.outcome = "" // it came from the study
	}
	if isStudy(q.path) || len(q.sets) > 0 {
		if err := i.tryStudy(ctx, q); err != nil {
			return err
		}
	}
	if !o.quick {
		if err := p.compare(ctx, source, i); err != nil {
			return err
		}
	}
	if o.asJSON {
		return p.writeJSON(i.document())
	}
	return p.printInspection(i)
}

// openFor opens the table of a question; of a study it takes the outcome.
func (i *inspection) openFor(q *question) (*table.Source, error) {
	path := q.path
	if isStudy(q.path) {
		if q.outcome != "" {
			_, err := q.openStudy()
			return nil, err
		}
		s, err := q.readStudy()
		if err != nil {
			return nil, err
		}
		path, q.outcome, i.outcome = s.TablePath(), s.Outcome.Column, &s.Outcome
	} else if len(q.sets) > 0 {
		if err := q.check(); err != nil {
			return nil, err
		}
	}
	source, err := table.Open(path)
	if err != nil {
		return nil, wrong(err, "")
	}
	return source, checkOutcome(source, q.outcome)
}

// draft finds what a draft would say. Of a table it also takes the kind of
// outcome.
func (i *inspection) draft() {
	facts := factsOf(i.summary)
	facts.Path = i.path
	if i.outcome != nil {
		facts.Kind = &i.outcome.Kind
	}
	var err error
	if i.flags, err = facts.Flags(); err != nil {
		i.refuse(err)
		return
	}
	if i.outcome != nil {
		return
	}
	_, drafted, err := study.Draft(facts)
	if err != nil {
		i.refuse(err)
		return
	}
	i.outcome = &drafted.Outcome
}

// tryStudy does what a run does before its first fit.
func (i *inspection) tryStudy(ctx context.Context, q question) error {
	a, err := q.open(ctx)
	if err != nil {
		return i.found(ctx, err)
	}
	i.outcome = &a.study.Outcome
	l, err := a.load(ctx, 0)
	if err != nil {
		return i.found(ctx, err)
	}
	s, err := l.settle()
	if err != nil {
		return i.found(ctx, err)
	}
	if _, err := s.ready(ctx); err != nil {
		return i.found(ctx, err)
	}
	i.decision = inWords(s.decision)
	return nil
}

// found takes an error of the table or the study as a finding; one of the
// machine stays an error.
func (i *inspection) found(ctx context.Context, err error) error {
	if exitCode(ctx, err) != exitWrong {
		return err
	}
	i.refuse(err)
	return nil
}

func (i *inspection) refuse(err error) { i.refusals = append(i.refusals, err.Error()) }

// compare finds copies and columns that are nearly the same.
func (p *program) compare(ctx context.Context, source *table.Source, i *inspection) error {
	names := comparable(i.summary)
	if len(names) < 2 {
		return nil
	}
	data, err := source.Load(ctx, table.Request{Candidates: names, Missing: table.FillMean})
	if err != nil {
		return wrong(err, "holdfast inspect --quick does not compare columns")
	}
	all := make([]int32, len(data.Candidates))
	for j := range all {
		all[j] = int32(j)
	}
	found, err := solver.Examine(ctx, data.X, all)
	if err != nil {
		return wrong(err, "")
	}
	out := map[int32]bool{}
	for _, j := range found.Constant {
		out[j] = true
	}
	for _, c := range found.Copies {
		out[c.Col] = true
		i.copies = append(i.copies, likeness{data.Candidates[c.Col], data.Candidates[c.Of], 1})
	}
	var rest []int32
	for _, j := range all {
		if !out[j] {
			rest = append(rest, j)
		}
	}
	p.tellPairs(len(rest), data.TableRows)
	i.near, err = nearlySame(ctx, data, rest)
	return err
}

// comparable names the columns that can be compared: numeric, not constant,
// without infinite values, not the outcome.
func comparable(s *table.Summary) []string {
	var names []string
	for _, c := range s.Columns {
		if c.Usable && c.Distinct > 1 && c.Infinite == 0 && c.Name != s.Outcome {
			names = append(names, c.Name)
		}
	}
	return names
}
