package fit

import (
	"math"

	"onebarrier/models"
)

// slowRefitter refits every candidate with Fit: for errors in k, and for curves the
// projected kernel does not serve.
type slowRefitter struct {
	s      *Sample
	curves []models.Curve
	criterion
	shapedParams bool
}

var _ Refitter = (*slowRefitter)(nil)

// Clone implements Refitter.
func (r *slowRefitter) Clone() Refitter { c := *r; return &c }

// Refit implements Refitter.
func (r *slowRefitter) Refit(y []float64, out *Refit) { r.refit(y, nil, out) }

// RefitCounts implements Refitter. An entry taken m times is one with a variance m
// times smaller: residual sum of squares and estimates are the same.
func (r *slowRefitter) RefitCounts(y []float64, counts []int, out *Refit) { r.refit(y, counts, out) }

func (r *slowRefitter) refit(y []float64, counts []int, out *Refit) {
	mustMatch(r.s, y, counts)
	params := make([]int, len(r.curves))
	for j, c := range r.curves {
		params[j] = len(c.Info().Params)
		if _, linear := c.(models.Basis); !linear && !r.shapedParams {
			params[j] = 0
		}
	}
	out.prepare(params)
	sub := Sample{Model: r.s.Model, TRef: r.s.TRef}
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
	out.How = HowLinear
	distinct := sub.DistinctT()
	for j, c := range r.curves {
		out.RSS[j] = math.NaN()
		for i := range out.P[j] {
			out.P[j][i] = math.NaN()
		}
		if counts != nil && distinct <= len(c.Info().Params) {
			out.How = HowFailed
			continue
		}
		if _, linear := c.(models.Basis); !linear || r.s.Model.InK() {
			out.How = max(out.How, HowCold)
		}
		f := Fit(&sub, c)
		switch {
		case f.Usable():
			out.RSS[j] = f.RSS
			copy(out.P[j], f.P)
		case f.Status == Excluded:
			out.RSS[j] = math.Inf(1)
		default:
			out.How = HowFailed
		}
	}
	r.first(out)
}

// mustMatch panics unless y, and counts where given, have the sample's length.
func mustMatch(s *Sample, y []float64, counts []int) {
	if len(y) != s.Len() || (counts != nil && len(counts) != s.Len()) {
		panic("fit: a resample must have one value for each entry of the sample")
	}
}
