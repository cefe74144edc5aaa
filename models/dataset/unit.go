package dataset

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Dimension holds the exponents of the base quantities of a unit. Molecules
// count as 1; their exponent is kept to tell cm³ molecule⁻¹ s⁻¹ apart.
type Dimension struct {
	Length, Mass, Time, Temperature, Amount, Molecule float64
}

func (d Dimension) add(e Dimension, times float64) Dimension {
	return Dimension{
		d.Length + times*e.Length, d.Mass + times*e.Mass, d.Time + times*e.Time,
		d.Temperature + times*e.Temperature, d.Amount + times*e.Amount, d.Molecule + times*e.Molecule,
	}
}

// physical is the dimension without the count of molecules.
func (d Dimension) physical() Dimension {
	d.Molecule = 0
	return d
}

// Unit is a unit that was understood.
type Unit struct {
	Text  string  // in one spelling, without the power of ten: L mol^-1 s^-1
	Scale float64 // one unit in m, kg, s, K, mol, without the power of ten
	Exp10 int     // power of ten before the unit: -12 in 10^-12 cm^3 s^-1
	Zero  float64 // temperature scales: K at 0 of the scale; 0 for all other units
	Dim   Dimension
	// LostSuperscript says that a power such as 10-12 or 105 was read as 10^-12
	// or 10^5.
	LostSuperscript bool
}

// Base units and constants in SI units. Exact: SI Brochure 2019 (eV, N_A), calorie
// 4.184 J, 1 atm = 101325 Pa, Torr = atm/760, Julian year 365.25 d.
const (
	avogadro   = 6.02214076e23
	boltzmann  = 1.380649e-23
	gasMolar   = boltzmann * avogadro // J mol⁻¹ K⁻¹, exact 8.31446261815324
	electronV  = 1.602176634e-19
	calorie    = 4.184
	atmosphere = 101325
	minute     = 60
	hour       = 3600
	day        = 86400
	year       = 365.25 * day
	zeroC      = 273.15
	zeroF      = 459.67 * 5 / 9
)

type baseUnit struct {
	name  string
	scale float64
	dim   Dimension
	zero  float64
}

var (
	dimLength   = Dimension{Length: 1}
	dimVolume   = Dimension{Length: 3}
	dimMass     = Dimension{Mass: 1}
	dimTime     = Dimension{Time: 1}
	dimTemp     = Dimension{Temperature: 1}
	dimAmount   = Dimension{Amount: 1}
	dimConc     = Dimension{Amount: 1, Length: -3}
	dimEnergy   = Dimension{Mass: 1, Length: 2, Time: -2}
	dimPressure = Dimension{Mass: 1, Length: -1, Time: -2}
	dimMolecule = Dimension{Molecule: 1}
)

// baseUnits holds every unit symbol (case-sensitive) that is understood.
var baseUnits = func() map[string]baseUnit {
	m := map[string]baseUnit{}
	prefixed := func(name string, scale float64, d Dimension, prefixes string) {
		m[name] = baseUnit{name, scale, d, 0}
		value := map[rune]float64{'k': 1e3, 'M': 1e6, 'h': 1e2, 'd': 1e-1, 'c': 1e-2, 'm': 1e-3, 'µ': 1e-6, 'n': 1e-9, 'p': 1e-12, 'f': 1e-15}
		for _, p := range prefixes {
			v := value[p]
			s := scale * v
			if v < 1 { // a quotient by an exact number rounds once
				s = scale / math.Round(1/v)
			}
			m[string(p)+name] = baseUnit{string(p) + name, s, d, 0}
		}
	}
	prefixed("m", 1, dimLength, "kdcmµnp")
	prefixed("g", 1e-3, dimMass, "mµ")
	m["kg"] = baseUnit{"kg", 1, dimMass, 0}
	prefixed("s", 1, dimTime, "kmµnpf")
	prefixed("K", 1, dimTemp, "km")
	prefixed("mol", 1, dimAmount, "kmµnp")
	prefixed("L", 1e-3, dimVolume, "dcmµn")
	prefixed("M", 1e3, dimConc, "mµnp")
	prefixed("J", 1, dimEnergy, "km")
	prefixed("eV", electronV, dimEnergy, "km")
	prefixed("cal", calorie, dimEnergy, "k")
	prefixed("Pa", 1, dimPressure, "kMh")
	prefixed("bar", 1e5, dimPressure, "m")
	prefixed("Torr", atmosphere/760.0, dimPressure, "m")
	m["Å"] = baseUnit{"Å", 1e-10, dimLength, 0}
	m["atm"] = baseUnit{"atm", atmosphere, dimPressure, 0}
	m["mmHg"] = baseUnit{"mmHg", 133.322387415, dimPressure, 0}
	m["min"] = baseUnit{"min", minute, dimTime, 0}
	m["h"] = baseUnit{"h", hour, dimTime, 0}
	m["d"] = baseUnit{"d", day, dimTime, 0}
	m["yr"] = baseUnit{"yr", year, dimTime, 0}
	m["week"] = baseUnit{"week", 7 * day, dimTime, 0}
	m["molecule"] = baseUnit{"molecule", 1, dimMolecule, 0}
	m["°C"] = baseUnit{"°C", 1, dimTemp, zeroC}
	m["°F"] = baseUnit{"°F", 5.0 / 9, dimTemp, zeroF}

	for alias, name := range map[string]string{
		"a": "yr", "y": "yr", "hr": "h", "hrs": "h", "sec": "s", "secs": "s", "mins": "min",
		"l": "L", "ml": "mL", "dl": "dL", "µl": "µL", "us": "µs", "um": "µm", "uM": "µM", "uL": "µL", "umol": "µmol",
		"°K": "K", "degC": "°C", "degF": "°F", "degK": "K", "deg.C": "°C",
	} {
		m[alias] = m[name]
	}
	cc := baseUnit{"cm^3", 1e-6, dimVolume, 0}
	m["cc"], m["ccm"] = cc, cc
	return m
}()

// unitWords holds spelled-out units; words are not case-sensitive.
var unitWords = map[string]string{
	"second": "s", "seconds": "s", "minute": "min", "minutes": "min", "hour": "h", "hours": "h",
	"day": "d", "days": "d", "week": "week", "weeks": "week", "year": "yr", "years": "yr",
	"kelvin": "K", "celsius": "°C", "fahrenheit": "°F", "degc": "°C", "degf": "°F",
	"molecule": "molecule", "molecules": "molecule", "molec": "molecule", "molecs": "molecule", "mlc": "molecule",
	"particle": "molecule", "particles": "molecule", "atom": "molecule", "atoms": "molecule",
	"liter": "L", "litre": "L", "liters": "L", "litres": "L", "mole": "mol", "moles": "mol", "molar": "M",
	"torr": "Torr", "mmhg": "mmHg",
}

const (
	longestUnit   = 120 // bytes; nothing longer is a unit
	largestUnitEx = 12  // exponent of one unit
)

var errUnit = errors.New("not a unit that is understood")

// ParseUnit reads a unit whole: an optional power of ten, then units with
// exponents joined by spaces, dots or the solidus, brackets allowed. Of a/b c the
// last belongs below the line too, unless it has a negative exponent of its own.
func ParseUnit(text string) (Unit, error) {
	s := normalize(text)
	if len(s) > longestUnit {
		return Unit{}, errUnit
	}
	for _, r := range [][2]string{{"deg C", "°C"}, {"deg F", "°F"}, {"° C", "°C"}, {"° F", "°F"}, {"deg. C", "°C"}, {"degrees C", "°C"}, {"degrees Celsius", "°C"}} {
		s = strings.ReplaceAll(s, r[0], r[1])
	}
	switch s {
	case "C":
		s = "°C"
	case "F":
		s = "°F"
	case "%":
		return Unit{Text: "%", Scale: 0.01}, nil
	case "1":
		return Unit{Text: "1", Scale: 1}, nil
	}
	p := unitParser{s: s}
	u := Unit{Scale: 1}
	if e, lost, rest, ok := powerOfTen(s); ok {
		u.Exp10, u.LostSuperscript = e, lost
		p.s = strings.TrimLeft(rest, " ·×*")
		if p.s == "" {
			u.Text = "1"
			return u, nil
		}
	} else if rest, ok := strings.CutPrefix(s, "1"); ok {
		// 1/s: only before a solidus
		p.s = strings.TrimLeft(rest, " ")
		if !strings.HasPrefix(p.s, "/") {
			return Unit{}, errUnit
		}
	}
	terms, err := p.product(0)
	if err != nil {
		return Unit{}, err
	}
	if p.i != len(p.s) || len(terms) == 0 {
		return Unit{}, errUnit
	}
	var names []string
	for _, t := range terms {
		u.Scale *= power(t.base.scale, t.exp)
		u.Dim = u.Dim.add(t.base.dim, t.exp)
		names = append(names, t.String())
	}
	if !(u.Scale > 0) || math.IsInf(u.Scale, 0) {
		return Unit{}, errUnit
	}
	u.Text = strings.Join(names, " ")
	if len(u.Text) > longestUnit { // could not be read back
		return Unit{}, errUnit
	}
	if len(terms) == 1 && terms[0].exp == 1 {
		u.Zero = terms[0].base.zero
	}
	return u, nil
}

// power is x^e, by exact steps where e is an integer.
func power(x, e float64) float64 {
	n := int(math.Abs(e))
	if float64(n) != math.Abs(e) {
		return math.Pow(x, e)
	}
	if inv := math.Round(1 / x); x < 1 && 1/inv == x { // 0.01 has no exact double, 100 has
		x, e = inv, -e
	}
	p := 1.0
	for range n {
		p *= x
	}
	if e < 0 {
		return 1 / p
	}
	return p
}

type unitTerm struct {
	base baseUnit
	exp  float64
}

func (t unitTerm) String() string {
	name := t.base.name
	if t.exp == 1 {
		return name
	}
	return name + "^" + strconv.FormatFloat(t.exp, 'f', -1, 64)
}

type unitParser struct {
	s string
	i int
}

func (p *unitParser) peek() rune {
	if p.i >= len(p.s) {
		return 0
	}
	r, _ := utf8.DecodeRuneInString(p.s[p.i:])
	return r
}

func (p *unitParser) spaces() {
	for p.i < len(p.s) && p.s[p.i] == ' ' {
		p.i++
	}
}

// product reads units up to the end or a closing bracket.
func (p *unitParser) product(depth int) ([]unitTerm, error) {
	if depth > 4 {
		return nil, errUnit
	}
	var all []unitTerm
	below := false // after a solidus
	direct := false
	for {
		p.spaces()
		switch r := p.peek(); {
		case r == 0 || r == ')' || r == ']':
			if direct {
				return nil, errUnit // ends in a solidus
			}
			return all, nil
		case r == '/':
			if direct {
				return nil, errUnit
			}
			below, direct = true, true
			p.i++
			continue
		case r == '·' || r == '×' || r == '*' || r == '.':
			if direct || len(all) == 0 {
				return nil, errUnit
			}
			p.i += utf8.RuneLen(r)
			continue
		case strings.HasPrefix(p.s[p.i:], "per "):
			below, direct = true, true
			p.i += len("per ")
			continue
		}
		terms, exp, err := p.item(depth)
		if err != nil {
			return nil, err
		}
		if below && (direct || exp > 0) {
			exp = -exp
		}
		direct = false
		for _, t := range terms {
			t.exp *= exp
			if math.Abs(t.exp) > largestUnitEx || t.exp == 0 {
				return nil, errUnit
			}
			all = append(all, t)
		}
	}
}

// item reads one unit or bracket and its exponent.
func (p *unitParser) item(depth int) ([]unitTerm, float64, error) {
	var terms []unitTerm
	switch r := p.peek(); {
	case r == '(' || r == '[':
		p.i++
		inner, err := p.product(depth + 1)
		if err != nil {
			return nil, 0, err
		}
		if c := p.peek(); (r == '(' && c != ')') || (r == '[' && c != ']') || len(inner) == 0 {
			return nil, 0, errUnit
		}
		p.i++
		terms = inner
	default:
		start := p.i
		for p.i < len(p.s) {
			r, n := utf8.DecodeRuneInString(p.s[p.i:])
			if !unicode.IsLetter(r) && r != '°' {
				break
			}
			p.i += n
		}
		base, ok := lookUpUnit(p.s[start:p.i])
		if rest := p.s[p.i:]; len(rest) > 1 && rest[0] == '.' && (rest[1] == '^' || rest[1] == '-') {
			p.i++ // sec.^-1: the point of an abbreviation
		}
		if !ok {
			return nil, 0, errUnit
		}
		terms = []unitTerm{{base, 1}}
		if base.name == "cm^3" { // cc
			terms[0] = unitTerm{baseUnits["cm"], 3}
		}
	}
	exp, err := p.exponent()
	return terms, exp, err
}

// lookUpUnit finds a unit by its symbol or its word.
func lookUpUnit(name string) (baseUnit, bool) {
	if b, ok := baseUnits[name]; ok {
		return b, true
	}
	if len(name) < 3 {
		return baseUnit{}, false
	}
	if w, ok := unitWords[strings.ToLower(name)]; ok {
		return baseUnits[w], true
	}
	return baseUnit{}, false
}

// exponent reads ^-1, ^{-1}, ^(-1/2), -1 or 3; 1 where there is none.
func (p *unitParser) exponent() (float64, error) {
	start := p.i
	p.spaces()
	caret := p.peek() == '^'
	closing := byte(0)
	if caret {
		p.i++
		p.spaces()
		switch p.peek() {
		case '{':
			closing = '}'
			p.i++
		case '(':
			closing = ')'
			p.i++
		}
	} else if p.i > start && !(p.peek() == '-' && p.i+1 < len(p.s) && isDigit(p.s[p.i+1])) {
		return 1, nil // a space, then no "-1" as copied from a page
	}
	from := p.i
	if c := p.peek(); c == '-' || c == '+' {
		p.i++
	}
	digits := p.i
	for p.i < len(p.s) && (isDigit(p.s[p.i]) || p.s[p.i] == '.' && caret && p.i+1 < len(p.s) && isDigit(p.s[p.i+1])) {
		p.i++
	}
	if p.i == digits {
		if caret || p.i > from {
			return 0, errUnit
		}
		return 1, nil
	}
	v, err := strconv.ParseFloat(p.s[from:p.i], 64)
	if err != nil {
		return 0, errUnit
	}
	if closing != 0 {
		p.spaces()
		if p.peek() == '/' { // ^(-1/2)
			p.i++
			from = p.i
			for p.i < len(p.s) && isDigit(p.s[p.i]) {
				p.i++
			}
			d, err := strconv.ParseFloat(p.s[from:p.i], 64)
			if err != nil || d == 0 {
				return 0, errUnit
			}
			v /= d
			p.spaces()
		}
		if p.i >= len(p.s) || p.s[p.i] != closing {
			return 0, errUnit
		}
		p.i++
	}
	return v, nil
}

func isDigit(c byte) bool { return c >= '0' && c <= '9' }

// powerOfTen reads a power of ten at the start of s: 10^-12, 10^{-12}, 1e-12, 1000,
// and 10-12 or 105, whose superscript an export has lost. rest is what follows.
func powerOfTen(s string) (exp int, lost bool, rest string, ok bool) {
	digitsFrom := func(i int) int {
		for i < len(s) && isDigit(s[i]) {
			i++
		}
		return i
	}
	var num string
	switch {
	case strings.HasPrefix(s, "10^"):
		i := 3
		closing := byte(0)
		if i < len(s) && (s[i] == '{' || s[i] == '(') {
			closing = '}'
			if s[i] == '(' {
				closing = ')'
			}
			i++
		}
		from := i
		if i < len(s) && (s[i] == '-' || s[i] == '+') {
			i++
		}
		end := digitsFrom(i)
		if end == i {
			return 0, false, s, false
		}
		num, rest = s[from:end], s[end:]
		if closing != 0 {
			if rest == "" || rest[0] != closing {
				return 0, false, s, false
			}
			rest = rest[1:]
		}
	case strings.HasPrefix(s, "1e") || strings.HasPrefix(s, "1E"):
		i := 2
		if i < len(s) && (s[i] == '-' || s[i] == '+') {
			i++
		}
		end := digitsFrom(i)
		if end == i {
			return 0, false, s, false
		}
		num, rest = s[2:end], s[end:]
	case strings.HasPrefix(s, "10-") || strings.HasPrefix(s, "10+"):
		end := digitsFrom(3)
		if end == 3 {
			return 0, false, s, false
		}
		num, rest, lost = s[2:end], s[end:], true
	case strings.HasPrefix(s, "10"):
		end := digitsFrom(2)
		num, rest = s[2:end], s[end:]
		if strings.Trim(num, "0") == "" { // 10, 100, 1000 as they stand
			num = strconv.Itoa(len(num) + 1)
		} else {
			lost = true
		}
	default:
		return 0, false, s, false
	}
	e, err := strconv.Atoi(num)
	if err != nil || e > 99 || e < -99 || rest != "" && (rest[0] == '.' || rest[0] == ',') {
		return 0, false, s, false
	}
	return e, lost, rest, true
}

// rateUnit classifies a unit of rate constants. ok says that it holds time⁻¹ as a
// rate unit must; known that ln k + lnPerSecond is per second and per mol/L.
type rateUnit struct {
	known       bool
	lnPerSecond float64
	diffusion   bool
	perMolecule bool
}

func (u Unit) rate() (r rateUnit, ok bool) {
	d := u.Dim
	if u.perPressure() {
		return rateUnit{}, true
	}
	if d.Time != -1 || d.Temperature != 0 || d.Mass > 0 && d.Length != -3*d.Mass { // not Pa s
		return rateUnit{}, false
	}
	if d.Mass != 0 { // mol g^-1 s^-1
		return rateUnit{}, true
	}
	switch {
	case d.Length == 0 && d.Amount == 0 && d.Molecule == 0:
		return rateUnit{known: true, lnPerSecond: math.Log(u.Scale)}, true
	case d.Amount == 0 && d.Length == 2 && d.Molecule == 0:
		return rateUnit{known: true, lnPerSecond: math.Log(u.Scale), diffusion: true}, true
	case d.Amount != 0 && d.Length == -3*d.Amount && d.Molecule == 0:
		return rateUnit{known: true, lnPerSecond: math.Log(u.Scale) - d.Amount*math.Log(1000)}, true
	case d.Amount == 0 && d.Length != 0 && math.Mod(d.Length, 1.5) == 0 && (d.Molecule == 0 || d.Molecule == -d.Length/3):
		return rateUnit{known: true, lnPerSecond: math.Log(u.Scale) + d.Length/3*math.Log(1000*avogadro), perMolecule: true}, true
	}
	return rateUnit{}, true
}

// perPressure reports a rate unit such as Torr^-1 s^-1.
func (u Unit) perPressure() bool {
	m := u.Dim.Mass // exponent of pressure
	return m != 0 && u.Dim.Length == -m && u.Dim.Time == -2*m-1 && u.Dim.Amount == 0 && u.Dim.Temperature == 0
}

// counted is a unit in molecules instead of mol: its scale, and its dimension without
// either. N_A is exact (SI Brochure 2019).
func (u Unit) counted() (scale float64, d Dimension) {
	d = u.Dim.physical()
	d.Amount = 0
	return u.Scale * math.Pow(avogadro, u.Dim.Amount), d
}

// byNumber reports whether two units are those of one rate constant, per mol/L or its
// like and per molecule in a volume.
func byNumber(u, v Unit) bool {
	a, _ := u.rate()
	b, _ := v.rate()
	_, du := u.counted()
	_, dv := v.counted()
	return a.known && b.known && a.perMolecule != b.perMolecule && du == dv
}

// convertTo returns the factor that turns numbers in u into numbers in v.
func (u Unit) convertTo(v Unit) (float64, error) {
	if byNumber(u, v) {
		a, _ := u.counted()
		b, _ := v.counted()
		return a / b, nil
	}
	if u.Dim.physical() != v.Dim.physical() {
		return 0, fmt.Errorf("%s is not of the kind of %s", u.Text, v.Text)
	}
	return u.Scale / v.Scale, nil
}
