package fit

import (
	"math"

	"onebarrier/models"
)

// slowRefitter refits every candidate with Fit, for curves that no other refitter
// serves.
type slowRefitter struct {
	s      *Sample
	curves []models.Curve
	params []int // parameters given out, of each curve
	criterion
}

var _ Refitter = (*slowRefitter)(nil)

func newSlowRefitter(s *Sample, curves []models.Curve, c criterion, shapedParams bool) slowRefitter {
	r := slowRefitter{s: s, curves: curves, criterion: c, params: make([]int, len(curves))}
	for j, c := range curves {
		if _, linear := c.(models.Basis); linear || shapedParams {
			r.params[j] = len(c.Info().Params)
		}
	}
	return r
}

// Clone implements Refitter.
func (r *slowRefitter) Clone() Refitter { c := *r; return &c }

// Refit implements Refitter.
func (r *slowRefitter) Refit(y []float64, out *Refit) { r.refit(y, nil, out) }

// RefitCounts implements Refitter. An entry taken m times is one with a variance m
// times smaller: residual sum of squares and estimates are the same.
func (r *slowRefitter) RefitCounts(y []float64, counts []int, out *Refit) { r.refit(y, counts, out) }

func (r *slowRefitter) refit(y []float64, counts []int, out *Refit) {
	mustMatch(r.s, y, counts)
	out.prepare(r.params)
	sub := r.resample(y, counts)
	out.How = HowLinear
	distinct := sub.DistinctT()
	for j, c := range r.curves {
		if counts != nil && distinct <= len(c.Info().Params) {
			out.fail(j)
			continue
		}
		r.cold(sub, j, out)
	}
	r.first(out)
}

// resample is the sample with other data, without the entries not taken.
func (r *slowRefitter) resample(y []float64, counts []int) *Sample {
	sub := &Sample{Model: r.s.Model, TRef: r.s.TRef}
	for i, yi := range y {
		v := r.s.V[i]
		if counts != nil {
			if counts[i] == 0 {
				continue
			}
			v /= float64(counts[i])
		}
		k, lnk := yi, math.NaN()
		switch {
		case !r.s.Model.InK():
			k, lnk = math.Exp(yi), yi
		case k > 0:
			lnk = math.Log(k)
		}
		sub.T, sub.V = append(sub.T, r.s.T[i]), append(sub.V, v)
		sub.Y, sub.K = append(sub.Y, lnk), append(sub.K, k)
	}
	return sub
}

// cold fits curve j with Fit.
func (r *slowRefitter) cold(sub *Sample, j int, out *Refit) {
	c := r.curves[j]
	if _, linear := c.(models.Basis); !linear || r.s.Model.InK() {
		out.How = max(out.How, HowCold)
	}
	f := Fit(sub, c)
	switch {
	case f.Usable():
		out.RSS[j] = f.RSS
		copy(out.P[j], f.P)
	case f.Status == Excluded:
		out.RSS[j] = math.Inf(1)
		out.blank(j)
	default:
		out.fail(j)
	}
}

// fail marks a candidate that could not be fitted.
func (out *Refit) fail(j int) {
	out.How = HowFailed
	out.RSS[j] = math.NaN()
	out.blank(j)
}

// blank marks a candidate without parameters.
func (out *Refit) blank(j int) {
	for i := range out.P[j] {
		out.P[j][i] = math.NaN()
	}
}

// mustMatch panics unless y, and counts where given, have the sample's length.
func mustMatch(s *Sample, y []float64, counts []int) {
	if len(y) != s.Len() || (counts != nil && len(counts) != s.Len()) {
		panic("fit: a resample must have one value for each entry of the sample")
	}
}
