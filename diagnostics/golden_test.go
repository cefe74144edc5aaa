package diagnostics

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"

	"onebarrier/models"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// want is reference.Close.
func want(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	reference.Close(t, what, got, want, tol)
}

// columns reads a published table by heading, as text.
func columns(t testing.TB, file string) map[string][]string {
	t.Helper()
	f, err := os.Open(reference.Path(file))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	out := map[string][]string{}
	for j, h := range rows[0] {
		for _, r := range rows[1:] {
			out[h] = append(out[h], r[j])
		}
	}
	return out
}

func numbers(t testing.TB, cells []string) []float64 {
	t.Helper()
	out := make([]float64, len(cells))
	for i, c := range cells {
		x, err := strconv.ParseFloat(c, 64)
		if err != nil {
			t.Fatal(err)
		}
		out[i] = x
	}
	return out
}

// golden returns the values of R 4.2.2 (lm, anova, tseries) for the synthetic sets:
// golden(dataset, fit, quantity).
func golden(t testing.TB) func(dataset, fit, quantity string) float64 {
	t.Helper()
	m := reference.Golden(t, "golden_fits.csv")
	return func(dataset, fit, quantity string) float64 {
		t.Helper()
		x, ok := m[reference.Key{Dataset: dataset, Fit: fit, Quantity: quantity}]
		if !ok {
			t.Fatalf("golden_fits.csv has no %s, %s, %s", dataset, fit, quantity)
		}
		return x
	}
}

// synthetic reads one of the synthetic sets, point by point. Models that need
// uncertainties take them from its sigma_k.
func synthetic(t testing.TB, name string, model fit.ErrorModel) *fit.Sample {
	t.Helper()
	headings := []string{"T_K", "k"}
	if model == fit.Stated || model == fit.Scaled {
		headings = append(headings, "sigma_k")
	}
	c := reference.Table(t, "synthetic/"+name+".csv", headings...)
	temps, k := c[0], c[1]
	v := make([]float64, len(k))
	for i := range v {
		v[i] = 1
	}
	if len(c) > 2 {
		for i, s := range c[2] {
			v[i] = s * s / (k[i] * k[i])
		}
	}
	s, err := fit.NewSample(model, temps, k, v)
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
