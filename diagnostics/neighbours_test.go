package diagnostics

import (
	"math"
	"testing"

	"onebarrier/models"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// R 4.2.2 on synthetic/s1_straight.csv, R the gas constant:
//
//	m <- lm(log(k) ~ I(1/T_K) + log(T_K)); s <- summary(m)$sigma
//	-R*diff(log(k))/diff(1/T_K)/1000; R*s*sqrt(2)/abs(diff(1/T_K))/1000
//	2/(1/T_K[-1] + 1/T_K[-12]); E - qt(.975, df.residual(m))*u
func TestEnergiesBetweenAgainstR(t *testing.T) {
	d := reference.Synthetic(t, "s1_straight")
	a := mustAssess(t, setOf(d.T, d.K, nil), quick())
	if len(a.LocalEnergies) != 11 {
		t.Fatalf("%d energies between 12 temperatures", len(a.LocalEnergies))
	}
	for i, want := range map[int][4]float64{
		0:  {284.912281, 86.7790804677, 1.66676239222, 83.0086019835},
		5:  {334.925373, 83.4462185941, 2.30308793605, 78.236271723},
		10: {384.935065, 80.1160295539, 3.04204663211, 73.2344419755},
	} {
		e := a.LocalEnergies[i]
		reference.Close(t, "T", float64(e.T), want[0], 1e-8)
		reference.Close(t, "E", float64(e.E.Value), want[1], 1e-10)
		reference.Close(t, "u(E)", float64(e.E.StdError), want[2], 1e-9)
		reference.Close(t, "lower end", float64(e.E.Lower), want[3], 1e-9)
	}
}

// On exact data each energy is that of the curve: of a line E, of T^n the closed form
// E + nRT₁T₂ ln(T₂/T₁)/(T₂-T₁). Order of the entries, repeats and errors in k do not
// matter to it.
func TestEnergiesBetweenOnExactData(t *testing.T) {
	const e, n = 50e3, 3.0
	temps := []float64{320, 300, 300, 280, 350, 320}
	k, v := make([]float64, len(temps)), make([]float64, len(temps))
	for i, ti := range temps {
		k[i], v[i] = math.Exp(n*math.Log(ti)-e/(models.GasConstant*ti)), float64(i+1)
	}
	for _, model := range []fit.ErrorModel{fit.Relative, fit.Absolute} {
		s, err := fit.NewSample(model, temps, k, v)
		if err != nil {
			t.Fatal(err)
		}
		got := EnergiesBetween(s, fit.Fit(s, models.PowerPrefactor{}), 0.95)
		ends := [][2]float64{{280, 300}, {300, 320}, {320, 350}}
		if len(got) != len(ends) {
			t.Fatalf("%d energies, want %d", len(got), len(ends))
		}
		for i, p := range ends {
			want := (e + n*models.GasConstant*p[0]*p[1]*math.Log(p[1]/p[0])/(p[1]-p[0])) / 1000
			reference.Close(t, string(model), float64(got[i].E.Value), want, 1e-9)
			reference.Close(t, "lower T", float64(got[i].TLow), p[0], 0)
		}
	}
}

// u(E) by the rule of propagation: R T₁T₂/(T₂-T₁) √(u₁² + u₂²), and 1.96 u either way
// (normal quantile 1.959963984540054).
func TestEnergiesBetweenStated(t *testing.T) {
	s, err := fit.NewSample(fit.Stated, []float64{300, 310}, []float64{1, 2}, []float64{0.03 * 0.03, 0.04 * 0.04})
	if err != nil {
		t.Fatal(err)
	}
	got := EnergiesBetween(s, fit.Fit(s, models.Straight()), 0.95)[0].E
	u := models.GasConstant * 300 * 310 / 10 * 0.05 / 1000
	reference.Close(t, "u", float64(got.StdError), u, 1e-12)
	reference.Close(t, "upper end", float64(got.Upper-got.Value), 1.959963984540054*u, 1e-9)
	// Unknown scatter leaves the energies without uncertainties.
	s.Model = fit.Relative
	if e := EnergiesBetween(s, fit.Fit(s, models.Straight()), 0.95)[0].E; e.StdError.Known() || !e.Value.Known() {
		t.Errorf("two points: %+v", e)
	}
}

// Rate constants that are not positive are passed over where errors are in k.
func TestEnergiesBetweenPassOver(t *testing.T) {
	s, err := fit.NewSample(fit.Absolute, []float64{300, 310, 320, 330, 340}, []float64{0.1, -0.2, 1, 2, 4}, []float64{1, 1, 1, 1, 1})
	if err != nil {
		t.Fatal(err)
	}
	got := EnergiesBetween(s, fit.Fit(s, models.Straight()), 0.95)
	if len(got) != 3 || got[0].TLow != 300 || got[0].THigh != 320 {
		t.Errorf("%+v", got)
	}
}

// With errors in k u(ln k) is u(k)/k at the fitted k: two points on their line, k = 1
// and 2, u(k) = 0.1 and 0.1.
func TestEnergiesBetweenInK(t *testing.T) {
	s, err := fit.NewSample(fit.StatedAbsolute, []float64{300, 310}, []float64{1, 2}, []float64{0.01, 0.01})
	if err != nil {
		t.Fatal(err)
	}
	got := EnergiesBetween(s, fit.Fit(s, models.Straight()), 0.95)[0].E
	want := models.GasConstant * 300 * 310 / 10 * math.Hypot(0.1, 0.05) / 1000
	reference.Close(t, "u", float64(got.StdError), want, 1e-7)
}
