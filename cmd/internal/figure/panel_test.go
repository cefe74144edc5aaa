package figure

import (
	"math"
	"slices"
	"testing"

	"onebarrier/diagnostics"
	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// ln 0.0102 = -4.58536755869 (Python); k_B/h = 2.083661912e10 Hz/K (CODATA 2018), so
// that ln[k h/(k_B T)] at 300 K is -4.58536755869 - ln(2.083661912e10 · 300).
func TestEyringPoints(t *testing.T) {
	want := -4.58536755869 - math.Log(2.083661912e10*300)
	for _, c := range []struct {
		per float64 // LnPerSecond
		opt Options
		x   float64
		by  float64
	}{
		{0, Options{}, 1000. / 300, 1},
		{-math.Log(60), Options{}, 1000. / 300, 1}, // k in min^-1
		{0, Options{Y: "lg", X: "10000/T"}, 10000. / 300, math.Ln10},
	} {
		a := sixRates(t, fit.Relative)
		a.Data[0].UK = 0.01 * a.Data[0].K
		a.Rate = dataset.Quantity{Unit: "s^-1", Known: true, LnPerSecond: c.per}
		d, err := NewEyring(a, c.opt)
		if err != nil {
			t.Fatal(err)
		}
		p := d.Points[0]
		reference.Close(t, "x", p.X, c.x, 1e-12)
		reference.Close(t, "y", p.Y, (want+c.per)/c.by, 1e-9)
		reference.Close(t, "bar", (p.High-p.Low)/2*c.by, 0.01, 1e-9)
		// The curve of transition-state theory is a straight line on these axes.
		a.Verdict.RecommendedCurve = "linear-prefactor"
		if d, err = NewEyring(a, c.opt); err != nil {
			t.Fatal(err)
		}
		l := d.Lines[0]
		m := samples / 2
		f := (l.X[m] - l.X[0]) / (l.X[samples-1] - l.X[0])
		reference.Close(t, "middle of the line", l.Y[m], (1-f)*l.Y[0]+f*l.Y[samples-1], 1e-12)
		// Its slope is -ΔH‡/R, which for this curve is its E.
		slope := (l.Y[samples-1] - l.Y[0]) / (l.X[samples-1] - l.X[0]) * c.by * c.x * 300
		reference.Close(t, "slope", slope, -a.Fits["linear-prefactor"].P[1]/models.GasConstant, 1e-9)
	}
}

func TestEyringWithheld(t *testing.T) {
	a := sixRates(t, fit.Relative)
	for _, q := range []dataset.Quantity{{Known: false}, {Known: true, Diffusion: true}} {
		a.Rate = q
		if d, err := NewEyring(a, Options{}); d != nil || err != nil {
			t.Errorf("%+v: %v, %v", q, d, err)
		}
	}
	if _, err := NewEyring(a, Options{X: "T"}); err == nil {
		t.Error("an axis that does not exist")
	}
}

// Second and third order: the standard concentration makes a number of k.
func TestEyringLabel(t *testing.T) {
	for _, c := range []struct{ symbol, unit, log, want string }{
		{"k", "s^-1", "ln", "ln[k h/(k_BT)]"},
		{"k_obs", "min^-1", "lg", "lg[k_obs h/(k_BT)]"},
		{"k", "L mol^-1 s^-1", "ln", "ln[k c° h/(k_BT)]"},
		{"k", "cm^3 molecule^-1 s^-1", "ln", "ln[k c° h/(k_BT)]"},
		{"k", "cm^6 molecule^-2 s^-1", "ln", "ln[k (c°)^2 h/(k_BT)]"},
		{"kcat/Km", "L mol^-1 s^-1", "ln", "ln[(kcat/Km) c° h/(k_BT)]"},
	} {
		if got := unmarked(eyringLabel(dataset.Quantity{Symbol: c.symbol, Unit: c.unit}, c.log)); got != c.want {
			t.Errorf("%s in %s: %q, want %q", c.symbol, c.unit, got, c.want)
		}
	}
}

func TestRateConstantPanel(t *testing.T) {
	a := sixRates(t, fit.Absolute)
	a.Data[1].UK = 0.002
	a.Data = append(a.Data, diagnostics.Datum{Row: 9, T: 290, K: -0.001, UK: diagnostics.Real(math.NaN())})
	d, err := NewRateConstant(a)
	if err != nil {
		t.Fatal(err)
	}
	if len(d.Points) != 7 || d.NotShown != 0 || d.Points[6].Y != -0.001 || d.Points[6].Used {
		t.Errorf("a negative k that was left out: %+v", d.Points[6])
	}
	reference.Close(t, "t/°C", d.Points[0].X, 26.85, 1e-12)
	reference.Close(t, "k", d.Points[0].Y, 0.0102, 1e-12)
	reference.Close(t, "k - u", d.Points[1].Low, 0.0254-0.002, 1e-12)
	reference.Close(t, "k + u", d.Points[1].High, 0.0254+0.002, 1e-12)
	l := d.Lines[0]
	p := a.Fits["straight"].P
	reference.Close(t, "curve at 300 K", l.Y[samples-1], math.Exp(p[0]-p[1]/models.GasConstant*(1./300-1/a.Fits["straight"].TRef)), 1e-9)
	reference.Close(t, "cold end", l.X[samples-1], 26.85, 1e-12)
	if l.Curve != "straight" || !l.Recommended {
		t.Errorf("first curve %s", l.Curve)
	}
	if got := unmarked(d.YLabel); got != "k/s^−1" {
		t.Errorf("label %q", got)
	}
}

func TestPowersOfTen(t *testing.T) {
	q := diagnostics.Quantity{Symbol: "k", Unit: "s^-1"}
	for _, c := range []struct {
		most, factor float64
		label        string
	}{
		{0.5, 1, "k/s^−1"}, {0.011, 1, "k/s^−1"}, {999, 1, "k/s^−1"},
		{0.009, 1e3, "10^3 k/s^−1"}, {4e-12, 1e12, "10^12 k/s^−1"}, {0.2e-12, 1e12, "10^12 k/s^−1"}, {5e4, 1e-3, "10^−3 k/s^−1"},
	} {
		d := &Panel{Arrhenius: Arrhenius{Points: []Point{{Y: c.most, Used: true}, {Y: 1e9}}}}
		f := powerOfTen(d)
		reference.Close(t, "factor", f, c.factor, 1e-12)
		if got := unmarked(linearLabel(q, f)); got != c.label {
			t.Errorf("%g: label %q, want %q", c.most, got, c.label)
		}
	}
	q.Unit = "L mol^-1 s^-1"
	if got := unmarked(linearLabel(q, 1e3)); got != "10^3 k/(L mol^−1 s^−1)" {
		t.Errorf("label %q", got)
	}
	if got := unmarked(linearLabel(diagnostics.Quantity{Symbol: "k"}, 1)); got != "k" {
		t.Errorf("label %q", got)
	}
}

// Each ratio is exp of the residual, its band that of ln k.
func TestRatioPanel(t *testing.T) {
	a := sixRates(t, fit.Relative)
	a.Data[2].UK = 0.05 * a.Data[2].K
	for _, curve := range []string{"straight", "power-prefactor", ""} {
		a.Verdict.RecommendedCurve = curve
		of := curve
		if of == "" {
			of = "straight"
		}
		d, err := NewRatio(a, Options{})
		if err != nil {
			t.Fatal(err)
		}
		r := a.Fits[of]
		for i, p := range d.Points {
			reference.Close(t, "ratio", math.Log(p.Y)+1, r.Residuals[i]+1, 1e-12)
		}
		reference.Close(t, "bar", d.Points[2].High/d.Points[2].Y, 1.05, 1e-12)
		if len(d.Lines) != 1 || d.Lines[0].Curve != of {
			t.Fatalf("curves %v", d.Lines)
		}
		l := d.Lines[0]
		band := newLine(r, l.T, 0.95, models.Curve.LnK)
		for i, y := range l.Y {
			reference.Close(t, "curve", y, 1, 1e-12)
			reference.Close(t, "band", l.Upper[i], math.Exp(band.Upper[i]-band.Y[i]), 1e-9)
		}
	}
	a.Fits, a.Sample = nil, nil
	if d, err := NewRatio(a, Options{}); d != nil || err != nil {
		t.Errorf("without a curve: %v, %v", d, err)
	}
}

func TestMeansOnPanels(t *testing.T) {
	a := cases()["replicated"].assess(t)
	a.Rate = dataset.Quantity{Unit: "min^-1", Known: true, LnPerSecond: -math.Log(60)}
	arr, err := NewArrhenius(a, Options{})
	if err != nil {
		t.Fatal(err)
	}
	k, err := NewRateConstant(a)
	if err != nil {
		t.Fatal(err)
	}
	ratio, err := NewRatio(a, Options{})
	if err != nil {
		t.Fatal(err)
	}
	eyring, err := NewEyring(a, Options{})
	if err != nil {
		t.Fatal(err)
	}
	for i, m := range arr.Means {
		reference.Close(t, "mean k", k.Means[i].Y, math.Exp(m.Y), 1e-12)
		reference.Close(t, "t/°C", k.Means[i].X, 1000/m.X-celsiusZero, 1e-9)
		reference.Close(t, "mean ratio", math.Log(ratio.Means[i].Y)+1, m.Residual+1, 1e-9)
		reference.Close(t, "mean in the Eyring plot", eyring.Means[i].Y, m.Y-math.Log(60*2.083661912e10*1000/m.X), 1e-9)
	}
}

// E between neighbours stands in the energy figure, in its unit, with bars of u.
func TestEnergiesBetweenAreDrawn(t *testing.T) {
	a := sixRates(t, fit.Relative)
	nan := diagnostics.Real(math.NaN())
	a.LocalEnergies = []diagnostics.EnergyBetween{
		{TLow: 300, THigh: 310, T: 304.918, E: diagnostics.Estimate{Value: 60, StdError: 2}},
		{TLow: 310, THigh: 320, T: 314.921, E: diagnostics.Estimate{Value: 62, StdError: nan}},
		{TLow: 320, THigh: 330, T: nan, E: diagnostics.Estimate{Value: nan, StdError: nan}},
	}
	a.Settings.EnergyUnit = "kcal/mol"
	d := NewEnergy(a)
	if len(d.Between) != 2 {
		t.Fatalf("%d energies, want 2", len(d.Between))
	}
	p := d.Between[0]
	reference.Close(t, "T", p.X, 304.918, 0)
	reference.Close(t, "E", p.Y, 60/4.184, 1e-12)
	reference.Close(t, "E - u", p.Low, 58/4.184, 1e-12)
	reference.Close(t, "E + u", p.High, 62/4.184, 1e-12)
	if q := d.Between[1]; !math.IsNaN(q.Low) || !math.IsNaN(q.High) {
		t.Errorf("a bar without uncertainty: %+v", q)
	}
	a.LocalEnergies = slices.Repeat(a.LocalEnergies[:1], mostBetween+1)
	if d := NewEnergy(a); d.Between != nil {
		t.Errorf("%d bars would hide the curves", len(d.Between))
	}
}

// What lies far off does not flatten the rest, and a panel of left-out points has a
// range all the same.
func TestPanelRange(t *testing.T) {
	d := &Panel{level: 1}
	d.Points = []Point{{Y: 0.9, Low: 0.8, High: 1, Used: true}, {Y: 1.1, Low: math.Inf(-1), High: 9, Used: true}, {Y: 30, Low: math.NaN(), High: math.NaN()}}
	low, high := d.yRange()
	if !(low > 0.75 && low < 0.9 && high > 1.1 && high < 1.35) {
		t.Errorf("range %g to %g", low, high)
	}
	d = &Panel{level: math.NaN()}
	d.Points = []Point{{Y: 3, Low: math.NaN(), High: math.NaN()}}
	if low, high = d.yRange(); !(low < 3 && high > 3) {
		t.Errorf("range %g to %g of one point", low, high)
	}
}
