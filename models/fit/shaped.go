package fit

import (
	"fmt"
	"math"

	"onebarrier/models"
)

// shapedCondition is the condition number of the Jacobian, columns scaled to unit
// length, past which the parameters of a shaped curve count as not identified.
const shapedCondition = 1e8

// softplusSign reports whether the shape of c is s(c - d x) or -s(c - d x) with s
// the softplus, and its sign: two paths side by side, or two steps in series. Those
// are the curves the projected kernel serves.
func softplusSign(c models.Curve) (sign float64, ok bool) {
	shaped, is := c.(models.Shaped)
	if !is || shaped.ShapeDim() != 2 || len(c.Info().Params) != 4 {
		return 0, false
	}
	x, q := []float64{-1, 0, 2}, []float64{0.5, 0.75}
	g := make([]float64, len(x))
	shaped.Shape(x, q, g, nil, nil)
	sign = math.Copysign(1, g[0])
	for i, xi := range x {
		want := sign * math.Log1p(math.Exp(q[0]-q[1]*xi))
		if !(math.Abs(g[i]-want) <= 1e-12) {
			return 0, false
		}
	}
	return sign, true
}

// fitShaped fits a shaped curve whose shape is ± a softplus to a sample whose errors
// are additive in ln k: global search, then Newton's method to the last digit, on
// the problem with {1, 1/T} projected out. N, Nu, Sigma and LogLik are left to Fit, and
// Cov is (JᵀV⁻¹J)⁻¹, without σ².
func fitShaped(s *Sample, c models.Shaped) *Result {
	p := planOf(s.T, s.V)
	return p.fit(s, c)
}

// fit is fitShaped with the plan made.
func (p *plan) fit(s *Sample, c models.Shaped) *Result {
	res := &Result{Curve: c, TRef: s.TRef, RSS: math.NaN()}
	sign, ok := softplusSign(c)
	if !ok {
		panic("fit: the shape of " + c.Info().Name + " is not a softplus")
	}
	np := len(c.Info().Params)
	if p.distinct < np {
		res.Reason = fmt.Sprintf("needs %d distinct temperatures, has %d", np, p.distinct)
		return res
	}
	p.makeNodes()
	k := p.kernel()
	straight := k.setData(s.Y, sign)
	exact := straight <= float64(s.Len())*square(1e-12*maxAbsWhitened(s))
	best, better := p.cold(k, p.newSearch(), straight, 1e-12)
	if exact || !better {
		res.Status = Excluded
		res.RSS = straight
		res.Reason = bendsTheOtherWay
		return res
	}
	var trial normal
	k.polish(best, &trial)
	res.P = make([]float64, np)
	p.canonical(s, c, sign, best.c, best.d, res.P)
	finish(s, c, res)
	switch {
	case math.Abs(best.d) >= p.maxD || math.Abs(res.P[1]) > maxBarrier || math.Abs(res.P[3]) > maxBarrier:
		res.Status = NotIdentified
		res.Reason = fmt.Sprintf("a barrier beyond %g kJ/mol would fit better still", maxBarrier/1000)
		res.Cov = nil
	case res.Cov == nil:
		res.Status = NotIdentified
		res.Reason = "the data do not determine the barriers one by one"
	default:
		res.Status = Converged
	}
	return res
}

// canonical turns the kernel's (c, d) into the canonical parameters of the curve.
func (p *plan) canonical(s *Sample, curve models.Shaped, sign, c, d float64, out []float64) {
	// The linear part is what y - shape leaves in the span of the basis.
	n := len(p.rows)
	shape, slopes := make([]float64, n), make([]float64, n)
	p.tab.shape(c, d, p.rows, shape, slopes)
	var a1, a2 float64
	for i := range p.rows {
		r := &p.rows[i]
		rest := sign*s.Y[i]*r.w - shape[i]
		a1 += r.p1 * rest
		a2 += r.p2 * rest
	}
	centre, slope := p.lineAt(a1, a2)
	shift := p.shift(s.TRef)
	q := [2]float64{c + d*shift, d / p.width}
	curve.FromShape(sign*(centre+slope*shift), sign*slope/p.width, q[:], out)
}

// shift is u at the temperature tRef.
func (p *plan) shift(tRef float64) float64 {
	return (tRef - p.tc) / (models.GasConstant * tRef * p.tc) / p.width
}

// finish fills fitted values, residuals, RSS, covariance and leverage from res.P.
// Cov stays nil where the Jacobian is too ill-conditioned.
func finish(s *Sample, c models.Curve, res *Result) {
	n, np := s.Len(), len(res.P)
	res.Fitted, res.Residuals = make([]float64, n), make([]float64, n)
	res.Leverage = make([]float64, n)
	jac := make([]float64, n*np)
	c.LnK(s.TRef, s.T, res.P, res.Fitted, jac)
	res.RSS = 0
	for i, f := range res.Fitted {
		res.Residuals[i] = s.Y[i] - f
		w := 1 / math.Sqrt(s.V[i])
		res.RSS += square(w * res.Residuals[i])
		for j := range np {
			jac[i*np+j] *= w
		}
	}
	scale := make([]float64, np)
	columnScale(jac, n, np, scale)
	q := newQR(n, np)
	q.load(jac, scale)
	q.factor()
	q.leverage(res.Leverage, q.rank())
	cov := make([]float64, np*np)
	if condition := q.covariance(scale, cov); !(condition <= shapedCondition) {
		return
	}
	res.Cov = cov
}

func square(x float64) float64 { return x * x }

func maxAbsWhitened(s *Sample) float64 {
	var big float64
	for i, y := range s.Y {
		big = math.Max(big, math.Abs(y)/math.Sqrt(s.V[i]))
	}
	return big
}
