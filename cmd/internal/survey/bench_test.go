package survey

import (
	"bytes"
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"onebarrier/diagnostics"
)

// longArchive invents a long table: sets reactions at ten temperatures each, every third
// with a second path, 3 % noise.
func longArchive(sets int) []byte {
	const n = 10
	rng := rand.New(rand.NewPCG(1, 2))
	var b bytes.Buffer
	b.WriteString("dataset,T/K,k/s^-1\n")
	for i := range sets {
		e, lnA := 50e3+40e3*rng.Float64(), 20+5*rng.Float64()
		for j := range n {
			t := 280 + 60*float64(j)/(n-1)
			const r = 8.314462618
			k := math.Exp(lnA - e/(r*t))
			if i%3 == 0 {
				k += math.Exp(lnA + 30e3/(r*310) - (e+30e3)/(r*t))
			}
			fmt.Fprintf(&b, "reaction %d,%.2f,%.5g\n", i, t, k*math.Exp(0.03*rng.NormFloat64()))
		}
	}
	return b.Bytes()
}

func surveyOptions(paths ...string) Options {
	o := Options{Paths: paths, Assess: diagnostics.DefaultOptions()}
	o.Assess.Resamples = 999
	return o
}

func benchmarkSurvey(b *testing.B, workers int) {
	const sets = 400
	dir := b.TempDir()
	table := filepath.Join(dir, "long.csv")
	if err := os.WriteFile(table, longArchive(sets), 0o666); err != nil {
		b.Fatal(err)
	}
	o := surveyOptions(table)
	o.Workers = workers
	n := 0
	for b.Loop() {
		n++
		s, err := Create(filepath.Join(dir, fmt.Sprint(n, ".sqlite")), testSettings)
		if err != nil {
			b.Fatal(err)
		}
		sum, err := Run(context.Background(), s, o)
		if err != nil || sum.Stored != sets || sum.Failed != 0 {
			b.Fatal(sum, err)
		}
		s.Close()
	}
	b.ReportMetric(sets*float64(b.N)/b.Elapsed().Seconds(), "sets/s")
}

// The whole of a survey at 10 temperatures and 999 resamples, store included.
func BenchmarkSurvey(b *testing.B)           { benchmarkSurvey(b, 1) }
func BenchmarkSurveyTwoWorkers(b *testing.B) { benchmarkSurvey(b, 2) }
