package survey

import (
	"context"
	"database/sql"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"net/url"
	"os"
	"path/filepath"
	"reflect"
	"strconv"
	"strings"
	"sync"

	"modernc.org/sqlite"
	sqlite3 "modernc.org/sqlite/lib"
)

// storeVersion is the layout of a store, in PRAGMA user_version. applicationID marks
// a file as a store, in PRAGMA application_id: "1bar".
const (
	storeVersion  = 1
	applicationID = 0x31626172
)

// Key names a data set in a store: a hash of its file, sheet and name.
type Key [12]byte

// String gives the set id of the table.
func (k Key) String() string { return hex.EncodeToString(k[:]) }

// ParseKey reads a set id.
func ParseKey(id string) (k Key, ok bool) {
	b, err := hex.DecodeString(id)
	if err != nil || len(b) != len(k) {
		return k, false
	}
	return Key(b), true
}

// Content is a hash of everything of a data set that its assessment depends on, the
// settings apart. A data set is done where its key and content are in the store.
type Content [16]byte

// Entry is what a store keeps of one data set.
type Entry struct {
	Key     Key
	Content Content
	// Position orders the data sets of a sheet: the line of the first point, or of
	// the error.
	Position int
	Row      Row
	// Assessment is the JSON document, nil where there is none.
	Assessment []byte
}

// Shard says which part of a survey a store holds: part K of N, from 1; 1 of 1 is
// all.
type Shard struct {
	K, N int
	// Sets counts the rows of this part, Total those of all parts.
	Sets, Total int
	// Inputs is a hash of the keys and contents of all parts in the order they were
	// read: parts of one survey agree in it. "" until Done.
	Inputs string
	// Done: every data set of this part is stored.
	Done bool
}

// Store is one SQLite file (WAL, one writer at a time): a row of each data set, and
// its assessment, under the settings it was made with. After a crash or a full disk it
// holds every transaction that was finished, and nothing of others. It may be used
// from several goroutines.
type Store struct {
	path     string
	db       *sql.DB
	id       int64 // of the settings in use
	settings Settings

	mu   sync.Mutex
	done map[Key]Content // loaded by Done; nil before
	bad  map[Key]string  // error codes of those that failed, likewise

	forgets bool // see forget
}

// ErrNoStore is the error of a file that is no store.
var ErrNoStore = errors.New("not a store of a survey")

var errKeyLength = errors.New("a key has a wrong length: the file is damaged")

// SettingsError refuses a store that was made with other settings.
type SettingsError struct {
	Path        string
	Differences []string
}

func (e *SettingsError) Error() string {
	return fmt.Sprintf("%s was made with other settings (%s); give the same settings, name a new store, or keep both results in it with --again",
		e.Path, strings.Join(e.Differences, "; "))
}

// schema is the layout of the store. Assessments lie in a table of their own, so that
// the rows can be read without them.
var schema = func() string {
	var b strings.Builder
	b.WriteString(`
CREATE TABLE settings (
	id INTEGER PRIMARY KEY,
	hash BLOB NOT NULL UNIQUE,
	json TEXT NOT NULL
);
CREATE TABLE shards (
	settings INTEGER NOT NULL REFERENCES settings(id),
	k INTEGER NOT NULL,
	n INTEGER NOT NULL,
	sets INTEGER NOT NULL,
	total INTEGER NOT NULL,
	inputs TEXT NOT NULL,
	done INTEGER NOT NULL,
	UNIQUE (settings, k, n)
);
CREATE TABLE assessments (
	id INTEGER PRIMARY KEY,
	document BLOB NOT NULL
);
CREATE TABLE sets (
	id INTEGER PRIMARY KEY,
	settings INTEGER NOT NULL REFERENCES settings(id),
	key BLOB NOT NULL,
	content BLOB NOT NULL,
	position INTEGER NOT NULL`)
	for i, name := range columns {
		kind := map[reflect.Kind]string{reflect.String: "TEXT NOT NULL", reflect.Int: "INTEGER", reflect.Float64: "REAL"}[kinds[i]]
		if kind == "" {
			kind = "INTEGER" // true or false
		}
		fmt.Fprintf(&b, ",\n\t%s %s", name, kind)
	}
	b.WriteString(",\n\tUNIQUE (settings, key)\n);\n")
	fmt.Fprintf(&b, "PRAGMA application_id = %d;\nPRAGMA user_version = %d;\n", applicationID, storeVersion)
	return b.String()
}()

// order is that of the table: it depends on the data alone.
const order = "source_file, sheet, position, dataset, key"

// Create opens a store for writing, made first where it does not exist. A store that
// was made with other settings is refused with a SettingsError.
func Create(path string, settings Settings) (*Store, error) { return create(path, settings, false) }

// CreateAgain is Create, but results of other settings are kept beside.
func CreateAgain(path string, settings Settings) (*Store, error) {
	return create(path, settings, true)
}

func create(path string, settings Settings, again bool) (*Store, error) {
	s, err := open(path, "rwc")
	if err != nil {
		return nil, err
	}
	if err := s.begin(settings, again); err != nil {
		s.db.Close()
		return nil, s.explain(err)
	}
	return s, nil
}

// Open opens an existing store for reading. It holds the results of one setting; of
// several the one that was used last, or that which choice names by its number.
func Open(path string) (*Store, error) { return OpenSettings(path, 0) }

// OpenSettings is Open with the settings of one number; 0 takes the last.
func OpenSettings(path string, choice int) (*Store, error) {
	if _, err := os.Stat(path); err != nil {
		return nil, fmt.Errorf("survey: the store %s cannot be opened: %w; survey run makes one", path, reason(err))
	}
	s, err := openToRead(path)
	if err != nil {
		return nil, err
	}
	if err := s.choose(choice); err != nil {
		s.db.Close()
		return nil, s.explain(err)
	}
	return s, nil
}

// openToRead opens a store that may lie where nothing can be written.
func openToRead(path string) (s *Store, err error) {
	for _, mode := range readModes(path) {
		if s, err = open(path, mode); err == nil || !isReadOnly(err) {
			return s, err
		}
	}
	return nil, err
}

// readModes are the modes of address to try one after the other. A store in a folder
// that cannot be written to can be read as it is where no run has left its last
// transactions beside it, in a file that SQLite would have to work in.
func readModes(path string) []string {
	if left, err := os.Stat(path + "-wal"); err == nil && left.Size() > 0 {
		return []string{"rw", "ro"}
	}
	return []string{"rw", "ro", "ro&immutable=1"}
}

func isReadOnly(err error) bool {
	var e *sqlite.Error
	return errors.As(err, &e) && (e.Code()&0xff == sqlite3.SQLITE_READONLY || e.Code()&0xff == sqlite3.SQLITE_CANTOPEN)
}

// address is how SQLite is told to open a file: mode is ro, rw or rwc, or one of
// readModes.
func address(path, mode string) (*url.URL, error) {
	abs, err := filepath.Abs(path)
	if err != nil {
		return nil, fmt.Errorf("survey: %w", err)
	}
	if info, err := os.Stat(abs); err == nil && info.IsDir() {
		return nil, fmt.Errorf("survey: the store %s is a folder; name a file, such as results.sqlite", path)
	}
	abs = filepath.ToSlash(abs)
	if !strings.HasPrefix(abs, "/") {
		abs = "/" + abs // C:/…
	}
	return &url.URL{Scheme: "file", Path: abs, RawQuery: "mode=" + mode}, nil
}

// open connects to the file and checks that it is a store, or empty.
func open(path, mode string) (*Store, error) {
	s := &Store{path: path}
	u, err := address(path, mode)
	if err != nil {
		return nil, err
	}
	// Two surveys may write to one store: each waits for the other's transaction.
	u.RawQuery += "&_txlock=immediate&_pragma=busy_timeout(60000)&_pragma=synchronous(NORMAL)&_pragma=foreign_keys(0)"
	if s.db, err = sql.Open("sqlite", u.String()); err != nil {
		return nil, fmt.Errorf("survey: %w", err)
	}
	if err := s.check(mode == "rwc"); err != nil {
		s.db.Close()
		if mode != "rwc" && isReadOnly(err) {
			f, e := os.Open(path)
			if e != nil {
				return nil, fmt.Errorf("survey: the store %s cannot be opened: %w; check your right to read it", path, reason(e))
			}
			f.Close() // no connection is left whose locks this would take away
			return nil, fmt.Errorf("survey: the store %s cannot be opened where it is: a run that was cut off has left %s-wal, or it is in use; copy both into a folder you can write to (%w)",
				path, filepath.Base(path), err)
		}
		return nil, s.explain(err)
	}
	return s, nil
}

// check reads the marks of the file, and makes an empty file a store.
func (s *Store) check(mayMake bool) error {
	var id, version, tables int
	for _, q := range []struct {
		text string
		to   *int
	}{
		{"SELECT count(*) FROM sqlite_schema", &tables}, // first: the marks come with the tables
		{"PRAGMA application_id", &id},
		{"PRAGMA user_version", &version},
	} {
		if err := s.db.QueryRow(q.text).Scan(q.to); err != nil {
			return err
		}
	}
	switch {
	case id == applicationID && version > storeVersion:
		return fmt.Errorf("its layout is version %d, and this program knows %d; use the program that made it, or a newer one", version, storeVersion)
	case id == applicationID:
		return s.whole()
	case id != 0 || tables > 0 || !mayMake || s.tooShort():
		return fmt.Errorf("%w; name a new file, or one that survey run made", ErrNoStore)
	}
	if _, err := s.db.Exec("PRAGMA journal_mode = WAL"); err != nil {
		return err
	}
	return s.inTransaction(func(tx *sql.Tx) error {
		// Another survey may have made it meanwhile.
		if err := tx.QueryRow("SELECT count(*) FROM sqlite_schema").Scan(&tables); err != nil || tables > 0 {
			return err
		}
		_, err := tx.Exec(schema)
		return err
	})
}

// tooShort reports whether a file that is not empty is shorter than the least page of
// SQLite, which would write over some of these. It is not opened: closing it would
// take away the locks of other connections.
func (s *Store) tooShort() bool {
	info, err := os.Stat(s.path)
	return err == nil && info.Size() > 0 && info.Size() < 512
}

// whole refuses a file that was cut within its last page, which SQLite would fill up
// with zeros. A page that is half written there after a crash is in the -wal file.
func (s *Store) whole() error {
	var page int64
	if err := s.db.QueryRow("PRAGMA page_size").Scan(&page); err != nil {
		return err
	}
	info, err := os.Stat(s.path)
	if err != nil {
		return reason(err)
	}
	if left, err := os.Stat(s.path + "-wal"); err == nil && left.Size() > 0 || info.Size()%page == 0 {
		return nil
	}
	return errors.New("the file is cut short; " + cureDamaged)
}

const cureDamaged = "take a copy of it from before, or name a new store"

// begin finds or adds the settings.
func (s *Store) begin(settings Settings, again bool) error {
	sum := settings.sum()
	text, err := json.Marshal(settings)
	if err != nil {
		return err
	}
	s.settings = settings
	return s.inTransaction(func(tx *sql.Tx) error {
		err := tx.QueryRow("SELECT id FROM settings WHERE hash = ?", sum[:]).Scan(&s.id)
		if !errors.Is(err, sql.ErrNoRows) {
			return err
		}
		var last string
		err = tx.QueryRow("SELECT json FROM settings ORDER BY id DESC LIMIT 1").Scan(&last)
		if err == nil && !again {
			var other Settings
			if err := json.Unmarshal([]byte(last), &other); err != nil {
				return err
			}
			return &SettingsError{s.path, settings.Differences(other)}
		}
		if err != nil && !errors.Is(err, sql.ErrNoRows) {
			return err
		}
		return tx.QueryRow("INSERT INTO settings (hash, json) VALUES (?, ?) RETURNING id", sum[:], text).Scan(&s.id)
	})
}

// choose takes the settings of one number, 0 for those added last.
func (s *Store) choose(choice int) error {
	var text []byte
	err := s.db.QueryRow("SELECT id, json FROM settings WHERE id = ?1 OR ?1 = 0 ORDER BY id DESC LIMIT 1", choice).Scan(&s.id, &text)
	if errors.Is(err, sql.ErrNoRows) {
		if choice == 0 {
			return nil // made, and nothing stored
		}
		return fmt.Errorf("it has no settings number %d; survey status lists them", choice)
	}
	if err != nil {
		return err
	}
	return json.Unmarshal(text, &s.settings)
}

// Path is the name of the file as it was given.
func (s *Store) Path() string { return s.path }

// Settings are those whose results are read and written.
func (s *Store) Settings() Settings { return s.settings }

// Number is that of the settings in use, as OpenSettings takes it.
func (s *Store) Number() int { return int(s.id) }

// AllSettings lists the settings of all results in the store, by their numbers.
func (s *Store) AllSettings() (map[int]Settings, error) {
	rows, err := s.db.Query("SELECT id, json FROM settings")
	if err != nil {
		return nil, s.explain(err)
	}
	defer rows.Close()
	all := map[int]Settings{}
	for rows.Next() {
		var id int
		var text []byte
		var settings Settings
		if err := rows.Scan(&id, &text); err != nil {
			return nil, s.explain(err)
		}
		if err := json.Unmarshal(text, &settings); err != nil {
			return nil, s.explain(err)
		}
		all[id] = settings
	}
	return all, s.explain(rows.Err())
}

// forget says whether Done need not tell of rows that are put later, as for a run, which
// asks for each data set once: their keys are half of what a run keeps in memory.
func (s *Store) forget(yes bool) {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.done, s.forgets = nil, yes
}

// Done reports whether a data set of this content is in the store. The first call
// reads all keys. Rows that are put later count too.
func (s *Store) Done(key Key, content Content) (bool, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	if err := s.loadDone(); err != nil {
		return false, err
	}
	c, ok := s.done[key]
	return ok && c == content, nil
}

func (s *Store) loadDone() error {
	if s.done != nil {
		return nil
	}
	var n int
	if err := s.db.QueryRow("SELECT count(*) FROM sets WHERE settings = ?", s.id).Scan(&n); err != nil {
		return s.explain(err)
	}
	done := make(map[Key]Content, n)
	bad := map[Key]string{}
	rows, err := s.db.Query("SELECT key, content, error_code FROM sets WHERE settings = ?", s.id)
	if err != nil {
		return s.explain(err)
	}
	defer rows.Close()
	var key, content, code sql.RawBytes
	for rows.Next() {
		if err := rows.Scan(&key, &content, &code); err != nil {
			return s.explain(err)
		}
		if len(key) != len(Key{}) || len(content) != len(Content{}) {
			return s.explain(errKeyLength)
		}
		done[Key(key)] = Content(content)
		if len(code) > 0 {
			bad[Key(key)] = string(code)
		}
	}
	if err := rows.Err(); err != nil {
		return s.explain(err)
	}
	s.done, s.bad = done, bad
	return nil
}

// failed is the error code that the store has for a data set, "" if none.
func (s *Store) failed(key Key) string {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.bad[key]
}

// put is the statement that writes a row. One that is there is replaced and keeps its
// id, so that its assessment is replaced too.
var put = func() string {
	var set strings.Builder
	for _, name := range columns {
		fmt.Fprintf(&set, ", %[1]s = excluded.%[1]s", name)
	}
	return "INSERT INTO sets (settings, key, content, position, " + strings.Join(columns, ", ") + ") VALUES (?, ?, ?, ?" +
		strings.Repeat(", ?", len(columns)) + ") ON CONFLICT (settings, key) DO UPDATE SET content = excluded.content, position = excluded.position" +
		set.String() + " RETURNING id"
}()

// Put writes entries in one transaction: all of them, or none. An entry whose key is
// there replaces it.
func (s *Store) Put(entries []Entry) error {
	if len(entries) == 0 {
		return nil
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	err := s.inTransaction(func(tx *sql.Tx) error {
		row, err := tx.Prepare(put)
		if err != nil {
			return err
		}
		defer row.Close()
		document, err := tx.Prepare("INSERT OR REPLACE INTO assessments (id, document) VALUES (?, ?)")
		if err != nil {
			return err
		}
		defer document.Close()
		var values []any
		var packed []byte
		for i := range entries {
			e := &entries[i]
			values = append(values[:0], s.id, e.Key[:], e.Content[:], e.Position)
			values = e.Row.appendValues(values)
			var id int64
			if err := row.QueryRow(values...).Scan(&id); err != nil {
				return err
			}
			if e.Assessment == nil {
				if _, err := tx.Exec("DELETE FROM assessments WHERE id = ?", id); err != nil {
					return err
				}
				continue
			}
			packed = pack(e.Assessment, packed[:0])
			if _, err := document.Exec(id, packed); err != nil {
				return err
			}
		}
		return nil
	})
	if err != nil {
		return s.explain(err)
	}
	if s.done != nil {
		for i := range entries {
			e := &entries[i]
			if _, old := s.done[e.Key]; s.forgets && !old {
				continue
			}
			s.done[e.Key] = e.Content
			if delete(s.bad, e.Key); e.Row.ErrorCode != "" {
				s.bad[e.Key] = e.Row.ErrorCode
			}
		}
	}
	return nil
}

// Remove deletes data sets and their assessments in one transaction.
func (s *Store) Remove(keys []Key) error {
	s.mu.Lock()
	defer s.mu.Unlock()
	err := s.inTransaction(func(tx *sql.Tx) error {
		for _, k := range keys {
			if _, err := tx.Exec("DELETE FROM assessments WHERE id IN (SELECT id FROM sets WHERE settings = ? AND key = ?)", s.id, k[:]); err != nil {
				return err
			}
			if _, err := tx.Exec("DELETE FROM sets WHERE settings = ? AND key = ?", s.id, k[:]); err != nil {
				return err
			}
		}
		return nil
	})
	if err != nil {
		return s.explain(err)
	}
	for _, k := range keys {
		delete(s.done, k)
	}
	return nil
}

// Rows calls fn with every row in the order of the table: source file, sheet,
// place in it. It stops at the first error of fn and returns it. fn may use the store.
func (s *Store) Rows(ctx context.Context, fn func(Row) error) error {
	return s.query(ctx, false, "ORDER BY "+order, func(e Entry) error { return fn(e.Row) })
}

// Find returns the rows whose data set has this name, or whose set id it is; else
// those of the file of this name, or whose path ends with it. They are in the order
// of the table.
func (s *Store) Find(ctx context.Context, name string) ([]Row, error) {
	var found []Row
	keep := func(e Entry) error { found = append(found, e.Row); return nil }
	err := s.query(ctx, false, "AND (dataset = ?2 OR set_id = ?2) ORDER BY "+order, keep, name)
	if err != nil || len(found) > 0 {
		return found, err
	}
	err = s.query(ctx, false, "AND (source_file = ?2 OR substr(source_file, -length(?3)) = ?3) ORDER BY "+order,
		keep, slashed(name), "/"+slashed(name))
	return found, err
}

// slashed is a path as rows have it.
func slashed(path string) string { return filepath.ToSlash(filepath.Clean(path)) }

// SameFile reports whether the source file of a row is the one that a path names, or
// ends with it.
func SameFile(source, path string) bool {
	return source == path || source == slashed(path) || strings.HasSuffix(source, "/"+slashed(path))
}

// Entries calls fn with every entry, in no order that can be relied on. Its documents
// are unpacked.
func (s *Store) Entries(ctx context.Context, fn func(Entry) error) error {
	return s.query(ctx, true, "", fn)
}

func (s *Store) query(ctx context.Context, documents bool, rest string, fn func(Entry) error, args ...any) error {
	from, document := "sets", "NULL"
	if documents {
		from, document = "sets LEFT JOIN assessments USING (id)", "document"
	}
	rows, err := s.db.QueryContext(ctx, "SELECT key, content, position, "+document+", "+strings.Join(columns, ", ")+
		" FROM "+from+" WHERE settings = ?1 "+rest, append([]any{s.id}, args...)...)
	if err != nil {
		return s.explain(err)
	}
	defer rows.Close()
	for rows.Next() {
		e := Entry{Row: emptyRow()}
		var key, content, packed sql.RawBytes
		to := e.Row.destinations([]any{&key, &content, &e.Position, &packed})
		if err := rows.Scan(to...); err != nil {
			return s.explain(err)
		}
		if len(key) != len(Key{}) || len(content) != len(Content{}) {
			return s.explain(errKeyLength)
		}
		e.Key, e.Content = Key(key), Content(content)
		if packed != nil {
			if e.Assessment, err = unpack(packed); err != nil {
				return s.explain(err)
			}
		}
		if err := fn(e); err != nil {
			return err
		}
	}
	return s.explain(rows.Err())
}

// Assessment returns the JSON document of a data set, nil where it has none.
func (s *Store) Assessment(setID string) ([]byte, error) {
	key, ok := ParseKey(setID)
	if !ok {
		return nil, fmt.Errorf("survey: %q is not a set id; survey table lists them", setID)
	}
	var packed []byte
	err := s.db.QueryRow("SELECT document FROM sets LEFT JOIN assessments USING (id) WHERE settings = ? AND key = ?", s.id, key[:]).Scan(&packed)
	if errors.Is(err, sql.ErrNoRows) {
		return nil, fmt.Errorf("survey: %s holds no data set %s; survey table lists them", s.path, setID)
	}
	if err != nil {
		return nil, s.explain(err)
	}
	if packed == nil {
		return nil, nil
	}
	document, err := unpack(packed)
	return document, s.explain(err)
}

// SetShard records which part of a survey this is, and how far it is.
func (s *Store) SetShard(h Shard) error {
	s.mu.Lock()
	defer s.mu.Unlock()
	_, err := s.db.Exec("INSERT OR REPLACE INTO shards (settings, k, n, sets, total, inputs, done) VALUES (?, ?, ?, ?, ?, ?, ?)",
		s.id, h.K, h.N, h.Sets, h.Total, h.Inputs, h.Done)
	return s.explain(err)
}

// Shards lists the parts of a survey that the store holds.
func (s *Store) Shards() ([]Shard, error) {
	rows, err := s.db.Query("SELECT k, n, sets, total, inputs, done FROM shards WHERE settings = ? ORDER BY n, k", s.id)
	if err != nil {
		return nil, s.explain(err)
	}
	defer rows.Close()
	var all []Shard
	for rows.Next() {
		var h Shard
		if err := rows.Scan(&h.K, &h.N, &h.Sets, &h.Total, &h.Inputs, &h.Done); err != nil {
			return nil, s.explain(err)
		}
		all = append(all, h)
	}
	return all, s.explain(rows.Err())
}

// Close closes the file. What was put is in it already.
func (s *Store) Close() error { return s.explain(s.db.Close()) }

func (s *Store) inTransaction(work func(*sql.Tx) error) error {
	tx, err := s.db.Begin()
	if err != nil {
		return err
	}
	if err := work(tx); err != nil {
		tx.Rollback() // the reason is err; after a full disk it was rolled back already
		return err
	}
	return tx.Commit()
}

// explain puts the name of the store and a cure to an error.
func (s *Store) explain(err error) error {
	if err == nil {
		return nil
	}
	var other *SettingsError
	if errors.As(err, &other) || errors.Is(err, context.Canceled) || errors.Is(err, context.DeadlineExceeded) {
		return err
	}
	var e *sqlite.Error
	if !errors.As(err, &e) {
		return fmt.Errorf("survey: the store %s: %w", s.path, err)
	}
	what, code := "", e.Code()&0xff
	if e.Code() == sqlite3.SQLITE_IOERR_SHMSIZE { // the file that connections share cannot grow
		code = sqlite3.SQLITE_FULL
	}
	switch code {
	case sqlite3.SQLITE_FULL:
		what = "the disk is full; free space and give the same command again: what was finished is kept"
	case sqlite3.SQLITE_NOTADB:
		return fmt.Errorf("survey: the store %s: %w; name a new file, or one that survey run made", s.path, ErrNoStore)
	case sqlite3.SQLITE_CORRUPT:
		what = "the file is damaged or cut short; " + cureDamaged
	case sqlite3.SQLITE_READONLY:
		what = "it cannot be written to; name a store in a folder you can write to"
	case sqlite3.SQLITE_CANTOPEN:
		what = "it cannot be opened; check its folder, and whether you may write there"
	case sqlite3.SQLITE_BUSY:
		what = "another program holds it; wait until that is done"
	case sqlite3.SQLITE_IOERR:
		what = "reading or writing it failed; check the disk, and give the same command again: what was finished is kept"
	}
	if what == "" {
		return fmt.Errorf("survey: the store %s: %w", s.path, err)
	}
	return fmt.Errorf("survey: the store %s: %s (%w)", s.path, what, err)
}

// reason is the cause of an error without the name of the file, which is said
// already.
func reason(err error) error {
	var pe *fs.PathError
	if errors.As(err, &pe) {
		return pe.Err
	}
	return err
}

// destinations appends what the columns of a row are scanned into.
func (r *Row) destinations(to []any) []any {
	v := reflect.ValueOf(r).Elem()
	for i, kind := range kinds {
		p := v.Field(i).Addr().Interface()
		switch kind {
		case reflect.Int:
			p = orUnknown[int]{p.(*int), UnknownCount}
		case reflect.Float64:
			p = orUnknown[float64]{p.(*float64), math.NaN()}
		}
		to = append(to, p)
	}
	return to
}

// orUnknown scans a number that may be NULL.
type orUnknown[T int | float64] struct {
	to      *T
	unknown T
}

func (o orUnknown[T]) Scan(src any) error {
	switch v := src.(type) {
	case nil:
		*o.to = o.unknown
	case int64:
		*o.to = T(v)
	case float64:
		*o.to = T(v)
	case []byte: // a number that somebody wrote into the file as text
		x, err := strconv.ParseFloat(string(v), 64)
		*o.to = T(x)
		return err
	default:
		return fmt.Errorf("%v is not a number", src)
	}
	return nil
}

// without lists the data sets of some files that are not among those seen.
func (s *Store) without(seen map[Key]bool, files map[string]bool) ([]Key, error) {
	s.mu.Lock()
	err := s.loadDone()
	var odd map[Key]bool
	for k := range s.done {
		if !seen[k] {
			if odd == nil {
				odd = map[Key]bool{}
			}
			odd[k] = true
		}
	}
	s.mu.Unlock()
	if err != nil || odd == nil {
		return nil, err
	}
	rows, err := s.db.Query("SELECT key, source_file FROM sets WHERE settings = ?", s.id)
	if err != nil {
		return nil, s.explain(err)
	}
	defer rows.Close()
	var stale []Key
	for rows.Next() {
		var key []byte
		var file string
		if err := rows.Scan(&key, &file); err != nil {
			return nil, s.explain(err)
		}
		if len(key) == len(Key{}) && odd[Key(key)] && files[file] {
			stale = append(stale, Key(key))
		}
	}
	return stale, s.explain(rows.Err())
}
