package main

import (
	"context"
	"errors"
	"fmt"
	"strings"
	"unicode"
)

// Exit codes, as the help and the README list them.
const (
	exitDone       = 0
	exitFailed     = 1
	exitWrong      = 2
	exitIncomplete = 3
)

// fault is an error that knows its exit code and what the user can do.
type fault struct {
	code int
	err  error
	hint string // "" if the error says it
}

func (f *fault) Error() string { return f.err.Error() }
func (f *fault) Unwrap() error { return f.err }

// misuse is a command that was typed wrongly.
func misuse(text, hint string) error {
	return &fault{exitWrong, errors.New(text), hint}
}

// wrong marks an error of the study or the table. nil stays nil; a fault and
// an interruption stay what they are.
func wrong(err error, hint string) error {
	var f *fault
	if err == nil || errors.As(err, &f) || errors.Is(err, context.Canceled) {
		return err
	}
	return &fault{exitWrong, err, hint}
}

// incomplete says that the work was done but something is missing from it.
func incomplete(text, hint string) error {
	return &fault{exitIncomplete, errors.New(text), hint}
}

// finish maps the error of a command to its exit code and prints a line for
// each thing that is wrong, and a hint on a line of its own. It is the only
// place that does.
func (p *program) finish(ctx context.Context, err error) int {
	if err == nil {
		return exitDone
	}
	hint := ""
	var f *fault
	if errors.As(err, &f) {
		hint = f.hint
	} else if cause := context.Cause(ctx); cause != nil && errors.Is(err, context.Canceled) {
		err = cause // which layer noticed first is of no use to anybody
	}
	for _, line := range strings.Split(strings.TrimSpace(err.Error()), "\n") {
		fmt.Fprintln(p.err, lead(oneLine(line)))
	}
	if hint != "" {
		fmt.Fprintln(p.err, "hint: "+oneLine(hint))
	}
	code := exitCode(ctx, err)
	if s := p.signals.cause(); s != nil && code != exitWrong {
		code = s.code() // it was only asked to begin nothing new
	}
	return code
}

// exitCode is the code of an error: its own, that of the signal that ended
// the context, or that of a failure.
func exitCode(ctx context.Context, err error) int {
	code := exitFailed
	var f *fault
	if errors.As(err, &f) {
		code = f.code
	}
	var s *interrupted
	if errors.As(context.Cause(ctx), &s) && code != exitWrong {
		code = s.code()
	}
	return code
}

// lead puts the program's name before a message that does not have it.
func lead(text string) string {
	if strings.HasPrefix(text, "holdfast") {
		return text
	}
	return "holdfast: " + text
}

// oneLine makes text of a file or a column name safe to show: line ends
// become semicolons, other control characters their escapes.
func oneLine(text string) string {
	var b strings.Builder
	for _, line := range strings.Split(strings.TrimSpace(text), "\n") {
		if b.Len() > 0 {
			b.WriteString("; ")
		}
		b.WriteString(visible(strings.TrimSpace(line)))
	}
	return b.String()
}

// visible is text with the escapes of its control characters, and of the marks
// that turn the writing direction, in their place.
func visible(text string) string {
	var b strings.Builder
	for _, r := range text {
		if unicode.IsControl(r) || unicode.Is(unicode.Bidi_Control, r) {
			fmt.Fprintf(&b, "\\u%04x", r)
			continue
		}
		b.WriteRune(r)
	}
	return b.String()
}
