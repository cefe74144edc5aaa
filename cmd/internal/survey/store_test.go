package survey

import (
	"context"
	"database/sql"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
)

var testSettings = Settings{"program": "v1", "resamples": "999", "seed": "1"}

func newStore(t testing.TB, path string, settings Settings) *Store {
	t.Helper()
	s, err := Create(path, settings)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { s.Close() })
	return s
}

func entry(n int) Entry {
	e := Entry{Key: Key{byte(n >> 8), byte(n)}, Content: Content{1}, Position: n, Row: emptyRow()}
	e.Row.SetID, e.Row.Dataset, e.Row.SourceFile = e.Key.String(), fmt.Sprintf("set %d", n), "a.csv"
	e.Row.PValue, e.Row.Points = 0.1+float64(n)/3, n
	e.Assessment = []byte(fmt.Sprintf(`{"n": %d, "text": %q}`, n, strings.Repeat("again ", 100)))
	return e
}

func entries(from, to int) (all []Entry) {
	for n := from; n < to; n++ {
		all = append(all, entry(n))
	}
	return all
}

func rowsOf(t testing.TB, s *Store) (all []Row) {
	t.Helper()
	if err := s.Rows(context.Background(), func(r Row) error { all = append(all, r); return nil }); err != nil {
		t.Fatal(err)
	}
	return all
}

func spell(rows []Row) string {
	var b strings.Builder
	for i := range rows {
		fmt.Fprintln(&b, rows[i].Values()...)
	}
	return b.String()
}

// What is put comes back the same, unknowns included, also after closing.
func TestStoreRoundTrip(t *testing.T) {
	path := filepath.Join(t.TempDir(), "a ? b%20#.sqlite") // a name that would break a URL
	s := newStore(t, path, testSettings)
	yes, no := true, false
	put := entries(0, 70)
	put[3].Row.Material, put[4].Row.Material = &yes, &no
	put[5].Row.Dataset, put[6].Row.Dataset = "a\x00b\n'\"", strings.Repeat("ß", 5000)
	put[7].Row.StraightE, put[8].Row.StraightE = math.SmallestNonzeroFloat64, -math.MaxFloat64
	put[9].Row.PBand = math.Inf(1) // unknown
	put[10].Assessment = nil
	if err := s.Put(put); err != nil {
		t.Fatal(err)
	}
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	if _, err := os.Stat(path); err != nil {
		t.Fatal(err)
	}
	s, err := Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	var want []Row
	for _, e := range put {
		want = append(want, e.Row)
	}
	if got := rowsOf(t, s); spell(got) != spell(want) {
		t.Errorf("rows\n%s\nwant\n%s", spell(got), spell(want))
	}
	for i, e := range put {
		got, err := s.Assessment(e.Key.String())
		if err != nil || string(got) != string(e.Assessment) || (got == nil) != (i == 10) {
			t.Errorf("assessment %d: %q, %v", i, got, err)
		}
		if ok, err := s.Done(e.Key, e.Content); !ok || err != nil {
			t.Errorf("entry %d is not done: %v", i, err)
		}
	}
	if ok, _ := s.Done(put[0].Key, Content{2}); ok {
		t.Error("done with another content")
	}
	n := 0
	err = s.Entries(context.Background(), func(e Entry) error {
		n++
		if w := put[e.Position]; e.Key != w.Key || e.Content != w.Content || string(e.Assessment) != string(w.Assessment) {
			t.Errorf("entry %d differs", e.Position)
		}
		return nil
	})
	if err != nil || n != len(put) {
		t.Errorf("%d entries, %v", n, err)
	}
	if found, err := s.Find(context.Background(), "set 12"); err != nil || len(found) != 1 || found[0].Points != 12 {
		t.Errorf("found %v, %v", found, err)
	}
	if found, _ := s.Find(context.Background(), put[12].Key.String()); len(found) != 1 || found[0].Points != 12 {
		t.Errorf("found %v by its id", found)
	}
	if _, err := s.Assessment("ffffffffffffffffffffffff"); err == nil {
		t.Error("an unknown id has an assessment")
	}
}

// A data set that changed replaces what was there, its assessment too.
func TestStoreReplaces(t *testing.T) {
	s := newStore(t, filepath.Join(t.TempDir(), "s.sqlite"), testSettings)
	if err := s.Put(entries(0, 3)); err != nil {
		t.Fatal(err)
	}
	e := entry(1)
	e.Content, e.Row.Dataset, e.Assessment = Content{9}, "new", nil
	if err := s.Put([]Entry{e}); err != nil {
		t.Fatal(err)
	}
	if got := rowsOf(t, s); len(got) != 3 || got[1].Dataset != "new" {
		t.Errorf("%v", got)
	}
	if doc, err := s.Assessment(e.Key.String()); doc != nil || err != nil {
		t.Errorf("the old assessment is there: %q, %v", doc, err)
	}
	if err := s.Remove([]Key{e.Key}); err != nil {
		t.Fatal(err)
	}
	if got := rowsOf(t, s); len(got) != 2 {
		t.Errorf("%d rows after one of 3 was removed", len(got))
	}
}

func TestStoreOtherSettings(t *testing.T) {
	path := filepath.Join(t.TempDir(), "s.sqlite")
	s := newStore(t, path, testSettings)
	if err := s.Put(entries(0, 2)); err != nil {
		t.Fatal(err)
	}
	s.Close()
	other := Settings{"program": "v1", "resamples": "99", "seed": "1", "tolerance": "5%"}
	_, err := Create(path, other)
	var refused *SettingsError
	if !errors.As(err, &refused) {
		t.Fatalf("error %v", err)
	}
	for _, want := range []string{"resamples: 99 here, 999 in the store", "tolerance: 5% here, the default in the store", "--again"} {
		if !strings.Contains(err.Error(), want) || strings.Contains(err.Error(), "seed") {
			t.Errorf("%v: does not say %q", err, want)
		}
	}
	again, err := CreateAgain(path, other)
	if err != nil {
		t.Fatal(err)
	}
	if got := rowsOf(t, again); len(got) != 0 {
		t.Errorf("rows of other settings: %v", got)
	}
	if err := again.Put(entries(0, 1)); err != nil {
		t.Fatal(err)
	}
	again.Close()
	for choice, want := range map[int]int{0: 1, 1: 2, 2: 1} {
		s, err := OpenSettings(path, choice)
		if err != nil {
			t.Fatal(err)
		}
		if got := rowsOf(t, s); len(got) != want {
			t.Errorf("settings %d: %d rows, want %d", choice, len(got), want)
		}
		if all, err := s.AllSettings(); len(all) != 2 || err != nil || all[2]["resamples"] != "99" {
			t.Errorf("settings %v, %v", all, err)
		}
		s.Close()
	}
	if _, err := OpenSettings(path, 3); err == nil {
		t.Error("settings number 3 of 2")
	}
	// The first settings are known, and need no --again.
	s = newStore(t, path, testSettings)
	if got := rowsOf(t, s); len(got) != 2 {
		t.Errorf("%d rows, want the first 2", len(got))
	}
}

// Files that are no store, damaged, of a newer layout or out of reach.
func TestStoreRefuses(t *testing.T) {
	dir := t.TempDir()
	file := func(name string, b []byte) string {
		path := filepath.Join(dir, name)
		if err := os.WriteFile(path, b, 0o666); err != nil {
			t.Fatal(err)
		}
		return path
	}
	good := filepath.Join(dir, "good.sqlite")
	s := newStore(t, good, testSettings)
	if err := s.Put(entries(0, 500)); err != nil {
		t.Fatal(err)
	}
	s.Close()
	whole, err := os.ReadFile(good)
	if err != nil {
		t.Fatal(err)
	}
	change := func(name, statement string) string {
		path := filepath.Join(dir, name)
		db, err := sql.Open("sqlite", path)
		if err != nil {
			t.Fatal(err)
		}
		defer db.Close()
		if _, err := db.Exec(statement); err != nil {
			t.Fatal(err)
		}
		return path
	}
	for _, c := range []struct{ path, want string }{
		{file("text.csv", []byte("T/K,k/s^-1\n300,1\n310,2\n")), "not a store"},
		{file("long.csv", []byte(strings.Repeat("300,1\n", 10000))), "not a store"},
		{change("other.sqlite", "CREATE TABLE t (a)"), "not a store"},
		{func() string {
			file("newer.sqlite", whole)
			return change("newer.sqlite", "PRAGMA user_version = 99")
		}(), "version 99"},
		{file("cut.sqlite", whole[:len(whole)/2]), "cut short"},
		{file("cut2.sqlite", whole[:50]), "cut short"},
		{dir, "is a folder"},
		{filepath.Join(dir, "none", "s.sqlite"), "cannot be opened"},
	} {
		before, _ := os.ReadFile(c.path)
		for _, open := range []func() (*Store, error){
			func() (*Store, error) { return Create(c.path, testSettings) },
			func() (*Store, error) { return Open(c.path) },
		} {
			s, err := open()
			if err == nil {
				t.Errorf("%s: opened", c.path)
				s.Close()
				continue
			}
			if !strings.Contains(err.Error(), c.want) {
				t.Errorf("%s: %v does not say %q", c.path, err, c.want)
			}
		}
		if after, _ := os.ReadFile(c.path); string(after) != string(before) {
			t.Errorf("%s was changed", c.path)
		}
	}
}

// A full disk: the transaction that does not fit is as if it had never been, and the
// store goes on when there is room.
func TestStoreFullDisk(t *testing.T) {
	path := filepath.Join(t.TempDir(), "s.sqlite")
	s := newStore(t, path, testSettings)
	s.db.SetMaxOpenConns(1) // the limit is one of the connection
	if err := s.Put(entries(0, 64)); err != nil {
		t.Fatal(err)
	}
	if _, err := s.db.Exec("PRAGMA max_page_count = 20"); err != nil {
		t.Fatal(err)
	}
	var err error
	done := 64
	for err == nil && done < 10000 {
		if err = s.Put(entries(done, done+64)); err == nil {
			done += 64
		}
	}
	if err == nil || !strings.Contains(err.Error(), "disk is full") {
		t.Fatalf("error %v", err)
	}
	if got := rowsOf(t, s); len(got) != done {
		t.Errorf("%d rows, want %d", len(got), done)
	}
	if _, err := s.db.Exec("PRAGMA max_page_count = 1000000"); err != nil {
		t.Fatal(err)
	}
	if err := s.Put(entries(done, done+64)); err != nil {
		t.Errorf("with room again: %v", err)
	}
}

// Two surveys write to one new store at once: both work.
func TestStoreTwoWriters(t *testing.T) {
	path := filepath.Join(t.TempDir(), "s.sqlite")
	var wg sync.WaitGroup
	errs := make([]error, 2)
	for i := range errs {
		wg.Go(func() {
			s, err := Create(path, testSettings)
			if err != nil {
				errs[i] = err
				return
			}
			defer s.Close()
			for n := 0; n < 640; n += 64 {
				if err := s.Put(entries(n+i*32, n+i*32+64)); err != nil {
					errs[i] = err
				}
			}
		})
	}
	wg.Wait()
	if err := errors.Join(errs...); err != nil {
		t.Fatal(err)
	}
	s := newStore(t, path, testSettings)
	if got := rowsOf(t, s); len(got) != 672 {
		t.Errorf("%d rows, want 672", len(got))
	}
}

// The order of the rows does not depend on that of writing.
func TestStoreOrder(t *testing.T) {
	var tables []string
	for _, step := range []int{1, 7, 11} { // all prime to 90
		s := newStore(t, filepath.Join(t.TempDir(), "s.sqlite"), testSettings)
		for i := range 90 {
			n := i * step % 90
			e := entry(n)
			e.Row.SourceFile, e.Row.Sheet, e.Position = fmt.Sprintf("%d.csv", n%4), fmt.Sprint(n%3), n%5
			if err := s.Put([]Entry{e}); err != nil {
				t.Fatal(err)
			}
		}
		tables = append(tables, spell(rowsOf(t, s)))
	}
	if tables[0] != tables[1] || tables[0] != tables[2] {
		t.Error("the order of writing changes that of the table")
	}
}

func TestShards(t *testing.T) {
	s := newStore(t, filepath.Join(t.TempDir(), "s.sqlite"), testSettings)
	for _, h := range []Shard{{K: 3, N: 4}, {K: 1, N: 4}, {K: 3, N: 4, Sets: 5, Total: 20, Inputs: "ab", Done: true}} {
		if err := s.SetShard(h); err != nil {
			t.Fatal(err)
		}
	}
	got, err := s.Shards()
	if want := "[{1 4 0 0  false} {3 4 5 20 ab true}]"; err != nil || fmt.Sprint(got) != want {
		t.Errorf("%v, %v, want %s", got, err, want)
	}
}
