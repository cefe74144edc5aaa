package figure

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"onebarrier/diagnostics"
	"onebarrier/models"
	"onebarrier/models/dataset"
)

// Panel is what a figure of one panel shows: the points, means and curves of an
// Arrhenius plot in other units.
type Panel struct {
	Arrhenius
	Name, Title    string // of the file; of the figure, in markup
	XLabel, YLabel string // in markup
	// Factor is the power of ten on the Y axis that keeps its numbers short.
	Factor float64
	// toX and toT turn a temperature in K into X and back; toX rises or falls with T.
	toX, toT func(float64) float64
	// celsius asks for a second scale in °C.
	celsius bool
	// level is a Y of which a rule across the panel says something; NaN if none.
	level float64
}

// NewEyring collects ln(k h/(k_B T)) against 1/T, in which transition-state theory with
// constant ΔH‡ and ΔS‡ is a straight line of slope -ΔH‡/R. It is nil where the theory
// does not speak of the quantity, or its unit was not understood: the height of the
// line, ΔS‡/R, would have no meaning.
func NewEyring(a *diagnostics.Assessment, opt Options) (*Panel, error) {
	arr, err := NewArrhenius(a, opt)
	if err != nil {
		return nil, err
	}
	x, y, err := opt.axes()
	if err != nil {
		return nil, err
	}
	if !a.Rate.Known || a.Rate.Diffusion {
		return nil, nil
	}
	// ln of h/(k_B T) with k per second, and per mol/L of standard concentration.
	shift := func(t float64) float64 {
		return a.Rate.LnPerSecond - math.Log(models.Boltzmann/models.Planck*t)
	}
	d := &Panel{
		Arrhenius: *arr, Name: "eyring", Title: "Eyring plot",
		XLabel: x.label, YLabel: eyringLabel(a.Rate, y.name), Factor: 1, celsius: true, level: math.NaN(),
		toX: func(t float64) float64 { return x.scale / t }, toT: func(v float64) float64 { return x.scale / v },
	}
	for i := range d.Points {
		p := &d.Points[i]
		by := shift(p.T) / y.unit
		p.Y, p.Low, p.High = p.Y+by, p.Low+by, p.High+by
	}
	for i := range d.Means {
		m := &d.Means[i]
		m.Y += shift(x.scale/m.X) / y.unit
	}
	for i, l := range d.Lines {
		d.Lines[i] = l.mapped(func(j int, v float64) float64 { return v + shift(l.T[j])/y.unit })
	}
	return d, nil
}

// eyringLabel is ln[k h/(k_B T)], with the standard concentration to the power that
// makes it a number: order less one.
func eyringLabel(q dataset.Quantity, log string) string {
	symbol := q.Symbol
	if symbol == "" {
		symbol = "k"
	}
	k := symbolMarkup(symbol)
	if strings.Contains(symbol, "/") {
		k = "(" + k + ")"
	}
	c := ""
	if u, err := dataset.ParseUnit(q.Unit); err == nil {
		order := u.Dim.Length / 3 // of volume, per mole or per molecule
		switch {
		case order == 1:
			c = " *c*°"
		case order > 0:
			c = fmt.Sprintf(" (*c*°)^{%g}", order)
		}
	}
	return log + "[" + k + c + " *h*/(*k*_{B}*T*)]"
}

// NewRateConstant collects k itself against t/°C. Rate constants that are not positive
// are shown too.
func NewRateConstant(a *diagnostics.Assessment) (*Panel, error) {
	d, err := newLinear(a)
	if err != nil {
		return nil, err
	}
	d.Name, d.Title, d.XLabel, d.celsius, d.level = "rate-constant", "Rate constant", "*t*/°C", false, math.NaN()
	d.toX = func(t float64) float64 { return t - celsiusZero }
	d.toT = func(x float64) float64 { return x + celsiusZero }
	d.place()
	d.Factor = powerOfTen(d)
	d.YLabel = linearLabel(a.Dataset.Quantity, d.Factor)
	return d, nil
}

// NewRatio collects k divided by the fitted k of the recommended curve, or of the
// straight line where none is recommended, with the band of that curve about 1. It is
// nil where there is neither.
func NewRatio(a *diagnostics.Assessment, opt Options) (*Panel, error) {
	x, _, err := opt.axes()
	if err != nil {
		return nil, err
	}
	d, err := newLinear(a)
	if err != nil {
		return nil, err
	}
	of := a.Verdict.RecommendedCurve
	r := usable(a, of)
	if r == nil {
		of = models.Straight().Info().Name
		r = usable(a, of)
	}
	if r == nil || a.Sample == nil {
		return nil, nil
	}
	fitted := func(t float64) float64 {
		f := []float64{0}
		r.Curve.LnK(r.TRef, []float64{t}, r.P, f, nil)
		return math.Exp(f[0])
	}
	d.Name, d.Title = "ratio", "Measured over fitted *k*: "+plain(of)
	d.XLabel, d.YLabel, d.Factor, d.celsius, d.level = x.label, "*k*/*k*_{fit}", 1, true, 1
	d.toX = func(t float64) float64 { return x.scale / t }
	d.toT = func(v float64) float64 { return x.scale / v }
	for i := range d.Points {
		p := &d.Points[i]
		k := fitted(p.T)
		p.Y, p.Low, p.High = p.Y/k, p.Low/k, p.High/k
	}
	for i := range d.Means {
		d.Means[i].Y /= fitted(d.Means[i].X)
	}
	d.Lines = slices.DeleteFunc(d.Lines, func(l Line) bool { return l.Curve != of })
	if len(d.Lines) == 0 { // more curves than are drawn
		d.Lines = []Line{newLine(r, grid(a.Sample), d.Confidence, models.Curve.LnK).mapped(func(_ int, v float64) float64 { return math.Exp(v) })}
	}
	for i, l := range d.Lines {
		d.Lines[i] = l.mapped(func(j int, v float64) float64 { return v / fitted(l.T[j]) })
	}
	d.place()
	return d, nil
}

// newLinear collects k against T in K: points, means and curves, the X of all still to
// be placed.
func newLinear(a *diagnostics.Assessment) (*Panel, error) {
	if a == nil {
		return nil, fmt.Errorf("figure: there is no assessment to draw")
	}
	d := &Panel{Arrhenius: Arrhenius{Confidence: confidence(a), Offsets: offsets(a), OfRepeats: ofRepeats(a)}, Factor: 1, level: math.NaN()}
	for _, row := range a.Data {
		if !(row.T > 0) || !row.T.Known() || !row.K.Known() {
			d.NotShown++
			continue
		}
		p := Point{Row: row.Row, T: float64(row.T), Y: float64(row.K), Low: math.NaN(), High: math.NaN(), Used: row.Used, Limit: row.Limit}
		if p.Source = slices.Index(d.Sources, row.Source); p.Source < 0 {
			p.Source = len(d.Sources)
			d.Sources = append(d.Sources, row.Source)
		}
		if u := float64(row.UK); u > 0 && !math.IsInf(u, 0) && row.Limit == "" {
			p.Low, p.High = p.Y-u, p.Y+u
		}
		d.Points = append(d.Points, p)
	}
	if len(d.Points) == 0 {
		return nil, fmt.Errorf("figure: none of the %d rows has a T and k to draw", len(a.Data))
	}
	s := a.Sample
	if s == nil {
		return d, nil
	}
	if s.Len() < d.used() {
		for i, k := range s.K {
			d.Means = append(d.Means, Mean{X: s.T[i], Y: k})
		}
	}
	for _, name := range chosen(a, mostLines) {
		l := newLine(a.Fits[name], grid(s), d.Confidence, models.Curve.LnK).mapped(func(_ int, v float64) float64 { return math.Exp(v) })
		l.Recommended = name == a.Verdict.RecommendedCurve
		d.Lines = append(d.Lines, l)
	}
	return d, nil
}

// place gives everything its X: means hold T until then.
func (d *Panel) place() {
	for i := range d.Points {
		d.Points[i].X = d.toX(d.Points[i].T)
	}
	for i := range d.Means {
		d.Means[i].X = d.toX(d.Means[i].X)
	}
	for _, l := range d.Lines {
		for i, t := range l.T {
			l.X[i] = d.toX(t)
		}
	}
}

// powerOfTen is 10 to the multiple of 3 that brings the largest used k to between 0.1
// and 100; 1 where it lies between 0.01 and 1000.
func powerOfTen(d *Panel) float64 {
	var most float64
	for _, p := range d.Points {
		if p.measured() {
			most = math.Max(most, math.Abs(p.Y))
		}
	}
	if most == 0 || most >= 0.01 && most < 1000 {
		return 1
	}
	return math.Pow(10, -3*math.Floor((math.Log10(most)+1)/3))
}

// linearLabel is 10³ k/s⁻¹ in markup.
func linearLabel(q diagnostics.Quantity, factor float64) string {
	label := strings.TrimPrefix(yLabel(q, ""), " ")
	if q.Unit != "" { // without the brackets of a logarithm
		label = label[1 : len(label)-1]
	}
	if factor == 1 {
		return label
	}
	return "10^{" + strings.Replace(fmt.Sprintf("%.0f", math.Log10(factor)), "-", "−", 1) + "} " + label
}

// yRange holds the points that were used and every curve; bars, bands and what was left
// out as far as they do not flatten them.
func (d *Panel) yRange() (low, high float64) {
	core := emptySpan()
	core.add(d.level)
	for _, p := range d.Points {
		if p.measured() {
			core.add(p.Y)
		}
	}
	for _, l := range d.Lines {
		core.add(l.Y...)
	}
	if !(core.high >= core.low) {
		for _, p := range d.Points {
			core.add(p.Y)
		}
	}
	ys := core
	reach := 0.5 * core.width()
	for _, p := range d.Points {
		ys.addWithin(core, core.width(), p.Y)
		ys.addWithin(core, reach, p.Low, p.High)
	}
	for _, l := range d.Lines {
		ys.addWithin(core, reach, l.Lower...)
		ys.addWithin(core, reach, l.Upper...)
	}
	margin := 0.06
	if slices.ContainsFunc(d.Points, func(p Point) bool { return p.Limit != "" }) {
		margin = 0.1 // room for its arrow
	}
	return ys.padded(margin, 1e-9*math.Max(math.Abs(ys.low), math.Abs(ys.high)))
}

// drawPanel lays out a figure of one panel.
func drawPanel(a *diagnostics.Assessment, d *Panel) (picture, error) {
	xs := emptySpan()
	for _, p := range d.Points {
		xs.add(p.X)
	}
	for _, l := range d.Lines {
		xs.add(l.X...)
	}
	xLow, xHigh := xs.padded(0.04, 1e-6*math.Max(1, math.Abs(xs.low)))
	if d.celsius {
		xLow = math.Max(0, xLow)
	}
	yLow, yHigh := d.yRange()
	p := newPlot(xLow, xHigh, yLow*d.Factor, yHigh*d.Factor, d.XLabel, d.YLabel)

	var leg legend
	points := dots{d.Points, radius(len(d.Points)), func(q Point) (float64, float64, float64) {
		return q.Y * d.Factor, q.Low * d.Factor, q.High * d.Factor
	}}
	if len(d.Points) > crowded {
		addFixed(p, points)
	}
	if !math.IsNaN(d.level) {
		addFixed(p, rule{x: math.NaN(), y: d.level, style: draw.LineStyle{Color: grey, Width: vg.Points(0.5)}})
	}
	lines := make([]Line, len(d.Lines))
	for i, l := range d.Lines {
		lines[i] = scaled(l, d.Factor)
	}
	if err := addCurves(p, &leg, lines); err != nil {
		return picture{}, err
	}
	if len(d.Points) <= crowded {
		addFixed(p, points)
	}
	if len(d.Means) > 0 {
		addFixed(p, dashes{d.Means, func(m Mean) float64 { return m.Y * d.Factor }})
	}
	pointEntries(&leg, &d.Arrhenius)
	leg.beyondEntry(beyond(d.Points, yLow, yHigh, func(q Point) float64 { return q.Y }))
	var obstacles []obstacle
	for _, l := range lines {
		obstacles = append(obstacles, l.obstacles()...)
	}
	for _, q := range d.Points {
		y := q.Y * d.Factor
		// What lies outside is marked on the edge.
		o := obstacle{q.X, math.Min(y, yHigh*d.Factor), math.Max(y, yLow*d.Factor)}
		if q.Low < q.High {
			o.low, o.high = q.Low*d.Factor, q.High*d.Factor
		}
		obstacles = append(obstacles, o)
	}

	head := newHeader(d.Title, name(a))
	const panel = 180
	top := margin + head.height() + headGap
	if d.celsius {
		top += topHeight()
	}
	h := top + panel + margin
	page := draw.Canvas{Rectangle: vg.Rectangle{Max: vg.Point{X: pageWidth, Y: h}}}
	area := draw.Crop(page, margin, -margin-3, margin, -top)
	place, found := leg.place(p, func() draw.Canvas { return p.DataCanvas(area) }, obstacles)
	fr := frame{}
	if d.celsius {
		inner := p.DataCanvas(area)
		tHigh := d.hottest()
		if xLow > 0 {
			tHigh = d.toT(xLow)
		}
		fr = frame{celsiusTicks(p, inner.Max.X-inner.Min.X, d.toX, d.toT(xHigh), tHigh), "*t*/°C"}
	}
	addFixed(p, fr)
	return leg.complete(onePanel(d.Name, head, p, area, h), place, found), nil
}

// panels lays out the figures of one panel that there are data for.
func panels(a *diagnostics.Assessment, opt Options) ([]picture, error) {
	eyring, err := NewEyring(a, opt)
	if err != nil {
		return nil, err
	}
	k, err := NewRateConstant(a)
	if err != nil {
		return nil, err
	}
	ratio, err := NewRatio(a, opt)
	if err != nil {
		return nil, err
	}
	var ps []picture
	for _, d := range []*Panel{eyring, k, ratio} {
		if d == nil {
			continue
		}
		p, err := drawPanel(a, d)
		if err != nil {
			return nil, err
		}
		ps = append(ps, p)
	}
	return ps, nil
}
