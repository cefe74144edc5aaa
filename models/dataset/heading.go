package dataset

import (
	"fmt"
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
	Unit     *Unit   // nil if there is none, or it was not understood
	UnitText string  // as written, "" if none
	Shift    int     // the value is cell·10^Shift in the unit
	Divisor  Divisor // of a rate: what k was divided by; Unit is that of k

	// Of an uncertainty: the role of what it belongs to ("" if not said: the
	// nearest quantity to the left is meant), and how it was stated.
	Of         Role
	Kind       Kind
	Relative   bool
	Percent    bool
	Coverage   float64 // 0 if not stated
	Confidence float64 // of an interval, 0.95; 0 if not stated

	// Beside is how a ± in the cells of a rate constant was stated, as in
	// k (s-1) ± SD; nil if the heading does not say so.
	Beside *Heading

	// Of a rate constant or its uncertainty: which repeat it is, as in "run 1", or
	// that it is the mean of them; "" and false if the heading does not say so.
	Run     string
	Average bool

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
	for _, try := range []func(string) (Heading, bool){p.withLevel, p.marked, p.uncertainty, p.temperature, p.rate} {
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
	as := ParseHeading(role, assume)
	if as.Role == RoleKept {
		return as, fmt.Errorf("%q is not a role", role)
	}
	if as.Ambiguity != nil && as.Ambiguity.Key == "k" {
		as.Ambiguity = nil // a rate, and the user calls it the rate constant
	}
	h := ParseHeading(text, assume)
	if h.Role == as.Role && h.Of == as.Of && (h.Kind == as.Kind || as.Role != RoleUncertainty && as.Role != RoleTemperatureUncertainty) {
		if h.Role == RoleRate && h.Ambiguity != nil && h.Ambiguity.Key == "k" {
			h.Ambiguity = nil
		}
		if as.Role == RoleRate && as.Form != FormDirect && h.Form != as.Form {
			h.Form, h.Ambiguity, h.Assumed = as.Form, as.Ambiguity, as.Assumed
		}
		return h, nil
	}
	as.Text = h.Text
	symbol := h.Text
	// The unit is what stands where units stand.
	var from Heading
	s := normalize(text)
	if i := strings.IndexAny(s, "/([,"); i > 0 {
		_, unit := tail(s[i:])
		from.setUnit(unit)
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
				from.Unit, from.UnitText = u, u.Text
				symbol = s[:i]
				break
			}
		}
	}
	switch as.Role {
	case RoleUncertainty:
		if m := reLevel.FindStringSubmatch(s); m != nil && as.Kind == KindFactor && as.Coverage == 0 { // f (95 %)
			c, _ := strconv.ParseFloat(m[1], 64)
			as.Confidence = c / 100
		}
	case RoleRate:
		as.Symbol = symbol
	case RoleTemperature:
		// A unit in the heading settles what T alone leaves open; values never do.
		u := from.Unit
		switch {
		case u == nil:
			return as, nil
		case as.Form == FormThermalUnit && u.reciprocalEnergy():
			as.Ambiguity, as.Assumed = nil, nil
		case as.Form == FormReciprocal && len(as.Assumed) == 0 && u.Dim == Dimension{Temperature: -1}:
		case u.Dim == dimTemp && as.Form != FormThermalUnit && (as.Form != FormReciprocal || len(as.Assumed) > 0):
			as.Ambiguity, as.Assumed, as.Form, as.Shift = nil, nil, FormDirect, 0
		default:
			return as, nil
		}
	}
	as.take(from)
	return as, nil
}

// take takes over the unit of another heading, where it has one.
func (h *Heading) take(from Heading) {
	switch {
	case from.UnitText == "%" && (h.Role == RoleUncertainty || h.Role == RoleTemperatureUncertainty):
		h.setPercent()
	case from.UnitText != "" && (from.Unit != nil || h.Unit == nil):
		h.Unit, h.UnitText, h.Shift, h.Lost = from.Unit, from.UnitText, h.Shift+from.Shift, h.Lost || from.Lost
	}
}

// setPercent makes an uncertainty one in percent of its quantity.
func (h *Heading) setPercent() {
	if h.Percent {
		return
	}
	h.Relative, h.Percent = true, true
	h.Unit, h.UnitText = nil, "%"
	h.Shift -= 2
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
