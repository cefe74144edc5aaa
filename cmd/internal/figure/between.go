package figure

import (
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"onebarrier/diagnostics"
)

// mostBetween is the number of local energies beyond which their bars would hide the
// curves: they scatter the more the closer the temperatures lie.
const mostBetween = 120

// between takes E between neighbouring temperatures into the energy unit of sc.
func between(a *diagnostics.Assessment, sc scale) []Point {
	if len(a.LocalEnergies) > mostBetween {
		return nil
	}
	var ps []Point
	for _, l := range a.LocalEnergies {
		e := l.E.Times(sc.perKJ)
		if !e.Value.Known() || !l.T.Known() {
			continue
		}
		p := Point{T: float64(l.T), X: float64(l.T), Y: float64(e.Value), Low: math.NaN(), High: math.NaN(), Used: true}
		if e.StdError.Known() {
			p.Low, p.High = float64(e.Value-e.StdError), float64(e.Value+e.StdError)
		}
		ps = append(ps, p)
	}
	return ps
}

// ofMeans reports whether some temperature was measured more than once, be it by several
// sources: its rate constants are averaged first.
func ofMeans(a *diagnostics.Assessment) bool {
	measured := 0
	for _, row := range a.Data {
		if row.Used && row.Limit == "" {
			measured++
		}
	}
	return measured > a.Dataset.Temperatures
}

// withBetween widens a range by the local energies and their bars, but not so far that
// the curves are flattened.
func (d *Energy) withBetween(ys, core span) span {
	points := core
	for _, p := range d.Between {
		points.addWithin(core, math.Max(2*core.width(), 0.5*math.Abs(core.high)), p.Y, p.Low, p.High)
	}
	ys.add(points.low, points.high)
	return ys
}

// betweenDots are the local energies: small and grey, since each is worth little.
type betweenDots []Point

var betweenGlyph = draw.GlyphStyle{Color: grey, Radius: 1.8, Shape: marker{fill: grey, edge: draw.LineStyle{Color: grey, Width: vg.Points(0.3)}}}

// Plot implements plot.Plotter.
func (b betweenDots) Plot(c draw.Canvas, p *plot.Plot) {
	trX, trY := p.Transforms(&c)
	bar := draw.LineStyle{Color: grey, Width: vg.Points(0.6)}
	within := func(y vg.Length) vg.Length { return max(c.Min.Y, min(c.Max.Y, y)) }
	for _, q := range b {
		if x := trX(q.X); q.Low < q.High {
			c.StrokeLine2(bar, x, within(trY(q.Low)), x, within(trY(q.High)))
		}
	}
	for _, q := range b {
		pt := vg.Point{X: trX(q.X), Y: trY(q.Y)}
		if c.Contains(pt) {
			c.DrawGlyph(betweenGlyph, pt)
			continue
		}
		up := pt.Y > c.Max.Y
		pt.Y = within(pt.Y)
		outside(&c, pt, up)
	}
}

// Thumbnail implements plot.Thumbnailer.
func (betweenDots) Thumbnail(c *draw.Canvas) {
	m := c.Center()
	c.StrokeLine2(draw.LineStyle{Color: grey, Width: vg.Points(0.6)}, m.X, c.Min.Y, m.X, c.Max.Y)
	c.DrawGlyphNoClip(betweenGlyph, m)
}

// addBetween draws the local energies, and says what a legend must not cover.
func (d *Energy) addBetween(p *plot.Plot, leg *legend) (obstacles []obstacle) {
	ps := d.Between
	if len(ps) == 0 {
		return nil
	}
	addFixed(p, betweenDots(ps))
	words := "between neighbours, ±*u*"
	if d.OfMeans {
		words = "between neighbouring means, ±*u*"
	}
	leg.entry(words, betweenDots(nil))
	leg.beyondEntry(beyond(ps, p.Y.Min, p.Y.Max, func(q Point) float64 { return q.Y }))
	for _, q := range ps {
		o := obstacle{q.X, math.Min(q.Y, p.Y.Max), math.Max(q.Y, p.Y.Min)} // outside: on the edge
		if q.Low < q.High {
			o.low, o.high = q.Low, q.High
		}
		obstacles = append(obstacles, o)
	}
	return obstacles
}
