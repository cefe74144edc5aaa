package diagnostics

import (
	"math"
	"strings"
	"testing"

	"onebarrier/bootstrap"
	"onebarrier/models"
	"onebarrier/models/fit"
)

// Shares and intervals of what is left hold only while few resamples have failed: those that fail are
// no random choice. The cure names no scheme that is in use already.
func TestResamplesFailed(t *testing.T) {
	for _, c := range []struct {
		failed        int
		scheme        bootstrap.Scheme
		found, shares bool
	}{
		{0, bootstrap.Residual, false, true},
		{10, bootstrap.Residual, false, true},
		{11, bootstrap.Residual, true, true},
		{50, bootstrap.Parametric, true, true},
		{51, bootstrap.Parametric, true, false},
		{570, bootstrap.Pairs, true, false},
		{1000, bootstrap.Parametric, true, false},
	} {
		a := &assessor{ranking: []Ranked{
			{Curve: "straight", Family: "straight", Status: StatusRanked, RepeatShare: Real(math.NaN())},
		}}
		good := 1000 - c.failed
		out := &bootstrap.Output{Scheme: c.scheme, Resamples: 1000, Failed: c.failed,
			States: make([]int, len(States)), FirstFamily: map[string]int{"straight": good}}
		out.States[0] = good
		a.fits = []*fit.Result{{Curve: models.Straight()}}
		out.Targets = []bootstrap.TargetResult{{Target: bootstrap.Target{Name: "E", Keep: true}, Values: make([]float64, 1000),
			Intervals: []bootstrap.Interval{{Method: bootstrap.BootstrapT, Lower: 1, Upper: 2}}}}
		a.take(out)
		share, shown := a.resampling.RepeatShare[States[0]]
		if shown != c.shares || a.ranking[0].RepeatShare.Known() != c.shares || shown && share != 1 {
			t.Errorf("%d of 1000 failed: shares %v, of the family %v; want shares: %t", c.failed, a.resampling.RepeatShare, a.ranking[0].RepeatShare, c.shares)
		}
		if a.resampling.RepeatShare == nil {
			t.Errorf("%d of 1000 failed: the shares are null in the document", c.failed)
		}
		iv := a.resampling.Intervals[0]
		if given := iv.Lower == 1 && iv.Upper == 2; given != c.shares || !c.shares && (iv.Lower.Known() || iv.Upper.Known() || !strings.HasPrefix(iv.Note, "withheld: ")) || (a.changes != nil) != c.shares {
			t.Errorf("%d of 1000 failed: interval %+v, %d changes of E kept", c.failed, iv, len(a.changes))
		}
		if found := len(a.findings) == 1; found != c.found {
			t.Errorf("%d of 1000 failed: findings %v", c.failed, a.findings)
		} else if found {
			f := a.findings[0]
			if names := strings.Contains(f.Cure, "--scheme parametric"); f.Code != "resamples-failed" || f.Cure == "" || names == (c.scheme == bootstrap.Parametric) {
				t.Errorf("scheme %s: cure %q", c.scheme, f.Cure)
			}
			if says := strings.Contains(f.Message, "neither repeat shares nor bootstrap intervals"); says == c.shares {
				t.Errorf("%d of 1000 failed: %q", c.failed, f.Message)
			}
		}
	}
}
