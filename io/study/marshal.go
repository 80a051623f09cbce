package study

import (
	"bytes"
	"errors"
	"strings"
)

// Marshal writes the study with every default, a short comment beside each
// key. Parse reads it back as the same study: the same studies give the same
// bytes. It is an error to write a decision that Settle has still to work out,
// since no file can say it.
func (s *Study) Marshal() ([]byte, error) {
	if s.Decision.Replace != nil {
		return nil, errors.New("study: the decision must be settled before the study is written: a replaced number waits for the number of candidates")
	}
	var b bytes.Buffer
	for i, sec := range sections {
		if i > 0 {
			b.WriteByte('\n')
		}
		b.WriteString("[" + sec.name + "]\n")
		s.marshalKeys(&b, sec)
		s.marshalEntries(&b, sec)
	}
	return b.Bytes(), nil
}

func (s *Study) marshalKeys(b *bytes.Buffer, sec section) {
	for _, k := range sec.keys {
		if k.entries != nil {
			continue
		}
		text, given := k.field.toml(s)
		if !given {
			continue
		}
		b.WriteString(k.name + " = " + text)
		if k.about != "" {
			b.WriteString(" # " + k.about)
		}
		b.WriteByte('\n')
	}
}

// marshalEntries writes the sections of the user's own names, which stand
// behind the plain keys of their section: TOML has no way back.
func (s *Study) marshalEntries(b *bytes.Buffer, sec section) {
	for _, k := range sec.keys {
		if k.entries == nil {
			continue
		}
		lines := k.entries.toml(s)
		if len(lines) == 0 {
			continue
		}
		b.WriteString("\n[" + sec.name + "." + k.name + "] # " + k.about + "\n")
		b.WriteString(strings.Join(lines, "\n") + "\n")
	}
}
