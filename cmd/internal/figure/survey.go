package figure

import (
	"bytes"
	"cmp"
	"fmt"
	"image/color"
	"maps"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"onebarrier/diagnostics"
)

// SurveySet is what the overview of a survey shows of one data set. Unknown numbers
// are NaN.
type SurveySet struct {
	Name      string  // more than SurveyName characters are cut
	State     string  // the verdict; "" where the set could not be used
	ErrorCode string  // why it could not
	Change    float64 // of E over the measured range, kJ/mol
	Lower     float64 // its interval; one end alone known: the other is open
	Upper     float64
	P         float64 // of the test that E does not change
	Q, QBand  float64 // false discovery rates of: E changes; by more than a prefactor explains
}

// Bounds on what can be told apart on a page.
const (
	mostNames    = 40  // data sets with their names
	mostBars     = 240 // bars in a panel; of more data sets each bar stands for several
	surveyBins   = 20  // of the p-values
	mostReasons  = 24  // error codes with a bar of their own
	surveyPanel  = 230 // height in points of a panel of unnamed bars
	nameLine     = 11  // height of a named bar
	countLine    = 11.5
	histogramTop = 95
	mostChange   = 1e9 // kJ/mol: an axis that went further would show nothing
)

// SurveyName is the length in characters of a name that has room.
const SurveyName = 22

// SurveyBar is a bar of ΔE in kJ/mol: one data set, or several that follow each other
// in the order of ΔE. An open end is infinite.
type SurveyBar struct {
	Name  string
	State string // of several sets the most frequent
	// Change, Lower and Upper of the set, medians of several. Lower and Upper are NaN
	// where no interval is known.
	Change, Lower, Upper float64
	// Least and Most are the outermost ends of the intervals.
	Least, Most float64
}

// SurveyCount is a verdict, or a reason why sets could not be used, and how many have it.
type SurveyCount struct {
	What   string
	Sets   int
	Failed bool
}

// Survey is what the overview of a survey shows.
type Survey struct {
	Bars   []SurveyBar // ΔE rises
	PerBar int         // data sets to a bar; the last may stand for fewer
	// Drawn counts the sets with an estimate of ΔE, Sets all of them.
	Drawn, Sets int
	// Linear is the ΔE in kJ/mol up to which the axis is near to linear: twice the
	// median half-width of the intervals, to 1, 2 or 5 times a power of ten.
	Linear float64
	// Low and High are the ends of the axis. Beyond counts the data sets of which
	// some known end lies outside.
	Low, High float64
	Beyond    int
	// P counts the p-values in bins of 0.05; Testable is their sum.
	P        [surveyBins]int
	Testable int
	// Found and FoundBand count the data sets with Q and QBand of 0.05 or less.
	Found, FoundBand int
	// Incomplete: not all that was to be surveyed is there.
	Incomplete bool
	Counts     []SurveyCount // verdicts in their order, then reasons, the most frequent first
	// Confidence of the intervals, such as 0.95.
	Confidence float64
}

// NewSurvey collects the overview of data sets. The error says why there is nothing to
// draw.
func NewSurvey(sets []SurveySet, confidence float64) (*Survey, error) {
	if len(sets) == 0 {
		return nil, fmt.Errorf("figure: the survey holds no data set to draw")
	}
	d := &Survey{Sets: len(sets), PerBar: 1, Confidence: confidence}
	states, reasons := map[string]int{}, map[string]int{}
	var shown []SurveySet
	for _, s := range sets {
		if s.ErrorCode != "" {
			reasons[s.ErrorCode]++
			continue
		}
		states[s.State]++
		if s.P >= 0 && s.P <= 1 {
			d.P[min(int(s.P*surveyBins), surveyBins-1)]++
			d.Testable++
		}
		if s.Q <= 0.05 {
			d.Found++
		}
		if s.QBand <= 0.05 {
			d.FoundBand++
		}
		if !math.IsNaN(s.Change) && !math.IsInf(s.Change, 0) {
			shown = append(shown, opened(s))
		}
	}
	d.count(states, reasons)
	slices.SortStableFunc(shown, func(a, b SurveySet) int { return cmp.Compare(a.Change, b.Change) })
	d.Drawn = len(shown)
	d.PerBar = max(1, (len(shown)+mostBars-1)/mostBars)
	for group := range slices.Chunk(shown, d.PerBar) {
		d.Bars = append(d.Bars, newSurveyBar(group))
	}
	d.scale(shown)
	return d, nil
}

// opened makes an end that is not known infinite where the other is known.
func opened(s SurveySet) SurveySet {
	noLow, noHigh := math.IsNaN(s.Lower), math.IsNaN(s.Upper)
	switch {
	case noLow && !noHigh:
		s.Lower = math.Inf(-1)
	case noHigh && !noLow:
		s.Upper = math.Inf(1)
	}
	return s
}

// count orders verdicts and reasons.
func (d *Survey) count(states, reasons map[string]int) {
	known := words(diagnostics.States)
	for _, s := range known {
		if states[s] > 0 {
			d.Counts = append(d.Counts, SurveyCount{What: s, Sets: states[s]})
		}
	}
	for _, s := range slices.Sorted(maps.Keys(states)) { // of a later version
		if !slices.Contains(known, s) {
			d.Counts = append(d.Counts, SurveyCount{What: s, Sets: states[s]})
		}
	}
	codes := slices.SortedFunc(maps.Keys(reasons), func(a, b string) int {
		return cmp.Or(cmp.Compare(reasons[b], reasons[a]), cmp.Compare(a, b))
	})
	rest := SurveyCount{Failed: true}
	for i, code := range codes {
		if i >= mostReasons && len(codes) > mostReasons+1 {
			rest.Sets += reasons[code]
			continue
		}
		d.Counts = append(d.Counts, SurveyCount{code, reasons[code], true})
	}
	if rest.Sets > 0 {
		rest.What = fmt.Sprintf("%d more: survey status", len(codes)-mostReasons)
		d.Counts = append(d.Counts, rest)
	}
}

func words[S ~string](named []S) []string {
	out := make([]string, len(named))
	for i, s := range named {
		out[i] = string(s)
	}
	return out
}

// newSurveyBar sums up data sets that follow each other.
func newSurveyBar(group []SurveySet) SurveyBar {
	b := SurveyBar{Name: group[0].Name, Least: math.NaN(), Most: math.NaN()}
	var changes, lower, upper []float64
	states := map[string]int{}
	for _, s := range group {
		changes = append(changes, s.Change)
		states[s.State]++
		if !math.IsNaN(s.Lower) {
			lower, upper = append(lower, s.Lower), append(upper, s.Upper)
		}
	}
	b.Change, b.Lower, b.Upper = median(changes), median(lower), median(upper)
	if len(lower) > 0 {
		b.Least, b.Most = slices.Min(lower), slices.Max(upper)
	}
	for _, s := range words(diagnostics.States) {
		if states[s] > states[b.State] {
			b.State = s
		}
	}
	return b
}

// median of numbers, NaN of none. Of an even number it is the mean of the inner two,
// or the lower one where these are infinite.
func median(vs []float64) float64 {
	if len(vs) == 0 {
		return math.NaN()
	}
	vs = slices.Sorted(slices.Values(vs))
	low, high := vs[(len(vs)-1)/2], vs[len(vs)/2]
	if low == high || math.IsInf(low, 0) || math.IsInf(high, 0) {
		return low
	}
	return (low + high) / 2
}

// scale finds the axis of ΔE: it holds 0, every estimate but the outermost 0.5 % at
// each end, and of the ends of the intervals the inner 95 %.
func (d *Survey) scale(shown []SurveySet) {
	var estimates, ends, halves []float64
	for _, s := range shown {
		estimates = append(estimates, s.Change)
		ends = append(ends, finiteOnly(s.Lower, s.Upper)...)
		if h := (s.Upper - s.Lower) / 2; h > 0 && !math.IsInf(h, 0) {
			halves = append(halves, h)
		}
	}
	r := emptySpan()
	r.add(0)
	inner := func(vs []float64, cut float64) {
		slices.Sort(vs)
		n := int(cut * float64(len(vs)))
		if len(vs) > 0 {
			r.add(math.Max(vs[n], -mostChange), math.Min(vs[len(vs)-1-n], mostChange))
		}
	}
	inner(estimates, 0.005)
	inner(ends, 0.025)
	d.Linear = 1
	if h := median(halves); h > 0 {
		// No more decades than a page can show.
		d.Linear, _, _ = niceStep(math.Max(2*h, 1e-6*math.Max(-r.low, r.high)))
	}
	// A margin in the units of the page.
	s := signedLog{d.Linear}
	page := span{s.of(r.low), s.of(r.high)}
	low, high := page.padded(0.04, 0.5)
	d.Low, d.High = s.inverse(low), s.inverse(high)
	for _, set := range shown {
		for _, v := range finiteOnly(set.Change, set.Lower, set.Upper) {
			if v < d.Low || v > d.High {
				d.Beyond++
				break
			}
		}
	}
}

// signedLog is an axis that is linear about 0 and logarithmic far from it: asinh(x/unit).
type signedLog struct{ unit float64 }

var _ plot.Normalizer = signedLog{}
var _ plot.Ticker = signedLog{}

func (s signedLog) of(x float64) float64      { return math.Asinh(x / s.unit) }
func (s signedLog) inverse(y float64) float64 { return s.unit * math.Sinh(y) }

// Normalize implements plot.Normalizer.
func (s signedLog) Normalize(low, high, x float64) float64 {
	return (s.of(x) - s.of(low)) / (s.of(high) - s.of(low))
}

// tickGap is the least distance of two labels as a share of the axis.
const tickGap = 0.105

// Ticks implements plot.Ticker: 0 and 1, 2, 5 times powers of ten; powers of ten alone
// have labels where at least two fit on the longer side.
func (s signedLog) Ticks(low, high float64) []plot.Tick {
	far := math.Max(-low, high)
	if !(far > 0) {
		return nil
	}
	at := func(v float64) float64 { return s.Normalize(low, high, v) }
	labelled := func(factors []float64) map[float64]bool {
		out := map[float64]bool{}
		last := 0.0
		for e := math.Floor(math.Log10(s.unit)) - 1; math.Pow(10, e) <= far; e++ {
			for _, m := range factors {
				v := m * math.Pow(10, e)
				if v <= far && at(v)-at(last) >= tickGap {
					out[v], last = true, v
				}
			}
		}
		return out
	}
	names := labelled([]float64{1})
	if len(names) < 3 {
		names = labelled([]float64{1, 2, 5})
	}
	ticks := []plot.Tick{{Value: 0, Label: "0"}}
	for e := math.Floor(math.Log10(s.unit)) - 1; math.Pow(10, e) <= far; e++ {
		for m := 1.0; m < 10; m++ {
			v := m * math.Pow(10, e)
			if v < s.unit/5 && !names[v] {
				continue // crowded about 0
			}
			for _, sign := range []float64{-1, 1} {
				if x := sign * v; x >= low && x <= high {
					t := plot.Tick{Value: x}
					if names[v] {
						t.Label = number(x, int(math.Max(0, -e)))
					}
					ticks = append(ticks, t)
				}
			}
		}
	}
	return ticks
}

// stateLooks gives every verdict a colour and a marker; the marker tells them apart in
// grey print.
var stateLooks = map[string]marker{
	"untestable":       {0, 0, color.White, draw.LineStyle{Color: color.Gray{Y: 150}, Width: 0.6}},
	"beyond-prefactor": {3, 0, vermillion, draw.LineStyle{Color: vermillion, Width: 0.6}},
	"within-prefactor": {4, math.Pi / 4, blueGreen, draw.LineStyle{Color: blueGreen, Width: 0.6}},
	"curved-open":      {3, math.Pi, orange, draw.LineStyle{Color: orange, Width: 0.6}},
	"straight-within":  {0, 0, blue, draw.LineStyle{Color: blue, Width: 0.6}},
	"unresolved":       {4, 0, grey, draw.LineStyle{Color: grey, Width: 0.6}},
}

func lookOf(state string) marker {
	if m, ok := stateLooks[state]; ok {
		return m
	}
	return stateLooks["untestable"]
}

// faint is a colour with little opacity.
func faint(c color.Color) color.Color {
	n := color.NRGBAModel.Convert(c).(color.NRGBA)
	n.A = 70
	return n
}

// surveyBars draws the bars of the first panel, the least ΔE at the bottom.
type surveyBars struct{ *Survey }

// Plot implements plot.Plotter.
func (b surveyBars) Plot(c draw.Canvas, p *plot.Plot) {
	trX, trY := p.Transforms(&c)
	clip := func(v float64) vg.Length {
		return max(c.Min.X, min(c.Max.X, trX(math.Max(b.Low, math.Min(b.High, v)))))
	}
	thick := (trY(1) - trY(0)) * 0.8
	named := len(b.Bars) <= mostNames && b.PerBar == 1
	width := min(thick, 1.2)
	for i, bar := range b.Bars {
		y, look := trY(float64(i)+0.5), lookOf(bar.State)
		if !math.IsNaN(bar.Least) && b.PerBar > 1 {
			c.StrokeLine2(draw.LineStyle{Color: faint(look.edge.Color), Width: thick}, clip(bar.Least), y, clip(bar.Most), y)
		}
		if !math.IsNaN(bar.Lower) {
			sty := draw.LineStyle{Color: look.edge.Color, Width: width}
			l, r := clip(bar.Lower), clip(bar.Upper)
			c.StrokeLine2(sty, l, y, r, y)
			if named {
				for _, e := range []struct {
					v   float64
					x   vg.Length
					dir vg.Length
				}{{bar.Lower, l, -1}, {bar.Upper, r, 1}} {
					if e.v < b.Low || e.v > b.High { // goes on
						c.FillPolygon(look.edge.Color, []vg.Point{{X: e.x, Y: y}, {X: e.x - e.dir*5, Y: y + 2.5}, {X: e.x - e.dir*5, Y: y - 2.5}})
					} else {
						c.StrokeLine2(sty, e.x, y-2, e.x, y+2)
					}
				}
			}
		}
	}
	// Estimates over all intervals.
	for i, bar := range b.Bars {
		y, look := trY(float64(i)+0.5), lookOf(bar.State)
		x := clip(bar.Change)
		if named {
			c.DrawGlyph(draw.GlyphStyle{Color: look.edge.Color, Radius: 2.3, Shape: look}, vg.Point{X: x, Y: y})
		} else {
			h := max(thick, 0.9)
			c.FillPolygon(ink, []vg.Point{{X: x - 0.6, Y: y - h/2}, {X: x + 0.6, Y: y - h/2}, {X: x + 0.6, Y: y + h/2}, {X: x - 0.6, Y: y + h/2}})
		}
	}
}

// namesOf are the ticks of a panel of named bars.
func (d *Survey) names() plot.ConstantTicks {
	var ticks plot.ConstantTicks
	for i, b := range d.Bars {
		ticks = append(ticks, plot.Tick{Value: float64(i) + 0.5, Label: plain(shortened(b.Name, SurveyName))})
	}
	return ticks
}

// changePanel is the first panel, and its height.
func (d *Survey) changePanel() (*plot.Plot, vg.Length) {
	p := newPlot(d.Low, d.High, 0, math.Max(1, float64(len(d.Bars))), "Δ*E*/(kJ mol^{−1})", "data sets by Δ*E*")
	p.X.Scale, p.X.Tick.Marker = signedLog{d.Linear}, signedLog{d.Linear}
	height := vg.Length(surveyPanel)
	if len(d.Bars) <= mostNames {
		p.Y.Label.Text = ""
		p.Y.Tick.Length = 0
		p.Y.Tick.Marker = d.names()
		height = vg.Length(max(1, len(d.Bars)))*nameLine + 30
	} else {
		p.Y.Tick.Marker = perBar{d.PerBar, len(d.Bars)}
	}
	addFixed(p, rule{0, math.NaN(), draw.LineStyle{Color: ink, Width: vg.Points(0.9), Dashes: []vg.Length{4, 2}}, 0}, surveyBars{d}, frame{})
	return p, height
}

// perBar marks an axis of bars in numbers of data sets.
type perBar struct{ sets, bars int }

// Ticks implements plot.Ticker.
func (b perBar) Ticks(_, _ float64) []plot.Tick {
	ticks := whole{linear{5}}.Ticks(0, float64(b.sets*b.bars))
	for i := range ticks {
		ticks[i].Value /= float64(b.sets)
	}
	return ticks
}

// histogramPanel is that of the p-values.
func (d *Survey) histogramPanel() *plot.Plot {
	most := slices.Max(d.P[:])
	p := newPlot(0, 1, 0, math.Max(1, 1.12*float64(most)), "*p* of the test that *E* does not change", "data sets")
	p.X.Tick.Marker, p.Y.Tick.Marker = linear{5}, whole{linear{4}}
	edges := make([]float64, surveyBins+1)
	for i := range edges {
		edges[i] = float64(i) / surveyBins
	}
	even := rule{math.NaN(), float64(d.Testable) / surveyBins, draw.LineStyle{Color: vermillion, Width: vg.Points(1), Dashes: []vg.Length{4, 2}}, 0}
	addFixed(p, histogram{edges, d.P[:]}, even, frame{})
	return p
}

// surveyCounts draws a bar and its number for every verdict and reason.
type surveyCounts []SurveyCount

// draw sets the lines from the top of c downwards.
func (s surveyCounts) draw(c draw.Canvas) {
	most, wide := 1, vg.Length(0)
	sty := aligned(style(tickSize), draw.XLeft, draw.YCenter)
	name := func(n SurveyCount) string { return plain(shortened(n.What, 28)) }
	for _, n := range s {
		most, wide = max(most, n.Sets), max(wide, sty.Width(name(n)))
	}
	left := c.Min.X + 12 + wide + 6
	room := c.Max.X - left - sty.Width(fmt.Sprint(most)) - 4
	for i, n := range s {
		y := c.Max.Y - (vg.Length(i)+0.5)*countLine
		fill := color.Color(color.Gray{Y: 205})
		if !n.Failed {
			look := lookOf(n.What)
			fill = look.edge.Color
			c.DrawGlyphNoClip(draw.GlyphStyle{Color: fill, Radius: 2.5, Shape: look}, vg.Point{X: c.Min.X + 5, Y: y})
		}
		base := y + sty.FontExtents().Descent
		c.FillText(sty, vg.Point{X: c.Min.X + 12, Y: base}, name(n))
		end := left + max(0.5, room*vg.Length(n.Sets)/vg.Length(most))
		c.FillPolygon(fill, []vg.Point{{X: left, Y: y - 3.2}, {X: end, Y: y - 3.2}, {X: end, Y: y + 3.2}, {X: left, Y: y + 3.2}})
		c.FillText(sty, vg.Point{X: end + 3, Y: base}, fmt.Sprint(n.Sets))
	}
}

// notes say what bars and lines are.
func (d *Survey) notes() []string {
	var out []string
	level := percent(d.Confidence)
	if d.PerBar > 1 {
		out = append(out, fmt.Sprintf("A bar stands for %d data sets: medians of Δ*E* (black) and of its %s intervals,", d.PerBar, level),
			"faint to their outermost ends; its colour is that of the most frequent verdict.")
	} else if d.Drawn > 0 {
		out = append(out, fmt.Sprintf("Δ*E*: change of *E* over the measured range, with its %s interval.", level))
	}
	scale := fmt.Sprintf("The axis is near to linear up to ±%s, logarithmic beyond.", strconv.FormatFloat(d.Linear, 'f', -1, 64))
	if d.Drawn == 0 {
		scale = "No data set has an estimate of Δ*E*."
	}
	out = append(out, scale)
	if d.Beyond > 0 {
		out = append(out, fmt.Sprintf("Data sets that reach beyond the axis: %d.", d.Beyond))
	}
	return out
}

// drawSurvey lays out the overview.
func drawSurvey(d *Survey, name string) picture {
	parts := []string{fmt.Sprintf("%d data sets", d.Sets)}
	if d.Sets == 1 {
		parts[0] = "1 data set"
	}
	if name != "" {
		parts = append([]string{name}, parts...)
	}
	failed := 0
	for _, c := range d.Counts {
		if c.Failed {
			failed += c.Sets
		}
	}
	if failed > 0 {
		parts = append(parts, fmt.Sprintf("%d could not be used", failed))
	}
	if d.Incomplete {
		parts = append(parts, "NOT COMPLETE")
	}
	head := newHeader("Survey", strings.Join(parts, "; "))
	notes := d.notes()
	small := aligned(style(legendSize), draw.XLeft, draw.YTop)
	noteHeight := small.Height("0") + 2
	change, changeHeight := d.changePanel()
	hist := d.histogramPanel()
	countsHeight := vg.Length(len(d.Counts)) * countLine
	histNote := fmt.Sprintf("%d data sets can be tested; dashed: as many in each bin as if none were curved.", d.Testable)

	foundNote := fmt.Sprintf("At a false discovery rate of 5 %% *E* changes in %d, by more than a prefactor explains in %d.", d.Found, d.FoundBand)

	top := margin + head.height() + headGap
	if d.Drawn == 0 {
		changeHeight = 0
	}
	height := top + changeHeight + vg.Length(len(notes))*noteHeight + 4
	if d.Testable > 0 {
		height += histogramTop + 2*noteHeight + 8
	}
	height += countsHeight + margin
	return picture{
		name: "survey", width: pageWidth, height: height, title: head.inWords(""),
		draw: func(c draw.Canvas) {
			fillPage(c)
			head.draw(draw.Crop(c, margin, -margin, 0, -margin))
			y := c.Max.Y - top
			part := func(h vg.Length) draw.Canvas {
				r := draw.Canvas{Canvas: c.Canvas, Rectangle: vg.Rectangle{Min: vg.Point{X: c.Min.X + margin, Y: y - h}, Max: vg.Point{X: c.Max.X - margin - 3, Y: y}}}
				y -= h
				return r
			}
			if d.Drawn > 0 {
				change.Draw(part(changeHeight))
			}
			for _, n := range notes {
				c.FillText(small, vg.Point{X: c.Min.X + margin, Y: y}, n)
				part(noteHeight)
			}
			if d.Testable > 0 {
				part(8)
				hist.Draw(part(histogramTop))
				c.FillText(small, vg.Point{X: c.Min.X + margin, Y: y}, histNote)
				part(noteHeight)
				c.FillText(small, vg.Point{X: c.Min.X + margin, Y: y}, foundNote)
				part(noteHeight)
			}
			part(4)
			surveyCounts(d.Counts).draw(part(countsHeight))
		},
	}
}

// WriteSurvey writes the overview into dir, which is made if it does not exist, and
// returns the path of the file, survey.svg. name is that of the store.
func WriteSurvey(dir, name string, d *Survey, opt Options) (string, error) {
	encode, err := encoder(opt.Format)
	if err != nil {
		return "", err
	}
	if err := os.MkdirAll(dir, 0o777); err != nil {
		return "", fmt.Errorf("figure: cannot make the directory: %w; name one that can be written", err)
	}
	var b bytes.Buffer
	if err := encode(&b, drawSurvey(d, name)); err != nil {
		return "", fmt.Errorf("figure: survey: %w", err)
	}
	path := filepath.Join(dir, "survey."+opt.extension())
	if err := replace(path, b.Bytes()); err != nil {
		return "", fmt.Errorf("figure: %w", err)
	}
	return path, nil
}
