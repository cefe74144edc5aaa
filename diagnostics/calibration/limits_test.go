package calibration

import (
	"context"
	"testing"

	"onebarrier/diagnostics"
)

// With limits beside three laboratories the error rates are approximate: the false
// alarms of the exponent stay near 5 %, and its interval and that of E hold the truth.
func TestLimitsBesideLaboratories(t *testing.T) {
	for _, c := range []struct {
		name string
		cell Cell
	}{
		{"overlapping", Cell{Range: Narrow, N: 6, Laboratories: Overlap, Offsets: 1, Limits: AsLimits, Lean: true}},
		{"apart", Cell{Range: Wide, N: 6, Laboratories: Apart, Offsets: 1, Limits: AsLimits, Lean: true}},
	} {
		n := run(t, c.cell, 500)
		for e, w := range map[Event][2]float64{Curved: {.03, .07}, CoverN: {.93, .97}, CoverE: {.93, .97}} {
			f := n.Rate(e)
			if f.Trials < n.Sets/2 {
				t.Errorf("%s: %s was tried in %d of %d sets", c.name, e, f.Trials, n.Sets)
			}
			if s := off(f, w[0], w[1]); s != "" {
				t.Errorf("%s: %s: %s", c.name, e, s)
			}
			t.Logf("%s: %s: %.3g of %d", c.name, e, f.Value, f.Trials)
		}
	}
}

// Where there are no offsets, the likelihood-ratio test of them finds some in about 5 %.
func TestOffsetTestWithLimits(t *testing.T) {
	c := Cell{Range: Narrow, N: 6, Laboratories: Overlap, Limits: AsLimits, Lean: true}
	sets := 240
	if testing.Short() {
		sets /= 4
	}
	hits, trials := 0, 0
	for i := range sets {
		a, err := diagnostics.Assess(context.Background(), c.draw(c.stream(3, i)), c.options(&diagnostics.DesignCache{}))
		if err != nil {
			t.Fatal(err)
		}
		b := a.BetweenSources
		if a.Dataset.Limits == 0 || b == nil || !b.FTest.PValue.Known() {
			continue
		}
		trials++
		if b.FTest.PValue < 0.05 {
			hits++
		}
	}
	f := rate(hits, trials)
	if trials < sets*9/10 {
		t.Errorf("tested in %d of %d sets", trials, sets)
	}
	if s := off(f, .03, .07); s != "" {
		t.Errorf("false alarms of the offsets: %s", s)
	}
	t.Logf("false alarms of the offsets: %d of %d", hits, trials)
}
