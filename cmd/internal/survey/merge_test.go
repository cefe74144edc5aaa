package survey

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// archive are n data sets of two files.
func archive(n int) (all []Entry) {
	for i := range n {
		e := entry(i)
		e.Row.SourceFile = []string{"a.csv", "b.csv"}[i%2]
		e.Key = keyOf(e.Row.SourceFile, "", e.Row.Dataset, 0)
		e.Row.SetID = e.Key.String()
		if i%10 == 7 {
			e.Assessment, e.Row.ErrorCode, e.Row.Error = nil, "no-table", "nothing in it"
		}
		all = append(all, e)
	}
	return all
}

// putPart stores part k of n of an archive as survey run does, all of it or, where
// most is not negative, so many data sets.
func putPart(t testing.TB, path string, settings Settings, all []Entry, inputs string, k, n, most int) {
	t.Helper()
	s, err := Create(path, settings)
	if err != nil {
		t.Fatal(err)
	}
	var mine []Entry
	seen := map[Key]bool{}
	for _, e := range all {
		if e.Key.part(k, n) {
			mine, seen[e.Key] = append(mine, e), true
		}
	}
	h := Shard{K: k, N: n}
	if most < 0 {
		h = Shard{K: k, N: n, Sets: len(mine), Total: len(all), Inputs: inputs, Done: true}
	} else {
		mine = mine[:min(most, len(mine))]
	}
	err = s.Put(mine)
	if h.Done && err == nil {
		var stale []Key
		if stale, err = s.without(seen, map[string]bool{"a.csv": true, "b.csv": true}); err == nil {
			err = s.Remove(stale)
		}
	}
	if err := errors.Join(err, s.SetShard(h), s.Close()); err != nil {
		t.Fatal(err)
	}
}

// putParts stores all parts and returns their files.
func putParts(t testing.TB, dir string, all []Entry, inputs string, n int) (files []string) {
	t.Helper()
	for k := 1; k <= n; k++ {
		file := filepath.Join(dir, fmt.Sprintf("%d-of-%d.sqlite", k, n))
		putPart(t, file, testSettings, all, inputs, k, n, -1)
		files = append(files, file)
	}
	return files
}

func merge(t testing.TB, path string, files ...string) *Merged {
	t.Helper()
	m, err := Merge(context.Background(), path, files)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// holds fails where a store does not hold the rows and documents of all entries, in
// the order of a store that they were put into at once.
func holds(t testing.TB, path string, all []Entry) {
	t.Helper()
	single := newStore(t, filepath.Join(t.TempDir(), "single.sqlite"), testSettings)
	if err := single.Put(all); err != nil {
		t.Fatal(err)
	}
	s, err := Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	if got, want := spell(rowsOf(t, s)), spell(rowsOf(t, single)); got != want {
		t.Errorf("the rows differ:\n%s\nwant\n%s", got, want)
	}
	for _, e := range all {
		if got, err := s.Assessment(e.Row.SetID); err != nil || string(got) != string(e.Assessment) {
			t.Errorf("%s: assessment %q, %v, want %q", e.Row.Dataset, got, err, e.Assessment)
		}
		if done, err := s.Done(e.Key, e.Content); !done || err != nil {
			t.Errorf("%s is not done: %v", e.Row.Dataset, err)
		}
	}
	var documents, orphans int
	if err := s.db.QueryRow("SELECT count(*), count(*) FILTER (WHERE id NOT IN (SELECT id FROM sets)) FROM assessments").Scan(&documents, &orphans); err != nil || orphans > 0 {
		t.Errorf("%d of %d documents belong to no row: %v", orphans, documents, err)
	}
}

// Any order of any number of parts gives the rows of one survey, and again the same.
func TestMerge(t *testing.T) {
	all := archive(2500)
	for _, n := range []int{1, 2, 7} {
		dir := t.TempDir()
		files := putParts(t, dir, all, "inputs", n)
		rand.Shuffle(len(files), func(i, j int) { files[i], files[j] = files[j], files[i] })
		path := filepath.Join(dir, "all.sqlite")
		m := merge(t, path, files...)
		if !m.Complete() || m.Shards != n || m.Sets != len(all) || m.Failed != len(all)/10 || m.Copied != len(all) || m.Known+m.Removed+len(m.Unread) != 0 {
			t.Errorf("%d parts: %+v", n, m)
		}
		holds(t, path, all)
		if m := merge(t, path, files...); !m.Complete() || m.Copied != 0 || m.Known != n || m.Sets != len(all) {
			t.Errorf("%d parts again: %+v", n, m)
		}
		holds(t, path, all)
	}
}

// Parts may come one by one; what is missing has its number and a cure.
func TestMergeMissing(t *testing.T) {
	all, dir := archive(200), t.TempDir()
	files := putParts(t, dir, all, "inputs", 4)
	path := filepath.Join(dir, "all.sqlite")
	os.Remove(files[1])
	os.Remove(files[2])
	putPart(t, files[2], testSettings, all, "", 3, 4, 5)

	m := merge(t, path, files...)
	if len(m.Unread) != 1 || !strings.Contains(m.Unread[0].Error(), files[1]) {
		t.Errorf("unread %v, want %s", m.Unread, files[1])
	}
	var got []string
	for _, x := range m.Missing {
		got = append(got, x.String())
	}
	want := []string{
		"part 2 of 4: not found; survey run again with --shard 2/4, then merge again",
		"part 3 of 4 (" + files[2] + "): not finished; survey run again with --shard 3/4, then merge again",
	}
	if fmt.Sprint(got) != fmt.Sprint(want) {
		t.Errorf("missing\n%s\nwant\n%s", strings.Join(got, "\n"), strings.Join(want, "\n"))
	}
	// What an unfinished part has more is merged too.
	putPart(t, files[2], testSettings, all, "", 3, 4, 9)
	if more := merge(t, path, files[2]); more.Sets != m.Sets+4 || len(more.Missing) != 2 {
		t.Errorf("%+v, want %d data sets", more, m.Sets+4)
	}
	putPart(t, files[2], testSettings, all, "inputs", 3, 4, -1)
	if m := merge(t, path, files[2]); len(m.Missing) != 1 || m.Missing[0].K != 2 {
		t.Errorf("missing %v, want part 2 alone", m.Missing)
	}
	putPart(t, files[1], testSettings, all, "inputs", 2, 4, -1)
	if m := merge(t, path, files[1]); !m.Complete() || m.Sets != len(all) {
		t.Errorf("%+v, want complete", m)
	}
	holds(t, path, all)

	// A part that is done again is not whole until it is.
	putPart(t, files[0], testSettings, all, "", 1, 4, 3)
	if m := merge(t, path, files...); len(m.Missing) != 1 || m.Missing[0].K != 1 || m.Sets != len(all) {
		t.Errorf("%+v, want part 1 not finished", m)
	}
}

// What does not belong together is refused before anything is copied.
func TestMergeRefuses(t *testing.T) {
	all := archive(40)
	other := Settings{"program": "v1", "resamples": "999", "seed": "2"}
	for name, c := range map[string]struct {
		second func(file string)
		want   string
	}{
		"other settings": {func(file string) { putPart(t, file, other, all, "inputs", 2, 2, -1) }, "seed: 2 there, 1 here"},
		"other number":   {func(file string) { putPart(t, file, testSettings, all, "inputs", 2, 3, -1) }, "a part of 2 and"},
		"other data":     {func(file string) { putPart(t, file, testSettings, all[1:], "others", 2, 2, -1) }, "did not read the same data"},
		"two whole surveys": {func(file string) { putPart(t, file, testSettings, all[1:], "others", 1, 1, -1) },
			"a part of 2 and"},
	} {
		dir := t.TempDir()
		first, second, path := filepath.Join(dir, "1.sqlite"), filepath.Join(dir, "2.sqlite"), filepath.Join(dir, "all.sqlite")
		putPart(t, first, testSettings, all, "inputs", 1, 2, -1)
		c.second(second)
		_, err := Merge(context.Background(), path, []string{first, second})
		if err == nil || !strings.Contains(err.Error(), c.want) || !strings.Contains(err.Error(), second) {
			t.Errorf("%s: %v, want %q and the file", name, err, c.want)
		}
		if _, err := os.Stat(path); !errors.Is(err, os.ErrNotExist) {
			t.Errorf("%s: a store was made", name)
		}
	}

	dir := t.TempDir()
	files := putParts(t, dir, all, "inputs", 2)
	path := filepath.Join(dir, "all.sqlite")
	putPart(t, path, other, nil, "", 1, 1, -1)
	if _, err := Merge(context.Background(), path, files); err == nil || !strings.Contains(err.Error(), "name another store") {
		t.Errorf("into a store of other settings: %v", err)
	}
	if _, err := Merge(context.Background(), files[0], files); err == nil || !strings.Contains(err.Error(), "both a part and the store") {
		t.Errorf("into one of its parts: %v", err)
	}
}

// A file that is no part, or a damaged one, does not stop the others.
func TestMergeUnread(t *testing.T) {
	all, dir := archive(3000), t.TempDir()
	files := putParts(t, dir, all, "inputs", 3)
	text, empty := filepath.Join(dir, "notes.txt"), filepath.Join(dir, "empty.sqlite")
	if err := errors.Join(os.WriteFile(text, []byte("no store at all, but long enough to have a header"), 0o666), os.Truncate(files[1], 8192)); err != nil {
		t.Fatal(err)
	}
	newStore(t, empty, testSettings)
	// The third opens and has rows; where its documents lie is found to be damaged later.
	third := newStore(t, files[2], testSettings)
	var root, size int64
	err := errors.Join(third.db.QueryRow("SELECT rootpage FROM sqlite_schema WHERE name = 'assessments'").Scan(&root),
		third.db.QueryRow("PRAGMA page_size").Scan(&size), third.Close())
	if err != nil {
		t.Fatal(err)
	}
	f, err := os.OpenFile(files[2], os.O_WRONLY, 0)
	if err == nil {
		_, err = f.WriteAt(bytes.Repeat([]byte{0xa5}, int(size)), (root-1)*size)
		err = errors.Join(err, f.Close())
	}
	if err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(dir, "all.sqlite")
	m := merge(t, path, append(files, text, empty, dir, filepath.Join(dir, "none.sqlite"))...)
	if len(m.Missing) != 2 || m.Missing[0].K != 2 || m.Missing[1].K != 3 {
		t.Errorf("missing %v, want parts 2 and 3", m.Missing)
	}
	said := fmt.Sprint(m.Unread)
	for _, file := range []string{files[1], files[2], text, empty, dir, filepath.Join(dir, "none.sqlite")} {
		if !strings.Contains(said, file) {
			t.Errorf("%s is not among the unread %v", file, m.Unread)
		}
	}
	if len(m.Unread) != 6 {
		t.Errorf("%d unread, want 6: %v", len(m.Unread), m.Unread)
	}
	if _, err := Merge(context.Background(), filepath.Join(dir, "b.sqlite"), []string{text, empty}); err == nil || !strings.Contains(err.Error(), text) {
		t.Errorf("nothing but files that are no parts: %v", err)
	}
}

// Data that changed between two merges: what is gone goes, what was changed changes,
// and rows of other surveys in the store stay.
func TestMergeAgainAfterChange(t *testing.T) {
	all, dir := archive(300), t.TempDir()
	path := filepath.Join(dir, "all.sqlite")
	apart := entry(1000)
	apart.Row.SourceFile = "elsewhere.csv"
	s := newStore(t, path, testSettings)
	if err := s.Put([]Entry{apart}); err != nil {
		t.Fatal(err)
	}
	merge(t, path, putParts(t, dir, all, "inputs", 3)...)

	changed := append([]Entry(nil), all[5:]...)
	changed[0].Content, changed[0].Row.PValue, changed[0].Assessment = Content{7}, 0.5, nil
	files := putParts(t, dir, changed, "others", 3)
	// One by one too: until the last part of the new data is in, it is not complete.
	for i, file := range files {
		m := merge(t, path, file)
		if len(m.Missing) != 2-i {
			t.Errorf("after part %d: missing %v", i+1, m.Missing)
		}
	}
	holds(t, path, append(changed, apart))
}

// A merge that is interrupted at any moment leaves a store that the next one
// completes.
func TestMergeInterrupted(t *testing.T) {
	all, dir := archive(6000), t.TempDir()
	files := putParts(t, dir, all, "inputs", 3)
	path := filepath.Join(dir, "all.sqlite")
	stop := errors.New("stop")
	interrupted := 0
	for range 20 {
		ctx, cancel := context.WithCancelCause(context.Background())
		timer := time.AfterFunc(time.Duration(rand.IntN(40))*time.Millisecond, func() { cancel(stop) })
		m, err := Merge(ctx, path, files)
		timer.Stop()
		switch {
		case errors.Is(err, stop):
			interrupted++
		case err != nil:
			t.Fatal(err)
		case !m.Complete():
			t.Errorf("not complete: %v", m.Missing)
		}
		cancel(nil)
		if rand.IntN(5) == 0 {
			for _, f := range []string{path, path + "-wal", path + "-shm"} {
				os.Remove(f)
			}
		}
	}
	if interrupted == 0 {
		t.Error("no merge was interrupted")
	}
	if m := merge(t, path, files...); !m.Complete() {
		t.Errorf("%+v, want complete", m)
	}
	holds(t, path, all)
}

// The store of a task that was killed has its last rows beside it, in files that
// only SQLite knows: they are merged too.
func TestMergeKilledPart(t *testing.T) {
	all, dir := archive(100), t.TempDir()
	file := filepath.Join(dir, "1.sqlite")
	s := newStore(t, file, testSettings)
	if err := errors.Join(s.Put(all), s.SetShard(Shard{K: 1, N: 1, Sets: 100, Total: 100, Inputs: "x", Done: true})); err != nil {
		t.Fatal(err)
	}
	// As a kill leaves them: copied while the store is open.
	killed := filepath.Join(dir, "killed.sqlite")
	for _, end := range []string{"", "-wal", "-shm"} {
		b, err := os.ReadFile(file + end)
		if err == nil {
			err = os.WriteFile(killed+end, b, 0o666)
		}
		if err != nil {
			t.Fatal(err)
		}
	}
	path := filepath.Join(dir, "all.sqlite")
	if m := merge(t, path, killed); !m.Complete() || m.Sets != 100 {
		t.Errorf("%+v", m)
	}
	holds(t, path, all)
}

// BenchmarkMerge copies rows with documents of 10 kB, as assessments are.
func BenchmarkMerge(b *testing.B) {
	all := archive(5000)
	r := rand.New(rand.NewPCG(1, 2))
	for i := range all {
		if all[i].Assessment != nil {
			var doc strings.Builder
			for doc.Len() < 10000 {
				fmt.Fprintf(&doc, `{"t_k": %v, "k": %v}, `, r.Float64(), r.Float64())
			}
			all[i].Assessment = []byte(doc.String())
		}
	}
	dir := b.TempDir()
	files := putParts(b, dir, all, "inputs", 2)
	n := 0
	for b.Loop() {
		merge(b, filepath.Join(dir, fmt.Sprintf("all%d.sqlite", n)), files...)
		n++
	}
	b.ReportMetric(float64(len(all)*n)/b.Elapsed().Seconds(), "sets/s")
}
