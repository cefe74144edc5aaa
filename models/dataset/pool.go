package dataset

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"math"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
)

// Pool joins data sets of several files into one, in their order. All must hold
// the same rate quantity; k, u(k) and s(k) are converted to the unit of the first.
// A point without a source gets the name of its file. Inputs are not modified.
//
// SHA256 of the pooled set is that of the files' sums in hexadecimal, one a line,
// in order: what sha256sum FILE... | cut -c1-64 | sha256sum prints.
func Pool(sets []*Set) (*Set, error) {
	if len(sets) == 0 {
		return nil, Problems{problem(codeNoData, "", 0, "", "no data sets to pool")}
	}
	if len(sets) == 1 {
		return sets[0], nil
	}
	first := sets[0]
	out := &Set{Name: pooledName(sets), Quantity: first.Quantity}
	source := sourceNames(sets)
	sum := sha256.New()
	var ps Problems
	var converted []Notice
	named := slices.ContainsFunc(sets, func(s *Set) bool {
		return slices.ContainsFunc(s.Points, func(p Point) bool { return p.Dataset != "" })
	})
	for i, s := range sets {
		if j := slices.IndexFunc(sets, func(t *Set) bool { return t.file() == s.file() || t.SHA256 == s.SHA256 && s.SHA256 != "" }); j < i {
			message := "the file is named twice"
			if s.file() != sets[j].file() {
				message = "it holds the same bytes as " + sets[j].file()
			}
			ps = append(ps, problem(codePoolTwice, s.file(), 0, "", message))
			continue
		}
		c, err := conversionTo(first, s)
		if err != nil {
			ps = append(ps, *err)
			continue
		}
		if s.Quantity.Unit != first.Quantity.Unit {
			converted = append(converted, notice(noteConverted, fmt.Sprintf("%s: %s in %s was converted to %s, the unit of %s: %s",
				s.file(), s.Quantity.Symbol, s.Quantity.Unit, first.Quantity.Unit, first.file(), c)))
		}
		out.Files = append(out.Files, s.Files...)
		io.WriteString(sum, s.SHA256+"\n")
		out.Columns = append(out.Columns, s.Columns...)
		for _, a := range s.Assumed {
			if !slices.Contains(out.Assumed, a) {
				out.Assumed = append(out.Assumed, a)
			}
		}
		for _, p := range s.Points {
			p = c.point(p)
			if p.Source == "" {
				p.Source = source[s.file()]
			}
			if p.Dataset = ""; named {
				p.Dataset = out.Name
			}
			out.Points = append(out.Points, p)
		}
	}
	if len(ps) > 0 {
		return nil, ps
	}
	out.SHA256 = hex.EncodeToString(sum.Sum(nil))
	out.Notices = append(pooledNotices(sets), converted...)
	if len(out.Assumed) > 0 {
		out.say(noteAssumption, assumedOnRequest(out.Assumed))
	}
	out.review()
	return out, nil
}

// file names the file of a set in messages.
func (s *Set) file() string {
	if len(s.Files) > 0 {
		return s.Files[0]
	}
	return s.Name
}

// pooledName is the common name of sets, else the first few names.
func pooledName(sets []*Set) string {
	const most = 3
	var names []string
	for _, s := range sets {
		if !slices.Contains(names, s.Name) {
			names = append(names, s.Name)
		}
	}
	name := strings.Join(names[:min(most, len(names))], " + ")
	if len(names) > most {
		name += fmt.Sprintf(" + %d more", len(names)-most)
	}
	return name
}

// sourceNames gives each file the name that stands for it as a source: without its
// folder where that tells the files apart.
func sourceNames(sets []*Set) map[string]string {
	short := map[string]string{}
	bases := map[string]bool{}
	for _, s := range sets {
		b := filepath.Base(s.file())
		if s.file() == "-" {
			b = "stdin"
		}
		short[s.file()], bases[b] = b, true
	}
	if len(bases) < len(short) {
		for f := range short {
			short[f] = f
		}
	}
	return short
}

// conversion turns numbers of one unit into another: times or divided by a number
// that is 1 or more, so that exact ratios stay exact.
type conversion struct {
	by     float64
	divide bool
}

func (c conversion) apply(x float64) float64 {
	if c.divide {
		return x / c.by
	}
	return x * c.by
}

func (c conversion) String() string {
	if c.divide {
		return fmt.Sprintf("divided by %.10g", c.by)
	}
	return fmt.Sprintf("times %.10g", c.by)
}

// conversionTo finds what turns k of a set into the unit of the first.
func conversionTo(first, s *Set) (conversion, *Problem) {
	same := conversion{by: 1}
	a, b := first.Quantity, s.Quantity
	if plainSymbol(a.Symbol) != plainSymbol(b.Symbol) {
		p := problem(codePoolQuantity, s.file(), 0, "", fmt.Sprintf("it holds %s, and %s holds %s", b.Symbol, first.file(), a.Symbol))
		return same, &p
	}
	if a.Unit == b.Unit {
		return same, nil
	}
	unit := func(q Quantity) string {
		if q.Unit == "" {
			return "no unit"
		}
		return "the unit " + q.Unit
	}
	to, err1 := ParseUnit(a.Unit)
	from, err2 := ParseUnit(b.Unit)
	up, err3 := from.convertTo(to)
	if a.Unit == "" || b.Unit == "" || err1 != nil || err2 != nil || err3 != nil {
		p := problem(codePoolUnit, s.file(), 0, "", fmt.Sprintf("%s has %s, and in %s %s: one cannot be converted to the other", b.Symbol, unit(b), first.file(), unit(a)))
		return same, &p
	}
	c := conversion{by: up}
	if up < 1 {
		down, _ := to.convertTo(from)
		c = conversion{down, true}
	}
	// Quotients of units such as L and cm³, and N_A times one of them, are short
	// decimals but for rounding.
	if r, err := strconv.ParseFloat(fmt.Sprintf("%.10g", c.by), 64); err == nil && math.Abs(c.by-r) <= 1e-14*r {
		c.by = r
	}
	return c, nil
}

// point converts k and what is stated in its unit.
func (c conversion) point(p Point) Point {
	if c.by == 1 {
		return p
	}
	ofRepeats := p.SD != 0 && p.UK == meanOf(p.SD, p.Repeats)
	p.K, p.UK, p.SD = c.apply(p.K), c.apply(p.UK), c.apply(p.SD)
	if ofRepeats {
		p.UK = meanOf(p.SD, p.Repeats) // to the last bit
	}
	if strings.HasPrefix(p.WhyNot, onlyALimit) {
		p.WhyNot = limitOnly(p.Limit, p.K)
	}
	return p
}

// meanOf is the standard uncertainty of the mean of n repeats with this standard
// deviation.
func meanOf(sd float64, n int) float64 { return sd / math.Sqrt(float64(max(n, 1))) }

// pooledNotices are those of reading the files, each with its file; what is true of
// every file is said once. What concerns the points is found anew by review.
func pooledNotices(sets []*Set) []Notice {
	count := map[string]int{}
	for _, s := range sets {
		for _, n := range s.Notices {
			if len(n.Rows) == 0 {
				count[n.Message]++
			}
		}
	}
	said := map[string]bool{}
	var out []Notice
	for _, s := range sets {
		for _, n := range s.Notices {
			switch {
			case reviewCodes[n.Code] || n.Code == noteAssumption || said[n.Message]:
				continue
			case len(n.Rows) == 0 && count[n.Message] == len(sets):
				said[n.Message] = true
			case n.Code == noteUnneeded: // it was, in another file
				continue
			case len(n.Rows) > 0 && strings.HasPrefix(n.Message, lines(n.Rows)):
				files := slices.Repeat([]string{s.file()}, len(n.Rows))
				n.Message = placesIn(files, n.Rows) + strings.TrimPrefix(n.Message, lines(n.Rows))
			default:
				n.Message = s.file() + ": " + n.Message
			}
			out = append(out, n)
		}
	}
	return out
}
