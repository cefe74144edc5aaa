package cli

import (
	"bytes"
	"context"
	"errors"
	"flag"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"github.com/rogpeppe/go-internal/testscript"

	"onebarrier/cmd/internal/report/schematest"
)

var update = flag.Bool("update", false, "write the outputs that golden cases and the README show anew")

func TestMain(m *testing.M) {
	if work, ok := children[os.Getenv("ONEBARRIER_TEST_CHILD")]; ok {
		os.Exit(work())
	}
	testscript.Main(m, map[string]func(){
		"onebarrier": func() {
			os.Exit(Main(context.Background(), os.Args[1:], os.Stdin, os.Stdout, os.Stderr))
		},
	})
}

// children are what the test binary does in a process of its own, by the value of
// ONEBARRIER_TEST_CHILD.
var children = map[string]func() int{
	"run": func() int { return Main(context.Background(), os.Args[1:], os.Stdin, os.Stdout, os.Stderr) },
}

const demo = "../../../testdata/demo"

// TestScripts runs the golden cases. They check the layout of outputs, the stream
// they go to and the exit code; they prove no number.
//
//	exits CODE onebarrier ARGS   runs a command and wants that exit code
//	valid SCHEMA FILE            wants FILE to be a document of that schema
func TestScripts(t *testing.T) {
	if testing.Short() {
		t.Skip("starts many processes; TestHelpExamples and TestReadme run the same commands in this one")
	}
	testscript.Run(t, testscript.Params{
		Dir:                 "testdata/script",
		UpdateScripts:       *update,
		RequireExplicitExec: true,
		Setup: func(env *testscript.Env) error {
			// A terminal's wishes must not reach the golden cases.
			env.Setenv("NO_COLOR", "")
			return errors.Join(copyDemo(filepath.Join(env.WorkDir, "demo")), writeWorkbooks(env.WorkDir))
		},
		Cmds: map[string]func(*testscript.TestScript, bool, []string){
			"exits": func(ts *testscript.TestScript, neg bool, args []string) {
				if neg || len(args) < 2 {
					ts.Fatalf("usage: exits CODE command [args...]")
				}
				want, err := strconv.Atoi(args[0])
				ts.Check(err)
				got := 0
				if err := ts.Exec(args[1], args[2:]...); err != nil {
					var exit *exec.ExitError
					if !errors.As(err, &exit) {
						ts.Fatalf("%v", err)
					}
					got = exit.ExitCode()
				}
				if got != want {
					ts.Fatalf("exit code %d, want %d", got, want)
				}
			},
			"valid": func(ts *testscript.TestScript, neg bool, args []string) {
				if neg || len(args) != 2 {
					ts.Fatalf("usage: valid SCHEMA FILE")
				}
				ts.Check(schematest.Validate(args[0], []byte(ts.ReadFile(args[1]))))
			},
		},
	})
}

func copyDemo(dir string) error {
	return os.CopyFS(dir, os.DirFS(demo))
}

// run runs one command line in-process.
func run(t *testing.T, stdin string, args ...string) (code int, out, errOut string) {
	t.Helper()
	var o, e bytes.Buffer
	code = Main(t.Context(), args, strings.NewReader(stdin), &o, &e)
	return code, o.String(), e.String()
}

// contents is what a file holds; "" for no file.
func contents(t *testing.T, name string) string {
	t.Helper()
	if name == "" {
		return ""
	}
	b, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}

// splitCommand splits a command line as far as examples need it: words, single
// quotes, < FILE and > FILE.
func splitCommand(line string) (args []string, stdin, stdout string) {
	var words []string
	var word strings.Builder
	quoted, open := false, false
	for _, r := range line {
		switch {
		case r == '\'':
			quoted, open = !quoted, true
		case r == ' ' && !quoted:
			if open || word.Len() > 0 {
				words = append(words, word.String())
			}
			word.Reset()
			open = false
		default:
			word.WriteRune(r)
		}
	}
	if open || word.Len() > 0 {
		words = append(words, word.String())
	}
	for i := 0; i < len(words); i++ {
		switch {
		case words[i] == "<" && i+1 < len(words):
			i++
			stdin = words[i]
		case words[i] == ">" && i+1 < len(words):
			i++
			stdout = words[i]
		default:
			args = append(args, words[i])
		}
	}
	return args, stdin, stdout
}

// TestHelpExamples runs every example of every command's help.
func TestHelpExamples(t *testing.T) {
	rates, err := os.ReadFile(filepath.Join(demo, "ester-straight.csv"))
	if err != nil {
		t.Fatal(err)
	}
	second, err := os.ReadFile(filepath.Join(demo, "ester-few.csv"))
	if err != nil {
		t.Fatal(err)
	}
	root := newRoot(&app{colour: "auto"})
	commands := append(root.Commands(), root)
	for _, c := range commands {
		if c.Hidden {
			continue
		}
		if strings.TrimSpace(c.Example) == "" {
			t.Errorf("%s has no example in its help", c.CommandPath())
		}
		if c.Args == nil {
			t.Errorf("%s does not say how many arguments it takes", c.CommandPath())
		}
		for _, line := range strings.Split(c.Example, "\n") {
			line := strings.TrimSpace(line)
			t.Run(line, func(t *testing.T) {
				t.Chdir(t.TempDir())
				if err := errors.Join(os.WriteFile("rates.csv", rates, 0o666), os.WriteFile("second.csv", second, 0o666)); err != nil {
					t.Fatal(err)
				}
				args, stdin, _ := splitCommand(line)
				if len(args) == 0 || args[0] != "onebarrier" {
					t.Fatalf("%q is no command line of onebarrier", line)
				}
				in := contents(t, stdin)
				code, out, errOut := run(t, in, args[1:]...)
				if code != exitDone || (out == "" && !strings.Contains(line, "--quiet")) {
					t.Errorf("exit code %d, %d bytes on stdout, stderr:\n%s", code, len(out), errOut)
				}
			})
		}
	}
}

// TestReadme runs every command that the README shows and compares the output it
// shows with the real one. With -update it writes the real one.
func TestReadme(t *testing.T) {
	t.Chdir("../../..")
	b, err := os.ReadFile("README.md")
	if err != nil {
		t.Fatal(err)
	}
	lines := strings.Split(string(b), "\n")
	var out []string
	ran, stores := 0, t.TempDir()
	for i := 0; i < len(lines); i++ {
		out = append(out, lines[i])
		if lines[i] != "```console" {
			continue
		}
		for i++; i < len(lines) && lines[i] != "```"; {
			command, ok := strings.CutPrefix(lines[i], "$ ")
			if !ok {
				t.Fatalf("README.md:%d: a console block holds output before a command", i+1)
			}
			at := i + 1
			out = append(out, lines[i])
			var want []string
			for i++; i < len(lines) && lines[i] != "```" && !strings.HasPrefix(lines[i], "$ "); i++ {
				want = append(want, lines[i])
			}
			got, known := runReadme(t, command, stores)
			if !known {
				out = append(out, want...) // a command of another program
				continue
			}
			ran++
			out = append(out, got...)
			if g, w := strings.Join(got, "\n"), strings.Join(want, "\n"); g != w && !*update {
				t.Errorf("README.md:%d: %s\ngot:\n%s\nshown:\n%s", at, command, g, w)
			}
		}
		out = append(out, "```")
	}
	if ran < 2 {
		t.Errorf("README.md shows %d commands, want 2 or more", ran)
	}
	if *update {
		if err := os.WriteFile("README.md", []byte(strings.Join(out, "\n")), 0o666); err != nil {
			t.Fatal(err)
		}
	}
}

// runReadme runs a command of onebarrier and returns what a reader sees of it. Stores
// of surveys are kept in a folder from one command to the next.
func runReadme(t *testing.T, command, stores string) (lines []string, known bool) {
	rest, ok := strings.CutPrefix(command, "go run ./cmd/")
	if !ok {
		rest = command
	}
	args, stdin, stdout := splitCommand(rest)
	if len(args) == 0 || args[0] != "onebarrier" {
		return nil, false
	}
	in := contents(t, stdin)
	for i, a := range args { // pictures are not left in the repository
		if i > 0 && args[i-1] == "--figures" {
			dir := t.TempDir()
			args[i] = dir
			defer func() {
				for j := range lines {
					lines[j] = strings.ReplaceAll(lines[j], dir, a)
				}
			}()
		}
		if i > 0 && args[i-1] == "--store" {
			path := filepath.Join(stores, a)
			args[i] = path
			defer func() {
				for j := range lines {
					lines[j] = strings.ReplaceAll(lines[j], path, a)
				}
			}()
		}
	}
	_, o, e := run(t, in, args[1:]...)
	if stdout != "" {
		o = ""
	}
	text := strings.TrimSuffix(o+e, "\n")
	if text == "" {
		return nil, true
	}
	return strings.Split(text, "\n"), true
}
