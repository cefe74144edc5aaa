package diagnostics

import (
	"math"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// withCurves assesses a synthetic set with these candidates, 298.15 K its reference.
func withCurves(t *testing.T, set string, model fit.ErrorModel, curves ...models.Curve) *Assessment {
	t.Helper()
	s := synthetic(t, set, fit.Relative)
	o := quick()
	o.Models, o.ErrorModel = curves, model
	return mustAssess(t, setOf(s.T, s.K, nil), o)
}

// What is published of vogel has the profile intervals of golden_shape_profiles.csv (R),
// in the forms and in the lines to publish.
func TestPublishedProfilesAgainstR(t *testing.T) {
	a := withCurves(t, "s7_vft", fit.Relative, models.Straight(), models.PowerPrefactor{}, models.Vogel{})
	if a.Publish.Curve != "vogel" {
		t.Fatalf("recommended: %q", a.Publish.Curve)
	}
	found := 0
	for _, row := range reference.Records(t, "golden_shape_profiles.csv") {
		if row["dataset"] != "s7_vft" || row["curve"] != "vogel" || row["model"] != "relative" {
			continue
		}
		lower, upper := reference.Number(t, row["lower"]), reference.Number(t, row["upper"])
		check := func(what string, e Estimate) {
			found++
			reference.Close(t, what+" lower", float64(e.Lower), lower, 1e-7)
			reference.Close(t, what+" upper", float64(e.Upper), upper, 1e-7)
		}
		switch q := row["quantity"]; q {
		case "E_min", "dE":
			symbol := map[string]string{"E_min": "E_a", "dE": "ΔE"}[q]
			for _, l := range a.Publish.Lines {
				if l.Symbol == symbol && !strings.HasPrefix(l.Note, "at 298") && !strings.HasPrefix(l.Note, "at 400") {
					check(q, l.Estimate)
				}
			}
		case "T0", "B", "ln_A":
			for _, r := range a.Ranking {
				if r.Curve == "vogel" {
					check(q, parameter(t, r.Forms, "vogel-fulcher-tammann", q))
				}
			}
			for _, l := range a.Publish.Lines {
				if l.Symbol == q {
					check(q+" to publish", l.Estimate)
				}
			}
		}
	}
	if found != 7 { // T0 and B twice
		t.Errorf("compared %d estimates", found)
	}
}

// Where the straight line does as well the interval is one-sided, and says why.
func TestOneSidedProfileSaysSo(t *testing.T) {
	a := withCurves(t, "s1_straight", fit.Relative, models.Straight(), models.Vogel{})
	for _, r := range a.Ranking {
		for _, f := range r.Forms {
			switch r.Curve {
			case "straight":
				if f.Note != "" {
					t.Errorf("straight: %q", f.Note)
				}
			case "vogel":
				e := parameter(t, r.Forms, f.Model, "T0")
				if e.Open == nil || *e.Open != "lower" || math.Abs(float64(e.Upper)-21.1136990535) > 1e-6 { // R, as above
					t.Errorf("T0: %+v", e)
				}
				if !strings.Contains(f.Note, "the interval of T0 reaches the straight line") {
					t.Errorf("note: %q", f.Note)
				}
			}
		}
	}
}

// drifting-heat-capacity is linear: with errors in k its quantities have the profile of
// fit.Profile, with errors in ln k those of Student's t.
func TestDriftingProfiles(t *testing.T) {
	for _, model := range []fit.ErrorModel{fit.Relative, fit.Absolute} {
		a := withCurves(t, "s2_tn_curved", model, models.Straight(), models.DriftingHeatCapacity{})
		f := a.Fits["drifting-heat-capacity"]
		for _, r := range a.Ranking {
			if r.Curve != "drifting-heat-capacity" {
				continue
			}
			e := parameter(t, r.Forms, "eyring-drifting-heat-capacity", "dCp_dT")
			unit := models.GasConstant / f.TRef // of m, the fourth canonical parameter
			want := fit.Profile(a.Sample, f, []float64{0, 0, 0, 1}, 0.95)
			reference.Close(t, "lower", float64(e.Lower), unit*want.Lower, 1e-9)
			reference.Close(t, "upper", float64(e.Upper), unit*want.Upper, 1e-9)
			// dH = E_loc - RT at the reference temperature.
			t0, c := a.Settings.ReferenceTemperature, make([]float64, 4)
			f.Curve.ELoc(f.TRef, []float64{t0}, f.P, nil, c)
			h, local := parameter(t, r.Forms, "eyring-drifting-heat-capacity", "dH"), fit.Profile(a.Sample, f, c, 0.95)
			reference.Close(t, "dH, lower", float64(h.Lower), (local.Lower-models.GasConstant*t0)/1000, 1e-9)
			reference.Close(t, "dH, upper", float64(h.Upper), (local.Upper-models.GasConstant*t0)/1000, 1e-9)
			even := math.Abs(float64(e.Upper+e.Lower-2*e.Value)) < 1e-6*float64(e.Upper-e.Lower)
			if even != (model == fit.Relative) {
				t.Errorf("%s: %+v", model, e)
			}
		}
	}
}

// The barriers and prefactors of two paths have the intervals of fit.ProfileShaped, of
// fit.Profile where errors are additive in k, in the units of the forms; the active
// catalyst is the step with the higher barrier.
func TestProfilesOfTwoPaths(t *testing.T) {
	second := map[string]string{"ln_A": "ln_A2", "E": "E2"}
	for _, c := range []struct {
		set   string
		curve models.Curve
		found int
	}{
		{"s3_parallel", models.Parallel{}, 4},
		{"s4_series", models.Series{}, 6},
	} {
		for _, model := range []fit.ErrorModel{fit.Relative, fit.Absolute} {
			a := withCurves(t, c.set, model, models.Straight(), c.curve)
			f := a.Fits[c.curve.Info().Name]
			if !f.Usable() {
				t.Fatalf("%s, %s: %s", c.set, model, f.Reason)
			}
			u := 1 / (models.GasConstant * f.TRef)
			gradients := map[string][]float64{"ln_A1": {1, u, 0, 0}, "E1": {0, 1, 0, 0}, "ln_A2": {0, 0, 1, u}, "E2": {0, 0, 0, 1}}
			found := 0
			for _, r := range a.Ranking {
				for _, form := range r.Forms {
					for _, p := range form.Parameters {
						name := p.Symbol
						if second[name] != "" {
							name = second[name]
						}
						if r.Curve != c.curve.Info().Name || gradients[name] == nil {
							continue
						}
						found++
						unit := map[bool]float64{true: 1, false: 1000}[name[0] == 'l']
						want := fit.Profile(a.Sample, f, gradients[name], 0.95)
						if model == fit.Relative {
							want = fit.ProfileShaped(a.Sample, f, name, 0.95)
						}
						what := c.set + ", " + string(model) + ": " + form.Model + " " + p.Symbol
						if math.IsInf(want.Lower, 0) || math.IsInf(want.Upper, 0) {
							t.Errorf("%s: open, compares nothing", what)
						}
						reference.Close(t, what+" lower", float64(p.Lower), want.Lower/unit, 1e-12)
						reference.Close(t, what+" upper", float64(p.Upper), want.Upper/unit, 1e-12)
					}
				}
			}
			if found != c.found {
				t.Errorf("%s, %s: compared %d estimates", c.set, model, found)
			}
		}
	}
}
