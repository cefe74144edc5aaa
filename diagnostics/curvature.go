package diagnostics

import (
	"math"
	"sync"

	"onebarrier/models"
	"onebarrier/models/fit"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/integrate/quad"
	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"
)

// Level and power of the smallest change of E that is reported as detectable.
const (
	detectableLevel = 0.05
	detectablePower = 0.80
)

// ExponentTest is the exponent test, the primary test of curvature: what exponent n
// of T do the data ask for, is it 0, and is it one of the band?
type ExponentTest struct {
	Exponent   fit.Estimate // n
	Change     fit.Estimate // ΔE = nR(T_max - T_min), kJ/mol
	PValue     float64      // of n = 0
	PBand      float64      // largest p over n in the band; 1 where n lies inside
	PScaleFree float64      // without trust in the size of stated uncertainties; else NaN
	Detectable fit.Estimate // smallest |ΔE| that is seen with 80 % power, kJ/mol
	Nu         int          // degrees of freedom
}

// ExponentProfile stands in for a standard error where errors are additive in k:
// Wald intervals raise far too many false alarms there.
type ExponentProfile struct {
	Interval fit.Estimate            // {n: S(n) is not significantly above its minimum}
	RSS      func(n float64) float64 // S(n), minimised over the other parameters
}

// ExponentSettings decide the exponent test. A Confidence of 0 is 0.95.
type ExponentSettings struct {
	Confidence float64
	Band       [2]float64
}

func (s ExponentSettings) confidence() float64 {
	if s.Confidence == 0 {
		return 0.95
	}
	return s.Confidence
}

// TestExponent runs the exponent test on a power-prefactor fit of s: Student t with
// N - 3 degrees of freedom, which is exact for Gaussian errors in ln k, normal where
// sigma is known. Errors additive in k need profile; others do not look at it.
// Where the fit has no covariance all is unknown.
func TestExponent(s *fit.Sample, power *fit.Result, profile *ExponentProfile, set ExponentSettings) ExponentTest {
	low, high := s.Range()
	perUnit := changePerUnit(low, high)
	if power == nil || power.Status != fit.Converged || power.Cov == nil || power.Nu < 1 {
		return unknownExponentTest()
	}
	n, se := power.P[2], math.Sqrt(power.Cov[8])
	known := s.Model.KnownSigma()
	if !known && noScatter(s, power.RSS) {
		se = math.Max(se, math.Sqrt(rssFloor(s)/float64(s.Len()))*exponentUnitError(s))
	}
	scale := math.NaN()
	if known {
		scale = math.Sqrt(power.RSS / float64(power.Nu))
	}
	x := exponentByStudent(n, se, power.Nu, known, scale, perUnit, set)
	if profile == nil {
		return x
	}
	x.Exponent = profile.Interval
	x.Exponent.StdError = se
	x.Change = scaled(x.Exponent, perUnit)
	pAt := func(n float64) float64 {
		rise := math.Max(0, profile.RSS(n)-power.RSS)
		if known {
			return pNormal(math.Sqrt(rise))
		}
		return pF(rise/(power.RSS/float64(power.Nu)), 1, float64(power.Nu))
	}
	x.PValue = pAt(0)
	if x.PBand = 1; n < set.Band[0] || n > set.Band[1] {
		x.PBand = math.Max(pAt(set.Band[0]), pAt(set.Band[1]))
	}
	if known {
		nu := float64(power.Nu)
		x.PScaleFree = pF((profile.RSS(0)-power.RSS)/(power.RSS/nu), 1, nu)
	}
	return x
}

// unknownExponentTest is the result where the test cannot be run.
func unknownExponentTest() ExponentTest {
	nan := math.NaN()
	return ExponentTest{
		Exponent: fit.Unknown(), Change: fit.Unknown(), Detectable: fit.Unknown(),
		PValue: nan, PBand: nan, PScaleFree: nan,
	}
}

// newExponentProfile profiles a power-prefactor fit over n: with n held it is the
// curve of that fixed exponent.
func newExponentProfile(s *fit.Sample, power *fit.Result, confidence float64) *ExponentProfile {
	return &ExponentProfile{
		Interval: fit.ProfileExponent(s, power, confidence),
		RSS: func(n float64) float64 {
			c := models.Straight()
			c.M = n
			return fit.Fit(s, c).RSS
		},
	}
}

// exponentByStudent is the exponent test from n, its standard error and its degrees
// of freedom. scale is sqrt(χ²/ν) where sigma is known. perUnit is ΔE of n = 1.
func exponentByStudent(n, se float64, nu int, known bool, scale, perUnit float64, set ExponentSettings) ExponentTest {
	p := func(t float64) float64 { return pStudent(t, float64(nu)) }
	if known {
		p = pNormal
	}
	crit := criticalValue(set.confidence(), nu, known)
	x := ExponentTest{
		Exponent: fit.Estimate{Value: n, StdError: se, Lower: n - crit*se, Upper: n + crit*se},
		PValue:   p(n / se), PBand: 1, PScaleFree: math.NaN(), Nu: nu,
	}
	if n < set.Band[0] {
		x.PBand = p((n - set.Band[0]) / se)
	} else if n > set.Band[1] {
		x.PBand = p((n - set.Band[1]) / se)
	}
	if known {
		x.PScaleFree = pStudent(n/(se*scale), float64(nu))
	}
	x.Change = scaled(x.Exponent, perUnit)
	x.Detectable = detectable(se*perUnit, nu, known, set.confidence())
	return x
}

// changePerUnit is R(T_max - T_min) in kJ/mol: ΔE of n = 1.
func changePerUnit(low, high float64) float64 { return models.GasConstant * (high - low) / 1000 }

// scaled multiplies an estimate by a positive factor.
func scaled(e fit.Estimate, by float64) fit.Estimate {
	return fit.Estimate{
		Value: by * e.Value, StdError: by * e.StdError, Lower: by * e.Lower, Upper: by * e.Upper,
		Open: e.Open,
	}
}

// exponentUnitError is the standard error of n at sigma = 1.
func exponentUnitError(s *fit.Sample) float64 {
	w := make([]float64, s.Len())
	for i, v := range s.V {
		w[i] = 1 / v
	}
	var scratch [3][]float64
	for k := range scratch {
		scratch[k] = make([]float64, s.Len())
	}
	if s.Spent() > 0 {
		return math.Sqrt(exponentVarianceBeside(s, w))
	}
	return math.Sqrt(exponentVariance(s, w, nil, scratch))
}

// exponentVariance is the variance of n̂ in units of σ²: one over the squared length
// of what is left of the column ln T when 1 and 1/T are projected out, entries with
// weights w and each counted counts[i] times (nil: once). It is NaN where nothing is
// left. scratch holds three slices of the length of the sample.
func exponentVariance(s *fit.Sample, w []float64, counts []int, scratch [3][]float64) float64 {
	one, x, l := scratch[0], scratch[1], scratch[2]
	for i, t := range s.T {
		v := w[i]
		if counts != nil {
			v *= float64(counts[i])
		}
		root := math.Sqrt(v)
		z := (s.TRef - t) / t
		// z - ln(1+z) differs from ln T by a line in 1/T alone, and cancels less.
		one[i], x[i], l[i] = root, root*z, root*(z-math.Log1p(z))
	}
	before := floats.Dot(l, l)
	floats.Scale(1/floats.Norm(one, 2), one)
	floats.AddScaled(x, -floats.Dot(one, x), one)
	floats.Scale(1/floats.Norm(x, 2), x)
	floats.AddScaled(l, -floats.Dot(one, l), one)
	floats.AddScaled(l, -floats.Dot(x, l), x)
	left := floats.Dot(l, l)
	if !(left > 1e-20*before) {
		return math.NaN()
	}
	return 1 / left
}

// criticalValue is the two-sided quantile of Student's t with nu degrees of
// freedom, or of the normal distribution where sigma is known.
func criticalValue(confidence float64, nu int, known bool) float64 {
	p := (1 + confidence) / 2
	if known {
		return distuv.UnitNormal.Quantile(p)
	}
	return fit.StudentQuantile(p, nu)
}

// pStudent is the two-sided p-value of t, I_{ν/(ν+t²)}(ν/2, 1/2).
func pStudent(t, nu float64) float64 { return pF(t*t, 1, nu) }

// pNormal is the two-sided p-value of a standard normal z.
func pNormal(z float64) float64 { return math.Erfc(math.Abs(z) / math.Sqrt2) }

// pF is the upper tail of the F distribution; not 1 - CDF, which loses every digit
// of a small p.
func pF(f, d1, d2 float64) float64 {
	switch {
	case math.IsNaN(f) || !(d1 > 0) || !(d2 > 0):
		return math.NaN()
	case f <= 0:
		return 1
	case math.IsInf(f, 1):
		return 0
	}
	return mathext.RegIncBeta(d2/2, d1/2, d2/(d2+d1*f))
}

// chi2Tail is the upper tail of the chi-squared distribution.
func chi2Tail(x float64, nu int) float64 { return distuv.ChiSquared{K: float64(nu)}.Survival(x) }

// detectable is the smallest change that the exponent test at 5 % shows with 80 %
// power, se being the standard error of the estimated change. Its interval is that
// of sigma; with two degrees of freedom or fewer sigma is so badly known that the
// interval alone is given.
func detectable(se float64, nu int, known bool, confidence float64) fit.Estimate {
	e := fit.Unknown()
	d := detectableShift(nu, known) * se
	if known {
		e.Value, e.Lower, e.Upper = d, d, d
		return e
	}
	chi2 := distuv.ChiSquared{K: float64(nu)}
	e.Lower = d * math.Sqrt(float64(nu)/chi2.Quantile((1+confidence)/2))
	e.Upper = d * math.Sqrt(float64(nu)/chi2.Quantile((1-confidence)/2))
	if nu > 2 {
		e.Value = d
	}
	return e
}

// shifts remembers detectableShift by degrees of freedom: it depends on nothing else.
var shifts sync.Map

// detectableShift is the shift, in standard errors, at which a two-sided test at
// 5 % has 80 % power.
func detectableShift(nu int, known bool) float64 {
	if known {
		nu = 0
	}
	if d, ok := shifts.Load(nu); ok {
		return d.(float64)
	}
	crit := criticalValue(1-detectableLevel, nu, known)
	power := func(d float64) float64 {
		if known {
			return (math.Erfc((crit-d)/math.Sqrt2) + math.Erfc((crit+d)/math.Sqrt2)) / 2
		}
		return studentPower(crit, d, float64(nu))
	}
	// The power rises with d: bracket it, then bisect.
	low, high := 0.0, crit
	for power(high) < detectablePower {
		low, high = high, 2*high
	}
	for high-low > 1e-13*high {
		if mid := (low + high) / 2; power(mid) < detectablePower {
			low = mid
		} else {
			high = mid
		}
	}
	shifts.Store(nu, (low+high)/2)
	return (low + high) / 2
}

// studentPower is P(|T'| > c) for noncentral t with nu degrees of freedom and
// noncentrality d, integrated over S = sqrt(χ²_ν/ν):
//
//	P(T' > c) = ∫ Φ(d - c s) f_S(s) ds
//
// (Johnson, Kotz & Balakrishnan, Continuous Univariate Distributions 2, ch. 31).
// Series lose all digits once exp(-d²/2) underflows; this does not.
func studentPower(c, d, nu float64) float64 {
	lg, _ := math.Lgamma(nu / 2)
	logNorm := math.Ln2 + nu/2*math.Log(nu/2) - lg // f_S = 2 (ν/2)^{ν/2}/Γ(ν/2) s^{ν-1} e^{-νs²/2}
	half := 12 / math.Sqrt(2*nu)                   // twelve standard deviations of S
	low, high := math.Max(0, 1-half), 1+half
	const panels = 48
	width := (high - low) / panels
	f := func(s float64) float64 {
		upper := math.Erfc((c*s - d) / math.Sqrt2)
		lower := math.Erfc((c*s + d) / math.Sqrt2)
		return (upper + lower) / 2 * math.Exp(logNorm+(nu-1)*math.Log(s)-nu*s*s/2)
	}
	var sum float64
	for i := range panels {
		a := low + float64(i)*width
		sum += quad.Fixed(f, a, a+width, 16, quad.Legendre{}, 0)
	}
	return sum
}
