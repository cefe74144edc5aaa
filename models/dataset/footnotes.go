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
	end := first
	for end < len(m.t.Rows) && (end == first || !m.t.Blank[end]) {
		end++
	}
	from := end
	for from > first && m.isFootnote(m.t.Rows[from-1].Cells, n) {
		from--
	}
	if from == end {
		return
	}
	for _, r := range m.t.Rows[from:end] {
		m.footnotes = append(m.footnotes, r.Line)
	}
	t := *m.t // whose rows are the caller's
	t.Rows = slices.Concat(t.Rows[:from], t.Rows[end:])
	t.Blank = slices.Concat(t.Blank[:from], t.Blank[end:])
	m.t = &t
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
