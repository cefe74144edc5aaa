package dataset

import (
	"fmt"
	"maps"
	"slices"
	"strconv"
	"strings"
)

// sets splits points by their data set and adds what concerns each set.
func (m *maker) sets(p *plan, points []Point) []*Set {
	var sets []*Set
	byName := map[string]*Set{}
	var names []string
	if p.dataset == nil {
		s := m.newSet(p, m.t.baseName(), "")
		s.Points = points
		sets = append(sets, s)
		names = append(names, s.Name)
	} else {
		for _, pt := range points {
			name := pt.Dataset
			if name == "" {
				name = m.t.baseName()
			}
			s := byName[name]
			if s == nil {
				s = m.newSet(p, name, pt.Dataset)
				byName[name] = s
				sets = append(sets, s)
				names = append(names, name)
			}
			s.Points = append(s.Points, pt)
		}
	}
	// Where --dataset-by named no column, that is what is wrong.
	if want := m.opt.Dataset; want != "" && (m.opt.DatasetBy == "" || p.dataset != nil) {
		var only []*Set
		for _, same := range []func(a, b string) bool{func(a, b string) bool { return a == b }, sameNumber} {
			for _, s := range sets {
				if len(only) == 0 && same(s.Name, want) {
					only = append(only, s)
				}
			}
		}
		if len(only) == 0 {
			m.refuseCure(codeDatasetUnknown, 0, "", fmt.Sprintf("there is no data set %q", want), "use one of "+quoteAll(names))
			return nil
		}
		sets = only
	}
	if len(byName) > 1 {
		p.shareNotices(byName)
	}
	for _, s := range sets {
		s.reviewTemperature(p)
		s.review()
	}
	return sets
}

// sameNumber reports whether two names are one number, as 5 and 5.0 are.
func sameNumber(a, b string) bool {
	x, err1 := strconv.ParseFloat(a, 64)
	y, err2 := strconv.ParseFloat(b, 64)
	return err1 == nil && err2 == nil && x == y
}

// shareNotices leaves each set the notices that name its own rows, and those that
// name no row of any set. One pass over all rows: there may be as many sets as rows.
func (p *plan) shareNotices(byName map[string]*Set) {
	setOf := map[int]*Set{}
	for _, s := range byName {
		s.Notices = slices.DeleteFunc(s.Notices, func(n Notice) bool { return len(n.Rows) > 0 })
		for _, pt := range s.Points {
			setOf[pt.Row] = s
		}
	}
	for _, n := range p.notices {
		if len(n.Rows) == 0 {
			continue
		}
		own := map[*Set][]int{}
		for _, r := range n.Rows {
			if s := setOf[r]; s != nil {
				own[s] = append(own[s], r)
			}
		}
		for s, rows := range own {
			mine := n
			if len(rows) < len(n.Rows) {
				mine.Message = strings.Replace(n.Message, lines(n.Rows), lines(rows), 1)
				mine.Rows = rows
			}
			s.Notices = append(s.Notices, mine)
		}
		if len(own) == 0 {
			for _, s := range byName {
				s.Notices = append(s.Notices, n)
			}
		}
	}
}

// newSet makes a set without points; key is what its rows have in the column dataset.
func (m *maker) newSet(p *plan, name, key string) *Set {
	s := &Set{Name: name, Files: []string{m.t.Name}, SHA256: m.t.SHA256, Quantity: p.quantity}
	s.Assumed = append(s.Assumed, p.assumed...)
	s.Notices = append(s.Notices, p.notices...)
	for _, key := range slices.Sorted(maps.Keys(m.opt.Assume)) {
		v := m.opt.Assume[key]
		applied := false
		for _, a := range p.assumed {
			applied = applied || strings.HasPrefix(a, key+"=")
		}
		if !applied {
			s.Notices = append(s.Notices, notice(noteUnneeded, fmt.Sprintf("--assume %s=%s was not needed", key, v)))
		}
	}
	if len(p.assumed) > 0 {
		s.Notices = append(s.Notices, notice(noteAssumption, assumedOnRequest(p.assumed)))
	}
	for i := range p.cols {
		c := p.cols[i].describe(p)
		c.File = m.t.Name
		if shown := p.shown[key]; shown != nil {
			c.Examples = shown[i]
		}
		s.Columns = append(s.Columns, c)
	}
	return s
}

func assumedOnRequest(assumed []string) string {
	return "assumed on request: " + strings.Join(assumed, ", ")
}

// describe says what a column was taken for.
func (c *column) describe(p *plan) Column {
	d := Column{Index: c.index + 1, Heading: c.Text, Role: string(c.Role), Factor: 1, Confidence: "certain"}
	if !c.used {
		d.Role = string(RoleKept)
		if c.says != "" {
			d.Level = "not used: " + c.says
		}
		return d
	}
	d.Unit = c.UnitText
	if c.Unit != nil {
		d.Unit = c.Unit.Text
	}
	switch c.Role {
	case RoleRate, RoleTemperature, RoleUncertainty, RoleTemperatureUncertainty:
		d.Factor = scaled(1, c.Shift)
		if c.Percent { // the unit says it
			d.Factor = scaled(1, c.Shift+2)
		}
	}
	d.Conversion = c.conversion(p)
	if len(c.Assumed) > 0 || c.Role == RoleRate && len(p.runs) > 1 && c.Run == "" && c.nth == 0 {
		d.Confidence = "by assumption"
	}
	switch c.Role {
	case RoleUncertainty, RoleTemperatureUncertainty:
		d.Level = string(c.Kind)
		switch {
		case c.Kind != KindExpanded && c.Kind != KindFactor:
		case c.Coverage > 0:
			d.Level += ", k = " + strconv.FormatFloat(c.Coverage, 'g', -1, 64)
		case c.Confidence > 0:
			d.Level += fmt.Sprintf(", %.4g %%", 100*c.Confidence)
		case c.Kind == KindExpanded && p.coverage != nil:
			d.Level += ", k from column " + strconv.Quote(short(p.coverage.Text))
		}
		if c.Relative {
			d.Level += ", relative"
		}
	case RoleRate, RoleTemperature:
		levels := c.cellLevels(p)
		if form := c.form(); form != "" {
			levels = append([]string{form}, levels...)
		}
		d.Level = strings.Join(levels, "; ")
	}
	return d
}
