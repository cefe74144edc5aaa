package diagnostics

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"onebarrier/models"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// evenDesign is an orthonormal basis of what power-prefactor follows at n temperatures
// evenly spaced in 1/T, over a range so narrow that ln T bends like a parabola, and
// 1/√(1-h) of each.
func evenDesign(n int) (basis [][]float64, left []float64) {
	for power := range 3 {
		c := make([]float64, n)
		for i := range c {
			c[i] = math.Pow(2*float64(i)/float64(n-1)-1, float64(power))
		}
		basis, _ = extend(basis, c, 1e-10)
	}
	return basis, leftOver(basis, n)
}

// evenNull are the sorted W' of normal errors about the even design.
func evenNull(n, draws int) []float64 {
	basis, left := evenDesign(n)
	scores := normalScores(n)
	rng := rand.New(rand.NewPCG(11, uint64(n)))
	null, z := make([]float64, draws), make([]float64, n)
	for k := range null {
		for i := range z {
			z[i] = rng.NormFloat64()
		}
		studentise(z, basis, left)
		null[k] = shapiroFrancia(z, scores)
	}
	slices.Sort(null)
	return null
}

// The p-value that stops early is that of a null drawn whole, with other numbers: to
// within four standard errors of its 50 hits, or of 4999 draws.
func TestNormalityStopsEarly(t *testing.T) {
	for _, n := range []int{5, 8, 20} {
		basis, left := evenDesign(n)
		null := evenNull(n, 100_000)
		for _, want := range []float64{0.9, 0.5, 0.1, 0.02, 0.01, 0.003} {
			w := null[int(want*float64(len(null)))]
			got := normalityDrawnP(w, basis, left)
			tol := 4 * want * math.Sqrt((1-want)/math.Min(normalityHits, want*normalityDraws))
			reference.Within(t, "p", got, want, tol+1.0/normalityDraws)
		}
	}
}

// Where five temperatures lie, and what errors in k make of their weights, decides what
// normal errors leave: the test keeps its 1 % there. Against the null of evenly spaced
// temperatures 4 % to half of such sets were not normal.
func TestNormalityOfFewUnevenPoints(t *testing.T) {
	if testing.Short() {
		t.Skip("a simulation of one goroutine")
	}
	for name, c := range map[string]struct {
		model fit.ErrorModel
		temps []float64
	}{
		"even steps, narrow": {fit.Relative, []float64{280, 295, 310, 325, 340}},
		"even steps, wide":   {fit.Relative, []float64{250, 437.5, 625, 812.5, 1000}},
		"ends":               {fit.Relative, []float64{280, 281, 282, 339, 340}},
		"errors in k":        {fit.Absolute, []float64{280, 295, 310, 325, 340}},
		"six, errors in k":   {fit.Absolute, []float64{280, 290, 300, 310, 325, 340}},
	} {
		rng := rand.New(rand.NewPCG(5, uint64(len(name))))
		n := len(c.temps)
		k, v := make([]float64, n), make([]float64, n)
		draws, found, trials := 3000, 0, 0
		if c.model == fit.Absolute {
			draws = 1000
		}
		for range draws {
			for i, ti := range c.temps {
				v[i] = 1
				k[i] = math.Exp(-60e3 / models.GasConstant * (1/ti - 1/310.0))
				if c.model == fit.Absolute {
					k[i] += 0.005 * rng.NormFloat64()
				} else {
					k[i] *= math.Exp(0.03 * rng.NormFloat64())
				}
			}
			s, err := fit.NewSample(c.model, c.temps, k, v)
			if err != nil {
				t.Fatal(err)
			}
			r := fit.Fit(s, models.PowerPrefactor{})
			if r.Status != fit.Converged {
				continue
			}
			trials++
			if _, p := normalityTest(s, r); p < residualLevel {
				found++
			}
		}
		t.Logf("%s: %d of %d", name, found, trials)
		if limit := residualLevel + 4*math.Sqrt(residualLevel*(1-residualLevel)/float64(trials)); trials < draws/2 || float64(found) > limit*float64(trials) {
			t.Errorf("%s: %d of %d sets of normal errors are called not normal", name, found, trials)
		}
	}
}
