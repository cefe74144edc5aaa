package fit

import (
	"math"
	"math/rand/v2"
	"testing"

	"onebarrier/models"
	"onebarrier/models/reference"
)

// TestSoftplus checks the table against exp and log1p.
func TestSoftplus(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	value, slope := make([]float64, 1), make([]float64, 1)
	row := []basisRow{{w: 1}}
	at := func(x float64) {
		t.Helper()
		softplusNodes().shape(x, 0, row, value, slope)
		exact := math.Max(x, 0) + math.Log1p(math.Exp(-math.Abs(x)))
		logistic := 1 / (1 + math.Exp(-x))
		if !(math.Abs(value[0]-exact) <= 3e-16*math.Max(1, math.Abs(x))) {
			t.Errorf("ln(1 + e^%g) = %.17g, want %.17g", x, value[0], exact)
		}
		if !(math.Abs(slope[0]-logistic) <= 1e-13) {
			t.Errorf("slope at %g = %.17g, want %.17g", x, slope[0], logistic)
		}
	}
	for range 20000 {
		at(80 * (rng.Float64() - 0.5))
	}
	for _, x := range []float64{0, 1. / 64, -1. / 64, 37, -37, 36.999999, 700, -700, 1e300, -1e300} {
		at(x)
	}
}

// TestColdFitIsGlobal compares the cold fit with the best of many starts of the
// general least-squares engine in all four parameters.
func TestColdFitIsGlobal(t *testing.T) {
	c := models.Parallel{}
	for set := range 9 {
		rng := rand.New(rand.NewPCG(uint64(set), 5))
		n := []int{8, 12, 20}[set%3]
		width := (1/250. - 1/500.) / models.GasConstant
		d := []float64{6, 2, 12}[set/3]
		s := made(t, n, 250, 500, []float64{1, 40e3, 1 + d*(rng.Float64()-0.5), 40e3 + d/width}, c,
			func(int) float64 { return 0.03 * rng.NormFloat64() })
		res := Fit(s, c)
		pr := newObjective(s, c).problem()
		best := math.Inf(1)
		line := Fit(s, models.Straight()).P
		for range 60 {
			e := line[1] + (rng.Float64()-0.7)*5/width
			span := math.Exp(4*rng.Float64()-1) / width
			cross := rng.Float64()*1.4 - 0.7
			a := line[0] + rng.NormFloat64()
			sol := LeastSquares(pr, []float64{a, e, a - cross*span*width, e + span}, Options{MaxIterations: 400})
			if sol.Status != Failed {
				best = math.Min(best, sol.RSS)
			}
		}
		if !(res.RSS <= best*(1+1e-10)) {
			t.Errorf("set %d (N = %d): RSS %.12g, the general engine finds %.12g", set, n, res.RSS, best)
		}
		if res.Status == Converged {
			reference.Close(t, "RSS of the general engine", best, res.RSS, 1e-8)
		}
	}
}

// bent is a linear curve with an offset and two columns beyond the line, as a heat
// capacity that drifts with T has.
type bent struct{ models.PowerPrefactor }

func (bent) Info() models.Info {
	info := models.PowerPrefactor{}.Info()
	info.Name = "bent"
	info.Params = append(info.Params, models.Param{Symbol: "q"})
	return info
}

func (bent) Columns(tRef float64, t, offset, x []float64) {
	for i, ti := range t {
		z := ti/tRef - 1
		offset[i] = math.Log(ti / tRef)
		x[4*i], x[4*i+1] = 1, (ti-tRef)/(models.GasConstant*ti*tRef)
		x[4*i+2], x[4*i+3] = z*z+z, z*z*z
	}
}

func (b bent) LnK(tRef float64, t, p, f, jac []float64) {
	offset, x := make([]float64, len(t)), make([]float64, 4*len(t))
	b.Columns(tRef, t, offset, x)
	for i := range f {
		f[i] = offset[i]
		for j := range 4 {
			f[i] += p[j] * x[4*i+j]
		}
	}
	copy(jac, x)
}

// TestRefitOffsetAndTwoColumns checks refits of such a curve against Fit.
func TestRefitOffsetAndTwoColumns(t *testing.T) {
	r := newResampling(t, 4, 12, false)
	r.choose(models.LinearPrefactor(), bent{})
	ref := NewRefitter(r.s, r.curves, r.fits, RefitOptions{})
	if _, fast := ref.(*fastRefitter); !fast {
		t.Fatal("the slow road was taken")
	}
	var out Refit
	y := make([]float64, 12)
	for range 5 {
		r.draw(y)
		sub := *r.s
		sub.Y = y
		ref.Refit(y, &out)
		for j, c := range r.curves {
			f := Fit(&sub, c)
			reference.Close(t, c.Info().Name+" RSS", out.RSS[j], f.RSS, 1e-10)
			for i, p := range f.P {
				reference.Close(t, c.Info().Name+" "+c.Info().Params[i].Symbol, out.P[j][i], p, 1e-8)
			}
		}
	}
}

// TestWarmPrediction: the prediction is of second order, so that its error falls
// eightfold where the disturbance is halved.
func TestWarmPrediction(t *testing.T) {
	r := newResampling(t, 2, 20, false)
	f := NewRefitter(r.s, r.curves, r.fits, RefitOptions{}).(*fastRefitter)
	noise, y := make([]float64, 20), make([]float64, 20)
	for i := range noise {
		noise[i] = r.rng.NormFloat64()
	}
	errorAt := func(size float64) float64 {
		for i := range y {
			y[i] = r.fits[2].Fitted[i] + size*noise[i]
		}
		var out Refit
		f.Refit(y, &out)
		var p [5]float64
		copy(p[:], f.full.product[f.shaped[0].warm.first:])
		c, d := f.shaped[0].warm.predict(&p)
		var trial normal
		f.full.polish(&f.cur, &trial)
		return math.Hypot(c-f.cur.c, d-f.cur.d)
	}
	ratio := errorAt(4e-3) / errorAt(2e-3)
	if !(ratio > 6 && ratio < 10) {
		t.Errorf("halving the disturbance divides the error by %.3g, want 8", ratio)
	}
}
