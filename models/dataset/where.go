package dataset

import (
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
