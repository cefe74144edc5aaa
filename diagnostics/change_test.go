package diagnostics

import (
	"math"
	"slices"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// enzyme is an invented enzyme with an optimum: E 52 kJ/mol, unfolding of 320 kJ/mol
// half done at 327 K, errors of some per cent.
func enzyme() (t, k []float64) {
	t = []float64{10, 15, 20, 25, 30, 35, 40, 45, 48, 50, 52.5, 55, 60}
	for i := range t {
		t[i] += 273.15
	}
	return t, []float64{3.92, 5.76, 8.16, 12.4, 17.5, 24, 31, 43.9, 45.9, 47.5, 44.1, 33, 11.2}
}

// The reversible inactivation of enzyme in R 4.2.2:
//
//	f <- nls(log(k) ~ a - e/R*1e3*(1/t-1/300) - log1p(exp(-h*1e3/R*(1/t-1/th))), ...)
//
// with E_loc = e - h/(1 + exp(h/R (1/t - 1/th))) at the ends by coef(f) and vcov(f),
// interval by qt(0.975, 9).
func TestChangeIsThatOfTheCurveThatFits(t *testing.T) {
	temps, k := enzyme()
	a := mustAssess(t, setOf(temps, k, nil), quick())
	v := a.Verdict
	if v.State != BeyondPrefactor || v.RecommendedCurve != "series" || v.EChangeCurve != "series" {
		t.Fatalf("%+v", v)
	}
	for _, c := range []struct {
		what string
		got  Real
		want float64
	}{
		{"change", v.EChange.Value, -285.70031483469}, {"its standard error", v.EChange.StdError, 8.32736290472},
		{"lower", v.EChange.Lower, -304.53811847683}, {"upper", v.EChange.Upper, -266.86251119255},
	} {
		reference.Close(t, c.what, float64(c.got), c.want, 2e-6)
	}
	for _, says := range []string{"by 286 kJ/mol (267 to 305) between 283.15 and 333.15 K by the curve series", "does not describe the data"} {
		if !strings.Contains(v.Sentence, says) {
			t.Errorf("%q does not say %q", v.Sentence, says)
		}
	}
	// What is published at the ends is the same change.
	var ends []float64
	for _, l := range a.Publish.Lines {
		if l.Symbol == "E_a" {
			ends = append(ends, float64(l.Value))
		}
	}
	if len(ends) != 2 {
		t.Fatalf("E_a is published %d times", len(ends))
	}
	reference.Close(t, "published", ends[1]-ends[0], float64(v.EChange.Value), 1e-9)
	// The statistic of the test stays as it is.
	if c := a.Curvature.EChange.Value; !(c > -200 && c < -100) {
		t.Errorf("the test's change of E is %g kJ/mol", float64(c))
	}
	for _, f := range a.Findings {
		if f.Code == "exponent-not-a-prefactor" && (!strings.Contains(f.Cure, "−286 kJ/mol") || strings.Contains(f.Cure, "ΔC_p")) {
			t.Errorf("%q, cure %q", f.Message, f.Cure)
		}
	}
}

// softening are invented rate constants with u of 2 %: E 59 kJ/mol, and the last point
// alone lies below the line, so that steps in series fit with any second barrier that is large.
func softening() *dataset.Set {
	t := []float64{290, 300, 310, 320, 330, 340}
	k := []float64{9.9549e-05, 2.2891e-04, 4.8378e-04, 9.8480e-04, 1.9290e-03, 2.7151e-03}
	u := []float64{1.99e-06, 4.58e-06, 9.68e-06, 1.97e-05, 3.86e-05, 5.43e-05}
	return setOf(t, k, u)
}

// A curve whose change of E may have either sign, which series never has, tells none: the
// change and its interval stay those of the test, and so does whether it matters. What an
// open barrier leaves open is not published with an interval that it has not.
func TestChangeThatIsNotDeterminedIsNotTold(t *testing.T) {
	o := quick()
	o.ErrorModel = fit.Stated
	a := mustAssess(t, softening(), o)
	v := a.Verdict
	if v.State != BeyondPrefactor || v.RecommendedCurve != "series" || v.EChangeCurve != "power-prefactor" || v.EChange != a.Curvature.EChange {
		t.Fatalf("%+v", v)
	}
	if v.Material == nil || !*v.Material {
		t.Error("not material, where the test's whole interval is beyond the tolerance")
	}
	if !strings.Contains(v.Sentence, "the curve series describes the data better, but leaves the change open") {
		t.Errorf("%q", v.Sentence)
	}
	told := map[string]bool{}
	for _, l := range a.Publish.Lines {
		if l.Symbol == "ΔH_d" || l.Symbol == "T_half" || l.Symbol == "E_a" && strings.HasPrefix(l.Note, "at 340 K") {
			told[l.Symbol] = true
			if l.Value.Known() || !strings.Contains(l.Note, "not bounded: an end of a barrier is open") {
				t.Errorf("%s: %s, note %q", l.Symbol, l.Text, l.Note)
			}
		}
		if l.Symbol == "E_a" && strings.HasPrefix(l.Note, "at 290 K") && !l.Value.Known() {
			t.Error("E_a at the cold end is not published")
		}
	}
	if len(told) != 3 {
		t.Errorf("published are only %v", told)
	}
	for _, f := range a.Findings {
		if f.Code == "exponent-not-a-prefactor" && (!strings.Contains(f.Cure, "−22 kJ/mol for its sign") || strings.Contains(f.Cure, "ΔC_p")) {
			t.Errorf("%q, cure %q", f.Message, f.Cure)
		}
	}
}

// What may stand for the change of E of the test.
func TestTells(t *testing.T) {
	of := func(value, low, high float64, open fit.Open) fit.Estimate {
		return fit.Estimate{Value: value, StdError: 1, Lower: low, Upper: high, Open: open}
	}
	falls, near := of(-22, -27, -16, fit.OpenNone), of(-6, -10, -2, fit.OpenNone)
	for _, c := range []struct {
		what         string
		change, test fit.Estimate
		want         bool
	}{
		{"as sure", of(-60, -84, -35, fit.OpenNone), falls, true},
		{"either sign", of(-126, -1021, 768, fit.OpenNone), falls, false},
		{"the other sign", of(60, 35, 84, fit.OpenNone), falls, false},
		{"an open end", of(-60, math.NaN(), -35, fit.OpenLower), falls, false},
		{"unknown", fit.Unknown(), falls, false},
		{"open whether it matters, which the test knows", of(-60, -118, -2, fit.OpenNone), falls, false},
		{"open whether it matters for both", of(-60, -118, -2, fit.OpenNone), near, true},
	} {
		if got := tells(c.change, c.test, 3); got != c.want {
			t.Errorf("%s: tells is %t", c.what, got)
		}
	}
}

// The curve of the test tells the change wherever it describes the data about as well,
// where the other fails, and where the recommended one is a line with a prefactor.
func TestOutdone(t *testing.T) {
	temps, k := enzyme()
	s := sampleOf(t, fit.Relative, temps, logs(k), nil)
	power, series, line := fitNamed(t, s, "power-prefactor"), fitNamed(t, s, "series"), fitNamed(t, s, "root-prefactor")
	no, yes := false, true
	rows := func(p, q *bool) []Ranked {
		return []Ranked{{Curve: "power-prefactor", Adequate: p}, {Curve: "series", Adequate: q}}
	}
	near := *power
	near.LogLik += (criterionValue(s, power, ByAICc) - criterionValue(s, series, ByAICc) - farBehind + 0.1) / 2
	for _, c := range []struct {
		what    string
		power   *fit.Result
		other   *fit.Result
		ranking []Ranked
		want    bool
	}{
		{"far behind", power, series, rows(nil, nil), true},
		{"nearly as good", &near, series, rows(nil, nil), false},
		{"nearly as good, but rejected", &near, series, rows(&no, &yes), true},
		{"both rejected", power, series, rows(&no, &no), false},
		{"a line with a prefactor", power, line, rows(nil, nil), false},
		{"nothing recommended", power, nil, rows(nil, nil), false},
	} {
		if got := outdone(s, c.power, c.other, c.ranking, ByAICc); got != c.want {
			t.Errorf("%s: outdone is %t", c.what, got)
		}
	}
}

func logs(k []float64) []float64 {
	out := make([]float64, len(k))
	for i, v := range k {
		out[i] = math.Log(v)
	}
	return out
}

// codesOf are the codes of the findings of an assessment.
func codesOf(a *Assessment) []string {
	var codes []string
	for _, f := range a.Findings {
		codes = append(codes, f.Code)
	}
	return codes
}

// Points that lie on the curve that fits are no outliers, however far they lie from
// that of the test. Studentised residuals in R: z <- resid(f)/(sigma sqrt(1 - h)),
// z sqrt(8/(9 - z²)) with h of the gradient of the nls fit above.
func TestOutliersAreThoseOfTheCurveThatFits(t *testing.T) {
	temps, k := enzyme()
	u := make([]float64, len(k))
	for i := range u {
		u[i] = 0.025 * k[i]
	}
	stated := quick()
	stated.ErrorModel = fit.Stated
	for what, a := range map[string]*Assessment{
		"relative": mustAssess(t, setOf(temps, k, nil), quick()),
		"stated":   mustAssess(t, setOf(temps, k, u), stated),
	} {
		if slices.Contains(codesOf(a), "outlier") {
			t.Errorf("%s: outliers among points of the curve", what)
		}
		for _, f := range a.Influence {
			if f.Curve != "series" {
				t.Fatalf("%s: residuals are those from %q", what, f.Curve)
			}
		}
	}
	want := []float64{-0.50030805, -0.28026801, -0.95564144, 1.31098863, 1.36262353, 0.75377251, -1.56383556,
		1.03579684, -1.47358797, -0.61927181, 0.50849817, 0.50313327, -0.97571605}
	for i, f := range mustAssess(t, setOf(temps, k, nil), quick()).Influence {
		reference.Close(t, "studentised", float64(f.Studentised), want[i], 1e-4)
	}
	// One that does lie far away is still found.
	k[4] *= 1.4
	if a := mustAssess(t, setOf(temps, k, nil), quick()); !slices.ContainsFunc(a.Findings, func(f Finding) bool {
		return f.Code == "outlier" && slices.Equal(f.Rows, []int{6}) && strings.Contains(f.Message, "the series curve")
	}) {
		t.Errorf("no outlier in row 6: %v", codesOf(a))
	}
}

// Where nothing fits no outlier is named, unless it is the one point that nothing fits.
func TestOutliersWhereNothingFits(t *testing.T) {
	temps, k := enzyme()
	u := make([]float64, len(k))
	for i := range u {
		u[i] = 0.025 * k[i]
	}
	o := quick()
	o.ErrorModel = fit.Stated
	o.Models = []models.Curve{models.Straight(), models.PowerPrefactor{}}
	a := mustAssess(t, setOf(temps, k, u), o)
	if codes := codesOf(a); slices.Contains(codes, "outlier") || !slices.Contains(codes, "outliers-not-told") {
		t.Errorf("a curve that does not fit: %v", codes)
	}
	if !strings.Contains(a.Verdict.Sentence, "the size is rough") {
		t.Errorf("%q", a.Verdict.Sentence)
	}
	line := lineSet(12, 290, 340, 60e3, 0.02, 3)
	for i := range line.Points {
		p := &line.Points[i]
		if i == 5 {
			p.K *= 1.3
		}
		p.UK, p.Level = 0.025*p.K, dataset.LevelStandard
	}
	a = mustAssess(t, line, o)
	if codes := codesOf(a); !slices.Contains(codes, "none-adequate") || !slices.Contains(codes, "outlier") || slices.Contains(codes, "outliers-not-told") {
		t.Errorf("one bad point: %v", codes)
	}
}

// Points that follow a curve are not compared with a line: u(T) of 2 K makes ln k far
// more uncertain than the 3 % by which they scatter about the curve, but no more than
// the bend does about a line.
func TestScatterAboutTheCurveThatFits(t *testing.T) {
	temps, k := enzyme()
	set := setOf(temps, k, nil)
	for i := range set.Points {
		set.Points[i].UT = 2
	}
	a := mustAssess(t, set, quick())
	if !slices.ContainsFunc(a.Findings, func(f Finding) bool {
		return f.Code == "scatter-below-thermometer" && strings.Contains(f.Message, "about series")
	}) {
		t.Errorf("not found: %v", codesOf(a))
	}
}

// Standard deviations of as many repeats at every temperature are the pure error of the
// means. R, with sd those below and f the nls fit above, g <- lm(log(k) ~ log(t) + I(1/t)):
//
//	F <- (deviance(f)/9)/mean((sd/k)^2/3); pf(F, 9, 26, lower.tail = FALSE)
func TestStandardDeviationsCheckTheFit(t *testing.T) {
	temps, k := enzyme()
	sd := []float64{0.177, 0.212, 0.309, 0.549, 0.743, 1, 1.51, 1.97, 1.03, 1.68, 1.74, 1.11, 0.493}
	set := setOf(temps, k, nil)
	for i := range set.Points {
		p := &set.Points[i]
		p.SD, p.Repeats, p.UK, p.Level = sd[i], 3, sd[i]/math.Sqrt(3), dataset.LevelRepeats
	}
	a := mustAssess(t, set, quick())
	for curve, want := range map[string][2]float64{"series": {1.763599998890, 0.124490880114}, "power-prefactor": {2.41934994275e+02, 5.07647501166e-23}} {
		i := slices.IndexFunc(a.Ranking, func(r Ranked) bool { return r.Curve == curve })
		r := a.Ranking[i]
		if len(r.Adequacy) == 0 || r.Adequacy[0].Test != TestPureError {
			t.Fatalf("%s: %+v", curve, r.Adequacy)
		}
		reference.Close(t, curve+": F", float64(r.Adequacy[0].Statistic), want[0], 1e-6)
		reference.Close(t, curve+": p", float64(r.Adequacy[0].PValue), want[1], 1e-5)
	}
	if slices.Contains(codesOf(a), "adequacy-unchecked") {
		t.Errorf("unchecked: %v", codesOf(a))
	}
	set.Points[3].Repeats = 4
	a = mustAssess(t, set, quick())
	i := slices.IndexFunc(a.Findings, func(f Finding) bool { return f.Code == "adequacy-unchecked" })
	if i < 0 || !strings.Contains(a.Findings[i].Message, "of as many repeats each") || strings.Contains(a.Findings[i].Cure, "state u(k)") {
		t.Errorf("unequal numbers of repeats: %v", a.Findings)
	}
}

// Shares of another curve's repeats are told as such, and only those.
func TestSharesOfAnotherCurve(t *testing.T) {
	temps, k := enzyme()
	s := sampleOf(t, fit.Relative, temps, logs(k), nil)
	for _, c := range []struct {
		what        string
		verdict     State
		recommended string
		share       Real
		want        bool
	}{
		{"another curve, another verdict", Unresolved, "straight", 0.7, true},
		{"the same verdict", BeyondPrefactor, "straight", 0.7, false},
		{"the recommended curve", Unresolved, "series", 0.7, false},
		{"less than half", Unresolved, "straight", 0.4, false},
	} {
		a := &assessor{opt: quick(), data: &prepared{sample: s}, fits: []*fit.Result{fitNamed(t, s, "series"), fitNamed(t, s, "straight")}, ranked: 2}
		a.verdict = Verdict{State: c.verdict, RecommendedCurve: c.recommended}
		a.resampling = &Resampling{RepeatShare: map[State]Real{BeyondPrefactor: c.share, Unresolved: 1 - c.share - 0.2}}
		a.sharesFollow()
		if got := len(a.findings) == 1; got != c.want {
			t.Errorf("%s: told is %t", c.what, got)
		}
	}
}
