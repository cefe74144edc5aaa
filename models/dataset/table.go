package dataset

import (
	"crypto/sha256"
	"encoding/hex"
	"math"
	"path/filepath"
	"regexp"
	"strings"
	"unicode"
	"unicode/utf16"
	"unicode/utf8"

	"golang.org/x/text/encoding/charmap"
)

// Row is one row of a table of cells. Line is its line in the file, from 1; a
// workbook counts rows.
type Row struct {
	Line  int
	Cells []string
}

// Table is a file as cells, before any of them has a meaning. Other kinds of files
// are turned into one of these.
type Table struct {
	Name   string // file name as the user gave it
	Sheet  string // "" for text
	SHA256 string // of the bytes read, in hex
	Rows   []Row  // without comments
	// Blank holds, for each row of Rows, whether a blank line came before it.
	// A row of empty cells counts as blank and is not in Rows.
	Blank []bool
	// LastComment is the last comment before the first row, without its #.
	LastComment     string
	LastCommentLine int
	Delimiter       byte // ',', ';', '\t', ' ' or 0
	Encoding        string
	mayHoldComma    bool     // some cell may hold a comma
	first           []string // first lines of a table split at spaces, as they stand
	width           int      // columns that are known to be filled, below what Rows holds
}

// MostColumns is the most columns that a table may have: what spreadsheets allow.
const MostColumns = 16384

// spreadsheetErrors begin with # and are no comments.
var spreadsheetErrors = []string{"#N/A", "#DIV/0!", "#VALUE!", "#REF!", "#NUM!", "#NAME?", "#NULL!"}

// ParseTable splits the bytes of a text table into cells.
func ParseTable(name string, data []byte) (*Table, error) {
	sum := sha256.Sum256(data)
	t := &Table{Name: name, SHA256: hex.EncodeToString(sum[:])}
	text, encoding, err := decode(data)
	if err != "" {
		return nil, Problems{problem(codeNotText, name, 0, "", err)}
	}
	t.Encoding = encoding
	lines := newRecords(name, text)
	t.Delimiter = lines.delimiter
	t.mayHoldComma = strings.IndexByte(text, ',') >= 0 && (t.Delimiter != ',' || strings.IndexByte(text, '"') >= 0)
	if ps := t.split(lines); len(ps) > 0 {
		return nil, ps
	}
	return t, nil
}

// newRecords decides how a text is split, by its beginning.
func newRecords(name, text string) *records {
	r := &records{splitter: splitter{s: text, line: 1}, name: name}
	if rest, ok := strings.CutPrefix(text, "sep="); ok && len(rest) > 1 && (rest[1] == '\n' || rest[1] == '\r') {
		r.delimiter = rest[0]
		r.next(0)
	} else {
		r.delimiter = delimiter(name, text)
	}
	return r
}

// decode turns bytes into text: UTF-8, UTF-16 with a byte order mark, else
// Windows-1252. problem is "" unless the bytes are no text.
func decode(b []byte) (text, encoding, problem string) {
	switch {
	case len(b) >= 2 && (b[0] == 0xFF && b[1] == 0xFE || b[0] == 0xFE && b[1] == 0xFF):
		big := b[0] == 0xFE
		b = b[2:]
		units := make([]uint16, len(b)/2)
		for i := range units {
			lo, hi := b[2*i], b[2*i+1]
			if big {
				lo, hi = hi, lo
			}
			units[i] = uint16(hi)<<8 | uint16(lo)
		}
		text, encoding = string(utf16.Decode(units)), "UTF-16"
	case utf8.Valid(b):
		text, encoding = strings.TrimPrefix(string(b), "\uFEFF"), "UTF-8"
	default:
		out, err := charmap.Windows1252.NewDecoder().Bytes(b)
		if err != nil {
			return "", "", "the bytes are neither UTF-8, UTF-16 nor Windows-1252"
		}
		text, encoding = string(out), "Windows-1252"
	}
	if strings.HasPrefix(text, "PK\x03\x04") {
		return "", "", "this is a workbook or another compressed file, not a text table"
	}
	if what := markup(text); what != "" {
		return "", "", "this is " + what + ", not a table"
	}
	if strings.IndexByte(text, 0) >= 0 {
		return "", "", "the file holds NUL bytes: it is not a text table, or it is UTF-16 without a byte order mark"
	}
	return text, encoding, ""
}

// reJSON is how a JSON document of records begins; no heading does.
var reJSON = regexp.MustCompile(`^(?:\[\s*)*\{\s*["}]`)

// markup names a document that is text but no table: a web page saved under the name
// of the table it shows, a JSON or XML export.
func markup(text string) string {
	start := strings.ToLower(strings.TrimSpace(text[:min(len(text), 1024)]))
	switch {
	case strings.HasPrefix(start, "<!doctype html"), strings.HasPrefix(start, "<html"):
		return "an HTML page"
	case strings.HasPrefix(start, "<?xml"):
		return "an XML document"
	case reJSON.MatchString(start):
		return "a JSON document"
	}
	return ""
}

// splitter walks over the records of a text.
type splitter struct {
	s    string
	line int
	cell []string // reused
}

// next reads one record: the cells (valid until the next call), its first line,
// whether a quote was never closed, and whether there was a record at all.
// delimiter ' ' splits at runs of spaces and tabs, 0 does not split.
func (p *splitter) next(delimiter byte) (cells []string, line int, unclosed, ok bool) {
	if p.s == "" {
		return nil, p.line, false, false
	}
	line = p.line
	p.cell = p.cell[:0]
	s := p.s
	i := 0
	for {
		if delimiter == ' ' {
			for i < len(s) && (s[i] == ' ' || s[i] == '\t') {
				i++
			}
			if i < len(s) && (s[i] == '\n' || s[i] == '\r') || i == len(s) {
				break
			}
		}
		// Spaces before a quote are no part of the cell.
		j := i
		for j < len(s) && s[j] == ' ' {
			j++
		}
		if j < len(s) && s[j] == '"' && delimiter != 0 {
			text, n, lines, closed := quoted(s[j:])
			p.line += lines
			if !closed {
				p.s = ""
				return p.cell, line, true, true
			}
			i = j + n
			tail := i
			for i < len(s) && s[i] != '\n' && s[i] != '\r' && s[i] != delimiter && !(delimiter == ' ' && s[i] == '\t') {
				i++
			}
			if after := trimSpaces(s[tail:i]); after != "" {
				text += after // "a"b is no well-formed cell: keep all of it
			}
			p.cell = append(p.cell, text)
		} else {
			start := i
			for i < len(s) {
				c := s[i]
				if c == '\n' || c == '\r' || c == delimiter && c != 0 || delimiter == ' ' && c == '\t' {
					break
				}
				i++
			}
			p.cell = append(p.cell, trimSpaces(s[start:i]))
		}
		if i == len(s) || s[i] == '\n' || s[i] == '\r' {
			break
		}
		i++ // the delimiter
		if len(p.cell) > MostColumns {
			return p.cell, line, false, true // refused; the rest does not matter
		}
	}
	if i < len(s) {
		if s[i] == '\r' && i+1 < len(s) && s[i+1] == '\n' {
			i++
		}
		i++
		p.line++
	}
	p.s = s[i:]
	return p.cell, line, false, true
}

func trimSpaces(s string) string {
	for len(s) > 0 && (s[0] == ' ' || s[0] == '\t') {
		s = s[1:]
	}
	for len(s) > 0 && (s[len(s)-1] == ' ' || s[len(s)-1] == '\t') {
		s = s[:len(s)-1]
	}
	return s
}

// quoted reads a quoted cell at the start of s: its text, its length with quotes,
// the lines it spans beyond the first.
func quoted(s string) (text string, n, lines int, closed bool) {
	doubled := false
	for i := 1; i < len(s); i++ {
		switch s[i] {
		case '\n':
			lines++
		case '"':
			if i+1 < len(s) && s[i+1] == '"' {
				doubled = true
				i++
				continue
			}
			text = s[1:i]
			if doubled {
				text = strings.ReplaceAll(text, `""`, `"`)
			}
			return strings.TrimSpace(text), i + 1, lines, true
		}
	}
	return "", len(s), lines, false
}

// delimiter decides how a text is split, by its first lines: the first of tab,
// semicolon, comma that splits all of them into the same number (two or more) of
// cells, then spaces, then the first that splits the heading at all. Where tabs split
// the lines that hold one into the same number of cells, lines without one are a
// caption above or a remark below, whatever their spaces: no one types a tab into a
// remark. A name in .tsv says that it is tabs.
func delimiter(name, text string) byte {
	if isTidy(text) {
		return ','
	}
	const most = 6
	var sample []string
	var tabbed []string // those of sample that hold a tab
	ends := true        // they follow one another
	for rest := text; rest != "" && len(sample) < most; {
		var l string
		l, rest = cutLine(rest)
		// A tab at the end belongs to an empty cell.
		if strings.TrimSpace(l) != "" && !isComment(strings.TrimSpace(l)) {
			l = l[:min(len(l), 1<<16)]
			sample = append(sample, l)
			if strings.Contains(l, "\t") {
				ends = ends && (len(tabbed) == 0 || strings.Contains(sample[len(sample)-2], "\t"))
				tabbed = append(tabbed, l)
			}
		}
	}
	if len(sample) == 0 {
		return 0
	}
	// count gives the cells of a line without and with the empty ones at its end.
	count := func(line string, d byte) (filled, all int) {
		p := splitter{s: line, line: 1}
		cells, _, _, _ := p.next(d)
		all = len(cells)
		for len(cells) > 0 && cells[len(cells)-1] == "" {
			cells = cells[:len(cells)-1]
		}
		return len(cells), all
	}
	// regular: all lines, but for spare (a title above the heading, a note, a
	// heading with spaces), have as many cells as a line with letters near the top,
	// whose last cells may be empty.
	regular := func(sample []string, d byte, spare int) bool {
		counts := map[int]int{}
		best := 0
		filled, all := make([]int, len(sample)), make([]int, len(sample))
		for i, l := range sample {
			filled[i], all[i] = count(l, d)
			n := filled[i]
			if counts[n]++; i < 2 && n >= 2 && strings.ContainsFunc(l, unicode.IsLetter) {
				best = n
			}
		}
		if spare > 0 && d == ' ' { // "T / K   k / s-1" over two columns
			for n := range counts {
				if n >= 2 && counts[n] > counts[best] {
					best = n
				}
			}
		}
		fitting := 0
		for i := range sample {
			if filled[i] <= best && best <= all[i] {
				fitting++
			}
		}
		return best >= 2 && fitting >= len(sample)-spare
	}
	if ends && len(tabbed) > 1 && regular(tabbed, '\t', 0) {
		return '\t'
	}
	if strings.EqualFold(filepath.Ext(name), ".tsv") && strings.Contains(text, "\t") && !regular(sample, ' ', 0) {
		return '\t'
	}
	for spare := range 2 {
		for _, d := range []byte{'\t', ';', ',', ' '} {
			if regular(sample, d, spare) {
				return d
			}
		}
	}
	for _, d := range []byte{'\t', ';', ',', ' '} {
		for _, l := range sample {
			if n, _ := count(l, d); n >= 2 {
				return d
			}
		}
	}
	return 0
}

// cutLine cuts the first line, ended by \n, \r\n or \r.
func cutLine(s string) (line, rest string) {
	i := strings.IndexAny(s, "\r\n")
	if i < 0 {
		return s, ""
	}
	line = s[:i]
	if s[i] == '\r' && i+1 < len(s) && s[i+1] == '\n' {
		i++
	}
	return line, s[i+1:]
}

func isComment(line string) bool {
	if line == "" || line[0] != '#' {
		return false
	}
	for _, e := range spreadsheetErrors {
		if strings.HasPrefix(line, e) {
			return false
		}
	}
	return true
}

// records walks over the rows of a text; comments and blank lines are no rows.
type records struct {
	splitter
	name      string
	delimiter byte
	// more adds text behind what is left of it; false at the end. nil: all is there.
	more func(*splitter) bool

	rows        int
	comment     string // the last before the first row, without its #
	commentLine int
	rest        string // the text from the beginning of the row
}

// row reads the next row: its cells (valid until the next call), its line, and
// whether a blank line came before it.
func (r *records) row() (cells []string, line int, blank, ok bool, ps Problems) {
	for {
		if r.s == "" && (r.more == nil || !r.more(&r.splitter)) {
			return nil, 0, false, false, nil
		}
		if l := strings.TrimLeft(r.s[:min(len(r.s), 64)], " \t\""); isComment(l) {
			var c string
			at := r.line
			c, r.s = cutLine(r.s)
			r.line++
			if r.rows == 0 {
				r.comment, r.commentLine = strings.Trim(c, " \t#\""), at
			}
			continue
		}
		r.rest = r.s
		from := r.line
		cells, line, unclosed, ok := r.next(r.delimiter)
		if unclosed && r.more != nil {
			if r.s, r.line = r.rest, from; r.more(&r.splitter) {
				continue
			}
		}
		if !ok {
			return nil, 0, false, false, nil
		}
		if unclosed {
			return nil, 0, false, false, Problems{problem(codeUnclosedQuote, r.name, line, "", "a quotation mark is never closed")}
		}
		if len(cells) > MostColumns {
			return nil, 0, false, false, Problems{problem(codeTooManyColumns, r.name, line, "", "the row has more than 16384 cells")}
		}
		empty := true
		for _, c := range cells {
			if c != "" && strings.TrimSpace(c) != "" {
				empty = false
				break
			}
		}
		if empty {
			blank = true
			continue
		}
		r.rows++
		return cells, line, blank, true, nil
	}
}

// split fills Rows.
func (t *Table) split(r *records) Problems { return t.splitFirst(r, math.MaxInt) }

// splitFirst fills Rows with the first rows.
func (t *Table) splitFirst(r *records, most int) Problems {
	var all []string // one backing array for many rows
	for len(t.Rows) < most {
		cells, line, blank, ok, ps := r.row()
		if !ok {
			t.LastComment, t.LastCommentLine = r.comment, r.commentLine
			return ps
		}
		if len(all)+len(cells) > cap(all) {
			all = make([]string, 0, max(4096, len(cells)))
		}
		from := len(all)
		all = append(all, cells...)
		t.Rows = append(t.Rows, Row{line, all[from:len(all):len(all)]})
		t.Blank = append(t.Blank, blank)
		if t.Delimiter == ' ' && len(t.first) < 3 {
			l, _ := cutLine(r.rest)
			t.first = append(t.first, l)
		}
	}
	t.LastComment, t.LastCommentLine = r.comment, r.commentLine
	return nil
}

// Append adds a row of another kind of table than text. blank says whether a blank
// row came before it.
func (t *Table) Append(line int, cells []string, blank bool) {
	t.Rows = append(t.Rows, Row{line, cells})
	t.Blank = append(t.Blank, blank)
	for _, c := range cells {
		t.mayHoldComma = t.mayHoldComma || strings.IndexByte(c, ',') >= 0
	}
}

// baseName is the name of a data set that its file does not name.
func (t *Table) baseName() string {
	if t.Name == "-" {
		return "stdin"
	}
	b := filepath.Base(t.Name)
	b = strings.TrimSuffix(b, filepath.Ext(b))
	if t.Sheet != "" {
		b += "/" + t.Sheet
	}
	return b
}
