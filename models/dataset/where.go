package dataset

import (
	"fmt"
	"slices"
	"strconv"
	"strings"
)

// condition is one --where: a column, an operator, a value.
type condition struct {
	text  string
	col   *column
	op    string
	value string
	num   float64
	isNum bool
	met   bool     // by some row
	seen  []string // different cells of the column, in order, as far as they are told
}

// conditions reads --where. The column is named by its heading, by the quantity
// before the solidus or bracket (p for p/Torr), or by its role (source).
func (m *maker) conditions(p *plan) []condition {
	var all []condition
	for _, text := range m.opt.Where {
		c := condition{text: text}
		at := strings.IndexAny(text, "=!<>")
		if at > 0 {
			for _, op := range []string{"!=", "<=", ">=", "==", "=", "<", ">"} {
				if v, ok := strings.CutPrefix(text[at:], op); ok {
					c.op, c.value = op, strings.TrimSpace(v)
					break
				}
			}
		}
		if c.op == "" {
			m.refuse(codeWhere, 0, "", "--where %q has no heading and comparison", text)
			continue
		}
		if c.op == "==" {
			c.op = "="
		}
		if c.value != "" && len(c.value) > 1 && (c.value[0] == '\'' || c.value[0] == '"') && c.value[len(c.value)-1] == c.value[0] {
			c.value = c.value[1 : len(c.value)-1]
		}
		name := strings.TrimSpace(text[:at])
		if c.col = p.find(name); c.col == nil {
			for i := range p.cols {
				d := &p.cols[i]
				s := normalize(d.Text)
				if end := strings.IndexAny(s, "/(["); end > 0 {
					s = strings.TrimSpace(s[:end])
				}
				if s == normalize(name) || string(d.Role) == name {
					c.col = d
					break
				}
			}
		}
		if c.col == nil {
			m.refuse(codeColumnUnknown, 0, "", "--where %q: there is no heading %q; the file has %s", text, name, quoteAll(p.texts()))
			continue
		}
		if v, err := strconv.ParseFloat(c.value, 64); err == nil {
			c.num, c.isNum = v, true
		}
		all = append(all, c)
	}
	return all
}

// look notes whether a row meets the condition, and which cells there are.
func (c *condition) look(cell string, decimal byte) bool {
	holds := c.holds(cell, decimal)
	c.met = c.met || holds
	if s := strings.TrimSpace(cell); !c.met && len(c.seen) <= mostTold && !slices.Contains(c.seen, s) {
		c.seen = append(c.seen, s)
	}
	return holds
}

// mostTold is how many values of a column a message lists.
const mostTold = 12

// refuseUnmet refuses conditions that no row of the table meets: a value that was
// mistyped would leave out all rows, and no word would say why.
func (m *maker) refuseUnmet(conds []condition) {
	for _, c := range conds {
		if c.met || len(c.seen) == 0 {
			continue
		}
		what := "holds"
		if len(c.seen) > mostTold {
			what = "holds among others"
		}
		values := c.seen[:min(mostTold, len(c.seen))]
		cure := fmt.Sprintf("column %q %s %s", short(c.col.Text), what, quoteAll(values))
		if slices.Contains(values, "") {
			cure += " and empty cells"
		}
		for _, v := range values {
			if strings.EqualFold(v, c.value) && v != c.value {
				cure = "upper and lower case differ: did you mean " + flag("where", strings.TrimSuffix(c.text, c.value)+v) + "?"
			}
		}
		m.refuseCure(codeWhere, 0, c.col.Text, fmt.Sprintf("--where %q: no row meets it", c.text), cure)
	}
}

// holds compares as numbers where both are, else as text; < and > need numbers.
func (c *condition) holds(cell string, decimal byte) bool {
	if c.isNum {
		if got := ParseCell(cell, decimal, 0); got.Kind == CellNumber {
			switch c.op {
			case "=":
				return got.Value == c.num
			case "!=":
				return got.Value != c.num
			case "<":
				return got.Value < c.num
			case "<=":
				return got.Value <= c.num
			case ">":
				return got.Value > c.num
			case ">=":
				return got.Value >= c.num
			}
		}
	}
	switch same := strings.TrimSpace(cell) == c.value; c.op {
	case "=":
		return same
	case "!=":
		return !same
	}
	return false
}
