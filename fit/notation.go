package fit

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// Notation writes a value and its standard error as the trade does: 12.34(5)
// is 12.34 ± 0.05, the digits in brackets count in units of the last digit
// shown. The error keeps one digit, or two where its first is 1 (common
// practice). Large and small numbers, and errors of ten or more, get an
// exponent: 1.23(6)e4.
//
// An error of 0 gives the value alone with up to ten digits; an infinite one
// "12.34(inf)", NaN "12.34(-)", both with four digits of the value.
func Notation(value, err float64) string {
	switch {
	case math.IsNaN(value) || math.IsInf(value, 0):
		return strconv.FormatFloat(value, 'g', -1, 64)
	case err == 0:
		return strconv.FormatFloat(value, 'g', 10, 64)
	case math.IsInf(err, 0):
		return strconv.FormatFloat(value, 'g', 4, 64) + "(inf)"
	case math.IsNaN(err):
		return strconv.FormatFloat(value, 'g', 4, 64) + "(-)"
	}
	digits, last := roundError(math.Abs(err))
	exponent := decade(value)
	// A value that rounds to the next power of ten gains a digit.
	if value != 0 {
		exponent = max(decade(roundAt(value, last)), exponent)
	}
	if value == 0 || exponent < last+len(digits)-1 {
		exponent = last + len(digits) - 1
	}
	if exponent >= -3 && last <= 0 && exponent < 6 {
		return fixed(value, -last) + "(" + digits + ")"
	}
	mantissa, decimals := shift(value, -exponent), exponent-last
	return fmt.Sprintf("%s(%s)e%d", fixed(mantissa, decimals), digits, exponent)
}

// roundError rounds a positive error to its one or two digits and tells the
// power of ten of the last.
func roundError(err float64) (digits string, last int) {
	text := strconv.FormatFloat(err, 'e', 0, 64) // "d e±xx"
	if two := strconv.FormatFloat(err, 'e', 1, 64); two[0] == '1' {
		text = two
	} else if text[0] == '1' { // 0.96 rounds to 1.0
		text = "1.0" + text[1:]
	}
	mantissa, exponent, _ := strings.Cut(text, "e")
	last, _ = strconv.Atoi(exponent)
	whole, fraction, _ := strings.Cut(mantissa, ".")
	return whole + fraction, last - len(fraction)
}

// decade is the power of ten of the first digit of v, 0 for 0.
func decade(v float64) int {
	if v == 0 {
		return 0
	}
	_, exponent, _ := strings.Cut(strconv.FormatFloat(v, 'e', -1, 64), "e")
	d, _ := strconv.Atoi(exponent)
	return d
}

// roundAt rounds v to a multiple of 10^last.
func roundAt(v float64, last int) float64 {
	return shift(math.Round(shift(v, -last)), last)
}

// shift multiplies by a power of ten without the rounding of a product.
func shift(v float64, power int) float64 {
	mantissa, exponent, _ := strings.Cut(strconv.FormatFloat(v, 'e', -1, 64), "e")
	e, _ := strconv.Atoi(exponent)
	shifted, _ := strconv.ParseFloat(fmt.Sprintf("%se%d", mantissa, e+power), 64)
	return shifted
}

// fixed writes v with that many decimals and no minus before zero.
func fixed(v float64, decimals int) string {
	text := strconv.FormatFloat(v, 'f', max(decimals, 0), 64)
	if strings.Trim(text, "-0.") == "" {
		text = strings.TrimPrefix(text, "-")
	}
	return text
}
