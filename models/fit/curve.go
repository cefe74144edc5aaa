package fit

import (
	"fmt"
	"math"

	"onebarrier/models"
)

// Fit fits one curve to one sample. Bad data never panic: they give a Result
// whose Status is not Converged and whose Reason says why.
//
// With errors in ln k a models.Basis is solved in closed form and a models.Shaped or
// models.Seeded by a global search; with errors in k every curve goes through
// LeastSquares.
//
// Limits enter as probabilities: see Limit.
func Fit(s *Sample, c models.Curve) *Result {
	if len(s.Limits) > 0 {
		return fitLimits(s, c)
	}
	r := newResult(s, c)
	if r.Nu < 0 {
		r.Reason = fmt.Sprintf("needs at least %d temperatures or points, has %d", r.Params()+r.Spent, r.N)
		return r
	}
	if s.Model.InK() {
		if seeded, ok := c.(models.Seeded); ok {
			return joint(s, fitSeededInK(s, seeded))
		}
		return joint(s, fitInK(s, c))
	}
	switch c := c.(type) {
	case models.Basis:
		return fitBasis(s, c)
	case models.Shaped:
		return joint(s, r.complete(s, fitShaped(s, c)))
	case models.Seeded:
		return joint(s, r.complete(s, fitSeeded(s, c)))
	}
	r.Reason = "the curve is neither linear in its parameters, nor a line plus a shape, nor seeded"
	return r
}

// complete fills what fitShaped and fitSeeded leave to Fit: what follows from RSS, and
// σ² in the covariance, which they give as (XᵀV⁻¹X)⁻¹.
func (r *Result) complete(s *Sample, f *Result) *Result {
	f.Model, f.N, f.Spent, f.Nu = r.Model, r.N, r.Spent, r.Nu
	f.Sigma, f.LogLik = r.Sigma, r.LogLik
	if f.Status != Failed {
		f.settle(s, f.Cov, 1)
	}
	return f
}

// newResult returns a failed result with all that is known before fitting; what is
// not known is NaN.
func newResult(s *Sample, c models.Curve) *Result {
	p := len(c.Info().Params)
	nan := math.NaN()
	return &Result{
		Curve: c, Model: s.Model, TRef: s.TRef,
		N: s.Len(), Spent: s.Spent(), Nu: s.Len() - p - s.Spent(),
		RSS: nan, Sigma: nan, LogLik: nan,
	}
}

// settle fills what follows from RSS: Sigma, LogLik and, from the unscaled
// covariance (XᵀV⁻¹X)⁻¹ (nil where it is refused), Cov. With no degrees of freedom
// left and σ unknown neither σ nor the likelihood is defined. r.RSS and unscaled may
// come from data divided by unit; r.RSS is put back last, since it may overflow
// where σ and the likelihood do not.
func (r *Result) settle(s *Sample, unscaled []float64, unit float64) {
	known := s.Model.KnownSigma()
	if known {
		r.Sigma = 1
	} else if r.Nu > 0 {
		r.Sigma = math.Sqrt(r.RSS / float64(r.Nu))
	} else {
		r.Warnings = append(r.Warnings, "no degrees of freedom are left: σ and the likelihood are undefined")
	}
	r.Cov = nil
	if unscaled != nil && !math.IsNaN(r.Sigma) {
		r.Cov = make([]float64, len(unscaled))
		for i, v := range unscaled {
			r.Cov[i] = r.Sigma * r.Sigma * v
		}
	}
	if !math.IsNaN(r.Sigma) {
		r.LogLik = logLikelihood(s, math.Log(r.RSS)+2*math.Log(unit))
	}
	if !known {
		r.Sigma *= unit
	}
	r.RSS *= unit * unit
}

// fitBasis solves a curve that is linear in its parameters.
func fitBasis(s *Sample, c models.Basis) *Result {
	r := newResult(s, c)
	n, p := r.N, r.Params()
	x := make([]float64, n*p)
	y := make([]float64, n)
	c.Columns(s.TRef, s.T, y, x)
	w := make([]float64, n)
	for i := range n {
		y[i] = s.Y[i] - y[i]
		w[i] = 1 / s.V[i]
	}
	f := Linear(s.widened(x, p), y, w)
	if !finite(f.RSS) || !finite(f.P...) {
		r.Reason = "the least-squares solution is not finite; choose a unit in which variances are closer to 1"
		return r
	}
	r.P, r.Beside, r.RSS = f.P[:p:p], f.P[p:], f.RSS
	r.Residuals, r.Leverage = f.Residuals, f.Leverage
	r.Fitted = make([]float64, n)
	for i, e := range f.Residuals {
		r.Fitted[i] = s.Y[i] - e
	}
	r.Status = Converged
	cov := f.Cov
	if d := s.DistinctT(); d < p {
		r.Status, cov = NotIdentified, nil
		r.Reason = fmt.Sprintf("needs at least %d distinct temperatures, has %d", p, d)
	} else if cov == nil {
		r.Status = NotIdentified
		r.Reason = fmt.Sprintf("the temperatures lie too close together for %d parameters", p)
	}
	r.settle(s, cov, 1)
	r.split(p)
	return r
}

func finite(xs ...float64) bool {
	for _, x := range xs {
		if math.IsNaN(x) || math.IsInf(x, 0) {
			return false
		}
	}
	return true
}
