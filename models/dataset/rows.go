package dataset

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"strconv"
	"strings"

	"gonum.org/v1/gonum/stat/distuv"
)

// rowReader reads the rows of a table by a plan.
type rowReader struct {
	m     *maker
	p     *plan
	row   Row
	cells []string
	quiet bool    // the row is left out already: its faults do not matter
	halfT float64 // half a unit of the last digit of T, K

	// Rows with an uncertainty written beside a number: of k, and of T.
	brackets, spaced, plusMinus    []int
	bracketsT, spacedT, plusMinusT []int
	noRepeats                      []int      // s.d. behind a ± whose number of repeats is not given
	wrong                          []*column  // refused for their power of ten
	spare                          []int      // not used: a column states it too
	shown                          [][]string // first cells of the columns in the data set of the row
}

// Why a row is left out; review counts rows by these words.
const (
	leftOut        = "left out on request (--leave-out)"
	noTemperature  = "no temperature"
	noRateConstant = "no rate constant" // and ": " with what the cell holds
	onlyALimit     = "only a limit is known"
)

// points reads the rows of data below the headings, n cells each.
func (m *maker) points(p *plan, conds []condition, first, n int) []Point {
	rr := &rowReader{m: m, p: p}
	p.shown = map[string][][]string{}
	if !m.convert(p) {
		return nil
	}
	leaveOut := map[int]bool{}
	for _, l := range m.opt.LeaveOut {
		leaveOut[l] = true
	}
	named := maps.Clone(leaveOut) // leaveOut shrinks to those that are not found
	points := make([]Point, 0, (len(m.t.Rows)-first)*len(p.runs))
	intern := map[string]string{}
	var after, labelled []int
	for i := first; i < len(m.t.Rows); i++ {
		r := m.t.Rows[i]
		if i > first && m.t.Blank[i] {
			at := len(points)
			points, after = m.below(p, points, m.t.Rows[i:], n)
			for _, pt := range points[at:] {
				delete(leaveOut, pt.Row)
			}
			break
		}
		if m.tidied == nil && leaveOut[r.Line] && len(r.Cells) != n { // ragged, and out already
			delete(leaveOut, r.Line)
			points = append(points, Point{File: m.t.Name, Row: r.Line, T: math.NaN(), K: math.NaN(), Order: math.NaN(), WhyNot: leftOut})
			continue
		}
		cells, ok := m.cells(r, n)
		if !ok {
			if isLabel(r.Cells[0]) {
				labelled = append(labelled, r.Line)
			}
			continue
		}
		if isLabel(cells[p.temperature[0].index]) || !rr.isText(0) && isLabel(cells[0]) {
			labelled = append(labelled, r.Line)
			continue
		}
		rr.row, rr.cells, rr.quiet = r, cells, false
		points = append(points, Point{File: m.t.Name, Row: r.Line, T: math.NaN(), K: math.NaN(), Order: math.NaN()})
		pt := &points[len(points)-1]
		if m.tidied != nil {
			m.tidied.begin(rr, pt)
		}
		text := func(c *column) string {
			if c == nil || cells[c.index] == "" {
				return ""
			}
			s, ok := intern[cells[c.index]]
			if !ok {
				s = strings.TrimSpace(cells[c.index])
				intern[s] = s
			}
			return s
		}
		pt.Source, pt.Dataset = text(p.source), text(p.dataset)
		rr.show(pt.Dataset)
		if p.note != nil {
			pt.Note = strings.TrimSpace(cells[p.note.index])
		}
		for _, c := range p.kept {
			if s := strings.TrimSpace(cells[c.index]); s != "" {
				if pt.Extra == nil {
					pt.Extra = make(map[string]string, len(p.kept))
				}
				pt.Extra[c.Text] = withPoint(s, p.decimal)
			}
		}
		if named[pt.Row] {
			if m.tidied != nil && m.tidied.leftOutTwice(pt) {
				m.refuseCure(codeLeaveOut, 0, "", fmt.Sprintf("--leave-out %d: several files have such a line", pt.Row), "use --where 'row!=LINE' and --where 'file!=NAME'")
			}
			delete(leaveOut, pt.Row)
			pt.WhyNot = leftOut
		}
		for j := range conds {
			if holds := conds[j].look(cells[conds[j].col.index], p.decimal); pt.WhyNot == "" && !holds {
				pt.WhyNot = fmt.Sprintf("does not meet --where %q", conds[j].text)
			}
		}
		rr.quiet = pt.WhyNot != ""
		rr.read(pt)
		at := len(points) - 1
		for range p.runs[1:] { // a point for each repeat of the row
			points = append(points, points[at])
		}
		for j := range p.runs {
			pt := &points[at+j]
			if len(p.runs) > 1 {
				pt.Column = p.runs[j].cols[0].Text
			}
			rr.rate(pt, &p.runs[j])
			if m.tidied != nil {
				m.tidied.end(rr, pt)
			}
			pt.Used = pt.WhyNot == ""
		}
	}
	m.refuseRagged(n)
	if m.opt.WhereMet {
		m.refuseUnmet(conds)
	}
	for _, l := range m.opt.LeaveOut {
		if leaveOut[l] && !slices.Contains(m.footnotes, l) {
			m.refuse(codeLeaveOut, l, "", "--leave-out names a line that holds no row of data")
			delete(leaveOut, l)
		}
	}
	if len(points) == 0 && len(m.problems) == 0 {
		m.refuse(codeNoData, 0, "", "there are headings and no rows of data below them")
	}
	say := func(code string, rows []int, what string) {
		if len(rows) > 0 {
			p.notices = append(p.notices, notice(code, fmt.Sprintf("%s: %s", lines(rows), what), rows...))
		}
	}
	say(noteAfter, after, "below the table, not read")
	say(noteAfter, labelled, "labelled as no measurement, such as a mean or a slope, and not read")
	if len(labelled) > 0 {
		p.notices[len(p.notices)-1].Cure = "write its temperature in place of the label if it is a measurement"
	}
	if say(noteAfter, m.footnotes, "taken for a footnote of the table, not read"); len(m.footnotes) > 0 {
		p.notices[len(p.notices)-1].Cure = ""
	}
	const ofT = "in the temperature: "
	say(noteBrackets, rr.brackets, "a bracket after the number was read as its standard uncertainty")
	say(noteBrackets, rr.bracketsT, ofT+"a bracket after the number was read as its standard uncertainty")
	say(noteLevel, rr.spaced, "a bracket after a space is ambiguous and was not used")
	say(noteLevel, rr.spacedT, ofT+"a bracket after a space is ambiguous and was not used")
	say(noteRepeats, rr.noRepeats, "± states a standard deviation of repeats, and their number is not given")
	say(noteLevel, rr.plusMinus, "the level of ± is not stated, and it was not used")
	say(noteLevel, rr.plusMinusT, ofT+"the level of ± is not stated, or it is relative, and it was not used")
	say(noteOtherU, rr.spare, "an uncertainty in the cell is not used: a column states it")
	return points
}

// mostShown is how many cells of a column are shown.
const mostShown = 3

// show adds the cells of a row to those shown of its data set: of columns without
// numbers here, of the others as their numbers are read.
func (rr *rowReader) show(set string) {
	p := rr.p
	rr.shown = p.shown[set]
	if rr.shown == nil {
		rr.shown = make([][]string, len(p.cols))
		p.shown[set] = rr.shown
	}
	for i := range p.cols {
		c := &p.cols[i]
		if numeric := c.used && !c.Role.isText() && c.Role != RoleLimit && c.Role != RoleRow; !numeric && len(rr.shown[i]) < mostShown {
			rr.shown[i] = append(rr.shown[i], short(strings.TrimSpace(rr.cells[i])))
		}
	}
}

// convert finds the factors from the units of the columns to that of k; false where
// there is none.
func (m *maker) convert(p *plan) bool {
	for i := range p.runs {
		r := &p.runs[i]
		for _, c := range r.cols {
			f := 1.0
			u := c.rateUnit()
			switch {
			case u != nil && p.unit != nil:
				var err error
				if f, err = u.convertTo(*p.unit); err != nil {
					m.refuseUnits(p, c, "its unit "+err.Error())
					return false
				}
			case len(p.runs) > 1 && c == r.cols[0] && normalize(c.UnitText) != normalize(p.runs[0].cols[0].UnitText):
				m.refuseUnits(p, c, fmt.Sprintf("its unit %q cannot be compared with %q", c.UnitText, p.runs[0].cols[0].UnitText))
				return false
			}
			r.factors = append(r.factors, f)
		}
		if u := r.uncertainty; u != nil && u.Unit != nil && r.base.Unit != nil && !u.Relative {
			to := r.base.Unit
			if r.base.halfLife() == "" && p.unit != nil {
				to = p.unit
			}
			if f, err := u.Unit.convertTo(*to); err == nil {
				r.uFactor = f
			}
		}
	}
	return true
}

// refuseUnits refuses columns of one rate constant, or of its repeats, that have
// units of different kinds.
func (m *maker) refuseUnits(p *plan, c *column, what string) {
	first := p.runs[0].cols[0]
	cure := "choose one: " + columnFlags("k", []string{first.Text, c.Text}, " or ")
	if len(p.runs) > 1 {
		cure = "name the repeats of one unit, and no others: " + columnFlag("k", first.Text) + " and so on"
	}
	m.refuseCure(codeUnitConflict, 0, c.Text, what+", the unit of "+strconv.Quote(short(first.Text)), cure)
}

// isText reports whether a column holds text that may be anything.
func (rr *rowReader) isText(index int) bool {
	return rr.p.cols[index].Role.isText()
}

// isText reports whether cells of a role may hold any text.
func (r Role) isText() bool {
	switch r {
	case RoleSource, RoleDataset, RoleNote, RoleFile, RoleLeftOut, RoleAssumed, RoleLevel:
		return true
	}
	return false
}

// lines prints line numbers: line 7, lines 7, 9 and 12 more.
func lines(rows []int) string {
	const most = 6
	if len(rows) == 1 {
		return fmt.Sprintf("line %d", rows[0])
	}
	var s []string
	for _, r := range rows[:min(most, len(rows))] {
		s = append(s, strconv.Itoa(r))
	}
	out := "lines " + strings.Join(s, ", ")
	if len(rows) > most {
		out += fmt.Sprintf(" and %d more", len(rows)-most)
	}
	return out
}

func (rr *rowReader) refuse(code string, c *column, format string, args ...any) {
	if !rr.quiet {
		rr.m.refuse(code, rr.row.Line, c.Text, format, args...)
	}
}

// refuseCell refuses a cell that holds no number it can use. Only an empty T or k leaves
// its row out; any other empty cell does not, and the column can be a note.
func (rr *rowReader) refuseCell(code string, c *column, format string, args ...any) {
	if c.Role == RoleTemperature || c.Role == RoleRate {
		rr.refuse(code, c, format, args...)
		return
	}
	if rr.quiet {
		return
	}
	cure := "write a number, or leave the cell empty: the row is used all the same; or "
	if c.nth > 0 {
		cure += "name another column"
	} else {
		cure += "take the column for a note: " + columnFlag(roleFlags[RoleNote], c.Text)
	}
	rr.m.refuseCure(code, rr.row.Line, c.Text, fmt.Sprintf(format, args...), cure)
}

// refuseText refuses a cell that holds no number. Where it would be one with the
// other decimal mark, that is what is wrong.
func (rr *rowReader) refuseText(c *column, s string) {
	if number, mark, ok := footnote(s, rr.p.decimal); ok {
		if !rr.quiet {
			rr.m.refuseCure(codeNotNumber, rr.row.Line, c.Text, fmt.Sprintf("%q is a number with %q behind it", short(s), mark),
				fmt.Sprintf("a footnote mark? write %s alone, and what the mark says in a column headed note", number))
		}
		return
	}
	mark, other, name := ",", byte('.'), "comma"
	if rr.p.decimal == '.' {
		mark, other, name = ".", ',', "point"
	}
	if ParseCell(s, other, 0).Kind != CellNumber {
		rr.refuseCell(codeNotNumber, c, "%q is not a number", short(s))
		return
	}
	if !rr.quiet {
		rr.m.refuseCure(codeNotNumber, rr.row.Line, c.Text, fmt.Sprintf("%q is not a number where the decimal mark is the %s, and %q groups thousands", short(s), name, other),
			"write it as "+short(strings.ReplaceAll(s, string(other), mark)))
	}
}

// disagree refuses a row in which a column gives something else than the first one of
// the same quantity.
func (rr *rowReader) disagree(role string, c, first *column, format string, args ...any) {
	if !rr.quiet {
		rr.m.refuseCure(codeDisagree, rr.row.Line, c.Text, fmt.Sprintf(format, args...),
			"correct the row, or choose a column: "+columnFlags(role, []string{first.Text, c.Text}, " or "))
	}
}

// number reads the cell of a column. ok is false where it holds no number; a
// fault has then been noted, unless missing.
func (rr *rowReader) number(c *column) (x Cell, ok, missing bool) {
	s := rr.cells[c.index]
	x = ParseCell(s, rr.p.decimal, c.cellShift())
	if len(rr.shown[c.index]) < mostShown {
		rr.shown[c.index] = append(rr.shown[c.index], short(s))
	}
	switch x.Kind {
	case CellNumber:
	case CellMissing, CellLimitOnly:
		return x, false, true
	case CellNotFinite:
		rr.refuseCell(codeNotFinite, c, "%q is not a finite number", short(s))
		return x, false, false
	default:
		rr.refuseText(c, s)
		return x, false, false
	}
	if x.Percent && c.Role != RoleUncertainty {
		rr.refuseCell(codeNotNumber, c, "%q is a percentage", short(s))
		return x, false, false
	}
	if x.Unit != "" {
		u, err := ParseUnit(x.Unit)
		if err != nil || c.Unit == nil || u.Text != c.Unit.Text || u.Exp10 != 0 {
			if _, _, ok := footnote(s, rr.p.decimal); ok { // a is a year, too
				rr.refuseText(c, s)
				return x, false, false
			}
			have := "none"
			if c.Unit != nil {
				have = c.Unit.Text
			}
			rr.refuse(codeUnitConflict, c, "the cell %q has another unit than the heading (%s)", short(s), have)
			return x, false, false
		}
	}
	return x, true, false
}

// read fills a point from its row; WhyNot says why it is not used.
func (rr *rowReader) read(pt *Point) {
	p := rr.p
	rr.temperature(pt)
	opt := &rr.m.opt
	if pt.WhyNot == "" {
		switch {
		case opt.TMin > 0 && pt.T < opt.TMin:
			pt.WhyNot = fmt.Sprintf("below --t-min %g K", opt.TMin)
		case opt.TMax > 0 && pt.T > opt.TMax:
			pt.WhyNot = fmt.Sprintf("above --t-max %g K", opt.TMax)
		}
		rr.quiet = pt.WhyNot != ""
	}
	if p.ofT != nil {
		if x, ok, _ := rr.number(p.ofT); ok {
			if x.Value < 0 {
				rr.refuse(codeNegativeU, p.ofT, "%q is negative", short(rr.cells[p.ofT.index]))
			}
			pt.UT = x.Value * p.ofT.Unit.Scale / rr.divisor(&p.ofT.Heading, pt)
		}
	}
	if p.order != nil {
		if x, ok, _ := rr.number(p.order); ok {
			pt.Order = x.Value
		}
	}
	if p.repeats != nil {
		if x, ok, _ := rr.number(p.repeats); ok {
			if x.Value < 1 || x.Value != math.Trunc(x.Value) || x.Value > 1e9 {
				rr.refuse(codeBadRepeats, p.repeats, "%q is not a number of repeats", short(rr.cells[p.repeats.index]))
			} else {
				pt.Repeats = int(x.Value)
			}
		}
	}
}

func (rr *rowReader) temperature(pt *Point) {
	p := rr.p
	var half float64
	for j, c := range p.temperature {
		x, ok, missing := rr.number(c)
		if !ok || x.Limit != "" {
			switch {
			case j == 0 && missing && pt.WhyNot == "":
				pt.WhyNot = noTemperature
				rr.quiet = true
			case ok:
				rr.refuse(codeNotNumber, c, "%q is a limit, and a temperature is needed", short(rr.cells[c.index]))
			}
			continue
		}
		t, h := c.kelvin(x)
		if !(t > 0) || math.IsInf(t, 0) {
			rr.refuse(codeTNotPositive, c, "%q is %s K, not above absolute zero", short(rr.cells[c.index]), strconv.FormatFloat(t, 'g', 6, 64))
			continue
		}
		if what := c.wrongFactor(x, t); what != "" && rr.m.tidied == nil {
			if !rr.quiet && !slices.Contains(rr.wrong, c) { // once a column
				rr.wrong = append(rr.wrong, c)
				rr.m.refuseCure(codeTFactor, rr.m.line, c.Text, fmt.Sprintf("%q in line %d is %s K: the power of ten in the heading is not that of the cells", short(rr.cells[c.index]), rr.row.Line, strconv.FormatFloat(t, 'g', 4, 64)), what)
			}
			continue
		}
		if j == 0 {
			pt.T, half = t, h
			rr.halfT = h
			switch {
			case x.Attached == AttachedNone:
			case p.ofT == nil:
				rr.attachedT(pt, c, x)
			default:
				note(&rr.spare, pt.Row)
			}
			continue
		}
		if !math.IsNaN(pt.T) && !(math.Abs(t-pt.T) <= half+h+1e-9*pt.T) {
			rr.disagree("T", c, p.temperature[0], "%q is %s K, and column %q gives %s K", short(rr.cells[c.index]), strconv.FormatFloat(t, 'f', 3, 64), short(p.temperature[0].Text), strconv.FormatFloat(pt.T, 'f', 3, 64))
		}
	}
}

// wrongFactor is the cure of a temperature, in K, that no power of ten but a wrong one
// gives: below 1 K, or above 100 000 K from a reciprocal; "" where there is nothing to
// cure. A heading in mK means it.
func (c *column) wrongFactor(x Cell, t float64) string {
	reciprocal := c.Form == FormReciprocal
	if !(t < 1 && c.Unit.Text != "mK") && !(t > 1e5 && reciprocal) {
		return ""
	}
	cell := x.Value / scaled(1, c.Shift) // as written
	if reciprocal && c.Unit.Text == "K^-1" {
		for _, e := range []int{3, 4, 0} {
			if right := math.Pow10(e) / cell; right >= 100 && right < 5000 {
				heading := map[int]string{3: "10^3 K/T", 4: "10^4 K/T", 0: "1/T (1/K)"}[e]
				return fmt.Sprintf("if T is %.4g K there, write the heading as %s", right, heading)
			}
		}
	}
	return "correct the power of ten, or the unit, in the heading: T/K, or 10^3 K/T where the cells are 1000 K/T"
}

// attachedT takes over an uncertainty written in the cell of T.
func (rr *rowReader) attachedT(pt *Point, c *column, x Cell) {
	h, ok := rr.levelOf(pt, c, x, &rr.bracketsT, &rr.spacedT, &rr.plusMinusT)
	switch {
	case !ok:
		return
	case x.URel:
		note(&rr.plusMinusT, pt.Row) // 1 % of 25 °C is no span of temperature
		return
	case c.Form == FormDirect:
		pt.UT = x.U * c.Unit.Scale
	default: // u(T)/T = u(1/T)/(1/T)
		pt.UT = pt.T * math.Abs(x.U/x.Value)
	}
	pt.UT /= rr.divisor(&h, pt)
}

// levelOf says how an uncertainty is to be understood that was written beside the
// number in a cell, and notes its row; ok is false where that is not known.
func (rr *rowReader) levelOf(pt *Point, c *column, x Cell, brackets, spaced, plusMinus *[]int) (h Heading, ok bool) {
	h = Heading{Kind: KindStandard, Relative: x.URel, Form: c.Form, Divisor: c.Divisor}
	if x.Attached == AttachedBracket {
		c.brackets = true
		note(brackets, pt.Row)
		return h, true
	}
	list := plusMinus
	if x.Attached == AttachedSpaced {
		c.spaced = true
		list = spaced
	} else {
		c.plusMinus = true
	}
	if b := c.Beside; b != nil && x.Attached == AttachedPlusMinus {
		h.Kind, h.Coverage, h.Confidence = b.Kind, b.Coverage, b.Confidence
		if h.Kind == KindRepeats && rr.repeatsFor(pt) == 0 {
			note(&rr.noRepeats, pt.Row)
			return h, false
		}
		return h, true
	}
	h.Kind, h.Coverage = rr.p.level, rr.p.levelK
	if h.Kind == KindNone || h.Kind == KindRepeats && rr.repeatsFor(pt) == 0 {
		note(list, pt.Row)
		return h, false
	}
	rr.p.assume("error=" + rr.m.opt.Assume["error"])
	return h, true
}

// note adds a row to a list, once for all its repeats.
func note(rows *[]int, row int) {
	if n := len(*rows); n == 0 || (*rows)[n-1] != row {
		*rows = append(*rows, row)
	}
}

// rate reads k and u(k) of one run.
func (rr *rowReader) rate(pt *Point, run *rateRun) {
	p := rr.p
	var base Cell // cell of the column that u(k) is stated in
	var half float64
	for j, c := range run.cols {
		x, ok, missing := rr.number(c)
		if !ok {
			if j == 0 && missing && pt.WhyNot == "" {
				pt.WhyNot = noRateConstant
				if s := strings.TrimSpace(rr.cells[c.index]); s != "" {
					pt.WhyNot += ": " + short(s)
				}
			}
			if j == 0 && missing {
				return
			}
			continue
		}
		if c == run.base {
			base = x
		}
		if c.halfLife() != "" {
			if !(x.Value > 0) {
				rr.refuse(codeKNotPositive, c, "%q is a time that is not positive", short(rr.cells[c.index]))
				return
			}
			switch x.Limit {
			case "<":
				x.Limit = ">"
			case ">":
				x.Limit = "<"
			}
		}
		k, h := c.rateValue(x)
		k *= run.factors[j]
		if c.Divisor != DivisorNone {
			if math.IsNaN(pt.T) {
				return // the row is left out or refused already
			}
			k *= c.Divisor.of(pt.T)
			h += rr.halfT / pt.T
		}
		if math.IsInf(k, 0) || math.IsNaN(k) || k == 0 && (c.Form != FormDirect || x.Value != 0) {
			rr.refuse(codeNotFinite, c, "%q gives a rate constant beyond the range of double precision", short(rr.cells[c.index]))
			return
		}
		if j > 0 {
			if d := math.Abs(math.Log(k / pt.K)); !(d <= half+h+1e-9) {
				rr.disagree("k", c, run.cols[0], "%q gives k = %.6g, and column %q gives %.6g", short(rr.cells[c.index]), k, short(run.cols[0].Text), pt.K)
			}
			continue
		}
		if !(k > 0) && !rr.m.opt.AllowNonPositiveK && x.Limit == "" {
			what := "is not a positive rate constant"
			if k == 0 && strings.ContainsAny(rr.cells[c.index], "123456789") {
				what = "is smaller than a computer's numbers reach (1e-308)"
			}
			rr.refuse(codeKNotPositive, c, "%q %s", short(rr.cells[c.index]), what)
			return
		}
		pt.K, half, pt.Limit = k, h, x.Limit
		switch {
		case x.Attached == AttachedNone:
		case run.uncertainty == nil:
			rr.attached(pt, c, x)
		default:
			note(&rr.spare, pt.Row)
		}
	}
	if p.limit != nil {
		rr.limit(pt, run.cols[0].halfLife() != "")
	}
	if pt.Limit != "" && pt.WhyNot == "" {
		pt.WhyNot = limitOnly(pt.Limit, pt.K)
	}
	if run.uncertainty != nil {
		rr.uncertainty(pt, run, base)
	}
}

// limit reads the limit column; flip says that it bounds a time.
func (rr *rowReader) limit(pt *Point, flip bool) {
	c := rr.p.limit
	s := rr.cells[c.index]
	if s == "" {
		return
	}
	switch strings.ToLower(normalize(s)) {
	case "<", "≤", "<=", "upper":
		pt.Limit = "<"
	case ">", "≥", ">=", "lower":
		pt.Limit = ">"
	default:
		if !isMissing(normalize(s)) && normalize(s) != "=" {
			rr.refuse(codeBadLimit, c, "%q is neither < nor >", short(s))
		}
		return
	}
	if flip {
		pt.Limit = map[string]string{"<": ">", ">": "<"}[pt.Limit]
	}
}

// attached takes over an uncertainty written in the cell of k.
func (rr *rowReader) attached(pt *Point, c *column, x Cell) {
	if h, ok := rr.levelOf(pt, c, x, &rr.brackets, &rr.spaced, &rr.plusMinus); ok {
		rr.state(pt, &h, c, x.U, x.Value, 1)
	}
}

// repeatsFor is the number of repeats behind a point; 0 if not known.
func (rr *rowReader) repeatsFor(pt *Point) int {
	if pt.Repeats == 0 {
		return rr.p.repeatsN
	}
	return pt.Repeats
}

// uncertainty reads the cell of u(k). base is the cell that it belongs to.
func (rr *rowReader) uncertainty(pt *Point, run *rateRun, base Cell) {
	c := run.uncertainty
	x, ok, _ := rr.number(c)
	if !ok {
		return
	}
	if x.Value < 0 {
		rr.refuse(codeNegativeU, c, "%q is negative", short(rr.cells[c.index]))
		return
	}
	h := c.Heading
	v := x.Value
	if x.Percent && !c.Percent {
		h.Relative = true
		v /= 100
	}
	if h.Kind == KindFactor && v < 1 {
		rr.refuse(codeBadFactor, c, "%q is an uncertainty factor below 1", short(rr.cells[c.index]))
		return
	}
	if h.Kind == KindExpanded && h.Coverage == 0 && rr.p.coverage != nil {
		y, ok, _ := rr.number(rr.p.coverage)
		if ok && !(y.Value > 0) {
			rr.refuse(codeBadCoverage, rr.p.coverage, "%q is not a coverage factor", short(rr.cells[rr.p.coverage.index]))
			return
		}
		if !ok && h.Confidence == 0 {
			return
		}
		h.Coverage = y.Value
	}
	if b := run.base.Form; b == FormReciprocal || b == FormHalfLife {
		h.Form = b
	}
	rr.state(pt, &h, c, v, base.Value, run.uFactor)
}

// state turns a stated uncertainty u into u(k) of a point. cell is the number of
// the quantity that it was stated for, factor the unit of u in that of k, c the
// column that states it.
func (rr *rowReader) state(pt *Point, h *Heading, c *column, u, cell, factor float64) {
	n := rr.repeatsFor(pt)
	if h.Kind == KindRepeats && n == 0 {
		return
	}
	k := math.Abs(pt.K)
	d := rr.divisor(h, pt)
	switch {
	case h.Kind == KindFactor:
		u = k * math.Log(u)
	case h.Relative || h.Form == FormLn:
		u = k * u
	case h.Form == FormLg:
		u = k * u * math.Ln10
	case h.Form == FormReciprocal || h.Form == FormHalfLife:
		u = k * (u * factor / math.Abs(cell))
	default:
		u *= factor * h.Divisor.of(pt.T)
	}
	pt.UK = u / d
	if math.IsInf(pt.UK, 0) || math.IsNaN(pt.UK) {
		pt.UK = 0
		rr.refuse(codeNotFinite, c, "its uncertainty is beyond the range of double precision")
		return
	}
	if pt.UK == 0 {
		return
	}
	pt.Level = LevelStandard
	small := n > 0 && n <= 30
	switch h.Kind {
	case KindRepeats:
		pt.SD, pt.Repeats = u, n
		if small {
			pt.Level = LevelRepeats
		}
	case KindMean:
		if small {
			pt.Level = LevelRepeats
		}
	case KindExpanded:
		if small && h.Coverage == 0 {
			pt.Level = LevelRepeats
		}
	}
}

// divisor turns an uncertainty stated of a point into a standard one. A number of
// repeats that the user gave is recorded where it counts.
func (rr *rowReader) divisor(h *Heading, pt *Point) float64 {
	counts := h.Kind == KindRepeats || h.Kind == KindExpanded && h.Coverage == 0
	if counts && pt.Repeats == 0 && rr.p.repeatsN > 0 {
		rr.p.assume(rr.p.assumedN)
	}
	return h.divisor(rr.repeatsFor(pt), rr.p)
}

// divisor turns a stated uncertainty into a standard one: coverage factor, quantile
// for the confidence of an interval (Student's t for n repeats, normal where n is
// not known), sqrt(n) for the s.d. of n repeats.
func (h *Heading) divisor(n int, p *plan) float64 {
	switch h.Kind {
	case KindRepeats:
		return math.Sqrt(float64(max(n, 1)))
	case KindExpanded, KindFactor:
		switch {
		case h.Coverage > 0:
			return h.Coverage
		case h.Confidence > 0 && n >= 2:
			return p.quantile(n, h.Confidence)
		case h.Confidence > 0:
			return normalQuantile(h.Confidence)
		}
	}
	return 1
}

// normalQuantile is the factor of a two-sided normal interval, rounded to three
// decimals as is common practice: 1.96 for 95 %.
func normalQuantile(confidence float64) float64 {
	return math.Round(1e3*distuv.UnitNormal.Quantile((1+confidence)/2)) / 1e3
}

// studentOf names a quantile of Student's t.
type studentOf struct {
	n          int
	confidence float64
}

// quantile is the factor of a two-sided interval from n >= 2 repeats.
func (p *plan) quantile(n int, confidence float64) float64 {
	at := studentOf{n, confidence}
	q, ok := p.student[at]
	if !ok {
		if p.student == nil {
			p.student = map[studentOf]float64{}
		}
		q = distuv.StudentsT{Mu: 0, Sigma: 1, Nu: float64(n - 1)}.Quantile((1 + confidence) / 2)
		p.student[at] = q
	}
	return q
}
