package figure

import (
	"bytes"
	"encoding/xml"
	"errors"
	"image/color"
	"image/png"
	"io"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgpdf"

	"onebarrier/diagnostics"
	"onebarrier/models/fit"
)

func TestEveryCaseInEveryFormat(t *testing.T) {
	for name, c := range cases() {
		a := c.assess(t)
		dir := filepath.Join(t.TempDir(), "made", "on the way")
		for _, format := range []string{"svg", "png", "pdf"} {
			if format == "png" && name != "many" {
				continue // the slowest format, once
			}
			paths, err := Write(dir, a, Options{Format: format})
			if err != nil {
				t.Fatalf("%s: %v", name, err)
			}
			want := []string{"arrhenius", "eyring", "rate-constant", "ratio", "activation-energy", "change-of-e"}
			if !a.Rate.Known {
				want = slices.Delete(want, 1, 2)
			}
			if a.ChangeOfE == nil {
				want = want[:len(want)-1]
			}
			if len(paths) != len(want) {
				t.Fatalf("%s: wrote %v, want %v", name, paths, want)
			}
			for i, w := range want {
				if got := filepath.Join(dir, w+"."+format); paths[i] != got {
					t.Errorf("%s: wrote %s, want %s", name, paths[i], got)
				}
				b, err := os.ReadFile(paths[i])
				if err != nil {
					t.Fatal(err)
				}
				if err := wellFormed(format, b); err != nil {
					t.Errorf("%s: %s.%s: %v", name, w, format, err)
				}
			}
		}
		left, err := filepath.Glob(filepath.Join(dir, ".*"))
		if err != nil || len(left) > 0 {
			t.Errorf("%s: temporary files left: %v %v", name, left, err)
		}
	}
}

func wellFormed(format string, b []byte) error {
	switch format {
	case "svg":
		d := xml.NewDecoder(bytes.NewReader(b))
		for {
			if _, err := d.Token(); err != nil {
				if err != io.EOF {
					return err
				}
				break
			}
		}
		for _, bad := range []string{"NaN", "Inf", "<text"} {
			if bytes.Contains(b, []byte(bad)) {
				return errors.New("holds " + bad)
			}
		}
	case "png":
		img, err := png.Decode(bytes.NewReader(b))
		if err != nil {
			return err
		}
		if w := img.Bounds().Dx(); w != 1242 { // 298 pt at 300 dots an inch
			return errors.New("wrong width")
		}
	case "pdf":
		if !bytes.HasPrefix(b, []byte("%PDF-")) {
			return errors.New("not a PDF file")
		}
		for _, bad := range []string{"CreationDate", "ModDate"} {
			if bytes.Contains(b, []byte(bad)) {
				return errors.New("holds " + bad)
			}
		}
	}
	return nil
}

func TestSameBytes(t *testing.T) {
	a := cases()["three"].assess(t)
	one, two := t.TempDir(), t.TempDir()
	for _, format := range []string{"svg", "png", "pdf"} {
		p, err := Write(one, a, Options{Format: format})
		if err != nil {
			t.Fatal(err)
		}
		if format == "pdf" {
			time.Sleep(1100 * time.Millisecond) // dates of PDF have seconds
		}
		q, err := Write(two, a, Options{Format: format})
		if err != nil {
			t.Fatal(err)
		}
		for i := range p {
			x, err := os.ReadFile(p[i])
			if err != nil {
				t.Fatal(err)
			}
			y, err := os.ReadFile(q[i])
			if err != nil {
				t.Fatal(err)
			}
			if !bytes.Equal(x, y) {
				t.Errorf("%s differs from one writing to the next", filepath.Base(p[i]))
			}
		}
	}
}

func TestUnknownOptions(t *testing.T) {
	a := sixRates(t, fit.Relative)
	for _, c := range []struct {
		opt  Options
		cure string
	}{
		{Options{Format: "gif"}, "svg, png or pdf"},
		{Options{X: "T"}, "1000/T, 10000/T or 1/kT"},
		{Options{Y: "log"}, "ln or lg"},
	} {
		dir := filepath.Join(t.TempDir(), "none")
		_, err := Write(dir, a, c.opt)
		if err == nil || !strings.Contains(err.Error(), c.cure) {
			t.Errorf("%+v: error %v does not name %q", c.opt, err, c.cure)
		}
		if err := c.opt.Check(); err == nil {
			t.Errorf("%+v passes Check", c.opt)
		}
		if _, err := os.Stat(dir); err == nil {
			t.Error("directory made in spite of the error")
		}
	}
	if err := (Options{Format: "pdf", X: "1/kT", Y: "lg"}).Check(); err != nil {
		t.Error(err)
	}
	if _, err := Write(t.TempDir(), nil, Options{}); err == nil {
		t.Error("no error without an assessment")
	}
}

func TestDirectoryCannotBeMade(t *testing.T) {
	file := filepath.Join(t.TempDir(), "file")
	if err := os.WriteFile(file, nil, 0o600); err != nil {
		t.Fatal(err)
	}
	_, err := Write(filepath.Join(file, "figures"), sixRates(t, fit.Relative), Options{})
	if err == nil || !strings.Contains(err.Error(), "cannot make the directory") {
		t.Errorf("error %v", err)
	}
	// A directory stands where a figure should go: the error is told, no
	// temporary file stays.
	dir := t.TempDir()
	if err := os.MkdirAll(filepath.Join(dir, "arrhenius.svg", "x"), 0o777); err != nil {
		t.Fatal(err)
	}
	if _, err := Write(dir, sixRates(t, fit.Relative), Options{}); err == nil {
		t.Error("no error")
	}
	es, err := os.ReadDir(dir)
	if err != nil || len(es) != 1 {
		t.Errorf("left in the directory: %v %v", es, err)
	}
}

// Legends must not cover points, curves or bands.
func TestLegendCoversNothing(t *testing.T) {
	p := newPlot(0, 1, 0, 1, "x", "y")
	var l legend
	l.entry("some words")
	l.entry("and some more")
	page := draw.Canvas{Rectangle: vg.Rectangle{Max: vg.Point{X: 200, Y: 150}}}
	area := func() draw.Canvas { return p.DataCanvas(page) }
	covers := func(r vg.Rectangle, o obstacle) bool {
		c := area()
		trX, trY := p.Transforms(&c)
		return trX(o.x) >= r.Min.X && trX(o.x) <= r.Max.X && trY(o.high) >= r.Min.Y && trY(o.low) <= r.Max.Y
	}
	for _, c := range []struct {
		name  string
		os    []obstacle
		grows bool
	}{
		{"falling line", line2(0, 1, 1, 0), false},
		{"rising line", line2(0, 0, 1, 1), false},
		{"everything", slices.Concat(line2(0, 1, 1, 1), line2(0, 0, 1, 0)), true},
		{"band", []obstacle{{0, 0.1, 0.9}, {0.5, 0.1, 0.9}, {1, 0.1, 0.9}}, true},
	} {
		p.Y.Max = 1
		r, ok := l.place(p, area, c.os)
		if !ok {
			t.Fatalf("%s: no place", c.name)
		}
		for _, o := range c.os {
			if covers(r, o) {
				t.Errorf("%s: legend %v covers %v", c.name, r, o)
			}
		}
		if grown := p.Y.Max > 1; grown != c.grows {
			t.Errorf("%s: grown %v, want %v", c.name, grown, c.grows)
		}
		if a := area(); !a.Contains(r.Min) || !a.Contains(r.Max) {
			t.Errorf("%s: legend %v leaves the panel %v", c.name, r, a.Rectangle)
		}
	}
}

// A panel that is full gets its legend underneath, and keeps its axes.
func TestLegendUnderAFullPanel(t *testing.T) {
	p := newPlot(0, 1, 0, 1, "x", "y")
	page := draw.Canvas{Rectangle: vg.Rectangle{Max: vg.Point{X: 200, Y: 150}}}
	var l legend
	for range 9 {
		l.entry("some words")
	}
	r, ok := l.place(p, func() draw.Canvas { return p.DataCanvas(page) }, line2(0, 0.5, 1, 0.5))
	if ok || p.Y.Max != 1 || p.Y.Min != 0 {
		t.Errorf("place %v, %v; axis to %g", r, ok, p.Y.Max)
	}
	pic := l.complete(picture{width: 200, height: 150, draw: func(draw.Canvas) {}}, r, ok)
	if want := 150 + l[:5].size().Y + margin; pic.height != want {
		t.Errorf("page of height %g, want %g", pic.height, want)
	}
}

func line2(x0, y0, x1, y1 float64) (os []obstacle) {
	for i := range 101 {
		f := float64(i) / 100
		y := (1-f)*y0 + f*y1
		os = append(os, obstacle{(1-f)*x0 + f*x1, y, y})
	}
	return os
}

func TestPanelsLineUp(t *testing.T) {
	up := newPlot(3, 4, 0, 1, "", "a")
	up.X.Tick.Marker = plot.ConstantTicks(nil)
	low := newPlot(3, 4, -1000.25, 1000.25, "x", "b")
	page := draw.Canvas{Rectangle: vg.Rectangle{Max: vg.Point{X: 300, Y: 150}}}
	a, b := align(up, page, low, page)
	x, y := up.DataCanvas(a), low.DataCanvas(b)
	if math.Abs(float64(x.Min.X-y.Min.X)) > 1e-6 || math.Abs(float64(x.Max.X-y.Max.X)) > 1e-6 {
		t.Errorf("panels from %g to %g and from %g to %g", x.Min.X, x.Max.X, y.Min.X, y.Max.X)
	}
}

func TestPDFKeepsTheColourOfTints(t *testing.T) {
	// gonum's PDF canvas reads RGBA as the colour itself.
	r, g, b, a := unmultiplied(color.NRGBA{R: 200, G: 100, B: 50, A: 128}).RGBA()
	if r>>8 != 200 || g>>8 != 100 || b>>8 != 50 || a>>8 != 128 {
		t.Errorf("%d %d %d %d", r>>8, g>>8, b>>8, a>>8)
	}
	var c vg.Canvas = straightAlpha{vgpdf.New(10, 10)}
	c.SetColor(color.Black)
}

func TestLabels(t *testing.T) {
	for _, c := range []struct {
		symbol, unit, log, want string
	}{
		{"k", "s^-1", "ln", "ln(k/s^−1)"},
		{"", "", "ln", "ln k"},
		{"k_obs", "min^-1", "lg", "lg(k_obs/min^−1)"},
		{"k", "L mol^-1 s^-1", "ln", "ln[k/(L mol^−1 s^−1)]"},
		{"kcat/Km", "L mol^-1 s^-1", "ln", "ln[(kcat/Km)/(L mol^−1 s^−1)]"},
		{"D", "cm^2 s^-1", "lg", "lg[D/(cm^2 s^−1)]"},
	} {
		q := diagnostics.Quantity{Symbol: c.symbol, Unit: c.unit}
		if got := unmarked(yLabel(q, c.log)); got != c.want {
			t.Errorf("%q in %q: %q, want %q", c.symbol, c.unit, got, c.want)
		}
	}
}

func TestForeignTextIsNotMarkup(t *testing.T) {
	for _, s := range []string{`a*b_{x}^{2}\n`, "100 % *pure*", "Δ–…", `\`} {
		if got := unmarked(plain(s)); got != s {
			t.Errorf("%q came out as %q", s, got)
		}
	}
	if got := plain("two\nlines\x00"); got != "two lines " {
		t.Errorf("control characters: %q", got)
	}
	h := newHeader("", strings.Repeat("long name ", 40))
	if w := h[0].Width(h[0].words); w > pageWidth-2*margin || !strings.HasSuffix(h[0].words, "…") {
		t.Errorf("header of width %g: %q", w, h[0].words)
	}
}

func TestRaisedAndItalic(t *testing.T) {
	got := parse("ln(*k*/s^{−1}) *E*_{loc}")
	want := []run{
		{"ln(", false, 1, 0}, {"k", true, 1, 0}, {"/s", false, 1, 0}, {"−1", false, 0.7, 0.36},
		{") ", false, 1, 0}, {"E", true, 1, 0}, {"loc", false, 0.7, -0.16},
	}
	if !slices.Equal(got, want) {
		t.Errorf("runs %+v, want %+v", got, want)
	}
}

// Every character that the figures use on their own exists in the fonts.
func TestGlyphsExist(t *testing.T) {
	for _, weight := range []string{"normal", "italic"} {
		f := style(8).Font
		r := run{italic: weight == "italic", scale: 1}
		face := handler().face(r, f)
		for _, c := range "Δ−°±%…–0123456789()[]/,.;:=" {
			if g, err := face.Face.GlyphIndex(nil, c); err != nil || g == 0 {
				t.Errorf("%s: no glyph for %q", weight, c)
			}
		}
	}
}

func TestVerdictWords(t *testing.T) {
	seen := map[string]bool{}
	for _, s := range diagnostics.States {
		a := &diagnostics.Assessment{Verdict: diagnostics.Verdict{State: s}}
		a.Curvature.ToleranceKJ = 2.613
		w := verdictWords(a)
		if w == "" || seen[w] {
			t.Errorf("%s: %q", s, w)
		}
		seen[w] = true
	}
	a := &diagnostics.Assessment{Verdict: diagnostics.Verdict{State: diagnostics.CurvedOpen, ETrend: "falls"}}
	if got := unmarked(verdictWords(a)); got != "Curved: cause open; E falls" {
		t.Errorf("%q", got)
	}
}
