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
		"series":          series(),

		"drifting-heat-capacity": drifting(),
		"tunnelling-wigner":      tunnelling("wigner", 5.5, func(u float64) float64 { return math.Log(1 + u*u/24) }),
		"tunnelling-bell":        tunnelling("bell", 16, func(u float64) float64 { return math.Log(u / 2 / math.Sin(u/2)) }),
		"vogel":                  vogel(),
		"deformed":               deformed(),
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

func series() Case {
	return Case{
		Kind: Shaped, TRef: 300, T: temperatures,
		P:       [][]float64{{-3, 30e3, -2, 80e3}, {-30, 10e3, -33, 55e3}, {-30, -200e3, -29, 51e3}, {5, 50e3, 6, 200e3}},
		Extreme: [][]float64{{700, -1e6, -700, 1e6}, {-700, -1e6, 700, 1e6}, {0, 5e4, 0, 5e4}, {1, 5e4, 0, 5e4}, {0, 4e4, 40, 5e4}},
		Limit: func(tRef float64, p []float64) (lnA, exponent float64) {
			a1, a2 := p[0]+p[1]/(r*tRef), p[2]+p[3]/(r*tRef)
			high, low := math.Max(a1, a2), math.Min(a1, a2)
			return low - math.Log(1+math.Exp(low-high)), 0
		},
		Ascending: [][2]int{{1, 3}},
		Physical: map[string]func(models.Frame, []float64, float64) float64{
			"series-barriers": func(fr models.Frame, q []float64, t float64) float64 {
				l1, l2 := q[0]-1000*q[1]/(r*t), q[2]-1000*q[3]/(r*t)
				return -math.Log(math.Exp(-l1) + math.Exp(-l2))
			},
			"reversible-inactivation": func(fr models.Frame, q []float64, t float64) float64 {
				return q[0] - 1000*q[1]/(r*t) - math.Log(1+math.Exp(-1000*q[2]/r*(1/t-1/q[3])))
			},
		},
		Undefined: []string{"T_x", "T_half"},
		Relations: []Relation{
			{"k1(T_x) = k2(T_x)", func(fr models.Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				step := func(lnA, e string) float64 {
					return form("series-barriers", lnA) - 1000*form("series-barriers", e)/(r*form("series-barriers", "T_x"))
				}
				return step("ln_A1", "E1"), step("ln_A2", "E2"), 1e3
			}},
			{"E_loc(T_x) = (E1 + E2)/2", func(fr models.Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				mean := 500 * (form("series-barriers", "E1") + form("series-barriers", "E2"))
				return eLoc(form("series-barriers", "T_x")), mean, 1e7
			}},
			{"T_half = T_x", func(fr models.Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				return form("reversible-inactivation", "T_half"), form("series-barriers", "T_x"), 1e3
			}},
			{"E_loc(T_half) = E - ΔH_d/2", func(fr models.Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				e, dh := form("reversible-inactivation", "E"), form("reversible-inactivation", "dH_d")
				return eLoc(form("reversible-inactivation", "T_half")), 1000*e - 500*dh, 1e7
			}},
		},
	}
}

func drifting() Case {
	return Case{
		Kind: Linear, TRef: 300, T: temperatures,
		P:       [][]float64{{-3, 60e3, 2.3, 0}, {-3, 60e3, 2.3, 1.5}, {-30, 15e3, -7, -4}, {5, 100e3, 40, 0.3}, {1, 55e3, -26, 80}},
		Extreme: [][]float64{{-700, 1e6, 300, 900}, {700, -1e6, -300, -900}, {0, 0, 0, 0}},
		Limit: func(tRef float64, p []float64) (lnA, exponent float64) {
			if p[3] != 0 {
				return math.NaN(), math.NaN()
			}
			return p[0] + p[1]/(r*tRef) - p[2], p[2]
		},
		Physical: map[string]func(models.Frame, []float64, float64) float64{
			"eyring-drifting-heat-capacity": func(fr models.Frame, q []float64, t float64) float64 {
				// ΔC_p‡ = α + βT: ΔH‡ = ΔH‡(T_0) + α(T - T_0) + β(T² - T_0²)/2, and
				// ΔS‡ = ΔS‡(T_0) + α ln(T/T_0) + β(T - T_0).
				t0, beta := fr.TForm, q[3]
				alpha := q[2] - beta*t0
				dH := 1000*q[0] + alpha*(t-t0) + beta*(t*t-t0*t0)/2
				dS := q[1] + alpha*math.Log(t/t0) + beta*(t-t0)
				return universal(t) + dS/r - dH/(r*t) - fr.LnPerSecond
			},
		},
		Relations: []Relation{
			{"E_loc(T_ref) = ΔH‡(T_ref) + RT_ref", func(fr models.Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				return eLoc(fr.TForm), 1000*form("eyring-drifting-heat-capacity", "dH") + r*fr.TForm, 1e6
			}},
			{"dE_loc/dT = ΔC_p‡ + R at T_ref", func(fr models.Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				// E_loc is a parabola in T: the central difference is exact.
				return (eLoc(fr.TForm+50) - eLoc(fr.TForm-50)) / 100, form("eyring-drifting-heat-capacity", "dCp") + r, 1e5
			}},
		},
	}
}

// tunnelling has u(T_ref)² for its third parameter; h c/k_B is 1.438776877 cm K (CODATA
// 2018, exact to these digits).
func tunnelling(form string, most float64, lnKappa func(u float64) float64) Case {
	const second = 100 * 299792458 * 6.62607015e-34 / 1.380649e-23
	return Case{
		Kind: Seeded, TRef: 300, T: temperatures,
		P:       [][]float64{{-3, 60e3, 0.5}, {-30, 12e3, 4}, {20, 90e3, most}, {1, -5e3, 0.1}},
		Extreme: [][]float64{{-700, 1e6, 0.01}, {700, -1e6, 1e-12}, {0, 0, 1e-3}, {0, 0, 0}},
		Limit: func(tRef float64, p []float64) (lnA, exponent float64) {
			// E = E_loc + RT u dln κ/du, by a difference
			u := math.Sqrt(p[2])
			slope := derivative(lnKappa, u, 1e-2*u)
			return p[0] + p[1]/(r*tRef) + u*slope - lnKappa(u), 0
		},
		Physical: map[string]func(models.Frame, []float64, float64) float64{
			form: func(fr models.Frame, q []float64, t float64) float64 {
				return q[0] - 1000*q[1]/(r*t) + lnKappa(second*q[2]/t)
			},
		},
		Undefined: []string{"nu"},
		Relations: []Relation{
			{"E_loc = E - RT u dln κ/du", func(fr models.Frame, f func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				const t = 321.
				u := second * f(form, "nu") / t
				return eLoc(t), 1000*f(form, "E") - r*t*u*derivative(lnKappa, u, 1e-2*u), 1e8
			}},
		},
	}
}

func vogel() Case {
	return Case{
		Kind: Seeded, TRef: 300, T: temperatures,
		P:       [][]float64{{-3, 60e3, 60}, {-30, 12e3, 0}, {20, 90e3, 200}, {1, -15e3, 145}, {2, 30e3, 235}},
		Extreme: [][]float64{{-700, 1e6, 5}, {700, -1e6, 9}, {0, 0, 0}, {0, 0, 9}},
		Limit: func(tRef float64, p []float64) (lnA, exponent float64) {
			b := p[1] / r * math.Pow(1-p[2]/tRef, 2)
			return p[0] + b/(tRef-p[2]), 0
		},
		Physical: map[string]func(models.Frame, []float64, float64) float64{
			"vogel-fulcher-tammann": func(fr models.Frame, q []float64, t float64) float64 {
				return q[0] - q[1]/(t-q[2])
			},
		},
		Relations: []Relation{
			{"E_loc = RB T²/(T - T_0)²", func(fr models.Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				const t = 321.
				share := t / (t - form("vogel-fulcher-tammann", "T0"))
				return eLoc(t), r * form("vogel-fulcher-tammann", "B") * share * share, 1e6
			}},
		},
	}
}

func deformed() Case {
	return Case{
		Kind: Seeded, TRef: 300, T: temperatures,
		P:       [][]float64{{-3, 60e3, 6000}, {-30, 12e3, -600}, {20, 90e3, 1e-3}, {1, -15e3, 2000}, {2, 30e3, -2400}},
		Extreme: [][]float64{{-700, 1e6, 50}, {700, -1e6, -2000}, {0, 0, 0}, {0, 0, 9}, {3, 5e4, 0}},
		Limit: func(tRef float64, p []float64) (lnA, exponent float64) {
			return p[0] + p[1]/p[2]*math.Log1p(p[2]/(r*tRef)), 0
		},
		Physical: map[string]func(models.Frame, []float64, float64) float64{
			"deformed-arrhenius": func(fr models.Frame, q []float64, t float64) float64 {
				return q[0] + math.Log1p(-q[2]*1000*q[1]/(r*t))/q[2]
			},
		},
		Undefined: []string{"d"},
		Relations: []Relation{
			{"1/E_loc = 1/E - d/RT", func(fr models.Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64) {
				const t = 321.
				return 1 / eLoc(t), 1/(1000*form("deformed-arrhenius", "E")) - form("deformed-arrhenius", "d")/(r*t), 1e-2
			}},
		},
	}
}
