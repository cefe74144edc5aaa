package models

import "math"

// FixedExponent is ln k = a + m ln(T/T_ref) - E x, x = (1/T - 1/T_ref)/R, with a
// fixed exponent m. Canonical parameters: a = ln k(T_ref), E in J/mol.
type FixedExponent struct {
	M    float64
	info Info
	form Form
	// physical is ln k from the parameters of the form, for Claims.
	physical func(fr Frame, q []float64, t float64) float64
}

var (
	_ Basis    = FixedExponent{}
	_ PowerLaw = FixedExponent{}
	_ Written  = FixedExponent{}
	_ Claimed  = FixedExponent{}
)

func fixedParams(symbol, name string) []Param {
	return []Param{
		{"ln_k_ref", "ln k at the reference temperature", "k"},
		{symbol, name, "J/mol"},
	}
}

// Straight returns the curve ln k = a - b/T (Arrhenius 1889).
func Straight() FixedExponent {
	return FixedExponent{0, Info{
		Name: "straight", Family: "fixed-exponent",
		Formula: "ln k = a - b/T",
		Summary: "one constant barrier and a prefactor that does not depend on T",
		Source:  "S. Arrhenius, Z. Phys. Chem. 4 (1889) 226",
		Params:  fixedParams("E", "activation energy"),
	}, arrhenius, func(_ Frame, q []float64, t float64) float64 {
		return q[0] - kilo*q[1]/(GasConstant*t)
	}}
}

// RootPrefactor returns ln k = a + 1/2 ln T - b/T (collision theory).
func RootPrefactor() FixedExponent {
	return FixedExponent{0.5, Info{
		Name: "root-prefactor", Family: "fixed-exponent",
		Formula: "ln k = a + 1/2 ln T - b/T",
		Summary: "one barrier with the T^1/2 prefactor of collision theory",
		Source:  "M. Trautz, Z. Anorg. Allg. Chem. 96 (1916) 1; W. C. McC. Lewis, J. Chem. Soc. 113 (1918) 471",
		Params:  fixedParams("E0", "threshold energy"),
	}, collision, func(fr Frame, q []float64, t float64) float64 {
		return q[0] + 0.5*math.Log(t/fr.TForm) - kilo*q[1]/(GasConstant*t)
	}}
}

// LinearPrefactor returns ln k = a + ln T - b/T (transition-state theory).
func LinearPrefactor() FixedExponent {
	return FixedExponent{1, Info{
		Name: "linear-prefactor", Family: "fixed-exponent",
		Formula: "ln k = a + ln T - b/T",
		Summary: "one barrier with the k_B T/h prefactor of transition-state theory",
		Source:  "H. Eyring, J. Chem. Phys. 3 (1935) 107",
		Params:  fixedParams("dH", "enthalpy of activation"),
	}, eyring, func(fr Frame, q []float64, t float64) float64 {
		return lnUniversal(t) + q[1]/GasConstant - kilo*q[0]/(GasConstant*t) - fr.LnPerSecond
	}}
}

// Info implements Curve.
func (c FixedExponent) Info() Info { return c.info }

// Columns implements Basis: offset m ln(T/T_ref), columns 1 and -x.
func (c FixedExponent) Columns(tRef float64, t, offset, x []float64) {
	mustLen("offset", len(offset), len(t))
	mustLen("design", len(x), 2*len(t))
	for i, ti := range t {
		offset[i] = c.M * logRatio(ti, tRef)
		x[2*i] = 1
		x[2*i+1] = (ti - tRef) / (GasConstant * ti * tRef)
	}
}

// LnK implements Curve.
func (c FixedExponent) LnK(tRef float64, t, p, f, jac []float64) {
	check(2, t, p, f, jac)
	for i, ti := range t {
		u := (ti - tRef) / (GasConstant * ti * tRef)
		if f != nil {
			f[i] = p[0] + p[1]*u
			if c.M != 0 {
				f[i] += c.M * logRatio(ti, tRef)
			}
		}
		if jac != nil {
			jac[2*i], jac[2*i+1] = 1, u
		}
	}
}

// ELoc implements Curve: E_loc = E + mRT.
func (c FixedExponent) ELoc(tRef float64, t, p, f, jac []float64) {
	check(2, t, p, f, jac)
	for i, ti := range t {
		if f != nil {
			f[i] = p[1] + c.M*GasConstant*ti
		}
		if jac != nil {
			jac[2*i], jac[2*i+1] = 0, 1
		}
	}
}

// Forms implements Curve.
func (c FixedExponent) Forms() []Form { return []Form{c.form} }

// check panics unless every slice of a call has the length it must have.
func check(np int, t, p, f, jac []float64) {
	mustLen("parameters", len(p), np)
	if f != nil {
		mustLen("values", len(f), len(t))
	}
	if jac != nil {
		mustLen("Jacobian", len(jac), np*len(t))
	}
}

// Exponent implements PowerLaw.
func (c FixedExponent) Exponent([]float64) (n float64, fitted bool) { return c.M, false }

// Write implements Written.
func (c FixedExponent) Write(w Writer, tRef float64, p []float64) string {
	return w.powerLaw(tRef, p[0], c.M, p[1], true)
}

// Claims implements Claimed.
func (c FixedExponent) Claims() Claims {
	return Claims{
		P:       [][]float64{{-3, 60e3}, {-28.5, 12e3}, {20, 250e3}, {1, -5e3}, {2, 0}},
		Extreme: [][]float64{{-700, 1e6}, {700, -1e6}, {0, 0}},
		Limit: func(tRef float64, p []float64) (lnA, exponent float64) {
			return p[0] + p[1]/(GasConstant*tRef), c.M
		},
		Physical: map[string]func(Frame, []float64, float64) float64{c.form.Name: c.physical},
	}
}
