package bootstrap

import (
	"fmt"
	"math"

	"onebarrier/models/fit"
)

// Resampling a sample with limits. Every entry gets a new value about the fitted
// curve, a limit too; on its side of the bound it is that limit again, else it counts
// as measured (censoring at fixed bounds, of type I). Nothing is known of the residual
// of a limit, so that only normal errors can be drawn, or entries be exchanged as they
// are.

// checkLimits refuses, with a *Refusal, what limits cannot bear.
func (p *plan) checkLimits() error {
	n := len(p.in.Sample.Limits)
	if n == 0 {
		return nil
	}
	what := fmt.Sprintf("%d entries are known only as limits, which have no residual", n)
	switch {
	case p.opt.Scheme == Residual || p.opt.Scheme == Wild:
		return &Refusal{"limits-scheme", what, "use the parametric scheme"}
	case p.opt.Scheme == Pairs && p.in.Points != nil:
		return &Refusal{"limits-scheme", what + ", and the points behind means cannot be exchanged with them", "use the parametric scheme, or take repeats as independent"}
	}
	return nil
}

// aboutLimits is the generator about a fit to a sample with limits; nil where the fit
// leaves none.
func (p *plan) aboutLimits(f *fit.Result) *generator {
	if f.P == nil {
		return nil
	}
	fitted := make([]float64, p.all.Len())
	f.Curve.LnK(f.TRef, p.all.T, f.P, fitted, nil)
	s, n := p.in.Sample, p.in.Sample.Len()
	for j, b := range f.Beside {
		for i := range fitted {
			if i < n {
				fitted[i] += b * s.Nuisance[j][i]
			} else {
				fitted[i] += b * s.Limits[i-n].Beside[j]
			}
		}
	}
	return newGenerator(p.all, Parametric, fitted, nil, nil, f.Params(), f.Sigma)
}

// limits evaluates a resample that a refitter has fitted with its limits: par is its
// answer for this curve, and the standard errors are its own.
func (k *kernel) limits(r fit.StdErrorRefitter, par []float64, rss float64, diff, t []float64) bool {
	if math.IsNaN(rss) || math.IsInf(rss, 0) {
		return false
	}
	for j, w := range k.w {
		diff[j] = dot(par, w) - dot(k.fit.P, w)
		t[j] = diff[j] / r.StdError(k.index, w[:len(par)])
	}
	return true
}

// errorWithLimits takes the standard error of the target added last from the fit.
func (k *kernel) errorWithLimits() {
	w := k.w[len(k.w)-1]
	p := k.fit.Params()
	var v float64
	for i := range p {
		for j := range p {
			v += w[i] * k.fit.Cov[i*p+j] * w[j]
		}
	}
	k.sd[len(k.sd)-1] = math.Sqrt(v) / k.fit.Sigma // Sigma is 1 where σ is known
}
