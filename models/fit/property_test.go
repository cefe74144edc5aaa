package fit

import (
	"math"
	"testing"

	"onebarrier/models"

	"pgregory.net/rapid"
)

// Exact data give back the parameters they were made with, for every curve. The
// tolerances are the rounding of ln k, 4e-15, times the condition of the problem.
func TestExactDataGiveExactParameters(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		n := rapid.IntRange(6, 20).Draw(rt, "points")
		low := rapid.Float64Range(200, 500).Draw(rt, "lowest T")
		high := low + rapid.Float64Range(60, 400).Draw(rt, "range")
		temps, v := make([]float64, n), make([]float64, n)
		for i := range temps {
			temps[i] = low + (high-low)*float64(i)/float64(n-1)
			v[i] = rapid.Float64Range(0.5, 2).Draw(rt, "variance")
		}
		tRef := 1 / ((1/low + 1/high) / 2)
		for _, c := range models.All() {
			e := 1000 * rapid.Float64Range(20, 200).Draw(rt, "E")
			p := []float64{rapid.Float64Range(-10, 5).Draw(rt, "ln k"), e}
			tolerance := 1e-9
			switch c := c.(type) {
			case models.Shaped:
				// Two paths or steps that cross near the middle, with barriers apart by 10
				// to 40 over the range of 1/RT, so that both are seen.
				x := (high - low) / (models.GasConstant * high * low)
				d := math.Min(rapid.Float64Range(10, 40).Draw(rt, "d")/x, 0.6*maxBarrier)
				p = append(p, p[0]+rapid.Float64Range(-1, 1).Draw(rt, "ln ratio"), e+d)
				tolerance = 1e-6
			case models.Basis:
				for len(p) < len(c.Info().Params) {
					p = append(p, rapid.Float64Range(-30, 30).Draw(rt, "exponent, drift"))
				}
				if len(p) > 3 {
					tolerance = 1e-7
				}
			case models.Seeded:
				least, straight, most := c.Bounds(tRef, low, high)
				q := least + (most-least)*rapid.Float64Range(0.1, 0.9).Draw(rt, "place between the bounds")
				if math.Abs(q-straight) < 0.1*(most-least) {
					q = straight + 0.1*(most-least)
				}
				p = append(p, q)
				tolerance = 1e-6
			}
			k := make([]float64, n)
			c.LnK(tRef, temps, p, k, nil)
			for i := range k {
				k[i] = math.Exp(k[i])
			}
			s, err := NewSample(Relative, temps, k, v)
			if err != nil {
				rt.Fatal(err)
			}
			s.TRef = tRef
			r := Fit(s, c)
			if r.Status != Converged {
				rt.Errorf("%s %v: %v: %s", c.Info().Name, p, r.Status, r.Reason)
				continue
			}
			for j, q := range c.Info().Params {
				if !(math.Abs(r.P[j]-p[j]) <= tolerance*math.Max(1, math.Abs(p[j]))) {
					rt.Errorf("%s %v: %s is %.12g", c.Info().Name, p, q.Symbol, r.P[j])
				}
			}
		}
	})
}
