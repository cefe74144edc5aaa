package models

import "math"

// Frame says where and in which units a form is read.
type Frame struct {
	// TRef is the reference temperature of the canonical parameters, in K.
	TRef float64
	// TForm is the reference temperature T_0 at which a form states its own
	// parameters, in K: ΔH‡(T_0), ΔS‡(T_0), or the T_ref of (T/T_ref)^n.
	TForm float64
	// LnPerSecond is what must be added to ln k in the data's unit to give
	// ln(k/s^-1) at the standard concentration: -ln 60 for min^-1. Only forms
	// with NeedsTimeUnit read it.
	LnPerSecond float64
}

// Form is one physical parametrisation of a curve.
type Form struct {
	Name    string
	Formula string
	Source  string
	Params  []Param
	// NeedsTimeUnit marks forms whose entropy needs the time unit and the
	// standard state of k: they are withheld where the unit is not understood.
	NeedsTimeUnit bool
	// AtTForm marks forms whose parameters are stated at Frame.TForm.
	AtTForm bool
	// FromCurve turns canonical parameters p into the form's q and, where jac is
	// not nil, fills the len(q) x len(p) matrix dq/dp in row-major order. Wrong
	// lengths are a caller's bug and panic, here as in ToCurve.
	FromCurve func(fr Frame, p, q, jac []float64)
	// ToCurve turns the form's parameters back.
	ToCurve func(fr Frame, q, p []float64)
}

const kilo = 1000

// checkForm panics unless a form with nq parameters of a curve with np was called
// with slices of those lengths.
func checkForm(np, nq int, p, q []float64) {
	mustLen("parameters", len(p), np)
	mustLen("form parameters", len(q), nq)
}

// fill copies the rows of a form's Jacobian, where one is wanted.
func fill(jac []float64, rows ...float64) {
	if jac == nil {
		return
	}
	mustLen("Jacobian", len(jac), len(rows))
	copy(jac, rows)
}

// lnUniversal is ln of k_B T/h in s^-1, the universal frequency of
// transition-state theory.
func lnUniversal(t float64) float64 { return math.Log(Boltzmann / Planck * t) }

// expFactor fills the values and Jacobian of (ln A, E) for
// ln k = ln A + m ln(T/T_form) - E/RT, from a = ln k(T_ref) and E in J/mol.
func expFactor(fr Frame, m float64, p, q, jac []float64) {
	checkForm(2, 2, p, q)
	u := 1 / (GasConstant * fr.TRef)
	q[0] = p[0] + p[1]*u - m*logRatio(fr.TRef, fr.TForm)
	q[1] = p[1] / kilo
	fill(jac, 1, u, 0, 1./kilo)
}

func expFactorBack(fr Frame, m float64, q, p []float64) {
	checkForm(2, 2, p, q)
	p[1] = q[1] * kilo
	p[0] = q[0] - p[1]/(GasConstant*fr.TRef) + m*logRatio(fr.TRef, fr.TForm)
}

var arrhenius = Form{
	Name: "arrhenius", Formula: "k = A exp(-E/RT)",
	Source: "S. Arrhenius, Z. Phys. Chem. 4 (1889) 226",
	Params: []Param{
		{"ln_A", "ln of the pre-exponential factor", "k"},
		{"E", "activation energy", "kJ mol^-1"},
	},
	FromCurve: func(fr Frame, p, q, jac []float64) { expFactor(fr, 0, p, q, jac) },
	ToCurve:   func(fr Frame, q, p []float64) { expFactorBack(fr, 0, q, p) },
}

var collision = Form{
	Name: "collision", Formula: "k = A (T/T_ref)^(1/2) exp(-E/RT)",
	Source:  "M. Trautz, Z. Anorg. Allg. Chem. 96 (1916) 1; W. C. McC. Lewis, J. Chem. Soc. 113 (1918) 471",
	AtTForm: true,
	Params: []Param{
		{"ln_A", "ln of the pre-exponential factor at T_ref", "k"},
		{"E", "threshold energy", "kJ mol^-1"},
	},
	FromCurve: func(fr Frame, p, q, jac []float64) { expFactor(fr, 0.5, p, q, jac) },
	ToCurve:   func(fr Frame, q, p []float64) { expFactorBack(fr, 0.5, q, p) },
}

var eyring = Form{
	Name: "eyring", Formula: "k = (k_B T/h) exp(dS/R) exp(-dH/RT)",
	Source:        "H. Eyring, J. Chem. Phys. 3 (1935) 107",
	NeedsTimeUnit: true,
	Params: []Param{
		{"dH", "enthalpy of activation", "kJ mol^-1"},
		{"dS", "entropy of activation", "J mol^-1 K^-1"},
	},
	FromCurve: func(fr Frame, p, q, jac []float64) {
		checkForm(2, 2, p, q)
		q[0] = p[1] / kilo
		q[1] = GasConstant*(p[0]+fr.LnPerSecond-lnUniversal(fr.TRef)) + p[1]/fr.TRef
		fill(jac, 0, 1./kilo, GasConstant, 1/fr.TRef)
	},
	ToCurve: func(fr Frame, q, p []float64) {
		checkForm(2, 2, p, q)
		p[1] = q[0] * kilo
		p[0] = (q[1]-p[1]/fr.TRef)/GasConstant + lnUniversal(fr.TRef) - fr.LnPerSecond
	},
}

var modifiedArrhenius = Form{
	Name: "modified-arrhenius", Formula: "k = A (T/T_ref)^n exp(-E/RT)",
	Source:  "D. M. Kooij, Z. Phys. Chem. 12 (1893) 155; IUPAC Gold Book, modified Arrhenius equation",
	AtTForm: true,
	Params: []Param{
		{"ln_A", "ln of the pre-exponential factor at T_ref", "k"},
		{"n", "exponent of T", "1"},
		{"E", "energy in the exponential", "kJ mol^-1"},
	},
	// E = E_ref - nRT_ref; ln A = a + E/RT_ref - n ln(T_ref/T_form)
	FromCurve: func(fr Frame, p, q, jac []float64) {
		checkForm(3, 3, p, q)
		u := 1 / (GasConstant * fr.TRef)
		l := logRatio(fr.TRef, fr.TForm)
		q[0] = p[0] + p[1]*u - p[2]*(1+l)
		q[1] = p[2]
		q[2] = (p[1] - p[2]*GasConstant*fr.TRef) / kilo
		fill(jac,
			1, u, -(1 + l),
			0, 0, 1,
			0, 1./kilo, -GasConstant*fr.TRef/kilo)
	},
	ToCurve: func(fr Frame, q, p []float64) {
		checkForm(3, 3, p, q)
		p[2] = q[1]
		p[1] = q[2]*kilo + q[1]*GasConstant*fr.TRef
		p[0] = q[0] - p[1]/(GasConstant*fr.TRef) + p[2]*(1+logRatio(fr.TRef, fr.TForm))
	},
}

// The same curve as modified-arrhenius: n = 1 + ΔC_p‡/R and
// E_loc(T) = ΔH‡(T) + RT, ΔH‡(T) = ΔH‡(T_0) + ΔC_p‡ (T - T_0),
// ΔS‡(T) = ΔS‡(T_0) + ΔC_p‡ ln(T/T_0).
var eyringHeatCapacity = Form{
	Name:          "eyring-heat-capacity",
	Formula:       "k = (k_B T/h) exp(dS(T)/R - dH(T)/RT), dH and dS with constant dCp from T_ref",
	Source:        "H. Eyring, J. Chem. Phys. 3 (1935) 107; Kirchhoff's law for dH and dS",
	NeedsTimeUnit: true,
	AtTForm:       true,
	Params: []Param{
		{"dH", "enthalpy of activation at T_ref", "kJ mol^-1"},
		{"dS", "entropy of activation at T_ref", "J mol^-1 K^-1"},
		{"dCp", "heat capacity of activation", "J mol^-1 K^-1"},
	},
	FromCurve: func(fr Frame, p, q, jac []float64) {
		checkForm(3, 3, p, q)
		// ln k and E_loc moved from T_ref to T_form along the curve.
		u := (fr.TForm - fr.TRef) / (GasConstant * fr.TForm * fr.TRef)
		b := bend(fr.TRef, fr.TForm)
		d := GasConstant * (fr.TForm - fr.TRef)
		lnk := p[0] + p[1]*u + p[2]*b
		dh := p[1] + p[2]*d - GasConstant*fr.TForm
		q[0] = dh / kilo
		q[1] = GasConstant*(lnk+fr.LnPerSecond-lnUniversal(fr.TForm)) + dh/fr.TForm
		q[2] = GasConstant * (p[2] - 1)
		fill(jac,
			0, 1./kilo, d/kilo,
			GasConstant, GasConstant*u+1/fr.TForm, GasConstant*b+d/fr.TForm,
			0, 0, GasConstant)
	},
	ToCurve: func(fr Frame, q, p []float64) {
		checkForm(3, 3, p, q)
		p[2] = 1 + q[2]/GasConstant
		dh := q[0] * kilo
		p[1] = dh + GasConstant*fr.TForm - p[2]*GasConstant*(fr.TForm-fr.TRef)
		lnk := (q[1]-dh/fr.TForm)/GasConstant + lnUniversal(fr.TForm) - fr.LnPerSecond
		u := (fr.TForm - fr.TRef) / (GasConstant * fr.TForm * fr.TRef)
		p[0] = lnk - p[1]*u - p[2]*bend(fr.TRef, fr.TForm)
	},
}

var parallelBarriers = Form{
	Name: "parallel-barriers", Formula: "k = A1 exp(-E1/RT) + A2 exp(-E2/RT)",
	Source: "K. J. Laidler, Chemical Kinetics, 3rd ed. (1987), parallel reactions; common practice",
	Params: []Param{
		{"ln_A1", "ln of the pre-exponential factor of the path with the lower barrier", "k"},
		{"E1", "activation energy of the path with the lower barrier", "kJ mol^-1"},
		{"ln_A2", "ln of the pre-exponential factor of the path with the higher barrier", "k"},
		{"E2", "activation energy of the path with the higher barrier", "kJ mol^-1"},
		{"T_x", "crossover temperature, where both paths are equally fast", "K"},
	},
	// k1 = k2 where 1/T_x = 1/T_ref + R (a2 - a1)/(E2 - E1). Where E2 = E1, or
	// where that is not the reciprocal of a temperature, there is no crossover:
	// T_x and its derivatives are NaN.
	FromCurve: func(fr Frame, p, q, jac []float64) {
		checkForm(4, 5, p, q)
		u := 1 / (GasConstant * fr.TRef)
		q[0], q[1] = p[0]+p[1]*u, p[1]/kilo
		q[2], q[3] = p[2]+p[3]*u, p[3]/kilo
		da, de := p[2]-p[0], p[3]-p[1]
		tx := 1 / (1/fr.TRef + GasConstant*da/de)
		if !(tx > 0) || math.IsInf(tx, 1) {
			tx = math.NaN()
		}
		q[4] = tx
		g := -tx * tx * GasConstant / de // dT_x/dda
		fill(jac,
			1, u, 0, 0,
			0, 1./kilo, 0, 0,
			0, 0, 1, u,
			0, 0, 0, 1./kilo,
			-g, g*da/de, g, -g*da/de)
	},
	// T_x follows from the rest and is not read.
	ToCurve: func(fr Frame, q, p []float64) {
		checkForm(4, 5, p, q)
		u := 1 / (GasConstant * fr.TRef)
		p[1], p[3] = q[1]*kilo, q[3]*kilo
		p[0], p[2] = q[0]-p[1]*u, q[2]-p[3]*u
		lowerFirst(p)
	},
}
