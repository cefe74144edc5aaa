package fit

import (
	"math"

	"onebarrier/models"

	"gonum.org/v1/gonum/floats"
)

// LogLikelihood is the largest log-likelihood of the sample for a curve that
// leaves rss = Σ r²/V, as a density of k: the models with errors in ln k carry the
// Jacobian -Σ ln k_i, so that criteria compare across error models.
//
// With σ unknown it is maximised over σ as well, at σ² = rss/N (R Core Team,
// logLik.lm, has the same form). Noise-free data would make that infinite: an rss
// below the rounding of the data counts as that rounding.
func LogLikelihood(s *Sample, rss float64) float64 {
	return logLikelihood(s, math.Log(rss))
}

// logLikelihood takes ln rss, which stays finite where k² does not.
func logLikelihood(s *Sample, lnRSS float64) float64 {
	n := float64(s.Len())
	var sumLnV, sumLnK float64
	for i, v := range s.V {
		sumLnV += math.Log(v)
		if !s.Model.InK() {
			sumLnK += s.Y[i]
		}
	}
	const ln2Pi = 1.8378770664093454836
	l := -n/2*ln2Pi - sumLnV/2 - sumLnK - s.Shift
	if s.Model.KnownSigma() {
		return l - math.Exp(lnRSS)/2
	}
	lnRSS = math.Max(lnRSS, lnRounding(s))
	return l - n/2*(lnRSS-math.Log(n)+1)
}

// lnRounding is ln of the Σ r²/V that rounding of the data alone leaves: four units
// in the last place of the largest ln k (or k).
func lnRounding(s *Sample) float64 {
	y := s.Y
	least := 1.0
	if s.Model.InK() {
		y, least = s.K, 0
	}
	big := math.Max(least, math.Max(floats.Max(y), -floats.Min(y)))
	var sum float64 // Σ V_min/V_i
	vMin := floats.Min(s.V)
	for _, v := range s.V {
		sum += vMin / v
	}
	return 2*math.Log(4*0x1p-52*big) - math.Log(vMin) + math.Log(sum)
}

// K is the number of parameters the criteria count: σ is one where it is estimated,
// and so is every nuisance column.
func (r *Result) K() int {
	k := r.Params() + r.Spent
	if r.Model.KnownSigma() {
		return k
	}
	return k + 1
}

// AIC is -2 ln L + 2K (Akaike 1974).
func (r *Result) AIC() float64 { return -2*r.LogLik + 2*float64(r.K()) }

// AICc is AIC + 2K(K+1)/(N-K-1) (Hurvich & Tsai 1989) where σ is estimated, NaN
// for N <= K+1. With σ known plain AIC is unbiased already, and is returned.
func (r *Result) AICc() float64 {
	if r.Model.KnownSigma() {
		return r.AIC()
	}
	k := float64(r.K())
	left := float64(r.N) - k - 1
	if left <= 0 {
		return math.NaN()
	}
	return r.AIC() + 2*k*(k+1)/left
}

// BIC is -2 ln L + K ln N (Schwarz 1978).
func (r *Result) BIC() float64 { return -2*r.LogLik + float64(r.K())*math.Log(float64(r.N)) }

// EffectiveVariance returns v with the random part of the uncertainty of T added
// to first order: v_i + (E u(T_i)/(R T_i²))², with t and ut in K and E in J/mol.
// v is a variance of ln k; to add to variances of k give the rate constants
// in k, else nil.
func EffectiveVariance(v, t, ut []float64, e float64, k []float64) []float64 {
	out := make([]float64, len(v))
	for i := range v {
		d := e * ut[i] / (models.GasConstant * t[i] * t[i]) // d ln k/dT · u(T)
		if k != nil {
			d *= k[i]
		}
		out[i] = v[i] + d*d
	}
	return out
}
