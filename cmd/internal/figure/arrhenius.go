package figure

import (
	"fmt"
	"image/color"
	"math"
	"strings"

	"golang.org/x/image/font"
	"gonum.org/v1/plot"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"onebarrier/diagnostics"
)

// yLabel is ln(k/s⁻¹) in markup.
func yLabel(q diagnostics.Quantity, log string) string {
	symbol := q.Symbol
	if symbol == "" {
		symbol = "k"
	}
	k, unit := symbolMarkup(symbol), unitMarkup(q.Unit)
	if unit == "" {
		return log + " " + k
	}
	open, end := "(", ")"
	if strings.Contains(symbol, "/") {
		k, open, end = "("+k+")", "[", "]"
	}
	if strings.ContainsAny(q.Unit, " /") {
		unit, open, end = "("+unit+")", "[", "]"
	}
	return log + open + k + "/" + unit + end
}

// verdictWords is the verdict in a few words.
func verdictWords(a *diagnostics.Assessment) string {
	trend := ""
	switch a.Verdict.ETrend {
	case "rises":
		trend = "; *E* rises"
	case "falls":
		trend = "; *E* falls"
	}
	switch a.Verdict.State {
	case diagnostics.Untestable:
		return "Too few temperatures to test"
	case diagnostics.BeyondPrefactor:
		return "Curved: more than a usual prefactor gives" + trend
	case diagnostics.WithinPrefactor:
		return "Curved: a *T*-dependent prefactor explains it" + trend
	case diagnostics.CurvedOpen:
		return "Curved: cause open" + trend
	case diagnostics.StraightWithin:
		sc := scaleOf(a)
		if tol := sc.perKJ * float64(a.Curvature.ToleranceKJ); tol > 0 {
			return "Straight within ±" + number(tol, decimalsFor(tol)) + " " + sc.unit
		}
		return "Straight"
	case diagnostics.Unresolved:
		return "No curvature detected"
	}
	return ""
}

// decimalsFor shows two significant digits of a positive number.
func decimalsFor(v float64) int {
	return int(math.Max(0, 1-math.Floor(math.Log10(v))))
}

// header is the title of a figure: what it says in bold, then what it is of.
type header []line

// line is a text with its style.
type line struct {
	text.Style
	words string
}

// newHeader shortens the second line, which is not markup, to the width of a page.
func newHeader(first, second string) header {
	strong := aligned(style(labelSize+0.5), draw.XLeft, draw.YTop)
	strong.Font.Weight = font.WeightBold
	normal := aligned(style(labelSize), draw.XLeft, draw.YTop)
	words := plain(second)
	for rs := []rune(second); len(rs) > 0 && normal.Width(words) > pageWidth-2*margin; {
		rs = rs[:len(rs)-1]
		words = plain(string(rs)) + "…"
	}
	var h header
	for _, l := range []line{{strong, first}, {normal, words}} {
		if l.words != "" {
			h = append(h, l)
		}
	}
	return h
}

// height of all lines.
func (h header) height() (sum vg.Length) {
	for _, l := range h {
		sum += l.Height(l.words) + 1
	}
	return sum
}

// draw sets the lines from the top of the canvas.
func (h header) draw(c draw.Canvas) {
	y := c.Max.Y
	for _, l := range h {
		c.FillText(l.Style, vg.Point{X: c.Min.X, Y: y + l.FontExtents().Descent}, l.words)
		y -= l.Height(l.words) + 1
	}
}

// inWords is the header as plain text behind a lead.
func (h header) inWords(lead string) string {
	for _, l := range h {
		if lead != "" {
			lead += ". "
		}
		lead += unmarked(l.words)
	}
	return lead
}

// name of the data set for a title.
func name(a *diagnostics.Assessment) string {
	if a.Dataset.Name != "" {
		return a.Dataset.Name
	}
	return strings.Join(a.Dataset.Files, ", ")
}

// crowded is the number of points from which curves are drawn on top of them.
const crowded = 80

// Heights in points of the two panels of an Arrhenius plot with their axes, and of
// the gaps between them and under the title.
const (
	upperHeight = 185
	lowerHeight = 96
	gap         = 7
	headGap     = 5
)

// drawArrhenius lays out the Arrhenius plot over its residuals.
func drawArrhenius(a *diagnostics.Assessment, d *Arrhenius, opt Options) (picture, error) {
	xa, ya, err := opt.axes()
	if err != nil {
		return picture{}, err
	}
	xLow, xHigh, yLow, yHigh := d.ranges()
	upper := newPlot(xLow, xHigh, yLow, yHigh, "", yLabel(a.Dataset.Quantity, ya.name))
	upper.X.Tick.Marker = plot.ConstantTicks(nil)

	rLow, rHigh := d.residualRange()
	factor, rLabel := 1.0, "ln *k* − straight"
	if e := math.Floor(math.Log10(math.Max(-rLow, rHigh))); e < -2 {
		p := 3 * math.Ceil(-(e+1)/3)
		factor = math.Pow(10, p)
		rLabel = fmt.Sprintf("10^{%g} (%s)", p, rLabel)
	}
	lower := newPlot(xLow, xHigh, rLow*factor, rHigh*factor, xa.label, rLabel)
	lower.Y.Tick.Marker = linear{5}

	var leg legend
	if len(d.Points) > crowded {
		addPoints(upper, lower, d, factor)
	}
	if err := addCurves(upper, &leg, d.Lines); err != nil {
		return picture{}, err
	}
	if err := addDifferences(lower, d, factor); err != nil {
		return picture{}, err
	}
	if len(d.Points) <= crowded {
		addPoints(upper, lower, d, factor)
	}
	pointEntries(&leg, d)
	leg.beyondEntry(beyond(d.Points, rLow, rHigh, func(q Point) float64 { return q.Residual }))
	var obstacles []obstacle
	for _, l := range d.Lines {
		obstacles = append(obstacles, l.obstacles()...)
	}
	for _, p := range d.Points {
		o := obstacle{p.X, p.Y, p.Y}
		if p.Low < p.High {
			o.low, o.high = p.Low, p.High
		}
		obstacles = append(obstacles, o)
	}

	head := newHeader(verdictWords(a), name(a))
	top := margin + head.height() + headGap + topHeight()
	h := top + upperHeight + gap + lowerHeight + margin
	page := draw.Canvas{Rectangle: vg.Rectangle{Max: vg.Point{X: pageWidth, Y: h}}}
	areas := func() (up, low draw.Canvas) {
		up = draw.Crop(page, margin, -margin-3, margin+lowerHeight+gap, -top)
		low = draw.Crop(page, margin, -margin-3, margin, margin+lowerHeight-h)
		return align(upper, up, lower, low)
	}
	place, found := leg.place(upper, func() draw.Canvas { up, _ := areas(); return upper.DataCanvas(up) }, obstacles)
	up, low := areas()
	panel := upper.DataCanvas(up)
	tHigh := d.hottest()
	if xLow > 0 {
		tHigh = xa.scale / xLow
	}
	toX := func(t float64) float64 { return xa.scale / t }
	ticks := celsiusTicks(upper, panel.Max.X-panel.Min.X, toX, xa.scale/xHigh, tHigh)
	addFixed(upper, frame{ticks, "*t*/°C"})
	addFixed(lower, frame{})
	return leg.complete(picture{
		name: "arrhenius", width: pageWidth, height: h, title: head.inWords("Arrhenius plot"),
		draw: func(c draw.Canvas) {
			fillPage(c)
			head.draw(draw.Crop(c, margin, -margin, 0, -margin))
			up.Canvas, low.Canvas = c.Canvas, c.Canvas
			upper.Draw(up)
			lower.Draw(low)
		},
	}, place, found), nil
}

// hottest of the points, in K.
func (d *Arrhenius) hottest() (t float64) {
	for _, p := range d.Points {
		t = math.Max(t, p.T)
	}
	return t
}

// fillPage makes the background white.
func fillPage(c draw.Canvas) {
	c.SetColor(color.White)
	c.Fill(c.Rectangle.Path())
}

// ranges of the upper panel: all points and curves, and bars and bands as far as
// they do not flatten them.
func (d *Arrhenius) ranges() (xLow, xHigh, yLow, yHigh float64) {
	xs, ys := emptySpan(), emptySpan()
	margin := 0.05
	for _, p := range d.Points {
		xs.add(p.X)
		ys.add(p.Y)
		if p.Limit != "" {
			margin = 0.1 // room for its arrow
		}
	}
	for _, l := range d.Lines {
		ys.add(l.Y...)
	}
	core := ys
	for _, p := range d.Points {
		ys.addWithin(core, 0.5*core.width(), p.Low, p.High)
	}
	for _, l := range d.Lines {
		ys.addWithin(core, 0.5*core.width(), l.Lower...)
		ys.addWithin(core, 0.5*core.width(), l.Upper...)
	}
	xLow, xHigh = xs.padded(0.04, 1e-6*xs.low)
	yLow, yHigh = ys.padded(margin, 1e-3)
	return math.Max(0, xLow), xHigh, yLow, yHigh
}

// residualRange holds the residuals that were used and every curve; limits and what
// was left out may lie outside.
func (d *Arrhenius) residualRange() (low, high float64) {
	core := emptySpan()
	core.add(0)
	for _, p := range d.Points {
		if p.measured() {
			core.add(p.Residual)
		}
	}
	for _, l := range d.Differences {
		core.add(l.Y...)
	}
	rs := core
	for _, p := range d.Points {
		if p.measured() {
			rs.addWithin(core, core.width(), p.ResidualLow, p.ResidualTop)
		}
	}
	for _, l := range d.Differences {
		if l.Recommended {
			rs.addWithin(core, core.width(), l.Lower...)
			rs.addWithin(core, core.width(), l.Upper...)
		}
	}
	return rs.padded(0.08, 1e-9)
}

// addDifferences draws the curves of the lower panel, with the band of the
// recommended one.
func addDifferences(lower *plot.Plot, d *Arrhenius, factor float64) error {
	addFixed(lower, rule{x: math.NaN(), style: draw.LineStyle{Color: grey, Width: vg.Points(0.5)}})
	for _, l := range d.Differences {
		if l.Recommended {
			if err := addBand(lower, scaled(l, factor)); err != nil {
				return err
			}
		}
	}
	for _, l := range d.Differences {
		if _, err := addLine(lower, scaled(l, factor)); err != nil {
			return err
		}
	}
	return nil
}

// scaled multiplies a line for a panel whose axis carries a power of ten.
func scaled(l Line, factor float64) Line {
	return l.mapped(func(_ int, v float64) float64 { return v * factor })
}

// align crops two canvases so that their panels have the same left and right edge.
func align(p *plot.Plot, a draw.Canvas, q *plot.Plot, b draw.Canvas) (draw.Canvas, draw.Canvas) {
	x, y := p.DataCanvas(a), q.DataCanvas(b)
	left, right := max(x.Min.X, y.Min.X), min(x.Max.X, y.Max.X)
	a = draw.Crop(a, left-x.Min.X, right-x.Max.X, 0, 0)
	b = draw.Crop(b, left-y.Min.X, right-y.Max.X, 0, 0)
	return a, b
}
