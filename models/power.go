package models

import "math"

// PowerPrefactor is ln k = a + n ln T - b/T. Canonical parameters: a = ln k(T_ref),
// E_ref = E_loc(T_ref) = E + nRT_ref in J/mol, and n. In them
//
//	ln k = a - E_ref x + n (z - ln(1+z)),  z = T_ref/T - 1,  x = z/(R T_ref),
//
// whose last column is close to a parabola in z, and so nearly orthogonal to the
// other two; a + n ln T - b/T in its own terms loses ten digits on a range of 10 K.
type PowerPrefactor struct{}

var (
	_ Basis    = PowerPrefactor{}
	_ PowerLaw = PowerPrefactor{}
	_ Written  = PowerPrefactor{}
	_ Claimed  = PowerPrefactor{}
)

// Info implements Curve.
func (PowerPrefactor) Info() Info {
	return Info{
		Name: "power-prefactor", Family: "power",
		Formula: "ln k = a + n ln T - b/T",
		Summary: "one barrier with a T^n prefactor; the same curve as Eyring with a constant heat capacity of activation",
		Source:  "D. M. Kooij, Z. Phys. Chem. 12 (1893) 155",
		Trend:   TrendEither,
		Params: []Param{
			{"ln_k_ref", "ln k at the reference temperature", "k"},
			{"E_ref", "local activation energy at the reference temperature", "J/mol"},
			{"n", "exponent of T", "1"},
		},
	}
}

// bend returns z - ln(1+z) for z = tRef/t - 1, to full relative precision.
func bend(tRef, t float64) float64 {
	z := (tRef - t) / t
	if math.Abs(z) < 0.2 {
		// The difference would cancel. With s = z/(2+z),
		// ln(1+z) = 2 atanh s = 2(s + s³/3 + ...) and z - 2s = zs.
		s := z / (2 + z)
		s2 := s * s
		r := 0.0
		for k := 19; k >= 3; k -= 2 {
			r = s2 * (r + 1/float64(k))
		}
		return s * (z - 2*r)
	}
	return z - math.Log(tRef/t)
}

// Columns implements Basis.
func (PowerPrefactor) Columns(tRef float64, t, offset, x []float64) {
	mustLen("offset", len(offset), len(t))
	mustLen("design", len(x), 3*len(t))
	for i, ti := range t {
		offset[i] = 0
		x[3*i] = 1
		x[3*i+1] = (ti - tRef) / (GasConstant * ti * tRef)
		x[3*i+2] = bend(tRef, ti)
	}
}

// LnK implements Curve.
func (PowerPrefactor) LnK(tRef float64, t, p, f, jac []float64) {
	check(3, t, p, f, jac)
	for i, ti := range t {
		u, b := (ti-tRef)/(GasConstant*ti*tRef), bend(tRef, ti)
		if f != nil {
			f[i] = p[0] + p[1]*u + p[2]*b
		}
		if jac != nil {
			jac[3*i], jac[3*i+1], jac[3*i+2] = 1, u, b
		}
	}
}

// ELoc implements Curve: E_loc = E_ref + nR(T - T_ref).
func (PowerPrefactor) ELoc(tRef float64, t, p, f, jac []float64) {
	check(3, t, p, f, jac)
	for i, ti := range t {
		d := GasConstant * (ti - tRef)
		if f != nil {
			f[i] = p[1] + p[2]*d
		}
		if jac != nil {
			jac[3*i], jac[3*i+1], jac[3*i+2] = 0, 1, d
		}
	}
}

// Forms implements Curve.
func (PowerPrefactor) Forms() []Form { return []Form{modifiedArrhenius, eyringHeatCapacity} }

// Exponent implements PowerLaw.
func (PowerPrefactor) Exponent(p []float64) (n float64, fitted bool) { return p[2], true }

// Write implements Written.
func (PowerPrefactor) Write(w Writer, tRef float64, p []float64) string {
	return w.powerLaw(tRef, p[0], p[2], p[1]-p[2]*GasConstant*tRef, false)
}

// Claims implements Claimed.
func (PowerPrefactor) Claims() Claims {
	return Claims{
		P:       [][]float64{{-3, 60e3, 0}, {-3, 60e3, 2.3}, {-30, 15e3, -7}, {5, 100e3, 40}},
		Extreme: [][]float64{{-700, 1e6, 300}, {700, -1e6, -300}, {0, 0, 0}},
		Limit: func(tRef float64, p []float64) (lnA, exponent float64) {
			// E_ref = E + nRT_ref
			return p[0] + p[1]/(GasConstant*tRef) - p[2], p[2]
		},
		Physical: map[string]func(Frame, []float64, float64) float64{
			"modified-arrhenius": func(fr Frame, q []float64, t float64) float64 {
				return q[0] + q[1]*math.Log(t/fr.TForm) - kilo*q[2]/(GasConstant*t)
			},
			"eyring-heat-capacity": func(fr Frame, q []float64, t float64) float64 {
				dH := kilo*q[0] + q[2]*(t-fr.TForm)
				dS := q[1] + q[2]*math.Log(t/fr.TForm)
				return lnUniversal(t) + dS/GasConstant - dH/(GasConstant*t) - fr.LnPerSecond
			},
		},
		Relations: []Relation{
			{"n = 1 + ΔC_p‡/R", func(fr Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				n := form("modified-arrhenius", "n")
				return n, 1 + form("eyring-heat-capacity", "dCp")/GasConstant, 1 + math.Abs(n)
			}},
			{"E_loc(T) = ΔH‡(T) + RT", func(fr Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				const t = 321.
				dH := kilo*form("eyring-heat-capacity", "dH") + form("eyring-heat-capacity", "dCp")*(t-fr.TForm)
				return eLoc(t), dH + GasConstant*t, 1e6
			}},
			{"E_loc(T) = E + nRT", func(fr Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				const t = 321.
				return eLoc(t), kilo*form("modified-arrhenius", "E") + form("modified-arrhenius", "n")*GasConstant*t, 1e6
			}},
		},
	}
}
