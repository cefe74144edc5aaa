// Package report turns results into bytes: text for people, JSON for programs.
// A new output form is one file here; what is computed lives in the library.
package report

import (
	"fmt"
	"io"
	"strings"
	"unicode/utf8"
)

// Text says how text is laid out.
type Text struct {
	Width  int  // columns; 0 means 80
	Colour bool // emphasis by colour and weight; no meaning rests on it
	// LocalEnergies asks for the table of E between neighbouring temperatures.
	LocalEnergies bool
	// Influence asks for the tables of what each temperature and point, and errors of T, do
	// to the verdict.
	Influence bool
}

const (
	defaultWidth = 80
	minWidth     = 80  // tables are not squeezed further
	maxWidth     = 100 // longer lines are hard to read
	margin       = 10  // the side heads stand here
	nbsp         = '\u00a0'
	unknown      = "–"
)

func (t Text) width() int {
	if t.Width == 0 {
		return defaultWidth
	}
	return min(max(t.Width, minWidth), maxWidth)
}

func (t Text) sgr(code, s string) string {
	if !t.Colour || s == "" {
		return s
	}
	return "\x1b[" + code + "m" + s + "\x1b[0m"
}

func (t Text) bold(s string) string  { return t.sgr("1", s) }
func (t Text) dim(s string) string   { return t.sgr("2", s) }
func (t Text) amber(s string) string { return t.sgr("1;33", s) }

// page is a text answer: side heads in the left margin, beside them a body that
// is never wider than the page.
type page struct {
	Text
	b strings.Builder
}

func (t Text) newPage() *page { return &page{Text: t} }

// body is the width that is left beside the margin.
func (p *page) body() int { return p.width() - margin }

// section writes lines beside a side head, and a blank line before every
// section but the first. Lines must fit the body already.
func (p *page) section(head string, lines ...string) {
	if len(lines) == 0 {
		return
	}
	if p.b.Len() > 0 {
		p.b.WriteByte('\n')
	}
	for i, l := range lines {
		h := ""
		if i == 0 {
			h = head
		}
		row := p.dim(h) + strings.Repeat(" ", margin-len(h)) + l
		p.b.WriteString(strings.TrimRight(row, " "))
		p.b.WriteByte('\n')
	}
}

// writeTo hands the page over in one call.
func (p *page) writeTo(w io.Writer) error {
	_, err := io.WriteString(w, strings.ReplaceAll(p.b.String(), string(nbsp), " "))
	return err
}

// Wrap breaks text at spaces into lines of at most width columns; a word that is
// longer has a line of its own. No-break spaces hold a number to its unit.
func Wrap(text string, width int) []string {
	var lines []string
	line, n := "", 0
	for _, word := range strings.FieldsFunc(text, func(r rune) bool { return r == ' ' || r == '\n' || r == '\t' }) {
		w := utf8.RuneCountInString(word)
		switch {
		case n == 0:
			line, n = word, w
		case n+1+w <= width:
			line, n = line+" "+word, n+1+w
		default:
			lines = append(lines, line)
			line, n = word, w
		}
	}
	if n > 0 {
		lines = append(lines, line)
	}
	return lines
}

// hang wraps text behind a label of a fixed width; later lines are indented by it.
func hang(label string, indent int, text string, width int) []string {
	lines := Wrap(text, width-indent)
	if len(lines) == 0 {
		lines = []string{""}
	}
	for i := range lines {
		if i == 0 {
			lines[i] = pad(label, indent) + lines[i]
		} else {
			lines[i] = strings.Repeat(" ", indent) + lines[i]
		}
	}
	return lines
}

// pad fills s with spaces on the right up to n columns.
func pad(s string, n int) string {
	return s + strings.Repeat(" ", max(0, n-utf8.RuneCountInString(s)))
}

// padLeft fills s with spaces on the left up to n columns.
func padLeft(s string, n int) string {
	return strings.Repeat(" ", max(0, n-utf8.RuneCountInString(s))) + s
}

// count writes "1 point", "2 points".
func count(n int, thing string) string {
	if n == 1 {
		return "1 " + thing
	}
	return fmt.Sprintf("%d %ss", n, thing)
}

// table aligns cells in columns two spaces apart: the columns named in right are
// set flush right, the last column is not padded.
func table(rows [][]string, right ...int) []string { return spaced(2, rows, right...) }

// spaced is table with columns so many spaces apart.
func spaced(gap int, rows [][]string, right ...int) []string {
	var widths []int
	for _, r := range rows {
		for j, c := range r {
			if j == len(widths) {
				widths = append(widths, 0)
			}
			widths[j] = max(widths[j], utf8.RuneCountInString(c))
		}
	}
	flush := map[int]bool{}
	for _, j := range right {
		flush[j] = true
	}
	out := make([]string, len(rows))
	for i, r := range rows {
		var b strings.Builder
		for j, c := range r {
			if j > 0 {
				b.WriteString(strings.Repeat(" ", gap))
			}
			if flush[j] {
				b.WriteString(padLeft(c, widths[j]))
			} else {
				b.WriteString(pad(c, widths[j]))
			}
		}
		out[i] = strings.TrimRight(b.String(), " ")
	}
	return out
}
