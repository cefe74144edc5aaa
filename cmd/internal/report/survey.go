package report

import (
	"strconv"
	"strings"

	"onebarrier/diagnostics"
)

// What the text of a survey shares with that of an assessment.

// Unknown stands for a number that is not known.
const Unknown = unknown

// Columns is the width of the page.
func (t Text) Columns() int { return t.width() }

// Dim and Bold set a text less and more strongly.
func (t Text) Dim(s string) string  { return t.dim(s) }
func (t Text) Bold(s string) string { return t.bold(s) }

// Pad and PadLeft fill s with spaces on the right and left up to n columns.
func Pad(s string, n int) string     { return pad(s, n) }
func PadLeft(s string, n int) string { return padLeft(s, n) }

// Shorten cuts a name in its middle: names of one archive differ at both ends.
func Shorten(s string, most int) string {
	r := []rune(s)
	if len(r) <= most {
		return s
	}
	head := most / 2
	return string(r[:head]) + "…" + string(r[len(r)-(most-head-1):])
}

// Count writes "1 point", "2 points".
func Count(n int, thing string) string { return count(n, thing) }

// Signed writes x with so many decimals and its sign, a dash where it is unknown.
func Signed(x float64, decimals int) string { return signed(diagnostics.Real(x), decimals) }

// Fixed writes x with so many decimals.
func Fixed(x float64, decimals int) string { return plain(diagnostics.Real(x), decimals) }

// OneDigit writes x with its sign as one digit and a power of ten.
func OneDigit(x float64) string {
	s := strconv.FormatFloat(x, 'e', 0, 64)
	mantissa, exp, ok := strings.Cut(s, "e")
	n, err := strconv.Atoi(exp)
	if !ok || err != nil {
		return unknown
	}
	if x > 0 {
		mantissa = "+" + mantissa
	}
	return minus(mantissa) + "×10" + superscript(n)
}

// Probability writes a p-value with two digits.
func Probability(p float64) string { return probability(diagnostics.Real(p)) }

// Percent writes a share.
func Percent(share float64) string { return percent(diagnostics.Real(share)) }

// DecimalsFor is the number of decimals that shows so many significant digits of x.
func DecimalsFor(x float64, digits int) int { return decimalsFor(x, digits) }
