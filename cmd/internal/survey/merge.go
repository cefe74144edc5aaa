package survey

import (
	"context"
	"database/sql"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"strings"
)

// Merged is what a merge found and did.
type Merged struct {
	Shards  int       // of the survey
	Missing []Missing // of them, not in the merged store whole; none: complete
	Unread  []error   // files named as parts that could not be used
	Sets    int       // rows of the merged store
	Failed  int       // of them with an error
	Copied  int       // rows copied in this call
	Known   int       // files that had been merged whole before
	Removed int       // rows of an earlier merge whose data are no longer in the files
}

// Complete reports whether every part of the survey is in the merged store.
func (m *Merged) Complete() bool { return len(m.Missing) == 0 }

// Missing is a part of a survey that is not there, or not whole.
type Missing struct {
	K, N int
	File string // that holds what there is of it, "" for none
	Why  string
}

func (m Missing) String() string {
	s := fmt.Sprintf("part %d of %d: %s", m.K, m.N, m.Why)
	if m.File != "" {
		s = fmt.Sprintf("part %d of %d (%s): %s", m.K, m.N, m.File, m.Why)
	}
	return s + fmt.Sprintf("; survey run again with --shard %d/%d, then merge again", m.K, m.N)
}

// part is the store of one part, or of several.
type part struct {
	*Store
	shards []Shard
	files  []string // the source files of its rows
}

// Merge copies what the stores of parts hold into one store, which is made where it
// does not exist, and tells which parts are missing or not finished: parts of a survey
// know how many there are. It may be called with some of the parts, with parts that
// are not finished, again, and after it was interrupted.
//
// Nothing is copied where the parts do not belong together: they were made with other
// settings, are parts of other numbers, or read other data.
func Merge(ctx context.Context, path string, files []string) (*Merged, error) {
	m := &Merged{}
	parts, err := m.open(path, files)
	defer func() {
		for _, p := range parts {
			p.Close()
		}
	}()
	if err != nil {
		return nil, err
	}
	inputs, err := m.check(parts)
	if err != nil {
		return nil, err
	}
	all, err := Create(path, parts[0].Settings())
	if err != nil {
		var other *SettingsError
		if errors.As(err, &other) {
			return nil, fmt.Errorf("survey: %s was made with other settings than %s (%s); name another store for the merge",
				path, parts[0].Path(), strings.Join(other.Differences, "; "))
		}
		return nil, err
	}
	defer all.Close()
	if err := m.merge(ctx, all, parts); err != nil {
		return nil, err
	}
	if err := m.find(all, parts, inputs); err != nil {
		return nil, err
	}
	if err := all.db.QueryRow("SELECT count(*), count(nullif(error_code, '')) FROM sets WHERE settings = ?", all.id).Scan(&m.Sets, &m.Failed); err != nil {
		return nil, all.explain(err)
	}
	return m, all.Close()
}

// open opens the parts. One that cannot be used is no reason not to merge the others.
func (m *Merged) open(path string, files []string) ([]part, error) {
	var parts []part
	all, allErr := os.Stat(path)
	for _, file := range files {
		info, err := os.Stat(file)
		switch {
		case errors.Is(err, fs.ErrNotExist):
			m.Unread = append(m.Unread, fmt.Errorf("survey: %s: there is no such file; survey run --shard K/N makes it", file))
			continue
		case err == nil && allErr == nil && os.SameFile(info, all):
			return parts, fmt.Errorf("survey: %s is both a part and the store of the merge; name another store for the merge", file)
		}
		s, err := Open(file)
		if err != nil {
			m.Unread = append(m.Unread, err)
			continue
		}
		p := part{Store: s}
		if p.shards, err = s.Shards(); err == nil {
			p.files, err = s.sourceFiles()
		}
		if err == nil && len(p.shards) == 0 {
			err = fmt.Errorf("survey: %s holds no part of a survey yet; survey run --shard K/N goes on with it", file)
		}
		if err != nil {
			s.Close()
			m.Unread = append(m.Unread, err)
			continue
		}
		parts = append(parts, p)
	}
	if len(parts) == 0 {
		return nil, fmt.Errorf("survey: no part can be used\n%w", errors.Join(m.Unread...))
	}
	return parts, nil
}

// check sees that the parts belong to one survey. It returns what those that are done
// have read, "" where none is.
func (m *Merged) check(parts []part) (inputs string, err error) {
	var of, read string // the files that number and inputs were taken from
	for _, p := range parts {
		if d := p.Settings().Differences(parts[0].Settings()); len(d) > 0 {
			// The words of a difference are those of one store opened under other settings.
			return "", fmt.Errorf("survey: %s and %s were made with other settings (%s); survey one of them again, or merge each into a store of its own",
				p.Path(), parts[0].Path(), strings.NewReplacer(" here,", " there,", " in the store", " here").Replace(strings.Join(d, "; ")))
		}
		for _, h := range p.shards {
			if m.Shards == 0 {
				m.Shards, of = h.N, p.Path()
			}
			if h.N != m.Shards {
				return "", fmt.Errorf("survey: %s holds a part of %d and %s one of %d; name the parts of one survey", of, m.Shards, p.Path(), h.N)
			}
			if !h.Done {
				continue
			}
			if inputs == "" {
				inputs, read = h.Inputs, p.Path()
			}
			if h.Inputs != inputs {
				return "", fmt.Errorf("survey: %s and %s did not read the same data: files were changed, added or removed between them; survey every part again, which goes on from what is stored, then merge again",
					read, p.Path())
			}
		}
	}
	return inputs, nil
}

// merge copies the parts that were not merged as they are. One that turns out to be
// damaged is no reason not to copy the others.
func (m *Merged) merge(ctx context.Context, all *Store, parts []part) error {
	before, err := all.shardsByNumber(m.Shards)
	if err != nil {
		return err
	}
	files := map[string]bool{}
	for _, p := range parts {
		for _, file := range p.files {
			files[file] = true
		}
	}
	for _, p := range parts {
		if p.among(before) {
			m.Known++
			continue
		}
		err := m.mergeOne(ctx, all, p, files)
		if err == nil {
			continue
		}
		damage := error(nil)
		if ctx.Err() == nil {
			damage = p.damage()
		}
		if damage == nil {
			return err
		}
		m.Unread = append(m.Unread, damage)
	}
	return nil
}

// mergeOne copies the rows of one file, and records its parts when they are copied
// whole. Until then they count as not merged.
func (m *Merged) mergeOne(ctx context.Context, all *Store, p part, files map[string]bool) error {
	for _, h := range p.shards {
		h.Done = false
		if err := all.SetShard(h); err != nil {
			return err
		}
	}
	n, err := all.copyFrom(ctx, p.Store)
	m.Copied += n
	if err != nil {
		return err
	}
	for _, h := range p.shards {
		if h.Done {
			n, err := all.removeOthers(p, h, files)
			m.Removed += n
			if err != nil {
				return err
			}
		}
		if err := all.SetShard(h); err != nil {
			return err
		}
	}
	return nil
}

// among reports whether every part of the file is done and was merged as it is.
func (p part) among(merged map[int]Shard) bool {
	for _, h := range p.shards {
		if !h.Done || merged[h.K] != h {
			return false
		}
	}
	return true
}

// find lists the parts that are missing from the merged store.
func (m *Merged) find(all *Store, parts []part, inputs string) error {
	merged, err := all.shardsByNumber(m.Shards)
	if err != nil {
		return err
	}
	files := map[int]string{}
	for _, p := range parts {
		for _, h := range p.shards {
			files[h.K] = p.Path()
		}
	}
	for k := 1; k <= m.Shards; k++ {
		why := ""
		switch h, ok := merged[k]; {
		case !ok:
			why = "not found"
		case !h.Done:
			why = "not finished"
		case inputs != "" && h.Inputs != inputs:
			why = "merged before, of other data"
		default:
			continue
		}
		m.Missing = append(m.Missing, Missing{k, m.Shards, files[k], why})
	}
	return nil
}

// shardsByNumber are the parts of n that the store holds.
func (s *Store) shardsByNumber(n int) (map[int]Shard, error) {
	shards, err := s.Shards()
	if err != nil {
		return nil, err
	}
	byNumber := map[int]Shard{}
	for _, h := range shards {
		if h.N == n {
			byNumber[h.K] = h
		}
	}
	return byNumber, nil
}

// sourceFiles lists the files that rows come from.
func (s *Store) sourceFiles() (files []string, err error) {
	rows, err := s.db.Query("SELECT DISTINCT source_file FROM sets WHERE settings = ?", s.id)
	if err != nil {
		return nil, s.explain(err)
	}
	defer rows.Close()
	for rows.Next() {
		var file string
		if err := rows.Scan(&file); err != nil {
			return nil, s.explain(err)
		}
		files = append(files, file)
	}
	return files, s.explain(rows.Err())
}

// removeOthers deletes the data sets that belong to a part, come from files of the
// survey and are not in the store of the part: an earlier merge put them there, and
// their data are gone.
func (s *Store) removeOthers(p part, h Shard, files map[string]bool) (int, error) {
	p.mu.Lock()
	err := p.loadDone()
	p.mu.Unlock()
	if err != nil {
		return 0, err
	}
	rows, err := s.db.Query("SELECT key, source_file FROM sets WHERE settings = ?", s.id)
	if err != nil {
		return 0, s.explain(err)
	}
	defer rows.Close()
	var gone []Key
	for rows.Next() {
		var key []byte
		var file string
		if err := rows.Scan(&key, &file); err != nil {
			return 0, s.explain(err)
		}
		if len(key) != len(Key{}) {
			return 0, s.explain(errKeyLength)
		}
		k := Key(key)
		if _, there := p.done[k]; !there && k.part(h.K, h.N) && files[file] {
			gone = append(gone, k)
		}
	}
	if err := rows.Err(); err != nil || len(gone) == 0 {
		return 0, s.explain(err)
	}
	return len(gone), s.Remove(gone)
}

// copyRows and copyDocuments copy the rows of a part between two ids, and their
// documents as they are packed. ?1 is the settings here, ?2 there, ?3 and ?4 the ids.
var copyRows, copyDocuments = func() (string, string) {
	const between = " p.settings = ?2 AND p.id > ?3 AND p.id <= ?4"
	var set strings.Builder
	for _, name := range columns {
		fmt.Fprintf(&set, ", %[1]s = excluded.%[1]s", name)
	}
	names := strings.Join(columns, ", ")
	return "INSERT INTO main.sets (settings, key, content, position, " + names + ") SELECT ?1, key, content, position, " + names +
			" FROM part.sets AS p WHERE" + between +
			" ON CONFLICT (settings, key) DO UPDATE SET content = excluded.content, position = excluded.position" + set.String(),
		"INSERT OR REPLACE INTO main.assessments (id, document) SELECT s.id, a.document" +
			" FROM part.sets AS p JOIN main.sets AS s ON s.settings = ?1 AND s.key = p.key JOIN part.assessments AS a ON a.id = p.id WHERE" + between
}()

// dropDocuments deletes documents of rows that have none in the part.
const dropDocuments = `DELETE FROM main.assessments WHERE id IN (SELECT s.id
	FROM part.sets AS p JOIN main.sets AS s ON s.settings = ?1 AND s.key = p.key
	WHERE p.settings = ?2 AND p.id > ?3 AND p.id <= ?4 AND p.id NOT IN (SELECT id FROM part.assessments))`

// copied is the number of rows in one transaction of a merge.
const copied = 1000

// copyFrom copies every row and document of another store, in transactions between
// which it can be interrupted, and returns how many rows there were.
func (s *Store) copyFrom(ctx context.Context, from *Store) (n int, err error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.done = nil // of before
	// A transaction is short, and finished whatever becomes of the merge.
	whole := context.WithoutCancel(ctx)
	conn, err := s.db.Conn(whole)
	if err != nil {
		return 0, s.explain(err)
	}
	defer conn.Close()
	if err := from.attachTo(whole, conn); err != nil {
		return 0, err
	}
	defer func() {
		if _, e := conn.ExecContext(whole, "DETACH DATABASE part"); err == nil {
			err = s.explain(e)
		}
	}()
	for after := int64(0); ; {
		if ctx.Err() != nil {
			return n, context.Cause(ctx)
		}
		var last sql.NullInt64
		err := conn.QueryRowContext(whole, "SELECT max(id) FROM (SELECT id FROM part.sets WHERE settings = ? AND id > ? ORDER BY id LIMIT ?)",
			from.id, after, copied).Scan(&last)
		if err != nil {
			return n, from.explain(err)
		}
		if !last.Valid {
			return n, nil
		}
		rows, err := copyBetween(whole, conn, s.id, from.id, after, last.Int64)
		if err != nil {
			return n, s.explain(err)
		}
		n += int(rows)
		after = last.Int64
	}
}

// attachTo opens the store as "part" beside another one.
func (s *Store) attachTo(ctx context.Context, conn *sql.Conn) error {
	var err error
	for _, mode := range readModes(s.path) {
		u, e := address(s.path, mode)
		if e != nil {
			return e
		}
		if _, err = conn.ExecContext(ctx, "ATTACH DATABASE ? AS part", u.String()); err == nil || !isReadOnly(err) {
			break
		}
	}
	return s.explain(err)
}

// copyBetween copies in one transaction.
func copyBetween(ctx context.Context, conn *sql.Conn, to, from, after, last int64) (rows int64, err error) {
	tx, err := conn.BeginTx(ctx, nil)
	if err != nil {
		return 0, err
	}
	defer tx.Rollback() // after Commit it does nothing
	done, err := tx.ExecContext(ctx, copyRows, to, from, after, last)
	if err != nil {
		return 0, err
	}
	for _, statement := range []string{copyDocuments, dropDocuments} {
		if _, err := tx.ExecContext(ctx, statement, to, from, after, last); err != nil {
			return 0, err
		}
	}
	if rows, err = done.RowsAffected(); err != nil {
		return 0, err
	}
	return rows, tx.Commit()
}

// damage is what is wrong with the file, nil where it is whole.
func (s *Store) damage() error {
	var said string
	err := s.db.QueryRow("PRAGMA quick_check(1)").Scan(&said)
	if err == nil && said == "ok" {
		return nil
	}
	return fmt.Errorf("survey: the store %s: the file is damaged or cut short; remove it and survey its part again", s.path)
}
