package workbook

import (
	"encoding/xml"
	"math"
	"strconv"
	"strings"
	"time"
)

// format is what a number format makes of a number.
type format uint8

const (
	plain format = iota
	percent
	date
)

// readFormats reads the number format of each style.
func (b *book) readFormats(part string) error {
	r := &formatsReader{b: b, codes: map[string]format{}}
	return b.walk(part, r)
}

type formatsReader struct {
	b      *book
	codes  map[string]format // of the workbook's own formats, by id
	styles bool              // within cellXfs
}

func (r *formatsReader) start(name string, attrs []xml.Attr) error {
	switch name {
	case "numFmt":
		if !r.styles {
			r.codes[attr(attrs, "numFmtId")] = formatOf(attr(attrs, "formatCode"))
		}
	case "cellXfs":
		r.styles = true
	case "xf":
		if !r.styles {
			break
		}
		id := attr(attrs, "numFmtId")
		f, own := r.codes[id]
		if !own {
			n, _ := strconv.Atoi(id) // no number: no format
			f = builtIn(n)
		}
		r.b.formats = append(r.b.formats, f)
	}
	return nil
}

func (r *formatsReader) text([]byte) {}

func (r *formatsReader) end(name string) error {
	if name == "cellXfs" {
		r.styles = false
	}
	return nil
}

// builtIn is the format of an id that needs no code (ECMA-376-1, 18.8.30; 27 to 36
// and 50 to 58 are dates of eastern languages).
func builtIn(id int) format {
	switch {
	case id == 9 || id == 10:
		return percent
	case id >= 14 && id <= 22, id >= 27 && id <= 36, id >= 45 && id <= 47, id >= 50 && id <= 58:
		return date
	}
	return plain
}

// formatOf reads a format code: its first section, without what is quoted.
func formatOf(code string) format {
	f := plain
	for i := 0; i < len(code); i++ {
		switch c := code[i]; c {
		case ';':
			return f
		case '"':
			n := strings.IndexByte(code[i+1:], '"')
			if n < 0 {
				return f
			}
			i += n + 1
		case '\\', '_', '*':
			i++
		case '[':
			n := strings.IndexByte(code[i:], ']')
			if n < 0 {
				return f
			}
			switch strings.ToLower(code[i+1 : i+n]) {
			case "h", "hh", "m", "mm", "s", "ss": // elapsed time
				return date
			}
			i += n
		case '%':
			f = percent
		case 'y', 'm', 'd', 'h', 's', 'Y', 'M', 'D', 'H', 'S':
			return date
		}
	}
	return f
}

// isoDate writes the serial number of a day; false where it is none.
func isoDate(serial float64, from1904 bool) (string, bool) {
	const last = 2958466 // 9999-12-31 has passed
	if !(serial >= 0 && serial < last) {
		return "", false
	}
	days, part := math.Modf(serial)
	start := time.Date(1899, 12, 30, 0, 0, 0, 0, time.UTC)
	switch {
	case from1904:
		start = time.Date(1904, 1, 1, 0, 0, 0, 0, time.UTC)
	case days < 60: // day 60 is 1900-02-29, which there never was
		start = start.AddDate(0, 0, 1)
	}
	t := start.AddDate(0, 0, int(days)).Add(time.Duration(math.Round(part*86400)) * time.Second)
	switch {
	case part == 0:
		return t.Format("2006-01-02"), true
	case days == 0:
		return t.Format("15:04:05"), true
	}
	return t.Format("2006-01-02T15:04:05"), true
}

// digits takes a number apart: value = digits × 10^exp, in the fewest digits that
// give the number back. neg is the sign.
func digits(x float64) (neg bool, s string, exp int) {
	f := strconv.FormatFloat(x, 'e', -1, 64)
	f, neg = strings.CutPrefix(f, "-")
	mantissa, e, _ := strings.Cut(f, "e")
	exp, _ = strconv.Atoi(e) // FormatFloat always writes one
	whole, frac, _ := strings.Cut(mantissa, ".")
	return neg, whole + frac, exp - len(frac)
}

// numeral writes x × 10^shift without loss. unmarked avoids a decimal mark, so that
// the number reads the same beside decimal commas.
func numeral(x float64, shift int, unmarked bool) string {
	if shift == 0 && !unmarked {
		return strconv.FormatFloat(x, 'g', -1, 64)
	}
	neg, s, exp := digits(x)
	exp += shift
	sign := ""
	if neg {
		sign = "-"
	}
	const most = 15 // zeros that are written out
	switch n := len(s); {
	case x == 0:
		return "0"
	case exp == 0:
	case unmarked || exp > most || exp < -most-n:
		s += "e" + strconv.Itoa(exp)
	case exp > 0:
		s += strings.Repeat("0", exp)
	case -exp < n:
		s = s[:n+exp] + "." + s[n+exp:]
	default:
		s = "0." + strings.Repeat("0", -exp-n) + s
	}
	return sign + s
}
