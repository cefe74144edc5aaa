package models

import "math"

// DriftingHeatCapacity is a transition state whose heat capacity of activation is
// linear in T. Canonical parameters: a = ln k(T_ref), E_ref = E_loc(T_ref) in J/mol,
// n and its drift m = dn/d(ln T) at T_ref, with
//
//	E_loc(T) = E_ref + nR(T - T_ref) + mR(T - T_ref)²/(2 T_ref).
//
// Integrating d ln k/dT = E_loc/(RT²) gives, with r = ln(T/T_ref),
//
//	ln k = a - E_ref x + n (e^-r - 1 + r) + m (sinh r - r),
//
// the curve power-prefactor and one column more.
type DriftingHeatCapacity struct{}

var (
	_ Basis    = DriftingHeatCapacity{}
	_ Written  = DriftingHeatCapacity{}
	_ Profiled = DriftingHeatCapacity{}
	_ Claimed  = DriftingHeatCapacity{}
)

// Info implements Curve.
func (DriftingHeatCapacity) Info() Info {
	return Info{
		Name: "drifting-heat-capacity", Family: "drifting-heat-capacity",
		Formula: "ln k = a + n ln T - b/T + c T",
		Summary: "a transition state whose heat capacity of activation is linear in T; k is not bounded as T rises, and the curve serves inside the measured range",
		Source:  "Kirchhoff's law for dH and dS; H. Eyring, J. Chem. Phys. 3 (1935) 107",
		Trend:   TrendEither,
		Params: []Param{
			{"ln_k_ref", "ln k at the reference temperature", "k"},
			{"E_ref", "local activation energy at the reference temperature", "J/mol"},
			{"n", "exponent of T at the reference temperature", "1"},
			{"m", "drift of the exponent, dn/d(ln T), at the reference temperature", "1"},
		},
	}
}

// sinhLess returns sinh r - r for r = ln(t/tRef), to full relative precision.
func sinhLess(tRef, t float64) float64 {
	r := logRatio(t, tRef)
	if math.Abs(r) < 1 {
		// r³/6 (1 + r²/20 (1 + r²/42 (1 + ...))): the difference would cancel.
		r2, s := r*r, 1.0
		for k := 19.; k >= 5; k -= 2 {
			s = 1 + s*r2/(k*(k-1))
		}
		return s * r * r2 / 6
	}
	return math.Sinh(r) - r
}

// Columns implements Basis.
func (c DriftingHeatCapacity) Columns(tRef float64, t, offset, x []float64) {
	mustLen("offset", len(offset), len(t))
	mustLen("design", len(x), 4*len(t))
	clear(offset)
	c.columns(tRef, t, x)
}

func (DriftingHeatCapacity) columns(tRef float64, t, x []float64) {
	for i, ti := range t {
		x[4*i] = 1
		x[4*i+1] = (ti - tRef) / (GasConstant * ti * tRef)
		x[4*i+2] = bend(tRef, ti)
		x[4*i+3] = sinhLess(tRef, ti)
	}
}

// LnK implements Curve.
func (c DriftingHeatCapacity) LnK(tRef float64, t, p, f, jac []float64) {
	check(4, t, p, f, jac)
	for i, ti := range t {
		if f != nil {
			u := (ti - tRef) / (GasConstant * ti * tRef)
			f[i] = p[0] + p[1]*u + p[2]*bend(tRef, ti) + p[3]*sinhLess(tRef, ti)
		}
	}
	if jac != nil {
		c.columns(tRef, t, jac)
	}
}

// ELoc implements Curve.
func (DriftingHeatCapacity) ELoc(tRef float64, t, p, f, jac []float64) {
	check(4, t, p, f, jac)
	for i, ti := range t {
		d := GasConstant * (ti - tRef)
		h := d * (ti - tRef) / (2 * tRef)
		if f != nil {
			f[i] = p[1] + p[2]*d + p[3]*h
		}
		if jac != nil {
			jac[4*i], jac[4*i+1], jac[4*i+2], jac[4*i+3] = 0, 1, d, h
		}
	}
}

// Forms implements Curve.
func (DriftingHeatCapacity) Forms() []Form { return []Form{eyringDrifting} }

// ΔC_p‡(T) = ΔC_p‡(T_0) + C (T - T_0), and so ΔH‡(T) = ΔH‡(T_0) + ΔC_p‡(T_0) τ + C τ²/2
// with τ = T - T_0, ΔS‡(T) = ΔS‡(T_0) + (ΔC_p‡(T_0) - C T_0) ln(T/T_0) + C τ;
// E_loc(T) = ΔH‡(T) + RT.
var eyringDrifting = Form{
	Name:          "eyring-drifting-heat-capacity",
	Formula:       "k = (k_B T/h) exp(dS(T)/R - dH(T)/RT), dH and dS with dCp(T) = dCp + dCp_dT (T - T_ref)",
	Source:        "H. Eyring, J. Chem. Phys. 3 (1935) 107; Kirchhoff's law for dH and dS",
	NeedsTimeUnit: true,
	AtTForm:       true,
	Params: []Param{
		{"dH", "enthalpy of activation at T_ref", "kJ mol^-1"},
		{"dS", "entropy of activation at T_ref", "J mol^-1 K^-1"},
		{"dCp", "heat capacity of activation at T_ref", "J mol^-1 K^-1"},
		{"dCp_dT", "change of the heat capacity of activation with T", "J mol^-1 K^-2"},
	},
	FromCurve: func(fr Frame, p, q, jac []float64) {
		checkForm(4, 4, p, q)
		u := (fr.TForm - fr.TRef) / (GasConstant * fr.TForm * fr.TRef)
		b, s := bend(fr.TRef, fr.TForm), sinhLess(fr.TRef, fr.TForm)
		d := GasConstant * (fr.TForm - fr.TRef)
		g := (fr.TForm - fr.TRef) / fr.TRef
		lnk := p[0] + p[1]*u + p[2]*b + p[3]*s
		dh := p[1] + p[2]*d + p[3]*d*g/2 - GasConstant*fr.TForm
		q[0] = dh / kilo
		q[1] = GasConstant*(lnk+fr.LnPerSecond-lnUniversal(fr.TForm)) + dh/fr.TForm
		q[2] = GasConstant * (p[2] + p[3]*g - 1)
		q[3] = GasConstant * p[3] / fr.TRef
		fill(jac,
			0, 1./kilo, d/kilo, d*g/2/kilo,
			GasConstant, GasConstant*u+1/fr.TForm, GasConstant*b+d/fr.TForm, GasConstant*s+d*g/2/fr.TForm,
			0, 0, GasConstant, GasConstant*g,
			0, 0, 0, GasConstant/fr.TRef)
	},
	ToCurve: func(fr Frame, q, p []float64) {
		checkForm(4, 4, p, q)
		d := GasConstant * (fr.TForm - fr.TRef)
		g := (fr.TForm - fr.TRef) / fr.TRef
		p[3] = q[3] * fr.TRef / GasConstant
		p[2] = q[2]/GasConstant + 1 - p[3]*g
		dh := q[0] * kilo
		p[1] = dh + GasConstant*fr.TForm - p[2]*d - p[3]*d*g/2
		lnk := (q[1]-dh/fr.TForm)/GasConstant + lnUniversal(fr.TForm) - fr.LnPerSecond
		u := (fr.TForm - fr.TRef) / (GasConstant * fr.TForm * fr.TRef)
		p[0] = lnk - p[1]*u - p[2]*bend(fr.TRef, fr.TForm) - p[3]*sinhLess(fr.TRef, fr.TForm)
	},
}

// Write implements Written: e^-r = T_ref/T and sinh r = (T/T_ref - T_ref/T)/2.
func (DriftingHeatCapacity) Write(w Writer, tRef float64, p []float64) string {
	n := p[2] - p[3]
	lnA := p[0] + p[1]/(GasConstant*tRef) - p[2] - n*math.Log(tRef/w.T0)
	b := p[1]/GasConstant - (p[2]-p[3]/2)*tRef
	number := w.Number
	w.Number = func(x, slope float64) string { return number(x, 4./3*slope) } // four share what is allowed
	return "exp(" + w.Number(lnA, 1) + w.power(n, false) + w.overT(b) + signed(w.Number(p[3]/(2*tRef), w.TMax)) + " T/K)"
}

// Profiled implements Profiled.
func (DriftingHeatCapacity) Profiled() map[string]string { return nil }

// Claims implements Claimed.
func (DriftingHeatCapacity) Claims() Claims {
	return Claims{
		P:       [][]float64{{-3, 60e3, 2.3, 0}, {-3, 60e3, 2.3, 1.5}, {-30, 15e3, -7, -4}, {5, 100e3, 40, 0.3}, {1, 55e3, -26, 80}},
		Extreme: [][]float64{{-700, 1e6, 300, 900}, {700, -1e6, -300, -900}, {0, 0, 0, 0}},
		Limit: func(tRef float64, p []float64) (lnA, exponent float64) {
			if p[3] != 0 {
				return math.NaN(), math.NaN()
			}
			return p[0] + p[1]/(GasConstant*tRef) - p[2], p[2]
		},
		Physical: map[string]func(Frame, []float64, float64) float64{
			"eyring-drifting-heat-capacity": func(fr Frame, q []float64, t float64) float64 {
				// ΔC_p‡ = α + βT: ΔH‡ = ΔH‡(T_0) + α(T - T_0) + β(T² - T_0²)/2, and
				// ΔS‡ = ΔS‡(T_0) + α ln(T/T_0) + β(T - T_0).
				t0, beta := fr.TForm, q[3]
				alpha := q[2] - beta*t0
				dH := kilo*q[0] + alpha*(t-t0) + beta*(t*t-t0*t0)/2
				dS := q[1] + alpha*math.Log(t/t0) + beta*(t-t0)
				return lnUniversal(t) + dS/GasConstant - dH/(GasConstant*t) - fr.LnPerSecond
			},
		},
		Relations: []Relation{
			{"E_loc(T_ref) = ΔH‡(T_ref) + RT_ref", func(fr Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				return eLoc(fr.TForm), kilo*form("eyring-drifting-heat-capacity", "dH") + GasConstant*fr.TForm, 1e6
			}},
			{"dE_loc/dT = ΔC_p‡ + R at T_ref", func(fr Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				// E_loc is a parabola in T: the central difference is exact.
				return (eLoc(fr.TForm+50) - eLoc(fr.TForm-50)) / 100, form("eyring-drifting-heat-capacity", "dCp") + GasConstant, 1e5
			}},
		},
	}
}
