package dataset

import (
	"regexp"
	"strings"
)

var (
	reTemperatureWord = regexp.MustCompile(`(?i)^(?:(?:reaction|sample|absolute|mean|bath|cell|gas|measured|set) )?(?:temperature|temperatur|temp\.?)(?:$|[^a-z])`)
	reOneOverT        = regexp.MustCompile(`^\(? ?1 ?/ ?T ?\)?`)
	reThermal         = regexp.MustCompile(`^(?:1 ?/ ?\(? ?(k_?\{?B?\}? ?[·*]? ?T|R ?[·*]? ?T) ?\)?|\( ?(k_?\{?B?\}? ?[·*]? ?T|R ?[·*]? ?T) ?\)\^\{?-1\}?)`)
	reInverseT        = regexp.MustCompile(`^T ?\^ ?[({]?-1[)}]?`)
	reInverseTUnit    = regexp.MustCompile(`^\( ?T ?/ ?K ?\) ?\^ ?[({]?-1[)}]?$`)
	reKOverT          = regexp.MustCompile(`^(k?)K ?/ ?T$`)
	reBareOverT       = regexp.MustCompile(`^/ ?(?:T|\( ?T ?/ ?K ?\)$)`)
	reOneOverTUnit    = regexp.MustCompile(`^1 ?/ ?\( ?T ?/ ?K ?\)$`)
	reOverTTimes      = regexp.MustCompile(`^\(? ?1 ?/ ?T ?\)? ?[×*·x] ?(10.*)$`)
)

func (p headingParser) temperature(s string) (Heading, bool) {
	h := Heading{Role: RoleTemperature}
	if reciprocal(s, &h) {
		if h.Form == FormThermalUnit && h.Unit == nil {
			h.Ambiguity = &Ambiguity{"T", thermalMeanings}
			if v, ok := p.assume["T"]; ok {
				if u, err := ParseUnit(v); err == nil && u.reciprocalEnergy() {
					h.settle(v)
					h.setUnit(v)
				}
			}
		}
		return h, true
	}

	rest := s
	shift := 0
	lost := false
	if e, l, after, ok := powerOfTen(s); ok { // 10^-2 T/K
		rest = strings.TrimLeft(after, " ·×*")
		shift, lost = -e, l
	}
	symbol := ""
	if m := reTemperatureWord.FindString(rest); m != "" {
		n := len(m)
		if last := m[n-1]; last != '.' && !isLetter(last) {
			n--
		}
		symbol, rest = rest[:n], rest[n:]
		// temperature T/K
		if after, ok := strings.CutPrefix(strings.TrimLeft(rest, " ,"), "T"); ok && (after == "" || strings.ContainsRune("/ ([_,", rune(after[0]))) {
			rest = after
		}
	} else {
		for _, t := range []string{"T", "t", "θ", "ϑ", "theta"} {
			if after, ok := strings.CutPrefix(rest, t); ok {
				symbol, rest = t, after
				break
			}
		}
	}
	if symbol == "" || rest != "" && isLetter(rest[0]) {
		return h, false
	}
	how, unit := tail(rest)
	if how == ' ' && isWordTemperature(symbol) { // temperature of bath (K)
		if i := strings.LastIndexAny(unit, "(["); i > 0 {
			_, unit = tail(unit[i:])
		}
	}
	if how == '_' && len(symbol) == 1 { // T_abs/K, T_mean (K)
		for _, sub := range []string{"abs", "mean", "avg", "set", "bath", "cell", "gas", "exp", "rxn"} {
			if after, ok := strings.CutPrefix(unit, sub); ok && (after == "" || !isLetter(after[0])) {
				how, unit = tail(after)
			}
		}
	}
	h.Shift, h.Lost = shift, lost
	h.Symbol = symbol
	if unit == "" {
		if symbol == "t" || len(symbol) == 2 { // time, an angle
			return h, false
		}
		if strings.HasPrefix(strings.ToLower(symbol), "absolute") {
			h.setUnit("K")
			return h, true
		}
		p.settleTemperature(&h)
		return h, true
	}
	h.setUnit(unit)
	if h.Unit != nil && h.Unit.Dim == dimTemp {
		return h, true
	}
	// T is a temperature whatever follows, if it is set off as a unit; t is not.
	if symbol != "T" && !isWordTemperature(symbol) || how == '_' || how == ' ' || how == '?' {
		if !(isWordTemperature(symbol) && len(s) < 40) {
			return h, false
		}
	}
	h.Unit, h.UnitText, h.Shift = nil, "", shift
	p.settleTemperature(&h)
	return h, true
}

func isWordTemperature(symbol string) bool {
	return len(symbol) >= 4 && symbol != "theta"
}

func isLetter(c byte) bool { return c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' }

// settleTemperature marks a temperature without a known unit as ambiguous, or
// settles it by what the user said.
func (p headingParser) settleTemperature(h *Heading) {
	h.Ambiguity = &Ambiguity{"T", temperatureMeanings}
	v, ok := p.assume["T"]
	if !ok {
		h.Form = FormUnknown
		return
	}
	h.Form = FormDirect
	if u, err := ParseUnit(v); err == nil && u.Dim == dimTemp {
		h.settle(v)
		h.setUnit(v)
		return
	}
	var r Heading
	if reciprocal(normalize(v), &r) && (r.Form == FormReciprocal || r.Unit != nil) {
		h.settle(v)
		h.Form, h.Shift, h.Unit = r.Form, r.Shift, r.Unit
		return
	}
	h.Form = FormUnknown
}

func (u Unit) reciprocalEnergy() bool {
	e := u.Dim.physical()
	perMole := e
	perMole.Amount--
	minus := Dimension{}.add(dimEnergy, -1)
	return e == minus || perMole == minus
}

// reciprocal reads the headings of reciprocal temperatures.
func reciprocal(s string, h *Heading) bool {
	shift := 0
	rest := s
	lost := false
	factor := false
	if e, l, after, ok := powerOfTen(s); ok && !strings.HasPrefix(s, "1/") {
		after = strings.TrimLeft(after, " ·×*")
		shift, lost, rest, factor = -e, l, after, true
	}
	if m := reOverTTimes.FindStringSubmatch(rest); m != nil && !factor {
		// 1/T × 1000: the cell is that product. A negative power would rather be a unit.
		if e, l, after, ok := powerOfTen(m[1]); ok && e > 0 {
			shift, lost, rest, factor = -e, l, "1/T"+after, true
		}
	}
	done := func(form Form) bool {
		h.Form, h.Shift, h.Lost = form, h.Shift+shift, h.Lost || lost
		h.Symbol = "T"
		return true
	}
	if m := reKOverT.FindStringSubmatch(rest); m != nil { // 10^3 K/T, kK/T: the number of K/T
		if m[1] == "k" {
			shift -= 3
		}
		h.setUnit("K^-1")
		return done(FormReciprocal)
	}
	if reInverseTUnit.MatchString(rest) || reOneOverTUnit.MatchString(rest) {
		h.setUnit("K^-1")
		return done(FormReciprocal)
	}
	var after string
	switch {
	case reThermal.MatchString(rest):
		after = rest[len(reThermal.FindString(rest)):]
		if after != "" && isLetter(after[0]) {
			return false
		}
		_, unit := tail(after)
		h.setUnit(unit)
		if unit != "" && (h.Unit == nil || !h.Unit.reciprocalEnergy()) {
			return false
		}
		return done(FormThermalUnit)
	case factor && reBareOverT.MatchString(rest): // 1000/T
		after = rest[len(reBareOverT.FindString(rest)):]
	case reOneOverT.MatchString(rest):
		m := reOneOverT.FindString(rest)
		if strings.HasPrefix(m, "(") != strings.HasSuffix(strings.TrimSpace(m), ")") {
			return false
		}
		after = rest[len(m):]
	case reInverseT.MatchString(rest):
		after = rest[len(reInverseT.FindString(rest)):]
	default:
		return false
	}
	if after != "" && (isLetter(after[0]) || after[0] == '^') {
		return false
	}
	how, unit := tail(after)
	if how == '_' && unit != "K" || how == '?' {
		return false
	}
	if unit == "K" { // 1000/T (K): T in K
		unit = ""
	}
	h.setUnit(unit)
	switch {
	case unit == "":
		u, _ := ParseUnit("K^-1")
		h.Unit = &u
	case h.Unit == nil && h.UnitText == "": // 1/T (10^-3): a bare power
		u, _ := ParseUnit("K^-1")
		h.Unit = &u
	case h.Unit != nil && h.Unit.Dim == Dimension{Temperature: -1}:
		if e := h.Unit.Text; e == "kK^-1" && factor {
			return false // 1000/T in kK^-1: one power or two
		}
	default:
		return false
	}
	if factor && h.Shift != 0 {
		return false // 1000/T (10^-3 K^-1): one power or two
	}
	return done(FormReciprocal)
}
