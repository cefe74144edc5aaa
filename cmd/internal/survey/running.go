package survey

import (
	"database/sql"
	"errors"
	"fmt"
	"os"
	"syscall"
	"time"
)

// Running is a survey run that is at work on a store.
type Running struct {
	Host    string
	Process int
	Since   time.Time
}

func (r Running) String() string {
	return fmt.Sprintf("process %d on %s, since %s", r.Process, r.Host, r.Since.Format(time.DateTime))
}

// A run says every beat that it is still there. One that was killed says nothing any
// more: on this machine that is seen at once, of others after silence.
const (
	beat    = 15 * time.Second
	silence = 90 * time.Second
)

// runningTable came after the first stores: it is made when it is needed, and a program
// that does not know it passes it over.
const runningTable = `CREATE TABLE IF NOT EXISTS running (
	id INTEGER PRIMARY KEY,
	host TEXT NOT NULL,
	process INTEGER NOT NULL,
	since INTEGER NOT NULL,
	seen INTEGER NOT NULL
)`

// enter notes in the store that a run has begun, and lists those that are at work on it
// already. Of two that begin together the later sees the other: both are done in
// transactions. leave takes the note away.
func (s *Store) enter() (others []Running, leave func(), err error) {
	host, err := os.Hostname()
	if err != nil {
		host = "?" // a name to tell the user, no more
	}
	var id int64
	s.mu.Lock()
	defer s.mu.Unlock()
	err = s.inTransaction(func(tx *sql.Tx) error {
		if _, err := tx.Exec(runningTable); err != nil {
			return err
		}
		var gone []int64
		if others, gone, err = runningIn(tx); err != nil {
			return err
		}
		for _, id := range gone {
			if _, err := tx.Exec("DELETE FROM running WHERE id = ?", id); err != nil {
				return err
			}
		}
		now := time.Now().Unix()
		return tx.QueryRow("INSERT INTO running (host, process, since, seen) VALUES (?, ?, ?, ?) RETURNING id",
			host, os.Getpid(), now, now).Scan(&id)
	})
	if err != nil {
		return nil, nil, s.explain(err)
	}
	end, ended := make(chan struct{}), make(chan struct{})
	go func() {
		defer close(ended)
		tick := time.NewTicker(beat)
		defer tick.Stop()
		for {
			select {
			case <-tick.C:
				// Where this fails, storing results does too, and says so.
				s.note("UPDATE running SET seen = ?2 WHERE id = ?1", id, time.Now().Unix())
			case <-end:
				return
			}
		}
	}()
	return others, func() {
		close(end)
		<-ended
		s.note("DELETE FROM running WHERE id = ?", id) // or it is found gone later
	}, nil
}

func (s *Store) note(statement string, args ...any) {
	s.mu.Lock()
	defer s.mu.Unlock()
	_, _ = s.db.Exec(statement, args...)
}

// runningIn lists the runs that are at work, and the ids of those that no longer are.
func runningIn(q interface {
	Query(query string, args ...any) (*sql.Rows, error)
}) (at []Running, gone []int64, err error) {
	rows, err := q.Query("SELECT id, host, process, since, seen FROM running ORDER BY id")
	if err != nil {
		return nil, nil, err
	}
	defer rows.Close()
	here, _ := os.Hostname()
	for rows.Next() {
		var id, since, seen int64
		var r Running
		if err := rows.Scan(&id, &r.Host, &r.Process, &since, &seen); err != nil {
			return nil, nil, err
		}
		r.Since = time.Unix(since, 0)
		if time.Since(time.Unix(seen, 0)) > silence || r.Host == here && !alive(r.Process) {
			gone = append(gone, id)
			continue
		}
		at = append(at, r)
	}
	return at, gone, rows.Err()
}

// alive reports whether a process of this machine is there, or may be.
func alive(process int) bool {
	p, err := os.FindProcess(process)
	if err != nil {
		return false
	}
	defer p.Release()
	return !errors.Is(p.Signal(syscall.Signal(0)), os.ErrProcessDone)
}

// Running lists the survey runs that are at work on the store.
func (s *Store) Running() ([]Running, error) {
	var n int
	if err := s.db.QueryRow("SELECT count(*) FROM sqlite_schema WHERE name = 'running'").Scan(&n); err != nil || n == 0 {
		return nil, s.explain(err)
	}
	at, _, err := runningIn(s.db)
	return at, s.explain(err)
}
