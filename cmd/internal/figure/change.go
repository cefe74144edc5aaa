package figure

import (
	"fmt"
	"image/color"
	"math"
	"strings"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"onebarrier/diagnostics"
)

// narrowBar is the width in points below which bars are not parted by lines.
const narrowBar = 3

// histogram draws bars between edges.
type histogram struct {
	edges  []float64
	counts []int
}

var (
	barFill = color.NRGBA{R: 0x56, G: 0xB4, B: 0xE9, A: 110}
	barEdge = draw.LineStyle{Color: blue, Width: vg.Points(0.4)}
)

// Plot implements plot.Plotter.
func (h histogram) Plot(c draw.Canvas, p *plot.Plot) {
	trX, trY := p.Transforms(&c)
	outline := []vg.Point{{X: trX(h.edges[0]), Y: c.Min.Y}}
	for i, n := range h.counts {
		l, r, top := trX(h.edges[i]), trX(h.edges[i+1]), trY(float64(n))
		c.FillPolygon(barFill, []vg.Point{{X: l, Y: c.Min.Y}, {X: l, Y: top}, {X: r, Y: top}, {X: r, Y: c.Min.Y}})
		if r-l >= narrowBar {
			c.StrokeLine2(barEdge, r, c.Min.Y, r, top)
		}
		outline = append(outline, vg.Point{X: l, Y: top}, vg.Point{X: r, Y: top})
	}
	outline = append(outline, vg.Point{X: trX(h.edges[len(h.counts)]), Y: c.Min.Y})
	c.StrokeLines(barEdge, outline)
}

// bracket draws an interval as a horizontal line with its estimate; an end at
// infinity is an arrow at the edge.
type bracket struct{ low, high, estimate, y float64 }

var bracketLine = draw.LineStyle{Color: vermillion, Width: vg.Points(1.4)}

// Plot implements plot.Plotter.
func (b bracket) Plot(c draw.Canvas, p *plot.Plot) {
	trX, trY := p.Transforms(&c)
	y := trY(b.y)
	ends := [2]vg.Length{c.Min.X, c.Max.X}
	for i, v := range []float64{b.low, b.high} {
		if math.IsInf(v, 0) {
			continue
		}
		ends[i] = trX(v)
		c.StrokeLine2(bracketLine, ends[i], y-3, ends[i], y+3)
	}
	c.StrokeLine2(bracketLine, ends[0], y, ends[1], y)
	for i, v := range []float64{b.low, b.high} {
		if math.IsInf(v, 0) {
			dir := vg.Length(2*i - 1)
			c.FillPolygon(vermillion, []vg.Point{{X: ends[i], Y: y}, {X: ends[i] - dir*6, Y: y + 3}, {X: ends[i] - dir*6, Y: y - 3}})
		}
	}
	if !math.IsNaN(b.estimate) {
		c.DrawGlyph(draw.GlyphStyle{Color: vermillion, Radius: 2.5, Shape: marker{fill: vermillion, edge: draw.LineStyle{Color: vermillion, Width: 0.5}}}, vg.Point{X: trX(b.estimate), Y: y})
	}
}

// Thumbnail implements plot.Thumbnailer.
func (bracket) Thumbnail(c *draw.Canvas) {
	m := c.Center()
	c.StrokeLine2(bracketLine, c.Min.X, m.Y, c.Max.X, m.Y)
	for _, x := range []vg.Length{c.Min.X, c.Max.X} {
		c.StrokeLine2(bracketLine, x, m.Y-2.5, x, m.Y+2.5)
	}
	c.DrawGlyphNoClip(draw.GlyphStyle{Color: vermillion, Radius: 2, Shape: draw.CircleGlyph{}}, m)
}

// drawChange lays out the bootstrap distribution of ΔE.
func drawChange(a *diagnostics.Assessment, d *Change) (picture, error) {
	xs := emptySpan()
	xs.add(d.Edges...)
	xs.add(0, d.Estimate)
	core := xs
	xs.addWithin(core, 2*core.width(), finiteOnly(d.Lower, d.Upper)...)
	if d.Tolerance > 0 {
		xs.addWithin(core, core.width(), -d.Tolerance, d.Tolerance)
	}
	most := 0
	for _, n := range d.Counts {
		most = max(most, n)
	}
	xLow, xHigh := xs.padded(0.03, 1e-9)
	barsTop := float64(most)
	guideTop := barsTop * 1.16
	p := newPlot(xLow, xHigh, 0, barsTop*1.2, d.scale.label("Δ*E*"), "resamples")
	p.Y.Tick.Marker = whole{linear{5}}

	var leg legend
	addFixed(p, histogram{d.Edges, d.Counts})
	var obstacles []obstacle
	for i, n := range d.Counts {
		for _, x := range []float64{d.Edges[i], (d.Edges[i] + d.Edges[i+1]) / 2, d.Edges[i+1]} {
			obstacles = append(obstacles, obstacle{x, 0, float64(n)})
		}
	}
	if d.Tolerance > 0 {
		sty := draw.LineStyle{Color: grey, Width: vg.Points(0.9), Dashes: []vg.Length{1.2, 1.8}}
		low, high := rule{-d.Tolerance, math.NaN(), sty, guideTop}, rule{d.Tolerance, math.NaN(), sty, guideTop}
		addFixed(p, low, high)
		obstacles = append(obstacles, obstacle{-d.Tolerance, 0, guideTop}, obstacle{d.Tolerance, 0, guideTop})
		leg.entry(fmt.Sprintf("tolerance ±%s %s", number(d.Tolerance, decimalsFor(d.Tolerance)), d.scale.unit), low)
	}
	zero := rule{0, math.NaN(), draw.LineStyle{Color: ink, Width: vg.Points(0.9), Dashes: []vg.Length{4, 2}}, guideTop}
	addFixed(p, zero)
	leg.entry("no change", zero)
	obstacles = append(obstacles, obstacle{0, 0, guideTop})
	if !math.IsNaN(d.Lower) && !math.IsNaN(d.Upper) {
		b := bracket{d.Lower, d.Upper, d.Estimate, barsTop * 1.09}
		addFixed(p, b)
		name := "reported " + percent(d.Confidence) + " interval"
		if d.Told != "" {
			name = percent(d.Confidence) + " interval of the test's curve"
		}
		leg.entry(name, b)
		for i := range samples {
			f := float64(i) / (samples - 1)
			lo, hi := math.Max(d.Lower, xLow), math.Min(d.Upper, xHigh)
			obstacles = append(obstacles, obstacle{(1-f)*lo + f*hi, b.y, b.y})
		}
	}
	if d.Beyond > 0 {
		leg.entry(fmt.Sprintf("beyond the axis: %d", d.Beyond))
	}

	words := "Bootstrap of the change of *E*"
	detail := []string{fmt.Sprintf("%d resamples", d.Resamples)}
	if d.Scheme != "" {
		detail[0] = fmt.Sprintf("%d %s resamples", d.Resamples, d.Scheme)
	}
	if d.Generator != "" {
		detail[0] += " of " + d.Generator
	}
	if n := name(a); n != "" {
		detail = append([]string{n}, detail...)
	}
	head := newHeader(words, strings.Join(detail, "; "))
	const panel = 165
	h := head.height() + headGap + panel + 2*margin
	page := draw.Canvas{Rectangle: vg.Rectangle{Max: vg.Point{X: pageWidth, Y: h}}}
	area := draw.Crop(page, margin, -margin-3, margin, -(margin + head.height() + headGap))
	place, found := leg.place(p, func() draw.Canvas { return p.DataCanvas(area) }, obstacles)
	addFixed(p, frame{})
	return leg.complete(onePanel("change-of-e", head, p, area, h), place, found), nil
}

// whole keeps an axis of counts to whole numbers.
type whole struct{ linear }

// Ticks implements plot.Ticker.
func (w whole) Ticks(low, high float64) []plot.Tick {
	if high-low < float64(w.most) {
		w.most = max(1, int(high-low))
	}
	ts := w.linear.Ticks(low, high)
	kept := ts[:0]
	for _, t := range ts {
		if t.Value == math.Trunc(t.Value) {
			kept = append(kept, t)
		}
	}
	return kept
}

// finiteOnly drops what is unknown or infinite.
func finiteOnly(vs ...float64) []float64 {
	var out []float64
	for _, v := range vs {
		if !math.IsNaN(v) && !math.IsInf(v, 0) {
			out = append(out, v)
		}
	}
	return out
}
