package cli

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"os/signal"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"
	"time"

	"onebarrier/cmd/internal/report/schematest"
	"onebarrier/cmd/internal/survey"
)

// Stores and folders as a system can make them: without rights, full, cut short, in use.
// The errors are those of the system and of SQLite themselves.

func init() {
	children["small-disk"], children["small-files"] = onSmallDisk, withSmallFiles
}

// child is this test binary as a process of its own.
func child(t *testing.T, work, dir string, args ...string) *exec.Cmd {
	t.Helper()
	self, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.CommandContext(t.Context(), self, args...)
	cmd.Dir = dir
	cmd.Env = append(os.Environ(), "ONEBARRIER_TEST_CHILD="+work)
	return cmd
}

func finished(t *testing.T, cmd *exec.Cmd) (code int, out, errOut string) {
	t.Helper()
	var o, e bytes.Buffer
	cmd.Stdout, cmd.Stderr = &o, &e
	var exit *exec.ExitError
	if err := cmd.Run(); err != nil && !errors.As(err, &exit) {
		t.Fatal(err)
	}
	return cmd.ProcessState.ExitCode(), o.String(), e.String()
}

// withoutRights runs commands as a user who may do no more than the modes of files
// say. root may do all, and becomes nobody.
type withoutRights struct {
	*testing.T
	dir  string // that nobody may look into
	self string // a copy of this binary that nobody may run
}

func asNobody(t *testing.T) *withoutRights {
	t.Helper()
	dir, err := os.MkdirTemp("", "survey")
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		_ = filepath.WalkDir(dir, func(path string, e os.DirEntry, _ error) error {
			if e != nil && e.IsDir() {
				return os.Chmod(path, 0o755)
			}
			return nil
		})
		if err := os.RemoveAll(dir); err != nil {
			t.Error(err)
		}
	})
	self, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	n := &withoutRights{t, dir, filepath.Join(dir, "onebarrier.test")}
	data, err := os.ReadFile(self)
	if err := errors.Join(err, os.Chmod(dir, 0o755), os.WriteFile(n.self, data, 0o755)); err != nil {
		t.Fatal(err)
	}
	return n
}

func (n *withoutRights) run(args ...string) (code int, out, errOut string) {
	n.Helper()
	cmd := child(n.T, "run", n.dir, args...)
	cmd.Path = n.self
	if os.Getuid() == 0 {
		cmd.SysProcAttr = &syscall.SysProcAttr{Credential: &syscall.Credential{Uid: 65534, Gid: 65534}}
	}
	return finished(n.T, cmd)
}

// modes sets what may be done with files below the folder.
func (n *withoutRights) modes(mode os.FileMode, names ...string) {
	n.Helper()
	for _, name := range names {
		if err := os.Chmod(filepath.Join(n.dir, name), mode); err != nil {
			n.Fatal(err)
		}
	}
}

// What may not be read is a row, and the others are assessed.
func TestSurveyUnreadable(t *testing.T) {
	n := asNobody(t)
	data := filepath.Join(n.dir, "data")
	const text = "T/K,k/s^-1\n300,1\n310,2.1\n320,4.3\n"
	for _, name := range []string{"a.csv", "secret/b.csv", "locked.csv", "z/c.csv"} {
		name = filepath.Join(data, name)
		if err := errors.Join(os.MkdirAll(filepath.Dir(name), 0o755), os.WriteFile(name, []byte(text), 0o644)); err != nil {
			t.Fatal(err)
		}
	}
	if err := os.MkdirAll(filepath.Join(n.dir, "out"), 0o777); err != nil {
		t.Fatal(err)
	}
	n.modes(0o777, "out")
	n.modes(0, "data/secret", "data/locked.csv")
	code, out, errOut := n.run("survey", "run", "data", "--store", "out/s.sqlite", "--resamples", "0")
	if code != exitPartial || !strings.Contains(out, "4 data sets in 4 files\nstored now: 4;") || !strings.Contains(out, "2  read-failed") {
		t.Errorf("exit code %d\n%s%s", code, out, errOut)
	}
	code, out, _ = n.run("survey", "table", "--store", "out/s.sqlite", "--format", "csv")
	for _, want := range []string{
		"read-failed,permission denied; check its name and your right to read it",
		",a,data/a.csv,", ",c,data/z/c.csv,", ",,data/secret,", ",,data/locked.csv,",
	} {
		if code != exitDone || !strings.Contains(out, want) {
			t.Errorf("exit code %d, the table lacks %q:\n%s", code, want, out)
		}
	}
	// With the right to read them, they are assessed and the row of the folder goes.
	n.modes(0o755, "data/secret")
	n.modes(0o644, "data/locked.csv")
	if code, out, errOut = n.run("survey", "run", "data", "--store", "out/s.sqlite", "--resamples", "0"); code != exitDone || !strings.Contains(out, "stored now: 2; in the store before: 2\n") {
		t.Errorf("exit code %d\n%s%s", code, out, errOut)
	}
	_, out, _ = n.run("survey", "status", "--store", "out/s.sqlite")
	if !strings.HasPrefix(out, "out/s.sqlite: 4 data sets of 4 files\n") || strings.Contains(out, "read-failed") {
		t.Errorf("status:\n%s", out)
	}
}

// A store that may not be written to can be read where it lies, is left as it is, and a
// run says what is wrong.
func TestSurveyReadOnlyStore(t *testing.T) {
	n := asNobody(t)
	t.Chdir(n.dir)
	writeArchive(t, "data", 3)
	for _, dir := range []string{"ro", "left"} {
		if err := os.Mkdir(dir, 0o755); err != nil {
			t.Fatal(err)
		}
	}
	survey1 := func(store string) []string {
		return []string{"survey", "run", "data", "--store", store, "--resamples", "0"}
	}
	if code, out, errOut := run(t, "", survey1("ro/s.sqlite")...); code != exitPartial {
		t.Fatalf("exit code %d\n%s%s", code, out, errOut)
	}
	reading := [][]string{
		{"survey", "status", "--store", "ro/s.sqlite"}, {"survey", "table", "--store", "ro/s.sqlite", "--format", "jsonl"},
		{"survey", "show", "set 1", "--store", "ro/s.sqlite", "--json"},
	}
	var want []string
	for _, args := range reading {
		_, out, _ := run(t, "", args...)
		want = append(want, out)
	}
	// A run that was cut off leaves transactions beside the store.
	open, err := survey.Open("ro/s.sqlite")
	if err != nil {
		t.Fatal(err)
	}
	if err := open.SetShard(survey.Shard{K: 1, N: 1}); err != nil {
		t.Fatal(err)
	}
	if err := errors.Join(copyFile("ro/s.sqlite", "left/s.sqlite"), copyFile("ro/s.sqlite-wal", "left/s.sqlite-wal"), open.Close()); err != nil {
		t.Fatal(err)
	}
	if code, _, errOut := run(t, "", survey1("ro/s.sqlite")...); code != exitPartial {
		t.Fatal(errOut)
	}
	before := contents(t, "ro/s.sqlite")
	n.modes(0o444, "ro/s.sqlite", "left/s.sqlite", "left/s.sqlite-wal")
	n.modes(0o555, "ro", "left")

	for i, args := range reading {
		if code, out, errOut := n.run(args...); code != exitDone || out != want[i] || errOut != "" {
			t.Errorf("%q: exit code %d, stderr %s, stdout\n%s\nwant\n%s", args, code, errOut, out, want[i])
		}
	}
	for _, c := range []struct {
		args []string
		want string
	}{
		{survey1("ro/s.sqlite"), "the store ro/s.sqlite: it cannot be written to; name a store in a folder you can write to"},
		{survey1("ro/new.sqlite"), "the store ro/new.sqlite: it cannot be opened; check its folder, and whether you may write there"},
		{[]string{"survey", "merge", "--store", "ro/all.sqlite", "ro/s.sqlite"}, "the store ro/all.sqlite: it cannot be opened"},
		{[]string{"survey", "table", "--store", "left/s.sqlite"}, "a run that was cut off has left s.sqlite-wal, or it is in use; copy both into a folder you can write to"},
	} {
		code, out, errOut := n.run(c.args...)
		if code != exitFailed || out != "" || !strings.Contains(errOut, c.want) {
			t.Errorf("%q: exit code %d, stderr %s\nwant %s\nstdout %s", c.args, code, errOut, c.want, out)
		}
	}
	code, out, _ := n.run(append(survey1("ro/s.sqlite"), "--json")...)
	if err := schematest.Validate("problems", []byte(out)); code != exitFailed || err != nil {
		t.Errorf("--json: exit code %d, %v\n%s", code, err, out)
	}
	if contents(t, "ro/s.sqlite") != before {
		t.Error("the store was changed")
	}
	n.modes(0, "ro/s.sqlite")
	if code, _, errOut := n.run(reading[0]...); code != exitFailed || !strings.Contains(errOut, "permission denied; check your right to read it") {
		t.Errorf("unreadable: exit code %d, %s", code, errOut)
	}
	left, err := os.ReadDir("ro")
	if err != nil || len(left) != 1 {
		t.Errorf("beside the store: %v, %v", left, err)
	}
	// The copy with both files is read, as the message says.
	if err := errors.Join(copyFile("left/s.sqlite", "s.sqlite"), copyFile("left/s.sqlite-wal", "s.sqlite-wal")); err != nil {
		t.Fatal(err)
	}
	if code, out, _ := run(t, "", "survey", "status", "--store", "s.sqlite"); code != exitDone || !strings.Contains(out, "all data sets: not complete") {
		t.Errorf("exit code %d\n%s", code, out)
	}
}

func copyFile(from, to string) error {
	data, err := os.ReadFile(from)
	return errors.Join(err, os.WriteFile(to, data, 0o644))
}

// onSmallDisk makes a small disk of the folder "disk", runs a survey into it until it is
// full, and again when there is room. It prints what each run came to.
func onSmallDisk() int {
	size := os.Args[1]
	fail := func(err error) int {
		fmt.Fprintln(os.Stderr, err)
		return 99
	}
	if err := syscall.Mount("none", "disk", "tmpfs", 0, "size="+size); err != nil {
		return fail(fmt.Errorf("mount: %w", err))
	}
	for _, room := range []string{"", "64m"} {
		if room != "" {
			if err := syscall.Mount("none", "disk", "tmpfs", syscall.MS_REMOUNT, "size="+room); err != nil {
				return fail(err)
			}
		}
		var out, errOut bytes.Buffer
		code := Main(context.Background(), os.Args[2:], strings.NewReader(""), &out, &errOut)
		fmt.Printf("exit code %d, %s, %s\n", code, strings.ReplaceAll(out.String(), "\n", "|"), strings.TrimSpace(errOut.String()))
	}
	if err := copyFile("disk/s.sqlite", "got.sqlite"); err != nil {
		return fail(err)
	}
	return 0
}

// A disk that fills up ends a run with its reason. What was stored stays, and the same
// command goes on when there is room.
func TestSurveyFullDisk(t *testing.T) {
	dir := t.TempDir()
	t.Chdir(dir)
	writeArchive(t, "data", 150)
	if err := os.Mkdir("disk", 0o777); err != nil {
		t.Fatal(err)
	}
	if code, _, errOut := run(t, "", "survey", "run", "data", "--store", "whole.sqlite", "--resamples", "0"); code != exitPartial {
		t.Fatal(errOut)
	}
	want := tables(t, "whole.sqlite")
	stored := false
	for _, size := range []string{"8k", "64k", "300k", "600k"} {
		cmd := child(t, "small-disk", dir, size, "survey", "run", "data", "--store", "disk/s.sqlite", "--resamples", "0")
		cmd.SysProcAttr = &syscall.SysProcAttr{Unshareflags: syscall.CLONE_NEWNS}
		if os.Getuid() != 0 {
			cmd.SysProcAttr.Cloneflags = syscall.CLONE_NEWUSER
			cmd.SysProcAttr.UidMappings = []syscall.SysProcIDMap{{ContainerID: 0, HostID: os.Getuid(), Size: 1}}
			cmd.SysProcAttr.GidMappings = []syscall.SysProcIDMap{{ContainerID: 0, HostID: os.Getgid(), Size: 1}}
		}
		var o, e bytes.Buffer
		cmd.Stdout, cmd.Stderr = &o, &e
		err := cmd.Run()
		if errors.Is(err, syscall.EPERM) || strings.HasPrefix(e.String(), "mount: ") {
			why := fmt.Sprintf("a small disk cannot be mounted here: %v %s", err, e.String())
			if slices.Contains(strings.Split(os.Getenv("ONEBARRIER_REQUIRE"), ","), "disk") {
				t.Fatal(why)
			}
			t.Skip("NOT TESTED: " + why)
		}
		if err != nil {
			t.Fatalf("%s: %v\n%s%s", size, err, o.String(), e.String())
		}
		lines := strings.Split(o.String(), "\n")
		if !strings.HasPrefix(lines[0], "exit code 1, , ") || !strings.Contains(lines[0], "the store disk/s.sqlite: the disk is full; free space and give the same command again: what was finished is kept") {
			t.Errorf("%s, full: %s", size, lines[0])
		}
		if !strings.HasPrefix(lines[1], "exit code 4, ") {
			t.Errorf("%s, with room: %s", size, lines[1])
		}
		stored = stored || !strings.Contains(lines[1], "in the store before: 0|")
		if got := tables(t, "got.sqlite"); got != want {
			t.Errorf("%s: the tables differ:\n%.2000s\nwant\n%.2000s", size, got, want)
		}
	}
	if !stored {
		t.Error("in no case was anything stored before the disk was full: the test needs other sizes")
	}
}

// withSmallFiles runs a command in a process whose files may not grow beyond a size.
func withSmallFiles() int {
	var most uint64
	if _, err := fmt.Sscan(os.Args[1], &most); err != nil {
		return 99
	}
	signal.Ignore(syscall.SIGXFSZ) // writing then fails with an error
	if err := syscall.Setrlimit(syscall.RLIMIT_FSIZE, &syscall.Rlimit{Cur: most, Max: most}); err != nil {
		fmt.Fprintln(os.Stderr, err)
		return 99
	}
	return Main(context.Background(), os.Args[2:], os.Stdin, os.Stdout, os.Stderr)
}

// Writing that fails for another reason (SQLITE_IOERR) ends a run likewise.
func TestSurveyWriteFails(t *testing.T) {
	dir := t.TempDir()
	t.Chdir(dir)
	writeArchive(t, "data", 150)
	args := []string{"survey", "run", "data", "--resamples", "0", "--store"}
	if code, _, errOut := run(t, "", append(args, "whole.sqlite")...); code != exitPartial {
		t.Fatal(errOut)
	}
	want := tables(t, "whole.sqlite")
	code, out, errOut := finished(t, child(t, "small-files", dir, append([]string{"700000"}, append(args, "s.sqlite")...)...))
	if code != exitFailed || out != "" || !strings.Contains(errOut, "the store s.sqlite: reading or writing it failed; check the disk, and give the same command again: what was finished is kept (disk I/O error") {
		t.Errorf("exit code %d, %s%s", code, out, errOut)
	}
	code, out, errOut = run(t, "", append(args, "s.sqlite")...)
	if code != exitPartial || strings.Contains(out, "in the store before: 0\n") {
		t.Errorf("with room: exit code %d\n%s%s", code, out, errOut)
	}
	if tables(t, "s.sqlite") != want {
		t.Error("the tables differ")
	}
}

// A store cut short anywhere is refused and left as it is.
func TestSurveyCutStore(t *testing.T) {
	t.Chdir(t.TempDir())
	writeArchive(t, "data", 20)
	args := []string{"survey", "run", "data", "--resamples", "0", "--store"}
	if code, _, errOut := run(t, "", append(args, "whole.sqlite")...); code != exitPartial {
		t.Fatal(errOut)
	}
	whole := contents(t, "whole.sqlite")
	const page = 4096
	n := len(whole)
	cuts := []int{1, 50, 99, 100, 511, 512, page - 1, page, page + 1, n / 2, n - page, n - page/2, n - 100, n - 1}
	for c := page; c < n; c += n / 10 / page * page {
		cuts = append(cuts, c, c+1000)
	}
	for _, cut := range cuts {
		for _, command := range [][]string{append(args, "cut.sqlite"), {"survey", "table", "--store", "cut.sqlite"}, {"survey", "merge", "--store", "all.sqlite", "cut.sqlite"}} {
			if err := os.WriteFile("cut.sqlite", []byte(whole[:cut]), 0o644); err != nil {
				t.Fatal(err)
			}
			code, out, errOut := run(t, "", command...)
			if code != exitFailed || out != "" || !strings.Contains(errOut, "cut short") && !strings.Contains(errOut, "not a store of a survey; name a new file") {
				t.Errorf("%d of %d bytes, %v: exit code %d, %s%s", cut, n, command[1], code, out, errOut)
			}
			if contents(t, "cut.sqlite") != whole[:cut] {
				t.Errorf("%d of %d bytes, %v: the file was changed", cut, n, command[1])
			}
		}
	}
}

// Of the transactions that a killed run has left beside the store those before a cut are
// kept, and the run goes on.
func TestSurveyCutTransactions(t *testing.T) {
	t.Chdir(t.TempDir())
	writeArchive(t, "data", 80)
	args := []string{"survey", "run", "data", "--resamples", "0", "--store"}
	if code, _, errOut := run(t, "", append(args, "made.sqlite")...); code != exitPartial {
		t.Fatal(errOut)
	}
	want := tables(t, "made.sqlite")
	open, err := survey.Open("made.sqlite") // while it is open, transactions stay where they are
	if err != nil {
		t.Fatal(err)
	}
	defer open.Close()
	if code, _, errOut := run(t, "", append(args, "made.sqlite", "--again", "--tolerance", "1kJ/mol")...); code != exitPartial {
		t.Fatal(errOut)
	}
	file, left := contents(t, "made.sqlite"), contents(t, "made.sqlite-wal")
	wantAgain := tables(t, "made.sqlite")
	if len(left) < 20000 || wantAgain == want {
		t.Fatalf("%d bytes beside the store", len(left))
	}
	some := false
	for i := range 6 {
		cut := len(left) * (i + 1) / 7
		for name, data := range map[string]string{"cut.sqlite": file, "cut.sqlite-wal": left[:cut]} {
			if err := os.WriteFile(name, []byte(data), 0o644); err != nil {
				t.Fatal(err)
			}
		}
		code, out, errOut := run(t, "", append(args, "cut.sqlite", "--again", "--tolerance", "1kJ/mol")...)
		if code != exitPartial {
			t.Errorf("%d of %d bytes: exit code %d\n%s%s", cut, len(left), code, out, errOut)
		}
		some = some || !strings.Contains(out, "in the store before: 0\n")
		if tables(t, "cut.sqlite") != wantAgain {
			t.Errorf("%d of %d bytes: the tables differ", cut, len(left))
		}
		if code, _, errOut := run(t, "", append(args, "cut.sqlite")...); code != exitPartial {
			t.Errorf("%d of %d bytes: the first settings are lost: %s", cut, len(left), errOut)
		}
		if err := os.Remove("cut.sqlite"); err != nil {
			t.Fatal(err)
		}
	}
	if !some {
		t.Error("no cut left a transaction whole: the test needs more data sets")
	}
}

// Two runs on one store: the second is told of the first, both work, and the store is
// that of one. A run that was killed is not told of.
func TestSurveyTwoAtOnce(t *testing.T) {
	dir := t.TempDir()
	t.Chdir(dir)
	writeArchive(t, "data", 40)
	args := []string{"survey", "run", "data", "--resamples", "2000", "--store"}
	code, _, errOut := run(t, "", append(args, "whole.sqlite")...)
	if code != exitPartial || strings.Contains(errOut, "another survey run") {
		t.Fatal(errOut)
	}
	want := tables(t, "whole.sqlite")
	// The first run waits in its pipe until the second is done.
	if err := syscall.Mkfifo("data/wait.csv", 0o600); err != nil {
		t.Skip("NOT TESTED: ", err)
	}
	first := child(t, "run", dir, append(args[:3:3], "data/wait.csv", "--resamples", "2000", "--store", "s.sqlite")...)
	var firstErr bytes.Buffer
	first.Stderr = &firstErr
	if err := first.Start(); err != nil {
		t.Fatal(err)
	}
	defer func() { _ = first.Process.Kill(); _ = first.Wait() }()
	process := fmt.Sprintf("process %d on ", first.Process.Pid)
	told := func() string {
		_, out, _ := run(t, "", "survey", "status", "--store", "s.sqlite")
		return out
	}
	for deadline := time.Now().Add(60 * time.Second); !strings.Contains(told(), "survey run is at work on it: "+process); time.Sleep(20 * time.Millisecond) {
		if time.Now().After(deadline) {
			t.Fatalf("status does not tell of the first run:\n%s%s", told(), firstErr.String())
		}
	}
	code, out, errOut := run(t, "", append(args, "s.sqlite", "--json")...)
	if err := schematest.Validate("survey-run", []byte(out)); err != nil || code != exitPartial {
		t.Errorf("exit code %d, %v", code, err)
	}
	if joined := strings.Join(strings.Fields(errOut), " "); !strings.Contains(joined, "another survey run is at work on s.sqlite ("+process) || !strings.Contains(out, fmt.Sprintf(`"process": %d`, first.Process.Pid)) {
		t.Errorf("the second run is not told: %s\n%s", errOut, out)
	}
	_, status, _ := run(t, "", "survey", "status", "--store", "s.sqlite", "--json")
	if err := schematest.Validate("survey-status", []byte(status)); err != nil || !strings.Contains(status, fmt.Sprintf(`"process": %d`, first.Process.Pid)) {
		t.Errorf("status: %v\n%s", err, status)
	}
	if got := tables(t, "s.sqlite"); got != want {
		t.Error("the tables differ from those of one run")
	}
	if err := first.Process.Signal(syscall.SIGKILL); err != nil {
		t.Fatal(err)
	}
	_ = first.Wait()
	if out := told(); strings.Contains(out, "at work") {
		t.Errorf("told of a run that was killed:\n%s", out)
	}
	if _, _, errOut := run(t, "", append(args, "s.sqlite")...); strings.Contains(errOut, "another survey run") {
		t.Errorf("told of a run that was killed: %s", errOut)
	}

	// At full speed, in one new store.
	var both []*exec.Cmd
	var outs [2]bytes.Buffer
	for i := range outs {
		cmd := child(t, "run", dir, append(args, "t.sqlite")...)
		cmd.Stdout, cmd.Stderr = io.Discard, &outs[i]
		if err := cmd.Start(); err != nil {
			t.Fatal(err)
		}
		both = append(both, cmd)
	}
	for i, cmd := range both {
		if _ = cmd.Wait(); cmd.ProcessState.ExitCode() != exitPartial {
			t.Errorf("run %d of two: %s", i+1, outs[i].String())
		}
	}
	if got := tables(t, "t.sqlite"); got != want {
		t.Error("the tables of two runs at once differ from those of one")
	}
	if out := strings.TrimSpace(firstErr.String()); out != "" {
		t.Errorf("the first run was told: %s", out)
	}
}
