package bootstrap

import (
	"fmt"
	"math"
	"slices"
	"testing"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"

	"onebarrier/models"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

const resamples = 19999

// betweenRanks checks a quantile of R's own bootstrap against ours without a
// density: the number of our B values below the true p-quantile is binomial, R's
// own run of rB resamples adds its share, so R's value must lie between the order
// statistics Bp ± 4 sqrt(p(1-p)B(1 + B/rB)).
func betweenRanks(t *testing.T, what string, sorted []float64, p, want, rB float64) {
	t.Helper()
	b := float64(len(sorted))
	d := 4 * math.Sqrt(p*(1-p)*b*(1+b/rB))
	lo := sorted[max(0, int(math.Floor(b*p-d)))]
	hi := sorted[min(len(sorted)-1, int(math.Ceil(b*p+d)))]
	if !(lo <= want && want <= hi) {
		t.Errorf("%s: R's %.8g lies outside our order statistics %.8g to %.8g", what, want, lo, hi)
	}
}

// pairsPlan runs Pairs with all entries exchanged, as R's scripts do, also where
// temperatures are repeated.
func pairsPlan(t *testing.T, in Input, seed uint64) *plan {
	t.Helper()
	p, err := newPlan(in, Options{Scheme: Pairs, Resamples: resamples, Seed: seed})
	if err != nil {
		t.Fatal(err)
	}
	all := make([]int, in.Sample.Len())
	for i := range all {
		all[i] = i
	}
	p.strata = [][]int{all}
	w := p.newWorker()
	for b := range resamples {
		w.resample(b)
	}
	return p
}

func TestPairsAgainstR(t *testing.T) {
	for _, c := range []struct{ set, fit, target string }{
		{"s1_straight", "boot_pairs:E_arr", "E"},
		{"s3_parallel", "boot_pairs:E_arr", "E"},
		{"s5_hetero", "boot_pairs:E_arr_weighted", "E"},
		{"s6_replicates", "boot_pairs:E_arr", "E"},
		{"s2_tn_curved", "boot_pairs:n_mod", "n"},
		{"s6_replicates", "boot_pairs:n_mod", "n"},
	} {
		t.Run(c.set+"/"+c.target, func(t *testing.T) {
			want := golden(t, c.set, c.fit)
			in := intervalsOnly(linearInput(synthetic(t, c.set)))
			for i, tg := range in.Targets {
				if tg.Name == "E" { // R's values are in J/mol
					in.Targets[i].W = []float64{0, 1}
				}
				in.Targets[i].Keep = true
			}
			p := pairsPlan(t, in, 1)
			r := p.output().target(t, c.target)
			if r.Failed != 0 {
				t.Errorf("%d resamples failed, in R none did", r.Failed)
			}
			reference.Within(t, "estimate", r.Estimate, want("estimate"), 1e-9*math.Abs(want("estimate")))

			x := r.Values
			b := float64(len(x))
			runs := map[string]float64{"seed1:": 10000, "seed2:": 10000, "seed3:": 10000}
			if c.target == "E" {
				runs["R400k:"] = 400000
			}
			sd := stat.StdDev(x, nil)
			kurtosis := stat.ExKurtosis(x, nil) + 3
			z0 := biasCorrection(x, r.Estimate, 1e-9*r.StdError)
			share := distuv.UnitNormal.CDF(z0)
			for run, rB := range runs {
				betweenRanks(t, run+"lower percentile", x, 0.025, want(run+"perc_lo"), rB)
				betweenRanks(t, run+"upper percentile", x, 0.975, want(run+"perc_hi"), rB)
				// Standard errors of s: s sqrt((κ-1)/(4B)); of Φ(z0): binomial.
				reference.Within(t, run+"se", sd, want(run+"se"), 4*sd*math.Sqrt((kurtosis-1)/4*(1/b+1/rB)))
				reference.Within(t, run+"Φ(z0)", share, distuv.UnitNormal.CDF(want(run+"z0")),
					4*math.Sqrt(share*(1-share)*(1/b+1/rB)))
				lo, hi := "bca_jack_lo", "bca_jack_hi"
				if rB > 10000 {
					lo, hi = "bca_lo", "bca_hi"
				}
				al, ah := bcaLevels(want(run+"z0"), want("accel_jackknife"), 0.95)
				betweenRanks(t, run+"lower BCa", x, al, want(run+lo), rB)
				betweenRanks(t, run+"upper BCa", x, ah, want(run+hi), rB)
			}
		})
	}
}

// How often pairs prefer power-prefactor to straight by AICc. R draws again where
// fewer than four temperatures appear; here that is so in less than 1e-4 of them.
func TestFirstPlacesAgainstR(t *testing.T) {
	for _, set := range []string{"s1_straight", "s2_tn_curved", "s5_hetero", "s6_replicates"} {
		want := golden(t, set, "boot_selection")("frac_mod_over_arr_AICc")
		in := linearInput(synthetic(t, set))
		in.Targets = nil
		o := pairsPlan(t, in, 3).output()
		if o.Failed > 2 {
			t.Errorf("%s: %d failed", set, o.Failed)
		}
		b := float64(o.Resamples - o.Failed)
		// At least one count of error, for shares of 1.
		tol := 4*math.Sqrt(want*(1-want)*(1/b+1./10000)) + 4/b
		reference.Within(t, set, float64(o.FirstCurve[1])/b, want, tol)
		if o.FirstCurve[1] != o.States[1] || o.FirstFamily["power"] != o.FirstCurve[1] {
			t.Errorf("%s: first places %v, families %v and states %v do not agree", set, o.FirstCurve, o.FirstFamily, o.States)
		}
	}
}

// Every one of the 6⁶ resamples of six points (R, enumeration).
func TestEnumeration(t *testing.T) {
	want := golden(t, "s8_tiny6", "boot_exact:E_arr")
	s := synthetic(t, "s8_tiny6")
	f := fit.Fit(s, models.Straight())
	k := newKernel(s, 0, f, models.Straight())
	if !k.addTarget(0, []float64{0, 1}) {
		t.Fatal("rank")
	}
	sc := k.newScratch()
	diff, tt := make([]float64, 1), make([]float64, 1)
	estimate := f.P[1]
	theta := func(counts []int) (float64, bool) {
		ok := k.pairs(sc, f.Residuals, counts, diff, tt)
		return estimate + diff[0], ok
	}
	var x []float64
	counts := make([]int, 6)
	for code := range 46656 {
		clear(counts)
		for range counts {
			counts[code%6]++
			code /= 6
		}
		if v, ok := theta(counts); ok {
			x = append(x, v)
		}
	}
	var jack []float64
	for i := range 6 {
		for j := range counts {
			counts[j] = 1
		}
		counts[i] = 0
		v, _ := theta(counts)
		jack = append(jack, v)
	}
	influence := make([]float64, 6)
	var ss float64
	for i, v := range jack {
		influence[i] = 5 * (stat.Mean(jack, nil) - v)
		ss += influence[i] * influence[i]
	}

	const rel = 1e-9
	close := func(q string, got float64) {
		t.Helper()
		reference.Within(t, q, got, want(q), rel*math.Abs(want(q)))
	}
	close("resamples", float64(len(x)))
	close("estimate", estimate)
	close("mean", stat.Mean(x, nil))
	close("sd_pop", stat.PopStdDev(x, nil))
	close("jackknife_se", math.Sqrt(ss*5/6)/5)
	close("accel_jackknife", acceleration(influence))
	close("z0_mid", biasCorrection(x, estimate, 1e-9*estimate))
	a, b := bcaLevels(want("z0"), want("accel_jackknife"), 0.95)
	close("alpha_lo", a)
	close("alpha_hi", b)
	// Type 1 and type 6 quantiles agree here: each order statistic that is needed
	// is tied with its neighbour, a multiset of six points having many orders.
	v := values{x: x}
	for _, p := range []float64{0.025, 0.05, 0.25, 0.5, 0.75, 0.95, 0.975} {
		close(fmt.Sprintf("q_type1:%v", p), v.quantile(p))
	}
	close("bca_lo", v.quantile(a))
	close("bca_hi", v.quantile(b))
}

func sum(x []int) (s int) {
	for _, v := range x {
		s += v
	}
	return s
}

// The standard error of a bootstrap of raw residuals is se sqrt((N-p)/N) exactly
// (R's values), and that of modified ones is known in closed form: the standard
// deviation of the pool times sqrt(Σ c²V).
func TestResidualStandardError(t *testing.T) {
	for _, set := range []string{"s1_straight", "s6_replicates", "s8_tiny6"} {
		s := synthetic(t, set)
		f := fit.Fit(s, models.Straight())
		k := newKernel(s, 0, f, models.Straight())
		k.addTarget(0, []float64{0, 1})
		n := s.Len()
		raw := newGenerator(s, Residual, f.Fitted, f.Residuals, make([]float64, n), 2, f.Sigma)
		modified := newGenerator(s, Residual, f.Fitted, f.Residuals, f.Leverage, 2, f.Sigma)
		for name, c := range map[string]struct {
			g    *generator
			want float64
		}{
			"raw":      {raw, golden(t, set, "boot_residual_exact:E_arr")("se_raw_resid")},
			"modified": {modified, k.sd[0] * stat.PopStdDev(modified.pool, nil)},
		} {
			st := newStream()
			e, ix := make([]float64, n), make([]int32, n)
			diff, tt := make([]float64, 1), make([]float64, 1)
			var x []float64
			for b := range resamples {
				st.reset(5, uint64(b))
				c.g.draw(st, Residual, e, ix)
				k.fixed(e, diff, tt)
				x = append(x, diff[0])
			}
			kurtosis := stat.ExKurtosis(x, nil) + 3
			reference.Within(t, set+" "+name, stat.StdDev(x, nil), c.want, 4*c.want*math.Sqrt((kurtosis-1)/4/resamples))
		}
	}
}

// With normal errors and a linear curve: bootstrap-t is Student's t interval
// (relative) or the normal one (stated), and the percentile interval the normal
// one with σ̂. Quantiles from gonum's distributions.
func TestParametricIsExact(t *testing.T) {
	relative := synthetic(t, "s1_straight")
	s5 := synthetic(t, "s5_hetero")
	stated, err := fit.NewSample(fit.Stated, s5.T, s5.K, s5.V)
	if err != nil {
		t.Fatal(err)
	}
	for _, s := range []*fit.Sample{relative, stated} {
		in := intervalsOnly(linearInput(s))
		o := mustRun(t, in, Options{Scheme: Parametric, Resamples: 99999, Methods: Methods})
		for _, name := range []string{"ln_A", "E", "n", "change_of_E"} {
			r := o.target(t, name)
			f := in.Fits[r.Curve]
			var v float64
			p := f.Params()
			for i := range p {
				for j := range p {
					v += r.W[i] * f.Cov[i*p+j] * r.W[j]
				}
			}
			se := math.Sqrt(v)
			reference.Within(t, name+" se", r.StdError, se, 1e-8*se)
			zq := distuv.UnitNormal.Quantile(0.975)
			tq, density := zq, distuv.UnitNormal.Prob(zq)
			if !s.Model.KnownSigma() {
				d := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: float64(f.Nu)}
				tq = d.Quantile(0.975)
				density = d.Prob(tq)
			}
			// Standard error of a quantile: sqrt(p(1-p)/B)/density.
			mc := 4 * math.Sqrt(0.025*0.975/99999)
			for _, iv := range r.Intervals {
				q, tol := zq, mc/distuv.UnitNormal.Prob(zq)
				if iv.Method == BootstrapT {
					q, tol = tq, mc/density
				}
				if iv.Method == BCa {
					tol *= 4 // z0 moves both ends; the influence of chance residuals is not zero
					tol += 0.2
				}
				reference.Within(t, name+" "+string(iv.Method)+" lower", (iv.Lower-r.Estimate)/se, -q, tol)
				reference.Within(t, name+" "+string(iv.Method)+" upper", (iv.Upper-r.Estimate)/se, q, tol)
			}
		}
		if v := o.target(t, "change_of_E").Values; len(v) != 99999 || !slices.IsSorted(v) {
			t.Error("the values of the change of E are not all there and sorted")
		}
	}
}
