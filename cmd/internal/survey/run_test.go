package survey

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/xuri/excelize/v2"

	"onebarrier/cmd/internal/report"
)

// write makes files, by their paths below a folder.
func writeFiles(t testing.TB, dir string, files map[string]string) {
	t.Helper()
	for name, text := range files {
		path := filepath.Join(dir, filepath.FromSlash(name))
		if err := os.MkdirAll(filepath.Dir(path), 0o777); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, []byte(text), 0o666); err != nil {
			t.Fatal(err)
		}
	}
}

const good = "T/K,k/s^-1\n300,1\n310,2.1\n320,4.2\n330,8\n340,14\n"

// mixed is an archive with a bit of everything.
func mixed(t testing.TB) string {
	dir := t.TempDir()
	var wide strings.Builder
	wide.WriteString("T/K;k_1/s^-1;k_2/s^-1\n")
	for i := range 8 {
		fmt.Fprintf(&wide, "%d;%d,5;%d,25\n", 300+10*i, 1<<i, 3<<i)
	}
	writeFiles(t, dir, map[string]string{
		"long.csv":              string(longArchive(12)),
		"a/good.csv":            good,
		"a/copy.csv":            good,
		"a/broken.csv":          "T/K,k/s^-1\n300,1\n310,x\n",
		"a/one.csv":             "T/K,k/s^-1\n300,1\n300,2\n",
		"b/good.csv":            good,
		"b/wide.csv":            wide.String(),
		"b/temp.dat":            "temp k/s^-1\n30 1\n40 2\n50 4\n60 7\n70 12\n",
		"b/" + ColumnsFile:      "files,heading,role,unit,level\n*.dat,temp,temperature,degC,\n",
		"b/half.csv":            "dataset,T/K,k/s^-1\nx,300,1\nx,310,2\ny,300,?\nz,300,1\nz,310,2\nz,320,3\n",
		"readme.md":             "# no data",
		".hidden.csv":           good,
		"a/~$book.xlsx":         "lock",
		"a/.~lock.good.csv#":    "lock",
		"b/quoted.csv":          "dataset,T/K,k/s^-1\n\"a/../b\",300,1\n\"a/../b\",310,2\n\"line\nend \"\"quoted\"\"\",300,1\n=1+1,300,2\n",
		"b/" + "very long name": good,
	})
	book := excelize.NewFile()
	defer book.Close()
	for i, sheet := range []string{"Sheet1", "Second", "Notes"} {
		if i > 0 {
			if _, err := book.NewSheet(sheet); err != nil {
				t.Fatal(err)
			}
		}
		if sheet == "Notes" {
			book.SetCellValue(sheet, "A1", "nothing here")
			continue
		}
		for r, row := range [][]any{{"dataset", "T/K", "k/s^-1"}, {"p", 300, 1}, {"p", 310, 2 + i}, {"p", 320, 5}, {"q", 300, "?"}} {
			if err := book.SetSheetRow(sheet, fmt.Sprintf("A%d", r+1), &row); err != nil {
				t.Fatal(err)
			}
		}
	}
	if err := book.SaveAs(filepath.Join(dir, "book.xlsx")); err != nil {
		t.Fatal(err)
	}
	return dir
}

// quick are options that take little time.
func quick(paths ...string) Options {
	o := surveyOptions(paths...)
	o.Assess.Resamples = 99
	return o
}

// everything spells all that a store holds, assessments included.
func everything(t testing.TB, s *Store) string {
	t.Helper()
	var b strings.Builder
	err := s.Rows(context.Background(), func(r Row) error {
		doc, err := s.Assessment(r.SetID)
		fmt.Fprintln(&b, r.Values()...)
		b.Write(doc)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return b.String()
}

func runIn(t testing.TB, path string, o Options) (*Store, *Summary) {
	t.Helper()
	s := newStore(t, path, testSettings)
	sum, err := Run(context.Background(), s, o)
	if err != nil {
		t.Fatal(err)
	}
	return s, sum
}

func TestRunFinds(t *testing.T) {
	dir := mixed(t)
	t.Chdir(dir)
	s, sum := runIn(t, filepath.Join(t.TempDir(), "s.sqlite"), quick("."))
	var got []string
	for _, r := range rowsOf(t, s) {
		what := r.State
		if r.ErrorCode != "" {
			what = fmt.Sprintf("%s@%d", r.ErrorCode, r.ErrorRow)
		}
		if !strings.HasPrefix(r.Dataset, "reaction ") {
			got = append(got, strings.TrimSpace(fmt.Sprintf("%s %s %q %d %s", r.SourceFile, r.Sheet, r.Dataset, r.Points, what)))
		}
	}
	const want = `a/broken.csv  "" -1 not-a-number@3
a/copy.csv  "copy" 5 unresolved
a/good.csv  "good" 5 unresolved
a/one.csv  "one" 2 one-temperature@-1
b/good.csv  "good" 5 unresolved
b/half.csv  "x" 2 untestable
b/half.csv  "y" -1 not-a-number@4
b/half.csv  "z" 3 untestable
b/quoted.csv  "a/../b" 2 untestable
b/quoted.csv  "line\nend \"quoted\"" 1 one-temperature@-1
b/quoted.csv  "=1+1" 1 one-temperature@-1
b/temp.dat  "temp" 5 unresolved
b/wide.csv  "wide/k_1/s^-1" 8 beyond-prefactor
b/wide.csv  "wide/k_2/s^-1" 8 beyond-prefactor
book.xlsx Second "p" 3 untestable
book.xlsx Second "q" -1 not-a-number@5
book.xlsx Sheet1 "p" 3 untestable
book.xlsx Sheet1 "q" -1 not-a-number@5`
	if g := strings.Join(got, "\n"); g != want {
		t.Errorf("found\n%s\nwant\n%s", g, want)
	}
	if sum.Sets != 30 || sum.Failed != 7 || !sum.Complete || fmt.Sprint(sum.Skipped) != "map[hidden:1 lock files:2 of another kind:2]" {
		t.Errorf("%+v", sum)
	}
	shards, err := s.Shards()
	if err != nil || len(shards) != 1 || !shards[0].Done || shards[0].Sets != 30 || shards[0].Inputs == "" {
		t.Errorf("shards %+v, %v", shards, err)
	}
	// Only reading counts what reading can find.
	dry, err := Run(context.Background(), nil, quick("."))
	if err != nil || dry.Sets != 30 || dry.Failed != 4 {
		t.Errorf("dry run %+v, %v", dry, err)
	}
	o := quick(".")
	o.Include, o.Exclude = []string{"*.csv"}, []string{"a", "b/w*"}
	if sum, err := Run(context.Background(), nil, o); err != nil || sum.Sets != 12+1+3+3 {
		t.Errorf("with patterns %+v, %v", sum, err)
	}
}

// The rows do not depend on the number of workers, the order of the paths, or on the
// parts that were joined.
func TestRunSameRows(t *testing.T) {
	dir := mixed(t)
	t.Chdir(dir)
	out := t.TempDir()
	one := quick("long.csv", "a", "b", "book.xlsx")
	one.Workers = 1
	s, _ := runIn(t, filepath.Join(out, "one.sqlite"), one)
	want := everything(t, s)
	three := quick("book.xlsx", "b", "long.csv", "a", "a/good.csv")
	three.Workers = 3
	s, _ = runIn(t, filepath.Join(out, "three.sqlite"), three)
	if got := everything(t, s); got != want {
		t.Errorf("other workers and order: other rows\n%s\nwant\n%s", got, want)
	}
	joined := newStore(t, filepath.Join(out, "joined.sqlite"), testSettings)
	rows := 0
	for _, k := range []int{3, 1, 2} {
		part := quick("a", "long.csv", "b", "book.xlsx")
		part.K, part.N = k, 3
		s, sum := runIn(t, filepath.Join(out, fmt.Sprint(k, ".sqlite")), part)
		if sum.Mine == 0 {
			t.Errorf("part %d is empty", k)
		}
		rows += sum.Mine
		err := s.Entries(context.Background(), func(e Entry) error { return joined.Put([]Entry{e}) })
		if err != nil {
			t.Fatal(err)
		}
	}
	if rows != 30 {
		t.Errorf("the parts hold %d rows, want 30", rows)
	}
	if got := everything(t, joined); got != want {
		t.Errorf("the parts give other rows\n%s\nwant\n%s", got, want)
	}
}

// What names a set apart from others is in its key.
func TestKeys(t *testing.T) {
	seen := map[Key]bool{}
	for _, k := range []Key{keyOf("a", "b", "c", 0), keyOf("a", "", "bc", 0), keyOf("ab", "", "c", 0), keyOf("a", "bc", "", 0),
		keyOf("a", "b", "", 0), keyOf("a", "", "", 0), keyOf("a", "", "", 1), keyOf("", "a", "", 0)} {
		if seen[k] {
			t.Errorf("%s names two sets", k)
		}
		seen[k] = true
	}
	if k, ok := ParseKey(keyOf("a", "b", "c", 0).String()); !ok || k != keyOf("a", "b", "c", 0) {
		t.Errorf("a key reads as %v, %t", k, ok)
	}
}

// The seed depends on the measurements and the master seed alone.
func TestRunSeeds(t *testing.T) {
	dir := t.TempDir()
	t.Chdir(dir)
	writeFiles(t, dir, map[string]string{"a.csv": good, "b.csv": "# a comment\n" + good, "c.csv": strings.Replace(good, "4.2", "4.3", 1)})
	s, _ := runIn(t, "s.sqlite", quick("."))
	rows := rowsOf(t, s)
	if rows[0].StateShare != rows[1].StateShare || rows[0].SetID == rows[1].SetID {
		t.Errorf("one set of data in two files: shares %g and %g, ids %s and %s", rows[0].StateShare, rows[1].StateShare, rows[0].SetID, rows[1].SetID)
	}
	seed := func(i int) string {
		doc, _ := s.Assessment(rows[i].SetID)
		_, rest, _ := bytes.Cut(doc, []byte(`"seed":`))
		n, _, _ := bytes.Cut(rest, []byte(","))
		return string(n)
	}
	if seed(0) != seed(1) || seed(0) == seed(2) || seed(0) == "1" {
		t.Errorf("seeds %s, %s of one set of data, %s of another", seed(0), seed(1), seed(2))
	}
}

// A run that is stopped keeps what it finished, and the next goes on; what changed is
// done again, what is gone is removed.
func TestRunResumes(t *testing.T) {
	dir := mixed(t)
	t.Chdir(dir)
	out := t.TempDir()
	s, _ := runIn(t, filepath.Join(out, "whole.sqlite"), quick("."))
	want := everything(t, s)

	s = newStore(t, filepath.Join(out, "stopped.sqlite"), testSettings)
	cause := errors.New("stop")
	ctx, cancel := context.WithCancelCause(context.Background())
	o := quick(".")
	o.Workers = 1
	begun := 0
	o.Assess.Progress = func(int, int) { // of the resamples of one set
		if begun++; begun == 5 {
			cancel(cause)
		}
	}
	cancelled := 0
	if sum, err := Run(ctx, s, o); !errors.Is(err, cause) || sum.Stored < 5 || sum.Stored > 25 {
		t.Errorf("stopped in the fifth set: %+v, %v", sum, err)
	} else {
		cancelled = sum.Stored
		if shards, _ := s.Shards(); len(shards) != 1 || shards[0].Done {
			t.Errorf("stopped, and the part is %+v", shards)
		}
	}
	sum, err := Run(context.Background(), s, quick("."))
	if err != nil || sum.Known != cancelled || sum.Stored != 30-cancelled {
		t.Errorf("%d stored before: %+v, %v", cancelled, sum, err)
	}
	if got := everything(t, s); got != want {
		t.Errorf("after a stop: other rows\n%s\nwant\n%s", got, want)
	}
	if sum, err = Run(context.Background(), s, quick(".")); err != nil || sum.Stored != 0 || sum.Known != 30 || sum.Failed != 7 {
		t.Errorf("again: %+v, %v", sum, err)
	}
	// half.csv: y is mended, z is gone; x is as it was.
	writeFiles(t, dir, map[string]string{"b/half.csv": "dataset,T/K,k/s^-1\nx,300,1\nx,310,2\ny,300,2\ny,310,4\n", "a/broken.csv": good})
	sum, err = Run(context.Background(), s, quick("."))
	if err != nil || sum.Stored != 2 || sum.Removed != 2 || sum.Failed != 5 {
		t.Errorf("changed: %+v, %v", sum, err)
	}
	for _, r := range rowsOf(t, s) {
		if r.SourceFile == "b/half.csv" && r.Dataset == "z" || r.SourceFile == "a/broken.csv" && r.ErrorCode != "" {
			t.Errorf("a row of what is gone: %v", r.Values())
		}
	}
}

// What a user may say of headings for a whole tree.
func TestColumnsFile(t *testing.T) {
	for cells, want := range map[string]string{
		"T|temperature|K|": "T/K", "temp|temperature|°C|": "t/°C", "x|temperature|1000/T|": "1000/T",
		"kobs|k|s^-1|": "kobs/s^-1", "log k|lg k|s^-1|": "lg(k/s^-1)", "rate|k|L mol^-1 s^-1|": "k/(L mol^-1 s^-1)",
		"err|u(k)|s^-1|1": "u(k)/s^-1", "err|u(k)|s^-1|2": "U(k)/s^-1 (k=2)", "err|u(k)|%|": "u_r(k)/%", "SD|u(k)|s^-1|sd": "s(k)/s^-1",
		"half|half-life|h|": "t_1/2/h", "lab|source||": "source", "x|ignore||": "not used",
		"T|temperature|s|": "", "x|nonsense|s|": "", "err|u(k)|s^-1|7": "",
	} {
		c := strings.Split(cells, "|")
		got, err := headingFor(c[0], c[1], c[2], c[3])
		if got != want && want != "" || (err == nil) == (want == "") {
			t.Errorf("%s: %q, %v, want %q", cells, got, err, want)
		}
	}
	dir := t.TempDir()
	t.Chdir(dir)
	plain := "temp,k/s^-1\n30,1\n40,2\n50,4\n"
	writeFiles(t, dir, map[string]string{
		"x/" + ColumnsFile:      "files,heading,role,unit,level\n1987/*.csv,temp,temperature,degC,\n",
		"x/1987/a.csv":          plain,
		"x/1988/a.csv":          plain,
		"y/" + ColumnsFile:      "files,heading,role,unit,level\n,temp,temperature,degC,\n",
		"y/deep/" + ColumnsFile: "files,heading,role,unit,level\n,temp,temperature,K,\n",
		"y/a.csv":               plain,
		"y/deep/a.csv":          plain,
		"z/" + ColumnsFile:      "files,heading,role,unit,level\n\n,temp,temperature,furlong,\n",
		"z/a.csv":               good,
	})
	s, _ := runIn(t, filepath.Join(t.TempDir(), "s.sqlite"), quick("x", "y", "z", "y/a.csv"))
	var got []string
	for _, r := range rowsOf(t, s) {
		got = append(got, fmt.Sprintf("%s %g %s@%d", r.SourceFile, r.TMin, r.ErrorCode, r.ErrorRow))
	}
	const want = `x/1987/a.csv 303.15 @-1
x/1988/a.csv NaN ambiguous-temperature@1
y/a.csv 303.15 @-1
y/deep/a.csv 30 @-1
z/a.csv 300 @-1
z/onebarrier-columns.csv NaN columns-file@3`
	if g := strings.Join(got, "\n"); g != want {
		t.Errorf("found\n%s\nwant\n%s", g, want)
	}
}

// A panic in one data set is that set's.
func TestRunPanic(t *testing.T) {
	dir := t.TempDir()
	t.Chdir(dir)
	writeFiles(t, dir, map[string]string{"a.csv": good})
	o := quick(".")
	o.Assess.Progress = func(int, int) { panic("planted\nwith a trace") }
	s, sum := runIn(t, "s.sqlite", o)
	if r := rowsOf(t, s)[0]; sum.Failed != 1 || r.ErrorCode != "internal-error" || !strings.Contains(r.Error, "internal error: planted;") || r.State != "" || r.Dataset != "a" {
		t.Errorf("%+v: %v", sum, r.Values())
	}
}

// The child of TestKill runs a survey until it is killed or done. It says when its store
// is open.
func TestMain(m *testing.M) {
	if dir := os.Getenv("SURVEY_TEST_CHILD"); dir != "" {
		o := quick(filepath.Join(dir, "data"))
		s, err := Create(filepath.Join(dir, "s.sqlite"), testSettings)
		if err == nil {
			fmt.Println("open")
			o.Others = func(at []Running) { err = fmt.Errorf("told of a run that was killed: %v", at) }
			_, e := Run(context.Background(), s, o)
			err = errors.Join(err, e, s.Close())
		}
		if err != nil {
			fmt.Fprintln(os.Stderr, err)
			os.Exit(1)
		}
		os.Exit(0)
	}
	os.Exit(m.Run())
}

// Killed at random moments, again and again, a survey comes to the same end, in rows,
// assessments and every form of the table, and nothing that was once stored is lost.
func TestKill(t *testing.T) {
	kills := 60
	if testing.Short() {
		kills = 3
	}
	dir := t.TempDir()
	writeFiles(t, dir, map[string]string{"data/long.csv": string(longArchive(150)), "data/bad.csv": "T/K,k/s^-1\n300,x\n"})
	all := func(s *Store) string {
		var b bytes.Buffer
		b.WriteString(everything(t, s))
		for _, format := range TableFormats {
			if err := s.WriteTable(context.Background(), &b, format, TableOptions{}, report.Text{}); err != nil {
				t.Fatal(err)
			}
		}
		return b.String()
	}
	begun := time.Now()
	s, _ := runIn(t, filepath.Join(dir, "whole.sqlite"), quick(filepath.Join(dir, "data")))
	took := time.Since(begun)
	want := all(s)
	rng := rand.New(rand.NewPCG(uint64(time.Now().UnixNano()), 0))
	store := filepath.Join(dir, "s.sqlite")
	const early = 10 // kills that may come before there is a store
	stored, inside, ends, lost := 0, 0, 0, 0
	for done := 0; done < kills; {
		cmd := exec.Command(os.Args[0])
		cmd.Env = append(os.Environ(), "SURVEY_TEST_CHILD="+dir)
		var said bytes.Buffer
		cmd.Stderr = &said
		out, err := cmd.StdoutPipe()
		if err == nil {
			err = cmd.Start()
		}
		if err != nil {
			t.Fatal(err)
		}
		within := took
		if done >= early {
			// A moment of the run itself, however long the process took to start.
			if _, err := out.Read(make([]byte, 1)); err != nil {
				t.Fatalf("after %d kills: %v, %s", done, err, said.String())
			}
		} else {
			within = 50 * time.Millisecond
		}
		timer := time.AfterFunc(time.Duration(rng.Int64N(int64(within))), func() { cmd.Process.Kill() })
		_, _ = io.Copy(io.Discard, out)
		err = cmd.Wait()
		timer.Stop()
		var exit *exec.ExitError
		switch {
		case err == nil: // done: compare, and begin anew
			inside = 0
			ends++
			if all(openStore(t, store)) != want {
				t.Fatalf("after %d kills: other rows", done)
			}
			for _, end := range []string{"", "-wal", "-shm"} {
				os.Remove(store + end)
			}
			stored = 0
			continue
		case errors.As(err, &exit) && exit.ExitCode() == 1:
			t.Fatalf("after %d kills: %s", done, said.String())
		}
		done++
		inside++
		if _, err := os.Stat(store); err != nil {
			lost++
			continue // killed before there was one
		}
		s, err := Open(store)
		if err != nil {
			if inside <= early {
				lost++
				continue // before its tables were there
			}
			t.Fatalf("after %d kills: %v", done, err)
		}
		n := len(rowsOf(t, s))
		s.Close()
		if n < stored {
			t.Fatalf("after %d kills: %d rows, and %d before", done, n, stored)
		}
		stored = n
	}
	if kills-lost < kills-early {
		t.Errorf("%d of %d kills came before there was a store", lost, kills)
	}
	t.Logf("%d kills, %d of them before there was a store; %d runs came to their end between", kills, lost, ends)
	if _, sum := runIn(t, store, quick(filepath.Join(dir, "data"))); sum.Known < stored {
		t.Errorf("%d rows were stored, %d are known", stored, sum.Known)
	}
	if all(openStore(t, store)) != want {
		t.Error("after all kills: other rows")
	}
}

func openStore(t testing.TB, path string) *Store {
	t.Helper()
	s, err := Open(path)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { s.Close() })
	return s
}
