package survey

import (
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

func TestParseShard(t *testing.T) {
	for text, want := range map[string][2]int{"1/1": {1, 1}, "3/64": {3, 64}, "64/64": {64, 64}} {
		if k, n, err := ParseShard(text); err != nil || k != want[0] || n != want[1] {
			t.Errorf("%s: %d of %d, %v", text, k, n, err)
		}
	}
	for _, text := range []string{"", "3", "/", "0/4", "5/4", "-1/4", "1/0", "a/4", "1/4/4", "1/ 4", "1/2000000", "99999999999999999999/4"} {
		if k, n, err := ParseShard(text); err == nil {
			t.Errorf("%q: %d of %d, want an error", text, k, n)
		}
	}
}

// The variables are those that Slurm 22.05 sets for sbatch --array=RANGE, read off a
// running one.
func TestShardOfTask(t *testing.T) {
	array := func(id, count, least, most, step string) map[string]string {
		return map[string]string{"SLURM_ARRAY_TASK_ID": id, "SLURM_ARRAY_TASK_COUNT": count, "SLURM_ARRAY_TASK_MIN": least,
			"SLURM_ARRAY_TASK_MAX": most, "SLURM_ARRAY_TASK_STEP": step}
	}
	for _, c := range []struct {
		name string
		env  map[string]string
		k, n int // 0 of 0 for an error
	}{
		{"1-4", array("3", "4", "1", "4", "1"), 3, 4},
		{"0-3", array("0", "4", "0", "3", "1"), 1, 4},
		{"0-3, last", array("3", "4", "0", "3", "1"), 4, 4},
		{"10-30:10", array("20", "3", "10", "30", "10"), 2, 3},
		{"0-7:3", array("6", "3", "0", "6", "3"), 3, 3},
		{"0", array("0", "1", "0", "0", "1"), 1, 1},
		{"1", array("1", "1", "1", "1", "1"), 1, 1},
		{"no least, most and step", map[string]string{"SLURM_ARRAY_TASK_ID": "2", "SLURM_ARRAY_TASK_COUNT": "4"}, 2, 4},
		{"1,3,7", array("3", "3", "1", "7", "1"), 0, 0},
		{"3 by itself", array("3", "1", "3", "3", "1"), 0, 0},
		{"no count", map[string]string{"SLURM_ARRAY_TASK_ID": "2"}, 0, 0},
		{"no number", array("x", "4", "1", "4", "1"), 0, 0},
		{"id too high", array("5", "4", "1", "4", "1"), 0, 0},
		{"id too low", array("0", "4", "1", "4", "1"), 0, 0},
		{"id between steps", array("15", "3", "10", "30", "10"), 0, 0},
		{"step 0", array("1", "4", "1", "4", "0"), 0, 0},
		{"count 0", array("1", "0", "1", "0", "1"), 0, 0},
	} {
		k, n, ok, err := ShardOfTask(func(name string) string { return c.env[name] })
		if !ok || (err != nil) != (c.n == 0) || err == nil && (k != c.k || n != c.n) {
			t.Errorf("%s: %d of %d, %v, %v, want %d of %d", c.name, k, n, ok, err, c.k, c.n)
		}
		if err != nil && !strings.Contains(err.Error(), "--shard K/N") {
			t.Errorf("%s: %v names no cure", c.name, err)
		}
	}
	if _, _, ok, err := ShardOfTask(func(string) string { return "" }); ok || err != nil {
		t.Errorf("a task where there is none: %v", err)
	}
}

// bash runs a script with stand-ins for Slurm: sbatch keeps its arguments, one a line,
// and its script, in numbered files and prints a job number; squeue prints $QUEUE.
func bash(t *testing.T, dir, script string, env ...string) (string, error) {
	t.Helper()
	bin := filepath.Join(dir, "bin")
	if err := os.MkdirAll(bin, 0o777); err != nil {
		t.Fatal(err)
	}
	write := func(name, text string) {
		if err := os.WriteFile(filepath.Join(bin, name), []byte("#!/bin/bash\n"+text), 0o777); err != nil {
			t.Fatal(err)
		}
	}
	write("sbatch", `n=$(ls "$KEEP" | grep -c arguments)
printf '%s\n' "$@" >"$KEEP/arguments$n"
cat >"$KEEP/script$n"
echo "$((n+41));cluster"
`)
	write("squeue", "echo -n \"$QUEUE\"\n")
	// Prints its arguments, one a line.
	write("one 'barrier'", "printf '<%s>\\n' \"$@\"\n")
	cmd := exec.Command("bash", "-s", "--", "--partition=a b")
	cmd.Stdin = strings.NewReader(script)
	cmd.Dir = "/"
	cmd.Env = append(os.Environ(), append(env, "PATH="+bin+":"+os.Getenv("PATH"), "KEEP="+dir)...)
	out, err := cmd.CombinedOutput()
	return string(out), err
}

// Every word reaches the program as it was given, whatever it holds, and the two jobs
// hang together.
func TestSlurmScript(t *testing.T) {
	if _, err := exec.LookPath("bash"); err != nil {
		t.Skip("bash is missing")
	}
	dir := t.TempDir()
	folder := filepath.Join(dir, "it's $HOME `a` \"b\" 100%")
	if err := os.Mkdir(folder, 0o777); err != nil {
		t.Fatal(err)
	}
	hard := []string{"it's", "a b", "$HOME", "`id`", "$(id)", "\\", "\"", "*.csv", "-x", "a\nEND\nb", "tab\t'\\", "~", "é", "{a,b}", "!", "#", ""}
	s := Slurm{
		Program: filepath.Join(dir, "bin", "one 'barrier'"), Folder: folder, Store: "re s'ults 5%.sqlite",
		Tasks: 3, CPUs: 2, Flags: append([]string{"--where"}, hard...), Paths: hard,
	}
	var b strings.Builder
	if err := s.Write(&b); err != nil {
		t.Fatal(err)
	}
	out, err := bash(t, dir, b.String())
	if err != nil {
		t.Fatalf("%v\n%s", err, out)
	}
	if want := "array 41: 3 tasks\nmerge 42: into re s'ults 5%.sqlite\n"; out != want {
		t.Errorf("printed %q, want %q", out, want)
	}
	parts := filepath.Join(folder, "re s'ults 5%.sqlite.parts")
	if _, err := os.Stat(parts); err != nil {
		t.Error(err)
	}
	read := func(name string) string {
		text, err := os.ReadFile(filepath.Join(dir, name))
		if err != nil {
			t.Fatal(err)
		}
		return string(text)
	}
	for name, want := range map[string][]string{
		// A field of --output begins with %, and %% is one.
		"arguments0": {"--array=1-3", "--cpus-per-task=2", "--partition=a b", "--requeue", "--output=re s'ults 5%%.sqlite.parts/%a.log"},
		"arguments1": {"--dependency=afterany:41", "--partition=a b", "--output=re s'ults 5%%.sqlite.parts/merge.log"},
	} {
		lines := strings.Split(read(name), "\n")
		for _, w := range want {
			if !slices.Contains(lines, w) {
				t.Errorf("%s lacks %q:\n%s", name, w, read(name))
			}
		}
	}
	// The tasks, as Slurm would run them: in the folder where they were submitted.
	task := func(script string, env ...string) string {
		cmd := exec.Command("bash", "-s")
		cmd.Stdin, cmd.Dir = strings.NewReader(read(script)), folder
		cmd.Env = append(os.Environ(), env...)
		out, err := cmd.CombinedOutput()
		if err != nil {
			t.Fatalf("%v\n%s", err, out)
		}
		return string(out)
	}
	words := func(all ...string) string { return "<" + strings.Join(all, ">\n<") + ">\n" }
	want := append([]string{"survey", "run", "--store", "re s'ults 5%.sqlite.parts/2-of-3.sqlite", "--shard", "2/3", "--workers", "2"}, s.Flags...)
	want = append(append(want, "--"), hard...)
	if got := task("script0", "SLURM_ARRAY_TASK_ID=2", "SLURM_CPUS_PER_TASK=2"); got != words(want...) {
		t.Errorf("task ran\n%s\nwant\n%s", got, words(want...))
	}
	for _, name := range []string{"1-of-3.sqlite", "3-of-3.sqlite", "3-of-4.sqlite", "2.log"} {
		if err := os.WriteFile(filepath.Join(parts, name), nil, 0o666); err != nil {
			t.Fatal(err)
		}
	}
	if got, want := task("script1"), words("survey", "merge", "--store", "re s'ults 5%.sqlite", "--",
		"re s'ults 5%.sqlite.parts/1-of-3.sqlite", "re s'ults 5%.sqlite.parts/3-of-3.sqlite"); got != want {
		t.Errorf("merge ran\n%s\nwant\n%s", got, want)
	}

	out, err = bash(t, dir, b.String(), "QUEUE=41 job of before")
	if err == nil || !strings.Contains(out, "scancel --name="+s.job()) {
		t.Errorf("submitted while jobs wait: %v\n%s", err, out)
	}
	if _, err := os.Stat(filepath.Join(dir, "arguments2")); err == nil {
		t.Error("a job was submitted while others wait")
	}
}

// Jobs of one store have one name, whatever its path is written like; others another.
func TestSlurmJobName(t *testing.T) {
	name := func(folder, store string) string { return Slurm{Folder: folder, Store: store}.job() }
	if a, b, c := name("/a", "b.sqlite"), name("/", "a/b.sqlite"), name("/x", "/a/b.sqlite"); a != b || b != c {
		t.Errorf("one store, names %s, %s, %s", a, b, c)
	}
	if a, b := name("/a", "b.sqlite"), name("/b", "b.sqlite"); a == b {
		t.Errorf("two stores, one name %s", a)
	}
}

func TestSlurmRefuses(t *testing.T) {
	for _, s := range []Slurm{{Tasks: 0, CPUs: 1}, {Tasks: 1, CPUs: 0}, {Tasks: MostShards + 1, CPUs: 1}} {
		if err := s.Write(&strings.Builder{}); err == nil {
			t.Errorf("%d tasks of %d processors: no error", s.Tasks, s.CPUs)
		}
	}
}
