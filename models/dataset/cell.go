package dataset

import (
	"math"
	"regexp"
	"strconv"
	"strings"
)

// CellKind says what a cell holds.
type CellKind uint8

// The kinds of cells.
const (
	CellText      CellKind = iota // not a number
	CellNumber                    // a finite number, perhaps a limit, perhaps with its uncertainty
	CellMissing                   // empty, n.d., n/a, NA, a dash, a spreadsheet error
	CellLimitOnly                 // <LOD: a limit without its number
	CellNotFinite                 // NaN, Inf, or beyond the range of float64
)

// Attached says how an uncertainty was written beside the number in its cell.
type Attached uint8

// The ways.
const (
	AttachedNone      Attached = iota
	AttachedBracket            // 12.3(4): a standard uncertainty (GUM 7.2.2)
	AttachedSpaced             // 12.3 (4): ambiguous
	AttachedPlusMinus          // 12.3 ± 0.4: its level is not stated
)

// Cell is a cell that was read.
type Cell struct {
	Kind  CellKind
	Value float64
	Half  float64 // half a unit of the last digit written
	Limit string  // "<", ">" or ""

	Attached Attached
	U        float64 // the attached uncertainty
	URel     bool    // U was given in percent and is relative, as a fraction

	Percent bool   // "5 %": Value is 5
	Unit    string // a unit after the number, "" if none
}

// longestCell bounds what the cell grammar looks at, in bytes.
const longestCell = 200

// missing holds the ways to write that there is no value; words are not
// case-sensitive.
var missing = map[string]bool{
	"": true, "-": true, "--": true, "---": true, "n.d.": true, "nd": true, "n.d": true, "n/a": true, "na": true, "n.a.": true,
	"#n/a": true, "#div/0!": true, "#value!": true, "#ref!": true, "#num!": true, "#name?": true, "#null!": true,
}

// isMissing reports whether a normalised cell says that there is no value.
func isMissing(s string) bool {
	return s == "" || len(s) <= 8 && missing[strings.ToLower(s)]
}

// ParseCell reads a cell. decimal is '.' or ','; the other mark groups digits. The
// number is multiplied by 10^shift exactly: by its exponent, before rounding.
func ParseCell(text string, decimal byte, shift int) Cell {
	if c, ok := plainNumber(text, decimal, shift); ok {
		return c
	}
	if len(text) > longestCell {
		return Cell{}
	}
	s := normalize(text)
	if isMissing(s) {
		return Cell{Kind: CellMissing}
	}
	var c Cell
	switch {
	case strings.HasPrefix(s, "<") || strings.HasPrefix(s, "≤"):
		c.Limit = "<"
	case strings.HasPrefix(s, ">") || strings.HasPrefix(s, "≥"):
		c.Limit = ">"
	}
	if c.Limit != "" {
		s = strings.TrimLeft(s, "<>≤≥= ")
		if s == "" || !strings.ContainsAny(s, "0123456789") {
			return Cell{Kind: CellLimitOnly, Limit: c.Limit}
		}
	}
	p := cellParser{s: s, decimal: decimal}

	// (1.2 ± 0.1)×10^-12: the power belongs to both.
	var value, unc number
	var ok bool
	if inner, after, found := bracketed(s); found && strings.HasPrefix(s, "(") {
		q := cellParser{s: inner, decimal: decimal}
		if value, ok = q.number(); !ok {
			return notANumber(s)
		}
		if c.Attached, unc, c.URel, ok = q.attached(); !ok || q.rest() != "" {
			return Cell{}
		}
		unc.inLastDigits(c.Attached, value)
		p.s = after
		e := p.power()
		value.exp += e
		unc.exp += e
	} else {
		if value, ok = p.number(); !ok {
			return notANumber(s)
		}
		if c.Attached, unc, c.URel, ok = p.attached(); !ok {
			return Cell{}
		}
		if unc.inLastDigits(c.Attached, value) {
			e := p.power()
			value.exp += e
			unc.exp += e
		}
	}
	switch rest := p.rest(); {
	case rest == "":
	case rest == "%":
		c.Percent = true
	default:
		if _, err := ParseUnit(rest); err != nil {
			return Cell{}
		}
		c.Unit = rest
	}
	c.Kind = CellNumber
	if c.Value, ok = value.float(shift); !ok {
		return Cell{Kind: CellNotFinite}
	}
	c.Half = value.half(shift)
	if c.Attached != AttachedNone {
		if c.URel {
			shift = -2
		}
		if c.U, ok = unc.float(shift); !ok {
			return Cell{Kind: CellNotFinite}
		}
	}
	return c
}

// reFootnote is a number with a letter or a sign behind it that may be the mark of a
// footnote: 3e-4 a, 3e-4*, 3e-4 (b).
var reFootnote = regexp.MustCompile(`^(.*[0-9.)]) ?(\^?[a-zA-Z]|[(\[][a-zA-Z*][)\]]|[*†‡§¶#^]+)$`)

// footnote takes apart a number and what may be the mark of a footnote behind it. A
// letter that is a unit of more than years is none.
func footnote(text string, decimal byte) (number, mark string, ok bool) {
	m := reFootnote.FindStringSubmatch(normalize(text))
	if m == nil || ParseCell(m[1], decimal, 0).Kind != CellNumber {
		return "", "", false
	}
	mark = strings.Trim(m[2], "^()[]")
	if mark == "" {
		mark = m[2]
	}
	if u, err := ParseUnit(mark); err == nil && u.Text != "yr" {
		return "", "", false
	}
	return m[1], mark, true
}

// notANumber tells NaN and Inf from other text.
func notANumber(s string) Cell {
	switch strings.ToLower(strings.TrimLeft(s, "+-")) {
	case "nan", "inf", "infinity", "∞":
		return Cell{Kind: CellNotFinite}
	}
	return Cell{}
}

// plainNumber is the fast way for digits, sign, one decimal mark and exponent.
func plainNumber(s string, decimal byte, shift int) (Cell, bool) {
	if len(s) == 0 || len(s) > 40 || decimal != '.' {
		return Cell{}, false
	}
	frac, mark, digits := 0, -1, 0
	i := 0
	if s[0] == '-' || s[0] == '+' {
		i++
	}
	for ; i < len(s); i++ {
		c := s[i]
		if isDigit(c) {
			digits++
			if mark >= 0 {
				frac++
			}
			continue
		}
		if c == '.' && mark < 0 {
			mark = i
			continue
		}
		break
	}
	if digits == 0 {
		return Cell{}, false
	}
	exp := 0
	end := i
	if i < len(s) {
		if s[i] != 'e' && s[i] != 'E' || i+1 == len(s) || len(s)-i > 6 {
			return Cell{}, false
		}
		j := i + 1
		neg := s[j] == '-'
		if neg || s[j] == '+' {
			j++
		}
		if j == len(s) {
			return Cell{}, false
		}
		for ; j < len(s); j++ {
			if !isDigit(s[j]) {
				return Cell{}, false
			}
			exp = exp*10 + int(s[j]-'0')
		}
		if neg {
			exp = -exp
		}
	}
	var v float64
	var err error
	if shift == 0 {
		v, err = strconv.ParseFloat(s, 64)
	} else {
		var buf [56]byte
		b := append(buf[:0], s[:end]...)
		b = append(b, 'e')
		b = strconv.AppendInt(b, int64(exp+shift), 10)
		v, err = strconv.ParseFloat(string(b), 64)
	}
	if err != nil {
		return Cell{Kind: CellNotFinite}, true
	}
	return Cell{Kind: CellNumber, Value: v, Half: halfUnit(exp + shift - frac)}, true
}

// halfUnit is ½·10^e.
func halfUnit(e int) float64 {
	if e >= -22 && e <= 0 {
		return 0.5 / pow10[-e]
	}
	return 0.5 * math.Pow10(e)
}

var pow10 = [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

// number is a decimal number as written: digits with frac of them after the mark,
// times 10^exp.
type number struct {
	neg    bool
	digits string
	frac   int
	exp    int
}

func (n number) float(shift int) (float64, bool) {
	s := n.digits + "e" + strconv.Itoa(n.exp+shift-n.frac)
	v, err := strconv.ParseFloat(s, 64)
	if n.neg {
		v = -v
	}
	return v, err == nil
}

func (n number) half(shift int) float64 { return halfUnit(n.exp + shift - n.frac) }

type cellParser struct {
	s       string
	decimal byte
}

// inLastDigits lets a bracket without decimal mark count in units of the last digit
// of the value, as in 12.3(4) (GUM 7.2.2); false where there is no bracket. Whether
// what stands behind a space is an uncertainty at all is not asked here.
func (n *number) inLastDigits(how Attached, value number) bool {
	if how != AttachedBracket && how != AttachedSpaced {
		return false
	}
	if n.frac == 0 {
		n.exp -= value.frac
	}
	return true
}

// rest is what has not been read.
func (p *cellParser) rest() string { return strings.TrimSpace(p.s) }

// number reads a number with grouping, decimal mark and power of ten. Where both
// marks occur the last one must be the decimal mark.
func (p *cellParser) number() (number, bool) {
	var n number
	s := strings.TrimLeft(p.s, " ")
	if s != "" && (s[0] == '-' || s[0] == '+') {
		n.neg = s[0] == '-'
		s = strings.TrimLeft(s[1:], " ")
	}
	group := byte(',')
	if p.decimal == ',' {
		group = '.'
	}
	var digits []byte
	seenMark, lastGroup := false, -1
	i := 0
	for ; i < len(s); i++ {
		switch c := s[i]; {
		case isDigit(c):
			digits = append(digits, c)
			if seenMark {
				n.frac++
			}
			continue
		case c == p.decimal && !seenMark && i+1 <= len(s):
			if lastGroup >= 0 && len(digits)-lastGroup != 3 {
				return n, false
			}
			seenMark = true
			continue
		case c == group && !seenMark && len(digits) > 0 && i+1 < len(s) && isDigit(s[i+1]):
			if lastGroup >= 0 && len(digits)-lastGroup != 3 || lastGroup < 0 && len(digits) > 3 {
				return n, false
			}
			lastGroup = len(digits)
			continue
		}
		break
	}
	if !seenMark && lastGroup >= 0 && len(digits)-lastGroup != 3 {
		return n, false
	}
	if len(digits) == 0 {
		return n, false
	}
	n.digits = string(digits)
	rest := s[i:]
	// A bare 10^-12 is a power itself.
	if n.digits == "10" && n.frac == 0 && strings.HasPrefix(rest, "^") {
		if e, _, after, ok := powerOfTen("10" + rest); ok {
			n.digits, n.exp = "1", e
			p.s = after
			return n, true
		}
		return n, false
	}
	// e-12, E-12, D-12 (Fortran)
	if len(rest) > 1 && strings.ContainsRune("eEdD", rune(rest[0])) {
		j := 1
		if rest[j] == '-' || rest[j] == '+' {
			j++
		}
		from := j
		for j < len(rest) && isDigit(rest[j]) {
			j++
		}
		if j > from {
			e, err := strconv.Atoi(strings.TrimPrefix(rest[1:j], "+"))
			if err != nil || e > 99999 || e < -99999 {
				e = 99999
				if rest[1] == '-' {
					e = -99999
				}
			}
			n.exp = e
			p.s = rest[j:]
			return n, true
		}
	}
	p.s = rest
	n.exp = p.power()
	return n, true
}

// power reads ×10^-12, x10-12, ·10^-12, *10^-12 or e-12; 0 where there is none.
func (p *cellParser) power() int {
	s := strings.TrimLeft(p.s, " ")
	for _, times := range []string{"×", "·", "*", "x", "X", "."} {
		after, ok := strings.CutPrefix(s, times)
		if !ok {
			continue
		}
		after = strings.TrimLeft(after, " ")
		if e, _, rest, ok := powerOfTen(after); ok && strings.HasPrefix(after, "10") && rest != after[2:] {
			p.s = rest
			return e
		}
	}
	if len(s) > 1 && (s[0] == 'e' || s[0] == 'E') {
		if e, _, rest, ok := powerOfTen("1" + s); ok {
			p.s = rest
			return e
		}
	}
	return 0
}

// attached reads (4), ± 0.4 or nothing after a number; false where something
// begins like one and is not.
func (p *cellParser) attached() (Attached, number, bool, bool) {
	s := strings.TrimLeft(p.s, " ")
	spaced := s != p.s
	if strings.HasPrefix(s, "(") {
		inner, after, ok := bracketed(s)
		if !ok {
			return 0, number{}, false, false
		}
		q := cellParser{s: inner, decimal: p.decimal}
		u, ok := q.number()
		if !ok || u.neg || q.rest() != "" {
			return AttachedNone, number{}, false, true // a unit in brackets
		}
		p.s = after
		if spaced {
			return AttachedSpaced, u, false, true
		}
		return AttachedBracket, u, false, true
	}
	for _, pm := range []string{"±", "+/-", "+-", "+ / -"} {
		after, ok := strings.CutPrefix(s, pm)
		if !ok {
			continue
		}
		p.s = after
		u, ok := p.number()
		if !ok || u.neg {
			return 0, u, false, false
		}
		if rest := p.rest(); strings.HasPrefix(rest, "%") {
			p.s = rest[1:]
			return AttachedPlusMinus, u, true, true
		}
		return AttachedPlusMinus, u, false, true
	}
	return AttachedNone, number{}, false, true
}

// bracketed splits "(inner)after".
func bracketed(s string) (inner, after string, ok bool) {
	depth := 0
	for i := range len(s) {
		switch s[i] {
		case '(', '[':
			depth++
		case ')', ']':
			if depth--; depth == 0 {
				return s[1:i], s[i+1:], true
			}
			if depth < 0 {
				return "", s, false
			}
		default:
			if depth == 0 {
				return "", s, false
			}
		}
	}
	return "", s, false
}
