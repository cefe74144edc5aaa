package diagnostics

import (
	"testing"

	"onebarrier/models"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// On exact ln k = a + n ln T - E/RT the straight fit's E is E + nRT_eff, whatever n:
// the definition of T_eff, checked through the least-squares engine.
func TestEffectiveTemperature(t *testing.T) {
	temps := []float64{250, 262, 290, 333, 410, 555, 700, 1000}
	v := []float64{1, 4, 0.3, 1, 2, 0.1, 1, 3}
	w := make([]float64, len(v))
	for i := range v {
		w[i] = 1 / v[i]
	}
	tEff := EffectiveTemperature(temps, w)
	if !(tEff > 250 && tEff < 1000) {
		t.Fatalf("T_eff = %g K", tEff)
	}
	for _, n := range []float64{-3, 0.5, 7} {
		y := make([]float64, len(temps))
		models.PowerPrefactor{}.LnK(300, temps, []float64{1, 60e3, n}, y, nil) // E_loc(T) = 60e3 + nR(T - 300)
		s := sampleOf(t, fit.Scaled, temps, y, v)
		e := fitNamed(t, s, "straight").P[1]
		reference.Close(t, "E", e, 60e3+n*models.GasConstant*(tEff-300), 1e-10)
	}
	s := sampleOf(t, fit.Scaled, temps, make([]float64, len(temps)), v)
	reference.Close(t, "from a sample", effectiveTemperatureOf(s, nil), tEff, 1e-14)
}
