package dataset

import (
	"math"
	"strconv"
	"testing"

	"onebarrier/models/reference"
)

func itoa(i int) string     { return strconv.Itoa(i) }
func ftoa(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }

func TestUnits(t *testing.T) {
	// Scales from the SI Brochure (2019): min, h, d, L, eV, N_A exact; 1 atm =
	// 101325 Pa, Torr = atm/760, cal = 4.184 J; yr = 365.25 d (Julian year).
	for _, c := range []struct {
		in    string
		text  string
		scale float64
		exp   int
	}{
		{"s^-1", "s^-1", 1, 0},
		{"s-1", "s^-1", 1, 0},
		{"1/s", "s^-1", 1, 0},
		{"/s", "s^-1", 1, 0},
		{"per second", "s^-1", 1, 0},
		{"s⁻¹", "s^-1", 1, 0},
		{"s^{-1}", "s^-1", 1, 0},
		{"s^(-1)", "s^-1", 1, 0},
		{"s**-1", "s^-1", 1, 0},
		{"s -1", "s^-1", 1, 0},
		{"sec-1", "s^-1", 1, 0},
		{"sec.-1", "s^-1", 1, 0},
		{"sec.^-1", "s^-1", 1, 0},
		{"sec.⁻¹", "s^-1", 1, 0},
		{"1/sec.", "s^-1", 1, 0},
		{"L. mol.^-1 sec.^-1", "L mol^-1 s^-1", 1e-3, 0},
		{"ms^-1", "ms^-1", 1000, 0},
		{"µs^-1", "µs^-1", 1e6, 0},
		{"min^-1", "min^-1", 1.0 / 60, 0},
		{"hr-1", "h^-1", 1.0 / 3600, 0},
		{"day^-1", "d^-1", 1.0 / 86400, 0},
		{"1/yr", "yr^-1", 1.0 / 31557600, 0},
		{"L mol^-1 s^-1", "L mol^-1 s^-1", 1e-3, 0},
		{"L/(mol s)", "L mol^-1 s^-1", 1e-3, 0},
		{"L/mol s", "L mol^-1 s^-1", 1e-3, 0},
		{"L/mol/s", "L mol^-1 s^-1", 1e-3, 0},
		{"L/mol s^-1", "L mol^-1 s^-1", 1e-3, 0},
		{"L·mol⁻¹·s⁻¹", "L mol^-1 s^-1", 1e-3, 0},
		{"L.mol-1.s-1", "L mol^-1 s^-1", 1e-3, 0},
		{"L*mol^-1*s^-1", "L mol^-1 s^-1", 1e-3, 0},
		{"dm3 mol-1 s-1", "dm^3 mol^-1 s^-1", 1e-3, 0},
		{"dm³mol⁻¹s⁻¹", "dm^3 mol^-1 s^-1", 1e-3, 0},
		{"M-1s-1", "M^-1 s^-1", 1e-3, 0},
		{"1/(M s)", "M^-1 s^-1", 1e-3, 0},
		{"(mM)^-1 min^-1", "mM^-1 min^-1", 1.0 / 60, 0},
		{"mL mmol^-1 s^-1", "mL mmol^-1 s^-1", 1e-3, 0},
		{"m^3 mol^-1 s^-1", "m^3 mol^-1 s^-1", 1, 0},
		{"cm^3 molecule^-1 s^-1", "cm^3 molecule^-1 s^-1", 1e-6, 0},
		{"cm3 molec-1 s-1", "cm^3 molecule^-1 s^-1", 1e-6, 0},
		{"cm3/molecule/s", "cm^3 molecule^-1 s^-1", 1e-6, 0},
		{"cc molecule-1 s-1", "cm^3 molecule^-1 s^-1", 1e-6, 0},
		{"10^-12 cm^3 s^-1", "cm^3 s^-1", 1e-6, -12},
		{"10-12 cm3 s-1", "cm^3 s^-1", 1e-6, -12},
		{"1e-12 cm3 s-1", "cm^3 s^-1", 1e-6, -12},
		{"cm^6 molecule^-2 s^-1", "cm^6 molecule^-2 s^-1", 1e-12, 0},
		{"M^-1/2 s^-1", "", 0, 0}, // the exponent needs brackets
		{"M^(-1/2) s^-1", "M^-0.5 s^-1", 1 / math.Sqrt(1000), 0},
		{"m²/s", "m^2 s^-1", 1, 0},
		{"cm2/s", "cm^2 s^-1", 1e-4, 0},
		{"Torr^-1 s^-1", "Torr^-1 s^-1", 760.0 / 101325, 0},
		{"atm-1 s-1", "atm^-1 s^-1", 1.0 / 101325, 0},
		{"K", "K", 1, 0},
		{"°C", "°C", 1, 0},
		{"deg C", "°C", 1, 0},
		{"F", "°F", 5.0 / 9, 0},
		{"eV^-1", "eV^-1", 1 / 1.602176634e-19, 0},
		{"mol/kJ", "mol kJ^-1", 1e-3, 0},
		{"kcal/mol", "kcal mol^-1", 4184, 0},
		{"%", "%", 0.01, 0},
		{"1", "1", 1, 0},
		{"", "", 0, 0}, {"/", "", 0, 0}, {"s/", "", 0, 0}, {"s//s", "", 0, 0}, {"(s", "", 0, 0}, {"s)", "", 0, 0}, {"()", "", 0, 0}, {"s^", "", 0, 0},
		{"s^-", "", 0, 0}, {"s^0", "", 0, 0}, {"s^99", "", 0, 0}, {"foo", "", 0, 0}, {"S^-1", "", 0, 0}, {"k", "", 0, 0}, {"12", "", 0, 0}, {"2 s", "", 0, 0},
		{"L mol^-1 s^-1 (aq)", "", 0, 0}, {"m^12 m^12 m^12 nm^12 nm^12 nm^12 nm^12", "m^12 m^12 m^12 nm^12 nm^12 nm^12 nm^12", 0, 0},
	} {
		u, err := ParseUnit(c.in)
		if c.scale == 0 {
			if err == nil {
				t.Errorf("%q was read as %q", c.in, u.Text)
			}
			continue
		}
		if err != nil {
			t.Errorf("%q: %v", c.in, err)
			continue
		}
		if u.Text != c.text || u.Exp10 != c.exp || !reference.Agrees(u.Scale, c.scale, 1e-15) {
			t.Errorf("%q: got %q, %g, e%d; want %q, %g, e%d", c.in, u.Text, u.Scale, u.Exp10, c.text, c.scale, c.exp)
		}
		if again, err := ParseUnit(u.Text); err != nil || again.Text != u.Text || again.Dim != u.Dim || again.Scale != u.Scale {
			t.Errorf("%q: its own spelling %q is not read back", c.in, u.Text)
		}
	}
}

func TestRateUnits(t *testing.T) {
	// ln of the factor to s^-1 and mol/L, from the definitions: 1 cm^3
	// molecule^-1 s^-1 = 6.02214076e20 L mol^-1 s^-1.
	for _, c := range []struct {
		unit            string
		ok, known       bool
		ln              float64
		diff, molecular bool
	}{
		{"s^-1", true, true, 0, false, false},
		{"min^-1", true, true, -math.Log(60), false, false},
		{"h^-1", true, true, -math.Log(3600), false, false},
		{"L mol^-1 s^-1", true, true, 0, false, false},
		{"mM^-1 s^-1", true, true, math.Log(1000), false, false},
		{"m^3 mol^-1 s^-1", true, true, math.Log(1000), false, false},
		{"cm^3 mol^-1 s^-1", true, true, -math.Log(1000), false, false},
		{"L^2 mol^-2 s^-1", true, true, 0, false, false},
		{"mol L^-1 s^-1", true, true, 0, false, false},
		{"M^-0.5 min^-1", true, true, -math.Log(60), false, false},
		{"cm^3 molecule^-1 s^-1", true, true, math.Log(6.02214076e20), false, true},
		{"cm^3 s^-1", true, true, math.Log(6.02214076e20), false, true},
		{"cm^6 molecule^-2 s^-1", true, true, 2 * math.Log(6.02214076e20), false, true},
		{"m^2 s^-1", true, true, 0, true, false},
		{"cm^2/s", true, true, math.Log(1e-4), true, false},
		{"Torr^-1 s^-1", true, false, 0, false, false},
		{"bar^-2 s^-1", true, false, 0, false, false},
		{"mol g^-1 s^-1", true, false, 0, false, false},
		{"m s^-1", true, false, 0, false, false},
		{"cm^2 molecule^-1 s^-1", true, false, 0, false, false},
		{"s", false, false, 0, false, false},
		{"L mol^-1", false, false, 0, false, false},
		{"J mol^-1", false, false, 0, false, false},
		{"s^-2", false, false, 0, false, false},
		{"Pa s", false, false, 0, false, false},
		{"K s^-1", false, false, 0, false, false},
	} {
		u, err := ParseUnit(c.unit)
		if err != nil {
			t.Errorf("%s: %v", c.unit, err)
			continue
		}
		r, ok := u.rate()
		if ok != c.ok || r.known != c.known || r.diffusion != c.diff || r.perMolecule != c.molecular || !reference.Agrees(r.lnPerSecond, c.ln, 1e-14) {
			t.Errorf("%s: got %+v, %v; want %+v", c.unit, r, ok, c)
		}
	}
}

func TestPowerOfTen(t *testing.T) {
	for _, c := range []struct {
		in   string
		exp  int
		lost bool
		rest string
		ok   bool
	}{
		{"10^-12 cm", -12, false, " cm", true}, {"10^{3} K", 3, false, " K", true}, {"10^(3)", 3, false, "", true}, {"1000/T", 3, false, "/T", true},
		{"10 k", 1, false, " k", true}, {"100 k", 2, false, " k", true}, {"1e5 k", 5, false, " k", true}, {"1E-5", -5, false, "", true},
		{"103 K/T", 3, true, " K/T", true}, {"10-12", -12, true, "", true}, {"1012 k", 12, true, " k", true},
		{"1", 0, false, "1", false}, {"10^", 0, false, "10^", false}, {"10^{3", 0, false, "10^{3", false}, {"2", 0, false, "2", false}, {"10^999", 0, false, "10^999", false}, {"10.5", 0, false, "10.5", false},
	} {
		e, lost, rest, ok := powerOfTen(c.in)
		if ok != c.ok || ok && (e != c.exp || lost != c.lost || rest != c.rest) {
			t.Errorf("%q: got %d %v %q %v", c.in, e, lost, rest, ok)
		}
	}
}

func FuzzUnit(f *testing.F) {
	for _, s := range []string{"L mol^-1 s^-1", "cm³/(molecule s)", "10-12 cm3", "((((s))))", "s^(-1/2)", "/s/", "per per", "1/", "m^12 m^12", "°C", "%", "\u202es^-1", "s^-1\x00", "s\u207b\u207b\u00b9", "s^999999999999", "s^1e999", "10^400 s", "1e-400/s", "cm,3", "\ufeffs", "\xb5m", "\u212b", "\u2126", "\u33a5/s", "10^-5 10^-5 10^-5 10^-5 s", "m^0.3333333333", "s^(1/0)", "\u0660 s"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		u, err := ParseUnit(s)
		if err != nil {
			return
		}
		if !(u.Scale > 0) || math.IsInf(u.Scale, 0) {
			t.Errorf("%q: scale %g", s, u.Scale)
		}
		again, err := ParseUnit(u.Text)
		if err != nil || again.Dim != u.Dim || !reference.Agrees(again.Scale, u.Scale, 1e-13) {
			t.Errorf("%q: its own spelling %q is not read back: %v", s, u.Text, err)
		}
		u.rate()
	})
}
