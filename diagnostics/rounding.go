package diagnostics

import (
	"fmt"
	"math"
	"strings"

	"onebarrier/models/fit"
)

// Rounding says how the estimates of one fit are printed. Its zero value prints
// intervals only where an end is open or no standard uncertainty is known.
type Rounding struct {
	// Coverage is the number of standard uncertainties in half a symmetric
	// interval: a quantile of Student's t, or of the normal where σ is known.
	Coverage float64
	// Exact says that the fit leaves no scatter: its uncertainties are rounding
	// error, and none is printed.
	Exact bool
}

// RoundingOf is the rounding for the estimates of a curve of the assessment.
func (a *Assessment) RoundingOf(curve string) Rounding {
	if f := a.Fits[curve]; f != nil {
		return roundingOf(f, a.Sample, a.Settings.Confidence)
	}
	return Rounding{}
}

func roundingOf(r *fit.Result, s *fit.Sample, confidence float64) Rounding {
	var out Rounding
	if known := r.Model.KnownSigma(); known || r.Nu > 0 {
		out.Coverage = criticalValue(confidence, r.Nu, known)
		out.Exact = s != nil && !known && noScatter(s, r.RSS)
	}
	return out
}

// exactDigits is the number of digits of a value without scatter: no rate constant
// is measured to more.
const exactDigits = 6

// lopsidedFrom is the part by which an arm of an interval may differ from that of
// a symmetric one before brackets would mislead.
const lopsidedFrom = 0.2

// farApart is the factor between the ends of an interval from which each is printed
// with digits of its own.
const farApart = 10

// Text writes an estimate and its unit: with its standard uncertainty in brackets,
// 52.34(18) kJ/mol, where the interval is close to the symmetric one that brackets
// suggest, else with the interval, 66 kJ/mol (12 to open).
func (r Rounding) Text(e Estimate, unit string) string {
	value, u := float64(e.Value), float64(e.StdError)
	switch {
	case !e.Value.Known():
		return unknownText
	case r.Exact:
		if math.Abs(value) < u { // rounding error itself
			value = 0
		}
		return significant(value, exactDigits, "") + withUnit(unit)
	case !r.lopsided(e):
		return GUM(value, u) + withUnit(unit)
	}
	exp, decimals := places(e)
	lower, upper := ends(e.fit())
	// One power of ten and one number of decimals do not suit ends so far apart.
	apart := lower > 0 && upper > farApart*lower && !math.IsInf(upper, 0)
	show := func(x float64) string {
		lead := exponent(x)
		switch {
		case apart && exp != 0:
			return join(fixed(x, lead, 1), lead)
		case apart && lead <= -decimals:
			return twoDigits(x)
		}
		return join(fixed(x, exp, decimals), exp)
	}
	switch {
	case math.IsInf(lower, 0) && math.IsInf(upper, 0):
		return show(value) + withUnit(unit) + " (both ends open)"
	case math.IsInf(lower, 0):
		return fmt.Sprintf("%s%s (open to %s)", show(value), withUnit(unit), show(upper))
	case math.IsInf(upper, 0):
		return fmt.Sprintf("%s%s (%s to open)", show(value), withUnit(unit), show(lower))
	}
	return fmt.Sprintf("%s%s (%s to %s)", show(value), withUnit(unit), show(lower), show(upper))
}

// lopsided reports whether an interval must be printed in place of brackets.
func (r Rounding) lopsided(e Estimate) bool {
	if e.Open != nil {
		return true
	}
	if !e.Lower.Known() || !e.Upper.Known() {
		return false
	}
	if !e.StdError.Known() {
		return true
	}
	half := r.Coverage * float64(e.StdError)
	far := func(arm Real) bool { return math.Abs(float64(arm)-half) > lopsidedFrom*half }
	return half > 0 && (far(e.Upper-e.Value) || far(e.Value-e.Lower))
}

// places is the power of ten that is taken out of an estimate with an interval, and
// the decimals left: two digits of the wider finite arm, or one of the narrower
// where that would vanish.
func places(e Estimate) (exp, decimals int) {
	value := float64(e.Value)
	wide, narrow := 0.0, math.Inf(1)
	for _, arm := range []Real{e.Upper - e.Value, e.Value - e.Lower} {
		if arm.Known() && arm > 0 {
			wide, narrow = math.Max(wide, float64(arm)), math.Min(narrow, float64(arm))
		}
	}
	if wide == 0 {
		wide = math.Abs(value) / 10
		if e.StdError > 0 && e.StdError.Known() {
			wide = float64(e.StdError)
		}
		narrow = wide
	}
	_, last := split(wide, 2)
	last--
	if _, first := split(narrow, 1); first < last {
		last = first
	}
	if lead := exponent(value); value != 0 && (lead < -3 || lead >= 6) {
		exp = lead
	}
	return exp, max(0, exp-last)
}

// OverUnit writes /unit for a logarithm, with brackets around a product: the
// /s^-1 of ln(A/s^-1).
func OverUnit(unit string) string {
	switch {
	case unit == "" || unit == "1":
		return ""
	case strings.ContainsAny(unit, " /·"):
		return "/(" + unit + ")"
	}
	return "/" + unit
}
