package models

import "math"

// Deformed is k = A (1 - dE/RT)^(1/d), which is one Arrhenius barrier at d = 0.
// Canonical parameters: a = ln k(T_ref), E_ref = E_loc(T_ref) = E/(1 - dE/RT_ref) and
// δ = d E_ref in J/mol, in which, with x = (1/T - 1/T_ref)/R,
//
//	ln k = a + E_ref ln(1 - δx)/δ,  E_loc = E_ref/(1 - δx):
//
// 1/E_loc is a straight line in 1/T. There is no value where δx >= 1.
type Deformed struct{}

var (
	_ Seeded  = Deformed{}
	_ Written = Deformed{}
	_ Claimed = Deformed{}
)

// Info implements Curve.
func (Deformed) Info() Info {
	return Info{
		Name: "deformed", Family: "deformed",
		Formula: "ln k = a + (1/d) ln(1 - dE/(RT))",
		Summary: "the reciprocal of the local activation energy is linear in 1/T; d < 0 as tunnelling bends a plot, d > 0 as inactivation or a freezing liquid does",
		Source:  "V. Aquilanti, K. C. Mundim, M. Elango, S. Kleijn, T. Kasai, Chem. Phys. Lett. 498 (2010) 209",
		Trend:   TrendEither,
		Params: []Param{
			{"ln_k_ref", "ln k at the reference temperature", "k"},
			{"E_ref", "local activation energy at the reference temperature", "J/mol"},
			{"dE_ref", "deformation times the local activation energy at the reference temperature", "J/mol"},
		},
	}
}

// Bounds implements Seeded: 1 - dE/RT stays positive from T_min up to any T, by a
// hundredth of what it has at T_ref.
func (Deformed) Bounds(tRef, tMin, _ float64) (low, straight, high float64) {
	rt := 0.99 * GasConstant * tRef
	return -rt, 0, rt * tMin / math.Max(tRef-tMin, tMin/100)
}

// Seeds implements Seeded: the curve changes by equal steps with the logarithm of
// 1 - δx at T_min, and on the other side at T → ∞ and T_max.
func (c Deformed) Seeds(tRef, tMin, tMax float64) []float64 {
	low, _, high := c.Bounds(tRef, tMin, tMax)
	const side = 12
	seeds := make([]float64, 2*side+1)
	for i := range side {
		// 1 - 0.01^(j/side) runs from 0 to 0.99.
		f := -math.Expm1(float64(side-i) / side * math.Log(0.01))
		seeds[i], seeds[2*side-i] = low*f/0.99, high*f/0.99
	}
	seeds[0], seeds[2*side] = low, high
	return seeds
}

// logShare returns ln(1+v)/v and its derivative, accurate near v = 0; NaN where
// v <= -1.
func logShare(v float64) (l, dl float64) {
	if math.Abs(v) < 0.1 {
		// Σ (-v)^k/(k+1)
		const terms = 18
		for k := terms; k >= 1; k-- {
			dl = float64(k)/float64(k+1) - v*dl // -dl of the terms from k on, over (-v)^(k-1)
			l = 1/float64(k+1) - v*l
		}
		return 1 - v*l, -dl
	}
	if !(v > -1) {
		return math.NaN(), math.NaN()
	}
	ln := math.Log1p(v)
	return ln / v, (v/(1+v) - ln) / (v * v)
}

// LnK implements Curve.
func (Deformed) LnK(tRef float64, t, p, f, jac []float64) {
	check(3, t, p, f, jac)
	for i, ti := range t {
		u := (ti - tRef) / (GasConstant * ti * tRef) // -x
		l, dl := logShare(p[2] * u)
		if f != nil {
			f[i] = p[0] + p[1]*u*l
		}
		if jac != nil {
			jac[3*i], jac[3*i+1], jac[3*i+2] = 1, u*l, p[1]*u*u*dl
		}
	}
}

// ELoc implements Curve.
func (Deformed) ELoc(tRef float64, t, p, f, jac []float64) {
	check(3, t, p, f, jac)
	for i, ti := range t {
		u := (ti - tRef) / (GasConstant * ti * tRef)
		r := 1 / (1 + p[2]*u)
		if !(r > 0) {
			r = math.NaN()
		}
		if f != nil {
			f[i] = p[1] * r
		}
		if jac != nil {
			jac[3*i], jac[3*i+1], jac[3*i+2] = 0, r, -p[1]*u*r*r
		}
	}
}

// Forms implements Curve.
func (Deformed) Forms() []Form { return []Form{deformedArrhenius} }

var deformedArrhenius = Form{
	Name: "deformed-arrhenius", Formula: "k = A (1 - d E/RT)^(1/d)",
	Source: "V. Aquilanti, K. C. Mundim, M. Elango, S. Kleijn, T. Kasai, Chem. Phys. Lett. 498 (2010) 209",
	Params: []Param{
		{"ln_A", "ln of the pre-exponential factor", "k"},
		{"E", "activation energy as T goes to infinity", "kJ mol^-1"},
		{"d", "deformation; 0 is one constant barrier", "1"},
	},
	// Where E_ref = 0 there is no d: it and its derivatives are NaN.
	FromCurve: func(fr Frame, p, q, jac []float64) {
		checkForm(3, 3, p, q)
		u := 1 / (GasConstant * fr.TRef)
		l, dl := logShare(p[2] * u)
		c := 1 + p[2]*u
		q[0], q[1], q[2] = p[0]+p[1]*u*l, p[1]/c/kilo, p[2]/p[1]
		if p[1] == 0 {
			q[2] = math.NaN()
		}
		fill(jac,
			1, u*l, p[1]*u*u*dl,
			0, 1/c/kilo, -p[1]*u/(c*c)/kilo,
			0*q[2], -q[2]/p[1], 1/p[1]+0*q[2])
	},
	ToCurve: func(fr Frame, q, p []float64) {
		checkForm(3, 3, p, q)
		u := 1 / (GasConstant * fr.TRef)
		e := q[1] * kilo
		p[1] = e / (1 - q[2]*e*u)
		p[2] = q[2] * p[1]
		l, _ := logShare(p[2] * u)
		p[0] = q[0] - p[1]*u*l
	},
}

// Write implements Written: exp(ln A + (1/d) ln(1 - c/T)), c = dE/R. Where 1/d is so large
// that the logarithm would lose its digits, 1e-7 of ln k, the bend is no larger, and the straight
// line is written.
func (Deformed) Write(w Writer, tRef float64, p []float64) string {
	power := p[1] / p[2]
	if !(math.Abs(power) < 1e9) || power == 0 {
		return w.path(tRef, p[0], p[1])
	}
	c := p[2] / (1 + p[2]/(GasConstant*tRef)) / GasConstant
	gap := w.TMin - c
	l := math.Log1p(-c / w.TMin)
	return "exp(" + w.Number(p[0]-power*math.Log1p(-c/tRef), 1) +
		signed(w.Number(power, math.Abs(l))) + " ln(1" + signed(w.Number(-c, math.Abs(power)/gap+1/gap)) + " K/T))"
}

// Claims implements Claimed.
func (Deformed) Claims() Claims {
	return Claims{
		P:       [][]float64{{-3, 60e3, 6000}, {-30, 12e3, -600}, {20, 90e3, 1e-3}, {1, -15e3, 2000}, {2, 30e3, -2400}},
		Extreme: [][]float64{{-700, 1e6, 50}, {700, -1e6, -2000}, {0, 0, 0}, {0, 0, 9}, {3, 5e4, 0}},
		Limit: func(tRef float64, p []float64) (lnA, exponent float64) {
			return p[0] + p[1]/p[2]*math.Log1p(p[2]/(GasConstant*tRef)), 0
		},
		Physical: map[string]func(Frame, []float64, float64) float64{
			"deformed-arrhenius": func(fr Frame, q []float64, t float64) float64 {
				return q[0] + math.Log1p(-q[2]*kilo*q[1]/(GasConstant*t))/q[2]
			},
		},
		Undefined: []string{"d"},
		Relations: []Relation{
			{"1/E_loc = 1/E - d/RT", func(fr Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				const t = 321.
				return 1 / eLoc(t), 1/(kilo*form("deformed-arrhenius", "E")) - form("deformed-arrhenius", "d")/(GasConstant*t), 1e-2
			}},
		},
	}
}
