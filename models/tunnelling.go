package models

import (
	"math"

	"gonum.org/v1/gonum/unit/constant"
)

// Tunnelling is k = A e^(-E/RT) κ(u), u = hcν‡/(k_B T), κ a correction for tunnelling
// that depends on u² alone. Canonical parameters: a = ln k(T_ref),
// E_ref = E_loc(T_ref) in J/mol and s = u(T_ref)². With L(s) = ln κ, L' = dL/ds,
// z = T_ref/T - 1 and v = s(1+z)²,
//
//	ln k = a - E_ref z/(R T_ref) + L(v) - L(s) - 2 s L'(s) z,
//	E_loc = E_ref + 2 R T_ref (s L'(s) - s(1+z) L'(v)).
//
// s = 0 is the straight line.
type Tunnelling struct {
	most float64 // largest u at the coldest temperature
	// correction gives ln κ and its first two derivatives in u²; NaN where there is
	// no value.
	correction func(u2 float64) (l, d1, d2 float64)
	// kappa writes κ with u = c/T, c in K.
	kappa func(w Writer, c float64) string
	// physical gives ln κ and u dln κ/du by the textbook formula, and largest a u(300 K)²
	// near the bound, for Claims.
	physical func(u float64) (l, slope float64)
	largest  float64
	info     Info
	form     Form
}

var (
	_ Seeded  = Tunnelling{}
	_ Written = Tunnelling{}
	_ Claimed = Tunnelling{}
)

// TunnellingWigner returns the curve with κ = 1 + u²/24. With w = u²/24 its
// dE_loc/dT = 2R w (1 - w)/(1 + w)², which is largest, R/4, at w = 1/3: no wavenumber
// bends a plot more than a prefactor T^(1/4) does. The curve is held to u² <= 8, where
// κ = 4/3. Beyond it the same bend has a second wavenumber, E_loc in the end falls with T,
// and the first term of a series no longer serves.
func TunnellingWigner() Tunnelling {
	return Tunnelling{
		most: math.Sqrt(8), correction: wigner, kappa: writeWigner, largest: 5.5,
		physical: func(u float64) (l, slope float64) {
			return math.Log(1 + u*u/24), u * u / 12 / (1 + u*u/24)
		},
	}.named(Info{
		Name: "tunnelling-wigner", Family: "tunnelling-wigner",
		Formula: "ln k = a - b/T + ln(1 + c/T^2)",
		Summary: "one barrier and Wigner's correction for tunnelling through its top, for corrections up to a factor of 4/3, beyond which the formula does not serve; the local activation energy can only rise with T, no more than with a prefactor T^(1/4)",
		Source:  "E. Wigner, Z. Phys. Chem. B 19 (1932) 203",
	}, "wigner", "k = A exp(-E/RT) (1 + u^2/24), u = h c nu/(k_B T)")
}

// TunnellingBell returns the curve with κ = (u/2)/sin(u/2), u < 2π.
func TunnellingBell() Tunnelling {
	return Tunnelling{
		most: 0.99 * 2 * math.Pi, correction: bell, kappa: writeBell, largest: 16,
		physical: func(u float64) (l, slope float64) {
			return math.Log(u / 2 / math.Sin(u/2)), 1 - u/2/math.Tan(u/2)
		},
	}.named(Info{
		Name: "tunnelling-bell", Family: "tunnelling-bell",
		Formula: "ln k = a - b/T + ln((c/T)/sin(c/T))",
		Summary: "one barrier and Bell's correction for tunnelling through a parabola, u < 2π; the local activation energy can only rise with T",
		Source:  "R. P. Bell, The Tunnel Effect in Chemistry (1980)",
	}, "bell", "k = A exp(-E/RT) (u/2)/sin(u/2), u = h c nu/(k_B T)")
}

func (c Tunnelling) named(info Info, form, formula string) Tunnelling {
	info.Trend = TrendRises
	info.Params = []Param{
		{"ln_k_ref", "ln k at the reference temperature", "k"},
		{"E_ref", "local activation energy at the reference temperature", "J/mol"},
		{"u2_ref", "u^2, with u = h c nu/(k_B T) at the reference temperature", "1"},
	}
	c.info = info
	c.form = Form{
		Name: form, Formula: formula, Source: info.Source,
		Params: []Param{
			{"ln_A", "ln of the pre-exponential factor", "k"},
			{"E", "height of the barrier", "kJ mol^-1"},
			{"nu", "magnitude of the imaginary wavenumber at the top of the barrier", "cm^-1"},
		},
		FromCurve: c.fromCurve, ToCurve: c.toCurve,
	}
	return c
}

// wigner is ln(1 + v/24).
func wigner(v float64) (l, d1, d2 float64) {
	d1 = 1 / (24 + v)
	return math.Log1p(v / 24), d1, -d1 * d1
}

// cotSeries holds the coefficients of 1 - w cot w = Σ c_k w^(2k), k from 1 on
// (Abramowitz & Stegun 4.3.70).
var cotSeries = [...]float64{
	1. / 3, 1. / 45, 2. / 945, 1. / 4725, 2. / 93555, 1382. / 638512875, 4. / 18243225,
	3617. / 162820783125, 87734. / 38979295480125, 349222. / 1531329465290625,
}

// bell is -ln(sin(w)/w), w = √v/2; v may be slightly negative.
func bell(v float64) (l, d1, d2 float64) {
	y := v / 4
	if math.Abs(y) < 0.25 {
		// d1 = (1 - w cot w)/(8 w²), l its integral.
		for k := len(cotSeries) - 1; k >= 0; k-- {
			l = l*y + cotSeries[k]/float64(k+1)
			d1 = d1*y + cotSeries[k]
			if k > 0 {
				d2 = d2*y + cotSeries[k]*float64(k)
			}
		}
		return l * y / 2, d1 / 8, d2 / 32
	}
	w := math.Sqrt(y) // NaN where v is negative
	if !(w < math.Pi) {
		nan := math.NaN()
		return nan, nan, nan
	}
	sin, cos := math.Sincos(w)
	wcot := w * cos / sin
	return math.Log(w / sin), (1 - wcot) / (8 * y), (y/(sin*sin) + wcot - 2) / (64 * y * y)
}

// Info implements Curve.
func (c Tunnelling) Info() Info { return c.info }

// Bounds implements Seeded.
func (c Tunnelling) Bounds(tRef, tMin, _ float64) (low, straight, high float64) {
	u := c.most * tMin / tRef
	return 0, 0, u * u
}

// Seeds implements Seeded: u² at equal steps, closer together where κ grows without
// bound.
func (c Tunnelling) Seeds(tRef, tMin, tMax float64) []float64 {
	_, _, high := c.Bounds(tRef, tMin, tMax)
	const steps = 12
	seeds := make([]float64, steps+1)
	for i := range seeds {
		f := 1 - float64(i)/steps
		seeds[i] = high * (1 - f*f)
	}
	return seeds
}

// LnK implements Curve.
func (c Tunnelling) LnK(tRef float64, t, p, f, jac []float64) {
	check(3, t, p, f, jac)
	s := p[2]
	l0, d0, dd0 := c.correction(s)
	for i, ti := range t {
		z := (tRef - ti) / ti
		r := tRef / ti
		u := -z / (GasConstant * tRef)
		l, d, _ := c.correction(s * r * r)
		if f != nil {
			f[i] = p[0] + p[1]*u + (l - l0 - 2*s*d0*z)
		}
		if jac != nil {
			jac[3*i], jac[3*i+1] = 1, u
			jac[3*i+2] = r*r*d - d0 - 2*z*(d0+s*dd0)
		}
	}
}

// ELoc implements Curve.
func (c Tunnelling) ELoc(tRef float64, t, p, f, jac []float64) {
	check(3, t, p, f, jac)
	s := p[2]
	_, d0, dd0 := c.correction(s)
	for i, ti := range t {
		r := tRef / ti
		_, d, dd := c.correction(s * r * r)
		if f != nil {
			f[i] = p[1] + 2*GasConstant*tRef*s*(d0-r*d)
		}
		if jac != nil {
			jac[3*i], jac[3*i+1] = 0, 1
			jac[3*i+2] = 2 * GasConstant * tRef * (d0 + s*dd0 - r*(d+s*r*r*dd))
		}
	}
}

// Forms implements Curve.
func (c Tunnelling) Forms() []Form { return []Form{c.form} }

// perKelvin is k_B/(hc) in 1/(cm K).
const perKelvin = Boltzmann / (Planck * float64(constant.LightSpeedInVacuum) * 100)

// fromCurve: ln A = a + E/RT_ref - L(s), E = E_ref + 2RT_ref s L'(s). At s = 0 there is
// no tunnelling, and a wavenumber that has no standard error: it and its derivatives
// are NaN.
func (c Tunnelling) fromCurve(fr Frame, p, q, jac []float64) {
	checkForm(3, 3, p, q)
	s, rt := p[2], GasConstant*fr.TRef
	l, d, dd := c.correction(s)
	e := p[1] + 2*rt*s*d
	q[0], q[1] = p[0]+e/rt-l, e/kilo
	q[2] = math.NaN()
	if s > 0 {
		q[2] = math.Sqrt(s) * perKelvin * fr.TRef
	}
	fill(jac,
		1, 1/rt, d+2*s*dd,
		0, 1./kilo, 2*rt*(d+s*dd)/kilo,
		0*q[2], 0*q[2], q[2]/(2*s))
}

func (c Tunnelling) toCurve(fr Frame, q, p []float64) {
	checkForm(3, 3, p, q)
	u := q[2] / (perKelvin * fr.TRef)
	s, rt := u*u, GasConstant*fr.TRef
	l, d, _ := c.correction(s)
	e := q[1] * kilo
	p[0], p[1], p[2] = q[0]-e/rt+l, e-2*rt*s*d, s
}

// Write implements Written.
func (c Tunnelling) Write(w Writer, tRef float64, p []float64) string {
	s := p[2]
	l, d, _ := c.correction(s)
	a, e := p[0]-l, p[1]+2*GasConstant*tRef*s*d
	return w.path(tRef, a, e) + c.kappa(w, math.Sqrt(s)*tRef)
}

// The slopes of ln κ are largest at T_min; the term 1/T_min² stands for the curvature,
// where c is smaller than its last digit.

func writeWigner(w Writer, c float64) string {
	t2 := w.TMin * w.TMin
	text := w.Number(c, c/(12*t2)/(1+c*c/(24*t2))+1/t2)
	if vanishes(text) {
		return ""
	}
	return " [1 + (" + text + " K/T)^2/24]"
}

func writeBell(w Writer, c float64) string {
	half := c / 2 / w.TMin
	slope := half / 3 // of ln(w/sin w) near w = 0
	if half > 1e-3 {
		slope = 1/half - 1/math.Tan(half)
	}
	text := w.Number(c/2, slope/w.TMin+1/(w.TMin*w.TMin))
	if vanishes(text) {
		return ""
	}
	return " (" + text + " K/T)/sin(" + text + " K/T)"
}

// Claims implements Claimed.
func (c Tunnelling) Claims() Claims {
	const second = 100 * 299792458 * 6.62607015e-34 / 1.380649e-23 // h c/k_B in cm K, SI 2019
	form := c.form.Name
	return Claims{
		P:       [][]float64{{-3, 60e3, 0.5}, {-30, 12e3, 4}, {20, 90e3, c.largest}, {1, -5e3, 0.1}},
		Extreme: [][]float64{{-700, 1e6, 0.01}, {700, -1e6, 1e-12}, {0, 0, 1e-3}, {0, 0, 0}},
		Limit: func(tRef float64, p []float64) (lnA, exponent float64) {
			// E = E_loc + RT u dln κ/du
			l, slope := c.physical(math.Sqrt(p[2]))
			return p[0] + p[1]/(GasConstant*tRef) + slope - l, 0
		},
		Physical: map[string]func(Frame, []float64, float64) float64{
			form: func(fr Frame, q []float64, t float64) float64 {
				l, _ := c.physical(second * q[2] / t)
				return q[0] - kilo*q[1]/(GasConstant*t) + l
			},
		},
		Undefined: []string{"nu"},
		Relations: []Relation{
			{"E_loc = E - RT u dln κ/du", func(fr Frame, f func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				const t = 321.
				_, slope := c.physical(second * f(form, "nu") / t)
				return eLoc(t), kilo*f(form, "E") - GasConstant*t*slope, 1e8
			}},
		},
	}
}
