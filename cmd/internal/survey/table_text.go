package survey

import (
	"bufio"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"

	"onebarrier/cmd/internal/report"
)

// Widths of the columns of text; the name takes what is left of the page.
const (
	pointsWidth   = 4
	stateWidth    = 16 // beyond-prefactor
	changeWidth   = 7
	intervalWidth = 16
	qWidth        = 8
)

// textTable writes a table for people. Its columns have fixed widths, so that a row can
// be written before the next one is known.
type textTable struct {
	w       *bufio.Writer
	layout  report.Text
	name    int // its width
	level   string
	started bool
}

func newTextTable(w io.Writer, layout report.Text, confidence string) tableWriter {
	level := confidence
	if c, err := strconv.ParseFloat(confidence, 64); err == nil {
		level = fmt.Sprintf("%g\u00a0%%", math.Round(1e4*c)/100)
	}
	return &textTable{
		w: bufio.NewWriter(w), layout: layout, level: level,
		name: layout.Columns() - pointsWidth - stateWidth - changeWidth - intervalWidth - qWidth - 2*5,
	}
}

func (t *textTable) begin() error { return nil }

// line writes the cells of a row.
func (t *textTable) line(name, points, state, change, interval, q string) string {
	s := strings.Join([]string{
		report.Pad(name, t.name), report.PadLeft(points, pointsWidth), report.Pad(state, stateWidth),
		report.PadLeft(change, changeWidth), report.PadLeft(interval, intervalWidth), report.PadLeft(q, qWidth),
	}, "  ")
	return strings.TrimRight(s, " ")
}

func (t *textTable) row(r *Row) error {
	if !t.started {
		t.started = true
		head := t.line("data set", "N", "verdict", "ΔE", t.level+" interval", "q")
		fmt.Fprintln(t.w, t.layout.Dim(strings.ReplaceAll(head, "\u00a0", " ")))
	}
	name := report.Shorten(printable(r.Dataset), t.name)
	if r.Dataset == "" {
		name = report.Shorten(printable(r.SourceFile), t.name)
	}
	points := report.Unknown
	if r.Points != UnknownCount {
		points = strconv.Itoa(r.Points)
	}
	var line string
	if r.ErrorCode != "" {
		why := r.ErrorCode
		if r.ErrorRow != UnknownCount {
			why += fmt.Sprintf(", line %d", r.ErrorRow)
		}
		if r.Error != "" {
			why += ": " + r.Error
		}
		line = report.Pad(name, t.name) + "  " + report.PadLeft(points, pointsWidth) + "  "
		line += cut(printable(why), t.layout.Columns()-utf8.RuneCountInString(line))
	} else {
		change, interval := changeOfE(r)
		line = t.line(name, points, r.State, change, interval, share(r.QValue))
	}
	_, err := fmt.Fprintln(t.w, line)
	return err
}

// leastShare is the smallest q that is written as a number: below it the tails of no
// real error are known.
const leastShare = 1e-9

func share(q float64) string {
	if q < leastShare {
		return "< 10⁻⁹"
	}
	return report.Probability(q)
}

// changeOfE writes ΔE in kJ/mol and its interval, to two digits of its width.
func changeOfE(r *Row) (change, interval string) {
	lower, upper := r.EChangeLower, r.EChangeUpper
	decimals := 1
	if known(lower) && known(upper) && upper > lower {
		decimals = min(max(0, report.DecimalsFor(upper-lower, 2)), 3)
	}
	change = report.Signed(r.EChange, decimals)
	if utf8.RuneCountInString(change) > changeWidth {
		change = report.OneDigit(r.EChange)
	}
	if !known(lower) && !known(upper) {
		return change, report.Unknown
	}
	interval = report.Signed(lower, decimals) + " to " + report.Signed(upper, decimals)
	if utf8.RuneCountInString(interval) > intervalWidth {
		interval = report.OneDigit(lower) + " to " + report.OneDigit(upper)
	}
	return change, interval
}

func (t *textTable) end(n Tally) error {
	var notes []string
	note := func(format string, args ...any) { notes = append(notes, fmt.Sprintf(format, args...)) }
	switch {
	case n.Sets == 0:
		note("The store holds no data set; survey run puts them there.")
	case n.Shown == 0:
		note("None of the %s passes the filters.", report.Count(n.Sets, "data set"))
	case n.Shown < n.Sets:
		note("%d of %s shown.", n.Shown, report.Count(n.Sets, "data set"))
	default:
		note("%s.", report.Count(n.Sets, "data set"))
	}
	if n.Sets > 0 {
		note("%d can be tested; q is the false discovery share (Benjamini and Hochberg 1995) over these, whatever is shown, for the test that E does not change. q is at most %g for %d of them.",
			n.Testable, usualQ, n.Found)
	}
	if n.Failed > 0 {
		note("%d could not be used: survey status counts the reasons.", n.Failed)
	}
	if n.Shown > 0 {
		note("ΔE is the change of E over the measured range in kJ/mol. onebarrier survey show NAME prints one assessment; --format csv has every column.")
		fmt.Fprintln(t.w)
	}
	for _, line := range report.Wrap(strings.Join(notes, " "), t.layout.Columns()) {
		fmt.Fprintln(t.w, line)
	}
	return t.w.Flush()
}

// printable takes out of a text what would move the cursor of a terminal.
func printable(s string) string {
	return strings.Map(func(r rune) rune {
		switch {
		case r == utf8.RuneError, unicode.IsControl(r), unicode.Is(unicode.Bidi_Control, r):
			return '\ufffd'
		case unicode.IsSpace(r):
			return ' '
		}
		return r
	}, s)
}

// cut ends a text that is too long.
func cut(s string, width int) string {
	r := []rune(s)
	if len(r) <= width {
		return s
	}
	return string(r[:width-1]) + "…"
}
