package dataset

import (
	"fmt"
	"strconv"
	"strings"
)

// divided says what a stated uncertainty is divided by to become a standard one;
// "" if by nothing. It is divisor in words.
func (h *Heading) divided(p *plan) string {
	decimals := func(x float64) string { return strconv.FormatFloat(x, 'g', 4, 64) }
	switch {
	case h.Kind == KindRepeats && p.repeats == nil && p.repeatsN > 0:
		return fmt.Sprintf("sqrt(n), n = %d", p.repeatsN)
	case h.Kind == KindRepeats:
		return "sqrt(n)"
	case h.Kind != KindExpanded && h.Kind != KindFactor:
		return ""
	case h.Coverage > 0:
		return strconv.FormatFloat(h.Coverage, 'g', -1, 64)
	}
	t := ""
	if h.Confidence > 0 {
		quantile := (1 + h.Confidence) / 2
		normal := decimals(normalQuantile(h.Confidence))
		switch {
		case p.repeats != nil:
			t = fmt.Sprintf("t(n - 1; %.4g), or %s where n is not given", quantile, normal)
		case p.repeatsN >= 2:
			t = fmt.Sprintf("t(%d; %.4g) = %s", p.repeatsN-1, quantile, decimals(p.quantile(p.repeatsN, h.Confidence)))
		default:
			t = fmt.Sprintf("%s (normal quantile at %.4g)", normal, quantile)
		}
	}
	switch {
	case h.Kind == KindExpanded && p.coverage != nil && t != "":
		return fmt.Sprintf("column %q, or %s", short(p.coverage.Text), t)
	case h.Kind == KindExpanded && p.coverage != nil:
		return fmt.Sprintf("column %q", short(p.coverage.Text))
	}
	return t
}

// conversion says how the numbers of a column become T, k and their standard
// uncertainties; "" if they stand as they are, but for their unit.
func (c *column) conversion(p *plan) string {
	var s []string
	add := func(format string, args ...any) { s = append(s, fmt.Sprintf(format, args...)) }
	switch c.Role {
	case RoleTemperature:
		switch {
		case c.Form == FormReciprocal:
			add("T = 1/x")
		case c.Form == FormThermalUnit && c.Unit.Dim.Amount != 0:
			add("T = 1/(R x)")
		case c.Form == FormThermalUnit:
			add("T = 1/(k_B x)")
		}
	case RoleRate:
		switch {
		case c.Divisor != DivisorNone:
			add("%s", c.Divisor.conversion(c.Form))
		case c.Form == FormLn:
			add("k = e^x")
		case c.Form == FormLg:
			add("k = 10^x")
		case c.Form == FormReciprocal:
			add("k = 1/tau")
		case c.Form == FormHalfLife:
			add("k = ln 2/t_1/2")
		}
	case RoleUncertainty, RoleTemperatureUncertainty:
		d := c.divided(p)
		switch {
		case c.Kind == KindFactor && d != "":
			add("u(ln k) = ln f / %s", d)
		case c.Kind == KindFactor:
			add("u(ln k) = ln f")
		case d != "":
			add("divided by %s", d)
		}
		timeLike := false
		for _, r := range p.runs {
			timeLike = timeLike || r.uncertainty == c && r.base.halfLife() != ""
		}
		switch {
		case c.Kind == KindFactor:
		case c.Percent:
			add("percent of k")
		case c.Relative:
			add("times k")
		case c.Form == FormLn:
			add("u(k) = k u(ln k)")
		case c.Form == FormLg:
			add("u(k) = k ln 10 u(lg k)")
		case timeLike:
			add("u(k)/k = u(t)/t")
		case c.Divisor != DivisorNone:
			add("u(k) = %s u", c.Divisor)
		}
	}
	if h, ok := c.inCells(p); ok {
		if d := h.divided(p); d != "" {
			add("± in cells divided by %s", d)
		}
	}
	return strings.Join(s, "; ")
}

// inCells is how a ± in the cells of a column is understood; ok is false where there
// is none, or its level is not known.
func (c *column) inCells(p *plan) (h Heading, ok bool) {
	h = Heading{Kind: p.level, Coverage: p.levelK}
	if c.Beside != nil && c.plusMinus {
		h = *c.Beside
	}
	known := h.Kind != KindNone && (h.Kind != KindRepeats || p.repeats != nil || p.repeatsN > 0)
	return h, known && (c.plusMinus || c.spaced)
}

// cellLevels says at what level the uncertainties in the cells of a column are.
func (c *column) cellLevels(p *plan) []string {
	var s []string
	if c.brackets {
		s = append(s, "brackets in cells: "+string(KindStandard))
	}
	level := "not used"
	if h, ok := c.inCells(p); ok {
		if level = string(h.Kind); h.Coverage > 0 {
			level += ", k = " + strconv.FormatFloat(h.Coverage, 'g', -1, 64)
		}
	}
	if c.plusMinus {
		s = append(s, "± in cells: "+level)
	}
	if c.spaced {
		s = append(s, "brackets after a space: "+level)
	}
	return s
}
