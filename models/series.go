package models

import "math"

// Series is ln k = -ln(1/k1 + 1/k2) with ln k_i = a_i - E_i x, x = (1/T - 1/T_ref)/R:
// two steps one after the other, each with its own constant barrier. Canonical
// parameters: a1, E1, a2, E2 with a_i = ln k_i(T_ref), E_i in J/mol, E1 < E2.
//
// A catalyst that is reversibly inactivated by heat has the same curve:
// k_Arr/(1 + K), K = exp(-(ΔH_d/R)(1/T - 1/T_half)), is 1/(1/k_Arr + K/k_Arr), whose
// second step k_Arr/K has the barrier E - ΔH_d. It is therefore a form here, not a
// rival.
type Series struct{}

var (
	_ Shaped   = Series{}
	_ Written  = Series{}
	_ Profiled = Series{}
	_ ReadAs   = Series{}
	_ Claimed  = Series{}
)

// Info implements Curve.
func (Series) Info() Info {
	return Info{
		Name: "series", Family: "series",
		Formula: "ln k = -ln(exp(-a1 + b1/T) + exp(-a2 + b2/T))",
		Summary: "two steps one after the other, each with a constant barrier, or one barrier and a reversible inactivation at high T; the local activation energy can only fall with T",
		Source:  "K. J. Laidler, Chemical Kinetics, 3rd ed. (1987), consecutive reactions; common practice",
		Trend:   TrendFalls,
		Params: []Param{
			{"ln_k1_ref", "ln k of the step with the lower barrier at the reference temperature", "k"},
			{"E1", "activation energy of the step with the lower barrier", "J/mol"},
			{"ln_k2_ref", "ln k of the step with the higher barrier at the reference temperature", "k"},
			{"E2", "activation energy of the step with the higher barrier", "J/mol"},
		},
	}
}

// LnK implements Curve.
func (Series) LnK(tRef float64, t, p, f, jac []float64) {
	check(4, t, p, f, jac)
	for i, ti := range t {
		u := (ti - tRef) / (GasConstant * ti * tRef)
		l1, l2 := p[0]+p[1]*u, p[2]+p[3]*u
		// The share of a step is its part of the whole time 1/k.
		v, w1, w2 := softplus(l2 - l1)
		if f != nil {
			f[i] = l2 - v
		}
		if jac != nil {
			jac[4*i], jac[4*i+1], jac[4*i+2], jac[4*i+3] = w1, w1*u, w2, w2*u
		}
	}
}

// ELoc implements Curve: the mean of E1 and E2 weighted by the share of each step in
// the time 1/k.
func (Series) ELoc(tRef float64, t, p, f, jac []float64) {
	check(4, t, p, f, jac)
	for i, ti := range t {
		u := (ti - tRef) / (GasConstant * ti * tRef)
		d := p[2] - p[0] + (p[3]-p[1])*u
		_, w1, w2 := softplus(d)
		if f != nil {
			f[i] = w1*p[1] + w2*p[3]
		}
		if jac != nil {
			s := w1 * w2 * (p[1] - p[3]) // dE_loc/dd
			jac[4*i], jac[4*i+1] = -s, w1-s*u
			jac[4*i+2], jac[4*i+3] = s, w2+s*u
		}
	}
}

// ShapeDim implements Shaped.
func (Series) ShapeDim() int { return 2 }

// Shape implements Shaped: g = -ln(1 + e^(c - d x)), q = (c, d), with the line that of
// the first step and c - d x = ln(k1/k2).
func (Series) Shape(x, q, g, dg, d2g []float64) {
	Parallel{}.Shape(x, q, g, dg, d2g)
	for _, v := range [][]float64{g, dg, d2g} {
		for i := range v {
			v[i] = -v[i]
		}
	}
}

// FromShape implements Shaped, with the lower barrier first.
func (Series) FromShape(a, e float64, q, p []float64) {
	mustLen("shape parameters", len(q), 2)
	mustLen("parameters", len(p), 4)
	p[0], p[1], p[2], p[3] = a, e, a-q[0], e-q[1]
	lowerFirst(p)
}

// ToShape implements Shaped.
func (Series) ToShape(p []float64) (a, e float64, q []float64) {
	mustLen("parameters", len(p), 4)
	return p[0], p[1], []float64{p[0] - p[2], p[1] - p[3]}
}

// Forms implements Curve.
func (Series) Forms() []Form { return []Form{seriesBarriers, reversibleInactivation} }

var seriesBarriers = Form{
	Name: "series-barriers", Formula: "1/k = 1/(A1 exp(-E1/RT)) + 1/(A2 exp(-E2/RT))",
	Source: "K. J. Laidler, Chemical Kinetics, 3rd ed. (1987), consecutive reactions; common practice",
	Params: []Param{
		{"ln_A1", "ln of the pre-exponential factor of the step with the lower barrier", "k"},
		{"E1", "activation energy of the step with the lower barrier", "kJ mol^-1"},
		{"ln_A2", "ln of the pre-exponential factor of the step with the higher barrier", "k"},
		{"E2", "activation energy of the step with the higher barrier", "kJ mol^-1"},
		{"T_x", "crossover temperature, where both steps are equally fast", "K"},
	},
	// Two lines and where they cross, as for paths side by side.
	FromCurve: parallelBarriers.FromCurve,
	ToCurve:   parallelBarriers.ToCurve,
}

// The same curve as series-barriers: the active catalyst is the step with the higher
// barrier, ΔH_d = E2 - E1, and half of it is active where the lines cross.
var reversibleInactivation = Form{
	Name:    "reversible-inactivation",
	Formula: "k = A exp(-E/RT)/(1 + exp(-(dH_d/R)(1/T - 1/T_half)))",
	Source:  "P. J. H. Sharpe, D. W. DeMichele, J. Theor. Biol. 64 (1977) 649",
	Params: []Param{
		{"ln_A", "ln of the pre-exponential factor of the active catalyst", "k"},
		{"E", "activation energy of the active catalyst", "kJ mol^-1"},
		{"dH_d", "enthalpy of inactivation", "kJ mol^-1"},
		{"T_half", "temperature at which half of the catalyst is active", "K"},
	},
	FromCurve: func(fr Frame, p, q, jac []float64) {
		checkForm(4, 4, p, q)
		var lines [5]float64
		var slopes [20]float64
		parallelBarriers.FromCurve(fr, p, lines[:], slopes[:])
		q[0], q[1], q[2], q[3] = lines[2], lines[3], (p[3]-p[1])/kilo, lines[4]
		fill(jac,
			slopes[8], slopes[9], slopes[10], slopes[11],
			slopes[12], slopes[13], slopes[14], slopes[15],
			0, -1./kilo, 0, 1./kilo,
			slopes[16], slopes[17], slopes[18], slopes[19])
	},
	// ln k2 - ln k1 = -(ΔH_d/R)(1/T - 1/T_half).
	ToCurve: func(fr Frame, q, p []float64) {
		checkForm(4, 4, p, q)
		dh := q[2] * kilo
		p[3] = q[1] * kilo
		p[2] = q[0] - p[3]/(GasConstant*fr.TRef)
		p[1] = p[3] - dh
		p[0] = p[2] + dh*(q[3]-fr.TRef)/(GasConstant*q[3]*fr.TRef)
		lowerFirst(p)
	},
}

// Write implements Written.
func (Series) Write(w Writer, tRef float64, p []float64) string {
	return "1/[1/(" + w.path(tRef, p[0], p[1]) + ") + 1/(" + w.path(tRef, p[2], p[3]) + ")]"
}

// Profiled implements Profiled: both steps, of which that with the higher barrier is the
// active catalyst of reversible-inactivation.
func (Series) Profiled() map[string]string {
	return map[string]string{"ln_A1": "ln_A1", "E1": "E1", "ln_A2": "ln_A2", "E2": "E2", "ln_A": "ln_A2", "E": "E2"}
}

// ReadAs implements ReadAs: with a negative barrier it is a catalyst that is inactivated,
// and no step has that barrier.
func (c Series) ReadAs(p []float64) (form int, meaning string) {
	if p[1] < 0 && p[3] > 0 {
		return 1, "E is that of the active catalyst, half of which is active at T_half"
	}
	return 0, ""
}

// Claims implements Claimed.
func (Series) Claims() Claims {
	return Claims{
		P:       [][]float64{{-3, 30e3, -2, 80e3}, {-30, 10e3, -33, 55e3}, {-30, -200e3, -29, 51e3}, {5, 50e3, 6, 200e3}},
		Extreme: [][]float64{{700, -1e6, -700, 1e6}, {-700, -1e6, 700, 1e6}, {0, 5e4, 0, 5e4}, {1, 5e4, 0, 5e4}, {0, 4e4, 40, 5e4}},
		Limit: func(tRef float64, p []float64) (lnA, exponent float64) {
			a1, a2 := p[0]+p[1]/(GasConstant*tRef), p[2]+p[3]/(GasConstant*tRef)
			high, low := math.Max(a1, a2), math.Min(a1, a2)
			return low - math.Log(1+math.Exp(low-high)), 0
		},
		Ascending: [][2]int{{1, 3}},
		Physical: map[string]func(Frame, []float64, float64) float64{
			"series-barriers": func(fr Frame, q []float64, t float64) float64 {
				l1, l2 := q[0]-kilo*q[1]/(GasConstant*t), q[2]-kilo*q[3]/(GasConstant*t)
				return -math.Log(math.Exp(-l1) + math.Exp(-l2))
			},
			"reversible-inactivation": func(fr Frame, q []float64, t float64) float64 {
				return q[0] - kilo*q[1]/(GasConstant*t) - math.Log(1+math.Exp(-kilo*q[2]/GasConstant*(1/t-1/q[3])))
			},
		},
		Undefined: []string{"T_x", "T_half"},
		Relations: []Relation{
			{"k1(T_x) = k2(T_x)", func(fr Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				step := func(lnA, e string) float64 {
					return form("series-barriers", lnA) - kilo*form("series-barriers", e)/(GasConstant*form("series-barriers", "T_x"))
				}
				return step("ln_A1", "E1"), step("ln_A2", "E2"), 1e3
			}},
			{"E_loc(T_x) = (E1 + E2)/2", func(fr Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				mean := 500 * (form("series-barriers", "E1") + form("series-barriers", "E2"))
				return eLoc(form("series-barriers", "T_x")), mean, 1e7
			}},
			{"T_half = T_x", func(fr Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				return form("reversible-inactivation", "T_half"), form("series-barriers", "T_x"), 1e3
			}},
			{"E_loc(T_half) = E - ΔH_d/2", func(fr Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				e, dh := form("reversible-inactivation", "E"), form("reversible-inactivation", "dH_d")
				return eLoc(form("reversible-inactivation", "T_half")), kilo*e - 500*dh, 1e7
			}},
		},
	}
}
