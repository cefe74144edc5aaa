package diagnostics

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

// costCases are the designs on which findings are set beside a bootstrap.
var costCases = []struct {
	name             string
	points           int // of each source, at the same temperatures
	sources, repeats int
	twoPaths, stated bool
	model            fit.ErrorModel
}{
	{name: "straight", points: 10, sources: 1, repeats: 1},
	{name: "two paths", points: 10, sources: 1, repeats: 1, twoPaths: true},
	{name: "stated", points: 10, sources: 1, repeats: 1, stated: true},
	{name: "repeats", points: 8, sources: 1, repeats: 3},
	{name: "80 points", points: 80, sources: 1, repeats: 1},
	{name: "200 points", points: 200, sources: 1, repeats: 1},
	{name: "4 sources of 20", points: 20, sources: 4, repeats: 1},
	{name: "4 sources of 50", points: 50, sources: 4, repeats: 1},
	{name: "errors in k", points: 12, sources: 1, repeats: 1, model: fit.Absolute},
	{name: "errors in k, 100 points", points: 100, sources: 1, repeats: 1, model: fit.Absolute},
	{name: "errors in k, 2 sources of 14", points: 14, sources: 2, repeats: 1, model: fit.Absolute},
}

// BenchmarkFindings is what all findings beyond the verdict cost beside a bootstrap of
// 999 resamples, each data set of a design of its own, on one core. "of-bootstrap" is the
// ratio of the two, "µs" each one's time. TestFitsOfFindings holds the cost without a clock.
func BenchmarkFindings(b *testing.B) {
	for _, c := range costCases {
		b.Run(c.name, func(b *testing.B) {
			rng := rand.New(rand.NewPCG(4, 4))
			opt := DefaultOptions()
			opt.Resamples, opt.Workers, opt.SequentialNull, opt.ErrorModel = 999, 1, true, c.model
			opt.KeepResamples = true
			var findings, bootstrap time.Duration
			for range b.N {
				set := &dataset.Set{Name: "bench", Files: []string{"bench"}, Quantity: dataset.Quantity{Symbol: "k", Unit: "s^-1", Known: true}}
				for j := range c.points {
					t := 280 + 65*float64(j)/float64(c.points) + rng.Float64()*6.5/float64(c.points)
					k := 1e-3 * math.Exp(-60e3/8.314*(1/t-1/310.))
					if c.twoPaths {
						k += 1e-3 * math.Exp(-140e3/8.314*(1/t-1/310.))
					}
					for i := range c.sources * c.repeats {
						p := dataset.Point{File: "bench", Row: len(set.Points) + 2, T: t, K: k * math.Exp(0.03*rng.NormFloat64()), Used: true, Order: math.NaN()}
						if c.sources > 1 {
							p.Source = string(rune('A' + i%c.sources))
						}
						if c.stated {
							p.UK, p.Level = 0.03*p.K, dataset.LevelStandard
						}
						set.Points = append(set.Points, p)
					}
				}
				a := assessorOf(b, set, opt)
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
