package survey

import (
	"bytes"
	"fmt"
	"math"
	"strings"
	"testing"

	"onebarrier/cmd/internal/report"
)

// What of a survey is not there.
func TestMissing(t *testing.T) {
	for _, c := range []struct {
		shards []Shard
		want   string
	}{
		{nil, ""},
		{[]Shard{{K: 1, N: 1, Done: true, Inputs: "a"}}, ""},
		{[]Shard{{K: 1, N: 1}}, "the run was not finished"},
		{[]Shard{{K: 2, N: 3, Done: true, Inputs: "a"}}, "1 of 3 parts are there and finished"},
		{[]Shard{{K: 1, N: 2, Done: true, Inputs: "a"}, {K: 2, N: 2}}, "1 of 2 parts are there and finished"},
		{[]Shard{{K: 1, N: 2, Done: true, Inputs: "a"}, {K: 2, N: 2, Done: true, Inputs: "a"}}, ""},
		{[]Shard{{K: 1, N: 2, Done: true, Inputs: "a"}, {K: 2, N: 2, Done: true, Inputs: "b"}}, "the 2 parts are not of the same files"},
		{[]Shard{{K: 1, N: 1}, {K: 1, N: 2, Done: true}}, "the run was not finished; 1 of 2 parts are there and finished"},
	} {
		if got := missing(c.shards); got != c.want {
			t.Errorf("%+v: %q, want %q", c.shards, got, c.want)
		}
	}
}

// Every form of a table says that a survey is not complete, and text that measurements
// count twice.
func TestStandingIsTold(t *testing.T) {
	s := newStore(t, t.TempDir()+"/s.sqlite", testSettings)
	all := entries(0, 4) // of one content
	for i := range all {
		all[i].Row.State, all[i].Row.PValue = "unresolved", 0.5
	}
	all[0].Content = Content{9}
	all[3].Row.ErrorCode = "no-data" // counts nowhere
	if err := s.Put(all); err != nil {
		t.Fatal(err)
	}
	if err := s.SetShard(Shard{K: 1, N: 2, Done: true}); err != nil {
		t.Fatal(err)
	}
	text := strings.Join(strings.Fields(written(t, s, "text", TableOptions{})), " ")
	for _, want := range []string{
		"NOT COMPLETE: 1 of 2 parts are there and finished. q is over what is there",
		`1 data set has the same data as another, the first "set 2" in a.csv as "set 1" in a.csv: it counts by itself in q`,
	} {
		if !strings.Contains(text, want) {
			t.Errorf("%s\ndoes not say %q", text, want)
		}
	}
	if got := written(t, s, "jsonl", TableOptions{}); strings.Count(got, `"complete":false}`) != 4 {
		t.Error(got)
	}
	if err := s.SetShard(Shard{K: 2, N: 2, Done: true}); err != nil {
		t.Fatal(err)
	}
	if got := written(t, s, "jsonl", TableOptions{}); strings.Count(got, `"complete":true}`) != 4 {
		t.Error(got)
	}
}

// Where names are equal the table says the file.
func TestSharedNames(t *testing.T) {
	rows := tableRows()
	rows[1].Dataset, rows[1].SourceFile = rows[0].Dataset, "other.csv"
	got := written(t, tableStore(t, rows), "text", TableOptions{})
	for _, want := range []string{"0.033\n  in archive.csv\n", "  in other.csv\n"} {
		if strings.Count(got, want) != 1 {
			t.Errorf("%q is not there once:\n%s", want, got)
		}
	}
}

// Degrees Celsius under a heading of kelvin: a line at 20 to 60 "K" with E near 1
// kJ/mol among lines at 300 K. With its warning it is left out; without, it is named
// as the one that decides.
func TestCompensationOfWrongKelvin(t *testing.T) {
	s := newStore(t, t.TempDir()+"/s.sqlite", testSettings)
	var all []Entry
	for i, l := range invented {
		if i >= 6 {
			break
		}
		e := entry(i)
		e.Content = Content{byte(i)}
		e.Row.RateUnit, e.Row.TMin, e.Row.TMax, e.Row.State, e.Row.Points = "s^-1", l.tMin, l.tMax, "unresolved", 8
		e.Row.PValue = 0.5
		e.Assessment = lineDocument(l)
		all = append(all, e)
	}
	wrong := line{e: 0.9, u: 0.02, lnA: 0, x: 1 / (kiloR * 35), tMin: 20, tMax: 60}
	e := entry(20)
	e.Row.Dataset, e.Row.RateUnit, e.Row.TMin, e.Row.TMax, e.Row.State = "wrong", "s^-1", 20, 60, "beyond-prefactor"
	e.Row.PValue = 0.5
	e.Content, e.Assessment = Content{20}, lineDocument(wrong)
	if err := s.Put(append(all, e)); err != nil {
		t.Fatal(err)
	}
	c, out, err := s.compensations(t.Context(), TableOptions{})
	if err != nil || len(c) != 1 {
		t.Fatal(c, err)
	}
	if c[0].Decisive == nil || c[0].Decisive.Dataset != "wrong" || c[0].Sets != 7 || c[0].Curved != 1 || out.doubtful != 0 {
		t.Errorf("%+v", c[0])
	}
	e.Row.Warnings = "outlier kelvin-like-celsius"
	if err := s.Put([]Entry{e}); err != nil {
		t.Fatal(err)
	}
	clean, out, err := s.compensations(t.Context(), TableOptions{})
	if err != nil || len(clean) != 1 {
		t.Fatal(clean, err)
	}
	// Left out by its warning it changes nothing: p is that without it.
	if clean[0].Sets != 6 || clean[0].Doubtful != 1 || out.doubtful != 1 || clean[0].P != c[0].PWithout || clean[0].Curved != 0 {
		t.Errorf("%+v", clean[0])
	}
	var b bytes.Buffer
	if err := s.WriteCompensation(t.Context(), &b, "text", TableOptions{}, report.Text{}); err != nil {
		t.Fatal(err)
	}
	if got := fmt.Sprint(strings.Fields(b.String())); !strings.Contains(got, "Not used: 1 data set with a warning that makes T or k doubtful") {
		t.Error(b.String())
	}
}

// The set of most influence is that whose removal changes p by the largest factor, each
// left out in turn.
func TestDecisive(t *testing.T) {
	var lines []line
	for i, l := range invented {
		l.row = &Row{Dataset: fmt.Sprint(i)}
		lines = append(lines, l)
	}
	c := judge("s^-1", lines)
	want, most := "", 0.0
	for i := range lines {
		others := append(append([]line{}, lines[:i]...), lines[i+1:]...)
		if f := math.Abs(math.Log(compensation("s^-1", others).P / c.P)); f > most {
			want, most = lines[i].row.Dataset, f
		}
	}
	if c.Decisive == nil || c.Decisive.Dataset != want {
		t.Errorf("%+v, want %s", c.Decisive, want)
	}
}
