package dataset

import (
	"regexp"
	"strings"
)

// What tells repeats of one quantity apart: one of the words, or #, with a number
// or a letter, such as run 2, rep. B, trial #3. A bare index (k1, k(1), [1]) does
// not: elementary steps are written so, and references. Letters end at j, before the
// symbols k, T and v.
const repeatMark = `(?:(run|rep|repeat|replicate|trial)[._ -]{0,2}(?:no\.? ?)?#?|#) ?([0-9]{1,4}|[a-j])`

const averageMark = `(mean|average|avg\.?)()(?: of)?`

var (
	reRepeat        = regexp.MustCompile(`(?i)(?:^|[ ,;:_(\[]| - ?)` + repeatMark + `(?:$|[ ,;:_)\]/(\[-])`)
	reRepeatTight   = regexp.MustCompile(`(?i)()#([0-9]{1,4}|[a-j])(?:$|[ ,;:_)\]/(\[-])`) // k#1
	reRepeatBracket = regexp.MustCompile(`(?i)[(\[] ?` + repeatMark + ` ?[)\]]`)
	reOnlyRepeat    = regexp.MustCompile(`(?i)^[(\[]? ?` + repeatMark + ` ?[)\]]?$`)
	reIndexed       = regexp.MustCompile(`^(.*[^ ]) ?[\[(]([1-9])[\])]$`) // k/s^-1 [1]
	reAverage       = regexp.MustCompile(`(?i)(?:^|[ ,;:_])` + averageMark + `(?:$|[ ,;:_/(\[])`)
	reAverageBrack  = regexp.MustCompile(`(?i)[(\[] ?` + averageMark + ` ?[)\]]`)
)

// cutMark takes the first match of one of the expressions out of a heading: what is
// left, and the mark in one spelling.
func cutMark(s string, res ...*regexp.Regexp) (rest, mark string, ok bool) {
	for _, re := range res {
		m := re.FindStringSubmatchIndex(s)
		if m == nil {
			continue
		}
		before, after := s[:m[0]], s[m[1]:]
		if re == reRepeat || re == reRepeatTight || re == reAverage { // what stands around it stays
			if strings.IndexByte("([", s[m[0]]) >= 0 {
				before = s[:m[0]+1]
			}
			if m[1] > m[5] && strings.IndexByte("/([_)]", s[m[1]-1]) >= 0 {
				after = s[m[1]-1:]
			}
		}
		word := ""
		if m[2] >= 0 {
			word = strings.ToLower(s[m[2]:m[3]])
		}
		switch word {
		case "", "repeat", "replicate":
			word = "rep"
		}
		before = strings.TrimRight(before, " ,;:-")
		after = strings.TrimLeft(after, " ,;:-")
		if after != "" && strings.IndexByte("_/)]", after[0]) < 0 {
			after = " " + after
		}
		return strings.TrimSpace(before + after), word + " " + strings.ToLower(s[m[4]:m[5]]), true
	}
	return s, "", false
}

// marked reads a heading that says which repeat a rate constant or its uncertainty
// is of, or that it is their mean; ok is false for every other heading.
func (p headingParser) marked(s string) (h Heading, ok bool) {
	low := strings.ToLower(s)
	rest, run := s, ""
	if strings.Contains(low, "run") || strings.Contains(low, "rep") || strings.Contains(low, "trial") || strings.Contains(low, "#") {
		for range 2 { // run 1, rep 2
			cut, mark, found := cutMark(rest, reRepeatBracket, reRepeat, reRepeatTight)
			if !found {
				break
			}
			rest, run = cut, strings.TrimSpace(run+" "+mark)
		}
	}
	average := false
	if run == "" && (strings.Contains(low, "mean") || strings.Contains(low, "average") || strings.Contains(low, "avg")) {
		rest, _, average = cutMark(s, reAverageBrack, reAverage)
	}
	if m := reIndexed.FindStringSubmatch(s); run == "" && m != nil && strings.ContainsAny(m[1], "/)]") {
		// An index: which of several rate constants, or which repeat, or a reference.
		if h, ok = p.rate(m[1]); ok {
			h.Symbol += "(" + m[2] + ")"
			return h, true
		}
	}
	if run == "" && !average {
		return h, false
	}
	if h, ok = p.rate(rest); ok {
		h.Run, h.Average = run, average
		return h, true
	}
	if h, ok = p.uncertainty(rest); ok && h.Role == RoleUncertainty && !average {
		h.Run = run
		return h, true
	}
	return h, false
}
