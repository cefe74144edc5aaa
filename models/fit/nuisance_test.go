package fit

import (
	"math"
	"math/rand/v2"
	"testing"

	"onebarrier/models"
	"onebarrier/models/reference"
)

// twoSources has an offset in ln k between entries of even and odd number.
func twoSources(t *testing.T, model ErrorModel, offset float64, bend float64) *Sample {
	r := rand.New(rand.NewPCG(5, 6))
	n := 14
	temp, k, v, c := make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range n {
		temp[i], v[i], c[i] = 280+5*float64(i), 1, float64(1-2*(i%2))
		x := 1 / (models.GasConstant * temp[i])
		k[i] = (math.Exp(20-60e3*x) + math.Exp(20+bend-(60e3+bend*2600)*x)) * math.Exp(offset*c[i])
		k[i] *= math.Exp(0.01 * r.NormFloat64())
	}
	s, err := NewSample(model, temp, k, v)
	if err != nil {
		t.Fatal(err)
	}
	return s.WithOffsets(make([]float64, n), [][]float64{c})
}

// Offsets that were taken off before are found to be 0, and nothing else moves: the
// minimum is that of curve and offsets together, and the likelihood that of k as
// measured.
func TestJointFit(t *testing.T) {
	for _, model := range []ErrorModel{Relative, Absolute} {
		s := twoSources(t, model, 0.1, 22)
		for _, c := range []models.Curve{models.Straight(), models.PowerPrefactor{}, models.Parallel{}} {
			if model == Absolute && c.Info().Name == "parallel" {
				continue // the colder path leaves no trace in k
			}
			f := Fit(s, c)
			if f.Status != Converged {
				t.Fatalf("%s, %s: %s %s", model, c.Info().Name, f.Status, f.Reason)
			}
			reference.Within(t, "offset", f.Beside[0], 0.1, 0.02)
			if f.Nu != s.Len()-f.Params()-1 || f.Spent != 1 || len(f.BesideCov) != 1 || len(f.Cov) != f.Params()*f.Params() {
				t.Errorf("ν = %d, spent %d", f.Nu, f.Spent)
			}
			off := make([]float64, s.Len())
			for i, x := range s.Nuisance[0] {
				off[i] = f.Beside[0]*x + 0.3
			}
			g := Fit(s.WithOffsets(off, s.Nuisance), c)
			reference.Within(t, "offset that is left", g.Beside[0], 0, 1e-8)
			if model == Relative { // in k a factor changes the unit of RSS
				reference.Close(t, "RSS", g.RSS, f.RSS, 1e-9)
			}
			reference.Close(t, "likelihood", g.LogLik, f.LogLik, 1e-9)
			reference.Close(t, "u of the second parameter", math.Sqrt(g.Cov[f.Params()+1]), math.Sqrt(f.Cov[f.Params()+1]), 1e-6)
		}
	}
}

// Refits of linear curves are fits of curve and offsets to the resample.
func TestRefitsBesideOffsets(t *testing.T) {
	s := twoSources(t, Relative, 0.1, 22)
	curves := models.Default()
	fits := make([]*Result, len(curves))
	for i, c := range curves {
		fits[i] = Fit(s, c)
	}
	r := NewRefitter(s, curves, fits, RefitOptions{}).Clone()
	rng := rand.New(rand.NewPCG(1, 1))
	y := make([]float64, s.Len())
	var out Refit
	for range 20 {
		for i := range y {
			y[i] = s.Y[i] + 0.05*rng.NormFloat64()
		}
		r.Refit(y, &out)
		sub := *s
		sub.Y = y
		for j, c := range curves {
			f := Fit(&sub, c)
			if _, linear := c.(models.Basis); !linear {
				// Held are the offsets of power-prefactor.
				if f.Usable() && !(out.RSS[j] > f.RSS*(1-1e-3) && out.RSS[j] < 1.3*f.RSS) && !math.IsInf(out.RSS[j], 1) {
					t.Errorf("%s: RSS %g, jointly %g", c.Info().Name, out.RSS[j], f.RSS)
				}
				continue
			}
			reference.Close(t, "RSS of "+c.Info().Name, out.RSS[j], f.RSS, 1e-9)
			for i, p := range f.P {
				reference.Within(t, "parameter of "+c.Info().Name, out.P[j][i], p, 1e-8*(1+math.Abs(p)))
			}
		}
	}
}

// The profile beside offsets is that of a straight line where the curve is linear, and
// for others the fit with the value held rises to the criterion at its ends: with the
// offsets held it would be shorter.
func TestProfileBesideOffsets(t *testing.T) {
	s := twoSources(t, Relative, 0.1, 22)
	f := Fit(s, models.Parallel{})
	c := []float64{0, 1, 0, 0}
	e := Profile(s, f, c, 0.95)
	if e.Open != OpenNone || !(e.Lower < f.P[1] && f.P[1] < e.Upper) {
		t.Fatalf("%+v", e)
	}
	q := StudentQuantile(0.975, s.Len()-5)
	for _, g := range []float64{e.Lower, e.Upper} {
		// E1 held: minimised over the offset by golden section, over the rest by
		// the profile of the sample without it.
		held := func(o float64) float64 {
			off := make([]float64, s.Len())
			for i, x := range s.Nuisance[0] {
				off[i] = o * x
			}
			plain := s.WithOffsets(off, nil)
			p := newProfiler(plain, Fit(plain, models.Parallel{}), c)
			rss, _ := p.at(g, f.P)
			return rss
		}
		low, high := 0.05, 0.15
		for range 60 {
			a, b := low+0.382*(high-low), low+0.618*(high-low)
			if held(a) < held(b) {
				high = b
			} else {
				low = a
			}
		}
		rise := (held(low) - f.RSS) / (f.RSS / float64(s.Len()-5))
		reference.Close(t, "rise", rise, q*q, 1e-4)
	}
}

// Without nuisance columns nothing is taken off and nothing counted.
func TestNoNuisance(t *testing.T) {
	s := twoSources(t, Relative, 0, 22)
	plain := *s
	plain.Nuisance = nil
	f, g := Fit(&plain, models.PowerPrefactor{}), Fit(s, models.PowerPrefactor{})
	if f.Spent != 0 || len(f.Beside) > 0 || f.Nu != g.Nu+1 || f.K() != g.K()-1 {
		t.Errorf("%+v", f)
	}
}
