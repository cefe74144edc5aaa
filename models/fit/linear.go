package fit

import "math"

// LinearFit is the solution of a linear least-squares problem with n rows and p
// columns.
type LinearFit struct {
	P         []float64 // coefficients; 0 for columns beyond Rank
	Cov       []float64 // (XᵀWX)⁻¹, p x p, without σ²; nil past the condition limit
	RSS       float64   // Σ w r²
	Residuals []float64 // y - Xp
	Leverage  []float64
	Rank      int
	Condition float64 // of the weighted design with columns of unit length
}

// Linear minimises Σ w_i (y_i - Σ_j x_ij p_j)² by pivoted Householder QR of the
// weighted design with its columns scaled to unit length. x is row-major,
// len(y) x p with p = len(x)/len(y); w holds the weights (1/variance), nil for
// ones. Rows must not be fewer than columns; a caller that breaks this panics.
//
// Coefficients and residuals are refined together (Björck 1967, "Iterative
// refinement of linear least squares solutions I", BIT 7, 257) with the residuals
// of the augmented system in double-double arithmetic, so that the solution is
// that of the float64 design to its last digits. What the rounding of the design
// itself costs is another matter: see Polynomial.
func Linear(x, y, w []float64) *LinearFit {
	m := len(y)
	if m == 0 || len(x)%m != 0 || len(x) == 0 || (w != nil && len(w) != m) {
		panic("fit: lengths of x, y and w do not match")
	}
	f, _ := linear(design{m: m, n: len(x) / m, hi: x}, y, w)
	return f
}

// Polynomial minimises Σ w_i (y_i - Σ_j p_j x_i^j)², j from 0 to degree; x, y and w
// (nil for ones) have the same length, which must exceed degree. The powers are
// formed in double-double arithmetic and refined against as such, coefficients and
// covariance alike: rounding them to float64 would cost the digits that the
// condition of raw powers allows it to. For Filip's polynomial of the NIST StRD,
// condition 5e9, that is all but 7 of them, whatever solves the rounded problem.
func Polynomial(x, y, w []float64, degree int) *LinearFit {
	m, n := len(y), degree+1
	if m == 0 || len(x) != m || degree < 0 || (w != nil && len(w) != m) {
		panic("fit: lengths of x, y and w do not match")
	}
	d := design{m: m, n: n, hi: make([]float64, m*n), lo: make([]float64, m*n)}
	for i, xi := range x {
		pow := dd{1, 0}
		for j := range n {
			d.hi[i*n+j], d.lo[i*n+j] = pow.hi, pow.lo
			pow = pow.product(xi)
		}
	}
	f, e := linear(d, y, w)
	if f.Cov == nil || f.Rank < n {
		return f
	}
	// Column j of (AᵀA)⁻¹ solves the augmented system with right-hand sides 0 and
	// -e_j.
	zero, unit := make([]float64, m), make([]float64, n)
	for j := range n {
		clear(unit)
		unit[j] = -1
		column := make([]float64, n)
		e.refine(zero, unit, column, f.Rank)
		for i := range n {
			f.Cov[i*n+j] = column[i]
		}
	}
	for i := range n {
		for j := range i {
			c := (f.Cov[i*n+j] + f.Cov[j*n+i]) / 2
			f.Cov[i*n+j], f.Cov[j*n+i] = c, c
		}
	}
	return f
}

// design is an m x n matrix, row-major, unweighted: hi, plus lo where its entries
// are known beyond float64.
type design struct {
	m, n   int
	hi, lo []float64
}

func linear(d design, y, w []float64) (*LinearFit, *equations) {
	m, n := d.m, d.n
	if m < n {
		panic("fit: fewer rows than columns")
	}
	root := make([]float64, m)
	a := make([]float64, m*n)
	for i := range root {
		root[i] = 1
		if w != nil {
			root[i] = math.Sqrt(w[i])
		}
		for j := range n {
			a[i*n+j] = root[i] * d.hi[i*n+j]
		}
	}
	e := &equations{design: d, q: newQR(m, n), root: root, scale: make([]float64, n)}
	columnScale(a, m, n, e.scale)
	e.q.load(a, e.scale)
	e.q.factor()

	f := &LinearFit{P: make([]float64, n), Leverage: make([]float64, m), Rank: e.q.rank()}
	e.refine(y, nil, f.P, f.Rank)
	f.Residuals = e.residuals(y, f.P)
	for i, r := range f.Residuals {
		f.RSS += root[i] * r * root[i] * r
	}
	e.q.leverage(f.Leverage, f.Rank)
	f.Cov = make([]float64, n*n)
	f.Condition = e.q.covariance(e.scale, f.Cov)
	if !(f.Condition <= maxCondition) {
		f.Cov = nil
	}
	return f, e
}

// equations are a weighted design, root_i times row i, and its factors.
type equations struct {
	design
	q           *qr
	root, scale []float64
}

// subtractRow subtracts Σ_j x_ij p_j from s.
func (e *equations) subtractRow(s *dd, i int, p []float64) {
	for j, pj := range p {
		s.addProduct(-e.hi[i*e.n+j], pj)
		if e.lo != nil {
			s.addProduct(-e.lo[i*e.n+j], pj)
		}
	}
}

// refine solves  [I A; Aᵀ 0][ρ; p] = [b; c], ρ = root·residual, with A the weighted
// design, b the weighted y and c given or, where it is nil, 0. It improves (ρ, p)
// from p = 0 until the corrections no longer shrink. The right-hand sides are
// formed in double-double arithmetic. A column of A in row i is root_i·x_ij; taking
// it from x and multiplying in double-double keeps A exact, so that the rounding of
// the weighted rows does not enter either.
func (e *equations) refine(y, c, p []float64, rank int) {
	q, m, n := e.q, e.m, e.n
	rho := make([]float64, m)
	top := make([]float64, m)
	g, d, t := make([]float64, n), make([]float64, n), make([]float64, n)
	last := math.Inf(1)
	for range 10 {
		// top = b - ρ - A p and g = c - Aᵀρ, divided by the column scale.
		for i := range m {
			var s dd
			s.addProduct(1, y[i])
			e.subtractRow(&s, i, p)
			top[i] = s.product(e.root[i]).minus(rho[i])
		}
		for j := range n {
			var s dd
			if c != nil {
				s.hi = c[j]
			}
			for i := range m {
				s.addTriple(-e.hi[i*n+j], e.root[i], rho[i])
				if e.lo != nil {
					s.addTriple(-e.lo[i*n+j], e.root[i], rho[i])
				}
			}
			g[j] = s.hi / e.scale[j]
		}
		// With A P = Q R: solve Rᵀh = Pᵀg, then ρ += Q [h; top₂] and
		// p += R⁻¹(top₁ - h).
		q.mulQT(top)
		if rank == n {
			q.solveT(g, d)
		} else {
			clear(d)
		}
		for j := range n {
			t[j] = top[j] - d[j]
			top[j] = d[j]
			if j >= rank {
				// These rows of R are rounding: what they hold stays a residual.
				top[j] = t[j]
			}
		}
		q.solve(t, g, rank)
		q.mulQ(top)
		var size float64
		for j := range n {
			size += g[j] * g[j]
		}
		size = math.Sqrt(size)
		if !(size < last) {
			break
		}
		last = size
		for j := range n {
			p[j] += g[j] / e.scale[j]
		}
		for i := range m {
			rho[i] += top[i]
		}
		if size == 0 {
			break
		}
	}
}

// residuals are y - Xp, unweighted.
func (e *equations) residuals(y, p []float64) []float64 {
	r := make([]float64, e.m)
	for i := range r {
		var s dd
		s.addProduct(1, y[i])
		e.subtractRow(&s, i, p)
		r[i] = s.hi
	}
	return r
}

// dd is an unevaluated sum hi + lo of two float64 (Dekker 1971, Numer. Math. 18,
// 224; products by fused multiply-add), good for about 31 digits.
type dd struct{ hi, lo float64 }

// add adds a + b, |a| >> |b| not required.
func (s *dd) add(hi, lo float64) {
	sum := s.hi + hi
	z := sum - s.hi
	err := (s.hi - (sum - z)) + (hi - z) + s.lo + lo
	s.hi = sum + err
	s.lo = err - (s.hi - sum)
}

// addProduct adds a·b.
func (s *dd) addProduct(a, b float64) {
	p := a * b
	s.add(p, math.FMA(a, b, -p))
}

// addTriple adds a·b·c.
func (s *dd) addTriple(a, b, c float64) {
	p := dd{a * b, math.FMA(a, b, -(a * b))}.product(c)
	s.add(p.hi, p.lo)
}

func (s dd) product(c float64) dd {
	p := s.hi * c
	e := math.FMA(s.hi, c, -p) + s.lo*c
	h := p + e
	return dd{h, e - (h - p)}
}

// minus returns s - b rounded to float64.
func (s dd) minus(b float64) float64 {
	s.add(-b, 0)
	return s.hi
}
