package dataset

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// labels mark rows below the data that hold no measurement: lower case, without
// full stops, colons and what stands in brackets.
var labels = map[string]bool{
	"mean": true, "means": true, "average": true, "averages": true, "avg": true, "median": true, "sd": true, "stdev": true, "std": true, "std dev": true, "stddev": true, "st dev": true,
	"stand dev": true, "std deviation": true, "standard deviation": true, "standard error": true, "std error": true, "std err": true, "stderr": true, "se": true, "sem": true,
	"rsd": true, "rsd %": true, "% rsd": true, "cv": true, "cv %": true, "% cv": true, "variance": true, "var": true, "min": true, "minimum": true, "max": true, "maximum": true,
	"range": true, "sum": true, "total": true, "count": true, "slope": true, "intercept": true, "r2": true, "r^2": true, "r": true, "r squared": true, "r-squared": true, "adj r2": true,
	"adj r^2": true, "rmse": true, "ea": true, "e_a": true, "activation energy": true,
}

var labelSigns = strings.NewReplacer(". ", " ", ".", " ", ":", "", "=", "")

func isLabel(cell string) bool {
	if cell == "" || len(cell) > 32 || isDigit(cell[0]) {
		return false
	}
	s := strings.ToLower(normalize(cell))
	if i := strings.IndexAny(s, "(["); i > 0 { // slope (K)
		s = s[:i]
	}
	s = labelSigns.Replace(s)
	return labels[strings.TrimSpace(s)] || labels[strings.ReplaceAll(s, " ", "")] // s.d.
}

// Sets gives the cells of a table their meaning and returns its data sets, in the
// order of their first rows. Where the table cannot be used the error is a
// Problems.
func (t *Table) Sets(opt Options) ([]*Set, error) {
	m := &maker{t: t, opt: opt}
	return m.all()
}

// all reads the whole table.
func (m *maker) all() ([]*Set, error) {
	t := m.t
	switch m.opt.Decimal {
	case "", "comma", "point":
	default:
		m.refuse(codeDecimalOption, 0, "", "--decimal %s", m.opt.Decimal)
	}
	headings, line, first, notices, ok := m.header()
	if !ok {
		return nil, m.problems
	}
	m.line = line
	m.cutFootnotes(first, len(headings))
	p := m.columns(headings, line)
	p.notices = append(notices, p.notices...)
	m.closeGaps(p, first, len(headings))
	if t.Encoding == "Windows-1252" {
		p.notices = append(p.notices, notice(noteEncoding, "the file is not UTF-8 and was read as Windows-1252"))
	}
	conds := m.conditions(p)
	known := m.decideDecimal(p, first)
	if !known || len(p.temperature) == 0 || len(p.runs) == 0 {
		m.shapes(p, first, len(headings))
		return nil, m.problems
	}
	m.chooseFirst(p, first)
	p.settleQuantity()
	points := m.points(p, conds, first, len(headings))
	sets := m.sets(p, points)
	if len(m.problems) > 0 {
		return nil, m.problems
	}
	return sets, nil
}

// shapes looks for ragged rows, and for cells that are no numbers whatever the
// headings mean, in a table whose headings were refused, so that all problems are told
// at once.
func (m *maker) shapes(p *plan, first, n int) {
	open := m.openColumns(p)
	for i := first; i < len(m.t.Rows); i++ {
		if i > first && m.t.Blank[i] {
			break
		}
		r := m.t.Rows[i]
		if cells, ok := m.cells(r, n); ok && !slices.Contains(m.opt.LeaveOut, r.Line) {
			m.noNumbers(p, open, r, cells)
		}
	}
	m.refuseRagged(n)
}

// openColumns are the columns of T and k that are read however the user settles the
// headings: none where it is open which of several they are, or which rows are read.
func (m *maker) openColumns(p *plan) []*column {
	o := &m.opt
	if m.tidied != nil || o.TMin > 0 || o.TMax > 0 || o.Dataset != "" || len(o.Where) > 0 {
		return nil
	}
	var cols []*column
	for _, r := range []Role{RoleTemperature, RoleRate} {
		var of []*column
		for i := range p.cols {
			if c := &p.cols[i]; c.Role == r && c.says == "" {
				of = append(of, c)
			}
		}
		if len(of) == 1 {
			cols = append(cols, of[0])
		}
	}
	return cols
}

// noNumbers refuses cells of a row that are no numbers with either decimal mark. A row
// that lacks T or k, or is labelled, is not read.
func (m *maker) noNumbers(p *plan, open []*column, r Row, cells []string) {
	if isLabel(cells[0]) {
		return
	}
	for _, c := range open {
		if s := normalize(cells[c.index]); isMissing(s) || isLabel(s) {
			return
		}
	}
	rr := &rowReader{m: m, p: p, row: r, cells: cells}
	for _, c := range open {
		if s := cells[c.index]; !allNumbers([]string{s}) {
			rr.refuseText(c, s)
		}
	}
}

// cells checks the number of cells of a row; empty ones at the end are dropped.
func (m *maker) cells(r Row, n int) ([]string, bool) {
	cells := r.Cells
	for len(cells) > n && strings.TrimSpace(cells[len(cells)-1]) == "" {
		cells = cells[:len(cells)-1]
	}
	if len(cells) == n {
		m.even++
		return cells, true
	}
	if !isLabel(cells[0]) {
		m.ragged = append(m.ragged, newRagged(r.Line, cells))
	}
	return nil, false
}

// decideDecimal finds the decimal mark of the columns with numbers; false where it
// has to be asked for.
func (m *maker) decideDecimal(p *plan, first int) bool {
	var found marks
	if m.opt.Decimal == "" && m.t.mayHoldComma {
		for i := first; i < len(m.t.Rows); i++ {
			if i > first && m.t.Blank[i] {
				break
			}
			found.look(p, m.t.Rows[i])
		}
	}
	return m.decideBy(p, &found)
}

// marks is what the cells of a table show of its decimal mark.
type marks struct {
	point, comma *markAt // the first of each
	sure         bool    // some comma cannot group thousands
}

type markAt struct {
	row        int
	text, head string
	n          int   // cells that have the mark
	lines      []int // of the first of them
	only       bool  // some cell is no number where the other mark is the decimal one
}

// mostLines is how many lines are named.
const mostLines = 6

// add counts one more cell with the mark.
func (a *markAt) add(row int, cell string, other byte) {
	if a.n++; len(a.lines) < mostLines && !slices.Contains(a.lines, row) {
		a.lines = append(a.lines, row)
	}
	a.only = a.only || ParseCell(cell, other, 0).Kind == CellText
}

// look adds the numbers of one row.
func (f *marks) look(p *plan, r Row) {
	for j := range min(len(p.cols), len(r.Cells)) {
		c := &p.cols[j]
		if !c.used || c.Role.isText() || c.Role == RoleLimit {
			continue
		}
		cell := r.Cells[j]
		if !strings.ContainsAny(cell, ".,") || len(cell) > longestCell {
			continue
		}
		mark, sure := decimalMark(cell)
		switch mark {
		case '.':
			if f.point == nil {
				f.point = &markAt{row: r.Line, text: strings.Clone(cell), head: c.Text}
			}
			f.point.add(r.Line, cell, ',')
		case ',':
			if f.comma == nil {
				f.comma = &markAt{row: r.Line, text: strings.Clone(cell), head: c.Text}
			}
			f.comma.add(r.Line, cell, '.')
			f.sure = f.sure || sure
		}
	}
}

// decideBy decides by what was found.
func (m *maker) decideBy(p *plan, found *marks) bool {
	p.decimal = '.'
	point, comma := found.point, found.comma
	switch {
	case m.opt.Decimal == "comma":
		p.decimal = ','
	case m.opt.Decimal == "point" || comma == nil:
	case point != nil:
		m.refuseCure(codeMixedMarks, comma.row, comma.head,
			fmt.Sprintf("%q has a decimal comma, and %q in line %d, column %q, a decimal point", short(comma.text), short(point.text), point.row, point.head),
			mixedCure(point, comma))
		return false
	case !found.sure && m.t.Delimiter != ';':
		m.refuseCure(codeAmbiguousMark, comma.row, comma.head,
			fmt.Sprintf("the comma in %q may be the decimal mark or group thousands", short(comma.text)), "say which: --decimal comma or --decimal point")
		return false
	default:
		p.decimal = ','
	}
	return true
}

// mixedCure is the cure of a table with both decimal marks: a flag only where the cells
// with the other mark are numbers whose thousands are grouped.
func mixedCure(point, comma *markAt) string {
	const groups = "; the other mark then groups thousands"
	few, mark := comma, "comma"
	if point.n < comma.n {
		few, mark = point, "point"
	}
	where := lines(few.lines)
	if few.n > len(few.lines) && len(few.lines) == mostLines {
		where += " and below"
	}
	mend := fmt.Sprintf("write one mark throughout: mend the %s with a decimal %s (%s)", countOf(few.n, "cell"), mark, where)
	switch {
	case point.only && comma.only:
		return mend
	case comma.only:
		return mend + ", or say that the comma is the decimal one: --decimal comma" + groups
	case point.only:
		return mend + ", or say that the point is the decimal one: --decimal point" + groups
	}
	return mend + ", or say which is the decimal one: --decimal point or --decimal comma" + groups
}

// decimalMark is the decimal mark that the numbers in a cell show: '.', ',' or 0.
// sure is false for a comma before exactly three digits, as in 1,234.
func decimalMark(cell string) (mark byte, sure bool) {
	for i := 0; i < len(cell); {
		if !isDigit(cell[i]) && cell[i] != '.' && cell[i] != ',' {
			i++
			continue
		}
		start := i
		for i < len(cell) && (isDigit(cell[i]) || cell[i] == '.' || cell[i] == ',') {
			i++
		}
		tok := cell[start:i]
		points, commas := strings.Count(tok, "."), strings.Count(tok, ",")
		at := strings.LastIndexAny(tok, ".,")
		switch {
		case points+commas == 0 || strings.Trim(tok, ".,") == "":
			continue
		case points > 0 && commas > 0:
			return tok[at], true
		case points > 1:
			return ',', true
		case commas > 1:
			return '.', true
		case points == 1:
			return '.', true
		}
		return ',', !(len(tok)-at-1 == 3 && at >= 1 && at <= 3 && tok[0] != '0')
	}
	return 0, false
}

// chooseFirst puts first, of several columns for one quantity, the one with the
// smallest rounding error.
func (m *maker) chooseFirst(p *plan, first int) {
	if len(p.temperature) > 1 {
		order, gap := m.leastRounded(p.temperature, p, first, func(c *column, x Cell) (float64, float64) { return c.kelvin(x) })
		p.temperature = order
		if gap != nil {
			kept := p.temperature[:0]
			for _, c := range p.temperature {
				if c != gap[0] {
					kept = append(kept, c)
				}
			}
			p.temperature = kept
			m.refuseGap(p, gap)
			p.notices = append(p.notices, notice(noteGap, fmt.Sprintf("column %q is %q + 273 in every row: %q is used", short(gap[0].Text), short(gap[1].Text), short(p.temperature[0].Text))))
		} else {
			p.severalNotice(p.temperature)
		}
	}
	var unit *column // a column that names the unit of k
	for i := range p.runs {
		r := &p.runs[i]
		if len(r.cols) > 1 {
			r.cols, _ = m.leastRounded(r.cols, p, first, func(c *column, x Cell) (float64, float64) { return c.rateValue(x) })
			p.severalNotice(r.cols)
		}
		for _, c := range r.cols {
			if unit == nil && c.Unit != nil {
				unit = c
			}
		}
	}
	for i := range p.runs {
		c := p.runs[i].cols[0]
		if unit == nil || c.halfLife() != "" || c.Unit != nil || c.UnitText != "" {
			continue
		}
		c.Unit, c.UnitText = unit.rateUnit(), unit.UnitText // ln k beside k/s^-1
		if !slices.Contains(p.runs[i].cols, unit) {
			p.notices = append(p.notices, notice(noteAssumedUnit, fmt.Sprintf("column %q has no unit: it is taken as that of %q", short(c.Text), short(unit.Text))))
		}
	}
}

// refuseGap refuses a rate constant that was divided by T where two columns of
// temperature differ by a constant: it may have been divided by either.
func (m *maker) refuseGap(p *plan, gap []*column) {
	for _, r := range p.runs {
		for _, c := range r.cols {
			if c.Divisor != DivisorNone {
				m.refuseCure(codeDisagree, 0, c.Text, fmt.Sprintf("k was divided by T, and %q is %q + 273 in every row: which of them is T is not known", short(gap[0].Text), short(gap[1].Text)),
					"choose one: "+columnFlags("T", []string{gap[0].Text, gap[1].Text}, " or "))
				return
			}
		}
	}
}

func (p *plan) severalNotice(cs []*column) {
	var names []string
	for _, c := range cs[1:] {
		names = append(names, c.Text)
	}
	p.notices = append(p.notices, notice(noteSeveral, fmt.Sprintf("column %q is used; %s must agree with it", short(cs[0].Text), quoteAll(names))))
}

// leastRounded orders columns by their summed rounding error over the rows in
// which all have a number. gap is a kelvin column and a Celsius one that differ by
// 273 in every such row, or nil.
func (m *maker) leastRounded(cs []*column, p *plan, first int, value func(*column, Cell) (float64, float64)) (order []*column, gap []*column) {
	sums := make([]float64, len(cs))
	var kelvin, celsius = -1, -1
	for i, c := range cs {
		if c.Role == RoleTemperature && c.Form == FormDirect && c.Unit != nil {
			switch c.Unit.Text {
			case "K":
				kelvin = i
			case "°C":
				celsius = i
			}
		}
	}
	same273 := kelvin >= 0 && celsius >= 0
	values := make([]float64, len(cs))
	halves := make([]float64, len(cs))
	rows := 0
next:
	for i := first; i < len(m.t.Rows); i++ {
		if i > first && m.t.Blank[i] {
			break
		}
		r := m.t.Rows[i]
		for j, c := range cs {
			if c.index >= len(r.Cells) {
				continue next
			}
			x := ParseCell(r.Cells[c.index], p.decimal, c.cellShift())
			if x.Kind != CellNumber {
				continue next
			}
			values[j], halves[j] = value(c, x)
		}
		rows++
		for j := range cs {
			sums[j] += halves[j]
		}
		if same273 && !(math.Abs(values[kelvin]-values[celsius]+0.15) < 1e-6) {
			same273 = false
		}
	}
	best := 0
	for j := range cs {
		if sums[j] < sums[best] {
			best = j
		}
	}
	if same273 && rows > 0 {
		gap = []*column{cs[kelvin], cs[celsius]}
		if best == kelvin {
			best = celsius
		}
	}
	order = append(order, cs[best])
	for j, c := range cs {
		if j != best {
			order = append(order, c)
		}
	}
	return order, gap
}
