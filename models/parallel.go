package models

import "math"

// Parallel is ln k = ln(k1 + k2) with ln k_i = a_i - E_i x, x = (1/T - 1/T_ref)/R:
// two paths side by side, each with its own constant barrier. Canonical
// parameters: a1, E1, a2, E2 with a_i = ln k_i(T_ref), E_i in J/mol, E1 < E2.
type Parallel struct{}

var (
	_ Shaped   = Parallel{}
	_ Written  = Parallel{}
	_ Profiled = Parallel{}
	_ Claimed  = Parallel{}
)

// Info implements Curve.
func (Parallel) Info() Info {
	return Info{
		Name: "parallel", Family: "parallel",
		Formula: "ln k = ln(exp(a1 - b1/T) + exp(a2 - b2/T))",
		Summary: "two paths side by side, each with a constant barrier; the local activation energy can only rise with T",
		Source:  "K. J. Laidler, Chemical Kinetics, 3rd ed. (1987), parallel reactions; common practice",
		Trend:   TrendRises,
		Params: []Param{
			{"ln_k1_ref", "ln k of the path with the lower barrier at the reference temperature", "k"},
			{"E1", "activation energy of the path with the lower barrier", "J/mol"},
			{"ln_k2_ref", "ln k of the path with the higher barrier at the reference temperature", "k"},
			{"E2", "activation energy of the path with the higher barrier", "J/mol"},
		},
	}
}

// softplus returns ln(1 + e^s), its derivative (the logistic of s) and what that
// derivative lacks to 1, without overflow or loss of digits at either end.
func softplus(s float64) (value, slope, rest float64) {
	if s > 0 {
		e := math.Exp(-s)
		return s + math.Log1p(e), 1 / (1 + e), e / (1 + e)
	}
	e := math.Exp(s)
	return math.Log1p(e), e / (1 + e), 1 / (1 + e)
}

// LnK implements Curve.
func (Parallel) LnK(tRef float64, t, p, f, jac []float64) {
	check(4, t, p, f, jac)
	for i, ti := range t {
		u := (ti - tRef) / (GasConstant * ti * tRef)
		l1, l2 := p[0]+p[1]*u, p[2]+p[3]*u
		v, w2, w1 := softplus(l2 - l1)
		if f != nil {
			f[i] = l1 + v
		}
		if jac != nil {
			jac[4*i], jac[4*i+1], jac[4*i+2], jac[4*i+3] = w1, w1*u, w2, w2*u
		}
	}
}

// ELoc implements Curve: the mean of E1 and E2 weighted by the share of each path.
func (Parallel) ELoc(tRef float64, t, p, f, jac []float64) {
	check(4, t, p, f, jac)
	for i, ti := range t {
		u := (ti - tRef) / (GasConstant * ti * tRef)
		d := p[2] - p[0] + (p[3]-p[1])*u
		_, w2, w1 := softplus(d)
		if f != nil {
			f[i] = w1*p[1] + w2*p[3]
		}
		if jac != nil {
			s := w1 * w2 * (p[3] - p[1]) // dE_loc/dd
			jac[4*i], jac[4*i+1] = -s, w1-s*u
			jac[4*i+2], jac[4*i+3] = s, w2+s*u
		}
	}
}

// ShapeDim implements Shaped.
func (Parallel) ShapeDim() int { return 2 }

// Shape implements Shaped: g = ln(1 + e^(c - d x)), q = (c, d).
func (Parallel) Shape(x, q, g, dg, d2g []float64) {
	mustLen("shape parameters", len(q), 2)
	if g != nil {
		mustLen("values", len(g), len(x))
	}
	if dg != nil {
		mustLen("first derivatives", len(dg), 2*len(x))
	}
	if d2g != nil {
		mustLen("second derivatives", len(d2g), 3*len(x))
	}
	for i, xi := range x {
		v, s, rest := softplus(q[0] - q[1]*xi)
		if g != nil {
			g[i] = v
		}
		if dg != nil {
			dg[2*i], dg[2*i+1] = s, -s*xi
		}
		if d2g != nil {
			h := s * rest
			d2g[3*i], d2g[3*i+1], d2g[3*i+2] = h, -h*xi, h*xi*xi
		}
	}
}

// FromShape implements Shaped, with the lower barrier first.
func (Parallel) FromShape(a, e float64, q, p []float64) {
	mustLen("shape parameters", len(q), 2)
	mustLen("parameters", len(p), 4)
	p[0], p[1], p[2], p[3] = a, e, a+q[0], e+q[1]
	lowerFirst(p)
}

// lowerFirst puts the path with the lower barrier first: k1 + k2 does not tell
// them apart, the names of the parameters do.
func lowerFirst(p []float64) {
	if p[3] < p[1] {
		p[0], p[1], p[2], p[3] = p[2], p[3], p[0], p[1]
	}
}

// ToShape implements Shaped.
func (Parallel) ToShape(p []float64) (a, e float64, q []float64) {
	mustLen("parameters", len(p), 4)
	return p[0], p[1], []float64{p[2] - p[0], p[3] - p[1]}
}

// Forms implements Curve.
func (Parallel) Forms() []Form { return []Form{parallelBarriers} }

// Write implements Written.
func (Parallel) Write(w Writer, tRef float64, p []float64) string {
	return "[" + w.path(tRef, p[0], p[1]) + " + " + w.path(tRef, p[2], p[3]) + "]"
}

// Profiled implements Profiled: both paths.
func (Parallel) Profiled() map[string]string {
	return map[string]string{"ln_A1": "ln_A1", "E1": "E1", "ln_A2": "ln_A2", "E2": "E2"}
}

// Claims implements Claimed.
func (Parallel) Claims() Claims {
	return Claims{
		P:       [][]float64{{-3, 30e3, -4, 80e3}, {-30, 10e3, -27, 55e3}, {-30, -3.5e3, -29, 11e3}, {5, 50e3, -6, 200e3}},
		Extreme: [][]float64{{700, -1e6, -700, 1e6}, {-700, -1e6, 700, 1e6}, {0, 5e4, 0, 5e4}, {1, 5e4, 0, 5e4}, {0, 4e4, -40, 5e4}},
		Limit: func(tRef float64, p []float64) (lnA, exponent float64) {
			a1, a2 := p[0]+p[1]/(GasConstant*tRef), p[2]+p[3]/(GasConstant*tRef)
			high, low := math.Max(a1, a2), math.Min(a1, a2)
			return high + math.Log(1+math.Exp(low-high)), 0
		},
		Ascending: [][2]int{{1, 3}},
		Physical: map[string]func(Frame, []float64, float64) float64{
			"parallel-barriers": func(fr Frame, q []float64, t float64) float64 {
				return math.Log(math.Exp(q[0]-kilo*q[1]/(GasConstant*t)) + math.Exp(q[2]-kilo*q[3]/(GasConstant*t)))
			},
		},
		Undefined: []string{"T_x"},
		Relations: []Relation{
			{"k1(T_x) = k2(T_x)", func(fr Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				path := func(lnA, e string) float64 {
					return form("parallel-barriers", lnA) - kilo*form("parallel-barriers", e)/(GasConstant*form("parallel-barriers", "T_x"))
				}
				return path("ln_A1", "E1"), path("ln_A2", "E2"), 1e3
			}},
			{"E_loc(T_x) = (E1 + E2)/2", func(fr Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				mean := 500 * (form("parallel-barriers", "E1") + form("parallel-barriers", "E2"))
				return eLoc(form("parallel-barriers", "T_x")), mean, 1e7
			}},
		},
	}
}
