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

// limitedSources is limits_sources.csv without its uncertainties: four sources, one of
// them of one measured point and a limit.
func limitedSources(t *testing.T) *dataset.Set {
	t.Helper()
	var temp, k []float64
	rows := reference.Records(t, "limits_sources.csv")
	for _, row := range rows {
		temp, k = append(temp, reference.Number(t, row["T_K"])), append(k, reference.Number(t, row["k"]))
	}
	s := setOf(temp, k, nil)
	for i, row := range rows {
		p := &s.Points[i]
		p.Source, p.Limit, p.Used = row["source"], row["limit"], row["limit"] == ""
	}
	return s
}

// R's survreg with a factor for the source (golden_limits.R): n both ways, its interval,
// VIF, the likelihood-ratio test of the offsets; logLik and K = 3 + 3 offsets + σ.
func TestLimitsBesideSourcesAgainstR(t *testing.T) {
	r := reference.Golden(t, "golden_limits_r.csv")
	a := mustAssess(t, limitedSources(t), quick())
	b := a.BetweenSources
	stretch := math.Sqrt(14. / 8) // σ̂ of no limits is √(RSS/ν), not √(RSS/n)
	of := func(q string) float64 { return r.Of(t, "relative", "power-prefactor", q) }
	logLik := of("logLik")
	for _, c := range []struct {
		what      string
		got       Real
		want, tol float64
	}{
		{"n", b.Offset.Exponent.Value, of("l"), 1e-8},
		{"n of the verdict", a.Curvature.Exponent.Value, of("l"), 1e-8},
		{"u(n)", b.Offset.Exponent.StdError, of("sd:l") * stretch, 1e-6},
		{"lower end", b.Offset.Exponent.Lower, of("lower"), 1e-7},
		{"upper end", b.Offset.Exponent.Upper, of("upper"), 1e-7},
		{"p", b.Offset.PValue, of("p:n"), 1e-7},
		{"n pooled", b.Pooled.Exponent.Value, r.Of(t, "relative-pooled", "power-prefactor", "l"), 1e-8},
		{"u(n) pooled", b.Pooled.Exponent.StdError, r.Of(t, "relative-pooled", "power-prefactor", "sd:l") * math.Sqrt(14./11), 1e-6},
		{"F", b.FTest.Statistic, of("f"), 1e-8},
		{"p of F", b.FTest.PValue, of("p"), 1e-7},
		{"VIF", b.VIF, of("vif"), 1e-6},
		{"offset of A", b.Sources[0].Offset.Value, of("offset1"), 1e-7},
		{"offset of B", b.Sources[1].Offset.Value, of("offset2"), 1e-7},
		{"offset of D", b.Sources[3].Offset.Value, -of("offset1") - of("offset2") - of("offset3"), 1e-6},
		{"likelihood", a.row(t, "power-prefactor").LogLik, logLik, 1e-10},
		{"AICc", a.row(t, "power-prefactor").AICc, -2*logLik + 14 + 2*7*8./10, 1e-10},
		{"likelihood of the line", a.row(t, "straight").LogLik, r.Of(t, "relative", "straight", "logLik"), 1e-10},
	} {
		reference.Close(t, c.what, float64(c.got), c.want, c.tol)
	}
	if b.Confounded || b.FTest.DF1 != 3 || b.FTest.DF2 != 8 || b.Offset.Nu != 8 || a.Curvature.Nu != 8 {
		t.Errorf("%+v, ν = %d", b, a.Curvature.Nu)
	}
	if a.finding("limits-left-out") || a.finding("one-point-source") || !b.Sources[3].InCurvature || a.Dataset.Limits != 4 || a.Dataset.Used != 18 {
		t.Errorf("findings %v, %d limits, %d used, %+v", a.Findings, a.Dataset.Limits, a.Dataset.Used, b.Sources)
	}
	if i := slices.IndexFunc(a.Findings, func(f Finding) bool { return f.Code == b.Said }); !strings.Contains(a.Findings[i].Message, "likelihood-ratio test of the offsets") {
		t.Errorf("%s", a.Findings[i].Message)
	}
}

// With a known σ W itself is chi-squared: R's scale = 0.05.
func TestLimitsBesideSourcesStatedAgainstR(t *testing.T) {
	s := limitedSources(t)
	for i := range s.Points {
		s.Points[i].UK, s.Points[i].Level = 0.05*s.Points[i].K, dataset.LevelStandard
	}
	r := reference.Golden(t, "golden_limits_r.csv")
	of := func(q string) float64 { return r.Of(t, "stated", "power-prefactor", q) }
	o := quick()
	o.ErrorModel = fit.Stated
	b := mustAssess(t, s, o).BetweenSources
	reference.Close(t, "n", float64(b.Offset.Exponent.Value), of("l"), 1e-8)
	reference.Close(t, "lower end", float64(b.Offset.Exponent.Lower), of("lower"), 1e-7)
	reference.Close(t, "p", float64(b.Offset.PValue), of("p:n"), 1e-7)
	reference.Close(t, "W/3", float64(b.FTest.Statistic), of("f"), 1e-8)
	reference.Close(t, "p of W", float64(b.FTest.PValue), of("p"), 1e-6)
	reference.Close(t, "VIF", float64(b.VIF), of("vif"), 1e-6)
}

// A limit of a source that measured nothing is left out with its reason, and the rest is
// as if it were not there; so is one without a source among sources.
func TestSourceOfLimitsOnly(t *testing.T) {
	for _, c := range []struct{ name, why, cure string }{
		{"E", "E has no measured k", "measure k there as well"}, {"", "names no source", "name the source"},
	} {
		s := limitedSources(t)
		p := s.Points[0]
		p.Row, p.T, p.K, p.Source = 40, 320, 1e-3, c.name
		s.Points = append(s.Points, p)
		a, without := mustAssess(t, s, quick()), mustAssess(t, limitedSources(t), quick())
		if got := rows(a, "limits-left-out"); !slices.Equal(got, []int{40}) || a.Dataset.Limits != 4 || a.Data[18].Used {
			t.Errorf("%q: rows %v left out, %d limits", c.name, got, a.Dataset.Limits)
		}
		if i := slices.IndexFunc(a.Findings, func(f Finding) bool { return f.Code == "limits-left-out" }); i < 0 || !strings.Contains(a.Findings[i].Message, c.why) || !strings.HasPrefix(a.Findings[i].Cure, c.cure) {
			t.Errorf("%q: findings %v", c.name, a.Findings)
		}
		if a.Curvature.Exponent != without.Curvature.Exponent || a.BetweenSources.VIF != without.BetweenSources.VIF {
			t.Errorf("%q: n %+v, without the row %+v", c.name, a.Curvature.Exponent, without.Curvature.Exponent)
		}
	}
	// One laboratory measured; the limit is another's. Without names there is nothing to
	// tell apart.
	for _, c := range []struct {
		measured, limit string
		enters          bool
	}{{"A", "B", false}, {"A", "A", true}, {"", "B", true}, {"A", "", true}} {
		s := limitedSet()
		for i := range s.Points {
			if s.Points[i].Source = c.measured; s.Points[i].Limit != "" {
				s.Points[i].Source = c.limit
			}
		}
		a := mustAssess(t, s, quick())
		if (a.Dataset.Limits == 3) != c.enters || a.finding("limits-left-out") == c.enters {
			t.Errorf("measured by %q, limit of %q: %d limits, findings %v", c.measured, c.limit, a.Dataset.Limits, a.Findings)
		}
	}
}

// Sources whose offsets cannot be told from curvature are taken as one, limits with them.
func TestConfoundedSourcesWithLimits(t *testing.T) {
	s := limitedSet()
	for i := range s.Points {
		s.Points[i].Source = "A"
		if s.Points[i].T > 309 {
			s.Points[i].Source = "B"
		}
	}
	for i := range s.Points { // A measures at two temperatures, B at one
		p := &s.Points[i]
		p.Used = p.Limit == "" && (p.T == 280 || p.T == 300 || p.T == 320)
	}
	a := mustAssess(t, s, quick())
	if b := a.BetweenSources; b == nil || !b.Confounded || a.Dataset.Limits != 3 {
		t.Errorf("%+v, %d limits", b, a.Dataset.Limits)
	}
}

// Leaving out the one measured point of a source leaves its limit out too: the rest is
// the data set without the source.
func TestLeavingOutBesideLimits(t *testing.T) {
	s := limitedSources(t)
	a := mustAssess(t, s, quick())
	for row, gone := range map[int][]string{19: {"D"}, 8: nil} { // D's point; one of B
		var rest []dataset.Point
		for _, p := range s.Points {
			if p.Row != row && !slices.Contains(gone, p.Source) {
				rest = append(rest, p)
			}
		}
		b := mustAssess(t, &dataset.Set{Name: s.Name, Files: s.Files, Quantity: s.Quantity, Points: rest}, quick())
		i := slices.IndexFunc(a.Influence, func(f Influence) bool { return slices.Equal(f.Rows, []int{row}) })
		if i < 0 {
			t.Fatalf("row %d is not left out", row)
		}
		reference.Close(t, "n without", float64(a.Influence[i].Exponent), float64(b.Curvature.Exponent.Value), 1e-6)
		reference.Close(t, "p without", float64(a.Influence[i].PValue), float64(b.Curvature.PValue), 1e-6)
	}
}

// A limit is compared with the points of its own source: one between two sources
// contradicts the higher of them alone.
func TestContradictedLimitOfASource(t *testing.T) {
	for _, c := range []struct {
		source string
		named  bool
	}{{"a", false}, {"b", true}} {
		s := laboratories([][2]float64{{280, 340}, {280, 340}}, []float64{1, 3}, 7, 0, 0.02, 8)
		p := s.Points[3]
		p.Row, p.T, p.Source, p.Used, p.Limit = 40, 312, c.source, false, "<"
		p.K = 2 * math.Exp(18-60e3/(models.GasConstant*p.T))
		s.Points = append(s.Points, p)
		a := mustAssess(t, s, quick())
		if got := rows(a, "limit-contradicted"); (len(got) == 1) != c.named || a.Dataset.Limits != 1 {
			t.Errorf("limit of %s: rows %v named", c.source, got)
		}
	}
}

// The judge of resamples gives the data themselves the p-value of the test, and
// bootstrap-t, which estimates offsets and limits anew in every resample, agrees with it.
func TestResamplingLimitsBesideSources(t *testing.T) {
	for _, model := range []fit.ErrorModel{fit.Relative, fit.Absolute} {
		o := quick()
		o.ErrorModel = model
		a, err := newAssessor(limitedSources(t), o)
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
		all := s.All()
		y := all.Y
		if model.InK() {
			y = all.K
		}
		var out fit.Refit
		fit.NewRefitter(s, curves, a.fits, fit.RefitOptions{Penalty: a.penalties()}).Refit(y, &out)
		// Where n is held at an exponent of the band, the judge is the test itself.
		j := newJudge(a)
		rise := (out.RSS[j.straight] - out.RSS[j.power]) / (out.RSS[j.power] / 8) / (j.root * j.root)
		reference.Close(t, string(model)+": p of n = 0", pF(rise, 1, 8), a.exponent.PValue, 1e-5)
		if _, _, ok := j.interval(nil, &out); !ok {
			t.Errorf("%s: no interval", model)
		}
	}
	o := DefaultOptions()
	o.Resamples, o.KeepResamples = 999, true
	a := mustAssess(t, limitedSources(t), o)
	e := a.Curvature.Exponent
	found := false
	for _, iv := range a.Bootstrap.Intervals {
		if iv.Parameter == "n" {
			found = true
			reference.Within(t, "lower end", float64(iv.Lower), float64(e.Lower), 0.5*float64(e.StdError))
			reference.Within(t, "upper end", float64(iv.Upper), float64(e.Upper), 0.5*float64(e.StdError))
		}
	}
	if !found || a.Bootstrap.Failed > 5 || len(a.Bootstrap.RepeatShare) == 0 {
		t.Errorf("%+v", a.Bootstrap)
	}
}

// Under every error model limits enter beside offsets, on means and on points.
func TestLimitsBesideSourcesUnderEveryErrorModel(t *testing.T) {
	for _, m := range fit.ErrorModels {
		for _, repeats := range []bool{false, true} {
			s := limitedSources(t)
			for i := range s.Points {
				s.Points[i].UK, s.Points[i].Level = 0.05*s.Points[i].K, dataset.LevelStandard
			}
			if repeats {
				for i := range 18 {
					p := s.Points[i]
					if p.Row += 18; p.Limit == "" && p.Source != "D" {
						p.K *= 1.02
						s.Points = append(s.Points, p)
					}
				}
			}
			o := quick()
			o.ErrorModel, o.Resamples = m, 99
			a := mustAssess(t, s, o)
			if b := a.BetweenSources; b == nil || b.Confounded || a.Dataset.Limits != 4 || len(a.Sample.Limits) != 4 || len(a.Sample.Limits[0].Beside) != 3 {
				t.Errorf("%s: %+v, %d limits", m, b, a.Dataset.Limits)
			}
			if (a.Curvature.Basis == BasisMeans) != repeats || a.Curvature.Nu != 8 || !a.Curvature.PValue.Known() {
				t.Errorf("%s: %s, ν = %d, p = %g", m, a.Curvature.Basis, a.Curvature.Nu, a.Curvature.PValue)
			}
			if a.Bootstrap == nil || a.Bootstrap.Failed > 4 {
				t.Errorf("%s: bootstrap %+v", m, a.Bootstrap)
			}
		}
	}
}

// The probability of each limit by the measured points, its source's offset and the
// uncertainty of that included. R 4.2.2: f <- lm(log(k) ~ I(1/T_K) + log(T_K) + source) on
// the measured rows; p <- predict(f, limits, se.fit = TRUE); pt(z, 8), z = ±(log(k) -
// p$fit)/sqrt(p$se.fit^2 + p$residual.scale^2), + for "<".
func TestLimitProbabilityAgainstR(t *testing.T) {
	a, err := newAssessor(limitedSources(t), quick())
	if err != nil {
		t.Fatal(err)
	}
	if err := a.fit(); err != nil {
		t.Fatal(err)
	}
	for i, want := range []float64{0.690108819523, 0.76267733581, 0.816183021245, 0.385057065235} {
		p, ok := a.limitProbability(a.data.sample.Limits[i])
		if !ok {
			t.Errorf("limit %d: no probability", i)
		}
		reference.Close(t, "probability of limit at "+kelvinText(a.data.limits[i].T)+" K", p, want, 1e-8)
	}
}
