package fit

import (
	"math"

	"gonum.org/v1/gonum/floats"
)

// maxCondition is the condition number, in the Frobenius norm and with columns
// scaled to unit length, past which a covariance is refused: the inverse of R has
// a relative error of about condition x 1e-16, so that four digits are left here.
const maxCondition = 1e12

// qr holds a Householder factorisation A P = Q R with column pivoting (Businger &
// Golub 1965) of an m x n matrix, m >= n. It is a workspace: factoring again
// allocates nothing.
type qr struct {
	m, n int
	a    []float64 // columns; Householder vectors on and below the diagonal
	r    []float64 // R, n x n, row-major, upper triangle
	perm []int     // column perm[j] of A is column j of A P
	size []float64 // length of each column of A, in its order
	norm []float64 // lengths of what is left of each column, kept up to date
	full []float64 // the same when last computed in full
	inv  []float64 // n x n scratch of covariance
}

func newQR(m, n int) *qr {
	return &qr{
		m: m, n: n,
		a: make([]float64, m*n), r: make([]float64, n*n), perm: make([]int, n),
		size: make([]float64, n), norm: make([]float64, n), full: make([]float64, n), inv: make([]float64, n*n),
	}
}

// load copies the row-major m x n matrix x, with column j divided by scale[j]
// where scale is not nil.
func (q *qr) load(x, scale []float64) {
	for j := range q.n {
		col := q.a[j*q.m : (j+1)*q.m]
		for i := range col {
			col[i] = x[i*q.n+j]
		}
		if scale != nil {
			for i := range col {
				col[i] /= scale[j]
			}
		}
	}
}

// factor factors what load has put in place.
func (q *qr) factor() {
	m, n := q.m, q.n
	for j := range n {
		q.perm[j] = j
		q.size[j] = floats.Norm(q.a[j*m:(j+1)*m], 2)
		q.norm[j], q.full[j] = q.size[j], q.size[j]
	}
	for j := range n {
		best := j
		for k := j + 1; k < n; k++ {
			if q.norm[k] > q.norm[best] {
				best = k
			}
		}
		if best != j {
			q.swap(j, best)
		}
		v := q.a[j*m+j : (j+1)*m]
		length := floats.Norm(v, 2)
		if length == 0 {
			for k := j; k < n; k++ {
				q.r[j*n+k] = 0
				if k > j {
					q.r[j*n+k] = q.a[k*m+j]
				}
			}
			continue
		}
		if v[0] < 0 {
			length = -length
		}
		for i := range v {
			v[i] /= length
		}
		v[0]++
		q.r[j*n+j] = -length
		for k := j + 1; k < n; k++ {
			c := q.a[k*m+j : (k+1)*m]
			mirror(v, c)
			q.r[j*n+k] = c[0]
			if q.norm[k] == 0 {
				continue
			}
			t := c[0] / q.norm[k]
			q.norm[k] *= math.Sqrt(math.Max(0, 1-t*t))
			// The downdated norm has lost its digits: compute it afresh.
			if u := q.norm[k] / q.full[k]; 0.05*u*u <= 1e-16 {
				q.norm[k] = floats.Norm(c[1:], 2)
				q.full[k] = q.norm[k]
			}
		}
	}
}

func (q *qr) swap(j, k int) {
	m := q.m
	cj, ck := q.a[j*m:(j+1)*m], q.a[k*m:(k+1)*m]
	for i := range cj {
		cj[i], ck[i] = ck[i], cj[i]
	}
	for i := range j {
		q.r[i*q.n+j], q.r[i*q.n+k] = q.r[i*q.n+k], q.r[i*q.n+j]
	}
	q.norm[j], q.norm[k] = q.norm[k], q.norm[j]
	q.full[j], q.full[k] = q.full[k], q.full[j]
	q.perm[j], q.perm[k] = q.perm[k], q.perm[j]
}

// mirror applies I - v vᵀ/v[0] to c.
func mirror(v, c []float64) {
	if v[0] == 0 {
		return
	}
	c = c[:len(v)]
	var s float64
	for i, vi := range v {
		s += vi * c[i]
	}
	s /= v[0]
	for i, vi := range v {
		c[i] -= s * vi
	}
}

// mulQT replaces b (length m) by Qᵀ b, mulQ by Q b.
func (q *qr) mulQT(b []float64) {
	for j := range q.n {
		mirror(q.a[j*q.m+j:(j+1)*q.m], b[j:])
	}
}

func (q *qr) mulQ(b []float64) {
	for j := q.n - 1; j >= 0; j-- {
		mirror(q.a[j*q.m+j:(j+1)*q.m], b[j:])
	}
}

// rank is the number of diagonal elements of R that are not lost in the rounding
// of the first; the data determine no more parameters than that.
func (q *qr) rank() int {
	tiny := float64(max(q.m, q.n)) * 0x1p-52 * math.Abs(q.r[0])
	for j := range q.n {
		if !(math.Abs(q.r[j*q.n+j]) > tiny) {
			return j
		}
	}
	return q.n
}

// solve puts into x (length n, original order) the solution of R Pᵀ x = b with the
// first rank rows; the parameters left over are 0. b is overwritten.
func (q *qr) solve(b, x []float64, rank int) {
	n := q.n
	for j := range x {
		x[j] = 0
	}
	for j := rank - 1; j >= 0; j-- {
		b[j] /= q.r[j*n+j]
		for i := range j {
			b[i] -= q.r[i*n+j] * b[j]
		}
		x[q.perm[j]] = b[j]
	}
}

// solveT overwrites b (in the order of A's columns) with R⁻ᵀ Pᵀ b.
func (q *qr) solveT(b, out []float64) {
	n := q.n
	for j := range n {
		s := b[q.perm[j]]
		for i := range j {
			s -= q.r[i*n+j] * out[i]
		}
		out[j] = s / q.r[j*n+j]
	}
}

// covariance puts (AᵀA)⁻¹ for the unscaled A into cov (n x n, row-major, original
// order), from R by triangular solves, and returns the condition number
// ‖R‖·‖R⁻¹‖ in the Frobenius norm. scale holds what load divided the columns by.
// cov may be nil when only the condition is wanted.
func (q *qr) covariance(scale, cov []float64) (condition float64) {
	n := q.n
	var rr, ii float64
	clear(q.inv)
	for j := range n { // column j of R⁻¹
		for i := j; i >= 0; i-- {
			rr += q.r[i*n+j] * q.r[i*n+j]
			s := 0.0
			if i == j {
				s = 1
			}
			for k := i + 1; k <= j; k++ {
				s -= q.r[i*n+k] * q.inv[k*n+j]
			}
			s /= q.r[i*n+i]
			q.inv[i*n+j] = s
			ii += s * s
		}
	}
	if cov != nil {
		for i := range n {
			for j := i; j < n; j++ {
				s := 0.0
				for k := j; k < n; k++ {
					s += q.inv[i*n+k] * q.inv[j*n+k]
				}
				a, b := q.perm[i], q.perm[j]
				s /= scale[a] * scale[b]
				cov[a*n+b], cov[b*n+a] = s, s
			}
		}
	}
	condition = math.Sqrt(rr) * math.Sqrt(ii)
	if math.IsNaN(condition) {
		return math.Inf(1)
	}
	return condition
}

// leverage puts the squared row lengths of the thin Q, the diagonal of the hat
// matrix, into h (length m). Only the first rank columns count.
func (q *qr) leverage(h []float64, rank int) {
	clear(h)
	e := make([]float64, q.m)
	for j := range rank {
		clear(e)
		e[j] = 1
		q.mulQ(e)
		for i, ei := range e {
			h[i] += ei * ei
		}
	}
}

// columnScale puts the lengths of the columns of the row-major x into scale, 1
// where a column is zero.
func columnScale(x []float64, m, n int, scale []float64) {
	for j := range n {
		// Two passes, so that entries near 1e±200 neither overflow nor vanish.
		var big float64
		for i := range m {
			big = math.Max(big, math.Abs(x[i*n+j]))
		}
		scale[j] = 1
		if !(big > 0) || math.IsInf(big, 0) {
			continue
		}
		var s float64
		for i := range m {
			v := x[i*n+j] / big
			s += v * v
		}
		scale[j] = big * math.Sqrt(s)
	}
}
