package figure

import (
	"math"
	"strings"
	"unicode"

	"golang.org/x/image/font"
	"golang.org/x/image/font/sfnt"
	"golang.org/x/image/math/fixed"
	"gonum.org/v1/plot"
	plotfont "gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
)

// typesetter is a text handler with a small markup, since quantities are set in
// italics and the fonts have no superscript minus: *italic*, ^{raised},
// _{lowered}; a backslash takes the next character as it is.
type typesetter struct{ text.Plain }

var _ text.Handler = typesetter{}

// run is a piece of text in one style. Raised is the fraction of the font size by
// which its baseline is moved.
type run struct {
	text   string
	italic bool
	scale  float64
	raised float64
}

// parse splits marked-up text into runs.
func parse(s string) []run {
	cur := run{scale: 1}
	var runs []run
	var b strings.Builder
	flush := func() {
		if b.Len() > 0 {
			cur.text = b.String()
			runs = append(runs, cur)
			b.Reset()
		}
	}
	rs := []rune(s)
	for i := 0; i < len(rs); i++ {
		opens := i+1 < len(rs) && rs[i+1] == '{'
		switch c := rs[i]; {
		case c == '\\' && i+1 < len(rs):
			i++
			b.WriteRune(rs[i])
		case c == '*':
			flush()
			cur.italic = !cur.italic
		case c == '^' && opens:
			flush()
			cur.scale, cur.raised = 0.7, 0.36
			i++
		case c == '_' && opens:
			flush()
			cur.scale, cur.raised = 0.7, -0.16
			i++
		case c == '}':
			flush()
			cur.scale, cur.raised = 1, 0
		default:
			b.WriteRune(c)
		}
	}
	flush()
	return runs
}

// plain protects text that is not ours from being read as markup, and takes out
// what cannot be printed.
func plain(s string) string {
	var b strings.Builder
	for _, r := range s {
		switch {
		case unicode.IsControl(r):
			r = ' '
		case strings.ContainsRune(`\*^_{}`, r):
			b.WriteByte('\\')
		}
		b.WriteRune(r)
	}
	return b.String()
}

// unmarked is the text without its markup.
func unmarked(s string) string {
	var b strings.Builder
	for _, r := range parse(s) {
		if r.raised > 0 {
			b.WriteByte('^')
		}
		if r.raised < 0 {
			b.WriteByte('_')
		}
		b.WriteString(r.text)
	}
	return b.String()
}

// face returns the font of a run.
func (h typesetter) face(r run, f plotfont.Font) plotfont.Face {
	if r.italic {
		f.Style = font.StyleItalic
	}
	return h.Fonts.Lookup(f, f.Size*vg.Length(r.scale))
}

// width is the width of one line.
func (h typesetter) width(line string, f plotfont.Font) (w vg.Length) {
	for _, r := range parse(line) {
		face := h.face(r, f)
		w += face.Width(r.text)
	}
	return w
}

// Box implements text.Handler.
func (h typesetter) Box(line string, f plotfont.Font) (width, height, depth vg.Length) {
	_, height, depth = h.Plain.Box("", f)
	return h.width(line, f), height, depth
}

// Draw implements text.Handler for a single line.
func (h typesetter) Draw(c vg.Canvas, line string, sty text.Style, pt vg.Point) {
	if line == "" {
		return
	}
	c.SetColor(sty.Color)
	if sty.Rotation != 0 {
		c.Push()
		defer c.Pop()
		c.Rotate(sty.Rotation)
	}
	sin, cos := math.Sincos(sty.Rotation)
	x := pt.X*vg.Length(cos) + pt.Y*vg.Length(sin)
	y := pt.Y*vg.Length(cos) - pt.X*vg.Length(sin)
	// As text.Plain places a line: its box is moved by YAlign, and the baseline
	// lies one font size above the ascent.
	y += sty.Height(line)*vg.Length(sty.YAlign) - h.Extents(sty.Font).Ascent + sty.Font.Size
	if sty.YAlign == text.YCenter {
		// The middle of the box of a font lies below the middle of its digits.
		y -= 0.09 * sty.Font.Size
	}
	x += vg.Length(sty.XAlign) * h.width(line, sty.Font)
	for _, r := range parse(line) {
		face := h.face(r, sty.Font)
		c.FillString(face, vg.Point{X: x, Y: y + sty.Font.Size*vg.Length(r.raised)}, r.text)
		x += face.Width(r.text)
	}
}

// handler sets every text of the figures.
func handler() typesetter { return typesetter{text.Plain{Fonts: plot.DefaultTextHandler.Cache()}} }

// style is a black text style, aligned to the left of its point.
func style(size float64) text.Style {
	f := plotfont.From(plot.DefaultFont, vg.Points(size))
	f.Variant = "Sans"
	return text.Style{Color: ink, Font: f, Handler: handler()}
}

// outlined draws text as the outlines of its glyphs, so that a figure looks the
// same where the fonts are not installed, and has characters that the code page of
// the PDF canvas lacks.
type outlined struct{ vg.CanvasSizer }

// FillString implements vg.Canvas.
func (o outlined) FillString(f plotfont.Face, pt vg.Point, s string) {
	em := f.Face.UnitsPerEm()
	ppem := fixed.Int26_6(em) // so that outlines come in units of the font
	scale := f.Font.Size / vg.Length(em)
	var buf sfnt.Buffer
	var path vg.Path
	for i, r := range []rune(s) {
		g, err := f.Face.GlyphIndex(&buf, r)
		if err != nil {
			panic("figure: font without a character map: " + err.Error())
		}
		segs, err := f.Face.LoadGlyph(&buf, g, ppem, nil)
		if err != nil {
			panic("figure: font without outlines: " + err.Error())
		}
		// Width of the text up to and with this glyph, kerning included.
		x := pt.X + f.Width(string([]rune(s)[:i+1]))
		if adv, err := f.Face.GlyphAdvance(&buf, g, ppem, font.HintingNone); err == nil {
			x -= vg.Length(adv) * scale
		}
		at := func(p fixed.Point26_6) vg.Point {
			return vg.Point{X: x + vg.Length(p.X)*scale, Y: pt.Y - vg.Length(p.Y)*scale}
		}
		for j, seg := range segs {
			switch seg.Op {
			case sfnt.SegmentOpMoveTo:
				if j > 0 {
					path.Close()
				}
				path.Move(at(seg.Args[0]))
			case sfnt.SegmentOpLineTo:
				path.Line(at(seg.Args[0]))
			case sfnt.SegmentOpQuadTo:
				path.QuadTo(at(seg.Args[0]), at(seg.Args[1]))
			case sfnt.SegmentOpCubeTo:
				path.CubeTo(at(seg.Args[0]), at(seg.Args[1]), at(seg.Args[2]))
			}
		}
		if len(segs) > 0 {
			path.Close()
		}
	}
	if len(path) > 0 {
		o.Fill(path)
	}
}

// unitMarkup sets the powers of a unit: s^-1 with a raised −1.
func unitMarkup(unit string) string {
	fields := strings.Fields(unit)
	for i, f := range fields {
		base, power, ok := strings.Cut(f, "^")
		fields[i] = plain(base)
		if ok {
			fields[i] += "^{" + strings.ReplaceAll(plain(power), "-", "−") + "}"
		}
	}
	return strings.Join(fields, " ")
}

// symbolMarkup sets a quantity symbol: k_obs with an italic k and a lowered obs.
func symbolMarkup(symbol string) string {
	parts := strings.Split(symbol, "/")
	for i, p := range parts {
		head, tail, ok := strings.Cut(p, "_")
		if len([]rune(head)) == 1 {
			head = "*" + plain(head) + "*"
		} else {
			head = plain(head)
		}
		if ok {
			head += "_{" + plain(tail) + "}"
		}
		parts[i] = head
	}
	return strings.Join(parts, "/")
}
