package calibration

import (
	"bufio"
	"fmt"
	"io"
	"math"
	"strings"
)

// fewest is the share of data sets that a figure needs: where fewer can be tested,
// those that can are no fair sample.
const fewest = 0.2

// leastTrials is the least number of data sets behind a figure that is a share of few by
// its nature.
const leastTrials = 30

// unknown reports whether figure i of a row cannot be stated.
func (r *Row) unknown(i int) bool {
	f, least := r.Figures[i], fewest*float64(r.jobs[i].counts.Sets)
	if r.part {
		least = leastTrials
	}
	return math.IsNaN(f.Value) || float64(f.Trials) < least
}

// percent prints a figure in per cent with its standard error.
func (f Figure) percent() string {
	return fmt.Sprintf("%.2f ± %.2f", 100*f.Value, 100*f.SE)
}

// chance is the distance from a target, in standard errors, that is not held against
// a figure: a true rate that meets the target goes beyond it once in 700 figures.
const chance = 3

// The outcomes of a row with a target.
const (
	passed  = "pass"
	unclear = "within chance" // outside, by less than chance allows: more sets would tell
	missed  = "FAIL"
)

// beyond is by how many standard errors a figure lies outside the target, the
// binomial error being that of a true rate at the target's edge; 0 inside.
func (t Target) beyond(f Figure) float64 {
	edge := t.High
	if 100*f.Value < t.Low {
		edge = t.Low
	}
	if t.Low <= 100*f.Value && 100*f.Value <= t.High {
		return 0
	}
	p := edge / 100
	return math.Abs(f.Value-p) / math.Sqrt(p*(1-p)/float64(f.Trials))
}

// outcome says of a row with a target whether every figure meets it.
func (r *Row) outcome() (word, detail string) {
	var high, se, beyond float64
	low := math.Inf(1)
	for i, f := range r.Figures {
		if r.unknown(i) {
			continue
		}
		low, high, se = math.Min(low, 100*f.Value), math.Max(high, 100*f.Value), math.Max(se, 100*f.SE)
		beyond = math.Max(beyond, r.Target.beyond(f))
	}
	if math.IsInf(low, 1) {
		return missed, "no data set could be tested"
	}
	detail = fmt.Sprintf("%.2f to %.2f %%, target %s %%, s.e. up to %.2f", low, high, r.Target, se)
	switch {
	case beyond == 0:
		return passed, detail
	case beyond < chance:
		return unclear, fmt.Sprintf("%s; outside by %.1f s.e.", detail, beyond)
	}
	return missed, fmt.Sprintf("%s; outside by %.1f s.e.", detail, beyond)
}

// Write prints the tables in Markdown, then one line for each target. ok reports
// whether none is missed by more than chance allows.
func (s *Study) Write(w io.Writer) (ok bool, err error) {
	b := bufio.NewWriter(w)
	for _, sec := range s.Sections {
		fmt.Fprintf(b, "### %s\n\n%s\n\n", sec.Title, sec.Note)
		fmt.Fprint(b, "| condition |")
		for _, n := range Temperatures {
			fmt.Fprintf(b, " N = %d |", n)
		}
		fmt.Fprintf(b, " target |\n|---|%s---|\n", strings.Repeat("---:|", len(Temperatures)))
		for _, r := range sec.Rows {
			fmt.Fprintf(b, "| %s |", r.Label)
			for i, f := range r.Figures {
				if r.unknown(i) {
					fmt.Fprint(b, " – |")
					continue
				}
				fmt.Fprintf(b, " %s |", f.percent())
			}
			if r.Target == nil {
				fmt.Fprintln(b, " |")
				continue
			}
			fmt.Fprintf(b, " %s |\n", r.Target)
		}
		fmt.Fprintln(b)
	}
	fmt.Fprintf(b, "### Targets\n\n± are binomial standard errors. A dash: fewer than one data set in %.0f could be tested, or the test has no degree of freedom. \"%s\": outside the target, but by less than %d standard errors.\n\n", 1/fewest, unclear, chance)
	ok = true
	for _, sec := range s.Sections {
		for _, r := range sec.Rows {
			if r.Target == nil {
				continue
			}
			word, detail := r.outcome()
			ok = ok && word != missed
			fmt.Fprintf(b, "- %s: %s, %s: %s\n", word, strings.ToLower(sec.Title[:1])+sec.Title[1:], r.Label, detail)
		}
	}
	return ok, b.Flush()
}
