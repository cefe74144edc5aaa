package diagnostics

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"onebarrier/models"
	"onebarrier/models/fit"
)

// sampleOf makes a sample of ln k values under an error model with equal or given
// variances.
func sampleOf(t testing.TB, model fit.ErrorModel, temps, lnK, v []float64) *fit.Sample {
	t.Helper()
	k := make([]float64, len(lnK))
	for i := range k {
		k[i] = math.Exp(lnK[i])
	}
	if v == nil {
		v = make([]float64, len(lnK))
		for i := range v {
			v[i] = 1
		}
	}
	s, err := fit.NewSample(model, temps, k, v)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// span returns n temperatures at equal steps.
func span(low, high float64, n int) []float64 {
	out := make([]float64, n)
	for i := range out {
		out[i] = low + (high-low)*float64(i)/float64(n-1)
	}
	return out
}

// lineNoise fills y with one barrier of 60 kJ/mol and noise of the given sd times
// sqrt(v).
func lineNoise(rng *rand.Rand, s *fit.Sample, sd float64, y []float64) {
	for i, t := range s.T {
		y[i] = 20 - 60e3/(models.GasConstant*t) + sd*math.Sqrt(s.V[i])*rng.NormFloat64()
	}
}

// Under one barrier the test at 5 % must reject in 5 % of data sets, for any N,
// spacing and weights: that is its definition. Two independent checks of one
// claim: Found on fresh data drawn outside the test's own stream.
func TestSecondBarrierIsExact(t *testing.T) {
	weights := []float64{1, 0.2, 3, 1, 0.5, 2, 1, 0.1, 4, 1}
	for _, c := range []struct {
		name  string
		temps []float64
		v     []float64
	}{
		{"N=4", span(280, 340, 4), nil},
		{"N=5", span(250, 1000, 5), nil},
		{"N=8", span(280, 340, 8), nil},
		{"N=10 weighted", span(250, 1000, 10), weights},
		{"N=20", span(250, 1000, 20), nil},
	} {
		t.Run(c.name, func(t *testing.T) {
			s := sampleOf(t, fit.Relative, c.temps, make([]float64, len(c.temps)), c.v)
			b := NewSecondBarrierTest(s, nil, nil)
			rng := rand.New(rand.NewPCG(7, uint64(len(c.temps))))
			y, scratch := make([]float64, s.Len()), make([]float64, b.ScratchLen())
			const sets = 40000
			rejected := 0
			for range sets {
				lineNoise(rng, s, 0.03, y)
				if b.Found(y, scratch) {
					rejected++
				}
			}
			// Binomial error and that of the 19,999 draws of the null.
			rate := float64(rejected) / sets
			se := math.Sqrt(0.05 * 0.95 * (1./sets + 1./secondBarrierDraws))
			if !(math.Abs(rate-0.05) <= 4*se) {
				t.Errorf("rejects %.4f of straight sets, want 0.05 ± %.4f", rate, 4*se)
			}
		})
	}
}
func BenchmarkSecondBarrierDraw(b *testing.B) {
	for _, n := range []int{8, 20, 200} {
		b.Run(fmt.Sprintf("N=%d", n), func(b *testing.B) {
			s := sampleOf(b, fit.Relative, span(280, 340, n), make([]float64, n), nil)
			for b.Loop() {
				x := NewSecondBarrierTest(s, nil, nil)
				x.drawn.Do(x.draw)
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/secondBarrierDraws, "ns/draw")
			x := NewSecondBarrierTest(s, nil, nil)
			b.ReportMetric(float64(x.shapes), "shapes")
			b.ReportMetric(float64(len(x.span)), "span")
		})
	}
}
func BenchmarkSecondBarrierFound(b *testing.B) {
	n := 20
	s := sampleOf(b, fit.Relative, span(280, 340, n), make([]float64, n), nil)
	x := NewSecondBarrierTest(s, nil, nil)
	y, scratch := make([]float64, s.Len()), make([]float64, x.ScratchLen())
	lineNoise(rand.New(rand.NewPCG(1, 1)), s, 0.03, y)
	x.Found(y, scratch)
	b.ReportAllocs()
	for b.Loop() {
		x.Found(y, scratch)
	}
}
