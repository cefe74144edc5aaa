package diagnostics

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"sync"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

const (
	// adequacyLevel is the level of the one test that decides.
	adequacyLevel = 0.01
	// runsDraws of the null of the runs test.
	runsDraws = 1999
	// runsDrawsFew is enough for many data sets, of which each is looked at less.
	runsDrawsFew = 499
	// runsExact is the largest N whose runs are drawn. Beyond it what the fit does
	// to the signs is negligible, and the normal null of Wald & Wolfowitz serves.
	runsExact = 400
)

// The names of the tests in Adequacy.Test.
const (
	TestPureError  = "pure-error F"
	TestChiSquared = "chi-squared"
	TestRuns       = "runs"
)

// PureError is the scatter of repeats about the mean of their temperature.
type PureError struct {
	SS           float64 // Σ (y - mean)²/V
	DF           int     // points - temperatures; 0 without repeats
	Temperatures int     // of each source
}

// NewPureError computes it from single points, in order of T, not from means.
func NewPureError(points *fit.Sample) PureError {
	return pureErrorOf(points, func(i, j int) bool { return models.SameTemperature(points.T[i], points.T[j]) })
}

// pureErrorOf takes neighbours that are alike for repeats.
func pureErrorOf(points *fit.Sample, alike func(i, j int) bool) PureError {
	y := points.Y
	if points.Model.InK() {
		y = points.K
	}
	var pe PureError
	for i := 0; i < len(y); {
		j := i
		var sw, swy float64
		for ; j < len(y) && alike(j, i); j++ {
			sw += 1 / points.V[j]
			swy += y[j] / points.V[j]
		}
		mean := swy / sw
		for k := i; k < j; k++ {
			pe.SS += (y[k] - mean) * (y[k] - mean) / points.V[k]
		}
		pe.Temperatures++
		pe.DF += j - i - 1
		i = j
	}
	return pe
}

// repeats is the pure error of the data: that of repeats, or where every entry is a mean
// with the standard deviation of its repeats, as many of each, that of those. ofMeans
// says that the entries are means, so that their scatter holds no pure error.
func (p *prepared) repeats() (pe PureError, ofMeans bool) {
	pe = p.pureError()
	if pe.DF > 0 || p.sample.Model != fit.Relative {
		return pe, p.basis == BasisMeans
	}
	stated := PureError{Temperatures: p.sample.Len()}
	for _, pt := range p.points {
		if n := pt.Repeats; pt.Level != dataset.LevelRepeats || !(pt.UK > 0) || n < 2 || n != p.points[0].Repeats {
			return pe, p.basis == BasisMeans
		}
		// u(ln k) of a mean is s/(k √n): in units of the variance of means, as RSS is.
		u, df := pt.UK/pt.K, pt.Repeats-1
		stated.SS += float64(df) * u * u
		stated.DF += df
	}
	return stated, true
}

// whyUnchecked tells those who gave standard deviations why they check nothing.
func (a *assessor) whyUnchecked(found []Finding) {
	i := slices.IndexFunc(found, func(f Finding) bool { return f.Code == "adequacy-unchecked" })
	if i < 0 || a.model == fit.Scaled || !slices.ContainsFunc(a.data.points, func(p dataset.Point) bool { return p.Level == dataset.LevelRepeats }) {
		return
	}
	found[i].Message = "standard deviations of repeats check the fit of a curve only under error model relative, where every point has one, of as many repeats each"
	found[i].Cure = "give the single repeats, a row each"
}

// CheckAdequacy tests whether a fit of s describes the data: the pure-error F test
// where there are repeats, else chi-squared where uncertainties are stated. That
// one test decides, at 1 %; adequate is nil where neither can be made. The runs
// test follows for show: it cannot reach 5 % for N <= 6. onMeans says that the
// entries of s are temperature means, so that the RSS holds no pure error. nulls
// serves further fits of the same sample.
func CheckAdequacy(s *fit.Sample, f *fit.Result, pe PureError, onMeans bool, nulls *RunsNulls) (tests []Adequacy, adequate *bool) {
	tests = []Adequacy{}
	if !f.Usable() {
		return tests, nil
	}
	decide := func(name string, statistic, p float64) {
		tests = append(tests, Adequacy{name, Real(statistic), Real(p)})
		if !math.IsNaN(p) {
			ok := p >= adequacyLevel
			adequate = &ok
		}
	}
	switch p := f.Params() + f.Spent; {
	case pe.DF > 0 && pe.Temperatures > p:
		lack := f.RSS
		if !onMeans {
			lack -= pe.SS
		}
		df := float64(pe.Temperatures - p)
		// Lack of fit over pure error: Draper & Smith, Applied Regression
		// Analysis, ch. 2.
		ratio := math.Max(0, lack) / df / (pe.SS / float64(pe.DF))
		decide(TestPureError, ratio, pF(ratio, df, float64(pe.DF)))
	case s.Model.KnownSigma() && f.Nu > 0:
		decide(TestChiSquared, f.RSS, chi2Tail(f.RSS, f.Nu))
	}
	if f.Nu > 0 && !noScatter(s, f.RSS) {
		r, p := nulls.test(s, f)
		tests = append(tests, Adequacy{TestRuns, Real(r), Real(p)})
	}
	return tests, adequate
}

// trendLevel is the p-value of the runs test below which residuals show a trend.
const trendLevel = 0.05

// blameRepeats replaces the alarm that no curve fits where the verdict rests on means
// and the means show no trend about some curve: repeats at one temperature share the
// error of its setting, and their scatter is then too small to judge a curve by. Under
// replicates independent the alarm stays: that is what was claimed.
func (a *assessor) blameRepeats(found []Finding, pe PureError, ofMeans bool) {
	i := slices.IndexFunc(found, func(f Finding) bool { return f.Code == "none-adequate" })
	if i < 0 || !ofMeans || pe.DF == 0 {
		return
	}
	s := a.data.sample
	for _, r := range a.ranking {
		f := a.fitOf(r.Curve).Measured()
		runs := slices.IndexFunc(r.Adequacy, func(t Adequacy) bool { return t.Test == TestRuns })
		if runs < 0 || !(r.Adequacy[runs].PValue >= trendLevel) ||
			!slices.ContainsFunc(r.Adequacy, func(t Adequacy) bool { return t.Test == TestPureError }) {
			continue
		}
		repeats := math.Sqrt(pe.SS / float64(pe.DF))
		sizes := "their means lie further about " + r.Curve + " than their scatter allows"
		if s.Model == fit.Relative { // else they are in units of k, or of what is stated
			var ss, left float64
			for i, e := range f.Residuals {
				ss += e * e
				left += s.V[i] / float64(s.Len())
			}
			sizes = fmt.Sprintf("they scatter by %s, which leaves %s in their means, but these lie %s about %s",
				percentText(repeats), percentText(repeats*math.Sqrt(left)), percentText(math.Sqrt(ss/float64(f.Nu))), r.Curve)
			if a.data.basis != BasisMeans { // pe is that of the standard deviations
				sizes = fmt.Sprintf("their standard deviations leave %s in their means, but these lie %s about %s",
					percentText(repeats), percentText(math.Sqrt(ss/float64(f.Nu))), r.Curve)
			}
		}
		found[i] = newFinding("repeats-share-error", "repeats at one temperature share the error of its setting, such as the thermostat's: "+
			sizes+", without a trend; such repeats cannot check a curve, and by them every candidate fails", nil,
			map[string]Real{"scatter_of_repeats": Real(repeats), "degrees_of_freedom": Real(pe.DF)})
		return
	}
}

// quietRepeats makes the finding no louder than the verdict: where no curvature is found
// nothing rests on the repeats.
func (a *assessor) quietRepeats() {
	verdict, err := Explain(string(a.verdict.State))
	if err != nil || verdict.Severity != Info {
		return
	}
	for i := range a.findings {
		if a.findings[i].Code == "repeats-share-error" {
			a.findings[i].Severity = Info
		}
	}
}

// percentText prints a standard deviation of ln k in per cent, with two figures.
func percentText(sd float64) string { return significant(100*sd, 2, "") + " %" }

// RunsNulls keeps the nulls of the runs test of one sample: curves that can follow the
// same directions, as those of fixed exponent do, share one. The zero value is empty.
type RunsNulls struct {
	few    bool // runsDrawsFew draws: p is as exact, and coarser
	bases  [][][]float64
	atMost [][]float64 // share of draws with so many runs or fewer, by number of runs
}

// test counts the runs of equal sign among the residuals in order of T. p is the
// chance of so few under a null of Gaussian errors from which what the fit takes is
// projected out (Wald & Wolfowitz, Ann. Math. Stat. 11 (1940) 147, take independent
// signs, which residuals do not have).
func (nulls *RunsNulls) test(s *fit.Sample, f *fit.Result) (runs, p float64) {
	n := s.Len()
	got := countRuns(f.Residuals)
	if n > runsExact {
		var above float64
		for _, r := range f.Residuals {
			if r > 0 {
				above++
			}
		}
		total, both := float64(n), 2*above*(float64(n)-above)
		mean := 1 + both/total
		sd := math.Sqrt(both * (both - total) / (total * total * (total - 1)))
		return float64(got), math.Erfc((mean-float64(got)-0.5)/sd/math.Sqrt2) / 2
	}
	return float64(got), nulls.of(tangent(s, f), n)[got]
}

// of returns the null for residuals of length n without the components along an
// orthonormal basis.
func (nulls *RunsNulls) of(basis [][]float64, n int) []float64 {
	for i, b := range nulls.bases {
		if sameBasis(b, basis) {
			return nulls.atMost[i]
		}
	}
	draws, count := runsNormals(n), runsDraws
	if nulls.few {
		count = runsDrawsFew
	}
	atMost, z := make([]float64, n+1), make([]float64, n)
	for k := range count {
		copy(z, draws[k*n:])
		for _, q := range basis {
			var d float64
			for i, x := range q {
				d += x * z[i]
			}
			for i, x := range q {
				z[i] -= d * x
			}
		}
		atMost[countRuns(z)]++
	}
	few := 1.0
	for i, c := range atMost {
		few += c
		atMost[i] = few / float64(count+1)
	}
	nulls.bases, nulls.atMost = append(nulls.bases, basis), append(nulls.atMost, atMost)
	return atMost
}

// sameBasis reports whether two bases, built from columns in the same order, are one.
func sameBasis(a, b [][]float64) bool {
	return slices.EqualFunc(a, b, func(p, q []float64) bool {
		return slices.EqualFunc(p, q, func(x, y float64) bool { return math.Abs(x-y) <= 1e-9 })
	})
}

// normals holds the standard normal numbers behind the nulls of the runs test by N:
// with the fewer points they are asked for again and again, data set after data set.
var normals sync.Map

// runsNormals are runsDraws rows of n standard normal numbers.
func runsNormals(n int) []float64 {
	if z, ok := normals.Load(n); ok {
		return z.([]float64)
	}
	rng := rand.New(rand.NewPCG(0x72756e73, uint64(n)))
	z := make([]float64, runsDraws*n)
	for i := range z {
		z[i] = rng.NormFloat64()
	}
	const few = 40
	if n <= few {
		normals.Store(n, z)
	}
	return z
}

// countRuns counts the runs of values above zero and not above zero.
func countRuns(r []float64) int {
	runs := 1
	for i := 1; i < len(r); i++ {
		if (r[i] > 0) != (r[i-1] > 0) {
			runs++
		}
	}
	return runs
}

// tangent is an orthonormal basis of what a fit can follow near its estimate: the
// columns of its Jacobian, weighted.
func tangent(s *fit.Sample, f *fit.Result) [][]float64 {
	n, p := s.Len(), f.Params()
	jac := make([]float64, n*p)
	f.Curve.LnK(f.TRef, s.T, f.P, nil, jac)
	var basis [][]float64
	for j := range p {
		c := make([]float64, n)
		for i := range c {
			c[i] = jac[i*p+j] / math.Sqrt(s.V[i])
			if s.Model.InK() {
				c[i] *= math.Exp(f.Fitted[i])
			}
		}
		basis, _ = extend(basis, c, 1e-10)
	}
	for _, column := range s.Nuisance {
		c := slices.Clone(column)
		for i := range c {
			c[i] /= math.Sqrt(s.V[i])
			if s.Model.InK() {
				c[i] *= math.Exp(f.Fitted[i])
			}
		}
		basis, _ = extend(basis, c, 1e-10)
	}
	return basis
}
