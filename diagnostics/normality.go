package diagnostics

import (
	"math"
	"math/rand/v2"
	"slices"

	"onebarrier/models/fit"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/stat/distuv"
)

const (
	// normalityDraws of the null of the normality test; fewer where normalityHits of
	// them are as far from normal as the data, and p is plainly not small.
	normalityDraws = 4999
	normalityHits  = 50
	// normalityDrawn is the largest N for which the null is drawn.
	normalityDrawn = 30
)

// normalityTest is the squared correlation W' of the ordered residuals, each divided
// by √(V(1-h)), with normal scores (Shapiro & Francia, J. Am. Stat. Assoc. 67 (1972)
// 215; scores of Blom). What a fit leaves is more normal than the errors, the more so
// the fewer the points, and how much depends on where they lie: the null is that of
// residuals about this curve at these temperatures, linearised where the curve or the
// errors are not linear. p is (1 + #{W'* ≤ W'})/(B + 1) of B draws, or h/l where the
// l-th draw is the h-th such one (Besag & Clifford, Biometrika 78 (1991) 301): both
// hold their level exactly. Beyond normalityDrawn entries the normalisation of Royston,
// Statistician 42 (1993) 37, serves.
func normalityTest(s *fit.Sample, r *fit.Result) (w, p float64) {
	basis := tangent(s, r)
	left := leftOver(basis, s.Len())
	e := make([]float64, s.Len())
	for i, v := range r.Residuals {
		e[i] = v / math.Sqrt(s.V[i]) * left[i]
	}
	e = kept(e, left)
	n := len(e)
	if n < 5 {
		return math.NaN(), math.NaN()
	}
	w = shapiroFrancia(e, normalScores(n))
	if n > normalityDrawn {
		return w, royston(w, n)
	}
	return w, normalityDrawnP(w, basis, left)
}

// royston is the p-value of a W' of n independent entries.
func royston(w float64, n int) float64 {
	u := math.Log(float64(n))
	v := math.Log(u)
	mean, sd := -1.2725+1.0521*(v-u), 1.0308-0.26758*(v+2/u)
	return distuv.UnitNormal.Survival((math.Log1p(-w) - mean) / sd)
}

// normalityDrawnP is the p-value of a W' of residuals about a design.
func normalityDrawnP(w float64, basis [][]float64, left []float64) float64 {
	rng := rand.New(rand.NewPCG(0x6e6f726d, uint64(len(left))))
	z := make([]float64, len(left))
	scores := normalScores(len(kept(slices.Clone(left), left)))
	hits := 0
	for k := range normalityDraws {
		for i := range z {
			z[i] = rng.NormFloat64()
		}
		studentise(z, basis, left)
		if shapiroFrancia(kept(z, left), scores) <= math.Nextafter(w, 2) {
			if hits++; hits == normalityHits {
				return float64(hits) / float64(k+1)
			}
		}
	}
	return float64(hits+1) / float64(normalityDraws+1)
}

// leftOver is 1/√(1-h) of each of n entries; 0 where the fit follows an entry whatever
// its error.
func leftOver(basis [][]float64, n int) []float64 {
	left := make([]float64, n)
	for i := range left {
		h := 0.0
		for _, q := range basis {
			h += q[i] * q[i]
		}
		if 1-h > 1e-9 {
			left[i] = 1 / math.Sqrt(1-h)
		}
	}
	return left
}

// kept moves the entries that are left over to the front of e.
func kept(e, left []float64) []float64 {
	n := 0
	for i, l := range left {
		if l > 0 {
			e[n] = e[i]
			n++
		}
	}
	return e[:n]
}

// normalScores are Φ⁻¹((i - 3/8)/(n + 1/4)), scaled to length 1.
func normalScores(n int) []float64 {
	m := make([]float64, n)
	for i := range m {
		m[i] = distuv.UnitNormal.Quantile((float64(i+1) - 0.375) / (float64(n) + 0.25))
	}
	floats.Scale(1/floats.Norm(m, 2), m)
	return m
}

// shapiroFrancia sorts e.
func shapiroFrancia(e, scores []float64) float64 {
	slices.Sort(e)
	mean := floats.Sum(e) / float64(len(e))
	var ss float64
	for _, v := range e {
		ss += (v - mean) * (v - mean)
	}
	d := floats.Dot(e, scores)
	return d * d / ss
}

// studentise leaves of z its residuals about a design, each in units of its own
// standard deviation.
func studentise(z []float64, basis [][]float64, left []float64) {
	for _, q := range basis {
		floats.AddScaled(z, -floats.Dot(q, z), q)
	}
	for i, l := range left {
		z[i] *= l
	}
}
