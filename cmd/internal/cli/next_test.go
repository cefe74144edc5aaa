package cli

import (
	"encoding/json"
	"os"
	"slices"
	"strings"
	"testing"
)

// The command that inspect ends with works as it stands, and keeps the selection.
func TestNextCommand(t *testing.T) {
	const celsius = "T,k/s^-1,pH\n10,1e-5,7.0\n20,3e-5,7.0\n30,8e-5,7.0\n40,2e-4,7.0\n50,5e-4,7.0\n10,2e-5,8.0\n20,6e-5,8.0\n30,2e-4,8.0\n40,4e-4,8.0\n50,9e-4,8.0\n"
	const sets = "dataset,T/K,k/s^-1,k_b (s^-1)\nthe cold one,280,1e-5,1\nthe cold one,290,3e-5,2\nthe cold one,300,9e-5,3\nthe cold one,310,2e-4,4\n-warm,320,5e-4,5\nwarm,330,1e-3,6\n"
	const lab = "T/K;k/s^-1;source\n280;1,1e-5;Lab 3\n290;3,2e-5;it's\n300;9,1e-5;Lab1\n310;2,2e-4;Lab1\n320;5,1e-4;Lab1\n330;1,2e-3;Lab1\n"
	for _, c := range []struct {
		files map[string]string
		args  []string
		used  int // points in the assessment
	}{
		{map[string]string{"a.csv": celsius}, []string{"a.csv", "--assume", "T=degC", "--where", "pH=7.0"}, 5},
		{map[string]string{"a.csv": celsius}, []string{"a.csv", "--assume", "T=degC", "--dataset-by", "pH"}, 5},
		{map[string]string{"a.csv": celsius}, []string{"a.csv", "--assume=T=degC", "--dataset-by", "pH", "--dataset", "8.0"}, 5},
		{map[string]string{"a.csv": celsius}, []string{"a.csv", "--column", "T=T", "--assume", "T=degC", "--where", "pH!=7.0", "--t-min", "15degC"}, 4},
		{map[string]string{"my sets.csv": sets}, []string{"my sets.csv", "--column", "k=k/s^-1"}, 4},
		{map[string]string{"my sets.csv": sets}, []string{"my sets.csv", "--column=k=k_b (s^-1)", "--leave-out", "2"}, 3},
		{map[string]string{"my sets.csv": "dataset,T/K,k/s^-1\n-d,280,1e-5\n-d,290,2e-5\n-d,300,4e-5\ne,300,4e-5\n"}, []string{"my sets.csv"}, 3},
		{map[string]string{"it,s.csv": lab}, []string{"it,s.csv", "--decimal", "comma", "--where", "source!=it's", "--where=T/K<325"}, 4},
		{map[string]string{"-x.csv": lab}, []string{"--t-max", "315K", "--", "-x.csv"}, 4},
		{map[string]string{"x.csv": lab, "y.csv": celsius}, []string{"x.csv", "y.csv", "--leave-out", "x.csv:2,y.csv:5", "--assume", "T=degC"}, 5},
		{map[string]string{"x.csv": lab, "y.csv": celsius}, []string{"x.csv", "y.csv", "--pool", "--leave-out", "x.csv:2,y.csv:5", "--assume", "T=degC"}, 14},
		{map[string]string{"a.csv": lab, "b,c.csv": celsius}, []string{"a.csv", "b,c.csv", "--pool", "--leave-out", "b,c.csv:5,a.csv:2", "--assume", "T=degC"}, 14},
	} {
		t.Run(strings.Join(c.args, " "), func(t *testing.T) {
			t.Chdir(t.TempDir())
			for name, text := range c.files {
				if err := os.WriteFile(name, []byte(text), 0o666); err != nil {
					t.Fatal(err)
				}
			}
			code, out, errOut := run(t, "", append([]string{"inspect"}, c.args...)...)
			if code != exitDone {
				t.Fatalf("exit code %d: %s", code, errOut)
			}
			_, next, _ := strings.Cut(out, "\nnext ")
			args := shellWords(t, next)
			if len(args) == 0 || args[0] != "onebarrier" {
				t.Fatalf("the next command is %q", next)
			}
			code, out, errOut = run(t, "", append(args[1:], "--json", "--resamples", "0")...)
			if code != exitDone {
				t.Fatalf("%q: exit code %d: %s", next, code, errOut)
			}
			var doc struct{ Dataset struct{ Used int } }
			if err := json.Unmarshal([]byte(out), &doc); err != nil || doc.Dataset.Used != c.used {
				t.Errorf("%q uses %d points, want %d; %v", next, doc.Dataset.Used, c.used, err)
			}
			// The document names the same command.
			_, out, _ = run(t, "", append([]string{"inspect", "--json"}, c.args...)...)
			var inspection struct{ Next string }
			if err := json.Unmarshal([]byte(out), &inspection); err != nil || inspection.Next != strings.TrimSpace(next) {
				t.Errorf("--json says %q, the text %q; %v", inspection.Next, next, err)
			}
		})
	}
}

// shellWords splits a line as a POSIX shell does, as far as single quotes and
// backslashes go.
func shellWords(t *testing.T, line string) []string {
	t.Helper()
	var words []string
	var word strings.Builder
	quoted, open := false, false
	r := []rune(strings.TrimSpace(line))
	for i := 0; i < len(r); i++ {
		switch {
		case r[i] == '\'':
			quoted, open = !quoted, true
		case quoted:
			word.WriteRune(r[i])
		case r[i] == '\\' && i+1 < len(r):
			i++
			word.WriteRune(r[i])
		case r[i] == ' ' || r[i] == '\n':
			if open || word.Len() > 0 {
				words = append(words, word.String())
			}
			word.Reset()
			open = false
		case strings.ContainsRune("!*?$&|;<>()`\"#~", r[i]):
			t.Fatalf("%q stands unquoted in %s", r[i], line)
		default:
			word.WriteRune(r[i])
		}
	}
	return append(words, word.String())
}

func TestPlaces(t *testing.T) {
	for in, want := range map[string]string{
		"5": "5", "5,7": "5,7", "a.csv:5": "a.csv:5", "a.csv:5,b.csv:7,9": "a.csv:5,b.csv:7,9", "b,c.csv:5,7": "b,c.csv:5,7", "dir:x/a.csv:5": "dir:x/a.csv:5", "": "",
	} {
		var got []place
		if err := (places{&got}).Set(in); err != nil || (places{&got}).String() != want {
			t.Errorf("--leave-out %q: %v, %v", in, got, err)
		}
	}
	for _, in := range []string{"x", "0", "-1", "a.csv", "5,x", "a.csv:0", "a.csv:x", "1.5"} {
		var got []place
		if err := (places{&got}).Set(in); err == nil {
			t.Errorf("--leave-out %q gives %v", in, got)
		}
	}
	files := []string{"one/a.csv", "two/a.csv", "two/b.csv"}
	all := []place{{"one/a.csv", 1}, {"two/a.csv", 2}, {"b.csv", 3}}
	for i, f := range files {
		if got := linesOf(all, f, files); !slices.Equal(got, []int{i + 1}) {
			t.Errorf("%s: lines %v", f, got)
		}
	}
	if checkPlaces(all, files) != nil || checkPlaces([]place{{"a.csv", 1}}, files) == nil || checkPlaces([]place{{"", 1}}, files) == nil ||
		checkPlaces([]place{{"", 1}}, files[:1]) != nil || checkPlaces([]place{{"c.csv", 1}}, files) == nil {
		t.Error("a place that names no file, or two, is let through")
	}
}
