package survey

import (
	"bufio"
	"cmp"
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
	stateWidth    = 18 // beyond-prefactor and the mark of warnings
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

	asked    TableOptions
	standing Standing
	shared   map[string]bool // names that several data sets have
	warned   bool            // a row has the mark
}

func newTextTable(w io.Writer, layout report.Text, confidence string) *textTable {
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

// messages reports whether the table is one of failures, whose messages are then
// written whole.
func (t *textTable) messages() bool { return len(t.asked.States) == 1 && t.asked.States[0] == Failed }

// failure writes where a data set or file failed, and the whole message below.
func (t *textTable) failure(r *Row) error {
	where := r.place()
	if r.ErrorRow != UnknownCount {
		where += fmt.Sprintf(", line %d", r.ErrorRow)
	}
	for _, part := range []struct{ text, indent string }{{where, ""}, {printable(r.ErrorCode + ": " + r.Error), "    "}} {
		for _, l := range report.Wrap(part.text, t.layout.Columns()-len(part.indent)) {
			if _, err := fmt.Fprintln(t.w, part.indent+l); err != nil {
				return err
			}
		}
	}
	return nil
}

func (t *textTable) row(r *Row) error {
	if t.messages() {
		return t.failure(r)
	}
	if !t.started {
		t.started = true
		q := "q"
		if t.asked.ofBand() {
			q = "q_band"
		}
		head := t.line("data set", "N", "verdict", "ΔE", t.level+" interval", q)
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
		state, q := r.State, r.QValue
		if r.Warnings != "" {
			state, t.warned = report.Pad(state, stateWidth-1)+"!", true
		}
		if t.asked.ofBand() {
			q = r.QBand
		}
		line = t.line(name, points, state, change, interval, share(q))
	}
	if t.shared[r.Dataset] {
		place := Row{SourceFile: r.SourceFile, Sheet: r.Sheet}
		line += "\n" + t.layout.Dim("  in "+report.Shorten(place.place(), t.layout.Columns()-5))
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
	if n.Sets > 0 && !t.messages() {
		note("%d can be tested; q is the false discovery share (Benjamini and Hochberg 1995) over these, whatever is shown: q_value for the test that E does not change, at most %g for %d; q_band for the test that it changes by no more than a usual prefactor explains, at most %g for %d. Verdicts are at 5 %% for each data set by itself.",
			n.Testable, cmp.Or(t.asked.MaxQ, UsualQ), n.Found, cmp.Or(t.asked.MaxQBand, UsualQ), n.FoundBand)
	}
	switch {
	case n.Failed > 0 && t.messages():
	case n.Failed > 0:
		note("%d could not be used: survey status counts the reasons, --state failed prints them.", n.Failed)
	}
	if t.warned {
		note("! marks warnings: survey show tells them.")
	}
	switch {
	case n.Shown > 0 && t.messages():
		note("onebarrier survey show FILE prints every problem of one.")
	case n.Shown > 0:
		note("ΔE is the change of E over the measured range in kJ/mol. onebarrier survey show NAME prints one assessment; --format csv has every column.")
	}
	if n.Shown > 0 {
		fmt.Fprintln(t.w)
	}
	for _, s := range t.standing.Sentences() {
		for _, line := range report.Wrap(s, t.layout.Columns()) {
			fmt.Fprintln(t.w, line)
		}
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
