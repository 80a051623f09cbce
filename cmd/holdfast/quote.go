package main

import "strings"

// shellSafe are the characters that no shell reads as anything but themselves
// within a word.
const shellSafe = "ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789@%+=:,./_-"

// shellCommand writes words so that a POSIX shell reads them back as they are.
func shellCommand(words []string) string {
	quoted := make([]string, len(words))
	for i, w := range words {
		quoted[i] = shellWord(w)
	}
	return strings.Join(quoted, " ")
}

func shellWord(w string) string {
	if w != "" && strings.Trim(w, shellSafe) == "" {
		return w
	}
	return "'" + strings.ReplaceAll(w, "'", `'\''`) + "'"
}
