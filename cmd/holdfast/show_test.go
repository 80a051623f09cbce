package main

import "testing"

// The first variable that is set decides; C and POSIX are ASCII.
func TestUnicodeLocale(t *testing.T) {
	for _, c := range []struct {
		all, ctype, lang string
		want             bool
	}{
		{"", "", "", true}, {"", "", "en_US.UTF-8", true}, {"C", "", "en_US.UTF-8", false}, {"", "de_DE.utf8", "C", true},
		{"", "", "POSIX", false}, {"", "", "de_DE.ISO-8859-1", false}, {"C.UTF-8", "C", "C", true},
	} {
		t.Setenv("LC_ALL", c.all)
		t.Setenv("LC_CTYPE", c.ctype)
		t.Setenv("LANG", c.lang)
		if got := unicodeLocale(); got != c.want {
			t.Errorf("%+v: %v", c, got)
		}
	}
}

// Names reach a terminal without what would command it, and a file as they
// are.
func TestVisible(t *testing.T) {
	for text, want := range map[string]string{"ph": "ph", "a\x1b[31mb": `a\u001b[31mb`, "a\nb": `a\u000ab`, "\u202ex": `\u202ex`, "  水 ": "  水 "} {
		if got := visible(text); got != want {
			t.Errorf("%q is shown as %q, not %q", text, got, want)
		}
	}
}
