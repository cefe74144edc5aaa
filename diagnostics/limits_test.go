package diagnostics

import (
	"context"
	"errors"
	"math"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/dataset"
)

// Many temperatures get fewer resamples, or none, and a finding says so; what was
// asked for is kept.
func TestManyTemperaturesAreResampledLess(t *testing.T) {
	for _, c := range []struct {
		n, asked, want int
		keep, found    bool
	}{
		{FullyResampled, 9999, 9999, false, false},
		{FullyResampled + 1, 9999, PartResamples, false, true},
		{FullyResampled + 1, 199, 199, false, false},
		{FullyResampled + 1, 9999, 9999, true, false},
		{PartlyResampled + 1, 9999, 0, false, true},
		{PartlyResampled + 1, 0, 0, false, false},
	} {
		o := DefaultOptions()
		o.Resamples, o.KeepResamples = c.asked, c.keep
		a, err := newAssessor(lineSet(c.n, 280, 340, 60000, 0.03, 1), o)
		if err != nil {
			t.Fatal(err)
		}
		if a.data, err = prepare(a.set, "relative", ReplicatesMeans); err != nil {
			t.Fatal(err)
		}
		a.limitResamples()
		found := len(a.findings) == 1 && a.findings[0].Code == "fewer-resamples"
		if a.opt.Resamples != c.want || found != c.found {
			t.Errorf("%+v: %d resamples, found %v", c, a.opt.Resamples, found)
		}
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

// A million rows are answered where they are repeats at few temperatures, and
// refused with a cure where every row has a temperature of its own.
func TestMillionRows(t *testing.T) {
	if testing.Short() {
		t.Skip("a million rows")
	}
	const n = 1_000_000
	s := lineSet(n, 280, 340, 60000, 0.03, 1)
	_, err := Assess(context.Background(), s, DefaultOptions())
	var ps dataset.Problems
	if !errors.As(err, &ps) || ps[0].Code != "too-many-temperatures" || !strings.Contains(ps[0].Cure, "average") {
		t.Errorf("%v", err)
	}
	for i := range s.Points {
		p := &s.Points[i]
		ti := 280 + 5*float64(i%12)
		p.K *= math.Exp(60000 / models.GasConstant * (1/p.T - 1/ti))
		p.T = ti
	}
	a := mustAssess(t, s, quick())
	if a.Dataset.Used != n || a.Dataset.Temperatures != 12 || a.Verdict.State == Untestable {
		t.Errorf("%d rows, %d temperatures: %s", a.Dataset.Used, a.Dataset.Temperatures, a.Verdict.State)
	}
	// u(E) = R·0.03/(sqrt(n)·sd(1/T)) = 1.3 J/mol.
	if e := a.Fits["straight"].P[1]; !(math.Abs(e-60000) <= 4*1.3) {
		t.Errorf("E = %g J/mol", e)
	}
}
