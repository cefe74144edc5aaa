package report_test

import (
	"bytes"
	"context"
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"onebarrier/cmd/internal/report"
	"onebarrier/diagnostics"
	"onebarrier/models/dataset"
)

// encoded is what encoding/json makes of a document.
func encoded(t *testing.T, doc any) string {
	t.Helper()
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false)
	if err := enc.Encode(doc); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// TestAppendJSON: the bytes are those of encoding/json, for every field of an assessment,
// for what data give, and for all that a document may come to hold.
func TestAppendJSON(t *testing.T) {
	type inner struct {
		A diagnostics.Real `json:"a"`
		B []string         `json:"b"`
	}
	type loop struct {
		Name string  `json:"name"`
		Next []*loop `json:"next"`
	}
	type other struct {
		X int `json:"x,omitempty"`
		Y any `json:"y,omitempty"`
	}
	type all struct {
		inner
		Plain   float64
		Left    int `json:"-"`
		Truth   bool
		Small   int8
		Count   uint16
		Half    float32
		Bytes   []byte
		Time    time.Time
		Nothing any
		Some    any
		Map     map[string]diagnostics.Real
		States  map[diagnostics.State]*int
		Numbers map[int]string
		Pair    [2]diagnostics.Real
		None    []int
		Nil     map[string]int
		Pointer **int
		Loop    loop
		Other   other
	}
	one := 1
	at := &one
	docs := []any{nil, fixture(), all{}, &all{
		inner: inner{A: 1e-9, B: []string{"<a&b>", "\u2028", "tab\t", "\x00", "\xff", "é\\\"", strings.Repeat("x", 300)}},
		Plain: 0.1, Truth: true, Small: -3, Count: 7, Half: 0.1, Bytes: []byte("ab"), Time: time.Unix(0, 0).UTC(),
		Some: map[string]any{"b": 1, "a": []int{2}}, Map: map[string]diagnostics.Real{"z": 1, "a": nan, "é": 2, `"`: 3},
		States: map[diagnostics.State]*int{diagnostics.Unresolved: at, diagnostics.BeyondPrefactor: nil}, Numbers: map[int]string{10: "a", 2: "b"},
		Pair: [2]diagnostics.Real{1, 2}, None: []int{}, Pointer: &at, Loop: loop{"a", []*loop{{"b", nil}, nil}}, Other: other{Y: "<"},
	}}
	rng := rand.New(rand.NewPCG(5, 5))
	for range 2000 {
		b := make([]byte, rng.IntN(12))
		for i := range b {
			b[i] = byte(rng.Uint32())
			if rng.IntN(2) == 0 {
				b[i] &= 0x7f
			}
		}
		docs = append(docs, string(b), diagnostics.Real(math.Float64frombits(rng.Uint64())))
	}
	files, err := filepath.Glob("../../../testdata/demo/*.csv")
	if err != nil || len(files) < 5 {
		t.Fatal(files, err)
	}
	for _, f := range files {
		text, err := os.ReadFile(f)
		if err != nil {
			t.Fatal(err)
		}
		sets, err := dataset.Read(f, bytes.NewReader(text), dataset.Options{})
		if err != nil {
			continue
		}
		for _, s := range sets {
			o := diagnostics.DefaultOptions()
			o.Resamples = 0
			if a, err := diagnostics.Assess(context.Background(), s, o); err == nil {
				docs = append(docs, a)
			}
		}
	}
	for _, d := range docs {
		got, err := report.AppendJSON([]byte("before"), d)
		if err != nil {
			t.Fatal(err)
		}
		if want := "before" + encoded(t, d); string(got) != want {
			i := 0
			for i < len(got) && i < len(want) && got[i] == want[i] {
				i++
			}
			t.Errorf("%T: from byte %d: %.60q, want %.60q", d, i, got[i:], want[i:])
		}
	}
	if _, err := report.AppendJSON(nil, struct{ X float64 }{math.NaN()}); err == nil {
		t.Error("a plain NaN is written")
	}
}

func BenchmarkAppendJSON(b *testing.B) {
	doc := fixture()
	b.Run("append", func(b *testing.B) {
		var to []byte
		for b.Loop() {
			to, _ = report.AppendJSON(to[:0], doc)
		}
	})
	b.Run("encoding", func(b *testing.B) {
		var to bytes.Buffer
		for b.Loop() {
			to.Reset()
			enc := json.NewEncoder(&to)
			enc.SetEscapeHTML(false)
			if err := enc.Encode(doc); err != nil {
				b.Fatal(err)
			}
		}
	})
}
