package diagnostics

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

func testNamed(t testing.TB, tests []Adequacy, name string) Adequacy {
	t.Helper()
	for _, a := range tests {
		if a.Test == name {
			return a
		}
	}
	t.Fatalf("no %s test among %v", name, tests)
	return Adequacy{}
}

// Lack of fit over pure error against R (anova of lm against factor(T)), from
// points and from temperature means alike: 1 % rejects the line, not the power
// curve.
func TestPureErrorAgainstR(t *testing.T) {
	g := golden(t)
	points := synthetic(t, "s6_replicates", fit.Relative)
	pe := NewPureError(points)
	reference.Close(t, "SS of pure error", pe.SS, g("s6_replicates", "pure_error", "sspe"), 1e-10)
	if float64(pe.DF) != g("s6_replicates", "pure_error", "dfpe") || pe.Temperatures != 7 {
		t.Errorf("degrees of freedom: %+v", pe)
	}
	for _, onMeans := range []bool{false, true} {
		s := points
		if onMeans {
			s = means(t, points)
		}
		for name, r := range map[string]string{"straight": "LOF_arr", "power-prefactor": "LOF_mod"} {
			tests, adequate := CheckAdequacy(s, fitNamed(t, s, name), pe, onMeans, new(RunsNulls))
			a := testNamed(t, tests, TestPureError)
			reference.Close(t, name+" F", float64(a.Statistic), g("s6_replicates", r, "F"), 1e-8)
			reference.Close(t, name+" p", float64(a.PValue), g("s6_replicates", r, "p"), 1e-8)
			if adequate == nil || *adequate != (name == "power-prefactor") {
				t.Errorf("%s: adequate is wrong", name)
			}
		}
	}
}

// Chi-squared against R pchisq, where there are no repeats and uncertainties are
// stated; nothing decides where there are neither.
func TestChiSquaredAgainstR(t *testing.T) {
	g := golden(t)
	s := synthetic(t, "s5_hetero", fit.Stated)
	tests, adequate := CheckAdequacy(s, fitNamed(t, s, "straight"), NewPureError(s), false, new(RunsNulls))
	a := testNamed(t, tests, TestChiSquared)
	reference.Close(t, "χ²", float64(a.Statistic), g("s5_hetero", "arr", "chi2"), 1e-10)
	reference.Close(t, "p", float64(a.PValue), g("s5_hetero", "arr", "p_chi2"), 1e-9)
	if adequate == nil || !*adequate {
		t.Error("χ² of 6 on 13 is adequate")
	}
	s = synthetic(t, "s1_straight", fit.Relative)
	tests, adequate = CheckAdequacy(s, fitNamed(t, s, "straight"), NewPureError(s), false, new(RunsNulls))
	if adequate != nil || len(tests) != 1 || tests[0].Test != TestRuns {
		t.Errorf("without repeats or u(k) nothing can decide: %v", tests)
	}
}

// Counts of runs against R tseries::runs.test.
func TestRunsAgainstR(t *testing.T) {
	g := golden(t)
	for _, set := range reference.SyntheticSets {
		model := fit.Relative
		if set == "s5_hetero" {
			model = fit.Scaled
		}
		s := synthetic(t, set, model)
		for name, r := range map[string]string{"straight": "runs_arr", "power-prefactor": "runs_mod"} {
			runs, p := new(RunsNulls).test(s, fitNamed(t, s, name))
			if runs != g(set, r, "runs") {
				t.Errorf("%s %s: %g runs, want %g", set, name, runs, g(set, r, "runs"))
			}
			if !(p > 0 && p <= 1) {
				t.Errorf("%s %s: p = %g", set, name, p)
			}
		}
	}
}

// The chance of so few runs against 200,000 sets of residuals of normal numbers made
// and projected in R.
func TestRunsPValueAgainstR(t *testing.T) {
	for _, c := range []struct {
		set, curve string
		model      fit.ErrorModel
		p          float64
	}{
		{"s1_straight", "straight", fit.Relative, 0.93944},
		{"s2_tn_curved", "power-prefactor", fit.Relative, 0.303275},
		{"s5_hetero", "straight", fit.Scaled, 0.1039},
		{"s6_replicates", "straight", fit.Relative, 0.00747},
		{"s8_tiny6", "straight", fit.Relative, 0.28955},
		{"s8_tiny6", "power-prefactor", fit.Relative, 0.518785},
	} {
		s := synthetic(t, c.set, c.model)
		_, p := new(RunsNulls).test(s, fitNamed(t, s, c.curve))
		se := math.Sqrt(c.p * (1 - c.p) * (1./runsDraws + 1./200000))
		if !(math.Abs(p-c.p) <= 4*se) {
			t.Errorf("%s %s: p = %.4f, want %.4f ± %.4f", c.set, c.curve, p, c.p, 4*se)
		}
	}
}

// What a fit can follow is orthogonal to its own weighted residuals.
func TestTangentIsOrthogonalToResiduals(t *testing.T) {
	s := synthetic(t, "s5_hetero", fit.Scaled)
	for _, name := range []string{"straight", "power-prefactor"} {
		f := fitNamed(t, s, name)
		for j, q := range tangent(s, f) {
			var dot float64
			for i, r := range f.Residuals {
				dot += q[i] * r / math.Sqrt(s.V[i])
			}
			if !(math.Abs(dot) <= 1e-9*math.Sqrt(f.RSS)) {
				t.Errorf("%s: column %d and the residuals have product %g", name, j, dot)
			}
		}
	}
}

// The null of the runs test on straight data: P(p <= α) must not exceed α.
func TestRunsNull(t *testing.T) {
	s := sampleOf(t, fit.Relative, span(280, 340, 8), make([]float64, 8), nil)
	rng := rand.New(rand.NewPCG(5, 5))
	const sets = 300
	var at10 int
	for range sets {
		lineNoise(rng, s, 0.03, s.Y)
		if _, p := new(RunsNulls).test(s, fitNamed(t, s, "straight")); p <= 0.10 {
			at10++
		}
	}
	if rate := float64(at10) / sets; !(rate <= 0.10+4*math.Sqrt(0.09/sets)) {
		t.Errorf("p <= 0.10 in %.3f of straight sets", rate)
	}
}

// Beyond runsExact the normal null of Wald and Wolfowitz: R's runs.test normal
// approximation with its continuity correction, formula (R-mu+0.5)/sd.
func TestRunsOfManyPoints(t *testing.T) {
	n := 500
	s := sampleOf(t, fit.Relative, span(280, 340, n), make([]float64, n), nil)
	lineNoise(rand.New(rand.NewPCG(9, 1)), s, 0.03, s.Y)
	f := fitNamed(t, s, "straight")
	runs, p := new(RunsNulls).test(s, f)
	var above, below float64
	for _, r := range f.Residuals {
		if r > 0 {
			above++
		} else {
			below++
		}
	}
	total := above + below
	mu := 1 + 2*above*below/total
	variance := 2 * above * below * (2*above*below - total) / (total * total * (total - 1))
	reference.Close(t, "p", p, math.Erfc(-(runs-mu+0.5)/math.Sqrt(2*variance))/2, 1e-10)
}

// Repeats that share the error of their setting are blamed, no louder than the verdict is;
// a trend in the means, or repeats that are said to be independent, leave the alarm.
func TestRepeatsThatShareAnError(t *testing.T) {
	draw := func(n int, f func(x float64) float64, shared float64) *dataset.Set {
		rng := rand.New(rand.NewPCG(1, 8))
		var ts, ks []float64
		for i := range n {
			ti := 285 + 60*float64(i)/float64(n)
			e := shared * rng.NormFloat64()
			for range 3 {
				ts, ks = append(ts, ti), append(ks, math.Exp(20-60e3/(models.GasConstant*ti)+f(float64(i)/float64(n))+e+0.01*rng.NormFloat64()))
			}
		}
		return setOf(ts, ks, nil)
	}
	straight := func(float64) float64 { return 0 }
	bent := func(x float64) float64 { return 2 * (x - 0.5) * (x - 0.5) }
	wave := func(x float64) float64 { return 0.1 * math.Sin(9*x) }
	severity := func(a *Assessment, code string) Severity {
		for _, f := range a.Findings {
			if f.Code == code {
				return f.Severity
			}
		}
		return ""
	}
	for _, c := range []struct {
		name          string
		set           *dataset.Set
		replicates    string
		shares, alarm Severity
	}{
		{"a thermostat", draw(12, straight, 0.03), ReplicatesMeans, Info, ""},
		{"a thermostat, a bent plot", draw(12, bent, 0.03), ReplicatesMeans, Warning, ""},
		{"repeats said to be independent", draw(12, straight, 0.03), ReplicatesIndependent, "", Alarm},
		{"a wave", draw(24, wave, 0), ReplicatesMeans, "", Alarm},
		{"nothing shared", draw(12, straight, 0), ReplicatesMeans, "", ""},
	} {
		o := quick()
		o.Replicates = c.replicates
		a := mustAssess(t, c.set, o)
		if got := severity(a, "repeats-share-error"); got != c.shares {
			t.Errorf("%s: repeats-share-error is %q, want %q (verdict %s)", c.name, got, c.shares, a.Verdict.State)
		}
		if got := severity(a, "none-adequate"); got != c.alarm {
			t.Errorf("%s: none-adequate is %q, want %q", c.name, got, c.alarm)
		}
	}
	// The sizes are those of the generator: 1 % of a repeat, 0.58 % of a mean of three, and
	// 3 % of a setting, give or take what twelve settings tell.
	a := mustAssess(t, draw(12, straight, 0.03), quick())
	i := slices.IndexFunc(a.Findings, func(f Finding) bool { return f.Code == "repeats-share-error" })
	var repeats, left, means float64
	text := a.Findings[i].Message
	if _, err := fmt.Sscanf(text[strings.Index(text, "they scatter"):], "they scatter by %f %%, which leaves %f %% in their means, but these lie %f %%", &repeats, &left, &means); err != nil {
		t.Fatal(err, text)
	}
	if math.Abs(repeats-1) > 0.3 || math.Abs(left-repeats/math.Sqrt(3)) > 0.01 || math.Abs(means-3) > 1.5 {
		t.Errorf("scatter %g %%, %g %% left, means %g %%", repeats, left, means)
	}
}
