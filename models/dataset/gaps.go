package dataset

import (
	"math"
	"slices"
	"strings"
)

// notRead is why a row of numbers below the table is left out.
const notRead = "stands below the table, not read"

// closeGaps takes the rows below blank rows for rows of the table where they read as
// its rows do, so that a row left empty does not end it. What ends it is a block of
// anything else: headings, words, numbers that are no temperature.
func (m *maker) closeGaps(p *plan, first, n int) {
	rows, blank := m.t.Rows, m.t.Blank
	end := nextBlank(blank, first+1)
	if end >= len(rows) || !p.readsOn(rows[end].Cells, n) {
		return
	}
	t := *m.t // whose rows are the caller's
	t.Rows, t.Blank = slices.Clone(rows[:end]), slices.Clone(blank[:end])
	var gaps []int
	for end < len(rows) && p.readsOn(rows[end].Cells, n) {
		from := end
		gaps = append(gaps, rows[from].Line)
		end = nextBlank(blank, from+1)
		keep := m.beforeFootnotes(rows[from:end], n)
		t.Rows = append(t.Rows, rows[from:from+keep]...)
		t.Blank = append(t.Blank, make([]bool, keep)...)
	}
	t.Rows, t.Blank = append(t.Rows, rows[end:]...), append(t.Blank, blank[end:]...)
	m.t = &t
	p.notices = append(p.notices, notice(noteGoesOn, lines(gaps)+": below a blank row, read as rows of the table", gaps...))
}

// nextBlank is the index of the first row from on that has a blank row above it.
func nextBlank(blank []bool, from int) int {
	for from < len(blank) && !blank[from] {
		from++
	}
	return min(from, len(blank))
}

// readsOn reports whether the cells of a row below a blank one are a row of the table
// of n headings: a temperature above 0 K, and a number, a limit or nothing for k.
func (p *plan) readsOn(cells []string, n int) bool {
	for len(cells) > n && strings.TrimSpace(cells[len(cells)-1]) == "" {
		cells = cells[:len(cells)-1]
	}
	if len(cells) != n || len(p.temperature) == 0 || len(p.runs) == 0 || !p.cols[0].Role.isText() && isLabel(cells[0]) {
		return false
	}
	c := p.temperature[0]
	x := eitherMark(cells[c.index], c.cellShift())
	if x.Kind != CellNumber {
		return false
	}
	if t, _ := c.kelvin(x); !(t > 0) || math.IsInf(t, 0) || c.wrongFactor(x, t) != "" {
		return false
	}
	for _, r := range p.runs {
		for _, c := range r.cols {
			if eitherMark(cells[c.index], 0).Kind == CellText {
				return false
			}
		}
	}
	return true
}

// eitherMark reads a cell with the decimal mark that makes it a number.
func eitherMark(cell string, shift int) Cell {
	x := ParseCell(cell, '.', shift)
	if x.Kind == CellText {
		x = ParseCell(cell, ',', shift)
	}
	return x
}

// isMeasured reports whether cells below the table are numbers that somebody may have
// measured: T and k, numbers alone, or two of them below headings of another table.
func (p *plan) isMeasured(cells []string, n int, headed bool) bool {
	if p.readsOn(cells, n) {
		return true
	}
	numbers, words := 0, 0
	for _, c := range cells {
		switch eitherMark(c, 0).Kind {
		case CellNumber:
			numbers++
		case CellText:
			words++
		}
	}
	return numbers > 1 && (words == 0 || headed && !isLabel(cells[0]))
}

// below tells the rows below the table apart: those of numbers become points that are
// not used, so that they are counted; the lines of the others are returned.
func (m *maker) below(p *plan, points []Point, rows []Row, n int) ([]Point, []int) {
	known := map[string]bool{}
	last := ""
	for i := range points {
		last = points[i].Dataset
		known[last] = true
	}
	var others []int
	headed := false
	for _, r := range rows {
		headed = headed || hasRole(r.Cells, m.opt.Assume)
		if !p.isMeasured(r.Cells, n, headed) {
			others = append(others, r.Line)
			continue
		}
		pt := Point{File: m.t.Name, Row: r.Line, T: math.NaN(), K: math.NaN(), Order: math.NaN(), Dataset: last, WhyNot: notRead}
		if p.dataset != nil && known[nameIn(r.Cells, p.dataset.index)] {
			pt.Dataset = nameIn(r.Cells, p.dataset.index)
		}
		if slices.Contains(m.opt.LeaveOut, r.Line) {
			pt.WhyNot = leftOut
		}
		points = append(points, pt)
	}
	return points, others
}
