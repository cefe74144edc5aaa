package diagnostics

import (
	"math"
	"testing"

	"onebarrier/models"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// golden returns the values of R 4.2.2 (lm, anova, tseries) for the synthetic sets:
// golden(dataset, fit, quantity).
func golden(t testing.TB) func(dataset, fit, quantity string) float64 {
	t.Helper()
	values := reference.Golden(t, "golden_fits.csv")
	return func(dataset, fit, quantity string) float64 {
		t.Helper()
		return values.Of(t, dataset, fit, quantity)
	}
}

// synthetic reads one of the synthetic sets, point by point. Models that need
// uncertainties take them from its sigma_k.
func synthetic(t testing.TB, name string, model fit.ErrorModel) *fit.Sample {
	t.Helper()
	d := reference.Synthetic(t, name)
	v := d.Ones()
	if model == fit.Stated || model == fit.Scaled {
		v = d.Stated(false)
	}
	s, err := fit.NewSample(model, d.T, d.K, v)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// means turns points of equal weight into temperature means of ln k.
func means(t testing.TB, s *fit.Sample) *fit.Sample {
	t.Helper()
	var temps, k, v []float64
	for i := 0; i < s.Len(); {
		j, sum := i, 0.0
		for ; j < s.Len() && s.T[j] == s.T[i]; j++ {
			sum += s.Y[j]
		}
		temps, k, v = append(temps, s.T[i]), append(k, math.Exp(sum/float64(j-i))), append(v, 1/float64(j-i))
		i = j
	}
	m, err := fit.NewSample(s.Model, temps, k, v)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

func fitNamed(t testing.TB, s *fit.Sample, name string) *fit.Result {
	t.Helper()
	c, err := models.Lookup(name)
	if err != nil {
		t.Fatal(err)
	}
	f := fit.Fit(s, c)
	if !f.Usable() {
		t.Fatalf("%s: %v: %s", name, f.Status, f.Reason)
	}
	return f
}
