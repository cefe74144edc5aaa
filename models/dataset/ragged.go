package dataset

import (
	"fmt"
	"slices"
	"strings"
)

// ragged is a row that has more or fewer cells than the headings.
type ragged struct {
	line, cells int
	words       bool // it holds one cell, of text
	point       bool // a cell has a decimal point
	decimals    bool // a cell is what only stands before or behind a decimal mark: 0, 0012
}

func newRagged(line int, cells []string) ragged {
	r := ragged{line: line, cells: len(cells), words: filled(cells) == 1 && !allNumbers(cells)}
	for i, c := range cells {
		digits := strings.TrimLeft(c, "+-")
		r.point = r.point || strings.Contains(c, ".")
		r.decimals = r.decimals || i > 0 && len(digits) > 1 && digits[0] == '0' || i < len(cells)-1 && digits == "0"
	}
	return r
}

// refuseRagged refuses the rows whose number of cells is not that of the n headings:
// one problem for all that have the same, and one for the table where all rows have
// the same fault.
func (m *maker) refuseRagged(n int) {
	if len(m.ragged) == 0 {
		return
	}
	defer func() { m.ragged, m.even = nil, 0 }()
	first := m.ragged[0]
	same := !slices.ContainsFunc(m.ragged, func(r ragged) bool { return r.cells != first.cells })
	switch all := m.even == 0 && len(m.ragged) > 1; {
	case all && m.commasTwice(n):
		m.refuseCure(codeRagged, first.line, "", fmt.Sprintf("commas are both the delimiter and the decimal mark: the row falls into %s under %d headings", countOf(first.cells, "cell"), n),
			"save the table with semicolons between the cells, or put numbers in quotation marks")
		return
	case all && same && (first.cells == n+1 || first.cells == n-1):
		what, cure := "one cell more", "take the spare cell out of the headings, or write the cell that every row lacks"
		if first.cells > n {
			what, cure = "one cell less", "write the heading that is missing"
		}
		m.refuseCure(codeRagged, m.line, "", fmt.Sprintf("the row of headings has %s than every row below it: %d, not %d", what, n, first.cells), cure)
		return
	}
	lines := map[int][]int{}
	var widths []int
	for _, r := range m.ragged {
		if lines[r.cells] == nil {
			widths = append(widths, r.cells)
		}
		lines[r.cells] = append(lines[r.cells], r.line)
	}
	for _, w := range widths {
		more := ""
		if k := len(lines[w]); k > 1 {
			more = "; so have " + countOf(k-1, "other row")
		}
		m.refuse(codeRagged, lines[w][0], "", "the row has %s, the headings %d%s", countOf(w, "cell"), n, more)
		if slices.ContainsFunc(m.ragged, func(r ragged) bool { return r.cells == w && r.words }) {
			p := &m.problems[len(m.problems)-1]
			p.Cure = "if the line is a remark, begin it with # or move it below a blank line; else " + p.Cure
		}
	}
}

// commasTwice reports whether all rows look like numbers with decimal commas that were
// split at them: whole numbers, some of which begin as only decimals do.
func (m *maker) commasTwice(n int) bool {
	decimals := false
	for _, r := range m.ragged {
		if m.t.Delimiter != ',' || r.cells <= n || r.cells > 2*n {
			return false
		}
		if r.point {
			return false
		}
		decimals = decimals || r.decimals
	}
	return decimals
}
