package dataset

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// collect reads a stream to its end.
func collect(t testing.TB, s *Stream, err error) []Found {
	t.Helper()
	var ps Problems
	if errors.As(err, &ps) {
		return []Found{{Problems: ps}}
	}
	if err != nil {
		t.Fatal(err)
	}
	var all []Found
	for {
		f, err := s.Next()
		if err == io.EOF {
			return all
		}
		if err != nil {
			t.Fatal(err)
		}
		all = append(all, f)
	}
}

// long reads a text as if it were a long one.
func long(t testing.TB, text string, opt Options) []Found {
	t.Helper()
	return longOf(t, text, mostSorted+1, opt)
}

func longOf(t testing.TB, text string, size int64, opt Options) []Found {
	t.Helper()
	s, err := newLong("x.csv", strings.NewReader(text), size, opt)
	if errors.Is(err, errWhole) {
		return short1(t, text, opt)
	}
	return collect(t, s, err)
}

func short1(t testing.TB, text string, opt Options) []Found {
	t.Helper()
	s, err := NewStream("x.csv", strings.NewReader(text), opt)
	return collect(t, s, err)
}

// say spells what was found, one data set a word: its name, line, points and codes.
func say(all []Found) string {
	var b strings.Builder
	for _, f := range all {
		fmt.Fprintf(&b, "%s:%d", f.Name, f.Line)
		if f.Set != nil {
			fmt.Fprintf(&b, "=%d", len(f.Set.UsedPoints()))
			if f.Set.Name != f.Name {
				fmt.Fprintf(&b, "(%s)", f.Set.Name)
			}
		}
		for _, p := range f.Problems {
			fmt.Fprintf(&b, "!%s@%d", p.Code, p.Row)
		}
		b.WriteByte(' ')
	}
	return strings.TrimSpace(b.String())
}

func TestStream(t *testing.T) {
	for _, c := range []struct {
		name, text, want string
		wantLong         string // "" if the same
		opt              Options
	}{
		{name: "sets", text: "dataset,T/K,k/s^-1\na,300,1\na,310,2\nb,300,3\n", want: "a:2=2 b:4=1"},
		{name: "name last", text: "T/K,k/s^-1,dataset\n300,1,a\n310,2,a\n300,3,b\n", want: "a:2=2 b:4=1"},
		{name: "a bad cell is that set's", text: "dataset,T/K,k/s^-1\na,300,1\na,310,x\nb,300,3\n", want: "a:2!not-a-number@3 b:4=1"},
		{name: "a ragged row is that set's", text: "dataset,T/K,k/s^-1\na,300,1\na,310\nb,300,3\nb,310,4,5\nc,300,1\n", want: "a:2!ragged-row@3 b:4!ragged-row@5 c:6=1"},
		{name: "a row that lost its name", text: "dataset,T/K,k/s^-1\na,300,1\n310,2\na,320,3\nb,300,3\n", want: "a:2!ragged-row@3 b:5=1"},
		{name: "scattered", text: "dataset,T/K,k/s^-1\na,300,1\nb,300,2\na,310,3\nc,300,4\n",
			want: "a:2=2 b:3=1 c:5=1", wantLong: "a:2!dataset-scattered@2 b:3=1 c:5=1"},
		{name: "rates", text: "dataset,T/K,k_1/s^-1,D/cm^2 s^-1\na,300,1,5\na,310,2,6\nb,300,3,7\n",
			want: "a/k_1/s^-1:2=2 a/D/cm^2 s^-1:2=2 b/k_1/s^-1:4=1 b/D/cm^2 s^-1:4=1"},
		{name: "a rate with a bad cell", text: "dataset,T/K,k_1/s^-1,D/cm^2 s^-1\na,300,1,x\nb,300,3,7\n",
			want: "a/k_1/s^-1:2=1 a/D/cm^2 s^-1:2!not-a-number@2 b/k_1/s^-1:3=1 b/D/cm^2 s^-1:3=1"},
		{name: "two forms of one rate constant are one", text: "dataset,T/K,k/s^-1,ln k\na,300,1,0\nb,300,1,2\n", want: "a:2=1 b:3!columns-disagree@3"},
		{name: "below a blank row", text: "dataset,T/K,k/s^-1\na,300,1\n\nb,300,2\n,,\nb,310,4\n", want: "a:2=1 b:4=2"},
		{name: "another table below a blank row", text: "dataset,T/K,k/s^-1\na,300,1\n\nb,300,2\n\ndataset,T/K,k/s^-1\nb,310,4\n\nb,320,5\n", want: ":0!rows-below-blank@6 a:2=1 b:4=1"},
		{name: "decimal comma", text: "dataset;T/K;k/s^-1\na;300,5;1\nb;300;0,25\n", want: "a:2=1 b:3=1"},
		{name: "mixed marks", text: "dataset;T/K;k/s^-1\na;300,5;1\nb;300;0.25\n", want: ":0!mixed-decimal-marks@2"},
		{name: "no rate", text: "dataset,T/K,x\na,300,1\n", want: ":0!no-rate@1"},
		{name: "chosen", text: "dataset,T/K,k/s^-1\na,300,1\nb,310,2\n", opt: Options{Dataset: "b"}, want: "b:3=1"},
		{name: "chosen, not there", text: "dataset,T/K,k/s^-1\na,300,1\n", opt: Options{Dataset: "b"}, want: ":0!dataset-unknown@0"},
		{name: "left out", text: "dataset,T/K,k/s^-1\na,300,1\na,310,1\nb,310,2\n", opt: Options{LeaveOut: []int{3, 9}}, want: "a:2=1 b:4=1 :0!leave-out-unknown@9"},
		{name: "by another column", text: "pH,T/K,k/s^-1\n7,300,1\n7,310,2\n8,300,3\n", opt: Options{DatasetBy: "pH"}, want: "7:2=2 8:4=1"},
		{name: "where", text: "dataset,T/K,k/s^-1,pH\na,300,1,7\na,310,1,8\nb,310,2,7\n", opt: Options{Where: []string{"pH=7"}}, want: "a:2=1 b:4=1"},
		{name: "settled headings", text: "dataset,temp,k/s^-1\na,25,1\nb,35,2\n", opt: Options{Headings: map[string]string{"temp": "t/°C"}}, want: "a:2=1 b:3=1"},
		{name: "quoted line ends", text: "dataset,T/K,k/s^-1\n\"a\nb\",300,1\n\"a\nb\",310,1\nc,300,2\n", want: "a\nb:2=2 c:6=1"},
		{name: "unclosed quote", text: "dataset,T/K,k/s^-1\na,300,1\n\"b,300,2\n", want: ":0!unclosed-quote@3"},
	} {
		if c.wantLong == "" {
			c.wantLong = c.want
		}
		if got := say(short1(t, c.text, c.opt)); got != c.want {
			t.Errorf("%s: %s\nwant %s", c.name, got, c.want)
		}
		if got := say(long(t, c.text, c.opt)); got != c.wantLong {
			t.Errorf("%s, streamed: %s\nwant %s", c.name, got, c.wantLong)
		}
	}
}

// A table without a column dataset is read as a whole, one set for each rate constant.
func TestStreamUndivided(t *testing.T) {
	for text, want := range map[string]string{
		"T/K,k/s^-1\n300,1\n310,2\n":                     "x:2=2",
		"T/K,k_1/s^-1,k_2/s^-1,u(k_2)/s^-1\n300,1,3,4\n": "x/k_1/s^-1:2=1 x/k_2/s^-1:2=1",
		"T/K,k/s^-1\n300,x\n":                            ":0!not-a-number@2",
		"":                                               ":0!no-data@0",
	} {
		if got := say(short1(t, text, Options{})); got != want {
			t.Errorf("%q: %s, want %s", text, got, want)
		}
	}
	all := short1(t, "T/K,k_1/s^-1,k_2/s^-1,u(k_2)/s^-1\n300,1,3,4\n", Options{})
	if a, b := all[0].Set.Points[0], all[1].Set.Points[0]; a.UK != 0 || b.UK != 4 || a.K != 1 || b.K != 3 {
		t.Errorf("u(k_2) went to the wrong rate constant: %+v, %+v", a, b)
	}
}

// A million rows that nothing divides are refused before they are taken apart; rows that
// are divided are not.
func TestStreamTooLong(t *testing.T) {
	rows := strings.Repeat("x,300,1\n", mostRows+1)
	var ps Problems
	_, err := NewStream("x.csv", strings.NewReader("note,T/K,k/s^-1\n"+rows), Options{})
	if !errors.As(err, &ps) || ps[0].Code != codeTooLong || ps[0].Cure == "" {
		t.Errorf("undivided: %v", err)
	}
	s, err := NewStream("x.csv", strings.NewReader("dataset,T/K,k/s^-1\n"+rows+"y,300,1\n"), Options{})
	if err != nil {
		t.Fatal(err)
	}
	first, err1 := s.Next()
	second, err2 := s.Next()
	if err := errors.Join(err1, err2); err != nil || len(first.Problems) != 1 || first.Problems[0].Code != codeTooLong || second.Set == nil {
		t.Errorf("divided: %v, %+v and %+v", err, first, second)
	}
}

// Where every data set is sound, the stream gives what Read gives, to the last field.
func TestStreamLikeRead(t *testing.T) {
	var texts []string
	for _, pattern := range []string{"../../testdata/sheets/*.csv", "../../testdata/*/*.csv"} {
		files, _ := filepath.Glob(pattern)
		for _, f := range files {
			b, err := os.ReadFile(f)
			if err != nil {
				t.Fatal(err)
			}
			texts = append(texts, string(b))
		}
	}
	for _, end := range []string{"\n", "\r\n", "\r"} {
		var b strings.Builder
		b.WriteString("# invented" + end + "dataset,T/K,k/s^-1,u(k)/s^-1,note" + end)
		for i := range 300 {
			fmt.Fprintf(&b, "set %d,%g,%g,%g,\"a \"\"note\"\", %d\"%s", i/6, 300+5*float64(i%6), 1e-3*float64(i+1), 1e-5, i, end)
		}
		texts = append(texts, b.String())
	}
	compared := 0
	for _, text := range texts {
		want, err := Read("x.csv", strings.NewReader(text), Options{})
		if err != nil {
			continue
		}
		for i, got := range [][]Found{short1(t, text, Options{}), longOf(t, text, 0, Options{})} {
			if i == 1 && len(got) == 1 && got[0].Set == nil {
				continue // nothing to stream by
			}
			sets := got[:0]
			for _, f := range got {
				if len(f.Problems) == 0 || f.Problems[0].Code != codeBelowBlank {
					sets = append(sets, f)
				}
			}
			if len(sets) != len(want) {
				t.Errorf("%d sets, want %d, in %.80q", len(sets), len(want), text)
				continue
			}
			for j, f := range sets {
				if f.Set == nil {
					t.Errorf("%v", f.Problems)
					continue
				}
				g, w := *f.Set, *want[j]
				if len(want) > 1 { // examples of each column are those of the set
					for k := range g.Columns {
						g.Columns[k].Examples, w.Columns[k].Examples = nil, nil
					}
				}
				if a, b := fmt.Sprintf("%+v", g), fmt.Sprintf("%+v", w); a != b {
					t.Errorf("set %d differs:\n%s\n%s", j, a, b)
				}
				compared++
			}
		}
	}
	if compared < 150 {
		t.Errorf("only %d sets were compared", compared)
	}
}

// What is said of one data set is not said of another.
func TestStreamNotices(t *testing.T) {
	text := "dataset,T/K,k/s^-1,u(k),err\na,300,1(1),,1\na,310,2,,1\nb,300,3,,1\nb,310,4,0.1,1\n"
	for i, all := range [][]Found{short1(t, text, Options{}), long(t, text, Options{})} {
		want, err := Read("x.csv", strings.NewReader(text), Options{})
		if err != nil || len(all) != 2 {
			t.Fatal(err, all)
		}
		for j, f := range all {
			var got, said []string
			for _, n := range f.Set.Notices {
				got = append(got, n.Code)
			}
			for _, n := range want[j].Notices {
				said = append(said, n.Code)
			}
			slices.Sort(got)
			slices.Sort(said)
			if !slices.Equal(got, said) {
				t.Errorf("%d: %s: %v, want %v", i, f.Name, got, said)
			}
		}
	}
}

// Pieces of any size give the same rows.
func TestStreamPieces(t *testing.T) {
	var b strings.Builder
	b.WriteString("dataset,T/K,k/s^-1,note\r\n")
	for i := range 40000 {
		fmt.Fprintf(&b, "s%d,%d,%d,\"é\r\n%s\"\r\n", i/8, 300+i%8, i+1, strings.Repeat("x", i%40))
	}
	text := b.String()
	stream, err := newLong("x.csv", strings.NewReader(text), mostSorted+1, Options{}) // not as a whole
	all := collect(t, stream, err)
	if len(all) != 5000 {
		t.Fatalf("%d sets", len(all))
	}
	for i, f := range all {
		if f.Set == nil || len(f.Set.Points) != 8 || f.Name != fmt.Sprint("s", i) || f.Set.Points[7].K != float64(8*i+8) || f.Line != 2+16*i {
			t.Fatalf("set %d: %+v", i, f)
		}
		if want := "é\r\n" + strings.Repeat("x", (8*i+7)%40); f.Set.Points[7].Note != want {
			t.Fatalf("set %d: note %q, want %q", i, f.Set.Points[7].Note, want)
		}
	}
}

func longTable(rows, each int) []byte {
	var buf bytes.Buffer
	buf.WriteString("dataset,T/K,k/s^-1\n")
	for i := range rows {
		fmt.Fprintf(&buf, "reaction %d,%.2f,%.4e\n", i/each, 280+6*float64(i%each), 1e-4*float64(i%977+1))
	}
	return buf.Bytes()
}

// A long table of 1,000,000 rows, ten to a data set, both passes and all points.
func BenchmarkStream(b *testing.B) {
	const rows = 1_000_000
	data := longTable(rows, 10)
	b.ReportAllocs()
	for b.Loop() {
		s, err := NewStream("x.csv", bytes.NewReader(data), Options{})
		n := 0
		for err == nil {
			var f Found
			if f, err = s.Next(); err == nil {
				n += len(f.Set.Points)
			}
		}
		if err != io.EOF || n != rows {
			b.Fatal(n, err)
		}
	}
	b.ReportMetric(float64(rows)*float64(b.N)/b.Elapsed().Seconds(), "rows/s")
}
