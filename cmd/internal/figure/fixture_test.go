package figure

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"onebarrier/diagnostics"
	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

// invented describes a made-up experiment.
type invented struct {
	name    string
	unit    string
	t       []float64 // K
	lnK     func(t float64) float64
	noise   float64
	seed    uint64
	u       bool // give uncertainties
	sources []string
	state   diagnostics.State
	curve   string // recommended
	model   fit.ErrorModel
	edit    func(*diagnostics.Assessment)
}

func arrheniusLaw(lnA, e float64) func(float64) float64 {
	return func(t float64) float64 { return lnA - e*kilo/(models.GasConstant*t) }
}

func evenly(low, high float64, n int) []float64 {
	t := make([]float64, n)
	for i := range t {
		f := float64(i) / float64(n-1)
		t[i] = 1 / ((1-f)/low + f/high)
	}
	return t
}

// assess builds by hand what the pipeline would, with fits of package fit.
func (in invented) assess(t testing.TB) *diagnostics.Assessment {
	t.Helper()
	r := rand.New(rand.NewPCG(in.seed, 1))
	nan := diagnostics.Real(math.NaN())
	a := &diagnostics.Assessment{
		Settings:  diagnostics.Settings{Confidence: 0.95, ErrorModel: in.model, Scheme: "residual", Resamples: 2000},
		Dataset:   diagnostics.DatasetInfo{Name: in.name, Quantity: diagnostics.Quantity{Symbol: "k", Unit: in.unit}},
		Verdict:   diagnostics.Verdict{State: in.state, RecommendedCurve: in.curve},
		Curvature: diagnostics.Curvature{Basis: "points"},
		Rate:      dataset.Quantity{Symbol: "k", Unit: in.unit, Known: in.unit == "s^-1"},
		Fits:      map[string]*fit.Result{},
	}
	var ks, ts, vs []float64
	for i, ti := range in.t {
		k := math.Exp(in.lnK(ti) + in.noise*r.NormFloat64())
		d := diagnostics.Datum{Row: i + 2, T: diagnostics.Real(ti), K: diagnostics.Real(k), UK: nan, Used: true, Residual: nan}
		v := 1.0
		if in.u {
			d.UK = diagnostics.Real(k * in.noise)
			v = in.noise * in.noise
		}
		if len(in.sources) > 0 {
			d.Source = in.sources[i%len(in.sources)]
		}
		a.Data = append(a.Data, d)
		ts, ks, vs = append(ts, ti), append(ks, k), append(vs, v)
	}
	s, err := fit.NewSample(in.model, ts, ks, vs)
	if err != nil {
		t.Fatal(err)
	}
	refit(a, s)
	if in.edit != nil {
		in.edit(a)
	}
	return a
}

// refit puts the fits of a sample, and what follows from them, into a.
func refit(a *diagnostics.Assessment, s *fit.Sample) {
	a.Sample = s
	a.Ranking = nil
	low, high := s.Range()
	for _, c := range models.Default() {
		f := fit.Fit(s, c)
		a.Fits[c.Info().Name] = f
		a.Ranking = append(a.Ranking, diagnostics.Ranked{Curve: c.Info().Name, Family: c.Info().Family, Status: "ranked", RSS: diagnostics.Real(f.RSS)})
	}
	var mx, my, sxy, sxx float64
	for _, t := range s.T {
		mx += 1 / t / float64(s.Len())
		my += math.Log(t) / float64(s.Len())
	}
	for _, t := range s.T {
		sxy -= (math.Log(t) - my) * (1/t - mx)
		sxx += (1/t - mx) * (1/t - mx)
	}
	a.Dataset.TEff = diagnostics.Real(sxy / sxx)
	a.Curvature.ToleranceKJ = diagnostics.Real(math.Max(0.5, 0.05*math.Abs(a.Fits["straight"].P[1])/kilo))
	if p := a.Fits["power-prefactor"]; p.Usable() && p.Cov != nil {
		width := models.GasConstant * (high - low) / kilo
		de, se := width*p.P[2], width*math.Sqrt(p.Cov[8])
		q := quantile(p, 0.95)
		a.Curvature.EChange = diagnostics.NewEstimate(fit.Estimate{Value: de, StdError: se, Lower: de - q*se, Upper: de + q*se})
		r := rand.New(rand.NewPCG(9, 9))
		for range 2000 {
			a.ChangeOfE = append(a.ChangeOfE, de+se*r.NormFloat64())
		}
		slices.Sort(a.ChangeOfE)
	}
}

func cases() map[string]invented {
	two := func(t float64) float64 {
		return math.Log(math.Exp(arrheniusLaw(8, 40)(t)) + math.Exp(arrheniusLaw(27, 100)(t)))
	}
	var rep []float64
	for _, t := range evenly(290, 340, 6) {
		rep = append(rep, t, t, t)
	}
	return map[string]invented{
		"three":  {name: "three points", unit: "s^-1", t: evenly(300, 320, 3), lnK: arrheniusLaw(20, 60), noise: 0.03, state: diagnostics.Untestable, curve: "straight", model: fit.Relative},
		"six":    {name: "ester hydrolysis, invented", unit: "L mol^-1 s^-1", t: evenly(288.15, 328.15, 6), lnK: arrheniusLaw(18, 52), noise: 0.03, seed: 2, u: true, state: diagnostics.Unresolved, curve: "straight", model: fit.Stated},
		"within": {name: "twelve good points", unit: "s^-1", t: evenly(280, 360, 12), lnK: arrheniusLaw(25, 70), noise: 0.01, seed: 3, state: diagnostics.StraightWithin, curve: "straight", model: fit.Relative},
		"many":   {name: "two hundred points of a gas-phase reaction with a rather long name that goes on and on", unit: "cm^3 molecule^-1 s^-1", t: evenly(200, 1200, 200), lnK: func(t float64) float64 { return -25 + 2*math.Log(t/298) - 500/t }, noise: 0.1, seed: 4, sources: []string{"Harding 1971", "Okoro 1988", "Lindqvist and Baum 2004"}, state: diagnostics.BeyondPrefactor, curve: "power-prefactor", model: fit.Relative},
		"parallel": {name: "two paths", unit: "s^-1", t: evenly(270, 400, 14), lnK: two, noise: 0.03, seed: 5, u: true, state: diagnostics.BeyondPrefactor, curve: "parallel", model: fit.Scaled, edit: func(a *diagnostics.Assessment) {
			a.Verdict.ETrend = "rises"
			slices.Reverse(a.Ranking)
		}},
		"decades": {name: "300 decades", unit: "s^-1", t: evenly(20, 300, 9), lnK: arrheniusLaw(20, 122), noise: 0.5, seed: 6, state: diagnostics.Unresolved, curve: "straight", model: fit.Relative},
		"leftout": {name: "left out and limits", unit: "s^-1", t: evenly(290, 380, 12), lnK: arrheniusLaw(22, 65), noise: 0.08, seed: 7, u: true, sources: []string{"lab A", "lab B", "lab C"}, state: diagnostics.Unresolved, curve: "straight", model: fit.Relative, edit: func(a *diagnostics.Assessment) {
			a.Data[1].K *= 3
			a.Data[1].Used = false
			a.Data[4].K *= 0.5
			a.Data[4].Used = false
			a.Data[0].Used, a.Data[0].Limit = false, "<"
			a.Data[11].Used, a.Data[11].Limit = false, ">"
			a.Data = append(a.Data, diagnostics.Datum{Row: 99, T: 300, K: -1, WhyNot: "k is not positive"})
		}},
		"replicated": {name: "triplicates", unit: "min^-1", t: rep, lnK: arrheniusLaw(20, 60), noise: 0.05, seed: 8, state: diagnostics.Unresolved, curve: "straight", model: fit.Relative, edit: func(a *diagnostics.Assessment) {
			var t, k, v []float64
			for i := 0; i < len(a.Data); i += 3 {
				l := 0.0
				for j := range 3 {
					l += math.Log(float64(a.Data[i+j].K)) / 3
				}
				t, k, v = append(t, float64(a.Data[i].T)), append(k, math.Exp(l)), append(v, 1./3)
			}
			s, err := fit.NewSample(fit.Relative, t, k, v)
			if err != nil {
				panic(err)
			}
			a.ChangeOfE = nil
			refit(a, s)
			a.Curvature.Basis = "temperature-means"
		}},
		"perfect":  {name: "perfect data", unit: "", t: evenly(300, 400, 8), lnK: arrheniusLaw(30, 80), state: diagnostics.StraightWithin, curve: "straight", model: fit.Relative},
		"negative": {name: "k falls with T", unit: "cm^3 molecule^-1 s^-1", t: evenly(200, 400, 9), lnK: arrheniusLaw(-25, -4), noise: 0.05, seed: 10, state: diagnostics.WithinPrefactor, curve: "linear-prefactor", model: fit.Relative, edit: func(a *diagnostics.Assessment) { a.Verdict.ETrend = "rises" }},
		"narrow":   {name: "ten kelvin", unit: "s^-1", t: evenly(298.15, 308.15, 5), lnK: arrheniusLaw(20, 60), noise: 0.03, seed: 11, state: diagnostics.Unresolved, curve: "straight", model: fit.Relative},
		"four":     {name: "four points", unit: "s^-1", t: evenly(298.15, 328.15, 4), lnK: arrheniusLaw(20, 60), noise: 0.03, seed: 12, state: diagnostics.Unresolved, curve: "straight", model: fit.Relative},
		"sources": {name: "nine laboratories, absolute errors", unit: "s^-1", t: evenly(300, 420, 27), lnK: arrheniusLaw(12, 45), noise: 0.02, seed: 14, u: true, sources: []string{"A", "B", "C", "D", "E", "F", "G", "H", "a laboratory with a very long name indeed"}, state: diagnostics.CurvedOpen, curve: "linear-prefactor", model: fit.StatedAbsolute, edit: func(a *diagnostics.Assessment) {
			a.Dataset.Quantity.Symbol = "k_cat/K_M"
			a.Dataset.Quantity.Unit = "L mol^-1 s^-1"
			a.Data[0].UK = a.Data[0].K * 2
		}},
		"cryo": {name: "10 to 1500 K", unit: "s^-1", t: evenly(10, 1500, 20), lnK: func(t float64) float64 { return math.Log(1e-3 + math.Exp(20-2000/t)) }, noise: 0.1, seed: 13, state: diagnostics.BeyondPrefactor, curve: "", model: fit.Relative},
	}
}
