package study

// later is one key, or value of a key, that the program reads and checks but
// does not yet act on. Removing a line opens it.
var later = []struct {
	key string
	is  func(*Study) bool
	why string
}{
	{"table.missing", func(s *Study) bool { return s.Table.Missing == OwnLevel }, `a level of its own for missing values of categories is not supported by this version: write "refuse", "drop-rows" or "fill-mean"`},
	{"draws.together", func(s *Study) bool { return len(s.Draws.Together) > 0 }, "rows cannot be kept together by this version, and rows that belong together would void the bound: leave the line out only if they are independent"},
}

// Refusals lists what a study asks that this version does not do, one
// sentence each, in the order of the file's sections. Nil: all can be done.
func (s *Study) Refusals() Problems {
	f := faults{file: s.Source, places: s.places}
	for _, l := range later {
		if l.is(s) {
			f.value(l.key, s.shown(l.key), "%s", l.why)
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

// shown is the value of a key as it would be written.
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
