package dataset

import (
	"regexp"
	"strconv"
	"strings"
)

type levelWord struct {
	kind       Kind
	relative   bool
	confidence float64
	bare       bool // means nothing unless a level stands beside it
}

// levelWords are matched without regard to case; single letters only as
// functions u(k) or with an underscore u_k.
var levelWords = map[string]levelWord{
	"se": {kind: KindMean}, "s.e.": {kind: KindMean}, "sem": {kind: KindMean}, "s.e.m.": {kind: KindMean}, "stderr": {kind: KindMean},
	"std error": {kind: KindMean}, "std. error": {kind: KindMean}, "standard error": {kind: KindMean}, "std err": {kind: KindMean}, "std_err": {kind: KindMean},
	"standard uncertainty": {kind: KindStandard}, "sigma": {kind: KindStandard}, "σ": {kind: KindStandard},
	"sd": {kind: KindRepeats}, "s.d.": {kind: KindRepeats}, "stdev": {kind: KindRepeats}, "std": {kind: KindRepeats}, "std dev": {kind: KindRepeats},
	"std. dev.": {kind: KindRepeats}, "st. dev.": {kind: KindRepeats}, "std_dev": {kind: KindRepeats}, "standard deviation": {kind: KindRepeats}, "st dev": {kind: KindRepeats},
	"rsd": {kind: KindRepeats, relative: true}, "cv": {kind: KindRepeats, relative: true}, "relative standard deviation": {kind: KindRepeats, relative: true},
	"rel. sd": {kind: KindRepeats, relative: true}, "coefficient of variation": {kind: KindRepeats, relative: true},
	"error": {kind: KindAmbiguous}, "err": {kind: KindAmbiguous}, "err.": {kind: KindAmbiguous}, "uncertainty": {kind: KindAmbiguous}, "unc": {kind: KindAmbiguous},
	"unc.": {kind: KindAmbiguous}, "±": {kind: KindAmbiguous}, "+/-": {kind: KindAmbiguous}, "+-": {kind: KindAmbiguous}, "error bar": {kind: KindAmbiguous},
	"rel. error": {kind: KindAmbiguous, relative: true}, "relative error": {kind: KindAmbiguous, relative: true}, "relative uncertainty": {kind: KindAmbiguous, relative: true},
	"% error": {kind: KindAmbiguous, relative: true}, "expanded uncertainty": {kind: KindExpanded},
	"ci": {kind: KindExpanded}, "confidence interval": {kind: KindExpanded}, "confidence limit": {kind: KindExpanded}, "confidence limits": {kind: KindExpanded},
	"conf. int.": {kind: KindExpanded}, "conf. int": {kind: KindExpanded}, "conf int": {kind: KindExpanded}, "c.i.": {kind: KindExpanded},
	"esd": {kind: KindAmbiguous}, "e.s.d.": {kind: KindAmbiguous}, // standard in crystallography (common practice), elsewhere of repeats
	"rel. unc.": {kind: KindAmbiguous, relative: true}, "rel. unc": {kind: KindAmbiguous, relative: true}, "rel unc": {kind: KindAmbiguous, relative: true},
	"rel. uncertainty": {kind: KindAmbiguous, relative: true}, "rel. err.": {kind: KindAmbiguous, relative: true}, "rel. err": {kind: KindAmbiguous, relative: true},
	"interval": {kind: KindExpanded, bare: true}, "confidence": {kind: KindExpanded, bare: true}, "coverage interval": {kind: KindExpanded},
	"ci90": {kind: KindExpanded, confidence: 0.9}, "ci95": {kind: KindExpanded, confidence: 0.95}, "ci99": {kind: KindExpanded, confidence: 0.99},
}

// functions are the symbols of uncertainties, case-sensitive, as in u(k).
var functions = map[string]levelWord{
	"u": {kind: KindStandard}, "u_r": {kind: KindStandard, relative: true}, "ur": {kind: KindStandard, relative: true}, "u_rel": {kind: KindStandard, relative: true},
	"U": {kind: KindExpanded}, "U_r": {kind: KindExpanded, relative: true}, "U_95": {kind: KindExpanded, confidence: 0.95}, "U95": {kind: KindExpanded, confidence: 0.95},
	"U_90": {kind: KindExpanded, confidence: 0.9}, "U90": {kind: KindExpanded, confidence: 0.9}, "U_99": {kind: KindExpanded, confidence: 0.99}, "U99": {kind: KindExpanded, confidence: 0.99},
	"f": {kind: KindFactor}, "s": {kind: KindRepeats}, "s_r": {kind: KindRepeats, relative: true}, "δ": {kind: KindAmbiguous}, "Δ": {kind: KindAmbiguous}, "delta": {kind: KindAmbiguous},
}

var (
	reCoverage = regexp.MustCompile(`[\[(]?\b[kK] ?= ?([0-9]+(?:\.[0-9]+)?)[\])]?`)
	reSigmas   = regexp.MustCompile(`(?i)[\[(]?\b([0-9](?:\.[0-9]+)?) ?[-·]?(?:σ|sigma|s\.d\.|s\.?d\.?\b)[\])]?`)
	reLevel    = regexp.MustCompile(`(?i)[\[(]?\b(68|68\.3|90|95|95\.4|95\.5|98|99|99\.7|99\.9) ?%[\])]?`)
	reFunction = regexp.MustCompile(`^([A-Za-zσδΔ_.]{1,24}[0-9]{0,2}) ?\(`)
	reUnder    = regexp.MustCompile(`^(u|U|s|f|u_r|U_95|U95|δ|Δ|delta)_(.+)$`)
	rePrefixed = regexp.MustCompile(`^(δ|Δ|±|(?i:delta )) ?([kTD].*)$`)
	reBareU    = regexp.MustCompile(`^(U_?(?:90|95|99)|U)(?:$|[ /(\[,%])`)
)

func (p headingParser) uncertainty(s string) (Heading, bool) {
	h := Heading{Role: RoleUncertainty}
	rest := s
	coverage, confidence := 0.0, 0.0
	sigmas := false
	if e, l, after, ok := powerOfTen(s); ok { // 10^3 u(k)/s^-1
		if after = strings.TrimLeft(after, " ·×*"); !strings.HasPrefix(after, "%") {
			h.Shift, h.Lost, rest = -e, l, after
		}
	}
	if strings.ContainsRune(rest, '=') {
		if m := reCoverage.FindStringSubmatchIndex(rest); m != nil {
			coverage, _ = strconv.ParseFloat(rest[m[2]:m[3]], 64)
			rest = cut(rest, m[0], m[1])
		}
	}
	if m := reSigmas.FindStringSubmatchIndex(rest); m != nil && coverage == 0 {
		coverage, _ = strconv.ParseFloat(rest[m[2]:m[3]], 64)
		sigmas = true
		// 2σ(k): keep the bracket of the function
		if end := rest[m[1]-1]; end == ')' && !strings.ContainsAny(rest[m[0]:m[0]+1], "([") {
			m[1]--
		}
		rest = cut(rest, m[0], m[1])
	} else if strings.ContainsRune(rest, '%') {
		if m := reLevel.FindStringSubmatchIndex(rest); m != nil {
			confidence, _ = strconv.ParseFloat(rest[m[2]:m[3]], 64)
			confidence /= 100
			rest = cut(rest, m[0], m[1])
		}
	}
	rest = strings.TrimLeft(rest, " ")

	percent := false
	if r, ok := strings.CutPrefix(rest, "%"); ok { // % RSD
		percent, rest = true, strings.TrimLeft(r, " ")
	}

	var lw levelWord
	found := false
	var target, after string
	hasTarget := false
	if sigmas {
		lw, found = levelWord{kind: KindStandard}, true
		// What remains is (k)/unit, k, a level word, a unit, or nothing.
		after = rest
		if strings.HasPrefix(rest, "(") {
			if in, out, ok := bracketed(rest); ok && isQuantity(in) {
				target, after, hasTarget = in, out, true
			}
		}
		if !hasTarget {
			if w, r, ok := p.leadingLevel(rest); ok {
				lw, after = w, r
				if lw.kind == KindAmbiguous {
					lw.kind = KindStandard
				}
			}
		}
	}
	if !found {
		if m := reFunction.FindStringSubmatch(rest); m != nil {
			open := len(m[0]) - 1
			if in, out, ok := bracketed(rest[open:]); ok && isQuantity(in) {
				w, ok := functions[m[1]]
				if !ok {
					w, ok = levelWords[strings.ToLower(strings.TrimSpace(m[1]))]
				}
				if ok {
					lw, found, hasTarget, target, after = w, true, true, in, out
				}
			}
		}
	}
	if !found {
		if m := rePrefixed.FindStringSubmatch(rest); m != nil {
			if t, a, ok := leadingQuantity(m[2]); ok {
				lw, found, hasTarget, target, after = levelWord{kind: KindAmbiguous}, true, true, t, a
			}
		}
	}
	if !found {
		if m := reUnder.FindStringSubmatch(rest); m != nil {
			if t, a, ok := leadingQuantity(m[2]); ok {
				lw, found, hasTarget, target, after = functions[m[1]], true, true, t, a
			}
		}
	}
	if m := reBareU.FindStringSubmatch(rest); m != nil && !found {
		// U95 (%), U (95 %): U alone is an uncertainty only where its level is stated.
		if lw = functions[m[1]]; lw.confidence > 0 || confidence > 0 || coverage > 0 {
			found, after = true, rest[len(m[1]):]
		}
	}
	if !found {
		lw, after, found = p.leadingLevel(rest)
	}
	if sigmas && !hasTarget {
		if t, r, ok := leadingQuantity(strings.TrimLeft(after, " _")); ok {
			target, after, hasTarget = t, r, true
		}
	}
	if found && !hasTarget {
		a := strings.TrimLeft(after, " _")
		a = strings.TrimPrefix(a, "of ")
		a = strings.TrimPrefix(a, "in ")
		if t, r, ok := leadingQuantity(a); ok && len(a) < len(after) {
			target, after, hasTarget = t, r, true
		}
	}
	if !found {
		if t, w, r, ok := trailingLevel(rest); ok {
			lw, found, hasTarget, target, after = w, true, true, t, r
		}
	}
	if !found {
		return h, false
	}
	h.Kind, h.Relative = lw.kind, lw.relative
	h.Confidence = confidence
	if h.Confidence == 0 {
		h.Confidence = lw.confidence
	}
	h.Coverage = coverage
	switch {
	case h.Confidence > 0 && (h.Kind == KindAmbiguous || h.Kind == KindStandard):
		h.Kind = KindExpanded
	case coverage > 0 && (h.Kind == KindAmbiguous || h.Kind == KindStandard):
		h.Kind = KindExpanded
	}
	if h.Kind == KindExpanded && h.Coverage == 1 {
		h.Kind = KindStandard
	}
	if confidence > 0 && h.Kind != KindExpanded || lw.bare && confidence == 0 && coverage == 0 {
		return h, false
	}
	if hasTarget {
		if !h.setTarget(strings.TrimSpace(target)) {
			return h, false
		}
	}
	after = strings.TrimSpace(after)
	if percent && after == "" || after == "%" || after == "/%" || after == "_%" || strings.EqualFold(after, "_pct") || strings.EqualFold(after, "_percent") {
		after = "/%"
	}
	how, unit := tail(after)
	if how == '?' {
		return h, false
	}
	if unit == "%" {
		h.setPercent()
		return p.settleError(h), true
	}
	if how == '_' {
		u, ok := underscoreUnit(unit)
		if !ok {
			return h, false
		}
		h.Unit, h.UnitText = u, u.Text
		return p.settleError(h), true
	}
	prefix := h.Shift
	unit, times := factorFirst(unit)
	h.setUnit(unit)
	if unit != "" && h.Unit == nil && how == ' ' {
		return h, false
	}
	h = p.settleError(h)
	if times {
		p.settleFactor(&h, prefix)
	}
	return h, true
}

// settleError settles an ambiguous level by what the user said: error=1, error=2,
// error=sd.
func (p headingParser) settleError(h Heading) Heading {
	if h.Kind == KindExpanded && h.Coverage == 0 && h.Confidence == 0 || h.Kind == KindAmbiguous {
		kind := h.Kind
		h.Ambiguity = &Ambiguity{"error", errorMeanings}
		if v, ok := p.assume["error"]; ok {
			if k, c, ok := errorLevel(v); ok {
				h.settle(v)
				h.Kind, h.Coverage = k, c
				kind = k
			}
		}
		h.Kind = kind
	}
	return h
}

// errorLevel reads the value of --assume error=: 1 or standard, another coverage
// factor, or sd.
func errorLevel(v string) (Kind, float64, bool) {
	switch {
	case strings.HasPrefix(v, "sd"):
		return KindRepeats, 0, true
	case v == "standard":
		return KindStandard, 0, true
	}
	c, err := strconv.ParseFloat(v, 64)
	switch {
	case err != nil || !(c > 0) || c > 10:
		return KindNone, 0, false
	case c == 1:
		return KindStandard, 0, true
	}
	return KindExpanded, c, true
}

// setTarget reads what an uncertainty belongs to: k, ln k, lg k, T, with or
// without its unit.
func (h *Heading) setTarget(t string) bool {
	if t == "T" || t == "t" || reTemperatureWord.MatchString(t+" ") && len(t) < 24 || t == "T/K" {
		h.Role, h.Of, h.Symbol = RoleTemperatureUncertainty, RoleTemperature, "T"
		return true
	}
	r, ok := headingParser{}.marked(t)
	if !ok || r.Role != RoleRate {
		r, ok = headingParser{}.rate(t)
	}
	if !ok || r.Form == FormUnknown {
		return false
	}
	h.Of, h.Symbol, h.Form, h.Divisor = RoleRate, r.Symbol, r.Form, r.Divisor
	if r.Unit != nil && (r.Form == FormDirect) && h.Unit == nil {
		h.Unit, h.UnitText, h.Shift = r.Unit, r.UnitText, h.Shift+r.Shift
	}
	if h.Run == "" {
		h.Run = r.Run
	}
	return true
}

// isQuantity reports whether the inside of u(…) is a rate constant, its logarithm
// or a temperature.
func isQuantity(s string) bool {
	var h Heading
	return h.setTarget(strings.TrimSpace(s))
}

// leadingQuantity splits "k_obs (s^-1)" into the quantity and what follows.
func leadingQuantity(s string) (q, rest string, ok bool) {
	end := strings.IndexAny(s, "/([, %")
	// ln k, lg k, rate constant
	low := strings.ToLower(s)
	for _, w := range []string{"ln k", "lg k", "ln(k)", "lg(k)", "log10 k", "rate constant", "rate coefficient"} {
		if strings.HasPrefix(low, w) {
			return s[:len(w)], s[len(w):], true
		}
	}
	if end >= 0 {
		q, rest = s[:end], s[end:]
	} else {
		q = s
	}
	if q == "" || !isQuantity(q) {
		return "", s, false
	}
	if i := strings.IndexByte(q, '_'); i > 0 && rest == "" {
		// k_s-1, k_L_mol_s, T_K
		if q[:i] == "T" {
			return "T", q[i:], true
		}
		m := symbolMatch{symbol: q[:i], rest: q[i:]}
		if u, ok := subscript(&m); ok && u != nil {
			return m.symbol, "/(" + u.Text + ")", true
		}
	}
	if q == "T_K" || q == "T_C" {
		return "T", q[1:] + rest, true
	}
	return q, rest, true
}

// leadingLevel reads a level word at the start of s.
func (p headingParser) leadingLevel(s string) (w levelWord, rest string, ok bool) {
	low := strings.ToLower(s)
	best := ""
	for word := range levelWords {
		if len(word) > len(best) && strings.HasPrefix(low, word) {
			after := low[len(word):]
			if after == "" || strings.ContainsRune(" _(/[,%", rune(after[0])) || word == "±" || word == "+/-" || word == "σ" {
				best = word
			}
		}
	}
	if best == "" || len(low) != len(s) {
		return w, s, false
	}
	return levelWords[best], s[len(best):], true
}

// trailingLevel reads "k_err", "k SE", "rate constant error (s-1)".
func trailingLevel(s string) (target string, w levelWord, rest string, ok bool) {
	body, unit := s, ""
	if i := strings.IndexAny(s, "(["); i > 0 {
		body, unit = strings.TrimSpace(s[:i]), s[i:]
	}
	if i := strings.IndexByte(body, '/'); i > 0 && unit == "" {
		body, unit = strings.TrimSpace(s[:i]), s[i:]
	}
	low := strings.ToLower(body)
	if len(low) != len(body) {
		return "", w, "", false
	}
	best := ""
	for word := range levelWords {
		if len(word) > len(best) && strings.HasSuffix(low, word) && len(word) < len(low) && strings.ContainsRune(" _,", rune(low[len(low)-len(word)-1])) {
			best = word
		}
	}
	if best != "" {
		target = strings.TrimRight(body[:len(body)-len(best)], " _,")
		if isQuantity(target) {
			return target, levelWords[best], unit, true
		}
		return "", w, "", false
	}
	// k (SE)
	if unit != "" && strings.HasPrefix(unit, "(") && strings.HasSuffix(unit, ")") {
		if lw, ok := levelWords[strings.ToLower(strings.TrimSpace(unit[1:len(unit)-1]))]; ok && isQuantity(body) {
			return body, lw, "", true
		}
	}
	return "", w, "", false
}

// cut removes s[i:j] and the spaces this leaves.
func cut(s string, i, j int) string {
	return strings.TrimSpace(strings.TrimSpace(s[:i]) + " " + strings.TrimSpace(s[j:]))
}
