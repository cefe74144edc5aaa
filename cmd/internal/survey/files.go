package survey

import (
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"slices"
	"strings"

	"onebarrier/models/dataset"
)

// source is one file that may hold data sets.
type source struct {
	path string // as the user gave it, joined with what was found below
	size int64
	// settled are the headings that onebarrier-columns.csv settles.
	settled map[string]string
	problem *dataset.Problem // why there is nothing to read
}

// name of the source in the table: the same on every system.
func (s *source) name() string { return nameOf(s.path) }

func nameOf(path string) string { return filepath.ToSlash(filepath.Clean(path)) }

// tableKinds are the ends of names of files that may hold data sets.
var tableKinds = []string{".csv", ".tsv", ".tab", ".dat", ".txt", ".xlsx", ".xlsm"}

// Why files are passed over.
const (
	skippedHidden   = "hidden"
	skippedLock     = "lock files"
	skippedKind     = "of another kind"
	skippedExcluded = "excluded"
	skippedLink     = "links to folders"
	skippedTwice    = "named twice"
	skippedLacking  = "without what is asked for" // by --dataset or --sheet
)

// finder collects the files of a survey.
type finder struct {
	include, exclude []string
	found            []source
	seen             map[string]bool
	skipped          map[string]int
	// looked holds the names of folders that were read, and of their columns files:
	// earlier runs may have found them unreadable.
	looked map[string]bool
}

// find lists the files that paths name: files, folders with all that lies below them,
// patterns. The order is that of the paths, and of names below a folder. What cannot
// be looked into is a source with a problem.
func (f *finder) find(paths []string) error {
	f.seen, f.skipped, f.looked = map[string]bool{}, map[string]int{}, map[string]bool{}
	if err := checkPatterns(f.include, f.exclude); err != nil {
		return err
	}
	for _, p := range paths {
		all := []string{p}
		if _, err := os.Lstat(p); err != nil && strings.ContainsAny(p, "*?[") {
			matches, err := filepath.Glob(p)
			if err != nil {
				return &PatternError{p}
			}
			if len(matches) > 0 {
				all = matches
			}
		}
		for _, p := range all {
			info, err := os.Stat(p)
			switch {
			case err != nil:
				f.fail(p, err)
			case info.IsDir():
				f.folder(p, "", nil)
			default:
				settled := map[string]string{}
				f.settle(filepath.Dir(p), filepath.Base(p), settled)
				f.add(p, info, settled)
			}
		}
	}
	return nil
}

func checkPatterns(lists ...[]string) error {
	for _, pattern := range slices.Concat(lists...) {
		if _, err := path.Match(pattern, ""); err != nil {
			return &PatternError{pattern}
		}
	}
	return nil
}

// PatternError is a pattern that cannot be understood.
type PatternError struct{ Pattern string }

func (e *PatternError) Error() string {
	return "the pattern " + e.Pattern + " is not understood; * stands for any letters, ? for one, [a-z] for one of several"
}

func (f *finder) fail(p string, err error) {
	problem := dataset.Problem{Code: "read-failed", File: p, Message: reason(err).Error(), Cure: "check its name and your right to read it"}
	f.addSource(source{path: p, problem: &problem})
}

func (f *finder) add(p string, info fs.FileInfo, settled map[string]string) {
	f.addSource(source{path: p, size: info.Size(), settled: settled})
}

func (f *finder) addSource(s source) {
	if f.seen[s.name()] {
		f.skipped[skippedTwice]++
		return
	}
	f.seen[s.name()] = true
	f.found = append(f.found, s)
}

// folder adds what lies in a folder and below it. below is its path under the one that
// was named; rules are those of the columns files above.
func (f *finder) folder(dir, below string, rules []columnRule) {
	entries, err := os.ReadDir(dir) // in the order of names
	if err != nil {
		f.fail(dir, err)
		if len(entries) == 0 {
			return
		}
	}
	f.looked[nameOf(dir)], f.looked[nameOf(filepath.Join(dir, ColumnsFile))] = true, true
	own, problem := readColumnsFile(dir)
	if problem != nil {
		f.addSource(source{path: filepath.Join(dir, ColumnsFile), problem: problem})
	}
	rules = slices.Concat(own, rules) // the nearest counts first
	for _, e := range entries {
		name := e.Name()
		p, rel := filepath.Join(dir, name), path.Join(below, name)
		switch {
		case name == ColumnsFile:
			continue
		case strings.HasPrefix(name, "~$"), strings.HasPrefix(name, ".~lock."), strings.HasSuffix(name, ".lock"):
			f.skipped[skippedLock]++
			continue
		case strings.HasPrefix(name, "."):
			f.skipped[skippedHidden]++
			continue
		case matchesAny(f.exclude, name, rel):
			f.skipped[skippedExcluded]++
			continue
		case e.IsDir():
			f.folder(p, rel, rules)
			continue
		}
		info, err := os.Stat(p) // follows a link
		switch {
		case err != nil:
			f.fail(p, err)
		case info.IsDir():
			f.skipped[skippedLink]++ // may lead in a circle
		case !info.Mode().IsRegular(), !slices.Contains(tableKinds, strings.ToLower(filepath.Ext(name))) && !matchesAny(f.include, name, rel):
			f.skipped[skippedKind]++
		case len(f.include) > 0 && !matchesAny(f.include, name, rel):
			f.skipped[skippedExcluded]++
		default:
			settled := map[string]string{}
			settleBy(rules, rel, settled)
			f.add(p, info, settled)
		}
	}
}

// matchesAny reports whether a name, or the path below the folder where the pattern
// has a slash, matches a pattern.
func matchesAny(patterns []string, name, rel string) bool {
	return slices.ContainsFunc(patterns, func(pattern string) bool {
		of := name
		if strings.Contains(pattern, "/") {
			of = rel
		}
		ok, _ := path.Match(pattern, of)
		return ok
	})
}

// settle applies the columns file beside a file that was named by itself.
func (f *finder) settle(dir, name string, settled map[string]string) {
	rules, problem := readColumnsFile(dir)
	if problem != nil {
		f.addSource(source{path: filepath.Join(dir, ColumnsFile), problem: problem})
	}
	settleBy(rules, name, settled)
}
