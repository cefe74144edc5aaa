package diagnostics

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"onebarrier/models/dataset"
)

// BenchmarkFindings is what all findings beyond the verdict cost beside a bootstrap of
// 999 resamples: data sets of ten points, each of a design of its own, straight or of
// two paths, on one core. "of-bootstrap" is the ratio of the two, "µs" each one's time.
func BenchmarkFindings(b *testing.B) {
	for _, kind := range []string{"straight", "two paths"} {
		b.Run(kind, func(b *testing.B) {
			rng := rand.New(rand.NewPCG(4, 4))
			opt := DefaultOptions()
			opt.Resamples, opt.Workers, opt.SequentialNull = 999, 1, true
			var findings, bootstrap time.Duration
			for range b.N {
				set := &dataset.Set{Name: "bench", Files: []string{"bench"}, Quantity: dataset.Quantity{Symbol: "k", Unit: "s^-1", Known: true}}
				for j := range 10 {
					t := 280 + 6.5*float64(j) + rng.Float64()
					k := 1e-3 * math.Exp(-60e3/8.314*(1/t-1/310.))
					if kind == "two paths" {
						k += 1e-3 * math.Exp(-140e3/8.314*(1/t-1/310.))
					}
					set.Points = append(set.Points, dataset.Point{File: "bench", Row: j + 2, T: t, K: k * math.Exp(0.03*rng.NormFloat64()), Used: true, Order: math.NaN()})
				}
				a, err := newAssessor(set, opt)
				if err != nil {
					b.Fatal(err)
				}
				if err := a.fit(); err != nil {
					b.Fatal(err)
				}
				a.rank()
				a.test()
				a.decide()
				start := time.Now()
				a.beyondTheVerdict()
				between := time.Now()
				if err := a.resample(context.Background()); err != nil {
					b.Fatal(err)
				}
				findings, bootstrap = findings+between.Sub(start), bootstrap+time.Since(between)
			}
			n := float64(b.N)
			b.ReportMetric(float64(findings)/float64(bootstrap), "of-bootstrap")
			b.ReportMetric(float64(findings.Microseconds())/n, "µs-findings")
			b.ReportMetric(float64(bootstrap.Microseconds())/n, "µs-bootstrap")
		})
	}
}
