package survey

import (
	"crypto/sha256"
	"errors"
	"fmt"
	"io"
	"path/filepath"
	"strconv"
	"strings"
	"text/template"

	"onebarrier/cmd/internal/report"
)

// MostShards bounds N of K/N, far above the arrays that a cluster takes.
const MostShards = 1_000_000

// ParseShard reads K/N: part K of N, from 1.
func ParseShard(text string) (k, n int, err error) {
	left, right, ok := strings.Cut(text, "/")
	k, errK := strconv.Atoi(left)
	n, errN := strconv.Atoi(right)
	switch {
	case !ok || errK != nil || errN != nil:
		return 0, 0, fmt.Errorf("%q is not a part K/N, such as 3/64", text)
	case n < 1 || n > MostShards:
		return 0, 0, fmt.Errorf("%q: a survey has 1 to %d parts", text, MostShards)
	case k < 1 || k > n:
		return 0, 0, fmt.Errorf("%q: parts count from 1 to %d", text, n)
	}
	return k, n, nil
}

// ShardOfTask takes the part from the environment of a task of a Slurm array
// (sbatch(1), OUTPUT ENVIRONMENT VARIABLES): ids may begin anywhere and go in steps.
// ok is false where there is no array. An array with gaps, as that of a task which is
// submitted again by itself, does not tell which part is meant and is refused.
func ShardOfTask(getenv func(string) string) (k, n int, ok bool, err error) {
	if getenv("SLURM_ARRAY_TASK_ID") == "" {
		return 0, 0, false, nil
	}
	const cure = "give --shard K/N, or --shard 1/1 for all"
	read := func(name, otherwise string) int {
		text := getenv(name)
		if text == "" {
			text = otherwise
		}
		v, e := strconv.Atoi(text)
		if e != nil && err == nil {
			err = fmt.Errorf("%s is %q, not a whole number; %s", name, text, cure)
		}
		return v
	}
	id := read("SLURM_ARRAY_TASK_ID", "")
	n = read("SLURM_ARRAY_TASK_COUNT", "")
	least := read("SLURM_ARRAY_TASK_MIN", "1")
	step := read("SLURM_ARRAY_TASK_STEP", "1")
	if err != nil {
		return 0, 0, true, err
	}
	most := read("SLURM_ARRAY_TASK_MAX", strconv.Itoa(least+(n-1)*step))
	switch {
	case err != nil:
		return 0, 0, true, err
	case step < 1 || n < 1 || n > MostShards || id < least || id > most || (id-least)%step != 0 || least+(n-1)*step != most:
		return 0, 0, true, fmt.Errorf("the Slurm array of %d tasks with ids from %d to %d has gaps, so that task %d is no certain part; %s",
			n, least, most, id, cure)
	case n == 1 && least > 1:
		return 0, 0, true, fmt.Errorf("task %d is the only one of its Slurm array, which does not tell how many parts there are; %s", id, cure)
	}
	return (id-least)/step + 1, n, true, nil
}

// Slurm is a survey as jobs of Slurm: an array with a task for each part, and a job
// that merges the parts.
type Slurm struct {
	Program string   // this program, an absolute path
	Folder  string   // where relative paths begin, an absolute path
	Store   string   // that of the merged survey
	Tasks   int      // parts, 1 or more
	CPUs    int      // processors of a task, 1 or more
	Flags   []string // of survey run, apart from --store, --shard and --workers
	Paths   []string // what is surveyed
}

// Parts is the folder that holds the stores and logs of the tasks.
func (s Slurm) Parts() string { return s.Store + ".parts" }

// job is the name of the jobs: the same for one store, and no other store's.
func (s Slurm) job() string {
	path := s.Parts()
	if !filepath.IsAbs(path) {
		path = filepath.Join(s.Folder, path)
	}
	return fmt.Sprintf("survey-%.4x", sha256.Sum256([]byte(path)))
}

// slurmScript is the script. Jobs are given to sbatch as they stand here, so that all
// that runs can be read in one place. A task is replaced by the program (exec), so that
// the program gets the signals of Slurm itself. The parts are named by number and
// count, so that a task that is submitted by itself is still the same part.
var slurmScript = template.Must(template.New("slurm").Funcs(template.FuncMap{"sh": shellWord, "words": shellWords, "pattern": logPattern}).Parse(
	`#!/bin/bash
# A survey in {{.Tasks}} parts on Slurm, as two jobs: an array with a task for each part,
# and a job that merges the parts as soon as all tasks have ended, however they
# ended. It names the parts that are missing.
#
#   bash THIS-FILE [options of sbatch, such as --partition=NAME --time=02:00:00]
#
# Give the same command again after a failure: what is finished is not done again.
# One task by itself: scontrol requeue ARRAY_TASK, then scontrol requeue MERGE.
# A task that reaches its time limit stores what it has finished and ends.
set -euo pipefail
cd -- {{sh .Folder}}
mkdir -p -- {{sh .Parts}}

# Two tasks of one part at once would do the same work twice.
if [ -n "$(squeue --noheader --me --name={{.Job}})" ]; then
	echo 'jobs of this survey wait or run already; to end them: scancel --name={{.Job}}' >&2
	exit 1
fi

array=$(sbatch --parsable --job-name={{.Job}} --array=1-{{.Tasks}} --cpus-per-task={{.CPUs}} \
	--requeue --open-mode=append --signal=B:TERM@60 \
	--output={{pattern .Parts "%a.log"}} "$@" <<'END'
#!/bin/bash
exec {{sh .Program}} survey run --store {{sh .Parts}}/"$SLURM_ARRAY_TASK_ID"-of-{{.Tasks}}.sqlite \
	--shard "$SLURM_ARRAY_TASK_ID"/{{.Tasks}} --workers "$SLURM_CPUS_PER_TASK" \
	{{words .Flags .Paths}}
END
)
array=${array%%;*} # a cluster's name may follow
echo "array $array: {{.Tasks}} tasks"

# afterany: a task that finds unusable data sets ends with exit code 4, which is a
# failure to Slurm, and afterok would then wait for ever.
merge=$(sbatch --parsable --job-name={{.Job}} --dependency=afterany:"$array" \
	--requeue --open-mode=append \
	--output={{pattern .Parts "merge.log"}} "$@" <<'END'
#!/bin/bash
exec {{sh .Program}} survey merge --store {{sh .Store}} -- \
	{{sh .Parts}}/*-of-{{.Tasks}}.sqlite
END
)
echo "merge ${merge%%;*}: into" {{sh .Store}}
`))

// Write writes the script.
func (s Slurm) Write(w io.Writer) error {
	if s.Tasks < 1 || s.Tasks > MostShards || s.CPUs < 1 {
		return errors.New("survey: a Slurm array needs one task and one processor or more")
	}
	if strings.HasPrefix(s.Store, "-") {
		s.Store = "./" + s.Store
	}
	return slurmScript.Execute(w, struct {
		Slurm
		Job string
	}{s, s.job()})
}

// shellWord quotes a word for bash, control characters included, so that a script
// stays in its lines.
func shellWord(s string) string {
	if strings.IndexFunc(s, isControl) < 0 {
		return report.ShellWord(s)
	}
	var b strings.Builder
	b.WriteString("$'")
	for _, c := range []byte(s) {
		switch {
		case isControl(rune(c)):
			fmt.Fprintf(&b, `\%03o`, c)
		case c == '\'' || c == '\\':
			b.WriteByte('\\')
			b.WriteByte(c)
		default:
			b.WriteByte(c)
		}
	}
	b.WriteString("'")
	return b.String()
}

func isControl(r rune) bool { return r < ' ' || r == 0x7f }

// shellWords quotes flags, and paths behind a -- that keeps them from being flags.
func shellWords(flags, paths []string) string {
	var b strings.Builder
	for _, f := range flags {
		b.WriteString(shellWord(f) + " ")
	}
	b.WriteString("--")
	for _, p := range paths {
		b.WriteString(" " + shellWord(p))
	}
	return b.String()
}

// logPattern names a file in a folder for --output of sbatch, where % begins a field,
// and a backslash anywhere turns fields off.
func logPattern(folder, file string) string {
	return shellWord(strings.ReplaceAll(folder, "%", "%%") + "/" + file)
}
