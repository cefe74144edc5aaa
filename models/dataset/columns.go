package dataset

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"strconv"
	"strings"
)

// column is one column of a table with what it was taken for.
type column struct {
	Heading
	index int    // from 0
	nth   int    // which of the columns that the user named for its role
	used  bool   // takes part, or checks a column that does
	says  string // why a column with a role is not used

	// How uncertainties were written beside the numbers in its cells.
	brackets, spaced, plusMinus bool
}

// plan says which column gives what.
type plan struct {
	cols []column

	temperature []*column // the one used first; the others must agree
	runs        []rateRun // more than one: repeats side by side
	ofT         *column   // u(T)
	repeats     *column
	coverage    *column
	limit       *column
	source      *column
	dataset     *column
	order       *column
	note        *column
	kept        []*column // go to Extra

	unit     *Unit // of k; nil if not understood
	quantity Quantity
	repeatsN int     // --assume n=
	assumedN string  // as it is recorded
	level    Kind    // --assume error=, for ± in cells; "" if not said
	levelK   float64 // its coverage factor
	student  map[studentOf]float64

	decimal byte
	assumed []string
	notices []Notice
	stream  planOfStream

	shown map[string][][]string // first cells of each column, by data set
}

func (p *plan) assume(what string) {
	if !slices.Contains(p.assumed, what) {
		p.assumed = append(p.assumed, what)
	}
}

// maker turns a table into sets, collecting problems on the way.
type maker struct {
	t        *Table
	opt      Options
	problems Problems
	line     int      // of the headings
	ragged   []ragged // rows with more or fewer cells than the headings
	even     int      // rows with as many
	// footnotes are lines directly below the table, cut off it.
	footnotes []int
	tidied    *tidied // nil unless Tidy wrote the table
	onlyRate  string  // group of the rate columns that are meant, of several; "" for all
}

func (m *maker) refuse(code string, row int, column, format string, args ...any) {
	p := problem(code, m.t.Name, row, column, fmt.Sprintf(format, args...))
	p.Sheet = m.t.Sheet
	m.problems = append(m.problems, p)
}

func (m *maker) refuseCure(code string, row int, column, message, cure string) {
	m.refuse(code, row, column, "%s", message)
	m.problems[len(m.problems)-1].Cure = cure
}

// header finds the headings: texts, and the index of the first row of data.
func (m *maker) header() (headings []string, line, first int, notices []Notice, ok bool) {
	t := m.t
	i := 0
	var titles []int
	for i < len(t.Rows) && filled(t.Rows[i].Cells) < 2 {
		titles = append(titles, t.Rows[i].Line)
		i++
	}
	if t.isProse(i) {
		m.refuseProse(i)
		return nil, 0, 0, nil, false
	}
	if i == len(t.Rows) {
		if len(t.Rows) > 0 {
			m.refuseCure(codeNoData, t.Rows[0].Line, "", "no row has two cells: there is no table, or its delimiter is none of comma, semicolon, tab and space",
				"write one row of headings such as T/K,k/s^-1 and one row for each measurement")
		} else {
			m.refuse(codeNoData, 0, "", "the file holds no rows")
		}
		return nil, 0, 0, nil, false
	}
	head := t.Rows[i]
	if allNumbers(head.Cells) {
		if cells := splitLine(t.LastComment, t.Delimiter, len(head.Cells)); len(titles) == 0 && len(cells) == len(head.Cells) && !allNumbers(cells) && hasRole(cells, m.opt.Assume) {
			notices = append(notices, notice(noteCommentHeading, fmt.Sprintf("the headings were read from the comment in line %d", t.LastCommentLine), t.LastCommentLine))
			return cells, t.LastCommentLine, i, notices, true
		}
		m.refuse(codeNoHeading, head.Line, "", "the first row holds numbers only")
		return nil, 0, 0, nil, false
	}
	if m.onItsSide(i) {
		m.refuse(codeOnItsSide, head.Line, "", "the table lies on its side: its headings %s stand in the first column", quoteAll(firstCells(t.Rows[i:])))
		return nil, 0, 0, nil, false
	}
	if len(titles) > 0 {
		notices = append(notices, notice(noteTitle, fmt.Sprintf("%s above the headings skipped", lines(titles)), titles...))
	}
	headings = append(headings, head.Cells...)
	first = i + 1
	if t.Delimiter == ' ' && first < len(t.Rows) && len(headings) != len(t.Rows[first].Cells) && i < len(t.first) {
		// Headings with spaces in them, two or more between them.
		if wide := splitLine(t.first[i], ' ', len(t.Rows[first].Cells)); len(wide) == len(t.Rows[first].Cells) {
			headings = wide
		}
	}
	// A second heading row: units or words, and no number.
	if first < len(t.Rows) {
		second := t.Rows[first]
		joined := notice(noteJoined, fmt.Sprintf("line %d was joined to the headings", second.Line), second.Line)
		if onlyRepeats(second.Cells) {
			joinRepeats(headings, second.Cells)
			notices = append(notices, joined)
			first++
		} else if units, words := headingRow(second.Cells); units || words && first+1 < len(t.Rows) && !hasRole(headings, m.opt.Assume) {
			for j, c := range second.Cells {
				c = strings.TrimSpace(c)
				if j >= len(headings) || c == "" {
					continue
				}
				if isUnitCell(normalize(c)) && !strings.ContainsAny(headings[j], "([") && !strings.Contains(headings[j], "/") {
					c = "(" + strings.Trim(c, "()[]") + ")"
				}
				headings[j] = strings.TrimSpace(headings[j] + " " + c)
			}
			notices = append(notices, joined)
			first++
		}
	}
	// Empty columns at the right end come from spreadsheets.
	width := t.width
	for _, r := range t.Rows[first:] {
		for n := len(r.Cells); n > width; n-- {
			if strings.TrimSpace(r.Cells[n-1]) != "" {
				width = n
			}
		}
	}
	for n := len(headings); n > width && strings.TrimSpace(headings[n-1]) == ""; n-- {
		headings = headings[:n-1]
	}
	return headings, head.Line, first, notices, true
}

// onItsSide reports whether the rows from one on hold headings in their first column,
// a temperature and a rate constant among them, and the first of these rows nothing but
// numbers beside its heading. A user who names columns has found headings.
func (m *maker) onItsSide(from int) bool {
	rows := m.t.Rows[from:]
	if len(m.opt.Columns) > 0 || len(rows[0].Cells) < 3 || filled(rows[0].Cells[1:]) < 2 || !allNumbers(rows[0].Cells[1:]) {
		return false
	}
	roles := map[Role]bool{}
	for _, c := range firstCells(rows) {
		roles[m.opt.heading(c).Role] = true
	}
	return roles[RoleTemperature] && roles[RoleRate]
}

// firstCells are the first cells of rows, as far as there may be headings among them.
func firstCells(rows []Row) []string {
	const most = 20
	var s []string
	for _, r := range rows[:min(most, len(rows))] {
		if len(r.Cells) > 0 {
			s = append(s, r.Cells[0])
		}
	}
	return s
}

// joinRepeats joins a row of marks (run 1, run 2) to the headings. A heading that
// stands over the first of its repeats only belongs to those to the right, too.
func joinRepeats(headings, marks []string) {
	over := ""
	for j := range min(len(headings), len(marks)) {
		if h := strings.TrimSpace(headings[j]); h != "" {
			over = h
		}
		if c := strings.TrimSpace(marks[j]); c != "" {
			headings[j] = strings.TrimSpace(over + " " + c)
		}
	}
}

// onlyRepeats reports whether a row holds marks of repeats and nothing else.
func onlyRepeats(cells []string) bool {
	for _, c := range cells {
		if c = normalize(strings.TrimSpace(c)); c != "" && !reOnlyRepeat.MatchString(c) {
			return false
		}
	}
	return filled(cells) > 1
}

// headingRow reports whether a row below the headings holds units and words but no
// number: units if every filled cell is a unit, words if it only has no number.
func headingRow(cells []string) (units, words bool) {
	n := 0
	units, words = true, true
	for _, c := range cells {
		s := normalize(c)
		if isMissing(s) {
			if s != "" && s != "-" {
				return false, false
			}
			continue
		}
		n++
		isUnit := isUnitCell(s)
		units = units && isUnit
		if !isUnit && !allNumbers([]string{c}) {
			continue
		}
		if !isUnit {
			return false, false
		}
	}
	return units && n > 0, words && n > 1
}

// isUnitCell reports whether a cell below a heading is its unit, in brackets or not.
func isUnitCell(s string) bool {
	first, _ := factorFirst(strings.Trim(s, "()[] "))
	u, err := ParseUnit(first)
	return err == nil && u.Text != "1"
}

func filled(cells []string) int {
	n := 0
	for _, c := range cells {
		if strings.TrimSpace(c) != "" {
			n++
		}
	}
	return n
}

func allNumbers(cells []string) bool {
	for _, c := range cells {
		if ParseCell(c, '.', 0).Kind == CellText && ParseCell(c, ',', 0).Kind == CellText {
			return false
		}
	}
	return true
}

// splitLine splits a heading line into n cells: at the delimiter, or, for a table
// split at spaces, at single or else at double spaces.
func splitLine(line string, delimiter byte, n int) []string {
	p := splitter{s: line, line: 1}
	cells, _, _, _ := p.next(delimiter)
	if delimiter != ' ' || len(cells) == n {
		return append([]string(nil), cells...)
	}
	var wide []string
	for _, c := range strings.Split(strings.ReplaceAll(line, "\t", "  "), "  ") {
		if c = strings.TrimSpace(c); c != "" {
			wide = append(wide, c)
		}
	}
	return wide
}

// hasRole reports whether headings hold a temperature and a rate constant for certain.
func hasRole(cells []string, assume map[string]string) bool {
	roles := map[Role]bool{}
	for _, c := range cells {
		if h := ParseHeading(c, assume); h.Ambiguity == nil {
			roles[h.Role] = true
		}
	}
	return roles[RoleTemperature] && roles[RoleRate]
}

// columns gives each heading its meaning and chooses the columns that are used.
func (m *maker) columns(headings []string, line int) *plan {
	p := &plan{cols: make([]column, len(headings))}
	seen := map[string][]int{}
	for i, text := range headings {
		text = strings.TrimSpace(text)
		c := &p.cols[i]
		*c = column{Heading: m.opt.heading(text), index: i}
		if text == "" {
			c.Text = fmt.Sprintf("column %d", i+1)
			continue
		}
		if right := tidyKept(headings); right > 0 && i >= right {
			continue // may be spelled as one that is used
		}
		key := normalize(text)
		seen[key] = append(seen[key], i)
	}
	m.refuseTwice(p, seen, line)
	m.readTidied(p)
	forced := m.forced(p, headings, line)
	m.checkAssumptions(p)

	m.chooseTemperature(p, forced[RoleTemperature], line)
	m.chooseRate(p, forced[RoleRate], line)
	single := func(r Role) *column {
		var chosen *column
		if len(forced[r]) > 0 {
			chosen = forced[r][0]
		}
		for i := range p.cols {
			switch c := &p.cols[i]; {
			case c.Role != r:
			case chosen == nil:
				chosen = c
			case c != chosen:
				c.says = fmt.Sprintf("%q is the %s", short(chosen.Text), r)
				p.notices = append(p.notices, Notice{Code: noteKept, Message: fmt.Sprintf("column %q is kept, not used: %s", short(c.Text), c.says), Cure: "choose another with " + columnFlag(roleFlags[r], c.Text)})
			}
		}
		if chosen != nil {
			chosen.used, chosen.says = true, ""
		}
		return chosen
	}
	p.limit, p.source, p.dataset = single(RoleLimit), single(RoleSource), single(RoleDataset)
	p.order, p.note = single(RoleOrder), single(RoleNote)
	p.repeats, p.coverage = single(RoleRepeats), single(RoleCoverage)
	if by := m.opt.DatasetBy; by != "" {
		if c := p.find(by); c != nil {
			p.dataset = c
			c.used = true
			if c.Role == RoleKept {
				c.Role = RoleDataset
			}
		} else {
			m.refuse(codeColumnUnknown, line, "", "--dataset-by %s: there is no such heading; the file has %s", by, quoteAll(headings))
			for _, h := range headings {
				if strings.EqualFold(normalize(h), normalize(by)) {
					m.problems[len(m.problems)-1].Cure = "did you mean " + flag("dataset-by", strings.TrimSpace(h)) + "?"
				}
			}
		}
	}
	if len(p.runs) > 0 {
		m.chooseUncertainty(p, forced[RoleUncertainty], line)
	}
	if len(p.temperature) > 0 {
		m.chooseUT(p, forced[RoleTemperatureUncertainty], line)
	}

	var unused []string
	for i := range p.cols {
		c := &p.cols[i]
		if c.used {
			p.noteUse(c)
			continue
		}
		p.kept = append(p.kept, c)
		p.warnUnused(c)
		if c.says == "" && strings.TrimSpace(headings[i]) != "" {
			unused = append(unused, c.Text)
		}
	}
	if len(unused) > 0 {
		const most = 12
		s := quoteAll(unused[:min(most, len(unused))])
		if len(unused) > most {
			s += fmt.Sprintf(" and %d more", len(unused)-most)
		}
		n := notice(noteKept, "kept, not used: "+s)
		n.Cure = "if one should take part, name its role, such as k, u(k), n or source: " + columnFlag("source", unused[0])
		p.notices = append(p.notices, n)
	}
	return p
}

// roleFlags are the names of roles that --column takes, where they differ from a
// heading.
var roleFlags = map[Role]string{
	RoleLimit: "limit", RoleSource: "source", RoleDataset: "dataset", RoleOrder: "order", RoleNote: "note",
	RoleRepeats: "n", RoleCoverage: "coverage_factor",
}

// forced gives the columns that the user named their roles (--column), and returns
// them by role, as named.
func (m *maker) forced(p *plan, headings []string, line int) map[Role][]*column {
	forced := map[Role][]*column{}
	for _, role := range slices.Sorted(maps.Keys(m.opt.Columns)) {
		for i, text := range m.opt.Columns[role] {
			c := p.find(text)
			if c == nil {
				m.refuse(codeColumnUnknown, line, "", "--column %s=%s: there is no such heading; the file has %s", role, text, quoteAll(headings))
				continue
			}
			if c.nth > 0 {
				m.refuse(codeRoleTwice, line, c.Text, "--column names this column twice")
				continue
			}
			h, err := parseAs(role, c.Text, m.opt.Assume)
			if err != nil {
				m.refuse(codeRoleUnknown, 0, "", "--column %s=%s: %v", role, text, err)
				continue
			}
			h.Text = c.Text
			c.Heading = h
			c.nth = i + 1
			switch h.Role {
			case RoleTemperature, RoleRate, RoleUncertainty, RoleTemperatureUncertainty:
			default:
				if len(forced[h.Role]) > 0 {
					m.refuse(codeRoleTwice, line, c.Text, "--column names two columns for the role %s", role)
				}
			}
			forced[h.Role] = append(forced[h.Role], c)
		}
	}
	return forced
}

// noteUse records what reading a used column took for granted.
func (p *plan) noteUse(c *column) {
	for _, a := range c.Assumed {
		p.assume(a)
	}
	if c.Lost {
		n := notice(noteLost, fmt.Sprintf("column %q: a number in the heading was read as a power of ten whose superscript was lost", short(c.Text)))
		if lost, power := lostPower(normalize(c.Text)); lost != "" {
			n.Message = fmt.Sprintf("column %q: %s in the heading was read as %s, whose superscript was lost", short(c.Text), lost, power)
			n.Cure = "write " + power
		}
		p.notices = append(p.notices, n)
	}
	if r := p.runOfColumn(c); r != nil && c == r.cols[0] {
		switch c.Form {
		case FormReciprocal:
			p.notices = append(p.notices, notice(noteTimeLike, fmt.Sprintf("column %q was read as a mean lifetime: k = 1/τ", short(c.Text))))
		case FormHalfLife:
			p.notices = append(p.notices, notice(noteTimeLike, fmt.Sprintf("column %q was read as a half-life: k = ln 2/t½", short(c.Text))))
		}
	}
}

// lostPower finds the number in a heading that was read as a power of ten without its
// superscript, and writes that power out.
func lostPower(s string) (lost, power string) {
	for i := range s {
		if i > 0 && (isDigit(s[i-1]) || s[i-1] == '.') {
			continue
		}
		if e, l, rest, ok := powerOfTen(s[i:]); ok && l {
			return s[i : len(s)-len(rest)], fmt.Sprintf("10^%d", e)
		}
	}
	return "", ""
}

// find returns the column with a heading, as written or in the unified spelling.
func (p *plan) find(text string) *column {
	key := normalize(text)
	for i := range p.cols {
		if normalize(p.cols[i].Text) == key {
			return &p.cols[i]
		}
	}
	return nil
}

func quoteAll(ss []string) string {
	const most = 20
	var b strings.Builder
	n := 0
	for _, s := range ss {
		if s = strings.TrimSpace(s); s == "" {
			continue
		}
		if n++; n > most {
			b.WriteString(", …")
			break
		}
		if n > 1 {
			b.WriteString(", ")
		}
		b.WriteString(strconv.Quote(short(s)))
	}
	return b.String()
}

// short cuts what a message quotes.
func short(s string) string {
	const most = 60
	n := 0
	for i := range s {
		if n++; n > most {
			return s[:i] + "…"
		}
	}
	return s
}

// AssumptionKeys are the keys of Options.Assume.
var AssumptionKeys = []string{"T", "log", "k", "factor", "error", "n"}

// checkAssumptions reads the values of --assume that belong to no heading.
func (m *maker) checkAssumptions(p *plan) {
	for _, key := range slices.Sorted(maps.Keys(m.opt.Assume)) {
		v := m.opt.Assume[key]
		ok := true
		switch key {
		case "T":
			var h Heading
			headingParser{assume: m.opt.Assume}.settleTemperature(&h)
			u, err := ParseUnit(v)
			ok = h.Ambiguity == nil || err == nil && u.reciprocalEnergy()
		case "log":
			ok = v == "ln" || v == "lg"
		case "k":
			ok = v == "rate" || v == assumeRepeats
		case "factor":
			ok = v == "times" || v == "unit"
		case "error":
			level, list, found := strings.Cut(v, ",")
			if found { // sd,n=3
				n, err := strconv.Atoi(strings.TrimPrefix(list, "n="))
				ok = err == nil && n >= 1 && strings.HasPrefix(list, "n=")
				p.repeatsN, p.assumedN = n, "error="+v
			}
			var k Kind
			var c float64
			if k, c, found = errorLevel(level); found {
				p.level, p.levelK = k, c
			}
			ok = ok && found
		case "n":
			n, err := strconv.Atoi(v)
			ok = err == nil && n >= 1
			p.repeatsN, p.assumedN = n, "n="+v
		default:
			ok = false
		}
		if !ok {
			m.refuse(codeAssume, 0, "", "--assume %s=%s", key, v)
		}
	}
}

// meanings lists the readings of an ambiguous heading, each with its flag.
func (a *Ambiguity) meanings() string {
	var s []string
	for _, m := range a.Meanings {
		s = append(s, fmt.Sprintf("--assume %s=%s (%s)", a.Key, m.Value, m.Says))
	}
	return strings.Join(s, ", ")
}

func (m *maker) chooseTemperature(p *plan, forced []*column, line int) {
	var open []*column
	for i := range p.cols {
		c := &p.cols[i]
		switch {
		case c.Role != RoleTemperature:
		case len(forced) > 0 && !slices.Contains(forced, c):
			c.says = "another column was chosen"
		case c.Ambiguity != nil:
			if c.Form == FormUnknown && m.unitFromCells(c) {
				p.temperature = append(p.temperature, c)
				continue
			}
			open = append(open, c)
		default:
			p.temperature = append(p.temperature, c)
		}
	}
	if len(p.temperature) == 0 {
		for _, c := range open {
			m.refuseCure(codeAmbiguousTemperature, line, c.Text, "the temperature may be meant in several ways",
				"write the unit into the heading, as in T/K, or say which: "+c.Ambiguity.meanings())
		}
		if len(open) == 0 {
			m.refuseNone(p, codeNoTemperature, "T", line, "no heading was understood as a temperature among "+quoteAll(p.texts()), "write the heading as T/K or t/°C")
		}
	}
	for _, c := range p.temperature {
		c.used = true
	}
}

func (p *plan) texts() []string {
	var s []string
	for i := range p.cols {
		s = append(s, p.cols[i].Text)
	}
	return s
}

// unitFromCells gives a heading without unit the unit of its cells, if all that
// name one name the same.
func (m *maker) unitFromCells(c *column) bool {
	text := ""
	for _, r := range m.t.Rows[1:] {
		if c.index >= len(r.Cells) {
			break // ragged, and refused later
		}
		cell := r.Cells[c.index]
		if _, plain := plainNumber(cell, '.', 0); plain || cell == "" {
			continue
		}
		got := ParseCell(cell, '.', 0)
		if got.Kind == CellText {
			got = ParseCell(cell, ',', 0)
		}
		if got.Unit == "" {
			continue
		}
		u, err := ParseUnit(got.Unit)
		if err != nil || text != "" && u.Text != text {
			return false
		}
		text = u.Text
	}
	u, err := ParseUnit(text)
	if text == "" || err != nil || c.Role == RoleTemperature && u.Dim != dimTemp || c.Role == RoleRate && !u.isRate() {
		return false
	}
	c.Ambiguity, c.Form, c.Unit, c.UnitText = nil, FormDirect, &u, text
	return true
}

// plainSymbol is a symbol without the signs that only set its subscript.
func plainSymbol(s string) string {
	return strings.NewReplacer("_", "", "{", "", "}", "", " ", "").Replace(s)
}

func (m *maker) chooseRate(p *plan, forced []*column, line int) {
	m.assumeRuns(p)
	var certain, means, open, times []*column
	marks := map[string]bool{}
	for i := range p.cols {
		c := &p.cols[i]
		switch {
		case c.Role != RoleRate:
		case len(forced) > 0 && !slices.Contains(forced, c):
			c.says = "another column was chosen"
		case m.onlyRate != "" && c.group() != m.onlyRate:
			c.says = "it holds another rate constant"
		case c.Ambiguity != nil:
			open = append(open, c)
		case c.halfLife() != "" && len(forced) == 0:
			times = append(times, c)
		default:
			if c.Form == FormDirect && c.Unit == nil && c.UnitText == "" {
				m.unitFromCells(c)
			}
			if c.Average && len(forced) == 0 {
				means = append(means, c)
				continue
			}
			certain = append(certain, c)
			marks[c.Run] = true
		}
	}
	none := len(certain) == 0
	for _, c := range times {
		if none && len(means) == 0 || c.Run != "" && !marks[c.Run] {
			certain = append(certain, c)
		}
	}
	if len(forced) == 0 {
		certain = p.withoutBounds(certain)
	}
	ambiguous := len(open) > 0 && (len(forced) > 0 || len(certain)+len(means) == 0)
	switch {
	case ambiguous:
		for _, c := range open {
			if what := c.Ambiguity; what.Key == "k" {
				m.refuseCure(codeAmbiguousRate, line, c.Text, "the heading does not say that it is of a rate constant", "is it a rate constant? say so: --assume k="+what.Meanings[0].Value)
				continue
			}
			m.refuseCure(codeAmbiguousRate, line, c.Text, "the heading may be meant in several ways", "write it out, or say which: "+c.Ambiguity.meanings())
		}
	case len(certain)+len(means) == 0:
		m.refuseNoRate(p, line)
	default:
		m.settleRuns(p, certain, means, len(forced) > 0, line)
	}
}

// refuseNoRate refuses a table without a rate constant.
func (m *maker) refuseNoRate(p *plan, line int) {
	for i := range p.cols {
		c := &p.cols[i]
		s, negative := strings.CutPrefix(normalize(c.Text), "-")
		if h := ParseHeading(s, m.opt.Assume); negative && h.Role == RoleRate {
			h.Text = strings.TrimSpace(s)
			m.refuseCure(codeNoRate, line, c.Text, "the sign of the rate constant, or of its logarithm, is turned round", fmt.Sprintf("turn the sign of the cells and write the heading as %s", h.Text))
			return
		}
	}
	what := "no heading was understood as a rate constant among " + quoteAll(p.texts())
	if runs := m.onlyRuns(p); len(runs) > 1 {
		var names []string
		for _, c := range runs {
			names = append(names, c.Text)
		}
		m.refuseCure(codeNoRate, line, "", what, "if these are repeats of one rate constant, say so: --assume k=repeats, or name each: "+columnFlags("k", names, " "))
		return
	}
	m.refuseNone(p, codeNoRate, "k", line, what, "write the heading as k/s^-1")
}

// refuseNone refuses a table without a column for a role, and offers those with
// numbers that have none. Where T and k are both missing, each is offered columns that
// the other is not: one column cannot be both, and which is which nobody knows.
func (m *maker) refuseNone(p *plan, code, role string, line int, what, cure string) {
	var names []string
	for i := range p.cols {
		if c := &p.cols[i]; c.Role == RoleKept && !isOtherQuantity(c.Text) && m.isNumeric(c) {
			names = append(names, c.Text)
		}
	}
	both := !slices.ContainsFunc(p.cols, func(c column) bool { return c.Role == map[string]Role{"T": RoleRate, "k": RoleTemperature}[role] })
	switch {
	case len(names) == 0:
	case !both:
		cure += ", or name the column: " + columnFlags(role, names, " or ")
	case len(names) == 1:
		cure += fmt.Sprintf("; the numbers of one column, %s, cannot be both T and k", quoteAll(names))
	case role == "T":
		cure += ", or name the column, such as " + columnFlag(role, names[0])
	default:
		cure += ", or name the column, such as " + columnFlags(role, names[1:], " or ")
	}
	m.refuseCure(code, line, "", what, cure)
}

// isNumeric reports whether the first cell of a column below its heading that is not
// empty holds a number.
func (m *maker) isNumeric(c *column) bool {
	for _, r := range m.t.Rows {
		if r.Line > m.line && c.index < len(r.Cells) && !isMissing(normalize(r.Cells[c.index])) && !isUnitCell(normalize(r.Cells[c.index])) {
			return allNumbers(r.Cells[c.index : c.index+1])
		}
	}
	return false
}

// onlyRuns are the columns whose headings say which repeat they hold, and not of what:
// run 1, run 2.
func (m *maker) onlyRuns(p *plan) []*column {
	var runs []*column
	for i := range p.cols {
		if c := &p.cols[i]; c.Role == RoleKept && reOnlyRepeat.MatchString(normalize(c.Text)) && m.isNumeric(c) {
			runs = append(runs, c)
		}
	}
	return runs
}

// assumeRuns takes run 1, run 2 for repeats of k where the user says that they are and
// nothing else is a rate constant.
func (m *maker) assumeRuns(p *plan) {
	if m.opt.Assume["k"] != assumeRepeats || slices.ContainsFunc(p.cols, func(c column) bool { return c.Role == RoleRate }) {
		return
	}
	for _, c := range m.onlyRuns(p) {
		c.Heading = Heading{Text: c.Text, Role: RoleRate, Symbol: "k", Run: normalize(c.Text)}
	}
}

func (c *column) halfLife() Form {
	if c.Form == FormReciprocal || c.Form == FormHalfLife {
		return c.Form
	}
	return ""
}

// rateUnit is the unit of k that a rate column gives: the reciprocal of a time
// for a lifetime.
func (c *column) rateUnit() *Unit {
	if c.Unit == nil || c.halfLife() == "" {
		return c.Unit
	}
	u, err := ParseUnit("1/" + c.Unit.Text)
	if err != nil {
		return nil
	}
	return &u
}

// settleQuantity says what k is once the column that gives it is chosen.
func (p *plan) settleQuantity() {
	c := p.runs[0].cols[0]
	q := Quantity{Symbol: p.commonSymbol(), TimeLike: c.halfLife() != "", Diffusion: strings.HasPrefix(c.Symbol, "D")}
	if q.TimeLike {
		q.Symbol = "k"
	}
	p.unit = c.rateUnit()
	switch {
	case p.unit == nil:
		q.Unit = normalize(c.UnitText)
		msg := fmt.Sprintf("column %q: no unit", short(c.Text))
		if c.UnitText != "" {
			msg = fmt.Sprintf("column %q: the unit %q is not understood", short(c.Text), c.UnitText)
		}
		p.notices = append(p.notices, notice(noteUnit, msg+"; numbers are kept as they stand"))
	default:
		q.Unit = p.unit.Text
		r, ok := p.unit.rate()
		q.Known, q.LnPerSecond, q.PerMolecule = r.known, r.lnPerSecond, r.perMolecule
		q.Diffusion = q.Diffusion || r.diffusion
		switch {
		case !ok:
			p.notices = append(p.notices, notice(noteUnit, fmt.Sprintf("column %q: %s is not the unit of a rate constant", short(c.Text), p.unit.Text)))
		case !r.known:
			p.notices = append(p.notices, notice(noteUnitWithheld, fmt.Sprintf("column %q: %s", short(c.Text), p.unit.Text)))
		}
	}
	p.quantity = q
}

// nearest returns the temperature or rate column next to the left of a column.
func (p *plan) nearest(c *column) *column {
	for i := c.index - 1; i >= 0; i-- {
		if d := &p.cols[i]; d.Role == RoleTemperature || d.Role == RoleRate {
			return d
		}
	}
	return nil
}

func (m *maker) chooseUncertainty(p *plan, forced []*column, line int) {
	r := &p.runs[0]
	symbol := plainSymbol(r.cols[0].Symbol)
	defer p.checkRepeats()
	for i := range p.cols {
		c := &p.cols[i]
		if c.Role != RoleUncertainty {
			continue
		}
		if len(forced) > 0 && !slices.Contains(forced, c) {
			c.says = "another column was chosen"
			continue
		}
		near := p.nearest(c)
		if c.Of == "" && c.Run == "" && near != nil {
			if near.Role == RoleTemperature {
				c.Role = RoleTemperatureUncertainty
				continue
			}
			if p.runOfColumn(near) == nil {
				continue // of another rate constant, or of a mean
			}
		}
		if len(p.runs) > 1 {
			var of bool
			if r, of = p.runOf(c, forced); !of {
				continue
			}
			switch {
			case r != nil:
				symbol = plainSymbol(r.cols[0].Symbol)
			case c.Kind == KindRepeats || c.Kind == KindMean:
				p.spare(c, "the repeats themselves are used")
				continue
			default:
				c.says = "it does not say which repeat it belongs to"
				p.notices = append(p.notices, notice(noteWhichRepeat, fmt.Sprintf("column %q is not used: %s", short(c.Text), c.says)))
				continue
			}
		}
		base := r.cols[0]
		switch {
		case c.Of == "":
			if near != nil && slices.Contains(r.cols, near) {
				base = near
			}
			if base.Form == FormLn || base.Form == FormLg {
				c.Form = base.Form
			}
			if c.Unit == nil || c.Unit.Dim.Temperature != 0 { // s^-1 beside k/T: of k itself
				c.Divisor = base.Divisor
			}
		case c.Symbol != "" && plainSymbol(c.Symbol) != symbol && c.Symbol != "k":
			continue
		case c.Form == FormReciprocal || c.Form == FormHalfLife:
			if base.halfLife() != c.Form {
				continue
			}
		case c.Form == FormDirect:
			for _, d := range r.cols {
				if d.Form == FormDirect {
					base = d
				}
			}
		}
		if c.Ambiguity != nil && c.Kind == KindExpanded && p.coverage != nil {
			c.Ambiguity = nil
		}
		if c.Ambiguity != nil && c.Ambiguity.Key == "factor" {
			m.refuseCure(codeAmbiguousRate, line, c.Text, "the power of ten may be meant in several ways", "write the power before the quantity or before its unit, or say which: "+c.Ambiguity.meanings())
			continue
		}
		if c.Ambiguity != nil {
			c.says = "its level is not stated"
			p.notices = append(p.notices, notice(noteLevel, fmt.Sprintf("column %q: the level of the uncertainty is not stated", short(c.Text))))
			continue
		}
		if c.Kind == KindRepeats && p.repeats == nil && p.repeatsN == 0 {
			c.says = "the number of repeats is not given"
			p.notices = append(p.notices, notice(noteRepeats, fmt.Sprintf("column %q: a standard deviation of repeats, and their number is not given", short(c.Text))))
			continue
		}
		if r.uncertainty != nil {
			c.says = "another uncertainty is used"
			p.notices = append(p.notices, notice(noteOtherU, fmt.Sprintf("column %q is not used: %q is", short(c.Text), short(r.uncertainty.Text))))
			continue
		}
		if c.Divisor == DivisorT && c.Unit != nil && c.Unit.Dim.Temperature != 0 {
			c.perKelvin()
		}
		// Units: an absolute uncertainty is in that of its quantity.
		if !c.Relative && c.Kind != KindFactor && c.Form != FormLn && c.Form != FormLg {
			if c.Unit == nil && c.UnitText == "" {
				c.Unit = base.Unit
				if c.Shift == 0 {
					c.Shift = base.Shift
				}
				if base.Unit != nil || base.Shift != 0 {
					p.notices = append(p.notices, notice(noteAssumedUnit, fmt.Sprintf("column %q has no unit: it is taken as that of %q", short(c.Text), short(base.Text))))
				}
			}
			switch {
			case c.Unit == nil && base.Unit == nil && (c.UnitText == "" || normalize(c.UnitText) == normalize(base.UnitText)):
			case c.Unit == nil || base.Unit == nil:
				m.refuseCure(codeUnitConflict, line, c.Text, fmt.Sprintf("its unit %q cannot be compared with that of %q", c.UnitText, short(base.Text)), "write both in one unit")
			default:
				if _, err := c.Unit.convertTo(*base.Unit); err != nil {
					m.refuseCure(codeUnitConflict, line, c.Text, "its unit "+err.Error()+", the unit of "+strconv.Quote(short(base.Text)), "write both in one unit")
				}
			}
		}
		r.uncertainty, r.base = c, base
		c.used = true
	}
}

// checkRepeats leaves the number of repeats unused where the repeats stand side by
// side and no uncertainty counts them.
func (p *plan) checkRepeats() {
	if p.repeats == nil || len(p.runs) == 1 {
		return
	}
	for _, r := range p.runs {
		if r.uncertainty != nil {
			return
		}
	}
	p.spare(p.repeats, "the repeats themselves are used")
	p.repeats = nil
}

func (m *maker) chooseUT(p *plan, forced []*column, line int) {
	for i := range p.cols {
		c := &p.cols[i]
		if c.Role != RoleTemperatureUncertainty || c.Form != FormDirect || len(forced) > 0 && !slices.Contains(forced, c) {
			continue
		}
		if c.Ambiguity != nil || c.Kind == KindRepeats && p.repeats == nil && p.repeatsN == 0 {
			c.says = "its level is not stated"
			p.notices = append(p.notices, notice(noteLevel, fmt.Sprintf("column %q: the level of the uncertainty is not stated", short(c.Text))))
			continue
		}
		if c.Relative || c.Kind == KindFactor || c.Percent {
			c.says = "an uncertainty of T is stated in K"
			p.notices = append(p.notices, notice(noteLevel, fmt.Sprintf("column %q: a relative uncertainty of a temperature", short(c.Text))))
			continue
		}
		if p.ofT != nil {
			c.says = "another uncertainty is used"
			p.notices = append(p.notices, notice(noteOtherU, fmt.Sprintf("column %q is not used: %q is", short(c.Text), short(p.ofT.Text))))
			continue
		}
		if c.Unit == nil {
			k, _ := ParseUnit("K")
			c.Unit = &k
			for _, d := range p.temperature {
				if d.Form == FormDirect && d.Unit != nil {
					c.Unit = d.Unit
					break
				}
			}
			p.notices = append(p.notices, notice(noteAssumedUnit, fmt.Sprintf("column %q has no unit: it is taken as %s", short(c.Text), c.Unit.Text)))
		}
		if c.Unit.Dim != dimTemp {
			m.refuseCure(codeUnitConflict, line, c.Text, "its unit is not that of a temperature", "write u(T)/K")
			continue
		}
		p.ofT = c
		c.used = true
	}
}

// value in K of a temperature cell, and half a unit of its last digit in K.
func (c *column) kelvin(cell Cell) (t, half float64) {
	v, h := cell.Value, cell.Half
	switch c.Form {
	case FormReciprocal:
		v *= c.Unit.Scale
		t = 1 / v
		return t, math.Abs(t * h / cell.Value)
	case FormThermalUnit:
		k := boltzmann
		if c.Unit.Dim.Amount != 0 {
			k = gasMolar
		}
		t = 1 / (v * c.Unit.Scale * k)
		return t, math.Abs(t * h / cell.Value)
	}
	if c.Unit.Scale == 1 {
		return v + c.Unit.Zero, h
	}
	return v*c.Unit.Scale + c.Unit.Zero, h * c.Unit.Scale
}

// rateValue in the unit of its column (a reciprocal time for a lifetime), and
// half a unit of the last digit as a part of it.
func (c *column) rateValue(cell Cell) (k, half float64) {
	v := cell.Value
	switch c.Form {
	case FormLn:
		return scaled(math.Exp(v), c.Shift), cell.Half
	case FormLg:
		return scaled(math.Pow(10, v), c.Shift), cell.Half * math.Ln10
	case FormReciprocal:
		return 1 / v, math.Abs(cell.Half / v)
	case FormHalfLife:
		return math.Ln2 / v, math.Abs(cell.Half / v)
	}
	return v, math.Abs(cell.Half / v)
}

// scaled is x·10^shift.
func scaled(x float64, shift int) float64 {
	if shift == 0 {
		return x
	}
	if shift < 0 && shift >= -22 {
		return x / pow10[-shift]
	}
	return x * math.Pow10(shift)
}

// cellShift is the power of ten that belongs to the number in the cell: that of a
// logarithm belongs to what the logarithm is of.
func (c *column) cellShift() int {
	if c.Role == RoleRate && (c.Form == FormLn || c.Form == FormLg) {
		return 0
	}
	return c.Shift
}
