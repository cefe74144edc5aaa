package cli

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"onebarrier/cmd/internal/report"
	"onebarrier/cmd/internal/survey"
)

// writeArchive makes a folder of n data sets in a long table and two small files, with
// a file that is none, and names that a shell would take apart.
func writeArchive(t *testing.T, dir string, n int) {
	t.Helper()
	var b strings.Builder
	b.WriteString("dataset,T/K,k/s^-1\n")
	for i := range n {
		for j := range 8 {
			T := 280 + 10*j
			// Invented: k rises with T, and its digits scatter.
			fmt.Fprintf(&b, "set %d,%d,%.3ge%d\n", i, T, 1+float64((7*i+3*j)%10)/10+float64(j), j/2-5)
		}
	}
	for name, text := range map[string]string{
		"long.csv":          b.String(),
		"it's/a $HOME.csv":  "T/K,k/s^-1\n280,1e-5\n290,3e-5\n300,8e-5\n310,2e-4\n",
		"it's/broken.csv":   "T/K,k/s^-1\n280,one\n",
		"b/`id` \"x\";.csv": "t/°C,k/min^-1\n10,1e-3\n20,4e-3\n30,9e-3\n40,2e-2\n50,5e-2\n",
	} {
		name = filepath.Join(dir, name)
		if err := errors.Join(os.MkdirAll(filepath.Dir(name), 0o777), os.WriteFile(name, []byte(text), 0o666)); err != nil {
			t.Fatal(err)
		}
	}
}

// tables are all that can be seen of a store: its table in two forms, and every
// assessment.
func tables(t *testing.T, path string) string {
	t.Helper()
	s, err := survey.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	var b bytes.Buffer
	for _, format := range []string{"csv", "jsonl"} {
		if err := s.WriteTable(t.Context(), &b, format, survey.TableOptions{}, report.Text{}); err != nil {
			t.Fatal(err)
		}
	}
	err = s.Rows(t.Context(), func(r survey.Row) error {
		document, err := s.Assessment(r.SetID)
		fmt.Fprintf(&b, "%s %s\n", r.SetID, document)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// The parts of a survey, merged, are the survey, to the last byte, in tables and
// assessments.
func TestSurveyMerge(t *testing.T) {
	dir := t.TempDir()
	t.Chdir(dir)
	writeArchive(t, "data", 20)
	do := func(want int, args ...string) (out, errOut string) {
		t.Helper()
		code, out, errOut := run(t, "", append([]string{"survey"}, args...)...)
		if code != want {
			t.Fatalf("%q: exit code %d, want %d\n%s%s", args, code, want, out, errOut)
		}
		return out, errOut
	}
	do(exitPartial, "run", "data", "--store", "single.sqlite", "--resamples", "99")
	want := tables(t, "single.sqlite")
	part := func(k string, args ...string) {
		code, out, errOut := run(t, "", append([]string{"survey", "run", "data", "--store", "part" + k + ".sqlite", "--resamples", "99", "--shard", k + "/3"}, args...)...)
		if code != exitDone && code != exitPartial {
			t.Fatalf("part %s: exit code %d\n%s%s", k, code, out, errOut)
		}
	}
	part("1")
	part("3", "--workers", "1")
	out, errOut := do(exitPartial, "merge", "--store", "all.sqlite", "part1.sqlite", "part2.sqlite", "part3.sqlite")
	for _, w := range []string{"2 of 3 parts, missing: 2\n", "next: onebarrier survey table --store all.sqlite\n"} {
		if !strings.Contains(out, w) {
			t.Errorf("stdout lacks %q:\n%s", w, out)
		}
	}
	for _, w := range []string{"part2.sqlite: there is no such file", "part 2 of 3: not found; survey run again with --shard 2/3", "1 of 3 parts"} {
		if !strings.Contains(errOut, w) {
			t.Errorf("stderr lacks %q:\n%s", w, errOut)
		}
	}
	part("2")
	for range 2 { // again changes nothing
		out, errOut = do(exitDone, "merge", "--store", "all.sqlite", "part1.sqlite", "part2.sqlite", "part3.sqlite")
		if !strings.HasPrefix(out, "all.sqlite: 23 data sets, 1 of them could not be used\n3 of 3 parts, complete\n") || errOut != "" {
			t.Errorf("stdout:\n%s\nstderr:\n%s", out, errOut)
		}
		if got := tables(t, "all.sqlite"); got != want {
			t.Errorf("merged:\n%.2000s\nwant\n%.2000s", got, want)
		}
	}
	// The merged store goes on as any other.
	out, _ = do(exitPartial, "run", "data", "--store", "all.sqlite", "--resamples", "99")
	if !strings.Contains(out, "stored now: 0; in the store before: 23") {
		t.Errorf("survey run on the merged store:\n%s", out)
	}
	if out, errOut = do(exitDone, "merge", "--store", "all.sqlite", "part1.sqlite", "part2.sqlite", "part3.sqlite"); !strings.Contains(out, "complete") {
		t.Errorf("merged once more:\n%s%s", out, errOut)
	}

	code, _, errOut := run(t, "", "survey", "run", "data", "--store", "other.sqlite", "--resamples", "99", "--seed", "2", "--shard", "2/3")
	if code != exitDone && code != exitPartial {
		t.Fatal(errOut)
	}
	if _, errOut = do(exitFailed, "merge", "--store", "b.sqlite", "part1.sqlite", "other.sqlite"); !strings.Contains(errOut, "seed: 2 there, 1 here") {
		t.Errorf("other settings:\n%s", errOut)
	}
	do(exitUsage, "merge", "part1.sqlite")
	do(exitUsage, "merge", "--store", "b.sqlite")
}

func TestNumbersOfMissingParts(t *testing.T) {
	for want, k := range map[string][]int{"": nil, "7": {7}, "1-3": {1, 2, 3}, "1,3": {1, 3}, "1-2,4,6-9": {1, 2, 4, 6, 7, 8, 9}} {
		var missing []survey.Missing
		for _, k := range k {
			missing = append(missing, survey.Missing{K: k, N: 10})
		}
		if got := numbers(missing); got != want {
			t.Errorf("%v: %q, want %q", k, got, want)
		}
	}
}

// Parts are told one by one where they are few.
func TestPartLines(t *testing.T) {
	h := func(k, n int, done bool) survey.Shard { return survey.Shard{K: k, N: n, Sets: 10 * k, Done: done} }
	var many []survey.Shard
	for k := 2; k <= 9; k++ {
		many = append(many, h(k, 10, k != 5))
	}
	for _, c := range []struct {
		shards []survey.Shard
		want   string
	}{
		{nil, ""},
		{[]survey.Shard{h(1, 1, true)}, "all data sets: complete, 10 data sets"},
		{[]survey.Shard{h(2, 4, false), h(3, 4, true)}, "part 2 of 4: not complete; the same survey run goes on|part 3 of 4: complete, 30 data sets"},
		{append([]survey.Shard{h(1, 1, true)}, many...), "all data sets: complete, 10 data sets|7 of 10 parts: complete; not there, or not complete: 1,5,10"},
	} {
		if got := strings.Join(partLines(c.shards), "|"); got != c.want {
			t.Errorf("%v:\n%s\nwant\n%s", c.shards, got, c.want)
		}
	}
}

// A task of a Slurm array takes its part and says so; --shard wins.
func TestSurveyShardOfTask(t *testing.T) {
	t.Chdir(t.TempDir())
	writeArchive(t, "data", 3)
	t.Setenv("SLURM_ARRAY_TASK_ID", "1")
	t.Setenv("SLURM_ARRAY_TASK_MIN", "0")
	t.Setenv("SLURM_ARRAY_TASK_COUNT", "2")
	_, out, errOut := run(t, "", "survey", "run", "data", "--dry-run")
	if !strings.Contains(out, "part 2 of 2 (of 6)") || !strings.Contains(errOut, "--shard 1/1 takes") {
		t.Errorf("stdout:\n%s\nstderr:\n%s", out, errOut)
	}
	_, out, errOut = run(t, "", "survey", "run", "data", "--dry-run", "--shard", "1/1")
	if !strings.HasPrefix(out, "6 data sets in 4 files\n") || strings.Contains(errOut, "Slurm") {
		t.Errorf("--shard 1/1: stdout:\n%s\nstderr:\n%s", out, errOut)
	}
	t.Setenv("SLURM_ARRAY_TASK_COUNT", "two")
	if code, _, errOut := run(t, "", "survey", "run", "data", "--dry-run"); code != exitUsage || !strings.Contains(errOut, "SLURM_ARRAY_TASK_COUNT") {
		t.Errorf("exit code %d, stderr:\n%s", code, errOut)
	}
	if code, _, errOut := run(t, "", "survey", "run", "data", "--dry-run", "--shard", "3/2"); code != exitUsage || !strings.Contains(errOut, "such as 3/64") {
		t.Errorf("exit code %d, stderr:\n%s", code, errOut)
	}
}

// The flags that a task gets decide the same results as those that survey slurm got.
func TestSlurmFlags(t *testing.T) {
	args := []string{"data", "--store", "s.sqlite", "--where", "T>200", "--where", "source!=a, b", "--leave-out", "data/a,b.csv:3", "--leave-out", "c.csv:4",
		"--t-min", "-5degC", "--t-max", "90degC", "--tolerance", "3%", "--models", "+vogel", "--intervals", "percentile,bca", "--column", "k=k/s^-1", "--column", "u(k)=a, b",
		"--assume", "T=degC,error=2", "--error-model", "relative", "--prefactor-band", "-1..2", "--energy-unit", "kcal/mol", "--reference-temperature", "25degC", "--seed", "18446744073709551615",
		"--resamples", "500", "--confidence", "0.9", "--decimal", "comma", "--sheet", "2", "--dataset-by", "pH", "--scheme", "pairs", "--replicates", "independent", "--criterion", "bic",
		"--include", "*.csv", "--exclude", "old/*", "--again"}
	a := &app{out: io.Discard, err: io.Discard}
	direct, script := newSurveyRun(a), newSurveySlurm(a)
	if err := errors.Join(direct.ParseFlags(args), script.ParseFlags(append(args, "--tasks", "4"))); err != nil {
		t.Fatal(err)
	}
	given := taskFlags(script)
	again := newSurveyRun(a)
	if err := again.ParseFlags(append(given, "--store", "s.sqlite")); err != nil {
		t.Fatalf("%v: %q", err, given)
	}
	if d := surveySettings(again).Differences(surveySettings(direct)); len(d) > 0 {
		t.Errorf("%q: settings differ: %v", given, d)
	}
	for _, name := range []string{"include", "exclude", "again", "leave-out"} {
		if got, want := again.Flags().Lookup(name).Value.String(), direct.Flags().Lookup(name).Value.String(); got != want {
			t.Errorf("--%s is %s, want %s", name, got, want)
		}
	}
}

// requireSlurm skips a test where no Slurm answers, or fails it where one is wanted.
func requireSlurm(t *testing.T) {
	t.Helper()
	required := slices.Contains(strings.Split(os.Getenv("ONEBARRIER_REQUIRE"), ","), "slurm")
	patience := 3 * time.Second // scontrol waits for a minute where it is not configured
	if required {
		patience = 30 * time.Second
	}
	ctx, cancel := context.WithTimeout(t.Context(), patience)
	defer cancel()
	out, err := exec.CommandContext(ctx, "scontrol", "ping").CombinedOutput()
	if err == nil && strings.Contains(string(out), "is UP") {
		return
	}
	why := fmt.Sprintf("no Slurm answers (scontrol ping: %v %s); .ci/slurm start DIR starts one, then set SLURM_CONF", err, bytes.TrimSpace(out))
	if required {
		t.Fatal(why)
	}
	t.Skip("NOT TESTED: " + why)
}

// onSlurm is a survey on a Slurm that answers.
type onSlurm struct {
	*testing.T
	array, merge string // numbers of the jobs
}

// command runs a command and returns what it printed.
func (s *onSlurm) command(want int, name string, args ...string) string {
	s.Helper()
	var out bytes.Buffer
	cmd := exec.CommandContext(s.Context(), name, args...)
	cmd.Stdout, cmd.Stderr = &out, &out
	err := cmd.Run()
	var exit *exec.ExitError
	if err != nil && !errors.As(err, &exit) || cmd.ProcessState.ExitCode() != want {
		s.Fatalf("%s %q: %v, want exit code %d\n%s", name, args, err, want, out.String())
	}
	return out.String()
}

// submit runs the script and notes the numbers of its jobs.
func (s *onSlurm) submit(script string, options ...string) {
	s.Helper()
	out := s.command(0, "bash", append([]string{script}, options...)...)
	m := regexp.MustCompile(`^array (\d+): 4 tasks\nmerge (\d+): into `).FindStringSubmatch(out)
	if m == nil {
		s.Fatalf("the script printed\n%s", out)
	}
	s.array, s.merge = m[1], m[2]
	s.Cleanup(func() { exec.Command("scancel", m[1], m[2]).Run() }) // what is left after a failure
}

// fields of a job, or of one task of an array.
func (s *onSlurm) state(job string) (state, exit string) {
	s.Helper()
	// A job is listed by name=value; of a task that was requeued the last one counts.
	out := s.command(0, "scontrol", "--oneliner", "show", "job", job)
	for _, f := range strings.Fields(out) {
		switch name, value, _ := strings.Cut(f, "="); name {
		case "JobState":
			state = value
		case "ExitCode":
			exit = value
		}
	}
	return state, exit
}

// wait waits until something is so, and looks what has become of the jobs if it never is.
func (s *onSlurm) wait(what string, is func() bool) {
	s.Helper()
	const most = 5 * time.Minute // a requeued task may have to wait for two
	for end := time.Now().Add(most); !is(); time.Sleep(20 * time.Millisecond) {
		if time.Now().After(end) {
			jobs := s.command(0, "scontrol", "--oneliner", "show", "job", s.array) + s.command(0, "scontrol", "--oneliner", "show", "job", s.merge)
			s.Fatalf("%s: not within %v\n%s", what, most, jobs)
		}
	}
}

func (s *onSlurm) waitFor(job string, states ...string) {
	s.Helper()
	s.wait(fmt.Sprintf("job %s to be %v", job, states), func() bool {
		state, _ := s.state(job)
		return slices.Contains(states, state)
	})
}

// processOf is the process whose command line holds a word.
func processOf(t *testing.T, word string) int {
	t.Helper()
	all, err := filepath.Glob("/proc/[0-9]*/cmdline")
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range all {
		line, err := os.ReadFile(name)
		if err == nil && slices.Contains(strings.Split(string(line), "\x00"), word) {
			if id, err := strconv.Atoi(filepath.Base(filepath.Dir(name))); err == nil {
				return id
			}
		}
	}
	return 0
}

// TestSlurm runs a survey on a real Slurm, kills a task of it with kill -9, sees it
// named as missing, requeues it, and compares the merged store with that of a survey
// in one piece.
func TestSlurm(t *testing.T) {
	if testing.Short() {
		t.Skip("needs a Slurm and takes half a minute")
	}
	requireSlurm(t)
	dir := t.TempDir()
	program := filepath.Join(dir, "bin for it's", "onebarrier")
	if out, err := exec.Command("go", "build", "-o", program, "../../onebarrier").CombinedOutput(); err != nil {
		t.Fatalf("%v\n%s", err, out)
	}
	t.Chdir(dir)
	writeArchive(t, "the data", 240)
	s := &onSlurm{T: t}
	onebarrier := func(want int, args ...string) string {
		return s.command(want, program, append([]string{"survey"}, args...)...)
	}
	judging := []string{"the data", "--resamples", "19999", "--confidence", "0.9"}
	onebarrier(exitPartial, append([]string{"run", "--store", "single.sqlite"}, judging...)...)
	want := tables(t, "single.sqlite")

	script := onebarrier(exitDone, append([]string{"slurm", "--store", "a's.sqlite", "--tasks", "4"}, judging...)...)
	if err := os.WriteFile("survey.sh", []byte(script), 0o666); err != nil {
		t.Fatal(err)
	}
	s.submit("survey.sh")
	if out := s.command(1, "bash", "survey.sh"); !strings.Contains(out, "wait or run already") {
		t.Errorf("submitted twice:\n%s", out)
	}

	// kill -9 in the middle of the second task.
	second := "a's.sqlite.parts/2-of-4.sqlite"
	s.wait("rows of part 2", func() bool { return rowsIn(second) > 0 })
	process := processOf(t, second)
	if process == 0 {
		t.Fatal("task 2 ended before it could be killed: give it more to do")
	}
	p, err := os.FindProcess(process)
	if err == nil {
		err = p.Kill()
	}
	if err != nil {
		t.Fatal(err)
	}
	for _, job := range []string{s.array + "_1", s.array + "_2", s.array + "_3", s.array + "_4"} {
		s.waitFor(job, "COMPLETED", "FAILED")
	}
	if state, exit := s.state(s.array + "_2"); state != "FAILED" || exit != "0:9" {
		t.Errorf("the killed task is %s, exit code %s", state, exit)
	}
	kept := rowsIn(second)
	s.waitFor(s.merge, "FAILED")
	if _, exit := s.state(s.merge); exit != fmt.Sprintf("%d:0", exitPartial) {
		t.Errorf("merge without part 2: exit code %s", exit)
	}
	if log := contents(t, "a's.sqlite.parts/merge.log"); !strings.Contains(log, "3 of 4 parts, missing: 2\n") {
		t.Errorf("merge without part 2:\n%s", log)
	}

	s.command(0, "scontrol", "requeue", s.array+"_2")
	s.waitFor(s.array+"_2", "COMPLETED", "FAILED")
	if log := contents(t, "a's.sqlite.parts/2.log"); !strings.Contains(log, fmt.Sprintf("in the store before: %d\n", kept)) || kept == 0 {
		t.Errorf("the requeued task did not go on from %d rows:\n%s", kept, log)
	}
	s.command(0, "scontrol", "requeue", s.merge)
	s.waitFor(s.merge, "COMPLETED", "FAILED")
	if log := contents(t, "a's.sqlite.parts/merge.log"); !strings.Contains(log, "4 of 4 parts, complete\n") {
		t.Errorf("merge of all:\n%s", log)
	}
	if got := tables(t, "a's.sqlite"); got != want {
		t.Errorf("the merged survey differs from the one in one piece: %d bytes, want %d", len(got), len(want))
	}

	// The whole once more, as after a failure: quick, and nothing changes.
	s.submit("survey.sh", "--comment=again")
	s.waitFor(s.merge, "COMPLETED", "FAILED")
	if got := tables(t, "a's.sqlite"); got != want {
		t.Errorf("the survey done again differs: %d bytes, want %d", len(got), len(want))
	}
}

// rowsIn counts the rows of a store, 0 where there is none yet.
func rowsIn(path string) (n int) {
	s, err := survey.Open(path)
	if err != nil {
		return 0
	}
	defer s.Close()
	s.Rows(context.Background(), func(survey.Row) error { n++; return nil }) // an error: no rows yet
	return n
}
