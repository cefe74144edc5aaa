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
// of the augmented system in double-double arithmetic: without it Filip's
// polynomial of the NIST StRD has 7 digits.
func Linear(x, y, w []float64) *LinearFit {
	m := len(y)
	if m == 0 || len(x)%m != 0 || len(x) == 0 || (w != nil && len(w) != m) {
		panic("fit: lengths of x, y and w do not match")
	}
	n := len(x) / m
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
			a[i*n+j] = root[i] * x[i*n+j]
		}
	}
	scale := make([]float64, n)
	columnScale(a, m, n, scale)
	q := newQR(m, n)
	q.load(a, scale)
	q.factor()

	f := &LinearFit{
		P: make([]float64, n), Residuals: make([]float64, m), Leverage: make([]float64, m),
		Rank: q.rank(),
	}
	f.refine(q, x, y, root, scale)
	for i, r := range f.Residuals {
		f.RSS += root[i] * r * root[i] * r
	}
	q.leverage(f.Leverage, f.Rank)
	f.Cov = make([]float64, n*n)
	f.Condition = q.covariance(scale, f.Cov)
	if !(f.Condition <= maxCondition) {
		f.Cov = nil
	}
	return f
}

// refine solves  [I A; Aᵀ 0][ρ; p] = [b; 0], ρ = root·residual, with A the
// weighted design and b the weighted y, and improves (ρ, p) until the corrections
// no longer shrink. The right-hand sides are formed in double-double arithmetic.
// A column of A in row i is root_i·x_ij; taking it from x and multiplying in
// double-double keeps A exact, so that the rounding of the weighted rows does not
// enter either.
func (f *LinearFit) refine(q *qr, x, y, root, scale []float64) {
	m, n := q.m, q.n
	rho := make([]float64, m)
	c := make([]float64, m)
	g, d, t := make([]float64, n), make([]float64, n), make([]float64, n)
	last := math.Inf(1)
	for range 10 {
		// c = b - ρ - A p and g = -Aᵀρ, divided by the column scale.
		for i := range m {
			var s dd
			s.addProduct(1, y[i])
			for j := range n {
				s.addProduct(-x[i*n+j], f.P[j])
			}
			c[i] = s.times(root[i]).minus(rho[i])
		}
		for j := range n {
			var s dd
			for i := range m {
				s.addTriple(-x[i*n+j], root[i], rho[i])
			}
			g[j] = s.hi / scale[j]
		}
		// With A P = Q R: solve Rᵀh = Pᵀg, then ρ += Q [h; c₂] and p += R⁻¹(c₁ - h).
		q.mulQT(c)
		if f.Rank == n {
			q.solveT(g, d)
		} else {
			clear(d)
		}
		for j := range n {
			t[j] = c[j] - d[j]
			c[j] = d[j]
			if j >= f.Rank {
				// These rows of R are rounding: what they hold stays a residual.
				c[j] = t[j]
			}
		}
		q.solve(t, g, f.Rank)
		q.mulQ(c)
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
			f.P[j] += g[j] / scale[j]
		}
		for i := range m {
			rho[i] += c[i]
		}
		if size == 0 {
			break
		}
	}
	for i := range m {
		var s dd
		s.addProduct(1, y[i])
		for j := range n {
			s.addProduct(-x[i*n+j], f.P[j])
		}
		f.Residuals[i] = s.hi
	}
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

func (s dd) times(c float64) dd { return s.product(c) }

// minus returns s - b rounded to float64.
func (s dd) minus(b float64) float64 {
	s.add(-b, 0)
	return s.hi
}
