package dataset

import (
	"strings"
	"unicode"
	"unicode/utf8"

	"golang.org/x/text/unicode/norm"
)

// superscripts maps each superscript sign to its plain one. NFKC would do so too,
// but 10¹² would come out as 1012.
var superscripts = map[rune]rune{
	'⁰': '0', '¹': '1', '²': '2', '³': '3', '⁴': '4', '⁵': '5', '⁶': '6', '⁷': '7', '⁸': '8', '⁹': '9',
	'⁻': '-', '⁺': '+', '⁽': '(', '⁾': ')',
}

// normalize brings a heading, a unit or a cell into one spelling: superscripts
// become ^, compatibility characters their plain ones (NFKC), then minus signs,
// multiplication dots and spaces are unified: '-', '·', '×' and single ' '.
func normalize(s string) string {
	plain := true
	for i := 0; i < len(s); i++ {
		c := s[i]
		if c >= utf8.RuneSelf || c < ' ' || c == '*' || c == ' ' && (i == 0 || i == len(s)-1 || s[i+1] == ' ') {
			plain = false
			break
		}
	}
	if plain {
		return s
	}

	var b strings.Builder
	b.Grow(len(s) + 8)
	raised := false
	for _, r := range s {
		if p, ok := superscripts[r]; ok {
			if !raised {
				b.WriteByte('^')
			}
			raised = true
			b.WriteRune(p)
			continue
		}
		raised = false
		switch r {
		case 'º', '˚', '∘': // typed in place of the degree sign
			r = '°'
		}
		b.WriteRune(r)
	}
	s = norm.NFKC.String(b.String())

	b.Reset()
	space := false
	for _, r := range s {
		switch {
		case unicode.IsSpace(r):
			space = true
			continue
		case unicode.Is(unicode.Cf, r) || unicode.Is(unicode.Cc, r) || r == utf8.RuneError:
			continue
		}
		if space && b.Len() > 0 {
			b.WriteByte(' ')
		}
		space = false
		switch r {
		case '−', '–', '—', '‒', '‐', '‑', '﹣':
			r = '-'
		case '⋅', '∙', '•', '‧', '・':
			r = '·'
		case '✕', '✖', '⨯':
			r = '×'
		case '⁄', '∕':
			r = '/'
		case 'μ': // NFKC has made the micro sign a Greek mu already
			r = 'µ'
		case '≦', '⩽':
			r = '≤'
		case '≧', '⩾':
			r = '≥'
		case '’', '′', 'ʹ':
			r = '\''
		}
		b.WriteRune(r)
	}
	return strings.ReplaceAll(b.String(), "**", "^")
}
