package calibration

import (
	"math"
	"testing"

	"onebarrier/diagnostics"
)

// What has no repeat share is absent from the mean, not 0 in it: a curve that is not
// ranked, shares withheld since too many resamples failed, a set without a bootstrap.
func TestAbsentShares(t *testing.T) {
	unknown := diagnostics.Real(math.NaN())
	given := &diagnostics.Assessment{
		Bootstrap: &diagnostics.Resampling{RepeatShare: map[diagnostics.State]diagnostics.Real{
			diagnostics.BeyondPrefactor: 0.25, diagnostics.CurvedOpen: 0.125, diagnostics.Unresolved: 0.625}},
		Ranking: []diagnostics.Ranked{{Curve: "power-prefactor", RepeatShare: 0.5}, {Curve: "parallel", RepeatShare: unknown}},
	}
	withheld := &diagnostics.Assessment{
		Bootstrap: &diagnostics.Resampling{RepeatShare: map[diagnostics.State]diagnostics.Real{}},
		Ranking:   []diagnostics.Ranked{{Curve: "power-prefactor", RepeatShare: unknown}, {Curve: "parallel", RepeatShare: unknown}},
	}
	shares := []Shares{sharesOf(given), sharesOf(withheld)}
	for _, c := range []struct {
		name  string
		of    func(Shares) float64
		value float64
		sets  int
	}{
		{"curved", func(s Shares) float64 { return s.Curved }, 0.375, 1},
		{"power", func(s Shares) float64 { return s.Power }, 0.5, 1},
		{"parallel", func(s Shares) float64 { return s.Parallel }, math.NaN(), 0},
	} {
		got := mean(shares, c.of)
		if got.Trials != c.sets || got.Value != c.value && !(math.IsNaN(got.Value) && math.IsNaN(c.value)) {
			t.Errorf("%s: %g of %d sets, want %g of %d", c.name, got.Value, got.Trials, c.value, c.sets)
		}
	}
	// s.d. of 0.25 and 0.75 is 0.3536, its standard error 0.25; by hand.
	if f := mean([]Shares{{Curved: 0.25}, {Curved: 0.75}, {Curved: math.NaN()}}, func(s Shares) float64 { return s.Curved }); f.Value != 0.5 || math.Abs(f.SE-0.25) > 1e-15 || f.Trials != 2 {
		t.Errorf("mean of two sets: %+v", f)
	}
	// Three temperatures: no verdict, and no bootstrap.
	n := run(t, Cell{N: 3, Range: Narrow, Shares: true}, 4)
	for _, s := range n.Shares {
		if !math.IsNaN(s.Curved) || !math.IsNaN(s.Power) || !math.IsNaN(s.Parallel) {
			t.Errorf("without a bootstrap the shares are %+v", s)
		}
	}
}
