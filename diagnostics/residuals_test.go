package diagnostics

import (
	"flag"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
	"onebarrier/models/reference"

	"gonum.org/v1/gonum/stat/distuv"
)

var powerDraws = flag.Int("power-draws", 4000, "simulated sets behind each power of the checks of residuals")

// evenSample has n temperatures from low to high evenly spaced in 1/T.
func evenSample(t testing.TB, n int, low, high float64, lnK func(i int, t float64) float64) *fit.Sample {
	t.Helper()
	temps, k, v := make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range temps {
		f := float64(i) / float64(n-1)
		temps[i] = 1 / ((1-f)/low + f/high)
		k[i], v[i] = math.Exp(lnK(i, temps[i])), 1
	}
	s, err := fit.NewSample(fit.Relative, temps, k, v)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// The powers that are stated are those of a simulation.
func TestPowerOfResidualChecks(t *testing.T) {
	draws := *powerDraws
	for _, row := range checkPower {
		n := row.n
		rng := rand.New(rand.NewPCG(7, uint64(n)))
		basis, left := evenDesign(n)
		s := evenSample(t, n, 280, 340, func(_ int, t float64) float64 { return 30 - 60e3/(models.GasConstant*t) })
		z := inverseTemperatures(s)
		heavyErrors := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: 3, Src: rng}
		scores := normalScores(n)
		normality := func(w float64) float64 { return royston(w, n) }
		if n <= normalityDrawn {
			null := evenNull(n, max(20_000, draws))
			normality = func(w float64) float64 {
				at, _ := slices.BinarySearch(null, w)
				return float64(at) / float64(len(null))
			}
		}
		// p < 0.01 two-sided where q lies beyond either critical value.
		critical := func(tail float64) float64 {
			if n > spreadExact {
				mean, sd := formMoments(basis, z)
				return mean + sd*distuv.UnitNormal.Quantile(1-tail)
			}
			values := formValues(basis, z)
			low, high := -1.0, 1.0
			for range 60 {
				if mid := (low + high) / 2; positiveForm(values, mid) > tail {
					low = mid
				} else {
					high = mid
				}
			}
			return low
		}
		upper, lower := critical(residualLevel/2), critical(1-residualLevel/2)
		var spread, heavy float64
		e, one := make([]float64, n), make([]float64, n)
		for i := range one {
			one[i] = 1
		}
		for range draws {
			for i := range e {
				e[i] = rng.NormFloat64() * math.Pow(3, float64(i)/float64(n-1))
			}
			studentise(e, basis, one)
			var a, b float64
			for i, x := range e {
				a, b = a+z[i]*x*x, b+x*x
			}
			if q := a / b; q > upper || q < lower {
				spread++
			}
			for i := range e {
				e[i] = heavyErrors.Rand()
			}
			studentise(e, basis, left)
			if normality(shapiroFrancia(e, scores)) < residualLevel {
				heavy++
			}
		}
		spread, heavy = spread/float64(draws), heavy/float64(draws)
		t.Logf("{%d, %.3f, %.3f},", n, spread, heavy)
		for what, c := range map[string][2]float64{"spread": {spread, row.spread}, "heavy tails": {heavy, row.heavy}} {
			if tol := 4*math.Sqrt(c[1]*(1-c[1])/float64(draws)) + 0.0015; math.Abs(c[0]-c[1]) > tol {
				t.Errorf("N = %d, %s: simulated power %.4f, stated %.4f", n, what, c[0], c[1])
			}
		}
	}
}

// R 4.2.2, y = log(k), on files of testdata/published/synthetic in order of T:
//
//	m <- lm(y ~ I(1000/T_K) + log(T_K)); e <- residuals(m); g <- e^2/mean(e^2)
//	sum((fitted(lm(g ~ I(1000/T_K))) - mean(g))^2)/2                           # LM
//	cor(sort(rstandard(m)), qnorm(ppoints(length(e), a = 3/8)))^2              # W'
//
// The p-values are Imhof's integral of the eigenvalues of M diag(z) M by numpy 1.24
// (svd, eigvalsh) and scipy.integrate.quad 1.10 over u, not over ln u; the last in 30 digits by mpmath.
var residualReference = []struct {
	set      string
	lm, p, w float64
}{
	{"s1_straight", 1.23642872977e-06, 0.8975606333, 0.929424656304},
	{"s2_tn_curved", 0.246355224783, 0.7029316143, 0.966364589906},
	{"s7_vft", 2.07558785707, 0.1126782378, 0.943620068276},
	{"s5_hetero", 4.61341373632, 0.021128696123596, 0.931719746674},
}

func powerFit(t *testing.T, name string) (*fit.Sample, *fit.Result) {
	t.Helper()
	d := reference.Synthetic(t, name)
	a := mustAssess(t, setOf(d.T, d.K, nil), quick())
	return a.Sample, a.Fits["power-prefactor"]
}

func TestResidualChecksAgainstR(t *testing.T) {
	for _, c := range residualReference {
		s, r := powerFit(t, c.set)
		got := CheckResiduals(s, r)
		reference.Close(t, c.set+" LM", float64(got.Spread.Statistic), c.lm, 1e-5) // 1e-6 of a sum of ones cancels
		reference.Close(t, c.set+" p", float64(got.Spread.PValue), c.p, 1e-9)
		reference.Close(t, c.set+" W'", float64(got.Normality.Statistic), c.w, 1e-10)
	}
}

// Two forms whose distribution is known: χ²₁ - F ratio.
func TestPositiveForm(t *testing.T) {
	// P(χ²₁ - c χ²₁' > 0) is the F test with (1, 1): 1 - 2 atan(√c)/π.
	for _, c := range []float64{0.01, 1, 30} {
		reference.Close(t, "F(1, 1)", positiveForm([]float64{1, -c}, 0), 1-2*math.Atan(math.Sqrt(c))/math.Pi, 1e-9)
	}
	// P(χ²₂ > c χ²₂') = 1/(1 + c).
	reference.Close(t, "F(2, 2)", positiveForm([]float64{1, 1, -3, -3}, 0), 0.25, 1e-9)
	// R: pf(2.5, 4, 6, lower.tail = FALSE); P(χ²₄/4 > 2.5 χ²₆/6).
	c := 2.5 * 4 / 6
	reference.Close(t, "F(4, 6)", positiveForm([]float64{1, 1, 1, 1, -c, -c, -c, -c, -c, -c}, 0), 0.151611328125, 1e-9)
	if p := positiveForm([]float64{1, 2}, 0.5); !(p > 1-1e-9) {
		t.Errorf("a positive form is positive with probability %g", p)
	}
	if p := positiveForm(nil, 0); !math.IsNaN(p) {
		t.Errorf("an empty form: %g", p)
	}
}

// At the largest N of the exact p-value the approximation beyond it agrees.
func TestMomentsOfTheSpreadNull(t *testing.T) {
	basis, _ := evenDesign(spreadExact)
	s := evenSample(t, spreadExact, 280, 340, func(_ int, t float64) float64 { return 0 })
	z := inverseTemperatures(s)
	values := formValues(basis, z)
	mean, sd := formMoments(basis, z)
	var m1, m2 float64
	for _, v := range values {
		m1, m2 = m1+v, m2+v*v
	}
	n := float64(len(values))
	reference.Within(t, "mean", mean, m1/n, 1e-12)
	// var q for eigenvalues a_j: 2 Σ(a_j - mean)²/(m(m+2)).
	reference.Close(t, "sd", sd, math.Sqrt(2*(m2-m1*m1/n)/(n*(n+2))), 1e-10)
	for _, tail := range []float64{0.1, 0.02, 0.005} {
		got := positiveForm(values, mean+sd*distuv.UnitNormal.Quantile(1-tail))
		reference.Close(t, "tail", got, tail, 0.12)
	}
}

// On straight data each check is silent in 99 % of sets, on designs other than that
// of the null too.
func TestSizeOfResidualChecks(t *testing.T) {
	if testing.Short() {
		t.Skip("a simulation of one goroutine")
	}
	draws := 4000
	for name, temps := range map[string][]float64{
		"six":      {280, 290, 300, 310, 320, 340},
		"uneven":   {250, 260, 262, 264, 300, 301, 330, 335, 400, 500},
		"ends":     {280, 281, 282, 283, 337, 338, 339, 340},
		"thirty-5": nil,
	} {
		if temps == nil {
			for i := range 35 {
				temps = append(temps, 280+2*float64(i))
			}
		}
		rng := rand.New(rand.NewPCG(3, uint64(len(temps))))
		v := make([]float64, len(temps))
		for i := range v {
			v[i] = 1
		}
		var spread, normal float64
		k := make([]float64, len(temps))
		for range draws {
			for i, ti := range temps {
				k[i] = math.Exp(20 - 50e3/(models.GasConstant*ti) + 0.03*rng.NormFloat64())
			}
			s, err := fit.NewSample(fit.Relative, temps, k, v)
			if err != nil {
				t.Fatal(err)
			}
			c := CheckResiduals(s, fit.Fit(s, models.PowerPrefactor{}))
			if c.Spread.PValue < residualLevel {
				spread++
			}
			if c.Normality.PValue < residualLevel {
				normal++
			}
		}
		// 0.01 ± 4 standard errors, of the normal approximation of 35 residuals less well.
		reference.Within(t, name+": size of the spread test", spread/float64(draws), 0.01, 0.0063)
		reference.Within(t, name+": size of the normality test", normal/float64(draws), 0.01, 0.0085)
	}
}

func TestChecksOfTheResidualsAreFindings(t *testing.T) {
	// Twenty points: one of the errors thirty times the others.
	var ts, ks []float64
	rng := rand.New(rand.NewPCG(1, 2))
	for i := range 20 {
		ti := 280 + 4*float64(i)
		e := 0.01 * rng.NormFloat64()
		if i == 9 {
			e = 0.3
		}
		ts, ks = append(ts, ti), append(ks, math.Exp(20-50e3/(models.GasConstant*ti)+e))
	}
	if a := mustAssess(t, setOf(ts, ks, nil), quick()); !a.finding("residuals-not-normal") {
		t.Errorf("a wild point is not found: %+v", a.ResidualChecks)
	}
	// k read to one absolute error, over two decades.
	ks = ks[:0]
	for _, ti := range ts {
		k := 1e-3 * math.Exp(-60e3/models.GasConstant*(1/ti-1/330.0))
		ks = append(ks, math.Abs(k+8e-6*rng.NormFloat64()))
	}
	a := mustAssess(t, setOf(ts, ks, nil), quick())
	if !a.finding("scatter-not-even") || !a.finding("absolute-fits-better") || a.ResidualChecks.Trend != "shrinks" {
		t.Errorf("errors in k are not found: %+v", a.ResidualChecks)
	}
	// The gain is the difference of two assessments' criteria.
	o := quick()
	o.ErrorModel = fit.Absolute
	b := mustAssess(t, setOf(ts, ks, nil), o)
	reference.Close(t, "gain", float64(a.ResidualChecks.AbsoluteGain),
		float64(a.row(t, "power-prefactor").AIC-b.row(t, "power-prefactor").AIC), 1e-9)
}

// The cure of scatter that is not even neither names the error model in use, nor one that
// makes the scatter less even still, nor asks for uncertainties that are stated.
func TestCureOfUnevenScatter(t *testing.T) {
	const n = 80
	draw := func(sd func(share, k float64) float64, stated bool) *dataset.Set {
		rng := rand.New(rand.NewPCG(3, 4))
		var ts, ks, us []float64
		for i := range n {
			ti := 280 + float64(i)
			k := math.Exp(-20e3 / models.GasConstant * (1/ti - 1/320.0))
			ts, ks = append(ts, ti), append(ks, k*(1+sd(float64(i)/(n-1), k)*rng.NormFloat64()))
			if stated {
				us = append(us, 0.05*k)
			}
		}
		return setOf(ts, ks, us)
	}
	growing := func(share, _ float64) float64 { return 0.01 * math.Exp(2.3*share) }
	shrinking := func(share, _ float64) float64 { return 0.1 * math.Exp(-2.3*share) }
	for _, c := range []struct {
		name   string
		model  fit.ErrorModel
		sd     func(share, k float64) float64
		stated bool
		want   string
	}{
		{"relative, more at the hot end", fit.Relative, growing, false, "state u(k) for every point"},
		{"relative, more at the cold end", fit.Relative, shrinking, false, "state u(k) for every point; where k is read to a fixed absolute error, --error-model absolute"},
		{"absolute, more at the hot end", fit.Absolute, growing, false, "state u(k) for every point; where the error is a share of k, --error-model relative"},
		{"absolute, more at the cold end", fit.Absolute, func(share, k float64) float64 { return shrinking(share, k) / k }, false, "state u(k) for every point"},
		{"stated, hot", fit.Stated, growing, true, "look for what the stated u(k) leave out at the hot end, and state it too"},
		{"scaled, cold", fit.Scaled, shrinking, true, "look for what the stated u(k) leave out at the cold end, and state it too"},
		{"stated-absolute, hot", fit.StatedAbsolute, growing, true, "look for what the stated u(k) leave out at the hot end, and state it too"},
	} {
		o := quick()
		o.ErrorModel = c.model
		a := mustAssess(t, draw(c.sd, c.stated), o)
		i := slices.IndexFunc(a.Findings, func(f Finding) bool { return f.Code == "scatter-not-even" })
		if i < 0 {
			t.Errorf("%s: not found: %+v", c.name, a.ResidualChecks)
			continue
		}
		if got := a.Findings[i].Cure; got != c.want {
			t.Errorf("%s: cure %q, want %q", c.name, got, c.want)
		}
	}
}

func TestResidualsThatCannotBeChecked(t *testing.T) {
	a := mustAssess(t, lineSet(4, 290, 350, 60e3, 0.03, 1), quick())
	if a.ResidualChecks != nil {
		t.Errorf("one degree of freedom: %+v", a.ResidualChecks)
	}
	a = mustAssess(t, lineSet(8, 290, 350, 60e3, 0, 1), quick())
	if a.ResidualChecks != nil {
		t.Errorf("no scatter: %+v", a.ResidualChecks)
	}
	a = mustAssess(t, lineSet(5, 290, 350, 60e3, 0.03, 1), quick())
	if c := a.ResidualChecks; c == nil || !(c.Spread.Power < 0.02) || !c.Spread.PValue.Known() {
		t.Errorf("two degrees of freedom are the fewest: %+v", c)
	}
	if p := powerAt(9, func(i int) float64 { return checkPower[i].spread }); math.Abs(p-0.0365) > 1e-12 {
		t.Errorf("power at 9 is %g, between 0.028 at 8 and 0.045 at 10", p)
	}
}

// Under errors in k, errors in per cent are proposed where the data have them, by the
// difference of two assessments' criteria, and not where the errors are in k indeed.
func TestRelativeErrorsAreProposed(t *testing.T) {
	o := quick()
	o.ErrorModel = fit.Absolute
	o.Models = []models.Curve{models.Straight(), models.PowerPrefactor{}}
	s := lineSet(12, 283, 353, 71e3, 0.015, 11)
	a := mustAssess(t, s, o)
	if !a.finding("relative-fits-better") {
		t.Fatalf("errors in per cent are not found: %+v", a.ResidualChecks)
	}
	for _, f := range a.Findings {
		if strings.Contains(f.Cure, "absolute") {
			t.Errorf("under errors in k the cure of %s is %q", f.Code, f.Cure)
		}
	}
	r := o
	r.ErrorModel = fit.Relative
	reference.Close(t, "gain", float64(a.ResidualChecks.AbsoluteGain),
		float64(mustAssess(t, s, r).row(t, "power-prefactor").AIC-a.row(t, "power-prefactor").AIC), 1e-9)

	// One error of k, 4 % of the middle of the range.
	hits, compared := 0, 0
	const sets = 400
	for i := range sets {
		rng := rand.New(rand.NewPCG(uint64(i), 31))
		var ts, ks []float64
		for j := range 10 {
			ti := 280 + 7*float64(j)
			ts, ks = append(ts, ti), append(ks, math.Exp(-60e3/models.GasConstant*(1/ti-1/310.0))+0.04*rng.NormFloat64())
		}
		if slices.Min(ks) <= 0 {
			continue
		}
		compared++
		for _, code := range screened(t, setOf(ts, ks, nil), o, (*assessor).checkResiduals) {
			if code == "relative-fits-better" {
				hits++
			}
		}
	}
	t.Logf("errors in k: %d of %d sets of ten hear of errors in per cent", hits, compared)
	if compared < sets/2 || float64(hits) > 0.02*float64(compared) {
		t.Errorf("errors in k: %d of %d sets of ten hear of errors in per cent", hits, compared)
	}
	// No rate constant that is 0 or less has a logarithm.
	temps, k := []float64{290, 300, 310, 320, 330, 340}, []float64{-0.01, 0.02, 0.05, 0.11, 0.2, 0.41}
	if b := mustAssess(t, setOf(temps, k, nil), o); b.finding("relative-fits-better") || b.ResidualChecks != nil && b.ResidualChecks.AbsoluteGain.Known() {
		t.Errorf("compared where k is negative: %+v", b.ResidualChecks)
	}
}
