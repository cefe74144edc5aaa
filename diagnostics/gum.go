package diagnostics

import (
	"math"
	"strconv"
	"strings"
)

// unknownText stands for what is not known; it is never 0 and never blank.
const unknownText = "–"

// mostDigits is the number of significant digits beyond which GUM does not go:
// more would be rounding of the computation.
const mostDigits = 14

// GUM writes a value with its standard uncertainty u in brackets, such as
// 52.34(18) or 3.82(18)×10^13 (GUM:2008, 7.2.2): u has two significant digits
// (7.2.6) and the value ends where u ends. The number in brackets counts units of
// the last digit; where u reaches the unit before the point, the point is written:
// 12.3(1.4).
//
// Powers of ten are used below 10^-3, from 10^6 on, and where u exceeds 99, whose
// two digits would have to be followed by zeros that mean nothing. A u below the
// fourteenth digit of the value is written (0); an unknown u (NaN) leaves four
// digits of the value and (–); an unknown value is –.
func GUM(value, u float64) string {
	switch {
	case math.IsNaN(value) || math.IsInf(value, 0):
		return unknownText
	case math.IsNaN(u) || math.IsInf(u, 0) || u < 0:
		return significant(value, 4, "("+unknownText+")")
	}
	if u < math.Abs(value)*math.Pow(10, 1-mostDigits) || u == 0 {
		return significant(value, mostDigits, "(0)")
	}
	uDigits, uExp := split(u, 2)
	last := uExp - 1 // the power of ten of the last digit
	vExp := uExp
	if value != 0 {
		// A value that rounds to no digit at all counts as being as small as u.
		if _, e := split(value, max(1, exponent(value)-last+1)); e > vExp {
			vExp = e
		}
	}
	exp := 0
	if vExp < -3 || vExp >= 6 || last > 0 {
		exp = vExp
	}
	return join(fixed(value, exp, exp-last)+bracket(uDigits, u, uExp-exp, exp, exp-last), exp)
}

// bracket writes u, whose exponent in the mantissa shown is rel.
func bracket(digits string, u float64, rel, exp, decimals int) string {
	if rel >= 0 && decimals > 0 {
		return "(" + fixed(u, exp, decimals) + ")"
	}
	return "(" + digits + ")"
}

// significant writes a value with so many significant digits, then a suffix, then
// the power of ten if it needs one.
func significant(value float64, digits int, suffix string) string {
	if value == 0 {
		return "0" + suffix
	}
	_, e := split(value, digits)
	exp := 0
	if e < -3 || e >= 6 || e >= digits {
		exp = e
	}
	return join(fixed(value, exp, max(0, digits-1-e+exp))+suffix, exp)
}

// split rounds |x| to so many significant digits and returns them with the
// exponent of the first: 0.0996 to two digits is "10" with exponent -1.
func split(x float64, digits int) (string, int) {
	mantissa, e, _ := strings.Cut(strconv.FormatFloat(math.Abs(x), 'e', digits-1, 64), "e")
	exp, _ := strconv.Atoi(e)
	return strings.Replace(mantissa, ".", "", 1), exp
}

func exponent(x float64) int {
	_, e := split(x, 17)
	return e
}

// fixed writes x/10^exp with so many decimals, correctly rounded in decimal and
// with a true minus sign. exp - decimals is the power of ten of the last digit.
func fixed(x float64, exp, decimals int) string {
	s := strconv.FormatFloat(x, 'f', max(0, decimals-exp), 64)
	if exp != 0 {
		s = strconv.FormatFloat(x/math.Pow(10, float64(exp)), 'f', decimals, 64)
	}
	negative := strings.HasPrefix(s, "-")
	s = strings.TrimPrefix(s, "-")
	if negative && strings.Trim(s, "0.") != "" {
		return "−" + s
	}
	return s
}

func join(mantissa string, exp int) string {
	if exp == 0 {
		return mantissa
	}
	return mantissa + "×10^" + strconv.Itoa(exp)
}
