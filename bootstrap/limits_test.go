package bootstrap

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"onebarrier/models"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// limitInput is a straight set of ten points, two of them below a detection limit.
func limitInput(t testing.TB, far float64) (Input, *fit.Sample) {
	t.Helper()
	var tt, k, v []float64
	var limits []fit.Limit
	rng := rand.New(rand.NewPCG(5, 6))
	for i := range 10 {
		x := 280 + 60*float64(i)/9
		y := -60000/8.314*(1/x-1/310.0) + 0.05*rng.NormFloat64()
		if i < 2 {
			limits = append(limits, fit.Limit{T: x, K: math.Exp(y+0.03) * far, Below: true, V: 1})
			continue
		}
		tt, k, v = append(tt, x), append(k, math.Exp(y)), append(v, 1)
	}
	s, err := fit.NewSample(fit.Relative, tt, k, v)
	if err != nil {
		t.Fatal(err)
	}
	s, err = s.WithLimits(limits)
	if err != nil {
		t.Fatal(err)
	}
	return inputOf(s), s
}

func inputOf(s *fit.Sample) Input {
	curves := models.Default()
	var fits []*fit.Result
	w := make([]float64, len(curves))
	for i, c := range curves {
		fits = append(fits, fit.Fit(s, c))
		if fits[i].Usable() {
			w[i] = 1
		}
	}
	return Input{Sample: s, Fits: fits, Weights: w, Refitter: fit.NewRefitter(s, curves, fits, fit.RefitOptions{}),
		NewJudge: func() Judge { return func([]float64, []int, *fit.Refit) int { return 0 } }, States: 1, Targets: DefaultTargets(s, fits)}
}

func TestLimitsResampled(t *testing.T) {
	in, s := limitInput(t, 1)
	ctx := context.Background()
	out, err := Run(ctx, in, Options{Resamples: 999, Seed: 1})
	if err != nil {
		t.Fatal(err)
	}
	if out.Scheme != Parametric || out.Failed > 5 || out.States[0]+out.Failed != 999 {
		t.Errorf("scheme %s, %d failed, states %v", out.Scheme, out.Failed, out.States)
	}
	for _, r := range out.Targets {
		f := in.Fits[r.Curve]
		e := f.Interval(r.W, r.Estimate, 0.95)
		reference.Close(t, r.Name+": standard error", r.StdError, e.StdError, 1e-9)
		// Bootstrap-t of normal errors and Student's t agree, within chance and what the
		// limits do.
		iv := r.Intervals[0]
		reference.Within(t, r.Name+": lower end", iv.Lower, e.Lower, 0.6*e.StdError)
		reference.Within(t, r.Name+": upper end", iv.Upper, e.Upper, 0.6*e.StdError)
		if r.Failed > 5 {
			t.Errorf("%s: %d failed", r.Name, r.Failed)
		}
	}
	// The same bytes for any number of workers.
	one, _ := Run(ctx, in, Options{Resamples: 300, Seed: 1, Workers: 1})
	two, _ := Run(ctx, in, Options{Resamples: 300, Seed: 1, Workers: 2})
	for i := range one.Targets {
		if !slices.Equal(one.Targets[i].Values, two.Targets[i].Values) || one.Targets[i].Intervals[0] != two.Targets[i].Intervals[0] {
			t.Errorf("%s differs with the number of workers", one.Targets[i].Name)
		}
	}
	for _, scheme := range []Scheme{Residual, Wild} {
		_, err := Run(ctx, in, Options{Scheme: scheme, Resamples: 99})
		var refusal *Refusal
		if !errors.As(err, &refusal) || refusal.Code != "limits-scheme" || refusal.Cure == "" {
			t.Errorf("%s: %v", scheme, err)
		}
	}
	if _, err := Run(ctx, in, Options{Scheme: Pairs, Resamples: 199}); err != nil {
		t.Errorf("pairs: %v", err)
	}
	_ = s
}

// Limits far on their side change no resample but for their draws of errors: the
// distribution is that of the sample without them.
func TestFarLimitsResampled(t *testing.T) {
	in, s := limitInput(t, 1e6)
	const b = 3000
	with, err := Run(context.Background(), in, Options{Resamples: b, Seed: 1})
	if err != nil {
		t.Fatal(err)
	}
	without, err := Run(context.Background(), inputOf(s.Measured()), Options{Resamples: b, Seed: 2, Scheme: Parametric})
	if err != nil {
		t.Fatal(err)
	}
	for i, a := range with.Targets {
		w := without.Targets[i]
		reference.Close(t, a.Name, a.Estimate, w.Estimate, 1e-5)
		reference.Within(t, a.Name+": lower end", a.Intervals[0].Lower, w.Intervals[0].Lower, 0.25*w.StdError)
		reference.Within(t, a.Name+": upper end", a.Intervals[0].Upper, w.Intervals[0].Upper, 0.25*w.StdError)
	}
}

// Resamples are drawn about the curve with the offsets of the sources, of limits too:
// the intervals of E are then those of the fit, whichever source lies higher.
func TestLimitsBesideOffsetsResampled(t *testing.T) {
	for _, half := range []float64{-0.7, 0.7} { // offset of the first source, ln k
		var tt, k, v, column []float64
		var limits []fit.Limit
		rng := rand.New(rand.NewPCG(7, 8))
		for i := range 16 {
			x, c := 280+60*float64(i)/15, float64(1-2*(i%2))
			y := -60000/8.314*(1/x-1/310.0) + half*c + 0.05*rng.NormFloat64()
			if i < 2 {
				limits = append(limits, fit.Limit{T: x, K: math.Exp(y + 0.03), Below: true, V: 1})
				continue
			}
			tt, k, v, column = append(tt, x), append(k, math.Exp(y)), append(v, 1), append(column, c)
		}
		s, err := fit.NewSample(fit.Relative, tt, k, v)
		if err != nil {
			t.Fatal(err)
		}
		if s, err = s.WithLimits(limits); err != nil {
			t.Fatal(err)
		}
		s = s.WithOffsets(make([]float64, 16), [][]float64{append(column, 1, -1)})
		in := inputOf(s)
		out, err := Run(context.Background(), in, Options{Resamples: 999, Seed: 1})
		if err != nil {
			t.Fatal(err)
		}
		for _, r := range out.Targets {
			e := in.Fits[r.Curve].Interval(r.W, r.Estimate, 0.95)
			iv := r.Intervals[0]
			reference.Within(t, r.Name+": lower end", iv.Lower, e.Lower, 0.6*e.StdError)
			reference.Within(t, r.Name+": upper end", iv.Upper, e.Upper, 0.6*e.StdError)
			if r.Failed > 5 {
				t.Errorf("%s: %d failed", r.Name, r.Failed)
			}
		}
	}
}
