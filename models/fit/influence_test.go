package fit

import (
	"math"
	"strconv"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/reference"
)

// TestInfluenceAgainstR compares leverage and residuals of every set with R 4.2.2
// (lm: hatvalues, residuals, rstandard, rstudent, cooks.distance), the set with
// stated uncertainties weighted and unweighted.
func TestInfluenceAgainstR(t *testing.T) {
	type key struct{ set, fit string }
	rows := map[key][]map[string]string{}
	for _, row := range reference.Records(t, "golden_influence.csv") {
		k := key{row["dataset"], row["fit"]}
		rows[k] = append(rows[k], row)
	}
	if len(rows) != 18 {
		t.Fatalf("%d fits, want 18", len(rows))
	}
	for k, ref := range rows {
		form, unweighted := strings.CutSuffix(k.fit, "_unweighted")
		model := Relative
		if k.set == "s5_hetero" && !unweighted {
			model = Scaled
		}
		s := synthetic(t, k.set, model)
		curve, _ := referenceForm(form, s.TRef)
		r := Fit(s, curve)
		inf := Influence(r, s)
		if len(inf) != len(ref) {
			t.Fatalf("%v: %d points, want %d", k, len(inf), len(ref))
		}
		for i, row := range ref {
			number := func(h string) float64 { return reference.Number(t, row[h]) }
			label := k.set + " " + k.fit + " " + row["i"] + " "
			if s.T[i] != number("T_K") {
				t.Fatalf("%s: T = %g K, want %s", label, s.T[i], row["T_K"])
			}
			reference.Close(t, label+"residual", r.Residuals[i], number("resid"), 1e-10)
			reference.Close(t, label+"leverage", r.Leverage[i], number("leverage"), 1e-10)
			reference.Close(t, label+"standardised", inf[i].Standardised, number("rstandard"), 1e-9)
			reference.Close(t, label+"studentised", inf[i].Studentised, number("rstudent"), 1e-9)
			reference.Close(t, label+"Cook", inf[i].Cook, number("cooks"), 1e-9)
		}
	}
}

// TestInfluenceIsThatOfLeavingOut: by definition Cook's distance is how far all fitted
// values move when the entry is left out, and a studentised residual is the
// standardised one with the σ̂ of the fit without the entry.
func TestInfluenceIsThatOfLeavingOut(t *testing.T) {
	for _, m := range []ErrorModel{Stated, Scaled} {
		s := synthetic(t, "s5_hetero", m)
		r := Fit(s, models.PowerPrefactor{})
		var sum float64
		for i, inf := range Influence(r, s) {
			sum += inf.Leverage
			drop := func(x []float64) []float64 { return append(append([]float64(nil), x[:i]...), x[i+1:]...) }
			sub := mustSample(t, m, drop(s.T), drop(s.K), drop(s.V))
			sub.TRef = s.TRef
			without := Fit(sub, models.PowerPrefactor{})
			f := make([]float64, s.Len())
			r.Curve.LnK(s.TRef, s.T, without.P, f, nil)
			var moved float64
			for j := range f {
				moved += (f[j] - r.Fitted[j]) * (f[j] - r.Fitted[j]) / s.V[j]
			}
			reference.Close(t, "Cook", inf.Cook, moved/(3*r.Sigma*r.Sigma), 1e-7)
			reference.Close(t, "studentised", inf.Studentised, inf.Standardised*r.Sigma/without.Sigma, 1e-8)
		}
		reference.Close(t, "sum of leverages", sum, 3, 1e-12)
	}
}

// TestInfluenceUndetermined: what a fit cannot tell is NaN, not a number.
func TestInfluenceUndetermined(t *testing.T) {
	saturated := mustSample(t, Relative, []float64{300, 310, 320}, []float64{1, 2, 4.5}, ones(3))
	for i, inf := range Influence(Fit(saturated, models.PowerPrefactor{}), saturated) {
		if !(math.Abs(inf.Leverage-1) < 1e-9) || !math.IsNaN(inf.Standardised) || !math.IsNaN(inf.Studentised) || !math.IsNaN(inf.Cook) {
			t.Errorf("point %d of a saturated fit: %+v", i+1, inf)
		}
	}
	// One degree of freedom: without the point there is none to estimate σ from.
	for i, inf := range Influence(Fit(saturated, models.Straight()), saturated) {
		if !finite(inf.Standardised, inf.Cook) || !math.IsNaN(inf.Studentised) {
			t.Errorf("point %d with one degree of freedom: %+v", i+1, inf)
		}
	}
	// The one point at 350 K alone determines its fitted value.
	alone := mustSample(t, Relative, []float64{300, 300, 300, 350}, []float64{1, 1.1, 1.2, 9}, ones(4))
	inf := Influence(Fit(alone, models.Straight()), alone)
	if !math.IsNaN(inf[3].Cook) || !math.IsNaN(inf[3].Standardised) || !finite(inf[0].Cook, inf[0].Studentised) {
		t.Errorf("leverage 1: %+v", inf)
	}
	// Σ r²/V underflows: a σ̂ of 0 is no scale for residuals that are not.
	tiny := mustSample(t, Scaled, []float64{300, 300, 310}, []float64{1, 1 + 1e-13, 2}, []float64{1e300, 1e300, 1e300})
	if r := Fit(tiny, models.Straight()); r.Residuals[0] == 0 || r.Sigma != 0 {
		t.Errorf("residuals %g with σ = %g", r.Residuals, r.Sigma)
	} else if inf := Influence(r, tiny); !math.IsNaN(inf[0].Standardised) || !math.IsNaN(inf[0].Cook) {
		t.Errorf("σ of 0: %+v", inf)
	}
}

// TestInfluenceWithoutEstimates: a fit that failed or was excluded has no influences,
// and neither has one that claims estimates and brings no leverages.
func TestInfluenceWithoutEstimates(t *testing.T) {
	temps := []float64{300, 310, 320, 330, 340}
	curved := []float64{1, 2, 3.5, 5.2, 7.1} // E falls: no two paths side by side
	for _, c := range []struct {
		s      *Sample
		curve  models.Curve
		status Status
	}{
		{mustSample(t, Absolute, temps[:3], []float64{-1, -2, -1}, ones(3)), models.Straight(), Failed},
		{mustSample(t, Relative, temps[:2], curved[:2], ones(2)), models.PowerPrefactor{}, Failed},
		{mustSample(t, Relative, temps, curved, ones(5)), models.Parallel{}, Excluded},
		{mustSample(t, Absolute, temps, curved, ones(5)), models.Parallel{}, Excluded},
	} {
		r := Fit(c.s, c.curve)
		if r.Status != c.status {
			t.Fatalf("%s, %s: %v, want %v", c.s.Model, c.curve.Info().Name, r.Status, c.status)
		}
		if inf := Influence(r, c.s); inf != nil {
			t.Errorf("%s, %s, %v: influences %+v", c.s.Model, c.curve.Info().Name, r.Status, inf)
		}
	}
	s := mustSample(t, Relative, temps, curved, ones(5))
	for name, spoil := range map[string]func(*Result){
		"called failed":     func(r *Result) { r.Status = Failed },
		"called excluded":   func(r *Result) { r.Status = Excluded },
		"without leverages": func(r *Result) { r.Leverage = nil },
	} {
		r := Fit(s, models.Straight())
		spoil(r)
		if inf := Influence(r, s); inf != nil {
			t.Errorf("%s: influences %+v", name, inf)
		}
	}
}

// TestInfluenceInK: errors in k of unequal variance, one k negative. The numbers are
// those of R 4.2.2 for the fit linearised about the estimates: hatvalues, rstandard,
// rstudent and cooks.distance of lm(r ~ 0 + J, weights = 1/V), where r = k - f,
// J = f*X, X = cbind(1, -(1/T - 1/305)/R) and log(T/305) as a third column for the
// power curve, after 200 Gauss-Newton steps.
func TestInfluenceInK(t *testing.T) {
	temps := []float64{280, 290, 300, 310, 320, 335}
	k := []float64{-0.2, 1.1, 2.9, 4.2, 9.6, 19.5}
	v := []float64{0.04, 0.09, 0.04, 0.25, 0.16, 1}
	for _, c := range []struct {
		curve models.Curve
		want  [][4]float64 // leverage, standardised, studentised, Cook
	}{
		{models.Straight(), [][4]float64{
			{0.103190663847, -1.70341489305, -2.81517380934, 0.166936448517},
			{0.113134824622, -0.272066712607, -0.237827467522, 0.0047212775128},
			{0.503832769308, 0.899079183068, 0.871666768162, 0.410415941649},
			{0.131008163891, -0.599217039222, -0.543923827077, 0.0270658067504},
			{0.411653905666, 0.796511399427, 0.752009514804, 0.221949086112},
			{0.737179672666, -0.967063612414, -0.95678741163, 1.31157910326},
		}},
		{models.PowerPrefactor{}, [][4]float64{
			{0.222030597584, -1.37740892746, -1.85498504327, 0.180490705927},
			{0.217904595662, 0.0952319766925, 0.0778743812654, 0.000842269353427},
			{0.625694851337, 1.33754799285, 1.71893126348, 0.996860238092},
			{0.191603646011, -1.01619441356, -1.02459234302, 0.0815852736055},
			{0.782437325307, -0.0734337745394, -0.0600123864204, 0.00646451011446},
			{0.960328984099, 0.533494093505, 0.457856076009, 2.29659645973},
		}},
	} {
		estimated := mustSample(t, Absolute, temps, k, v)
		r := Fit(estimated, c.curve)
		known := mustSample(t, StatedAbsolute, temps, k, v)
		stated := Influence(Fit(known, c.curve), known)
		for i, got := range Influence(r, estimated) {
			w := c.want[i]
			label := c.curve.Info().Name + " at " + strconv.Itoa(int(temps[i])) + " K: "
			reference.Close(t, label+"leverage", got.Leverage, w[0], 1e-7)
			reference.Close(t, label+"standardised", got.Standardised, w[1], 1e-7)
			reference.Close(t, label+"studentised", got.Studentised, w[2], 1e-7)
			reference.Close(t, label+"Cook", got.Cook, w[3], 1e-7)
			// The same fit, its residuals counted in the σ that is stated.
			reference.Close(t, label+"σ stated", stated[i].Standardised, w[1]*r.Sigma, 1e-7)
			reference.Close(t, label+"σ stated, studentised", stated[i].Studentised, w[1]*r.Sigma, 1e-7)
		}
	}
}
