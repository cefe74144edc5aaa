package report

import (
	"io"
	"slices"
	"strings"

	"onebarrier/diagnostics"
	"onebarrier/models/dataset"
)

// FindingsSchema names the layout of the catalogue of findings.
const FindingsSchema = "onebarrier.findings/1"

// Findings is the catalogue of verdicts, findings and refusals as a document.
type Findings struct {
	Schema   string              `json:"schema"`
	Findings []diagnostics.Entry `json:"findings"`
}

// NewFindings makes the document.
func NewFindings(entries []diagnostics.Entry) Findings {
	return Findings{FindingsSchema, entries}
}

// WriteFindings prints the catalogue: one line for each verdict and each finding of an
// assessment, the codes alone of what concerns the reading of a file; or with details
// the whole story of each.
func WriteFindings(w io.Writer, doc Findings, details bool, t Text) error {
	p := t.newPage()
	if details {
		for _, e := range doc.Findings {
			p.section("code", p.bold(e.Code)+" ("+string(e.Severity)+")")
			p.section("shown as", Wrap(e.Title, p.body())...)
			p.section("meaning", Wrap(e.Explanation, p.body())...)
			p.section("cure", Wrap(e.Cure, p.body())...)
			p.section("reference", Wrap(e.Reference, p.body())...)
		}
		return p.writeTo(w)
	}
	reading := dataset.Explanations()
	refusals, notices := map[string]bool{}, map[string]bool{}
	for _, c := range dataset.ProblemCodes {
		refusals[c] = true
	}
	for _, c := range dataset.NoticeCodes {
		notices[c] = true
	}
	titled := func(head string, holds func(diagnostics.Entry) bool) {
		var rows [][]string
		for _, e := range doc.Findings {
			if _, ofReading := reading[e.Code]; !ofReading && holds(e) {
				rows = append(rows, []string{e.Code, e.Title})
			}
		}
		p.section(head, p.fit(rows)...)
	}
	isVerdict := func(e diagnostics.Entry) bool { return slices.Contains(diagnostics.States, diagnostics.State(e.Code)) }
	titled("verdicts", isVerdict)
	for _, s := range []diagnostics.Severity{diagnostics.Alarm, diagnostics.Warning, diagnostics.Info} {
		titled(map[diagnostics.Severity]string{diagnostics.Alarm: "alarms", diagnostics.Warning: "warnings", diagnostics.Info: "info"}[s], func(e diagnostics.Entry) bool { return e.Severity == s && !isVerdict(e) })
	}
	listed := func(head string, codes map[string]bool) {
		var names []string
		for _, e := range doc.Findings {
			if codes[e.Code] {
				names = append(names, e.Code)
			}
		}
		slices.Sort(names)
		p.section(head, Wrap(strings.Join(names, ", "), p.body())...)
	}
	listed("refusals", refusals)
	listed("notices", notices)
	p.section("next", "onebarrier explain CODE   the whole story",
		"refusals and notices concern how a file is read")
	return p.writeTo(w)
}
