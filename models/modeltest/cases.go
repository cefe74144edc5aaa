package modeltest

import (
	"math"

	"onebarrier/models"
)

// r is R in J/(mol K), SI 2019, written out so that cases do not share it with
// the code they check.
const r = 8.31446261815324

var temperatures = []float64{250, 278.15, 299.999, 300, 300.001, 312.5, 340, 500, 1000}

// Registered gives the case of every registered curve by its name. A curve that
// is not in it has no case, and fails the test of the registry.
func Registered() map[string]Case {
	return map[string]Case{
		"straight": fixedExponent(0, "arrhenius", func(fr models.Frame, q []float64, t float64) float64 {
			return q[0] - 1000*q[1]/(r*t)
		}),
		"root-prefactor": fixedExponent(0.5, "collision", func(fr models.Frame, q []float64, t float64) float64 {
			return q[0] + 0.5*math.Log(t/fr.TForm) - 1000*q[1]/(r*t)
		}),
		"linear-prefactor": fixedExponent(1, "eyring", func(fr models.Frame, q []float64, t float64) float64 {
			return universal(t) + q[1]/r - 1000*q[0]/(r*t) - fr.LnPerSecond
		}),
		"power-prefactor": power(),
		"parallel":        parallel(),
	}
}

// universal is ln of k_B T/h in s^-1, with k_B and h of the SI Brochure, 9th ed.
func universal(t float64) float64 { return math.Log(1.380649e-23 * t / 6.62607015e-34) }

func fixedExponent(m float64, form string, physical func(models.Frame, []float64, float64) float64) Case {
	return Case{
		Kind: Linear, TRef: 300, T: temperatures,
		P:       [][]float64{{-3, 60e3}, {-28.5, 12e3}, {20, 250e3}, {1, -5e3}, {2, 0}},
		Extreme: [][]float64{{-700, 1e6}, {700, -1e6}, {0, 0}},
		Limit: func(tRef float64, p []float64) (lnA, exponent float64) {
			return p[0] + p[1]/(r*tRef), m
		},
		Physical: map[string]func(models.Frame, []float64, float64) float64{form: physical},
	}
}

func power() Case {
	return Case{
		Kind: Linear, TRef: 300, T: temperatures,
		P:       [][]float64{{-3, 60e3, 0}, {-3, 60e3, 2.3}, {-30, 15e3, -7}, {5, 100e3, 40}},
		Extreme: [][]float64{{-700, 1e6, 300}, {700, -1e6, -300}, {0, 0, 0}},
		Limit: func(tRef float64, p []float64) (lnA, exponent float64) {
			// E_ref = E + nRT_ref
			return p[0] + p[1]/(r*tRef) - p[2], p[2]
		},
		Physical: map[string]func(models.Frame, []float64, float64) float64{
			"modified-arrhenius": func(fr models.Frame, q []float64, t float64) float64 {
				return q[0] + q[1]*math.Log(t/fr.TForm) - 1000*q[2]/(r*t)
			},
			"eyring-heat-capacity": func(fr models.Frame, q []float64, t float64) float64 {
				dH := 1000*q[0] + q[2]*(t-fr.TForm)
				dS := q[1] + q[2]*math.Log(t/fr.TForm)
				return universal(t) + dS/r - dH/(r*t) - fr.LnPerSecond
			},
		},
		Relations: []Relation{
			{"n = 1 + ΔC_p‡/R", func(fr models.Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				n := form("modified-arrhenius", "n")
				return n, 1 + form("eyring-heat-capacity", "dCp")/r, 1 + math.Abs(n)
			}},
			{"E_loc(T) = ΔH‡(T) + RT", func(fr models.Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				const t = 321.
				dH := 1000*form("eyring-heat-capacity", "dH") + form("eyring-heat-capacity", "dCp")*(t-fr.TForm)
				return eLoc(t), dH + r*t, 1e6
			}},
			{"E_loc(T) = E + nRT", func(fr models.Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				const t = 321.
				return eLoc(t), 1000*form("modified-arrhenius", "E") + form("modified-arrhenius", "n")*r*t, 1e6
			}},
		},
	}
}

func parallel() Case {
	return Case{
		Kind: Shaped, TRef: 300, T: temperatures,
		P:       [][]float64{{-3, 30e3, -4, 80e3}, {-30, 10e3, -27, 55e3}, {-30, -3.5e3, -29, 11e3}, {5, 50e3, -6, 200e3}},
		Extreme: [][]float64{{700, -1e6, -700, 1e6}, {-700, -1e6, 700, 1e6}, {0, 5e4, 0, 5e4}, {1, 5e4, 0, 5e4}, {0, 4e4, -40, 5e4}},
		Limit: func(tRef float64, p []float64) (lnA, exponent float64) {
			a1, a2 := p[0]+p[1]/(r*tRef), p[2]+p[3]/(r*tRef)
			high, low := math.Max(a1, a2), math.Min(a1, a2)
			return high + math.Log(1+math.Exp(low-high)), 0
		},
		Ascending: [][2]int{{1, 3}},
		Physical: map[string]func(models.Frame, []float64, float64) float64{
			"parallel-barriers": func(fr models.Frame, q []float64, t float64) float64 {
				return math.Log(math.Exp(q[0]-1000*q[1]/(r*t)) + math.Exp(q[2]-1000*q[3]/(r*t)))
			},
		},
		Undefined: []string{"T_x"},
		Relations: []Relation{
			{"k1(T_x) = k2(T_x)", func(fr models.Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				path := func(lnA, e string) float64 {
					return form("parallel-barriers", lnA) - 1000*form("parallel-barriers", e)/(r*form("parallel-barriers", "T_x"))
				}
				return path("ln_A1", "E1"), path("ln_A2", "E2"), 1e3
			}},
			{"E_loc(T_x) = (E1 + E2)/2", func(fr models.Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				mean := 500 * (form("parallel-barriers", "E1") + form("parallel-barriers", "E2"))
				return eLoc(form("parallel-barriers", "T_x")), mean, 1e7
			}},
		},
	}
}
