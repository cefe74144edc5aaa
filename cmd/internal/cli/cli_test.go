package cli

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"onebarrier/cmd/internal/report/schematest"
	"onebarrier/diagnostics"
	"onebarrier/models/dataset"
)

func TestExitCode(t *testing.T) {
	data := dataset.Problems{{Code: "x", File: "f", Message: "m"}}
	for _, c := range []struct {
		err  error
		want int
	}{
		{nil, 0},
		{errors.New("disk full"), 1},
		{&panicError{"index out of range"}, 1},
		{&usageError{message: "no flag"}, 2},
		{data, 3},
		{&partialError{1, 2, "files"}, 4},
		{&expectError{diagnostics.Unresolved, []string{"straight-within"}}, 5},
		{&signalError{os.Interrupt}, 130},
		{&signalError{syscall.SIGTERM}, 143},
		{fmt.Errorf("reading: %w", data), 3},
		{fmt.Errorf("work: %w", &signalError{syscall.SIGTERM}), 143},
	} {
		if got := exitCode(c.err); got != c.want {
			t.Errorf("exitCode(%v) = %d, want %d", c.err, got, c.want)
		}
	}
}

func TestGuard(t *testing.T) {
	for _, debug := range []string{"", "1"} {
		t.Setenv("ONEBARRIER_DEBUG", debug)
		var b strings.Builder
		a := &app{out: io.Discard, err: &b}
		code := a.finish(guard(&b, func() error { panic("first\nsecond") }), false)
		if code != exitFailed {
			t.Errorf("exit code %d after a panic, want 1", code)
		}
		lines := strings.Count(b.String(), "\n")
		if !strings.Contains(b.String(), "internal error: first;") || strings.Contains(b.String(), "second") {
			t.Errorf("a panic prints %q", b.String())
		}
		if traced := lines > 1; traced != (debug != "") {
			t.Errorf("ONEBARRIER_DEBUG=%q: %d lines", debug, lines)
		}
	}
}

func TestParseTemperature(t *testing.T) {
	// Definitions of the Celsius and Fahrenheit scales: 0 °C = 273.15 K exactly,
	// T/K = (t/°F + 459.67)·5/9 (NIST SP 811, appendix B).
	for in, want := range map[string]float64{
		"195K": 195, "195 K": 195, "25degC": 298.15, "25C": 298.15, "77F": 298.15, "25°C": 298.15, " 25 °C": 298.15, "25℃": 298.15,
		"77degF": 298.15, "77°F": 298.15, "-10degC": 263.15, "−10°C": 263.15, "1e3K": 1000,
	} {
		got, err := parseTemperature(in)
		if err != nil || !(math.Abs(got-want) <= 1e-12*want) {
			t.Errorf("parseTemperature(%q) = %v, %v; want %v", in, got, err, want)
		}
	}
	for _, in := range []string{"", "25", "K", "-300degC", "0K", "NaNK", "InfK", "25 degR", "1,5K", "25k"} {
		if got, err := parseTemperature(in); err == nil {
			t.Errorf("parseTemperature(%q) = %v, want an error", in, got)
		}
	}
}

func TestClosest(t *testing.T) {
	words := []string{"assess", "inspect", "models", "parallel"}
	for typed, want := range map[string]string{
		"asess": "assess", "assses": "assess", "paralell": "parallel", "insp": "inspect", "modles": "models", "xyz": "", "": "",
	} {
		if got := closest(typed, words); got != want {
			t.Errorf("closest(%q) = %q, want %q", typed, got, want)
		}
	}
}

func TestEditDistance(t *testing.T) {
	// kitten → sitting is the textbook pair of distance 3; a swap counts once.
	for _, c := range []struct {
		a, b string
		want int
	}{{"kitten", "sitting", 3}, {"", "abc", 3}, {"ab", "ba", 1}, {"same", "same", 0}} {
		if got := editDistance(c.a, c.b); got != c.want {
			t.Errorf("editDistance(%q, %q) = %d, want %d", c.a, c.b, got, c.want)
		}
	}
}

// An interrupt ends even a command that waits for standard input.
func TestInterruptWhileReading(t *testing.T) {
	for _, c := range []struct {
		signal syscall.Signal
		want   int
	}{{syscall.SIGINT, exitInterrupted}, {syscall.SIGTERM, exitTerminated}} {
		r, w := io.Pipe()
		var out, errOut strings.Builder
		code := make(chan int, 1)
		go func() { code <- Main(context.Background(), []string{"inspect", "-", "--json"}, r, &out, &errOut) }()
		w.Write([]byte("T/K,k/s^-1\n")) // returns once Main reads, and so listens for signals
		if err := syscall.Kill(syscall.Getpid(), c.signal); err != nil {
			t.Fatal(err)
		}
		select {
		case got := <-code:
			if got != c.want || out.String() != "" {
				t.Errorf("%v: exit code %d, want %d; stdout %q", c.signal, got, c.want, out.String())
			}
		case <-time.After(10 * time.Second):
			t.Fatalf("%v: still running", c.signal)
		}
		w.Close()
	}
}

// fullDisk refuses every byte.
type fullDisk struct{}

func (fullDisk) Write([]byte) (int, error) { return 0, syscall.ENOSPC }

func TestFullDisk(t *testing.T) {
	file := filepath.Join(demo, "ester-few.csv")
	for _, args := range [][]string{
		{"assess", file}, {"assess", file, "--json"}, {"explain"}, {"models"}, {"models", "--json"}, {"inspect", file}, {"schema"}, {"schema", "models"}, {"version"}, {"completion", "bash"},
	} {
		var e strings.Builder
		if code := Main(t.Context(), args, strings.NewReader(""), fullDisk{}, &e); code != exitFailed || !strings.Contains(e.String(), "no space") {
			t.Errorf("%q on a full disk: exit code %d, stderr %q", args, code, e.String())
		}
	}
}

// With --json every failure of codes 1 to 3 leaves one valid document on stdout,
// without it stdout stays empty.
func TestProblemsDocument(t *testing.T) {
	for _, c := range []struct {
		args []string
		want int
	}{
		{[]string{"inspect", "no-such-file.csv"}, exitData},
		{[]string{"inspect"}, exitUsage},
		{[]string{"inspect", "--no-such-flag", "x"}, exitUsage},
		{[]string{"models", "no-such-curve"}, exitUsage},
		{[]string{"nothing"}, exitUsage},
	} {
		code, out, errOut := run(t, "", c.args...)
		if code != c.want || out != "" || errOut == "" {
			t.Errorf("%q: exit code %d, want %d; stdout %q, stderr %q", c.args, code, c.want, out, errOut)
		}
		code, out, _ = run(t, "", append(c.args, "--json")...)
		if code != c.want {
			t.Errorf("%q --json: exit code %d, want %d", c.args, code, c.want)
		}
		if err := schematest.Validate("problems", []byte(out)); err != nil {
			t.Errorf("%q --json: %v", c.args, err)
		}
	}
}

// What is written with --tidy is read back as the same rows.
func TestTidyReadsBack(t *testing.T) {
	dir := t.TempDir()
	file := filepath.Join(demo, "ester-two-paths.csv")
	tidy := filepath.Join(dir, "tidy.csv")
	code, first, errOut := run(t, "", "inspect", file, "--json", "--tidy", tidy)
	if code != exitDone {
		t.Fatalf("exit code %d: %s", code, errOut)
	}
	code, second, errOut := run(t, "", "inspect", tidy, "--json")
	if code != exitDone {
		t.Fatalf("exit code %d: %s", code, errOut)
	}
	type rows struct {
		Files []struct {
			Sets []struct {
				Data []struct {
					T float64 `json:"t_k"`
					K float64 `json:"k"`
				}
			}
		}
	}
	var x, y rows
	if err := errors.Join(json.Unmarshal([]byte(first), &x), json.Unmarshal([]byte(second), &y)); err != nil {
		t.Fatal(err)
	}
	a, b := x.Files[0].Sets[0].Data, y.Files[0].Sets[0].Data
	if len(a) != 14 || len(b) != len(a) {
		t.Fatalf("%d rows, then %d; want 14", len(a), len(b))
	}
	for i := range a {
		if a[i] != b[i] {
			t.Errorf("row %d: %v, then %v", i, a[i], b[i])
		}
	}
	if code, _, _ := run(t, "", "inspect", file, "--tidy", tidy); code != exitUsage {
		t.Errorf("an existing file is overwritten: exit code %d", code)
	}
}

// Work that does not look at its context is left behind when the context ends; its
// panic is the caller's.
func TestInterruptible(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	never := make(chan struct{})
	cancel()
	if _, err := interruptible(ctx, func() (int, error) { <-never; return 1, nil }); !errors.Is(err, context.Canceled) {
		t.Errorf("%v", err)
	}
	if v, err := interruptible(context.Background(), func() (int, error) { return 7, nil }); v != 7 || err != nil {
		t.Errorf("%d, %v", v, err)
	}
	defer func() {
		if recover() != "lost" {
			t.Error("the panic was swallowed")
		}
	}()
	interruptible(context.Background(), func() (int, error) { panic("lost") })
}
