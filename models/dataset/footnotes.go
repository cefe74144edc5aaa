package dataset

import (
	"slices"
	"strings"
	"unicode"
)

// footnoteSigns begin a remark below a table. Digits are none: they begin numbers.
const footnoteSigns = "*†‡§¶"

// cutFootnotes takes the lines of text that end the table, directly below its rows,
// off the n columns that are read from first on: "* mean of two titrations". Wherever
// else such a line stands it is a row that lacks cells.
func (m *maker) cutFootnotes(first, n int) {
	if m.tidied != nil || n < 2 {
		return
	}
	end := nextBlank(m.t.Blank, first+1)
	from := first + m.beforeFootnotes(m.t.Rows[first:end], n)
	if from == end {
		return
	}
	t := *m.t // whose rows are the caller's
	t.Rows = slices.Concat(t.Rows[:from], t.Rows[end:])
	t.Blank = slices.Concat(t.Blank[:from], t.Blank[end:])
	m.t = &t
}

// beforeFootnotes is how many rows stand above the footnotes that end them, whose
// lines it notes.
func (m *maker) beforeFootnotes(rows []Row, n int) int {
	from := len(rows)
	for m.tidied == nil && n > 1 && from > 0 && m.isFootnote(rows[from-1].Cells, n) {
		from--
	}
	for _, r := range rows[from:] {
		m.footnotes = append(m.footnotes, r.Line)
	}
	return from
}

// isFootnote reports whether cells under n headings are a line of text: words alone in
// the first of them, or anything behind a sign of a footnote, which a table split at
// spaces or commas scatters over cells.
func (m *maker) isFootnote(cells []string, n int) bool {
	text := strings.TrimSpace(cells[0])
	if text == "" || isLabel(text) || isMissing(normalize(text)) || allNumbers([]string{text}) {
		return false
	}
	text = strings.TrimPrefix(text, "(")
	if text != "" && strings.ContainsRune(footnoteSigns, []rune(text)[0]) {
		return true
	}
	if m.t.Delimiter == ' ' { // words are cells
		return len(cells) != n && unicode.IsLetter([]rune(text)[0]) && !slices.ContainsFunc(cells, func(c string) bool { return allNumbers([]string{c}) })
	}
	letters := 0
	for _, r := range text {
		if unicode.IsLetter(r) {
			letters++
		}
	}
	return filled(cells) == 1 && letters > 2 && strings.Contains(text, " ")
}
