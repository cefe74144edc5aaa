package fit

import (
	"math"
	"sync"
)

// The softplus ln(1 + e^t) = max(t, 0) + L(|t|), L(a) = ln(1 + e^-a), is read from
// Taylor polynomials of degree 6 about the nodes a = i/32. Their remainder, below
// (1/64)^7/7! times the largest seventh derivative (17/16), is 5e-17, less than the
// rounding of the value. Past 37 L is below 1e-16 and is taken as 0. One
// evaluation costs a tenth of exp and log1p, and all points of one data set touch
// a few dozen cache lines, one per node.
const (
	softplusPerUnit = 32
	softplusEnd     = 37
)

// softplusNode holds the coefficients of L in its first eight places and those of
// -dL/da in the rest.
type softplusNode [16]float64

type softplusTable [softplusEnd*softplusPerUnit + 1]softplusNode

// softplusNodes builds the table once. With p = 1/(1+e^a), L' = -p and
// dp/da = -p(1-p), so that every derivative is a polynomial in p.
var softplusNodes = sync.OnceValue(func() *softplusTable {
	const degree = 6
	deriv := [degree + 1][degree + 2]float64{1: {1: -1}}
	for n := 1; n < degree; n++ {
		for j, c := range deriv[n] {
			if c != 0 { // d(p^j)/da = -j p^j + j p^(j+1)
				deriv[n+1][j] -= float64(j) * c
				deriv[n+1][j+1] += float64(j) * c
			}
		}
	}
	t := new(softplusTable)
	for i := range t {
		e := math.Exp(-float64(i) / softplusPerUnit)
		p := e / (1 + e)
		t[i][0] = math.Log1p(e)
		factorial := 1.0
		for n := 1; n <= degree; n++ {
			factorial *= float64(n)
			var v float64
			for j := degree + 1; j > 0; j-- {
				v = (v + deriv[n][j]) * p
			}
			t[i][n] = v / factorial
			t[i][7+n] = -float64(n) * t[i][n]
		}
	}
	return t
})

// shape fills value with w·s(c + d u), s = ln(1 + e^t), and slope with ds/dt for all
// points.
func (tab *softplusTable) shape(c, d float64, rows []basisRow, value, slope []float64) {
	value, slope = value[:len(rows)], slope[:len(rows)]
	for i := range rows {
		r := &rows[i]
		t := c + d*r.u
		a := math.Abs(t)
		var v, s float64
		if a < softplusEnd {
			j := int(a*softplusPerUnit + 0.5)
			h := a - float64(j)*(1.0/softplusPerUnit)
			q := &tab[j]
			h2 := h * h
			v = (q[0] + h*q[1]) + h2*((q[2]+h*q[3])+h2*((q[4]+h*q[5])+h2*q[6]))
			s = (q[8] + h*q[9]) + h2*((q[10]+h*q[11])+h2*(q[12]+h*q[13]))
		}
		if t > 0 {
			v += t
			s = 1 - s
		}
		value[i], slope[i] = v*r.w, s
	}
}
