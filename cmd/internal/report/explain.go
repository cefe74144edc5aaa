package report

import (
	"io"

	"onebarrier/diagnostics"
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

// WriteFindings prints the catalogue: one line a code, or with details the whole
// story of each.
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
	for _, s := range []diagnostics.Severity{diagnostics.Alarm, diagnostics.Warning, diagnostics.Info} {
		var rows [][]string
		for _, e := range doc.Findings {
			if e.Severity == s {
				rows = append(rows, []string{e.Code, e.Title})
			}
		}
		p.section(string(s), p.fit(rows)...)
	}
	p.section("next", "onebarrier explain CODE   the whole story")
	return p.writeTo(w)
}
