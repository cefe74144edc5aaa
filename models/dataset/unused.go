package dataset

import (
	"fmt"
	"regexp"
	"strings"
)

// What may be an uncertainty of k, and does not say so for certain: such a column is not
// used, and a user who is not told would think that it was.
var (
	reMaybeFactor = regexp.MustCompile(`^(?:f(?: ?[(\[].*)?|(?i:(?:uncertainty|error) factor.*))$`)
	reMaybeLog    = regexp.MustCompile(`^(?:Δ|δ|d|(?i:delta)) ?(?i:log|log_?10|lg|ln) ?[(\[]? ?[kD]`)
	reMaybeU      = regexp.MustCompile(`^d ?[kD](?:[_ /(\[].*)?$`)
	reBoundWord   = regexp.MustCompile(`(?i)(?:^|[ _(\[{,])(?:lower|upper|low|high|lo|hi|lcl|ucl|min|max|minimum|maximum)(?:$|[ _)\]},./(\[])`)
	reInterval    = regexp.MustCompile(`(?i)\b(?:c\.?i\.?|conf\w*\.?|interval|limits?)(?:\b|[ _])|9[059] ?%`)
)

const cureOfBounds = "give half the width of the interval as one column, headed U(k) (95 %)"

// isBound reports whether the heading is of a bound of k, such as k_lower or 95 % CI
// upper.
func isBound(text string) bool {
	s := normalize(text)
	if !reBoundWord.MatchString(s) {
		return false
	}
	if m := reLog.FindString(s); m != "" {
		s = strings.TrimLeft(s[len(m):], " ([")
	}
	_, isRate := matchSymbol(s)
	return isRate || reInterval.MatchString(s)
}

// maybeUncertainty is the cure of a column that was not understood and may be an
// uncertainty of k; "" for every other.
func (p *plan) maybeUncertainty(c *column) string {
	s := normalize(c.Text)
	near := p.nearest(c)
	as := func(role string) string { return columnFlag(role, c.Text) }
	switch {
	case near == nil || near.Role != RoleRate && !reMaybeLog.MatchString(s) && !isBound(s):
		return ""
	case reMaybeFactor.MatchString(s):
		return "if it is an uncertainty factor, say so: " + as("f(k)")
	case reMaybeLog.MatchString(s):
		return "if it is a standard uncertainty, say so: " + as("u(lg k)") + " or " + as("u(ln k)")
	case reMaybeU.MatchString(s):
		return "if it is a standard uncertainty, say so: " + as("u(k)")
	case isBound(s):
		return cureOfBounds
	}
	return ""
}

// warnUnused warns of a column that may be an uncertainty of k and is not used.
func (p *plan) warnUnused(c *column) {
	cure := p.maybeUncertainty(c)
	if c.Role != RoleKept || c.says != "" || cure == "" {
		return
	}
	c.says = "it may be an uncertainty of k"
	if isBound(c.Text) {
		c.says = "it may be a bound of k"
	}
	n := Notice{Code: noteLevel, Message: fmt.Sprintf("column %q is not used: %s", short(c.Text), c.says), Cure: cure}
	for i := range p.runs {
		if u := p.runs[i].uncertainty; u != nil {
			n = notice(noteOtherU, fmt.Sprintf("column %q is not used: %q is", short(c.Text), short(u.Text)))
		}
	}
	p.notices = append(p.notices, n)
}

// withoutBounds leaves out, of several columns of rate constants, those that may be
// bounds of another, unless all are.
func (p *plan) withoutBounds(cols []*column) []*column {
	var rest, bounds []*column
	for _, c := range cols {
		if isBound(c.Text) {
			bounds = append(bounds, c)
		} else {
			rest = append(rest, c)
		}
	}
	if len(rest) == 0 {
		return cols
	}
	for _, c := range bounds {
		c.says = "it may be a bound of k"
		p.notices = append(p.notices, Notice{Code: noteLevel, Message: fmt.Sprintf("column %q is not used: %s", short(c.Text), c.says),
			Cure: cureOfBounds + "; if it is another rate constant, choose it: " + columnFlag("k", c.Text)})
	}
	return rest
}
