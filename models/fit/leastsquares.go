package fit

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/floats"
)

// Problem is a least-squares problem of m residuals in n parameters, m >= n.
type Problem struct {
	M, N int
	// Eval fills the residuals r (length M) at p and, where jac is not nil, their
	// M x N Jacobian in row-major order (jac[i*N+j] = dr_i/dp_j). Where p lies
	// outside the domain it may leave NaN or Inf: that step is then refused.
	Eval func(p, r, jac []float64)
}

// Options steer LeastSquares. The zero value takes the defaults.
type Options struct {
	MaxIterations int     // trial steps of the trust region; default 2000
	Tolerance     float64 // relative, on RSS, step and gradient; default 1e-15
	Factor        float64 // first trust radius over ‖Dp‖; default 1 (the 100 of MINPACK loses BoxBOD)
}

// Solution is the outcome of LeastSquares.
type Solution struct {
	Status     Status // Converged; NotIdentified where Cov is refused; Failed
	Reason     string // why, where Status is not Converged
	P          []float64
	RSS        float64   // Σ r²
	Residuals  []float64 // r at P
	Cov        []float64 // (JᵀJ)⁻¹, n x n, without σ²; nil where refused
	Leverage   []float64
	Condition  float64 // of J with columns of unit length
	Iterations int     // trial and polishing steps
}

// LeastSquares minimises Σ r_i(p)² from p0 by Moré's trust-region form of the
// Levenberg–Marquardt method (J. J. Moré, in Numerical Analysis, Springer LNM 630 (1978)
// 105): pivoted Householder QR, parameters scaled by the running maximum of the
// column lengths of J. Undamped Gauss–Newton steps then polish the answer, since
// RSS itself cannot see relative changes of p below 1e-8. p0 is not modified.
//
// Termination: predicted and actual relative reductions of RSS <= Tolerance, or
// trust radius <= Tolerance·‖Dp‖, or the cosine between r and every column of J <=
// Tolerance.
func LeastSquares(pr Problem, p0 []float64, opt Options) *Solution {
	return newSolver(pr.M, pr.N).solve(pr, p0, opt)
}

// solver is the workspace of LeastSquares for one size; iterations do not allocate.
type solver struct {
	q                         *qr
	p, trial, step, diag      []float64
	r, rTrial, jac, qtb       []float64
	s, w, z, row, scale, best []float64
}

func newSolver(m, n int) *solver {
	if n < 1 || m < n {
		panic("fit: least squares needs at least one parameter and no fewer residuals than parameters")
	}
	v := func(k int) []float64 { return make([]float64, k) }
	return &solver{
		q: newQR(m, n),
		p: v(n), trial: v(n), step: v(n), diag: v(n),
		r: v(m), rTrial: v(m), jac: v(m * n), qtb: v(m),
		s: v(n * n), w: v(n), z: v(n), row: v(n), scale: v(n), best: v(n),
	}
}

func (s *solver) solve(pr Problem, p0 []float64, opt Options) *Solution {
	if len(p0) != pr.N || s.q.m != pr.M || s.q.n != pr.N {
		panic("fit: the length of p0 does not match the problem")
	}
	sol := &Solution{RSS: math.NaN(), Condition: math.Inf(1)}
	var ok bool
	sol.Iterations, ok, sol.Reason = s.trustRegion(pr, p0, opt)
	if !ok {
		return sol
	}
	sol.Iterations += s.polish(pr)
	s.finish(pr, sol)
	return sol
}

// trustRegion leaves the minimum in s.p and its residuals in s.r. ok is false where
// there is no estimate.
func (s *solver) trustRegion(pr Problem, p0 []float64, opt Options) (iterations int, ok bool, reason string) {
	if opt.MaxIterations == 0 {
		opt.MaxIterations = 2000
	}
	if opt.Tolerance == 0 {
		opt.Tolerance = 1e-15
	}
	if opt.Factor == 0 {
		opt.Factor = 1
	}
	n := pr.N
	copy(s.p, p0)
	pr.Eval(s.p, s.r, s.jac)
	fnorm := floats.Norm(s.r, 2)
	if !finite(fnorm) || !finite(s.jac...) {
		return 0, false, "the residuals are not finite at the start"
	}
	var par, delta, xnorm float64
	iter := 1 // trial steps, refused ones included
	for first := true; ; first = false {
		s.q.load(s.jac, nil)
		s.q.factor()
		for j, length := range s.q.size {
			if first {
				s.diag[j] = 0
			}
			s.diag[j] = math.Max(s.diag[j], length)
			if s.diag[j] == 0 {
				s.diag[j] = 1
			}
		}
		if first {
			xnorm = scaledNorm(s.diag, s.p)
			delta = opt.Factor * xnorm
			if delta == 0 {
				delta = opt.Factor
			}
		}
		copy(s.qtb, s.r)
		s.q.mulQT(s.qtb)

		var gnorm float64 // largest |cos(r, column of J)|
		if fnorm > 0 {
			for j := range n {
				length := s.q.size[s.q.perm[j]]
				if length == 0 {
					continue
				}
				g := 0.0
				for i := 0; i <= j; i++ {
					g += s.q.r[i*n+j] * (s.qtb[i] / fnorm)
				}
				gnorm = math.Max(gnorm, math.Abs(g/length))
			}
		}
		if gnorm <= opt.Tolerance {
			return iter, true, ""
		}

		for ; ; iter++ {
			par = s.damp(delta, par)
			for j := range n {
				s.step[j] = -s.step[j]
				s.trial[j] = s.p[j] + s.step[j]
			}
			pnorm := scaledNorm(s.diag, s.step)
			if iter == 1 {
				delta = math.Min(delta, pnorm)
			}
			pr.Eval(s.trial, s.rTrial, nil)
			trialNorm := floats.Norm(s.rTrial, 2)

			actual := -1.0 // also where the trial is NaN or Inf
			if 0.1*trialNorm < fnorm {
				t := trialNorm / fnorm
				actual = (1 - t) * (1 + t)
			}
			// ‖J step‖ through R.
			clear(s.z)
			for j := range n {
				sj := s.step[s.q.perm[j]]
				for i := 0; i <= j; i++ {
					s.z[i] += s.q.r[i*n+j] * sj
				}
			}
			t1 := floats.Norm(s.z, 2) / fnorm
			t2 := math.Sqrt(par) * pnorm / fnorm
			predicted := t1*t1 + 2*t2*t2
			slope := -(t1*t1 + t2*t2)
			ratio := 0.0
			if predicted != 0 {
				ratio = actual / predicted
			}
			if ratio <= 0.25 {
				shrink := 0.5
				if actual < 0 {
					shrink = 0.5 * slope / (slope + 0.5*actual)
				}
				if !(0.1*trialNorm < fnorm) || shrink < 0.1 {
					shrink = 0.1
				}
				delta = shrink * math.Min(delta, 10*pnorm)
				par /= shrink
			} else if par == 0 || ratio >= 0.75 {
				delta = 2 * pnorm
				par *= 0.5
			}

			accepted := ratio >= 1e-4
			if accepted {
				s.p, s.trial = s.trial, s.p
				pr.Eval(s.p, s.r, s.jac)
				if !finite(s.jac...) {
					return iter, false, "the derivatives are not finite along the way"
				}
				xnorm = scaledNorm(s.diag, s.p)
				fnorm = trialNorm
			}
			small := math.Abs(actual) <= opt.Tolerance && predicted <= opt.Tolerance && ratio <= 2
			if small || delta <= opt.Tolerance*xnorm || fnorm == 0 {
				return iter, true, ""
			}
			if iter >= opt.MaxIterations {
				return iter, false, "no convergence within the allowed number of steps"
			}
			// No step can be told from rounding any more.
			if !accepted && (delta <= 0x1p-52*xnorm || predicted <= 0x1p-52 && math.Abs(actual) <= 0x1p-52) {
				return iter, true, ""
			}
			if accepted {
				iter++
				break
			}
		}
	}
}

// damp puts into s.step the solution of min ‖J d - r‖² + par ‖D d‖² with par such
// that ‖D d‖ lies within a tenth of delta, or par = 0 where the Gauss–Newton step
// is shorter (Moré 1978, section 5). The caller turns the sign.
func (s *solver) damp(delta, par float64) float64 {
	n := s.q.n
	rank := s.q.rank()
	copy(s.w, s.qtb[:n])
	s.q.solve(s.w, s.step, rank)
	dnorm := scaledNorm(s.diag, s.step)
	excess := dnorm - delta
	if excess <= 0.1*delta {
		return 0
	}
	var lower float64
	if rank == n {
		lower = excess / delta / s.newton(s.q.r, dnorm)
	}
	g := 0.0
	for j := range n {
		t := 0.0
		for i := 0; i <= j; i++ {
			t += s.q.r[i*n+j] * s.qtb[i]
		}
		g = math.Hypot(g, t/s.diag[s.q.perm[j]])
	}
	upper := g / delta
	if upper == 0 {
		upper = math.SmallestNonzeroFloat64 / math.Min(delta, 0.1)
	}
	par = math.Min(math.Max(par, lower), upper)
	if par == 0 {
		par = g / dnorm
	}
	for k := 1; ; k++ {
		if par == 0 {
			par = math.Max(math.SmallestNonzeroFloat64, 0.001*upper)
		}
		s.damped(math.Sqrt(par))
		dnorm = scaledNorm(s.diag, s.step)
		last := excess
		excess = dnorm - delta
		if math.Abs(excess) <= 0.1*delta || (lower == 0 && excess <= last && last < 0) || k == 10 {
			return par
		}
		correction := excess / delta / s.newton(s.s, dnorm)
		if excess > 0 {
			lower = math.Max(lower, par)
		} else {
			upper = math.Min(upper, par)
		}
		par = math.Max(lower, par+correction)
	}
}

// newton returns ‖R⁻ᵀ Pᵀ D² d‖²/‖D d‖² for an upper triangle r: the derivative
// of the step length with respect to par, up to factors.
func (s *solver) newton(r []float64, dnorm float64) float64 {
	n := s.q.n
	for j := range n {
		l := s.q.perm[j]
		t := s.diag[l] * (s.diag[l] * s.step[l] / dnorm)
		for i := range j {
			t -= r[i*n+j] * s.z[i]
		}
		s.z[j] = t / r[j*n+j]
	}
	t := floats.Norm(s.z, 2)
	return t * t
}

// damped solves min ‖R Pᵀ d - Qᵀr‖² + root² ‖D d‖² into s.step by Givens rotations
// that fold the rows of root·D into R, and leaves the new triangle in s.s.
func (s *solver) damped(root float64) {
	n := s.q.n
	copy(s.s, s.q.r)
	copy(s.w, s.qtb[:n])
	for j := range n {
		clear(s.row)
		s.row[j] = root * s.diag[s.q.perm[j]]
		b := 0.0
		for k := j; k < n; k++ {
			if s.row[k] == 0 {
				continue
			}
			rk := s.s[k*n : (k+1)*n]
			h := math.Hypot(rk[k], s.row[k])
			cos, sin := rk[k]/h, s.row[k]/h
			rk[k] = h
			s.w[k], b = cos*s.w[k]+sin*b, cos*b-sin*s.w[k]
			for i := k + 1; i < n; i++ {
				rk[i], s.row[i] = cos*rk[i]+sin*s.row[i], cos*s.row[i]-sin*rk[i]
			}
		}
	}
	rank := n
	for j := range n {
		if s.s[j*n+j] == 0 {
			rank = j
			break
		}
	}
	clear(s.step)
	for j := rank - 1; j >= 0; j-- {
		t := s.w[j]
		for k := j + 1; k < rank; k++ {
			t -= s.s[j*n+k] * s.z[k]
		}
		s.z[j] = t / s.s[j*n+j]
		s.step[s.q.perm[j]] = s.z[j]
	}
}

// polish takes undamped Gauss–Newton steps until four have not been shorter than
// the shortest so far, at most 100, and leaves in s.p the iterate that followed
// the shortest. Steps that raise RSS by more than rounding are not taken.
func (s *solver) polish(pr Problem) (steps int) {
	const most, patience = 100, 4
	pr.Eval(s.p, s.r, s.jac)
	start := floats.Norm(s.r, 2)
	copy(s.best, s.p)
	shortest := math.Inf(1)
	for stalled := 0; steps < most && stalled < patience; steps++ {
		columnScale(s.jac, pr.M, pr.N, s.scale)
		s.q.load(s.jac, s.scale)
		s.q.factor()
		if s.q.rank() < pr.N {
			break
		}
		copy(s.qtb, s.r)
		s.q.mulQT(s.qtb)
		s.q.solve(s.qtb[:pr.N], s.step, pr.N)
		size := floats.Norm(s.step, 2)
		for j := range s.p {
			s.p[j] -= s.step[j] / s.scale[j]
		}
		pr.Eval(s.p, s.r, s.jac)
		now := floats.Norm(s.r, 2)
		if !(now <= start*(1+1e-8)) || !finite(s.jac...) {
			break
		}
		if size < shortest {
			shortest, stalled = size, 0
			copy(s.best, s.p)
		} else {
			stalled++
		}
		if size == 0 {
			break
		}
	}
	copy(s.p, s.best)
	return steps
}

// faded is the length of a column of J, as a share of the largest it had on the way,
// below which its parameter has run off to where it no longer matters: columns of
// unit length hide that from the condition number. Among the NIST sets the least
// share is 0.008 at the certified values and 1e-45 at BoxBOD's false minimum.
const faded = 1e-8

// finish evaluates the solution at s.p.
func (s *solver) finish(pr Problem, sol *Solution) {
	m, n := pr.M, pr.N
	pr.Eval(s.p, s.r, s.jac)
	sol.P = append([]float64(nil), s.p...)
	sol.Residuals = append([]float64(nil), s.r...)
	sol.RSS = 0
	for _, r := range s.r {
		sol.RSS += r * r
	}
	columnScale(s.jac, m, n, s.scale)
	s.q.load(s.jac, s.scale)
	s.q.factor()
	sol.Leverage = make([]float64, m)
	s.q.leverage(sol.Leverage, s.q.rank())
	sol.Cov = make([]float64, n*n)
	sol.Condition = s.q.covariance(s.scale, sol.Cov)
	sol.Status = Converged
	if !(sol.Condition <= maxCondition) {
		sol.Cov = nil
		sol.Status = NotIdentified
		sol.Reason = fmt.Sprintf("the data do not determine all %d parameters", n)
	}
	for j := range n {
		if !(s.scale[j] >= faded*s.diag[j]) {
			sol.Cov = nil
			sol.Status = NotIdentified
			sol.Reason = fmt.Sprintf("parameter %d of %d has lost its influence on the curve", j+1, n)
		}
	}
}

// scaledNorm returns the length of the vector with elements d_j x_j.
func scaledNorm(d, x []float64) float64 {
	var s float64
	for j := range x {
		s = math.Hypot(s, d[j]*x[j])
	}
	return s
}
