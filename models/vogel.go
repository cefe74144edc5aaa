package models

import "math"

// Vogel is ln k = a' - B/(T - T_0). Canonical parameters: a = ln k(T_ref),
// E_ref = E_loc(T_ref) = RB T_ref²/(T_ref - T_0)² in J/mol, and T_0 in K, in which
//
//	ln k = a + E_ref (T - T_ref)(T_ref - T_0)/(R T_ref² (T - T_0)).
//
// T_0 = 0 is the straight line; at T <= T_0 there is no value.
type Vogel struct{}

var (
	_ Seeded  = Vogel{}
	_ Written = Vogel{}
	_ Claimed = Vogel{}
)

// Info implements Curve.
func (Vogel) Info() Info {
	return Info{
		Name: "vogel", Family: "vogel",
		Formula: "ln k = a - B/(T - T_0)",
		Summary: "motion that freezes at T_0, as in supercooled liquids and glasses; the local activation energy falls with T where k rises with it (and rises where k falls)",
		Source:  "H. Vogel, Phys. Z. 22 (1921) 645; G. S. Fulcher, J. Am. Ceram. Soc. 8 (1925) 339; G. Tammann, W. Hesse, Z. Anorg. Allg. Chem. 156 (1926) 245",
		Trend:   TrendEither,
		Params: []Param{
			{"ln_k_ref", "ln k at the reference temperature", "k"},
			{"E_ref", "local activation energy at the reference temperature", "J/mol"},
			{"T0", "temperature at which motion freezes", "K"},
		},
	}
}

// Bounds implements Seeded: 0 <= T_0 <= 0.99 T_min. Closer to T_min the coldest point
// would be followed whatever it is.
func (Vogel) Bounds(tRef, tMin, _ float64) (low, straight, high float64) {
	return 0, 0, 0.99 * math.Min(tRef, tMin)
}

// Seeds implements Seeded: the curve changes by equal steps with 1/(T_min - T_0).
func (v Vogel) Seeds(tRef, tMin, tMax float64) []float64 {
	_, _, high := v.Bounds(tRef, tMin, tMax)
	seeds := []float64{0}
	for gap := 0.92; gap > 0.0101; gap *= 0.8 {
		seeds = append(seeds, high/0.99*(1-gap))
	}
	return append(seeds, high)
}

// LnK implements Curve.
func (Vogel) LnK(tRef float64, t, p, f, jac []float64) {
	check(3, t, p, f, jac)
	d := tRef - p[2]
	for i, ti := range t {
		u := (ti - tRef) / (GasConstant * tRef * tRef * vogelGap(ti, p[2]))
		if f != nil {
			f[i] = p[0] + p[1]*u*d
		}
		if jac != nil {
			jac[3*i], jac[3*i+1] = 1, u*d
			jac[3*i+2] = p[1] * u * (tRef - ti) / (ti - p[2])
		}
	}
}

// vogelGap is T - T_0, NaN where there is no curve.
func vogelGap(t, t0 float64) float64 {
	if t > t0 {
		return t - t0
	}
	return math.NaN()
}

// ELoc implements Curve: E_loc = RB T²/(T - T_0)².
func (Vogel) ELoc(tRef float64, t, p, f, jac []float64) {
	check(3, t, p, f, jac)
	for i, ti := range t {
		gap := vogelGap(ti, p[2])
		r := ti * (tRef - p[2]) / (tRef * gap)
		if f != nil {
			f[i] = p[1] * r * r
		}
		if jac != nil {
			jac[3*i], jac[3*i+1] = 0, r*r
			jac[3*i+2] = 2 * p[1] * r * ti / tRef * (tRef - ti) / (gap * gap)
		}
	}
}

// Forms implements Curve.
func (Vogel) Forms() []Form { return []Form{vogelFulcherTammann} }

var vogelFulcherTammann = Form{
	Name: "vogel-fulcher-tammann", Formula: "k = A exp(-B/(T - T_0))",
	Source: "H. Vogel, Phys. Z. 22 (1921) 645; G. S. Fulcher, J. Am. Ceram. Soc. 8 (1925) 339; G. Tammann, W. Hesse, Z. Anorg. Allg. Chem. 156 (1926) 245",
	Params: []Param{
		{"ln_A", "ln of the pre-exponential factor", "k"},
		{"B", "slope in 1/(T - T_0)", "K"},
		{"T0", "temperature at which motion freezes", "K"},
	},
	FromCurve: func(fr Frame, p, q, jac []float64) {
		checkForm(3, 3, p, q)
		d := fr.TRef - p[2]
		w := 1 / (GasConstant * fr.TRef * fr.TRef)
		q[0], q[1], q[2] = p[0]+p[1]*d*w, p[1]*d*d*w, p[2]
		fill(jac,
			1, d*w, -p[1]*w,
			0, d*d*w, -2*p[1]*d*w,
			0, 0, 1)
	},
	ToCurve: func(fr Frame, q, p []float64) {
		checkForm(3, 3, p, q)
		d := fr.TRef - q[2]
		p[0] = q[0] - q[1]/d
		p[1] = q[1] * GasConstant * fr.TRef * fr.TRef / (d * d)
		p[2] = q[2]
	},
}

// Write implements Written.
func (Vogel) Write(w Writer, tRef float64, p []float64) string {
	t0 := p[2]
	if t0 == 0 {
		return w.path(tRef, p[0], p[1])
	}
	d, gap := tRef-t0, w.TMin-t0
	b := p[1] / GasConstant * (d / tRef) * (d / tRef)
	// T_0 has digits enough for the gap too, of which a small b makes little.
	t0Text := w.Number(-t0, math.Abs(b)/(gap*gap)+1/gap)
	return "exp(" + w.Number(p[0]+b/d, 1) + signed(w.Number(-b, 1/gap)) + " K/(T" + signed(t0Text) + " K))"
}

// Claims implements Claimed.
func (Vogel) Claims() Claims {
	return Claims{
		P:       [][]float64{{-3, 60e3, 60}, {-30, 12e3, 0}, {20, 90e3, 200}, {1, -15e3, 145}, {2, 30e3, 235}},
		Extreme: [][]float64{{-700, 1e6, 5}, {700, -1e6, 9}, {0, 0, 0}, {0, 0, 9}},
		Limit: func(tRef float64, p []float64) (lnA, exponent float64) {
			b := p[1] / GasConstant * math.Pow(1-p[2]/tRef, 2)
			return p[0] + b/(tRef-p[2]), 0
		},
		Physical: map[string]func(Frame, []float64, float64) float64{
			"vogel-fulcher-tammann": func(fr Frame, q []float64, t float64) float64 {
				return q[0] - q[1]/(t-q[2])
			},
		},
		Relations: []Relation{
			{"E_loc = RB T²/(T - T_0)²", func(fr Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				const t = 321.
				share := t / (t - form("vogel-fulcher-tammann", "T0"))
				return eLoc(t), GasConstant * form("vogel-fulcher-tammann", "B") * share * share, 1e6
			}},
		},
	}
}
