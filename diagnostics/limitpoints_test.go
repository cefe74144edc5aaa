package diagnostics

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"onebarrier/models/dataset"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// limitedSet has seven measured points and three limits, as the sample of the tests of
// package fit.
func limitedSet() *dataset.Set {
	s := setOf([]float64{270, 275, 280, 290, 300, 310, 320, 330, 340, 345},
		[]float64{3.2e-5, 7e-5, 1.15e-4, 3.71e-4, 1.09e-3, 2.94e-3, 7.35e-3, 1.73e-2, 4.0e-2, 5.5e-2}, nil)
	for i, sign := range map[int]string{0: "<", 1: "<", 9: ">"} {
		s.Points[i].Used, s.Points[i].Limit = false, sign
	}
	return s
}

func rows(a *Assessment, code string) (rows []int) {
	for _, f := range a.Findings {
		if f.Code == code {
			rows = append(rows, f.Rows...)
		}
	}
	return rows
}

func TestAssessLimits(t *testing.T) {
	o := DefaultOptions()
	a := mustAssess(t, limitedSet(), o)
	d := a.Dataset
	if d.Points != 10 || d.Used != 10 || d.Limits != 3 || d.Temperatures != 7 || d.TMin != 280 || d.TMax != 340 {
		t.Errorf("data set: %+v", d)
	}
	for i, r := range a.Data {
		if !r.Used || r.WhyNot != "" || r.Residual.Known() != (r.Limit == "") {
			t.Errorf("row %d: %+v", i, r)
		}
	}
	// R's survreg and mpmath, as in models/fit: n = -10.094927583971, logLik
	// 62.091999744878; K = 4, N = 10: AICc = -2 logLik + 8 + 2·4·5/5.
	reference.Close(t, "n", float64(a.Curvature.Exponent.Value), -10.094927583971, 1e-9)
	for _, r := range a.Ranking {
		if r.Curve == "power-prefactor" {
			reference.Close(t, "AICc", float64(r.AICc), -2*62.091999744878+16, 1e-11)
			if r.Points != 10 {
				t.Errorf("N = %d of AICc", r.Points)
			}
		}
	}
	if a.Curvature.Nu != 4 {
		t.Errorf("ν = %d", a.Curvature.Nu)
	}
	// p of n = 0 by the signed root: w <- 2*(62.091999744878 - 55.47955129623), the two
	// of mpmath in models/fit; R: 2*pt(-sqrt(4*expm1(w/7)), 4).
	reference.Close(t, "p", float64(a.Curvature.PValue), 0.00904381904515846, 1e-9)
	if got := rows(a, "limits-approximate"); !slices.Equal(got, []int{2, 3, 11}) {
		t.Errorf("limits-approximate names rows %v", got)
	}
	if !a.finding("fewer-resamples") || a.Settings.Resamples >= 9999 || a.Bootstrap == nil || a.Bootstrap.Scheme != "parametric" {
		t.Errorf("resamples %d, %+v", a.Settings.Resamples, a.Bootstrap)
	}
	o.KeepResamples, o.Resamples = true, 1999
	if a := mustAssess(t, limitedSet(), o); a.Settings.Resamples != 1999 {
		t.Errorf("%d resamples, asked for 1999", a.Settings.Resamples)
	}
	o.Scheme = "residual"
	_, err := Assess(t.Context(), limitedSet(), o)
	var refused dataset.Problems
	if !errors.As(err, &refused) || refused[0].Code != "limits-scheme" || refused[0].Cure == "" {
		t.Errorf("residual scheme: %v", err)
	}
}

// A contradicted limit is named, on either side, and one on its side is not.
func TestContradictedLimit(t *testing.T) {
	for _, c := range []struct {
		sign  string
		k     float64
		named bool
	}{{"<", 1, false}, {"<", 2e-5, true}, {">", 1e-6, false}, {">", 2e-4, true}} {
		s := lineSet(8, 280, 340, 60000, 0.03, 4)
		truth := math.Exp(25 - 60000/(8.314462618*285))
		p := s.Points[0]
		p.T, p.K, p.Row, p.Used, p.Limit = 285, c.k, 20, false, c.sign
		if c.named {
			p.K = truth * map[string]float64{"<": 0.7, ">": 1.4}[c.sign]
		}
		s.Points = append(s.Points, p)
		a := mustAssess(t, s, quick())
		if got := rows(a, "limit-contradicted"); (len(got) == 1 && got[0] == 20) != c.named {
			t.Errorf("k %s %g: rows %v named", c.sign, p.K, got)
		}
	}
}

// Under every error model limits enter; one without an uncertainty takes the nearest.
func TestLimitsUnderEveryErrorModel(t *testing.T) {
	for _, m := range fit.ErrorModels {
		s := limitedSet()
		for i := range s.Points {
			if p := &s.Points[i]; p.Used {
				p.UK, p.Level = 0.02*p.K, dataset.LevelStandard
			}
		}
		o := quick()
		o.ErrorModel, o.Resamples = m, 199
		a := mustAssess(t, s, o)
		if a.Settings.ErrorModel != m || a.Dataset.Limits != 3 || len(a.Sample.Limits) != 3 {
			t.Errorf("%s: error model %s, %d limits", m, a.Settings.ErrorModel, a.Dataset.Limits)
		}
		want := map[fit.ErrorModel]float64{fit.Relative: 1, fit.Absolute: 1, fit.StatedAbsolute: 4e-4 * 1.15e-4 * 1.15e-4}[m]
		if want == 0 {
			want = 4e-4
		}
		reference.Close(t, string(m)+": variance of a limit", a.Sample.Limits[0].V, want, 1e-12)
		if a.Bootstrap == nil || a.Bootstrap.Failed > 2 {
			t.Errorf("%s: bootstrap %+v", m, a.Bootstrap)
		}
	}
}

// Limits do not stand in for temperatures, are no repeats, and the set is untouched.
func TestLimitsAreNoTemperatures(t *testing.T) {
	s := limitedSet()
	for i := 5; i < 9; i++ {
		s.Points[i].Used, s.Points[i].WhyNot = false, "left out on request with --leave-out"
	}
	before := fmt.Sprintf("%+v", s)
	a := mustAssess(t, s, quick())
	if a.Verdict.State != Untestable || !strings.Contains(a.Verdict.Sentence, "3 distinct temperatures with a measured k") {
		t.Errorf("%s: %s", a.Verdict.State, a.Verdict.Sentence)
	}
	if fmt.Sprintf("%+v", s) != before {
		t.Error("the set was modified")
	}
	// A limit at a temperature that was measured too, and repeats: means are of what
	// was measured.
	s = limitedSet()
	for i := range 3 {
		p := s.Points[4]
		p.Row, p.K = 30+i, p.K*(1+0.01*float64(i))
		s.Points = append(s.Points, p)
	}
	s.Points[0].T = 300
	s.Points[0].K = 2e-3
	a = mustAssess(t, s, quick())
	if a.Curvature.Basis != BasisMeans || a.Sample.Len() != 7 || len(a.Sample.Limits) != 3 || a.Dataset.Used != 13 {
		t.Errorf("%s, %d means, %d limits, %d used", a.Curvature.Basis, a.Sample.Len(), len(a.Sample.Limits), a.Dataset.Used)
	}
	reference.Close(t, "mean", a.Sample.Y[2], (4*math.Log(1.09e-3)+math.Log(1.01)+math.Log(1.02))/4, 1e-12)
}

// Limits that are left out for another reason change nothing but their rows, to the
// last byte of the rest.
func TestLeftOutLimits(t *testing.T) {
	s := limitedSet()
	var bare dataset.Set = *s
	bare.Points = nil
	for i := range s.Points {
		if s.Points[i].Limit != "" {
			s.Points[i].WhyNot = "left out on request"
		} else {
			bare.Points = append(bare.Points, s.Points[i])
		}
	}
	o := quick()
	o.Resamples = 199
	with, without := mustAssess(t, s, o), mustAssess(t, &bare, o)
	with.Data, without.Data = nil, nil
	with.Dataset.Points = without.Dataset.Points
	x, _ := json.Marshal(with)
	y, _ := json.Marshal(without)
	if !bytes.Equal(x, y) {
		t.Error("limits that were left out change the answer")
	}
	// The exponent test takes none where the measured points leave it no degree of freedom;
	// the curves of fewer parameters take them all. No cure speaks of sources: there is one.
	s = setOf([]float64{280, 290, 300, 310, 320, 330}, []float64{1e-4, 1e-4, 2e-4, 4e-4, 1e-3, 2e-3}, nil)
	for i := range 3 {
		s.Points[i].Used, s.Points[i].Limit = false, "<"
	}
	few := mustAssess(t, s, quick())
	i := slices.IndexFunc(few.Findings, func(f Finding) bool { return f.Code == "limits-approximate" })
	if i < 0 || few.finding("limits-left-out") || !strings.Contains(few.Findings[i].Message, "The exponent test takes none") {
		t.Errorf("%v", few.Findings)
	}
	// A limit that bounds nothing is said to be left out.
	s = limitedSet()
	s.Points[0].K = 0
	a := mustAssess(t, s, quick())
	if got := rows(a, "limits-left-out"); !slices.Equal(got, []int{2}) || a.Dataset.Limits != 2 || a.Data[0].Used {
		t.Errorf("k < 0: rows %v, %d limits, %+v", got, a.Dataset.Limits, a.Data[0])
	}
}

// Adequacy and the second-barrier test go by the measured points alone.
func TestMeasuredAlone(t *testing.T) {
	s := limitedSet()
	for i := range s.Points {
		s.Points[i].UK, s.Points[i].Level = 0.02*s.Points[i].K, dataset.LevelStandard
	}
	a := mustAssess(t, s, quick())
	for i := range s.Points {
		if s.Points[i].Limit != "" {
			s.Points[i].WhyNot = "left out"
		}
	}
	b := mustAssess(t, s, quick())
	if x, y := a.Curvature.SecondBarrier, b.Curvature.SecondBarrier; x == nil || x.Statistic != y.Statistic || x.PValue != y.PValue || x.WithoutEnds != y.WithoutEnds {
		t.Errorf("second barrier %+v and %+v", x, y)
	}
	chi2 := func(a *Assessment) Real {
		for _, r := range a.Ranking {
			if r.Curve == "straight" {
				return r.Adequacy[0].Statistic
			}
		}
		return Real(math.NaN())
	}
	reference.Close(t, "χ²", float64(chi2(a)), float64(chi2(b)), 1e-12)
}

// Eight points that bend as two paths would, by chance, and four limits that bend the
// data the other way (invented): the finding tells of both and claims no second path; the
// limits that contradict the points are one finding.
func TestSecondBarrierAgainstLimits(t *testing.T) {
	temps := []float64{290, 297.14, 304.29, 311.43, 318.57, 325.71, 332.86, 340, 270, 275, 280, 285}
	k := []float64{9.5955e-05, 1.7415e-04, 2.9982e-04, 5.1380e-04, 8.6077e-04, 1.4747e-03, 2.3771e-03, 3.7319e-03, 1.3054e-05, 2.1222e-05, 3.3908e-05, 5.3293e-05}
	s := setOf(temps, k, nil)
	for i := 8; i < 12; i++ {
		s.Points[i].Used, s.Points[i].Limit = false, "<"
	}
	o := quick()
	o.Resamples = 0
	a := mustAssess(t, s, o)
	i := slices.IndexFunc(a.Findings, func(f Finding) bool { return f.Code == "second-barrier" })
	if i < 0 {
		t.Fatal("no second-barrier finding")
	}
	if f := a.Findings[i]; !strings.Contains(f.Message, "measured points alone, without the limits") || strings.Contains(f.Message, "describes the data better") || strings.Contains(f.Cure, "around the crossover") {
		t.Errorf("%s → %s", f.Message, f.Cure)
	}
	if got := rows(a, "limit-contradicted"); len(got) != 4 {
		t.Errorf("limits of lines %v contradict", got)
	}
	if n := len(slices.DeleteFunc(slices.Clone(a.Findings), func(f Finding) bool { return f.Code != "limit-contradicted" })); n != 1 {
		t.Errorf("%d findings of limits that contradict", n)
	}
}
