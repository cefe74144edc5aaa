package cli

import (
	"time"

	"onebarrier/cmd/internal/survey"
	"onebarrier/diagnostics"
)

// The documents of survey run --json and survey status --json.

// surveyRunDocument is what a run did.
type surveyRunDocument struct {
	Schema      string           `json:"schema"`
	Tool        diagnostics.Tool `json:"tool"`
	Store       *string          `json:"store"` // nil of a dry run, as the counts of what was stored
	Shard       partOf           `json:"shard"`
	Files       int              `json:"files"`
	PassedOver  map[string]int   `json:"passed_over"`
	Sets        int              `json:"sets"`
	SetsOfShard int              `json:"sets_of_shard"`
	Stored      *int             `json:"stored"`
	Known       *int             `json:"in_store_before"`
	Removed     *int             `json:"removed"`
	Failed      int              `json:"failed"`
	Errors      map[string]int   `json:"errors"`
	Running     []runningEntry   `json:"running"`
	Copies      *int             `json:"copies"`
}

// standingEntry is what a reader of q has to know of a store.
type standingEntry struct {
	Complete bool    `json:"complete"`
	Missing  *string `json:"missing"` // nil where it is complete
	Copies   int     `json:"copies"`
}

func newStanding(s survey.Standing) *standingEntry {
	e := &standingEntry{Complete: s.Complete(), Copies: s.Copies}
	if !e.Complete {
		e.Missing = &s.Missing
	}
	return e
}

type partOf struct {
	K int `json:"k"`
	N int `json:"n"`
}

type runningEntry struct {
	Host    string    `json:"host"`
	Process int       `json:"process"`
	Since   time.Time `json:"since"`
}

func newSurveyRunDocument(sum *survey.Summary, o *surveyOptions, k, n int, others []survey.Running, standing survey.Standing) surveyRunDocument {
	doc := surveyRunDocument{
		Schema: "onebarrier.survey-run/1", Tool: tool(), Shard: partOf{k, n}, Files: sum.Files, PassedOver: sum.Skipped,
		Sets: sum.Sets, SetsOfShard: sum.Mine, Failed: sum.Failed, Errors: sum.Errors, Running: runningEntries(others),
	}
	if !o.dryRun {
		doc.Store, doc.Stored, doc.Known, doc.Removed = &o.store.path, &sum.Stored, &sum.Known, &sum.Removed
		doc.Copies = &standing.Copies
	}
	return doc
}

func runningEntries(all []survey.Running) []runningEntry {
	out := make([]runningEntry, len(all))
	for i, r := range all {
		out[i] = runningEntry(r)
	}
	return out
}

// surveyStatusDocument is what a store holds.
type surveyStatusDocument struct {
	Schema   string            `json:"schema"`
	Tool     diagnostics.Tool  `json:"tool"`
	Store    string            `json:"store"`
	Number   int               `json:"settings_number"`
	Kept     []int             `json:"settings_kept"`
	Settings map[string]string `json:"settings"`
	Sets     int               `json:"sets"`
	Files    int               `json:"files"`
	Shards   []shardEntry      `json:"shards"`
	Running  []runningEntry    `json:"running"`
	Standing *standingEntry    `json:"standing"`
	States   map[string]int    `json:"states"`
	Testable int               `json:"testable"`
	Found    int               `json:"max_q_0_05"`
	Band     int               `json:"max_q_band_0_05"`
	Failed   int               `json:"failed"`
	Errors   []errorEntry      `json:"errors"`
}

type shardEntry struct {
	partOf
	Complete bool `json:"complete"`
	Sets     *int `json:"sets"` // nil where it is not complete
}

type errorEntry struct {
	Code     string         `json:"code"`
	Sets     int            `json:"sets"`
	Examples []exampleEntry `json:"examples"`
}

type exampleEntry struct {
	SetID   string `json:"set_id"`
	File    string `json:"file"`
	Sheet   string `json:"sheet"`
	Row     *int   `json:"row"` // nil where the error has none
	Dataset string `json:"dataset"`
	Message string `json:"message"`
}

func (s *surveyStatus) document() surveyStatusDocument {
	doc := surveyStatusDocument{
		Schema: "onebarrier.survey-status/1", Tool: tool(), Store: s.path, Number: s.number, Kept: append([]int{}, s.kept...),
		Settings: s.settings, Sets: s.sets, Files: s.files, Shards: []shardEntry{}, Running: runningEntries(s.running),
		Standing: newStanding(s.standing), States: s.states,
		Testable: s.tally.Testable, Found: s.tally.Found, Band: s.tally.FoundBand, Errors: []errorEntry{},
	}
	if doc.Settings == nil {
		doc.Settings = map[string]string{}
	}
	for _, h := range s.shards {
		e := shardEntry{partOf: partOf{h.K, h.N}, Complete: h.Done}
		if h.Done {
			e.Sets = &h.Sets
		}
		doc.Shards = append(doc.Shards, e)
	}
	for _, code := range s.codes() {
		e := errorEntry{Code: code, Sets: s.errors[code], Examples: []exampleEntry{}}
		doc.Failed += e.Sets
		for _, r := range s.examples[code] {
			x := exampleEntry{SetID: r.SetID, File: r.SourceFile, Sheet: r.Sheet, Dataset: r.Dataset, Message: r.Error}
			if r.ErrorRow > 0 {
				x.Row = &r.ErrorRow
			}
			e.Examples = append(e.Examples, x)
		}
		doc.Errors = append(doc.Errors, e)
	}
	return doc
}
