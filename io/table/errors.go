package table

import (
	"errors"
	"fmt"
	"os"
	"runtime"
	"strconv"
	"strings"
)

// Error says what is wrong with a table, or with what was asked of it: a
// mistake that only the user can put right. Failures of the machine (a disk
// that cannot be read) and cancellations are returned as they are.
type Error struct {
	Path   string // file, folder or glob as given
	Column string // column in question; empty if it is not about one
	Why    string // what is wrong and what to do
	Gaps   []Gaps // predictors with missing, NaN or infinite values, worst first, if they alone are what is wrong
	Rows   int    // with Gaps: rows in use
	Lost   int    // with Gaps: rows that DropRows leaves out
	Err    error  // underlying error, if any
}

// Error implements error.
func (e *Error) Error() string {
	var b strings.Builder
	b.WriteString("table: ")
	if e.Path != "" {
		b.WriteString(e.Path + ": ")
	}
	if e.Column != "" {
		b.WriteString("column " + quote(e.Column) + ": ")
	}
	b.WriteString(e.Why)
	if e.Err != nil {
		if e.Why != "" {
			b.WriteString(": ")
		}
		b.WriteString(e.Err.Error())
	}
	return b.String()
}

// Unwrap returns the underlying error.
func (e *Error) Unwrap() error { return e.Err }

// faultf makes an Error about a whole file.
func faultf(path, format string, args ...any) error {
	return &Error{Path: path, Why: fmt.Sprintf(format, args...)}
}

// columnFaultf makes an Error about one column.
func columnFaultf(path, column, format string, args ...any) error {
	return &Error{Path: path, Column: column, Why: fmt.Sprintf(format, args...)}
}

// openFault turns an error of the file system into one of the table where the
// user can put it right: a wrong name, a folder that may not be read.
func openFault(path string, err error) error {
	switch {
	case errors.Is(err, os.ErrNotExist):
		return &Error{Path: path, Why: "there is no such file"}
	case errors.Is(err, os.ErrPermission):
		return &Error{Path: path, Why: "may not be read: permission denied"}
	}
	return fmt.Errorf("table: %s: %w", path, err)
}

// damaged is what the readers of the binary formats return for content that
// cannot be right. It becomes an Error where the file name is known.
type damaged struct{ why string }

func (d damaged) Error() string { return d.why }

func damagedf(format string, args ...any) error { return damaged{fmt.Sprintf(format, args...)} }

// refusef makes an Error of something that is in order but not read here; its
// file is filled in by inFile.
func refusef(format string, args ...any) error { return &Error{Why: fmt.Sprintf(format, args...)} }

// inFile adds the file name to an error found inside a file. Errors of the
// machine keep their type; everything else is the table's fault.
func inFile(path string, err error) error {
	var e *Error
	var p *os.PathError
	switch {
	case err == nil:
		return nil
	case errors.As(err, &e):
		if e.Path == "" {
			e.Path = path
		}
		return err
	case errors.As(err, &p), isCancel(err):
		return fmt.Errorf("table: %s: %w", path, err)
	}
	return &Error{Path: path, Why: "the file is damaged or not what its name says", Err: err}
}

// guard turns a panic of a library that met damaged bytes into an error.
// Use: defer guard(&err).
func guard(err *error) {
	switch r := recover().(type) {
	case nil:
	case runtime.Error:
		*err = damagedf("its parts do not fit together (%s)", strings.TrimPrefix(firstLine(r.Error()), "runtime error: "))
	default:
		*err = damagedf("%s", strings.TrimSpace(firstLine(fmt.Sprint(r))))
	}
}

func firstLine(s string) string {
	s, _, _ = strings.Cut(s, "\n")
	return s
}

// quote puts a name of the user's data into an error text: quoted, control
// characters escaped, long ones cut.
func quote(s string) string {
	const most = 80
	if len(s) > most {
		return strconv.Quote(s[:most]) + "..."
	}
	return strconv.Quote(s)
}
