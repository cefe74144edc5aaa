package figure

import (
	"fmt"
	"image/color"
	"math"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"onebarrier/diagnostics"
)

// wedgeColor is the tint of the tolerance.
var wedgeColor = color.NRGBA{R: 0xF0, G: 0xE4, B: 0x42, A: 100}

// drawEnergy lays out E_loc(T).
func drawEnergy(a *diagnostics.Assessment, d *Energy) (picture, error) {
	xs, ys := emptySpan(), emptySpan()
	for _, l := range d.Lines {
		xs.add(l.X...)
		ys.add(l.Y...)
	}
	for _, w := range d.Wedge {
		ys.add(w.Lower, w.Upper)
	}
	if math.IsNaN(d.E) || !(ys.high > ys.low) {
		ys.add(ys.low*0.99, ys.low*1.01)
	}
	core := ys
	for _, l := range d.Lines {
		reach := math.Max(3*core.width(), math.Abs(l.Y[0]))
		ys.addWithin(core, reach, l.Lower...)
		ys.addWithin(core, reach, l.Upper...)
	}
	ys = d.withBetween(ys, core)
	xLow, xHigh := xs.padded(0.04, 1e-6*math.Abs(xs.low))
	yLow, yHigh := ys.padded(0.06, 1e-6)
	xLow = math.Max(0, xLow)
	p := newPlot(xLow, xHigh, yLow, yHigh, "*T*/K", d.scale.label("*E*_{loc}"))

	var leg legend
	var obstacles []obstacle
	if len(d.Wedge) > 0 {
		var x, lower, upper []float64
		for _, w := range d.Wedge {
			x, lower, upper = append(x, w.T), append(lower, w.Lower), append(upper, w.Upper)
		}
		if err := addArea(p, x, lower, upper, wedgeColor); err != nil {
			return picture{}, err
		}
		for i, t := range x {
			obstacles = append(obstacles, obstacle{t, lower[i], upper[i]})
		}
	}
	if err := addCurves(p, &leg, d.Lines); err != nil {
		return picture{}, err
	}
	for _, l := range d.Lines {
		obstacles = append(obstacles, l.obstacles()...)
	}
	obstacles = append(obstacles, d.addBetween(p, &leg)...)
	if d.TEff >= xLow && d.TEff <= xHigh {
		// A drop line from the point to the axis, or a line across without one.
		mark := rule{x: d.TEff, y: math.NaN(), style: draw.LineStyle{Color: grey, Width: vg.Points(0.8), Dashes: []vg.Length{2, 2}}}
		if !math.IsNaN(d.E) {
			mark.top = d.E
			obstacles = append(obstacles, obstacle{d.TEff, yLow, d.E})
		}
		addFixed(p, mark)
		leg.entry(fmt.Sprintf("*T*_{eff} = %s K", number(d.TEff, 1)), mark)
		if !math.IsNaN(d.E) {
			addFixed(p, dots{[]Point{{X: d.TEff, Y: d.E, Used: true}}, 2.5, func(q Point) (float64, float64, float64) { return q.Y, math.NaN(), math.NaN() }})
		}
	}
	if len(d.Wedge) > 0 {
		leg.entry(fmt.Sprintf("Δ*E* within ±%s %s", number(d.Tolerance, decimalsFor(d.Tolerance)), d.scale.unit), swatch{wedgeColor})
	}
	if d.Offsets {
		leg.entry("offsets between sources removed")
	}
	leg.bandEntry(d.Lines, d.Confidence)

	head := newHeader("Local activation energy", name(a))
	const panel = 180
	h := head.height() + headGap + topHeight() + panel + 2*margin
	whole := draw.Canvas{Rectangle: vg.Rectangle{Max: vg.Point{X: pageWidth, Y: h}}}
	area := draw.Crop(whole, margin, -margin-3, margin, -(margin + head.height() + headGap + topHeight()))
	place, found := leg.place(p, func() draw.Canvas { return p.DataCanvas(area) }, obstacles)
	inner := p.DataCanvas(area)
	toX := func(t float64) float64 { return t }
	addFixed(p, frame{celsiusTicks(p, inner.Max.X-inner.Min.X, toX, xLow, xHigh), "*t*/°C"})
	return leg.complete(onePanel("activation-energy", head, p, area, h), place, found), nil
}
