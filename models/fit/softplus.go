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

type softplusNode [8]float64

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
		}
	}
	return t
})

// at returns ln(1 + e^t) and its slope 1/(1 + e^-t).
func (tab *softplusTable) at(t float64) (value, slope float64) {
	a := math.Abs(t)
	if !(a < softplusEnd) {
		if t > 0 {
			return t, 1
		}
		return 0, 0
	}
	i := int(a*softplusPerUnit + 0.5)
	h := a - float64(i)/softplusPerUnit
	c := &tab[i]
	value = c[0] + h*(c[1]+h*(c[2]+h*(c[3]+h*(c[4]+h*(c[5]+h*c[6])))))
	slope = -(c[1] + h*(2*c[2]+h*(3*c[3]+h*(4*c[4]+h*(5*c[5]+h*6*c[6])))))
	if t > 0 {
		return t + value, 1 - slope
	}
	return value, slope
}
