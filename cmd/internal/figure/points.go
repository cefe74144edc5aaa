package figure

import (
	"fmt"
	"image/color"
	"math"
	"slices"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// dots draws points with their error bars, arrows at limits, and a small arrow at
// the edge for what lies outside the panel.
type dots struct {
	points []Point
	radius vg.Length
	// at gives the value and the ends of the bar in the units of the panel.
	at func(Point) (y, low, high float64)
}

// Plot implements plot.Plotter.
func (d dots) Plot(c draw.Canvas, p *plot.Plot) {
	trX, trY := p.Transforms(&c)
	bar := draw.LineStyle{Color: grey, Width: vg.Points(0.7)}
	within := func(y vg.Length) vg.Length { return max(c.Min.Y, min(c.Max.Y, y)) }
	for _, q := range d.points {
		if y, low, high := d.at(q); low < high && !math.IsNaN(y) {
			x, cap := trX(q.X), d.radius*0.8
			lo, hi := c.Min.Y, trY(high)
			if !math.IsInf(low, -1) {
				lo = trY(low)
			}
			c.StrokeLine2(bar, x, within(lo), x, within(hi))
			for _, end := range []vg.Length{lo, hi} {
				if c.ContainsY(end) && end != c.Min.Y {
					c.StrokeLine2(bar, x-cap, end, x+cap, end)
				}
			}
		}
	}
	for _, q := range d.points {
		v, _, _ := d.at(q)
		if math.IsNaN(v) {
			continue
		}
		pt := vg.Point{X: trX(q.X), Y: trY(v)}
		sty := glyph(q.Source, q.measured(), d.radius)
		if !c.Contains(pt) {
			up := pt.Y > c.Max.Y
			pt.Y = within(pt.Y)
			if q.Limit != "" && c.ContainsX(pt.X) {
				d.limitOutside(&c, pt, sty, up, q.Limit == ">")
				continue
			}
			outside(&c, pt, up)
			continue
		}
		if q.Limit != "" {
			arrow(&c, pt, q.Limit == ">", 12)
		}
		c.DrawGlyph(sty, pt)
	}
}

// arrow points from a limit into the region that it allows, and does not leave the
// canvas.
func arrow(c *draw.Canvas, pt vg.Point, up bool, length vg.Length) {
	dir, room := vg.Length(-1), pt.Y-c.Min.Y
	if up {
		dir, room = 1, c.Max.Y-pt.Y
	}
	length = min(length, room)
	head := min(4, 0.45*length)
	line := draw.LineStyle{Color: ink, Width: vg.Points(0.8)}
	tip := vg.Point{X: pt.X, Y: pt.Y + dir*length}
	c.StrokeLine2(line, pt.X, pt.Y, tip.X, tip.Y-dir*head/2)
	c.FillPolygon(ink, []vg.Point{tip, {X: tip.X - head/2, Y: tip.Y - dir*head}, {X: tip.X + head/2, Y: tip.Y - dir*head}})
}

// limitOutside marks a limit beyond the panel on its edge by its own arrow, which points
// into what the limit allows, never by the triangle of a measured point: that would read
// as the opposite where both differ.
func (d dots) limitOutside(c *draw.Canvas, pt vg.Point, sty draw.GlyphStyle, above, allowsUp bool) {
	const length = 12
	inward := vg.Length(1) // from the edge to the panel
	if above {
		inward = -1
	}
	pt.Y += inward * d.radius
	if above == allowsUp { // the arrow needs room to point out of the panel
		pt.Y += inward * (length - d.radius)
	}
	arrow(c, pt, allowsUp, length)
	c.DrawGlyph(sty, pt)
}

// outside marks a point beyond the panel by a small open triangle on its edge.
func outside(c *draw.Canvas, pt vg.Point, up bool) {
	dir := vg.Length(-1)
	if up {
		dir = 1
	}
	tri := []vg.Point{{X: pt.X, Y: pt.Y - dir}, {X: pt.X - 2.2, Y: pt.Y - dir*5}, {X: pt.X + 2.2, Y: pt.Y - dir*5}, {X: pt.X, Y: pt.Y - dir}}
	c.FillPolygon(color.White, tri)
	c.StrokeLines(draw.LineStyle{Color: grey, Width: vg.Points(0.8)}, tri)
}

// addPoints draws points and means in both panels.
func addPoints(upper, lower *plot.Plot, d *Arrhenius, factor float64) {
	r := radius(len(d.Points))
	addFixed(upper, dots{d.Points, r, func(p Point) (float64, float64, float64) { return p.Y, p.Low, p.High }})
	addFixed(lower, dots{d.Points, r, func(p Point) (float64, float64, float64) {
		return p.Residual * factor, p.ResidualLow * factor, p.ResidualTop * factor
	}})
	if len(d.Means) > 0 {
		addFixed(upper, dashes{d.Means, func(m Mean) float64 { return m.Y }})
		addFixed(lower, dashes{d.Means, func(m Mean) float64 { return m.Residual * factor }})
	}
}

// dashes draws means as short horizontal strokes.
type dashes struct {
	means []Mean
	at    func(Mean) float64
}

// Plot implements plot.Plotter.
func (d dashes) Plot(c draw.Canvas, p *plot.Plot) {
	trX, trY := p.Transforms(&c)
	for _, m := range d.means {
		if v := d.at(m); !math.IsNaN(v) {
			pt := vg.Point{X: trX(m.X), Y: trY(v)}
			if c.Contains(pt) {
				stroke(&c, pt)
			}
		}
	}
}

func stroke(c *draw.Canvas, pt vg.Point) {
	c.StrokeLine2(draw.LineStyle{Color: ink, Width: vg.Points(1)}, pt.X-5, pt.Y, pt.X+5, pt.Y)
}

// thumb is a thumbnail drawn by a function of the middle of its place.
type thumb func(*draw.Canvas, vg.Point)

// Thumbnail implements plot.Thumbnailer.
func (t thumb) Thumbnail(c *draw.Canvas) { t(c, c.Center()) }

// mostSources is the number of sources that a legend names.
const mostSources = 7

// pointEntries adds what the markers mean.
func pointEntries(leg *legend, d *Arrhenius) {
	r := radius(min(len(d.Points), 80))
	if len(d.Sources) > 1 {
		for i, s := range d.Sources {
			if i == mostSources {
				leg.entry(fmt.Sprintf("and %d more sources", len(d.Sources)-i))
				break
			}
			if s == "" {
				s = "no source given"
			}
			leg.entry(plain(shortened(s, 24)), spot{glyph(i, d.sourceUsed(i), r)})
		}
	}
	leftOut, limits := false, false
	for _, p := range d.Points {
		leftOut = leftOut || !p.Used && p.Limit == ""
		limits = limits || p.Limit != ""
	}
	if leftOut {
		leg.entry("left out", spot{glyph(0, false, r)})
	}
	if limits {
		leg.entry("limit", thumb(limitThumb))
	}
	if len(d.Means) > 0 {
		words := "mean at one temperature"
		if d.Offsets {
			words = "mean, offset removed"
		}
		leg.entry(words, thumb(stroke))
	}
	if d.OfRepeats {
		leg.entry("points are means of *n* repeats")
	}
	if d.Offsets {
		leg.entry("curves: mean over the sources")
	}
	leg.bandEntry(d.Lines, d.Confidence)
	if d.NotShown > 0 {
		leg.entry(fmt.Sprintf("not shown, without ln *k*: %d", d.NotShown))
	}
}

// limitThumb is a limit in a row of a legend: with what parts the rows it takes up, it
// does not reach the next.
func limitThumb(c *draw.Canvas, pt vg.Point) {
	const more, small = legendPadding / 3, 1.7
	row := *c
	row.Min.Y, row.Max.Y = c.Min.Y-more, c.Max.Y+more
	pt.Y = row.Max.Y - small
	arrow(&row, pt, false, row.Max.Y-row.Min.Y)
	row.DrawGlyphNoClip(glyph(0, false, small), pt)
}

// beyondEntry says what the small triangles on the edge mean, where there are any.
func (l *legend) beyondEntry(some bool) {
	if some {
		l.entry("beyond the axis", thumb(func(c *draw.Canvas, pt vg.Point) { outside(c, vg.Point{X: pt.X, Y: pt.Y + 2.5}, true) }))
	}
}

// beyond reports whether a measured point that is drawn lies outside a range: a limit keeps
// its arrow there.
func beyond(points []Point, low, high float64, at func(Point) float64) bool {
	return slices.ContainsFunc(points, func(p Point) bool { return p.Limit == "" && (at(p) < low || at(p) > high) })
}

// sourceUsed reports whether a source has a point that took part: else its marker
// stands nowhere but hollow.
func (d *Arrhenius) sourceUsed(source int) bool {
	for _, p := range d.Points {
		if p.Source == source && p.measured() {
			return true
		}
	}
	return false
}

// shortened cuts a text to so many characters.
func shortened(s string, most int) string {
	if rs := []rune(s); len(rs) > most {
		return string(rs[:most-1]) + "…"
	}
	return s
}
