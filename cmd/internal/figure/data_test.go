package figure

import (
	"encoding/json"
	"image/color"
	"math"
	"reflect"
	"slices"
	"testing"

	"onebarrier/diagnostics"
	"onebarrier/models"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// sixRates is an invented set; the numbers expected of it are from R 4:
//
//	x <- 1/t; f <- lm(log(k) ~ x)
//	predict(f, data.frame(x = 1/c(350, 300)), interval = "confidence"); resid(f)
//	confint(f)[2, ] * -R/1000
//	z <- log(t); g <- lm(log(k) ~ x + z), a = c(0, -R, R*T),
//	sum(a*coef(g)) -+ qt(.975, 3)*sqrt(t(a) %*% vcov(g) %*% a)
func sixRates(t *testing.T, model fit.ErrorModel) *diagnostics.Assessment {
	return invented{
		name: "six rates", unit: "s^-1", t: []float64{300, 310, 320, 330, 340, 350},
		lnK: func(t float64) float64 {
			k := map[float64]float64{300: 0.0102, 310: 0.0254, 320: 0.0561, 330: 0.1302, 340: 0.2655, 350: 0.5601}
			return math.Log(k[t])
		},
		state: diagnostics.Unresolved, curve: "straight", model: model,
	}.assess(t)
}

func TestPointsOnEveryAxis(t *testing.T) {
	a := sixRates(t, fit.Relative)
	for _, c := range []struct {
		opt  Options
		x, y float64 // of T = 300 K, k = 0.0102
	}{
		// Closed form; ln 0.0102 and lg 0.0102 from Python.
		{Options{}, 1000. / 300, -4.58536755869},
		{Options{X: "10000/T", Y: "lg"}, 10000. / 300, -1.99139982824},
		// k_B = 8.617333262e-5 eV/K (CODATA 2018).
		{Options{X: "1/kT", Y: "ln"}, 1 / (8.617333262e-5 * 300), -4.58536755869},
	} {
		d, err := NewArrhenius(a, c.opt)
		if err != nil {
			t.Fatal(err)
		}
		reference.Close(t, "x", d.Points[0].X, c.x, 1e-9)
		reference.Close(t, "y", d.Points[0].Y, c.y, 1e-9)
		// Lines lie on the same axes: their cold end is at 300 K.
		last := samples - 1
		reference.Close(t, "cold end", d.Lines[0].X[last], c.x, 1e-9)
		unit := 1.0
		if c.opt.Y == "lg" {
			unit = math.Ln10
		}
		reference.Close(t, "line", d.Lines[0].Y[last]*unit, -4.591119866805791, 1e-12)
		reference.Close(t, "difference is in ln k on any axis", d.Points[0].Residual, 0.00575230811388983, 1e-10)
	}
}

func TestStraightBandAgainstR(t *testing.T) {
	d, err := NewArrhenius(sixRates(t, fit.Relative), Options{})
	if err != nil {
		t.Fatal(err)
	}
	l := d.Lines[0]
	if l.Curve != "straight" || !l.Recommended {
		t.Fatalf("first line is %q, recommended %v", l.Curve, l.Recommended)
	}
	last := samples - 1
	for _, c := range []struct {
		what      string
		got, want float64
	}{
		{"fit at 350 K", l.Y[0], -0.600576789269397},
		{"lower at 350 K", l.Lower[0], -0.650735906531975},
		{"upper at 350 K", l.Upper[0], -0.550417672006819},
		{"fit at 300 K", l.Y[last], -4.591119866805791},
		{"lower at 300 K", l.Lower[last], -4.644167946041321},
		{"upper at 300 K", l.Upper[last], -4.538071787570260},
	} {
		reference.Close(t, c.what, c.got, c.want, 1e-11)
	}
	for i, want := range []float64{0.00575230811388983, 0.01702338950121643, -0.03536219606986588, 0.01299981371132783, -0.02135016475961707, 0.02093684950304886} {
		reference.Close(t, "residual", d.Points[i].Residual, want, 1e-10)
	}
	// The straight line differs from itself by nothing, and by its band.
	for i, v := range d.Differences[0].Y {
		if v != 0 {
			t.Fatalf("difference %d of the straight line is %g", i, v)
		}
		reference.Close(t, "band of the difference", d.Differences[0].Upper[i], l.Upper[i]-l.Y[i], 1e-9)
	}
}

// With known σ = 0.03 the band is f ± z σ sqrt(1/N + (x - x̄)²/Sxx), z = 1.959963984540054.
func TestKnownSigmaBandClosedForm(t *testing.T) {
	a := invented{
		t: evenly(280, 340, 8), lnK: arrheniusLaw(20, 55), noise: 0.03, seed: 3, u: true,
		state: diagnostics.Unresolved, curve: "straight", model: fit.Stated,
	}.assess(t)
	d, err := NewArrhenius(a, Options{})
	if err != nil {
		t.Fatal(err)
	}
	var mean, sxx float64
	for _, t := range a.Sample.T {
		mean += 1 / t / 8
	}
	for _, t := range a.Sample.T {
		sxx += (1/t - mean) * (1/t - mean)
	}
	l := d.Lines[0]
	for _, i := range []int{0, 40, samples - 1} {
		dx := 1/l.T[i] - mean
		reference.Close(t, "half-width", (l.Upper[i]-l.Lower[i])/2, 1.959963984540054*0.03*math.Sqrt(1./8+dx*dx/sxx), 1e-10)
	}
	reference.Close(t, "u(ln k)", d.Points[2].High-d.Points[2].Y, 0.03, 1e-10)
	reference.Close(t, "u(ln k)", d.Points[2].Y-d.Points[2].Low, 0.03, 1e-10)
}

func TestErrorBarsOfErrorsInK(t *testing.T) {
	row := diagnostics.Datum{T: 300, K: 2, UK: 0.5, Used: true}
	d := &Arrhenius{}
	x, y, _ := Options{}.axes()
	p := d.point(row, fit.Absolute, nil, x, y)
	reference.Close(t, "high", p.High, math.Log(2.5), 1e-14)
	reference.Close(t, "low", p.Low, math.Log(1.5), 1e-14)
	row.UK = 3
	if p = d.point(row, fit.Absolute, nil, x, y); !math.IsInf(p.Low, -1) {
		t.Errorf("u(k) > k: low = %g, want -Inf", p.Low)
	}
	row.UK = diagnostics.Real(math.NaN())
	if p = d.point(row, fit.Relative, nil, x, y); !math.IsNaN(p.Low) || !math.IsNaN(p.High) {
		t.Errorf("without u(k) the bar is %g to %g, want none", p.Low, p.High)
	}
	if !math.IsNaN(p.Residual) {
		t.Errorf("without a straight line the residual is %g, want NaN", p.Residual)
	}
}

func TestEnergyAgainstR(t *testing.T) {
	d := NewEnergy(sixRates(t, fit.Relative))
	if len(d.Lines) != 2 || d.Lines[0].Curve != "straight" || d.Lines[1].Curve != "power-prefactor" {
		t.Fatalf("lines %+v", d.Lines)
	}
	s, p := d.Lines[0], d.Lines[1]
	last := samples - 1
	reference.Close(t, "E", d.E, 69.6763646130437, 1e-11)
	reference.Close(t, "E lower", s.Lower[17], 68.1885955002161, 1e-11)
	reference.Close(t, "E upper", s.Upper[100], 71.1641337258713, 1e-11)
	for _, c := range []struct {
		i                   int
		value, lower, upper float64
	}{
		{0, 71.5012626901, 64.9798647302, 78.02266065},
		{last, 68.0405668014, 62.1444137767, 73.9367198261},
	} {
		reference.Close(t, "E_loc", p.Y[c.i], c.value, 1e-9)
		reference.Close(t, "lower", p.Lower[c.i], c.lower, 1e-9)
		reference.Close(t, "upper", p.Upper[c.i], c.upper, 1e-9)
	}
	reference.Close(t, "T", s.X[0], 350, 1e-14)
	if d.Wedge != nil {
		t.Error("tolerance drawn for an unresolved verdict")
	}
}

// Energies in the unit of the assessment: a kcal is 4.184 kJ, and E/R is in K.
func TestEnergiesInTheirUnit(t *testing.T) {
	a := sixRates(t, fit.Relative)
	a.ChangeOfE = []float64{-2, 0, 1, 3}
	kj, change := NewEnergy(a), NewChange(a)
	for unit, c := range map[string]struct {
		per  float64
		axis string
	}{
		"kcal/mol": {1 / 4.184, "*E*/(kcal mol^{−1})"},
		"K":        {1000 / 8.31446261815324, "(*E*/*R*)/K"},
		"eV":       {1 / 96.48533212331, "*E*/eV"}, // CODATA 2018: F = 96485.33212331 C/mol
		"cm^-1":    {83.5934722514, "(*E*/*hc*)/cm^{−1}"},
	} {
		a.Settings.EnergyUnit = unit
		d, ch := NewEnergy(a), NewChange(a)
		reference.Close(t, unit, d.E, kj.E*c.per, 1e-9)
		reference.Close(t, unit+" upper end", d.Lines[0].Upper[3], kj.Lines[0].Upper[3]*c.per, 1e-9)
		reference.Close(t, unit+" tolerance", d.Tolerance, kj.Tolerance*c.per, 1e-9)
		reference.Close(t, unit+" change", ch.Estimate, change.Estimate*c.per, 1e-9)
		reference.Close(t, unit+" last edge", ch.Edges[len(ch.Edges)-1], change.Edges[len(change.Edges)-1]*c.per, 1e-9)
		if got := d.scale.label("*E*"); got != c.axis {
			t.Errorf("%s: axis %q, want %q", unit, got, c.axis)
		}
	}
}

func TestToleranceWedge(t *testing.T) {
	a := sixRates(t, fit.Relative)
	a.Verdict.State = diagnostics.StraightWithin
	a.Curvature.ToleranceKJ, a.Dataset.TEff = 4, 320
	d := NewEnergy(a)
	// ΔE over 300..350 K of the steepest line in it is the tolerance, 4 kJ/mol.
	if len(d.Wedge) != 3 {
		t.Fatalf("wedge %+v", d.Wedge)
	}
	reference.Close(t, "height at 300 K", d.Wedge[0].Upper-d.E, 1.6, 1e-12)
	reference.Close(t, "height at 350 K", d.E-d.Wedge[2].Lower, 2.4, 1e-12)
	reference.Close(t, "T_eff", d.Wedge[1].T, 320, 0)
	reference.Close(t, "no height at T_eff", d.Wedge[1].Upper, d.E, 0)
}

func TestChosenCurves(t *testing.T) {
	a := sixRates(t, fit.Relative)
	for _, c := range []struct {
		recommended string
		rank, want  []string
	}{
		{"straight", []string{"root-prefactor", "straight", "power-prefactor"}, []string{"straight", "power-prefactor"}},
		{"root-prefactor", []string{"linear-prefactor", "power-prefactor"}, []string{"root-prefactor", "straight", "power-prefactor"}},
		{"", []string{"power-prefactor", "straight"}, []string{"straight", "power-prefactor"}},
		{"power-prefactor", []string{"power-prefactor", "straight"}, []string{"power-prefactor", "straight"}},
	} {
		a.Verdict.RecommendedCurve = c.recommended
		a.Ranking = nil
		for _, name := range c.rank {
			curve, err := models.Lookup(name)
			if err != nil {
				t.Fatal(err)
			}
			a.Ranking = append(a.Ranking, diagnostics.Ranked{Curve: name, Family: curve.Info().Family})
		}
		if got := chosen(a, mostLines); !slices.Equal(got, c.want) {
			t.Errorf("recommended %q: chosen %v, want %v", c.recommended, got, c.want)
		}
	}
}

func TestBinsFreedmanDiaconis(t *testing.T) {
	// R: nclass.FD(0:999) is 10, nclass.FD(((0:499)/500)^2) is 8.
	var even, square []float64
	for i := range 1000 {
		even = append(even, float64(i))
	}
	for i := range 500 {
		square = append(square, math.Pow(float64(i)/500, 2))
	}
	for _, c := range []struct {
		vs   []float64
		want int
	}{{even, 10}, {square, 8}, {[]float64{3, 3, 3}, 1}} {
		e := binEdges(c.vs)
		if len(e)-1 != c.want {
			t.Errorf("%d bins, want %d", len(e)-1, c.want)
		}
		if !slices.IsSorted(e) || e[0] > c.vs[0] || e[len(e)-1] < c.vs[len(c.vs)-1] {
			t.Errorf("edges %v do not hold the values", e)
		}
	}
}

func TestChangeCountsEveryResample(t *testing.T) {
	a := sixRates(t, fit.Relative)
	a.ChangeOfE = []float64{-1e9, 1e9, math.NaN(), math.Inf(1)}
	for i := range 5000 {
		a.ChangeOfE = append(a.ChangeOfE, math.Sin(float64(i)))
	}
	d := NewChange(a)
	sum := d.Beyond
	for _, c := range d.Counts {
		sum += c
	}
	if sum != 5004 || d.Resamples != 5004 {
		t.Errorf("%d counted of %d, want 5004", sum, d.Resamples)
	}
	// Both wild values and both that are no numbers, and no more than 0.1 % at
	// either end, are beyond.
	if d.Beyond < 4 || d.Beyond > 14 {
		t.Errorf("%d beyond the axis", d.Beyond)
	}
	// A bar holds what lies between its edges.
	in := 0
	for _, v := range a.ChangeOfE {
		if v >= d.Edges[3] && v < d.Edges[4] {
			in++
		}
	}
	if d.Counts[3] != in {
		t.Errorf("bar 3 holds %d, want %d", d.Counts[3], in)
	}
	a.ChangeOfE = nil
	for i := range 1000 {
		a.ChangeOfE = append(a.ChangeOfE, float64(i))
	}
	if d := NewChange(a); d.Beyond != 0 {
		t.Errorf("%d of 0..999 beyond an axis that holds all: the last bar has its upper edge", d.Beyond)
	}
	open := "upper"
	a.Curvature.EChange.Open = &open
	if d := NewChange(a); !math.IsInf(d.Upper, 1) || math.IsInf(d.Lower, 0) {
		t.Errorf("open upper end: %g to %g", d.Lower, d.Upper)
	}
}

func TestMissingParts(t *testing.T) {
	if _, err := NewArrhenius(nil, Options{}); err == nil {
		t.Error("no error without an assessment")
	}
	if NewEnergy(nil) != nil || NewChange(nil) != nil {
		t.Error("figures of no assessment")
	}
	a := sixRates(t, fit.Relative)
	nan := diagnostics.Real(math.NaN())
	a.Data[0].K, a.Data[1].T, a.Data[2].K = nan, nan, 0
	a.Data[3].K = diagnostics.Real(math.Inf(1))
	a.Fits, a.Sample, a.ChangeOfE = nil, nil, nil
	d, err := NewArrhenius(a, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if d.NotShown != 4 || len(d.Points) != 2 || len(d.Lines) != 0 {
		t.Errorf("%d not shown, %d points, %d lines; want 4, 2, 0", d.NotShown, len(d.Points), len(d.Lines))
	}
	if NewEnergy(a) != nil || NewChange(a) != nil {
		t.Error("figures without data")
	}
	if ps, err := Write(t.TempDir(), a, Options{}); err != nil || len(ps) != 3 {
		t.Errorf("Write: %v, %v; want three figures of points alone", ps, err)
	}
	for i := range a.Data {
		a.Data[i].K = -1
	}
	if _, err := NewArrhenius(a, Options{}); err == nil {
		t.Error("no error where no row can be drawn")
	}
}

func TestUnusableFitIsNotDrawn(t *testing.T) {
	a := sixRates(t, fit.Relative)
	power := *a.Fits["power-prefactor"]
	power.P = []float64{1, math.NaN(), 0}
	a.Fits["power-prefactor"] = &power
	if got := chosen(a, mostLines); slices.Contains(got, "power-prefactor") {
		t.Errorf("chosen %v holds a curve without estimates", got)
	}
	straight := *a.Fits["straight"]
	straight.Cov = []float64{math.NaN(), 0, 0, 1}
	a.Fits["straight"] = &straight
	d, err := NewArrhenius(a, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if d.Lines[0].Lower != nil || d.Lines[0].Upper != nil {
		t.Error("band drawn from a covariance that is no number")
	}
}

func TestNoBandWithoutDegreesOfFreedom(t *testing.T) {
	if q := quantile(&fit.Result{Model: fit.Relative}, 0.95); !math.IsNaN(q) {
		t.Errorf("quantile %g with no degrees of freedom, want NaN", q)
	}
	// qt(.975, 4) of R.
	reference.Close(t, "t quantile", quantile(&fit.Result{Model: fit.Scaled, Nu: 4}, 0.95), 2.776445, 1e-6)
}

func TestMeansAndSources(t *testing.T) {
	a := cases()["replicated"].assess(t)
	d, err := NewArrhenius(a, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if len(d.Means) != 6 || len(d.Points) != 18 {
		t.Fatalf("%d means of %d points, want 6 of 18", len(d.Means), len(d.Points))
	}
	reference.Close(t, "mean", d.Means[0].Y, (d.Points[0].Y+d.Points[1].Y+d.Points[2].Y)/3, 1e-12)
	if d, err = NewArrhenius(cases()["leftout"].assess(t), Options{}); err != nil {
		t.Fatal(err)
	}
	if !slices.Equal(d.Sources, []string{"lab A", "lab B", "lab C"}) || d.Points[4].Source != 1 {
		t.Errorf("sources %v, point 4 of %d", d.Sources, d.Points[4].Source)
	}
	if d.Points[1].Used || d.Points[0].Limit != "<" || d.NotShown != 1 || len(d.Means) != 0 {
		t.Errorf("left out: %+v", d.Points[:2])
	}
}

// A limit that took part is hollow, is no mean and has no bar; its residual does not
// stretch the panel. Without limits the panel is the same.
func TestLimitsDrawn(t *testing.T) {
	a := cases()["leftout"].assess(t)
	before, err := NewArrhenius(a, Options{})
	if err != nil {
		t.Fatal(err)
	}
	low, high := before.residualRange()
	a.Data[0].Used, a.Data[11].Used = true, true
	a.Data[0].K *= 50
	d, err := NewArrhenius(a, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if p := d.Points[0]; p.Limit != "<" || p.measured() || !math.IsNaN(p.Low) || len(d.Means) != 0 {
		t.Errorf("a limit that took part: %+v, %d means", p, len(d.Means))
	}
	if l, h := d.residualRange(); l != low || h != high {
		t.Errorf("the residuals range from %g to %g, without limits %g to %g", l, h, low, high)
	}
	var leg legend
	pointEntries(&leg, d)
	if !slices.ContainsFunc(leg, func(e legendEntry) bool { return e.words == "limit" }) {
		t.Error("the legend does not name limits")
	}
}

// The legend shows a source by the marker that stands in the panel: a hollow one
// where all its points are left out.
func TestLegendOfASourceLeftOut(t *testing.T) {
	a := cases()["leftout"].assess(t)
	for i := range a.Data {
		if a.Data[i].Source == "lab C" {
			a.Data[i].Used = false
		}
	}
	d, err := NewArrhenius(a, Options{})
	if err != nil {
		t.Fatal(err)
	}
	var leg legend
	pointEntries(&leg, d)
	for i, hollow := range map[int]bool{0: false, 1: false, 2: true} {
		m := leg[i].thumbs[0].(spot).Shape.(marker)
		if leg[i].words != d.Sources[i] || (m.fill == color.White) != hollow {
			t.Errorf("%q: fill %v", leg[i].words, m.fill)
		}
	}
}

func TestInputsStayAsTheyWere(t *testing.T) {
	a := cases()["leftout"].assess(t)
	slices.Reverse(a.ChangeOfE)
	before, err := json.Marshal(a)
	if err != nil {
		t.Fatal(err)
	}
	change, sample, p := slices.Clone(a.ChangeOfE), *a.Sample, slices.Clone(a.Fits["parallel"].P)
	sample.T, sample.Y = slices.Clone(sample.T), slices.Clone(sample.Y)
	if _, err := Write(t.TempDir(), a, Options{Y: "lg"}); err != nil {
		t.Fatal(err)
	}
	after, err := json.Marshal(a)
	if err != nil {
		t.Fatal(err)
	}
	if string(before) != string(after) || !slices.Equal(change, a.ChangeOfE) ||
		!reflect.DeepEqual(sample, *a.Sample) || !slices.Equal(p, a.Fits["parallel"].P) {
		t.Error("the assessment was modified")
	}
}
