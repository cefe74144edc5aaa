package figure

import (
	"bytes"
	"encoding/xml"
	"errors"
	"fmt"
	"image/color"
	"io"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strings"

	"gonum.org/v1/gonum/unit/constant"
	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"
	"gonum.org/v1/plot/vg/vgpdf"
	"gonum.org/v1/plot/vg/vgsvg"

	"onebarrier/diagnostics"
)

// Options say how figures are written. The zero value is SVG with ln k against
// 10³ K/T.
type Options struct {
	Format string // svg, png or pdf; svg if empty
	Y      string // ln or lg; ln if empty
	X      string // 1000/T, 10000/T or 1/kT; 1000/T if empty
}

// xAxis is an axis of scale/T.
type xAxis struct {
	scale float64 // K
	label string
}

// yAxis is an axis of ln k / unit.
type yAxis struct {
	unit float64
	name string
}

// axes reads X and Y.
func (o Options) axes() (x xAxis, y yAxis, err error) {
	switch o.X {
	case "", "1000/T":
		x = xAxis{1e3, "10^{3} K/*T*"}
	case "10000/T":
		x = xAxis{1e4, "10^{4} K/*T*"}
	case "1/kT":
		x = xAxis{float64(constant.ElementaryCharge) / float64(constant.Boltzmann), "eV/(*k*_{B}*T*)"}
	default:
		return x, y, fmt.Errorf("figure: %q is not an x axis; choose 1000/T, 10000/T or 1/kT", o.X)
	}
	switch o.Y {
	case "", "ln":
		y = yAxis{1, "ln"}
	case "lg":
		y = yAxis{math.Ln10, "lg"}
	default:
		return x, y, fmt.Errorf("figure: %q is not a y axis; choose ln or lg", o.Y)
	}
	return x, y, nil
}

// Check reports the first option that is not known, and what would be.
func (o Options) Check() error {
	if _, err := encoder(o.Format); err != nil {
		return err
	}
	_, _, err := o.axes()
	return err
}

// extension of the files.
func (o Options) extension() string {
	if o.Format == "" {
		return "svg"
	}
	return o.Format
}

// picture is one figure: its size, its title in words, and how it is drawn.
type picture struct {
	name          string
	width, height vg.Length
	title         string
	legend        legend
	draw          func(draw.Canvas)
}

// Write draws every figure that the assessment has data for into dir, which is
// made if it does not exist, and returns the paths of the files: arrhenius, eyring,
// rate-constant, ratio, activation-energy and, after a bootstrap, change-of-e. Files are replaced whole
// or not at all, and the same assessment gives the same bytes.
func Write(dir string, a *diagnostics.Assessment, opt Options) ([]string, error) {
	encode, err := encoder(opt.Format)
	if err != nil {
		return nil, err
	}
	pictures, err := pictures(a, opt)
	if err != nil {
		return nil, err
	}
	if err := os.MkdirAll(dir, 0o777); err != nil {
		return nil, fmt.Errorf("figure: cannot make the directory: %w; name one that can be written", err)
	}
	var paths []string
	for _, p := range pictures {
		var b bytes.Buffer
		if err := encode(&b, p); err != nil {
			return paths, fmt.Errorf("figure: %s: %w", p.name, err)
		}
		path := filepath.Join(dir, p.name+"."+opt.extension())
		if err := replace(path, b.Bytes()); err != nil {
			return paths, fmt.Errorf("figure: %w", err)
		}
		paths = append(paths, path)
	}
	return paths, nil
}

// pictures lays out every figure there are data for.
func pictures(a *diagnostics.Assessment, opt Options) ([]picture, error) {
	arr, err := NewArrhenius(a, opt)
	if err != nil {
		return nil, err
	}
	p, err := drawArrhenius(a, arr, opt)
	if err != nil {
		return nil, err
	}
	ps := []picture{p}
	more, err := panels(a, opt)
	if err != nil {
		return nil, err
	}
	ps = append(ps, more...)
	if d := NewEnergy(a); d != nil {
		if p, err = drawEnergy(a, d); err != nil {
			return nil, err
		}
		ps = append(ps, p)
	}
	if d := NewChange(a); d != nil {
		if p, err = drawChange(a, d); err != nil {
			return nil, err
		}
		ps = append(ps, p)
	}
	return ps, nil
}

// replace writes a file under a temporary name and moves it into place.
func replace(path string, b []byte) (err error) {
	f, err := os.CreateTemp(filepath.Dir(path), "."+filepath.Base(path)+".*")
	if err != nil {
		return err
	}
	defer func() {
		if err != nil {
			err = errors.Join(err, os.Remove(f.Name()))
		}
	}()
	if _, err = f.Write(b); err != nil {
		return errors.Join(err, f.Close())
	}
	if err = f.Chmod(0o644); err != nil {
		return errors.Join(err, f.Close())
	}
	if err = f.Close(); err != nil {
		return err
	}
	return os.Rename(f.Name(), path)
}

// dotsPerInch of PNG files: what journals ask of half-tone figures.
const dotsPerInch = 300

// encoder finds the writer of a format.
func encoder(format string) (func(io.Writer, picture) error, error) {
	switch format {
	case "", "svg":
		return writeSVG, nil
	case "png":
		return writePNG, nil
	case "pdf":
		return writePDF, nil
	}
	return nil, fmt.Errorf("figure: format %q is not known; choose svg, png or pdf", format)
}

func writePNG(w io.Writer, p picture) error {
	c := vgimg.PngCanvas{Canvas: vgimg.NewWith(vgimg.UseWH(p.width, p.height), vgimg.UseDPI(dotsPerInch))}
	p.draw(draw.New(outlined{c}))
	_, err := c.WriteTo(w)
	return err
}

// writeSVG puts the title in words in front for those who cannot see the picture.
func writeSVG(w io.Writer, p picture) error {
	c := vgsvg.New(p.width, p.height)
	p.draw(draw.New(outlined{c}))
	var b, title bytes.Buffer
	if _, err := c.WriteTo(&b); err != nil {
		return err
	}
	if err := xml.EscapeText(&title, []byte(p.title)); err != nil {
		return err
	}
	const head = "xlink\">"
	_, err := io.WriteString(w, strings.Replace(b.String(), head, head+"\n<title>"+title.String()+"</title>", 1))
	return err
}

// pdfDate is the time of writing in a PDF file.
var pdfDate = regexp.MustCompile(`/(CreationDate|ModDate) \([^)]*\)`)

// writePDF blanks the dates, which PDF does not require, so that the same figure
// gives the same bytes. Blanks keep the offsets of the file.
func writePDF(w io.Writer, p picture) error {
	c := vgpdf.New(p.width, p.height)
	p.draw(draw.New(outlined{straightAlpha{c}}))
	var b bytes.Buffer
	if _, err := c.WriteTo(&b); err != nil {
		return err
	}
	blank := func(date []byte) []byte { return bytes.Repeat([]byte{' '}, len(date)) }
	_, err := w.Write(pdfDate.ReplaceAllFunc(b.Bytes(), blank))
	return err
}

// straightAlpha hands on colours whose RGB is not multiplied by their opacity: the
// PDF canvas takes what RGBA returns for the colour itself, and tints would come
// out as shades of grey.
type straightAlpha struct{ vg.CanvasSizer }

// SetColor implements vg.Canvas.
func (s straightAlpha) SetColor(c color.Color) {
	s.CanvasSizer.SetColor(unmultiplied(color.NRGBAModel.Convert(c).(color.NRGBA)))
}

// unmultiplied is a colour whose RGBA method leaves out the multiplication.
type unmultiplied color.NRGBA

// RGBA implements color.Color.
func (u unmultiplied) RGBA() (r, g, b, a uint32) {
	return uint32(u.R) * 0x101, uint32(u.G) * 0x101, uint32(u.B) * 0x101, uint32(u.A) * 0x101
}

// onePanel is a picture of a header and one plot below it.
func onePanel(name string, head header, p *plot.Plot, area draw.Canvas, height vg.Length) picture {
	return picture{
		name: name, width: pageWidth, height: height,
		title: head.inWords(""),
		draw: func(c draw.Canvas) {
			fillPage(c)
			head.draw(draw.Crop(c, margin, -margin, 0, -margin))
			area.Canvas = c.Canvas
			p.Draw(area)
		},
	}
}
