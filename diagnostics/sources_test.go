package diagnostics

import (
	"context"
	"encoding/json"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// acetone are three published tables of OH + acetone taken as three sources.
func acetone(t *testing.T) *dataset.Set {
	var temp, k []float64
	var source []string
	for _, name := range []string{"gierczak", "wollenhaupt", "jpl"} {
		columns := reference.Table(t, "expressions/table_"+name+"_oh_acetone.csv", "T_K", "k")
		for i, x := range columns[0] {
			temp, k, source = append(temp, x), append(k, columns[1][i]), append(source, name)
		}
	}
	s := setOf(temp, k, nil)
	for i := range s.Points {
		s.Points[i].Source = source[i]
	}
	return s
}

// fourSources are invented: three laboratories whose ranges overlap, and one point.
func fourSources() *dataset.Set {
	s := setOf(
		[]float64{280, 290, 300, 310, 320, 290, 300, 310, 320, 330, 300, 320, 340, 345},
		[]float64{0.00104, 0.0021, 0.0044, 0.0087, 0.0162, 0.0024, 0.0049, 0.0098, 0.0183, 0.0345, 0.0041, 0.0155, 0.0515, 0.0766}, nil)
	for i, name := range strings.Split("AAAAABBBBBCCCD", "") {
		s.Points[i].Source = name
	}
	return s
}

// R 4.2.2: o <- lm(log(k) ~ I(1/T) + log(T) + s, contrasts = list(s = contr.sum)) and
// p without s: summary(o), summary(p), anova(p, o); VIF = (se/sigma of o)²/(of p)².
func TestSourcesAgainstR(t *testing.T) {
	a := mustAssess(t, acetone(t), quick())
	b := a.BetweenSources
	for _, c := range []struct {
		what      string
		got       Real
		want, tol float64
	}{
		{"n", b.Offset.Exponent.Value, 7.40366749899015, 1e-9},
		{"u(n)", b.Offset.Exponent.StdError, 0.148499449649903, 1e-9},
		{"p", b.Offset.PValue, 4.32999047953653e-48, 1e-7},
		{"n of the verdict", a.Curvature.Exponent.Value, 7.40366749899015, 1e-9},
		{"n pooled", b.Pooled.Exponent.Value, 7.33037808854394, 1e-9},
		{"u(n) pooled", b.Pooled.Exponent.StdError, 0.19478172414287, 1e-9},
		{"F", b.FTest.Statistic, 22.2211712885712, 1e-9},
		{"p of F", b.FTest.PValue, 7.86309334106354e-08, 1e-8},
		{"degrees of freedom of F", b.FTest.DF2, 56, 0},
		{"VIF", b.VIF, 1.00656567465169, 1e-10},
		{"offset of gierczak", b.Sources[0].Offset.Value, 0.0254474578770725, 1e-8},
		{"its uncertainty", b.Sources[0].Offset.StdError, 0.00401101815809914, 1e-9},
		{"offset of wollenhaupt", b.Sources[1].Offset.Value, -0.0195489422123378, 1e-8},
		{"offset of jpl", b.Sources[2].Offset.Value, -0.0254474578770725 + 0.0195489422123378, 1e-8},
		// lm(log(k) ~ I(1/T) + s): E and its standard error, deviance,
		// logLik - sum(log(k)); lm(log(T) ~ I(1/T) + s): minus its slope.
		{"E of the line", Real(a.Fits["straight"].P[1] / 1000), 3.3311521718228, 1e-9},
		{"its uncertainty", Real(math.Sqrt(a.Fits["straight"].Cov[3]) / 1000), 0.211595197247002, 1e-9},
		{"RSS of the line", a.row(t, "straight").RSS, 1.19098288007064, 1e-9},
		{"likelihood of the line", a.row(t, "straight").LogLik, 1818.43989870262, 1e-9},
		{"T_eff", a.Dataset.TEff, 277.999311112102, 1e-10},
	} {
		reference.Close(t, c.what, float64(c.got), c.want, c.tol)
	}
	if b.FTest.DF1 != 2 || b.Offset.Nu != 56 || b.Pooled.Nu != 58 || b.Confounded || b.Said != "sources-compared" {
		t.Errorf("%+v", b)
	}
	// The parameters: 2 of the line, 2 offsets, σ.
	if f := a.Fits["straight"]; f.K() != 5 || f.Nu != 57 {
		t.Errorf("K = %d, ν = %d", f.K(), f.Nu)
	}
}

// The source of one point has an offset of its own in R's lm, which is the same as to
// leave it out of the curve: n, line and likelihood are those without it, and so is the
// F test (anova of lm without D), since its offset fits its point to any curve. k at the
// reference temperature is that with it.
func TestOnePointSourceAgainstR(t *testing.T) {
	a := mustAssess(t, fourSources(), quick())
	b := a.BetweenSources
	for _, c := range []struct {
		what      string
		got       Real
		want, tol float64
	}{
		{"n", b.Offset.Exponent.Value, 12.3918983560217, 1e-9},
		{"u(n)", b.Offset.Exponent.StdError, 2.64600898263096, 1e-9},
		{"n pooled", b.Pooled.Exponent.Value, 7.19939209560241, 1e-9},
		{"u(n) pooled", b.Pooled.Exponent.StdError, 11.425305042925, 1e-9},
		{"F", b.FTest.Statistic, 155.424753019307, 1e-9},
		{"p of F", b.FTest.PValue, 3.96293504385566e-07, 1e-8},
		{"VIF", b.VIF, 1.60733046423066, 1e-9},
		{"offset of A", b.Sources[0].Offset.Value, -0.0243424523481231, 1e-8},
		{"offset of D", b.Sources[3].Offset.Value, 0.0243424523481231 - 0.0938088804275916 + 0.0867704198778325, 1e-7},
		{"likelihood of the line", a.row(t, "straight").LogLik, 94.4680492087017, 1e-9},
		{"RSS of the line", a.row(t, "straight").RSS, 0.00629624401540892, 1e-9},
		{"T_eff", a.Dataset.TEff, 307.477228654404, 1e-10},
		// p <- predict(o, data.frame(T = 298.15, s = levels(s))): exp(mean(p)); u² =
		// var(p)/4 + Lᵀ vcov L of the fit without D; ν = u⁴/((var(p)/4)²/3 + …²/8) cut
		// to 3: exp(mean(p) + qt(.975, 3) u).
		{"k at 298.15 K", a.AtReference.K.Value, 0.00393724128750203, 1e-9},
		{"f", a.AtReference.F, math.Exp(0.0383302239901526), 1e-9},
		{"upper end of k", a.AtReference.K.Upper, 0.00444804278997287, 1e-8},
		{"scatter", b.Scatter, 0.0757654163219869, 1e-9},
	} {
		reference.Close(t, c.what, float64(c.got), c.want, c.tol)
	}
	if !a.finding("one-point-source") || b.Sources[3].InCurvature || !b.Sources[2].InCurvature || a.Dataset.Used != 14 {
		t.Errorf("%+v, %d used", b.Sources, a.Dataset.Used)
	}
	if r := a.Data[13]; !r.Used || r.Residual.Known() {
		t.Errorf("the point of D: %+v", r)
	}
	if !a.finding("offsets-show-curvature") || b.Pooled.State.Curved() || !a.Verdict.State.Curved() {
		t.Errorf("verdict %s, pooled %s, findings %v", a.Verdict.State, b.Pooled.State, a.Findings)
	}
}

// Taken as one on request, the sources are what R's lm without offsets takes them for
// (TestOnePointSourceAgainstR), and the result says so.
func TestSourcesAsOne(t *testing.T) {
	set := fourSources()
	o := quick()
	o.Sources, o.Replicates = SourcesAsOne, ReplicatesIndependent // R: every point by itself
	a := mustAssess(t, set, o)
	reference.Close(t, "n pooled", float64(a.Curvature.Exponent.Value), 7.19939209560241, 1e-9)
	reference.Close(t, "u(n) pooled", float64(a.Curvature.Exponent.StdError), 11.425305042925, 1e-9)
	if a.BetweenSources != nil || !a.finding("sources-as-one") || a.Settings.Sources != SourcesAsOne {
		t.Errorf("%+v, %+v", a.BetweenSources, a.Settings)
	}
	if len(a.Dataset.Sources) != 4 || a.Data[0].Source == "" || set.Points[0].Source == "" {
		t.Error("the names of the sources are lost")
	}
	if a := mustAssess(t, set, quick()); a.finding("sources-as-one") || a.BetweenSources == nil || a.Settings.Sources != SourcesOffsets {
		t.Error("sources are taken as one unasked")
	}
	for i := range set.Points {
		set.Points[i].Source = "A"
	}
	if a := mustAssess(t, set, o); a.finding("sources-as-one") {
		t.Error("one source is taken as one")
	}
}

// The same with known uncertainties u = 0.03 k (1, 1.5, 0.7, 1, …), weights (k/u)²:
// deviance(p) - deviance(o) without D and its pchisq, se/sigma of log(T).
func TestSourcesStatedAgainstR(t *testing.T) {
	s := fourSources()
	for i := range s.Points {
		s.Points[i].UK, s.Points[i].Level = 0.03*s.Points[i].K*[]float64{1, 1.5, 0.7}[i%3], dataset.LevelStandard
	}
	o := quick()
	o.ErrorModel = fit.Stated
	a := mustAssess(t, s, o)
	b := a.BetweenSources
	reference.Close(t, "n", float64(b.Offset.Exponent.Value), 12.2479366227481, 1e-9)
	reference.Close(t, "u(n)", float64(b.Offset.Exponent.StdError), 5.43503953987819, 1e-9)
	reference.Close(t, "chi-squared/2", float64(b.FTest.Statistic), 80.1616067530136/2, 1e-9)
	reference.Close(t, "its p", float64(b.FTest.PValue), 3.91857590159123e-18, 1e-7)
	reference.Close(t, "VIF", float64(b.VIF), 1.35493296395353, 1e-9)
	if b.FTest.DF2.Known() || b.TestName(false) != "χ² test" {
		t.Errorf("%v degrees of freedom of a known σ", b.FTest.DF2)
	}
}

// Errors in k. R 4.2.2: Gauss–Newton by hand (m = exp(Xb); b + qr.coef(qr(X m), k - m),
// 60 steps) with and without columns of the sources; the profile by uniroot on
// S(n) - S_min = qf(.95, 1, 8) S_min/8, S(n) from the same with n held.
func TestSourcesInKAgainstR(t *testing.T) {
	o := quick()
	o.ErrorModel = fit.Absolute
	a := mustAssess(t, fourSources(), o)
	b := a.BetweenSources
	e := b.Offset.Exponent
	for _, c := range []struct {
		what      string
		got       Real
		want, tol float64
	}{
		{"n", e.Value, 11.13370778294, 1e-8},
		{"u(n)", e.StdError, 3.775518747971, 1e-7},
		{"lower end", e.Lower, 2.346130410981, 1e-7},
		{"upper end", e.Upper, 19.76474955061, 1e-8},
		{"p", b.Offset.PValue, 0.01945273963821, 1e-7},
		{"p of the band", b.Offset.PBand, 0.02900554188173, 1e-7},
		{"n pooled", b.Pooled.Exponent.Value, 23.30657683769, 1e-7},
		// Without D.
		{"F", b.FTest.Statistic, 534.9965426295, 1e-8},
		{"its p", b.FTest.PValue, 3.033165081073e-09, 1e-7},
		{"offset of A", b.Sources[0].Offset.Value, -0.03221630111802, 1e-7},
		{"offset of D", b.Sources[3].Offset.Value, 0.02257220887215, 1e-7},
		{"RSS", a.row(t, "power-prefactor").RSS, 1.339095444871e-07, 0.05}, // k over the factors of the sources
	} {
		reference.Close(t, c.what, float64(c.got), c.want, c.tol)
	}
}

// A factor on one source is taken up by its offset.
func TestFactorOfOneSource(t *testing.T) {
	for _, model := range []fit.ErrorModel{fit.Relative, fit.Absolute} {
		s := fourSources()
		o := quick()
		o.ErrorModel = model
		before := mustAssess(t, s, o)
		for i := range s.Points {
			if s.Points[i].Source == "B" && model == fit.Relative {
				s.Points[i].K *= 1.7
			} else if model == fit.Absolute {
				s.Points[i].K *= 1.7 // of all: a factor on one changes its weight
			}
		}
		after := mustAssess(t, s, o)
		x, y := before.Curvature, after.Curvature
		for _, c := range [][2]Real{
			{x.Exponent.Value, y.Exponent.Value}, {x.Exponent.Lower, y.Exponent.Lower}, {x.Exponent.Upper, y.Exponent.Upper},
			{x.PValue, y.PValue}, {x.SecondBarrier.PValue, y.SecondBarrier.PValue},
			{before.Dataset.TEff, after.Dataset.TEff},
		} {
			reference.Close(t, string(model), float64(c[1]), float64(c[0]), 1e-7)
		}
		for i, r := range before.Ranking {
			if q := after.Ranking[i]; q.Curve != r.Curve || r.Delta.Known() && math.Abs(float64(q.Delta-r.Delta)) > 1e-5 {
				t.Errorf("%s: %s Δ %g became %s %g", model, r.Curve, r.Delta, q.Curve, q.Delta)
			}
		}
		if before.Verdict.State != after.Verdict.State || before.Verdict.RecommendedCurve != after.Verdict.RecommendedCurve {
			t.Errorf("%s: verdict %v became %v", model, before.Verdict, after.Verdict)
		}
	}
}

// Names of sources are names.
func TestNamesOfSources(t *testing.T) {
	o := DefaultOptions()
	o.Resamples = 199
	document := func(rename string) string {
		s := fourSources()
		for i := range s.Points {
			s.Points[i].Source = rename[strings.Index("ABCD", s.Points[i].Source):][:1]
		}
		a := mustAssess(t, s, o)
		a.Dataset.Sources = nil
		for i := range a.Data {
			a.Data[i].Source = ""
		}
		for i := range a.BetweenSources.Sources {
			a.BetweenSources.Sources[i].Name = ""
		}
		out, err := json.Marshal(a)
		if err != nil {
			t.Fatal(err)
		}
		return strings.ReplaceAll(string(out), rename[3:]+" has 1 point", "it has 1 point")
	}
	if x, y := document("ABCD"), document("CADB"); x != y {
		t.Errorf("other names, other results:\n%s\n%s", x, y)
	}
}

// One source, named or not, is no matter; nor are points without a source beside it.
func TestOneSourceIsSilent(t *testing.T) {
	document := func(name func(i int) string) string {
		s := lineSet(9, 290, 350, 60e3, 0.03, 3)
		for i := range s.Points {
			s.Points[i].Source = name(i)
		}
		o := DefaultOptions()
		o.Resamples = 99
		a := mustAssess(t, s, o)
		if a.BetweenSources != nil {
			t.Error("one source is compared with itself")
		}
		a.Dataset.Sources = nil
		for i := range a.Data {
			a.Data[i].Source = ""
		}
		out, _ := json.Marshal(a)
		return string(out)
	}
	none := document(func(int) string { return "" })
	if document(func(int) string { return "east" }) != none || document(func(i int) string { return []string{"east", ""}[i%2] }) != none {
		t.Error("one source changes the document")
	}
}

// laboratories draws a line, or a power of T, in laboratories with ranges and factors
// of their own.
func laboratories(ranges [][2]float64, factor []float64, n, exponent, sd float64, seed uint64) *dataset.Set {
	r := rand.New(rand.NewPCG(seed, 2))
	var temp, k []float64
	var source []string
	for j, lim := range ranges {
		for i := range int(n) {
			t := lim[0] + (lim[1]-lim[0])*float64(i)/(n-1)
			temp, source = append(temp, t), append(source, string(rune('a'+j)))
			k = append(k, factor[j]*math.Exp(18-60e3/(models.GasConstant*t)+exponent*math.Log(t/300)+sd*r.NormFloat64()))
		}
	}
	s := setOf(temp, k, nil)
	for i := range s.Points {
		s.Points[i].Source = source[i]
	}
	return s
}

func TestWhatOffsetsChange(t *testing.T) {
	overlap := [][2]float64{{278, 308}, {303, 333}, {328, 358}}
	apart := [][2]float64{{280, 290}, {305, 315}, {330, 340}}
	same := laboratories([][2]float64{{280, 320}, {280, 320}}, []float64{1, 1.1}, 6, 0, 0.02, 4)
	point := same.Points[0]
	point.T, point.K, point.Source = 300, 2*math.Exp(18-60e3/(models.GasConstant*300)), "c"
	same.Points = append(same.Points, point)
	for _, c := range []struct {
		what     string
		set      *dataset.Set
		code     string
		sentence string
		partly   bool
	}{
		{"an offset that bends the plot", laboratories(overlap, []float64{1, 0.8, 1}, 6, 0, 0.02, 2), "between-source-offset", "Taken as one, the 3 sources look curved: that may be an offset between them.", false},
		{"curvature that offsets can take up", laboratories(apart, []float64{1, 1, 1}, 4, 24, 0.02, 3), "offsets-leave-open", "with offsets allowed these data can no longer tell.", true},
		{"n falls below half, the offsets are not significant", laboratories(apart, []float64{1, 1, 1}, 4, 16, 0.02, 15), "offsets-leave-open", "with offsets allowed these data can no longer tell.", true},
		// The F test has p = 8e-6, but where the offsets stand for a bend it has that too.
		{"offsets that the design confounds with curvature", laboratories(apart, []float64{1, 0.8, 1}, 5, 0, 0.02, 2), "offsets-leave-open", "with offsets allowed these data can no longer tell.", true},
		{"an offset that bends nothing, and a point that does", same, "sources-compared", "", false},
		{"neither", laboratories(overlap, []float64{1, 1, 1}, 6, 0, 0.01, 5), "sources-compared", "", false},
	} {
		a := mustAssess(t, c.set, quick())
		b := a.BetweenSources
		if b.Said != c.code || !a.finding(c.code) || c.sentence != "" && !strings.Contains(a.Verdict.Sentence, c.sentence) || c.sentence == "" && strings.Contains(a.Verdict.Sentence, "Taken as one") {
			t.Errorf("%s: said %s, findings %v: %s", c.what, b.Said, a.Findings, a.Verdict.Sentence)
		}
		if a.finding("sources-confounded-partly") != c.partly || c.partly != (b.VIF > 2) {
			t.Errorf("%s: VIF %g", c.what, b.VIF)
		}
	}
}

// Two paths, 50 and 170 kJ/mol, without any offset (invented). The one point of source B is
// where the second path shows, and an offset of its own takes it out of every curve. That is
// no sign of an offset, with or without a third source.
func TestOnePointIsNoOffset(t *testing.T) {
	temp := []float64{280, 284, 288, 292, 296, 300, 304, 308, 312, 316, 320, 338}
	k := []float64{2.2357e-05, 3.0884e-05, 4.1972e-05, 5.6797e-05, 7.0343e-05, 9.3555e-05, 1.2165e-04, 1.6010e-04, 2.0838e-04, 2.6439e-04, 3.5642e-04, 1.5556e-03}
	for _, c := range []struct {
		names string
		df    int
	}{{"AAAAAAAAAAAB", 0}, {"ACACACACACAB", 1}} {
		set := setOf(temp, k, nil)
		for i, name := range strings.Split(c.names, "") {
			set.Points[i].Source = name
		}
		a := mustAssess(t, set, quick())
		b := a.BetweenSources
		if f := b.FTest; (f == nil) != (c.df == 0) || (b.WhyUntested == "") != (c.df > 0) || f != nil && (f.DF1 != c.df || !(f.PValue >= 0.05)) {
			t.Errorf("%s: F test %+v, %q", c.names, f, b.WhyUntested)
		}
		if b.Said != "offsets-leave-open" || !strings.Contains(a.Verdict.Sentence, "with offsets allowed these data can no longer tell") {
			t.Errorf("%s: said %s: %s", c.names, b.Said, a.Verdict.Sentence)
		}
	}
}

// Every source one point; two sources of two points; sources that share no more than
// three temperatures and a fourth of one point.
func TestConfoundedSources(t *testing.T) {
	for _, c := range []struct {
		what, names string
		t           []float64
	}{
		{"one point each", "ABCDEF", []float64{280, 290, 300, 310, 320, 330}},
		{"two points each", "AABB", []float64{280, 290, 300, 310}},
		{"three shared temperatures", "AAABBC", []float64{280, 290, 300, 280, 290, 310}},
	} {
		k := make([]float64, len(c.t))
		for i, x := range c.t {
			k[i] = math.Exp(20-6e3/x) * (1 + 0.01*float64(i*i%3))
		}
		s := setOf(c.t, k, nil)
		alone := mustAssess(t, s, quick())
		for i, name := range strings.Split(c.names, "") {
			s.Points[i].Source = name
		}
		a := mustAssess(t, s, quick())
		b := a.BetweenSources
		if !b.Confounded || b.Why == "" || b.FTest != nil || b.WhyUntested == "" || !a.finding("sources-confounded") || !strings.Contains(a.Verdict.Sentence, "taken as one") {
			t.Errorf("%s: %+v", c.what, b)
		}
		if c.what != "three shared temperatures" && a.Curvature.Exponent.Value != alone.Curvature.Exponent.Value {
			t.Errorf("%s: n = %g, pooled %g", c.what, a.Curvature.Exponent.Value, alone.Curvature.Exponent.Value)
		}
	}
}

// Repeats are averaged within a source; pairs are then drawn within the means, and
// refused where that cannot be.
func TestRepeatsWithinSources(t *testing.T) {
	s := laboratories([][2]float64{{280, 310}, {280, 310}}, []float64{1, 1.2}, 6, 0, 0.03, 9)
	a := mustAssess(t, s, quick())
	if a.Curvature.Basis != BasisPoints || a.Curvature.Nu != 12-3-1 || a.Dataset.Temperatures != 6 {
		t.Errorf("%+v", a.Curvature)
	}
	o := DefaultOptions()
	o.Resamples, o.Scheme = 99, "pairs"
	if _, err := Assess(context.Background(), s, o); err == nil || !strings.Contains(err.Error(), "sources") {
		t.Errorf("pairs across sources: %v", err)
	}
	n := len(s.Points)
	for i := range n {
		p := s.Points[i]
		p.Row += n
		p.K *= 1.01 + 0.01*float64(i%3)
		s.Points = append(s.Points, p)
	}
	a = mustAssess(t, s, o)
	if a.Curvature.Basis != BasisMeans || a.Curvature.Nu != 12-3-1 || a.Curvature.Pointwise == nil || a.Bootstrap == nil {
		t.Errorf("%+v", a.Curvature)
	}
}

// The judge of resamples gives the data themselves the interval of the test, and
// allocates nothing.
func TestJudgeAllowsForOffsets(t *testing.T) {
	for _, model := range []fit.ErrorModel{fit.Relative, fit.Absolute} {
		o := quick()
		o.ErrorModel = model
		a, err := newAssessor(fourSources(), o)
		if err != nil {
			t.Fatal(err)
		}
		if err := a.fit(); err != nil {
			t.Fatal(err)
		}
		a.rank()
		a.test()
		s := a.data.sample
		curves := make([]models.Curve, len(a.fits))
		for i, f := range a.fits {
			curves[i] = f.Curve
		}
		r, j := fit.NewRefitter(s, curves, a.fits, fit.RefitOptions{Penalty: a.penalties()}), newJudge(a)
		y, tol := s.Y, 1e-9
		if s.Model.InK() {
			y, tol = s.K, 0.15 // linearised, and the profile interpolated
		}
		var out fit.Refit
		r.Refit(y, &out)
		low, high, ok := j.interval(nil, &out)
		if !ok {
			t.Fatal("no interval")
		}
		reference.Close(t, "lower end, "+string(model), low, a.exponent.Exponent.Lower, 2*tol)
		reference.Close(t, "upper end, "+string(model), high, a.exponent.Exponent.Upper, tol)
		if model == fit.Relative {
			if n := testing.AllocsPerRun(20, func() { r.Refit(y, &out); j.state(y, nil, &out) }); n != 0 {
				t.Errorf("%g allocations a resample", n)
			}
		}
	}
}

// Screen and Assess test for a second barrier beside the offsets: a factor on one
// source is no bend.
func TestSecondBarrierBesideOffsets(t *testing.T) {
	s := laboratories([][2]float64{{280, 310}, {305, 340}}, []float64{1, 3}, 8, 0, 0.02, 2)
	a := mustAssess(t, s, quick())
	sc, err := Screen(s, quick())
	if err != nil {
		t.Fatal(err)
	}
	direct := NewSecondBarrierTest(a.Sample, nil, a.Sample.Nuisance).Run()
	reference.Close(t, "p of the test beside the column", float64(a.Curvature.SecondBarrier.PValue), float64(direct.PValue), 0)
	if found := a.Curvature.SecondBarrier.PValue < 0.05; found || sc.SecondBarrierFound() {
		t.Errorf("p = %g, Screen finds it: %v", a.Curvature.SecondBarrier.PValue, sc.SecondBarrierFound())
	}
	for i := range s.Points {
		if s.Points[i].Source == "b" {
			s.Points[i].K /= 3
		}
	}
	b := mustAssess(t, s, quick())
	reference.Close(t, "p", float64(a.Curvature.SecondBarrier.PValue), float64(b.Curvature.SecondBarrier.PValue), 1e-9)
}

// Bootstrap-t, which estimates the offsets anew in every resample, agrees with t.
func TestBootstrapBesideOffsets(t *testing.T) {
	o := DefaultOptions()
	o.Resamples, o.Scheme = 4999, "parametric"
	a := mustAssess(t, fourSources(), o)
	for _, iv := range a.Bootstrap.Intervals {
		if iv.Parameter == "n" {
			reference.Close(t, "lower end", float64(iv.Lower), float64(a.Curvature.Exponent.Lower), 0.1)
			reference.Close(t, "upper end", float64(iv.Upper), float64(a.Curvature.Exponent.Upper), 0.05)
		}
	}
}

// BenchmarkSources times what two sources of five points add to an assessment.
func BenchmarkSources(b *testing.B) {
	s := laboratories([][2]float64{{280, 310}, {300, 340}}, []float64{1, 1.1}, 5, 0, 0.03, 1)
	a, _ := newAssessor(s, quick())
	if err := a.fit(); err != nil {
		b.Fatal(err)
	}
	a.rank()
	a.test()
	a.decide()
	b.Run("compare", func(b *testing.B) {
		for b.Loop() {
			n, v := len(a.findings), a.verdict
			a.compareSources()
			a.findings, a.verdict = a.findings[:n], v
		}
	})
	b.Run("prepare", func(b *testing.B) {
		for b.Loop() {
			if _, err := prepare(s, fit.Relative, ReplicatesMeans); err != nil {
				b.Fatal(err)
			}
		}
	})
}
