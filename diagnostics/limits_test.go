package diagnostics

import (
	"context"
	"errors"
	"math"
	"runtime"
	"strings"
	"testing"
	"unsafe"

	"onebarrier/bootstrap"
	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

// What takes long gets fewer resamples, or none, and a finding says so; what was asked
// for is kept. The costs are those of resampleCost, the budget 3 s of one core.
func TestDearResamplesAreFewer(t *testing.T) {
	for _, c := range []struct {
		n, limits   int
		model       fit.ErrorModel
		scheme      bootstrap.Scheme
		asked, want int
		keep, found bool
	}{
		{n: 241, asked: 9999, want: 9999}, // 0.30 ms
		{n: 300, asked: 9999, want: 4999, found: true},
		{n: 300, asked: 999, want: 999},
		{n: 300, asked: 9999, want: 9999, keep: true},
		{n: 1001, asked: 9999, want: 1999, found: true}, // 1.2 ms
		{n: 1001, asked: 199, want: 199},
		{n: PartlyResampled, asked: 9999, want: 199, found: true}, // 12 ms
		{n: PartlyResampled + 1, asked: 9999, want: 0, found: true},
		{n: PartlyResampled + 1, asked: 0, want: 0},
		{n: 12, model: fit.Absolute, asked: 9999, want: 9999},               // 0.05 ms
		{n: 300, model: fit.Absolute, asked: 9999, want: 1999, found: true}, // 0.7 ms
		{n: 300, model: fit.Absolute, scheme: bootstrap.Pairs, asked: 9999, want: 999, found: true},
		{n: 8, limits: 4, asked: 9999, want: 4999, found: true},                       // 0.6 ms
		{n: 8, limits: 4, model: fit.Absolute, asked: 9999, want: 399, found: true},   // 4.1 ms
		{n: 9, limits: 30, asked: 9999, want: 1999, found: true},                      // 1.3 ms
		{n: 170, limits: 30, model: fit.Absolute, asked: 9999, want: 99, found: true}, // 28 ms
		{n: 970, limits: 30, model: fit.Absolute, asked: 9999, want: 0, found: true},
	} {
		if c.model == "" {
			c.model = fit.Relative
		}
		o := DefaultOptions()
		o.Resamples, o.KeepResamples, o.Scheme = c.asked, c.keep, string(c.scheme)
		set := lineSet(c.n+c.limits, 280, 340, 60000, 0.03, 1)
		for i := range c.limits {
			set.Points[i].Limit, set.Points[i].Used = "<", false
		}
		a, err := newAssessor(set, o)
		if err != nil {
			t.Fatal(err)
		}
		if a.data, err = prepare(a.set, c.model, ReplicatesMeans); err != nil {
			t.Fatal(err)
		}
		a.limitResamples()
		found := len(a.findings) == 1 && a.findings[0].Code == "fewer-resamples"
		if a.opt.Resamples != c.want || found != c.found {
			t.Errorf("%+v: %d resamples, found %v", c, a.opt.Resamples, found)
		}
	}
}

// Curves that are searched over a bounded shape make resamples dearer.
func TestSeededCurvesCostResamples(t *testing.T) {
	o := DefaultOptions()
	o.Models = append(models.Default(), models.Vogel{})
	o.ErrorModel = fit.Absolute
	o.Resamples = 9999
	a := mustAssess(t, lineSet(40, 280, 340, 60000, 0.03, 1), o)
	if !a.finding("fewer-resamples") || a.Settings.Resamples != 4999 { // 0.51 ms
		t.Errorf("%d resamples", a.Settings.Resamples)
	}
}

// The whole road: the resamples in the document are those that were drawn.
func TestReducedResamplesAreRecorded(t *testing.T) {
	o := DefaultOptions()
	o.Models = []models.Curve{models.Straight(), models.PowerPrefactor{}}
	a := mustAssess(t, lineSet(PartlyResampled+1, 280, 340, 60000, 0.03, 1), o)
	if a.Bootstrap != nil || a.Settings.Resamples != 0 || !a.finding("fewer-resamples") {
		t.Errorf("bootstrap %v, %d resamples", a.Bootstrap, a.Settings.Resamples)
	}
}

// As many temperatures as the limit says are taken, and one more is refused; repeats
// count only where the verdict uses them as points.
func TestMostTemperatures(t *testing.T) {
	for _, c := range []struct {
		temperatures, repeats int
		replicates            string
		refused               bool
	}{
		{MostTemperatures, 1, ReplicatesMeans, false},
		{MostTemperatures + 1, 1, ReplicatesMeans, true},
		{MostTemperatures / 2, 3, ReplicatesMeans, false},
		{MostTemperatures / 2, 2, ReplicatesIndependent, false},
		{MostTemperatures / 2, 3, ReplicatesIndependent, true},
	} {
		s := lineSet(c.temperatures, 280, 340, 60000, 0.03, 1)
		once := s.Points
		for range c.repeats - 1 {
			s.Points = append(s.Points, once...)
		}
		a, err := newAssessor(s, DefaultOptions())
		if err != nil {
			t.Fatal(err)
		}
		if a.data, err = prepare(s, "relative", c.replicates); err != nil {
			t.Fatal(err)
		}
		err = a.tooMany()
		if _, refused := asProblems(err)["too-many-temperatures"]; refused != c.refused || (err != nil) != c.refused {
			t.Errorf("%+v: %v", c, err)
		}
	}
}

// asProblems gives the problems of an error by their codes.
func asProblems(err error) map[string]dataset.Problem {
	byCode := map[string]dataset.Problem{}
	var ps dataset.Problems
	if errors.As(err, &ps) {
		for _, p := range ps {
			byCode[p.Code] = p
		}
	}
	return byCode
}

// A million rows are answered where they are repeats at few temperatures, and
// refused with a cure where every row has a temperature of its own. Of the rows
// only those of the document stay in memory.
func TestMillionRows(t *testing.T) {
	if testing.Short() {
		t.Skip("a million rows")
	}
	const n = 1_000_000
	// allocated is what a row may cost while it is worked on: the points are picked
	// out twice, each time into a slice that grows (5 points a row each), and samples,
	// residuals and the document take 5 more. A further copy of the rows exceeds it.
	point, datum := int64(unsafe.Sizeof(dataset.Point{})), int64(unsafe.Sizeof(Datum{}))
	allocated := 15 * point
	cost := func(what string, kept int64, work func()) {
		var before, after runtime.MemStats
		runtime.GC()
		runtime.ReadMemStats(&before)
		work()
		runtime.GC()
		runtime.ReadMemStats(&after)
		total, live := int64(after.TotalAlloc-before.TotalAlloc)/n, (int64(after.HeapAlloc)-int64(before.HeapAlloc))/n
		if total > allocated {
			t.Errorf("%s: %d bytes a row allocated, at most %d wanted", what, total, allocated)
		}
		if live > kept {
			t.Errorf("%s: %d bytes a row stay in memory, at most %d wanted", what, live, kept)
		}
	}
	s := lineSet(n, 280, 340, 60000, 0.03, 1)
	cost("refused", 0, func() {
		_, err := Assess(context.Background(), s, DefaultOptions())
		if p := asProblems(err)["too-many-temperatures"]; !strings.Contains(p.Cure, "average") {
			t.Errorf("%v", err)
		}
	})
	for i := range s.Points {
		p := &s.Points[i]
		ti := 280 + 5*float64(i%12)
		p.K *= math.Exp(60000 / models.GasConstant * (1/p.T - 1/ti))
		p.T = ti
	}
	var a *Assessment
	cost("answered", datum, func() { a = mustAssess(t, s, quick()) })
	if a.Dataset.Used != n || a.Dataset.Temperatures != 12 || a.Verdict.State == Untestable {
		t.Errorf("%d rows, %d temperatures: %s", a.Dataset.Used, a.Dataset.Temperatures, a.Verdict.State)
	}
	// u(E) = R·0.03/(sqrt(n)·sd(1/T)) = 1.3 J/mol.
	if e := a.Fits["straight"].P[1]; !(math.Abs(e-60000) <= 4*1.3) {
		t.Errorf("E = %g J/mol", e)
	}
	runtime.KeepAlive(s)
}
