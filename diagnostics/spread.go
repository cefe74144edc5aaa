package diagnostics

import (
	"math"
	"slices"

	"onebarrier/models"
	"onebarrier/models/fit"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/mat"
)

// spreadExact is the largest number of entries for which the p-value of the spread
// test is exact. Beyond it the normal approximation with exact mean and variance
// serves; at that size it is off by less than a tenth of p = 0.01.
const spreadExact = 40

// spreadTest asks whether the scatter about a fit grows or shrinks with T. With
// e = r/√V and z the deviation of 1/T from its mean, the score statistic for a
// variance that is exponential in z,
//
//	LM = (Σ z e²/σ̂²)²/(2 Σ z²), σ̂² = Σ e²/N
//
// (Breusch & Pagan, Econometrica 47 (1979) 1287; Cook & Weisberg, Biometrika 70 (1983)
// 1), has the chi-squared null of its authors only for many points. But e = Mε, M
// projecting out what the fit follows, so that q = Σ z e²/Σ e² is a ratio of quadratic
// forms in normal errors whose null depends on the design alone:
// P(q ≥ c) = P(Σ (a_j - c) χ²₁ ≥ 0), a_j the eigenvalues of M diag(z) M, which Imhof's
// integral gives without simulation. p is two-sided, twice the smaller tail; grows
// says that the scatter is larger at the hot end. For curves that are not linear and
// errors in k the fit is linearised about its estimates.
//
// p is NaN with fewer than two degrees of freedom, or where all T are equal.
func spreadTest(s *fit.Sample, r *fit.Result) (lm, p float64, grows bool) {
	n := s.Len()
	z, e := inverseTemperatures(s), make([]float64, n)
	var see, szee, szz float64
	for i := range e {
		e[i] = r.Residuals[i] / math.Sqrt(s.V[i])
		see += e[i] * e[i]
		szee += z[i] * e[i] * e[i]
		szz += z[i] * z[i]
	}
	q := szee / see
	lm = float64(n) * q * float64(n) * q / (2 * szz)
	basis := tangent(s, r)
	if n-len(basis) < 2 || !(szz > 0) || !(see > 0) {
		return lm, math.NaN(), q < 0
	}
	var above float64
	if n <= spreadExact {
		above = positiveForm(formValues(basis, z), q)
	} else {
		mean, sd := formMoments(basis, z)
		above = math.Erfc((q-mean)/sd/math.Sqrt2) / 2
	}
	// Hot points have the smaller 1/T.
	return lm, math.Min(1, 2*math.Min(above, 1-above)), above > 0.5
}

// inverseTemperatures are 1/T less their mean, scaled so that the largest is 1.
func inverseTemperatures(s *fit.Sample) []float64 {
	z := make([]float64, s.Len())
	models.CentredX(s.TRef, s.T, z)
	floats.AddConst(-floats.Sum(z)/float64(len(z)), z)
	if most := math.Max(floats.Max(z), -floats.Min(z)); most > 0 {
		floats.Scale(1/most, z)
	}
	return z
}

// formValues are the eigenvalues of M diag(z) M on the space that an orthonormal
// basis leaves.
func formValues(basis [][]float64, z []float64) []float64 {
	n := len(z)
	rest := make([][]float64, 0, n)
	all := slices.Clone(basis)
	for i := 0; i < n && len(all) < n; i++ {
		unit := make([]float64, n)
		unit[i] = 1
		var added bool
		// A direction of which little is new would be rounding; the n unit vectors
		// together hold enough of every direction.
		if all, added = extend(all, unit, 1e-3/float64(n)); added {
			rest = append(rest, all[len(all)-1])
		}
	}
	m := len(rest)
	form := mat.NewSymDense(m, nil)
	for j := range m {
		for k := j; k < m; k++ {
			var sum float64
			for i, zi := range z {
				sum += rest[j][i] * zi * rest[k][i]
			}
			form.SetSym(j, k, sum)
		}
	}
	var eigen mat.EigenSym
	if !eigen.Factorize(form, false) {
		return nil
	}
	return eigen.Values(nil)
}

// positiveForm is P(Σ (a_j - c) χ²₁ > 0) for independent chi-squared variables of one
// degree of freedom, by Imhof's integral (Biometrika 48 (1961) 419, eq. 3.2),
//
//	1/2 + 1/π ∫₀^∞ sin θ(u)/(u ρ(u)) du, θ = ½ Σ atan λ_j u, ρ = Π (1 + λ_j²u²)^¼,
//
// over ln u: the integrand is analytic for |Im ln u| < π/2, so that the trapezoidal
// rule of step h errs by exp(-π²/h) times a factor: 5e-15 at h = 0.3. NaN for an empty form.
func positiveForm(a []float64, c float64) float64 {
	if len(a) == 0 {
		return math.NaN()
	}
	lambda := make([]float64, len(a))
	var most float64
	for j, v := range a {
		lambda[j] = v - c
		most = math.Max(most, math.Abs(lambda[j]))
	}
	if most == 0 {
		return 0.5
	}
	floats.Scale(1/most, lambda)
	const h, low = 0.3, -26.0
	var sum float64
	for w := low; w < 400; w += h {
		u := math.Exp(w)
		re, im := 1.0, 0.0
		for _, l := range lambda {
			// √(1 + iλu), whose argument is ½ atan λu.
			m := math.Hypot(1, l*u)
			x := math.Sqrt((m + 1) / 2)
			y := l * u / (2 * x)
			re, im = re*x-im*y, re*y+im*x
		}
		size := re*re + im*im
		sum += im / size
		if w > 0 && size > 1e24 {
			break
		}
	}
	return math.Min(1, math.Max(0, 0.5+h*sum/math.Pi))
}

// formMoments are the mean and the standard deviation of q = Σ z e²/Σ e²: with
// m = N - p, E q = tr(Mz)/m and var q = 2 (m tr(MzMz) - tr²(Mz))/(m²(m+2)) (Durbin &
// Watson, Biometrika 37 (1950) 409, for ratios of this kind).
func formMoments(basis [][]float64, z []float64) (mean, sd float64) {
	m := float64(len(z) - len(basis))
	var t1, t2 float64
	for _, zi := range z {
		t1 += zi
		t2 += zi * zi
	}
	for _, a := range basis {
		for _, b := range basis {
			var sum, square float64
			for i, zi := range z {
				sum += a[i] * zi * b[i]
				square += a[i] * zi * zi * b[i]
			}
			t2 += sum * sum
			if &a[0] == &b[0] {
				t1 -= sum
				t2 -= 2 * square
			}
		}
	}
	return t1 / m, math.Sqrt(2*(m*t2-t1*t1)/(m+2)) / m
}
