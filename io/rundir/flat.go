package rundir

import "holdfast/solver"

// flat holds a block column by column, as it stands in the file.
type flat struct {
	draw, first, last          []int32
	stop, why                  []string
	violation, gap             []float64
	borderline, twins, redraws []int32

	entries                   []int // list lengths
	entryStep, entryPredictor []int32
	entryNegative             []bool

	coefs                   []int
	coefStep, coefPredictor []int32
	coefTerm, coefClass     []int32 // nil where the run has no such column
	coefValue               []float64

	intercepts []int
	intercept  []float64
	alwayses   []int
	always     []float64

	nullDeviance []float64
	deviances    []int
	deviance     []float64

	stills []int
	still  []int32
}

// flatten lays a block out in columns.
func (s *shape) flatten(block []numbered) *flat {
	f := &flat{}
	for i := range block {
		p := &block[i].path
		f.draw = append(f.draw, int32(block[i].number))
		f.first = append(f.first, int32(p.First))
		f.last = append(f.last, int32(p.Last))
		f.stop = append(f.stop, p.Stop.String())
		f.why = append(f.why, p.Why)
		f.violation = append(f.violation, p.Violation)
		f.gap = append(f.gap, p.Gap)
		f.borderline = append(f.borderline, int32(p.Borderline))
		f.twins = append(f.twins, int32(p.Twins))
		f.redraws = append(f.redraws, int32(p.Redraws))
		f.nullDeviance = append(f.nullDeviance, p.NullDeviance)
		f.addLists(p)
		f.addPlaces(s, p)
	}
	return f
}

// addPlaces adds which term and which class a coefficient is of, as far as the
// run has several.
func (f *flat) addPlaces(s *shape, p *solver.Path) {
	for _, c := range p.Coefs {
		if s.terms != nil {
			f.coefTerm = append(f.coefTerm, c.Term)
		}
		if s.classes > 1 {
			f.coefClass = append(f.coefClass, c.Class)
		}
	}
}

func (f *flat) addLists(p *solver.Path) {
	f.entries = append(f.entries, len(p.Entries))
	for _, e := range p.Entries {
		f.entryStep = append(f.entryStep, e.Step)
		f.entryPredictor = append(f.entryPredictor, e.Candidate)
		f.entryNegative = append(f.entryNegative, e.Negative)
	}
	f.coefs = append(f.coefs, len(p.Coefs))
	for _, c := range p.Coefs {
		f.coefStep = append(f.coefStep, c.Step)
		f.coefPredictor = append(f.coefPredictor, c.Candidate)
		f.coefValue = append(f.coefValue, c.Value)
	}
	f.intercepts = append(f.intercepts, len(p.Intercepts))
	f.intercept = append(f.intercept, p.Intercepts...)
	f.alwayses = append(f.alwayses, len(p.Always))
	f.always = append(f.always, p.Always...)
	f.deviances = append(f.deviances, len(p.Deviance))
	f.deviance = append(f.deviance, p.Deviance...)
	f.stills = append(f.stills, len(p.Still))
	f.still = append(f.still, p.Still...)
}

// gather is the inverse of flatten. Lengths have been checked to agree.
// Empty lists become nil.
func (f *flat) gather() []numbered {
	block := make([]numbered, len(f.draw))
	for i := range block {
		block[i].number = int(f.draw[i])
		block[i].path = solver.Path{
			First: int(f.first[i]), Last: int(f.last[i]),
			Stop: stopOf(f.stop[i]), Why: f.why[i],
			Violation: f.violation[i], Gap: f.gap[i],
			Borderline: int(f.borderline[i]), Twins: int(f.twins[i]), Redraws: int(f.redraws[i]),
			Entries:      f.takeEntries(f.entries[i]),
			Coefs:        f.takeCoefs(f.coefs[i]),
			Intercepts:   take(&f.intercept, f.intercepts[i]),
			Always:       take(&f.always, f.alwayses[i]),
			NullDeviance: f.nullDeviance[i],
			Deviance:     take(&f.deviance, f.deviances[i]),
			Still:        take(&f.still, f.stills[i]),
		}
	}
	return block
}

// take cuts the first n values off a column.
func take[T any](column *[]T, n int) []T {
	if n == 0 {
		return nil
	}
	head := (*column)[:n:n]
	*column = (*column)[n:]
	return head
}

func (f *flat) takeEntries(n int) []solver.Entry {
	if n == 0 {
		return nil
	}
	list := make([]solver.Entry, n)
	step, predictor, negative := take(&f.entryStep, n), take(&f.entryPredictor, n), take(&f.entryNegative, n)
	for i := range list {
		list[i] = solver.Entry{Candidate: predictor[i], Step: step[i], Negative: negative[i]}
	}
	return list
}

func (f *flat) takeCoefs(n int) []solver.Coef {
	if n == 0 {
		return nil
	}
	list := make([]solver.Coef, n)
	step, predictor, value := take(&f.coefStep, n), take(&f.coefPredictor, n), take(&f.coefValue, n)
	for i := range list {
		list[i] = solver.Coef{Step: step[i], Candidate: predictor[i], Value: value[i]}
	}
	if f.coefTerm != nil {
		for i, t := range take(&f.coefTerm, n) {
			list[i].Term = t
		}
	}
	if f.coefClass != nil {
		for i, c := range take(&f.coefClass, n) {
			list[i].Class = c
		}
	}
	return list
}
