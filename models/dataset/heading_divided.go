package dataset

import (
	"regexp"
	"strings"

	"onebarrier/models"
)

// Divisor is what a rate constant was divided by before it was written down, as in
// plots of ln(k/T) against 1/T.
type Divisor string

// The divisors.
const (
	DivisorNone Divisor = ""
	DivisorT    Divisor = "T"       // T in K
	DivisorKBTh Divisor = "k_B T/h" // in s⁻¹
)

// of is the divisor at a temperature in K.
func (d Divisor) of(t float64) float64 {
	switch d {
	case DivisorT:
		return t
	case DivisorKBTh:
		return models.Boltzmann / models.Planck * t
	}
	return 1
}

const boltzmannT = `(?:\( ?k_?\{?[Bb]\}? ?[·*]? ?T ?\)|k_?\{?[Bb]\}? ?[·*]? ?T)`

var (
	reTimesHOver = regexp.MustCompile(` ?[·*]? ?h ?/ ?` + boltzmannT)                                              // k h/(k_B T)
	reHTimesOver = regexp.MustCompile(`\bh ?[·*]? ?(k[A-Za-z0-9_{}]{0,20}) ?/ ?` + boltzmannT)                     // h k/(k_B T)
	reOverT      = regexp.MustCompile(` ?/ ?(?:\( ?T ?(/ ?K ?)?\)|T)`)                                             // k/T, k/(T/K)
	reLoneOpen   = regexp.MustCompile(`^(.*)[(\[]([^()\[\]/]+)$`)                                                  // ln(k
	reOwnBracket = regexp.MustCompile(`^(.*)[(\[]([^()\[\]]*(?:\([^()]*\))?)[)\]]$`)                               // (k/s^-1)
	reLoneSymbol = regexp.MustCompile(`^[(\[]?(?:R|k_?\{?[Bb]\}?)? ?\pL(?:_\{?[\pL\pN]{1,8}\}?)?[)\]]?(?:\^.*)?$`) // T, RT, T^2, [A]
)

// cutDivisor takes the divisor out of a heading of k/T, ln(k/T), k h/(k_B T) and the
// like. ofK says that the unit in the heading is that of k, as in (k/s^-1)/(T/K).
func cutDivisor(s string) (rest string, d Divisor, ofK bool) {
	i, j := -1, -1
	if m := reHTimesOver.FindStringSubmatchIndex(s); m != nil {
		s = s[:m[0]] + s[m[2]:m[3]] + "\x00" + s[m[1]:]
		i, j = m[0]+m[3]-m[2], m[0]+m[3]-m[2]+1
		d, ofK = DivisorKBTh, true
	} else if m := reTimesHOver.FindStringIndex(s); m != nil {
		i, j, d, ofK = m[0], m[1], DivisorKBTh, true
	} else if m := reOverT.FindStringSubmatchIndex(s); m != nil {
		i, j, d, ofK = m[0], m[1], DivisorT, m[2] >= 0
	}
	if i <= 0 || j < len(s) && (isLetter(s[j]) || isDigit(s[j]) || strings.IndexByte("_^-", s[j]) >= 0) {
		return s, DivisorNone, false
	}
	before, after := s[:i], s[j:]
	if m := reLoneOpen.FindStringSubmatch(before); m != nil && after != "" && strings.IndexByte(")]", after[0]) >= 0 {
		before, after = strings.TrimSpace(m[1])+" "+m[2], after[1:] // ln(k: the bracket held k/T alone
	} else if m := reOwnBracket.FindStringSubmatch(before); m != nil {
		before = m[1] + m[2]
	}
	return strings.TrimSpace(before + after), d, ofK
}

// perKelvin takes K^-1 out of the unit of k/T: what is left is the unit of k. A unit
// without it is none of k/T.
func (h *Heading) perKelvin() {
	if h.Unit == nil {
		return
	}
	terms := strings.Fields(h.Unit.Text)
	for i, t := range terms {
		if t != "K^-1" {
			continue
		}
		if u, err := ParseUnit(strings.Join(append(terms[:i:i], terms[i+1:]...), " ")); err == nil {
			h.Unit, h.UnitText = &u, u.Text
			return
		}
	}
	h.Unit = nil
}

// conversion says how a rate constant that was divided is got back from the cell x.
func (d Divisor) conversion(f Form) string {
	by := string(d)
	if d == DivisorKBTh {
		by = "(" + by + ")"
	}
	switch f {
	case FormLn:
		return "k = " + by + " exp(x)"
	case FormLg:
		return "k = " + by + " 10^x"
	}
	return "k = " + by + " x"
}

// form is the form of what a column holds, such as ln(k/T).
func (h *Heading) form() string {
	s := map[Divisor]string{DivisorNone: "", DivisorT: "k/T", DivisorKBTh: "k h/(k_B T)"}[h.Divisor]
	switch {
	case s == "":
		return string(h.Form)
	case h.Form == FormDirect:
		return s
	}
	return string(h.Form) + "(" + s + ")"
}
