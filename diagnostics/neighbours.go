package diagnostics

import (
	"cmp"
	"math"
	"slices"

	"onebarrier/models"
	"onebarrier/models/fit"
)

// EnergyBetween is the local activation energy between two neighbouring
// temperatures, from their two rate constants alone. Neighbours in the list share a
// rate constant: one that is too high makes one energy too high and the next too low.
type EnergyBetween struct {
	TLow  Real     `json:"t_low_k"`
	THigh Real     `json:"t_high_k"`
	T     Real     `json:"t_k"` // the reciprocal of the mean of 1/T
	E     Estimate `json:"e_kj_per_mol"`
}

// EnergiesBetween gives E = -R Δln k/Δ(1/T) between neighbouring temperatures of s,
// which the mean-value theorem makes E_loc somewhere between them, stated at the
// harmonic mean of the two (for E_loc linear in 1/T it is exact there). Entries at
// one temperature are averaged first, with weights 1/V; a mean k that is not positive
// is passed over. σ and the degrees of freedom of the interval are those of the fit r
// to s: its curve takes the curvature out of the scatter. Without degrees of freedom
// only known σ gives uncertainties. Those of T are not in them, unless they are in V.
func EnergiesBetween(s *fit.Sample, r *fit.Result, confidence float64) []EnergyBetween {
	known := s.Model.KnownSigma()
	sigma, crit := math.NaN(), math.NaN()
	switch {
	case known:
		sigma, crit = 1, criticalValue(confidence, 0, true)
	case r.Usable() && r.Nu > 0:
		sigma, crit = r.Sigma, criticalValue(confidence, r.Nu, false)
	}
	order := orderOfT(s)
	out := []EnergyBetween{}
	var before struct{ t, y, v float64 }
	for a := 0; a < len(order); {
		t := s.T[order[a]]
		var sw, swy float64
		b := a
		for ; b < len(order) && models.SameTemperature(t, s.T[order[b]]); b++ {
			i := order[b]
			y := s.Y[i]
			if s.Model.InK() {
				y = s.K[i]
			}
			sw, swy = sw+1/s.V[i], swy+y/s.V[i]
		}
		first := order[a]
		a = b
		y, v := swy/sw, 1/sw
		if s.Model.InK() {
			if !(y > 0) {
				continue
			}
			// u(ln k) = u(k)/k to first order, with the fitted k: that of the point
			// itself would make a point that is too low the less certain one.
			k := y
			if r.Usable() && len(r.Fitted) == s.Len() {
				k = math.Exp(r.Fitted[first])
			}
			y, v = math.Log(y), v/(k*k)
		}
		if before.t > 0 {
			// Δ(1/T) = -(T₂-T₁)/(T₁T₂), formed without subtracting reciprocals.
			per := models.GasConstant * before.t * t / (t - before.t) / 1000
			e, u := per*(y-before.y), per*sigma*math.Sqrt(before.v+v)
			out = append(out, EnergyBetween{
				Real(before.t), Real(t), Real(2 * before.t * t / (before.t + t)),
				NewEstimate(fit.Estimate{Value: e, StdError: u, Lower: e - crit*u, Upper: e + crit*u}),
			})
		}
		before.t, before.y, before.v = t, y, v
	}
	return out
}

// energiesBetween are those of the verdict's sample, with the scatter about the curve
// of scatterFit, or about the straight line where that leaves no scatter.
func (a *assessor) energiesBetween() []EnergyBetween {
	r := a.scatterFit()
	if !r.Usable() || r.Nu < 1 {
		r = a.straight
	}
	return EnergiesBetween(a.data.sample, r, a.opt.Confidence)
}

// scatterFit is the fit whose residuals are taken for errors: power-prefactor, the
// curve of the test, or the recommended curve where that bends more freely or describes
// the data plainly better.
func (a *assessor) scatterFit() *fit.Result {
	r := a.power
	if f := a.fitOf(a.verdict.RecommendedCurve); f != nil && f.Status == fit.Converged && f.Nu >= 2 &&
		(f.Params() > r.Params() || outdone(a.data.sample, r, f, a.ranking, Criterion(a.opt.Criterion))) {
		r = f
	}
	return r
}

// orderOfT lists the entries of s from the coldest to the hottest.
func orderOfT(s *fit.Sample) []int {
	order := make([]int, s.Len())
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(i, j int) int { return cmp.Compare(s.T[i], s.T[j]) })
	return order
}
