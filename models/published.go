package models

import (
	"fmt"
	"math"
	"strings"
)

// Writer turns the numbers of a formula into text.
type Writer struct {
	// TMin and TMax are the ends of the measured range and T0 the temperature at which
	// a power of T is stated, in K.
	TMin, TMax, T0 float64
	// Number writes x with so many digits that its rounding moves ln k by no more than
	// a third of what rounding may, where |d ln k/dx| <= slope in the measured range.
	Number func(x, slope float64) string
	// Kelvin writes T0 without a unit.
	Kelvin func(t float64) string
}

// Written is a curve that can be written out with its numbers, so that k can be computed
// from what is printed.
type Written interface {
	Curve
	// Write gives k at T in terms of exp, ln, sin, the signs + − / ^ and brackets. Two
	// factors side by side are a product, which is taken before a quotient: 12 K/T is
	// (12 K)/T. p are canonical parameters.
	Write(w Writer, tRef float64, p []float64) string
}

// PowerLaw is a curve k = A (T/T_0)^n exp(-E/RT), published as A, n and E. Its canonical
// parameters are ln k(T_ref), E where n is fixed or E + nRT_ref where it is not, and n
// where it is not.
type PowerLaw interface {
	Curve
	// Exponent gives n, and whether it is a parameter.
	Exponent(p []float64) (n float64, fitted bool)
}

// Profiled is a curve with parameters whose estimates are far from normal and whose
// intervals are therefore those of the profile likelihood. A Basis is profiled as a whole,
// where errors are additive in k: elsewhere Student's t is exact. A Seeded is always, and
// need not say so.
type Profiled interface {
	Curve
	// Profiled gives the symbols of those parameters of forms, each with the symbol that
	// the same quantity has in the first form, one of ln_A1, E1, ln_A2 and E2. All are
	// linear in the canonical parameters. It is nil for a Basis.
	Profiled() map[string]string
}

// ReadAs is a curve with several forms of which the first is not always the one whose
// parameters mean something.
type ReadAs interface {
	Curve
	// ReadAs gives the place of the form in which parameters p are read and, where it is
	// not the first, what its parameters are.
	ReadAs(p []float64) (form int, meaning string)
}

// signed writes a further term of a sum: " + 2.5" or " − 2.5".
func signed(term string) string {
	if t, negative := strings.CutPrefix(term, "−"); negative {
		return " − " + t
	}
	return " + " + term
}

// vanishes reports whether a number was rounded to 0.
func vanishes(number string) bool { return strings.Trim(number, "0.") == "" }

// line writes lnA - b/T, b in K.
func (w Writer) line(lnA, b float64) string {
	return w.Number(lnA, 1) + w.overT(b)
}

func (w Writer) overT(b float64) string { return signed(w.Number(-b, 1/w.TMin)) + " K/T" }

// power writes n ln(T/T_0) as a further term of a sum; nothing where n is 0. An exponent
// that is fixed is exact.
func (w Writer) power(n float64, fixed bool) string {
	if n == 0 {
		return ""
	}
	var factor string
	if fixed {
		factor = strings.ReplaceAll(fmt.Sprint(n), "-", "−") + " "
		if math.Abs(n) == 1 {
			factor = strings.TrimSuffix(factor, "1 ") // 1 ln x is ln x
		}
	} else {
		far := math.Max(math.Abs(math.Log(w.TMin/w.T0)), math.Abs(math.Log(w.TMax/w.T0)))
		factor = w.Number(n, far) + " "
	}
	return signed(factor + "ln(T/" + w.Kelvin(w.T0) + " K)")
}

// path writes the straight line with ln k(T_ref) = a and E in J/mol.
func (w Writer) path(tRef, a, e float64) string {
	return "exp(" + w.line(a+e*(1/(GasConstant*tRef)), e/GasConstant) + ")"
}

// powerLaw writes ln k = a + n ln(T/T_ref) + E/(R T_ref) - E/(RT), E in J/mol.
func (w Writer) powerLaw(tRef, a, n, e float64, fixed bool) string {
	lnA := a + e*(1/(GasConstant*tRef)) - n*math.Log(tRef/w.T0)
	return "exp(" + w.Number(lnA, 1) + w.power(n, fixed) + w.overT(e/GasConstant) + ")"
}
