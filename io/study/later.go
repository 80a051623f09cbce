package study

// later is one key, or value of a key, that the program reads and checks but
// does not yet act on. Removing a line opens it.
var later = []struct {
	key string
	is  func(*Study) bool
	why string
}{
	{"outcome.kind", func(s *Study) bool { return s.Outcome.Kind == YesNo }, `a yes-no outcome cannot be fitted by this version; "number" takes 0 and 1 as numbers`},
	{"outcome.kind", func(s *Study) bool { return s.Outcome.Kind == Count }, `counts cannot be fitted by this version; "number" takes them as numbers`},
	{"outcome.kind", func(s *Study) bool { return s.Outcome.Kind == Classes }, `classes cannot be fitted by this version, only "number"`},
	{"outcome.kind", func(s *Study) bool { return s.Outcome.Kind == Survival }, `survival times cannot be fitted by this version, only "number"`},
	{"outcome.offset", func(s *Study) bool { return s.Outcome.Offset != "" }, "offsets are not supported by this version: leave the line out"},
	{"outcome.case_weight", func(s *Study) bool { return s.Outcome.CaseWeight != "" }, "case weights of a study are not supported by this version: leave the line out"},
	{"table.missing", func(s *Study) bool { return s.Table.Missing == OwnLevel }, `categories are not supported by this version, and numbers have no level of their own: write "refuse", "drop-rows" or "fill-mean"`},
	{"candidates.categories", func(s *Study) bool { return len(s.Candidates.Categories) > 0 }, "categories are not supported by this version: leave the line out"},
	{"candidates.reference", func(s *Study) bool { return len(s.Candidates.Reference) > 0 }, "categories are not supported by this version: leave the section out"},
	{"candidates.groups", func(s *Study) bool { return len(s.Candidates.Groups) > 0 }, "groups of columns are not supported by this version: leave the section out"},
	{"penalty.jitter", func(s *Study) bool { return s.Penalty.Jitter != 1 }, "randomised penalties are not supported by this version: write 1.0"},
	{"draws.together", func(s *Study) bool { return len(s.Draws.Together) > 0 }, "rows cannot be kept together by this version, and rows that belong together would void the bound: leave the line out only if they are independent"},
	{"draws.within", func(s *Study) bool {
		return len(s.Draws.Within) > 0 && len(defaultWithin(s.Outcome.Kind)) == 0
	}, "draws cannot be balanced by this version: leave the line out"},
}

// Refusals lists what a study asks that this version does not do, one
// sentence each, in the order of the file's sections. Nil: all can be done.
func (s *Study) Refusals() Problems {
	f := faults{file: s.Source, places: s.places}
	for _, l := range later {
		if l.is(s) {
			f.at(s.placeUnder(l.key), l.key, s.shown(l.key), "%s", l.why)
		}
	}
	return f.found
}

// CheckReady returns Refusals as an error, nil where there are none.
func (s *Study) CheckReady() error {
	if refused := s.Refusals(); len(refused) > 0 {
		return refused
	}
	return nil
}

// placeUnder is where a key was given; of a section, its first name.
func (s *Study) placeUnder(name string) place {
	if at, ok := s.places[name]; ok {
		return at
	}
	first := place{}
	for key, at := range s.places {
		if len(key) > len(name) && key[:len(name)+1] == name+"." && (first == place{} || at.line < first.line) {
			first = at
		}
	}
	return first
}

// shown is the value of a key as it would be written; empty for a section.
func (s *Study) shown(name string) string {
	for _, sec := range sections {
		for _, k := range sec.keys {
			if sec.name+"."+k.name == name && k.field != nil {
				text, _ := k.field.toml(s)
				return text
			}
		}
	}
	return ""
}
