package survey

import (
	"bytes"
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"runtime"
	"sync"
	"testing"
	"time"

	"onebarrier/diagnostics"
	"onebarrier/models/dataset"
)

// longArchive invents a long table: sets reactions at ten temperatures each, every third
// with a second path, 3 % noise.
func longArchive(sets int) []byte { return gridArchive(sets, false) }

// gridArchive is longArchive, with own at temperatures of each reaction's own.
func gridArchive(sets int, own bool) []byte {
	const n = 10
	rng := rand.New(rand.NewPCG(1, 2))
	var b bytes.Buffer
	b.WriteString("dataset,T/K,k/s^-1\n")
	for i := range sets {
		e, lnA := 50e3+40e3*rng.Float64(), 20+5*rng.Float64()
		low := 280.
		if own {
			low += 10 * rng.Float64()
		}
		for j := range n {
			t := low + 60*float64(j)/(n-1)
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

func benchmarkSurvey(b *testing.B, workers int, own bool) {
	const sets = 400
	dir := b.TempDir()
	table := filepath.Join(dir, "long.csv")
	if err := os.WriteFile(table, gridArchive(sets, own), 0o666); err != nil {
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

// The whole of a survey at 10 temperatures and 999 resamples, store included. What depends
// on temperatures alone is kept where they are those of other data sets, as in archives.
func BenchmarkSurvey(b *testing.B)           { benchmarkSurvey(b, 1, false) }
func BenchmarkSurveyTwoWorkers(b *testing.B) { benchmarkSurvey(b, 2, false) }
func BenchmarkSurveyOwnGrids(b *testing.B)   { benchmarkSurvey(b, 1, true) }

// judgeOnce assesses the first data set alone, and gives what it found for all: for
// what a survey costs beside the assessments.
func judgeOnce() func(context.Context, *dataset.Set, diagnostics.Options) (*diagnostics.Assessment, error) {
	var once sync.Once
	var a *diagnostics.Assessment
	var err error
	return func(ctx context.Context, s *dataset.Set, o diagnostics.Options) (*diagnostics.Assessment, error) {
		once.Do(func() { a, err = diagnostics.Assess(ctx, s, o) })
		return a, err
	}
}

// Going on with a survey of 100,000 data sets, 1,000,000 rows, that is done.
func BenchmarkResume(b *testing.B) {
	const sets = 100_000
	dir := b.TempDir()
	table := filepath.Join(dir, "long.csv")
	if err := os.WriteFile(table, longArchive(sets), 0o666); err != nil {
		b.Fatal(err)
	}
	o := surveyOptions(table)
	o.judge = judgeOnce()
	path := filepath.Join(dir, "s.sqlite")
	run := func(known int) {
		s, err := Create(path, testSettings)
		if err != nil {
			b.Fatal(err)
		}
		defer s.Close()
		if sum, err := Run(context.Background(), s, o); err != nil || sum.Known != known || sum.Sets != sets {
			b.Fatal(sum, err)
		}
	}
	begun := time.Now()
	run(0)
	b.ReportMetric(sets/time.Since(begun).Seconds(), "stored/s")
	b.ResetTimer()
	n := 0
	for b.Loop() {
		n++
		run(sets)
	}
	b.ReportMetric(b.Elapsed().Seconds()/float64(n), "s")
}

// What a survey holds in memory does not grow with its number of data sets.
func TestMemory(t *testing.T) {
	if testing.Short() {
		t.Skip("writes 50,000 data sets")
	}
	use := func(sets int) float64 {
		dir := t.TempDir()
		writeFiles(t, dir, map[string]string{"long.csv": string(longArchive(sets))})
		o := surveyOptions(filepath.Join(dir, "long.csv"))
		o.judge = judgeOnce()
		var most uint64
		o.Progress = func(Progress) {
			var m runtime.MemStats
			runtime.ReadMemStats(&m)
			most = max(most, m.HeapInuse+m.StackInuse)
		}
		runtime.GC()
		runIn(t, filepath.Join(dir, "s.sqlite"), o)
		return float64(most)
	}
	few := use(1000)
	if many := use(50_000); many > few+24<<20 {
		t.Errorf("%.0f MB for 50,000 data sets, %.0f MB for 1,000", many/(1<<20), few/(1<<20))
	}
}
