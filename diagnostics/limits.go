package diagnostics

import (
	"fmt"

	"onebarrier/bootstrap"
)

// What a data set may cost. A resample costs about 1.5 µs a temperature where the
// candidates have to be searched anew, an assessment without bootstrap about 7 kB
// and 0.1 ms a temperature.
const (
	// FullyResampled is the most temperatures, or points where the verdict uses
	// points, that get as many resamples as Options.Resamples says.
	FullyResampled = 1000
	// PartlyResampled is the most that are resampled at all, PartResamples times
	// at most.
	PartlyResampled = 10_000
	PartResamples   = 999
	// MostTemperatures is the most that are assessed.
	MostTemperatures = 50_000
)

// limitResamples lowers the number of resamples where there are so many
// temperatures that they would take minutes or hours, unless it was asked for.
func (a *assessor) limitResamples() {
	n, what := a.data.sample.Len(), a.data.entries()
	if bootstrap.Scheme(a.opt.Scheme) == bootstrap.Pairs {
		n, what = a.data.single.Len(), "points"
	}
	if a.opt.KeepResamples || n <= FullyResampled {
		return
	}
	asked, most, says := a.opt.Resamples, PartResamples, fmt.Sprintf("only %d resamples", PartResamples)
	if n > PartlyResampled {
		most, says = 0, "no bootstrap"
	}
	if asked <= most {
		return
	}
	a.opt.Resamples = most
	a.find("fewer-resamples", fmt.Sprintf("%d %s: %s, since %d would take long", n, what, says, asked), nil,
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
