package report

import (
	"crypto/sha256"
	"fmt"
	"io"
	"math"
	"regexp"
	"strconv"
	"strings"
	"unicode/utf8"

	"onebarrier/diagnostics"
	"onebarrier/models"
	"onebarrier/models/dataset"
)

// InspectSchema names the layout of what was read.
const InspectSchema = "onebarrier.inspect/1"

// Inspection says what was read from files: the document of inspect.
type Inspection struct {
	Schema   string           `json:"schema"`
	Tool     diagnostics.Tool `json:"tool"`
	Files    []InspectedFile  `json:"files"`
	Problems []Problem        `json:"problems"` // of files that could not be read
	Next     string           `json:"next"`     // the command that assesses the first set, quoted for a shell
}

// InspectedFile is one table that could be read: a file, or a sheet of a workbook.
type InspectedFile struct {
	File   string         `json:"file"`
	Sheet  string         `json:"sheet"` // "" for text
	Files  []string       `json:"files"` // several where they were pooled; File joins their names
	SHA256 string         `json:"sha256"`
	Sets   []InspectedSet `json:"sets"`
}

// InspectedSet is one data set of a file.
type InspectedSet struct {
	Name         string               `json:"name"`
	Points       int                  `json:"points"`
	Used         int                  `json:"used"`
	Temperatures int                  `json:"temperatures"`
	TMin         diagnostics.Real     `json:"t_min_k"`
	TMax         diagnostics.Real     `json:"t_max_k"`
	Quantity     diagnostics.Quantity `json:"quantity"`
	Columns      []InspectedColumn    `json:"columns"`
	Data         []InspectedRow       `json:"data"`
	Assumed      []string             `json:"assumed"`
	Notices      []InspectedNotice    `json:"notices"`
}

// InspectedColumn says what one column was taken for.
type InspectedColumn struct {
	File       string           `json:"file"`
	Index      int              `json:"index"`
	Heading    string           `json:"heading"`
	Role       string           `json:"role"`
	Unit       string           `json:"unit"`
	Factor     diagnostics.Real `json:"factor"`
	Level      string           `json:"level"`
	Conversion string           `json:"conversion"`
	Confidence string           `json:"confidence"`
	Examples   []string         `json:"examples"`
}

// InspectedRow is one row as understood.
type InspectedRow struct {
	File   string           `json:"file"`
	Row    int              `json:"row"`
	T      diagnostics.Real `json:"t_k"`
	UT     diagnostics.Real `json:"u_t_k"`
	K      diagnostics.Real `json:"k"`
	UK     diagnostics.Real `json:"u_k"`
	Limit  string           `json:"limit"`
	Source string           `json:"source"`
	Used   bool             `json:"used"`
	WhyNot string           `json:"why_not"`
	// AsLimit says that a row that is not used as a measured k enters as a limit.
	AsLimit bool `json:"as_limit"`
}

// InspectedNotice is something to know about the data.
type InspectedNotice struct {
	Code    string `json:"code"`
	Message string `json:"message"`
	Cure    string `json:"cure"`
	Rows    []int  `json:"rows"`
}

// NewInspectedFile describes the sets of one table and the bytes they came from.
func NewInspectedFile(name, sheet string, content []byte, sets []*dataset.Set) InspectedFile {
	f := InspectedFile{name, sheet, []string{name}, fmt.Sprintf("%x", sha256.Sum256(content)), []InspectedSet{}}
	for _, s := range sets {
		f.Sets = append(f.Sets, newInspectedSet(s))
	}
	return f
}

// NewPooledFile describes a set that was pooled from several files.
func NewPooledFile(s *dataset.Set) InspectedFile {
	return InspectedFile{strings.Join(s.Files, " + "), "", append([]string{}, s.Files...), s.SHA256, []InspectedSet{newInspectedSet(s)}}
}

func newInspectedSet(s *dataset.Set) InspectedSet {
	nan := diagnostics.Real(math.NaN())
	out := InspectedSet{
		Name: s.Name, Points: len(s.Points), TMin: nan, TMax: nan,
		Quantity: diagnostics.Quantity{Symbol: s.Quantity.Symbol, Unit: s.Quantity.Unit, DimensionKnown: s.Quantity.Known},
		Columns:  []InspectedColumn{}, Data: []InspectedRow{},
		Assumed: append([]string{}, s.Assumed...), Notices: []InspectedNotice{},
	}
	stated := func(x float64) diagnostics.Real {
		if x == 0 {
			return nan // not stated
		}
		return diagnostics.Real(x)
	}
	var used []float64
	for _, p := range s.Points {
		out.Data = append(out.Data, InspectedRow{p.File, p.Row, diagnostics.Real(p.T), stated(p.UT), diagnostics.Real(p.K), stated(p.UK),
			p.Limit, p.Source, p.Used, p.WhyNot, p.IsLimit()})
		if !p.Used {
			continue
		}
		t := diagnostics.Real(p.T)
		if out.Used == 0 {
			out.TMin, out.TMax = t, t
		}
		out.Used++
		out.TMin, out.TMax = min(out.TMin, t), max(out.TMax, t)
		used = append(used, p.T)
	}
	out.Temperatures = models.CountTemperatures(used)
	for _, c := range s.Columns {
		out.Columns = append(out.Columns, InspectedColumn{c.File, c.Index, c.Heading, c.Role, c.Unit, diagnostics.Real(c.Factor),
			c.Level, c.Conversion, c.Confidence, append([]string{}, c.Examples...)})
	}
	for _, n := range s.Notices {
		out.Notices = append(out.Notices, InspectedNotice{n.Code, n.Message, n.Cure, append([]int{}, n.Rows...)})
	}
	return out
}

// WriteInspection prints what was read. Files that could not be read are not part
// of it: their problems go where errors go.
func WriteInspection(w io.Writer, doc Inspection, t Text) error {
	p := t.newPage()
	for _, f := range doc.Files {
		for _, s := range f.Sets {
			p.inspectedSet(f, s)
		}
	}
	if doc.Next != "" {
		p.section("next", doc.Next) // one line, however long: it is there to be copied
	}
	return p.writeTo(w)
}

// table names the table: a file, or a file and its sheet.
func (f InspectedFile) table() string {
	if f.Sheet == "" {
		return f.File
	}
	return f.File + "[" + f.Sheet + "]"
}

func (p *page) inspectedSet(f InspectedFile, s InspectedSet) {
	var lines []string
	if len(f.Sets) > 1 {
		lines = append(lines, p.bold(s.Name)+" in "+f.table())
	} else {
		for _, l := range Wrap(f.table(), p.body()) {
			lines = append(lines, p.bold(l))
		}
	}
	limits := 0
	for _, d := range s.Data {
		if d.AsLimit {
			limits++
		}
	}
	facts := count(s.Points, "row") + fmt.Sprintf(", %d used", s.Used+limits)
	if limits > 0 {
		facts += fmt.Sprintf(", %d of them as %s", limits, map[bool]string{true: "a limit", false: "limits"}[limits == 1])
	}
	if s.Used > 0 {
		facts += ", at " + count(s.Temperatures, "temperature")
		if s.Temperatures > 1 {
			facts += fmt.Sprintf(" from %s to %s\u00a0K", kelvin(s.TMin), kelvin(s.TMax))
		} else {
			facts += fmt.Sprintf(", %s\u00a0K", kelvin(s.TMin))
		}
	}
	lines = append(lines, Wrap(facts, p.body())...)
	rate := s.Quantity.Symbol + " in " + s.Quantity.Unit
	if !s.Quantity.DimensionKnown {
		rate = s.Quantity.Symbol + " without a unit: entropies and free energies will be withheld"
		if s.Quantity.Unit != "" {
			rate = fmt.Sprintf("%s in %q, a unit that was not understood: entropies and free energies will be withheld", s.Quantity.Symbol, s.Quantity.Unit)
		}
	}
	p.section("read", append(lines, Wrap(rate, p.body())...)...)

	p.section("columns", p.columns(f, s)...)
	p.section("assumed", wrapAll(s.Assumed, p.body())...)

	var bounds [][2]string
	var left []leftRow
	for _, d := range s.Data {
		switch place := rowPlace(d.File, d.Row, f.Files); {
		case d.AsLimit:
			bounds = append(bounds, [2]string{place, fmt.Sprintf("enters as a limit: k\u00a0%s\u00a0%.4g", d.Limit, float64(d.K))})
		case !d.Used:
			left = append(left, leftRow{d.File, d.Row, or(d.WhyNot, "no reason given")})
		}
	}
	p.section("limits", labelled(bounds, p.body())...)
	p.section("left out", labelled(leftOut(left, f.Files), p.body())...)

	var notices []string
	for _, n := range s.Notices {
		notices = append(notices, p.note(p.bold(n.Code), n.Code, n.Message, n.Cure, n.Rows)...)
	}
	p.section("notices", notices...)
}

// leftRow is a row that is left out, and why.
type leftRow struct {
	file string
	row  int
	why  string
}

// leftOut sets the places of rows beside the reason, once for each reason and file.
func leftOut(rows []leftRow, files []string) [][2]string {
	const most = 4 // places in a line
	var out [][2]string
	for len(rows) > 0 {
		first := rows[0]
		var same, others []leftRow
		for _, r := range rows {
			if r.why == first.why && r.file == first.file {
				same = append(same, r)
			} else {
				others = append(others, r)
			}
		}
		label := rowPlace(first.file, first.row, files)
		if rest, ok := strings.CutPrefix(label, "line "); ok && len(same) > 1 {
			label = "lines " + rest
		}
		for _, r := range same[1:min(most, len(same))] {
			label += fmt.Sprintf(", %d", r.row)
		}
		if len(same) > most {
			label += fmt.Sprintf(" and %d more", len(same)-most)
		}
		out, rows = append(out, [2]string{label, first.why}), others
	}
	return out
}

// rowPlace names a row: line 7, or b.csv:7 where the file does not go without saying.
func rowPlace(file string, row int, files []string) string {
	if len(files) == 1 && (file == files[0] || file == "") {
		return fmt.Sprintf("line %d", row)
	}
	return fmt.Sprintf("%s:%d", file, row)
}

// labelled sets texts beside their labels, as wide as the longest that leaves room.
func labelled(rows [][2]string, width int) []string {
	const most = 30
	indent := 9
	for _, r := range rows {
		if n := utf8.RuneCountInString(r[0]); n <= most {
			indent = max(indent, n)
		}
	}
	var lines []string
	for _, r := range rows {
		label := r[0]
		if utf8.RuneCountInString(label) > most {
			lines, label = append(lines, label), ""
		}
		lines = append(lines, hang(label, indent+2, r[1], width)...)
	}
	return lines
}

// columns lists what each column was taken for; those that are only kept share a
// line, since a logger's file may have a hundred of them.
func (p *page) columns(f InspectedFile, s InspectedSet) []string {
	const (
		mostKept   = 8
		shortLevel = 12 // goes beside the role
	)
	var lines []string
	for _, file := range f.Files {
		rows := [][]string{{"heading", "taken for", "unit", "how sure", "first cells"}}
		details := []string{""}
		var kept []string
		for _, c := range s.Columns {
			if c.File != file {
				continue
			}
			if c.Role == string(dataset.RoleKept) && c.Level == "" {
				kept = append(kept, shortHeading(c.Heading))
				continue
			}
			role, u, detail := c.Role, c.Unit, c.Level
			switch {
			case c.Conversion != "" && c.Level != "":
				detail += ": " + c.Conversion
			case c.Conversion != "":
				detail = c.Conversion
			case len(c.Level) <= shortLevel && c.Level != "":
				role, detail = role+" ("+c.Level+")", ""
			}
			details = append(details, detail)
			if c.Factor.Known() && c.Factor != 1 && c.Factor != 0 {
				u = strings.TrimSpace(factor(float64(c.Factor)) + " " + u)
			}
			rows = append(rows, []string{or(shortHeading(c.Heading), unknown), role, or(u, unknown), or(c.Confidence, unknown), cells(c.Examples)})
		}
		if len(f.Files) > 1 {
			lines = append(lines, p.bold(file))
		}
		for i, l := range wrappedTable(rows, p.body()) {
			if i == 0 {
				l[0] = p.dim(l[0])
			}
			lines = append(lines, l...)
			if details[i] != "" {
				lines = append(lines, hang("", 2, details[i], p.body())...)
			}
		}
		if len(kept) > 0 {
			text := strings.Join(kept[:min(mostKept, len(kept))], ", ")
			if len(kept) > mostKept {
				text += fmt.Sprintf(" and %d more", len(kept)-mostKept)
			}
			lines = append(lines, hang("kept, not used:", 16, text, p.body())...)
		}
	}
	return lines
}

// shortHeading cuts a heading that is a whole sentence; the document keeps it whole.
func shortHeading(s string) string {
	const most = 60
	if r := []rune(s); len(r) > most {
		return string(r[:most-1]) + "…"
	}
	return s
}

// cells shows the first cells of a column, each cut to a few characters.
func cells(examples []string) string {
	const most = 14
	var out []string
	for _, e := range examples {
		if r := []rune(e); len(r) > most {
			e = string(r[:most-1]) + "…"
		}
		out = append(out, strings.ReplaceAll(or(e, unknown), " ", string(nbsp)))
	}
	return or(strings.Join(out, string(nbsp)+"| "), unknown)
}

// wrappedTable is a table whose cells are wrapped so that it fits a width, as the
// lines of each row. The last column gives way first, then the widest, and words are
// broken last.
func wrappedTable(rows [][]string, width int) [][]string {
	const least, leastLast, longWord = 8, 16, 24
	n := len(rows[0])
	widths, floors := make([]int, n), make([]int, n)
	sum := 2 * (n - 1)
	for j := range widths {
		for _, r := range rows {
			widths[j] = max(widths[j], utf8.RuneCountInString(r[j]))
			for _, w := range strings.Fields(r[j]) {
				floors[j] = max(floors[j], min(utf8.RuneCountInString(w), longWord))
			}
		}
		sum += widths[j]
	}
	last := n - 1
	for ; sum > width; sum-- {
		at := last
		if widths[last] <= leastLast {
			at = widest(widths, floors)
		}
		if at < 0 {
			at = widest(widths, make([]int, n))
		}
		if widths[at] <= least {
			break
		}
		widths[at]--
	}
	var all [][]string
	counts := make([]int, len(rows))
	for i, r := range rows {
		var lines [][]string
		for j, cell := range r {
			for k, l := range breakWords(cell, widths[j]) {
				if k == len(lines) {
					lines = append(lines, make([]string, n))
				}
				lines[k][j] = l
			}
		}
		all, counts[i] = append(all, lines...), len(lines)
	}
	text := table(all)
	out := make([][]string, len(rows))
	for i, k := range counts {
		out[i], text = text[:k], text[k:]
	}
	return out
}

// widest is the index of the greatest width above its floor, -1 if none is.
func widest(widths, floors []int) int {
	at := -1
	for j, w := range widths {
		if w > floors[j] && (at < 0 || w > widths[at]) {
			at = j
		}
	}
	return at
}

// breakWords wraps text, and breaks a word that is longer than a line.
func breakWords(text string, width int) []string {
	var out []string
	for _, l := range Wrap(text, width) {
		r := []rune(l)
		for ; len(r) > width; r = r[width:] {
			out = append(out, string(r[:width]))
		}
		out = append(out, string(r))
	}
	return out
}

// note prints a finding: its code, what was found and on which lines, its cure.
func (p *page) note(styled, label, message, cure string, rows []int) []string {
	text := label + ":\u00a0" + message
	if len(rows) > 0 && !namesPlace.MatchString(message) {
		text += " (" + lineList(rows) + ")"
	}
	if cure != "" {
		text = strings.TrimSuffix(text, ".") + " →\u00a0" + cure
	}
	lines := Wrap(strings.ReplaceAll(text, " = ", "\u00a0=\u00a0"), p.body()-2)
	for i := range lines {
		if i == 0 { // the label was wrapped without its colour, which has no width
			lines[i] = styled + strings.TrimPrefix(lines[i], label)
		} else {
			lines[i] = "  " + lines[i]
		}
	}
	return lines
}

// namesPlace finds file:line in a message, "line 7", or "row 7", which is the line.
// The word alone, as in "the straight line", is no place.
var namesPlace = regexp.MustCompile(`\S:\d+\b|\b(?:rows?|lines?) \d`)

// lineList names the first few lines of a file.
func lineList(rows []int) string {
	const most = 8
	s := "line "
	if len(rows) > 1 {
		s = "lines "
	}
	for i, r := range rows {
		if i == most {
			return s + fmt.Sprintf(" and %d more", len(rows)-most)
		}
		if i > 0 {
			s += ", "
		}
		s += fmt.Sprint(r)
	}
	return s
}

func wrapAll(texts []string, width int) []string {
	var lines []string
	for _, t := range texts {
		lines = append(lines, Wrap(t, width)...)
	}
	return lines
}

// kelvin writes a temperature to the digits that matter.
func kelvin(t diagnostics.Real) string {
	if !t.Known() {
		return unknown
	}
	s := fmt.Sprintf("%.2f", float64(t))
	return strings.TrimRight(strings.TrimRight(s, "0"), ".")
}

func or(s, instead string) string {
	if s == "" {
		return instead
	}
	return s
}

// ShellWord quotes a word for a shell where it needs quoting.
func ShellWord(s string) string {
	safe := func(r rune) bool {
		return r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z' || r >= '0' && r <= '9' || strings.ContainsRune("_-./,:=+@%", r) || r > 127
	}
	if s != "" && strings.IndexFunc(s, func(r rune) bool { return !safe(r) }) < 0 {
		return s
	}
	return "'" + strings.ReplaceAll(s, "'", `'\''`) + "'"
}

// factor writes what a cell is multiplied by; a power of ten as one.
func factor(x float64) string {
	// Digits tell: log10 of 0.0001 is not -4 to the last bit.
	if e, ok := strings.CutPrefix(strconv.FormatFloat(x, 'e', -1, 64), "1e"); ok {
		n, _ := strconv.Atoi(e)
		return "10" + superscript(n)
	}
	return significant(diagnostics.Real(x), 4) + " ×"
}
