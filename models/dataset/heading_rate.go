package dataset

import (
	"regexp"
	"strings"
)

var (
	reKcatKm = regexp.MustCompile(`^k_?\{?cat\}? ?/ ?K_?\{?[Mm]\}?`)
	reK      = regexp.MustCompile(`^k(?:_\{[^{}]{1,20}\}|obs|cat|app|inf|∞|uni|bi|tot|exp|deg|dec|iso|ET|et|II|III|IV|I|H|D|f|r|b|d|q|on|off|0)?[0-9]{0,2}'{0,2}(?:\([0-9]{1,2}\))?`)
	reD      = regexp.MustCompile(`^D(?:_\{[^{}]{1,20}\}|[0-9]?)\*?`)
	reWordK  = regexp.MustCompile(`(?i)^(?:(?:first|second|third|zero|1st|2nd|pseudo)[- ](?:first[- ])?order )?(?:rate constant|rate coefficient|rate const\.?|turnover number|rate_constant|rate_coefficient|rateconstant)`)
	reWordD  = regexp.MustCompile(`(?i)^(?:self-)?(?:diffusion coefficient|diffusion constant|diffusivity|diffusion_coefficient)`)
	reTau    = regexp.MustCompile(`^(?:tau|τ|(?i:life[ -]?time|life)(?:_[a-zA-Z0-9]{0,8})?)`)
	reHalf   = regexp.MustCompile(`^(?:t_?\{?\(?1/2\)?\}?|t_?half|(?i:half[-_ ]?life(?:[-_ ]?time)?))`)
	reRate   = regexp.MustCompile(`^(?:(?i:rate|velocity)|v)(?:_\{?[A-Za-z0-9]{1,8}\}?)?`)
	reLog    = regexp.MustCompile(`(?i)^(ln|lg|log_?\{?10\}?|log_?e|log)`)
	reTimes  = regexp.MustCompile(`^(?:[×*·]|x(?: ?10))`)
)

// symbol reads the symbol of a rate quantity at the start of s.
type symbolMatch struct {
	symbol string
	rest   string
	form   Form
	diff   bool
	rate   bool // "rate", "v": a rate constant only if the user says so
}

func matchSymbol(s string) (symbolMatch, bool) {
	boundary := func(rest string) bool {
		return rest == "" || !isLetter(rest[0]) && !isDigit(rest[0])
	}
	try := func(re *regexp.Regexp) (string, string, bool) {
		m := re.FindString(s)
		if m == "" || !boundary(s[len(m):]) {
			return "", s, false
		}
		return m, s[len(m):], true
	}
	// k(T) is k.
	if i := strings.Index(s, "(T)"); i > 0 && i < 24 && s[i-1] != '/' {
		s = s[:i] + s[i+3:]
	}
	if m, rest, ok := try(reKcatKm); ok {
		return symbolMatch{symbol: m, rest: rest}, true
	}
	if m, rest, ok := try(reHalf); ok {
		return symbolMatch{symbol: m, rest: rest, form: FormHalfLife}, true
	}
	if m := reTau.FindString(s); m != "" {
		// life_h: the unit is no part of the word
		if i := strings.IndexByte(m, '_'); i > 0 {
			m = m[:i]
		}
		if boundary(s[len(m):]) {
			return symbolMatch{symbol: m, rest: s[len(m):], form: FormReciprocal}, true
		}
	}
	if m, rest, ok := try(reWordK); ok {
		after := strings.TrimLeft(rest, " ,")
		if sm := reK.FindString(after); sm != "" && len(after) < len(rest) && boundary(after[len(sm):]) {
			return symbolMatch{symbol: sm, rest: after[len(sm):]}, true
		}
		if strings.EqualFold(m, "turnover number") {
			return symbolMatch{symbol: "turnover number", rest: rest}, true
		}
		return symbolMatch{symbol: "k", rest: rest}, true
	}
	if _, rest, ok := try(reWordD); ok {
		after := strings.TrimLeft(rest, " ,")
		if sm := reD.FindString(after); sm != "" && len(after) < len(rest) && boundary(after[len(sm):]) {
			return symbolMatch{symbol: sm, rest: after[len(sm):], diff: true}, true
		}
		return symbolMatch{symbol: "D", rest: rest, diff: true}, true
	}
	if m, rest, ok := try(reK); ok {
		return symbolMatch{symbol: m, rest: rest}, true
	}
	if m, rest, ok := try(reD); ok {
		return symbolMatch{symbol: m, rest: rest, diff: true}, true
	}
	if m, rest, ok := try(regexpTOF); ok {
		return symbolMatch{symbol: m, rest: rest}, true
	}
	if m, rest, ok := try(reRate); ok {
		// "Rate k/s^-1": the symbol says what it is.
		after := strings.TrimLeft(rest, " ,")
		if sm := reK.FindString(after); sm != "" && len(m) > 1 && len(after) < len(rest) && boundary(after[len(sm):]) {
			return symbolMatch{symbol: sm, rest: after[len(sm):]}, true
		}
		return symbolMatch{symbol: m, rest: rest, rate: true}, true
	}
	return symbolMatch{}, false
}

var regexpTOF = regexp.MustCompile(`^TOF`)

// subscript takes what follows an underscore apart into the rest of the symbol
// and a unit: k_obs, k_1_s, k_dec_L_mol_s.
func subscript(m *symbolMatch) (unit *Unit, ok bool) {
	// A subscript may be followed by a unit in brackets or after a solidus.
	end := strings.IndexAny(m.rest, "/([, ")
	word := m.rest
	after := ""
	if end >= 0 {
		word, after = m.rest[:end], m.rest[end:]
	}
	if after == "" {
		for i := 0; i >= 0 && i < len(word); i = nextUnderscore(word, i) {
			if u, ok := underscoreUnit(word[i+1:]); ok && u.isRateOrTime(m.form) {
				m.symbol += word[:i]
				m.rest = ""
				return u, true
			}
		}
	}
	m.symbol += word
	m.rest = after
	return nil, word != "_"
}

// isBoltzmann tells Boltzmann's constant from a rate constant with the subscript B
// or b: by its unit, or, without one, by its capital.
func (h *Heading) isBoltzmann() bool {
	if !strings.EqualFold(h.Symbol, "k_B") && !strings.EqualFold(h.Symbol, "k_{B}") {
		return false
	}
	if h.Unit == nil {
		return h.UnitText == "" && strings.Contains(h.Symbol, "B")
	}
	return !h.Unit.isRate()
}

func (u Unit) isRateOrTime(f Form) bool {
	if f == FormReciprocal || f == FormHalfLife {
		return u.Dim == dimTime
	}
	return u.isRate()
}

var rePlusMinus = regexp.MustCompile(`^(.*[^ ]) ?(?:±|\+/-|\+-) ?([^ ].*)$`)

// withLevel reads the heading of cells such as 3.1 ± 0.2 that says what stands behind
// the ±: k (s-1) ± SD, k ± 2σ / s^-1.
func (p headingParser) withLevel(s string) (Heading, bool) {
	m := rePlusMinus.FindStringSubmatch(s)
	if m == nil {
		return Heading{}, false
	}
	h, ok := p.rate(m[1])
	u, level := headingParser{}.uncertainty(m[2])
	if !ok || !level || u.Ambiguity != nil || u.Of != "" {
		return h, false
	}
	if h.Unit == nil && h.UnitText == "" && !u.Percent {
		h.Unit, h.UnitText, h.Shift = u.Unit, u.UnitText, h.Shift+u.Shift
	}
	h.Beside = &u
	return h, true
}

// rate reads the heading of a rate constant, or of one that was divided by T.
func (p headingParser) rate(s string) (Heading, bool) {
	s, d, ofK := cutDivisor(s)
	return p.dividedRate(s, d, ofK)
}

// dividedRate reads a heading out of which a divisor was taken. ofK says that the
// unit in it is that of k.
func (p headingParser) dividedRate(s string, d Divisor, ofK bool) (Heading, bool) {
	h := Heading{Role: RoleRate, Divisor: d}
	rest := s
	log := ""
	if m := reLog.FindString(rest); m != "" {
		after := strings.TrimLeft(rest[len(m):], " ")
		inner := after
		if strings.HasPrefix(after, "(") || strings.HasPrefix(after, "[") {
			in, out, ok := bracketed(after)
			if !ok {
				return h, false
			}
			inner = strings.TrimSpace(in) + out
			if strings.TrimSpace(out) == "" {
				inner = strings.TrimSpace(in)
			} else if strings.ContainsAny(in, "/(") && !reKcatKm.MatchString(strings.TrimSpace(in)) {
				return h, false
			}
		}
		if _, ok := matchSymbol(strings.TrimLeft(skipPower(inner), " ·×*")); ok {
			log, rest = strings.ToLower(m), inner
		} else {
			return h, false
		}
	}
	prefix := 0
	if e, l, after, ok := powerOfTen(rest); ok {
		prefix, h.Lost = -e, l
		rest = strings.TrimLeft(after, " ·×*")
	}
	m, ok := matchSymbol(rest)
	if !ok {
		return h, false
	}
	if strings.HasPrefix(m.rest, "_") {
		u, ok := subscript(&m)
		if !ok {
			return h, false
		}
		h.Unit = u
		if u != nil {
			h.UnitText = u.Text
		}
	}
	h.Symbol = strings.TrimSpace(m.symbol)
	h.Shift = prefix
	h.Form = m.form
	times := false
	after := strings.TrimLeft(m.rest, " ")
	if reTimes.MatchString(after) { // k × 10^12: which side of the equation?
		after = strings.TrimLeft(after, "×*·x ")
		e, l, r, ok := powerOfTen(after)
		if !ok {
			return h, false
		}
		times = true
		h.Lost = h.Lost || l
		h.Shift += e
		after = r
	}
	how, unit := tail(after)
	if how == '?' || how == '_' {
		return h, false
	}
	if (how == '(' || how == ',') && !times {
		if u := strings.TrimLeft(unit, "×*x "); u != unit || bareFactor(unit) {
			if _, _, _, ok := powerOfTen(u); ok {
				times = true // k (×10^-12 U)
				unit = u
			}
		}
	}
	if !times {
		unit, times = factorFirst(unit) // k (s^-1 × 10^5)
	}
	if h.Unit == nil {
		h.setUnit(unit)
		if d == DivisorT && !ofK {
			h.perKelvin()
		}
	}
	if h.Unit == nil && unit != "" && (how == ' ' || !plausibleUnit(unit)) {
		return h, false // more words: not the quantity alone
	}
	if h.isBoltzmann() {
		return h, false
	}
	timeLike := h.Form == FormReciprocal || h.Form == FormHalfLife
	switch {
	case timeLike:
		if h.Unit != nil && h.Unit.Dim != dimTime {
			return h, false
		}
		if h.Unit == nil && h.UnitText != "" {
			return h, false
		}
		if log != "" || d != DivisorNone {
			return h, false
		}
	case m.diff:
		if h.Unit != nil {
			if r, ok := h.Unit.rate(); !ok || !r.diffusion {
				return h, false
			}
		}
	case m.rate:
		p.ambiguous(&h, "k", rateMeanings)
	case h.Unit != nil && !h.Unit.isRate():
		p.ambiguous(&h, "k", rateMeanings)
		if h.Ambiguity == nil && h.Unit.Dim == dimTime { // k/s read as per second
			u, _ := ParseUnit("1/" + h.Unit.Text)
			h.Unit, h.UnitText = &u, u.Text
		} else if h.Ambiguity == nil {
			h.Unit = nil
		}
	}
	switch log {
	case "":
	case "ln", "loge", "log_e":
		h.Form = FormLn
	case "log":
		h.Form = FormUnknown
		if h.Ambiguity == nil {
			h.Ambiguity = &Ambiguity{"log", logMeanings}
			if v := p.assume["log"]; v == "ln" || v == "lg" {
				h.settle(v)
				h.Form = Form(v)
			}
		}
	default:
		h.Form = FormLg
	}
	if times {
		p.settleFactor(&h, prefix)
	}
	return h, true
}

// settleFactor marks a power of ten that stands behind a quantity or its unit as
// ambiguous, or settles it by what the user said. prefix is the part of Shift that
// stands before the quantity, and is none of it.
func (p headingParser) settleFactor(h *Heading, prefix int) {
	if h.Ambiguity != nil {
		return
	}
	h.Ambiguity = &Ambiguity{"factor", factorMeanings}
	switch p.assume["factor"] {
	case "times":
		h.settle("times")
		h.Shift = -h.Shift + 2*prefix
	case "unit":
		h.settle("unit")
	}
}

var reFactorBehind = regexp.MustCompile(`^(.*[^ ]) ?[×*·x] ?(10.*)$`)

// factorFirst writes a unit with a power of ten behind it, such as s^-1 × 10^5, with
// the power first. ok is false where there is none.
func factorFirst(unit string) (first string, ok bool) {
	m := reFactorBehind.FindStringSubmatch(unit)
	if m == nil || !bareFactor(m[2]) {
		return unit, false
	}
	if _, err := ParseUnit(m[1]); err != nil {
		return unit, false
	}
	return m[2] + " " + m[1], true
}

// skipPower leaves out a power of ten at the start.
func skipPower(s string) string {
	if _, _, rest, ok := powerOfTen(s); ok {
		return rest
	}
	return s
}

func bareFactor(unit string) bool {
	_, _, rest, ok := powerOfTen(unit)
	return ok && strings.TrimSpace(rest) == ""
}

// plausibleUnit tells an unknown unit from a remark: it is short and no second
// symbol of a rate constant.
func plausibleUnit(unit string) bool {
	if len(unit) > 40 || strings.Count(unit, " ") > 4 {
		return false
	}
	if _, err := ParseUnit(unit); err != nil && reLoneSymbol.MatchString(unit) {
		return false // a quotient of two quantities, such as k/V
	}
	m := reK.FindString(unit) // kH/kD is a ratio
	return m == "" || m != unit && isLetter(unit[len(m)])
}

// ambiguous marks a rate heading, or settles it by what the user said.
func (p headingParser) ambiguous(h *Heading, key string, m []Meaning) {
	h.Ambiguity = &Ambiguity{key, m}
	if p.assume[key] == m[0].Value {
		h.settle(m[0].Value)
	}
}
