package resample

import (
	"fmt"
	"runtime/debug"
)

// PanicError is a panic of a fitter or a sink, made an error so that what
// is whole is kept and the message names the draws. Users see its text; the
// stack is for a log.
type PanicError struct {
	Value any
	Stack []byte
}

func (e *PanicError) Error() string {
	return fmt.Sprintf("a defect of the program: %v", e.Value)
}

// guard runs f and turns a panic into a *PanicError.
func guard(f func() error) (err error) {
	defer func() {
		if v := recover(); v != nil {
			err = &PanicError{Value: v, Stack: debug.Stack()}
		}
	}()
	return f()
}
