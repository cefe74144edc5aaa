package fit

import (
	"math"
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
	failed := mustSample(t, Absolute, []float64{300, 310, 320}, []float64{-1, -2, -1}, ones(3))
	if inf := Influence(Fit(failed, models.Straight()), failed); inf != nil {
		t.Errorf("a failed fit has influences %+v", inf)
	}
}

// TestInfluenceInK: errors in k, standardised on the scale of k; the sum of leverages
// of the linearised fit is the number of parameters.
func TestInfluenceInK(t *testing.T) {
	s := synthetic(t, "s1_straight", Absolute)
	r := Fit(s, models.Straight())
	var sum float64
	for i, inf := range Influence(r, s) {
		sum += inf.Leverage
		reference.Close(t, "standardised", inf.Standardised, (s.K[i]-math.Exp(r.Fitted[i]))/(r.Sigma*math.Sqrt(1-r.Leverage[i])), 1e-8)
	}
	reference.Close(t, "sum of leverages", sum, 2, 1e-10)
}
