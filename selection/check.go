package selection

import (
	"fmt"
	"math"
	"slices"
)

// DrawError is a draw that cannot be judged.
type DrawError struct {
	Draw int
	Why  string
}

// Error implements error.
func (e *DrawError) Error() string { return fmt.Sprintf("selection: draw %d: %s", e.Draw, e.Why) }

// checker looks through draws before they are counted: they come from files.
type checker struct {
	predictors Predictors
	seen       []int32 // per predictor: 1 + position of the last draw that it entered
}

// ordered returns the draws by number, each once and in whole pairs.
func ordered(draws []Draw, bootstrap bool) ([]*Draw, error) {
	byNumber := make([]*Draw, len(draws))
	for i := range draws {
		byNumber[i] = &draws[i]
	}
	slices.SortStableFunc(byNumber, func(a, b *Draw) int { return a.Number - b.Number })
	for i, d := range byNumber {
		switch {
		case d.Number < 0:
			return nil, &DrawError{d.Number, "numbers start at 0"}
		case i > 0 && byNumber[i-1].Number == d.Number:
			return nil, &DrawError{d.Number, "is there twice"}
		case !bootstrap && !paired(byNumber, i):
			return nil, &DrawError{d.Number, fmt.Sprintf("its other half, draw %d, is missing; a pair counts as a whole", d.Number^1)}
		}
	}
	return byNumber, nil
}

// paired tells whether the other half of draw i stands beside it.
func paired(draws []*Draw, i int) bool {
	mate := i ^ 1
	return mate < len(draws) && draws[mate].Number == draws[i].Number^1
}

// check looks through the draw at position i.
func (c *checker) check(i int, d *Draw) error {
	if fault := c.fault(int32(i)+1, d); fault != "" {
		return &DrawError{d.Number, fault}
	}
	return nil
}

func (c *checker) fault(stamp int32, d *Draw) string {
	if d.Last < d.First && (len(d.Entries) > 0 || len(d.Coefs) > 0) {
		return "it has entries or coefficients but no step"
	}
	steps := max(0, d.Last-d.First+1)
	if want := len(c.predictors.Always) * c.predictors.classes() * steps; len(d.Always) != want {
		return fmt.Sprintf("it has %d always-in coefficients, not %d", len(d.Always), want)
	}
	if d.Deviance != nil && len(d.Deviance) != steps {
		return fmt.Sprintf("it has %d deviances for %d steps", len(d.Deviance), steps)
	}
	if d.Redraws < 0 {
		return fmt.Sprintf("it was made anew %d times", d.Redraws)
	}
	if fault := c.entryFault(stamp, d); fault != "" {
		return fault
	}
	if fault := c.coefFault(d); fault != "" {
		return fault
	}
	return c.stillFault(d)
}

// knows tells whether there is a predictor k.
func (c *checker) knows(k int32) bool { return k >= 0 && int(k) < len(c.seen) }

func (c *checker) entryFault(stamp int32, d *Draw) string {
	for i, e := range d.Entries {
		switch {
		case !c.knows(e.Predictor):
			return fmt.Sprintf("entry %d names predictor %d of %d", i, e.Predictor, len(c.seen))
		case int(e.Step) < d.First || int(e.Step) > d.Last:
			return fmt.Sprintf("entry %d is at step %d, outside %d..%d", i, e.Step, d.First, d.Last)
		case i > 0 && !before(d.Entries[i-1].Step, d.Entries[i-1].Predictor, e.Step, e.Predictor):
			return fmt.Sprintf("entry %d is out of order", i)
		case c.seen[e.Predictor] == stamp:
			return fmt.Sprintf("predictor %d enters twice", e.Predictor)
		}
		c.seen[e.Predictor] = stamp
	}
	return ""
}

func (c *checker) coefFault(d *Draw) string {
	for i, v := range d.Coefs {
		switch {
		case !c.knows(v.Predictor):
			return fmt.Sprintf("coefficient %d names predictor %d of %d", i, v.Predictor, len(c.seen))
		case v.Term < 0 || int(v.Term) >= c.predictors.termsOf(int(v.Predictor)):
			return fmt.Sprintf("coefficient %d names term %d of %d", i, v.Term, c.predictors.termsOf(int(v.Predictor)))
		case v.Class < 0 || int(v.Class) >= c.predictors.classes():
			return fmt.Sprintf("coefficient %d names class %d of %d", i, v.Class, c.predictors.classes())
		case int(v.Step) < d.First || int(v.Step) > d.Last:
			return fmt.Sprintf("coefficient %d is at step %d, outside %d..%d", i, v.Step, d.First, d.Last)
		case i > 0 && !d.Coefs[i-1].before(v):
			return fmt.Sprintf("coefficient %d is out of order", i)
		case math.IsNaN(v.Value) || math.IsInf(v.Value, 0):
			return fmt.Sprintf("coefficient %d is not finite", i)
		}
	}
	for i, v := range d.Always {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return fmt.Sprintf("always-in coefficient %d is not finite", i)
		}
	}
	return ""
}

func (c *checker) stillFault(d *Draw) string {
	for i, k := range d.Still {
		switch {
		case !c.knows(k):
			return fmt.Sprintf("predictor %d of %d is said not to vary", k, len(c.seen))
		case i > 0 && k <= d.Still[i-1]:
			return "the predictors that do not vary are out of order"
		}
	}
	return ""
}

func before(s1, k1, s2, k2 int32) bool { return s1 < s2 || s1 == s2 && k1 < k2 }
