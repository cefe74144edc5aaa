package workbook

import (
	"strconv"
	"strings"

	"onebarrier/models/dataset"
)

// A row is as wide as the table: what lies between cells is filled in. Few cells in
// distant columns may not take more memory than this, in cells.
const (
	mostFilled  = 8       // for each cell that is not empty
	leastFilled = 1 << 22 // allowed to any sheet
)

// table makes a table of a sheet, and says what a user should know. --decimal comma
// is meant for cells of text: a stored number has none.
func (b *book) table(s *sheet, comma bool) (*dataset.Table, []dataset.Notice, error) {
	first, last := dataset.MostColumns, -1
	unmarked := comma
	n := 0 // cells
	for _, r := range s.rows {
		n += len(r.cells)
		first, last = min(first, int(r.cells[0].col)), max(last, int(r.cells[len(r.cells)-1].col))
		for i := range r.cells {
			if c := &r.cells[i]; !unmarked && c.kind == isText && strings.IndexByte(c.text, ',') >= 0 {
				unmarked = dataset.ParseCell(c.text, ',', 0).Kind == dataset.CellNumber
			}
		}
	}
	t := &dataset.Table{Name: b.name, Sheet: s.name, SHA256: b.sum, Delimiter: '\t'}
	if n == 0 {
		return t, nil, nil
	}
	width := last - first + 1
	if width*len(s.rows) > max(leastFilled, mostFilled*n) {
		return nil, nil, dataset.Problems{b.problem(codeScattered, s.name, 0, "%d cells lie in %d rows and %d columns, %s to %s", n, len(s.rows), width, columnName(first), columnName(last))}
	}

	var notices []dataset.Notice
	var hiddenRows []int
	var percents []int // columns
	var all []string   // one backing array for many rows
	data := -1         // first row of t with a number
	before, blank := 0, false
	for i := range s.rows {
		r := &s.rows[i]
		cells := r.cells
		blank = blank || before > 0 && r.line > before+1
		before = r.line
		if c := &cells[0]; c.kind == isText && c.text[0] == '#' {
			if len(t.Rows) == 0 {
				t.LastComment, t.LastCommentLine = comment(cells), r.line
			}
			continue
		}
		if len(all)+width > cap(all) {
			all = make([]string, 0, max(4096, width))
		}
		from := len(all)
		all = all[:from+width]
		out := all[from : from+width : from+width]
		clear(out)
		for j := range cells {
			c := &cells[j]
			if c.kind == isPercent && (len(percents) == 0 || percents[len(percents)-1] < int(c.col)) {
				percents = append(percents, int(c.col))
			}
			out[int(c.col)-first] = c.write(unmarked)
			if data < 0 && c.numeric() {
				data = len(t.Rows)
			}
		}
		if r.hidden {
			hiddenRows = append(hiddenRows, r.line)
		}
		t.Append(r.line, out, blank)
		blank = false
	}
	if data < 0 {
		data = len(t.Rows)
	}
	merged, err := b.fillMerged(s, t, first, data)
	if err != nil {
		return nil, nil, err
	}
	notices = append(notices, merged...)
	if len(percents) > 0 {
		notices = append(notices, say(notePercent, nil, "%s shown in per cent", columnsAre(percents)))
	}
	return t, append(notices, s.hiddenCells(hiddenRows, first, last)...), nil
}

// comment is the text of a row that begins with #, its cells apart: a heading # stands
// over numbers of rows.
func comment(cells []cell) string {
	var texts []string
	col := int(cells[0].col)
	for _, c := range cells {
		for ; col < int(c.col); col++ {
			texts = append(texts, "")
		}
		col++
		texts = append(texts, c.text)
	}
	texts[0] = strings.Trim(texts[0], " #")
	return strings.Join(texts, "\t")
}

// numeric reports whether a cell holds a number or a date, be it as text.
func (c *cell) numeric() bool {
	switch c.kind {
	case isNumber, isPercent, isDate:
		return true
	case isText:
		return dataset.ParseCell(c.text, '.', 0).Kind == dataset.CellNumber || dataset.ParseCell(c.text, ',', 0).Kind == dataset.CellNumber
	}
	return false
}

// write gives the text that the grammar of cells reads.
func (c *cell) write(unmarked bool) string {
	switch c.kind {
	case isPercent:
		if x, err := strconv.ParseFloat(c.text, 64); err == nil {
			return numeral(x, 2, unmarked) + "%"
		}
	case isNumber:
		if unmarked && strings.IndexByte(c.text, '.') >= 0 {
			if x, err := strconv.ParseFloat(c.text, 64); err == nil {
				return numeral(x, 0, true)
			}
		}
	case isError:
		// Newer errors such as #SPILL! mean no value, like the old ones.
		if dataset.ParseCell(c.text, '.', 0).Kind != dataset.CellMissing {
			return "#N/A"
		}
	}
	return c.text
}

// fillMerged repeats the value of merged cells: that of a heading in each of its
// columns, that of a cell in the data in each of its rows. A merged cell alone in a
// row above the data is a title. data is the first row of data in t.
func (b *book) fillMerged(s *sheet, t *dataset.Table, first, data int) ([]dataset.Notice, error) {
	at := map[int]int{} // row of t by line
	if len(s.merged) > 0 {
		for i, r := range t.Rows {
			at[r.Line] = i
		}
	}
	var done []string
	joined := map[int][]bool{} // columns of a heading row that were filled
	left := 0                  // cells that merged cells may cover if they do not overlap
	for _, r := range t.Rows {
		left += len(r.Cells)
	}
	for _, m := range s.merged {
		i, ok := at[m.row+1]
		c := m.col - first
		if !ok || c < 0 || c >= len(t.Rows[i].Cells) || t.Rows[i].Cells[c] == "" {
			continue
		}
		value := t.Rows[i].Cells[c]
		if i < data {
			row := t.Rows[i].Cells
			if m.lastCol == m.col || count(row) < 2 {
				continue
			}
			if joined[i] == nil {
				joined[i] = make([]bool, len(row))
			}
			joined[i][c] = true
			for j := c + 1; j < len(row) && j <= m.lastCol-first && row[j] == ""; j++ {
				row[j], joined[i][j] = value, true
			}
		} else {
			if m.lastRow == m.row {
				continue
			}
			// Rows of merged cells alone are not in t when they hold nothing else.
			for j := i + 1; j < len(t.Rows) && t.Rows[j].Line <= m.lastRow+1; j++ {
				if left--; left < 0 {
					return nil, dataset.Problems{b.problem(codeDamaged, s.name, m.row+1, "merged cells overlap, as in %s", m)}
				}
				if t.Rows[j].Cells[c] == "" {
					t.Rows[j].Cells[c] = value
				}
			}
		}
		if len(done) < 4 {
			done = append(done, m.String())
		} else if len(done) == 4 {
			done = append(done, "others")
		}
	}
	joinHeadings(t, joined, data)
	if len(done) == 0 {
		return nil, nil
	}
	return []dataset.Notice{say(noteMerged, nil, "the value was repeated over %s", strings.Join(done, ", "))}, nil
}

func count(cells []string) int {
	n := 0
	for _, c := range cells {
		if c != "" {
			n++
		}
	}
	return n
}

// joinHeadings makes one row of a heading row whose cells are merged over several
// columns and the row of words below it. A row of units is left to the reader of
// headings.
func joinHeadings(t *dataset.Table, joined map[int][]bool, data int) {
	for i := data - 2; i >= 0; i-- {
		filled := joined[i]
		if filled == nil {
			continue
		}
		upper, lower := t.Rows[i].Cells, t.Rows[i+1].Cells
		words := false
		for _, c := range lower {
			if c != "" {
				_, err := dataset.ParseUnit(strings.Trim(c, "()[] "))
				words = words || err != nil
			}
		}
		if !words {
			continue
		}
		for j, c := range upper {
			switch {
			case lower[j] == "":
				lower[j] = c
			case c == "":
			case filled[j] && dataset.ParseHeading(lower[j], nil).Role != dataset.RoleKept:
				// "Rate constants" over k1 and k2: the lower heading says it all.
			default:
				lower[j] = c + " " + lower[j]
			}
		}
		t.Rows = append(t.Rows[:i], t.Rows[i+1:]...)
		t.Blank = append(t.Blank[:i], t.Blank[i+1:]...)
		data--
	}
}

// hiddenCells says what of the table is hidden.
func (s *sheet) hiddenCells(rows []int, first, last int) []dataset.Notice {
	var columns []int
	used := map[int]bool{}
	if len(s.hiddenColumns) > 0 {
		for _, r := range s.rows {
			for i := range r.cells {
				used[int(r.cells[i].col)] = true
			}
		}
	}
	for _, h := range s.hiddenColumns {
		for c := max(h.col, first); c <= min(h.lastCol, last); c++ {
			if used[c] {
				delete(used, c)
				columns = append(columns, c)
			}
		}
	}
	var what []string
	if len(rows) > 0 {
		what = append(what, counted(len(rows), "hidden row"))
	}
	if len(columns) > 0 {
		what = append(what, counted(len(columns), "hidden column")+" ("+columnsAre(columns)+")")
	}
	if s.hidden {
		what = append(what, "a hidden sheet")
	}
	if len(what) == 0 {
		return nil
	}
	return []dataset.Notice{say(noteHidden, rows, "%s read like the others", strings.Join(what, ", "))}
}

func counted(n int, what string) string {
	s := strconv.Itoa(n) + " " + what
	if n != 1 {
		s += "s"
	}
	return s
}

// columnsAre names columns: column B, columns B, D and 3 more.
func columnsAre(cols []int) string {
	const most = 6
	var names []string
	for _, c := range cols[:min(most, len(cols))] {
		names = append(names, columnName(c))
	}
	s := "column " + strings.Join(names, ", ")
	if len(cols) > 1 {
		s = "columns " + strings.Join(names, ", ")
	}
	if len(cols) > most {
		s += " and " + strconv.Itoa(len(cols)-most) + " more"
	}
	return s
}
