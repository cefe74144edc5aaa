package fit

import (
	"math"
	"sync"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"
)

// studentKey is what a quantile of Student's t depends on.
type studentKey struct {
	p  float64
	nu int
}

// studentQuantiles remembers quantiles: the same few are asked for in every data set.
var studentQuantiles sync.Map

// StudentQuantile is the p quantile of Student's t with nu >= 1 degrees of freedom: an
// inverted beta integral gives ten digits, and Newton's method on the tail
// I_x(ν/2, ½)/2, x = ν/(ν + t²), all that the integral has, 14 of them for ν up to 30
// and 12 for 1000.
func StudentQuantile(p float64, nu int) float64 {
	key := studentKey{p, nu}
	if q, ok := studentQuantiles.Load(key); ok {
		return q.(float64)
	}
	v := float64(nu)
	d := distuv.StudentsT{Sigma: 1, Nu: v}
	q := d.Quantile(p)
	tail, sign := 1-p, 1.0
	if p < 0.5 {
		tail, sign = p, -1
	}
	for range 3 {
		if t := math.Abs(q); t > 0 && !math.IsInf(t, 0) {
			q = sign * (t + (mathext.RegIncBeta(v/2, 0.5, v/(v+t*t))/2-tail)/d.Prob(t))
		}
	}
	studentQuantiles.Store(key, q)
	return q
}
