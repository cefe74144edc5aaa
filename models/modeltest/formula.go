package modeltest

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Evaluate computes a formula as models.Written writes it at t in K. The unit K is 1.
func Evaluate(formula string, t float64) (float64, error) {
	p := &parser{rest: formula, t: t}
	v := p.sum()
	if p.skip(); p.err == nil && p.rest != "" {
		p.fail("cannot be read from here")
	}
	return v, p.err
}

// parser reads sums of quotients of products of powers.
type parser struct {
	rest string
	t    float64
	err  error
}

func (p *parser) fail(why string) {
	if p.err == nil {
		p.err = fmt.Errorf("modeltest: formula: %q %s", p.rest, why)
	}
	p.rest = ""
}

func (p *parser) skip() { p.rest = strings.TrimLeft(p.rest, " ") }

// take reads a sign if it comes next.
func (p *parser) take(sign string) bool {
	p.skip()
	rest, ok := strings.CutPrefix(p.rest, sign)
	if ok {
		p.rest = rest
	}
	return ok
}

func (p *parser) sum() float64 {
	v := 0.0
	if p.take("−") {
		v = -p.quotient()
	} else {
		v = p.quotient()
	}
	for {
		switch {
		case p.take("+"):
			v += p.quotient()
		case p.take("−"):
			v -= p.quotient()
		default:
			return v
		}
	}
}

func (p *parser) quotient() float64 {
	v := p.product()
	for p.take("/") {
		v /= p.product()
	}
	return v
}

func (p *parser) product() float64 {
	v := p.power()
	for p.err == nil {
		p.skip()
		r, _ := utf8.DecodeRuneInString(p.rest)
		if p.rest == "" || strings.ContainsRune("+−/)]", r) {
			break
		}
		v *= p.power()
	}
	return v
}

func (p *parser) power() float64 {
	v := p.factor()
	if p.take("^") {
		return math.Pow(v, p.factor())
	}
	return v
}

func (p *parser) factor() float64 {
	for _, brackets := range []string{"()", "[]"} {
		if p.take(brackets[:1]) {
			v := p.sum()
			if !p.take(brackets[1:]) {
				p.fail("lacks " + brackets[1:])
			}
			return v
		}
	}
	if p.rest != "" && unicode.IsDigit(rune(p.rest[0])) {
		n := strings.IndexFunc(p.rest, func(r rune) bool { return r != '.' && !unicode.IsDigit(r) })
		if n < 0 {
			n = len(p.rest)
		}
		v, err := strconv.ParseFloat(p.rest[:n], 64)
		if err != nil {
			p.fail("is no number")
			return math.NaN()
		}
		p.rest = p.rest[n:]
		return v
	}
	n := strings.IndexFunc(p.rest, func(r rune) bool { return !unicode.IsLetter(r) })
	if n < 0 {
		n = len(p.rest)
	}
	word := p.rest[:n]
	function := map[string]func(float64) float64{"exp": math.Exp, "ln": math.Log, "sin": math.Sin}[word]
	switch {
	case word == "T":
		p.rest = p.rest[n:]
		return p.t
	case word == "K":
		p.rest = p.rest[n:]
		return 1
	case function != nil && strings.HasPrefix(p.rest[n:], "("):
		p.rest = p.rest[n:]
		return function(p.factor())
	}
	p.fail("is no number, T, K or function")
	return math.NaN()
}
