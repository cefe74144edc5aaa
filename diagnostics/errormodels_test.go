package diagnostics

import (
	"math"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// The gain of errors in k where two laboratories have offsets. R 4.2.2: lm of the means of
// ln k on 1/T, ln T and laboratory, Gauss-Newton steps with qr on the means of k, both
// weighted by the number of points; twice the difference of the log-likelihoods, -Σ ln k
// in the first. The number of parameters is the same.
func TestErrorModelsBesideOffsets(t *testing.T) {
	const gain = 50.60855027294
	for _, model := range []fit.ErrorModel{fit.Relative, fit.Absolute} {
		opt := quick()
		opt.ErrorModel = model
		a := mustAssess(t, kSet(10, 2, 0, 3), opt)
		reference.Close(t, string(model), float64(a.ResidualChecks.AbsoluteGain), gain, 1e-10)
		if a.finding("absolute-fits-better") != (model == fit.Relative) {
			t.Errorf("%s: %v", model, a.Findings)
		}
	}
}

// What is printed is the difference of the two assessments, whatever the data hold, and
// where it is unknown a reason is.
func TestErrorModelsAreThoseOfTheTool(t *testing.T) {
	stated := func(s *dataset.Set) *dataset.Set {
		for i := range s.Points {
			s.Points[i].UK, s.Points[i].Level = 0.03*s.Points[i].K, dataset.LevelStandard
		}
		return s
	}
	for name, c := range map[string]struct {
		set   *dataset.Set
		model fit.ErrorModel
		why   string
	}{
		"plain":              {set: lineSet(12, 290, 340, 60e3, 0.03, 1), model: fit.Relative},
		"repeats":            {set: kSet(10, 1, 0, 2), model: fit.Relative},
		"sources":            {set: kSet(10, 2, 20, 2), model: fit.Relative},
		"limits":             {set: bitten(), model: fit.Relative},
		"stated":             {set: stated(lineSet(12, 290, 340, 60e3, 0.03, 1)), model: fit.Stated},
		"scaled":             {set: stated(lineSet(12, 290, 340, 60e3, 0.03, 1)), model: fit.Scaled, why: "no counterpart"},
		"many":               {set: lineSet(FullyResampled+1, 290, 340, 60e3, 0.03, 1), model: fit.Relative, why: "not compared for more than"},
		"nothing, not above": {set: negative(), model: fit.Absolute, why: "no logarithm"},
	} {
		opt := quick()
		opt.ErrorModel = c.model
		a := mustAssess(t, c.set, opt)
		r := a.ResidualChecks
		if r.AbsoluteGain.Known() != (r.AbsoluteWhy == "") || !strings.Contains(r.AbsoluteWhy, c.why) {
			t.Errorf("%s: %+v", name, r)
		}
		if c.why != "" {
			if r.AbsoluteGain.Known() {
				t.Errorf("%s: %+v", name, r)
			}
			continue
		}
		opt.ErrorModel = otherWay[c.model]
		b := mustAssess(t, c.set, opt)
		aic := func(a *Assessment) float64 {
			for _, x := range a.Ranking {
				if x.Curve == r.Curve {
					return float64(x.AIC)
				}
			}
			return math.NaN()
		}
		if want := aic(a) - aic(b); !(math.Abs(float64(r.AbsoluteGain)-want) <= 1e-8*(1+math.Abs(want))) {
			t.Errorf("%s: %g, want %g", name, float64(r.AbsoluteGain), want)
		}
		reference.Close(t, name+" from the other side", float64(b.ResidualChecks.AbsoluteGain), float64(r.AbsoluteGain), 1e-6)
	}
}

// negative is a set with errors in k of which one k came out negative.
func negative() *dataset.Set {
	s := kSet(12, 1, 0, 5)
	s.Points[0].K = -1e-6
	return s
}

// Whether stated uncertainties are contradicted does not hang on the candidates.
func TestContradictedWhateverTheCandidates(t *testing.T) {
	doubted, other := 0, 0
	designs := &DesignCache{}
	for seed := range uint64(40) {
		s := lineSet(6, 290, 340, 60e3, 0.03, seed)
		for i := range s.Points { // drops at the hot end, as steps in series do
			s.Points[i].K /= 1 + math.Exp(0.3*(s.Points[i].T-344))
			s.Points[i].UK, s.Points[i].Level = 0.03*s.Points[i].K, dataset.LevelStandard
		}
		opt := quick()
		opt.Designs = designs
		if a := assessorOf(t, s, opt); a.checks != 0 {
			t.Errorf("seed %d: %d fits for nothing", seed, a.checks)
		}
		want := mustAssess(t, s, opt)
		for _, list := range []string{"straight", "straight,power-prefactor", "straight,vogel", "straight,parallel"} {
			curves, err := models.Select(list)
			if err != nil {
				t.Fatal(err)
			}
			opt.Models = curves
			got := mustAssess(t, s, opt)
			if got.Settings.ErrorModel != want.Settings.ErrorModel || got.Verdict.State != want.Verdict.State ||
				got.finding("chi2-low") != want.finding("chi2-low") || got.finding("stated-contradicted") != want.finding("stated-contradicted") {
				t.Errorf("seed %d, %s: %s %s, want %s %s", seed, list, got.Settings.ErrorModel, got.Verdict.State, want.Settings.ErrorModel, want.Verdict.State)
			}
			a := assessorOf(t, s, opt)
			if a.checks > 0 {
				doubted++
			}
			if a.model == fit.Stated && a.power.Nu > 0 && chi2Tail(a.power.RSS, a.power.Nu) < contradictedLevel {
				other++
			}
		}
	}
	if doubted == 0 || doubted == 160 {
		t.Errorf("further curves were fitted in %d of 160", doubted)
	}
	if other == 0 {
		t.Error("no set in which power-prefactor alone would contradict the uncertainties")
	}
}
