package fit

import "math"

// criterion compares candidates by argmin of N ln RSS + penalty, or of RSS + penalty
// with known σ. The first is taken as RSS·exp(penalty/N): no logarithm is needed.
type criterion struct {
	known   bool
	screens bool
	penalty []float64 // known σ: the penalty; else exp(penalty/N)
}

func newCriterion(s *Sample, curves int, penalty []float64) criterion {
	c := criterion{known: s.Model.KnownSigma(), screens: penalty != nil, penalty: make([]float64, curves)}
	var least float64
	for j, p := range penalty {
		if j == 0 || p < least {
			least = p
		}
	}
	for j := range c.penalty {
		var p float64
		if penalty != nil {
			p = penalty[j] - least // only differences count, and exp must not overflow
		}
		if !c.known {
			p = math.Exp(p / float64(s.Len()))
		}
		c.penalty[j] = p
	}
	return c
}

// of is the criterion of curve j.
func (c *criterion) of(j int, rss float64) float64 {
	if c.known {
		return rss + c.penalty[j]
	}
	return rss * c.penalty[j]
}

// limit is the RSS below which curve j is better than best.
func (c *criterion) limit(j int, best float64) float64 {
	if c.known {
		return best - c.penalty[j]
	}
	return best / c.penalty[j]
}

// first puts the candidate that comes first into out.
func (c *criterion) first(out *Refit) {
	out.First = -1
	best := math.Inf(1)
	for j, rss := range out.RSS {
		if v := c.of(j, rss); v < best {
			best, out.First = v, j
		}
	}
}

// prepare gives out the slices it lacks.
func (out *Refit) prepare(params []int) {
	if len(out.RSS) == len(params) && len(out.P) == len(params) {
		return
	}
	out.RSS = make([]float64, len(params))
	out.P = make([][]float64, len(params))
	for j, n := range params {
		out.P[j] = make([]float64, n)
	}
}
