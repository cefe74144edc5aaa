package diagnostics

import (
	"fmt"

	"onebarrier/bootstrap"
	"onebarrier/models"
)

// What a data set may cost. An assessment without bootstrap takes about 7 kB and 0.1 ms
// a temperature.
const (
	// FullyResampled is the most temperatures, or points where the verdict uses
	// points, for which findings that need refits of their own are looked for.
	FullyResampled = 1000
	// PartlyResampled is the most that are resampled at all.
	PartlyResampled = 10_000
	// MostTemperatures is the most that are assessed.
	MostTemperatures = 50_000
	// resamplingBudget is what a bootstrap may take unasked, in microseconds of one core
	// as resampleCost estimates them.
	resamplingBudget = 3e6
)

// fewerResamples are the numbers to which resamples are lowered, round as 9999 is:
// order statistics at (B+1)p.
var fewerResamples = []int{4999, 1999, 999, 399, 199, 99}

// resampleCost is about what a resample of n entries costs where the candidates have
// to be searched anew, in microseconds of one core: a formula, so that the number of
// resamples is the same on every machine. Measured in user time of assess with more and
// with fewer resamples, N = 12 to 1000.
func (a *assessor) resampleCost(n int) float64 {
	s := a.data.sample
	each, seeded, fixed := 1.2, 0.4, 10.0
	switch inK, limits := s.Model.InK(), len(s.Limits) > 0; {
	case inK && limits:
		each, seeded, fixed = 130, 16, 2500
	case limits && s.Spent() > 0:
		each, seeded, fixed = 50, 5, 600
	case limits:
		each, seeded, fixed = 25, 5, 300
	case inK && a.pairs():
		each, seeded, fixed = 5, 10, 350
	case inK:
		each, seeded, fixed = 2.3, 10, 20
	}
	for _, f := range a.fits {
		if _, ok := f.Curve.(models.Seeded); ok {
			each += seeded
		}
	}
	return fixed + each*float64(n)
}

func (a *assessor) pairs() bool { return bootstrap.Scheme(a.opt.Scheme) == bootstrap.Pairs }

// limitResamples lowers the number of resamples where they would take long, unless it
// was asked for.
func (a *assessor) limitResamples() {
	n, what := a.data.sample.Len(), a.data.entries()
	if a.pairs() {
		n, what = a.data.single.Len(), "points"
	}
	limits := len(a.data.sample.Limits)
	cost := a.resampleCost(n + limits)
	asked := a.opt.Resamples
	dear := n > PartlyResampled || cost*float64(asked) > resamplingBudget
	if a.opt.KeepResamples || asked == 0 || !dear {
		return
	}
	most := 0
	for _, b := range fewerResamples {
		if cost*float64(b) <= resamplingBudget {
			most = b
			break
		}
	}
	// The fewest there can be may take twice as long.
	if least := fewerResamples[len(fewerResamples)-1]; most == 0 && cost*float64(least) <= 2*resamplingBudget {
		most = least
	}
	says := fmt.Sprintf("only %d resamples", most)
	if n > PartlyResampled || most == 0 {
		most, says = 0, "no bootstrap"
	}
	if asked <= most {
		return
	}
	a.opt.Resamples = most
	because := fmt.Sprintf("%d %s", n, what)
	if limits > 0 {
		because += ", " + count(limits, "limit")
	}
	if a.data.sample.Model.InK() {
		because += ", errors in k"
	}
	a.find("fewer-resamples", fmt.Sprintf("%s: %s, since %d would take long", because, says, asked), nil,
		map[string]Real{"temperatures": Real(n), "resamples": Real(most), "default": Real(asked)})
}

// tooMany refuses data sets whose assessment would take gigabytes.
func (a *assessor) tooMany() error {
	if n := a.data.sample.Len(); n > MostTemperatures {
		return a.problem("too-many-temperatures", fmt.Sprintf("%d %s are more than the %d that can be assessed", n, a.data.entries(), MostTemperatures),
			"average neighbouring temperatures, or select rows with --t-min, --t-max or --where")
	}
	return nil
}

// entries names what the verdict counts.
func (p *prepared) entries() string {
	if p.basis == BasisPoints && p.means != nil {
		return "points"
	}
	return "temperatures"
}
