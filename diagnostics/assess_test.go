package diagnostics

import (
	"context"
	"encoding/json"
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// setOf makes a data set of temperatures, rate constants and, if u is not nil,
// standard uncertainties of k.
func setOf(t, k, u []float64) *dataset.Set {
	s := &dataset.Set{Name: "test", Files: []string{"test.csv"}, Quantity: dataset.Quantity{Symbol: "k", Unit: "s^-1", Known: true}}
	for i := range t {
		p := dataset.Point{File: "test.csv", Row: i + 2, T: t[i], K: k[i], Used: true, Order: math.NaN()}
		if u != nil {
			p.UK, p.Level = u[i], dataset.LevelStandard
		}
		s.Points = append(s.Points, p)
	}
	return s
}

// lineSet has k = exp(a - E/RT) at n temperatures between low and high, with normal
// errors of standard deviation sd in ln k.
func lineSet(n int, low, high, e, sd float64, seed uint64) *dataset.Set {
	r := rand.New(rand.NewPCG(seed, 1))
	var t, k []float64
	for i := range n {
		ti := low + (high-low)*float64(i)/float64(n-1)
		t = append(t, ti)
		k = append(k, math.Exp(25-e/(models.GasConstant*ti)+sd*r.NormFloat64()))
	}
	return setOf(t, k, nil)
}

// quick are options that assess without a bootstrap.
func quick() Options {
	o := DefaultOptions()
	o.Resamples = 0
	return o
}

func mustAssess(t *testing.T, s *dataset.Set, o Options) *Assessment {
	t.Helper()
	a, err := Assess(context.Background(), s, o)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

func (a *Assessment) finding(code string) bool {
	return slices.ContainsFunc(a.Findings, func(f Finding) bool { return f.Code == code })
}

func (a *Assessment) row(t *testing.T, curve string) Ranked {
	t.Helper()
	for _, r := range a.Ranking {
		if r.Curve == curve {
			return r
		}
	}
	t.Fatalf("%s is not in the ranking", curve)
	return Ranked{}
}

// The whole road from a data set to the answer against R 4.2.2: lm and anova
// (golden_fits.csv; the square of t is F), and nonlinear least squares for parallel.
// R's criteria are those of a density of ln k, ours of k: they differ by 2 Σ ln k.
func TestAssessAgainstR(t *testing.T) {
	g := reference.Golden(t, "golden_fits.csv")
	const tol = 1e-9
	for _, name := range reference.SyntheticSets {
		t.Run(name, func(t *testing.T) {
			c := reference.Table(t, "synthetic/"+name+".csv", "T_K", "k")
			o := quick()
			o.Replicates = ReplicatesIndependent
			suffix := ""
			if name == "s5_hetero" { // R's unweighted fits of the set with stated sigma
				suffix = "_unweighted"
			}
			a := mustAssess(t, setOf(c[0], c[1], nil), o)
			want := func(fit, quantity string) float64 { return g.Of(t, name, fit, quantity) }
			reference.Close(t, "p", float64(a.Curvature.PValue), want("F_arr_vs_mod"+suffix, "p"), 1e-7)
			reference.Close(t, "n", float64(a.Curvature.Exponent.Value), want("mod"+suffix, "n_exp"), tol)
			reference.Close(t, "u(n)", float64(a.Curvature.Exponent.StdError), want("mod"+suffix, "n_exp_se"), tol)
			reference.Close(t, "lower end of n", float64(a.Curvature.Exponent.Lower), want("mod"+suffix, "ci95_lo:lnT"), tol)
			reference.Close(t, "upper end of n", float64(a.Curvature.Exponent.Upper), want("mod"+suffix, "ci95_hi:lnT"), tol)
			reference.Close(t, "E", a.Fits["straight"].P[1], want("arr"+suffix, "E_J_mol"), tol)
			var sumLnK float64
			for _, k := range c[1] {
				sumLnK += math.Log(k)
			}
			curves := map[string]string{"straight": "arr", "power-prefactor": "mod"}
			if name == "s2_tn_curved" || name == "s3_parallel" || name == "s6_replicates" {
				curves["parallel"] = "par2"
			}
			for curve, r := range curves {
				row := a.row(t, curve)
				reference.Close(t, curve+" RSS", float64(row.RSS), want(r+suffix, "rss"), tol)
				for q, got := range map[string]Real{"AIC": row.AIC, "AICc": row.AICc, "BIC": row.BIC} {
					if w, ok := g[reference.Key{Dataset: name, Fit: r + suffix, Quantity: q}]; ok && !math.IsInf(w, 0) {
						reference.Close(t, curve+" "+q, float64(got)-2*sumLnK, w, 1e-8)
					}
				}
			}
		})
	}
}

// Known sigma against R: chi-squared and its tail, the normal p-value of the
// likelihood ratio, E and its standard error (golden_fits.csv, s5).
func TestAssessStatedAgainstR(t *testing.T) {
	g := reference.Golden(t, "golden_fits.csv")
	want := func(fit, quantity string) float64 { return g.Of(t, "s5_hetero", fit, quantity) }
	c := reference.Table(t, "synthetic/s5_hetero.csv", "T_K", "k", "sigma_k")
	a := mustAssess(t, setOf(c[0], c[1], c[2]), quick())
	if a.Settings.ErrorModel != fit.Stated {
		t.Fatalf("error model %s", a.Settings.ErrorModel)
	}
	reference.Close(t, "p", float64(a.Curvature.PValue), want("LR_arr_vs_mod_known", "p"), 1e-9)
	reference.Close(t, "scale-free p", float64(a.Curvature.PScaleFree), want("F_arr_vs_mod", "p"), 1e-9)
	reference.Close(t, "chi2", float64(a.row(t, "straight").Chi2), want("arr", "chi2"), 1e-9)
	reference.Close(t, "E", a.Fits["straight"].P[1], want("arr", "E_J_mol"), 1e-9)
	reference.Close(t, "u(E)", math.Sqrt(a.Fits["straight"].Cov[3]), want("arr", "E_se_known"), 1e-9)
}

func TestAssessIsTheSameForAnyNumberOfWorkers(t *testing.T) {
	s := lineSet(9, 290, 350, 60e3, 0.03, 7)
	var first []byte
	for _, workers := range []int{1, 2, 5} {
		o := DefaultOptions()
		o.Resamples, o.Workers = 999, workers
		b, err := json.Marshal(mustAssess(t, s, o))
		if err != nil {
			t.Fatal(err)
		}
		if first == nil {
			first = b
		} else if string(b) != string(first) {
			t.Errorf("%d workers give another document", workers)
		}
	}
	o := DefaultOptions()
	o.Resamples, o.Seed = 999, 2
	if b, _ := json.Marshal(mustAssess(t, s, o)); string(b) == string(first) {
		t.Error("another seed gives the same document: is it used?")
	}
}

func TestAssessDoesNotModifyItsInput(t *testing.T) {
	s := lineSet(8, 290, 350, 60e3, 0.03, 3)
	s.Points[2].Source, s.Points[3].Limit, s.Points[3].Used = "a", "<", false
	before := lineSet(8, 290, 350, 60e3, 0.03, 3)
	before.Points[2].Source, before.Points[3].Limit, before.Points[3].Used = "a", "<", false
	o := DefaultOptions()
	o.Resamples = 99
	mustAssess(t, s, o)
	for i := range s.Points {
		s.Points[i].Order, before.Points[i].Order = 0, 0 // NaN is not NaN
	}
	if !reflect.DeepEqual(s, before) {
		t.Error("the data set was modified")
	}
}

// Sizes and values at the edge of sense have an answer or a clear refusal.
func TestAssessEdges(t *testing.T) {
	full := DefaultOptions()
	full.Resamples = 199

	t.Run("two temperatures", func(t *testing.T) {
		a := mustAssess(t, setOf([]float64{300, 320}, []float64{1, 3}, nil), full)
		if a.Verdict.State != Untestable || a.Verdict.RecommendedCurve != "straight" {
			t.Errorf("%s, recommended %q", a.Verdict.State, a.Verdict.RecommendedCurve)
		}
		// E = R ln 3/(1/300 - 1/320)
		reference.Close(t, "E", a.Fits["straight"].P[1], models.GasConstant*math.Log(3)/(1./300-1./320), 1e-13)
	})
	t.Run("three points", func(t *testing.T) {
		a := mustAssess(t, lineSet(3, 290, 330, 60e3, 0.03, 1), full)
		if a.Verdict.State != Untestable || !strings.Contains(a.Verdict.Sentence, "1 more temperature") {
			t.Errorf("%s: %s", a.Verdict.State, a.Verdict.Sentence)
		}
	})
	t.Run("four points, as many as parallel has parameters", func(t *testing.T) {
		a := mustAssess(t, lineSet(4, 290, 330, 60e3, 0.03, 1), full)
		if a.Verdict.State == Untestable {
			t.Error("four temperatures can be tested")
		}
		for _, r := range a.Ranking {
			if r.Curve == "parallel" && r.Status == StatusRanked {
				t.Error("parallel cannot be ranked at N = p")
			}
		}
	})
	t.Run("one temperature", func(t *testing.T) {
		_, err := Assess(context.Background(), setOf([]float64{300, 300, 300}, []float64{1, 2, 3}, nil), full)
		var p dataset.Problems
		if !errors.As(err, &p) || p[0].Code != "one-temperature" {
			t.Errorf("%v", err)
		}
	})
	t.Run("no point", func(t *testing.T) {
		_, err := Assess(context.Background(), &dataset.Set{Name: "empty"}, full)
		var p dataset.Problems
		if !errors.As(err, &p) || p[0].Code != "no-usable-points" {
			t.Errorf("%v", err)
		}
	})
	t.Run("no scatter", func(t *testing.T) {
		a := mustAssess(t, lineSet(8, 290, 350, 60e3, 0, 1), full)
		if !a.finding("perfect-data") || a.Verdict.State.Curved() {
			t.Errorf("%s, findings %v", a.Verdict.State, a.Findings)
		}
		reference.Close(t, "E", a.Fits["straight"].P[1], 60e3, 1e-12)
	})
	for _, m := range []fit.ErrorModel{fit.Relative, fit.Absolute} {
		t.Run("300 decades "+string(m), func(t *testing.T) {
			o := full
			o.ErrorModel = m
			var temp, k []float64
			for i := range 10 {
				temp = append(temp, 100+20*float64(i))
				k = append(k, math.Pow(10, -150+300*float64(i)/9)*(1+0.01*float64(i%3)))
			}
			a := mustAssess(t, setOf(temp, k, nil), o)
			if !a.Ranking[0].LogLik.Known() {
				t.Errorf("no likelihood: %+v", a.Ranking[0])
			}
		})
	}
	t.Run("options that mean nothing", func(t *testing.T) {
		for _, f := range []func(*Options){
			func(o *Options) { o.Confidence = 1 },
			func(o *Options) { o.PrefactorBand = [2]float64{0.5, 1} },
			func(o *Options) { o.Criterion = "best" },
			func(o *Options) { o.Tolerance = "5" },
			func(o *Options) { o.Resamples = 7 },
			func(o *Options) { o.ErrorModel = "none" },
		} {
			o := full
			f(&o)
			if _, err := Assess(context.Background(), lineSet(8, 290, 350, 60e3, 0.03, 1), o); err == nil {
				t.Errorf("accepted %+v", o)
			}
		}
	})
	t.Run("cancelled", func(t *testing.T) {
		ctx, cancel := context.WithCancel(context.Background())
		cancel()
		if _, err := Assess(ctx, lineSet(8, 290, 350, 60e3, 0.03, 1), full); !errors.Is(err, context.Canceled) {
			t.Errorf("%v", err)
		}
	})
}

// METHODS §3: which error model the data get.
func TestErrorModelChoice(t *testing.T) {
	temp := []float64{290, 300, 310, 320, 330, 340, 350, 360}
	r := rand.New(rand.NewPCG(5, 5))
	var k, u, small []float64
	for _, ti := range temp {
		m := math.Exp(25 - 60e3/(models.GasConstant*ti))
		k = append(k, m*math.Exp(0.03*r.NormFloat64()))
		u = append(u, 0.03*m)
		small = append(small, 0.005*m)
	}
	states := func(s *dataset.Set, o Options) (fit.ErrorModel, *Assessment) {
		a := mustAssess(t, s, o)
		return a.Settings.ErrorModel, a
	}
	if m, _ := states(setOf(temp, k, nil), quick()); m != fit.Relative {
		t.Errorf("nothing stated: %s", m)
	}
	if m, _ := states(setOf(temp, k, u), quick()); m != fit.Stated {
		t.Errorf("all stated: %s", m)
	}
	if m, a := states(setOf(temp, k, small), quick()); m != fit.Scaled || !a.finding("stated-contradicted") {
		t.Errorf("contradicted: %s", m)
	}
	asked := quick()
	asked.ErrorModel = fit.Stated
	if m, a := states(setOf(temp, k, small), asked); m != fit.Stated || !a.finding("stated-contradicted") {
		t.Errorf("contradicted but asked for: %s", m)
	}
	some := setOf(temp, k, u)
	some.Points[3].UK, some.Points[3].Level = 0, dataset.LevelNone
	if m, a := states(some, quick()); m != fit.Relative || !a.finding("stated-incomplete") {
		t.Errorf("one missing: %s", m)
	}
	few := setOf(temp, k, u)
	for i := range few.Points {
		few.Points[i].Level = dataset.LevelRepeats
	}
	if m, a := states(few, quick()); m != fit.Relative || !a.finding("repeats-not-known") {
		t.Errorf("few repeats: %s", m)
	}
	asked.ErrorModel = fit.Scaled
	if _, err := Assess(context.Background(), setOf(temp, k, nil), asked); err == nil || !strings.Contains(err.Error(), "needs an uncertainty") {
		t.Errorf("scaled without uncertainties: %v", err)
	}
}

// u(T) enters by effective variance: with E = 60 kJ/mol at 300 K, 0.1 K make
// ln k uncertain by E u(T)/(RT²) = 0.008018.
func TestTemperatureUncertainty(t *testing.T) {
	s := lineSet(8, 299.5, 300.5, 60e3, 0, 1)
	for i := range s.Points {
		p := &s.Points[i]
		p.UK, p.Level, p.UT = 0.003*p.K, dataset.LevelStandard, 0.1
	}
	d, err := prepare(s, fit.Stated, ReplicatesMeans)
	if err != nil {
		t.Fatal(err)
	}
	part := 60e3 * 0.1 / (models.GasConstant * 300 * 300)
	reference.Close(t, "variance", d.single.V[4], 0.003*0.003+part*part, 2e-2)
	reference.Close(t, "share of T", d.temperatureShare, part, 1e-2)
	if d, err = prepare(s, fit.Relative, ReplicatesMeans); err != nil || d.single.V[4] != 1 {
		t.Errorf("relative: V = %g, %v", d.single.V[4], err)
	}
}

// Means of ln k weighted by 1/V, worked by hand.
func TestTemperatureMeans(t *testing.T) {
	s := setOf([]float64{300, 310, 300, 320, 310, 300}, []float64{1, 4, math.E, 9, 4, math.E * math.E}, nil)
	d, err := prepare(s, fit.Relative, ReplicatesMeans)
	if err != nil {
		t.Fatal(err)
	}
	if d.basis != BasisMeans || d.sample.Len() != 3 {
		t.Fatalf("%s of %d", d.basis, d.sample.Len())
	}
	for i, want := range []float64{1, math.Log(4), math.Log(9)} {
		if !(math.Abs(d.sample.Y[i]-want) <= 1e-15) {
			t.Errorf("mean %d of ln k is %g, want %g", i, d.sample.Y[i], want)
		}
	}
	if !slices.Equal(d.sample.V, []float64{1. / 3, 1. / 2, 1}) {
		t.Errorf("variances %v", d.sample.V)
	}
	if !slices.Equal(d.group, []int{0, 0, 0, 1, 1, 2}) {
		t.Errorf("groups %v", d.group)
	}
	if d, _ = prepare(s, fit.Relative, ReplicatesIndependent); d.basis != BasisPoints || d.sample.Len() != 6 {
		t.Errorf("independent: %s of %d", d.basis, d.sample.Len())
	}
	// Stated: 1/Σs⁻², and the mean leans to the smaller uncertainty.
	s = setOf([]float64{300, 300, 310}, []float64{1, math.E, 3}, []float64{0.1, 0.2 * math.E, 0.3})
	if d, err = prepare(s, fit.Stated, ReplicatesMeans); err != nil {
		t.Fatal(err)
	}
	reference.Close(t, "variance", d.sample.V[0], 1/(100.+25), 1e-14)
	reference.Close(t, "mean", d.sample.Y[0], 25./125, 1e-14)
}

func TestFindingsOfTheData(t *testing.T) {
	s := setOf([]float64{300, 310, 300, 320, 310, 330, 340}, []float64{1, 2, 1.1, 4, 2.1, 8, 15}, nil)
	if a := mustAssess(t, s, quick()); !a.finding("temperature-means") || a.finding("band-narrow-for-gas-phase") {
		t.Errorf("repeats: %v", a.Findings)
	}
	o := quick()
	o.Replicates = ReplicatesIndependent
	s.Quantity.PerMolecule = true
	if a := mustAssess(t, s, o); a.finding("temperature-means") || !a.finding("band-narrow-for-gas-phase") {
		t.Errorf("independent points, per molecule: %v", a.Findings)
	}
}

// Five half-lives with a bend: AICc is undefined for every curve that may be
// recommended, and four parameters are not to be read off five points.
func TestFewestParametersWithoutCriterion(t *testing.T) {
	s := setOf([]float64{298.15, 308.15, 318.15, 328.15, 338.15}, []float64{1. / 120, 1. / 55, 1. / 26, 1. / 12.8, 1. / 6.4}, nil)
	a := mustAssess(t, s, quick())
	if a.Verdict.State != BeyondPrefactor || a.Verdict.RecommendedCurve != "power-prefactor" {
		t.Errorf("%s, recommended %s", a.Verdict.State, a.Verdict.RecommendedCurve)
	}
	for _, f := range a.Findings {
		if f.Code == "ranking-differs" && !strings.Contains(f.Message, "the exponent test excludes its exponent") {
			t.Errorf("which reason? %s", f.Message)
		}
	}
	for _, l := range a.Publish.Lines {
		if l.Symbol == "A" || l.Symbol == "n" || l.Symbol == "E" {
			t.Errorf("n = 15 is no prefactor, and %s is published", l.Symbol)
		}
	}
}

// Two paths of which only the colder was seen: the crossover lies beyond the data.
func TestCrossoverOutside(t *testing.T) {
	var temp, k []float64
	for i := range 9 {
		x := 280 + 10*float64(i)
		temp = append(temp, x)
		noise := 1 + 2e-4*float64(i*i%5-2)
		k = append(k, noise*(math.Exp(20-50e3/(models.GasConstant*x))+math.Exp(46-132e3/(models.GasConstant*x))))
	}
	a := mustAssess(t, setOf(temp, k, nil), quick())
	if a.Verdict.RecommendedCurve != "parallel" || !a.finding("crossover-outside") {
		t.Errorf("recommended %s, findings %v", a.Verdict.RecommendedCurve, a.Findings)
	}
}

func TestScatterTooSmallAndSources(t *testing.T) {
	s := lineSet(10, 290, 350, 60e3, 0.001, 1)
	for i := range s.Points {
		s.Points[i].UK, s.Points[i].Level = 0.03*s.Points[i].K, dataset.LevelStandard
		s.Points[i].Source = []string{"east", "west"}[i%2]
	}
	if a := mustAssess(t, s, quick()); !a.finding("scatter-too-small") || !a.finding("sources-compared") {
		t.Errorf("findings %v", a.Findings)
	}
	s = lineSet(10, 290, 350, 60e3, 0.03, 1)
	for i := range s.Points {
		s.Points[i].UK, s.Points[i].Level = 0.03*s.Points[i].K, dataset.LevelStandard
		s.Points[i].Source = "east"
	}
	if a := mustAssess(t, s, quick()); a.finding("scatter-too-small") || a.finding("sources-compared") || a.BetweenSources != nil {
		t.Errorf("findings %v", a.Findings)
	}
}

// Constant k, ln k = 0 even, is as perfect as any other computed data.
func TestConstantRate(t *testing.T) {
	for _, k := range []float64{1, 3e-5} {
		o := DefaultOptions()
		o.Resamples = 99
		a := mustAssess(t, setOf([]float64{300, 310, 320, 330, 340}, []float64{k, k, k, k, k}, nil), o)
		if !a.finding("perfect-data") || !a.finding("not-resampled") || a.Verdict.State.Curved() {
			t.Errorf("k = %g: %s, findings %v", k, a.Verdict.State, a.Findings)
		}
	}
}

// Without a signal the reason is the noise, not the arithmetic.
func TestNoSignal(t *testing.T) {
	o := quick()
	o.ErrorModel = fit.Absolute
	s := setOf([]float64{300, 310, 320, 330, 340, 350}, []float64{0.001, -0.002, 0.001, 0.003, -0.001, 0.002}, nil)
	a := mustAssess(t, s, o)
	if a.Verdict.State != Untestable || !strings.Contains(a.Verdict.Sentence, "standard deviation") {
		t.Errorf("%s: %s", a.Verdict.State, a.Verdict.Sentence)
	}
}
