package dataset

import (
	"fmt"
	"maps"
	"math"
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
	quiet bool // the row is left out already: its faults do not matter

	kFactor []float64 // from the unit of each rate column to that of k
	uFactor float64   // from the unit of u(k) to that of k, or of its base column

	brackets, spaced, plusMinus []int
	examples                    [][]string
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
	rr := &rowReader{m: m, p: p, uFactor: 1, examples: make([][]string, len(p.cols))}
	for _, c := range p.rate {
		f := 1.0
		if u := c.rateUnit(); u != nil && p.unit != nil {
			var err error
			if f, err = u.convertTo(*p.unit); err != nil {
				m.refuseCure(codeUnitConflict, 0, c.Text, "its unit "+err.Error()+", the unit of "+strconv.Quote(p.rate[0].Text), "choose one: --column k=HEADING")
				return nil
			}
		}
		rr.kFactor = append(rr.kFactor, f)
	}
	if u := p.uncertainty; u != nil && u.Unit != nil && p.base.Unit != nil && !u.Relative {
		to := p.base.Unit
		if p.base.halfLife() == "" && p.unit != nil {
			to = p.unit
		}
		if f, err := u.Unit.convertTo(*to); err == nil {
			rr.uFactor = f
		}
	}
	leaveOut := map[int]bool{}
	for _, l := range m.opt.LeaveOut {
		leaveOut[l] = true
	}
	named := maps.Clone(leaveOut) // leaveOut shrinks to those that are not found
	points := make([]Point, 0, len(m.t.Rows)-first)
	intern := map[string]string{}
	var after []int
	for i := first; i < len(m.t.Rows); i++ {
		r := m.t.Rows[i]
		if i > first && m.t.Blank[i] {
			for ; i < len(m.t.Rows); i++ {
				after = append(after, m.t.Rows[i].Line)
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
				after = append(after, r.Line)
			}
			continue
		}
		if isLabel(cells[p.temperature[0].index]) || isLabel(cells[0]) && !rr.isText(0) {
			after = append(after, r.Line)
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
			if pt.WhyNot == "" && !conds[j].holds(cells[conds[j].col.index], p.decimal) {
				pt.WhyNot = fmt.Sprintf("does not meet --where %q", conds[j].text)
			}
		}
		rr.quiet = pt.WhyNot != ""
		rr.read(pt)
		if m.tidied != nil {
			m.tidied.end(rr, pt)
		}
		pt.Used = pt.WhyNot == ""
	}
	for _, l := range m.opt.LeaveOut {
		if leaveOut[l] {
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
	say(noteBrackets, rr.brackets, "a bracket after the number was read as its standard uncertainty")
	say(noteLevel, rr.spaced, "a bracket after a space is ambiguous and was not used")
	say(noteLevel, rr.plusMinus, "the level of ± is not stated, and it was not used")
	for i := range p.cols {
		if c := &p.cols[i]; !c.used {
			for _, pt := range points[:min(3, len(points))] {
				if s := pt.Extra[c.Text]; s != "" {
					rr.examples[i] = append(rr.examples[i], s)
				}
			}
		}
	}
	p.examples(rr.examples)
	return points
}

func (p *plan) examples(e [][]string) {
	for i := range p.cols {
		p.cols[i].shown = e[i]
	}
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

// number reads the cell of a column. ok is false where it holds no number; a
// fault has then been noted, unless missing.
func (rr *rowReader) number(c *column) (x Cell, ok, missing bool) {
	s := rr.cells[c.index]
	x = ParseCell(s, rr.p.decimal, c.cellShift())
	if len(rr.examples[c.index]) < 3 {
		rr.examples[c.index] = append(rr.examples[c.index], short(s))
	}
	switch x.Kind {
	case CellNumber:
	case CellMissing, CellLimitOnly:
		return x, false, true
	case CellNotFinite:
		rr.refuse(codeNotFinite, c, "%q is not a finite number", short(s))
		return x, false, false
	default:
		rr.refuse(codeNotNumber, c, "%q is not a number", short(s))
		return x, false, false
	}
	if x.Percent && c.Role != RoleUncertainty {
		rr.refuse(codeNotNumber, c, "%q is a percentage", short(s))
		return x, false, false
	}
	if x.Unit != "" {
		u, err := ParseUnit(x.Unit)
		if err != nil || c.Unit == nil || u.Text != c.Unit.Text || u.Exp10 != 0 {
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
			pt.UT = x.Value * p.ofT.Unit.Scale / p.ofT.divisor(rr.repeatsFor(pt), 0)
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
	rr.rate(pt)
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
		if j == 0 {
			pt.T, half = t, h
			if x.Attached == AttachedBracket && p.ofT == nil && c.Form == FormDirect {
				pt.UT = x.U * c.Unit.Scale
			}
			continue
		}
		if !math.IsNaN(pt.T) && !(math.Abs(t-pt.T) <= half+h+1e-9*pt.T) {
			rr.refuse(codeDisagree, c, "%q is %s K, and column %q gives %s K", short(rr.cells[c.index]), strconv.FormatFloat(t, 'f', 3, 64), p.temperature[0].Text, strconv.FormatFloat(pt.T, 'f', 3, 64))
		}
	}
}

// rate reads k and u(k).
func (rr *rowReader) rate(pt *Point) {
	p := rr.p
	var base Cell // cell of the column that u(k) is stated in
	var half float64
	for j, c := range p.rate {
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
		if c == p.base {
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
		k *= rr.kFactor[j]
		if math.IsInf(k, 0) || math.IsNaN(k) || k == 0 && (c.Form != FormDirect || x.Value != 0) {
			rr.refuse(codeNotFinite, c, "%q gives a rate constant beyond the range of double precision", short(rr.cells[c.index]))
			return
		}
		if j > 0 {
			if d := math.Abs(math.Log(k / pt.K)); !(d <= half+h+1e-9) {
				rr.refuse(codeDisagree, c, "%q gives k = %.6g, and column %q gives %.6g", short(rr.cells[c.index]), k, p.rate[0].Text, pt.K)
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
		if x.Attached != AttachedNone && p.uncertainty == nil {
			rr.attached(pt, c, x)
		}
	}
	if p.limit != nil {
		rr.limit(pt)
	}
	if pt.Limit != "" && pt.WhyNot == "" {
		pt.WhyNot = limitOnly(pt.Limit, pt.K)
	}
	if p.uncertainty != nil {
		rr.uncertainty(pt, base)
	}
}

func (rr *rowReader) limit(pt *Point) {
	c := rr.p.limit
	s := rr.cells[c.index]
	if s == "" {
		return
	}
	flip := rr.p.rate[0].halfLife() != ""
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
	kind, coverage := KindStandard, 0.0
	switch x.Attached {
	case AttachedBracket:
		rr.brackets = append(rr.brackets, pt.Row)
	case AttachedSpaced:
		rr.spaced = append(rr.spaced, pt.Row)
		return
	case AttachedPlusMinus:
		kind, coverage = rr.p.level, rr.p.levelK
		if kind == KindNone || kind == KindRepeats && rr.repeatsFor(pt) == 0 {
			rr.plusMinus = append(rr.plusMinus, pt.Row)
			return
		}
		rr.p.assume("error=" + rr.m.opt.Assume["error"])
	}
	h := Heading{Kind: kind, Coverage: coverage, Relative: x.URel, Form: c.Form}
	rr.state(pt, &h, x.U, x.Value, 1)
}

// repeatsFor is the number of repeats behind a point; 0 if not known.
func (rr *rowReader) repeatsFor(pt *Point) int {
	if pt.Repeats == 0 {
		return rr.p.repeatsN
	}
	return pt.Repeats
}

// uncertainty reads the cell of u(k). base is the cell that it belongs to.
func (rr *rowReader) uncertainty(pt *Point, base Cell) {
	c := rr.p.uncertainty
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
		if !ok && !h.Percent95 {
			return
		}
		h.Coverage = y.Value
	}
	if b := rr.p.base.Form; b == FormReciprocal || b == FormHalfLife {
		h.Form = b
	}
	rr.state(pt, &h, v, base.Value, rr.uFactor)
}

// state turns a stated uncertainty u into u(k) of a point. cell is the number of
// the quantity that it was stated for, factor the unit of u in that of k.
func (rr *rowReader) state(pt *Point, h *Heading, u, cell, factor float64) {
	n := rr.repeatsFor(pt)
	if h.Kind == KindRepeats && n == 0 {
		return
	}
	k := math.Abs(pt.K)
	d := h.divisor(n, rr.p.quantile(n))
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
		u *= factor
	}
	pt.UK = u / d
	if math.IsInf(pt.UK, 0) || math.IsNaN(pt.UK) {
		pt.UK = 0
		rr.refuse(codeNotFinite, rr.p.rate[0], "its uncertainty is beyond the range of double precision")
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
		if small && h.Percent95 {
			pt.Level = LevelRepeats
		}
	}
}

// divisor turns a stated uncertainty into a standard one: coverage factor, t or
// normal quantile for 95 % (t95 if > 0), sqrt(n) for the s.d. of n repeats.
func (h *Heading) divisor(n int, t95 float64) float64 {
	switch h.Kind {
	case KindRepeats:
		return math.Sqrt(float64(max(n, 1)))
	case KindExpanded, KindFactor:
		switch {
		case h.Coverage > 0:
			return h.Coverage
		case h.Percent95 && t95 > 0:
			return t95
		case h.Percent95:
			return normal95
		}
	}
	return 1
}

// normal95 is the 97.5 % quantile of the normal distribution, rounded as is common
// practice.
const normal95 = 1.96

// quantile is the 97.5 % quantile of Student's t for n repeats; 0 if n is not
// known or leaves no degree of freedom.
func (p *plan) quantile(n int) float64 {
	if n < 2 || p.uncertainty == nil || !p.uncertainty.Percent95 {
		return 0
	}
	if p.t95 == nil {
		p.t95 = map[int]float64{}
	}
	q, ok := p.t95[n]
	if !ok {
		q = distuv.StudentsT{Mu: 0, Sigma: 1, Nu: float64(n - 1)}.Quantile(0.975)
		p.t95[n] = q
	}
	return q
}
