package dataset

import (
	"bufio"
	"encoding/csv"
	"io"
	"maps"
	"math"
	"slices"
	"strconv"
	"strings"
)

// tidyTemperature is the heading of the temperatures of a tidy table.
const tidyTemperature = "T/K"

// Tidy writes a data set as CSV under canonical headings: every row, those that are
// left out with the reason. Read gives back the same points to the last bit, with
// the places they came from, and the same assumptions; the columns are new ones.
//
// Read would understand each column by its heading but for row, file, level,
// assumed and left_out, which have a meaning in tidy tables alone (tidied.go).
func Tidy(w io.Writer, s *Set) error {
	cols := tidyColumns(s)
	b := bufio.NewWriter(w)
	out := csv.NewWriter(b)
	row := make([]string, len(cols))
	for i, c := range cols {
		row[i] = c.heading
	}
	if err := out.Write(row); err != nil {
		return err
	}
	for i := range s.Points {
		for j, c := range cols {
			row[j] = c.cell(&s.Points[i])
		}
		if err := out.Write(row); err != nil {
			return err
		}
	}
	out.Flush()
	if err := out.Error(); err != nil {
		return err
	}
	return b.Flush()
}

// tidyColumn is a column of a tidy table.
type tidyColumn struct {
	heading string
	cell    func(*Point) string
}

func tidyColumns(s *Set) []tidyColumn {
	var cols []tidyColumn
	any := func(has func(*Point) bool) bool {
		for i := range s.Points {
			if has(&s.Points[i]) {
				return true
			}
		}
		return false
	}
	add := func(heading string, cell func(*Point) string) {
		cols = append(cols, tidyColumn{heading, cell})
	}
	addText := func(heading string, cell func(*Point) string) {
		if any(func(p *Point) bool { return cell(p) != "" }) {
			add(heading, cell)
		}
	}
	number := func(x float64) string {
		if math.IsNaN(x) {
			return ""
		}
		return strconv.FormatFloat(x, 'g', -1, 64)
	}
	stated := func(x float64) string {
		if x == 0 {
			return ""
		}
		return number(x)
	}

	symbol, unit := s.Quantity.Symbol, tidyUnit(s.Quantity.Unit)
	add(tidyTemperature, func(p *Point) string { return number(p.T) })
	add(symbol+unit, func(p *Point) string { return number(p.K) })

	if h := ParseHeading("u("+symbol+")"+unit, nil); h.Role != RoleUncertainty || h.Symbol != symbol {
		symbol = "k" // stands for any symbol
	}
	// s(k) with n where it gives every u(k) back to the last bit, else u(k).
	sd := any(func(p *Point) bool { return p.SD != 0 }) &&
		!any(func(p *Point) bool { return p.UK != 0 && (p.SD == 0 || p.UK != meanOf(p.SD, p.Repeats)) })
	if sd {
		add("s("+symbol+")"+unit, func(p *Point) string { return stated(p.SD) })
	} else if any(func(p *Point) bool { return p.UK != 0 }) {
		add("u("+symbol+")"+unit, func(p *Point) string { return stated(p.UK) })
	}
	if any(func(p *Point) bool { return p.Level != levelAsRead(p, sd) }) {
		add(tidyLevel, func(p *Point) string { return string(p.Level) })
	}
	addText("n", func(p *Point) string {
		if p.Repeats == 0 {
			return ""
		}
		return strconv.Itoa(p.Repeats)
	})
	addText("u(T)/K", func(p *Point) string { return stated(p.UT) })
	addText("limit", func(p *Point) string { return p.Limit })
	addText("source", func(p *Point) string { return p.Source })
	addText("dataset", func(p *Point) string { return p.Dataset })
	addText("order", func(p *Point) string { return number(p.Order) })
	addText("note", func(p *Point) string { return p.Note })
	if assumed := strings.Join(s.Assumed, "; "); assumed != "" {
		add(tidyAssumed, func(*Point) string { return assumed })
	}
	add(tidyFile, func(p *Point) string { return p.File })
	add(tidyRow, func(p *Point) string {
		if p.Row < 1 { // read from no file
			return ""
		}
		return strconv.Itoa(p.Row)
	})
	add(tidyLeftOut, func(p *Point) string { return p.WhyNot })
	for _, h := range keptHeadings(s) {
		add(h, func(p *Point) string { return p.Extra[h] })
	}
	return cols
}

// tidyUnit is a unit as it stands in a heading.
func tidyUnit(unit string) string {
	switch {
	case unit == "":
		return ""
	case strings.ContainsAny(unit, " /()"):
		return "/(" + unit + ")"
	}
	return "/" + unit
}

// keptHeadings are those of the cells that were kept, in the order of the file.
func keptHeadings(s *Set) []string {
	left := map[string]bool{}
	for i := range s.Points {
		for h := range s.Points[i].Extra {
			left[h] = true
		}
	}
	var out []string
	for _, c := range s.Columns {
		if left[c.Heading] {
			out = append(out, c.Heading)
			delete(left, c.Heading)
		}
	}
	return append(out, slices.Sorted(maps.Keys(left))...)
}
