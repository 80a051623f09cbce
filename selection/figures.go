package selection

import (
	"math"
	"strconv"
)

// Figure writes a number with so many significant digits, without an exponent
// where it can be read at a glance.
func Figure(v float64, digits int) string {
	rounded, _ := strconv.ParseFloat(strconv.FormatFloat(v, 'e', digits-1, 64), 64) // reads back what it wrote
	if a := math.Abs(rounded); a >= 10 && a < 1e7 && math.Log10(a) >= float64(digits) {
		return strconv.FormatFloat(rounded, 'f', 0, 64)
	}
	return strconv.FormatFloat(rounded, 'g', digits, 64)
}

// boundDigits is the number of digits in which a bound is shown.
const boundDigits = 3

// AtMost writes a bound with three significant digits, never below the bound
// itself; what is within 1e-9 of a shorter number is that number.
func AtMost(v float64) string {
	if v <= 0 || math.IsInf(v, 0) || math.IsNaN(v) {
		return Figure(v, boundDigits)
	}
	rounded, _ := strconv.ParseFloat(strconv.FormatFloat(v, 'e', boundDigits-1, 64), 64) // reads back what it wrote
	if !within(v, rounded) {
		rounded += math.Pow(10, math.Floor(math.Log10(v))-boundDigits+1)
	}
	return Figure(rounded, boundDigits)
}

// AtLeast writes a number that stays allowed if it is typed again, such as the
// largest selected: four digits, never above the number.
func AtLeast(v float64) string { return Figure(roundDown(v*(1+snap)), advised) }
