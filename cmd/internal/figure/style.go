package figure

import (
	"fmt"
	"image/color"
	"math"
	"slices"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"onebarrier/models"
)

// Sizes in points. At 10.5 cm a figure is read on a screen as it is, and set to
// the 8.5 cm of a journal column its smallest text is 6.5 pt.
const (
	pageWidth  = 298
	margin     = 5
	labelSize  = 8.5
	tickSize   = 8
	legendSize = 7.5
	// legendPadding parts the rows of a legend.
	legendPadding = 2.5
	tickLength    = 3.5
)

// The palette of Okabe and Ito.
var (
	ink        = color.RGBA{A: 255}
	grey       = color.RGBA{R: 110, G: 110, B: 110, A: 255}
	orange     = color.RGBA{R: 0xE6, G: 0x9F, B: 0x00, A: 255}
	skyBlue    = color.RGBA{R: 0x56, G: 0xB4, B: 0xE9, A: 255}
	blueGreen  = color.RGBA{R: 0x00, G: 0x9E, B: 0x73, A: 255}
	blue       = color.RGBA{R: 0x00, G: 0x72, B: 0xB2, A: 255}
	vermillion = color.RGBA{R: 0xD5, G: 0x5E, B: 0x00, A: 255}
	purple     = color.RGBA{R: 0xCC, G: 0x79, B: 0xA7, A: 255}
)

// curveStyles holds a colour and a dash pattern for each curve in the order of the
// catalogue: a curve looks the same in every figure. Later curves start again.
var curveStyles = []struct {
	color  color.RGBA
	dashes []vg.Length
}{
	{blue, nil},                             // straight
	{purple, []vg.Length{1.2, 1.8}},         // root-prefactor
	{orange, []vg.Length{8, 2, 1.2, 2}},     // linear-prefactor
	{vermillion, []vg.Length{5, 2.2}},       // power-prefactor
	{blueGreen, []vg.Length{6, 2, 1.2, 2}},  // parallel
	{skyBlue, []vg.Length{3, 1.5}},          // and those that follow
	{ink, []vg.Length{6, 2, 1, 2, 1, 2, 1}}, //
}

// lineStyle of a curve; the recommended one is drawn heavier.
func lineStyle(l Line) draw.LineStyle {
	i := slices.IndexFunc(models.All(), func(c models.Curve) bool { return c.Info().Name == l.Curve })
	s := curveStyles[max(i, 0)%len(curveStyles)]
	width := vg.Points(1)
	if l.Recommended {
		width = vg.Points(1.7)
	}
	return draw.LineStyle{Color: s.color, Width: width, Dashes: s.dashes}
}

// bandColor is the tint of a band: the curve's colour, fainter where the curve is
// not the recommended one.
func bandColor(l Line) color.Color {
	c := lineStyle(l).Color.(color.RGBA)
	a := uint8(26)
	if l.Recommended {
		a = 56
	}
	return color.NRGBA{R: c.R, G: c.G, B: c.B, A: a}
}

// marker is a regular polygon, or a circle with no corners.
type marker struct {
	corners int
	turned  float64 // radians from a corner on top
	fill    color.Color
	edge    draw.LineStyle
}

var _ draw.GlyphDrawer = marker{}

// DrawGlyph implements draw.GlyphDrawer.
func (m marker) DrawGlyph(c *draw.Canvas, sty draw.GlyphStyle, pt vg.Point) {
	var p vg.Path
	if m.corners == 0 {
		p.Move(vg.Point{X: pt.X + sty.Radius, Y: pt.Y})
		p.Arc(pt, sty.Radius, 0, 2*math.Pi)
	} else {
		// The same area as the circle.
		n := float64(m.corners)
		r := float64(sty.Radius) * math.Sqrt(2*math.Pi/(n*math.Sin(2*math.Pi/n)))
		for i := range m.corners {
			sin, cos := math.Sincos(m.turned + math.Pi/2 + 2*math.Pi*float64(i)/n)
			q := vg.Point{X: pt.X + vg.Length(r*cos), Y: pt.Y + vg.Length(r*sin)}
			if i == 0 {
				p.Move(q)
			} else {
				p.Line(q)
			}
		}
	}
	p.Close()
	c.SetColor(m.fill)
	c.Fill(p)
	c.SetLineStyle(m.edge)
	c.Stroke(p)
}

// sourceMarkers tell sources apart by shape first, by colour second.
var sourceMarkers = []marker{
	{0, 0, ink, draw.LineStyle{}},
	{4, math.Pi / 4, skyBlue, draw.LineStyle{}},
	{3, 0, orange, draw.LineStyle{}},
	{4, 0, blueGreen, draw.LineStyle{}},
	{3, math.Pi, purple, draw.LineStyle{}},
	{5, 0, vermillion, draw.LineStyle{}},
	{6, 0, blue, draw.LineStyle{}},
}

// glyph is the marker of a source; hollow where a point was left out.
func glyph(source int, used bool, radius vg.Length) draw.GlyphStyle {
	m := sourceMarkers[source%len(sourceMarkers)]
	m.edge = draw.LineStyle{Color: ink, Width: vg.Points(0.5)}
	if !used {
		m.fill = color.White
		m.edge = draw.LineStyle{Color: grey, Width: vg.Points(0.8)}
	}
	return draw.GlyphStyle{Color: ink, Radius: radius, Shape: m}
}

// radius of markers, smaller where there are many.
func radius(points int) vg.Length {
	switch {
	case points <= 25:
		return 2.5
	case points <= 80:
		return 2
	}
	return 1.4
}

// newPlot returns an empty plot in the style of all figures. A range is given, not
// found, so that panels line up.
func newPlot(xLow, xHigh, yLow, yHigh float64, xLabel, yLabel string) *plot.Plot {
	p := plot.New()
	p.TextHandler = handler()
	p.BackgroundColor = nil
	p.X.Min, p.X.Max, p.Y.Min, p.Y.Max = xLow, xHigh, yLow, yHigh
	p.X.Label.Text, p.Y.Label.Text = xLabel, yLabel
	p.X.Tick.Marker, p.Y.Tick.Marker = linear{8}, linear{7}
	for _, a := range []*plot.Axis{&p.X, &p.Y} {
		a.Padding = 0
		a.LineStyle.Width = 0 // the frame is drawn on top of the data
		a.Tick.Length = tickLength
		a.Tick.LineStyle.Width = vg.Points(0.6)
		a.Label.Padding = 2
		a.Label.TextStyle = aligned(style(labelSize), draw.XCenter, a.Label.TextStyle.YAlign)
		a.Tick.Label = aligned(style(tickSize), a.Tick.Label.XAlign, a.Tick.Label.YAlign)
	}
	return p
}

func aligned(s text.Style, x text.XAlignment, y text.YAlignment) text.Style {
	s.XAlign, s.YAlign = x, y
	return s
}

// frame closes a panel on all sides and draws a second scale along its top.
type frame struct {
	top   []plot.Tick // in the units of X; no labels on inner panels
	label string
}

// topHeight is the room above a panel for labels and title of a second scale.
func topHeight() vg.Length {
	return tickLength + 2 + style(tickSize).Height("0") + 1 + style(labelSize).Height("0")
}

// Plot implements plot.Plotter.
func (f frame) Plot(c draw.Canvas, p *plot.Plot) {
	line := draw.LineStyle{Color: ink, Width: vg.Points(0.6)}
	c.StrokeLines(line, []vg.Point{
		c.Min, {X: c.Max.X, Y: c.Min.Y}, c.Max, {X: c.Min.X, Y: c.Max.Y}, c.Min,
	})
	trX, _ := p.Transforms(&c)
	sty := aligned(style(tickSize), draw.XCenter, draw.YBottom)
	y := c.Max.Y + tickLength + 2 + sty.FontExtents().Descent
	for _, t := range f.top {
		x := trX(t.Value)
		c.StrokeLine2(line, x, c.Max.Y, x, c.Max.Y+tickLength)
		c.FillText(sty, vg.Point{X: x, Y: y}, t.Label)
	}
	if f.label != "" {
		sty := aligned(style(labelSize), draw.XCenter, draw.YBottom)
		c.FillText(sty, vg.Point{X: c.Center().X, Y: y + style(tickSize).Height("0") + 1}, f.label)
	}
}

// celsiusTicks finds the second scale of a panel of the given width whose X is
// toX(T).
func celsiusTicks(p *plot.Plot, width vg.Length, toX func(kelvin float64) float64, low, high float64) []plot.Tick {
	sty := style(tickSize)
	at := func(kelvin float64) float64 { return float64(width) * p.X.Norm(toX(kelvin)) }
	room := func(label string) float64 { return float64(sty.Width(label)) + 9 }
	ticks := celsius(low, high, at, room)
	for i := range ticks {
		ticks[i].Value = toX(ticks[i].Value)
	}
	return ticks
}

// rule is a straight mark across a panel: vertical at X, or horizontal at Y.
type rule struct {
	x, y  float64 // NaN: the one that is not used
	style draw.LineStyle
	top   float64 // where a vertical one ends; 0: at the top of the panel
}

// Plot implements plot.Plotter.
func (r rule) Plot(c draw.Canvas, p *plot.Plot) {
	trX, trY := p.Transforms(&c)
	if x := trX(r.x); c.ContainsX(x) {
		top := c.Max.Y
		if r.top != 0 {
			top = min(top, trY(r.top))
		}
		c.StrokeLine2(r.style, x, c.Min.Y, x, top)
	}
	if y := trY(r.y); c.ContainsY(y) {
		c.StrokeLine2(r.style, c.Min.X, y, c.Max.X, y)
	}
}

// Thumbnail implements plot.Thumbnailer.
func (r rule) Thumbnail(c *draw.Canvas) {
	y := c.Center().Y
	c.StrokeLine2(r.style, c.Min.X, y, c.Max.X, y)
}

// swatch is the thumbnail of a band.
type swatch struct{ color color.Color }

// Thumbnail implements plot.Thumbnailer.
func (s swatch) Thumbnail(c *draw.Canvas) {
	c.FillPolygon(s.color, []vg.Point{c.Min, {X: c.Max.X, Y: c.Min.Y}, c.Max, {X: c.Min.X, Y: c.Max.Y}})
}

// spot is the thumbnail of a marker.
type spot struct{ draw.GlyphStyle }

// Thumbnail implements plot.Thumbnailer.
func (s spot) Thumbnail(c *draw.Canvas) { c.DrawGlyphNoClip(s.GlyphStyle, c.Center()) }

// legend keeps its entries until a place is found for them.
type legend []legendEntry

type legendEntry struct {
	words  string
	thumbs []plot.Thumbnailer
}

// entry adds words behind their thumbnails.
func (l *legend) entry(words string, thumbs ...plot.Thumbnailer) {
	*l = append(*l, legendEntry{words, thumbs})
}

// column sets the entries one under the other.
func (l legend) column() *plot.Legend {
	c := plot.NewLegend()
	c.TextStyle = style(legendSize)
	c.Left, c.Top = true, true
	c.ThumbnailWidth = 20
	c.Padding = legendPadding
	for _, e := range l {
		c.Add(" "+e.words, e.thumbs...)
	}
	return &c
}

// size of the legend in one column.
func (l legend) size() vg.Point {
	c := l.column()
	size := c.Rectangle(draw.Canvas{}).Size()
	size.Y += c.TextStyle.FontExtents().Descent
	return size
}

// bandEntry explains the tint of the bands, if there are any.
func (l *legend) bandEntry(lines []Line, confidence float64) {
	if slices.ContainsFunc(lines, func(l Line) bool { return l.Lower != nil }) {
		l.entry(percent(confidence)+" confidence band", swatch{color.NRGBA{R: 110, G: 110, B: 110, A: 56}})
	}
}

// percent writes a level such as 95 %.
func percent(level float64) string { return fmt.Sprintf("%g %%", math.Round(1000*level)/10) }

// obstacle is a vertical stretch at one x that a legend must not cover, in the
// units of the axes.
type obstacle struct{ x, low, high float64 }

// clearance is what a legend keeps from data and frame.
const clearance = 5

// mostGrowth is the number of times that place makes 6 % of room at the top.
const mostGrowth = 6

// place finds a corner of the panel where the legend covers nothing; where there
// is none it makes some room at the top. ok is false if that does not help. Guide
// lines may pass behind a legend.
func (l legend) place(p *plot.Plot, area func() draw.Canvas, obstacles []obstacle) (r vg.Rectangle, ok bool) {
	size := l.size()
	low, high := p.Y.Min, p.Y.Max
	for range mostGrowth {
		c := area()
		trX, trY := p.Transforms(&c)
		for _, corner := range [][2]bool{{false, true}, {true, true}, {true, false}, {false, false}} {
			left, top := corner[0], corner[1]
			r = vg.Rectangle{Min: vg.Point{X: c.Max.X - clearance - size.X, Y: c.Min.Y + clearance}}
			if left {
				r.Min.X = c.Min.X + clearance
			}
			if top {
				r.Min.Y = c.Max.Y - clearance - size.Y
			}
			r.Max = r.Min.Add(size)
			covers := func(o obstacle) bool {
				x, lo, hi := trX(o.x), trY(o.low), trY(o.high)
				return x >= r.Min.X-clearance && x <= r.Max.X+clearance && hi >= r.Min.Y-clearance && lo <= r.Max.Y+clearance
			}
			if r.Min.X >= c.Min.X && r.Min.Y >= c.Min.Y && !slices.ContainsFunc(obstacles, covers) {
				return r, true
			}
		}
		p.Y.Max += 0.06 * (p.Y.Max - p.Y.Min)
	}
	p.Y.Min, p.Y.Max = low, high
	return vg.Rectangle{}, false
}

// complete adds the legend to a picture: at r if a place was found, else in two
// columns under it, on a page made longer.
func (l legend) complete(p picture, r vg.Rectangle, found bool) picture {
	picture := p.draw
	p.legend = l
	if found {
		p.draw = func(c draw.Canvas) {
			picture(c)
			c.SetColor(color.White)
			c.Fill(r.Path())
			l.column().Draw(draw.Canvas{Canvas: c.Canvas, Rectangle: r})
		}
		return p
	}
	half := (len(l) + 1) / 2
	foot := legend(l[:half]).size().Y + margin
	inner := vg.Rectangle{Max: vg.Point{X: p.width, Y: p.height}}
	p.height += foot
	p.draw = func(c draw.Canvas) {
		fillPage(c)
		c.Push()
		c.Translate(vg.Point{Y: foot})
		picture(draw.Canvas{Canvas: c.Canvas, Rectangle: inner})
		c.Pop()
		for i, part := range []legend{l[:half], l[half:]} {
			x := margin + vg.Length(i)*(p.width-margin)/2
			part.column().Draw(draw.Canvas{Canvas: c.Canvas, Rectangle: vg.Rectangle{
				Min: vg.Point{X: x}, Max: vg.Point{X: p.width, Y: foot},
			}})
		}
	}
	return p
}

// span is a range that grows by what it is shown.
type span struct{ low, high float64 }

func emptySpan() span { return span{math.Inf(1), math.Inf(-1)} }

// add widens the range; unknown and infinite numbers do not take part.
func (s *span) add(vs ...float64) {
	for _, v := range vs {
		if !math.IsNaN(v) && !math.IsInf(v, 0) {
			s.low, s.high = math.Min(s.low, v), math.Max(s.high, v)
		}
	}
}

// width of the range, 0 when empty.
func (s span) width() float64 { return math.Max(0, s.high-s.low) }

// addWithin widens the range by values, but by no more than reach on either side
// of what it held in the core: a wide band must not flatten what lies in it.
func (s *span) addWithin(core span, reach float64, vs ...float64) {
	for _, v := range vs {
		if !math.IsNaN(v) {
			s.add(math.Max(core.low-reach, math.Min(core.high+reach, v)))
		}
	}
}

// padded leaves a margin on both sides, and gives a range of nothing a width.
func (s span) padded(fraction, least float64) (low, high float64) {
	if !(s.high >= s.low) {
		return -least, least
	}
	mid, half := (s.low+s.high)/2, (s.high-s.low)/2*(1+2*fraction)
	half = math.Max(half, least)
	return mid - half, mid + half
}

// addBand draws the band of a curve, if it is known.
func addBand(p *plot.Plot, l Line) error {
	if l.Lower == nil {
		return nil
	}
	return addArea(p, l.X, l.Lower, l.Upper, bandColor(l))
}

// addArea fills what lies between lower and upper.
func addArea(p *plot.Plot, x, lower, upper []float64, c color.Color) error {
	ring := make(plotter.XYs, 0, 2*len(x))
	for i := range x {
		ring = append(ring, plotter.XY{X: x[i], Y: upper[i]})
	}
	for i := len(x) - 1; i >= 0; i-- {
		ring = append(ring, plotter.XY{X: x[i], Y: lower[i]})
	}
	area, err := plotter.NewPolygon(ring)
	if err != nil {
		return err
	}
	area.Color, area.LineStyle.Width = c, 0
	addFixed(p, area)
	return nil
}

// addLine draws a curve and returns it for the legend.
func addLine(p *plot.Plot, l Line) (*plotter.Line, error) {
	xys := make(plotter.XYs, len(l.X))
	for i := range xys {
		xys[i] = plotter.XY{X: l.X[i], Y: l.Y[i]}
	}
	line, err := plotter.NewLine(xys)
	if err != nil {
		return nil, err
	}
	line.LineStyle = lineStyle(l)
	addFixed(p, line)
	return line, nil
}

// addCurves draws curves over all their bands and enters them in the legend.
func addCurves(p *plot.Plot, leg *legend, lines []Line) error {
	for _, l := range lines {
		if err := addBand(p, l); err != nil {
			return err
		}
	}
	for _, l := range lines {
		line, err := addLine(p, l)
		if err != nil {
			return err
		}
		words := l.Curve
		if l.Recommended {
			words += " (recommended)"
		}
		thumbs := []plot.Thumbnailer{line}
		if l.Lower != nil {
			thumbs = []plot.Thumbnailer{swatch{bandColor(l)}, line}
		}
		leg.entry(words, thumbs...)
	}
	return nil
}

// obstacles of a curve with its band.
func (l Line) obstacles() []obstacle {
	os := make([]obstacle, len(l.X))
	for i, x := range l.X {
		os[i] = obstacle{x, l.Y[i], l.Y[i]}
		if l.Lower != nil {
			os[i].low, os[i].high = l.Lower[i], l.Upper[i]
		}
	}
	return os
}

// addFixed adds plotters without letting them move the axes.
func addFixed(p *plot.Plot, ps ...plot.Plotter) {
	x, y := [2]float64{p.X.Min, p.X.Max}, [2]float64{p.Y.Min, p.Y.Max}
	p.Add(ps...)
	p.X.Min, p.X.Max, p.Y.Min, p.Y.Max = x[0], x[1], y[0], y[1]
}
