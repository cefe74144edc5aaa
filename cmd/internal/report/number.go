package report

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"onebarrier/diagnostics"
)

// plain writes a number with so many decimals and a true minus sign; unknown
// numbers are a dash.
func plain(x diagnostics.Real, decimals int) string {
	if !x.Known() {
		return unknown
	}
	return minus(strconv.FormatFloat(float64(x), 'f', decimals, 64))
}

// signed is plain with a sign in front of positive numbers too.
func signed(x diagnostics.Real, decimals int) string {
	s := plain(x, decimals)
	if x.Known() && x > 0 && strings.Trim(s, "0.") != "" {
		s = "+" + s
	}
	return s
}

// minus sets U+2212 for the hyphen of a number, and drops it from a zero.
func minus(s string) string {
	if strings.HasPrefix(s, "-") && strings.Trim(s, "-0.") == "" {
		return s[1:]
	}
	return strings.ReplaceAll(s, "-", "−")
}

// significant writes a number with so many significant digits.
func significant(x diagnostics.Real, digits int) string {
	if !x.Known() {
		return unknown
	}
	f := float64(x)
	if f == 0 {
		return "0"
	}
	if e := int(math.Floor(math.Log10(math.Abs(f)))); e < -4 || e > 6 {
		s := strconv.FormatFloat(f, 'e', digits-1, 64)
		mantissa, exp, _ := strings.Cut(s, "e")
		n, _ := strconv.Atoi(exp)
		return minus(mantissa) + "×10" + superscript(n)
	}
	return minus(strconv.FormatFloat(f, 'f', max(0, decimalsFor(f, digits)), 64))
}

// decimalsFor is the number of decimals that shows so many significant digits.
func decimalsFor(x float64, digits int) int {
	if x == 0 || math.IsNaN(x) || math.IsInf(x, 0) {
		return 0
	}
	return digits - 1 - int(math.Floor(math.Log10(math.Abs(x))))
}

func superscript(n int) string {
	const digits = "⁰¹²³⁴⁵⁶⁷⁸⁹"
	var b strings.Builder
	for _, c := range strconv.Itoa(n) {
		if c == '-' {
			b.WriteRune('⁻')
		} else {
			b.WriteRune([]rune(digits)[c-'0'])
		}
	}
	return b.String()
}

// probability writes a p-value with two digits.
func probability(p diagnostics.Real) string {
	if p.Known() && p >= 0.995 {
		return "1"
	}
	if p < 1e-300 { // near the end of the range of doubles
		return "< 10" + superscript(-300)
	}
	return significant(p, 2)
}

// pIs writes "p = " and a p-value, or the bound that it is.
func pIs(p diagnostics.Real, floor bool) string {
	s := probability(p)
	switch {
	case floor:
		return "p ≤ " + s
	case strings.HasPrefix(s, "<"):
		return "p " + s
	}
	return "p = " + s
}

// percent writes a share; a share that rounds to nothing is not called 0.
func percent(x diagnostics.Real) string {
	switch {
	case !x.Known():
		return unknown
	case x > 0 && x < 0.005:
		return "< 1 %"
	}
	return fmt.Sprintf("%.0f %%", 100*float64(x))
}

// interval writes both limits with so many decimals, and says where an end is open.
func interval(e diagnostics.Estimate, decimals int) string {
	lower, upper := signed(e.Lower, decimals), signed(e.Upper, decimals)
	if e.Open != nil {
		if *e.Open == "lower" || *e.Open == "both" {
			lower = "open"
		}
		if *e.Open == "upper" || *e.Open == "both" {
			upper = "open"
		}
	}
	return lower + " to " + upper
}

// decimalsOf is the number of decimals that shows an estimate to two digits of
// its standard uncertainty, or to three digits where that is unknown; at most six,
// beyond which lies the rounding of computed data.
func decimalsOf(e diagnostics.Estimate) int {
	if e.StdError.Known() && e.StdError > 0 {
		return min(max(0, decimalsFor(float64(e.StdError), 2)), 6)
	}
	if w := float64(e.Upper - e.Lower); w > 0 && !math.IsInf(w, 0) {
		return min(max(0, decimalsFor(w, 2)), 6)
	}
	return min(max(0, decimalsFor(float64(e.Value), 3)), 6)
}
