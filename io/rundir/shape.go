package rundir

// shape is what the identity says about the form of a draw.
type shape struct {
	candidates int
	terms      []int32 // of each candidate; nil: one each
	always     int     // design columns in every model
	classes    int     // coefficients of a design column at a step
	intercepts int     // at a step
}

// shape follows from the identity. It takes a look at every candidate where
// there are groups or categories.
func (id *Identity) shape() *shape {
	s := &shape{candidates: len(id.Candidates), always: len(id.Always), classes: max(1, len(id.Classes))}
	s.intercepts = s.classes
	if id.Kind == kindSurvival {
		s.intercepts = 0
	}
	if len(id.Terms) == 0 {
		return s
	}
	s.always = len(id.AlwaysColumns())
	several := false
	terms := make([]int32, s.candidates)
	for i, name := range id.Candidates {
		terms[i] = int32(max(1, len(id.Terms[name])))
		several = several || terms[i] > 1
	}
	if several {
		s.terms = terms
	}
	return s
}

// termsOf is the number of a candidate's terms.
func (s *shape) termsOf(candidate int32) int32 {
	if s.terms == nil {
		return 1
	}
	return s.terms[candidate]
}

// signed reports whether a candidate has one coefficient, and with it a sign.
func (s *shape) signed(candidate int32) bool {
	return s.classes == 1 && s.termsOf(candidate) == 1
}
