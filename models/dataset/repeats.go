package dataset

import (
	"fmt"
	"slices"
	"strings"
)

// rateRun is one measurement of the rate constant in every row, in one or several
// columns that must agree (k beside ln k). Several runs are repeats: a table holds
// them side by side instead of one below the other.
type rateRun struct {
	mark string    // as in the headings: run 1; "" if there is none
	cols []*column // the one used first; the others must agree

	uncertainty *column
	base        *column   // the one of cols that the uncertainty is stated in
	factors     []float64 // from the unit of each column to that of k
	uFactor     float64   // from the unit of u(k) to that of k, or of base
}

// splitRuns puts columns of one rate constant that have one key into one run, in
// the order of their first columns.
func splitRuns(cols []*column, key func(*column) string) []rateRun {
	at := map[string]int{}
	var runs []rateRun
	for _, c := range cols {
		k := key(c)
		j, ok := at[k]
		if !ok {
			j = len(runs)
			at[k] = j
			runs = append(runs, rateRun{mark: c.Run, uFactor: 1})
		}
		runs[j].cols = append(runs[j].cols, c)
	}
	return runs
}

func byMark(c *column) string { return c.Run }

// group names the rate constant that a column holds.
func (c *column) group() string { return plainSymbol(c.Symbol) + string(c.halfLife()) }

// refuseSeveral refuses columns of which it cannot be told whether they are one
// rate constant, and lists what would tell.
func (m *maker) refuseSeveral(cols []*column, line int, what string) {
	const most = 6
	flag := func(c *column) string { return columnFlag("k", c.Text) }
	at := map[string]int{}
	var groups [][]*column
	var names []string
	marked := false
	for _, c := range cols {
		names = append(names, c.Text)
		marked = marked || c.Run != "" || c.Average
		key := c.group() + "\x00" + fmt.Sprint(c.Run != "", c.Average)
		j, ok := at[key]
		if !ok {
			j = len(groups)
			at[key] = j
			groups = append(groups, nil)
		}
		groups[j] = append(groups[j], c)
	}
	var choices, all []string
	for _, g := range groups {
		var flags []string
		for _, r := range splitRuns(g, byMark) {
			flags = append(flags, flag(r.cols[0]))
		}
		all = append(all, flags[0])
		if len(choices) < most {
			choices = append(choices, strings.Join(flags[:min(most, len(flags))], " "))
		}
	}
	cure := "choose one: " + strings.Join(choices, " or ")
	if !marked && len(groups) > 1 {
		cure += "; or, if they are repeats of one measurement, "
		if len(all) <= most {
			cure += "name each: " + strings.Join(all, " ") + ", or "
		}
		cure += "say so: --assume k=repeats"
	}
	m.refuseCure(codeSeveralRates, line, "", what+": "+quoteAll(names), cure)
}

// refuseTwice refuses headings that stand over several columns, unless they are
// repeats of a rate constant and the user says so. seen holds the columns of each
// heading.
func (m *maker) refuseTwice(p *plan, seen map[string][]int, line int) {
	for i := range p.cols {
		at := seen[normalize(p.cols[i].Text)]
		if len(at) < 2 || at[0] != i {
			continue
		}
		c := &p.cols[i]
		rate := c.Role == RoleRate && c.Ambiguity == nil
		if rate && m.opt.Assume["k"] == assumeRepeats {
			continue
		}
		const most = 6
		var places []string
		for _, j := range at[:min(most, len(at))] {
			places = append(places, fmt.Sprint(j+1))
		}
		last := fmt.Sprintf("%d more", len(at)-most)
		if len(at) <= most {
			last, places = places[len(at)-1], places[:len(at)-1]
		}
		m.refuse(codeDuplicateHeading, line, c.Text, "the heading stands over columns %s and %s", strings.Join(places, ", "), last)
		if rate {
			m.problems[len(m.problems)-1].Cure = "give each column its own heading, or, if they are repeats of one measurement, say so: --assume k=repeats"
		}
		for _, j := range at[1:] { // not compared with the first
			p.cols[j].Role, p.cols[j].says = RoleKept, "its heading stands twice"
		}
	}
}

// assumeRepeats is the value of --assume k= that takes all columns of rate
// constants for repeats of one.
const assumeRepeats = "repeats"

// settleRuns says which columns are repeats of one rate constant: by their marks,
// or by what the user said, never by their values.
func (m *maker) settleRuns(p *plan, certain, means []*column, forced bool, line int) {
	switch {
	case forced:
		p.runs = splitRuns(certain, func(c *column) string {
			if c.Run != "" {
				return c.Run
			}
			return fmt.Sprint(c.nth)
		})
	case m.opt.Assume["k"] == assumeRepeats && len(certain) > 1:
		count := map[string]int{}
		p.runs = splitRuns(certain, func(c *column) string {
			key := normalize(c.Text)
			count[key]++
			return fmt.Sprint(c.Run, "\x00", c.group(), "\x00", count[key])
		})
		if len(p.runs) > 1 {
			p.assume("k=" + assumeRepeats)
		}
	default:
		groups, marked := map[string]bool{}, 0
		for _, c := range certain {
			groups[c.group()] = true
			if c.Run != "" {
				marked++
			}
		}
		switch {
		case len(groups) > 1:
			m.refuseSeveral(append(certain, means...), line, "there are columns of different rate constants")
			return
		case marked > 0 && marked < len(certain):
			m.refuseSeveral(append(certain, means...), line, "some columns are marked as repeats and some are not")
			return
		}
		p.runs = splitRuns(certain, byMark)
	}
	switch {
	case len(certain) == 0:
		p.runs = splitRuns(means, byMark)
		if groups := splitRuns(means, (*column).group); len(groups) > 1 {
			p.runs = nil
			m.refuseSeveral(means, line, "there are columns of different rate constants")
			return
		}
	case len(means) > 0 && len(p.runs) == 1:
		p.runs = nil
		m.refuseSeveral(append(certain, means...), line, "a rate constant stands beside a mean")
		return
	}
	for _, r := range p.runs {
		for _, c := range r.cols {
			c.used = true
		}
	}
	if len(p.runs) == 1 {
		return
	}
	var names []string
	for _, r := range p.runs {
		names = append(names, r.cols[0].Text)
	}
	p.notices = append(p.notices, notice(noteSideBySide, "repeats of one rate constant side by side: "+quoteAll(names)))
	for _, c := range means {
		p.spare(c, "the repeats themselves are used")
	}
}

// spare notes that a column which says something of all repeats is not used
// beside them.
func (p *plan) spare(c *column, why string) {
	c.says, c.used = why, false
	p.notices = append(p.notices, notice(noteSpareMean, fmt.Sprintf("column %q is not used: %s", short(c.Text), why)))
}

// runOf finds the run that an uncertainty belongs to, of several. of is false where
// it belongs to another rate constant altogether.
func (p *plan) runOf(c *column, forced []*column) (r *rateRun, of bool) {
	if i := slices.Index(forced, c); i >= 0 && len(forced) == len(p.runs) {
		return &p.runs[i], true
	}
	of = c.Of == "" || c.Symbol == "" || c.Symbol == "k"
	var same []*rateRun
	for i := range p.runs {
		r := &p.runs[i]
		if plainSymbol(r.cols[0].Symbol) == plainSymbol(c.Symbol) {
			same = append(same, r)
			of = true
		}
	}
	switch {
	case !of:
		return nil, false
	case c.Run != "":
		for i := range p.runs {
			if p.runs[i].mark == c.Run {
				return &p.runs[i], true
			}
		}
	case c.Of != "" && len(same) == 1:
		return same[0], true
	}
	return nil, true
}

// runOfColumn finds the run that a rate column belongs to.
func (p *plan) runOfColumn(c *column) *rateRun {
	for i := range p.runs {
		if slices.Contains(p.runs[i].cols, c) {
			return &p.runs[i]
		}
	}
	return nil
}

// commonSymbol is the symbol of repeats: that of the first, without the index that
// tells it from the others (k_1, k_2: k).
func (p *plan) commonSymbol() string {
	first := p.runs[0].cols[0].Symbol
	stem := func(s string) string {
		return strings.TrimRight(s, "0123456789_(){}")
	}
	for _, r := range p.runs[1:] {
		if s := r.cols[0].Symbol; s != first {
			if t := stem(first); t != "" && stem(s) == t {
				return t
			}
			return first
		}
	}
	return first
}
