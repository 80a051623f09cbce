package selection

import (
	"errors"
	"fmt"
	"math"
	"strconv"
)

// ErrNoBound marks the absence of a bound: its side conditions do not hold, or
// the draws are of a kind that has none. Test with errors.Is.
var ErrNoBound = errors.New("no bound")

// ErrNoSolution marks a request that no setting can meet. Test with errors.Is;
// the error is an *ImpossibleError.
var ErrNoSolution = errors.New("no solution")

// ArgumentError is a value that is not allowed.
type ArgumentError struct {
	Name  string // threshold, selected, false_selections, candidates, draws, ...
	Value string // as given
	Why   string // what is allowed
}

// Error implements error.
func (e *ArgumentError) Error() string {
	return "selection: " + e.Name + ": " + e.Value + ": " + e.Why
}

func badNumber(name string, value float64, why string) error {
	return &ArgumentError{Name: name, Value: show(value), Why: why}
}

func badCount(name string, value int, why string) error {
	return &ArgumentError{Name: name, Value: strconv.Itoa(value), Why: why}
}

// ImpossibleError is a request without a solution. It names the number to
// change, and to what.
type ImpossibleError struct {
	Change  string  // threshold, selected or false_selections; empty: the bound or design
	Nearest float64 // the value of Change nearest to what was asked that works; 0 if Change is empty
	What    string  // what is impossible
	Advice  string  // what to do, in words
}

// Error implements error.
func (e *ImpossibleError) Error() string {
	return "selection: " + e.What + ": " + e.Advice
}

// Is reports true for ErrNoSolution.
func (e *ImpossibleError) Is(target error) bool { return target == ErrNoSolution }

// noBound is the absence of a bound with its reason.
type noBound struct{ why string }

func (e *noBound) Error() string        { return "selection: " + e.why }
func (e *noBound) Is(target error) bool { return target == ErrNoBound }

// why returns the reason of an absent bound without the package's name.
func why(err error) string {
	var n *noBound
	if errors.As(err, &n) {
		return n.why
	}
	var i *ImpossibleError
	if errors.As(err, &i) {
		return i.What + ": " + i.Advice
	}
	return err.Error()
}

// show writes a number as short as it can be read back.
func show(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }

// advised is the number of digits in which advice states a number.
const advised = 4

// roundUp returns x to four digits, never below x, so that what an error
// advises can be typed and works.
func roundUp(x float64) float64 { return towards(x, math.Inf(1)) }

// roundDown returns x to four digits, never above x.
func roundDown(x float64) float64 { return towards(x, math.Inf(-1)) }

func towards(x, end float64) float64 {
	r, err := strconv.ParseFloat(strconv.FormatFloat(x, 'g', advised, 64), 64)
	if err != nil || x == 0 || math.IsInf(x, 0) {
		return x
	}
	if (end > 0 && r >= x) || (end < 0 && r <= x) {
		return r
	}
	unit := math.Pow(10, math.Floor(math.Log10(math.Abs(x)))-advised+1)
	if end < 0 {
		unit = -unit
	}
	r, err = strconv.ParseFloat(strconv.FormatFloat(r+unit, 'g', advised, 64), 64)
	if err != nil || (end > 0 && r < x) || (end < 0 && r > x) {
		return x
	}
	return r
}

func quoteAll(names []string, most int) string {
	s := ""
	for i, n := range names {
		if i == most {
			return s + fmt.Sprintf(" and %d more", len(names)-most)
		}
		if i > 0 {
			s += ", "
		}
		s += strconv.Quote(n)
	}
	return s
}
