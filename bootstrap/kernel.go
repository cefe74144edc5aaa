package bootstrap

import (
	"math"
	"slices"

	"onebarrier/models"
	"onebarrier/models/fit"
)

// rankTol: a column that keeps less than this share of its length once the
// earlier ones are projected out does not count as a direction of its own.
const rankTol = 1e-10

// orthonormalise is modified Gram-Schmidt on the first p of m columns of length
// n, a[j*n:(j+1)*n]. Columns p..m-1 are projected and left as residuals. r (m x m,
// row-major) receives the upper triangle. Least squares by this road, with y as
// the last column, is backward stable (Å. Björck, BIT 7 (1967) 1). It reports
// false where a column depends on the earlier ones.
func orthonormalise(a []float64, n, p, m int, r []float64) bool {
	for j := range p {
		col := a[j*n : (j+1)*n]
		now := dot(col, col)
		was := now
		for k := range j {
			was += r[k*m+j] * r[k*m+j]
		}
		if !(now > rankTol*rankTol*was) {
			return false
		}
		norm := math.Sqrt(now)
		r[j*m+j] = norm
		for i := range col {
			col[i] /= norm
		}
		for k := j + 1; k < m; k++ {
			next := a[k*n : (k+1)*n]
			d := dot(col, next)
			r[j*m+k] = d
			for i, c := range col {
				next[i] -= d * c
			}
		}
	}
	return true
}

func dot(a, b []float64) float64 {
	var s float64
	b = b[:len(a)]
	for i, x := range a {
		s += x * b[i]
	}
	return s
}

// solveTransposed fills s with the solution of Rᵀs = w; w·(RᵀR)⁻¹w = |s|².
func solveTransposed(r []float64, m int, w, s []float64) {
	for k := range w {
		v := w[k]
		for j := range k {
			v -= r[j*m+k] * s[j]
		}
		s[k] = v / r[k*m+k]
	}
}

// kernel evaluates the targets of one curve that is linear in its parameters.
// It is read-only once built and shared by the workers.
type kernel struct {
	curve   models.Basis
	index   int // of the candidate
	n, p    int // p: parameters, those of nuisance columns included
	sample  *fit.Sample
	fit     *fit.Result
	offset  []float64
	x       []float64   // n x p, row-major; the nuisance columns come last
	q       []float64   // p rows of n: orthonormal columns of V^(-1/2)J, times V^(-1/2)
	iv      []float64   // 1/V
	targets []int       // which of Input.Targets
	w       [][]float64 // their functionals
	c       [][]float64 // influence ∂θ̂/∂y_i
	sd      []float64   // sqrt of the variance of θ̂ for σ = 1
	gen     *generator  // around this curve's own fit; nil under Pairs
}

// scratch is what one worker needs for one kernel.
type scratch struct {
	a, r, s []float64
}

func (k *kernel) newScratch() *scratch {
	m := k.p + 1
	return &scratch{apart[float64](m * k.n), apart[float64](m * m), apart[float64](k.p)}
}

func newKernel(s *fit.Sample, index int, res *fit.Result, curve models.Basis) *kernel {
	n, own := s.Len(), len(curve.Info().Params)
	k := &kernel{
		curve: curve, index: index, n: n, p: own + s.Spent(), sample: s, fit: res,
		offset: make([]float64, n), x: make([]float64, n*own), iv: make([]float64, n),
	}
	curve.Columns(s.TRef, s.T, k.offset, k.x)
	if s.Spent() > 0 {
		wide := make([]float64, 0, n*k.p)
		for i := range n {
			wide = append(wide, k.x[i*own:(i+1)*own]...)
			for _, c := range s.Nuisance {
				wide = append(wide, c[i])
			}
		}
		k.x = wide
	}
	for i, v := range s.V {
		k.iv[i] = 1 / v
	}
	return k
}

// design fills the first p columns of sc.a with √(count/V) J, J = X in ln k and
// exp(f) X in k at parameters par, and orthonormalises them, together with e
// where it is given. counts may be nil.
func (k *kernel) design(sc *scratch, counts []int, par, e []float64) bool {
	n, p := k.n, k.p
	for i := range n {
		root := math.Sqrt(k.iv[i])
		if counts != nil {
			root *= math.Sqrt(float64(counts[i]))
		}
		row := k.x[i*p : (i+1)*p]
		if e != nil {
			sc.a[p*n+i] = root * e[i]
		}
		if k.sample.Model.InK() {
			root *= math.Exp(k.offset[i] + dot(par, row))
		}
		for j, x := range row {
			sc.a[j*n+i] = root * x
		}
	}
	m := p
	if e != nil {
		m++
	}
	return orthonormalise(sc.a, n, p, m, sc.r)
}

// addTarget adds a functional w of the parameters. The first call factors the
// design; false means that the data do not determine the curve.
func (k *kernel) addTarget(which int, w []float64) bool {
	sc := k.newScratch()
	if !k.design(sc, nil, k.fit.P, nil) {
		return false
	}
	if k.q == nil {
		k.q = make([]float64, k.p*k.n)
		for j := range k.p {
			for i := range k.n {
				k.q[j*k.n+i] = sc.a[j*k.n+i] * math.Sqrt(k.iv[i])
			}
		}
	}
	w = append(slices.Clone(w), make([]float64, k.p-len(w))...)
	solveTransposed(sc.r, k.p, w, sc.s)
	c := make([]float64, k.n)
	for j, s := range sc.s {
		for i := range c {
			c[i] += s * k.q[j*k.n+i]
		}
	}
	k.targets = append(k.targets, which)
	k.w = append(k.w, w)
	k.c = append(k.c, c)
	k.sd = append(k.sd, math.Sqrt(dot(sc.s, sc.s)))
	return true
}

// flatRSS: a resample whose residual sum of squares is below this share of its
// total lies on the curve, and a statistic divided by its scatter says nothing.
const flatRSS = 1e-20

// fixed evaluates a resample y = fitted + e of the same design in ln k. It gives
// θ* - θ̂ and (θ* - θ̂)/se* for each target, NaN where the resample has no scatter.
func (k *kernel) fixed(e []float64, diff, t []float64) {
	var total float64
	for i, x := range e {
		total += x * x * k.iv[i]
	}
	rss := total
	for j := range k.p {
		d := dot(e, k.q[j*k.n:(j+1)*k.n])
		rss -= d * d
	}
	// The difference is good to about 1e-16 of total, so this bound is coarser
	// than flatRSS.
	if rss <= 1e-12*total {
		rss = 0
	}
	for j, c := range k.c {
		diff[j] = dot(e, c)
		t[j] = diff[j] / k.stdError(j, k.sd[j], rss)
	}
}

// stdError is NaN for no scatter, unless σ is known.
func (k *kernel) stdError(j int, sd, rss float64) float64 {
	if k.sample.Model.KnownSigma() {
		return sd
	}
	if !(rss > 0) {
		return math.NaN()
	}
	return sd * math.Sqrt(rss/float64(k.n-k.p))
}

// pairs evaluates a resample of entries in ln k, from the residuals e of the
// curve's own fit. It reports false where the drawn entries do not determine the
// curve.
func (k *kernel) pairs(sc *scratch, e []float64, counts []int, diff, t []float64) bool {
	if !k.design(sc, counts, nil, e) {
		return false
	}
	m := k.p + 1
	res := sc.a[k.p*k.n:]
	rss := dot(res, res)
	total := rss
	for j := range k.p {
		total += sc.r[j*m+k.p] * sc.r[j*m+k.p]
	}
	if rss <= flatRSS*total {
		rss = 0
	}
	for j, w := range k.w {
		solveTransposed(sc.r, m, w, sc.s)
		diff[j] = 0
		for i, s := range sc.s {
			diff[j] += s * sc.r[i*m+k.p]
		}
		t[j] = diff[j] / k.stdError(j, math.Sqrt(dot(sc.s, sc.s)), rss)
	}
	return true
}

// inK evaluates a resample that a refitter has fitted in k: par and rss are its
// answer for this curve, and the variance comes from the Jacobian at par.
func (k *kernel) inK(sc *scratch, counts []int, par []float64, rss float64, diff, t []float64) bool {
	if math.IsNaN(rss) || math.IsInf(rss, 0) || !k.design(sc, counts, par, nil) {
		return false
	}
	for j, w := range k.w {
		solveTransposed(sc.r, k.p, w, sc.s)
		diff[j] = dot(par, w) - dot(k.fit.P, w)
		t[j] = diff[j] / k.stdError(j, math.Sqrt(dot(sc.s, sc.s)), rss)
	}
	return true
}
