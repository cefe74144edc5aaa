package dataset

import "strings"

// IsLimit reports whether a point is left out of the measured ones for no other reason
// than that only a limit of k is known. Such a point is not used as a value of k; an
// assessment takes it as a limit.
func (p Point) IsLimit() bool {
	return !p.Used && p.Limit != "" && (p.WhyNot == "" || strings.HasPrefix(p.WhyNot, onlyALimit))
}

// LimitPoints returns the points of which only a limit is known and that are not left
// out for another reason.
func (s *Set) LimitPoints() []Point {
	var ps []Point
	for _, p := range s.Points {
		if p.IsLimit() {
			ps = append(ps, p)
		}
	}
	return ps
}
