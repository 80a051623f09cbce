package solver

// core solves the working set's problem at one lambda, and makes records of it.
// There are two: exact for a numeric outcome on single columns, whose problem
// is quadratic, and curved for everything else. What is outside the working
// set, when a step is accepted and how far to look ahead is the fitting's
// business, the same for both.
type core interface {
	// begin fits the intercept and the always-in columns of a draw, and leaves
	// the record in fitting.rec.
	begin() error
	// solve moves to the optimum of the working set at lambda, from wherever it
	// stands. Its numbers are screening numbers.
	solve(lambda float64) error
	// support lists what is not zero there.
	support() []choice
	// score overwrites u with the score vectors there, lane after lane.
	score(u []float64)
	// know notes the gradients of the working set's candidates there.
	know()
	// save notes the solution as the place to go back to, keep a record; back
	// goes there.
	save()
	keep(r *record)
	back(lambda float64)
	// finish makes the record on a support: record numbers.
	finish(support []choice, lambda float64) (*record, error)
	// weak lists what does not belong in a record's support.
	weak(r *record) []choice
	// share returns the record with what is at the border taken in, where the
	// optimum is not unique; nil where r is the only one.
	share(r *record, near []choice) (*record, error)
	// values lists the coefficients of a record's candidates that are not zero,
	// on the original scale, by unit, term and class.
	values(r *record) []Coef
	// always returns the always-in coefficients likewise, per column one for each
	// class; columns that were redundant in the draw have 0.
	always(r *record) []float64
	// level returns the intercepts at the means of the draw's columns, one for each
	// class; none for Cox. nullLevel is that of the fit of the intercept alone.
	level(r *record) []float64
	nullLevel() []float64
	// loss returns the mean loss of a record.
	loss(r *record) float64
}

// choice is a part of a support: a unit's first place in the working set, for
// one lane, and the sign of a single column there.
type choice struct {
	place int
	lane  int
	sign  float64
}

// same reports whether two choices are of the same place and lane.
func (c choice) same(d choice) bool { return c.place == d.place && c.lane == d.lane }

// holds reports whether a support has the place and lane of a choice.
func holds(support []choice, c choice) bool {
	for _, d := range support {
		if d.same(c) {
			return true
		}
	}
	return false
}
