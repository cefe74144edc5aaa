package bootstrap

import (
	"context"
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"

	"onebarrier/models"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// golden gives the values of one fit in testdata/published/golden_boot.csv: R 4.2.2,
// package boot.
func golden(t testing.TB, set, fit string) func(quantity string) float64 {
	t.Helper()
	values := reference.Golden(t, "golden_boot.csv")
	return func(q string) float64 {
		t.Helper()
		return values.Of(t, set, fit, q)
	}
}

// synthetic reads one of the fixed sets. s5 has sigma_k, and is read as Scaled, for
// which weights are 1/s², as in the R scripts.
func synthetic(t testing.TB, name string) *fit.Sample {
	t.Helper()
	d := reference.Synthetic(t, name)
	model := fit.Relative
	if d.SigmaK != nil {
		model = fit.Scaled
	}
	s, err := fit.NewSample(model, d.T, d.K, d.Stated(false))
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// referenceRefitter fits curves that are linear in their parameters by gonum's QR
// of the rows written out one by one; in k by Gauss-Newton steps from start.
// Plain and slow on purpose.
type referenceRefitter struct {
	s      *fit.Sample
	curves []models.Basis
	start  [][]float64
	// penalty decides first places, straight from the definition.
	penalty []float64
}

func (r *referenceRefitter) Clone() fit.Refitter { return r }

func (r *referenceRefitter) Refit(y []float64, out *fit.Refit) {
	counts := make([]int, len(y))
	for i := range counts {
		counts[i] = 1
	}
	r.RefitCounts(y, counts, out)
}

func (r *referenceRefitter) RefitCounts(y []float64, counts []int, out *fit.Refit) {
	out.How = fit.HowLinear
	for ci, c := range r.curves {
		n, p := len(y), len(c.Info().Params)
		offset, x := make([]float64, n), make([]float64, n*p)
		c.Columns(r.s.TRef, r.s.T, offset, x)
		par := make([]float64, p)
		steps := 1
		if r.s.Model.InK() {
			copy(par, r.start[ci])
			steps = 8
		}
		for range steps {
			var a, b []float64
			for i := range n {
				model, slope := offset[i], 1.0
				for j := range p {
					model += par[j] * x[i*p+j]
				}
				if r.s.Model.InK() {
					model = math.Exp(model)
					slope = model
				}
				for range counts[i] {
					u := math.Sqrt(1 / r.s.V[i])
					for j := range p {
						a = append(a, u*slope*x[i*p+j])
					}
					b = append(b, u*(y[i]-model))
				}
			}
			var qr mat.QR
			qr.Factorize(mat.NewDense(len(b), p, a))
			var step mat.VecDense
			if err := qr.SolveVecTo(&step, false, mat.NewVecDense(len(b), b)); err != nil {
				out.RSS[ci] = math.NaN()
				out.How = fit.HowFailed
				break
			}
			for j := range p {
				par[j] += step.AtVec(j)
			}
		}
		if math.IsNaN(out.RSS[ci]) && out.How == fit.HowFailed {
			continue
		}
		rss := 0.0
		for i := range n {
			model := offset[i]
			for j := range p {
				model += par[j] * x[i*p+j]
			}
			if r.s.Model.InK() {
				model = math.Exp(model)
			}
			rss += float64(counts[i]) * (y[i] - model) * (y[i] - model) / r.s.V[i]
		}
		out.RSS[ci] = rss
		copy(out.P[ci], par)
	}
	out.First = r.first(out.RSS)
}

// first is the candidate with the least N ln RSS + penalty, or RSS + penalty.
func (r *referenceRefitter) first(rss []float64) int {
	best, at := math.Inf(1), -1
	for i, v := range rss {
		if !r.s.Model.KnownSigma() {
			v = float64(r.s.Len()) * math.Log(v)
		}
		if v += r.penalty[i]; v < best {
			best, at = v, i
		}
	}
	return at
}

// linearInput is an input with the candidates straight and power-prefactor, equal
// weights, AICc penalties, and the judge "power has the smaller AICc" (state 1).
func linearInput(s *fit.Sample) Input {
	n := float64(s.Len())
	curves := []models.Basis{models.Straight(), models.PowerPrefactor{}}
	in := Input{Sample: s, Weights: []float64{0.5, 0.5}, States: 2}
	ref := &referenceRefitter{s: s, curves: curves}
	for _, c := range curves {
		f := fit.Fit(s, c)
		in.Fits = append(in.Fits, f)
		ref.start = append(ref.start, f.P)
		k := float64(f.Params() + 1)
		ref.penalty = append(ref.penalty, 2*k+2*k*(k+1)/(n-k-1))
	}
	in.Refitter = ref
	in.Targets = DefaultTargets(s, in.Fits)
	in.NewJudge = func() Judge {
		return func(y []float64, counts []int, r *fit.Refit) int {
			return ref.first(r.RSS)
		}
	}
	return in
}

// intervalsOnly leaves the repeat share out.
func intervalsOnly(in Input) Input {
	in.NewJudge, in.Refitter = nil, nil
	return in
}

func mustRun(t testing.TB, in Input, opt Options) *Output {
	t.Helper()
	o, err := Run(context.Background(), in, opt)
	if err != nil {
		t.Fatal(err)
	}
	return o
}

func (o *Output) target(t testing.TB, name string) TargetResult {
	t.Helper()
	for _, r := range o.Targets {
		if r.Name == name {
			return r
		}
	}
	t.Fatalf("no target %s", name)
	return TargetResult{}
}
