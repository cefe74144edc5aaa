package workbook

import (
	"encoding/xml"
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"

	"onebarrier/models/dataset"
)

const mostRows = 1 << 20 // of a sheet

// content says what a cell holds.
type content uint8

const (
	isText content = iota
	isNumber
	isPercent // a number shown in per cent
	isDate    // text is the date, written as ISO 8601
	isError
	isFormula // text is a formula whose result is not stored
)

// cell is a cell that is not empty.
type cell struct {
	text string // a number as stored
	col  uint16 // from 0
	kind content
}

// row is a row with such cells.
type row struct {
	line   int // from 1
	hidden bool
	cells  []cell
}

// area is a range of cells, from 0, both ends included.
type area struct{ row, col, lastRow, lastCol int }

// sheet is what a worksheet holds.
type sheet struct {
	sheetInfo
	rows          []row
	merged        []area
	hiddenColumns []area
	formulas      formulas
}

// formulas are those whose results are not stored.
type formulas struct {
	cells []string // the first few
	row   int      // of the first
	count int
}

// problem tells of them; nil where there are none.
func (f *formulas) problem(b *book, sheet string) error {
	if f.count == 0 {
		return nil
	}
	where := strings.Join(f.cells, ", ")
	if n := f.count - len(f.cells); n > 0 {
		where += " and " + strconv.Itoa(n) + " more"
	}
	return dataset.Problems{b.problem(codeFormula, sheet, f.row, "the results of formulas are not stored, in %s", where)}
}

// readSheet reads the cells of a worksheet.
func (b *book) readSheet(info sheetInfo) (*sheet, error) {
	if err := b.sharedStrings(); err != nil {
		return nil, b.failure(err, info.name)
	}
	r := &sheetReader{b: b, s: &sheet{sheetInfo: info}}
	if err := b.walk(info.part, r); err != nil {
		return nil, b.failure(err, info.name)
	}
	return r.s, nil
}

// sheetReader walks over a worksheet.
type sheetReader struct {
	b *book
	s *sheet

	all  []cell // one backing array for many rows
	from int    // where the row that is read begins in it

	line                              int // of the row that is read
	hidden                            bool
	col                               int // of the last cell, from 0; -1 before the first
	style                             int
	typ                               string
	in                                byte // 'v', 'f' or 0: the element that is read
	value                             []byte
	rich                              richText
	inRow, inCell, inline, hasF, hasV bool
	formula                           []byte
}

func (r *sheetReader) start(name string, attrs []xml.Attr) error {
	if r.inline {
		r.rich.start(name, attrs)
		return nil
	}
	switch name {
	case "v":
		if r.inCell {
			r.in, r.hasV = 'v', true
		}
	case "c":
		if r.inRow {
			return r.startCell(attrs)
		}
	case "f":
		if r.inCell {
			r.in, r.hasF = 'f', true
		}
	case "is":
		if r.inCell {
			r.inline = true
			r.rich.reset()
		}
	case "row":
		line := r.line + 1
		if s := attr(attrs, "r"); s != "" {
			n, err := strconv.Atoi(s)
			if err != nil || n < line || n > mostRows {
				return fmt.Errorf("row %q after row %d", s, r.line)
			}
			line = n
		}
		if line > mostRows {
			return errors.New("a sheet has 1048576 rows")
		}
		r.line, r.col, r.inRow = line, -1, true
		r.hidden = isTrue(attr(attrs, "hidden"))
	case "col":
		if isTrue(attr(attrs, "hidden")) {
			first, err1 := strconv.Atoi(attr(attrs, "min"))
			last, err2 := strconv.Atoi(attr(attrs, "max"))
			if err1 == nil && err2 == nil {
				r.s.hiddenColumns = append(r.s.hiddenColumns, area{col: first - 1, lastCol: last - 1})
			}
		}
	case "mergeCell":
		a, ok := parseArea(attr(attrs, "ref"))
		if !ok {
			return fmt.Errorf("merged cells %q", attr(attrs, "ref"))
		}
		r.s.merged = append(r.s.merged, a)
	}
	return nil
}

func (r *sheetReader) startCell(attrs []xml.Attr) error {
	r.inCell, r.hasF, r.hasV, r.in = true, false, false, 0
	r.value, r.formula = r.value[:0], r.formula[:0]
	r.typ, r.style = "", 0
	r.rich.reset()
	col := r.col + 1
	for i := range attrs {
		switch a := &attrs[i]; a.Name.Local {
		case "r":
			c, line, ok := parseCell(a.Value)
			if !ok || line != r.line-1 || c < col {
				return fmt.Errorf("cell %q in row %d, after column %d", a.Value, r.line, col)
			}
			col = c
		case "t":
			r.typ = a.Value
		case "s":
			r.style, _ = strconv.Atoi(a.Value) // no number: no format
		}
	}
	if col >= dataset.MostColumns {
		return dataset.Problems{r.b.problem(codeWide, r.s.name, r.line, "the row has more than 16384 cells")}
	}
	r.col = col
	return nil
}

func (r *sheetReader) text(s []byte) {
	switch {
	case r.inline:
		r.rich.text(s)
	case r.in == 'v':
		r.value = append(r.value, s...)
	case r.in == 'f':
		r.formula = append(r.formula, s...)
	}
}

func (r *sheetReader) end(name string) error {
	if r.inline {
		if name == "is" {
			r.inline = false
		}
		r.rich.end(name)
		return nil
	}
	switch name {
	case "v", "f":
		r.in = 0
	case "c":
		if r.inCell {
			r.inCell = false
			return r.endCell()
		}
	case "row":
		r.inRow = false
		if n := len(r.all); n > r.from {
			r.s.rows = append(r.s.rows, row{r.line, r.hidden, r.all[r.from:n:n]})
			r.from = n
		}
	}
	return nil
}

// endCell keeps the cell that was read, unless it is empty.
func (r *sheetReader) endCell() error {
	c := cell{col: uint16(r.col)}
	if r.hasF && len(r.value) == 0 && !(r.typ == "str" && r.hasV) && r.typ != "inlineStr" {
		c.kind, c.text = isFormula, "="+cleanText(string(r.formula))
		f := &r.s.formulas
		if f.count++; f.count == 1 {
			f.row = r.line
		}
		if len(f.cells) < 3 {
			f.cells = append(f.cells, columnName(r.col)+strconv.Itoa(r.line))
		}
		r.keep(c)
		return nil
	}
	switch r.typ {
	case "s":
		if len(r.value) == 0 {
			return nil
		}
		i, err := strconv.Atoi(strings.TrimSpace(string(r.value)))
		if err != nil || i < 0 || i >= len(r.b.strings) {
			return fmt.Errorf("cell %s%d refers to a text that is not there", columnName(r.col), r.line)
		}
		c.text = r.b.strings[i]
	case "inlineStr":
		c.text = r.rich.String()
	case "str":
		c.text = cleanText(string(r.value))
	case "b":
		c.text = "FALSE"
		if isTrue(strings.TrimSpace(string(r.value))) {
			c.text = "TRUE"
		}
		if len(r.value) == 0 {
			c.text = ""
		}
	case "e":
		c.text, c.kind = strings.TrimSpace(string(r.value)), isError
	case "d":
		c.text, c.kind = strings.TrimSpace(string(r.value)), isDate
	default:
		c.text, c.kind = strings.TrimSpace(string(r.value)), isNumber
		r.formatted(&c)
	}
	if c.text != "" {
		r.keep(c)
	}
	return nil
}

// keep adds a cell to the row that is read. Growing one array of all cells would
// hold it twice.
func (r *sheetReader) keep(c cell) {
	if len(r.all) == cap(r.all) {
		row := r.all[r.from:]
		r.all = append(make([]cell, 0, max(4096, 2*len(row))), row...)
		r.from = 0
	}
	r.all = append(r.all, c)
}

// formatted looks at how a number is shown: a date is none, and per cent is a unit.
func (r *sheetReader) formatted(c *cell) {
	f := plain
	if r.style > 0 && r.style < len(r.b.formats) {
		f = r.b.formats[r.style]
	}
	if f == plain && len(c.text) <= 15 {
		return
	}
	x, err := strconv.ParseFloat(c.text, 64)
	if err != nil || math.IsInf(x, 0) || math.IsNaN(x) {
		return // the grammar of cells says what is wrong
	}
	switch f {
	case percent:
		c.kind = isPercent
	case date:
		if iso, ok := isoDate(x, r.b.from1904); ok {
			c.kind, c.text = isDate, iso
			return
		}
	}
	// 298.14999999999998 is 298.15: the fewest digits that give the number back.
	c.text = strconv.FormatFloat(x, 'g', -1, 64)
}

// parseCell reads a name such as AB12: column and row from 0.
func parseCell(s string) (col, line int, ok bool) {
	i := 0
	for i < len(s) && (s[i] >= 'A' && s[i] <= 'Z' || s[i] >= 'a' && s[i] <= 'z') {
		col = col*26 + int(s[i]|0x20-'a') + 1
		if i++; col > dataset.MostColumns {
			return 0, 0, false
		}
	}
	from := i
	for i < len(s) && s[i] >= '0' && s[i] <= '9' {
		line = line*10 + int(s[i]-'0')
		if i++; line > mostRows {
			return 0, 0, false
		}
	}
	return col - 1, line - 1, from > 0 && i > from && i == len(s) && line > 0
}

func parseArea(s string) (area, bool) {
	from, to, found := strings.Cut(strings.ReplaceAll(s, "$", ""), ":")
	if !found {
		to = from
	}
	c, r, ok1 := parseCell(from)
	d, q, ok2 := parseCell(to)
	return area{r, c, q, d}, ok1 && ok2 && c <= d && r <= q
}

// columnName is the name of a column counted from 0: A, Z, AA, XFD.
func columnName(col int) string {
	s := ""
	for n := col + 1; n > 0; n = (n - 1) / 26 {
		s = string(rune('A'+(n-1)%26)) + s
	}
	return s
}

func (a area) String() string {
	return fmt.Sprintf("%s%d:%s%d", columnName(a.col), a.row+1, columnName(a.lastCol), a.lastRow+1)
}
