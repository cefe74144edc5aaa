package dataset

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
)

// Headings that only a tidy table has. The two of them that mark it are row and
// left_out: what lies to the right of left_out is kept as it stands.
const (
	tidyRow     = "row"      // line of the file that the row was read from
	tidyLeftOut = "left_out" // why the row is not used
	tidyFile    = "file"     // that file
	tidyLevel   = "level"    // Level of u(k), where its heading does not say it
	tidyAssumed = "assumed"  // what --assume settled when the table was written
)

// The roles of these columns.
const (
	RoleRow     Role = "row"
	RoleLeftOut Role = "left-out"
	RoleFile    Role = "file"
	RoleLevel   Role = "level"
	RoleAssumed Role = "assumed"
)

// tidied holds the columns that only a tidy table has; nil ones are absent.
type tidied struct {
	row, leftOut, file, level, assumed *column
	said                               map[string]bool // assumptions
	places                             map[int]string  // file of each row number
}

// tidyMarks finds the headings that mark a tidy table; -1 where there is none.
func tidyMarks(headings []string) (row, leftOut int) {
	return slices.Index(headings, tidyRow), slices.Index(headings, tidyLeftOut)
}

// tidyKept is the index of the first column that is kept as it stands, 0 if the
// table is no tidy one.
func tidyKept(headings []string) int {
	row, leftOut := tidyMarks(headings)
	if row < 0 || leftOut < 0 {
		return 0
	}
	return leftOut + 1
}

// isTidy reports whether a text begins as Tidy writes it, whose commas need not be
// guessed among the semicolons of a note.
func isTidy(text string) bool {
	head, _ := cutLine(text)
	marks := "," + tidyRow + "," + tidyLeftOut
	return strings.HasPrefix(head, tidyTemperature+",") && (strings.HasSuffix(head, marks) || strings.Contains(head, marks+","))
}

// readTidied gives the columns of a tidy table the meaning that Tidy gave them.
func (m *maker) readTidied(p *plan) {
	row, leftOut := tidyMarks(p.texts())
	if row < 0 || leftOut < 0 {
		return
	}
	t := &tidied{said: map[string]bool{}, places: map[int]string{}}
	mark := func(i int, role Role) *column {
		if i < 0 || i > leftOut {
			return nil
		}
		c := &p.cols[i]
		c.Heading = Heading{Text: c.Text, Role: role}
		c.used = true
		return c
	}
	at := func(heading string) int { return slices.Index(p.texts()[:leftOut], heading) }
	t.row, t.leftOut = mark(row, RoleRow), mark(leftOut, RoleLeftOut)
	t.file, t.level, t.assumed = mark(at(tidyFile), RoleFile), mark(at(tidyLevel), RoleLevel), mark(at(tidyAssumed), RoleAssumed)
	for i := leftOut + 1; i < len(p.cols); i++ {
		c := &p.cols[i]
		c.Heading = Heading{Text: c.Text, Role: RoleKept}
	}
	// A symbol that --column gave is no heading of a rate constant by itself.
	if len(p.cols) > 1 && p.cols[0].Text == tidyTemperature {
		if h, err := parseAs("k", p.cols[1].Text, map[string]string{"k": "rate"}); err == nil {
			h.Assumed = nil
			p.cols[1].Heading = h
		}
	}
	m.tidied = t
}

// begin takes over where the point comes from and why it is left out. It says
// whether its row is read at all.
func (t *tidied) begin(rr *rowReader, pt *Point) {
	cell := func(c *column) string {
		if c == nil {
			return ""
		}
		return strings.TrimSpace(rr.cells[c.index])
	}
	if s := cell(t.row); s != "" {
		n, err := strconv.Atoi(s)
		if err != nil || n < 1 {
			rr.refuse(codeTidyCell, t.row, "%q is not the number of a line", short(s))
			return
		}
		pt.Row = n
		if s := cell(t.file); s != "" {
			pt.File = s
		}
	}
	pt.WhyNot = cell(t.leftOut)
	for _, a := range strings.Split(cell(t.assumed), "; ") {
		if a != "" && !t.said[a] {
			t.said[a] = true
			rr.p.assume(a)
		}
	}
}

// end takes over the level of u(k).
func (t *tidied) end(rr *rowReader, pt *Point) {
	if t.level == nil || pt.UK == 0 {
		return
	}
	switch s := strings.TrimSpace(rr.cells[t.level.index]); Level(s) {
	case LevelStandard, LevelRepeats:
		pt.Level = Level(s)
	case LevelNone:
	default:
		rr.refuse(codeTidyCell, t.level, "%q is not a level: %s or %s", short(s), LevelStandard, LevelRepeats)
	}
}

// leftOutTwice reports whether a row number that --leave-out names stands for rows
// of two files.
func (t *tidied) leftOutTwice(pt *Point) bool {
	f, seen := t.places[pt.Row]
	t.places[pt.Row] = pt.File
	return seen && f != pt.File
}

// limitOnly says why a limit is not used.
func limitOnly(limit string, k float64) string {
	return fmt.Sprintf("%s: k %s %.4g", onlyALimit, limit, k)
}

// levelAsRead is the level that Read gives an uncertainty under the heading u(k)
// or, with sd, s(k) beside n repeats.
func levelAsRead(p *Point, sd bool) Level {
	switch {
	case p.UK == 0 || math.IsNaN(p.UK):
		return LevelNone
	case sd && p.Repeats <= 30:
		return LevelRepeats
	}
	return LevelStandard
}
