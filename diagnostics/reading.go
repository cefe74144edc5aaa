package diagnostics

import (
	"slices"

	"onebarrier/models/dataset"
)

// onlyToKnow holds the notices of the reader that ask for nothing: they say how a
// file was understood.
var onlyToKnow = []string{
	"title-rows", "heading-rows-joined", "heading-in-comment", "superscript-lost", "column-not-used",
	"time-like", "several-columns", "uncertainty-spare", "brackets-standard", "mean-of-few-repeats",
	"rows-without-value", "rows-after-table", "blank-rows", "rows-selected-out", "assumption-not-needed", "assumption-made",
	"unit-converted", "duplicate-rows", "uncertainty-unit-assumed", "repeats-side-by-side", "mean-beside-repeats",
	"sheet-chosen", "percent-cells", "merged-cells",
}

// readingEntries are the entries of the reader's refusals and notices.
func readingEntries() []Entry {
	var entries []Entry
	texts := dataset.Explanations()
	add := func(code string, s Severity) {
		if slices.ContainsFunc(catalogue, func(e Entry) bool { return e.Code == code }) {
			return
		}
		t := texts[code]
		entries = append(entries, Entry{Code: code, Title: t.Title, Severity: s, Explanation: t.Text, Cure: t.Cure})
	}
	for _, code := range dataset.ProblemCodes {
		add(code, Alarm)
	}
	for _, code := range dataset.NoticeCodes {
		if slices.Contains(onlyToKnow, code) {
			add(code, Info)
		} else {
			add(code, Warning)
		}
	}
	return entries
}
