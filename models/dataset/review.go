package dataset

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"onebarrier/models"
)

// review adds the notices that concern the points of a set. It sees the points
// alone, whatever they were read from, so that a pooled set and a tidy table are
// judged as one file would be.
func (s *Set) review() {
	var noT, noK, below, few, limits, selected, duplicates, large []int // indices of points
	type key struct {
		t int
		k float64
	}
	first := make(map[key]bool, len(s.Points))
	distinct := map[int]bool{}
	setting := s.settings()
	low, high := math.Inf(1), math.Inf(-1)
	for i := range s.Points {
		pt := &s.Points[i]
		if pt.Level == LevelRepeats {
			few = append(few, i)
		}
		switch why := pt.WhyNot; {
		case pt.Used:
		case why == notRead:
			below = append(below, i)
		case why == noTemperature:
			noT = append(noT, i)
		case strings.HasPrefix(why, noRateConstant):
			noK = append(noK, i)
		case pt.Limit != "" && strings.HasPrefix(why, onlyALimit):
			limits = append(limits, i)
		case strings.Contains(why, "--"):
			selected = append(selected, i)
		}
		if !pt.Used {
			continue
		}
		distinct[setting[i]] = true
		low, high = math.Min(low, pt.T), math.Max(high, pt.T)
		at := key{setting[i], pt.K}
		if first[at] {
			duplicates = append(duplicates, i)
		}
		first[at] = true
		if pt.UK > 0.3*math.Abs(pt.K) {
			large = append(large, i)
		}
	}
	s.sayOf(noteMissing, noT, "no temperature, left out")
	s.sayOf(noteMissing, noK, "no rate constant, left out")
	s.sayOf(noteNotRead, below, "numbers below the table, not read")
	s.sayOf(noteFewRepeats, few, "the uncertainty comes from 30 repeats or fewer")
	s.sayOf(noteLimits, limits, "only a limit is known, and enters as a limit")
	s.sayOf(noteSelected, selected, "left out on request")
	s.sayOf(noteDuplicate, duplicates, "same temperature and rate constant as an earlier one")
	s.reviewClose()
	s.sayOf(noteLargeU, large, "u(k)/k is above 0.3")
	if n := len(distinct); n < 5 {
		s.say(noteFew, countOf(n, "distinct temperature"))
	}
	// Exactly 20 K, read in another unit, is 20 K still.
	if len(distinct) > 1 && high-low < 20-1e-9*high {
		s.say(noteNarrow, fmt.Sprintf("the temperatures span %s K", below20(high-low)))
	}
	seen := map[string]bool{} // files that are pooled share headings
	for _, c := range s.Columns {
		// A column that has a role, and is spare, is no condition of the measurement.
		if c.Role == string(RoleKept) && c.Level == "" && !seen[c.Heading] && ParseHeading(c.Heading, nil).Role == RoleKept {
			seen[c.Heading] = true
			s.reviewKept(c.Heading, setting)
		}
	}
}

// reviewCodes are those that review raises.
var reviewCodes = map[string]bool{
	noteMissing: true, noteNotRead: true, noteFewRepeats: true, noteLimits: true, noteSelected: true, noteDuplicate: true,
	noteClose: true, noteLargeU: true, noteFew: true, noteNarrow: true, noteVaries: true,
}

// Settings closer than this are one that a thermometer read twice, or that was
// converted in two ways (K, resolution of a common thermometer and the 0.15 of 273.15):
// a choice.
const closeK = 0.2

// reviewClose warns of temperatures that lie within closeK and ten times closer than the
// settings of the set otherwise do.
func (s *Set) reviewClose() {
	var at []int
	for i := range s.Points {
		if s.Points[i].Used {
			at = append(at, i)
		}
	}
	slices.SortStableFunc(at, func(i, j int) int { return cmp.Compare(s.Points[i].T, s.Points[j].T) })
	var gaps []float64
	var pairs [][2]int // indices in at, of the last point of a setting and the first of the next
	for j := 1; j < len(at); j++ {
		low, high := s.Points[at[j-1]].T, s.Points[at[j]].T
		if models.SameTemperature(low, high) {
			continue
		}
		gaps = append(gaps, high-low)
		if high-low < closeK {
			pairs = append(pairs, [2]int{j - 1, j})
		}
	}
	if len(gaps) < 3 || len(pairs) == 0 {
		return
	}
	slices.Sort(gaps)
	median := gaps[len(gaps)/2]
	for _, pair := range pairs {
		t := [2]float64{s.Points[at[pair[0]]].T, s.Points[at[pair[1]]].T}
		if t[1]-t[0] > median/10*(1+1e-9) {
			continue
		}
		var rows []int // indices of all points of the two settings
		for _, i := range at {
			if models.SameTemperature(s.Points[i].T, t[0]) || models.SameTemperature(s.Points[i].T, t[1]) {
				rows = append(rows, i)
			}
		}
		s.sayOf(noteClose, rows, fmt.Sprintf("%.6g and %.6g K count as two temperatures, %.2g K apart; the median gap is %.2g K", t[0], t[1], t[1]-t[0], median))
	}
}

// below20 writes a span below 20 K so that it does not read as 20.
func below20(span float64) string {
	digits := 3
	for digits < 15 && math.Round(span*math.Pow10(digits-2)) == 20*math.Pow10(digits-2) {
		digits++
	}
	return strconv.FormatFloat(span, 'g', digits, 64)
}

// reviewTemperature warns of a unit of temperature that the numbers do not fit.
func (s *Set) reviewTemperature(p *plan) {
	c := p.temperature[0]
	if c.Form != FormDirect {
		return
	}
	low, high := math.Inf(1), math.Inf(-1)
	for i := range s.Points {
		if pt := &s.Points[i]; pt.Used {
			low, high = math.Min(low, pt.T), math.Max(high, pt.T)
		}
	}
	switch t := c.Unit.Text; {
	case low > high:
	case t == "°C" && low-zeroC >= 270 && high-zeroC <= 380:
		s.say(noteCLikeK, fmt.Sprintf("column %q: %.4g to %.4g °C", short(c.Text), low-zeroC, high-zeroC))
	case t == "K" && high < 120:
		s.say(noteKLikeC, fmt.Sprintf("column %q: %.4g to %.4g K", short(c.Text), low, high))
	}
}

func (s *Set) say(code, message string, rows ...int) {
	s.Notices = append(s.Notices, notice(code, message, rows...))
}

// sayOf says something of the points with these indices, if there are any.
func (s *Set) sayOf(code string, at []int, what string) {
	if len(at) == 0 {
		return
	}
	at = slices.CompactFunc(at, func(i, j int) bool { // repeats of one row
		return s.Points[i].Row == s.Points[j].Row && s.Points[i].File == s.Points[j].File
	})
	rows := make([]int, len(at))
	for i, j := range at {
		rows[i] = s.Points[j].Row
	}
	s.say(code, s.Places(at)+": "+what, rows...)
}

// Places names the rows of the points with these indices: line 7; or b.csv:7 where
// the points of the set come from several files.
func (s *Set) Places(at []int) string {
	rows := make([]int, len(at))
	for i, j := range at {
		rows[i] = s.Points[j].Row
	}
	if !s.SeveralFiles() {
		return lines(rows)
	}
	files := make([]string, len(at))
	for i, j := range at {
		files[i] = s.Points[j].File
	}
	return placesIn(files, rows)
}

// placesIn prints places in files: a.csv:7, b.csv:9 and 12 more.
func placesIn(files []string, rows []int) string {
	const most = 6
	var out []string
	for i := range rows[:min(most, len(rows))] {
		out = append(out, files[i]+":"+strconv.Itoa(rows[i]))
	}
	s := strings.Join(out, ", ")
	if len(rows) > most {
		s += fmt.Sprintf(" and %d more", len(rows)-most)
	}
	return s
}

// SeveralFiles reports whether the points come from more than one file.
func (s *Set) SeveralFiles() bool {
	for i := range s.Points {
		if s.Points[i].File != s.Points[0].File {
			return true
		}
	}
	return false
}

// settings numbers the temperatures of the points.
func (s *Set) settings() []int {
	t := make([]float64, len(s.Points))
	for i, p := range s.Points {
		t[i] = p.T
	}
	_, number := models.NumberTemperatures(t)
	return number
}

// reviewKept warns of a numeric column that takes several values at one T; setting
// numbers those of the points.
func (s *Set) reviewKept(name string, setting []int) {
	at := map[int]float64{}
	for i := range s.Points {
		pt := &s.Points[i]
		cell, ok := pt.Extra[name]
		if !pt.Used || !ok {
			continue
		}
		x := ParseCell(cell, '.', 0)
		if x.Kind == CellMissing {
			continue
		}
		if x.Kind != CellNumber {
			return
		}
		v, seen := at[setting[i]]
		if seen && v != x.Value {
			message := fmt.Sprintf("column %q takes %g and %g at %.6g K", name, v, x.Value, pt.T)
			if s.SeveralFiles() {
				message += ", the latter in " + s.Places([]int{i})
			}
			s.Notices = append(s.Notices, Notice{
				Code:    noteVaries,
				Message: message,
				Cure:    "choose with " + flag("where", name+"="+cell) + ", or split with " + flag("dataset-by", name),
				Rows:    []int{pt.Row},
			})
			return
		}
		at[setting[i]] = x.Value
	}
}

// withPoint writes the numeric cell of a file with decimal commas with a decimal
// point: what is kept beside the points has one mark, whatever the file had.
func withPoint(cell string, decimal byte) string {
	if decimal != ',' || !strings.ContainsAny(cell, ".,") || ParseCell(cell, decimal, 0).Kind != CellNumber {
		return cell
	}
	return strings.NewReplacer(".", "", ",", ".").Replace(cell)
}

// countOf writes "1 cell", "2 cells".
func countOf(n int, thing string) string {
	if n == 1 {
		return "1 " + thing
	}
	return strconv.Itoa(n) + " " + thing + "s"
}
