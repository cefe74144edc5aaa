package bootstrap

import (
	"math"

	"onebarrier/models/fit"
)

// maxLeverage bounds the leverage of entries whose residuals enter the pool:
// beyond it an entry determines its own fitted value and its residual says
// nothing about the errors.
const maxLeverage = 0.99

// generator makes errors around one fitted curve, in ln k, or in k where the
// error model is InK.
type generator struct {
	mean []float64 // fitted values
	root []float64 // √V
	pool []float64 // Residual: centred r/√(V(1-h))
	amp  []float64 // Wild: r/√(1-h); Parametric: σ√V
}

// newGenerator returns nil where the fit leaves nothing to resample from.
// leverage may hold NaN, which stands for the mean leverage p/N.
func newGenerator(s *fit.Sample, scheme Scheme, fitted, resid, leverage []float64, p int, sigma float64) *generator {
	n := s.Len()
	g := &generator{mean: make([]float64, n), root: make([]float64, n)}
	for i := range n {
		g.mean[i] = fitted[i]
		if s.Model.InK() {
			g.mean[i] = math.Exp(fitted[i])
		}
		g.root[i] = math.Sqrt(s.V[i])
	}
	if scheme == Parametric {
		if s.Model.KnownSigma() {
			sigma = 1
		}
		if !(sigma > 0) {
			return nil
		}
		g.amp = make([]float64, n)
		for i, r := range g.root {
			g.amp[i] = sigma * r
		}
		return g
	}
	if n <= p {
		return nil
	}
	g.amp = make([]float64, n)
	for i := range n {
		h := leverage[i]
		if math.IsNaN(h) {
			h = float64(p) / float64(n)
		}
		if h > maxLeverage {
			g.amp[i] = resid[i]
			continue
		}
		g.amp[i] = resid[i] / math.Sqrt(1-h)
		g.pool = append(g.pool, g.amp[i]/g.root[i])
	}
	if len(g.pool) < 2 {
		return nil
	}
	var mean float64
	for _, u := range g.pool {
		mean += u
	}
	mean /= float64(len(g.pool))
	for i := range g.pool {
		g.pool[i] -= mean
	}
	return g
}

// draw fills e with one set of errors; ix is scratch of the same length.
func (g *generator) draw(s *stream, scheme Scheme, e []float64, ix []int32) {
	switch scheme {
	case Residual:
		s.indices(ix, len(g.pool))
		for i := range e {
			e[i] = g.root[i] * g.pool[ix[i]]
		}
	case Wild:
		var bits uint64
		for i := range e {
			if i%64 == 0 {
				bits = s.pcg.Uint64()
			}
			// The top bit becomes the sign; a branch would be mispredicted half
			// of the time.
			e[i] = math.Float64frombits(math.Float64bits(g.amp[i]) ^ bits&(1<<63))
			bits <<= 1
		}
	case Parametric:
		for i := range e {
			e[i] = g.amp[i] * s.rng.NormFloat64()
		}
	}
}
