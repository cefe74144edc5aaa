package diagnostics

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

func rankNamed(t testing.TB, s *fit.Sample, by Criterion, names ...string) []Ranked {
	t.Helper()
	var fits []*fit.Result
	for _, n := range names {
		c, err := models.Lookup(n)
		if err != nil {
			t.Fatal(err)
		}
		fits = append(fits, fit.Fit(s, c))
	}
	return Rank(s, fits, by)
}

func rowOf(t testing.TB, ranking []Ranked, curve string) Ranked {
	t.Helper()
	for _, r := range ranking {
		if r.Curve == curve {
			return r
		}
	}
	t.Fatalf("%s is not in the ranking", curve)
	return Ranked{}
}

// Differences of AICc and of the other criteria against R 4.2.2 (bbmle::AICc, AIC,
// BIC), and the weights by family that follow from R's AICc by their definition.
func TestRankAgainstR(t *testing.T) {
	g := golden(t)
	inR := map[string]string{"straight": "arr", "linear-prefactor": "eyring", "power-prefactor": "mod", "parallel": "par2"}
	for _, c := range []struct {
		set   string
		names []string
	}{
		{"s1_straight", []string{"straight", "linear-prefactor", "power-prefactor"}},
		{"s2_tn_curved", []string{"power-prefactor", "straight", "parallel", "linear-prefactor"}},
		{"s3_parallel", []string{"straight", "linear-prefactor", "power-prefactor", "parallel"}},
		{"s6_replicates", []string{"straight", "parallel", "linear-prefactor", "power-prefactor"}},
		{"s8_tiny6", []string{"power-prefactor", "straight", "linear-prefactor"}},
	} {
		s := synthetic(t, c.set, fit.Relative)
		for by, name := range map[Criterion]string{ByAICc: "AICc", ByAIC: "AIC", ByBIC: "BIC"} {
			ranking := rankNamed(t, s, by, c.names...)
			ic := func(curve string) float64 { return g(c.set, inR[curve], name) }
			best := math.Inf(1)
			for _, n := range c.names {
				best = math.Min(best, ic(n))
			}
			line := math.Min(ic("straight"), ic("linear-prefactor")) // best of the family
			total := math.Exp((best-line)/2) + math.Exp((best-ic("power-prefactor"))/2)
			if len(c.names) == 4 {
				total += math.Exp((best - ic("parallel")) / 2)
			}
			for i, r := range ranking {
				if i > 0 && !(r.Delta >= ranking[i-1].Delta) {
					t.Errorf("%s %s: %s is out of order", c.set, name, r.Curve)
				}
				delta := ic(r.Curve) - best
				if !(math.Abs(float64(r.Delta)-delta) <= 1e-8*math.Max(1, delta)) {
					t.Errorf("%s %s: Δ(%s) = %g, want %g", c.set, name, r.Curve, r.Delta, delta)
				}
				family, within := ic(r.Curve), 1.0
				if r.Family == "fixed-exponent" {
					family = line
					within = math.Exp((line-ic(r.Curve))/2) / (math.Exp((line-ic("straight"))/2) + math.Exp((line-ic("linear-prefactor"))/2))
				}
				w := math.Exp((best-family)/2) / total
				reference.Close(t, c.set+" family weight of "+r.Curve, float64(r.FamWeight), w, 1e-7)
				reference.Close(t, c.set+" weight of "+r.Curve, float64(r.Weight), w*within, 1e-7)
			}
		}
	}
}

// Known sigma: AICc is AIC (R: AIC_known), sigma is no parameter.
func TestRankKnownSigma(t *testing.T) {
	g := golden(t)
	s := synthetic(t, "s5_hetero", fit.Stated)
	ranking := rankNamed(t, s, ByAICc, "straight", "power-prefactor", "linear-prefactor")
	for _, c := range [][2]string{{"power-prefactor", "mod"}, {"linear-prefactor", "eyring"}} {
		want := g("s5_hetero", c[1], "AIC_known") - g("s5_hetero", "arr", "AIC_known")
		reference.Close(t, "Δ "+c[0], float64(rowOf(t, ranking, c[0]).Delta), want, 1e-6)
		reference.Close(t, "χ² "+c[0], float64(rowOf(t, ranking, c[0]).Chi2), g("s5_hetero", c[1], "chi2"), 1e-8)
	}
}

// Three equal members of one family against one of another: the family counts once.
func TestFamilyWeights(t *testing.T) {
	nan := math.NaN()
	f, w := FamilyWeights([]string{"a", "a", "a", "b", "c"}, []float64{10, 10, 10, 10, nan})
	for i, want := range []float64{0.5, 0.5, 0.5, 0.5, 0} {
		if f[i] != want {
			t.Errorf("family weight %d is %g, want %g", i, f[i], want)
		}
	}
	for i, want := range []float64{1. / 6, 1. / 6, 1. / 6, 0.5, 0} {
		if !(math.Abs(w[i]-want) < 1e-15) {
			t.Errorf("weight %d is %g, want %g", i, w[i], want)
		}
	}
}

// AICc needs N > K + 1: with six points parallel (K = 5) is fitted, shown with its
// AIC and not ranked; power-prefactor (K = 4) is.
func TestAICcUndefined(t *testing.T) {
	temps := span(280, 340, 6)
	y := make([]float64, 6)
	for i, T := range temps { // two paths crossing at 310 K, and a little scatter
		x := (1/T - 1./310) / models.GasConstant
		y[i] = math.Log(math.Exp(-30e3*x)+math.Exp(-150e3*x)) + []float64{1, -1, -1, 2, -2, 1}[i]*1e-3
	}
	s := sampleOf(t, fit.Relative, temps, y, nil)
	ranking := rankNamed(t, s, ByAICc, "parallel", "power-prefactor", "straight")
	r := rowOf(t, ranking, "parallel")
	if r.Status != StatusFitted || !strings.Contains(r.Reason, "AICc undefined: needs N ≥ 7") {
		t.Errorf("parallel: %s, %q", r.Status, r.Reason)
	}
	if !r.AIC.Known() || r.AICc.Known() || r.Weight.Known() || r.Delta.Known() {
		t.Errorf("parallel: AIC %g, AICc %g, weight %g, Δ %g", r.AIC, r.AICc, r.Weight, r.Delta)
	}
	if ranking[2].Curve != "parallel" || rowOf(t, ranking, "power-prefactor").Status != StatusRanked {
		t.Errorf("order or status is wrong: %v", ranking)
	}
	if rankNamed(t, s, ByBIC, "parallel", "straight")[0].Curve != "parallel" {
		t.Error("by BIC parallel is ranked, and first here")
	}
	codes := map[string]bool{}
	for _, f := range RankingFindings(ranking, s, ByAICc) {
		codes[f.Code] = true
	}
	for _, c := range []string{"aicc-undefined", "forms-same-curve", "ranking-and-test", "adequacy-unchecked"} {
		if !codes[c] {
			t.Errorf("no finding %s", c)
		}
	}
}

// Stated uncertainties that are scaled to the scatter check nothing: stating them is
// no cure.
func TestAdequacyUncheckedUnderScaled(t *testing.T) {
	s := synthetic(t, "s5_hetero", fit.Scaled)
	for _, f := range RankingFindings(rankNamed(t, s, ByAICc, "power-prefactor", "straight"), s, ByAICc) {
		if f.Code == "adequacy-unchecked" {
			if !strings.Contains(f.Message, "used up by the factor common to all") || f.Cure != "repeat some temperatures" {
				t.Errorf("%+v", f)
			}
			return
		}
	}
	t.Error("no finding adequacy-unchecked")
}

// Excluded curves come last and say why: where E falls two parallel paths cannot
// describe the data.
func TestExcludedLast(t *testing.T) {
	s := synthetic(t, "s4_series", fit.Relative)
	ranking := rankNamed(t, s, ByAICc, "parallel", "straight", "power-prefactor")
	last := ranking[len(ranking)-1]
	if last.Curve != "parallel" || last.Status != StatusExcluded || last.Reason == "" || last.Weight.Known() {
		t.Errorf("%+v", last)
	}
}

// Among fits without scatter the rounding of arithmetic must not choose: the one
// with fewer parameters comes first.
func TestRankExactData(t *testing.T) {
	for _, n := range []int{6, 9, 15} {
		temps := span(280, 340, n)
		s := sampleOf(t, fit.Relative, temps, roundedLine(temps), nil)
		ranking := rankNamed(t, s, ByAICc, "power-prefactor", "root-prefactor", "straight")
		if ranking[0].Curve != "straight" {
			t.Errorf("N = %d: %s ranks first on an exact line", n, ranking[0].Curve)
		}
		var sum Real
		for _, r := range ranking {
			sum += r.Weight
		}
		reference.Close(t, "sum of weights", float64(sum), 1, 1e-12)
	}
}

// The criterion from RSS and penalty orders resamples as the criterion itself does:
// their difference is the same for every curve.
func TestPenalty(t *testing.T) {
	for _, model := range []fit.ErrorModel{fit.Relative, fit.Scaled, fit.Stated} {
		set := "s2_tn_curved"
		if model != fit.Relative {
			set = "s5_hetero"
		}
		s := synthetic(t, set, model)
		for _, by := range []Criterion{ByAICc, ByAIC, ByBIC} {
			var first float64
			for i, name := range []string{"straight", "power-prefactor", "linear-prefactor"} {
				f := fitNamed(t, s, name)
				short := float64(f.N)*math.Log(f.RSS) + penalty(f, by)
				if model.KnownSigma() {
					short = f.RSS + penalty(f, by)
				}
				d := criterionValue(s, f, by) - short
				if i == 0 {
					first = d
				}
				if !(math.Abs(d-first) < 1e-9) {
					t.Errorf("%s %s %s: differs by %g, straight by %g", model, by, name, d, first)
				}
			}
		}
	}
}

// The smallest set of families with weights of 0.95 together; whole families.
func Test95PercentSet(t *testing.T) {
	rs := []Ranked{
		{Family: "a", Status: StatusRanked, FamWeight: 0.7}, {Family: "b", Status: StatusRanked, FamWeight: 0.26},
		{Family: "a", Status: StatusRanked, FamWeight: 0.7}, {Family: "c", Status: StatusRanked, FamWeight: 0.04},
		{Family: "d", Status: StatusFitted},
	}
	mark95(rs)
	var got string
	for _, r := range rs {
		got += fmt.Sprintf("%t ", r.InSet)
	}
	if got != "true true true false false " {
		t.Error(got)
	}
}
