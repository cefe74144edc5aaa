package diagnostics

import (
	"math"

	"onebarrier/models/fit"
)

// EffectiveTemperature is the temperature at which the E of the straight fit is an
// unbiased estimate of the local activation energy, whatever the exponent n:
//
//	T_eff = -Σ w (ln T - mean ln T)(1/T - mean 1/T) / Σ w (1/T - mean 1/T)²
//
// with weighted means. The straight slope of n ln T - b/T against 1/T is
// -b + n·slope(ln T), so that Ê = E + nRT_eff, which is E_loc(T_eff). t is in K; w
// are the weights of the fit of ln k. It is NaN where all temperatures are equal.
func EffectiveTemperature(t, w []float64) float64 {
	if len(t) != len(w) {
		panic("diagnostics: one weight for each temperature")
	}
	if len(t) == 0 {
		return math.NaN()
	}
	// ln T and 1/T from a temperature inside the data, without cancellation.
	ref := t[0]
	var sw, sl, sx float64
	at := func(i int) (l, x float64) {
		d := (t[i] - ref) / ref
		return math.Log1p(d), -d / t[i] // ln(T/ref), 1/T - 1/ref
	}
	for i := range t {
		l, x := at(i)
		sw, sl, sx = sw+w[i], sl+w[i]*l, sx+w[i]*x
	}
	var sxl, sxx float64
	for i := range t {
		l, x := at(i)
		sxl += w[i] * (l - sl/sw) * (x - sx/sw)
		sxx += w[i] * (x - sx/sw) * (x - sx/sw)
	}
	return -sxl / sxx
}

// effectiveTemperatureOf is the effective temperature of a straight fit. Where errors
// are additive in k the weights of ln k are k²/V with the fitted k.
func effectiveTemperatureOf(s *fit.Sample, straight *fit.Result) float64 {
	w := make([]float64, s.Len())
	for i, v := range s.V {
		w[i] = 1 / v
		if s.Model.InK() {
			w[i] *= math.Exp(2 * straight.Fitted[i])
		}
	}
	if s.Spent() > 0 {
		return effectiveWithin(s, w)
	}
	return EffectiveTemperature(s.T, w)
}
