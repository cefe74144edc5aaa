package dataset

import (
	"fmt"
	"regexp"
	"strconv"
	"strings"
)

// Role says what a column is for.
type Role string

// The roles.
const (
	RoleTemperature            Role = "temperature"
	RoleRate                   Role = "rate"
	RoleUncertainty            Role = "uncertainty"
	RoleTemperatureUncertainty Role = "temperature-uncertainty"
	RoleRepeats                Role = "repeats"
	RoleCoverage               Role = "coverage-factor"
	RoleLimit                  Role = "limit"
	RoleSource                 Role = "source"
	RoleDataset                Role = "dataset"
	RoleOrder                  Role = "order"
	RoleNote                   Role = "note"
	RoleKept                   Role = "kept"
)

// Form says in which form a column holds its quantity.
type Form string

// The forms.
const (
	FormDirect      Form = ""
	FormLn          Form = "ln"
	FormLg          Form = "lg"
	FormReciprocal  Form = "reciprocal"  // 1/T, or a lifetime τ = 1/k
	FormHalfLife    Form = "half-life"   // ln 2/k
	FormThermalUnit Form = "1/(k_B T)"   // 1/kT or 1/RT with a unit of reciprocal energy
	FormUnknown     Form = "not settled" // ambiguous
)

// Kind says how an uncertainty was stated.
type Kind string

// The kinds of uncertainty.
const (
	KindNone      Kind = ""
	KindStandard  Kind = "standard"           // u, σ
	KindMean      Kind = "standard, of mean"  // SE, SEM
	KindExpanded  Kind = "expanded"           // U, kσ, 95 %
	KindFactor    Kind = "uncertainty factor" // f
	KindRepeats   Kind = "s.d. of repeats"    // s, SD
	KindAmbiguous Kind = "ambiguous"          // error, ±
)

// Meaning is one way to read an ambiguous heading, and the --assume value that
// chooses it.
type Meaning struct {
	Value string // degC
	Says  string // degrees Celsius
}

// Ambiguity is why a heading cannot be read as it stands: --assume Key=Value
// settles it.
type Ambiguity struct {
	Key      string
	Meanings []Meaning
}

// Heading is a heading that was read.
type Heading struct {
	Text     string
	Role     Role
	Symbol   string // of a rate: k, k_obs, kcat/Km, D
	Form     Form
	Unit     *Unit  // nil if there is none, or it was not understood
	UnitText string // as written, "" if none
	Shift    int    // the value is cell·10^Shift in the unit

	// Of an uncertainty: what it belongs to ("" if not said: Of is then
	// KindNone's "", and the nearest quantity to the left is meant), and how it
	// was stated.
	Of        Role
	Kind      Kind
	Relative  bool
	Percent   bool
	Coverage  float64 // 0 if not stated
	Percent95 bool    // a 95 % interval

	Ambiguity *Ambiguity
	Assumed   []string // assumptions that were applied, as key=value
	Lost      bool     // a power of ten had lost its superscript
}

// longestHeading bounds what the heading grammar looks at, in bytes.
const longestHeading = 160

// Meanings of ambiguous headings.
var (
	temperatureMeanings = []Meaning{{"K", "kelvin"}, {"degC", "degrees Celsius"}, {"degF", "degrees Fahrenheit"}}
	thermalMeanings     = []Meaning{{"eV^-1", "1/kT in eV^-1"}, {"mol/kJ", "1/RT in mol/kJ"}, {"mol/kcal", "1/RT in mol/kcal"}}
	logMeanings         = []Meaning{{"lg", "the decimal logarithm"}, {"ln", "the natural logarithm"}}
	rateMeanings        = []Meaning{{"rate", "this column holds the rate constant"}}
	factorMeanings      = []Meaning{{"times", "the cell is the rate constant times the power"}, {"unit", "the cell counts the power as its unit"}}
	errorMeanings       = []Meaning{{"1", "one standard uncertainty"}, {"2", "expanded, k = 2"}, {"sd,n=3", "standard deviation of 3 repeats"}}
)

// words maps whole headings, in lower case, to roles.
var words = map[string]Role{
	"source": RoleSource, "lab": RoleSource, "laboratory": RoleSource, "reference": RoleSource, "ref": RoleSource, "ref.": RoleSource, "method": RoleSource,
	"dataset": RoleDataset, "data set": RoleDataset, "data_set": RoleDataset,
	"order": RoleOrder, "run order": RoleOrder, "run_order": RoleOrder,
	"note": RoleNote, "notes": RoleNote, "comment": RoleNote, "comments": RoleNote, "remark": RoleNote, "remarks": RoleNote,
	"limit": RoleLimit, "bound": RoleLimit,
	"n": RoleRepeats, "replicates": RoleRepeats, "repeats": RoleRepeats, "number of repeats": RoleRepeats, "number of replicates": RoleRepeats,
	"coverage_factor": RoleCoverage, "coverage factor": RoleCoverage,
}

// ParseHeading reads a heading. assume holds what the user said about ambiguous
// ones (--assume); nil if nothing. What is not understood has RoleKept.
func ParseHeading(text string, assume map[string]string) Heading {
	p := headingParser{assume: assume}
	s := normalize(text)
	h := Heading{Text: strings.TrimSpace(text), Role: RoleKept}
	if s == "" || len(s) > longestHeading {
		return h
	}
	if r, ok := words[strings.ToLower(s)]; ok {
		h.Role = r
		return h
	}
	for _, try := range []func(string) (Heading, bool){p.uncertainty, p.temperature, p.rate} {
		if got, ok := try(s); ok {
			got.Text = h.Text
			return got
		}
	}
	return h
}

// parseAs reads a heading that the user gave a role (--column role=HEADING): role
// is written as a heading without its unit.
func parseAs(role, text string, assume map[string]string) (Heading, error) {
	as := ParseHeading(role, map[string]string{"T": "K", "log": "lg", "error": "1"})
	if as.Role == RoleKept {
		return as, fmt.Errorf("%q is not a role", role)
	}
	h := ParseHeading(text, assume)
	if h.Role == as.Role && h.Of == as.Of && (h.Kind == as.Kind || as.Role != RoleUncertainty && as.Role != RoleTemperatureUncertainty) {
		if h.Role == RoleRate && h.Ambiguity != nil && h.Ambiguity.Key == "k" {
			h.Ambiguity = nil
		}
		if as.Role == RoleRate && as.Form != FormDirect && h.Form != as.Form {
			h.Form, h.Ambiguity = as.Form, nil
		}
		return h, nil
	}
	as.Ambiguity, as.Assumed = nil, nil
	as.Text = h.Text
	symbol := h.Text
	// The unit is what stands where units stand.
	s := normalize(text)
	if i := strings.IndexAny(s, "/([,"); i > 0 {
		_, unit := tail(s[i:])
		as.setUnit(unit)
		symbol = strings.TrimSpace(s[:i])
	} else {
		for i := nextUnderscore(s, -1); i > 0; i = nextUnderscore(s, i) {
			u, ok := underscoreUnit(s[i+1:])
			if !ok {
				if v, err := ParseUnit(s[i+1:]); err == nil {
					u, ok = &v, true
				}
			}
			if ok {
				as.Unit, as.UnitText = u, u.Text
				symbol = s[:i]
				break
			}
		}
	}
	if as.Role == RoleRate {
		as.Symbol = symbol
	}
	if as.Role == RoleTemperature {
		if as.Unit == nil || as.Unit.Dim != dimTemp {
			if as.Form == FormDirect {
				as.Unit = nil
				headingParser{assume: assume}.settleTemperature(&as)
			}
		}
	}
	return as, nil
}

func nextUnderscore(s string, i int) int {
	j := strings.IndexByte(s[i+1:], '_')
	if j < 0 {
		return -1
	}
	return i + 1 + j
}

// setUnit takes over a unit text; the power of ten in it goes to Shift.
func (h *Heading) setUnit(text string) {
	h.UnitText = text
	if text == "" {
		return
	}
	if u, err := ParseUnit(text); err == nil {
		h.Unit = &u
		h.Shift += u.Exp10
		h.Lost = h.Lost || u.LostSuperscript
		u.Exp10 = 0
		if u.Text == "1" {
			h.Unit = nil
			h.UnitText = ""
		}
	}
}

// settle resolves an ambiguity with the user's value.
func (h *Heading) settle(value string) {
	h.Assumed = append(h.Assumed, h.Ambiguity.Key+"="+value)
	h.Ambiguity = nil
}

type headingParser struct{ assume map[string]string }

// tail splits what follows a symbol: "/unit", "(unit)", "[unit]", ", unit", "in
// unit", "_unit", " unit", "". how is the sign that introduced it.
func tail(rest string) (how byte, unit string) {
	rest = strings.TrimSpace(rest)
	if rest == "" {
		return 0, ""
	}
	switch rest[0] {
	case '/':
		u := strings.TrimSpace(rest[1:])
		if strings.HasPrefix(u, "(") || strings.HasPrefix(u, "[") {
			if inner, after, ok := bracketed(u); ok && strings.TrimSpace(after) == "" {
				u = strings.TrimSpace(inner)
			}
		}
		return '/', u
	case '(', '[':
		if inner, after, ok := bracketed(rest); ok && strings.TrimSpace(after) == "" {
			return '(', strings.TrimSpace(inner)
		}
		return '?', rest
	case ',':
		how, u := tail(rest[1:]) // "temperature, (K)"
		if how == '(' {
			return ',', u
		}
		return ',', strings.TrimSpace(rest[1:])
	case '_':
		return '_', rest[1:]
	}
	if u, ok := strings.CutPrefix(rest, "in "); ok {
		return ',', strings.TrimSpace(u)
	}
	return ' ', rest
}

// underscoreUnit reads a unit written with underscores: 1_s, L_mol_s and
// cm3_molecule_s put all but the first below the line; per_s, s-1, degC.
func underscoreUnit(s string) (*Unit, bool) {
	if s == "" {
		return nil, false
	}
	if u, err := ParseUnit(strings.ReplaceAll(s, "_", " ")); err == nil && (u.Dim == dimTemp || u.Dim == dimTime || u.isRate()) {
		return &u, true
	}
	if i := strings.IndexByte(s, '_'); i > 0 {
		if u, err := ParseUnit(strings.ReplaceAll(s, "_", "/")); err == nil && u.isRate() {
			return &u, true
		}
	}
	return nil, false
}

func (u Unit) isRate() bool {
	_, ok := u.rate()
	return ok
}

// Temperature.

var (
	reTemperatureWord = regexp.MustCompile(`(?i)^(?:(?:reaction|sample|absolute|mean|bath|cell|gas|measured|set) )?(?:temperature|temperatur|temp\.?)(?:$|[^a-z])`)
	reOneOverT        = regexp.MustCompile(`^\(? ?1 ?/ ?T ?\)?`)
	reThermal         = regexp.MustCompile(`^(?:1 ?/ ?\(? ?(k_?\{?B?\}? ?[·*]? ?T|R ?[·*]? ?T) ?\)?|\( ?(k_?\{?B?\}? ?[·*]? ?T|R ?[·*]? ?T) ?\)\^\{?-1\}?)`)
	reInverseT        = regexp.MustCompile(`^T ?\^ ?[({]?-1[)}]?`)
	reInverseTUnit    = regexp.MustCompile(`^\( ?T ?/ ?K ?\) ?\^ ?[({]?-1[)}]?$`)
	reKOverT          = regexp.MustCompile(`^(k?)K ?/ ?T$`)
	reBareOverT       = regexp.MustCompile(`^/ ?T`)
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
	if reInverseTUnit.MatchString(rest) {
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

// Rate constants.

var (
	reKcatKm = regexp.MustCompile(`^k_?\{?cat\}? ?/ ?K_?\{?[Mm]\}?`)
	reK      = regexp.MustCompile(`^k(?:_\{[^{}]{1,20}\}|obs|cat|app|inf|∞|uni|bi|tot|exp|deg|dec|iso|ET|et|II|III|IV|I|H|D|f|r|b|d|q|on|off|0)?[0-9]{0,2}'{0,2}`)
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
	return nil, word != "_" && !strings.EqualFold(word, "_B") // k_B is Boltzmann's
}

func (u Unit) isRateOrTime(f Form) bool {
	if f == FormReciprocal || f == FormHalfLife {
		return u.Dim == dimTime
	}
	return u.isRate()
}

func (p headingParser) rate(s string) (Heading, bool) {
	h := Heading{Role: RoleRate}
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
	if h.Unit == nil {
		h.setUnit(unit)
	}
	if h.Unit == nil && unit != "" && (how == ' ' || !plausibleUnit(unit)) {
		return h, false // more words: not the quantity alone
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
		if log != "" {
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
	if times && h.Ambiguity == nil {
		h.Ambiguity = &Ambiguity{"factor", factorMeanings}
		switch p.assume["factor"] {
		case "times":
			h.settle("times")
			h.Shift = -h.Shift + 2*prefix
		case "unit":
			h.settle("unit")
		}
	}
	return h, true
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

// Uncertainties.

type levelWord struct {
	kind     Kind
	relative bool
	p95      bool
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
	"ci": {kind: KindExpanded, p95: true}, "confidence interval": {kind: KindExpanded, p95: true}, "ci95": {kind: KindExpanded, p95: true},
}

// functions are the symbols of uncertainties, case-sensitive, as in u(k).
var functions = map[string]levelWord{
	"u": {kind: KindStandard}, "u_r": {kind: KindStandard, relative: true}, "ur": {kind: KindStandard, relative: true}, "u_rel": {kind: KindStandard, relative: true},
	"U": {kind: KindExpanded}, "U_r": {kind: KindExpanded, relative: true}, "U_95": {kind: KindExpanded, p95: true}, "U95": {kind: KindExpanded, p95: true},
	"f": {kind: KindFactor}, "s": {kind: KindRepeats}, "s_r": {kind: KindRepeats, relative: true}, "δ": {kind: KindAmbiguous}, "Δ": {kind: KindAmbiguous}, "delta": {kind: KindAmbiguous},
}

var (
	reCoverage = regexp.MustCompile(`[\[(]?\b[kK] ?= ?([0-9]+(?:\.[0-9]+)?)[\])]?`)
	reSigmas   = regexp.MustCompile(`(?i)[\[(]?\b([0-9](?:\.[0-9]+)?) ?[-·]?(?:σ|sigma|s\.?d\.?\b)[\])]?`)
	re95       = regexp.MustCompile(`(?i)[\[(]?\b95 ?%[\])]?`)
	reFunction = regexp.MustCompile(`^([A-Za-zσδΔ_.]{1,24}[0-9]{0,2}) ?\(`)
	reUnder    = regexp.MustCompile(`^(u|U|s|f|u_r|U_95|U95|δ|Δ|delta)_(.+)$`)
	rePrefixed = regexp.MustCompile(`^(δ|Δ|±) ?([kTD].*)$`)
)

func (p headingParser) uncertainty(s string) (Heading, bool) {
	h := Heading{Role: RoleUncertainty}
	rest := s
	coverage := 0.0
	p95 := false
	sigmas := false
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
		if m := re95.FindStringIndex(rest); m != nil {
			p95 = true
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
	h.Percent95 = p95 || lw.p95
	h.Coverage = coverage
	switch {
	case h.Percent95 && (h.Kind == KindAmbiguous || h.Kind == KindStandard):
		h.Kind = KindExpanded
	case coverage > 0 && (h.Kind == KindAmbiguous || h.Kind == KindStandard):
		h.Kind = KindExpanded
	}
	if h.Kind == KindExpanded && h.Coverage == 1 {
		h.Kind = KindStandard
	}
	if p95 && h.Kind != KindExpanded {
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
		h.Relative, h.Percent = true, true
		h.Shift = -2
		h.UnitText = "%"
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
	h.setUnit(unit)
	if unit != "" && h.Unit == nil && how == ' ' {
		return h, false
	}
	return p.settleError(h), true
}

// settleError settles an ambiguous level by what the user said: error=1, error=2,
// error=sd.
func (p headingParser) settleError(h Heading) Heading {
	if h.Kind == KindExpanded && h.Coverage == 0 && !h.Percent95 || h.Kind == KindAmbiguous {
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

// errorLevel reads the value of --assume error=.
func errorLevel(v string) (Kind, float64, bool) {
	if strings.HasPrefix(v, "sd") {
		return KindRepeats, 0, true
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
	r, ok := headingParser{}.rate(t)
	if !ok || r.Form == FormUnknown {
		return false
	}
	h.Of, h.Symbol, h.Form = RoleRate, r.Symbol, r.Form
	if r.Unit != nil && (r.Form == FormDirect) && h.Unit == nil {
		h.Unit, h.UnitText, h.Shift = r.Unit, r.UnitText, r.Shift
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
