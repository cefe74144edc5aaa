package bootstrap

import (
	"math"
	"reflect"
	"testing"

	"onebarrier/models"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// defaultInput has the default candidates, the refitter of package fit, AICc
// penalties and plain-AIC weights by family. The judge's state is the candidate
// with the least RSS.
func defaultInput(s *fit.Sample) Input {
	curves := models.Default()
	in := Input{Sample: s, States: len(curves)}
	best := map[string]float64{}
	var within, penalty []float64
	sums := map[string]float64{}
	for _, c := range curves {
		f := fit.Fit(s, c)
		in.Fits = append(in.Fits, f)
		k, n := float64(f.K()), float64(f.N)
		penalty = append(penalty, f.AIC()+2*f.LogLik+2*k*(k+1)/(n-k-1))
		family := c.Info().Family
		w := 0.0
		if f.Usable() {
			w = math.Exp(-(f.AIC() - in.Fits[0].AIC()) / 2)
		}
		within = append(within, w)
		best[family] = math.Max(best[family], w)
		sums[family] += w
	}
	for i, c := range curves {
		family := c.Info().Family
		w := 0.0
		if within[i] > 0 {
			w = best[family] * within[i] / sums[family]
		}
		in.Weights = append(in.Weights, w)
	}
	in.Refitter = fit.NewRefitter(s, curves, in.Fits, fit.RefitOptions{Penalty: penalty})
	in.NewJudge = func() Judge {
		return func(_ []float64, _ []int, r *fit.Refit) int {
			at := 0
			for i, v := range r.RSS {
				if v < r.RSS[at] {
					at = i
				}
			}
			return at
		}
	}
	in.Targets = DefaultTargets(s, in.Fits)
	return in
}

// All five curves through the refitter of package fit: failures are as rare as they
// must be, workers do not
// matter, and the set made from two paths is told from the straight one.
func TestDefaultCandidates(t *testing.T) {
	for _, c := range []struct{ set, family string }{
		{"s1_straight", "fixed-exponent"}, {"s3_parallel", "parallel"},
	} {
		in := defaultInput(synthetic(t, c.set))
		for _, scheme := range Schemes {
			var first *Output
			for _, workers := range []int{1, 2} {
				o := mustRun(t, in, Options{Scheme: scheme, Resamples: 999, Workers: workers})
				if first != nil && !reflect.DeepEqual(o, first) {
					t.Errorf("%s %s: workers matter", c.set, scheme)
				}
				first = o
			}
			// Pairs of twelve points leave at most the four temperatures that
			// parallel cannot be fitted to in 8.3e-4 of the resamples (surjections
			// counted), of 24 points in far fewer.
			allowed := 0
			if scheme == Pairs {
				allowed = 4
			}
			if first.Failed > allowed {
				t.Errorf("%s %s: %d failed", c.set, scheme, first.Failed)
			}
			if n := first.FirstFamily[c.family]; n < 500 {
				t.Errorf("%s %s: %s is first in only %d of 999", c.set, scheme, c.family, n)
			}
		}
	}
}

// The refitter of package fit and the reference give the same places and, in k, the
// same intervals.
func TestRefitterAgainstReference(t *testing.T) {
	ln := synthetic(t, "s2_tn_curved")
	ink, err := fit.NewSample(fit.Absolute, ln.T[:9], ln.K[:9], ln.V[:9])
	if err != nil {
		t.Fatal(err)
	}
	for _, s := range []*fit.Sample{ln, ink} {
		a := linearInput(s)
		b := linearInput(s)
		b.Refitter = fit.NewRefitter(s, []models.Curve{models.Straight(), models.PowerPrefactor{}}, b.Fits, fit.RefitOptions{Penalty: a.Refitter.(*referenceRefitter).penalty})
		for _, scheme := range Schemes {
			opt := Options{Scheme: scheme, Resamples: 199, Methods: Methods}
			oa := mustRun(t, a, opt)
			ob := mustRun(t, b, opt)
			if !reflect.DeepEqual(oa.States, ob.States) || !reflect.DeepEqual(oa.FirstCurve, ob.FirstCurve) || oa.Failed != ob.Failed {
				t.Errorf("%s %s: states %v and %v, first %v and %v, failed %d and %d", s.Model, scheme,
					oa.States, ob.States, oa.FirstCurve, ob.FirstCurve, oa.Failed, ob.Failed)
			}
			for i, ra := range oa.Targets {
				for m, ia := range ra.Intervals {
					ib := ob.Targets[i].Intervals[m]
					what := string(s.Model) + " " + string(scheme) + " " + ra.Name + " " + string(ia.Method)
					reference.Within(t, what, ib.Lower, ia.Lower, 1e-6*ra.StdError)
					reference.Within(t, what, ib.Upper, ia.Upper, 1e-6*ra.StdError)
				}
			}
		}
	}
}

// One resample with the refits of all five curves.
func BenchmarkDefaultCandidates(b *testing.B) {
	for _, scheme := range Schemes {
		b.Run(string(scheme), func(b *testing.B) {
			p, err := newPlan(defaultInput(synthetic(b, "s3_parallel")), Options{Scheme: scheme, Resamples: 4096})
			if err != nil {
				b.Fatal(err)
			}
			w := p.newWorker()
			b.ReportAllocs()
			i := 0
			for b.Loop() {
				w.resample(i & 4095)
				i++
			}
		})
	}
}
