package fit

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"onebarrier/models"
	"onebarrier/models/reference"
)

// mpmath 1.2.1, 40 digits: log(ncdf(z)), npdf(z)/ncdf(z), z + npdf(z)/ncdf(z).
func TestMills(t *testing.T) {
	for _, c := range [][4]float64{
		{-100, -5005.5242086942051, 100.00999800099926, 0.0099980009992607052},
		{-40, -804.60844201375379, 40.024968847207264, 0.024968847207263723},
		{-30.5, -469.46273732291211, 30.532716770660158, 0.032716770660158055},
		{-29.5, -439.42947460915023, 29.533820844167983, 0.033820844167983038},
		{-10, -53.231285150512471, 10.098093233962512, 0.098093233962511963},
		{-1, -1.8410216450092635, 1.5251352761609812, 0.52513527616098121},
		{0.5, -0.36894641528865639, 0.50916043383703349, 1.0091604338370335},
		{5, -2.8665161296376359e-7, 1.4867199409049057e-6, 5.0000014867199409},
		{9, -1.1285884059538406e-19, 1.0279773571668915e-18, 9},
	} {
		lnPhi, m, zm := mills(c[0])
		// z + m loses what the subtraction of two numbers near |z| loses.
		for i, got := range []float64{lnPhi, m, zm} {
			reference.Close(t, fmt.Sprintf("z = %g, value %d", c[0], i+1), got, c[i+1], []float64{1e-14, 1e-13, 1e-10}[i])
		}
	}
}

// limitSample has seven measured points, two limits below and one above; v are the
// variances of the ten.
func limitSample(t testing.TB, model ErrorModel, v []float64) *Sample {
	t.Helper()
	s, err := NewSample(model, []float64{280, 290, 300, 310, 320, 330, 340},
		[]float64{1.15e-4, 3.71e-4, 1.09e-3, 2.94e-3, 7.35e-3, 1.73e-2, 4.0e-2}, v[:7])
	if err != nil {
		t.Fatal(err)
	}
	return limited(t, s, Limit{T: 270, K: 3.2e-5, Below: true, V: v[7]}, Limit{T: 275, K: 7e-5, Below: true, V: v[8]}, Limit{T: 345, K: 5.5e-2, Below: false, V: v[9]})
}

func limited(t testing.TB, s *Sample, limits ...Limit) *Sample {
	t.Helper()
	s, err := s.WithLimits(limits)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func equal(v float64) []float64 {
	out := make([]float64, 10)
	for i := range out {
		out[i] = v
	}
	return out
}

// Stationary points of the likelihood, found with 60 digits by Newton's method on
// difference quotients of its definition (mpmath 1.2.1; start by Nelder-Mead of SciPy
// 1.10). Those of "relative" agree with survreg(Surv(lo, hi, type = "interval2") ~ …,
// dist = "lognormal") of R's survival 3.5 to all digits it gives: line, intercept
// 24.24192503229057, slope -9329.7092433651087, scale 0.028999030019223361, logLik
// 55.479551296230497; with log(T/300), coefficient -10.094927583971234, scale
// 0.012024831257230318, logLik 62.091999744878265.
func TestLimitsAgainstHighPrecision(t *testing.T) {
	var scaledV []float64
	for _, s := range []float64{0.03, 0.02, 0.01, 0.02, 0.03, 0.02, 0.01, 0.02, 0.03, 0.02} {
		scaledV = append(scaledV, s*s)
	}
	line, power := models.Curve(models.Straight()), models.Curve(models.PowerPrefactor{})
	for _, c := range []struct {
		model ErrorModel
		v     []float64
		curve models.Curve
		// slope is E/(1000 R) of the line, n of power-prefactor, and its standard
		// deviation from the observed information.
		slope, sd, lnSigma, logLik float64
	}{
		{Relative, equal(1), line, 9.3297092433651, 0.042622183466, -3.540492897168, 55.47955129623},
		{Relative, equal(1), power, -10.094927583971, 1.84070712626, -4.4207814957515, 62.091999744878},
		{Stated, equal(0.0004), line, 9.3245627038716, 0.0289212036593, 0, 54.328196124206},
		{Stated, equal(0.0004), power, -10.676533946056, 3.00974004591, 0, 60.806150611588},
		{Scaled, scaledV, power, -9.8385637005884, 1.62348170068, -0.39323766632917, 61.965749490967},
		{Absolute, equal(1), line, 9.2919863638637, 0.0411997021392, -9.3770967794201, 54.349054466973},
		{Absolute, equal(1), power, 16.96685614029, 4.4685876664, -9.9317388163477, 57.950926885228},
		{StatedAbsolute, equal(9e-8), line, 9.2947121116887, 0.145962968842, 0, 48.698497920375},
		{StatedAbsolute, equal(9e-8), power, 12.929899851827, 27.0946486658, 0, 48.807647953918},
	} {
		name := fmt.Sprintf("%s, %s: ", c.model, c.curve.Info().Name)
		r := Fit(limitSample(t, c.model, c.v), c.curve)
		if r.Status != Converged || r.N != 10 || r.Nu != 7-r.Params() {
			t.Errorf("%s%s, N = %d, ν = %d: %s", name, r.Status, r.N, r.Nu, r.Reason)
			continue
		}
		slope, sd := r.P[r.Params()-1], math.Sqrt(r.Cov[len(r.Cov)-1])
		if r.Params() == 2 {
			slope, sd = slope/(1000*models.GasConstant), sd/(1000*models.GasConstant)
		}
		stretch := 1.0
		if !c.model.KnownSigma() {
			stretch = math.Sqrt(7 / float64(r.Nu)) // σ̂ of no limits is √(RSS/ν), not √(RSS/n)
		}
		reference.Close(t, name+"slope", slope, c.slope, 1e-9)
		reference.Close(t, name+"its standard deviation", sd/stretch, c.sd, 1e-8)
		reference.Close(t, name+"sigma", r.Sigma/stretch, math.Exp(c.lnSigma), 1e-9)
		reference.Close(t, name+"logLik", r.LogLik, c.logLik, 1e-12)
	}
}

// Schmee and Hahn's motorettes (R's imotor): 17 of 40 failed, the others outlived
// their time. R 4.2.2, survival 3.5: survreg(Surv(time, status) ~ I(1/(temp +
// 273.15)), dist = "lognormal", control = survreg.control(rel.tolerance = 1e-15)).
func TestMotorettesAgainstSurvreg(t *testing.T) {
	checkMotorettes(t, []float64{-13.857503513965746, 9924.8585589566937, 0.59678748532558545, -148.53730620678567, 1010513.571698243147694})
}

// checkMotorettes compares the fit with ln A, -E/R, σ, ln L and var(E/R) of survreg.
func checkMotorettes(t *testing.T, want []float64) {
	t.Helper()
	var tt, k, v []float64
	var limits []Limit
	for _, row := range reference.Records(t, "opendata/imotor_survival.csv") {
		temp, time := reference.Number(t, row["temp"])+273.15, reference.Number(t, row["time"])
		if row["status"] == "1" {
			tt, k, v = append(tt, temp), append(k, time), append(v, 1)
		} else {
			limits = append(limits, Limit{T: temp, K: time, V: 1})
		}
	}
	s, err := NewSample(Relative, tt, k, v)
	if err != nil {
		t.Fatal(err)
	}
	r := Fit(limited(t, s, limits...), models.Straight())
	if len(limits) != 23 || r.Status != Converged || r.N != 40 || r.Nu != 15 {
		t.Fatalf("%d limits, %s, N = %d, ν = %d", len(limits), r.Status, r.N, r.Nu)
	}
	stretch := math.Sqrt(17.0 / 15)
	reference.Close(t, "ln A", r.P[0]+r.P[1]/(models.GasConstant*r.TRef), want[0], 1e-9)
	reference.Close(t, "-E/R", -r.P[1]/models.GasConstant, want[1], 1e-9)
	reference.Close(t, "sigma", r.Sigma/stretch, want[2], 1e-8)
	reference.Close(t, "logLik", r.LogLik, want[3], 1e-12)
	reference.Close(t, "var(E/R)", r.Cov[3]/square(stretch*models.GasConstant), want[4], 1e-7)
}

// A limit far on its side changes nothing, in the limit to the last digits, and
// without limits a fit is what it was.
func TestUselessLimits(t *testing.T) {
	for _, model := range ErrorModels {
		v := equal(1)
		if model == StatedAbsolute {
			v = equal(9e-8)
		} else if model.KnownSigma() {
			v = equal(4e-4)
		}
		with := limitSample(t, model, v)
		s := with.Measured()
		far := limited(t, s, Limit{T: 280, K: 10, Below: true, V: v[7]}, Limit{T: 340, K: 1e-9, Below: false, V: v[8]})
		if model.InK() {
			far = limited(t, s, Limit{T: 280, K: 10, Below: true, V: v[7]}, Limit{T: 340, K: -10, Below: false, V: v[8]})
		}
		for _, c := range models.Default() {
			a, b := Fit(s, c), Fit(far, c)
			name := string(model) + ", " + c.Info().Name
			if a.Status != b.Status || b.N != a.N+2 || b.Nu != a.Nu {
				t.Errorf("%s: %s and %s (%s), N %d and %d", name, a.Status, b.Status, b.Reason, a.N, b.N)
				continue
			}
			reference.Close(t, name+": logLik", b.LogLik, a.LogLik, 1e-9)
			reference.Close(t, name+": RSS", b.RSS, a.RSS, 1e-8)
			if a.Status != Converged {
				continue
			}
			reference.Close(t, name+": sigma", b.Sigma, a.Sigma, 1e-8)
			for j := range a.P {
				reference.Close(t, name+": parameter", b.P[j], a.P[j], 1e-4*math.Sqrt(a.Cov[j*len(a.P)+j])/math.Abs(a.P[j]))
			}
			// The observed information is that of the design only where nothing bends.
			if _, basis := c.(models.Basis); basis && !model.InK() {
				for j := range a.P {
					reference.Close(t, name+": variance", b.Cov[j*(len(a.P)+1)], a.Cov[j*(len(a.P)+1)], 1e-6)
				}
				for i := range a.Leverage {
					reference.Close(t, name+": leverage", b.Leverage[i], a.Leverage[i], 1e-6)
				}
				pa, pb := ProfileExponent(s, a, 0.95), ProfileExponent(far, b, 0.95)
				if c.Info().Name == "power-prefactor" {
					reference.Close(t, name+": lower end of n", pb.Lower, pa.Lower, 1e-6)
					reference.Close(t, name+": upper end of n", pb.Upper, pa.Upper, 1e-6)
				}
			}
		}
	}
}

// Limits without a use, and samples that cannot use them.
func TestLimitsWithoutUse(t *testing.T) {
	s, _ := NewSample(Relative, []float64{300, 310, 320}, []float64{1, 2.1, 3.9}, []float64{1, 1, 1})
	s = limited(t, s, Limit{T: 290, K: 0.4, Below: true, V: 1}, Limit{T: 280, K: 0.4, Below: true, V: 1})
	if r := Fit(s, models.Straight()); r.Status != Converged || r.Nu != 1 || r.N != 5 {
		t.Errorf("straight: %s, ν = %d, N = %d", r.Status, r.Nu, r.N)
	}
	r := Fit(s, models.PowerPrefactor{}) // three temperatures measured: σ → 0
	if r.Nu != 0 || len(r.Warnings) == 0 || !math.IsNaN(r.LogLik) {
		t.Errorf("power-prefactor: ν = %d, %v, logLik %g", r.Nu, r.Warnings, r.LogLik)
	}
	if r := Fit(s, models.Parallel{}); r.Status != Failed || r.Reason == "" {
		t.Errorf("parallel: %s %s", r.Status, r.Reason)
	}
	// Exact data and limits that agree with them.
	var k []float64
	tt := []float64{280, 290, 300, 310, 320, 330}
	for _, x := range tt {
		k = append(k, math.Exp(20-60000/(models.GasConstant*x)))
	}
	s, _ = NewSample(Relative, tt, k, []float64{1, 1, 1, 1, 1, 1})
	for _, l := range []Limit{{T: 270, K: 1, Below: true, V: 1}, {T: 270, K: 1e-5, Below: true, V: 1}} { // the second contradicts them
		for _, c := range models.Default() {
			r := Fit(limited(t, s, l), c)
			if r.Usable() && !finite(append([]float64{r.RSS, r.Sigma, r.LogLik}, r.P...)...) {
				t.Errorf("limit %g: %s: %+v", l.K, c.Info().Name, r)
			}
			if !r.Usable() && r.Status != Excluded {
				t.Errorf("limit %g: %s: %s %s", l.K, c.Info().Name, r.Status, r.Reason)
			}
		}
	}
}

func TestWithLimitsRefuses(t *testing.T) {
	s, _ := NewSample(Relative, []float64{300, 310}, []float64{1, 2}, []float64{1, 1})
	for _, l := range []Limit{{T: 0, K: 1, Below: true, V: 1}, {T: math.NaN(), K: 1, Below: true, V: 1}, {T: 300, K: 0, Below: true, V: 1}, {T: 300, K: math.NaN(), Below: true, V: 1}, {T: 300, K: 1, Below: true, V: 0}, {T: 300, K: 1, Below: true, V: math.Inf(1)}} {
		if _, err := s.WithLimits([]Limit{l}); err == nil {
			t.Errorf("%+v is taken", l)
		}
	}
	k, _ := NewSample(Absolute, []float64{300, 310}, []float64{1, 2}, []float64{1, 1})
	if _, err := k.WithLimits([]Limit{{T: 300, K: 0, Below: true, V: 1}}); err != nil {
		t.Error(err)
	}
}

// The end of an interval is where the likelihood with the exponent held has the
// height that t asks for: fits of curves of fixed exponent find the same height.
func TestProfileWithLimits(t *testing.T) {
	for _, model := range []ErrorModel{Relative, Stated, Absolute} {
		v := equal(1)
		if model == Stated {
			v = equal(4e-4)
		}
		s := limitSample(t, model, v)
		r := Fit(s, models.PowerPrefactor{})
		e := ProfileExponent(s, r, 0.95)
		for _, n := range []float64{e.Lower, e.Upper} {
			c := models.Straight()
			c.M = n
			at := 2 * (r.LogLik - Fit(s, c).LogLik)
			want := square(1.9599639845400545) // R: qnorm(0.975)
			if !model.KnownSigma() {
				want = 7 * math.Log1p(square(2.7764451051977987)/4) // R: qt(0.975, 4)
			}
			reference.Close(t, string(model)+": 2 Δ ln L", at, want, 1e-9)
		}
	}
}

// One barrier with a quarter of the points below a detection limit: E and n have no
// bias, where substituting the limit gives one.
func TestBiasWithLimits(t *testing.T) {
	const sets, e0, sigma = 1500, 60000.0, 0.1
	var sum, sum2, naive float64
	rng := rand.New(rand.NewPCG(1, 2))
	used := 0
	for range sets {
		var tt, k, v []float64
		var limits []Limit
		full := &Sample{Model: Relative, TRef: 310}
		bound := math.Exp(-e0 / models.GasConstant * (1/286.0 - 1/310.0))
		for i := range 12 {
			x := 280 + 60*float64(i)/11
			y := -e0/models.GasConstant*(1/x-1/310.0) + sigma*rng.NormFloat64()
			if y < math.Log(bound) {
				limits = append(limits, Limit{T: x, K: bound, Below: true, V: 1})
				full.add(x, bound, 1)
				continue
			}
			tt, k, v = append(tt, x), append(k, math.Exp(y)), append(v, 1)
			full.add(x, math.Exp(y), 1)
		}
		s, err := NewSample(Relative, tt, k, v)
		if err != nil {
			t.Fatal(err)
		}
		r := Fit(limited(t, s, limits...), models.Straight())
		d := r.P[1] - e0
		sum, sum2, used = sum+d, sum2+d*d, used+len(limits)
		naive += Fit(full, models.Straight()).P[1] - e0
	}
	mean := sum / sets
	se := math.Sqrt((sum2/sets - mean*mean) / sets)
	if used < sets || math.Abs(mean) > 4*se {
		t.Errorf("bias of E %.0f ± %.0f J/mol with %d limits", mean, se, used)
	}
	if !(math.Abs(naive/sets) > 8*se) {
		t.Errorf("limits taken as measured: bias of E only %.0f J/mol", naive/sets)
	}
	t.Logf("bias of E %.0f ± %.0f J/mol, with limits taken as measured %.0f", mean, se, naive/sets)
}

func BenchmarkFitLimits(b *testing.B) {
	s := limitSample(b, Relative, equal(1))
	for _, c := range models.Default() {
		b.Run(c.Info().Name, func(b *testing.B) {
			for range b.N {
				Fit(s, c)
			}
		})
	}
}

// A refit of the data themselves gives the fit back, and a resample gives what Fit
// gives to a sample of it.
func TestLimitRefitter(t *testing.T) {
	for _, model := range ErrorModels {
		v := equal(1)
		if model == StatedAbsolute {
			v = equal(9e-8)
		} else if model.KnownSigma() {
			v = equal(4e-4)
		}
		s := limitSample(t, model, v)
		curves := models.Default()
		var fits []*Result
		for _, c := range curves {
			fits = append(fits, Fit(s, c))
		}
		r := NewRefitter(s, curves, fits, RefitOptions{}).(StdErrorRefitter)
		all := s.All()
		y := append([]float64(nil), all.Y...)
		if model.InK() {
			y = append([]float64(nil), all.K...)
		}
		var out Refit
		r.Refit(y, &out)
		for j, f := range fits {
			if f.Status == Converged {
				name := string(model) + ", " + curves[j].Info().Name
				reference.Close(t, name+": RSS of the data", out.RSS[j], f.RSS, 1e-6)
				if p := len(out.P[j]); p > 0 {
					w := make([]float64, p)
					w[p-1] = 1
					reference.Close(t, name+": standard error", r.StdError(j, w), math.Sqrt(f.Cov[p*p-1]), 1e-4)
				}
			}
		}
		// Resamples: the limits of some become measured.
		rng := rand.New(rand.NewPCG(3, 4))
		for range 10 {
			sub := &Sample{Model: model, TRef: s.TRef}
			var limits []Limit
			for i, f := range fits[0].Fitted {
				e := 0.05 * rng.NormFloat64()
				y[i] = f + e
				sub.add(s.T[i], math.Exp(y[i]), s.V[i])
				if model.InK() {
					y[i] = math.Exp(y[i])
				}
			}
			f := make([]float64, len(s.Limits))
			for i, l := range s.Limits {
				curves[0].LnK(s.TRef, []float64{l.T}, fits[0].P, f[i:i+1], nil)
				k := math.Exp(f[i] + 0.2*rng.NormFloat64())
				if (k < l.K) == l.Below {
					limits = append(limits, l)
				} else {
					sub.add(l.T, k, l.V)
				}
				y[s.Len()+i] = math.Log(k)
				if model.InK() {
					y[s.Len()+i] = k
				}
			}
			sub.Limits = limits
			r.Refit(y, &out)
			for j, c := range curves {
				f := Fit(sub, c)
				if !f.Usable() {
					continue
				}
				var d float64
				if w := r.(*limitRefitter).work[j].value; math.IsInf(out.RSS[j], 0) {
					if better := Fit(sub, curves[0]).RSS/f.RSS - 1; better > 0.1 {
						t.Errorf("%s, %s: excluded, but better than the line by %g of RSS", model, c.Info().Name, better)
					}
					continue
				} else {
					n := float64(sub.Len())
					d = w - f.RSS
					if !model.KnownSigma() {
						e := newCensored(sub, c)
						d = w - n*(math.Log(f.RSS/square(e.unit)/n)+1)
						if model.InK() {
							d = w - n*(math.Log(f.RSS/n)+1-2*math.Log(r.(*limitRefitter).work[j].e.unit))
						}
					}
				}
				// Valleys are followed less far: 0.1 of -2 ln L is no difference to a ranking,
				// nor is 1 much of one where the errors of these data are not those of the model.
				tol := 1e-4
				if _, basis := c.(models.Basis); !basis {
					if tol = 0.1; model.InK() {
						tol = 1
					}
				}
				if !(d < tol) {
					t.Errorf("%s, %s: -2 ln L of a resample %g above that of Fit", model, c.Info().Name, d)
				}
			}
		}
	}
}

// A curve that data bending the other way exclude is excluded with limits as without,
// in the fit and in every resample: it has not failed. Tunnelling bends upwards only,
// Vogel downwards only; the bend of the data is put in by hand.
func TestSeededExcludedWithLimits(t *testing.T) {
	for _, model := range ErrorModels {
		for _, c := range []struct {
			curve models.Curve
			bend  float64 // of ln k, at 35 K from the middle
		}{{models.TunnellingBell(), -0.5}, {models.TunnellingWigner(), -0.5}, {models.Vogel{}, 0.5}} {
			name := string(model) + ", " + c.curve.Info().Name
			at := func(temp float64) float64 {
				return math.Exp(-6.8 - 10000*(1/temp-1/310.) + c.bend*square((temp-310)/35))
			}
			var temps, k, v []float64
			for temp := 280.0; temp <= 340; temp += 10 {
				temps, k = append(temps, temp), append(k, at(temp))
				switch {
				case model.InK() && model.KnownSigma():
					v = append(v, square(0.02*at(temp)))
				case model.KnownSigma():
					v = append(v, 4e-4)
				default:
					v = append(v, 1)
				}
			}
			s, err := NewSample(model, temps, k, v)
			if err != nil {
				t.Fatal(err)
			}
			s = limited(t, s, Limit{T: 275, K: 1.3 * at(275), Below: true, V: v[0]})
			curves := []models.Curve{models.Straight(), models.PowerPrefactor{}, c.curve}
			var fits []*Result
			for _, c := range curves {
				fits = append(fits, Fit(s, c))
			}
			if f := fits[2]; f.Status != Excluded || f.RSS != fits[0].RSS {
				t.Errorf("%s: the fit is %s (%s), RSS %g; want excluded with that of the line, %g", name, f.Status, f.Reason, f.RSS, fits[0].RSS)
			}
			r := NewRefitter(s, curves, fits, RefitOptions{})
			rng := rand.New(rand.NewPCG(5, 6))
			var out Refit
			for range 20 {
				var y []float64
				for _, temp := range s.All().T {
					e := 0.01 * rng.NormFloat64()
					if model.InK() {
						y = append(y, at(temp)*(1+e))
					} else {
						y = append(y, math.Log(at(temp))+e)
					}
				}
				r.Refit(y, &out)
				if out.How == HowFailed || !math.IsInf(out.RSS[2], 1) {
					t.Errorf("%s: RSS %g of a resample, road %d; want +Inf: excluded", name, out.RSS[2], out.How)
					break
				}
			}
		}
	}
}

func BenchmarkRefitLimits(b *testing.B) {
	for _, model := range []ErrorModel{Relative, Absolute} {
		b.Run(string(model), func(b *testing.B) {
			s := limitSample(b, model, equal(1))
			curves := models.Default()
			var fits []*Result
			for _, c := range curves {
				fits = append(fits, Fit(s, c))
			}
			r := NewRefitter(s, curves, fits, RefitOptions{})
			y := append([]float64(nil), s.All().Y...)
			rng := rand.New(rand.NewPCG(3, 4))
			var out Refit
			b.ResetTimer()
			for range b.N {
				for i, v := range s.All().Y {
					y[i] = v + 0.02*rng.NormFloat64()
					if model.InK() {
						y[i] = math.Exp(y[i])
					}
				}
				r.Refit(y, &out)
			}
		})
	}
}
