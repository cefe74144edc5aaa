package cli

import (
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"

	"onebarrier/cmd/internal/report"
	"onebarrier/cmd/internal/report/schematest"
	"onebarrier/models/reference"
)

const sheets = "../../../testdata/sheets"

// sheet is one row of the table in testdata/sheets/README.md, which explains it.
type sheet struct {
	line                                                         int
	file, ugly, flags, used, temperatures, quantity, lines, says string

	args  []string // flags of the row
	path  string   // of the file, edited where the row says so
	above *sheet   // of a cure: the row that it cures
	said  string   // what inspect printed
}

// TestGallery reads ugly sheets as the table says, and follows the cures.
func TestGallery(t *testing.T) {
	rows := readGallery(t)
	seen := map[string]bool{}
	cured := map[*sheet]bool{}
	for _, s := range rows {
		seen[s.file] = true
		cured[s.above] = true
		t.Run(s.file+" "+s.flags, func(t *testing.T) {
			defer func() {
				if t.Failed() {
					t.Logf("README.md:%d", s.line)
				}
			}()
			s.path = filepath.Join(sheets, s.file)
			s.prepare(t)
			if strings.HasPrefix(s.used, "refused") {
				s.refused(t)
			} else {
				s.understood(t)
			}
			if s.above != nil {
				s.printedAbove(t)
			}
		})
	}
	for _, s := range rows {
		// Where no cure follows, no flag and no edit of a cell would make a table of it.
		if strings.HasPrefix(s.used, "refused") && !cured[s] {
			s.hopeless(t)
		}
	}
	files, err := os.ReadDir(sheets)
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range files {
		if !seen[f.Name()] && f.Name() != "README.md" && f.Name() != ".gitattributes" {
			t.Errorf("%s is not in the table", f.Name())
		}
	}
}

// readGallery reads the table.
func readGallery(t *testing.T) []*sheet {
	t.Helper()
	var rows []*sheet
	for i, l := range strings.Split(contents(t, filepath.Join(sheets, "README.md")), "\n") {
		cells := strings.Split(strings.TrimSpace(l), "|")
		if cells[0] != "" || len(cells) < 3 || strings.HasPrefix(l, "|---") || strings.HasPrefix(l, "| file |") {
			continue
		}
		if len(cells) != 11 {
			t.Fatalf("README.md:%d: %d cells, want 9", i+1, len(cells)-2)
		}
		for j := range cells {
			cells[j] = strings.TrimSpace(cells[j])
		}
		s := &sheet{line: i + 1, file: cells[1], ugly: cells[2], flags: cells[3], used: cells[4], temperatures: cells[5], quantity: cells[6], lines: cells[7], says: cells[8]}
		if s.ugly == "cure" {
			for j := len(rows) - 1; ; j-- {
				if j < 0 || rows[j].file != s.file {
					t.Fatalf("README.md:%d: a cure of nothing", i+1)
				}
				if rows[j].ugly != "cure" || strings.HasPrefix(rows[j].used, "refused") {
					s.above = rows[j]
					break
				}
			}
		}
		rows = append(rows, s)
	}
	if len(rows) < 100 {
		t.Fatalf("the table has %d rows", len(rows))
	}
	return rows
}

// prepare splits the flags and makes the edits in a copy of the file.
func (s *sheet) prepare(t *testing.T) {
	t.Helper()
	var edits []string
	for part := range strings.SplitSeq(s.flags, "; ") {
		if e, ok := strings.CutPrefix(part, "edit "); ok {
			edits = append(edits, e)
			continue
		}
		args, _, _ := splitCommand(part)
		s.args = append(s.args, args...)
	}
	if len(edits) == 0 {
		return
	}
	lines := strings.SplitAfter(contents(t, s.path), "\n")
	for _, e := range edits {
		at, change, _ := strings.Cut(e, ":")
		if strings.HasPrefix(s.above.used, "refused") && s.above.lines != "" &&
			!strings.Contains(s.above.said, ":"+at+":") && !strings.Contains(s.above.said, "the cells") {
			t.Errorf("line %s is to be edited, and the message does not name it: %s", at, s.above.said)
		}
		n, err := strconv.Atoi(at)
		if err != nil || n > len(lines) {
			t.Fatalf("the edit %q does not fit the file", e)
		}
		if change == " deleted" {
			lines[n-1] = ""
			continue
		}
		old, now, ok := strings.Cut(strings.TrimPrefix(change, " "), " ->")
		if !ok || !strings.Contains(lines[n-1], old) {
			t.Fatalf("the edit %q does not fit the file", e)
		}
		now = strings.ReplaceAll(strings.TrimPrefix(now, " "), `\n`, "\n")
		lines[n-1] = strings.Replace(lines[n-1], old, now, 1)
	}
	s.path = filepath.Join(t.TempDir(), filepath.Base(s.file))
	if err := os.WriteFile(s.path, []byte(strings.Join(lines, "")), 0o666); err != nil {
		t.Fatal(err)
	}
}

// refused wants the code, the place and the words of the table, from inspect and
// from assess, as text and as a document.
func (s *sheet) refused(t *testing.T) {
	code, out, errOut := run(t, "", s.command("inspect")...)
	s.said = errOut
	if code != exitData || out != "" {
		t.Fatalf("exit code %d, want 3; stdout %q, stderr %s", code, out, errOut)
	}
	for word := range strings.SplitSeq(s.says, "; ") {
		if !strings.Contains(errOut, word) {
			t.Errorf("the message lacks %q: %s", word, errOut)
		}
	}
	if code, _, errOut := run(t, "", append(s.command("assess"), "--resamples", "99")...); code != exitData {
		t.Errorf("assess: exit code %d, want 3: %s", code, errOut)
	}
	_, out, _ = run(t, "", append(s.command("inspect"), "--json")...)
	if err := schematest.Validate("problems", []byte(out)); err != nil {
		t.Fatal(err)
	}
	var doc struct{ Problems []report.Problem }
	if err := json.Unmarshal([]byte(out), &doc); err != nil {
		t.Fatal(err)
	}
	want := strings.TrimPrefix(s.used, "refused ")
	found := false
	var got []string
	for _, p := range doc.Problems {
		where := p.Column
		if p.Row != nil {
			where = strings.TrimSuffix(strconv.Itoa(*p.Row)+", "+p.Column, ", ")
		}
		got = append(got, p.Code+" at "+strconv.Quote(where))
		found = found || (want == "*" || want == p.Code) && (s.lines == "*" || s.lines == where)
		if p.Cure == "" {
			t.Errorf("%s has no cure: %s", p.Code, p.Message)
		}
	}
	if !found {
		t.Errorf("want %s at %q, got %q", want, s.lines, got)
	}
}

// hopeless wants a cure that asks for another file or for a column.
func (s *sheet) hopeless(t *testing.T) {
	if !strings.Contains(s.said, "save ") && !strings.Contains(s.said, "--column ") && !strings.Contains(s.said, "T/K") {
		t.Errorf("%s: no way on is named: %s", s.file, s.said)
	}
}

// printedAbove wants the new flags of a cure to stand in what the row above printed.
func (s *sheet) printedAbove(t *testing.T) {
	for i, a := range s.args {
		if slices.Contains(s.above.args, a) {
			continue
		}
		if strings.Contains(s.above.said, a) ||
			i > 0 && s.args[i-1] == "--dataset" && strings.Contains(s.above.said, strconv.Quote(a)) {
			continue
		}
		t.Errorf("%q is followed as a cure and was not printed: %s", a, s.above.said)
	}
}

func (s *sheet) command(name string) []string { return append([]string{name, s.path}, s.args...) }

// understood wants the numbers and notices of the table; what inspect says comes
// next and what it writes with --tidy must work too.
func (s *sheet) understood(t *testing.T) {
	code, out, errOut := run(t, "", append(s.command("inspect"), "--json")...)
	if code != exitDone {
		t.Fatalf("exit code %d: %s", code, errOut)
	}
	if err := schematest.Validate("inspect", []byte(out)); err != nil {
		t.Fatal(err)
	}
	sets := inspected(t, out)
	s.numbers(t, sets)
	s.notices(t, sets)

	code, out, errOut = run(t, contents(t, s.path), append([]string{"inspect", "-", "--json"}, s.args...)...)
	if code != exitDone {
		t.Fatalf("standard input: exit code %d: %s", code, errOut)
	}
	if first, second := usedRows(sets), usedRows(inspected(t, out)); first != second {
		t.Errorf("rows of the file:\n%sof standard input:\n%s", first, second)
	}

	_, s.said, _ = run(t, "", s.command("inspect")...)
	refused := strings.Contains(s.says, "assess exits 3")
	code, _, errOut = run(t, "", append(s.command("assess"), "--resamples", "99")...)
	if refused && code != exitData || !refused && code != exitDone {
		t.Errorf("assess: exit code %d: %s", code, errOut)
	}
	if refused {
		s.said += errOut
	}
	s.next(t, refused && len(sets) == 1)
	s.tidy(t, sets)
}

func inspected(t *testing.T, out string) []report.InspectedSet {
	t.Helper()
	var doc report.Inspection
	if err := json.Unmarshal([]byte(out), &doc); err != nil || len(doc.Files) != 1 {
		t.Fatalf("%d files, %v", len(doc.Files), err)
	}
	return doc.Files[0].Sets
}

// numbers compares what was read with the table.
func (s *sheet) numbers(t *testing.T, sets []report.InspectedSet) {
	used := 0
	low, high := math.Inf(1), math.Inf(-1)
	for _, set := range sets {
		used += set.Used
		low, high = math.Min(low, float64(set.TMin)), math.Max(high, float64(set.TMax))
		q := strings.TrimSuffix(set.Quantity.Symbol+", "+set.Quantity.Unit, ", ")
		if s.quantity != "*" && q != s.quantity {
			t.Errorf("quantity %q, want %q", q, s.quantity)
		}
		for _, p := range set.Data {
			if p.Used != (p.WhyNot == "") {
				t.Errorf("line %d: used %v, why not %q", p.Row, p.Used, p.WhyNot)
			}
		}
	}
	if strconv.Itoa(used) != s.used {
		t.Errorf("%d rows are used, want %s", used, s.used)
	}
	from, to, _ := strings.Cut(s.temperatures, " to ")
	if !near(low, reference.Number(t, from)) || !near(high, reference.Number(t, to)) {
		t.Errorf("%v to %v K, want %s", low, high, s.temperatures)
	}
	if s.lines == "*" {
		return
	}
	for spot := range strings.SplitSeq(s.lines, "; ") {
		at, what, _ := strings.Cut(spot, ": ")
		line, err := strconv.Atoi(at)
		if err != nil {
			t.Fatalf("README.md:%d: %q", s.line, spot)
		}
		var seen []string
		ok := false
		for _, set := range sets {
			for _, p := range set.Data {
				if p.Row != line {
					continue
				}
				bad := ""
				for w := range strings.SplitSeq(what, ", ") {
					if !s.agrees(t, set, p, w) {
						bad = w
					}
				}
				ok = ok || bad == ""
				b, _ := json.Marshal(p)
				seen = append(seen, bad+" in "+string(b))
			}
		}
		if !ok {
			t.Errorf("line %d, want %s: %s", line, what, strings.Join(seen, "; "))
		}
	}
}

// agrees compares a row with one entry of the table, such as T=280 or k<1e-5.
func (s *sheet) agrees(t *testing.T, set report.InspectedSet, p report.InspectedRow, entry string) bool {
	if entry == "left out" {
		return !p.Used && p.WhyNot != ""
	}
	at := strings.IndexAny(entry, "=<>")
	if at < 0 {
		t.Fatalf("README.md:%d: %q", s.line, entry)
	}
	name, sign, value := entry[:at], entry[at:at+1], entry[at+1:]
	switch {
	case name == "source":
		return p.Source == value
	case name == "dataset":
		return set.Name == value
	case sign != "=":
		return p.Limit == sign && !p.Used && near(float64(p.K), reference.Number(t, value))
	case value == "none":
		return math.IsNaN(float64(p.UK))
	}
	got := map[string]float64{"T": float64(p.T), "k": float64(p.K), "u": float64(p.UK), "uT": float64(p.UT)}
	x, ok := got[name]
	return ok && (p.Used || name == "T") && near(x, reference.Number(t, value))
}

// near compares to the last digits of double precision; NaN is near nothing.
func near(got, want float64) bool { return reference.Agrees(got, want, 1e-12) }

// notices wants the codes of the table, and every assumption in the record.
func (s *sheet) notices(t *testing.T, sets []report.InspectedSet) {
	var codes []string
	for _, n := range sets[0].Notices {
		codes = append(codes, n.Code)
	}
	for want := range strings.SplitSeq(s.says, "; ") {
		n, several := strings.CutSuffix(want, " sets")
		switch {
		case want == "" || want == "assess exits 3":
		case several:
			if n != strconv.Itoa(len(sets)) {
				t.Errorf("%d data sets, want %s", len(sets), n)
			}
		case !slices.Contains(codes, want):
			t.Errorf("notices %q, want %s", codes, want)
		}
	}
	if !strings.Contains(s.says, " sets") && len(sets) != 1 {
		t.Errorf("%d data sets", len(sets))
	}
	record := strings.Split(strings.Join(sets[0].Assumed, ","), ",")
	for i, a := range s.args {
		if i == 0 || s.args[i-1] != "--assume" {
			continue
		}
		for part := range strings.SplitSeq(a, ",") { // error=sd,n=3
			if !slices.Contains(record, part) {
				t.Errorf("--assume %s is not in the record %q", a, record)
			}
		}
	}
}

// next runs the command that inspect ends with.
func (s *sheet) next(t *testing.T, refused bool) {
	_, line, ok := strings.Cut(s.said, "next")
	line, _, _ = strings.Cut(line, "\n")
	args, _, _ := splitCommand(strings.TrimSpace(line))
	if !ok || len(args) < 3 || args[0] != "onebarrier" {
		t.Fatalf("inspect does not end with a command: %s", s.said)
	}
	code, _, errOut := run(t, "", append(args[1:], "--resamples", "99")...)
	if refused && code != exitData || !refused && code != exitDone {
		t.Errorf("%q, which inspect names: exit code %d: %s", args, code, errOut)
	}
}

// tidy wants the rows that are used back from what --tidy writes.
func (s *sheet) tidy(t *testing.T, sets []report.InspectedSet) {
	file := filepath.Join(t.TempDir(), filepath.Base(s.path))
	if code, _, errOut := run(t, "", append(s.command("inspect"), "--tidy", file)...); code != exitDone {
		t.Fatalf("--tidy: exit code %d: %s", code, errOut)
	}
	code, out, errOut := run(t, "", "inspect", file, "--json")
	if code != exitDone {
		t.Fatalf("what --tidy wrote: exit code %d: %s\n%s", code, errOut, contents(t, file))
	}
	if first, second := usedRows(sets), usedRows(inspected(t, out)); first != second {
		t.Errorf("rows as read:\n%sas written with --tidy and read back:\n%s", first, second)
	}
}

// usedRows prints the rows that take part, to the last bit.
func usedRows(sets []report.InspectedSet) string {
	var b strings.Builder
	for _, set := range sets {
		for _, p := range set.Data {
			if p.Used {
				fmt.Fprintln(&b, p.T, p.UT, p.K, p.UK, p.Source)
			}
		}
	}
	return b.String()
}

// TestGalleryOfEverything runs the two commands on every file of testdata: whatever a
// file holds, it is understood or it is refused with a cure.
func TestGalleryOfEverything(t *testing.T) {
	err := filepath.WalkDir("../../../testdata", func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		for _, args := range [][]string{{"inspect", path}, {"assess", path, "--resamples", "0"}} {
			code, out, errOut := run(t, "", args...)
			if code != exitDone && code != exitData || strings.Contains(errOut, "internal error") || (code == exitData) != (out == "") {
				t.Errorf("%q: exit code %d: %s", args, code, errOut)
			}
		}
		return nil
	})
	if err = errors.Join(err, t.Context().Err()); err != nil {
		t.Fatal(err)
	}
}
